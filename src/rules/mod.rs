//! The rules: what each looks at and what it says. One file per rule.

mod finding;

pub use finding::{CoverText, Finding, Hazard, LoopText, Pin, PinKind, Rule, Severity, Signoff, TraceStep, Verdict};
