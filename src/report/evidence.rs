//! The evidence record: what a safety assessor needs to judge a run without having seen it. It says what was read (every
//! file by its SHA-256), under which settings, what was looked at net by net and what each clean verdict rests on, and
//! everything that limits it: what was left out, not understood, assumed, accepted.
//!
//! Invariant: nothing in it depends on when, where or with how many threads the program ran, so that two runs on one input
//! give the same bytes, and a record can be checked by making it again.

use std::collections::BTreeMap;

use serde::Serialize;

use super::json::{self, CoverageOut, LedgerOut, MessageOut, Place};
use super::{Report, summary, told};
use crate::hazard::Undecided;
use crate::input::Input;
use crate::rules::{CheckedNet, Finding, NetState, Severity};
use crate::source::{SourceSet, Span};

/// What a report does not know about its run.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Run {
    /// The arguments as given, without those that change nothing (`--threads`).
    pub command: Vec<String>,
    /// What `--show-settings` prints.
    pub settings: String,
    /// Parameters of the tops that were set, by name, as they were written.
    pub parameters: BTreeMap<String, String>,
    /// What was read besides the design: settings and ledger.
    pub inputs: Vec<Input>,
}

/// What "clean" claims, for whoever did not read the manual.
const CLAIM: &str = "A clean net shows no more changes than its initial and final values need, for arbitrary delays of \
                     every gate and wire, whatever else the sources in front of it do in one change or launch; the \
                     claim holds for the logic as written, under the assumptions and limits listed here";

/// The record as JSON, indented, with a final line end. `gate` is the lowest severity that fails the run.
pub fn render(report: &Report, sources: &SourceSet, gate: Severity, run: &Run) -> String {
    let place = |span: Option<Span>| span.map(|span| Place::new(sources, span));
    let mut inputs: Vec<&Input> = report.inputs.iter().chain(&run.inputs).collect();
    inputs.sort();
    inputs.dedup();
    let record = Record {
        schema: "stillwire-evidence/1",
        tool: Tool { name: "stillwire", version: env!("CARGO_PKG_VERSION") },
        command: &run.command,
        settings: run.settings.lines().collect(),
        inputs: inputs.into_iter().map(input_out).collect(),
        tops: &report.tops,
        parameters: &run.parameters,
        parameters_in_force: &report.parameters,
        result: ResultOut {
            gate: gate.name(),
            exit: report.exit_code(gate),
            complete: report.complete(),
            missing: told::missing(report),
        },
        claim: CLAIM,
        caution: summary::CAUTION,
        nets: report.checked.iter().map(|net| net_out(net, place(net.at))).collect(),
        findings: report.findings.iter().map(|finding| finding_out(finding, place(finding.at))).collect(),
        messages: report.messages.iter().map(|message| json::message_out(message, &place)).collect(),
        coverage: json::coverage_out(report, &place),
        ledger: report.ledger.as_ref().map(json::ledger_out),
    };
    let mut text = serde_json::to_string_pretty(&record).unwrap_or_default();
    text.push('\n');
    text
}

#[derive(Serialize)]
struct Record<'a> {
    schema: &'static str,
    tool: Tool,
    command: &'a [String],
    settings: Vec<&'a str>,
    inputs: Vec<InputOut<'a>>,
    tops: &'a [String],
    parameters: &'a BTreeMap<String, String>,
    parameters_in_force: &'a BTreeMap<String, BTreeMap<String, String>>,
    result: ResultOut,
    claim: &'static str,
    caution: &'static str,
    nets: Vec<NetOut<'a>>,
    findings: Vec<FindingOut<'a>>,
    messages: Vec<MessageOut<'a>>,
    coverage: CoverageOut<'a>,
    ledger: Option<LedgerOut<'a>>,
}

#[derive(Serialize)]
struct Tool {
    name: &'static str,
    version: &'static str,
}

#[derive(Serialize)]
struct InputOut<'a> {
    role: &'static str,
    file: String,
    sha256: Option<&'a str>,
}

#[derive(Serialize)]
struct ResultOut {
    gate: &'static str,
    exit: u8,
    complete: bool,
    missing: Vec<String>,
}

/// `method` and `rests_on` of a clean net, `open` of an undecided one.
#[derive(Serialize)]
struct NetOut<'a> {
    role: &'static str,
    net: &'a str,
    at: Option<Place>,
    cells: &'a [String],
    count: usize,
    verdict: &'static str,
    method: Option<&'static str>,
    rests_on: Option<String>,
    open: Vec<&'static str>,
}

#[derive(Serialize)]
struct FindingOut<'a> {
    rule: &'static str,
    severity: &'static str,
    verdict: &'static str,
    net: &'a str,
    at: Option<Place>,
    message: &'a str,
    fingerprint: &'a str,
    signoff: Option<json::SignoffOut<'a>>,
    known: bool,
}

fn input_out(input: &Input) -> InputOut<'_> {
    InputOut {
        role: input.role.name(),
        file: input.path.to_string_lossy().into_owned(),
        sha256: input.sha256.as_deref(),
    }
}

fn net_out(net: &CheckedNet, at: Option<Place>) -> NetOut<'_> {
    let (method, rests_on) = match &net.state {
        NetState::Clean(ground) => (Some(ground.name()), Some(ground.text())),
        NetState::Hazard | NetState::Undecided(_) => (None, None),
    };
    let open = match &net.state {
        NetState::Undecided(reasons) => reasons.iter().map(|&reason| why(reason)).collect(),
        NetState::Hazard | NetState::Clean(_) => Vec::new(),
    };
    NetOut {
        role: net.pin.kind.name(),
        net: &net.net,
        at,
        cells: &net.pin.cells,
        count: net.pin.count,
        verdict: net.state.name(),
        method,
        rests_on,
        open,
    }
}

fn why(reason: Undecided) -> &'static str {
    match reason {
        Undecided::Budget => "no proof within the budget of the solver",
        Undecided::Loop => "a change passes a combinational loop that could not be followed",
        Undecided::Race => "which state a combinational loop settles in depends on delays",
        Undecided::Undriven => "nothing drives the net",
    }
}

fn finding_out(finding: &Finding, at: Option<Place>) -> FindingOut<'_> {
    FindingOut {
        rule: finding.rule.name(),
        severity: finding.severity.name(),
        verdict: finding.verdict.name(),
        net: &finding.net,
        at,
        message: &finding.message,
        fingerprint: &finding.fingerprint,
        signoff: json::signoff_out(finding),
        known: finding.known,
    }
}
