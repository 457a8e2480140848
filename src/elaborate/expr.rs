//! Expressions: width and sign by the rules of IEEE 1364-2005 clause 5.4 and 5.5, and their bits as literal constants and
//! gates exactly as written. An operand in a context-determined place is extended to the width of the context before
//! the operator works on it; comparisons, concatenations, conditions, shift amounts and indices are contexts of
//! their own. Long chains of one operator are walked in a loop, because generated code has chains of many thousands.

use super::bits::{self, Bit, extend};
use super::blast;
use super::context::{Elaborator, Outcome, unsupported, wrong};
use super::place::{Resolved, Want};
use super::statement::has_step;
use super::value::{Logic, MAX_WIDTH, Value};
use crate::graph::{GateKind, Site};
use crate::source::Span;
use crate::syntax::ast::{BinaryOp, CastKind, Expr, ExprKind, UnaryOp};

/// How the operands of a binary operator get their width.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Class {
    /// Both operands have the width of the context.
    Context,
    /// The left operand has the width of the context, the right one its own.
    Shift,
    /// The operands make a context of their own; one bit comes out.
    Comparison,
    /// Each operand is a condition; one bit comes out.
    Logical,
}

fn class(op: BinaryOp) -> Class {
    use BinaryOp::*;
    match op {
        Add | Sub | Mul | Div | Mod | And | Or | Xor | Xnor => Class::Context,
        Pow | Shr | Shl | ArithShr | ArithShl => Class::Shift,
        Eq | Ne | CaseEq | CaseNe | WildEq | WildNe | Lt | Le | Gt | Ge => Class::Comparison,
        LogicalAnd | LogicalOr | Implies | Equivalent => Class::Logical,
    }
}

impl<'a> Elaborator<'a> {
    /// Self-determined width and sign.
    pub fn size(&mut self, expr: &'a Expr) -> Outcome<(usize, bool)> {
        let (width, signed) = self.size_unchecked(expr)?;
        if width > MAX_WIDTH {
            return Err(wrong(format!("an expression of {width} bits, above the limit of {MAX_WIDTH}"), expr.span));
        }
        Ok((width, signed))
    }

    fn size_unchecked(&mut self, expr: &'a Expr) -> Outcome<(usize, bool)> {
        Ok(match &expr.kind {
            ExprKind::Number(literal) => match Value::from_literal(literal) {
                Some(value) => (value.width(), value.signed),
                None => return Err(wrong("a literal that is too wide", expr.span)),
            },
            ExprKind::Fill(_) => (1, false),
            ExprKind::Real(_) | ExprKind::TimeLiteral(_) => (32, true),
            ExprKind::String(text) => (8 * text.len().max(1), false),
            ExprKind::Name(_)
            | ExprKind::Scoped { .. }
            | ExprKind::Member(..)
            | ExprKind::Index(..)
            | ExprKind::Slice { .. } => {
                let ty = self.type_of(expr)?;
                (ty.width, ty.signed)
            }
            ExprKind::Unary(op, operand) => match op {
                UnaryOp::Plus | UnaryOp::Minus | UnaryOp::Not => self.size(operand)?,
                _ => (1, false),
            },
            ExprKind::Binary(..) => return self.size_of_chain(expr),
            ExprKind::Cond(_, then, otherwise) => {
                let (a, b) = (self.size(then)?, self.size(otherwise)?);
                (a.0.max(b.0), a.1 && b.1)
            }
            ExprKind::Concat(parts) => (self.total_width(parts)?, false),
            ExprKind::Replicate(count, parts) => {
                let count = self.replication(count)?;
                (self.total_width(parts)?.saturating_mul(count), false)
            }
            ExprKind::Stream { parts, .. } => (self.total_width(parts)?, false),
            ExprKind::Pattern { ty: Some(ty), .. } => {
                let ty = self.data_type(ty)?;
                (ty.width, ty.signed)
            }
            ExprKind::Pattern { ty: None, .. } => {
                return Err(unsupported("assignment pattern whose type does not follow from its context", expr.span));
            }
            ExprKind::Call { callee, args } => self.call_size(callee, args, expr.span)?,
            ExprKind::SystemCall { name, args } => self.system_call_size(name, args, expr.span)?,
            ExprKind::Cast(kind, operand) => match self.cast_type(kind)? {
                CastTo::Type(ty) => (ty.width, ty.signed),
                CastTo::Width(width) => (width, self.size(operand)?.1),
                CastTo::Sign(signed) => (self.size(operand)?.0, signed),
                CastTo::Same => self.size(operand)?,
            },
            ExprKind::Inside(..) => (1, false),
            ExprKind::MinTypMax(_, typical, _) => self.size(typical)?,
            ExprKind::Reduce { array, method, iterator, with } => {
                let (bits, signed) = self.reduce_with(array, method, iterator.as_ref(), with, Want::Type)?;
                (bits.len(), signed)
            }
            ExprKind::Assign(assignment) | ExprKind::Postfix(assignment) => {
                let ty = self.type_of(&assignment.target)?;
                (ty.width, ty.signed)
            }
            ExprKind::Range(..) => return Err(wrong("a range where a value is needed", expr.span)),
            ExprKind::Type(_) => return Err(wrong("a type where a value is needed", expr.span)),
            ExprKind::Unsupported(what) => return Err(unsupported(what, expr.span)),
        })
    }

    fn size_of_chain(&mut self, expr: &'a Expr) -> Outcome<(usize, bool)> {
        let (mut width, mut signed) = (0, true);
        let mut at = expr;
        while let ExprKind::Binary(op, left, right) = &at.kind {
            match class(*op) {
                Class::Context => {
                    let (right_width, right_signed) = self.size(right)?;
                    width = width.max(right_width);
                    signed &= right_signed;
                }
                Class::Shift => {}
                Class::Comparison | Class::Logical => return Ok((width.max(1), false)),
            }
            at = left;
        }
        let (left_width, left_signed) = self.size(at)?;
        Ok((width.max(left_width), signed && left_signed))
    }

    fn total_width(&mut self, parts: &'a [Expr]) -> Outcome<usize> {
        let mut width = 0usize;
        for part in parts {
            width = width.saturating_add(self.size(part)?.0);
        }
        Ok(width)
    }

    fn replication(&mut self, count: &'a Expr) -> Outcome<usize> {
        let number = self.constant_i64(count)?;
        usize::try_from(number)
            .ok()
            .filter(|&number| number <= MAX_WIDTH)
            .ok_or_else(|| wrong(format!("a replication {number} times"), count.span))
    }

    /// The bits at the expression's own width, and its sign.
    pub fn eval_self(&mut self, expr: &'a Expr) -> Outcome<(Vec<Bit>, bool)> {
        let (width, signed) = self.size(expr)?;
        Ok((self.eval(expr, width, signed)?, signed))
    }

    /// The value as a condition.
    pub fn eval_condition(&mut self, expr: &'a Expr) -> Outcome<Bit> {
        let (bits, _) = self.eval_self(expr)?;
        let site = self.site(expr.span);
        Ok(self.truth(&bits, site))
    }

    /// The bits in a context of `width` bits whose sign is `signed`.
    pub fn eval(&mut self, expr: &'a Expr, width: usize, signed: bool) -> Outcome<Vec<Bit>> {
        self.afford(width, width, expr.span)?;
        let site = self.site(expr.span);
        let own = match &expr.kind {
            ExprKind::Number(literal) => match Value::from_literal_in(literal, width) {
                Some(value) => bits::from_value(&value),
                None => return Err(wrong("a literal that is too wide", expr.span)),
            },
            ExprKind::Fill(digit) => return Ok(vec![Logic::from_char(*digit).into(); width]),
            ExprKind::Real(real) | ExprKind::TimeLiteral(real) => {
                bits::from_value(&Value::integer(real.round() as i64))
            }
            ExprKind::String(text) => bits::from_value(&Value::from_text(text)),
            ExprKind::Name(_)
            | ExprKind::Scoped { .. }
            | ExprKind::Member(..)
            | ExprKind::Index(..)
            | ExprKind::Slice { .. } => {
                let place = self.place(expr, Want::Value)?;
                self.read_place(&place, site)?
            }
            ExprKind::Unary(op, operand) => return self.eval_unary(*op, operand, width, signed, site),
            ExprKind::Binary(..) => return self.eval_chain(expr, width, signed),
            ExprKind::Cond(condition, then, otherwise) => {
                let condition = self.eval_condition(condition)?;
                return match condition {
                    Bit::One => self.eval(then, width, signed),
                    Bit::Zero => self.eval(otherwise, width, signed),
                    _ => {
                        let a = self.eval(then, width, signed)?;
                        let b = self.eval(otherwise, width, signed)?;
                        Ok(a.iter().zip(&b).map(|(&a, &b)| self.select(condition, a, b, site)).collect())
                    }
                };
            }
            ExprKind::Concat(parts) => self.eval_concat(parts)?,
            ExprKind::Replicate(count, parts) => {
                let count = self.replication(count)?;
                let once = self.eval_concat(parts)?;
                if once.len().saturating_mul(count) > MAX_WIDTH {
                    return Err(wrong("a replication that is too wide", expr.span));
                }
                once.repeat(count)
            }
            ExprKind::Stream { left, slice, parts } => self.eval_stream(*left, slice.as_deref(), parts, expr.span)?,
            ExprKind::Pattern { ty: Some(ty), items } => {
                let ty = self.data_type(ty)?;
                self.eval_pattern(&ty, items, expr.span)?
            }
            ExprKind::Pattern { ty: None, .. } => {
                return Err(unsupported("assignment pattern whose type does not follow from its context", expr.span));
            }
            ExprKind::Call { callee, args } => self.call(callee, args, expr.span)?,
            ExprKind::SystemCall { name, args } => self.system_call(name, args, expr.span)?,
            ExprKind::Cast(kind, operand) => self.eval_cast(kind, operand)?,
            ExprKind::Inside(value, ranges) => {
                let inside = self.eval_inside(value, ranges, site)?;
                return Ok(extend(vec![inside], width, false));
            }
            ExprKind::MinTypMax(_, typical, _) => return self.eval(typical, width, signed),
            ExprKind::Reduce { array, method, iterator, with } => {
                self.reduce_with(array, method, iterator.as_ref(), with, Want::Value)?.0
            }
            ExprKind::Assign(assignment) | ExprKind::Postfix(assignment) if has_step(&assignment.target) => {
                let what = "assignment or increment in an index of what an expression assigns";
                return Err(unsupported(what, assignment.target.span));
            }
            ExprKind::Postfix(assignment) => {
                let place = self.place(&assignment.target, Want::Value)?;
                let before = self.read_place(&place, site)?;
                self.assign(assignment)?;
                before
            }
            ExprKind::Assign(assignment) => {
                self.assign(assignment)?;
                let place = self.place(&assignment.target, Want::Value)?;
                self.read_place(&place, site)?
            }
            ExprKind::Range(..) => return Err(wrong("a range where a value is needed", expr.span)),
            ExprKind::Type(_) => return Err(wrong("a type where a value is needed", expr.span)),
            ExprKind::Unsupported(what) => return Err(unsupported(what, expr.span)),
        };
        Ok(extend(own, width, signed))
    }

    fn eval_concat(&mut self, parts: &'a [Expr]) -> Outcome<Vec<Bit>> {
        let mut bits = Vec::new();
        for part in parts.iter().rev() {
            bits.extend(self.eval_self(part)?.0);
        }
        Ok(bits)
    }

    fn eval_unary(
        &mut self,
        op: UnaryOp,
        operand: &'a Expr,
        width: usize,
        signed: bool,
        site: Site,
    ) -> Outcome<Vec<Bit>> {
        let reduction = match op {
            UnaryOp::Plus => return self.eval(operand, width, signed),
            UnaryOp::Minus => {
                let bits = self.eval(operand, width, signed)?;
                return Ok(match bits::to_value(&bits, signed) {
                    Some(value) => bits::from_value(&Value::unary(op, &value)),
                    None => {
                        let nodes = self.nodes(&bits, site);
                        let result = blast::neg(&mut self.builder, &nodes, site);
                        self.lift_all(&result)
                    }
                });
            }
            UnaryOp::Not => {
                let bits = self.eval(operand, width, signed)?;
                return Ok(bits.into_iter().map(|bit| self.not(bit, site)).collect());
            }
            UnaryOp::LogicalNot => {
                let condition = self.eval_condition(operand)?;
                let result = self.not(condition, site);
                return Ok(extend(vec![result], width, false));
            }
            UnaryOp::ReduceAnd => GateKind::And,
            UnaryOp::ReduceNand => GateKind::Nand,
            UnaryOp::ReduceOr => GateKind::Or,
            UnaryOp::ReduceNor => GateKind::Nor,
            UnaryOp::ReduceXor => GateKind::Xor,
            UnaryOp::ReduceXnor => GateKind::Xnor,
        };
        let (bits, _) = self.eval_self(operand)?;
        let result = self.gate(reduction, &bits, site);
        Ok(extend(vec![result], width, false))
    }

    /// A binary operator and the chain of operators down its left side.
    fn eval_chain(&mut self, expr: &'a Expr, width: usize, signed: bool) -> Outcome<Vec<Bit>> {
        let mut links: Vec<(BinaryOp, &'a Expr, Span)> = Vec::new();
        let mut at = expr;
        while let ExprKind::Binary(op, left, right) = &at.kind {
            if !matches!(class(*op), Class::Context | Class::Shift) {
                break;
            }
            links.push((*op, right, at.span));
            at = left;
        }
        let mut result = match &at.kind {
            ExprKind::Binary(op, left, right) if class(*op) == Class::Comparison => {
                let bit = self.eval_comparison(*op, left, right, self.site(at.span))?;
                extend(vec![bit], width, false)
            }
            ExprKind::Binary(..) => {
                let bit = self.eval_logical(at)?;
                extend(vec![bit], width, false)
            }
            _ => self.eval(at, width, signed)?,
        };
        for (op, right, span) in links.into_iter().rev() {
            let site = self.site(span);
            let (operand, right_signed) = match class(op) {
                Class::Shift => self.eval_self(right)?,
                _ => (self.eval(right, width, signed)?, signed),
            };
            result = self.operate(op, &result, &operand, signed, right_signed, site)?;
        }
        Ok(result)
    }

    /// An operator on operands that have their width already.
    pub fn operate(
        &mut self,
        op: BinaryOp,
        a: &[Bit],
        b: &[Bit],
        signed: bool,
        right_signed: bool,
        site: Site,
    ) -> Outcome<Vec<Bit>> {
        let gate = match op {
            BinaryOp::And => Some(GateKind::And),
            BinaryOp::Or => Some(GateKind::Or),
            BinaryOp::Xor => Some(GateKind::Xor),
            BinaryOp::Xnor => Some(GateKind::Xnor),
            _ => None,
        };
        if let Some(gate) = gate {
            return Ok(a.iter().zip(b).map(|(&a, &b)| self.gate(gate, &[a, b], site)).collect());
        }
        let right = bits::to_value(b, right_signed);
        if let (Some(left), Some(right)) = (bits::to_value(a, signed), &right) {
            if matches!(op, BinaryOp::Div | BinaryOp::Mod)
                && right.truth() == Logic::Zero
                && let Some(span) = site.span
            {
                return Err(wrong("division by zero in a constant expression", span));
            }
            return Ok(bits::from_value(&Value::binary(op, &left, right)));
        }
        if right.as_ref().is_some_and(Value::has_unknown) {
            return Ok(vec![Bit::X; a.len()]);
        }
        let a = self.nodes(a, site);
        let b = self.nodes(b, site);
        if let Some(span) = site.span {
            self.afford(0, blast::gates(&self.builder, op, &a, &b), span)?;
        }
        let builder = &mut self.builder;
        let result = match op {
            BinaryOp::Add => blast::add(builder, &a, &b, site),
            BinaryOp::Sub => blast::sub(builder, &a, &b, site),
            BinaryOp::Mul => blast::mul(builder, &a, &b, site),
            BinaryOp::Div => blast::div(builder, &a, &b, signed, site),
            BinaryOp::Mod => blast::rem(builder, &a, &b, signed, site),
            BinaryOp::Shl | BinaryOp::ArithShl => blast::shift_left(builder, &a, &b, site),
            BinaryOp::ArithShr if signed => blast::shift_arith(builder, &a, &b, site),
            BinaryOp::Shr | BinaryOp::ArithShr => blast::shift_right(builder, &a, &b, site),
            _ => match (blast::pow(builder, &a, &b, signed, right_signed, site), site.span) {
                (Some(result), _) => result,
                (None, Some(span)) => return Err(unsupported("power of very wide operands", span)),
                (None, None) => return Ok(vec![Bit::X; a.len()]),
            },
        };
        Ok(self.lift_all(&result))
    }

    fn eval_comparison(&mut self, op: BinaryOp, left: &'a Expr, right: &'a Expr, site: Site) -> Outcome<Bit> {
        if let Some(result) = self.compare_reals(op, left, right)? {
            return Ok(result.into());
        }
        let (left_width, left_signed) = self.size(left)?;
        let (right_width, right_signed) = self.size(right)?;
        let (width, signed) = (left_width.max(right_width), left_signed && right_signed);
        let a = self.eval(left, width, signed)?;
        let b = self.eval(right, width, signed)?;
        self.afford(0, blast::GATES_BY_BIT.saturating_mul(width), left.span)?;
        Ok(self.compare(op, &a, &b, signed, site))
    }

    /// A comparison of operands of one width.
    pub fn compare(&mut self, op: BinaryOp, a: &[Bit], b: &[Bit], signed: bool, site: Site) -> Bit {
        if let (Some(a), Some(b)) = (bits::to_value(a, signed), bits::to_value(b, signed)) {
            return Value::binary(op, &a, &b).truth().into();
        }
        let unknown = |bit: &Bit| matches!(bit, Bit::X | Bit::Z);
        match op {
            BinaryOp::Eq => self.equal(a, b, site),
            BinaryOp::Ne => {
                let equal = self.equal(a, b, site);
                self.not(equal, site)
            }
            BinaryOp::CaseEq | BinaryOp::CaseNe if a.iter().chain(b).any(unknown) => Bit::from(op == BinaryOp::CaseNe),
            BinaryOp::CaseEq => self.equal(a, b, site),
            BinaryOp::CaseNe => {
                let equal = self.equal(a, b, site);
                self.not(equal, site)
            }
            BinaryOp::WildEq | BinaryOp::WildNe => {
                let (a, b): (Vec<Bit>, Vec<Bit>) = a.iter().zip(b).filter(|(_, b)| !unknown(b)).unzip();
                let equal = self.equal(&a, &b, site);
                if op == BinaryOp::WildEq { equal } else { self.not(equal, site) }
            }
            _ => {
                let a = self.nodes(a, site);
                let b = self.nodes(b, site);
                let builder = &mut self.builder;
                let result = match op {
                    BinaryOp::Lt => blast::less_than(builder, &a, &b, signed, site),
                    BinaryOp::Le => blast::less_equal(builder, &a, &b, signed, site),
                    BinaryOp::Gt => blast::less_than(builder, &b, &a, signed, site),
                    _ => blast::less_equal(builder, &b, &a, signed, site),
                };
                self.lift(result)
            }
        }
    }

    /// A chain of `&&`, `||`, `->` and `<->`. The right operand is not looked at when the left one decides.
    fn eval_logical(&mut self, expr: &'a Expr) -> Outcome<Bit> {
        let mut links: Vec<(BinaryOp, &'a Expr, Span)> = Vec::new();
        let mut at = expr;
        while let ExprKind::Binary(op, left, right) = &at.kind {
            if class(*op) != Class::Logical {
                break;
            }
            links.push((*op, right, at.span));
            at = left;
        }
        let mut result = self.eval_condition(at)?;
        for (op, right, span) in links.into_iter().rev() {
            match (op, result) {
                (BinaryOp::LogicalAnd, Bit::Zero) | (BinaryOp::LogicalOr, Bit::One) => continue,
                (BinaryOp::Implies, Bit::Zero) => {
                    result = Bit::One;
                    continue;
                }
                _ => {}
            }
            let right = self.eval_condition(right)?;
            let site = self.site(span);
            result = match op {
                BinaryOp::LogicalAnd => self.and(&[result, right], site),
                BinaryOp::LogicalOr => self.or(&[result, right], site),
                BinaryOp::Implies => {
                    let left = self.not(result, site);
                    self.or(&[left, right], site)
                }
                _ => self.gate(GateKind::Xnor, &[result, right], site),
            };
        }
        Ok(result)
    }

    /// `value inside {a, [b:c]}`: the OR of wildcard equalities and range checks.
    fn eval_inside(&mut self, value: &'a Expr, ranges: &'a [Expr], site: Site) -> Outcome<Bit> {
        if has_step(value) {
            return Err(unsupported("assignment or increment in what `inside` compares", value.span));
        }
        let (width, signed) = self.size(value)?;
        let mut terms = Vec::new();
        for range in ranges {
            terms.push(self.matches_label(value, width, signed, range)?);
        }
        Ok(self.or(&terms, site))
    }

    /// Whether a value equals a label, or lies in its range, as `inside` and `case inside` compare.
    pub fn matches_label(&mut self, value: &'a Expr, width: usize, signed: bool, label: &'a Expr) -> Outcome<Bit> {
        let site = self.site(label.span);
        let ExprKind::Range(low, high) = &label.kind else {
            let (label_width, label_signed) = self.size(label)?;
            let (width, signed) = (width.max(label_width), signed && label_signed);
            let a = self.eval(value, width, signed)?;
            let b = self.eval(label, width, signed)?;
            return Ok(self.compare(BinaryOp::WildEq, &a, &b, signed, site));
        };
        let mut terms = Vec::new();
        for (bound, op) in [(low, BinaryOp::Ge), (high, BinaryOp::Le)] {
            if let Some(bound) = bound {
                let (bound_width, bound_signed) = self.size(bound)?;
                let (width, signed) = (width.max(bound_width), signed && bound_signed);
                let a = self.eval(value, width, signed)?;
                let b = self.eval(bound, width, signed)?;
                terms.push(self.compare(op, &a, &b, signed, site));
            }
        }
        Ok(self.and(&terms, site))
    }
}

/// What a cast does.
pub(super) enum CastTo {
    Type(std::rc::Rc<super::types::Type>),
    Width(usize),
    Sign(bool),
    Same,
}

impl<'a> Elaborator<'a> {
    fn cast_type(&mut self, kind: &'a CastKind) -> Outcome<CastTo> {
        Ok(match kind {
            CastKind::Type(ty) => CastTo::Type(self.data_type(ty)?),
            CastKind::Signed => CastTo::Sign(true),
            CastKind::Unsigned => CastTo::Sign(false),
            CastKind::Const => CastTo::Same,
            CastKind::Size(expr) => match self.named_type(expr)? {
                Some(ty) => CastTo::Type(ty),
                None => {
                    let width = self.constant_i64(expr)?;
                    match usize::try_from(width).ok().filter(|width| (1..=MAX_WIDTH).contains(width)) {
                        Some(width) => CastTo::Width(width),
                        None => return Err(wrong(format!("a cast to {width} bits"), expr.span)),
                    }
                }
            },
        })
    }

    /// The type an expression names, if it names one.
    pub fn named_type(&mut self, expr: &'a Expr) -> Outcome<Option<std::rc::Rc<super::types::Type>>> {
        let symbol = match &expr.kind {
            ExprKind::Type(ty) => return self.data_type(ty).map(Some),
            ExprKind::Name(name) => self.find(&name.name),
            ExprKind::Scoped { package, name } => Some(self.look_up_in_package(package, name)?),
            // A type of an interface, through the port.
            ExprKind::Member(..) => match self.resolve(expr, Want::Type) {
                Ok(Resolved::Symbol(symbol)) => Some(symbol),
                _ => None,
            },
            _ => None,
        };
        match symbol {
            Some(super::scope::Symbol::Lazy(lazy)) if self.is_type(lazy) => self.force_type(lazy, expr.span).map(Some),
            _ => Ok(None),
        }
    }

    fn eval_cast(&mut self, kind: &'a CastKind, operand: &'a Expr) -> Outcome<Vec<Bit>> {
        match self.cast_type(kind)? {
            CastTo::Type(ty) => {
                if ty.integral() {
                    let (width, signed) = self.size(operand)?;
                    let bits = self.eval(operand, width.max(ty.width), signed)?;
                    return Ok(extend(bits, ty.width, signed));
                }
                self.eval_as(operand, &ty)
            }
            CastTo::Width(width) => {
                let (own, signed) = self.size(operand)?;
                let bits = self.eval(operand, own.max(width), signed)?;
                Ok(extend(bits, width, signed))
            }
            CastTo::Sign(_) | CastTo::Same => Ok(self.eval_self(operand)?.0),
        }
    }
}
