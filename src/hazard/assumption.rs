//! What the designer declares about nets: that some never change, or never have certain values together. A declaration
//! restricts what is asked, so a wrong one could hide a hazard. Hence each is tried: those that the logic or the registers
//! guarantee by themselves are marked as checked, those that the design contradicts are found out, and only the others
//! are taken on trust.

use serde::{Deserialize, Serialize};

use crate::graph::NodeId;

/// What is declared.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum AssumptionKind {
    /// None of the nets ever changes; their values are constant and unknown.
    Static,
    /// Exactly one of the nets is 1 in every settled state.
    OneHot,
    /// At most one of the nets is 1 in every settled state.
    MutuallyExclusive,
    /// In the launch of a clock edge, while no asynchronous control acts, at most one of the nets changes.
    OneBitChanging,
}

impl AssumptionKind {
    pub const ALL: [AssumptionKind; 4] = [
        AssumptionKind::Static,
        AssumptionKind::OneHot,
        AssumptionKind::MutuallyExclusive,
        AssumptionKind::OneBitChanging,
    ];

    /// The word for it in settings, comments and reports.
    pub fn name(self) -> &'static str {
        match self {
            AssumptionKind::Static => "static",
            AssumptionKind::OneHot => "one-hot",
            AssumptionKind::MutuallyExclusive => "mutually-exclusive",
            AssumptionKind::OneBitChanging => "one-bit-changing",
        }
    }

    pub fn from_name(name: &str) -> Option<AssumptionKind> {
        AssumptionKind::ALL.into_iter().find(|kind| kind.name() == name)
    }
}

/// One declaration about a group of nets.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct Assumption {
    pub kind: AssumptionKind,
    /// The nodes that drive the nets (see [`crate::graph::Graph::root`]), each once, in the order declared.
    pub nodes: Vec<NodeId>,
}

/// How an assumption stands to the design.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum Standing {
    /// The design guarantees it.
    Checked(Proof),
    /// Neither guaranteed nor contradicted: the design alone cannot tell.
    Trusted(Doubt),
    /// The design breaks it.
    Contradicted(Counterexample),
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum Proof {
    /// The logic in front of the nets guarantees it for every value of the sources.
    Logic,
    /// The reset state satisfies it and every step preserves it.
    Induction,
}

/// Why an assumption could not be checked.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum Doubt {
    /// The nets depend on inputs or modules without text.
    Environment,
    /// The nets depend on latches, which are not followed.
    Latches,
    /// The registers behind the nets have no reset value.
    NoReset,
    /// The nets depend on a combinational loop.
    Loop,
    /// A step from some state breaks it, and whether that state can be reached was not decided.
    NotInductive,
    /// The solver used up its conflicts.
    Budget,
}

/// A state, or two states in succession, that break an assumption. Values are those of the assumption's nodes.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub enum Counterexample {
    /// No values of the sources satisfy it, alone or together with the assumptions before it.
    Impossible { alone: bool },
    /// The state after `steps` clock edges from reset.
    State { steps: usize, values: Vec<(NodeId, bool)> },
    /// The step after `steps` clock edges from reset; both values of each node that changes.
    Step { steps: usize, changes: Vec<(NodeId, bool)> },
}
