//! A loop cut open: a set of feedback nodes such that nothing is circular when their readers read free variables
//! instead. What drives a feedback node is then its next-state function, and the stable states of the loop are exactly
//! the points where every next state equals the state.

use std::collections::{BTreeMap, BTreeSet};

use crate::graph::cone::Cone;
use crate::graph::cycles::{self, Components};
use crate::graph::{Graph, NodeId, NodeKind};
use crate::hazard::rails::is_leaf;
use crate::hazard::tables::Promises;

/// Side inputs are followed to the sources behind them while these are at most this many, so that an impossible
/// combination (a signal and its complement) is not taken for a case.
const SOURCES: usize = 16;
/// Nodes looked at on the way to those sources.
const BEHIND: usize = 4096;
/// Bound on rounds times nodes in the search for feedback nodes.
const EFFORT: usize = 1_000_000;

/// See the module documentation.
pub(super) struct Cut {
    /// Free of loops.
    pub(super) graph: Graph,
    /// The free inputs, by their original.
    pub(super) inputs: Vec<NodeId>,
    /// What readers of each feedback node read.
    pub(super) states: Vec<NodeId>,
    /// The next-state function of each feedback node.
    pub(super) next: Vec<NodeId>,
    /// The original of every input and state.
    pub(super) originals: BTreeMap<NodeId, NodeId>,
}

impl Cut {
    /// Cuts the component `index`; `None` when it is too large.
    /// Cells and ports read `endpoints`.
    pub(super) fn new(
        graph: &Graph,
        components: &Components,
        index: usize,
        endpoints: &BTreeSet<NodeId>,
    ) -> Option<Self> {
        let nodes = components.nodes(index);
        let border = border(graph, components, index);
        let feedback = feedback(graph, nodes, &border, endpoints)?;
        let cuts: Vec<NodeId> = border.iter().chain(&feedback).copied().collect();
        let cone = Cone::cut(graph, &feedback, &cuts);
        let states: Vec<NodeId> = feedback.iter().filter_map(|&node| cone.read_of(node)).collect();
        let next: Vec<NodeId> = feedback.iter().filter_map(|&node| cone.copy_of(node)).collect();
        let frozen = cone.freeze();
        let originals: BTreeMap<NodeId, NodeId> = frozen
            .graph
            .nodes()
            .filter(|&node| is_leaf(&frozen.graph, node))
            .filter_map(|node| Some((node, frozen.original(node)?)))
            .collect();
        let mut inputs: Vec<NodeId> = originals.keys().copied().filter(|node| !states.contains(node)).collect();
        inputs.sort_unstable_by_key(|node| originals[node]);
        Some(Self { graph: frozen.graph, inputs, states, next, originals })
    }

    /// Whether a primitive has input values without a row: what the loop does there is nobody's promise.
    pub(super) fn is_partial(&self) -> bool {
        self.graph.tables.iter().any(|table| !Promises::new(table).is_total())
    }

    /// The same cut with other next-state functions, in a graph that extends its own.
    pub(super) fn extended(&self, graph: Graph, next: Vec<NodeId>) -> Self {
        Self {
            graph,
            inputs: self.inputs.clone(),
            states: self.states.clone(),
            next,
            originals: self.originals.clone(),
        }
    }
}

/// Where the analysis stops outside the loop: the sources behind the side inputs, other loops, or, when these are too
/// many, the side inputs themselves, which then count as independent.
fn border(graph: &Graph, components: &Components, index: usize) -> Vec<NodeId> {
    let mut near: BTreeSet<NodeId> = BTreeSet::new();
    for &node in components.nodes(index) {
        for &pin in graph.fanin(node) {
            if components.component_of(pin) != Some(index) {
                near.insert(graph.root(pin));
            }
        }
    }
    near.retain(|&node| !matches!(graph.kind(node), NodeKind::Const(_)));
    let mut far: BTreeSet<NodeId> = BTreeSet::new();
    let mut seen: BTreeSet<NodeId> = near.clone();
    let mut todo: Vec<NodeId> = near.iter().copied().collect();
    while let Some(node) = todo.pop() {
        if is_leaf(graph, node) || components.component_of(node).is_some() {
            far.insert(node);
        } else {
            todo.extend(graph.fanin(node).iter().copied().filter(|&pin| seen.insert(pin)));
        }
        if far.len() > SOURCES || seen.len() > BEHIND {
            return near.into_iter().collect();
        }
    }
    far.into_iter().collect()
}

/// The feedback nodes of a component.
pub(in crate::hazard) fn cuts(
    graph: &Graph,
    components: &Components,
    index: usize,
    endpoints: &BTreeSet<NodeId>,
) -> Option<Vec<NodeId>> {
    feedback(graph, components.nodes(index), &border(graph, components, index), endpoints)
}

/// A small set of nodes that every cycle passes, greedily: in each remaining component the node that most pairs of
/// edges meet in. Of equals one that is read outside the loop, because that is where a state is a state: cut at an inner
/// gate, a latch would be judged by what that gate forgets; then a declared net, because the reader knows its name.
fn feedback(graph: &Graph, nodes: &[NodeId], border: &[NodeId], endpoints: &BTreeSet<NodeId>) -> Option<Vec<NodeId>> {
    let mut found: BTreeSet<NodeId> = BTreeSet::new();
    let mut left = EFFORT;
    loop {
        let cuts: Vec<NodeId> = border.iter().chain(&found).copied().collect();
        let cone = Cone::cut(graph, nodes, &cuts).freeze();
        let components = cycles::components(&cone.graph);
        if components.is_empty() {
            return Some(found.into_iter().collect());
        }
        for (index, members) in components.iter().enumerate() {
            let inside =
                |list: &[NodeId]| list.iter().filter(|&&other| components.component_of(other) == Some(index)).count();
            let best =
                members.iter().filter_map(|&node| Some((node, cone.original(node)?))).max_by_key(|&(copy, node)| {
                    let pairs = inside(cone.graph.fanin(copy)) * inside(cone.graph.fanout(copy));
                    let outside = |reader: &NodeId| nodes.binary_search(reader).is_err();
                    let read = endpoints.contains(&node) || graph.fanout(node).iter().any(outside);
                    (pairs, read, graph.node_name(node).is_some(), node)
                });
            found.extend(best.map(|(_, node)| node));
        }
        left = left.checked_sub(cone.graph.len())?;
    }
}
