//! What a combinational loop does: see [`LoopVerdict`].

use super::Options;
use crate::graph::{Graph, NodeId, cycles};

/// One strongly connected component without a flip-flop or latch.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct LoopVerdict {
    /// All nodes of the component, sorted.
    pub nodes: Vec<NodeId>,
    /// Nodes outside that drive it (roots of the side inputs), sorted.
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
    /// Values of `inputs` for which it happens; empty for `Settles` and `Undecided`.
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
    pub source: NodeId,
    pub witness: super::Witness,
    pub cover: Option<super::Cover>,
}

/// The verdict on every combinational loop, in order of the smallest node.
pub fn loops(graph: &Graph, options: &Options) -> Vec<LoopVerdict> {
    let _ = options;
    let undecided = Behaviour { kind: BehaviourKind::Undecided, inputs: Vec::new(), states: Vec::new() };
    cycles::components(graph)
        .iter()
        .map(|nodes| LoopVerdict {
            nodes: nodes.to_vec(),
            inputs: Vec::new(),
            behaviours: vec![undecided.clone()],
            loses_state: None,
            loss_decided: false,
        })
        .collect()
}
