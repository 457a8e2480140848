//! What the solver is asked about one change, from any stable state. Two facts are encoded.
//!
//! *Shown*: while the feedback is slow, the logic with its loops cut is feed-forward, the algebra is exact for it, and a
//! hazard that it shows from a state that is stable before and after is one that the whole network shows.
//!
//! *Suspect*: the states settle, phase by phase, from `y` to `z`; take each state that differs as one more input that
//! changes cleanly, at any time. If no next-state function and not the target shows a hazard then, the whole network
//! shows none. For look at the first moment at which some cut net changes more often than `y` and `z` call for: until
//! then the states were such inputs, and what the feed-forward logic did can be completed to a transition that shows
//! the excess at this net, against the algebra. So each state changes at most once, and the network comes to rest in a
//! state between `y` and `z`; where that is `z` alone, there is one outcome. Whatever fails this is suspect and must be
//! looked at more closely.

use std::collections::BTreeMap;

use super::network::Network;
use crate::graph::{GateKind, NodeId, NodeKind};
use crate::hazard::HazardKind;
use crate::hazard::clauses::Clauses;
use crate::hazard::cone::Op;
use crate::hazard::solver::{Answer, Batsat, Literal, Solver};
use crate::hazard::symbolic::Symbolic;

/// Phases in which the states may settle.
const PHASES: usize = 9;

/// A question about a kind of hazard, and about the target before the change.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Shape {
    pub(super) kind: HazardKind,
    pub(super) before: bool,
}

impl Shape {
    pub(super) const ALL: [Shape; 4] = [
        Shape { kind: HazardKind::Static0, before: false },
        Shape { kind: HazardKind::Static1, before: true },
        Shape { kind: HazardKind::Dynamic, before: false },
        Shape { kind: HazardKind::Dynamic, before: true },
    ];

    pub(super) fn after(self) -> bool {
        self.before ^ (self.kind == HazardKind::Dynamic)
    }
}

/// Which sources change.
pub(super) enum Change<'a> {
    /// This one.
    One(NodeId),
    /// Any of these, together or not.
    Any(&'a [NodeId]),
}

/// See the module documentation.
pub(super) struct Question<'a> {
    network: &'a Network,
    clauses: Clauses<Batsat>,
    before: Vec<Option<Literal>>,
    target: Literal,
    shown: Vec<Vec<Literal>>,
    suspect: Vec<Literal>,
}

type Values = Vec<Option<Literal>>;

impl<'a> Question<'a> {
    pub(super) fn new(network: &'a Network, change: &Change<'_>) -> Self {
        let mut clauses: Clauses<Batsat> = Clauses::new();
        let leaves: BTreeMap<NodeId, Literal> =
            network.leaves().map(|leaf| (leaf, clauses.solver.variable())).collect();
        let zero = !clauses.one;
        let before = clauses.copy(&network.graph, &network.order, |leaf| leaves.get(&leaf).copied().unwrap_or(zero));
        let mut this = Self { network, target: zero, clauses, before, shown: Vec::new(), suspect: Vec::new() };
        this.target = this.at(&this.before, network.shown);
        for (&state, &next) in network.states.iter().zip(&network.next) {
            let same = this.same(this.at(&this.before, state), this.at(&this.before, next));
            this.clauses.solver.clause(&[same]);
        }
        let mut moved: BTreeMap<NodeId, Literal> = BTreeMap::new();
        match change {
            Change::One(source) => {
                moved.insert(*source, !this.at(&this.before, *source));
            }
            Change::Any(sources) => {
                moved.extend(sources.iter().map(|&source| (source, this.clauses.solver.variable())));
            }
        }
        this.encode(moved);
        this
    }

    fn at(&self, values: &Values, node: NodeId) -> Literal {
        values[node.index()].unwrap_or(!self.clauses.one)
    }

    fn same(&mut self, a: Literal, b: Literal) -> Literal {
        !self.clauses.xor(a, b)
    }

    fn encode(&mut self, mut moved: BTreeMap<NodeId, Literal>) {
        let network = self.network;
        // Slow feedback: the states hold.
        let mut after = self.copy(&moved);
        let waves = self.waves(&moved, &after);
        let mut held = Vec::new();
        for (&state, &next) in network.states.iter().zip(&network.next) {
            held.push(self.same(self.at(&self.before, state), self.at(&after, next)));
        }
        let wave = waves[network.target.index()];
        self.shown = match wave {
            Some(Symbolic { i, f, h: Some(h) }) => {
                let ends = |shape: Shape| vec![h, i.inverted_if(!shape.before), f.inverted_if(!shape.after())];
                Shape::ALL.into_iter().map(|shape| [ends(shape), held.clone()].concat()).collect()
            }
            _ => vec![vec![!self.clauses.one]; Shape::ALL.len()],
        };
        // Settling: phase by phase the states take their next values.
        for _ in 0..PHASES.min(network.states.len() + 1) {
            for (&state, &next) in network.states.iter().zip(&network.next) {
                moved.insert(state, self.at(&after, next));
            }
            after = self.copy(&moved);
        }
        let mut failed = Vec::new();
        for (&state, &next) in network.states.iter().zip(&network.next) {
            failed.push(!self.same(self.at(&after, state), self.at(&after, next)));
        }
        failed.extend(self.between(&moved));
        let waves = self.waves(&moved, &after);
        failed.extend(network.next.iter().filter_map(|next| waves[next.index()].and_then(|wave| wave.h)));
        let wave = waves[network.shown.index()];
        for shape in Shape::ALL {
            let suspect = self.clauses.solver.variable();
            let mut reasons = failed.clone();
            reasons.push(!suspect);
            if let Some(Symbolic { f, h: Some(h), .. }) = wave {
                let own = self.clauses.and(&[h, f.inverted_if(!shape.after())]);
                reasons.push(own);
            }
            self.clauses.solver.clause(&reasons);
            self.suspect.push(suspect);
        }
    }

    /// The values once the leaves of `moved` have others; nodes that hear none of them keep their literal.
    fn copy(&mut self, moved: &BTreeMap<NodeId, Literal>) -> Values {
        let network = self.network;
        let mut values: Values = vec![None; network.graph.len()];
        for &node in &network.order {
            let fanin = network.graph.fanin(node);
            let heard = |pin: &NodeId| values[pin.index()] != self.before[pin.index()];
            values[node.index()] = match moved.get(&node) {
                Some(&literal) => Some(literal),
                None if network.graph.is_static(node) || !fanin.iter().any(heard) => self.before[node.index()],
                None => {
                    let pins: Vec<Literal> = fanin.iter().filter_map(|pin| values[pin.index()]).collect();
                    Some(match network.graph.kind(node) {
                        NodeKind::Gate(kind) => self.clauses.gate(kind, &pins),
                        NodeKind::Table(table) => self.clauses.first_fit(&network.tables[table.index()], &pins).0,
                        _ => pins.first().copied().unwrap_or(!self.clauses.one),
                    })
                }
            };
        }
        values
    }

    /// The waveforms from the values before to `after`, the leaves of `moved` changing cleanly.
    fn waves(&mut self, moved: &BTreeMap<NodeId, Literal>, after: &Values) -> Vec<Option<Symbolic>> {
        let network = self.network;
        let mut waves: Vec<Option<Symbolic>> = vec![None; network.graph.len()];
        for &node in &network.order {
            let (i, f) = (self.at(&self.before, node), self.at(after, node));
            let still = Symbolic { i, f, h: None };
            let leaf = moved.contains_key(&node) || network.graph.is_static(node);
            let pins = if leaf { &[][..] } else { network.graph.fanin(node) };
            let pins: Vec<Symbolic> = pins.iter().filter_map(|pin| waves[pin.index()]).collect();
            let wave = match network.graph.kind(node) {
                _ if !pins.iter().any(|pin| pin.may_move()) => still,
                NodeKind::Gate(kind) => {
                    let (op, flip) = plain(kind);
                    let pins: Vec<Symbolic> = pins.iter().map(|pin| pin.inverted_if(flip)).collect();
                    let out = flip ^ kind.inverts();
                    let ends = (i.inverted_if(out), f.inverted_if(out));
                    Symbolic { h: self.risk(op, &pins, ends), ..still }
                }
                NodeKind::Table(table) => {
                    Symbolic { h: self.risk(Op::Table(table.index() as u32), &pins, (i, f)), ..still }
                }
                NodeKind::OpIn(_) => Symbolic { h: self.risk(Op::Enter, &pins, (i, f)), ..still },
                NodeKind::OpOut(_) if network.calm => still,
                _ => Symbolic { h: pins.first().and_then(|pin| pin.h), ..still },
            };
            waves[node.index()] = Some(wave);
        }
        waves
    }

    /// The hazard bit of a gate, where it can have one.
    fn risk(&mut self, op: Op, pins: &[Symbolic], ends: (Literal, Literal)) -> Option<Literal> {
        let moving = pins.iter().filter(|pin| pin.may_move()).count();
        let own = pins.iter().any(|pin| pin.h.is_some());
        let single = matches!(op, Op::And | Op::Xor) && moving < 2;
        (own || !single).then(|| self.clauses.hazard(op, &self.network.tables, pins, ends))
    }

    /// A literal that may be 1 where the network can come to rest on the way, in another state than the last.
    fn between(&mut self, last: &BTreeMap<NodeId, Literal>) -> Option<Literal> {
        let network = self.network;
        // A single state on the way is the first, and from there the phases would not have gone on.
        if network.states.len() < 2 {
            return None;
        }
        let mut other = last.clone();
        let mut rests = Vec::new();
        let mut differs = Vec::new();
        for &state in &network.states {
            let (first, last) = (self.at(&self.before, state), last[&state]);
            let here = self.clauses.solver.variable();
            let (at_first, at_last) = (self.same(here, first), self.same(here, last));
            rests.push(self.clauses.or(&[at_first, at_last]));
            differs.push(!at_last);
            other.insert(state, here);
        }
        let values = self.copy(&other);
        for (&state, &next) in network.states.iter().zip(&network.next) {
            rests.push(self.same(other[&state], self.at(&values, next)));
        }
        rests.push(self.clauses.or(&differs));
        Some(self.clauses.and(&rests))
    }

    /// Looks for a stable state from which slow feedback shows the hazard.
    pub(super) fn is_shown(&mut self, shape: usize, conflicts: u64) -> Answer {
        let wanted = self.shown[shape].clone();
        self.clauses.solver.solve(&wanted, conflicts)
    }

    /// Looks for a stable state that is suspect.
    pub(super) fn is_suspect(&mut self, shape: usize, conflicts: u64) -> Answer {
        let wanted = [self.suspect[shape], self.target.inverted_if(!Shape::ALL[shape].before)];
        self.clauses.solver.solve(&wanted, conflicts)
    }

    /// The values before the change in the last model.
    pub(super) fn model(&self) -> BTreeMap<NodeId, bool> {
        self.network.leaves().map(|leaf| (leaf, self.clauses.solver.value(self.at(&self.before, leaf)))).collect()
    }

    /// Leaves out every state before the change in which all of these nodes have these values.
    pub(super) fn forbid(&mut self, values: &[(NodeId, bool)]) {
        let clause: Vec<Literal> =
            values.iter().map(|&(node, value)| self.at(&self.before, node).inverted_if(value)).collect();
        self.clauses.solver.clause(&clause);
    }
}

/// A gate as AND or XOR, and whether its pins are to be inverted.
pub(super) fn plain(kind: GateKind) -> (Op, bool) {
    match kind {
        GateKind::Or | GateKind::Nor => (Op::And, true),
        GateKind::Xor | GateKind::Xnor => (Op::Xor, false),
        GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => (Op::And, false),
    }
}
