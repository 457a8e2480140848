//! A finding as plain data: everything that the report formats need and nothing about how they look. The fields mirror
//! the JSON of the design's section 3.

use serde::{Deserialize, Serialize};

use super::known::{self, Word};
use crate::graph::NodeId;
use crate::hazard::{self, Witness};
use crate::source::Span;

/// The lowest severity is first, so that `max` is the worst.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Severity {
    Note,
    Warning,
    Error,
}

impl Severity {
    pub fn name(self) -> &'static str {
        match self {
            Severity::Note => "note",
            Severity::Warning => "warning",
            Severity::Error => "error",
        }
    }

    pub fn from_name(name: &str) -> Option<Severity> {
        [Severity::Note, Severity::Warning, Severity::Error].into_iter().find(|severity| severity.name() == name)
    }
}

/// Every rule there is, each with a page `rules/<name>.md`.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Rule {
    CombinationalLoop,
    ReconvergentInversion,
    SetResetHazard,
    ClockHazard,
    LatchEnableHazard,
    CoverUnprotected,
    SetResetOverlap,
    ResetRelease,
    SignoffInvalid,
    SignoffStale,
    SignoffExpired,
    UnsupportedConstruct,
    AssumptionContradicted,
}

impl Rule {
    pub const ALL: [Rule; 13] = [
        Rule::CombinationalLoop,
        Rule::ReconvergentInversion,
        Rule::SetResetHazard,
        Rule::ClockHazard,
        Rule::LatchEnableHazard,
        Rule::CoverUnprotected,
        Rule::SetResetOverlap,
        Rule::ResetRelease,
        Rule::SignoffInvalid,
        Rule::SignoffStale,
        Rule::SignoffExpired,
        Rule::UnsupportedConstruct,
        Rule::AssumptionContradicted,
    ];

    pub fn name(self) -> &'static str {
        match self {
            Rule::CombinationalLoop => "combinational-loop",
            Rule::ReconvergentInversion => "reconvergent-inversion",
            Rule::SetResetHazard => "set-reset-hazard",
            Rule::ClockHazard => "clock-hazard",
            Rule::LatchEnableHazard => "latch-enable-hazard",
            Rule::CoverUnprotected => "cover-unprotected",
            Rule::SetResetOverlap => "set-reset-overlap",
            Rule::ResetRelease => "reset-release",
            Rule::SignoffInvalid => "signoff-invalid",
            Rule::SignoffStale => "signoff-stale",
            Rule::SignoffExpired => "signoff-expired",
            Rule::UnsupportedConstruct => "unsupported-construct",
            Rule::AssumptionContradicted => "assumption-contradicted",
        }
    }

    pub fn from_name(name: &str) -> Option<Rule> {
        Rule::ALL.into_iter().find(|rule| rule.name() == name)
    }
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Verdict {
    Proven,
    Undecided,
}

impl Verdict {
    pub fn name(self) -> &'static str {
        match self {
            Verdict::Proven => "proven",
            Verdict::Undecided => "undecided",
        }
    }

    pub fn from_name(name: &str) -> Option<Verdict> {
        [Verdict::Proven, Verdict::Undecided].into_iter().find(|verdict| verdict.name() == name)
    }
}

/// A numbered place on the way of the change, or another place worth showing.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct TraceStep {
    pub at: Option<Span>,
    pub text: String,
    /// The way of the change that this place is on, 1 or 2; `None` where both run, and where there are no ways.
    pub way: Option<u8>,
}

impl TraceStep {
    /// A place that is on no way by itself.
    pub fn new(at: Option<Span>, text: impl Into<String>) -> Self {
        Self { at, text: text.into(), way: None }
    }
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum PinKind {
    Clock,
    Set,
    Reset,
    Load,
    LatchEnable,
    Watch,
    Output,
}

impl PinKind {
    /// In the order of the report.
    pub const ALL: [PinKind; 7] = [
        PinKind::Clock,
        PinKind::Set,
        PinKind::Reset,
        PinKind::Load,
        PinKind::LatchEnable,
        PinKind::Watch,
        PinKind::Output,
    ];

    pub fn name(self) -> &'static str {
        match self {
            PinKind::Clock => "clock",
            PinKind::Set => "set",
            PinKind::Reset => "reset",
            PinKind::Load => "load",
            PinKind::LatchEnable => "latch-enable",
            PinKind::Watch => "watch",
            PinKind::Output => "output",
        }
    }
}

#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Pin {
    pub kind: PinKind,
    /// Active level of a set, reset, load or latch enable.
    pub active: Option<bool>,
    /// `posedge` or `negedge` of a clock.
    #[serde(deserialize_with = "known::word_if_any")]
    pub edge: Option<Word>,
    /// Up to 20 of the cells on the net, by full name, sorted.
    pub cells: Vec<String>,
    /// All of them.
    pub count: usize,
}

/// One (changing source, kind) pair with its witness.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Hazard {
    /// The net that shows it, by full name: the finding's, or one bit of its port, or a feedback net of its loop.
    pub net: String,
    /// `static-0`, `static-1`, `dynamic`.
    #[serde(deserialize_with = "known::word")]
    pub kind: Word,
    /// `logic` or `function`.
    #[serde(deserialize_with = "known::word")]
    pub cause: Word,
    pub changes: Vec<String>,
    /// Nets of loops of gates that move while the change is under way; they are among `before` and `after`. Sorted.
    pub moved: Vec<String>,
    /// What it does to the cells on this pin, in words.
    pub harm: String,
    /// Every source that matters, sorted by name, with its value.
    pub before: Vec<(String, bool)>,
    pub after: Vec<(String, bool)>,
    /// What the pin shows: its value before and after.
    pub pin: (bool, bool),
    pub transition: Transition,
    /// The event that moves what changes, for changes of flip-flops and latches.
    pub launch: Option<LaunchText>,
    /// `any-state` or `reachable-states`: which states the claim was made for.
    #[serde(deserialize_with = "known::word")]
    pub reach: Word,
}

/// An event in names.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct LaunchText {
    /// The signal that starts it.
    pub root: String,
    pub rises: bool,
    /// `first`, `second`, `both`: at which of the two steps the pin shows the hazard.
    #[serde(deserialize_with = "known::word")]
    pub step: Word,
    /// Signals in front of the pin that move in the first step, with the value before; sorted by name.
    pub first: Vec<(String, bool)>,
    /// Those that move in the second step, with the value between the steps; sorted by name.
    pub second: Vec<(String, bool)>,
    /// Latches that are open and pass what is in front of them; sorted.
    pub passing: Vec<String>,
    /// Latches whose data moves while they open or close; sorted.
    pub raced: Vec<String>,
    /// The pin before, between and after the two steps.
    pub pin: [bool; 3],
}

/// A hazard in terms of the graph that was analysed, for whoever wants to see it happen.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Transition {
    pub target: NodeId,
    pub witness: Witness,
    /// Whether the outputs of arithmetic operators were taken as clean.
    pub calm: bool,
}

#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct CoverText {
    /// Each term as Verilog over the design's own names.
    pub terms: Vec<String>,
    /// The whole replacement or addition as Verilog.
    pub verilog: String,
    pub proven: bool,
    /// The net that it cures and its terms, in terms of the graph that was analysed.
    pub target: NodeId,
    pub cover: hazard::Cover,
}

#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct LoopText {
    pub nets: Vec<String>,
    /// Of `oscillates`, `stores`, `settles`, `delay-dependent`, `undecided`.
    #[serde(deserialize_with = "known::words")]
    pub behaviour: Vec<Word>,
}

#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Signoff {
    pub reason: String,
    pub by: Option<String>,
    /// `YYYY-MM-DD`
    pub until: Option<String>,
}

#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Finding {
    pub rule: Rule,
    pub severity: Severity,
    pub verdict: Verdict,
    /// Stands alone: what happens on the wire and what it does.
    pub message: String,
    pub at: Option<Span>,
    /// The declaration of the net, where a sign-off may stand as well.
    pub declared: Option<Span>,
    pub trace: Vec<TraceStep>,
    pub instance: String,
    pub net: String,
    /// `[lowest, highest]` hazardous bits of a finding on a whole port.
    pub bits: Option<(i64, i64)>,
    pub pin: Option<Pin>,
    pub hazards: Vec<Hazard>,
    pub cover: Option<CoverText>,
    pub loop_: Option<LoopText>,
    /// Further sentences printed below the source excerpt: what to do, why a cover was withheld.
    pub notes: Vec<String>,
    /// 32 hexadecimal digits over the rule, the hierarchical names and the structure of the cone.
    pub fingerprint: String,
    /// The same without the place in the hierarchy: equal for this finding in every instance of its module.
    pub family: String,
    pub signoff: Option<Signoff>,
    /// Whether the ledger has it.
    pub known: bool,
}

/// Digits of a fingerprint that are enough to tell findings apart by eye.
const SHORT_DIGITS: usize = 12;

impl Finding {
    /// The beginning of the fingerprint, enough for people and for `replay` and `cure`.
    pub fn short_fingerprint(&self) -> &str {
        self.fingerprint.get(..SHORT_DIGITS).unwrap_or(&self.fingerprint)
    }

    /// Whether somebody accepted it, by a sign-off or in the ledger: it is reported and fails nothing.
    pub fn is_accepted(&self) -> bool {
        self.signoff.is_some() || self.known
    }
}
