//! Assignment targets, compound assignment and increments. A target is an ordinary expression: a name with selects, or a
//! concatenation or an assignment pattern of targets.

use sv_parser as sv;

use super::Converter;
use super::ast::{Assignment, BinaryOp, Expr, ExprKind, Literal, PatternItem, PatternKey};
use super::operators::binary_op;
use crate::source::Span;

impl Converter<'_> {
    pub(super) fn net_lvalue(&self, lvalue: &sv::NetLvalue) -> Expr {
        match lvalue {
            sv::NetLvalue::Identifier(x) => {
                let (name, select) = &x.nodes;
                let base = match name {
                    sv::PsOrHierarchicalNetIdentifier::PackageScope(x) => {
                        let (scope, name) = &x.nodes;
                        self.scoped_expr(self.optional_package(scope), &name.nodes.0)
                    }
                    sv::PsOrHierarchicalNetIdentifier::HierarchicalNetIdentifier(x) => {
                        self.hierarchical(super::names::Scope::None, &x.nodes.0)
                    }
                };
                self.constant_select(base, select)
            }
            sv::NetLvalue::Lvalue(x) => {
                let parts = x.nodes.0.nodes.1.contents().into_iter().map(|part| self.net_lvalue(part)).collect();
                Expr { kind: ExprKind::Concat(parts), span: self.span(&**x) }
            }
            sv::NetLvalue::Pattern(x) => {
                let (ty, pattern) = &x.nodes;
                let parts = pattern.nodes.0.nodes.1.contents().into_iter().map(|part| self.net_lvalue(part));
                self.target_pattern(ty, parts.collect(), self.span(&**x))
            }
        }
    }

    pub(super) fn variable_lvalue(&self, lvalue: &sv::VariableLvalue) -> Expr {
        match lvalue {
            sv::VariableLvalue::Identifier(x) => {
                let (scope, name, select) = &x.nodes;
                self.select(self.hierarchical(self.handle_or_package(scope), &name.nodes.0), select)
            }
            sv::VariableLvalue::Lvalue(x) => {
                let parts = x.nodes.0.nodes.1.contents().into_iter().map(|part| self.variable_lvalue(part)).collect();
                Expr { kind: ExprKind::Concat(parts), span: self.span(&**x) }
            }
            sv::VariableLvalue::Pattern(x) => {
                let (ty, pattern) = &x.nodes;
                let parts = pattern.nodes.0.nodes.1.contents().into_iter().map(|part| self.variable_lvalue(part));
                self.target_pattern(ty, parts.collect(), self.span(&**x))
            }
            sv::VariableLvalue::StreamingConcatenation(x) => self.streaming(x),
        }
    }

    fn target_pattern(&self, ty: &Option<sv::AssignmentPatternExpressionType>, parts: Vec<Expr>, span: Span) -> Expr {
        let ty = ty.as_ref().map(|ty| Box::new(self.pattern_type(ty)));
        let items = parts.into_iter().map(|value| PatternItem { key: PatternKey::None, value }).collect();
        Expr { kind: ExprKind::Pattern { ty, items }, span }
    }

    pub(super) fn net_assignment(&self, assignment: &sv::NetAssignment) -> (Expr, Expr) {
        let (target, _, value) = &assignment.nodes;
        (self.net_lvalue(target), self.expression(value))
    }

    pub(super) fn variable_assignment(&self, assignment: &sv::VariableAssignment) -> Assignment {
        let (target, _, value) = &assignment.nodes;
        let (target, value) = (self.variable_lvalue(target), self.expression(value));
        blocking(target, None, value)
    }

    pub(super) fn operator_assignment(&self, assignment: &sv::OperatorAssignment) -> Assignment {
        let (target, operator, value) = &assignment.nodes;
        let op = self.assignment_operator(operator);
        blocking(self.variable_lvalue(target), op, self.expression(value))
    }

    /// The operator of `+=` and its like; nothing for `=`.
    pub(super) fn assignment_operator(&self, operator: &sv::AssignmentOperator) -> Option<BinaryOp> {
        self.symbol(&operator.nodes.0).strip_suffix('=').and_then(binary_op)
    }

    pub(super) fn increment(&self, expression: &sv::IncOrDecExpression) -> Assignment {
        let (operator, target) = match expression {
            sv::IncOrDecExpression::Prefix(x) => (&x.nodes.0, &x.nodes.2),
            sv::IncOrDecExpression::Suffix(x) => (&x.nodes.2, &x.nodes.0),
        };
        let target = self.variable_lvalue(target);
        Assignment { span: self.span(expression), ..self.step_by_one(operator, target) }
    }

    /// `++` or `--` on a target; the literal one stands at the operator.
    pub(super) fn step_by_one(&self, operator: &sv::IncOrDecOperator, target: Expr) -> Assignment {
        let place = self.span(operator);
        let op = if self.symbol(&operator.nodes.0) == "--" { BinaryOp::Sub } else { BinaryOp::Add };
        let one = Literal { width: None, signed: true, based: false, bits: "1".to_string() };
        let mut assignment = blocking(target, Some(op), Expr { kind: ExprKind::Number(one), span: place });
        assignment.span = assignment.target.span.to(place);
        assignment
    }

    /// `i++` inside an expression.
    pub(super) fn step_expression(&self, expression: &sv::IncOrDecExpression) -> Expr {
        let span = self.span(expression);
        let step = Box::new(self.increment(expression));
        let kind = match expression {
            sv::IncOrDecExpression::Prefix(_) => ExprKind::Assign(step),
            sv::IncOrDecExpression::Suffix(_) => ExprKind::Postfix(step),
        };
        Expr { kind, span }
    }
}

pub(super) fn blocking(target: Expr, op: Option<BinaryOp>, value: Expr) -> Assignment {
    let span = target.span.to(value.span);
    Assignment { target, op, value, nonblocking: false, span }
}
