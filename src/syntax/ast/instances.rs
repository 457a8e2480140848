//! What is instantiated: modules, gate primitives and user-defined primitives with their tables.

use serde::{Deserialize, Serialize};

use super::{Dim, Expr, Ident};
use crate::source::Span;

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Instance {
    pub name: Ident,
    /// Instance array dimensions.
    pub dims: Vec<Dim>,
    pub connections: Vec<Connection>,
    pub span: Span,
}

/// A port connection or a parameter override.
#[derive(Clone, Debug, Serialize, Deserialize)]
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

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
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

#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct GateInstance {
    pub name: Option<Ident>,
    pub dims: Vec<Dim>,
    pub terminals: Vec<Expr>,
    pub span: Span,
}

#[derive(Clone, Debug, Serialize, Deserialize)]
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
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct UdpRow {
    pub inputs: Vec<UdpSymbol>,
    /// The current-state column of a sequential table.
    pub state: Option<char>,
    /// `0`, `1`, `x` or `-`.
    pub output: char,
    pub span: Span,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum UdpSymbol {
    Level(char),
    /// `(ab)`; the letters `r f p n *` are kept as `Level`-free edges: r = (01), f = (10), p, n and * by their letter.
    Edge(char, char),
    EdgeLetter(char),
}
