//! How a witness does its harm, for the reader who has to believe it: the change splits at the stem, its two halves run
//! against each other at the meeting gate, and the pulse they make there reaches the target. The witness is simulated
//! again; only nodes that really change are followed. What lies inside an arithmetic operator has no name the reader
//! knows: it is passed over, and an operator counts as one gate.

use std::collections::{BTreeMap, BTreeSet, VecDeque};

use super::order::Order;
use super::wave::{self, Wave};
use super::{Path, PathStep, Paths, Witness};
use crate::graph::cone::{Cone, FrozenCone};
use crate::graph::{GateKind, Graph, NodeId, NodeKind};

/// Traces a witness through the graph. Of several gates where a hazard arises, the one nearest to the target is taken;
/// a hazard of the written logic goes before one inside an operator.
pub fn paths(graph: &Graph, target: NodeId, witness: &Witness) -> Paths {
    let looped = looped(graph, witness);
    if looped.is_empty() {
        return feed_forward(graph, target, witness);
    }
    let Some((cut, copy, within)) = held(graph, target, witness, &looped) else { return Paths::none(target) };
    let mut paths = feed_forward(&cut.graph, copy, &within);
    let back = |node: &mut NodeId| *node = cut.original(*node).unwrap_or(target);
    let Paths { stem, meet, ways, tail } = &mut paths;
    let steps = ways.iter_mut().flat_map(|way| &mut way.steps).map(|step| &mut step.node);
    [stem, meet].into_iter().chain(tail).chain(steps).for_each(back);
    paths
}

/// Whether the nets of loops that a witness gives values have to move for its hazard; false where there are none.
pub fn moves_loops(graph: &Graph, target: NodeId, witness: &Witness) -> bool {
    let looped = looped(graph, witness);
    if looped.is_empty() {
        return false;
    }
    let Some((cut, copy, within)) = held(graph, target, witness, &looped) else { return true };
    let before: BTreeMap<NodeId, bool> = within.holds.iter().chain(&within.changes).copied().collect();
    let after: BTreeMap<NodeId, bool> = within.changes.iter().map(|&(node, value)| (node, !value)).collect();
    let wave = wave::waveform(&cut.graph, &before, &after, copy);
    !wave.h || (wave.i, wave.f) != witness.target
}

/// Nets of loops that a witness gives values.
fn looped(graph: &Graph, witness: &Witness) -> Vec<NodeId> {
    let nodes = witness.holds.iter().map(|&(node, _)| node);
    nodes.filter(|&node| !graph.is_static(node) && !graph.fanin(node).is_empty()).collect()
}

/// The logic in front of the target while nets of loops hold: their readers read the value, and what drives them is logic
/// like any other. The target and the witness are those of the copy.
fn held(graph: &Graph, target: NodeId, witness: &Witness, looped: &[NodeId]) -> Option<(FrozenCone, NodeId, Witness)> {
    let cone = Cone::cut(graph, &[target], looped);
    let read = |list: &[(NodeId, bool)]| -> Vec<(NodeId, bool)> {
        list.iter().filter_map(|&(node, value)| Some((cone.read_of(node)?, value))).collect()
    };
    let within = Witness { changes: read(&witness.changes), holds: read(&witness.holds), ..witness.clone() };
    let copy = cone.copy_of(target)?;
    Some((cone.freeze(), copy, within))
}

fn feed_forward(graph: &Graph, target: NodeId, witness: &Witness) -> Paths {
    let order = Order::new(graph, &[target]);
    let mut before: BTreeMap<NodeId, bool> = witness.holds.iter().copied().collect();
    before.extend(witness.changes.iter().copied());
    let after: BTreeMap<NodeId, bool> = witness.changes.iter().map(|&(node, value)| (node, !value)).collect();
    let shows = |waves: &BTreeMap<NodeId, Wave>| waves.get(&target).is_some_and(|wave| wave.h);
    let mut waves = wave::waves(graph, &order, &before, &after, true);
    if !shows(&waves) {
        waves = wave::waves(graph, &order, &before, &after, false);
    }
    let trace = Trace::new(graph, &order, &waves);
    match trace.origin(target) {
        Some(tail) => trace.paths(tail),
        // Not a witness of this target: nothing to tell.
        None => Paths::none(target),
    }
}

impl Paths {
    fn none(target: NodeId) -> Self {
        Self { stem: target, meet: target, ways: Vec::new(), tail: vec![target] }
    }
}

/// A simulated transition.
struct Trace<'a> {
    graph: &'a Graph,
    waves: &'a BTreeMap<NodeId, Wave>,
    /// Position in topological order.
    rank: BTreeMap<NodeId, usize>,
    /// Nodes of an operator other than its exits.
    inner: BTreeSet<NodeId>,
    /// Nodes on a loop, which count as sources.
    looped: BTreeSet<NodeId>,
}

impl<'a> Trace<'a> {
    fn new(graph: &'a Graph, order: &Order, waves: &'a BTreeMap<NodeId, Wave>) -> Self {
        let rank: BTreeMap<NodeId, usize> = order.nodes.iter().enumerate().map(|(at, &node)| (node, at)).collect();
        let mut inner = BTreeSet::new();
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
        let looped =
            order.nodes.iter().zip(&order.looped).filter(|&(_, &looped)| looped).map(|(&node, _)| node).collect();
        Self { graph, waves, rank, inner, looped }
    }

    fn wave(&self, node: NodeId) -> Wave {
        self.waves.get(&node).copied().unwrap_or(Wave::constant(false))
    }

    /// The pins whose waveforms made that of `node`; none where a loop is cut.
    fn pins(&self, node: NodeId) -> impl Iterator<Item = NodeId> + '_ {
        let pins = if self.looped.contains(&node) { &[] } else { self.graph.fanin(node) };
        pins.iter().copied()
    }

    /// The way of the pulse from the nearest node where it arises to the target, inner nodes included.
    fn origin(&self, target: NodeId) -> Option<Vec<NodeId>> {
        if !self.wave(target).h {
            return None;
        }
        let hazardous = |node: NodeId| self.wave(node).h;
        let way = self.search(target, |node| !self.pins(node).any(hazardous), hazardous)?;
        Some(way)
    }

    /// The shortest way back from `start` to a node that `found` accepts over pins that `follow` accepts, in forward
    /// order: the found node first, `start` last.
    fn search(
        &self,
        start: NodeId,
        found: impl Fn(NodeId) -> bool,
        follow: impl Fn(NodeId) -> bool,
    ) -> Option<Vec<NodeId>> {
        let mut toward: BTreeMap<NodeId, Option<NodeId>> = BTreeMap::from([(start, None)]);
        let mut queue = VecDeque::from([start]);
        while let Some(node) = queue.pop_front() {
            if found(node) {
                let mut way = vec![node];
                let mut at = node;
                while let Some(&Some(next)) = toward.get(&at) {
                    way.push(next);
                    at = next;
                }
                return Some(way);
            }
            for pin in self.pins(node).filter(|&pin| follow(pin)) {
                toward.entry(pin).or_insert_with(|| {
                    queue.push_back(pin);
                    Some(node)
                });
            }
        }
        None
    }

    /// `tail` leads from the node where the hazard arises to the target.
    fn paths(&self, tail: Vec<NodeId>) -> Paths {
        let arises = tail[0];
        // A hazard from within an operator shows at its exit.
        let visible = tail.iter().position(|node| !self.inner.contains(node)).unwrap_or(tail.len() - 1);
        let meet = tail[visible];
        let changing: Vec<NodeId> = self.pins(arises).filter(|&pin| self.wave(pin).changes()).collect();
        let (stem, ways) = match self.opponents(arises, &changing) {
            Some((left, right)) if visible == 0 => self.both(left, right, meet),
            _ => {
                let ways: Vec<Path> = changing
                    .first()
                    .and_then(|&pin| self.way_from_source(pin))
                    .map(|way| self.path(way, meet))
                    .into_iter()
                    .collect();
                (ways.first().map_or(meet, |way| way.steps[0].node), ways)
            }
        };
        let tail = tail[visible..].iter().copied().filter(|node| !self.inner.contains(node)).collect();
        Paths { stem, meet, ways, tail }
    }

    /// Two pins whose changes can race.
    fn opponents(&self, node: NodeId, changing: &[NodeId]) -> Option<(NodeId, NodeId)> {
        let (&left, rest) = changing.split_first()?;
        let right = match self.graph.kind(node) {
            NodeKind::Gate(GateKind::Xor | GateKind::Xnor) | NodeKind::Table(_) => rest.first(),
            _ => rest.iter().find(|&&right| self.wave(right).rises() != self.wave(left).rises()),
        };
        right.map(|&right| (left, right))
    }

    /// The last node that both changes come from, and the ways from there. The latest common node in topological order
    /// is the last on any two ways: one after it would be later still.
    fn both(&self, left: NodeId, right: NodeId, meet: NodeId) -> (NodeId, Vec<Path>) {
        let (behind_left, behind_right) = (self.changing_behind(left), self.changing_behind(right));
        let named = behind_left.intersection(&behind_right).filter(|node| !self.inner.contains(node));
        let stem = named.max_by_key(|node| self.rank.get(node).copied());
        let changes = |node: NodeId| self.wave(node).changes();
        let way = |pin: NodeId| match stem {
            Some(&stem) => self.search(pin, |node| node == stem, changes),
            // Several sources change and no node sees two of them: each way starts at its own.
            None => self.way_from_source(pin),
        };
        let ways: Vec<Path> = [left, right].into_iter().filter_map(way).map(|way| self.path(way, meet)).collect();
        (stem.copied().unwrap_or_else(|| ways.first().map_or(meet, |way| way.steps[0].node)), ways)
    }

    fn changing_behind(&self, start: NodeId) -> BTreeSet<NodeId> {
        let mut seen = BTreeSet::from([start]);
        let mut open = vec![start];
        while let Some(node) = open.pop() {
            for pin in self.pins(node).filter(|&pin| self.wave(pin).changes()) {
                if seen.insert(pin) {
                    open.push(pin);
                }
            }
        }
        seen
    }

    fn way_from_source(&self, pin: NodeId) -> Option<Vec<NodeId>> {
        let changes = |node: NodeId| self.wave(node).changes();
        self.search(pin, |node| !self.pins(node).any(changes), changes)
    }

    /// A way that ends at the pin of `meet`, as a path.
    fn path(&self, way: Vec<NodeId>, meet: NodeId) -> Path {
        let mut steps: Vec<PathStep> =
            way.iter().filter(|node| !self.inner.contains(node)).map(|&node| PathStep { node }).collect();
        let mut path = Path { steps: Vec::new(), gates: 0, inversions: 0 };
        for pair in steps.windows(2) {
            let [from, to] = [pair[0].node, pair[1].node];
            if self.graph.kind(to) != NodeKind::Wire {
                path.gates += 1;
                // Which way an XOR or a table turns the change depends on its other pins.
                path.inversions += usize::from(self.wave(from).rises() != self.wave(to).rises());
            }
        }
        steps.push(PathStep { node: meet });
        path.steps = steps;
        path
    }
}
