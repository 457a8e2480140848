//! What a hover says about a net: the findings on it, each with its witness, as Markdown.

use std::fmt::Write;

use lsp_server::ResponseError;
use serde_json::{Value, json};

use super::protocol::{self, HoverParams, Range};
use super::{Server, findings};
use crate::report::held;
use crate::rules::{Finding, Hazard};

/// Hazards shown per finding.
const SHOWN: usize = 3;

impl Server<'_> {
    pub(super) fn hover(&self, params: &HoverParams) -> Result<Value, ResponseError> {
        let here = Range { start: params.position, end: params.position };
        let Some(path) = protocol::path(&params.text_document.uri) else { return Ok(Value::Null) };
        let Some(scan) = &self.scan else { return Ok(Value::Null) };
        let mut texts: Vec<String> = findings::within(scan, &self.current, &path, here).map(about).collect();
        if texts.is_empty() {
            return Ok(Value::Null);
        }
        if self.is_unsaved(&path) {
            texts.insert(0, "*The file has unsaved edits. This is about the saved text.*".to_string());
        }
        Ok(json!({ "contents": { "kind": "markdown", "value": texts.join("\n\n---\n\n") } }))
    }
}

fn about(finding: &Finding) -> String {
    let accepted = match (&finding.signoff, finding.known) {
        (Some(signoff), _) => format!(", signed off: {}", signoff.reason),
        (None, true) => ", known in the ledger".to_string(),
        (None, false) => String::new(),
    };
    let mut text = format!(
        "**{}** ({}, {}{accepted})\n\n{}\n",
        finding.rule.name(),
        finding.severity.name(),
        finding.verdict.name(),
        finding.message
    );
    for hazard in finding.hazards.iter().take(SHOWN) {
        witness(hazard, &mut text);
    }
    if finding.hazards.len() > SHOWN {
        let _ = writeln!(text, "\n{} more hazards are in the report.", finding.hazards.len() - SHOWN);
    }
    if let Some(cover) = &finding.cover {
        let proven = if cover.proven { "proven" } else { "not proven" };
        let _ = write!(text, "\nCover ({proven}):\n\n```verilog\n{}\n```\n", cover.verilog);
    }
    for note in &finding.notes {
        let _ = writeln!(text, "\n{note}");
    }
    let _ = write!(text, "\n`stillwire replay {}` shows it in a simulator.", finding.short_fingerprint());
    text
}

fn witness(hazard: &Hazard, text: &mut String) {
    let bit = |value: bool| u8::from(value);
    let value = |values: &[(String, bool)], name: &String| {
        values.iter().find(|(known, _)| known == name).map_or("?".to_string(), |(_, value)| bit(*value).to_string())
    };
    let _ = writeln!(text, "\n*{} ({})* on `{}`: {}\n", hazard.kind, hazard.cause, hazard.net, hazard.harm);
    for name in &hazard.changes {
        let (before, after) = (value(&hazard.before, name), value(&hazard.after, name));
        let _ = writeln!(text, "- `{name}` changes from {before} to {after}");
    }
    let held: Vec<String> =
        held::held(hazard).iter().map(|held| format!("`{}` = {}", held.name, held.value())).collect();
    if !held.is_empty() {
        let _ = writeln!(text, "- meanwhile {}", held.join(", "));
    }
    let (before, after) = hazard.pin;
    let _ = writeln!(text, "- the net is {} before and {} after", bit(before), bit(after));
}
