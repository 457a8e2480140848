//! The result of a scan as plain data, and one file per output format. Everything that reaches any output is in
//! [`Report`], already sorted; the formats only render. They return strings: nothing here prints, looks at a terminal or
//! reads the environment. The same report always renders to the same bytes.

pub mod evidence;
pub mod flatten;
pub(crate) mod held;
pub mod html;
pub mod json;
pub mod junit;
pub mod page;
pub mod sarif;
mod shown;
mod summary;
pub mod text;
mod told;
mod waveform;

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use crate::assumptions::Listed;
use crate::input::Input;
use crate::rules::{CellCount, CheckedNet, Finding, PinCoverage, Rule, Severity, Verdict};
use crate::signoff::ledger;
use crate::source::Span;

/// All that a scan has to say.
#[derive(Clone, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
pub struct Report {
    /// Names of the analysed top modules, sorted.
    pub tops: Vec<String>,
    /// Their parameters with the values that hold, by top and name.
    pub parameters: BTreeMap<String, BTreeMap<String, String>>,
    /// Every file that was read; never remembered, since other bytes may have led to the same.
    #[serde(skip)]
    pub inputs: Vec<Input>,
    /// Sorted by [`crate::rules::sort`]; accepted findings are among them.
    pub findings: Vec<Finding>,
    /// Every net that was asked about, once per role, clean ones included.
    pub checked: Vec<CheckedNet>,
    /// What the front end wants to say beside the findings.
    pub messages: Vec<Message>,
    pub coverage: Coverage,
    /// What the ledger did, when there is one.
    pub ledger: Option<ledger::Use>,
}

/// Something worth knowing that is no finding: a duplicate module, an empty file.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
pub struct Message {
    pub severity: Severity,
    pub text: String,
    pub at: Option<Span>,
    pub also: Vec<(Span, String)>,
    pub help: Option<String>,
}

/// What was analysed and what was not. "Clean" means nothing without it.
#[derive(Clone, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
pub struct Coverage {
    pub files_read: usize,
    pub files_failed: usize,
    pub modules_elaborated: usize,
    pub modules_failed: usize,
    /// Constructs that were not supported, in order of place.
    pub unsupported: Vec<(String, Option<Span>)>,
    /// Whether anything else was lost (a missing include, an instance that could not be elaborated).
    pub incomplete: bool,
    /// Modules without text and their number of instances, by name.
    pub black_boxes: BTreeMap<String, usize>,
    pub pins: PinCoverage,
    pub cells: CellCount,
    pub loops: usize,
    pub left_out: LeftOut,
    /// Instances of cells from libraries and declarations, by module.
    pub modelled_cells: BTreeMap<String, usize>,
    /// What the designer declared about nets, and how it stands to the design.
    pub assumptions: Vec<Listed>,
    /// Rules whose severity the settings fix.
    pub severities: BTreeMap<Rule, Severity>,
}

/// What was passed over on purpose.
#[derive(Clone, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
pub struct LeftOut {
    /// Regions between `translate_off` and `translate_on` comments.
    pub regions: Vec<Span>,
    /// Constructs that only simulation sees ("assertion", "specify block"), by kind.
    pub skipped: BTreeMap<String, usize>,
    /// Modules without ports that nobody instantiates, by name.
    pub benches: Vec<String>,
    /// Memories too large to be flattened, by hierarchical name; their read ports were treated as operators.
    pub opaque_memories: Vec<String>,
}

impl Report {
    /// Whether everything that was asked for was analysed and decided.
    pub fn complete(&self) -> bool {
        let coverage = &self.coverage;
        !coverage.incomplete
            && coverage.files_failed == 0
            && coverage.modules_failed == 0
            && coverage.unsupported.is_empty()
            && self.findings.iter().all(|finding| finding.verdict == Verdict::Proven)
            && coverage.pins.open_questions == 0
    }

    /// Whether a finding that nobody accepted is at least as bad as `gate`.
    pub fn fails(&self, gate: Severity) -> bool {
        self.findings.iter().any(|finding| !finding.is_accepted() && finding.severity >= gate)
    }

    /// The exit code of the design's section 2: 1 findings at or above the gate, 3 incomplete, 0 otherwise.
    pub fn exit_code(&self, gate: Severity) -> u8 {
        if self.fails(gate) {
            1
        } else if !self.complete() {
            3
        } else {
            0
        }
    }
}
