//! Values that take their shape from what they are assigned to: assignment patterns, and streaming concatenations.

use std::rc::Rc;

use super::bits::{Bit, extend};
use super::context::{Elaborator, Outcome, unsupported, wrong};
use super::types::{Shape, Type};
use crate::source::Span;
use crate::syntax::ast::{Expr, ExprKind, PatternItem, PatternKey};

impl<'a> Elaborator<'a> {
    /// The value of an expression assigned to a type.
    pub fn eval_as(&mut self, expr: &'a Expr, ty: &Rc<Type>) -> Outcome<Vec<Bit>> {
        match &expr.kind {
            ExprKind::Pattern { ty: None, items } => self.eval_pattern(ty, items, expr.span),
            ExprKind::Cond(condition, then, otherwise)
                if [then, otherwise].iter().any(|side| matches!(side.kind, ExprKind::Pattern { ty: None, .. })) =>
            {
                let site = self.site(expr.span);
                let condition = self.eval_condition(condition)?;
                match condition {
                    Bit::One => self.eval_as(then, ty),
                    Bit::Zero => self.eval_as(otherwise, ty),
                    _ => {
                        let a = self.eval_as(then, ty)?;
                        let b = self.eval_as(otherwise, ty)?;
                        Ok(a.iter().zip(&b).map(|(&a, &b)| self.select(condition, a, b, site)).collect())
                    }
                }
            }
            ExprKind::Fill(_) if ty.width > 0 => {
                let bits = self.eval(expr, ty.width, false)?;
                Ok(bits)
            }
            ExprKind::Stream { .. } => {
                let (bits, _) = self.eval_self(expr)?;
                // A stream fills its target from the left.
                let mut filled = vec![Bit::Zero; ty.width.saturating_sub(bits.len())];
                filled.extend(bits);
                Ok(extend(filled, ty.width, false))
            }
            _ if matches!(ty.shape, Shape::Text) => Ok(self.eval_self(expr)?.0),
            _ => self.eval_assigned(expr, ty.width),
        }
    }

    pub fn eval_pattern(&mut self, ty: &Rc<Type>, items: &'a [PatternItem], span: Span) -> Outcome<Vec<Bit>> {
        let parts = self.pattern_parts(ty, span)?;
        let mut values: Vec<Option<&'a Expr>> = vec![None; parts.len()];
        let mut default = None;
        let mut position = 0;
        let place = |values: &mut Vec<Option<&'a Expr>>, at: usize, value: &'a Expr| match values.get_mut(at) {
            Some(slot) => {
                *slot = Some(value);
                Ok(())
            }
            None => Err(wrong("an assignment pattern with more items than its type", value.span)),
        };
        for item in items {
            match &item.key {
                PatternKey::None => {
                    place(&mut values, position, &item.value)?;
                    position += 1;
                }
                PatternKey::Repeat(count) => {
                    let count = self.constant_i64(count)?;
                    for _ in 0..count.min(parts.len() as i64 + 1) {
                        place(&mut values, position, &item.value)?;
                        position += 1;
                    }
                }
                PatternKey::Default => default = Some(&item.value),
                PatternKey::Expr(key) => {
                    let at = self.pattern_key(ty, key)?;
                    place(&mut values, at, &item.value)?;
                }
                PatternKey::Type(_) => return Err(unsupported("assignment pattern with a type as key", span)),
            }
        }
        let mut bits = vec![Bit::X; ty.width];
        for ((offset, part), value) in parts.into_iter().zip(values) {
            let value = match (value, default) {
                (Some(value), _) => self.eval_as(value, &part)?,
                (None, Some(value)) => self.eval_default(value, &part)?,
                (None, None) => return Err(wrong("an assignment pattern that leaves part of its type out", span)),
            };
            bits[offset..offset + part.width].copy_from_slice(&value);
        }
        Ok(bits)
    }

    /// `default` descends to the members of members.
    fn eval_default(&mut self, value: &'a Expr, ty: &Rc<Type>) -> Outcome<Vec<Bit>> {
        let nested = matches!(ty.shape, Shape::Struct { .. }) || ty.unpacked_array();
        if !nested || matches!(value.kind, ExprKind::Pattern { .. } | ExprKind::Fill(_)) {
            return self.eval_as(value, ty);
        }
        let mut bits = vec![Bit::X; ty.width];
        for (offset, part) in self.pattern_parts(ty, value.span)? {
            let part_bits = self.eval_default(value, &part)?;
            bits[offset..offset + part.width].copy_from_slice(&part_bits);
        }
        Ok(bits)
    }

    /// The parts of a type in the order of a pattern, each with its offset.
    fn pattern_parts(&mut self, ty: &Rc<Type>, span: Span) -> Outcome<Vec<(usize, Rc<Type>)>> {
        match &ty.shape {
            Shape::Struct { fields, .. } => {
                Ok(fields.iter().map(|field| (field.offset, Rc::clone(&field.ty))).collect())
            }
            Shape::Array { range, element, .. } => {
                Ok((0..range.len()).rev().map(|at| (at * element.width, Rc::clone(element))).collect())
            }
            Shape::Enum { base, .. } => self.pattern_parts(base, span),
            _ => Err(wrong("an assignment pattern for something that has no parts", span)),
        }
    }

    /// The place in pattern order that a key names.
    fn pattern_key(&mut self, ty: &Rc<Type>, key: &'a Expr) -> Outcome<usize> {
        match (&ty.shape, &key.kind) {
            (Shape::Struct { fields, .. }, ExprKind::Name(name)) => fields
                .iter()
                .position(|field| field.name == name.name)
                .ok_or_else(|| wrong(format!("the structure has no member `{}`", name.name), key.span)),
            (Shape::Array { range, .. }, _) => {
                let index = self.constant_i64(key)?;
                let position = usize::try_from(range.position(index)).ok().filter(|&at| at < range.len());
                position
                    .map(|at| range.len() - 1 - at)
                    .ok_or_else(|| wrong(format!("the array has no element {index}"), key.span))
            }
            _ => Err(unsupported("this key of an assignment pattern", key.span)),
        }
    }

    /// `{<<n{...}}` reverses the order of slices, `{>>{...}}` keeps it.
    pub fn eval_stream(
        &mut self,
        left: bool,
        slice: Option<&'a Expr>,
        parts: &'a [Expr],
        span: Span,
    ) -> Outcome<Vec<Bit>> {
        let mut bits = Vec::new();
        for part in parts.iter().rev() {
            bits.extend(self.eval_self(part)?.0);
        }
        if !left {
            return Ok(bits);
        }
        let size = match slice {
            None => 1,
            Some(slice) => match self.named_type(slice)? {
                Some(ty) => ty.width,
                None => usize::try_from(self.constant_i64(slice)?).unwrap_or(0),
            },
        };
        if size == 0 {
            return Err(wrong("a stream of slices without bits", span));
        }
        Ok(bits.chunks(size).rev().flatten().copied().collect())
    }
}
