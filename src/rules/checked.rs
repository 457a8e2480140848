//! The list of everything that was asked about, clean nets included: a report that names only what is wrong cannot show
//! what was looked at. Each entry is one net in one role and has exactly one of three states, so that an undecided net
//! can never pass as a clean one; the coverage is counted from these entries. What a clean one rests on is said with it.

use std::collections::BTreeSet;

use serde::{Deserialize, Serialize};

use super::finding::{Finding, Pin, Verdict};
use super::{names, pins};
use crate::graph::{Graph, NodeId, NodeKind, Port, SourceKind};
use crate::hazard::launch::Assumptions;
use crate::hazard::{Method, Reach, TargetVerdict, Undecided};
use crate::source::Span;

/// A net that must hold still, in one role.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct CheckedNet {
    /// Full name, as in the findings about it.
    pub net: String,
    /// Where it is declared; where it is driven when it has no declaration.
    pub at: Option<Span>,
    pub pin: Pin,
    pub state: NetState,
}

#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum NetState {
    Clean(Ground),
    /// At least one proven hazard, whatever else stayed open.
    Hazard,
    /// No proven hazard, but open questions for these reasons, sorted.
    Undecided(Vec<Undecided>),
}

/// What a clean net rests on; of several bits, on the most costly of them.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
pub enum Ground {
    Constant,
    /// An output of which nothing drives this bit.
    Undriven,
    /// A single source drives it, whose changes are clean by definition.
    Source(SourceKind),
    /// The designer declared that it never changes.
    AssumedStatic,
    /// Logic drives it, and every question about it was answered.
    Decided {
        changes: Method,
        /// `None` for outputs, about which nobody asks how their sources change together.
        launches: Option<Method>,
        /// Whether the proof needs that only the states occur that can be reached from reset.
        reachable: bool,
        /// Whether declared assumptions may be part of the proof.
        assuming: bool,
        /// Whether combinational loops lie in front of it.
        loops: bool,
    },
}

impl CheckedNet {
    /// Whether a finding is about this net in this role.
    pub fn is_subject_of(&self, finding: &Finding) -> bool {
        let same = finding.net == self.net && finding.pin.as_ref().is_some_and(|pin| pin.kind == self.pin.kind);
        // Nets without names of their own may share one; those in another state are not meant.
        same && match (finding.verdict, finding.hazards.is_empty()) {
            (Verdict::Undecided, _) => matches!(self.state, NetState::Undecided(_)),
            (Verdict::Proven, false) => self.state == NetState::Hazard,
            (Verdict::Proven, true) => true,
        }
    }
}

impl NetState {
    /// `clean`, `hazard`, `undecided`.
    pub fn name(&self) -> &'static str {
        match self {
            NetState::Clean(_) => "clean",
            NetState::Hazard => "hazard",
            NetState::Undecided(_) => "undecided",
        }
    }
}

impl Ground {
    /// One word for what the proof is made of.
    pub fn name(self) -> &'static str {
        match self {
            Ground::Constant => "constant",
            Ground::Undriven => "undriven",
            Ground::Source(_) => "source",
            Ground::AssumedStatic => "assumed-static",
            Ground::Decided { reachable: true, .. } => "reachable-states",
            Ground::Decided { changes: Method::Launches, .. } => "launches",
            Ground::Decided { changes, launches, .. } => match changes.max(launches.unwrap_or(changes)) {
                Method::Structure => "structure",
                Method::Enumeration => "enumeration",
                Method::Solver | Method::Launches => "solver",
            },
        }
    }

    /// The same as a sentence, everything it rests on included.
    pub fn text(self) -> String {
        let text = match self {
            Ground::Constant => "it is a constant",
            Ground::Undriven => "nothing drives it, so it never changes",
            Ground::Source(SourceKind::Input) => "an input of the top drives it directly",
            Ground::Source(SourceKind::FlipFlop) => "a flip-flop drives it directly",
            Ground::Source(SourceKind::Latch) => "a latch drives it directly",
            Ground::Source(SourceKind::BlackBox) => "a module without text drives it directly",
            Ground::Source(SourceKind::Memory) => "a memory drives it directly",
            Ground::AssumedStatic => "it is declared static",
            Ground::Decided { changes, launches, reachable, assuming, loops } => {
                let mut text = match changes {
                    Method::Structure => "single changes: no two ways of a change meet with opposite inversions",
                    Method::Enumeration => "single changes: every transition was simulated",
                    Method::Solver => "single changes: proven by the solver",
                    Method::Launches => "single changes: those that would show a hazard never happen alone",
                }
                .to_string();
                text.push_str(match launches {
                    None => "; launches: not asked",
                    Some(Method::Structure) => "; launches: no two changes meet with opposite directions",
                    Some(_) => "; launches: proven by the solver",
                });
                if reachable {
                    text.push_str("; for the states that can be reached from reset");
                }
                if loops {
                    text.push_str("; its loops of gates were followed from every stable state");
                }
                if assuming {
                    text.push_str("; declared assumptions may be part of the proof");
                }
                return text;
            }
        };
        text.to_string()
    }
}

/// Makes entries.
pub(super) struct Checker<'a> {
    pub graph: &'a Graph,
    pub assumptions: &'a Assumptions,
}

impl Checker<'_> {
    /// One net; no verdict stands for a net that no logic drives.
    pub fn net(&self, root: NodeId, pin: Pin, verdict: Option<&TargetVerdict>) -> CheckedNet {
        let at = names::declaration(self.graph, root).or_else(|| self.graph.span(root));
        let state = self.state([(root, verdict)]);
        CheckedNet { net: names::name(self.graph, root), at, pin, state }
    }

    /// All bits of an output.
    pub fn output(&self, port: &Port, pin: Pin, verdicts: &pins::Verdicts) -> CheckedNet {
        let net = &self.graph.nets[port.net.index()];
        let roots: BTreeSet<NodeId> = net.bits.iter().map(|&bit| self.graph.root(bit)).collect();
        let state = self.state(roots.into_iter().map(|root| (root, verdicts.get(&root))));
        let name = format!("{}.{}", self.graph.instances[port.instance.index()].path, net.name);
        CheckedNet { net: name, at: Some(net.span), pin, state }
    }

    fn state<'a>(&self, bits: impl IntoIterator<Item = (NodeId, Option<&'a TargetVerdict>)>) -> NetState {
        let mut hazard = false;
        let mut open: BTreeSet<Undecided> = BTreeSet::new();
        let mut ground = Ground::Constant;
        for (root, verdict) in bits {
            if let Some(verdict) = verdict {
                hazard |= verdict.pairs.iter().any(|pair| !pair.hazards.is_empty()) || !verdict.launches.is_empty();
                open.extend(verdict.pairs.iter().flat_map(|pair| pair.undecided.iter().map(|&(_, reason)| reason)));
                open.extend(verdict.open_launches.iter().map(|open| open.reason));
            }
            ground = ground.max(self.ground(root, verdict));
        }
        match (hazard, open.is_empty()) {
            (true, _) => NetState::Hazard,
            (false, false) => NetState::Undecided(open.into_iter().collect()),
            (false, true) => NetState::Clean(ground),
        }
    }

    fn ground(&self, root: NodeId, verdict: Option<&TargetVerdict>) -> Ground {
        if self.graph.is_static(root) {
            return Ground::AssumedStatic;
        }
        match (self.graph.kind(root), verdict) {
            (NodeKind::Const(_), _) => Ground::Constant,
            // A flip-flop or latch that its own controls or data can make pulse rests on the answer about launches.
            (NodeKind::Source(kind), verdict)
                if verdict.is_none_or(|verdict| verdict.launch_method != Some(Method::Solver)) =>
            {
                Ground::Source(kind)
            }
            (_, None) => Ground::Undriven,
            (_, Some(verdict)) => Ground::Decided {
                changes: verdict.method,
                launches: verdict.launch_method,
                reachable: verdict.reach == Reach::ReachableStates,
                assuming: self.assuming(root, verdict),
                loops: verdict.follows_loops,
            },
        }
    }

    /// Whether an assumption may be part of the proof: one on nets in front of the target, or, where the solver looked at
    /// launches, any on the states.
    fn assuming(&self, root: NodeId, verdict: &TargetVerdict) -> bool {
        let Assumptions { fixed, one_hot, exclusive, one_bit } = self.assumptions;
        let on_states = !(one_hot.is_empty() && exclusive.is_empty() && one_bit.is_empty());
        let launched = verdict.launch_method == Some(Method::Solver);
        (launched && (on_states || !fixed.is_empty())) || (!fixed.is_empty() && self.has_static_in_front(root))
    }

    fn has_static_in_front(&self, root: NodeId) -> bool {
        let mut met = BTreeSet::from([root]);
        let mut open = vec![root];
        while let Some(node) = open.pop() {
            if self.graph.is_static(node) {
                return true;
            }
            open.extend(self.graph.fanin(node).iter().copied().filter(|&from| met.insert(from)));
        }
        false
    }
}

/// In the order of the roles, then by name and place.
pub(super) fn sort(nets: &mut [CheckedNet]) {
    nets.sort_by(|one, other| (one.pin.kind, &one.net, one.at).cmp(&(other.pin.kind, &other.net, other.at)));
}
