//! Code actions: a sign-off comment, whose reason is left to the person who signs, and the proven cure of a net. The
//! comment is inserted without a reason; such a comment is refused by the next scan, so it accepts nothing until somebody
//! has said why.

use std::path::Path;

use lsp_server::{ErrorCode, RequestId, ResponseError};
use serde_json::{Value, json};

use super::protocol::{self, CodeActionParams, Range};
use super::worker::Job;
use super::{Answer, Server, error, findings};
use crate::Scan;
use crate::cure::Change;
use crate::rules::{Finding, Rule};

impl Server<'_> {
    /// Nothing is offered for a text that was not scanned: its places are not those of the scan.
    pub(super) fn actions(&self, params: &CodeActionParams) -> Value {
        let Some(path) = protocol::path(&params.text_document.uri) else { return json!([]) };
        let Some(scan) = self.scan.as_ref().filter(|_| !self.is_unsaved(&path)) else { return json!([]) };
        let mut actions = Vec::new();
        for finding in findings::within(scan, &self.current, &path, params.range) {
            if finding.is_accepted() {
                continue;
            }
            actions.extend(self.signoff(scan, finding, &path));
            if self.resolves && finding.cover.as_ref().is_some_and(|cover| cover.proven) {
                actions.push(json!({
                    "title": format!("Cure {} on {} by its cover", finding.rule.name(), finding.net),
                    "kind": "quickfix",
                    "data": { "fingerprint": finding.fingerprint },
                }));
            }
        }
        Value::Array(actions)
    }

    /// The comment, alone on the line before the one that the finding is on in this file.
    fn signoff(&self, scan: &Scan, finding: &Finding, path: &Path) -> Option<Value> {
        let bookkeeping = [Rule::SignoffInvalid, Rule::SignoffStale, Rule::SignoffExpired];
        if bookkeeping.contains(&finding.rule) {
            return None;
        }
        let here = [finding.at, finding.declared].into_iter().flatten();
        let mut here =
            here.filter(|span| protocol::absolute(&self.current, &scan.sources.file(span.file).path) == path);
        // A comment would end a macro definition that goes on behind it.
        let (file, line) = here.find_map(|span| {
            let file = scan.sources.file(span.file);
            let line = file.line_column(span.start).0;
            let continues = line > 1 && file.text[file.line_range(line - 1)].ends_with('\\');
            (!continues).then_some((file, line))
        })?;
        let start = file.line_range(line).start;
        let text = &file.text[file.line_range(line)];
        let indent = &text[..text.len() - text.trim_start().len()];
        let end = if file.text.contains("\r\n") { "\r\n" } else { "\n" };
        let place = crate::source::Span { file: file.id, start: start as u32, end: start as u32 };
        let comment = format!("{indent}// stillwire: signoff {} \"\"{end}", finding.rule.name());
        let edit = json!({ "range": Range::of(&scan.sources, place).json(), "newText": comment });
        Some(json!({
            "title": format!("Sign off {} on {}: write the reason between the quotes", finding.rule.name(), finding.net),
            "kind": "quickfix",
            "edit": { "changes": { protocol::uri(&self.current, &file.path): [edit] } },
        }))
    }

    /// Has the edit of a code action worked out; the answer follows by [`Server::cured`].
    pub(super) fn resolve(&mut self, id: &RequestId, action: Value) -> Result<(), ResponseError> {
        let Some(fingerprint) = action["data"]["fingerprint"].as_str().map(str::to_string) else {
            return Err(error(ErrorCode::InvalidParams, "this code action is none of this server's"));
        };
        self.waiting.push(id.clone());
        let job = Job::Cure { id: id.clone(), action, fingerprint };
        self.jobs.send(job).map_err(|_| error(ErrorCode::InternalError, "the analysis has ended"))
    }

    /// The code action with its edit.
    pub(super) fn cured(&self, mut action: Value, change: &Change) -> Answer {
        let path = protocol::absolute(&self.current, &change.file);
        if self.documents.differs(&path, Some(&change.before)) {
            let message = "the file has unsaved edits, or they were not scanned yet; save it and try again";
            return Err(error(ErrorCode::ContentModified, message));
        }
        action["edit"] = json!({ "changes": { protocol::uri(&self.current, &path): [replacement(change)] } });
        Ok(action)
    }
}

/// One edit of whole lines, from the first that differs to the last.
fn replacement(change: &Change) -> Value {
    let before: Vec<&str> = change.before.split_inclusive('\n').collect();
    let after: Vec<&str> = change.after.split_inclusive('\n').collect();
    let same = |(one, other): &(&&str, &&str)| one == other;
    let head = before.iter().zip(&after).take_while(same).count();
    let tail = before[head..].iter().rev().zip(after[head..].iter().rev()).take_while(same).count();
    let place = |line: usize| json!({ "line": line, "character": 0 });
    json!({
        "range": { "start": place(head), "end": place(before.len() - tail) },
        "newText": after[head..after.len() - tail].concat(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_lines_that_differ_are_replaced() {
        let change = |before: &str, after: &str| {
            let change = Change { file: "a.v".into(), before: before.to_string(), after: after.to_string() };
            let edit = replacement(&change);
            let line = |end: &str| edit["range"][end]["line"].as_u64().unwrap_or_default();
            (line("start"), line("end"), edit["newText"].as_str().unwrap_or_default().to_string())
        };
        assert_eq!(change("a\nb\nc\n", "a\nx\ny\nc\n"), (1, 2, "x\ny\n".to_string()));
        assert_eq!(change("a\nb\n", "a\nb\nb\n"), (2, 2, "b\n".to_string()));
        assert_eq!(change("a\nb\nb\n", "a\nb\n"), (2, 3, String::new()));
    }
}
