//! Data types and nets as they are declared; what a name stands for is resolved by elaboration.

use serde::{Deserialize, Serialize};

use super::{Expr, Ident};
use crate::source::Span;

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum NetKind {
    Wire,
    Tri,
    Wand,
    Triand,
    Wor,
    Trior,
    Tri0,
    Tri1,
    Trireg,
    Supply0,
    Supply1,
    Uwire,
}

/// A packed or unpacked dimension.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum Dim {
    /// `[left:right]`
    Range(Expr, Expr),
    /// `[size]`
    Size(Expr),
    /// `[]`, `[*]`, `[$]`, `[type]`: not synthesisable.
    Dynamic(Span),
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct DataType {
    pub kind: DataTypeKind,
    /// Packed dimensions, outermost (leftmost) first.
    pub packed: Vec<Dim>,
    /// `signed` or `unsigned` where written.
    pub signed: Option<bool>,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum DataTypeKind {
    /// No type keyword written: `input [3:0] a`, `parameter signed p`.
    Implicit,
    /// `logic`, `reg`.
    Logic,
    Bit,
    Byte,
    Shortint,
    Int,
    Longint,
    Integer,
    Time,
    /// `real`, `shortreal`, `realtime`: constants only.
    Real,
    String,
    Void,
    Event,
    Chandle,
    /// A typedef, type parameter, or (as a port) an interface; `package::name` or `name`.
    Named {
        package: Option<Ident>,
        name: Ident,
    },
    Enum {
        base: Option<Box<DataType>>,
        members: Vec<EnumMember>,
    },
    /// Members in source order, the first is the most significant when packed.
    Struct {
        union: bool,
        packed: bool,
        tagged: bool,
        members: Vec<Member>,
    },
    /// `type(expr)` or `type(data_type)`.
    TypeOf(Box<Expr>),
    /// `virtual interface`, class types and the like.
    Unsupported(String),
}

/// `name`, `name = value`, `name[5]`, `name[2:4]`.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct EnumMember {
    pub name: Ident,
    pub range: Option<(Expr, Option<Expr>)>,
    pub value: Option<Expr>,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Member {
    pub name: Ident,
    pub ty: DataType,
    pub dims: Vec<Dim>,
    /// What a variable without an initial value of its own starts with.
    pub default: Option<Expr>,
}
