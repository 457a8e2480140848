//! Bit selects, part selects and member selects after a name: `a[3]`, `m[i][j][3 +: 2]`, `s.field[7:0]`. The parser has
//! a constant and a variable form of each; both become the same `Index`, `Slice` and `Member` nodes.

use sv_parser as sv;

use super::Converter;
use super::ast::{Expr, ExprKind, SliceKind};
use super::names::member;
use crate::source::Span;

/// `base[index]`, up to the end of the bracket.
fn index(base: Expr, index: Expr, bracket: Span) -> Expr {
    Expr { span: base.span.to(bracket), kind: ExprKind::Index(Box::new(base), Box::new(index)) }
}

fn slice(base: Expr, kind: SliceKind, left: Expr, right: Expr, bracket: Span) -> Expr {
    let span = base.span.to(bracket);
    Expr { span, kind: ExprKind::Slice { base: Box::new(base), kind, left: Box::new(left), right: Box::new(right) } }
}

impl Converter<'_> {
    fn slice_kind(&self, symbol: &sv::Symbol) -> SliceKind {
        match self.symbol(symbol) {
            "-:" => SliceKind::Down,
            _ => SliceKind::Up,
        }
    }

    pub(super) fn bit_select(&self, base: Expr, select: &sv::BitSelect) -> Expr {
        select
            .nodes
            .0
            .iter()
            .fold(base, |base, bracket| index(base, self.expression(&bracket.nodes.1), self.span(bracket)))
    }

    pub(super) fn constant_bit_select(&self, base: Expr, select: &sv::ConstantBitSelect) -> Expr {
        select
            .nodes
            .0
            .iter()
            .fold(base, |base, bracket| index(base, self.constant_expression(&bracket.nodes.1), self.span(bracket)))
    }

    pub(super) fn select(&self, base: Expr, select: &sv::Select) -> Expr {
        let (members, bits, range) = &select.nodes;
        let mut base = base;
        if let Some((inner, _, last)) = members {
            for (_, name, bits) in inner {
                base = self.bit_select(member(base, self.ident(&name.nodes.0)), bits);
            }
            base = member(base, self.ident(&last.nodes.0));
        }
        base = self.bit_select(base, bits);
        match range {
            Some(range) => self.part_select(base, &range.nodes.1, self.span(range)),
            None => base,
        }
    }

    pub(super) fn constant_select(&self, base: Expr, select: &sv::ConstantSelect) -> Expr {
        let (members, bits, range) = &select.nodes;
        let mut base = base;
        if let Some((inner, _, last)) = members {
            for (_, name, bits) in inner {
                base = self.constant_bit_select(member(base, self.ident(&name.nodes.0)), bits);
            }
            base = member(base, self.ident(&last.nodes.0));
        }
        base = self.constant_bit_select(base, bits);
        match range {
            Some(range) => self.constant_part_select(base, &range.nodes.1, self.span(range)),
            None => base,
        }
    }

    fn part_select(&self, base: Expr, range: &sv::PartSelectRange, bracket: Span) -> Expr {
        match range {
            sv::PartSelectRange::ConstantRange(range) => {
                let (left, right) = self.constant_range(range);
                slice(base, SliceKind::Constant, left, right, bracket)
            }
            sv::PartSelectRange::IndexedRange(range) => {
                let (start, symbol, width) = &range.nodes;
                let (start, width) = (self.expression(start), self.constant_expression(width));
                slice(base, self.slice_kind(symbol), start, width, bracket)
            }
        }
    }

    fn constant_part_select(&self, base: Expr, range: &sv::ConstantPartSelectRange, bracket: Span) -> Expr {
        match range {
            sv::ConstantPartSelectRange::ConstantRange(range) => {
                let (left, right) = self.constant_range(range);
                slice(base, SliceKind::Constant, left, right, bracket)
            }
            sv::ConstantPartSelectRange::ConstantIndexedRange(range) => {
                let (start, symbol, width) = &range.nodes;
                let (start, width) = (self.constant_expression(start), self.constant_expression(width));
                slice(base, self.slice_kind(symbol), start, width, bracket)
            }
        }
    }

    pub(super) fn constant_range(&self, range: &sv::ConstantRange) -> (Expr, Expr) {
        let (left, _, right) = &range.nodes;
        (self.constant_expression(left), self.constant_expression(right))
    }

    /// The select after a concatenation: `{a, b}[3:0]`.
    pub(super) fn range_select(&self, base: Expr, range: &Option<sv::Bracket<sv::RangeExpression>>) -> Expr {
        let Some(bracket) = range else { return base };
        match &bracket.nodes.1 {
            sv::RangeExpression::Expression(x) => index(base, self.expression(x), self.span(bracket)),
            sv::RangeExpression::PartSelectRange(x) => self.part_select(base, x, self.span(bracket)),
        }
    }

    pub(super) fn constant_range_select(
        &self,
        base: Expr,
        range: &Option<sv::Bracket<sv::ConstantRangeExpression>>,
    ) -> Expr {
        let Some(bracket) = range else { return base };
        match &bracket.nodes.1 {
            sv::ConstantRangeExpression::ConstantExpression(x) => {
                index(base, self.constant_expression(x), self.span(bracket))
            }
            sv::ConstantRangeExpression::ConstantPartSelectRange(x) => {
                self.constant_part_select(base, x, self.span(bracket))
            }
        }
    }
}
