//! The waveform of one net during one transition, and the algebra that the documentation of [`NodeKind`] fixes, one
//! net at a time. This is the slow and plain evaluator: messages, paths and tests use it; the decision itself runs on
//! bit-parallel and symbolic forms that must agree with it.

use std::collections::BTreeMap;

use super::order::Order;
use super::tables::Promises;
use crate::graph::{GateKind, Graph, NodeId, NodeKind};

/// Initial value, final value, and whether some order of delays shows more changes than these need.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct Wave {
    pub i: bool,
    pub f: bool,
    pub h: bool,
}

impl Wave {
    /// A net that holds still.
    pub fn constant(value: bool) -> Self {
        Self { i: value, f: value, h: false }
    }

    /// A clean transition, or a constant when both values agree.
    pub fn clean(i: bool, f: bool) -> Self {
        Self { i, f, h: false }
    }

    /// Whether the final value differs from the initial one.
    pub fn changes(self) -> bool {
        self.i != self.f
    }

    /// Whether the net does anything at all.
    pub fn moves(self) -> bool {
        self.changes() || self.h
    }

    pub fn rises(self) -> bool {
        !self.i && self.f
    }

    pub fn falls(self) -> bool {
        self.i && !self.f
    }

    /// Whether the net is this constant, cleanly.
    pub fn holds(self, value: bool) -> bool {
        self == Self::constant(value)
    }

    pub(super) fn inverted(self) -> Self {
        Self { i: !self.i, f: !self.f, h: self.h }
    }

    /// The kind of hazard the waveform shows.
    pub fn hazard(self) -> Option<super::HazardKind> {
        match (self.h, self.i, self.f) {
            (false, _, _) => None,
            (true, false, false) => Some(super::HazardKind::Static0),
            (true, true, true) => Some(super::HazardKind::Static1),
            (true, _, _) => Some(super::HazardKind::Dynamic),
        }
    }
}

/// The waveform of a gate from those of its pins.
pub(crate) fn gate(kind: GateKind, inputs: &[Wave]) -> Wave {
    let plain = match kind {
        GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => and(inputs),
        GateKind::Or | GateKind::Nor => {
            let inverted: Vec<Wave> = inputs.iter().map(|wave| wave.inverted()).collect();
            and(&inverted).inverted()
        }
        GateKind::Xor | GateKind::Xnor => Wave {
            i: inputs.iter().filter(|wave| wave.i).count() % 2 == 1,
            f: inputs.iter().filter(|wave| wave.f).count() % 2 == 1,
            h: inputs.iter().any(|wave| wave.h) || inputs.iter().filter(|wave| wave.changes()).count() >= 2,
        },
    };
    if kind.inverts() { plain.inverted() } else { plain }
}

fn and(inputs: &[Wave]) -> Wave {
    let forced = inputs.iter().any(|wave| wave.holds(false));
    let meets = inputs.iter().any(|wave| wave.rises()) && inputs.iter().any(|wave| wave.falls());
    Wave {
        i: inputs.iter().all(|wave| wave.i),
        f: inputs.iter().all(|wave| wave.f),
        h: !forced && (meets || inputs.iter().any(|wave| wave.h)),
    }
}

/// The waveforms of all nodes of `order`. Sources, unknown constants and nodes on combinational loops
/// take their values from `before` and `after`; what is missing there holds 0 (or, missing in `after`, its value in
/// `before`). With `ignore_operators` the exits of operators are clean.
pub(super) fn waves(
    graph: &Graph,
    order: &Order,
    before: &BTreeMap<NodeId, bool>,
    after: &BTreeMap<NodeId, bool>,
    ignore_operators: bool,
) -> BTreeMap<NodeId, Wave> {
    let mut waves = BTreeMap::new();
    let mut inputs = Vec::new();
    for (&node, &looped) in order.nodes.iter().zip(&order.looped) {
        let free = || {
            let i = before.get(&node).copied().unwrap_or(false);
            Wave::clean(i, after.get(&node).copied().unwrap_or(i))
        };
        inputs.clear();
        if !looped {
            inputs.extend(graph.fanin(node).iter().filter_map(|fanin| waves.get(fanin).copied()));
        }
        let wave = match (graph.kind(node), inputs.as_slice()) {
            (_, _) if looped => free(),
            (NodeKind::Const(value), _) => Wave::constant(value),
            (NodeKind::Unknown | NodeKind::Source(_), _) => free(),
            (NodeKind::OpOut(_), &[driver]) if ignore_operators => Wave { h: false, ..driver },
            (NodeKind::Wire | NodeKind::OpOut(_), &[driver]) => driver,
            (NodeKind::OpIn(_), &[driver]) => Wave { h: driver.h || driver.changes(), ..driver },
            (NodeKind::Wire | NodeKind::OpOut(_) | NodeKind::OpIn(_), _) => free(),
            (NodeKind::Gate(kind), inputs) => gate(kind, inputs),
            (NodeKind::Table(table), inputs) => Promises::new(&graph.tables[table.index()]).wave(inputs),
        };
        waves.insert(node, wave);
    }
    waves
}

/// The waveform of `node` when the sources go from `before` to `after`. Sources (and unknown constants, and nodes on
/// combinational loops, which count as free) that are missing hold 0.
pub fn waveform(graph: &Graph, before: &BTreeMap<NodeId, bool>, after: &BTreeMap<NodeId, bool>, node: NodeId) -> Wave {
    let order = Order::new(graph, &[node]);
    waves(graph, &order, before, after, false).get(&node).copied().unwrap_or(Wave::constant(false))
}
