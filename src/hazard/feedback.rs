//! What a target behind combinational loops can show, in fundamental mode: the network is stable, one source changes, and
//! the network settles before anything else happens. Every gate and every wire has a delay of its own, as everywhere.
//!
//! The question is that of ternary simulation (E. B. Eichelberger, IBM J. Res. Dev. 9, 1965), whose result is what the
//! network can end at under such delays (J. A. Brzozowski and C.-J. H. Seger, Asynchronous Circuits, Springer 1995); it is
//! silent about how often a net changes on the way, which is what counts at a pin.
//!
//! From every stable state at once the solver shows a hazard under slow feedback, or shows that there is none
//! ([`question`]); what is left between is walked through state by state ([`explore`]), one signature of the start after
//! the other, up to a bound. What stays open says why: the final state depends on delays, or the loops are too large.

mod events;
mod explore;
mod network;
mod question;

use std::collections::{BTreeMap, BTreeSet};

pub use self::events::events_behind_loops;
use self::explore::{Moved, Outcome, Walk};
use self::network::Network;
use self::question::{Change, Question, Shape, plain};
use super::cone::Op;
use super::rails::is_leaf;
use super::solver::Answer;
use super::wave::Wave;
use super::witness::{STILL, inverted, lifted, members, only};
use super::{HazardKind, Method, Options, Pair, TargetVerdict, Undecided, Witness, loops};
use crate::graph::{Graph, NodeId, NodeKind};

/// Starts that are walked through for one source and one question.
const WALKS: usize = 64;
/// Nodes times sources of one target.
const EFFORT: usize = 100_000;
/// Evaluations of nodes that a witness may cost to say less.
const FEWER: usize = 1 << 18;

/// The verdict on a target behind loops, in place of the one that takes their nodes for sources. `None` where the loops
/// are too large or need not rest.
pub(super) fn decide(graph: &Graph, verdict: &TargetVerdict, options: &Options) -> Option<TargetVerdict> {
    let rests = |graph: &Graph, components: &_| loops::rest(graph, components, options);
    let network = Network::new(graph, verdict.target, options.ignore_operators, rests)?;
    if network.order.len().saturating_mul(network.sources.len()) > EFFORT {
        return None;
    }
    let mut known: BTreeSet<HazardKind> = BTreeSet::new();
    let mut pairs: Vec<Pair> = Vec::new();
    for &source in &network.sources {
        let inquiry = Inquiry { network: &network, source, conflicts: options.conflicts };
        let pair = inquiry.pair(if options.one_per_kind { known.clone() } else { BTreeSet::new() });
        known.extend(pair.hazards.iter().map(|(kind, _)| *kind));
        pairs.push(pair);
    }
    if options.one_per_kind {
        pairs.iter_mut().for_each(|pair| pair.undecided.retain(|(kind, _)| !known.contains(kind)));
    }
    pairs.retain(|pair| !pair.hazards.is_empty() || !pair.undecided.is_empty());
    pairs.sort_unstable_by_key(|pair| pair.source);
    let sources = network.sources.len();
    let clean = TargetVerdict::clean(verdict.target);
    Some(TargetVerdict { sources, pairs, method: Method::Solver, follows_loops: true, ..clean })
}

/// One move of an order of delays: a gate takes the value of its function, or the wire to one of its pins delivers what
/// drives it.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Move {
    pub gate: NodeId,
    /// The pin that the wire leads to; `None` for the output.
    pub pin: Option<usize>,
    /// What it takes.
    pub value: bool,
}

/// A stable state and what follows one change in it.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Walked {
    /// The values of what lies in front of the target, before; sorted by node.
    pub before: Vec<(NodeId, bool)>,
    pub moves: Vec<Move>,
}

/// An order of moves, the shortest there is, in which the target shows `kind` and all comes to rest, for a witness whose
/// hazard needs the feedback to move; `None` when it is none of this target.
pub fn moves(graph: &Graph, target: NodeId, witness: &Witness, kind: HazardKind, calm: bool) -> Option<Walked> {
    let network = Network::new(graph, target, calm, |_, _| true)?;
    let &[(changed, before)] = witness.changes.as_slice() else { return None };
    let source = network.sources.iter().copied().find(|&source| network.original(source) == changed)?;
    let mut values = network.leaf_values(&witness.holds.iter().copied().collect());
    values.insert(source, before);
    let order = Walk::new(&network, &values, source)?.order(kind)?;
    let moved = |moved| match moved {
        Moved::Wire(gate, pin, value) => Move { gate: network.original(gate), pin: Some(pin), value },
        Moved::Gate(gate, value) => Move { gate: network.original(gate), pin: None, value },
    };
    let settled = explore::settled(&network, &values);
    let before = network.order.iter().map(|&node| (network.original(node), settled[node.index()]));
    let before: BTreeMap<NodeId, bool> = before.collect();
    Some(Walked { before: before.into_iter().collect(), moves: order.into_iter().map(moved).collect() })
}

/// One source against the target.
struct Inquiry<'a> {
    network: &'a Network,
    source: NodeId,
    conflicts: u64,
}

impl Inquiry<'_> {
    /// What the source can show, but for the kinds that are known already.
    fn pair(&self, known: BTreeSet<HazardKind>) -> Pair {
        let mut question = Question::new(self.network, &Change::One(self.source));
        let mut hazards: BTreeMap<HazardKind, Witness> = BTreeMap::new();
        let mut undecided: BTreeMap<HazardKind, Undecided> = BTreeMap::new();
        for (index, shape) in Shape::ALL.into_iter().enumerate() {
            if known.contains(&shape.kind) || hazards.contains_key(&shape.kind) {
                continue;
            }
            if question.is_shown(index, self.conflicts) == Answer::Satisfiable {
                hazards.insert(shape.kind, self.shown(shape, &question.model()));
            }
        }
        for (index, shape) in Shape::ALL.into_iter().enumerate() {
            let mut walks = 0;
            while !known.contains(&shape.kind) && !hazards.contains_key(&shape.kind) {
                match question.is_suspect(index, self.conflicts) {
                    Answer::Unsatisfiable => break,
                    Answer::Open => {
                        undecided.insert(shape.kind, Undecided::Budget);
                        break;
                    }
                    Answer::Satisfiable => {}
                }
                let values = question.model();
                let walk = Walk::new(self.network, &values, self.source);
                let Some((walk, outcome)) = walk.and_then(|walk| walk.outcome().map(|outcome| (walk, outcome))) else {
                    undecided.insert(shape.kind, Undecided::Loop);
                    break;
                };
                let Outcome { kinds, races } = outcome;
                for kind in kinds {
                    hazards.entry(kind).or_insert_with(|| {
                        let shape = Shape { kind, ..shape };
                        self.walked(shape, &values, &walk.signature)
                    });
                }
                if races {
                    let still = if shape.before { HazardKind::Static1 } else { HazardKind::Static0 };
                    undecided.insert(still, Undecided::Race);
                    undecided.insert(HazardKind::Dynamic, Undecided::Race);
                }
                question.forbid(&walk.signature);
                walks += 1;
                if walks == WALKS {
                    undecided.insert(shape.kind, Undecided::Loop);
                    break;
                }
            }
        }
        undecided.retain(|kind, _| !hazards.contains_key(kind) && !known.contains(kind));
        Pair {
            source: self.network.original(self.source),
            hazards: hazards.into_iter().filter(|(kind, _)| !known.contains(kind)).collect(),
            undecided: undecided.into_iter().collect(),
        }
    }

    /// The witness of a hazard under slow feedback: the states hold, and the target's waveform follows.
    fn shown(&self, shape: Shape, values: &BTreeMap<NodeId, bool>) -> Witness {
        let wave = Wave { i: shape.before, f: shape.after(), h: true };
        self.witness(shape, values, |network, held| {
            let change = held.get(&self.source).map_or(STILL, |&value| only(Wave::clean(value, !value)));
            let sets = sets(network, held, Some((self.source, change)));
            let rests = network.states.iter().zip(&network.next).all(|(state, next)| {
                let value = held.get(state);
                members(sets[next.index()]).all(|wave| Some(&wave.i) == value && wave.i == wave.f)
            });
            rests && sets[network.target.index()] == only(wave)
        })
    }

    /// The witness of what a walk found: the start is stable, and what its signature says follows.
    fn walked(&self, shape: Shape, values: &BTreeMap<NodeId, bool>, signature: &[(NodeId, bool)]) -> Witness {
        self.witness(shape, values, |network, held| {
            let sets = sets(network, held, None);
            let is = |node: NodeId, value: bool| sets[node.index()] == only(Wave::constant(value));
            let rests = network
                .states
                .iter()
                .zip(&network.next)
                .all(|(state, &next)| held.get(state).is_some_and(|&value| is(next, value)));
            rests && signature.iter().all(|&(node, value)| is(node, value))
        })
    }

    /// A witness that names the states, and of the sources those without which `suffices` fails.
    fn witness(
        &self,
        shape: Shape,
        values: &BTreeMap<NodeId, bool>,
        suffices: impl Fn(&Network, &BTreeMap<NodeId, bool>) -> bool,
    ) -> Witness {
        let network = self.network;
        let mut held = values.clone();
        let mut droppable: Vec<NodeId> =
            values.keys().copied().filter(|leaf| *leaf != self.source && !network.states.contains(leaf)).collect();
        droppable.sort_by_key(|&leaf| (network.graph.fanout(leaf).len(), network.original(leaf)));
        if droppable.len().saturating_mul(network.order.len()) <= FEWER {
            for leaf in droppable {
                if let Some(value) = held.remove(&leaf)
                    && !suffices(network, &held)
                {
                    held.insert(leaf, value);
                }
            }
        }
        let before = held.remove(&self.source).unwrap_or(false);
        let mut holds: Vec<(NodeId, bool)> =
            held.into_iter().map(|(leaf, value)| (network.original(leaf), value)).collect();
        holds.sort_unstable();
        Witness {
            changes: vec![(network.original(self.source), before)],
            holds,
            target: (shape.before, shape.after()),
            launch: None,
        }
    }
}

/// All waveforms that each node can have when the leaves that are not `held` are any clean constant.
fn sets(network: &Network, held: &BTreeMap<NodeId, bool>, change: Option<(NodeId, u8)>) -> Vec<u8> {
    let graph = &network.graph;
    let mut sets = vec![STILL; graph.len()];
    for &node in &network.order {
        let pins = || graph.fanin(node).iter().map(|pin| sets[pin.index()]);
        sets[node.index()] = match (graph.kind(node), change) {
            (_, Some((source, set))) if source == node => set,
            _ if is_leaf(graph, node) => held.get(&node).map_or(STILL, |&value| only(Wave::constant(value))),
            (NodeKind::Const(value), _) => only(Wave::constant(value)),
            (NodeKind::Gate(kind), _) => {
                let (op, flip) = plain(kind);
                let pins = pins().map(|set| if flip { inverted(set) } else { set });
                let set = lifted(op, &network.tables, pins);
                if flip ^ kind.inverts() { inverted(set) } else { set }
            }
            (NodeKind::Table(table), _) => lifted(Op::Table(table.index() as u32), &network.tables, pins()),
            (NodeKind::OpIn(_), _) => lifted(Op::Enter, &network.tables, pins()),
            (NodeKind::OpOut(_), _) if network.calm => lifted(Op::Calm, &network.tables, pins()),
            _ => pins().next().unwrap_or(STILL),
        };
    }
    sets
}
