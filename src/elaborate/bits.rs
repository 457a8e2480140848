//! One bit of an expression while it is being elaborated: a literal constant, a node of the graph, or a bit that is only
//! sometimes there (driven by a tri-state, assigned on some paths). Literal constants stay outside the graph until
//! something needs a node, so that constant expressions cost nothing and keep x apart from z.
//! Invariant: `Bit::Node` never holds a literal constant node.

use super::context::Elaborator;
use super::value::{Logic, Value};
use crate::graph::{GateKind, NodeId, Site};
use crate::source::Span;

/// See the module documentation.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub(super) enum Bit {
    Zero,
    One,
    X,
    Z,
    Node(NodeId),
    /// Driven only while enabled, high impedance otherwise; an index into the table of guarded bits.
    Tri(u32),
    /// Not assigned so far by the process that is being executed.
    Held,
    /// Assigned only while enabled, held otherwise; an index into the table of guarded bits.
    Partial(u32),
}

/// A bit that is there only while `enable` is 1.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Guarded {
    pub enable: Bit,
    pub data: Bit,
    /// The statement that leaves the bit unassigned when its condition does not hold.
    pub from: Option<Span>,
    /// What was decided before anything else, when that makes the bit a constant.
    pub preset: Option<Preset>,
}

/// The form of an asynchronous control: while `condition` has the value `when` the bit is the constant `value`, otherwise it
/// is `rest`, which is only there at times.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Preset {
    pub condition: NodeId,
    pub when: bool,
    pub value: Bit,
    pub rest: Bit,
}

impl Bit {
    /// The literal constant, if it is one.
    pub fn logic(self) -> Option<Logic> {
        match self {
            Bit::Zero => Some(Logic::Zero),
            Bit::One => Some(Logic::One),
            Bit::X => Some(Logic::X),
            Bit::Z => Some(Logic::Z),
            _ => None,
        }
    }

    pub fn is_literal(self) -> bool {
        self.logic().is_some()
    }

    fn comes_and_goes(self) -> bool {
        matches!(self, Bit::Z | Bit::Tri(_))
    }

    fn held(self) -> bool {
        matches!(self, Bit::Held | Bit::Partial(_))
    }
}

impl From<Logic> for Bit {
    fn from(logic: Logic) -> Self {
        match logic {
            Logic::Zero => Bit::Zero,
            Logic::One => Bit::One,
            Logic::X => Bit::X,
            Logic::Z => Bit::Z,
        }
    }
}

impl From<bool> for Bit {
    fn from(bit: bool) -> Self {
        if bit { Bit::One } else { Bit::Zero }
    }
}

/// The constant that the bits are, when all of them are literal.
pub(super) fn to_value(bits: &[Bit], signed: bool) -> Option<Value> {
    let bits = bits.iter().map(|bit| bit.logic()).collect::<Option<Vec<Logic>>>()?;
    Some(Value::new(signed, bits))
}

pub(super) fn from_value(value: &Value) -> Vec<Bit> {
    value.bits.iter().map(|&bit| bit.into()).collect()
}

/// Cut or extended to `width`, by the top bit when `signed`.
pub(super) fn extend(mut bits: Vec<Bit>, width: usize, signed: bool) -> Vec<Bit> {
    let fill = match bits.last() {
        Some(&top) if signed => top,
        _ => Bit::Zero,
    };
    bits.resize(width, fill);
    bits
}

impl Elaborator<'_> {
    /// The bit that a node is.
    pub fn lift(&self, node: NodeId) -> Bit {
        match self.builder.as_constant(node) {
            Some(value) => value.into(),
            None => Bit::Node(node),
        }
    }

    /// The node that stands for a bit. What is x, undriven or not assigned is an unknown constant.
    pub fn node(&mut self, bit: Bit, site: Site) -> NodeId {
        match bit {
            Bit::Zero => self.builder.constant(false),
            Bit::One => self.builder.constant(true),
            Bit::Node(node) => node,
            Bit::X | Bit::Z | Bit::Held => self.builder.unknown(site),
            Bit::Tri(index) | Bit::Partial(index) => {
                let Guarded { enable, data, .. } = self.guarded[index as usize];
                let enable = self.node(enable, site);
                let data = self.node(data, site);
                let unknown = self.builder.unknown(site);
                self.builder.select(enable, data, unknown, site)
            }
        }
    }

    pub fn nodes(&mut self, bits: &[Bit], site: Site) -> Vec<NodeId> {
        bits.iter().map(|&bit| self.node(bit, site)).collect()
    }

    pub fn lift_all(&self, nodes: &[NodeId]) -> Vec<Bit> {
        nodes.iter().map(|&node| self.lift(node)).collect()
    }

    /// A gate over bits; literal constants are folded, x by the rules of four-state logic.
    pub fn gate(&mut self, kind: GateKind, inputs: &[Bit], site: Site) -> Bit {
        let dominant = match kind {
            GateKind::And | GateKind::Nand => Some(Bit::Zero),
            GateKind::Or | GateKind::Nor => Some(Bit::One),
            _ => None,
        };
        if let Some(dominant) = dominant
            && inputs.contains(&dominant)
        {
            return Bit::from((dominant == Bit::One) ^ kind.inverts());
        }
        let unknown = |bit: &Bit| matches!(bit, Bit::X | Bit::Z);
        if inputs.iter().all(|bit| bit.is_literal()) && inputs.iter().any(unknown) {
            return Bit::X;
        }
        let nodes = self.nodes(inputs, site);
        let node = self.builder.gate(kind, &nodes, site);
        self.lift(node)
    }

    pub fn not(&mut self, input: Bit, site: Site) -> Bit {
        self.gate(GateKind::Not, &[input], site)
    }

    pub fn and(&mut self, inputs: &[Bit], site: Site) -> Bit {
        self.gate(GateKind::And, inputs, site)
    }

    pub fn or(&mut self, inputs: &[Bit], site: Site) -> Bit {
        self.gate(GateKind::Or, inputs, site)
    }

    /// The two-way selector as written; only literal conditions and equal literal alternatives are folded. Alternatives that
    /// are undriven or not assigned give a bit that is guarded by its enable.
    pub fn select(&mut self, condition: Bit, then: Bit, otherwise: Bit, site: Site) -> Bit {
        match condition {
            Bit::One => return then,
            Bit::Zero => return otherwise,
            _ => {}
        }
        if then == otherwise && !matches!(then, Bit::Node(_)) {
            return then;
        }
        if then.held() || otherwise.held() {
            return self.select_guarded(condition, then, otherwise, true, site);
        }
        if then.comes_and_goes() || otherwise.comes_and_goes() {
            return self.select_guarded(condition, then, otherwise, false, site);
        }
        match (condition, then, otherwise) {
            (Bit::X | Bit::Z, then, otherwise) if then.is_literal() && otherwise.is_literal() => return Bit::X,
            (_, Bit::One, Bit::Zero) => return condition,
            (_, Bit::Zero, Bit::One) => return self.not(condition, site),
            _ => {}
        }
        let condition = self.node(condition, site);
        let then = self.node(then, site);
        let otherwise = self.node(otherwise, site);
        let node = self.builder.select(condition, then, otherwise, site);
        self.lift(node)
    }

    /// When the bit is there and what it then is; no data when it never is.
    pub fn split(&self, bit: Bit, held: bool) -> (Bit, Option<Bit>, Option<Span>) {
        match bit {
            Bit::Held if held => (Bit::Zero, None, None),
            Bit::Z if !held => (Bit::Zero, None, None),
            Bit::Partial(index) if held => {
                let Guarded { enable, data, from, .. } = self.guarded[index as usize];
                (enable, Some(data), from)
            }
            Bit::Tri(index) if !held => {
                let Guarded { enable, data, from, .. } = self.guarded[index as usize];
                (enable, Some(data), from)
            }
            other => (Bit::One, Some(other), None),
        }
    }

    fn select_guarded(&mut self, condition: Bit, then: Bit, otherwise: Bit, held: bool, site: Site) -> Bit {
        let (enable_a, data_a, from_a) = self.split(then, held);
        let (enable_b, data_b, from_b) = self.split(otherwise, held);
        let enable = self.select(condition, enable_a, enable_b, site);
        let data = match (data_a, data_b) {
            (Some(a), Some(b)) => self.select(condition, a, b, site),
            (Some(data), None) | (None, Some(data)) => data,
            (None, None) => return then,
        };
        let bit = self.guard(enable, data, from_a.or(from_b).or(site.span), held);
        if let (Bit::Partial(index), Bit::Node(condition)) = (bit, condition) {
            self.guarded[index as usize].preset = match (then, otherwise) {
                (Bit::Zero | Bit::One, Bit::Partial(_)) => {
                    Some(Preset { condition, when: true, value: then, rest: otherwise })
                }
                (Bit::Partial(_), Bit::Zero | Bit::One) => {
                    Some(Preset { condition, when: false, value: otherwise, rest: then })
                }
                _ => None,
            };
        }
        bit
    }

    /// A bit that is `data` while `enable` is 1 and otherwise held or undriven.
    pub fn guard(&mut self, enable: Bit, data: Bit, from: Option<Span>, held: bool) -> Bit {
        match enable {
            Bit::One => data,
            Bit::Zero if held => Bit::Held,
            Bit::Zero => Bit::Z,
            _ => {
                let index = self.guarded.len() as u32;
                self.guarded.push(Guarded { enable, data, from, preset: None });
                if held { Bit::Partial(index) } else { Bit::Tri(index) }
            }
        }
    }

    /// The truth of a vector: the OR of its bits.
    pub fn truth(&mut self, bits: &[Bit], site: Site) -> Bit {
        match bits {
            [bit] => match bit {
                Bit::Z => Bit::X,
                other => *other,
            },
            bits => self.or(bits, site),
        }
    }

    /// Equality as the AND of one literal or XNOR a bit.
    pub fn equal(&mut self, a: &[Bit], b: &[Bit], site: Site) -> Bit {
        let terms: Vec<Bit> = a.iter().zip(b).map(|(&a, &b)| self.gate(GateKind::Xnor, &[a, b], site)).collect();
        self.and(&terms, site)
    }

    /// Whether an index of the given sign has the value `number`: an AND of literals, 0 when it never can.
    pub fn equal_number(&mut self, bits: &[Bit], signed: bool, number: i64, site: Site) -> Bit {
        let width = bits.len();
        let fits = match (signed, width) {
            (true, 1..=62) => (-(1i64 << (width - 1))..1i64 << (width - 1)).contains(&number),
            (false, 0..=62) => (0..1i64 << width).contains(&number),
            (true, _) => width > 0,
            (false, _) => number >= 0,
        };
        if !fits {
            return Bit::Zero;
        }
        let mut terms = Vec::with_capacity(width);
        for (at, &bit) in bits.iter().enumerate() {
            let one = number >> at.min(63) & 1 == 1;
            terms.push(if one { bit } else { self.not(bit, site) });
        }
        self.and(&terms, site)
    }
}
