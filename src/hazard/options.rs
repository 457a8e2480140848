//! The bounds of a decision. Every bound that is hit yields a typed "undecided", never a pass.

use serde::Serialize;

/// Effort and scope of [`super::decide()`].
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize)]
pub struct Options {
    /// Conflicts per solver question before it stays undecided.
    pub conflicts: u64,
    /// Cones of at most this many sources are enumerated exhaustively.
    pub exhaustive_sources: usize,
    /// Random patterns tried before the solver is asked; a multiple of 64.
    pub patterns: usize,
    /// Treat the outputs of arithmetic operators as clean (`h = 0` at every `OpOut`), to see hazards of the written
    /// logic only.
    pub ignore_operators: bool,
    /// Stop at the first witness of each kind per target instead of listing every source.
    pub one_per_kind: bool,
    /// Ask what one source can show when it changes alone, and nothing about launches; see [`super::launch`].
    pub single_changes: bool,
}

impl Default for Options {
    fn default() -> Self {
        Self {
            conflicts: 10_000,
            exhaustive_sources: 16,
            patterns: 4096,
            ignore_operators: false,
            one_per_kind: false,
            single_changes: false,
        }
    }
}
