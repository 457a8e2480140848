//! The hazard decision: for a net and every source that reaches it, whether a change of that source alone can show a
//! static-0, static-1 or dynamic hazard there, for arbitrary gate and wire delays.

mod assumption;
mod clauses;
mod cone;
mod cover;
mod decide;
mod encode;
mod enumerate;
mod feedback;
mod function;
mod induction;
pub mod launch;
mod loops;
mod options;
mod order;
mod parity;
mod paths;
mod points;
mod prove;
mod rails;
mod redundant;
mod search;
mod settled;
mod simulate;
mod solver;
mod symbolic;
mod tables;
mod verdict;
mod wave;
mod witness;

pub use assumption::{Assumption, AssumptionKind, Counterexample, Doubt, Proof, Standing};
pub use cover::{Withheld, cover};
pub use decide::decide;
pub use feedback::{Move, Walked, events_behind_loops, moves};
pub use induction::try_assumptions;
pub use loops::{Behaviour, BehaviourKind, LoopVerdict, StateLoss, loops};
pub use options::Options;
pub(crate) use order::Order;
pub use paths::{moves_loops, paths};
pub use redundant::{Redundant, redundant};
pub use settled::{Cells, Demand, Happening, is_free};
pub(crate) use tables::{Need, Promises};
pub use verdict::{
    Cause, Cover, HazardKind, Launch, LaunchHazard, Method, OpenLaunch, Pair, Path, PathStep, Paths, Reach, Step,
    TargetVerdict, Undecided, Witness,
};
pub(crate) use wave::gate;
pub use wave::{Wave, waveform};
