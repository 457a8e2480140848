//! Expressions, literals and operators, with the precedence of IEEE 1800-2017 already applied.

use serde::{Deserialize, Serialize};

use super::{Assignment, DataType, Ident};
use crate::source::Span;

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Expr {
    pub kind: ExprKind,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum ExprKind {
    /// A sized or unsized integer literal.
    Number(Literal),
    /// `'0`, `'1`, `'x`, `'z`: fills its context.
    Fill(char),
    Real(f64),
    String(String),
    /// `12ns`
    TimeLiteral(f64),
    Name(Ident),
    /// `package::name`, `$unit::name`.
    Scoped {
        package: Ident,
        name: Ident,
    },
    /// `a.b`
    Member(Box<Expr>, Ident),
    /// `a[i]`
    Index(Box<Expr>, Box<Expr>),
    Slice {
        base: Box<Expr>,
        kind: SliceKind,
        left: Box<Expr>,
        right: Box<Expr>,
    },
    Unary(UnaryOp, Box<Expr>),
    Binary(BinaryOp, Box<Expr>, Box<Expr>),
    Cond(Box<Expr>, Box<Expr>, Box<Expr>),
    Concat(Vec<Expr>),
    Replicate(Box<Expr>, Vec<Expr>),
    /// `{<<8{a, b}}`; `left` is true for `<<`.
    Stream {
        left: bool,
        slice: Option<Box<Expr>>,
        parts: Vec<Expr>,
    },
    /// `'{...}`, `T'{...}`
    Pattern {
        ty: Option<Box<DataType>>,
        items: Vec<PatternItem>,
    },
    /// A function call; the callee is a name, a scoped name or a member (an enum method such as `e.next`).
    Call {
        callee: Box<Expr>,
        args: Vec<CallArg>,
    },
    /// `$name(args)`; an argument that is a type is `ExprKind::Type`.
    SystemCall {
        name: String,
        args: Vec<Option<Expr>>,
    },
    Cast(CastKind, Box<Expr>),
    Inside(Box<Expr>, Vec<Expr>),
    /// `[lo:hi]` in `inside` and `case inside`; `None` is `$`.
    Range(Option<Box<Expr>>, Option<Box<Expr>>),
    /// `min:typ:max` keeps all three.
    MinTypMax(Box<Expr>, Box<Expr>, Box<Expr>),
    Type(Box<DataType>),
    /// An assignment inside an expression, `(a = b)`, `++i`; its value is that of the target afterwards.
    Assign(Box<Assignment>),
    /// `i++`, `i--`: the value is that of the target before.
    Postfix(Box<Assignment>),
    /// `array.sum with (item * 2)`: `method` over all elements, each named `iterator` (`item` when `None`) in `with`.
    Reduce {
        array: Box<Expr>,
        method: Ident,
        iterator: Option<Ident>,
        with: Box<Expr>,
    },
    Unsupported(String),
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct CallArg {
    pub name: Option<Ident>,
    pub value: Option<Expr>,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum CastKind {
    Type(Box<DataType>),
    /// `8'(x)`, `WIDTH'(x)`; whether the name is a type or a constant only elaboration knows.
    Size(Box<Expr>),
    Signed,
    Unsigned,
    Const,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct PatternItem {
    pub key: PatternKey,
    pub value: Expr,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum PatternKey {
    /// By position.
    None,
    Default,
    /// A member name or an index: only elaboration knows.
    Expr(Expr),
    Type(DataType),
    /// `'{3{x, y}}`: the value and those in the list, all repeated that many times in place.
    Repeat(Expr, Vec<Expr>),
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum SliceKind {
    /// `[left:right]`
    Constant,
    /// `[left +: right]`
    Up,
    /// `[left -: right]`
    Down,
}

/// An integer literal with its digits expanded to bits.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Literal {
    /// `None` for an unsized literal (at least 32 bits).
    pub width: Option<u32>,
    pub signed: bool,
    /// `false` for a plain decimal such as `42` (which is signed).
    pub based: bool,
    /// One of `0 1 x z` per bit, most significant first, as many as the digits gave (not yet sized).
    pub bits: String,
}

#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug, Serialize, Deserialize)]
pub enum UnaryOp {
    Plus,
    Minus,
    /// `!`
    LogicalNot,
    /// `~`
    Not,
    ReduceAnd,
    ReduceNand,
    ReduceOr,
    ReduceNor,
    ReduceXor,
    ReduceXnor,
}

#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug, Serialize, Deserialize)]
pub enum BinaryOp {
    Add,
    Sub,
    Mul,
    Div,
    Mod,
    Pow,
    Eq,
    Ne,
    CaseEq,
    CaseNe,
    WildEq,
    WildNe,
    LogicalAnd,
    LogicalOr,
    Implies,
    Equivalent,
    Lt,
    Le,
    Gt,
    Ge,
    And,
    Or,
    Xor,
    Xnor,
    /// `>>`
    Shr,
    /// `<<`
    Shl,
    /// `>>>`
    ArithShr,
    /// `<<<`
    ArithShl,
}
