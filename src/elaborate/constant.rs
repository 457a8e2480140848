//! Constant expressions: the same evaluation as everywhere else, with the demand that only literal bits come out.
//! Reals exist only here.

use std::rc::Rc;

use super::bits::{self, Bit};
use super::context::{Elaborator, Outcome, wrong};
use super::place::{Base, Resolved, Want};
use super::scope::{Constant, Symbol, convert};
use super::types::{Shape, Type};
use super::value::Value;
use crate::syntax::ast::{BinaryOp, Expr, ExprKind, UnaryOp};

/// How many statements and loop passes a process or a constant function may take.
pub(super) const STEP_LIMIT: usize = 1_000_000;

impl<'a> Elaborator<'a> {
    /// A constant at its own width. Loop variables of an unrolled loop are constant.
    pub fn constant(&mut self, expr: &'a Expr) -> Outcome<Constant> {
        if let Some(real) = self.real(expr)? {
            return Ok(Constant::Real(real));
        }
        if let Some(value) = self.named_constant(expr)? {
            return Ok(value);
        }
        let (bits, signed) = self.eval_self(expr)?;
        let value = self.literal_bits(&bits, signed, expr)?;
        Ok(Constant::of(value))
    }

    /// The constant a plain name stands for, with its type.
    fn named_constant(&mut self, expr: &'a Expr) -> Outcome<Option<Constant>> {
        let symbol = match &expr.kind {
            ExprKind::Name(name) => self.find(&name.name),
            ExprKind::Scoped { package, name } => Some(self.look_up_in_package(package, name)?),
            _ => None,
        };
        match symbol {
            Some(Symbol::Lazy(id)) if !self.is_type(id) && !self.is_variable(id) => {
                self.force_constant(id, expr.span).map(Some)
            }
            _ => Ok(None),
        }
    }

    fn literal_bits(&self, bits: &[Bit], signed: bool, expr: &Expr) -> Outcome<Value> {
        bits::to_value(bits, signed).ok_or_else(|| wrong("this expression must be constant, and is not", expr.span))
    }

    /// A constant assigned to a type.
    pub fn constant_for(&mut self, expr: &'a Expr, ty: &Rc<Type>) -> Outcome<Value> {
        match self.constant_of_type(expr, Rc::clone(ty))? {
            Constant::Bits(value, _) => Ok(Value::clone(&value)),
            Constant::Real(_) => Err(wrong("a real where bits are needed", expr.span)),
        }
    }

    pub fn constant_of_type(&mut self, expr: &'a Expr, ty: Rc<Type>) -> Outcome<Constant> {
        if matches!(ty.shape, Shape::Real) {
            return match self.real(expr)? {
                Some(real) => Ok(Constant::Real(real)),
                None => Ok(convert(self.constant(expr)?, ty)),
            };
        }
        if let Some(real) = self.real(expr)? {
            return Ok(convert(Constant::Real(real), ty));
        }
        if matches!(ty.shape, Shape::Text) {
            return self.constant(expr);
        }
        let bits = self.eval_as(expr, &ty)?;
        let value = self.literal_bits(&bits, ty.signed, expr)?;
        let value = if ty.two_state { value.two_state() } else { value };
        Ok(Constant::Bits(Rc::new(value), ty))
    }

    /// A constant number. An unknown bit in it is an error: that is what a division by zero gives.
    pub fn constant_i64(&mut self, expr: &'a Expr) -> Outcome<i64> {
        let value = match self.constant(expr)? {
            Constant::Real(real) => return Ok(real.round() as i64),
            Constant::Bits(value, _) => value,
        };
        if value.has_unknown() {
            return Err(wrong("this constant has unknown bits", expr.span));
        }
        value.to_i64().ok_or_else(|| wrong(format!("the constant {value} is too large here"), expr.span))
    }

    /// The value of a constant expression over reals; `None` when it is not real.
    pub fn real(&mut self, expr: &'a Expr) -> Outcome<Option<f64>> {
        if !self.may_be_real(expr) {
            return Ok(None);
        }
        Ok(match &expr.kind {
            ExprKind::Real(real) | ExprKind::TimeLiteral(real) => Some(*real),
            ExprKind::Name(_) | ExprKind::Scoped { .. } | ExprKind::Member(..) => {
                match self.resolve(expr, Want::Type)? {
                    Resolved::Place(place) => match place.base {
                        Base::Real(real) => Some(real),
                        _ => None,
                    },
                    _ => None,
                }
            }
            ExprKind::Unary(UnaryOp::Minus, operand) => self.real(operand)?.map(|real| -real),
            ExprKind::Unary(UnaryOp::Plus, operand) => self.real(operand)?,
            ExprKind::Binary(op, left, right) => {
                let (a, b) = (self.real(left)?, self.real(right)?);
                if a.is_none() && b.is_none() {
                    return Ok(None);
                }
                let a = self.number_as_real(a, left)?;
                let b = self.number_as_real(b, right)?;
                match op {
                    BinaryOp::Add => Some(a + b),
                    BinaryOp::Sub => Some(a - b),
                    BinaryOp::Mul => Some(a * b),
                    BinaryOp::Div => Some(a / b),
                    BinaryOp::Pow => Some(a.powf(b)),
                    _ => None,
                }
            }
            ExprKind::Cond(condition, then, otherwise) => match self.eval_condition(condition)? {
                Bit::One => self.real(then)?,
                _ => self.real(otherwise)?,
            },
            ExprKind::SystemCall { name, args } => match (name.as_str(), args.first()) {
                ("$itor" | "$ceil" | "$floor" | "$sqrt" | "$ln" | "$log10" | "$exp", Some(Some(arg))) => {
                    let real = self.real(arg)?;
                    let real = self.number_as_real(real, arg)?;
                    Some(match name.as_str() {
                        "$ceil" => real.ceil(),
                        "$floor" => real.floor(),
                        "$sqrt" => real.sqrt(),
                        "$ln" => real.ln(),
                        "$log10" => real.log10(),
                        "$exp" => real.exp(),
                        _ => real,
                    })
                }
                _ => None,
            },
            _ => None,
        })
    }

    fn number_as_real(&mut self, real: Option<f64>, expr: &'a Expr) -> Outcome<f64> {
        match real {
            Some(real) => Ok(real),
            None => Ok(self.constant_i64(expr)? as f64),
        }
    }

    /// A quick look that spares bit expressions the search for reals: whether a real literal or real parameter is in it.
    fn may_be_real(&self, expr: &Expr) -> bool {
        let mut at = expr;
        loop {
            at = match &at.kind {
                ExprKind::Real(_) | ExprKind::TimeLiteral(_) => return true,
                ExprKind::Name(name) => {
                    return match self.find(&name.name) {
                        Some(Symbol::Lazy(id)) => self.real_parameter(id),
                        _ => false,
                    };
                }
                ExprKind::Scoped { .. } => return true,
                ExprKind::SystemCall { name, .. } => {
                    return matches!(name.as_str(), "$itor" | "$ceil" | "$floor" | "$sqrt" | "$ln" | "$log10" | "$exp");
                }
                ExprKind::Unary(UnaryOp::Minus | UnaryOp::Plus, operand) => operand,
                ExprKind::Binary(
                    BinaryOp::Add | BinaryOp::Sub | BinaryOp::Mul | BinaryOp::Div | BinaryOp::Pow,
                    left,
                    right,
                ) => {
                    if self.may_be_real(right) {
                        return true;
                    }
                    left
                }
                ExprKind::Cond(_, then, otherwise) => {
                    if self.may_be_real(then) {
                        return true;
                    }
                    otherwise
                }
                _ => return false,
            };
        }
    }

    fn real_parameter(&self, id: super::scope::LazyId) -> bool {
        use super::scope::Lazy;
        match &self.lazies[id.index()].1 {
            Lazy::Constant(Constant::Real(_)) | Lazy::Override { value: Constant::Real(_), .. } => true,
            Lazy::Value { ty, value, .. } => {
                ty.is_some_and(|ty| matches!(ty.kind, crate::syntax::ast::DataTypeKind::Real))
                    || matches!(value.kind, ExprKind::Real(_) | ExprKind::Binary(..) | ExprKind::SystemCall { .. })
                    || matches!(&value.kind, ExprKind::Unary(_, operand) if matches!(operand.kind, ExprKind::Real(_)))
            }
            _ => false,
        }
    }

    /// A comparison in which a real takes part; `None` when none does.
    pub fn compare_reals(&mut self, op: BinaryOp, left: &'a Expr, right: &'a Expr) -> Outcome<Option<bool>> {
        if !self.may_be_real(left) && !self.may_be_real(right) {
            return Ok(None);
        }
        let (a, b) = (self.real(left)?, self.real(right)?);
        if a.is_none() && b.is_none() {
            return Ok(None);
        }
        let a = self.number_as_real(a, left)?;
        let b = self.number_as_real(b, right)?;
        Ok(Some(match op {
            BinaryOp::Lt => a < b,
            BinaryOp::Le => a <= b,
            BinaryOp::Gt => a > b,
            BinaryOp::Ge => a >= b,
            BinaryOp::Ne | BinaryOp::CaseNe | BinaryOp::WildNe => a != b,
            _ => a == b,
        }))
    }

    /// Counts a step of execution; an error past the limit.
    pub fn step(&mut self, span: crate::source::Span) -> Outcome<()> {
        self.steps += 1;
        if self.steps & 63 == 0 {
            self.check_size(0, span)?;
            self.afford(0, 0, span)?;
        }
        if self.steps > STEP_LIMIT {
            return Err(wrong(format!("a loop or function that does not end within {STEP_LIMIT} steps"), span));
        }
        Ok(())
    }
}
