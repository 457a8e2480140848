//! What a file declares: modules with their headers and ports, packages, and what stands outside of both.

use serde::{Deserialize, Serialize};

use super::{Attributes, DataType, Dim, Expr, Ident, Item, NetKind, Udp};
use crate::source::Span;

/// Everything one compilation unit (one source file) declares, in source order.
#[derive(Clone, Debug, Default, Serialize, Deserialize)]
pub struct Unit {
    pub modules: Vec<Module>,
    pub packages: Vec<Package>,
    pub udps: Vec<Udp>,
    /// Headers of modules and interfaces declared `extern`.
    pub externs: Vec<Module>,
    /// Items at compilation-unit scope: typedefs, functions, parameters, imports, binds.
    pub items: Vec<Item>,
}

impl Unit {
    /// Adds what another part of the same file declares.
    pub fn append(&mut self, other: Unit) {
        self.modules.extend(other.modules);
        self.packages.extend(other.packages);
        self.udps.extend(other.udps);
        self.externs.extend(other.externs);
        self.items.extend(other.items);
    }
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum ModuleKind {
    Module,
    Interface,
    Program,
}

/// `` `default_nettype `` in force at the module's header.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum DefaultNettype {
    Net(NetKind),
    None,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Module {
    pub kind: ModuleKind,
    pub name: Ident,
    /// The whole declaration, `module` to `endmodule`.
    pub span: Span,
    pub attributes: Attributes,
    pub default_nettype: DefaultNettype,
    /// Imports in the header.
    pub imports: Vec<Import>,
    /// `#( ... )` of the header; parameters declared in the body are items.
    pub params: Vec<Param>,
    pub ports: Ports,
    pub items: Vec<Item>,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum Ports {
    /// `module m (input a, output b);`, each with everything inherited from the one before already filled in.
    Ansi(Vec<AnsiPort>),
    /// `module m (a, b, .c(d), {e, f});`, directions are `ItemKind::PortDecl` items.
    NonAnsi(Vec<PortRef>),
    /// `module m (.*);`: as an extern declaration says. None is left when the tree of a file is whole, unless there is no such
    /// declaration.
    Wildcard,
    /// `module m;` or `module m ();`
    None,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum Direction {
    Input,
    Output,
    Inout,
    Ref,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct AnsiPort {
    pub attributes: Attributes,
    pub kind: AnsiPortKind,
    pub name: Ident,
    /// Unpacked dimensions after the name.
    pub dims: Vec<Dim>,
    pub default: Option<Expr>,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum AnsiPortKind {
    /// `net` is `None` for a variable port (`output reg q`, `output logic q`).
    Data { direction: Direction, net: Option<NetKind>, ty: DataType },
    /// `bus_if.master m`; `interface` is `None` for the generic `interface` port. `name x` without a direction is also
    /// kept here, and when `name` turns out to be a data type, the port is a variable of it with `direction`
    /// (inherited from the port before).
    Interface { interface: Option<Ident>, modport: Option<Ident>, direction: Direction },
    /// `.name(expr)` in an ANSI list.
    Explicit { direction: Direction, expr: Option<Expr> },
}

/// An entry of a non-ANSI port list. The internal side is an expression (name, select or concatenation).
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct PortRef {
    /// The name seen from outside; `None` when only positional connection is possible (`{a, b}`).
    pub name: Option<Ident>,
    pub expr: Option<Expr>,
    pub span: Span,
}

/// A parameter or localparam, of a value or of a type.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Param {
    pub name: Ident,
    pub local: bool,
    pub kind: ParamKind,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum ParamKind {
    /// `ty` is `None` for an implicit type, which takes that of its value.
    Value {
        ty: Option<DataType>,
        dims: Vec<Dim>,
        default: Option<Expr>,
    },
    Type {
        default: Option<DataType>,
    },
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Package {
    pub name: Ident,
    pub span: Span,
    pub items: Vec<Item>,
}

/// `import pkg::name;` or `import pkg::*;` (`name` is `None`).
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Import {
    pub package: Ident,
    pub name: Option<Ident>,
}
