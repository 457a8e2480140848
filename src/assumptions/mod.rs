//! What the designer declares about nets, in the settings file or in comments beside declarations: from names to nodes, from
//! nodes to a judgement by [`crate::hazard::try_assumptions`], and from there to the report.
//!
//! Invariant: every declaration is listed in every report with how it stands to the design. One that the design
//! contradicts is an error and is not used; a name that means no net is an error as well.

mod apply;
mod contradicted;
mod resolve;

use serde::{Deserialize, Serialize};

use crate::hazard::AssumptionKind;
use crate::hazard::Standing;
use crate::source::Span;

pub use apply::{Applied, apply};
pub use resolve::{Resolved, resolve};

/// A declaration as it was written.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Declaration {
    pub kind: AssumptionKind,
    /// Full names of nets or of bits; `*` stands for any letters within one level of the hierarchy, `**` for any at all, `?`
    /// for one letter. Empty in a comment, which speaks about the nets declared on its line.
    pub nets: Vec<String>,
    pub reason: String,
    pub origin: Origin,
}

/// Where a declaration stands.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
pub enum Origin {
    /// Name of the file and line.
    Settings {
        file: String,
        line: usize,
    },
    Comment(Span),
}

/// A declaration about one group of nets, as the report shows it.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Listed {
    pub kind: AssumptionKind,
    /// Full names of nets, or of bits where not all bits of a net are meant.
    pub nets: Vec<String>,
    pub reason: String,
    pub origin: Origin,
    pub standing: Standing,
}

impl Listed {
    /// How it stands to the design, in one word.
    pub fn standing(&self) -> &'static str {
        match self.standing {
            Standing::Checked(_) => "checked",
            Standing::Trusted(_) => "trusted",
            Standing::Contradicted(_) => "contradicted",
        }
    }

    /// The same with the reason.
    pub fn why(&self) -> &'static str {
        use crate::hazard::{Doubt, Proof};
        match self.standing {
            Standing::Checked(Proof::Logic) => "checked: the logic in front of it guarantees it",
            Standing::Checked(Proof::Induction) => "checked: it holds in reset and every step preserves it",
            Standing::Trusted(Doubt::Environment) => "taken on trust: it depends on what the inputs do",
            Standing::Trusted(Doubt::Latches) => "taken on trust: it depends on latches",
            Standing::Trusted(Doubt::NoReset) => "taken on trust: its registers have no reset value that satisfies it",
            Standing::Trusted(Doubt::Loop) => "taken on trust: it depends on a combinational loop",
            Standing::Trusted(Doubt::NotInductive) => {
                "taken on trust: some step breaks it, from a state that may be out of reach"
            }
            Standing::Trusted(Doubt::Budget) => "taken on trust: no proof within the budget of the solver",
            Standing::Contradicted(_) => "contradicted by the design, and not used",
        }
    }
}
