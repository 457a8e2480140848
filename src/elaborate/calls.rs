//! Calls: functions and tasks are executed where they are called, with their arguments as variables of their own.
//! System functions that synthesis knows are computed; the rest is not supported.

use std::rc::Rc;

use super::bits::{self, Bit, extend};
use super::blast;
use super::context::{Elaborator, Outcome, Storage, unsupported, wrong};
use super::place::{Place, Resolved, Want};
use super::scope::{ScopeId, Symbol};
use super::statement::Point;
use super::types::{Shape, Type};
use super::value::Value;
use crate::source::Span;
use crate::syntax::ast::{CallArg, DataTypeKind, Direction, Expr, ExprKind, Function, Ident, Item, ItemKind};

/// How deep functions may call each other.
const CALL_DEPTH: usize = 512;

/// The types of a function, worked out once.
#[derive(Debug)]
pub(super) struct Frame {
    pub args: Vec<Rc<Type>>,
    /// `None` for a task or void function.
    pub result: Option<Rc<Type>>,
}

/// What a call names.
enum Callee<'a> {
    Function(&'a Function, ScopeId),
    Let(&'a Item, ScopeId),
    EnumMethod(Vec<Bit>, Rc<Type>, &'a str),
    ArrayMethod(Place, &'a Ident),
}

impl<'a> Elaborator<'a> {
    fn callee(&mut self, callee: &'a Expr, want: Want) -> Outcome<Callee<'a>> {
        if let ExprKind::Member(base, method) = &callee.kind
            && let Ok(Resolved::Place(place)) = self.resolve(base, want)
            && matches!(place.ty.shape, Shape::Enum { .. } | Shape::Array { .. })
        {
            if matches!(place.ty.shape, Shape::Array { .. }) {
                return Ok(Callee::ArrayMethod(place, method));
            }
            let site = self.site(base.span);
            let value = match want {
                Want::Value => self.read_place(&place, site)?,
                Want::Type => Vec::new(),
            };
            return Ok(Callee::EnumMethod(value, place.ty, &method.name));
        }
        // Inside a function its name is also that of its result, but only the function can be called.
        if let ExprKind::Name(name) = &callee.kind
            && let Some((function, scope)) = self.find_function(&name.name)
        {
            return Ok(Callee::Function(function, scope));
        }
        match self.resolve(callee, want)? {
            Resolved::Symbol(Symbol::Function(function, scope)) => Ok(Callee::Function(function, scope)),
            Resolved::Symbol(Symbol::Let(item, scope)) => Ok(Callee::Let(item, scope)),
            Resolved::Symbol(Symbol::Simulation { what, .. }) => {
                Err(unsupported(format!("value of a {what} in logic"), callee.span))
            }
            _ => Err(wrong("a call of something that is no function or task", callee.span)),
        }
    }

    fn frame(&mut self, function: &'a Function, scope: ScopeId) -> Outcome<Rc<Frame>> {
        let key = (std::ptr::from_ref(function), scope);
        if let Some(frame) = self.functions.get(&key) {
            return Ok(Rc::clone(frame));
        }
        let frame = self.in_scope(scope, |this| -> Outcome<Frame> {
            let mut args = Vec::with_capacity(function.args.len());
            for arg in &function.args {
                args.push(this.declared_type(&arg.ty, &arg.dims, arg.name.span)?);
            }
            let result = match function.ret.kind {
                DataTypeKind::Void => None,
                _ => Some(this.data_type(&function.ret)?),
            };
            Ok(Frame { args, result })
        })?;
        let frame = Rc::new(frame);
        self.functions.insert(key, Rc::clone(&frame));
        Ok(frame)
    }

    pub fn call_size(&mut self, callee: &'a Expr, args: &'a [CallArg], span: Span) -> Outcome<(usize, bool)> {
        match self.callee(callee, Want::Type)? {
            Callee::Function(function, scope) => match &self.frame(function, scope)?.result {
                Some(ty) => Ok((ty.width, ty.signed)),
                None => Err(wrong(format!("`{}` gives no value", function.name.name), span)),
            },
            Callee::Let(item, scope) => {
                let (bits, signed) = self.expand_let(item, scope, args, span)?;
                Ok((bits.len(), signed))
            }
            Callee::EnumMethod(_, ty, method) => {
                let ty = self.enum_method_type(&ty, method);
                Ok((ty.width, ty.signed))
            }
            Callee::ArrayMethod(place, method) => {
                let (_, ty) = self.reduce(&place, method, Want::Type)?;
                Ok((ty.width, ty.signed))
            }
        }
    }

    /// The type of a call or cast whose result has members.
    pub fn call_type(&mut self, expr: &'a Expr) -> Outcome<Option<Rc<Type>>> {
        match &expr.kind {
            ExprKind::Call { callee, .. } => match self.callee(callee, Want::Type)? {
                Callee::Function(function, scope) => Ok(self.frame(function, scope)?.result.clone()),
                _ => Ok(None),
            },
            ExprKind::Cast(crate::syntax::ast::CastKind::Type(ty), _) | ExprKind::Pattern { ty: Some(ty), .. } => {
                self.data_type(ty).map(Some)
            }
            ExprKind::Cast(crate::syntax::ast::CastKind::Size(ty), _) => self.named_type(ty),
            _ => Ok(None),
        }
    }

    pub fn call(&mut self, callee: &'a Expr, args: &'a [CallArg], span: Span) -> Outcome<Vec<Bit>> {
        match self.callee(callee, Want::Value)? {
            Callee::Function(function, scope) => self.call_function(function, scope, args, span),
            Callee::Let(item, scope) => self.expand_let(item, scope, args, span).map(|(bits, _)| bits),
            Callee::ArrayMethod(place, method) => self.reduce(&place, method, Want::Value).map(|(bits, _)| bits),
            Callee::EnumMethod(value, ty, method) => self.enum_method(&value, &ty, method, args, span),
        }
    }

    fn call_function(
        &mut self,
        function: &'a Function,
        scope: ScopeId,
        args: &'a [CallArg],
        span: Span,
    ) -> Outcome<Vec<Bit>> {
        if self.call_depth >= CALL_DEPTH {
            return Err(wrong(format!("calls nested more than {CALL_DEPTH} deep"), span));
        }
        self.step(span)?;
        let frame = self.frame(function, scope)?;
        let actuals = self.actuals(function, args, span)?;
        // Arguments are worked out by the caller before anything of the function exists.
        let mut values = Vec::with_capacity(actuals.len());
        let mut outputs = Vec::new();
        for (index, (arg, actual)) in function.args.iter().zip(&actuals).enumerate() {
            let ty = &frame.args[index];
            let needs_value = matches!(arg.direction, Direction::Input | Direction::Inout | Direction::Ref);
            values.push(match actual {
                Some(actual) if needs_value => self.eval_as(actual, ty)?,
                None if needs_value => match &arg.default {
                    Some(default) => self.in_scope(scope, |this| this.eval_as(default, ty))?,
                    None => return Err(wrong(format!("argument `{}` is missing", arg.name.name), span)),
                },
                _ => vec![if ty.two_state { Bit::Zero } else { Bit::X }; ty.width],
            });
            if arg.direction != Direction::Input
                && let Some(actual) = actual
            {
                outputs.push((index, self.targets(actual)?));
            }
        }
        let prefix = self.scope(scope).prefix.clone();
        let inner = self.inner_scope(scope, &function.name.name, self.instance, prefix);
        let mut locals = Vec::new();
        for ((arg, value), ty) in function.args.iter().zip(values).zip(&frame.args) {
            let local = self.add_local(&arg.name.name, Rc::clone(ty), arg.name.span, Storage::Local);
            self.declare(inner, &arg.name.name, Symbol::Variable(local));
            self.environment.set((local, false), value);
            locals.push(local);
        }
        let result = frame.result.as_ref().map(|ty| {
            let local = self.add_local(&function.name.name, Rc::clone(ty), function.name.span, Storage::Local);
            self.declare(inner, &function.name.name, Symbol::Variable(local));
            local
        });
        self.call_depth += 1;
        self.results.push(result);
        self.points.push(Point::Call(function.name.name.clone()));
        let depth = self.points.len() - 1;
        let outcome = self.in_scope(inner, |this| {
            this.declare_all(inner, &function.locals, Storage::Local)?;
            this.initialise_locals(inner, &function.locals)?;
            this.execute_all(&function.body)
        });
        self.points.truncate(depth);
        self.results.pop();
        self.call_depth -= 1;
        outcome?;
        let site = self.site(span);
        let value = match result {
            Some(local) => {
                let width = self.variable(local).ty.width;
                self.read_variable(local, 0, width, site)
            }
            None => Vec::new(),
        };
        for (index, targets) in outputs {
            let width = frame.args[index].width;
            let bits = self.read_variable(locals[index], 0, width, site);
            let total: usize = targets.iter().map(|place| place.ty.width).sum();
            let bits = extend(bits, total, frame.args[index].signed);
            self.store(&targets, &bits, false, site)?;
        }
        let declared: Vec<_> = self
            .scope(inner)
            .names
            .values()
            .filter_map(|symbol| if let Symbol::Variable(id) = symbol { Some(*id) } else { None })
            .collect();
        for local in declared {
            self.environment.forget(local);
        }
        Ok(value)
    }

    /// The actual argument for each formal one.
    fn actuals(&mut self, function: &'a Function, args: &'a [CallArg], span: Span) -> Outcome<Vec<Option<&'a Expr>>> {
        let mut actuals: Vec<Option<&'a Expr>> = vec![None; function.args.len()];
        for (index, arg) in args.iter().enumerate() {
            let place = match &arg.name {
                Some(name) => function.args.iter().position(|formal| formal.name.name == name.name),
                None => Some(index),
            };
            match place.and_then(|place| actuals.get_mut(place)) {
                Some(Some(_)) => {
                    return Err(wrong(format!("an argument of `{}` that is given twice", function.name.name), span));
                }
                Some(actual) => *actual = arg.value.as_ref(),
                None if arg.value.is_none() => {}
                None => {
                    return Err(wrong(format!("an argument that `{}` does not have", function.name.name), span));
                }
            }
        }
        Ok(actuals)
    }

    fn expand_let(
        &mut self,
        item: &'a Item,
        scope: ScopeId,
        args: &'a [CallArg],
        span: Span,
    ) -> Outcome<(Vec<Bit>, bool)> {
        let ItemKind::Let { name, args: formals, body } = &item.kind else {
            return Err(wrong("a call of something that is no function", span));
        };
        let inner = self.inner_scope(scope, &name.name, self.instance, String::new());
        for (index, (formal, default)) in formals.iter().enumerate() {
            let named = args.iter().find(|arg| arg.name.as_ref().is_some_and(|name| name.name == formal.name));
            let actual = named.or_else(|| args.get(index).filter(|arg| arg.name.is_none()));
            let (bits, signed) = match (actual.and_then(|arg| arg.value.as_ref()), default) {
                (Some(actual), _) => self.eval_self(actual)?,
                (None, Some(default)) => self.in_scope(scope, |this| this.eval_self(default))?,
                (None, None) => return Err(wrong(format!("argument `{}` is missing", formal.name), span)),
            };
            let local =
                self.add_local(&formal.name, Type::vector(bits.len().max(1), signed), formal.span, Storage::Local);
            self.declare(inner, &formal.name, Symbol::Variable(local));
            self.environment.set((local, false), bits);
        }
        self.in_scope(inner, |this| this.eval_self(body))
    }

    pub fn enum_method(
        &mut self,
        value: &[Bit],
        ty: &Rc<Type>,
        method: &str,
        args: &'a [CallArg],
        span: Span,
    ) -> Outcome<Vec<Bit>> {
        let Shape::Enum { members, .. } = &ty.shape else {
            return Err(wrong("a method of something that is no enumeration", span));
        };
        let count = members.len();
        let step = match args.first().and_then(|arg| arg.value.as_ref()) {
            Some(step) => usize::try_from(self.constant_i64(step)?).unwrap_or(0) % count,
            None => 1,
        };
        let shift = match method {
            "first" => return Ok(bits::from_value(&members[0].1)),
            "last" => return Ok(bits::from_value(&members[count - 1].1)),
            "num" => return Ok(bits::from_value(&Value::integer(count as i64))),
            "next" => step,
            "prev" => count - step,
            _ => return Err(unsupported(format!("method `{method}` of an enumeration"), span)),
        };
        let site = self.site(span);
        let mut terms: Vec<(Bit, Vec<Bit>)> = Vec::new();
        for index in 0..count {
            let label = bits::from_value(&members[index].1);
            let matches = self.equal(value, &label, site);
            terms.push((matches, bits::from_value(&members[(index + shift) % count].1)));
        }
        Ok((0..ty.width)
            .map(|at| {
                let column: Vec<(Bit, Bit)> = terms.iter().map(|(matches, bits)| (*matches, bits[at])).collect();
                self.choose(&column, site)
            })
            .collect())
    }
}

/// System functions.
impl<'a> Elaborator<'a> {
    fn argument(&self, args: &'a [Option<Expr>], name: &str, span: Span) -> Outcome<&'a Expr> {
        args.first().and_then(Option::as_ref).ok_or_else(|| wrong(format!("`{name}` without an argument"), span))
    }

    pub fn system_call_size(&mut self, name: &str, args: &'a [Option<Expr>], span: Span) -> Outcome<(usize, bool)> {
        Ok(match name {
            "$signed" | "$unsigned" => (self.size(self.argument(args, name, span)?)?.0, name == "$signed"),
            "$onehot" | "$onehot0" | "$isunknown" => (1, false),
            "$clog2"
            | "$bits"
            | "$size"
            | "$left"
            | "$right"
            | "$high"
            | "$low"
            | "$increment"
            | "$dimensions"
            | "$unpacked_dimensions"
            | "$countones"
            | "$countbits"
            | "$rtoi"
            | "$ceil"
            | "$floor"
            | "$itor"
            | "$sqrt"
            | "$ln"
            | "$log10"
            | "$exp" => (32, true),
            "$cast" => (32, true),
            _ => return Err(unsupported(format!("system function {name}"), span)),
        })
    }

    pub fn system_call(&mut self, name: &str, args: &'a [Option<Expr>], span: Span) -> Outcome<Vec<Bit>> {
        let arg = self.argument(args, name, span)?;
        let site = self.site(span);
        let number = match name {
            "$signed" | "$unsigned" => return Ok(self.eval_self(arg)?.0),
            "$clog2" => {
                let value = match self.constant(arg)? {
                    super::scope::Constant::Bits(value, _) => value,
                    super::scope::Constant::Real(real) => Rc::new(Value::integer(real.ceil() as i64)),
                };
                match value.clog2() {
                    Some(log) => log as i64,
                    None => return Err(wrong("$clog2 of an unknown value", span)),
                }
            }
            "$bits" => match self.named_type(arg)? {
                Some(ty) => ty.width as i64,
                None => self.size(arg)?.0 as i64,
            },
            "$size" | "$left" | "$right" | "$high" | "$low" | "$increment" | "$dimensions" | "$unpacked_dimensions" => {
                self.array_query(name, arg, args.get(1).and_then(Option::as_ref), span)?
            }
            "$rtoi" | "$ceil" | "$floor" | "$itor" | "$sqrt" | "$ln" | "$log10" | "$exp" => {
                let real = if name == "$rtoi" { self.real(arg)? } else { None };
                match real {
                    Some(real) => real.trunc() as i64,
                    None => return Err(unsupported(format!("{name} of this argument"), span)),
                }
            }
            "$countones" => {
                let (bits, _) = self.eval_self(arg)?;
                let nodes = self.nodes(&bits, site);
                let count = blast::count_ones(&mut self.builder, &nodes, site);
                return Ok(extend(self.lift_all(&count), 32, false));
            }
            "$countbits" => {
                let (bits, _) = self.eval_self(arg)?;
                let mut counted = [false; 2];
                for control in args.iter().skip(1).flatten() {
                    // Signals are never x or z, so counting these adds nothing.
                    match self.eval_self(control)?.0.first() {
                        Some(Bit::Zero) => counted[0] = true,
                        Some(Bit::One) => counted[1] = true,
                        Some(Bit::X | Bit::Z) => {}
                        _ => return Err(unsupported("$countbits of a value that is not constant", control.span)),
                    }
                }
                let mut hits = Vec::with_capacity(bits.len());
                for bit in bits {
                    hits.push(match counted {
                        [true, true] => Bit::One,
                        [false, true] => bit,
                        [true, false] => self.not(bit, site),
                        [false, false] => Bit::Zero,
                    });
                }
                let nodes = self.nodes(&hits, site);
                let count = blast::count_ones(&mut self.builder, &nodes, site);
                return Ok(extend(self.lift_all(&count), 32, false));
            }
            "$onehot" | "$onehot0" => {
                let (bits, _) = self.eval_self(arg)?;
                let inverted: Vec<Bit> = bits.iter().map(|&bit| self.not(bit, site)).collect();
                let mut terms = Vec::new();
                for at in 0..bits.len() {
                    let mut product = inverted.clone();
                    product[at] = bits[at];
                    terms.push(self.and(&product, site));
                }
                if name == "$onehot0" {
                    terms.push(self.and(&inverted, site));
                }
                return Ok(vec![self.or(&terms, site)]);
            }
            "$isunknown" => {
                let (bits, _) = self.eval_self(arg)?;
                let unknown = bits.iter().any(|bit| matches!(bit, Bit::X | Bit::Z));
                return Ok(vec![unknown.into()]);
            }
            _ => return Err(unsupported(format!("system function {name}"), span)),
        };
        Ok(bits::from_value(&Value::from_i64(number, 32, true)))
    }

    fn array_query(&mut self, name: &str, arg: &'a Expr, dimension: Option<&'a Expr>, span: Span) -> Outcome<i64> {
        let mut ty = match self.named_type(arg)? {
            Some(ty) => ty,
            None => self.type_of(arg)?,
        };
        if name.ends_with("dimensions") {
            let mut count = 0;
            while let Shape::Array { element, packed, .. } = &ty.shape {
                if name == "$unpacked_dimensions" && *packed {
                    break;
                }
                count += 1;
                ty = Rc::clone(element);
            }
            return Ok(count);
        }
        let dimension = match dimension {
            Some(dimension) => self.constant_i64(dimension)?,
            None => 1,
        };
        for _ in 1..dimension {
            ty = ty.element().ok_or_else(|| wrong("a dimension that the array does not have", span))?;
        }
        let range = ty.range().unwrap_or(super::types::Range { left: 0, right: 0 });
        Ok(match name {
            "$size" => range.len() as i64,
            "$left" => range.left,
            "$right" => range.right,
            "$high" => range.left.max(range.right),
            "$low" => range.left.min(range.right),
            _ => {
                if range.ascending() {
                    -1
                } else {
                    1
                }
            }
        })
    }
}
