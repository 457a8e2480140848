//! The machine-readable output. Other programs depend on every field: fields are only ever added, and `schema` changes
//! when one must change. Maps are ordered and floats absent, so that equal reports give equal bytes.

use std::collections::BTreeMap;

use serde::Serialize;

use super::{Message, Report};
use crate::assumptions::{Listed, Origin};
use crate::rules::{Finding, NetCount, PinKind};
use crate::signoff::ledger;
use crate::source::{SourceSet, Span};

/// The report as JSON, indented, with a final line end.
pub fn render(report: &Report, sources: &SourceSet) -> String {
    let place = |span: Option<Span>| span.map(|span| Place::new(sources, span));
    let document = Document {
        schema: "stillwire-findings/1",
        version: env!("CARGO_PKG_VERSION"),
        tops: &report.tops,
        complete: report.complete(),
        findings: report
            .findings
            .iter()
            .map(|finding| FindingOut {
                macro_at: place(finding.at.and_then(|at| sources.macro_behind(at))),
                ..finding_out(finding, &place)
            })
            .collect(),
        messages: report.messages.iter().map(|message| message_out(message, &place)).collect(),
        coverage: coverage_out(report, &place),
        ledger: report.ledger.as_ref().map(ledger_out),
    };
    let mut text = serde_json::to_string_pretty(&document).unwrap_or_default();
    text.push('\n');
    text
}

#[derive(Serialize)]
struct Document<'a> {
    schema: &'static str,
    version: &'static str,
    tops: &'a [String],
    complete: bool,
    findings: Vec<FindingOut<'a>>,
    messages: Vec<MessageOut<'a>>,
    coverage: CoverageOut<'a>,
    ledger: Option<LedgerOut<'a>>,
}

#[derive(Serialize)]
pub(super) struct LedgerOut<'a> {
    file: &'a str,
    remaining: usize,
    gone: &'a [ledger::Entry],
}

/// 1-based; columns count characters; the end is the first character behind the place.
#[derive(Serialize)]
pub(super) struct Place {
    file: String,
    line: usize,
    column: usize,
    end_line: usize,
    end_column: usize,
}

impl Place {
    pub(super) fn new(sources: &SourceSet, span: Span) -> Self {
        let position = sources.position(span);
        Self {
            file: position.file,
            line: position.line,
            column: position.column,
            end_line: position.end_line,
            end_column: position.end_column,
        }
    }
}

#[derive(Serialize)]
struct FindingOut<'a> {
    rule: &'static str,
    severity: &'static str,
    verdict: &'static str,
    message: &'a str,
    at: Option<Place>,
    /// Where the macro is defined whose use `at` is.
    macro_at: Option<Place>,
    trace: Vec<StepOut<'a>>,
    instance: &'a str,
    net: &'a str,
    bits: Option<[i64; 2]>,
    pin: Option<PinOut<'a>>,
    hazards: Vec<HazardOut<'a>>,
    cover: Option<CoverOut<'a>>,
    #[serde(rename = "loop")]
    loop_: Option<LoopOut<'a>>,
    notes: &'a [String],
    fingerprint: &'a str,
    family: &'a str,
    signoff: Option<SignoffOut<'a>>,
    known: bool,
}

#[derive(Serialize)]
struct StepOut<'a> {
    at: Option<Place>,
    text: &'a str,
}

#[derive(Serialize)]
struct PinOut<'a> {
    kind: &'static str,
    active: Option<u8>,
    edge: Option<&'static str>,
    cells: &'a [String],
    count: usize,
}

#[derive(Serialize)]
struct HazardOut<'a> {
    net: &'a str,
    kind: &'static str,
    cause: &'static str,
    changes: &'a [String],
    harm: &'a str,
    before: BTreeMap<&'a str, u8>,
    after: BTreeMap<&'a str, u8>,
    launch: Option<LaunchOut<'a>>,
    reach: &'static str,
}

/// `first` and `second` give the value that each signal has when its step begins.
#[derive(Serialize)]
struct LaunchOut<'a> {
    root: &'a str,
    edge: &'static str,
    step: &'static str,
    first: BTreeMap<&'a str, u8>,
    second: BTreeMap<&'a str, u8>,
    passing: &'a [String],
    raced: &'a [String],
    pin: [u8; 3],
}

#[derive(Serialize)]
struct CoverOut<'a> {
    terms: &'a [String],
    verilog: &'a str,
    proven: bool,
}

#[derive(Serialize)]
struct LoopOut<'a> {
    nets: &'a [String],
    behaviour: &'a [&'static str],
}

#[derive(Serialize)]
pub(super) struct SignoffOut<'a> {
    reason: &'a str,
    by: Option<&'a str>,
    until: Option<&'a str>,
}

#[derive(Serialize)]
pub(super) struct MessageOut<'a> {
    severity: &'static str,
    text: &'a str,
    at: Option<Place>,
    also: Vec<StepOut<'a>>,
    help: Option<&'a str>,
}

#[derive(Serialize)]
pub(super) struct CoverageOut<'a> {
    files: Files,
    modules: Modules,
    unsupported: Vec<UnsupportedOut<'a>>,
    black_boxes: Vec<BlackBoxOut<'a>>,
    pins: BTreeMap<&'static str, CountOut>,
    open_questions: usize,
    clean_if_reached: usize,
    cells: Cells,
    loops: Loops,
    left_out: LeftOutOut<'a>,
    modelled_cells: Vec<BlackBoxOut<'a>>,
    assumptions: Vec<AssumptionOut<'a>>,
    severities: BTreeMap<&'static str, &'static str>,
}

#[derive(Serialize)]
struct AssumptionOut<'a> {
    kind: &'static str,
    nets: &'a [String],
    reason: &'a str,
    standing: &'static str,
    why: &'static str,
    at: Option<Place>,
    settings: Option<String>,
}

#[derive(Serialize)]
struct Files {
    read: usize,
    failed: usize,
}

#[derive(Serialize)]
struct Modules {
    elaborated: usize,
    failed: usize,
}

/// Stored bits.
#[derive(Serialize)]
#[serde(rename_all = "kebab-case")]
struct Cells {
    flip_flops: usize,
    latches: usize,
}

#[derive(Serialize)]
struct Loops {
    found: usize,
}

#[derive(Serialize)]
struct UnsupportedOut<'a> {
    construct: &'a str,
    at: Option<Place>,
}

#[derive(Serialize)]
struct BlackBoxOut<'a> {
    module: &'a str,
    instances: usize,
}

#[derive(Serialize)]
struct CountOut {
    nets: usize,
    clean: usize,
    hazard: usize,
    undecided: usize,
}

#[derive(Serialize)]
struct LeftOutOut<'a> {
    regions: Vec<Place>,
    simulation_only: &'a BTreeMap<String, usize>,
    benches: &'a [String],
    opaque_memories: &'a [String],
}

fn finding_out<'a>(finding: &'a Finding, place: &impl Fn(Option<Span>) -> Option<Place>) -> FindingOut<'a> {
    FindingOut {
        rule: finding.rule.name(),
        severity: finding.severity.name(),
        verdict: finding.verdict.name(),
        message: &finding.message,
        at: place(finding.at),
        macro_at: None,
        trace: finding.trace.iter().map(|step| StepOut { at: place(step.at), text: &step.text }).collect(),
        instance: &finding.instance,
        net: &finding.net,
        bits: finding.bits.map(|(low, high)| [low, high]),
        pin: finding.pin.as_ref().map(|pin| PinOut {
            kind: pin.kind.name(),
            active: pin.active.map(u8::from),
            edge: pin.edge,
            cells: &pin.cells,
            count: pin.count,
        }),
        hazards: finding
            .hazards
            .iter()
            .map(|hazard| HazardOut {
                net: &hazard.net,
                kind: hazard.kind,
                cause: hazard.cause,
                changes: &hazard.changes,
                harm: &hazard.harm,
                before: values(&hazard.before),
                after: values(&hazard.after),
                launch: hazard.launch.as_ref().map(|launch| LaunchOut {
                    root: &launch.root,
                    edge: if launch.rises { "rising" } else { "falling" },
                    step: launch.step,
                    first: values(&launch.first),
                    second: values(&launch.second),
                    passing: &launch.passing,
                    raced: &launch.raced,
                    pin: launch.pin.map(u8::from),
                }),
                reach: hazard.reach,
            })
            .collect(),
        cover: finding.cover.as_ref().map(|cover| CoverOut {
            terms: &cover.terms,
            verilog: &cover.verilog,
            proven: cover.proven,
        }),
        loop_: finding.loop_.as_ref().map(|found| LoopOut { nets: &found.nets, behaviour: &found.behaviour }),
        notes: &finding.notes,
        fingerprint: &finding.fingerprint,
        family: &finding.family,
        signoff: signoff_out(finding),
        known: finding.known,
    }
}

pub(super) fn signoff_out(finding: &Finding) -> Option<SignoffOut<'_>> {
    let signoff = finding.signoff.as_ref()?;
    Some(SignoffOut { reason: &signoff.reason, by: signoff.by.as_deref(), until: signoff.until.as_deref() })
}

pub(super) fn ledger_out(used: &ledger::Use) -> LedgerOut<'_> {
    LedgerOut { file: &used.file, remaining: used.remaining, gone: &used.gone }
}

fn values(values: &[(String, bool)]) -> BTreeMap<&str, u8> {
    values.iter().map(|(name, value)| (name.as_str(), u8::from(*value))).collect()
}

pub(super) fn message_out<'a>(message: &'a Message, place: &impl Fn(Option<Span>) -> Option<Place>) -> MessageOut<'a> {
    MessageOut {
        severity: message.severity.name(),
        text: &message.text,
        at: place(message.at),
        also: message.also.iter().map(|(at, text)| StepOut { at: place(Some(*at)), text }).collect(),
        help: message.help.as_deref(),
    }
}

pub(super) fn coverage_out<'a>(report: &'a Report, place: &impl Fn(Option<Span>) -> Option<Place>) -> CoverageOut<'a> {
    let coverage = &report.coverage;
    let count = |kind: PinKind| {
        let NetCount { nets, clean, hazard, undecided } = coverage.pins.get(kind);
        (kind.name(), CountOut { nets, clean, hazard, undecided })
    };
    CoverageOut {
        files: Files { read: coverage.files_read, failed: coverage.files_failed },
        modules: Modules { elaborated: coverage.modules_elaborated, failed: coverage.modules_failed },
        unsupported: coverage
            .unsupported
            .iter()
            .map(|(construct, at)| UnsupportedOut { construct, at: place(*at) })
            .collect(),
        black_boxes: coverage
            .black_boxes
            .iter()
            .map(|(module, &instances)| BlackBoxOut { module, instances })
            .collect(),
        pins: PinKind::ALL.into_iter().map(count).collect(),
        open_questions: coverage.pins.open_questions,
        clean_if_reached: coverage.pins.clean_if_reached,
        cells: Cells { flip_flops: coverage.cells.flip_flops, latches: coverage.cells.latches },
        loops: Loops { found: coverage.loops },
        left_out: LeftOutOut {
            regions: coverage.left_out.regions.iter().filter_map(|&span| place(Some(span))).collect(),
            simulation_only: &coverage.left_out.skipped,
            benches: &coverage.left_out.benches,
            opaque_memories: &coverage.left_out.opaque_memories,
        },
        modelled_cells: coverage
            .modelled_cells
            .iter()
            .map(|(module, &instances)| BlackBoxOut { module, instances })
            .collect(),
        assumptions: coverage.assumptions.iter().map(|assumption| assumption_out(assumption, place)).collect(),
        severities: coverage.severities.iter().map(|(rule, severity)| (rule.name(), severity.name())).collect(),
    }
}

fn assumption_out<'a>(assumption: &'a Listed, place: &impl Fn(Option<Span>) -> Option<Place>) -> AssumptionOut<'a> {
    let (at, settings) = match &assumption.origin {
        Origin::Comment(at) => (place(Some(*at)), None),
        Origin::Settings { file, line } => (None, Some(format!("{file}:{line}"))),
    };
    AssumptionOut {
        kind: assumption.kind.name(),
        nets: &assumption.nets,
        reason: &assumption.reason,
        standing: assumption.standing(),
        why: assumption.why(),
        at,
        settings,
    }
}
