//! The one integration binary: fixtures, end-to-end runs and checks against outside references.

mod explorer;
mod graph;
mod formula;
mod outside;
mod pipeline;
mod published;
mod random_circuits;
