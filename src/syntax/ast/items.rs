//! What may stand in the body of a module, an interface, a package or a generate block. A construct that is passed over on
//! purpose is an item of its own, so that it can be counted; so is one that is not supported.

use serde::{Deserialize, Serialize};

use super::{
    Assignment, Attributes, Connection, DataType, Dim, Direction, Expr, GateInstance, GateType, Ident, Import,
    Instance, Module, NetKind, Param, Stmt,
};
use crate::source::Span;

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Item {
    pub kind: ItemKind,
    pub attributes: Attributes,
    pub span: Span,
}

/// One declared name with its unpacked dimensions and initial value.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Declarator {
    pub name: Ident,
    pub dims: Vec<Dim>,
    pub init: Option<Expr>,
    /// In a procedural block: the variable is static, so `init` is its value before time zero and not assigned each time
    /// the block runs (IEEE 1800-2017 clause 6.21).
    pub once: bool,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
#[allow(clippy::large_enum_variant, reason = "items are few and short-lived; boxing would only blur the table")]
pub enum ItemKind {
    /// Directions of non-ANSI ports. `net` is `None` when a variable type or nothing was written.
    PortDecl {
        direction: Direction,
        net: Option<NetKind>,
        ty: DataType,
        names: Vec<Declarator>,
        is_var: bool,
    },
    /// `bus.master b;` in the body of a module whose port list only names `b`.
    InterfacePort {
        interface: Ident,
        modport: Ident,
        names: Vec<Declarator>,
    },
    /// A net declaration; `init` of a declarator is a continuous assignment.
    Net {
        net: NetKind,
        ty: DataType,
        names: Vec<Declarator>,
    },
    Var {
        ty: DataType,
        names: Vec<Declarator>,
    },
    Param(Param),
    Typedef {
        name: Ident,
        ty: Option<DataType>,
        dims: Vec<Dim>,
    },
    Import(Vec<Import>),
    /// `export pkg::name;`
    Export(Vec<Import>),
    Genvar(Vec<Ident>),
    Function(Function),
    Task(Function),
    /// `assign a = b, c = d;`
    Assign(Vec<(Expr, Expr)>),
    /// `alias a = b = c;`
    Alias(Vec<Expr>),
    Process(Process),
    Instances {
        module: Ident,
        params: Vec<Connection>,
        instances: Vec<Instance>,
    },
    /// Gate and switch primitives of IEEE 1364-2005 clause 7.
    Gates {
        gate: GateType,
        instances: Vec<GateInstance>,
    },
    Defparam(Vec<(Expr, Expr)>),
    /// `generate ... endgenerate`, or a bare `begin ... end` block at module level.
    GenBlock(GenBlock),
    GenFor {
        init: GenvarInit,
        cond: Expr,
        step: Assignment,
        body: GenBlock,
    },
    GenIf {
        cond: Expr,
        then: GenBlock,
        otherwise: Option<GenBlock>,
    },
    GenCase {
        subject: Expr,
        arms: Vec<(Vec<Expr>, GenBlock)>,
        default: Option<GenBlock>,
    },
    Modport {
        name: Ident,
        ports: Vec<ModportPort>,
        /// Tasks and functions that it lets its users call.
        imports: Vec<Ident>,
    },
    /// A module declared inside a module.
    Module(Box<Module>),
    Bind {
        target: Expr,
        item: Box<Item>,
    },
    /// `let name(args) = expr;`
    Let {
        name: Ident,
        args: Vec<(Ident, Option<Expr>)>,
        body: Expr,
    },
    /// Elaboration system task: `$fatal`, `$error`, `$warning`, `$info`.
    ElabTask {
        name: String,
    },
    /// For simulation only, passed over on purpose; the string is the kind counted in the coverage ("assertion",
    /// "specify block", "initial block with timing", "class", "covergroup").
    Skipped(String),
    /// A name that only simulation uses: a class, covergroup, checker or DPI import, which is `what`.
    Simulation {
        what: String,
        name: Ident,
        /// A call of it as a statement changes nothing that synthesises.
        inert: bool,
    },
    /// Not supported; the string is the construct in the words of IEEE 1800.
    Unsupported(String),
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct ModportPort {
    pub direction: Direction,
    pub name: Ident,
    pub expr: Option<Expr>,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct GenvarInit {
    pub name: Ident,
    /// `for (genvar i = ...)`.
    pub declares: bool,
    pub value: Expr,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct GenBlock {
    pub label: Option<Ident>,
    /// `false` for a single item without `begin`/`end`, and for `generate ... endgenerate`, which opens no scope.
    pub scoped: bool,
    pub items: Vec<Item>,
    pub span: Span,
}

/// A function or a task (`ret` is `Void` for a task).
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Function {
    pub name: Ident,
    pub automatic: bool,
    pub ret: DataType,
    pub args: Vec<FunctionArg>,
    /// Declarations that stand before the first statement, non-ANSI argument declarations already merged into `args`.
    pub locals: Vec<Item>,
    pub body: Vec<Stmt>,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct FunctionArg {
    pub direction: Direction,
    pub name: Ident,
    pub ty: DataType,
    pub dims: Vec<Dim>,
    pub default: Option<Expr>,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum ProcessKind {
    Always,
    AlwaysComb,
    AlwaysFf,
    AlwaysLatch,
    Initial,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Process {
    pub kind: ProcessKind,
    /// The event control that heads the body (`@(...)`, `@*`), `None` when there is none.
    pub sensitivity: Option<Sensitivity>,
    pub body: Stmt,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum Sensitivity {
    /// `@*`, `@(*)`
    Star,
    List(Vec<Event>),
}

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Event {
    pub edge: Option<Edge>,
    pub expr: Expr,
    /// `@(posedge clk iff en)`
    pub iff: Option<Expr>,
    pub span: Span,
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Edge {
    Posedge,
    Negedge,
    /// `edge` of IEEE 1800-2017.
    Both,
}
