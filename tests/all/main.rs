//! The one integration binary: fixtures, end-to-end runs and checks against outside references.

mod assumptions;
mod constructs;
mod convert;
mod cores;
mod covers;
mod decide;
mod decision;
mod demo;
mod elaborate;
mod explorer;
mod fixtures;
mod flatten;
mod formula;
mod given;
mod graph;
mod launch;
mod ledger;
mod loops;
mod operators;
mod outside;
mod paths;
mod pipeline;
mod published;
mod random_circuits;
mod random_modules;
mod reading;
mod report;
mod robustness;
mod rule_pages;
mod sarif;

mod signoff;
mod simulator;
mod sources;
mod transport;
mod wording;
