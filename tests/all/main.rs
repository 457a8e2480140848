//! The one integration binary: fixtures, end-to-end runs and checks against outside references.

mod convert;
mod covers;
mod constructs;
mod decide;
mod decision;
mod demo;
mod explorer;
mod fixtures;
mod flatten;
mod formula;
mod graph;
mod loops;
mod operators;
mod outside;
mod paths;
mod pipeline;
mod published;
mod random_circuits;
mod reading;
mod report;
mod robustness;
mod rule_pages;
mod signoff;
mod simulator;
mod sources;
mod transport;
