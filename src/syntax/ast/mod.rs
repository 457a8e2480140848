//! The owned syntax tree that elaboration works on. It keeps what synthesis needs of IEEE 1364-2005 and IEEE 1800-2017
//! and drops the rest, knows no parser types, and is plain owned data, so that files can be converted side by side.
//! Names are unresolved; `a.b` may be a structure member or a hierarchical name, and only elaboration can tell.
//! What is passed over on purpose (assertions, coverage, `initial` with delays) is kept as [`ItemKind::Skipped`] or
//! [`StmtKind::Skipped`], so that it can be counted; what we cannot represent is `Unsupported`, never dropped.

use serde::{Deserialize, Serialize};

mod expressions;
mod instances;
mod items;
mod statements;
mod types;
mod units;

use crate::source::Span;

pub use expressions::{
    BinaryOp, CallArg, CastKind, Expr, ExprKind, Literal, PatternItem, PatternKey, SliceKind, UnaryOp,
};
pub use instances::{Connection, GateInstance, GateType, Instance, Udp, UdpRow, UdpSymbol};
pub use items::{
    Declarator, Edge, Event, Function, FunctionArg, GenBlock, GenvarInit, Item, ItemKind, ModportPort, Process,
    ProcessKind, Sensitivity,
};
pub use statements::{Assignment, Case, CaseArm, CaseKind, ForInit, Stmt, StmtKind, Unique};
pub use types::{DataType, DataTypeKind, Dim, EnumMember, Member, NetKind};
pub use units::{
    AnsiPort, AnsiPortKind, DefaultNettype, Direction, Import, Module, ModuleKind, Package, Param, ParamKind, PortRef,
    Ports, Unit,
};

/// A name as written, without the backslash and the space of an escaped identifier.
#[derive(Clone, PartialEq, Eq, Hash, Debug, Serialize, Deserialize)]
pub struct Ident {
    pub name: String,
    pub span: Span,
}

/// Attributes `(* name = value *)` of the item or statement they stand on.
pub type Attributes = Vec<Attribute>;

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Attribute {
    pub name: Ident,
    pub value: Option<Expr>,
}
