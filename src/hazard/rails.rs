//! Three-valued evaluation, 64 patterns at a time, of logic without loops. Each node carries two words, "may be 0" and
//! "may be 1"; both set is the unknown of ternary simulation (Eichelberger, IBM J. R&D 9, 1965). Definite inputs give
//! definite results, so the same code makes truth tables. Combinations without a row in a table count as 0, as they do
//! in the decision.

use super::order::Order;
use super::tables::{Need, Promises};
use crate::graph::{GateKind, Graph, NodeId, NodeKind};

/// One node under 64 patterns.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Rails {
    pub(super) zero: u64,
    pub(super) one: u64,
}

impl Rails {
    pub(super) const UNKNOWN: Rails = Rails { zero: !0, one: !0 };

    pub(super) fn definite(word: u64) -> Self {
        Self { zero: !word, one: word }
    }

    pub(super) fn constant(value: bool) -> Self {
        Self::definite(if value { !0 } else { 0 })
    }

    /// Patterns whose value is unknown.
    pub(super) fn unknown(self) -> u64 {
        self.zero & self.one
    }

    fn inverted(self) -> Self {
        Self { zero: self.one, one: self.zero }
    }
}

/// The word of variable `index` in block `block` of a table that counts through all values of its variables, the first
/// variable fastest.
pub(super) fn counting(index: usize, block: usize) -> u64 {
    const FAST: [u64; 6] = [
        0xaaaa_aaaa_aaaa_aaaa,
        0xcccc_cccc_cccc_cccc,
        0xf0f0_f0f0_f0f0_f0f0,
        0xff00_ff00_ff00_ff00,
        0xffff_0000_ffff_0000,
        0xffff_ffff_0000_0000,
    ];
    match FAST.get(index) {
        Some(&word) => word,
        None if block >> (index - 6) & 1 == 1 => !0,
        None => 0,
    }
}

/// The logic behind some nodes, ready to be evaluated again and again.
pub(super) struct Evaluator<'a> {
    graph: &'a Graph,
    nodes: Vec<NodeId>,
    promises: Vec<Option<Promises>>,
    values: Vec<Rails>,
    pins: Vec<Rails>,
}

impl<'a> Evaluator<'a> {
    pub(super) fn new(graph: &'a Graph, targets: &[NodeId]) -> Self {
        let nodes = Order::new(graph, targets).nodes;
        let mut promises: Vec<Option<Promises>> = graph.tables.iter().map(|_| None).collect();
        for &node in &nodes {
            if let NodeKind::Table(table) = graph.kind(node) {
                promises[table.index()].get_or_insert_with(|| Promises::new(&graph.tables[table.index()]));
            }
        }
        Self { graph, nodes, promises, values: vec![Rails::UNKNOWN; graph.len()], pins: Vec::new() }
    }

    /// The nodes that get their value from outside: sources, unknown constants, undriven wires; sorted.
    pub(super) fn leaves(&self) -> Vec<NodeId> {
        let mut leaves: Vec<NodeId> = self.nodes.iter().copied().filter(|&node| is_leaf(self.graph, node)).collect();
        leaves.sort_unstable();
        leaves
    }

    /// All nodes in the order of evaluation.
    pub(super) fn nodes(&self) -> &[NodeId] {
        &self.nodes
    }

    /// Sets a leaf for the next run.
    pub(super) fn set(&mut self, leaf: NodeId, value: Rails) {
        self.values[leaf.index()] = value;
    }

    pub(super) fn get(&self, node: NodeId) -> Rails {
        self.values[node.index()]
    }

    /// Evaluates everything from the leaves.
    pub(super) fn run(&mut self) {
        for &node in &self.nodes {
            if is_leaf(self.graph, node) {
                continue;
            }
            self.pins.clear();
            self.pins.extend(self.graph.fanin(node).iter().map(|pin| self.values[pin.index()]));
            self.values[node.index()] = match self.graph.kind(node) {
                NodeKind::Const(value) => Rails::constant(value),
                NodeKind::Gate(kind) => gate(kind, &self.pins),
                NodeKind::Table(table) => match &self.promises[table.index()] {
                    Some(promises) => promised(promises, &self.pins),
                    None => Rails::UNKNOWN,
                },
                _ => self.pins.first().copied().unwrap_or(Rails::UNKNOWN),
            };
        }
    }
}

/// Whether a node takes its value from outside the logic.
pub(super) fn is_leaf(graph: &Graph, node: NodeId) -> bool {
    graph.is_static(node)
        || graph.fanin(node).is_empty() && !matches!(graph.kind(node), NodeKind::Const(_) | NodeKind::Table(_))
}

fn gate(kind: GateKind, pins: &[Rails]) -> Rails {
    let plain = match kind {
        GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => pins
            .iter()
            .fold(Rails::constant(true), |all, pin| Rails { zero: all.zero | pin.zero, one: all.one & pin.one }),
        GateKind::Or | GateKind::Nor => pins
            .iter()
            .fold(Rails::constant(false), |all, pin| Rails { zero: all.zero & pin.zero, one: all.one | pin.one }),
        GateKind::Xor | GateKind::Xnor => pins.iter().fold(Rails::constant(false), |all, pin| Rails {
            zero: all.zero & pin.zero | all.one & pin.one,
            one: all.zero & pin.one | all.one & pin.zero,
        }),
    };
    if kind.inverts() { plain.inverted() } else { plain }
}

/// A table knows its result where a row promises it, or where all inputs are known.
fn promised(promises: &Promises, pins: &[Rails]) -> Rails {
    let mut result = Rails::UNKNOWN;
    for (needs, value) in &promises.rows {
        let fits = needs.iter().zip(pins).fold(!0, |fits, (need, pin)| match need {
            Need::Value(true) => fits & !pin.zero,
            Need::Value(false) => fits & !pin.one,
            Need::Still => fits & !pin.unknown(),
            Need::Nothing => fits,
        });
        if *value {
            result.zero &= !fits;
        } else {
            result.one &= !fits;
        }
    }
    let mut open = result.unknown() & !pins.iter().fold(0, |unknown, pin| unknown | pin.unknown());
    for (needs, value) in &promises.function {
        let fits = needs.iter().zip(pins).fold(open, |fits, (need, pin)| match need {
            Need::Value(true) => fits & pin.one,
            Need::Value(false) => fits & pin.zero,
            _ => fits,
        });
        if *value {
            result.zero &= !fits;
        } else {
            result.one &= !fits;
        }
        open &= !fits;
    }
    result.one &= !open;
    result
}
