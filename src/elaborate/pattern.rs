//! Values that take their shape from what they are assigned to: assignment patterns, and streaming concatenations.

use std::rc::Rc;

use super::bits::Bit;
use super::context::{Elaborator, Outcome, unsupported, wrong};
use super::place::Place;
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
            ExprKind::Stream { .. } => self.eval_stream_into(expr, ty.width),
            ExprKind::Concat(parts) if ty.unpacked_array() => self.eval_array_concatenation(parts, ty, expr.span),
            _ if matches!(ty.shape, Shape::Text) => Ok(self.eval_self(expr)?.0),
            _ => self.eval_assigned(expr, ty.width),
        }
    }

    pub fn eval_pattern(&mut self, ty: &Rc<Type>, items: &'a [PatternItem], span: Span) -> Outcome<Vec<Bit>> {
        let parts = self.pattern_parts(ty, span)?;
        let mut values: Vec<Option<&'a Expr>> = vec![None; parts.len()];
        let mut default = None;
        let mut by_type: Vec<(Rc<Type>, &'a Expr)> = Vec::new();
        let mut position = 0;
        let place = |values: &mut Vec<Option<&'a Expr>>, at: usize, value: &'a Expr| match values.get_mut(at) {
            Some(Some(_)) => Err(wrong("an item of an assignment pattern that is given twice", value.span)),
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
                PatternKey::Repeat(count, more) => {
                    let count = self.constant_i64(count)?;
                    for _ in 0..count.min(parts.len() as i64 + 1) {
                        for value in std::iter::once(&item.value).chain(more) {
                            place(&mut values, position, value)?;
                            position += 1;
                        }
                    }
                }
                PatternKey::Default => default = Some(&item.value),
                PatternKey::Expr(key) if self.is_type_key(ty, key)? => {
                    if let Some(of) = self.named_type(key)? {
                        by_type.push((of, &item.value));
                    }
                }
                PatternKey::Expr(key) => {
                    let at = self.pattern_key(ty, key)?;
                    place(&mut values, at, &item.value)?;
                }
                PatternKey::Type(of) => by_type.push((self.data_type(of)?, &item.value)),
            }
        }
        let mut bits = vec![Bit::X; ty.width];
        for ((offset, part), value) in parts.into_iter().zip(values) {
            // Of the types that fit, the last one counts.
            let fitting = || by_type.iter().rev().find(|(of, _)| of.matches(&part)).map(|&(_, value)| value);
            let value = value.or_else(fitting);
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

    /// Whether the key of a pattern is a type: members come before types of the same name.
    fn is_type_key(&mut self, ty: &Rc<Type>, key: &'a Expr) -> Outcome<bool> {
        let ExprKind::Name(name) = &key.kind else { return Ok(matches!(key.kind, ExprKind::Type(_))) };
        let member = matches!(&ty.shape, Shape::Struct { fields, .. } if fields.iter().any(|f| f.name == name.name));
        Ok(!member && self.named_type(key)?.is_some())
    }

    /// `{a, b, c[0:1]}` assigned to an unpacked array (IEEE 1800-2017 clause 10.10): each part is an element, or an array
    /// of elements.
    fn eval_array_concatenation(&mut self, parts: &'a [Expr], ty: &Rc<Type>, span: Span) -> Outcome<Vec<Bit>> {
        let Some(element) = ty.element() else {
            return Err(wrong("a concatenation for something without parts", span));
        };
        let mut bits = Vec::with_capacity(ty.width);
        for part in parts.iter().rev() {
            let named = matches!(
                part.kind,
                ExprKind::Name(_)
                    | ExprKind::Scoped { .. }
                    | ExprKind::Member(..)
                    | ExprKind::Index(..)
                    | ExprKind::Slice { .. }
            );
            let array = named && {
                let own = self.type_of(part)?;
                own.unpacked_array() && own.element().is_some_and(|inner| inner.width == element.width)
            };
            bits.extend(if array { self.eval_self(part)?.0 } else { self.eval_as(part, &element)? });
        }
        if bits.len() != ty.width {
            let (have, need) = (bits.len() / element.width.max(1), ty.width / element.width.max(1));
            return Err(wrong(format!("a concatenation of {have} elements for an array of {need}"), span));
        }
        Ok(bits)
    }

    /// A stream as the source of an assignment to `width` bits: it fills them from the left, the rest is zero.
    pub fn eval_stream_into(&mut self, expr: &'a Expr, width: usize) -> Outcome<Vec<Bit>> {
        let (bits, _) = self.eval_self(expr)?;
        if bits.len() > width {
            return Err(wrong(format!("a stream of {} bits assigned to {width} bits", bits.len()), expr.span));
        }
        let mut filled = vec![Bit::Zero; width - bits.len()];
        filled.extend(bits);
        Ok(filled)
    }

    /// The places on the left of `{<<n{...}} = value`, the most significant first, and the bits that go there.
    pub fn unpack_stream(&mut self, target: &'a Expr, value: &'a Expr) -> Outcome<(Vec<Place>, Vec<Bit>)> {
        let ExprKind::Stream { left, slice, parts } = &target.kind else {
            return Err(wrong("a target that is no stream", target.span));
        };
        let mut places = Vec::new();
        for part in parts {
            places.extend(self.targets(part)?);
        }
        let width: usize = places.iter().map(|place| place.ty.width).sum();
        let (mut bits, _) = self.eval_self(value)?;
        if bits.len() < width {
            return Err(wrong(format!("{} bits streamed into {width} bits", bits.len()), target.span));
        }
        // More bits than needed are taken from the left.
        bits.drain(..bits.len() - width);
        if *left {
            let size = self.slice_size(slice.as_deref(), target.span)?;
            if !width.is_multiple_of(size) {
                // The standard calls unpacking the reverse of packing; with a slice left over, that can be read in two ways.
                return Err(unsupported("streaming into targets whose width is no multiple of the slice", target.span));
            }
            bits = bits.chunks(size).rev().flatten().copied().collect();
        }
        Ok((places, bits))
    }

    fn slice_size(&mut self, slice: Option<&'a Expr>, span: Span) -> Outcome<usize> {
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
        Ok(size)
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
        let size = self.slice_size(slice, span)?;
        Ok(bits.chunks(size).rev().flatten().copied().collect())
    }
}
