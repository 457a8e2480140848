//! A finding told in plain paragraphs, and why somebody accepted it, for formats whose viewers show text.

use super::Report;
use crate::rules::Finding;

/// The finding's sentence, its first witness, its cover, and what to do; paragraphs parted by empty lines.
pub(super) fn message(finding: &Finding) -> String {
    let mut text = format!("{}.", finding.message);
    if let Some(lead) = finding.hazards.first() {
        text.push_str(&format!("\n\n{}\n\neffect: {}", super::waveform::render(lead), lead.harm));
    }
    if let Some(cover) = &finding.cover {
        let word = if cover.proven { "proven" } else { "not proven" };
        text.push_str(&format!("\n\ncover ({word}): {}", cover.verilog));
    }
    for note in &finding.notes {
        text.push_str(&format!("\n\n{note}"));
    }
    text
}

/// The reason of the sign-off with who gave it and how long it holds.
pub(super) fn signoff(finding: &Finding) -> Option<String> {
    let signoff = finding.signoff.as_ref()?;
    let by = signoff.by.as_ref().map_or(String::new(), |by| format!(", by {by}"));
    let until = signoff.until.as_ref().map_or(String::new(), |until| format!(", until {until}"));
    Some(format!("{}{by}{until}", signoff.reason))
}

/// That the ledger has it, and which ledger.
pub(super) fn known(report: &Report, finding: &Finding) -> Option<String> {
    let file = report.ledger.as_ref().map_or("", |ledger| &ledger.file);
    finding.known.then(|| format!("known when Stillwire was adopted: ledger {file}"))
}

/// Everything that makes a run incomplete, one sentence each; empty when the run is complete.
pub(super) fn missing(report: &Report) -> Vec<String> {
    let coverage = &report.coverage;
    let mut all = Vec::new();
    let mut say = |count: usize, one: &str, more: &str| match count {
        0 => {}
        1 => all.push(format!("1 {one}")),
        count => all.push(format!("{count} {more}")),
    };
    say(coverage.files_failed, "file could not be read", "files could not be read");
    say(coverage.modules_failed, "module could not be elaborated", "modules could not be elaborated");
    say(coverage.unsupported.len(), "construct is not supported", "constructs are not supported");
    say(coverage.pins.open_questions, "question was not decided", "questions were not decided");
    let undecided = report.findings.iter().filter(|finding| finding.verdict == crate::rules::Verdict::Undecided);
    say(undecided.count(), "finding is undecided", "findings are undecided");
    if all.is_empty() && !report.complete() {
        all.push("part of the input was lost; the messages say what".to_string());
    }
    all
}
