//! What a combinational loop does: see [`LoopVerdict`]. The loop is cut at a small set of feedback nodes ([`cut`]); its
//! stable states are counted out ([`count`]) or searched with the solver ([`search`]); a loop that stores is asked
//! whether a hazard of a next-state function can lose the state ([`loss`]).

mod count;
mod cut;
mod loss;
mod search;

use rayon::prelude::*;

use std::collections::BTreeSet;

use self::cut::Cut;
pub(super) use self::cut::cuts;
use super::Options;
use crate::graph::{Graph, NodeId, cycles};

/// One strongly connected component without a flip-flop or latch.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct LoopVerdict {
    /// All nodes of the component, sorted.
    pub nodes: Vec<NodeId>,
    /// The free inputs of the analysis, sorted: the sources behind its side inputs, other loops counting as sources;
    /// when these are too many the roots of the side inputs themselves, taken as independent. Constants are left out.
    pub inputs: Vec<NodeId>,
    pub behaviours: Vec<Behaviour>,
    /// Whether a single input change can lose the stored state through a hazard of the next-state function; `None`
    /// when it does not store, when it cannot, or when this was not decided.
    pub loses_state: Option<StateLoss>,
    /// False when it stores and whether the state can be lost stayed open: never to be read as "cannot".
    pub loss_decided: bool,
}

/// One behaviour with the input values that show it.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Behaviour {
    pub kind: BehaviourKind,
    /// Values of those `inputs` that matter; empty for `Settles` and `Undecided`.
    pub inputs: Vec<(NodeId, bool)>,
    /// For `Stores`: two stable states as values of the feedback nodes.
    pub states: Vec<Vec<(NodeId, bool)>>,
}

/// The order is that of the report.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum BehaviourKind {
    Oscillates,
    Stores,
    Settles,
    DelayDependent,
    Undecided,
}

impl BehaviourKind {
    /// The word used in every output.
    pub fn name(self) -> &'static str {
        match self {
            BehaviourKind::Oscillates => "oscillates",
            BehaviourKind::Stores => "stores",
            BehaviourKind::Settles => "settles",
            BehaviourKind::DelayDependent => "delay-dependent",
            BehaviourKind::Undecided => "undecided",
        }
    }
}

/// A single input change that can lose the state of a storing loop.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct StateLoss {
    /// The feedback node whose next-state function shows the hazard.
    pub node: NodeId,
    pub source: NodeId,
    pub witness: super::Witness,
    pub cover: Option<super::Cover>,
}

/// Whether every loop has a stable state for every value of its inputs; false when that is not decided.
pub(super) fn rest(graph: &Graph, components: &cycles::Components, options: &Options) -> bool {
    let endpoints = BTreeSet::new();
    (0..components.len()).all(|index| {
        let cut = Cut::new(graph, components, index, &endpoints).filter(|cut| !cut.is_partial());
        cut.is_some_and(|cut| search::rests(&cut, options))
    })
}

/// The verdict on every combinational loop, in order of the smallest node.
pub fn loops(graph: &Graph, options: &Options) -> Vec<LoopVerdict> {
    let components = cycles::components(graph);
    let endpoints: BTreeSet<NodeId> = if components.is_empty() { BTreeSet::new() } else { graph.endpoints().collect() };
    (0..components.len())
        .into_par_iter()
        .map(|index| {
            let mut verdict = LoopVerdict {
                nodes: components.nodes(index).to_vec(),
                inputs: Vec::new(),
                behaviours: Vec::new(),
                loses_state: None,
                loss_decided: false,
            };
            let Some(cut) = Cut::new(graph, &components, index, &endpoints).filter(|cut| !cut.is_partial()) else {
                let kind = BehaviourKind::Undecided;
                verdict.behaviours.push(Behaviour { kind, inputs: Vec::new(), states: Vec::new() });
                return verdict;
            };
            verdict.inputs = cut.inputs.iter().map(|input| cut.originals[input]).collect();
            verdict.behaviours = count::behaviours(&cut).unwrap_or_else(|| search::behaviours(&cut, options));
            let shows = |kind| verdict.behaviours.iter().any(|behaviour| behaviour.kind == kind);
            if shows(BehaviourKind::Stores) {
                (verdict.loses_state, verdict.loss_decided) = loss::losses(&cut, options);
            } else {
                verdict.loss_decided = !shows(BehaviourKind::Undecided);
            }
            verdict
        })
        .collect()
}
