//! What a stage of the front end has to say about bad or unsupported input, as plain data. Stages return
//! `(result, Vec<Diagnostic>)` and go on; nothing is printed here. Hazard findings are richer and live in
//! [`crate::rules::Finding`]; the pipeline turns these diagnostics into findings for the report.

use serde::{Deserialize, Serialize};

use crate::source::Span;

/// How much a diagnostic takes away from the analysis.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Kind {
    /// Worth knowing, nothing is lost (a second module of the same name, a region left out on purpose).
    Note,
    /// Nothing is lost for certain, but it is probably a mistake and must be seen.
    Warning,
    /// A construct we do not support: what it touches is opaque, the run is incomplete.
    Unsupported,
    /// Part of the input could not be read or elaborated: the run is incomplete.
    Incomplete,
    /// The user's sign-off comment is malformed (rule `signoff-invalid`).
    SignoffInvalid,
}

/// Something that the sources name and that is not among them.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Missing {
    Include(String),
    Macro(String),
    Package(String),
    /// A module, interface or primitive.
    Module(String),
}

/// A message with a place. `message` stands alone as one sentence; `help` says what to do.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub struct Diagnostic {
    pub kind: Kind,
    /// For `Unsupported`: the construct in the words of IEEE 1800 ("covergroup"); otherwise a short category.
    pub construct: String,
    pub message: String,
    pub at: Option<Span>,
    /// Further places, each with its own text.
    pub also: Vec<(Span, String)>,
    pub help: Option<String>,
    /// What is missing, so that the place where it is can be searched and named.
    pub missing: Option<Box<Missing>>,
}

impl Diagnostic {
    /// A diagnostic without further places or help.
    pub fn new(kind: Kind, construct: impl Into<String>, message: impl Into<String>, at: Option<Span>) -> Self {
        Self {
            kind,
            construct: construct.into(),
            message: message.into(),
            at,
            also: Vec::new(),
            help: None,
            missing: None,
        }
    }

    /// The same with a sentence about what to do.
    pub fn with_help(mut self, help: impl Into<String>) -> Self {
        self.help = Some(help.into());
        self
    }

    /// The same about something that is missing.
    pub fn about_missing(mut self, missing: Missing) -> Self {
        self.missing = Some(Box::new(missing));
        self
    }

    /// The same with one more labelled place.
    pub fn with_also(mut self, at: Span, text: impl Into<String>) -> Self {
        self.also.push((at, text.into()));
        self
    }
}
