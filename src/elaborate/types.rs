//! Data types with everything worked out: widths, index ranges, members. Every value is a flat list of bits, least
//! significant first; the right end of a range and the last member of a structure lie at the low end, for unpacked types
//! too, so that copying between arrays goes by position.

use std::collections::HashSet;
use std::rc::Rc;

use super::bits::Bit;
use super::context::{Elaborator, Outcome, unsupported, wrong};
use super::scope::Symbol;
use super::value::Value;
use crate::source::Span;
use crate::syntax::ast::{DataType, DataTypeKind, Dim, EnumMember, Expr, ExprKind, Member};

/// The largest type, that of a memory included; what is laid out bit by bit has a lower limit.
pub(super) const MAX_NET_WIDTH: usize = 1 << 24;

/// An index range as declared.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Range {
    pub left: i64,
    pub right: i64,
}

impl Range {
    pub fn len(self) -> usize {
        usize::try_from(self.left.abs_diff(self.right)).unwrap_or(usize::MAX).saturating_add(1)
    }

    /// How many elements from the right end an index lies; negative or too large outside.
    pub fn position(self, index: i64) -> i64 {
        if self.left >= self.right { index.saturating_sub(self.right) } else { self.right.saturating_sub(index) }
    }

    /// The index at a position counted from the right end.
    pub fn index(self, position: usize) -> i64 {
        let position = position as i64;
        if self.left >= self.right { self.right + position } else { self.right - position }
    }

    pub fn ascending(self) -> bool {
        self.left < self.right
    }
}

#[derive(Debug)]
pub(super) enum Shape {
    /// One bit.
    Scalar,
    Array {
        range: Range,
        element: Rc<Type>,
        packed: bool,
    },
    Struct {
        fields: Vec<Field>,
        packed: bool,
    },
    Enum {
        base: Rc<Type>,
        members: Vec<(String, Value)>,
    },
    Real,
    Text,
    Void,
}

#[derive(Debug)]
pub(super) struct Field {
    pub name: String,
    pub ty: Rc<Type>,
    /// From the low end of the structure.
    pub offset: usize,
    /// What a variable starts with that has no initial value of its own.
    pub default: Option<Value>,
}

/// See the module documentation.
#[derive(Debug)]
pub(super) struct Type {
    pub shape: Shape,
    pub width: usize,
    pub signed: bool,
    /// Of `bit` and its kin, whose variables start at 0.
    pub two_state: bool,
}

impl Type {
    fn new(shape: Shape, width: usize, signed: bool, two_state: bool) -> Rc<Self> {
        Rc::new(Self { shape, width, signed, two_state })
    }

    pub fn scalar() -> Rc<Self> {
        Self::new(Shape::Scalar, 1, false, false)
    }

    /// `[width - 1:0]`
    pub fn vector(width: usize, signed: bool) -> Rc<Self> {
        Self::ranged(Range { left: width as i64 - 1, right: 0 }, signed, false)
    }

    fn ranged(range: Range, signed: bool, two_state: bool) -> Rc<Self> {
        let element = Self::new(Shape::Scalar, 1, false, two_state);
        Self::new(Shape::Array { range, element, packed: true }, range.len(), signed, two_state)
    }

    pub fn array(range: Range, element: Rc<Type>, packed: bool) -> Rc<Self> {
        let (width, two_state) = (range.len().saturating_mul(element.width), element.two_state);
        Self::new(Shape::Array { range, element, packed }, width, false, two_state)
    }

    pub fn with_sign(self: Rc<Self>, signed: bool) -> Rc<Self> {
        if self.signed == signed {
            return self;
        }
        let shape = match &self.shape {
            Shape::Scalar => Shape::Scalar,
            Shape::Array { range, element, packed } => {
                Shape::Array { range: *range, element: Rc::clone(element), packed: *packed }
            }
            _ => return self,
        };
        Self::new(shape, self.width, signed, self.two_state)
    }

    /// Whether two types are one, for the keys of assignment patterns.
    pub fn matches(self: &Rc<Self>, other: &Rc<Self>) -> bool {
        if Rc::ptr_eq(self, other) {
            return true;
        }
        let same = self.width == other.width && self.signed == other.signed && self.two_state == other.two_state;
        same && match (&self.shape, &other.shape) {
            (Shape::Scalar, Shape::Scalar) => true,
            (
                Shape::Array { range, element, packed },
                Shape::Array { range: other_range, element: other_element, packed: other_packed },
            ) => range.len() == other_range.len() && packed == other_packed && element.matches(other_element),
            _ => false,
        }
    }

    /// Whether the value can be used as one vector.
    pub fn integral(&self) -> bool {
        match &self.shape {
            Shape::Scalar | Shape::Enum { .. } => true,
            Shape::Array { packed, .. } | Shape::Struct { packed, .. } => *packed,
            Shape::Real | Shape::Text | Shape::Void => false,
        }
    }

    /// Whether every part of it is made of bits: a real number or a text is not.
    pub fn has_bits(&self) -> bool {
        match &self.shape {
            Shape::Scalar | Shape::Enum { .. } => true,
            Shape::Array { element, .. } => element.has_bits(),
            Shape::Struct { fields, .. } => fields.iter().all(|field| field.ty.has_bits()),
            Shape::Real | Shape::Text | Shape::Void => false,
        }
    }

    /// The outermost index range, of an array.
    pub fn range(&self) -> Option<Range> {
        match &self.shape {
            Shape::Array { range, .. } => Some(*range),
            Shape::Enum { base, .. } => base.range(),
            Shape::Struct { packed: true, .. } => Some(Range { left: self.width as i64 - 1, right: 0 }),
            _ => None,
        }
    }

    /// What an index into the type selects.
    pub fn element(&self) -> Option<Rc<Type>> {
        match &self.shape {
            Shape::Array { element, .. } => Some(Rc::clone(element)),
            Shape::Enum { base, .. } => base.element(),
            Shape::Struct { packed: true, .. } => Some(Type::scalar()),
            _ => None,
        }
    }

    pub fn unpacked_array(&self) -> bool {
        matches!(self.shape, Shape::Array { packed: false, .. })
    }

    /// The initial bits that the default values of members give; nothing when no member has one.
    pub fn defaults(&self) -> Option<Vec<Bit>> {
        let idle = if self.two_state { Bit::Zero } else { Bit::X };
        match &self.shape {
            Shape::Array { range, element, .. } => element.defaults().map(|bits| bits.repeat(range.len())),
            Shape::Struct { fields, .. } => {
                let mut bits = vec![idle; self.width];
                let mut any = false;
                for field in fields {
                    let inner = field.default.as_ref().map(super::bits::from_value).or_else(|| field.ty.defaults());
                    if let Some(inner) = inner
                        && let Some(slot) = bits.get_mut(field.offset..field.offset + inner.len())
                    {
                        slot.copy_from_slice(&inner);
                        any = true;
                    }
                }
                any.then_some(bits)
            }
            _ => None,
        }
    }

    /// What follows the name of a net of this type for each bit, least significant first.
    pub fn suffixes(&self) -> Vec<String> {
        match &self.shape {
            Shape::Array { range, element, .. } => {
                let inner = element.suffixes();
                let mut all = Vec::with_capacity(self.width);
                for position in 0..range.len() {
                    let index = range.index(position);
                    all.extend(inner.iter().map(|suffix| format!("[{index}]{suffix}")));
                }
                all
            }
            Shape::Struct { fields, .. } => {
                let mut all = vec![String::new(); self.width];
                for field in fields {
                    for (at, suffix) in field.ty.suffixes().into_iter().enumerate() {
                        all[field.offset + at] = format!(".{}{suffix}", field.name);
                    }
                }
                all
            }
            Shape::Enum { base, .. } => base.suffixes(),
            _ => vec![String::new(); self.width],
        }
    }
}

impl<'a> Elaborator<'a> {
    /// A type as written, packed dimensions included.
    pub fn data_type(&mut self, ty: &'a DataType) -> Outcome<Rc<Type>> {
        let base = self.base_type(ty)?;
        self.with_dims(base, &ty.packed, true, ty.span)
    }

    fn base_type(&mut self, ty: &'a DataType) -> Outcome<Rc<Type>> {
        let signed = ty.signed.unwrap_or(false);
        let atom = |width: i64, default_signed: bool, two_state: bool| {
            Type::ranged(Range { left: width - 1, right: 0 }, ty.signed.unwrap_or(default_signed), two_state)
        };
        Ok(match &ty.kind {
            DataTypeKind::Implicit | DataTypeKind::Logic => Type::new(Shape::Scalar, 1, signed, false),
            DataTypeKind::Bit => Type::new(Shape::Scalar, 1, signed, true),
            DataTypeKind::Byte => atom(8, true, true),
            DataTypeKind::Shortint => atom(16, true, true),
            DataTypeKind::Int => atom(32, true, true),
            DataTypeKind::Longint => atom(64, true, true),
            DataTypeKind::Integer => atom(32, true, false),
            DataTypeKind::Time => atom(64, false, false),
            DataTypeKind::Real => Type::new(Shape::Real, 64, true, true),
            DataTypeKind::String => Type::new(Shape::Text, 0, false, true),
            DataTypeKind::Void => Type::new(Shape::Void, 0, false, false),
            DataTypeKind::Event => return Err(unsupported("event", ty.span)),
            DataTypeKind::Chandle => return Err(unsupported("chandle", ty.span)),
            DataTypeKind::Unsupported(what) => return Err(unsupported(what, ty.span)),
            DataTypeKind::Named { package, name } => {
                let symbol = match package {
                    Some(package) => self.look_up_in_package(package, name)?,
                    None => self.look_up(name)?,
                };
                match symbol {
                    Symbol::Lazy(lazy) => self.force_type(lazy, name.span)?,
                    _ => return Err(wrong(format!("`{}` is not a data type", name.name), name.span)),
                }
            }
            DataTypeKind::Enum { base, members } => self.enum_type(base.as_deref(), members, ty.span)?,
            DataTypeKind::Struct { union, packed, tagged, members } => {
                if *tagged {
                    return Err(unsupported("tagged union", ty.span));
                }
                self.struct_type(*union, *packed, signed, members, ty.span)?
            }
            DataTypeKind::TypeOf(expr) => match &expr.kind {
                ExprKind::Type(ty) => self.data_type(ty)?,
                _ => match self.named_type(expr)? {
                    Some(ty) => ty,
                    None => self.type_of(expr)?,
                },
            },
        })
    }

    fn struct_type(
        &mut self,
        union: bool,
        packed: bool,
        signed: bool,
        members: &'a [Member],
        span: Span,
    ) -> Outcome<Rc<Type>> {
        let mut fields = Vec::with_capacity(members.len());
        let mut width = 0usize;
        let mut names = HashSet::new();
        for member in members {
            if !names.insert(member.name.name.as_str()) {
                return Err(wrong(
                    format!("`{}` is a member of this type already", member.name.name),
                    member.name.span,
                ));
            }
        }
        for member in members.iter().rev() {
            let ty = self.data_type(&member.ty)?;
            let ty = self.with_dims(ty, &member.dims, false, member.name.span)?;
            let offset = if union { 0 } else { width };
            width = if union { width.max(ty.width) } else { width + ty.width };
            let default = match &member.default {
                Some(value) => Some(self.constant_for(value, &ty)?),
                None => None,
            };
            fields.push(Field { name: member.name.name.clone(), ty, offset, default });
        }
        fields.reverse();
        if width > MAX_NET_WIDTH {
            return Err(too_wide(span));
        }
        Ok(Type::new(Shape::Struct { fields, packed }, width, signed, false))
    }

    /// An enumeration with the values of its members.
    fn enum_type(&mut self, base: Option<&'a DataType>, members: &'a [EnumMember], span: Span) -> Outcome<Rc<Type>> {
        let base = match base {
            Some(base) if !matches!(base.kind, DataTypeKind::Implicit) || !base.packed.is_empty() => {
                self.data_type(base)?
            }
            _ => Type::ranged(Range { left: 31, right: 0 }, true, true),
        };
        let mut values: Vec<(String, Value)> = Vec::new();
        let mut next = Value::from_i64(0, base.width, base.signed);
        let one = Value::from_i64(1, base.width, base.signed);
        for member in members {
            if let Some(value) = &member.value {
                next = self.constant_for(value, &base)?;
            }
            for name in self.enum_names(member)? {
                values.push((name, next.clone()));
                next = Value::binary(crate::syntax::ast::BinaryOp::Add, &next, &one);
            }
        }
        if values.is_empty() {
            return Err(wrong("an enumeration without members", span));
        }
        let (width, signed, two_state) = (base.width, base.signed, base.two_state);
        Ok(Type::new(Shape::Enum { base, members: values }, width, signed, two_state))
    }

    /// The names a member stands for: itself, or `name0`, `name1`, ... with a range.
    pub fn enum_names(&mut self, member: &'a EnumMember) -> Outcome<Vec<String>> {
        let name = &member.name.name;
        let Some((first, last)) = &member.range else {
            return Ok(vec![name.clone()]);
        };
        let first = self.constant_i64(first)?;
        let indices: Vec<i64> = match last {
            None => (0..first).take(1 << 16).collect(),
            Some(last) => {
                let last = self.constant_i64(last)?;
                if first <= last {
                    (first..=last).take(1 << 16).collect()
                } else {
                    (last..=first).rev().take(1 << 16).collect()
                }
            }
        };
        Ok(indices.into_iter().map(|index| format!("{name}{index}")).collect())
    }

    /// `base` with dimensions around it, the first the outermost. A packed dimension takes over the sign of its base.
    pub fn with_dims(&mut self, base: Rc<Type>, dims: &'a [Dim], packed: bool, span: Span) -> Outcome<Rc<Type>> {
        let mut ty = base;
        for dim in dims.iter().rev() {
            if packed && !ty.integral() {
                return Err(unsupported("packed dimension of an unpacked type", span));
            }
            let range = self.dimension(dim)?;
            if range.len().saturating_mul(ty.width.max(1)) > MAX_NET_WIDTH {
                return Err(too_wide(span));
            }
            let signed = packed && ty.signed;
            ty = Type::array(range, if packed { ty.with_sign(false) } else { ty }, packed).with_sign(signed);
        }
        Ok(ty)
    }

    /// The range of a dimension; `[size]` is `[0:size-1]`.
    pub fn dimension(&mut self, dim: &'a Dim) -> Outcome<Range> {
        match dim {
            Dim::Range(left, right) => self.range(left, right),
            Dim::Size(size) => {
                let count = self.constant_i64(size)?;
                if count < 1 {
                    return Err(wrong(format!("an array of {count} elements"), size.span));
                }
                Ok(Range { left: 0, right: count - 1 })
            }
            Dim::Dynamic(span) => Err(unsupported("dynamic, associative or queue dimension", *span)),
        }
    }

    pub fn range(&mut self, left: &'a Expr, right: &'a Expr) -> Outcome<Range> {
        let limit = 1u64 << 40;
        let ends = [self.constant_i64(left)?, self.constant_i64(right)?];
        if ends.iter().any(|end| end.unsigned_abs() > limit) {
            return Err(too_wide(left.span.to(right.span)));
        }
        Ok(Range { left: ends[0], right: ends[1] })
    }
}

fn too_wide(span: Span) -> Box<crate::diagnostic::Diagnostic> {
    wrong(format!("a vector or array of more than {MAX_NET_WIDTH} bits"), span)
}
