//! Terms on which the stillness of a net rests. A pin of an AND or OR is such a term when the net keeps its function
//! without it but not its stillness: a synthesiser that optimises the function is free to take it away, and the hazard is
//! back. Simulation of random patterns sorts out nearly every pin; the others are proven, function and hazard both.

use super::clauses::Clauses;
use super::cone::{Cone, Edge, Op};
use super::order::Order;
use super::rails::{Evaluator, Rails, counting};
use super::search::noise;
use super::simulate::{self, Lanes, NONE};
use super::solver::{Answer, Batsat, Literal, Solver};
use super::{HazardKind, Options, Witness, decide};
use crate::graph::cone;
use crate::graph::{GateKind, Graph, NodeId, NodeKind};

/// Nets with more nodes behind them are not looked into.
const NODES: usize = 600;
/// Batches of random patterns; one is enough for nearly every pin.
const BATCHES: u64 = 4;
/// Pins of one net that simulation leaves for a proof.
const SUSPECTS: usize = 64;

/// One pin; see the module documentation.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Redundant {
    pub gate: NodeId,
    /// Which of the gate's pins.
    pub pin: usize,
    /// What the target shows without the pin.
    pub kind: HazardKind,
    pub witness: Witness,
}

/// The redundant pins behind a clean target, by gate and pin. Only logic as it is written counts, not what arithmetic
/// is made of.
pub fn redundant(graph: &Graph, target: NodeId, options: &Options) -> Vec<Redundant> {
    let order = Order::new(graph, &[target]);
    if order.nodes.len() > NODES || order.has_loop(graph) {
        return Vec::new();
    }
    let mut suspects = suspects(graph, target);
    let inner = inner(graph, &order);
    suspects.retain(|(gate, _)| !inner.contains(gate));
    suspects.sort_unstable();
    suspects.truncate(SUSPECTS);
    suspects.into_iter().filter_map(|(gate, pin)| proven(graph, target, gate, pin, options)).collect()
}

/// Nodes inside arithmetic operators.
fn inner(graph: &Graph, order: &Order) -> std::collections::BTreeSet<NodeId> {
    let mut inner = std::collections::BTreeSet::new();
    for &node in &order.nodes {
        let within = match graph.kind(node) {
            NodeKind::OpIn(_) => true,
            NodeKind::OpOut(_) => false,
            _ => graph.fanin(node).iter().any(|pin| inner.contains(pin)),
        };
        if within {
            inner.insert(node);
        }
    }
    inner
}

/// The pins whose loss no random pattern shows.
fn suspects(graph: &Graph, target: NodeId) -> Vec<(NodeId, usize)> {
    let cone = Cone::new(graph, &[target], false);
    let Some(&root) = cone.roots.first() else { return Vec::new() };
    let mut left: Vec<(usize, usize)> = (0..cone.len())
        .filter(|&node| cone.ops[node] == Op::And && cone.fanin(node).len() > 1)
        .flat_map(|node| (0..cone.fanin(node).len()).map(move |pin| (node, pin)))
        .collect();
    for batch in 0..BATCHES {
        let mut values: Vec<Lanes> = vec![NONE; cone.len()];
        for &free in &cone.frees {
            values[free as usize] = noise((batch << 32) | (u64::from(free) + 1));
        }
        simulate::values(&cone, 0..cone.len(), &mut values);
        left.retain(|&(node, pin)| {
            let mut without = values.clone();
            without[node] = conjunction(&cone, node, pin, &values);
            // What did not change at the gate itself does not change behind it.
            if without[node] == values[node] {
                return true;
            }
            simulate::values(&cone, node + 1..cone.len(), &mut without);
            without[root.node()] == values[root.node()]
        });
    }
    left.into_iter().map(|(node, pin)| (cone.origin[node], pin)).collect()
}

/// The AND of all pins but one.
fn conjunction(cone: &Cone, node: usize, left_out: usize, values: &[Lanes]) -> Lanes {
    let mut all: Lanes = [u64::MAX; NONE.len()];
    let pins: Vec<Edge> = cone.fanin(node).to_vec();
    for (_, pin) in pins.iter().enumerate().filter(|(at, _)| *at != left_out) {
        for (word, value) in all.iter_mut().zip(&values[pin.node()]) {
            *word &= value ^ pin.mask();
        }
    }
    all
}

/// The pin, if the target keeps its function without it and shows a hazard.
fn proven(graph: &Graph, target: NodeId, gate: NodeId, pin: usize, options: &Options) -> Option<Redundant> {
    let NodeKind::Gate(kind) = graph.kind(gate) else { return None };
    let mut cone = cone::Cone::of(graph, &[target]);
    let near = cone.copy_of(gate)?;
    let pins = graph.fanin(gate).iter().enumerate().filter(|(at, _)| *at != pin);
    let pins: Vec<NodeId> = pins.filter_map(|(_, &driver)| cone.copy_of(driver)).collect();
    let weaker = cone.gate(kind, &pins, near);
    let original = cone.copy_of(target)?;
    let changed = cone.repeat(graph, &[target], |node| (node == gate).then_some(weaker)).pop()?;
    let differs = cone.gate(GateKind::Xor, &[original, changed], near);
    let frozen = cone.freeze();
    if !never(&frozen.graph, differs, options) {
        return None;
    }
    let options = Options { one_per_kind: true, ignore_operators: false, ..*options };
    let verdict = decide(&frozen.graph, &[changed], &options).pop()?;
    let (kind, mut witness) = verdict.pairs.into_iter().flat_map(|pair| pair.hazards).next()?;
    for (node, _) in witness.changes.iter_mut().chain(&mut witness.holds) {
        *node = frozen.original(*node)?;
    }
    Some(Redundant { gate, pin, kind, witness })
}

/// Whether a node is 0 for all values of its sources.
fn never(graph: &Graph, node: NodeId, options: &Options) -> bool {
    let mut evaluator = Evaluator::new(graph, &[node]);
    let leaves = evaluator.leaves();
    if leaves.len() <= options.exhaustive_sources {
        let blocks = 1usize << leaves.len().saturating_sub(6);
        return (0..blocks).all(|block| {
            for (index, &leaf) in leaves.iter().enumerate() {
                evaluator.set(leaf, Rails::definite(counting(index, block)));
            }
            evaluator.run();
            evaluator.get(node).one == 0
        });
    }
    let mut clauses: Clauses<Batsat> = Clauses::new();
    let known: std::collections::BTreeMap<NodeId, Literal> =
        leaves.iter().map(|&leaf| (leaf, clauses.solver.variable())).collect();
    let nodes = Order::new(graph, &[node]).nodes;
    let zero = !clauses.one;
    let values = clauses.copy(graph, &nodes, |leaf| known.get(&leaf).copied().unwrap_or(zero));
    let Some(value) = values[node.index()] else { return false };
    clauses.solver.solve(&[value], options.conflicts) == Answer::Unsatisfiable
}
