//! Findings as diagnostics of the files that they are in. What somebody accepted is not shown.

use std::collections::BTreeMap;
use std::path::Path;

use serde_json::{Value, json};

use super::protocol::{self, Range};
use crate::Scan;
use crate::rules::{self, Finding};
use crate::source::Span;

/// By URI; a file is absent when nothing is wrong in it.
pub(super) fn diagnostics(scan: &Scan, current: &Path) -> BTreeMap<String, Vec<Value>> {
    let uri = |span: Span| protocol::uri(current, &scan.sources.file(span.file).path);
    let mut by_file: BTreeMap<String, Vec<Value>> = BTreeMap::new();
    for finding in scan.report.findings.iter().filter(|finding| !finding.is_accepted()) {
        let Some(at) = finding.at else { continue };
        let related: Vec<Value> = finding
            .trace
            .iter()
            .filter_map(|step| {
                let at = step.at?;
                let range = Range::of(&scan.sources, at).json();
                Some(json!({ "location": { "uri": uri(at), "range": range }, "message": step.text }))
            })
            .collect();
        let message: Vec<&str> = std::iter::once(&finding.message).chain(&finding.notes).map(String::as_str).collect();
        by_file.entry(uri(at)).or_default().push(json!({
            "range": Range::of(&scan.sources, at).json(),
            "severity": severity(finding.severity) as u8,
            "code": finding.rule.name(),
            "source": "stillwire",
            "message": message.join("\n"),
            "relatedInformation": related,
        }));
    }
    for message in scan.report.messages.iter().filter(|message| message.severity > rules::Severity::Note) {
        let Some(at) = message.at else { continue };
        let text: Vec<&str> = std::iter::once(&message.text).chain(&message.help).map(String::as_str).collect();
        by_file.entry(uri(at)).or_default().push(json!({
            "range": Range::of(&scan.sources, at).json(),
            "severity": severity(message.severity) as u8,
            "source": "stillwire",
            "message": text.join("\n"),
        }));
    }
    by_file
}

fn severity(severity: rules::Severity) -> protocol::Severity {
    match severity {
        rules::Severity::Error => protocol::Severity::Error,
        rules::Severity::Warning => protocol::Severity::Warning,
        rules::Severity::Note => protocol::Severity::Information,
    }
}

/// What came of the scan in one line.
pub(super) fn summary(scan: &Scan) -> String {
    let count = |severity: rules::Severity| {
        let wanted = |finding: &&Finding| finding.severity == severity && !finding.is_accepted();
        scan.report.findings.iter().filter(wanted).count()
    };
    let complete = if scan.report.complete() {
        "everything that was read was analysed and decided"
    } else {
        "NOT everything was analysed and decided, so a missing finding means nothing"
    };
    format!(
        "scanned {} files: {} errors, {} warnings, {} notes; {complete}",
        scan.report.coverage.files_read,
        count(rules::Severity::Error),
        count(rules::Severity::Warning),
        count(rules::Severity::Note)
    )
}

/// The scanned text of a file.
pub(super) fn text<'a>(scan: &'a Scan, current: &Path, path: &Path) -> Option<&'a str> {
    let file = scan.sources.files.iter().find(|file| protocol::absolute(current, &file.path) == path);
    file.map(|file| &*file.text)
}

/// The findings that stand in a range of a file: where the net is driven, or where it is declared.
pub(super) fn within<'a>(
    scan: &'a Scan,
    current: &'a Path,
    path: &'a Path,
    range: Range,
) -> impl Iterator<Item = &'a Finding> {
    scan.report.findings.iter().filter(move |finding| {
        [finding.at, finding.declared].into_iter().flatten().any(|span| {
            protocol::absolute(current, &scan.sources.file(span.file).path) == path
                && Range::of(&scan.sources, span).meets(range)
        })
    })
}
