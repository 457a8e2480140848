//! Places: what a name with selects denotes, for reading and for assigning. A place is a variable or a computed value
//! and a list of selects; the last type is that of what is selected. Selects with a constant index are wiring; a variable
//! index reads the AND-OR of the decoded index, and assigns each element under its decoded index.

use std::rc::Rc;

use super::bits::Bit;
use super::context::{Elaborator, Outcome, Storage, VariableId, unsupported, wrong};
use super::scope::{Constant, Instances, ScopeId, Symbol};
use super::types::{Range, Shape, Type};
use crate::graph::{NodeId, Site, SourceKind};
use crate::source::Span;
use crate::syntax::ast::{Expr, ExprKind, Ident, SliceKind};

/// Memories above this many bits are opaque.
pub(super) const MAX_MEMORY: usize = 65_536;

#[derive(Clone, Debug)]
pub(super) enum Base {
    Variable(VariableId),
    Bits(Rc<Vec<Bit>>),
    Real(f64),
}

/// One select, in bits of what it is applied to.
#[derive(Clone, Debug)]
pub(super) enum Step {
    /// `width` bits from offset `low`, which may lie outside.
    Fixed { low: i64, width: usize },
    /// The element with a variable index.
    Index { index: Vec<Bit>, signed: bool, range: Range, element: usize },
    /// `count` elements from the variable index on, upward or downward.
    Part { index: Vec<Bit>, signed: bool, range: Range, element: usize, count: usize, up: bool },
}

#[derive(Clone, Debug)]
pub(super) struct Place {
    pub base: Base,
    pub steps: Vec<Step>,
    pub ty: Rc<Type>,
}

/// What a hierarchical name denotes.
#[derive(Clone, Debug)]
pub(super) enum Resolved<'a> {
    Place(Place),
    Scope(ScopeId),
    Symbol(Symbol<'a>),
}

/// Whether index expressions are turned into gates, or only the type is wanted.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Want {
    Type,
    Value,
}

impl<'a> Elaborator<'a> {
    /// The place an expression denotes; an error when it is not a name with selects.
    pub fn place(&mut self, expr: &'a Expr, want: Want) -> Outcome<Place> {
        match self.resolve(expr, want)? {
            Resolved::Place(place) => Ok(place),
            Resolved::Scope(_) => Err(wrong("an instance or block where a value is needed", expr.span)),
            Resolved::Symbol(Symbol::Opaque) => {
                Err(wrong("a name inside a module that is missing or could not be elaborated", expr.span))
            }
            Resolved::Symbol(Symbol::Simulation { what, .. }) => {
                Err(unsupported(format!("value of a {what} in logic"), expr.span))
            }
            Resolved::Symbol(Symbol::Let(..) | Symbol::Function(..)) => {
                let (bits, ty) = self.call_without_arguments(expr, want)?;
                Ok(Place { base: Base::Bits(Rc::new(bits)), steps: Vec::new(), ty })
            }
            Resolved::Symbol(_) => Err(wrong("this name is not a value", expr.span)),
        }
    }

    pub fn type_of(&mut self, expr: &'a Expr) -> Outcome<Rc<Type>> {
        Ok(self.place(expr, Want::Type)?.ty)
    }

    pub fn resolve(&mut self, expr: &'a Expr, want: Want) -> Outcome<Resolved<'a>> {
        match &expr.kind {
            ExprKind::Name(name) => {
                let symbol = self.look_up(name)?;
                self.resolve_symbol(symbol, name.span)
            }
            ExprKind::Scoped { package, name } => {
                let symbol = self.look_up_in_package(package, name)?;
                self.resolve_symbol(symbol, name.span)
            }
            ExprKind::Member(base, name) => {
                let base = match &base.kind {
                    ExprKind::Name(root) if root.name == "$root" => {
                        let top = self.tops.iter().find(|(top, _)| *top == name.name);
                        let top = top.ok_or_else(|| wrong(format!("there is no top `{}`", name.name), name.span))?;
                        return Ok(Resolved::Scope(top.1));
                    }
                    ExprKind::Name(first) => {
                        let symbol = self
                            .find_upward(&first.name)
                            .ok_or_else(|| wrong(format!("`{}` is not declared", first.name), first.span))?;
                        self.resolve_symbol(symbol, first.span)?
                    }
                    _ => self.resolve(base, want)?,
                };
                self.resolve_member(base, name, want)
            }
            ExprKind::Index(base, index) => {
                let base = self.resolve_base(base, want)?;
                self.resolve_index(base, index, want, expr.span)
            }
            ExprKind::Slice { base, kind, left, right } => {
                let base = self.resolve_base(base, want)?;
                let place = match base {
                    Resolved::Place(place) => place,
                    Resolved::Symbol(Symbol::Scopes(all)) if *kind == SliceKind::Constant => {
                        return self.slice_instances(&all, left, right);
                    }
                    _ => return Err(unsupported("this slice of an instance array", expr.span)),
                };
                self.slice(place, *kind, left, right, want).map(Resolved::Place)
            }
            _ => {
                let (width, signed) = self.size(expr)?;
                let bits = match want {
                    Want::Type => vec![Bit::X; width],
                    Want::Value => self.eval(expr, width, signed)?,
                };
                let ty = self.call_type(expr)?.unwrap_or_else(|| Type::vector(width, signed));
                Ok(Resolved::Place(Place { base: Base::Bits(Rc::new(bits)), steps: Vec::new(), ty }))
            }
        }
    }

    /// What stands before an index: a name may also be that of an instance array or generate loop further up.
    fn resolve_base(&mut self, base: &'a Expr, want: Want) -> Outcome<Resolved<'a>> {
        if let ExprKind::Name(name) = &base.kind
            && self.find(&name.name).is_none()
            && let Some(symbol) = self.find_upward(&name.name)
        {
            return self.resolve_symbol(symbol, name.span);
        }
        self.resolve(base, want)
    }

    pub fn resolve_symbol(&mut self, symbol: Symbol<'a>, span: Span) -> Outcome<Resolved<'a>> {
        Ok(match symbol {
            Symbol::Variable(id) if self.variable(id).storage == Storage::Package => {
                return Err(unsupported("net or variable declared outside of modules", span));
            }
            Symbol::Alias(expr, scope) => return self.in_scope(scope, |this| this.resolve(expr, Want::Value)),
            Symbol::Lazy(id) if self.is_variable(id) => {
                let id = self.shared_variable(id, span)?;
                let ty = Rc::clone(&self.variable(id).ty);
                Resolved::Place(Place { base: Base::Variable(id), steps: Vec::new(), ty })
            }
            Symbol::Variable(id) => {
                let ty = Rc::clone(&self.variable(id).ty);
                Resolved::Place(Place { base: Base::Variable(id), steps: Vec::new(), ty })
            }
            Symbol::Lazy(id) if !self.is_type(id) => Resolved::Place(match self.force_constant(id, span)? {
                Constant::Bits(value, ty) => {
                    let bits = super::bits::from_value(&value);
                    Place { base: Base::Bits(Rc::new(bits)), steps: Vec::new(), ty }
                }
                Constant::Real(real) => {
                    let value = super::value::Value::integer(real.round() as i64);
                    Place { base: Base::Real(real), steps: Vec::new(), ty: Type::vector(value.width(), true) }
                }
            }),
            Symbol::Scope(scope) => Resolved::Scope(scope),
            other => Resolved::Symbol(other),
        })
    }

    fn resolve_member(&mut self, base: Resolved<'a>, name: &'a Ident, want: Want) -> Outcome<Resolved<'a>> {
        match base {
            Resolved::Scope(scope) => match self.name_in(scope, &name.name) {
                Some(symbol) => self.resolve_symbol(symbol, name.span),
                None => {
                    let inside = self.scope(scope).name.clone();
                    Err(wrong(format!("there is no `{}` in `{inside}`", name.name), name.span))
                }
            },
            Resolved::Place(mut place) => {
                let ty = Rc::clone(&place.ty);
                if let Some(place) = self.method_without_arguments(&place, name, want)? {
                    return Ok(Resolved::Place(place));
                }
                let Shape::Struct { fields, .. } = &ty.shape else {
                    return Err(wrong(format!("`.{}` of something that is no structure", name.name), name.span));
                };
                let Some(field) = fields.iter().find(|field| field.name == name.name) else {
                    return Err(wrong(format!("the structure has no member `{}`", name.name), name.span));
                };
                place.ty = Rc::clone(&field.ty);
                place.select(field.offset as i64, field.ty.width);
                Ok(Resolved::Place(place))
            }
            Resolved::Symbol(Symbol::Simulation { .. }) => Ok(base),
            Resolved::Symbol(Symbol::Opaque) => {
                Err(wrong("a name inside a module that is missing or could not be elaborated", name.span))
            }
            Resolved::Symbol(_) => Err(wrong(format!("`.{}` of something that has no members", name.name), name.span)),
        }
    }

    /// A name inside an instance, block or interface. A modport names some things of its interface; types and constants
    /// it need not list.
    pub fn name_in(&self, scope: ScopeId, name: &str) -> Option<Symbol<'a>> {
        let inner = self.scope(scope);
        let around = inner.parent.filter(|_| inner.is_modport);
        inner.names.get(name).or_else(|| self.scope(around?).names.get(name)).cloned()
    }

    /// `lanes[2:1]`, with the indices of the slice.
    fn slice_instances(&mut self, all: &Instances<'a>, left: &'a Expr, right: &'a Expr) -> Outcome<Resolved<'a>> {
        let range = self.range(left, right)?;
        let mut part = Instances { ascending: range.ascending(), ..Instances::default() };
        for position in 0..range.len() {
            let index = range.index(position);
            let Some(symbol) = all.elements.get(&index) else {
                return Err(wrong(format!("there is no instance with index {index}"), left.span.to(right.span)));
            };
            part.elements.insert(index, symbol.clone());
        }
        Ok(Resolved::Symbol(Symbol::Scopes(Rc::new(part))))
    }

    fn resolve_index(&mut self, base: Resolved<'a>, index: &'a Expr, want: Want, span: Span) -> Outcome<Resolved<'a>> {
        match base {
            Resolved::Place(place) => self.index(place, index, want, span).map(Resolved::Place),
            Resolved::Symbol(Symbol::Scopes(scopes)) => {
                let number = self.constant_i64(index)?;
                match scopes.elements.get(&number).cloned() {
                    Some(symbol) => self.resolve_symbol(symbol, span),
                    None => Err(wrong(format!("there is no instance or block with index {number}"), span)),
                }
            }
            Resolved::Symbol(Symbol::Opaque | Symbol::Simulation { .. }) => Ok(base),
            _ => Err(wrong("an index into something that is no array", span)),
        }
    }

    fn index(&mut self, mut place: Place, index: &'a Expr, want: Want, span: Span) -> Outcome<Place> {
        let (Some(range), Some(element)) = (place.ty.range(), place.ty.element()) else {
            return Err(wrong("an index into something that is no array or vector", span));
        };
        let width = element.width;
        place.ty = element;
        if want == Want::Type {
            place.select(0, width);
            return Ok(place);
        }
        let (bits, signed) = self.eval_self(index)?;
        match super::bits::to_value(&bits, signed) {
            Some(value) => match value.to_i64() {
                Some(number) => place.select(range.position(number).saturating_mul(width as i64), width),
                None => place.select(i64::MAX, width),
            },
            None => place.steps.push(Step::Index { index: bits, signed, range, element: width }),
        }
        Ok(place)
    }

    fn slice(
        &mut self,
        mut place: Place,
        kind: SliceKind,
        left: &'a Expr,
        right: &'a Expr,
        want: Want,
    ) -> Outcome<Place> {
        let span = left.span.to(right.span);
        let (Some(range), Some(element)) = (place.ty.range(), place.ty.element()) else {
            return Err(wrong("a part select of something that is no array or vector", span));
        };
        let packed = !place.ty.unpacked_array();
        let width = element.width;
        if kind == SliceKind::Constant {
            let part = self.range(left, right)?;
            if part.left != part.right && part.ascending() != range.ascending() {
                return Err(wrong("a part select in the direction opposite to the declaration", span));
            }
            if part.len() > range.len().saturating_mul(2).max(1 << 16) {
                return Err(wrong("a part select far outside of the vector", span));
            }
            place.select(range.position(part.right).saturating_mul(width as i64), part.len() * width);
            place.ty = Type::array(part, element, packed);
            return Ok(place);
        }
        let count = self.constant_i64(right)?;
        if count < 1 || count as u64 > super::types::MAX_NET_WIDTH as u64 {
            return Err(wrong(format!("a part select of {count} elements"), right.span));
        }
        let count = count as usize;
        let part = Range { left: count as i64 - 1, right: 0 };
        place.ty = Type::array(part, Rc::clone(&element), packed);
        if want == Want::Type {
            place.select(0, count * width);
            return Ok(place);
        }
        let (bits, signed) = self.eval_self(left)?;
        let up = kind == SliceKind::Up;
        match super::bits::to_value(&bits, signed) {
            Some(value) => {
                let low = value.to_i64().map_or(i64::MAX, |number| lowest(range, number, count, up));
                place.select(low.saturating_mul(width as i64), count * width);
            }
            None => place.steps.push(Step::Part { index: bits, signed, range, element: width, count, up }),
        }
        Ok(place)
    }
}

/// The lowest position (from the right end) of a part of `count` elements that starts at `index`.
fn lowest(range: Range, index: i64, count: usize, up: bool) -> i64 {
    let position = range.position(index);
    // `up` counts indices, which run against the positions of an ascending range.
    if up == range.ascending() { position.saturating_sub(count as i64 - 1) } else { position }
}

/// The index at which such a part starts when its lowest position is `low`.
fn starting_index(range: Range, low: i64, count: usize, up: bool) -> i64 {
    let position = if up == range.ascending() { low + count as i64 - 1 } else { low };
    if range.left >= range.right { range.right + position } else { range.right - position }
}

impl Place {
    /// Adds a constant select.
    pub fn select(&mut self, low: i64, width: usize) {
        if let Some(Step::Fixed { low: before, width: outer }) = self.steps.last_mut()
            && low >= 0
            && low.saturating_add(width as i64) <= *outer as i64
        {
            *before = before.saturating_add(low);
            *outer = width;
            return;
        }
        self.steps.push(Step::Fixed { low, width });
    }
}

/// Reading.
impl<'a> Elaborator<'a> {
    pub fn read_place(&mut self, place: &Place, site: Site) -> Outcome<Vec<Bit>> {
        match &place.base {
            Base::Bits(bits) => Ok(self.read_steps(bits, &place.steps, site)),
            Base::Real(real) => Ok(super::bits::from_value(&super::value::Value::integer(real.round() as i64))),
            &Base::Variable(id) => {
                let variable = self.variable(id);
                let width = variable.ty.width;
                if variable.storage == Storage::Memory {
                    return self.read_memory(&place.steps, width, site);
                }
                match place.steps.as_slice() {
                    &[Step::Fixed { low, width: part }, ref rest @ ..]
                        if low >= 0 && low.saturating_add(part as i64) <= width as i64 =>
                    {
                        let bits = self.read_variable(id, low as usize, part, site);
                        Ok(if rest.is_empty() { bits } else { self.read_steps(&bits, rest, site) })
                    }
                    steps => {
                        let bits = self.read_variable(id, 0, width, site);
                        Ok(self.read_steps(&bits, steps, site))
                    }
                }
            }
        }
    }

    fn read_steps(&mut self, bits: &[Bit], steps: &[Step], site: Site) -> Vec<Bit> {
        let Some((step, rest)) = steps.split_first() else {
            return bits.to_vec();
        };
        match step {
            &Step::Fixed { low, width } => {
                let part: Vec<Bit> = (0..width as i64)
                    .map(|at| {
                        let index = usize::try_from(low.saturating_add(at)).ok();
                        index.and_then(|index| bits.get(index)).copied().unwrap_or(Bit::X)
                    })
                    .collect();
                self.read_steps(&part, rest, site)
            }
            Step::Index { index, signed, range, element } => {
                let mut columns: Vec<Vec<(Bit, Bit)>> = Vec::new();
                for position in 0..range.len() {
                    let matches = self.equal_number(index, *signed, range.index(position), site);
                    if matches == Bit::Zero {
                        continue;
                    }
                    let start = position * element;
                    let Some(part) = bits.get(start..start + element) else { continue };
                    let part = self.read_steps(part, rest, site);
                    columns.resize(part.len().max(columns.len()), Vec::new());
                    for (column, bit) in columns.iter_mut().zip(part) {
                        column.push((matches, bit));
                    }
                }
                if columns.is_empty() {
                    return vec![Bit::X; selected_width(rest).unwrap_or(*element)];
                }
                columns.into_iter().map(|column| self.choose_read(&column, site)).collect()
            }
            Step::Part { index, signed, range, element, count, up } => {
                let width = count * element;
                let mut columns: Vec<Vec<(Bit, Bit)>> = vec![Vec::new(); width];
                for low in 1 - *count as i64..range.len() as i64 {
                    let number = starting_index(*range, low, *count, *up);
                    let matches = self.equal_number(index, *signed, number, site);
                    if matches == Bit::Zero {
                        continue;
                    }
                    for (at, column) in columns.iter_mut().enumerate() {
                        let from = low * *element as i64 + at as i64;
                        if let Some(&bit) = usize::try_from(from).ok().and_then(|from| bits.get(from)) {
                            column.push((matches, bit));
                        }
                    }
                }
                let part: Vec<Bit> = columns.into_iter().map(|column| self.choose_read(&column, site)).collect();
                self.read_steps(&part, rest, site)
            }
        }
    }

    /// The AND-OR of a decoded index. What is undriven reads unknown here.
    fn choose_read(&mut self, column: &[(Bit, Bit)], site: Site) -> Bit {
        let plain: Vec<(Bit, Bit)> =
            column.iter().map(|&(matches, bit)| (matches, if bit == Bit::Z { Bit::X } else { bit })).collect();
        match plain.as_slice() {
            [] => Bit::X,
            terms => self.choose(terms, site),
        }
    }

    /// The read port of a memory that is too large to be laid out: fresh sources for the two values a bit can have, and
    /// an operator through which every address bit reaches it.
    fn read_memory(&mut self, steps: &[Step], width: usize, site: Site) -> Outcome<Vec<Bit>> {
        let address: Vec<Bit> = steps
            .iter()
            .flat_map(|step| match step {
                Step::Index { index, .. } | Step::Part { index, .. } => index.clone(),
                Step::Fixed { .. } => Vec::new(),
            })
            .collect();
        let count = selected_width(steps).unwrap_or(width);
        if count > MAX_MEMORY {
            let span = site.span.map(|span| unsupported("whole memory above 65,536 bits in an expression", span));
            return span.map_or(Ok(vec![Bit::X; count]), Err);
        }
        let operator = self.builder.operator("memory read", site.span);
        let address = self.nodes(&address, site);
        let entered: Vec<NodeId> = address.iter().map(|&bit| self.builder.op_in(operator, bit, site)).collect();
        let choice = self.builder.xor(&entered, site);
        let mut bits = Vec::with_capacity(count);
        for _ in 0..count {
            let one = self.builder.source(SourceKind::Memory, site);
            let other = self.builder.source(SourceKind::Memory, site);
            let data = self.builder.select(choice, one, other, site);
            bits.push(Bit::Node(self.builder.op_out(operator, data, site)));
        }
        Ok(bits)
    }
}

fn selected_width(steps: &[Step]) -> Option<usize> {
    steps.last().map(|step| match step {
        Step::Fixed { width, .. } => *width,
        Step::Index { element, .. } => *element,
        Step::Part { element, count, .. } => element * count,
    })
}

/// Assigning.
impl<'a> Elaborator<'a> {
    /// Puts `value`, as wide as the place, into `bits`, the whole of what the steps select from.
    pub fn write_steps(&mut self, bits: &mut [Bit], steps: &[Step], value: &[Bit], site: Site) {
        let Some((step, rest)) = steps.split_first() else {
            for (bit, &new) in bits.iter_mut().zip(value) {
                *bit = new;
            }
            return;
        };
        match step {
            &Step::Fixed { low, width } => {
                let inside = low >= 0 && low.saturating_add(width as i64) <= bits.len() as i64;
                if inside {
                    let low = low as usize;
                    return self.write_steps(&mut bits[low..low + width], rest, value, site);
                }
                // Partly outside: what lies outside is lost.
                let mut part: Vec<Bit> = (0..width as i64)
                    .map(|at| {
                        let index = usize::try_from(low.saturating_add(at)).ok();
                        index.and_then(|index| bits.get(index)).copied().unwrap_or(Bit::X)
                    })
                    .collect();
                self.write_steps(&mut part, rest, value, site);
                for (at, bit) in part.into_iter().enumerate() {
                    let index = usize::try_from(low.saturating_add(at as i64)).ok();
                    if let Some(old) = index.and_then(|index| bits.get_mut(index)) {
                        *old = bit;
                    }
                }
            }
            Step::Index { index, signed, range, element } => {
                for position in 0..range.len() {
                    let matches = self.equal_number(index, *signed, range.index(position), site);
                    let start = position * element;
                    if matches == Bit::Zero || start + element > bits.len() {
                        continue;
                    }
                    let mut part = bits[start..start + element].to_vec();
                    self.write_steps(&mut part, rest, value, site);
                    for (old, new) in bits[start..start + element].iter_mut().zip(part) {
                        if *old != new {
                            *old = self.select(matches, new, *old, site);
                        }
                    }
                }
            }
            Step::Part { index, signed, range, element, count, up } => {
                let old = bits.to_vec();
                let mut terms: Vec<Vec<(Bit, Bit)>> = vec![Vec::new(); bits.len()];
                for low in 1 - *count as i64..range.len() as i64 {
                    let number = starting_index(*range, low, *count, *up);
                    let matches = self.equal_number(index, *signed, number, site);
                    if matches == Bit::Zero {
                        continue;
                    }
                    let start = low * *element as i64;
                    let width = count * element;
                    let mut part: Vec<Bit> = (0..width as i64)
                        .map(|at| usize::try_from(start + at).ok().and_then(|at| old.get(at)).copied())
                        .map(|bit| bit.unwrap_or(Bit::X))
                        .collect();
                    self.write_steps(&mut part, rest, value, site);
                    for (at, bit) in part.into_iter().enumerate() {
                        if let Some(terms) = usize::try_from(start + at as i64).ok().and_then(|at| terms.get_mut(at)) {
                            terms.push((matches, bit));
                        }
                    }
                }
                for ((bit, mut terms), old) in bits.iter_mut().zip(terms).zip(old) {
                    if terms.is_empty() {
                        continue;
                    }
                    let matches: Vec<Bit> = terms.iter().map(|&(matches, _)| matches).collect();
                    let any = self.or(&matches, site);
                    let none = self.not(any, site);
                    if none != Bit::Zero {
                        terms.push((none, old));
                    }
                    *bit = self.choose(&terms, site);
                }
            }
        }
    }

    /// The wires of a place whose selects are all constant; `None` for a bit outside.
    pub fn wires(&mut self, place: &Place, span: Span) -> Outcome<(VariableId, Vec<Option<NodeId>>)> {
        let &Base::Variable(id) = &place.base else {
            return Err(wrong("a constant cannot be driven", span));
        };
        let variable = self.variable(id);
        if matches!(variable.storage, Storage::Local) {
            return Err(wrong("a local variable cannot be driven from here", span));
        }
        let mut offsets: Vec<Option<usize>> = (0..variable.ty.width).map(Some).collect();
        for step in &place.steps {
            let &Step::Fixed { low, width } = step else {
                return Err(unsupported("variable index on the left of a continuous assignment", span));
            };
            offsets = (0..width as i64)
                .map(|at| usize::try_from(low.saturating_add(at)).ok())
                .map(|at| at.and_then(|at| offsets.get(at)).copied().flatten())
                .collect();
        }
        Ok((id, offsets.into_iter().map(|at| at.and_then(|at| variable.wires.get(at)).copied()).collect()))
    }
}
