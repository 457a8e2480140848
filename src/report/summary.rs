//! The last lines of the text: what was looked at, what was not, and whether the run passes. Nothing that was left out
//! is ever silent.

use std::fmt::Write;

use super::Report;
use super::text::Style;
use crate::assumptions::Listed;
use crate::rules::{PinKind, Severity};
use crate::signoff::ledger;

/// The most names listed of black boxes, benches and the like.
const SHOWN_NAMES: usize = 8;

pub(super) const CAUTION: &str =
    "Delays, metastability, analogue effects and timing sign-off are out of scope; the responsible engineer decides.";

pub(super) fn render(report: &Report, style: &Style) -> String {
    let mut text = String::new();
    let coverage = &report.coverage;
    let _ = writeln!(text, "{}", findings(report, style));
    if let Some(ledger) = &report.ledger {
        let _ = writeln!(text, "{}", known(ledger));
    }
    pins(report, &mut text);
    let (flip_flops, latches) = (coverage.cells.flip_flops, coverage.cells.latches);
    if flip_flops + latches > 0 {
        let _ = writeln!(text, "  stored: {} in flip-flops, {latches} in latches", number(flip_flops, "bit"));
    }
    if coverage.loops > 0 {
        let _ = writeln!(text, "  combinational loops found: {}", coverage.loops);
    }
    let _ = writeln!(
        text,
        "  read: {}, {} failed; modules: {} elaborated, {} failed; unsupported constructs: {}",
        number(coverage.files_read, "file"),
        coverage.files_failed,
        coverage.modules_elaborated,
        coverage.modules_failed,
        coverage.unsupported.len()
    );
    let boxes: Vec<String> =
        coverage.black_boxes.iter().map(|(module, count)| format!("{module} ({count}x)")).collect();
    list("black boxes, outputs taken as clean and free", &boxes, &mut text);
    let cells: Vec<String> =
        coverage.modelled_cells.iter().map(|(module, count)| format!("{module} ({count}x)")).collect();
    list("cells from libraries and settings", &cells, &mut text);
    let left_out = &coverage.left_out;
    list("benches left out", &left_out.benches, &mut text);
    list("memories too large to flatten", &left_out.opaque_memories, &mut text);
    let skipped: Vec<String> = left_out.skipped.iter().map(|(kind, count)| format!("{kind} ({count}x)")).collect();
    list("for simulation only, left out", &skipped, &mut text);
    if !left_out.regions.is_empty() {
        let _ = writeln!(text, "  translate_off regions left out: {}", left_out.regions.len());
    }
    assumptions(report, &mut text);
    let severities = coverage.severities.iter().map(|(rule, severity)| format!("{} {}", rule.name(), severity.name()));
    list("severities fixed by the settings", &severities.collect::<Vec<_>>(), &mut text);
    let _ = writeln!(text, "{}", result(report, style.gate));
    let _ = writeln!(text, "{CAUTION}");
    text
}

/// "1 error, 2 warnings; not shown: 3 notes; signed off: 1".
fn findings(report: &Report, style: &Style) -> String {
    let open = |severity: Severity| {
        report.findings.iter().filter(|finding| !finding.is_accepted() && finding.severity == severity).count()
    };
    let messages = |severity: Severity| report.messages.iter().filter(|message| message.severity == severity).count();
    let mut shown = Vec::new();
    let mut hidden = Vec::new();
    for severity in [Severity::Error, Severity::Warning, Severity::Note] {
        let found = open(severity) + messages(severity);
        let text = number(found, severity.name());
        if severity >= style.show {
            shown.push(text);
        } else if found > 0 {
            hidden.push(text);
        }
    }
    let mut line = format!("stillwire: {}", shown.join(", "));
    if !hidden.is_empty() {
        let _ = write!(line, "; not shown: {} (see --show)", hidden.join(", "));
    }
    let signed_off = report.findings.iter().filter(|finding| finding.signoff.is_some()).count();
    if signed_off > 0 {
        let _ = write!(line, "; signed off: {signed_off}");
    }
    let known = report.findings.iter().filter(|finding| finding.known && finding.signoff.is_none()).count();
    if known > 0 {
        let _ = write!(line, "; known in the ledger: {known}");
    }
    line
}

/// "ledger known.toml: 12 entries remain, 2 are gone ...".
pub(super) fn known(ledger: &ledger::Use) -> String {
    let remaining = match ledger.remaining {
        1 => "1 entry remains".to_string(),
        remaining => format!("{remaining} entries remain"),
    };
    let mut line = format!("  ledger {}: {remaining}", ledger.file);
    match ledger.gone.as_slice() {
        [] => {}
        [one] => {
            let _ = write!(line, ", 1 is gone (`{}`); drop it with `stillwire ledger prune`", one.net);
        }
        gone => {
            let _ = write!(line, ", {} are gone; drop them with `stillwire ledger prune`", gone.len());
        }
    }
    line
}

/// One line per kind of net that occurs.
fn pins(report: &Report, text: &mut String) {
    let pins = &report.coverage.pins;
    if pins.total().nets == 0 {
        text.push_str(
            "  nets checked: none; there are no clocks, asynchronous pins, latch enables, watched nets or outputs\n",
        );
        return;
    }
    let _ = writeln!(text, "  {:<14}{:>8}{:>8}{:>8}{:>11}", "nets checked", "all", "clean", "hazard", "undecided");
    let mut line = |name: &str, count: crate::rules::NetCount| {
        let _ =
            writeln!(text, "  {name:<14}{:>8}{:>8}{:>8}{:>11}", count.nets, count.clean, count.hazard, count.undecided);
    };
    for kind in PinKind::ALL {
        if pins.get(kind).nets > 0 {
            line(kind.name(), pins.get(kind));
        }
    }
    line("together", pins.total());
    // What was not asked is no less worth saying than what was not read.
    text.push_str(
        "  asked of each: whether a change of one signal, or an edge with all that it launches, can glitch it",
    );
    text.push_str(if pins.get(PinKind::Output).nets > 0 {
        "; of outputs: one signal, where some event makes the change\n"
    } else {
        "\n"
    });
    if pins.clean_if_reached > 0 {
        let _ = writeln!(text, "  of the clean, only in the states reachable from reset: {}", pins.clean_if_reached);
    }
}

/// What the verdicts rest on besides the design; those taken on trust come first.
fn assumptions(report: &Report, text: &mut String) {
    let mut listed: Vec<&Listed> = report.coverage.assumptions.iter().collect();
    if listed.is_empty() {
        return;
    }
    let count = |standing: &str| listed.iter().filter(|one| one.standing() == standing).count();
    let (checked, trusted, contradicted) = (count("checked"), count("trusted"), count("contradicted"));
    let _ = write!(text, "  assumptions: {trusted} taken on trust, {checked} checked");
    if contradicted > 0 {
        let _ = write!(text, ", {contradicted} contradicted and not used");
    }
    text.push('\n');
    listed.sort_by_key(|one| ["trusted", "contradicted", "checked"].iter().position(|word| *word == one.standing()));
    for one in listed.iter().take(SHOWN_NAMES) {
        let nets = match one.nets.as_slice() {
            [first, rest @ ..] if rest.len() > 1 => format!("{first} and {} more", rest.len()),
            nets => nets.join(" and "),
        };
        let _ = writeln!(text, "    {} {nets}; {}; \"{}\"", one.kind.name(), one.why(), one.reason);
    }
    if listed.len() > SHOWN_NAMES {
        let _ = writeln!(text, "    and {} more, all of them in the JSON", listed.len() - SHOWN_NAMES);
    }
}

/// Whether the run passes, and why not.
pub(super) fn result(report: &Report, gate: Severity) -> String {
    let failing = report.findings.iter().filter(|finding| !finding.is_accepted() && finding.severity >= gate);
    let gate = gate.name();
    let failing = failing.count();
    let mut text = match failing {
        0 => format!("result: nothing at or above `{gate}`"),
        _ => format!("result: FAILS, {} at or above `{gate}`", number(failing, "finding")),
    };
    if !report.complete() {
        text.push_str("; INCOMPLETE: part of the input was not analysed or not decided, so this is no pass");
    }
    text
}

fn list(what: &str, names: &[String], text: &mut String) {
    if names.is_empty() {
        return;
    }
    let shown = names.iter().take(SHOWN_NAMES).map(String::as_str).collect::<Vec<_>>().join(", ");
    let more = match names.len().saturating_sub(SHOWN_NAMES) {
        0 => String::new(),
        more => format!(" and {more} more"),
    };
    let _ = writeln!(text, "  {what}: {shown}{more}");
}

pub(super) fn number(count: usize, noun: &str) -> String {
    if count == 1 { format!("1 {noun}") } else { format!("{count} {noun}s") }
}
