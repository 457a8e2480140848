//! The text that people read. Each finding stands on its own: what happens, where the two ways of the change run, the
//! witness as a small waveform, what it does to the cells, the cure. Colours are the caller's choice. Everything that
//! is shortened says by how much; the whole is in the JSON.

use codespan_reporting::diagnostic::{Diagnostic, Label, Severity as Level};
use codespan_reporting::files::{Error, Files};
use codespan_reporting::term::termcolor::Buffer;
use codespan_reporting::term::{self, Config};

use super::held::held;
use super::shown::{self, Marked, Places};
use super::{Message, Report, summary, waveform};
use crate::rules::{Finding, Hazard, Severity};
use crate::source::{FileId, SourceSet, Span};

/// How the text is to look.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Style {
    /// The lowest severity shown; the rest is counted.
    pub show: Severity,
    /// The lowest severity that fails the run, for the last line.
    pub gate: Severity,
    /// Colours by escape sequences.
    pub colours: bool,
}

impl Default for Style {
    fn default() -> Self {
        Self { show: Severity::Warning, gate: Severity::Error, colours: false }
    }
}

/// Findings beyond the first of one net are one line each; so many of them.
const SHOWN_HAZARDS: usize = 6;

/// With more held signals than this, such a line leaves their values to the JSON.
const SHOWN_HELD: usize = 3;

/// So many findings are shown in full, those of one family as one.
const SHOWN_GROUPS: usize = 100;

/// So many further nets of a family are named.
const SHOWN_NETS: usize = 4;

/// Columns of a wrapped note.
const WIDTH: usize = 100;

/// Source lines longer than this are generated text and are not shown.
const LONGEST_LINE: usize = 400;

/// The whole report: findings, messages, summary.
pub fn render(report: &Report, sources: &SourceSet, style: &Style) -> String {
    let mut buffer = if style.colours { Buffer::ansi() } else { Buffer::no_color() };
    let config = Config { before_label_lines: 0, after_label_lines: 0, ..Config::default() };
    let files = Excerpts { sources };
    let shown = report.findings.iter().filter(|one| !one.is_accepted() && one.severity >= style.show);
    let groups = shown::families(shown, |finding| finding);
    let findings = groups.iter().take(SHOWN_GROUPS).map(|group| of_group(sources, group));
    let messages = report.messages.iter().filter(|message| message.severity >= style.show);
    let messages = messages.map(|message| of_message(sources, message));
    for diagnostic in findings.chain(messages) {
        // Writing to memory cannot fail, and every label was checked against its text.
        let _ = term::emit(&mut buffer, &config, &files, &diagnostic);
    }
    let mut text = String::from_utf8_lossy(buffer.as_slice()).into_owned();
    if let Some(rest) = groups.get(SHOWN_GROUPS..).filter(|rest| !rest.is_empty()) {
        let left_out: usize = rest.iter().map(Vec::len).sum();
        text.push_str(&format!(
            "... and {left_out} more findings like these, not shown here; all are in every `--write` output. A ledger makes \
             an old tree's findings known, so that only new ones are shown (see `stillwire ledger --help`).\n\n"
        ));
    }
    text.push_str(&summary::render(report, style));
    text
}

/// The first finding of a family, and the nets of the others, or the places where they are about no net.
fn of_group(sources: &SourceSet, group: &[&Finding]) -> Diagnostic<FileId> {
    let mut diagnostic = of_finding(sources, group[0]);
    let rest = &group[1..];
    if !rest.is_empty() {
        let which = |finding: &&Finding| match finding.at {
            Some(at) if finding.net.is_empty() => {
                let position = sources.position(at);
                format!("  {}:{}", position.file, position.line)
            }
            _ => format!("  {}", finding.net),
        };
        let shown: Vec<String> = rest.iter().take(SHOWN_NETS).map(which).collect();
        let on = if group[0].net.is_empty() { "in" } else { "on" };
        let mut note = format!("the same {on} {} more:\n{}", rest.len(), shown.join("\n"));
        if rest.len() > SHOWN_NETS {
            note.push_str(&format!("\n  and {} more, all in the JSON output", rest.len() - SHOWN_NETS));
        }
        diagnostic.notes.push(note);
    }
    diagnostic
}

fn level(severity: Severity) -> Level {
    match severity {
        Severity::Error => Level::Error,
        Severity::Warning => Level::Warning,
        Severity::Note => Level::Note,
    }
}

fn of_finding(sources: &SourceSet, finding: &Finding) -> Diagnostic<FileId> {
    let mut labels = Vec::new();
    let Places { marked, mut notes } = shown::places(finding, sources);
    for Marked { at, text, primary, .. } in &marked {
        place(sources, *at, text, *primary, &mut labels, &mut notes);
    }
    if let Some(lead) = finding.hazards.first() {
        notes.push(waveform::render(lead));
        notes.push(wrapped(&format!("effect: {}", lead.harm)));
    }
    if finding.hazards.len() > 1 {
        notes.push(others(finding));
    }
    if let Some(cover) = &finding.cover {
        let effect = shown::effect(finding, cover);
        notes.push(format!("cover ({effect}):\n  {}", wrapped(&cover.verilog).replace('\n', "\n  ")));
    }
    notes.extend(finding.notes.iter().map(|note| wrapped(note)));
    if !finding.hazards.is_empty() {
        notes.push(format!("fingerprint {}: see `stillwire replay` and `stillwire cure`", finding.short_fingerprint()));
    }
    Diagnostic::new(level(finding.severity))
        .with_code(finding.rule.name())
        .with_message(&finding.message)
        .with_labels(labels)
        .with_notes(notes)
}

/// Sentences broken into lines of a readable length. A word is never broken, so that names can be searched for; nor is
/// what stands on a line of its own.
fn wrapped(text: &str) -> String {
    let lines: Vec<String> = text.split('\n').map(wrapped_line).collect();
    lines.join("\n")
}

fn wrapped_line(text: &str) -> String {
    let mut lines: Vec<String> = vec![String::new()];
    for word in text.split(' ') {
        match lines.last_mut() {
            Some(line) if line.is_empty() => line.push_str(word),
            Some(line) if line.chars().count() + word.chars().count() < WIDTH => {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(format!("  {word}")),
        }
    }
    lines.join("\n")
}

/// The hazards behind the lead, one line each, by what they do.
fn others(finding: &Finding) -> String {
    let rest = &finding.hazards[1..];
    let mut lines = vec!["and by other changes:".to_string()];
    for hazard in rest.iter().take(SHOWN_HAZARDS) {
        lines.push(format!("  {}{}", shown::hazard(finding, hazard), conditions(hazard)));
    }
    if rest.len() > SHOWN_HAZARDS {
        lines.push(format!("  and {} more, all in the JSON output", rest.len() - SHOWN_HAZARDS));
    }
    lines.join("\n")
}

/// ": while a = 1, b = 0", when that is short enough.
fn conditions(hazard: &Hazard) -> String {
    let held = held(hazard);
    match held.len() {
        0 => ", whatever the others do".to_string(),
        1..=SHOWN_HELD => {
            let shown: Vec<String> = held.iter().map(|one| format!("{} = {}", one.name, one.value())).collect();
            format!(": while {}", shown.join(", "))
        }
        more => format!(", while {more} others hold (see the JSON output)"),
    }
}

fn of_message(sources: &SourceSet, message: &Message) -> Diagnostic<FileId> {
    let mut labels = Vec::new();
    let mut notes = Vec::new();
    if let Some(at) = message.at {
        place(sources, at, "", true, &mut labels, &mut notes);
    }
    for (at, text) in &message.also {
        place(sources, *at, text, false, &mut labels, &mut notes);
    }
    notes.extend(message.help.iter().map(|help| wrapped(help)));
    Diagnostic::new(level(message.severity)).with_message(&message.text).with_labels(labels).with_notes(notes)
}

/// Shows a place as a label on its first line, or as a note when the line is too long to be shown.
fn place(
    sources: &SourceSet,
    at: Span,
    text: &str,
    primary: bool,
    labels: &mut Vec<Label<FileId>>,
    notes: &mut Vec<String>,
) {
    let file = sources.file(at.file);
    let line = file.line_range(file.line_column(at.start).0);
    let start = at.start as usize;
    let end = (at.end as usize).min(line.end).max(start);
    let fits = line.len() <= LONGEST_LINE && file.text.is_char_boundary(start) && file.text.is_char_boundary(end);
    if fits {
        let label = if primary { Label::primary(at.file, start..end) } else { Label::secondary(at.file, start..end) };
        labels.push(label.with_message(text));
    } else {
        let position = sources.position(at);
        let text = if text.is_empty() { "here" } else { text };
        notes.push(format!("{}:{}:{}: {text}", position.file, position.line, position.column));
    }
}

/// The texts as the renderer wants them.
struct Excerpts<'a> {
    sources: &'a SourceSet,
}

impl<'a> Files<'a> for Excerpts<'_> {
    type FileId = FileId;
    type Name = String;
    type Source = &'a str;

    fn name(&'a self, id: FileId) -> Result<String, Error> {
        Ok(self.sources.file(id).name())
    }

    fn source(&'a self, id: FileId) -> Result<&'a str, Error> {
        Ok(&self.sources.file(id).text)
    }

    fn line_index(&'a self, id: FileId, byte_index: usize) -> Result<usize, Error> {
        Ok(self.sources.file(id).line_column(byte_index as u32).0 - 1)
    }

    fn line_range(&'a self, id: FileId, line_index: usize) -> Result<std::ops::Range<usize>, Error> {
        let file = self.sources.file(id);
        if line_index >= file.lines() {
            return Err(Error::LineTooLarge { given: line_index, max: file.lines() });
        }
        Ok(file.line_range(line_index + 1))
    }
}
