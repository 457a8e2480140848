//! Stillwire reads an RTL tree, flattens it into a gate graph and says, with proof, where a wire that must hold still can
//! glitch. The modules stand in the order in which data flows.

pub mod diagnostic;
pub mod elaborate;
pub mod graph;
pub mod hazard;
mod ids;
pub mod report;
pub mod rules;
pub mod signoff;
pub mod source;
pub mod syntax;
