//! What can be called without parentheses, and the methods of arrays and enumerations: `state.next`, `list.sum`,
//! `list.or with (item ^ mask)`, a `let` or function without arguments. The parser cannot tell these from members and
//! names, so they are told apart here, by what stands before the dot.

use std::rc::Rc;

use super::bits::Bit;
use super::context::{Elaborator, Outcome, Storage, unsupported, wrong};
use super::place::{Base, Place, Want};
use super::scope::Symbol;
use super::types::{Shape, Type};
use super::value::Value;
use crate::graph::Site;
use crate::source::Span;
use crate::syntax::ast::{BinaryOp, CallArg, Expr, Ident};

/// The methods of arrays that are no reductions (clauses 7.12.1 and 7.12.2).
const OTHER_METHODS: &[&str] = &["min", "max", "unique", "size", "reverse", "sort", "rsort", "shuffle"];

/// The reductions of IEEE 1800-2017 clause 7.12.3.
fn reduction(method: &str) -> Option<BinaryOp> {
    Some(match method {
        "sum" => BinaryOp::Add,
        "product" => BinaryOp::Mul,
        "and" => BinaryOp::And,
        "or" => BinaryOp::Or,
        "xor" => BinaryOp::Xor,
        _ => return None,
    })
}

impl<'a> Elaborator<'a> {
    /// A method named like a member: of an enumeration, of an array, or `index` of the iterator of an array method.
    pub fn method_without_arguments(&mut self, place: &Place, name: &'a Ident, want: Want) -> Outcome<Option<Place>> {
        let (bits, ty) = match (&place.base, &place.ty.shape) {
            (Base::Variable(id), _)
                if name.name == "index" && place.steps.is_empty() && self.iterators.contains_key(id) =>
            {
                let index = self.iterators.get(id).copied().unwrap_or(0);
                (super::bits::from_value(&Value::from_i64(index, 32, true)), Type::vector(32, true))
            }
            (_, Shape::Enum { .. }) => {
                let ty = self.enum_method_type(&place.ty, &name.name);
                let bits = match want {
                    Want::Type => vec![Bit::X; ty.width],
                    Want::Value => {
                        let value = self.read_place(place, self.site(name.span))?;
                        self.enum_method(&value, &place.ty, &name.name, &[], name.span)?
                    }
                };
                (bits, ty)
            }
            (_, Shape::Array { .. })
                if reduction(&name.name).is_some() || OTHER_METHODS.contains(&name.name.as_str()) =>
            {
                self.reduce(place, name, want)?
            }
            _ => return Ok(None),
        };
        Ok(Some(Place { base: Base::Bits(Rc::new(bits)), steps: Vec::new(), ty }))
    }

    pub fn enum_method_type(&self, ty: &Rc<Type>, method: &str) -> Rc<Type> {
        if method == "num" { Type::vector(32, true) } else { Rc::clone(ty) }
    }

    /// A reduction of the elements of an array; the result has the type of an element.
    pub fn reduce(&mut self, place: &Place, method: &Ident, want: Want) -> Outcome<(Vec<Bit>, Rc<Type>)> {
        let (Some(op), Some(element)) = (reduction(&method.name), place.ty.element()) else {
            return Err(unsupported(format!("array method `{}`", method.name), method.span));
        };
        if want == Want::Type {
            return Ok((vec![Bit::X; element.width], element));
        }
        let site = self.site(method.span);
        let bits = self.read_place(place, site)?;
        // From the left bound on, which lies at the high end.
        let values: Vec<Vec<Bit>> = bits.chunks(element.width.max(1)).rev().map(<[Bit]>::to_vec).collect();
        let result = self.fold(op, values, element.signed, site, method.span)?;
        Ok((result, element))
    }

    fn fold(&mut self, op: BinaryOp, values: Vec<Vec<Bit>>, signed: bool, site: Site, span: Span) -> Outcome<Vec<Bit>> {
        let mut values = values.into_iter();
        let Some(mut all) = values.next() else { return Err(wrong("a method of an empty array", span)) };
        for value in values {
            all = self.operate(op, &all, &value, signed, signed, site)?;
        }
        Ok(all)
    }

    /// `array.method with (expression)`: the expression once for each element, then all of them reduced.
    pub fn reduce_with(
        &mut self,
        array: &'a Expr,
        method: &Ident,
        iterator: Option<&Ident>,
        with: &'a Expr,
        want: Want,
    ) -> Outcome<(Vec<Bit>, bool)> {
        let place = self.place(array, want)?;
        let (Some(op), Some(element), Some(range)) = (reduction(&method.name), place.ty.element(), place.ty.range())
        else {
            return Err(unsupported(format!("array method `{}`", method.name), method.span));
        };
        let site = self.site(method.span);
        let name = iterator.map_or("item", |name| name.name.as_str());
        let bits = match want {
            Want::Type => vec![Bit::X; place.ty.width],
            Want::Value => self.read_place(&place, site)?,
        };
        let mut values = Vec::new();
        let mut signed = false;
        for position in (0..range.len()).rev() {
            let inner = self.inner_scope(self.here, "", self.instance, String::new());
            let local = self.add_local(name, Rc::clone(&element), method.span, Storage::Local);
            self.declare(inner, name, Symbol::Variable(local));
            self.iterators.insert(local, range.index(position));
            let part = bits[position * element.width..(position + 1) * element.width].to_vec();
            self.environment.set((local, false), part);
            let value = self.in_scope(inner, |this| match want {
                Want::Type => this.size(with).map(|(width, signed)| (vec![Bit::X; width], signed)),
                Want::Value => this.eval_self(with),
            });
            self.environment.forget(local);
            self.iterators.remove(&local);
            let (value, value_signed) = value?;
            signed = value_signed;
            values.push(value);
            if want == Want::Type {
                break;
            }
        }
        Ok((self.fold(op, values, signed, site, method.span)?, signed))
    }

    /// The value of a `let` or a function that is named without parentheses.
    pub fn call_without_arguments(&mut self, callee: &'a Expr, want: Want) -> Outcome<(Vec<Bit>, Rc<Type>)> {
        const NOTHING: &[CallArg] = &[];
        let (width, signed) = self.call_size(callee, NOTHING, callee.span)?;
        let bits = match want {
            Want::Type => vec![Bit::X; width],
            Want::Value => self.call(callee, NOTHING, callee.span)?,
        };
        Ok((bits, Type::vector(width.max(1), signed)))
    }
}
