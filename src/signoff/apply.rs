//! Sign-offs meet findings. A sign-off covers a finding when its rule is named and the finding's own line (where its net
//! is driven), or the line that declares the finding's net, is the line the comment speaks about. Other lines of the
//! trace do not count: a sign-off must stand where a reader of the finding would look first.

use std::collections::BTreeSet;

use jiff::civil::Date;

use super::pragma::SignoffPragma;
use crate::report::Message;
use crate::rules::{Finding, Rule, Severity, bookkeeping};
use crate::source::{FileId, SourceSet, Span};

/// What applying the sign-offs adds to the report.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Applied {
    /// `signoff-stale` and `signoff-expired`.
    pub findings: Vec<Finding>,
    /// Sign-offs that could not be judged, because nothing of their file was analysed.
    pub messages: Vec<Message>,
}

/// Marks every finding that a valid sign-off covers. `analysed` are the files that something in the graph comes from. A sign-off holds up to and including the day it names; `today` is
/// given from outside so that a run can be repeated.
pub fn apply(
    analysed: &BTreeSet<FileId>,
    sources: &SourceSet,
    pragmas: &[SignoffPragma],
    findings: &mut [Finding],
    today: Date,
) -> Applied {
    let mut applied = Applied::default();
    let on_line = |place: Option<Span>, pragma: &SignoffPragma| {
        place.is_some_and(|span| {
            span.file == pragma.at.file && sources.file(span.file).line_column(span.start).0 == pragma.line
        })
    };
    for pragma in pragmas {
        let expired = pragma.until.is_some_and(|until| until < today);
        let mut stale: Vec<&str> = Vec::new();
        let mut hit = 0;
        for &rule in &pragma.rules {
            let mut hits = 0;
            for finding in findings.iter_mut().filter(|finding| finding.rule == rule) {
                if on_line(finding.at, pragma) || on_line(finding.declared, pragma) {
                    hits += 1;
                    if !expired && finding.signoff.is_none() {
                        finding.signoff = Some(pragma.signoff.clone());
                    }
                }
            }
            if hits == 0 {
                stale.push(rule.name());
            }
            hit += hits;
        }
        if expired && hit > 0 {
            let until = pragma.signoff.until.as_deref().unwrap_or_default();
            applied.findings.push(bookkeeping(
                Rule::SignoffExpired,
                Severity::Warning,
                format!("this sign-off held until {until}; what it covered counts again"),
                pragma.at,
                "look at the finding again: mend the logic, or renew the date with a reason that still holds",
                &pragma.signoff.reason,
            ));
        }
        if stale.is_empty() {
            continue;
        }
        if analysed.contains(&pragma.at.file) {
            applied.findings.push(bookkeeping(
                Rule::SignoffStale,
                Severity::Warning,
                format!("this sign-off matches no finding of {}", stale.join(", ")),
                pragma.at,
                "remove it, or move it to the line of the finding or of the net's declaration",
                &pragma.signoff.reason,
            ));
        } else {
            applied.messages.push(Message {
                severity: Severity::Note,
                text: "this sign-off was not judged, because nothing of its file was analysed".to_string(),
                at: Some(pragma.at),
                also: Vec::new(),
                help: None,
            });
        }
    }
    applied
}
