//! The one integration binary: fixtures, end-to-end runs and checks against outside references.

mod decide;
mod decision;
mod explorer;
mod formula;
mod graph;
mod operators;
mod outside;
mod paths;
mod pipeline;
mod published;
mod random_circuits;
mod signoff;
mod simulator;
mod transport;
