//! Expressions and primaries. The parser has two grammars, one for constant expressions and one for all; both become the
//! same nodes. Chains of binary operators, `?:` and `inside` are laid out flat in a loop and grouped by
//! [`super::operators`]. Parentheses survive as the grouping, and their place belongs to the expression inside.

use sv_parser as sv;

use super::ast::{BinaryOp, DataType, DataTypeKind, Expr, ExprKind};
use super::operators::{Piece, binary_op, group, unary_op};
use super::{Converter, names::member};

/// What is still to be laid out, the next piece of the text last.
enum Pending<'n> {
    Any(&'n sv::Expression),
    Constant(&'n sv::ConstantExpression),
    Piece(Piece),
}

impl Converter<'_> {
    pub(super) fn expression(&self, expression: &sv::Expression) -> Expr {
        match expression {
            sv::Expression::Primary(x) => self.primary(x),
            _ => self.flat(Pending::Any(expression)),
        }
    }

    pub(super) fn constant_expression(&self, expression: &sv::ConstantExpression) -> Expr {
        match expression {
            sv::ConstantExpression::ConstantPrimary(x) => self.constant_primary(x),
            _ => self.flat(Pending::Constant(expression)),
        }
    }

    pub(super) fn genvar_expression(&self, expression: &sv::GenvarExpression) -> Expr {
        self.constant_expression(&expression.nodes.0)
    }

    fn flat(&self, start: Pending<'_>) -> Expr {
        let span_of_all = match &start {
            Pending::Any(x) => self.span(*x),
            Pending::Constant(x) => self.span(*x),
            Pending::Piece(_) => self.nowhere(),
        };
        let mut pieces = Vec::new();
        let mut pending = vec![start];
        while let Some(next) = pending.pop() {
            match next {
                Pending::Piece(piece) => pieces.push(piece),
                Pending::Any(x) => self.lay_out(x, &mut pieces, &mut pending),
                Pending::Constant(x) => self.lay_out_constant(x, &mut pieces, &mut pending),
            }
        }
        group(pieces).unwrap_or_else(|| self.unsupported_expr("operator outside table 11-2", span_of_all))
    }

    fn lay_out<'n>(&self, expression: &'n sv::Expression, pieces: &mut Vec<Piece>, pending: &mut Vec<Pending<'n>>) {
        match expression {
            sv::Expression::Primary(x) => pieces.push(Piece::Operand(self.primary(x))),
            sv::Expression::Unary(x) => {
                let (operator, _, operand) = &x.nodes;
                let operand = self.primary(operand);
                let joined = self.joins_conditions(&operator.nodes.0);
                pieces.push(Piece::Operand(if joined { operand } else { self.unary(operator, operand) }));
            }
            sv::Expression::IncOrDecExpression(x) => pieces.push(Piece::Operand(self.step_expression(x))),
            sv::Expression::OperatorAssignment(x) => {
                let assignment = self.operator_assignment(&x.nodes.0.nodes.1);
                let kind = ExprKind::Assign(Box::new(assignment));
                pieces.push(Piece::Operand(Expr { kind, span: self.span(&**x) }));
            }
            sv::Expression::Binary(x) => {
                let (left, operator, _, right) = &x.nodes;
                pending.push(Pending::Any(right));
                pending.push(Pending::Piece(self.binary(operator, self.offset(right))));
                pending.push(Pending::Any(left));
            }
            sv::Expression::ConditionalExpression(x) => {
                let (predicate, _, _, middle, _, last) = &x.nodes;
                pending.push(Pending::Any(last));
                pending.push(Pending::Piece(Piece::Cond(self.expression(middle))));
                match single_condition(predicate) {
                    Some(condition) => pending.push(Pending::Any(condition)),
                    None => pieces.push(Piece::Operand(self.condition(predicate))),
                }
            }
            sv::Expression::InsideExpression(x) => {
                let (subject, _, ranges) = &x.nodes;
                let end = self.span(&ranges.nodes.2);
                pending.push(Pending::Piece(Piece::Inside(self.open_ranges(&ranges.nodes.1), end)));
                pending.push(Pending::Any(subject));
            }
            sv::Expression::TaggedUnionExpression(x) => {
                pieces.push(Piece::Operand(self.unsupported_expr("tagged union expression", self.span(&**x))));
            }
        }
    }

    fn lay_out_constant<'n>(
        &self,
        expression: &'n sv::ConstantExpression,
        pieces: &mut Vec<Piece>,
        pending: &mut Vec<Pending<'n>>,
    ) {
        match expression {
            sv::ConstantExpression::ConstantPrimary(x) => pieces.push(Piece::Operand(self.constant_primary(x))),
            sv::ConstantExpression::Unary(x) => {
                let (operator, _, operand) = &x.nodes;
                pieces.push(Piece::Operand(self.unary(operator, self.constant_primary(operand))));
            }
            sv::ConstantExpression::Binary(x) => {
                let (left, operator, _, right) = &x.nodes;
                pending.push(Pending::Constant(right));
                pending.push(Pending::Piece(self.binary(operator, self.offset(right))));
                pending.push(Pending::Constant(left));
            }
            sv::ConstantExpression::Ternary(x) => {
                let (condition, _, _, middle, _, last) = &x.nodes;
                pending.push(Pending::Constant(last));
                pending.push(Pending::Piece(Piece::Cond(self.constant_expression(middle))));
                pending.push(Pending::Constant(condition));
            }
            sv::ConstantExpression::Inside(x) => {
                let (subject, _, ranges) = &x.nodes;
                let end = self.span(&ranges.nodes.2);
                pending.push(Pending::Piece(Piece::Inside(self.open_ranges(&ranges.nodes.1), end)));
                pending.push(Pending::Constant(subject));
            }
        }
    }

    fn unary(&self, operator: &sv::UnaryOperator, operand: Expr) -> Expr {
        let place = self.span(operator);
        let span = place.to(operand.span);
        match unary_op(self.symbol(&operator.nodes.0)) {
            Some(op) => Expr { kind: ExprKind::Unary(op, Box::new(operand)), span },
            None => self.unsupported_expr("unary operator", span),
        }
    }

    /// Whether the operator in front of an operand is the end of `&&&`, which the parser splits into `&&` and a reduction.
    fn joins_conditions(&self, symbol: &sv::Symbol) -> bool {
        let token = &symbol.nodes.0;
        token.len == 1
            && token.offset >= 2
            && self.token(&sv::Locate { offset: token.offset - 2, len: 3, ..*token }) == "&&&"
    }

    /// A binary operator whose right operand starts at offset `right`. One that table 11-2 does not know becomes an operand,
    /// which makes the grouping fail, so that the whole expression is reported.
    fn binary(&self, operator: &sv::BinaryOperator, right: usize) -> Piece {
        let symbol = &operator.nodes.0;
        let token = &symbol.nodes.0;
        let text = self.symbol(symbol);
        let joined = sv::Locate { len: 3, ..*token };
        let triple = text == "&&" && right == token.offset + 2 && self.token(&joined) == "&&&";
        match binary_op(text) {
            Some(_) if triple => Piece::Joined,
            Some(op) => Piece::Binary(op),
            _ => Piece::Operand(self.unsupported_expr("operator", self.span(operator))),
        }
    }

    /// The condition of `if` and `?:`: one expression, or several joined by `&&&`.
    pub(super) fn condition(&self, predicate: &sv::CondPredicate) -> Expr {
        let mut all = None;
        for part in predicate.nodes.0.contents() {
            let part = match part {
                sv::ExpressionOrCondPattern::Expression(x) => self.expression(x),
                sv::ExpressionOrCondPattern::CondPattern(x) => {
                    self.unsupported_expr("pattern matching", self.span(&**x))
                }
            };
            all = Some(match all {
                None => part,
                Some(left) => logical_and(left, part),
            });
        }
        all.unwrap_or_else(|| self.unsupported_expr("condition", self.span(predicate)))
    }

    pub(super) fn open_ranges(&self, list: &sv::OpenRangeList) -> Vec<Expr> {
        list.nodes.0.contents().into_iter().map(|range| self.value_range(&range.nodes.0)).collect()
    }

    fn value_range(&self, range: &sv::ValueRange) -> Expr {
        match range {
            sv::ValueRange::Expression(x) => self.expression(x),
            sv::ValueRange::Binary(x) => {
                let (low, _, high) = &x.nodes.0.nodes.1;
                let bound = |bound: &sv::Expression| (!is_dollar(bound)).then(|| Box::new(self.expression(bound)));
                Expr { kind: ExprKind::Range(bound(low), bound(high)), span: self.span(&**x) }
            }
        }
    }

    pub(super) fn mintypmax(&self, expression: &sv::MintypmaxExpression) -> Expr {
        match expression {
            sv::MintypmaxExpression::Expression(x) => self.expression(x),
            sv::MintypmaxExpression::Ternary(x) => {
                let (min, _, typ, _, max) = &x.nodes;
                let [min, typ, max] = [min, typ, max].map(|e| Box::new(self.expression(e)));
                Expr { span: min.span.to(max.span), kind: ExprKind::MinTypMax(min, typ, max) }
            }
        }
    }

    pub(super) fn constant_mintypmax(&self, expression: &sv::ConstantMintypmaxExpression) -> Expr {
        match expression {
            sv::ConstantMintypmaxExpression::Unary(x) => self.constant_expression(x),
            sv::ConstantMintypmaxExpression::Ternary(x) => {
                let (min, _, typ, _, max) = &x.nodes;
                let [min, typ, max] = [min, typ, max].map(|e| Box::new(self.constant_expression(e)));
                Expr { span: min.span.to(max.span), kind: ExprKind::MinTypMax(min, typ, max) }
            }
        }
    }

    pub(super) fn type_expr(&self, ty: DataType) -> Expr {
        Expr { span: ty.span, kind: ExprKind::Type(Box::new(ty)) }
    }

    pub(super) fn constant_param_expression(&self, expression: &sv::ConstantParamExpression) -> Expr {
        match expression {
            sv::ConstantParamExpression::ConstantMintypmaxExpression(x) => self.constant_mintypmax(x),
            sv::ConstantParamExpression::DataType(x) => self.type_expr(self.data_type(x)),
            sv::ConstantParamExpression::Dollar(x) => self.unsupported_expr("unbounded parameter", self.span(&**x)),
        }
    }

    pub(super) fn param_expression(&self, expression: &sv::ParamExpression) -> Expr {
        match expression {
            sv::ParamExpression::MintypmaxExpression(x) => self.mintypmax(x),
            sv::ParamExpression::DataType(x) => self.type_expr(self.data_type(x)),
            sv::ParamExpression::Dollar(x) => self.unsupported_expr("unbounded parameter", self.span(&**x)),
        }
    }

    pub(super) fn primary(&self, primary: &sv::Primary) -> Expr {
        match primary {
            sv::Primary::PrimaryLiteral(x) => self.primary_literal(x),
            sv::Primary::Hierarchical(x) => {
                let (scope, name, select) = &x.nodes;
                self.select(self.hierarchical(self.qualifier(scope), name), select)
            }
            sv::Primary::EmptyUnpackedArrayConcatenation(x) => {
                Expr { kind: ExprKind::Concat(Vec::new()), span: self.span(&**x) }
            }
            sv::Primary::Concatenation(x) => {
                let (concatenation, range) = &x.nodes;
                self.range_select(self.concatenation(concatenation), range)
            }
            sv::Primary::MultipleConcatenation(x) => {
                let (concatenation, range) = &x.nodes;
                self.range_select(self.multiple_concatenation(concatenation), range)
            }
            sv::Primary::FunctionSubroutineCall(x) => self.function_call(x),
            sv::Primary::LetExpression(x) => self.let_expression(x),
            sv::Primary::MintypmaxExpression(x) => Expr { span: self.span(&**x), ..self.mintypmax(&x.nodes.0.nodes.1) },
            sv::Primary::Cast(x) => self.cast(x),
            sv::Primary::AssignmentPatternExpression(x) => self.assignment_pattern(x),
            sv::Primary::StreamingConcatenation(x) => self.streaming(x),
            sv::Primary::SequenceMethodCall(x) => self.unsupported_expr("method of a sequence", self.span(&**x)),
            sv::Primary::This(x) => self.unsupported_expr("class handle", self.span(&**x)),
            sv::Primary::Dollar(x) => self.unsupported_expr("$ as a value", self.span(&**x)),
            sv::Primary::Null(x) => self.unsupported_expr("null", self.span(&**x)),
        }
    }

    pub(super) fn constant_primary(&self, primary: &sv::ConstantPrimary) -> Expr {
        match primary {
            sv::ConstantPrimary::PrimaryLiteral(x) => self.primary_literal(x),
            sv::ConstantPrimary::PsParameter(x) => {
                let (name, select) = &x.nodes;
                self.constant_select(self.parameter_name(name), select)
            }
            sv::ConstantPrimary::Specparam(x) => {
                let (name, range) = &x.nodes;
                self.constant_range_select(self.name_expr(&name.nodes.0), range)
            }
            sv::ConstantPrimary::GenvarIdentifier(x) => self.name_expr(&x.nodes.0),
            sv::ConstantPrimary::FormalPort(x) => {
                let (name, select) = &x.nodes;
                self.constant_select(self.name_expr(&name.nodes.0), select)
            }
            sv::ConstantPrimary::Enum(x) => {
                let (scope, name) = &x.nodes;
                let scope = match scope {
                    sv::PackageScopeOrClassScope::PackageScope(x) => self.package_scope(x),
                    sv::PackageScopeOrClassScope::ClassScope(x) => self.class_scope(x),
                };
                self.scoped_expr(scope, &name.nodes.0)
            }
            sv::ConstantPrimary::Concatenation(x) => {
                let (concatenation, range) = &x.nodes;
                self.constant_range_select(self.constant_concatenation(concatenation), range)
            }
            sv::ConstantPrimary::MultipleConcatenation(x) => {
                let (concatenation, range) = &x.nodes;
                self.constant_range_select(self.constant_multiple_concatenation(concatenation), range)
            }
            sv::ConstantPrimary::ConstantFunctionCall(x) => self.function_call(&x.nodes.0),
            sv::ConstantPrimary::ConstantLetExpression(x) => self.let_expression(&x.nodes.0),
            sv::ConstantPrimary::MintypmaxExpression(x) => {
                Expr { span: self.span(&**x), ..self.constant_mintypmax(&x.nodes.0.nodes.1) }
            }
            sv::ConstantPrimary::ConstantCast(x) => self.constant_cast(x),
            sv::ConstantPrimary::ConstantAssignmentPatternExpression(x) => self.assignment_pattern(&x.nodes.0),
            sv::ConstantPrimary::TypeReference(x) => self.type_expr(self.type_reference(x)),
            sv::ConstantPrimary::Null(x) => self.unsupported_expr("null", self.span(&**x)),
            sv::ConstantPrimary::Dollar(x) => self.unsupported_expr("$ as a value", self.span(&**x)),
        }
    }

    pub(super) fn parameter_name(&self, name: &sv::PsParameterIdentifier) -> Expr {
        match name {
            sv::PsParameterIdentifier::Scope(x) => {
                let (scope, name) = &x.nodes;
                self.scoped_expr(self.package_or_class(scope), &name.nodes.0)
            }
            sv::PsParameterIdentifier::Generate(x) => {
                let (levels, last) = &x.nodes;
                let mut base: Option<Expr> = None;
                for (block, select, _) in levels {
                    let mut expr = match base {
                        None => self.name_expr(&block.nodes.0),
                        Some(base) => member(base, self.ident(&block.nodes.0)),
                    };
                    if let Some(bracket) = select {
                        let index = self.constant_expression(&bracket.nodes.1);
                        let span = expr.span.to(self.span(bracket));
                        expr = Expr { kind: ExprKind::Index(Box::new(expr), Box::new(index)), span };
                    }
                    base = Some(expr);
                }
                match base {
                    None => self.name_expr(&last.nodes.0),
                    Some(base) => member(base, self.ident(&last.nodes.0)),
                }
            }
        }
    }

    /// A data type where an expression may stand too: a plain name is left for elaboration to decide.
    pub(super) fn name_or_type(&self, ty: DataType) -> Expr {
        match (ty.kind, ty.packed.is_empty()) {
            (DataTypeKind::Named { package: None, name }, true) => Expr { span: ty.span, kind: ExprKind::Name(name) },
            (DataTypeKind::Named { package: Some(package), name }, true) => {
                Expr { span: ty.span, kind: ExprKind::Scoped { package, name } }
            }
            (kind, _) => self.type_expr(DataType { kind, ..ty }),
        }
    }
}

fn logical_and(left: Expr, right: Expr) -> Expr {
    let span = left.span.to(right.span);
    Expr { kind: ExprKind::Binary(BinaryOp::LogicalAnd, Box::new(left), Box::new(right)), span }
}

/// The expression of a condition that is nothing else; it takes part in the grouping of the operators around it.
fn single_condition(predicate: &sv::CondPredicate) -> Option<&sv::Expression> {
    let (first, more) = &predicate.nodes.0.nodes;
    match first {
        sv::ExpressionOrCondPattern::Expression(x) if more.is_empty() => Some(x),
        _ => None,
    }
}

fn is_dollar(expression: &sv::Expression) -> bool {
    matches!(expression, sv::Expression::Primary(x) if matches!(**x, sv::Primary::Dollar(_)))
}
