//! Expressions that put values together: concatenation, replication, streaming, assignment patterns, and the casts, whose
//! type may be a name that only elaboration can tell from a constant.

use sv_parser as sv;

use super::Converter;
use super::ast::{CastKind, DataType, DataTypeKind, Expr, ExprKind, PatternItem, PatternKey, SliceKind};
use super::names::Scope;

impl Converter<'_> {
    pub(super) fn concatenation(&self, concatenation: &sv::Concatenation) -> Expr {
        let parts = concatenation.nodes.0.nodes.1.contents().into_iter().map(|part| self.expression(part)).collect();
        Expr { kind: ExprKind::Concat(parts), span: self.span(concatenation) }
    }

    pub(super) fn constant_concatenation(&self, concatenation: &sv::ConstantConcatenation) -> Expr {
        let parts = concatenation.nodes.0.nodes.1.contents();
        let parts = parts.into_iter().map(|part| self.constant_expression(part)).collect();
        Expr { kind: ExprKind::Concat(parts), span: self.span(concatenation) }
    }

    pub(super) fn multiple_concatenation(&self, concatenation: &sv::MultipleConcatenation) -> Expr {
        let (count, parts) = &concatenation.nodes.0.nodes.1;
        let parts = parts.nodes.0.nodes.1.contents().into_iter().map(|part| self.expression(part)).collect();
        Expr { kind: ExprKind::Replicate(Box::new(self.expression(count)), parts), span: self.span(concatenation) }
    }

    pub(super) fn constant_multiple_concatenation(&self, concatenation: &sv::ConstantMultipleConcatenation) -> Expr {
        let (count, parts) = &concatenation.nodes.0.nodes.1;
        let parts = parts.nodes.0.nodes.1.contents();
        let parts = parts.into_iter().map(|part| self.constant_expression(part)).collect();
        let count = Box::new(self.constant_expression(count));
        Expr { kind: ExprKind::Replicate(count, parts), span: self.span(concatenation) }
    }

    pub(super) fn streaming(&self, streaming: &sv::StreamingConcatenation) -> Expr {
        let (operator, slice, parts) = &streaming.nodes.0.nodes.1;
        let slice = slice.as_ref().map(|slice| {
            Box::new(match slice {
                sv::SliceSize::SimpleType(x) => self.name_or_type(self.simple_type(x)),
                sv::SliceSize::ConstantExpression(x) => self.constant_expression(x),
            })
        });
        let parts = parts.nodes.0.nodes.1.contents().into_iter().map(|part| self.stream_part(part)).collect();
        let left = self.symbol(&operator.nodes.0) == "<<";
        Expr { kind: ExprKind::Stream { left, slice, parts }, span: self.span(streaming) }
    }

    /// `a` or `a with [3:0]`; the latter is the same as the slice for everything of a fixed size.
    fn stream_part(&self, part: &sv::StreamExpression) -> Expr {
        let (expression, range) = &part.nodes;
        let base = Box::new(self.expression(expression));
        let Some((_, bracket)) = range else { return *base };
        let (kind, (left, _, right)) = match &bracket.nodes.1 {
            sv::ArrayRangeExpression::Expression(x) => {
                let index = Box::new(self.expression(x));
                return Expr { kind: ExprKind::Index(base, index), span: self.span(part) };
            }
            sv::ArrayRangeExpression::Colon(x) => (SliceKind::Constant, &x.nodes),
            sv::ArrayRangeExpression::PlusColon(x) => (SliceKind::Up, &x.nodes),
            sv::ArrayRangeExpression::MinusColon(x) => (SliceKind::Down, &x.nodes),
        };
        let (left, right) = (Box::new(self.expression(left)), Box::new(self.expression(right)));
        Expr { kind: ExprKind::Slice { base, kind, left, right }, span: self.span(part) }
    }

    pub(super) fn assignment_pattern(&self, pattern: &sv::AssignmentPatternExpression) -> Expr {
        let (ty, items) = &pattern.nodes;
        let items = match items {
            sv::AssignmentPattern::List(x) => {
                let values = x.nodes.0.nodes.1.contents();
                values
                    .into_iter()
                    .map(|value| PatternItem { key: PatternKey::None, value: self.expression(value) })
                    .collect()
            }
            sv::AssignmentPattern::Structure(x) => {
                let items = x.nodes.0.nodes.1.contents().into_iter();
                items
                    .map(|(key, _, value)| {
                        let key = match key {
                            sv::StructurePatternKey::MemberIdentifier(x) => {
                                PatternKey::Expr(self.name_expr(&x.nodes.0))
                            }
                            sv::StructurePatternKey::AssignmentPatternKey(x) => self.pattern_key(x),
                        };
                        PatternItem { key, value: self.expression(value) }
                    })
                    .collect()
            }
            sv::AssignmentPattern::Array(x) => {
                let items = x.nodes.0.nodes.1.contents().into_iter();
                items
                    .map(|(key, _, value)| {
                        let key = match key {
                            sv::ArrayPatternKey::ConstantExpression(x) => PatternKey::Expr(self.constant_expression(x)),
                            sv::ArrayPatternKey::AssignmentPatternKey(x) => self.pattern_key(x),
                        };
                        PatternItem { key, value: self.expression(value) }
                    })
                    .collect()
            }
            sv::AssignmentPattern::Repeat(x) => {
                let (count, values) = &x.nodes.0.nodes.1;
                let mut values = values.nodes.1.contents().into_iter().map(|value| self.expression(value));
                let value = values.next();
                let value = value.unwrap_or_else(|| self.unsupported_expr("empty replication", self.span(&**x)));
                vec![PatternItem { key: PatternKey::Repeat(self.constant_expression(count), values.collect()), value }]
            }
        };
        let ty = ty.as_ref().map(|ty| Box::new(self.pattern_type(ty)));
        Expr { kind: ExprKind::Pattern { ty, items }, span: self.span(pattern) }
    }

    fn pattern_key(&self, key: &sv::AssignmentPatternKey) -> PatternKey {
        match key {
            sv::AssignmentPatternKey::Default(_) => PatternKey::Default,
            sv::AssignmentPatternKey::SimpleType(x) => {
                let name = self.name_or_type(self.simple_type(x));
                match name.kind {
                    ExprKind::Type(ty) => PatternKey::Type(*ty),
                    _ => PatternKey::Expr(name),
                }
            }
        }
    }

    pub(super) fn pattern_type(&self, ty: &sv::AssignmentPatternExpressionType) -> DataType {
        match ty {
            sv::AssignmentPatternExpressionType::PsTypeIdentifier(x) => self.ps_type(x),
            sv::AssignmentPatternExpressionType::PsParameterIdentifier(x) => {
                let name = self.parameter_name(x);
                let span = name.span;
                self.plain_type(DataTypeKind::TypeOf(Box::new(name)), span)
            }
            sv::AssignmentPatternExpressionType::IntegerAtomType(x) => self.atom_type(x),
            sv::AssignmentPatternExpressionType::TypeReference(x) => self.type_reference(x),
        }
    }

    pub(super) fn cast(&self, cast: &sv::Cast) -> Expr {
        let (ty, _, value) = &cast.nodes;
        let value = Box::new(self.expression(&value.nodes.1));
        Expr { kind: ExprKind::Cast(self.cast_kind(ty), value), span: self.span(cast) }
    }

    pub(super) fn constant_cast(&self, cast: &sv::ConstantCast) -> Expr {
        let (ty, _, value) = &cast.nodes;
        let value = Box::new(self.constant_expression(&value.nodes.1));
        Expr { kind: ExprKind::Cast(self.cast_kind(ty), value), span: self.span(cast) }
    }

    fn cast_kind(&self, ty: &sv::CastingType) -> CastKind {
        match ty {
            sv::CastingType::SimpleType(x) => {
                let name = self.name_or_type(self.simple_type(x));
                match name.kind {
                    ExprKind::Type(ty) => CastKind::Type(ty),
                    _ => CastKind::Size(Box::new(name)),
                }
            }
            sv::CastingType::ConstantPrimary(x) => {
                let size = self.constant_primary(x);
                match size.kind {
                    ExprKind::Type(ty) => CastKind::Type(ty),
                    _ => CastKind::Size(Box::new(size)),
                }
            }
            sv::CastingType::Signing(x) => match **x {
                sv::Signing::Signed(_) => CastKind::Signed,
                sv::Signing::Unsigned(_) => CastKind::Unsigned,
            },
            sv::CastingType::String(x) => {
                CastKind::Type(Box::new(self.plain_type(DataTypeKind::String, self.span(&**x))))
            }
            sv::CastingType::Const(_) => CastKind::Const,
        }
    }

    /// A type name with its optional scope.
    pub(super) fn ps_type(&self, ty: &sv::PsTypeIdentifier) -> DataType {
        let (scope, name) = &ty.nodes;
        self.named_type(self.local_or_scope(scope), &name.nodes.0)
    }

    pub(super) fn named_type(&self, scope: Scope, name: &sv::Identifier) -> DataType {
        let name = self.ident(name);
        let (kind, span) = match scope {
            Scope::None => (DataTypeKind::Named { package: None, name: name.clone() }, name.span),
            Scope::Package(package) => {
                let span = package.span.to(name.span);
                (DataTypeKind::Named { package: Some(package), name }, span)
            }
            Scope::Unsupported(what, span) => (DataTypeKind::Unsupported(what.to_string()), span.to(name.span)),
        };
        self.plain_type(kind, span)
    }
}
