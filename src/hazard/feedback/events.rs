//! Launches in front of a target behind loops. An event that moves one source of the target is a single change, which was
//! decided. One that may move several is asked about as if any of them could change at any time, which allows more than
//! the event does: what is clean then is clean, and everything else stays open.

use std::collections::{BTreeMap, BTreeSet};

use super::network::Network;
use super::question::{Change, Question, Shape};
use crate::graph::{CellKind, Graph, NodeId, NodeKind, SourceKind};
use crate::hazard::launch::Assumptions;
use crate::hazard::order::Order;
use crate::hazard::solver::Answer;
use crate::hazard::{Cells, Happening, Method, OpenLaunch, Options, TargetVerdict, Undecided, Witness, loops};

/// The verdict under events of a target whose loops were followed, from that on single changes.
pub fn events_behind_loops(
    graph: &Graph,
    cells: &Cells<'_>,
    assumptions: &Assumptions,
    mut verdict: TargetVerdict,
    options: &Options,
) -> TargetVerdict {
    let sources: BTreeSet<NodeId> = cells.sources(&[verdict.target]).into_iter().collect();
    let design = Design { graph, cells, options };
    let causes: BTreeMap<NodeId, BTreeSet<NodeId>> = sources
        .iter()
        .filter(|&&source| cells.of(source).next().is_some())
        .map(|&cell| (cell, design.causes(cell)))
        .collect();
    let roots: BTreeSet<NodeId> = causes.values().flatten().chain(&sources).copied().collect();
    let movers = |root: NodeId| -> Vec<NodeId> {
        let moves =
            |source: &&NodeId| **source == root || causes.get(source).is_some_and(|roots| roots.contains(&root));
        sources.iter().filter(moves).copied().collect()
    };
    let latched = sources.iter().any(|&source| graph.kind(source) == NodeKind::Source(SourceKind::Latch));
    let mut asked: BTreeMap<Vec<NodeId>, bool> = BTreeMap::new();
    let mut network: Option<Option<Network>> = None;
    for &root in &roots {
        let together = movers(root);
        // An open latch passes what its data does, so that its change need not be clean.
        let clean = !latched
            && (together.len() < 2
                || *asked.entry(together).or_insert_with_key(|together| {
                    let network = network.get_or_insert_with(|| design.network(verdict.target));
                    network.as_ref().is_some_and(|network| design.is_clean(network, together))
                }));
        if !clean {
            let open = |rises| OpenLaunch { root, rises, reason: Undecided::Loop };
            verdict.open_launches.extend([false, true].map(open));
        }
    }
    let lists = [&assumptions.one_hot, &assumptions.exclusive, &assumptions.one_bit];
    let assumed = lists.into_iter().flatten().flatten().any(|node| sources.contains(&graph.root(*node)));
    for pair in &mut verdict.pairs {
        let alone = causes.get(&pair.source).map(|causes| causes.iter().any(|&root| movers(root) == [pair.source]));
        pair.hazards.retain(|(kind, witness)| {
            let happens = match alone {
                // It changes by itself, and nothing else does.
                None => true,
                Some(alone) => alone && !latched && design.happens(pair.source, witness),
            };
            let stands = happens && !assumed;
            if !stands {
                pair.undecided.push((*kind, Undecided::Loop));
            }
            stands
        });
        pair.undecided.sort_unstable();
    }
    verdict.open_launches.sort_unstable();
    verdict.launch_method = Some(if asked.is_empty() { Method::Structure } else { Method::Solver });
    verdict
}

struct Design<'a> {
    graph: &'a Graph,
    cells: &'a Cells<'a>,
    options: &'a Options,
}

impl Design<'_> {
    /// What can make a cell take another value, through latches as well: sources, and nodes of loops, which may move by
    /// themselves.
    fn causes(&self, output: NodeId) -> BTreeSet<NodeId> {
        let mut found: BTreeSet<NodeId> = BTreeSet::new();
        let mut open = vec![output];
        let mut met: BTreeSet<NodeId> = BTreeSet::from([output]);
        while let Some(output) = open.pop() {
            let mut pins: Vec<NodeId> = Vec::new();
            for cell in self.cells.of(output) {
                pins.extend(cell.controls.iter().flat_map(|control| [control.net, control.value]));
                match cell.kind {
                    CellKind::FlipFlop { clock, .. } => pins.push(clock),
                    CellKind::Latch { enable, .. } => pins.extend([enable, cell.data]),
                }
            }
            let order = Order::new(self.graph, &pins);
            let looped = order.nodes.iter().zip(&order.looped).filter(|&(_, &looped)| looped);
            found.extend(looped.map(|(&node, _)| node).filter(|&node| !self.graph.is_static(node)));
            for source in self.cells.sources(&pins) {
                found.insert(source);
                let latch = self.graph.kind(source) == NodeKind::Source(SourceKind::Latch);
                if latch && met.insert(source) {
                    open.push(source);
                }
            }
        }
        found
    }

    fn network(&self, target: NodeId) -> Option<Network> {
        let rests = |graph: &Graph, components: &_| loops::rest(graph, components, self.options);
        Network::new(self.graph, target, self.options.ignore_operators, rests)
    }

    /// Whether the target is clean whichever of these sources change, and in whichever order.
    fn is_clean(&self, network: &Network, together: &[NodeId]) -> bool {
        let moved: Vec<NodeId> =
            network.sources.iter().copied().filter(|&source| together.contains(&network.original(source))).collect();
        let mut question = Question::new(network, &Change::Any(&moved));
        (0..Shape::ALL.len()).all(|shape| question.is_suspect(shape, self.options.conflicts) == Answer::Unsatisfiable)
    }

    /// Whether some edge makes the flip-flop change as the witness says, while what the witness holds is held.
    fn happens(&self, source: NodeId, witness: &Witness) -> bool {
        let held = witness.holds.iter().filter(|&&(node, _)| self.graph.fanin(node).is_empty());
        let held: Vec<(NodeId, bool)> =
            held.copied().filter(|&(node, _)| matches!(self.graph.kind(node), NodeKind::Source(_))).collect();
        let with = |flip: bool| -> Vec<(NodeId, bool)> {
            let changes = witness.changes.iter().map(|&(node, value)| (node, value ^ flip));
            held.iter().copied().chain(changes).collect()
        };
        self.cells.of(source).any(|cell| match cell.kind {
            CellKind::FlipFlop { clock, edge } => {
                let clock = Happening::Clock(self.graph.root(clock), edge);
                self.cells.leads(&with(false), clock, &with(true), self.options.conflicts).is_some()
            }
            CellKind::Latch { .. } => false,
        })
    }
}
