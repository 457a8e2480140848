//! The logic in front of one target with its combinational loops cut: every reader of a cut net reads a source of its
//! own, the state, and what drives the net is the next-state function. A state in which every next state equals the
//! state is stable.

use std::collections::{BTreeMap, BTreeSet};

use crate::graph::cone::Cone;
use crate::graph::{Graph, NodeId, NodeKind, cycles};
use crate::hazard::loops;
use crate::hazard::order::Order;
use crate::hazard::points::Points;
use crate::hazard::rails::{Evaluator, Rails, counting, is_leaf};
use crate::hazard::tables::Promises;

/// With more cut nets the states are too many to follow.
const STATES: usize = 8;
/// Sources and states that are counted out, and words of 64 of their values times nodes.
const VARIABLES: usize = 20;
const EFFORT: usize = 20_000_000;

/// See the module documentation. All node ids but those that [`Network::original`] returns are those of `graph`.
pub(super) struct Network {
    pub(super) graph: Graph,
    /// All nodes, drivers first.
    pub(super) order: Vec<NodeId>,
    /// What drives the target.
    pub(super) target: NodeId,
    /// What readers of the target read: a state if the target is a cut net.
    pub(super) shown: NodeId,
    /// What readers of each cut net read.
    pub(super) states: Vec<NodeId>,
    /// What drives each cut net; a gate.
    pub(super) next: Vec<NodeId>,
    /// The sources that may change, by their original.
    pub(super) sources: Vec<NodeId>,
    /// Per table of the graph.
    pub(super) tables: Vec<Promises>,
    /// Whether the results of operators are taken as clean.
    pub(super) calm: bool,
    originals: Vec<Option<NodeId>>,
}

impl Network {
    /// `None` when the loops are too large, or when they can do anything but rest for some value of their inputs.
    pub(super) fn new(
        graph: &Graph,
        target: NodeId,
        calm: bool,
        rests: impl Fn(&Graph, &cycles::Components) -> bool,
    ) -> Option<Self> {
        let statics: Vec<NodeId> = graph.nodes().filter(|&node| graph.is_static(node)).collect();
        let outer = Cone::cut(graph, &[target], &statics).freeze();
        let within = outer.copy_of(target)?;
        let components = cycles::components(&outer.graph);
        if components.is_empty() {
            return None;
        }
        let endpoints = BTreeSet::from([within]);
        let mut cuts: BTreeSet<NodeId> = BTreeSet::new();
        for index in 0..components.len() {
            for node in loops::cuts(&outer.graph, &components, index, &endpoints)? {
                // A net and the gate behind it are one: cut at the gate, no reader is left out.
                let root = outer.graph.root(node);
                if outer.graph.kind(root) == NodeKind::Wire {
                    return None;
                }
                cuts.insert(root);
            }
        }
        if cuts.len() > STATES {
            return None;
        }
        let cuts: Vec<NodeId> = cuts.into_iter().collect();
        let targets: Vec<NodeId> = std::iter::once(within).chain(cuts.iter().copied()).collect();
        let cone = Cone::cut(&outer.graph, &targets, &cuts);
        let states: Vec<NodeId> = cuts.iter().filter_map(|&node| cone.read_of(node)).collect();
        let next: Vec<NodeId> = cuts.iter().filter_map(|&node| cone.copy_of(node)).collect();
        if states.len() != cuts.len() || next.len() != cuts.len() {
            return None;
        }
        let (driver, shown) = (cone.copy_of(within)?, cone.read_of(within)?);
        let inner = cone.freeze();
        let roots: Vec<NodeId> = std::iter::once(driver).chain(next.iter().copied()).collect();
        let order = Order::new(&inner.graph, &roots);
        if order.has_loop(&inner.graph) {
            return None;
        }
        let originals: Vec<Option<NodeId>> =
            inner.graph.nodes().map(|node| inner.original(node).and_then(|node| outer.original(node))).collect();
        let mut order = order.nodes;
        // A state that only the target's own readers see is not behind any root.
        order.extend(states.iter().copied().filter(|state| !order.contains(state)).collect::<Vec<_>>());
        let moves = |&node: &NodeId| {
            matches!(inner.graph.kind(node), NodeKind::Source(_))
                && !inner.graph.is_static(node)
                && !states.contains(&node)
        };
        let mut sources: Vec<NodeId> = order.iter().copied().filter(moves).collect();
        sources.sort_unstable_by_key(|node| originals[node.index()]);
        let tables = inner.graph.tables.iter().map(Promises::new).collect();
        let network =
            Self { graph: inner.graph, order, target: driver, shown, states, next, sources, tables, calm, originals };
        (rests(&outer.graph, &components) || network.rests()).then_some(network)
    }

    /// Whether some state is stable for every value of the sources, counted out; false where that are too many. Loops that
    /// feed each other need not rest one by one, and rest together.
    fn rests(&self) -> bool {
        let inputs: Vec<NodeId> = self.leaves().filter(|leaf| !self.states.contains(leaf)).collect();
        let variables = self.states.len() + inputs.len();
        let fits = variables <= VARIABLES && Points::blocks(variables).saturating_mul(self.order.len()) <= EFFORT;
        if !fits || !self.tables.iter().all(Promises::is_total) {
            return false;
        }
        let mut evaluator = Evaluator::new(&self.graph, &self.next);
        let mut rests = vec![false; 1usize << inputs.len()];
        for block in 0..Points::blocks(variables) {
            for (index, &leaf) in self.states.iter().chain(&inputs).enumerate() {
                evaluator.set(leaf, Rails::definite(counting(index, block)));
            }
            evaluator.run();
            let mut stable = !0;
            for (&state, &next) in self.states.iter().zip(&self.next) {
                stable &= !(evaluator.get(state).one ^ evaluator.get(next).one);
            }
            for point in Points::new(variables.min(6), vec![stable]).iter() {
                rests[(block << 6 | point) >> self.states.len()] = true;
            }
        }
        !rests.contains(&false)
    }

    /// The node of the whole graph that a node, or the state of a cut net, stands for.
    pub(super) fn original(&self, node: NodeId) -> NodeId {
        self.originals[node.index()].unwrap_or(node)
    }

    /// The nodes whose values are given from outside, states included.
    pub(super) fn leaves(&self) -> impl Iterator<Item = NodeId> + '_ {
        self.order.iter().copied().filter(|&node| is_leaf(&self.graph, node))
    }

    /// The gate or leaf that a pin hears, across nets and the cuts.
    pub(super) fn heard(&self, mut node: NodeId) -> NodeId {
        // Every cut net is driven by a gate, so this ends.
        loop {
            let state = self.states.iter().position(|&state| state == node);
            node = match (state, self.graph.kind(node), self.graph.fanin(node)) {
                (Some(state), ..) => self.next[state],
                (None, NodeKind::Wire, &[driver]) if !self.graph.is_static(node) => driver,
                _ => return node,
            };
        }
    }

    /// Values for the leaves by original node.
    pub(super) fn leaf_values(&self, known: &BTreeMap<NodeId, bool>) -> BTreeMap<NodeId, bool> {
        self.leaves().filter_map(|leaf| Some((leaf, *known.get(&self.original(leaf))?))).collect()
    }
}
