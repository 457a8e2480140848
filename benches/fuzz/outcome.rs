//! What one input did, as the child tells its parent: one line of JSON.

use std::time::Duration;

use serde::{Deserialize, Serialize};

/// The result of one run.
#[derive(Clone, Debug, Default, Serialize, Deserialize)]
pub struct Outcome {
    pub complete: bool,
    /// Nodes of the gate graph.
    pub nodes: usize,
    /// Messages and constructs without names and numbers: what the input made the front end say.
    pub said: Vec<String>,
    /// Panics inside the parser that the reader caught.
    pub parser_panics: usize,
    pub failure: Option<Failure>,
    /// Processor time of the child for this input; the parent fills it in, and the peak of resident memory.
    #[serde(default)]
    pub time: Duration,
    #[serde(default)]
    pub peak_kb: u64,
}

/// What went wrong.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Failure {
    pub kind: Kind,
    /// Where: a place in our sources, a signal. Inputs that fail in the same way at the same place are one failure.
    pub place: String,
    pub detail: String,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Kind {
    Panic,
    Signal,
    Time,
    Memory,
    Stalled,
    NotReadBack,
    FalselyComplete,
}

impl Failure {
    pub fn new(kind: Kind, place: impl Into<String>, detail: impl Into<String>) -> Self {
        Self { kind, place: place.into(), detail: detail.into() }
    }

    /// What failures of the same cause have in common; also a file name.
    pub fn key(&self) -> String {
        let kind = match self.kind {
            Kind::Panic => "panic",
            Kind::Signal => "signal",
            Kind::Time => "time",
            Kind::Memory => "memory",
            Kind::Stalled => "stalled",
            Kind::NotReadBack => "not-read-back",
            Kind::FalselyComplete => "falsely-complete",
        };
        let place: String =
            self.place.chars().map(|c| if c.is_ascii_alphanumeric() || c == '.' { c } else { '-' }).take(80).collect();
        if place.is_empty() { kind.to_string() } else { format!("{kind}-{place}") }
    }
}
