//! The findings as one HTML file for people, which loads nothing and works from a file share. Heads of findings are plain
//! HTML, so that they are there without scripts; what unfolds below a head is made by the script from data that stands
//! in the page, one line of JSON per group of findings, when it is asked for.
//!
//! Invariant: whatever comes from a design is escaped, in the HTML and in the data; the page's own policy forbids every
//! load, so that a mistake here cannot become one.

mod detail;
mod summary;

use std::fmt::Write;

use super::{Report, shown};
use crate::drawing::Exhibit;
use crate::rules::{Finding, Severity};
use crate::source::SourceSet;

const STYLE: &str = include_str!("page.css");
/// In the order in which they build on each other.
const SCRIPTS: [&str; 4] =
    [include_str!("draw.js"), include_str!("waves.js"), include_str!("detail.js"), include_str!("page.js")];
/// Nothing may be loaded; the style and the script are those in the page.
const POLICY: &str = "default-src 'none'; style-src 'unsafe-inline'; script-src 'unsafe-inline'; img-src data:";

/// The whole page. `exhibits` belong to the findings of the report in their order; where they are missing, findings have
/// no drawing.
pub fn render(report: &Report, exhibits: &[Exhibit], sources: &SourceSet, gate: Severity) -> String {
    let none = Exhibit::default();
    let with = report.findings.iter().enumerate();
    let with = with.map(|(index, finding)| (finding, exhibits.get(index).unwrap_or(&none)));
    let groups = shown::families(with, |(finding, _)| finding);
    let title = match report.tops.as_slice() {
        [] => "Stillwire".to_string(),
        [top] => format!("Stillwire: {top}"),
        [first, rest @ ..] => format!("Stillwire: {first} and {} more", rest.len()),
    };
    let mut page = String::new();
    let _ = writeln!(
        page,
        "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n\
         <meta http-equiv=\"Content-Security-Policy\" content=\"{POLICY}\">\n\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n\
         <meta name=\"color-scheme\" content=\"light dark\">\n\
         <link rel=\"icon\" href=\"data:,\">\n\
         <title>{}</title>\n<style>\n{STYLE}</style>\n</head>\n<body>",
        escaped(&title)
    );
    page.push_str(&summary::render(report, sources, gate));
    page.push_str(&summary::controls(&groups));
    page.push_str("<main id=\"findings\" aria-label=\"findings\">\n");
    for (index, group) in groups.iter().enumerate() {
        head(index, group, sources, &mut page);
    }
    page.push_str("<p id=\"nothing\" hidden>No finding fits the filter.</p>\n</main>\n");
    page.push_str(&summary::rules(&groups));
    page.push_str(
        "<noscript><p>Without scripts only the heads of the findings are shown; excerpts, drawings and waveforms need \
         them.</p></noscript>\n",
    );
    page.push_str("<script type=\"application/json\" id=\"details\">\n");
    for group in &groups {
        page.push_str(&in_script(&detail::render(group, sources)));
        page.push('\n');
    }
    page.push_str("</script>\n<script>\n\"use strict\";\n");
    for script in SCRIPTS {
        page.push_str(script);
    }
    page.push_str("</script>\n</body>\n</html>\n");
    page
}

/// Findings that are one to a reader, with what only the graph could tell of them; the lead first.
type Group<'a> = Vec<(&'a Finding, &'a Exhibit)>;

/// Open, signed off, or known in the ledger.
fn state(finding: &Finding) -> &'static str {
    match (&finding.signoff, finding.known) {
        (Some(_), _) => "signed-off",
        (None, true) => "known",
        (None, false) => "open",
    }
}

/// `file:line:column`, empty without a place.
fn place(finding: &Finding, sources: &SourceSet) -> String {
    finding.at.map_or(String::new(), |at| {
        let position = sources.position(at);
        format!("{}:{}:{}", position.file, position.line, position.column)
    })
}

/// The head of a group, which is a button once the script runs.
fn head(index: usize, group: &Group<'_>, sources: &SourceSet, page: &mut String) {
    let Some(&(finding, exhibit)) = group.first() else { return };
    let (severity, verdict) = (finding.severity.name(), finding.verdict.name());
    let _ = writeln!(
        page,
        "<article class=\"finding {severity}\" id=\"f{index}\" data-rule=\"{}\" data-severity=\"{severity}\" \
         data-verdict=\"{verdict}\" data-state=\"{}\" data-module=\"{}\" data-count=\"{}\" data-fingerprint=\"{}\">",
        finding.rule.name(),
        state(finding),
        escaped(&exhibit.module),
        group.len(),
        escaped(&finding.fingerprint),
    );
    let _ = write!(
        page,
        "<h2><button type=\"button\" class=\"head\" aria-expanded=\"false\" aria-controls=\"d{index}\">\
         <span class=\"badge\">{severity}</span> <span class=\"rule\">{}</span>",
        finding.rule.name()
    );
    if verdict == "undecided" {
        page.push_str(" <span class=\"tag\">undecided</span>");
    }
    match state(finding) {
        "signed-off" => page.push_str(" <span class=\"tag\">signed off</span>"),
        "known" => page.push_str(" <span class=\"tag\">known in the ledger</span>"),
        _ => {}
    }
    if group.len() > 1 {
        let _ = write!(page, " <span class=\"tag\">{} alike</span>", group.len());
    }
    let _ = writeln!(
        page,
        "<span class=\"message\">{}</span><span class=\"where\">{}</span></button></h2>",
        coded(&finding.message),
        escaped(&place(finding, sources))
    );
    if group.len() > 1 {
        page.push_str("<p class=\"alike\" hidden>");
        for (finding, _) in &group[1..] {
            let _ = write!(page, "{} ", escaped(&finding.net));
        }
        page.push_str("</p>\n");
    }
    let _ = writeln!(page, "<div class=\"detail\" id=\"d{index}\" hidden></div>\n</article>");
}

/// Text for HTML, in content and in attributes.
fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for letter in text.chars() {
        match letter {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            // Not allowed in HTML, whatever a file contains.
            control if control.is_control() && !matches!(control, '\n' | '\t') => out.push('\u{fffd}'),
            letter => out.push(letter),
        }
    }
    out
}

/// A sentence in which names stand between backquotes.
fn coded(text: &str) -> String {
    let mut out = String::new();
    for (index, part) in text.split('`').enumerate() {
        match index % 2 {
            0 => out.push_str(&escaped(part)),
            _ => {
                let _ = write!(out, "<code>{}</code>", escaped(part));
            }
        }
    }
    out
}

/// JSON that may stand in a script element: nothing in it can end the element or begin a comment.
fn in_script(json: &str) -> String {
    json.replace('<', "\\u003c").replace('>', "\\u003e").replace('\u{2028}', "\\u2028").replace('\u{2029}', "\\u2029")
}
