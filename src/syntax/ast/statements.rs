//! Statements of processes, functions and tasks.

use serde::{Deserialize, Serialize};

use super::{Attributes, BinaryOp, DataType, Expr, Ident, Item};
use crate::source::Span;

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Stmt {
    pub kind: StmtKind,
    pub attributes: Attributes,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum StmtKind {
    Empty,
    Block {
        label: Option<Ident>,
        decls: Vec<Item>,
        body: Vec<Stmt>,
    },
    /// `=`, `+=`, `++` and `<=` assignments. Delays on assignments are dropped (and counted by the converter).
    Assign(Assignment),
    If {
        cond: Expr,
        then: Box<Stmt>,
        otherwise: Option<Box<Stmt>>,
        unique: Option<Unique>,
    },
    Case(Case),
    For {
        init: Vec<ForInit>,
        cond: Option<Expr>,
        step: Vec<Assignment>,
        body: Box<Stmt>,
    },
    Foreach {
        array: Expr,
        vars: Vec<Option<Ident>>,
        body: Box<Stmt>,
    },
    While {
        cond: Expr,
        body: Box<Stmt>,
    },
    DoWhile {
        cond: Expr,
        body: Box<Stmt>,
    },
    Repeat {
        count: Expr,
        body: Box<Stmt>,
    },
    Forever {
        body: Box<Stmt>,
    },
    /// A task call, a void function call, or a system task that matters; others are `Skipped`.
    Call(Expr),
    Return(Option<Expr>),
    Break,
    Continue,
    Disable(Expr),
    /// `@(...) stmt`, `#d stmt`, `wait (...) stmt` inside a body: only the head of a process may have one.
    Timed {
        what: String,
        body: Box<Stmt>,
    },
    /// Procedural `assign`/`deassign`/`force`/`release`, `fork`.
    Unsupported(String),
    /// `$display` and other system tasks, immediate assertions: simulation only.
    Skipped(String),
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum Unique {
    Unique,
    Unique0,
    Priority,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Assignment {
    pub target: Expr,
    /// `Some(op)` for `+=` and friends; `++` is `+=` with the literal 1.
    pub op: Option<BinaryOp>,
    pub value: Expr,
    pub nonblocking: bool,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum ForInit {
    Declare { ty: DataType, name: Ident, value: Expr },
    Assign(Assignment),
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum CaseKind {
    Case,
    Casez,
    Casex,
    /// `case (...) inside`
    Inside,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Case {
    pub kind: CaseKind,
    pub unique: Option<Unique>,
    pub subject: Expr,
    /// Labels may be `ExprKind::Range` in `case inside`.
    pub arms: Vec<CaseArm>,
    pub default: Option<Box<Stmt>>,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct CaseArm {
    pub labels: Vec<Expr>,
    pub body: Stmt,
    pub span: Span,
}
