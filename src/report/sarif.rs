//! The findings as SARIF 2.1.0 (OASIS, Static Analysis Results Interchange Format), for code hosts and editors. The two
//! ways of a change are code flows; what was signed off or is in the ledger is suppressed with its justification; an
//! undecided question is a result of kind `open`; an incomplete analysis is an invocation that did not succeed. The
//! witness and the cover are in the message, because that is what viewers show.

use serde::{Serialize, Serializer};
use serde_json::{Value, json};

use super::{Message, Report, told};
use crate::rules::{self, Finding, Rule, Severity, TraceStep, Verdict};
use crate::source::{SourceSet, Span};

const SCHEMA: &str = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json";

/// The report as a SARIF log with one run, indented, with a final line end.
pub fn render(report: &Report, sources: &SourceSet) -> String {
    let places = Places { sources };
    let driver = json!({
        "name": "Stillwire",
        "version": env!("CARGO_PKG_VERSION"),
        "semanticVersion": env!("CARGO_PKG_VERSION"),
        "rules": Rule::ALL.map(rule).to_vec(),
    });
    let invocation = json!({
        "executionSuccessful": report.complete(),
        "toolExecutionNotifications": notifications(report, &places),
    });
    let results = Results { report, places: &places };
    let run = Run { tool: Tool { driver }, column_kind: "unicodeCodePoints", invocations: [invocation], results };
    let log = Log { schema: SCHEMA, version: "2.1.0", runs: [run] };
    let mut text = serde_json::to_string_pretty(&log).unwrap_or_default();
    text.push('\n');
    text
}

#[derive(Serialize)]
struct Log<'a> {
    #[serde(rename = "$schema")]
    schema: &'static str,
    version: &'static str,
    runs: [Run<'a>; 1],
}

#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
struct Run<'a> {
    tool: Tool,
    column_kind: &'static str,
    invocations: [Value; 1],
    results: Results<'a>,
}

#[derive(Serialize)]
struct Tool {
    driver: Value,
}

/// The findings, each made when it is written: thousands of them as trees would take much more memory than as text.
struct Results<'a> {
    report: &'a Report,
    places: &'a Places<'a>,
}

impl Serialize for Results<'_> {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_seq(self.report.findings.iter().map(|finding| result(self.report, finding, self.places)))
    }
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
        "message": { "text": told::message(finding) },
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

fn suppressions(report: &Report, finding: &Finding) -> Value {
    let suppression = |kind: &str, justification: String| json!({ "kind": kind, "status": "accepted", "justification": justification });
    let signoff = told::signoff(finding).map(|reason| suppression("inSource", reason));
    let known = told::known(report, finding).map(|reason| suppression("external", reason));
    signoff.into_iter().chain(known).collect::<Vec<_>>().into()
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
