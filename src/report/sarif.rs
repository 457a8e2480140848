//! The findings as SARIF 2.1.0 (OASIS, Static Analysis Results Interchange Format), for code hosts and editors. The two
//! ways of a change are code flows; what was signed off or is in the ledger is suppressed with its justification; an
//! undecided question is a result of kind `open`; an incomplete analysis is an invocation that did not succeed. The
//! witness and the cover are in the message, because that is what viewers show.

use serde_json::{Value, json};

use super::{Message, Report};
use crate::rules::{self, Finding, Rule, Severity, TraceStep, Verdict};
use crate::source::{SourceSet, Span};

const SCHEMA: &str = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json";

/// The report as a SARIF log with one run, indented, with a final line end.
pub fn render(report: &Report, sources: &SourceSet) -> String {
    let places = Places { sources };
    let run = json!({
        "tool": { "driver": {
            "name": "Stillwire",
            "version": env!("CARGO_PKG_VERSION"),
            "semanticVersion": env!("CARGO_PKG_VERSION"),
            "rules": Rule::ALL.map(rule).to_vec(),
        }},
        "columnKind": "unicodeCodePoints",
        "invocations": [{
            "executionSuccessful": report.complete(),
            "toolExecutionNotifications": notifications(report, &places),
        }],
        "results": report.findings.iter().map(|finding| result(report, finding, &places)).collect::<Vec<_>>(),
    });
    let log = json!({ "$schema": SCHEMA, "version": "2.1.0", "runs": [run] });
    let mut text = serde_json::to_string_pretty(&log).unwrap_or_default();
    text.push('\n');
    text
}

/// A rule with its page as help.
fn rule(rule: Rule) -> Value {
    let page = rules::page(rule);
    json!({
        "id": rule.name(),
        "shortDescription": { "text": rules::summary(rule) },
        "help": { "text": page, "markdown": page },
    })
}

fn level(severity: Severity) -> &'static str {
    // The names of SARIF's levels are ours.
    severity.name()
}

fn result(report: &Report, finding: &Finding, places: &Places<'_>) -> Value {
    let open = finding.verdict == Verdict::Undecided;
    let mut location = places.location(finding.at, None);
    if !finding.net.is_empty() {
        location["logicalLocations"] = json!([
            { "fullyQualifiedName": finding.net, "kind": "variable" },
            { "fullyQualifiedName": finding.instance, "kind": "module" },
        ]);
    }
    let mut result = json!({
        "ruleId": finding.rule.name(),
        "ruleIndex": finding.rule as usize,
        "kind": if open { "open" } else { "fail" },
        // A level says how bad a failure is; the standard wants none where there is no failure.
        "level": if open { "none" } else { level(finding.severity) },
        "message": { "text": message(finding) },
        "locations": [location],
        "partialFingerprints": { "fingerprint/v1": finding.fingerprint, "family/v1": finding.family },
        "suppressions": suppressions(report, finding),
        "properties": { "severity": finding.severity.name() },
    });
    let related: Vec<Value> =
        finding.trace.iter().filter(|step| step.at.is_some()).map(|step| places.step(step)).collect();
    if !related.is_empty() {
        result["relatedLocations"] = related.into();
    }
    // Ways that lie at one place, such as the two branches of one expression, are one flow.
    let parts = finding.trace.iter().any(|step| step.way.is_some());
    let ways: &[Option<u8>] = if parts { &[Some(1), Some(2)] } else { &[None] };
    let flows: Vec<Value> = ways.iter().filter_map(|&way| flow(finding, way, places)).collect();
    if !flows.is_empty() {
        result["codeFlows"] = flows.into();
    }
    result
}

/// The places of one way of the change, with those that both ways share; `None` where there is no way to follow.
fn flow(finding: &Finding, way: Option<u8>, places: &Places<'_>) -> Option<Value> {
    let steps = finding.trace.iter().filter(|step| (step.way.is_none() || step.way == way) && step.at.is_some());
    let locations: Vec<Value> = steps.map(|step| json!({ "location": places.step(step) })).collect();
    let text = way.map_or("the change".to_string(), |way| format!("path {way} of the change"));
    let flow = || json!({ "message": { "text": text }, "threadFlows": [{ "locations": locations }] });
    (locations.len() > 1).then(flow)
}

/// The finding's sentence, its first witness, and what to do.
fn message(finding: &Finding) -> String {
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

fn suppressions(report: &Report, finding: &Finding) -> Value {
    let mut all = Vec::new();
    if let Some(signoff) = &finding.signoff {
        let by = signoff.by.as_ref().map_or(String::new(), |by| format!(", by {by}"));
        let until = signoff.until.as_ref().map_or(String::new(), |until| format!(", until {until}"));
        let justification = format!("{}{by}{until}", signoff.reason);
        all.push(json!({ "kind": "inSource", "status": "accepted", "justification": justification }));
    }
    if finding.known {
        let file = report.ledger.as_ref().map_or("", |ledger| &ledger.file);
        let justification = format!("known when Stillwire was adopted: ledger {file}");
        all.push(json!({ "kind": "external", "status": "accepted", "justification": justification }));
    }
    all.into()
}

/// What the front end says, and that a run was incomplete.
fn notifications(report: &Report, places: &Places<'_>) -> Vec<Value> {
    let mut all: Vec<Value> = report.messages.iter().map(|message| notification(message, places)).collect();
    if !report.complete() {
        let text = "part of the input was not analysed or not decided, so that a missing result is no proof";
        all.push(json!({ "level": "error", "message": { "text": text } }));
    }
    all
}

fn notification(message: &Message, places: &Places<'_>) -> Value {
    let help = message.help.as_ref().map_or(String::new(), |help| format!("\n\n{help}"));
    let mut out = json!({
        "level": level(message.severity),
        "message": { "text": format!("{}{help}", message.text) },
    });
    if message.at.is_some() {
        out["locations"] = json!([places.location(message.at, None)]);
    }
    out
}

/// Places as SARIF writes them; its end column is behind the last character, as ours.
struct Places<'a> {
    sources: &'a SourceSet,
}

impl Places<'_> {
    fn location(&self, at: Option<Span>, text: Option<&str>) -> Value {
        let mut location = json!({});
        if let Some(at) = at {
            let position = self.sources.position(at);
            location["physicalLocation"] = json!({
                "artifactLocation": { "uri": uri(&position.file) },
                "region": {
                    "startLine": position.line,
                    "startColumn": position.column,
                    "endLine": position.end_line,
                    "endColumn": position.end_column,
                },
            });
        }
        if let Some(text) = text {
            location["message"] = json!({ "text": text });
        }
        location
    }

    fn step(&self, step: &TraceStep) -> Value {
        self.location(step.at, Some(&step.text))
    }
}

/// A path as a URI reference (RFC 3986): what is not unreserved is escaped; an absolute path becomes a `file` URI.
fn uri(path: &str) -> String {
    let mut escaped = String::with_capacity(path.len());
    for byte in path.replace('\\', "/").bytes() {
        match byte {
            b'a'..=b'z' | b'A'..=b'Z' | b'0'..=b'9' | b'-' | b'.' | b'_' | b'~' | b'/' => {
                escaped.push(char::from(byte))
            }
            other => escaped.push_str(&format!("%{other:02X}")),
        }
    }
    if escaped.starts_with('/') { format!("file://{escaped}") } else { escaped }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn paths_become_uri_references() {
        assert_eq!(uri("rtl/a b.v"), "rtl/a%20b.v");
        assert_eq!(uri("/tmp/ü.v"), "file:///tmp/%C3%BC.v");
    }

    #[test]
    fn rules_stand_at_their_index() {
        for (index, rule) in Rule::ALL.into_iter().enumerate() {
            assert_eq!(rule as usize, index);
        }
    }
}
