//! The page of each rule, compiled into the binary so that `explain` always speaks about this very version.

use super::Rule;

/// What a rule finds, in the words of its page's first paragraph.
pub fn summary(rule: Rule) -> String {
    let paragraph = page(rule).split("\n\n").find_map(|paragraph| paragraph.strip_prefix("**What.** "));
    paragraph.unwrap_or_default().replace('\n', " ")
}

/// The page of a rule as Markdown. Every example in it is tested in both directions.
pub fn page(rule: Rule) -> &'static str {
    match rule {
        Rule::CombinationalLoop => include_str!("../../rules/combinational-loop.md"),
        Rule::ReconvergentInversion => include_str!("../../rules/reconvergent-inversion.md"),
        Rule::SetResetHazard => include_str!("../../rules/set-reset-hazard.md"),
        Rule::ClockHazard => include_str!("../../rules/clock-hazard.md"),
        Rule::LatchEnableHazard => include_str!("../../rules/latch-enable-hazard.md"),
        Rule::CoverUnprotected => include_str!("../../rules/cover-unprotected.md"),
        Rule::SetResetOverlap => include_str!("../../rules/set-reset-overlap.md"),
        Rule::ResetRelease => include_str!("../../rules/reset-release.md"),
        Rule::SignoffInvalid => include_str!("../../rules/signoff-invalid.md"),
        Rule::SignoffStale => include_str!("../../rules/signoff-stale.md"),
        Rule::SignoffExpired => include_str!("../../rules/signoff-expired.md"),
        Rule::AssumptionContradicted => include_str!("../../rules/assumption-contradicted.md"),
        Rule::UnsupportedConstruct => include_str!("../../rules/unsupported-construct.md"),
    }
}
