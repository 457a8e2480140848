//! The owned syntax tree that elaboration works on. It keeps what synthesis needs of IEEE 1364-2005 and IEEE 1800-2017
//! and drops the rest, knows no parser types, and is `Send` and serialisable so that a file's tree can be cached.
//! Names are unresolved; `a.b` may be a structure member or a hierarchical name, and only elaboration can tell.
//! What is passed over on purpose (assertions, coverage, `initial` with delays) is kept as [`ItemKind::Skipped`] or
//! [`StmtKind::Skipped`], so that it can be counted; what we cannot represent is `Unsupported`, never dropped.

use crate::source::Span;

/// A name as written, without the backslash and the space of an escaped identifier.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub struct Ident {
    pub name: String,
    pub span: Span,
}

/// Attributes `(* name = value *)` of the item or statement they stand on.
pub type Attributes = Vec<Attribute>;

#[derive(Clone, Debug)]
pub struct Attribute {
    pub name: Ident,
    pub value: Option<Expr>,
}

/// Everything one compilation unit (one source file) declares, in source order.
#[derive(Clone, Debug, Default)]
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

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum ModuleKind {
    Module,
    Interface,
    Program,
}

/// `` `default_nettype `` in force at the module's header.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum DefaultNettype {
    Net(NetKind),
    None,
}

#[derive(Clone, Debug)]
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

#[derive(Clone, Debug)]
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

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Direction {
    Input,
    Output,
    Inout,
    Ref,
}

#[derive(Clone, Debug)]
pub struct AnsiPort {
    pub attributes: Attributes,
    pub kind: AnsiPortKind,
    pub name: Ident,
    /// Unpacked dimensions after the name.
    pub dims: Vec<Dim>,
    pub default: Option<Expr>,
    pub span: Span,
}

#[derive(Clone, Debug)]
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
#[derive(Clone, Debug)]
pub struct PortRef {
    /// The name seen from outside; `None` when only positional connection is possible (`{a, b}`).
    pub name: Option<Ident>,
    pub expr: Option<Expr>,
    pub span: Span,
}

/// A parameter or localparam, of a value or of a type.
#[derive(Clone, Debug)]
pub struct Param {
    pub name: Ident,
    pub local: bool,
    pub kind: ParamKind,
    pub span: Span,
}

#[derive(Clone, Debug)]
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

#[derive(Clone, Debug)]
pub struct Package {
    pub name: Ident,
    pub span: Span,
    pub items: Vec<Item>,
}

/// `import pkg::name;` or `import pkg::*;` (`name` is `None`).
#[derive(Clone, Debug)]
pub struct Import {
    pub package: Ident,
    pub name: Option<Ident>,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
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
#[derive(Clone, Debug)]
pub enum Dim {
    /// `[left:right]`
    Range(Expr, Expr),
    /// `[size]`
    Size(Expr),
    /// `[]`, `[*]`, `[$]`, `[type]`: not synthesisable.
    Dynamic(Span),
}

#[derive(Clone, Debug)]
pub struct DataType {
    pub kind: DataTypeKind,
    /// Packed dimensions, outermost (leftmost) first.
    pub packed: Vec<Dim>,
    /// `signed` or `unsigned` where written.
    pub signed: Option<bool>,
    pub span: Span,
}

#[derive(Clone, Debug)]
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
#[derive(Clone, Debug)]
pub struct EnumMember {
    pub name: Ident,
    pub range: Option<(Expr, Option<Expr>)>,
    pub value: Option<Expr>,
}

#[derive(Clone, Debug)]
pub struct Member {
    pub name: Ident,
    pub ty: DataType,
    pub dims: Vec<Dim>,
    /// What a variable without an initial value of its own starts with.
    pub default: Option<Expr>,
}

#[derive(Clone, Debug)]
pub struct Item {
    pub kind: ItemKind,
    pub attributes: Attributes,
    pub span: Span,
}

/// One declared name with its unpacked dimensions and initial value.
#[derive(Clone, Debug)]
pub struct Declarator {
    pub name: Ident,
    pub dims: Vec<Dim>,
    pub init: Option<Expr>,
    /// In a procedural block: the variable is static, so `init` is its value before time zero and not assigned each time
    /// the block runs (IEEE 1800-2017 clause 6.21).
    pub once: bool,
}

#[derive(Clone, Debug)]
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

#[derive(Clone, Debug)]
pub struct ModportPort {
    pub direction: Direction,
    pub name: Ident,
    pub expr: Option<Expr>,
}

#[derive(Clone, Debug)]
pub struct GenvarInit {
    pub name: Ident,
    /// `for (genvar i = ...)`.
    pub declares: bool,
    pub value: Expr,
}

#[derive(Clone, Debug)]
pub struct GenBlock {
    pub label: Option<Ident>,
    /// `false` for a single item without `begin`/`end`, and for `generate ... endgenerate`, which opens no scope.
    pub scoped: bool,
    pub items: Vec<Item>,
    pub span: Span,
}

/// A function or a task (`ret` is `Void` for a task).
#[derive(Clone, Debug)]
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

#[derive(Clone, Debug)]
pub struct FunctionArg {
    pub direction: Direction,
    pub name: Ident,
    pub ty: DataType,
    pub dims: Vec<Dim>,
    pub default: Option<Expr>,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum ProcessKind {
    Always,
    AlwaysComb,
    AlwaysFf,
    AlwaysLatch,
    Initial,
}

#[derive(Clone, Debug)]
pub struct Process {
    pub kind: ProcessKind,
    /// The event control that heads the body (`@(...)`, `@*`), `None` when there is none.
    pub sensitivity: Option<Sensitivity>,
    pub body: Stmt,
}

#[derive(Clone, Debug)]
pub enum Sensitivity {
    /// `@*`, `@(*)`
    Star,
    List(Vec<Event>),
}

#[derive(Clone, Debug)]
pub struct Event {
    pub edge: Option<Edge>,
    pub expr: Expr,
    /// `@(posedge clk iff en)`
    pub iff: Option<Expr>,
    pub span: Span,
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Edge {
    Posedge,
    Negedge,
    /// `edge` of IEEE 1800-2017.
    Both,
}

#[derive(Clone, Debug)]
pub struct Stmt {
    pub kind: StmtKind,
    pub attributes: Attributes,
    pub span: Span,
}

#[derive(Clone, Debug)]
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

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Unique {
    Unique,
    Unique0,
    Priority,
}

#[derive(Clone, Debug)]
pub struct Assignment {
    pub target: Expr,
    /// `Some(op)` for `+=` and friends; `++` is `+=` with the literal 1.
    pub op: Option<BinaryOp>,
    pub value: Expr,
    pub nonblocking: bool,
    pub span: Span,
}

#[derive(Clone, Debug)]
pub enum ForInit {
    Declare { ty: DataType, name: Ident, value: Expr },
    Assign(Assignment),
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum CaseKind {
    Case,
    Casez,
    Casex,
    /// `case (...) inside`
    Inside,
}

#[derive(Clone, Debug)]
pub struct Case {
    pub kind: CaseKind,
    pub unique: Option<Unique>,
    pub subject: Expr,
    /// Labels may be `ExprKind::Range` in `case inside`.
    pub arms: Vec<CaseArm>,
    pub default: Option<Box<Stmt>>,
}

#[derive(Clone, Debug)]
pub struct CaseArm {
    pub labels: Vec<Expr>,
    pub body: Stmt,
    pub span: Span,
}

#[derive(Clone, Debug)]
pub struct Instance {
    pub name: Ident,
    /// Instance array dimensions.
    pub dims: Vec<Dim>,
    pub connections: Vec<Connection>,
    pub span: Span,
}

/// A port connection or a parameter override.
#[derive(Clone, Debug)]
pub enum Connection {
    /// By order; `None` is an empty place.
    Ordered(Option<Expr>, Span),
    /// `.name(expr)`, `.name()` (`value` is `None`).
    Named { name: Ident, value: Option<Expr> },
    /// `.name`
    Implicit(Ident),
    /// `.*`
    All(Span),
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum GateType {
    And,
    Nand,
    Or,
    Nor,
    Xor,
    Xnor,
    Buf,
    Not,
    Bufif0,
    Bufif1,
    Notif0,
    Notif1,
    Nmos,
    Pmos,
    Rnmos,
    Rpmos,
    Cmos,
    Rcmos,
    Tran,
    Rtran,
    Tranif0,
    Tranif1,
    Rtranif0,
    Rtranif1,
    Pullup,
    Pulldown,
}

#[derive(Clone, Debug)]
pub struct GateInstance {
    pub name: Option<Ident>,
    pub dims: Vec<Dim>,
    pub terminals: Vec<Expr>,
    pub span: Span,
}

#[derive(Clone, Debug)]
pub struct Udp {
    pub name: Ident,
    pub span: Span,
    pub output: Ident,
    pub inputs: Vec<Ident>,
    pub sequential: bool,
    /// `initial q = 1'b0;`
    pub initial: Option<char>,
    pub rows: Vec<UdpRow>,
}

/// One row of a table, symbols as written in lower case: `0 1 x ? b` levels, `r f p n *` edges.
#[derive(Clone, Debug)]
pub struct UdpRow {
    pub inputs: Vec<UdpSymbol>,
    /// The current-state column of a sequential table.
    pub state: Option<char>,
    /// `0`, `1`, `x` or `-`.
    pub output: char,
    pub span: Span,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum UdpSymbol {
    Level(char),
    /// `(ab)`; the letters `r f p n *` are kept as `Level`-free edges: r = (01), f = (10), p, n and * by their letter.
    Edge(char, char),
    EdgeLetter(char),
}

#[derive(Clone, Debug)]
pub struct Expr {
    pub kind: ExprKind,
    pub span: Span,
}

#[derive(Clone, Debug)]
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

#[derive(Clone, Debug)]
pub struct CallArg {
    pub name: Option<Ident>,
    pub value: Option<Expr>,
}

#[derive(Clone, Debug)]
pub enum CastKind {
    Type(Box<DataType>),
    /// `8'(x)`, `WIDTH'(x)`; whether the name is a type or a constant only elaboration knows.
    Size(Box<Expr>),
    Signed,
    Unsigned,
    Const,
}

#[derive(Clone, Debug)]
pub struct PatternItem {
    pub key: PatternKey,
    pub value: Expr,
}

#[derive(Clone, Debug)]
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

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum SliceKind {
    /// `[left:right]`
    Constant,
    /// `[left +: right]`
    Up,
    /// `[left -: right]`
    Down,
}

/// An integer literal with its digits expanded to bits.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Literal {
    /// `None` for an unsized literal (at least 32 bits).
    pub width: Option<u32>,
    pub signed: bool,
    /// `false` for a plain decimal such as `42` (which is signed).
    pub based: bool,
    /// One of `0 1 x z` per bit, most significant first, as many as the digits gave (not yet sized).
    pub bits: String,
}

#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
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

#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
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
