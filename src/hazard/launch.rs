//! What can really change together. A change of one source (a clock, a reset, an input) is followed through two steps:
//! first it travels everywhere while all flip-flops hold, then the cells that it reached take the next values that their
//! own logic gives them. A target shows a hazard in such an event when one of the steps does, or when the second takes
//! back what the first did.

mod assume;
mod assumptions;
mod cells;
mod data;
mod describe;
mod encode;
mod exact;
mod fabric;
mod launcher;
mod outputs;
mod reach;
mod region;
mod shown;

pub use assumptions::Assumptions;
pub use launcher::Launcher;
pub(super) use launcher::Unproven;
pub use shown::{Shown, shown};
