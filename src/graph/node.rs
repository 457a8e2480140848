//! The meaning of the gate graph. Each node is one bit; what a node does with a waveform is fixed here and nowhere
//! else. A waveform is three bits `(i, f, h)`: initial value, final value, and "some order of delays shows more changes
//! than `i -> f` needs" (the eight-valued restriction of the hazard algebras of Brzozowski and Esik, Formal Methods in
//! System Design 23, 2003). The graph is never simplified: redundant gates are what makes a cover hazard-free. Only
//! literal constants are folded, by the builder.

use serde::{Deserialize, Serialize};

use crate::define_id;

define_id!(NodeId, "n", "A node of the gate graph: one bit.");
define_id!(InstanceId, "i", "An instance of the hierarchy; generate blocks count as part of the path.");
define_id!(NetId, "w", "A declared net or variable, all its bits.");
define_id!(TableId, "t", "The table of a combinational user-defined primitive.");
define_id!(OperatorId, "o", "An arithmetic operator as written, or the read port of a memory.");
define_id!(CellId, "c", "A flip-flop or latch bit.");
define_id!(PortId, "p", "A port of a top.");

/// What a node is.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug, Serialize)]
pub enum NodeKind {
    /// Clean constant. No fan-in.
    Const(bool),
    /// An `x` or `z` literal or an undriven net: a constant nobody knows. Never changes. No fan-in.
    Unknown,
    /// A source: changes cleanly, freely. No fan-in.
    Source(SourceKind),
    /// A bit of a declared net: passes the waveform of its one fan-in; with no fan-in it is undriven and acts as
    /// [`NodeKind::Unknown`]. Not a gate: never counted in a path.
    Wire,
    /// Any width. `i`, `f` by the function. `h` of AND and NAND: 0 if some input is a clean constant 0; else 1 if any input
    /// has `h`, or if one input rises and another falls; else 0. OR and NOR: the dual. XOR and XNOR: 1 if any input has
    /// `h` or two or more inputs change. BUF and NOT: the input's `h`.
    Gate(GateKind),
    /// A user-defined primitive. Write `c` for the cube spanned by the inputs: a constant where an input is a clean
    /// constant, free elsewhere. `h` is 0 when some row resolves `c` to 0 or 1 (then `i = f`), or when exactly one
    /// input changes, cleanly, all others are clean constants and `i != f`; otherwise 1. An `x` entry of a row counts as
    /// `?` here, and a row counts only if the table gives its result for every combination of 0 and 1 that fits it.
    /// Combinations without a row have the value 0 and promise nothing.
    Table(TableId),
    /// Entry of the blasted form of an arithmetic operator: `i`, `f` pass, `h' = h or i != f`. Behind it ordinary gates give
    /// the exact function, and their algebra then yields "hazard as soon as the result is not forced by clean
    /// constants", because no implementation is fixed before synthesis.
    OpIn(OperatorId),
    /// Exit of an operator: passes its one fan-in. Marks where operator hazards begin, so that they can be told apart.
    OpOut(OperatorId),
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum SourceKind {
    Input,
    FlipFlop,
    Latch,
    BlackBox,
    Memory,
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize)]
pub enum GateKind {
    Buf,
    Not,
    And,
    Nand,
    Or,
    Nor,
    Xor,
    Xnor,
}

impl GateKind {
    /// The primitive's name in IEEE 1364.
    pub fn name(self) -> &'static str {
        match self {
            GateKind::Buf => "buf",
            GateKind::Not => "not",
            GateKind::And => "and",
            GateKind::Nand => "nand",
            GateKind::Or => "or",
            GateKind::Nor => "nor",
            GateKind::Xor => "xor",
            GateKind::Xnor => "xnor",
        }
    }

    /// Whether the output is the complement of the plain gate's.
    pub fn inverts(self) -> bool {
        matches!(self, GateKind::Not | GateKind::Nand | GateKind::Nor | GateKind::Xnor)
    }
}

/// A combinational user-defined primitive. `rows` hold one symbol per input in port order: `Some(bit)` or `None` for
/// `?`, `b` folded out beforehand; an `x` symbol is kept as [`Symbol::X`].
#[derive(Clone, PartialEq, Eq, Hash, Debug, Serialize)]
pub struct Table {
    pub name: String,
    pub rows: Vec<(Vec<Symbol>, Symbol)>,
}

/// A symbol of a table row.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug, Serialize)]
pub enum Symbol {
    Zero,
    One,
    X,
    /// `?`: 0, 1 or x. Input columns only.
    Any,
    /// `b`: 0 or 1. Input columns only.
    Binary,
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Edge {
    Posedge,
    Negedge,
    Both,
}

/// A flip-flop or latch of one bit. Its output is a source node; its pins are where hazards do harm. A flip-flop that the
/// edges of several signals clock is one cell for each of them, all with the same output, data and controls.
#[derive(Clone, Debug)]
pub struct Cell {
    pub kind: CellKind,
    /// The `Source(FlipFlop)` or `Source(Latch)` node.
    pub output: NodeId,
    pub data: NodeId,
    /// Asynchronous controls in order of priority, the strongest first.
    pub controls: Vec<Control>,
    /// Value given by an initialiser or an `initial` block.
    pub init: Option<bool>,
    /// For a latch inferred from an incomplete assignment: the place whose assignment is missing.
    pub inferred_from: Option<crate::source::Span>,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum CellKind {
    FlipFlop {
        clock: NodeId,
        edge: Edge,
    },
    /// Transparent while `enable` equals `active`.
    Latch {
        enable: NodeId,
        active: bool,
    },
}

/// An asynchronous control pin: while `net` equals `active` (and no stronger control is active) the cell takes `value`.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Control {
    pub net: NodeId,
    pub active: bool,
    /// A `Const` node for a set or reset, anything else is a load.
    pub value: NodeId,
}

/// A declared net or variable.
#[derive(Clone, Debug)]
pub struct Net {
    pub instance: InstanceId,
    /// Name within the instance, escaped identifiers without their backslash; generate block labels are part of the
    /// instance path, not of the name.
    pub name: String,
    /// The declaration.
    pub span: crate::source::Span,
    /// Least significant bit first; the `Wire` node of each bit.
    pub bits: Vec<NodeId>,
    /// Whether a one-bit net is written without an index.
    pub scalar: bool,
}

#[derive(Clone, Debug)]
pub struct Instance {
    pub parent: Option<InstanceId>,
    /// Full path from the top: `top.u_core.gen[3].u_cell`.
    pub path: String,
    pub module: String,
    /// Whether it is a generate block, in which the names of its parent are visible.
    pub block: bool,
    pub span: Option<crate::source::Span>,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum PortDirection {
    Input,
    Output,
    Inout,
}

/// A port of a top module.
#[derive(Clone, Debug)]
pub struct Port {
    pub instance: InstanceId,
    pub name: String,
    pub direction: PortDirection,
    pub net: NetId,
    /// Declared index range `[left:right]` of a vector, `None` for a scalar or a port of another shape.
    pub range: Option<(i64, i64)>,
}

/// An arithmetic operator or memory read port, for messages: what it is and where.
#[derive(Clone, Debug)]
pub struct Operator {
    /// In the reader's words: "adder", "comparison", "shift", "memory read".
    pub what: &'static str,
    pub span: Option<crate::source::Span>,
}

/// An instance of a module whose text is missing or that could not be elaborated.
#[derive(Clone, Debug)]
pub struct BlackBox {
    pub module: String,
    pub instance: InstanceId,
    /// Port name (or position) and the nodes connected, least significant bit first.
    pub inputs: Vec<(String, Vec<NodeId>)>,
    /// Port name (or position) and the source nodes that stand for it.
    pub outputs: Vec<(String, Vec<NodeId>)>,
    /// The connections at pins that are declared to act like those of flip-flops and latches.
    pub pins: Vec<BoxPin>,
}

/// A declared pin of a module without text, one bit.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct BoxPin {
    pub net: NodeId,
    pub role: BoxRole,
}

/// What a declared pin does; the level is the one at which it acts.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum BoxRole {
    Clock(Edge),
    Set(bool),
    Reset(bool),
    /// Transparent or writing while at this level.
    Enable(bool),
}
