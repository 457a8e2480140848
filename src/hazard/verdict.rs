//! What a decision says, in terms of the graph: no names, no spans, no words.

use serde::{Deserialize, Serialize};

use crate::graph::NodeId;

/// The three ways to glitch. `i` and `f` are the target's initial and final values.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum HazardKind {
    /// 0 .. 1 .. 0
    Static0,
    /// 1 .. 0 .. 1
    Static1,
    /// More than one change between two different values.
    Dynamic,
}

impl HazardKind {
    pub const ALL: [HazardKind; 3] = [HazardKind::Static0, HazardKind::Static1, HazardKind::Dynamic];

    /// The word used in every output.
    pub fn name(self) -> &'static str {
        match self {
            HazardKind::Static0 => "static-0",
            HazardKind::Static1 => "static-1",
            HazardKind::Dynamic => "dynamic",
        }
    }
}

/// One transition that shows the hazard. Only what matters is listed: every source not in `holds` may have any value.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Witness {
    /// The sources that change, with their value before (the value after is its complement). One under single-input
    /// changes. Sorted by node.
    pub changes: Vec<(NodeId, bool)>,
    /// The sources (and unknown constants) that hold still, with their value. Sorted by node.
    pub holds: Vec<(NodeId, bool)>,
    /// The target before and after.
    pub target: (bool, bool),
    /// The event that makes the sources change, where it is known; see [`super::launch`]. Under it, `changes` are what
    /// moves in the step (or steps) that show the hazard.
    pub launch: Option<Launch>,
}

/// The step of an event at which a target shows its hazard.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Step {
    /// While the change of the root travels and all flip-flops hold.
    First,
    /// While the cells that the change reached take their next values.
    Second,
    /// Each step is clean, but the second takes back what the first did: the pulse is as short as the cells are fast.
    Both,
}

/// Whether another arrangement of gates could be free of the hazard.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Cause {
    /// The function of the target has the same value all the way; a hazard-free cover exists for this transition.
    Logic,
    /// The function itself passes through the other value between the two end points.
    Function,
}

/// The event behind a witness: which root moves, and what moves with it.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Launch {
    /// The source that starts the event.
    pub root: NodeId,
    /// Whether the root rises.
    pub rises: bool,
    pub step: Step,
    pub cause: Cause,
    /// The sources in front of the target that move in the first step, with their value before; sorted by node. The root
    /// is among them when it reaches the target.
    pub first: Vec<(NodeId, bool)>,
    /// Those that move in the second step, with their value between the steps; sorted by node. Empty when the first step
    /// shows the hazard.
    pub second: Vec<(NodeId, bool)>,
    /// Outputs of latches that pass their data in the step that shows the hazard, so that what lies in front of them is
    /// part of the target's logic; the sources in this witness are those in front of them. Sorted.
    pub passing: Vec<NodeId>,
    /// Those of `passing` that the first step opened and that held the other value than their data until then. They count
    /// among the sources that move as well. Sorted.
    pub late: Vec<NodeId>,
    /// Outputs of latches that do anything at all in the step that shows the hazard, because their data moves while they
    /// open or close. They count among the sources that move. Sorted.
    pub raced: Vec<NodeId>,
    /// The target before, between and after the two steps.
    pub target: [bool; 3],
}

impl Launch {
    /// Whether latches in front of the target's logic make or pass the hazard.
    pub fn is_of_latches(&self) -> bool {
        !self.passing.is_empty() || !self.raced.is_empty()
    }
}

/// For which states a claim was made.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Default, Serialize, Deserialize)]
pub enum Reach {
    /// Any settled state: a hazard is shown from a state that nobody checked to occur; a clean verdict holds whatever the
    /// state.
    #[default]
    AnyState,
    /// Only states that the flip-flops can come to from their reset values.
    ReachableStates,
}

/// A hazard of a launch that no change of a single source explains.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct LaunchHazard {
    pub kind: HazardKind,
    /// Has its [`Launch`].
    pub witness: Witness,
    pub reach: Reach,
}

/// A launch that stayed undecided.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
pub struct OpenLaunch {
    pub root: NodeId,
    /// Whether the root rises.
    pub rises: bool,
    pub reason: Undecided,
}

/// Why a question stayed open.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Undecided {
    /// The solver used up its conflicts.
    Budget,
    /// The change reaches the target through a combinational loop that could not be followed: it is too large, need not
    /// rest, or several of its sources may change at once.
    Loop,
    /// The change reaches the target through a combinational loop, and which state that comes to rest in, or whether it
    /// does, depends on delays.
    Race,
    /// Nothing drives the target: what it shows is not in the design. Said by whoever asks about a pin; the decision itself
    /// takes an undriven net as a constant.
    Undriven,
}

/// How questions were answered, the costliest way that was needed last.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Method {
    /// No two ways of any change meet with opposite inversions, so the structure alone rules hazards out.
    Structure,
    /// Every transition was simulated.
    Enumeration,
    /// The solver proved what the structure left open.
    Solver,
    /// Changes of single sources show hazards, but no event of the design makes these changes.
    Launches,
}

/// All that is known about one source against one target. Kinds in neither list are proven clean.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Pair {
    pub source: NodeId,
    /// Sorted by kind.
    pub hazards: Vec<(HazardKind, Witness)>,
    /// Sorted by kind.
    pub undecided: Vec<(HazardKind, Undecided)>,
}

/// The verdict on one target.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct TargetVerdict {
    pub target: NodeId,
    /// How many sources reach the target; each gives three questions.
    pub sources: usize,
    /// The pairs that are not clean, sorted by source.
    pub pairs: Vec<Pair>,
    /// What launches show beyond the pairs; see [`super::launch`]. Empty where nobody asked about launches.
    pub launches: Vec<LaunchHazard>,
    /// Launches that stayed undecided; sorted.
    pub open_launches: Vec<OpenLaunch>,
    /// Kinds among the pairs of which it stayed open whether any event shows them: a source that changes alone does. Only
    /// of targets whose kinds are confirmed one by one; sorted.
    pub alone: Vec<HazardKind>,
    /// What the verdict as a whole rests on.
    pub reach: Reach,
    /// How the questions about changes of single sources were answered.
    pub method: Method,
    /// How those about launches were; `None` where nobody asked about launches.
    pub launch_method: Option<Method>,
    /// Whether combinational loops lie in front of the target and were followed from every stable state; loops that could
    /// not be followed leave it undecided.
    pub follows_loops: bool,
}

impl TargetVerdict {
    /// Of a target that no source reaches.
    pub fn clean(target: NodeId) -> Self {
        Self {
            target,
            sources: 0,
            pairs: Vec::new(),
            launches: Vec::new(),
            open_launches: Vec::new(),
            alone: Vec::new(),
            reach: Reach::AnyState,
            method: Method::Structure,
            launch_method: None,
            follows_loops: false,
        }
    }

    /// Every question answered, none with a hazard.
    pub fn is_clean(&self) -> bool {
        self.pairs.is_empty() && self.launches.is_empty() && self.open_launches.is_empty()
    }
}

/// One node on the way of a change.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct PathStep {
    pub node: NodeId,
}

/// A way from the stem to the gate where the paths meet: wires and gates in order, both ends included.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Path {
    pub steps: Vec<PathStep>,
    /// Gates strictly after the stem and strictly before the meeting gate; wires do not count, an operator counts as one.
    pub gates: usize,
    /// Those among them whose output changes the other way than the step before.
    pub inversions: usize,
}

/// How a witness does its harm.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Paths {
    /// The last node common to both ways: where the change splits.
    pub stem: NodeId,
    /// The gate where a rising and a falling change meet (or, inside an operator, the operator's exit).
    pub meet: NodeId,
    /// Two ways from `stem` to `meet`; one only when the hazard arises inside an arithmetic operator.
    pub ways: Vec<Path>,
    /// From `meet` to the target, both included.
    pub tail: Vec<NodeId>,
}

/// Terms that remove the logic hazards of a target.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Cover {
    /// Product terms to OR to the target, or (with `sums`) sum terms to AND: literals as (node, positive).
    pub products: Vec<Vec<(NodeId, bool)>>,
    /// Sum terms to AND to the target, after the products were added.
    pub sums: Vec<Vec<(NodeId, bool)>>,
    /// When true the products replace the whole logic of the target instead of being added to it.
    pub replaces: bool,
    /// The decision was run again with the terms added and found nothing.
    pub proven: bool,
}
