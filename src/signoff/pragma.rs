//! The comments that Stillwire understands, from text to data. The grammar is small and strict: what deviates is an
//! error with a place and takes no effect, because a sign-off that is misread could hide a defect.

use jiff::civil::Date;

use super::comments::{Comment, comments};
use crate::diagnostic::{Diagnostic, Kind};
use crate::hazard::AssumptionKind;
use crate::rules::{Rule, Signoff};
use crate::source::{FileId, SourceFile, SourceSet, Span};

/// `// stillwire: signoff ...`, understood.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct SignoffPragma {
    pub at: Span,
    /// The line it speaks about, 1-based.
    pub line: usize,
    pub rules: Vec<Rule>,
    pub signoff: Signoff,
    /// The last day on which it holds.
    pub until: Option<Date>,
}

/// `// stillwire: watch ...`, understood.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct WatchPragma {
    pub at: Span,
    /// The line of the declaration it speaks about, 1-based.
    pub line: usize,
    pub reason: String,
}

/// `// stillwire: static ...` and its sisters, understood.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct AssumptionPragma {
    pub at: Span,
    /// The line of the declaration it speaks about, 1-based.
    pub line: usize,
    pub kind: AssumptionKind,
    pub reason: String,
}

/// Everything that the comments of all files say.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Collected {
    pub signoffs: Vec<SignoffPragma>,
    pub watches: Vec<WatchPragma>,
    pub assumptions: Vec<AssumptionPragma>,
    /// One per comment that was meant for us and is not understood.
    pub diagnostics: Vec<Diagnostic>,
}

/// Reads the comments of all files, in order of file and place.
pub fn collect(sources: &SourceSet) -> Collected {
    let mut collected = Collected::default();
    for file in &sources.files {
        // Most files have none; a plain search is much faster than the scanner.
        if file.text.to_ascii_lowercase().contains("stillwire") {
            collect_file(file, &mut collected);
        }
    }
    collected
}

fn collect_file(file: &SourceFile, collected: &mut Collected) {
    let found = comments(&file.text);
    // Lines that hold nothing but one of our comments: several of them in a row speak about the line behind the last.
    let own_lines: Vec<usize> = found
        .iter()
        .filter(|comment| comment.alone && body(comment).is_some())
        .map(|comment| file.line_column(comment.start as u32).0)
        .collect();
    for comment in &found {
        let Some(body) = body(comment) else { continue };
        let at = span(file.id, comment);
        let mut line = file.line_column(comment.start as u32).0;
        if comment.alone {
            while own_lines.binary_search(&line).is_ok() {
                line += 1;
            }
        }
        let parsed = body.and_then(|body| parse(body, at, line));
        match parsed {
            Ok(Parsed::Signoff(signoff)) => collected.signoffs.push(signoff),
            Ok(Parsed::Watch(watch)) => collected.watches.push(watch),
            Ok(Parsed::Assumption(assumption)) => collected.assumptions.push(assumption),
            Err(why) => {
                let message = format!("{why}; the comment has no effect");
                let diagnostic = Diagnostic::new(Kind::SignoffInvalid, "sign-off comment", message, Some(at))
                    .with_help(
                        "write `// stillwire: signoff RULE[, RULE] \"reason\" [by NAME] [until YYYY-MM-DD]`\n  \
                         or `// stillwire: watch \"reason\"`,\n  or `// stillwire: static \"reason\"`, likewise `one-hot`, \
                         `mutually-exclusive`, `one-bit-changing`",
                    );
                collected.diagnostics.push(diagnostic);
            }
        }
    }
}

fn span(file: FileId, comment: &Comment<'_>) -> Span {
    let end = comment.start + (comment.end - comment.start).min(comment.text.trim_end().len() + 2);
    Span { file, start: comment.start as u32, end: end as u32 }
}

/// What follows `stillwire:` in a comment that is meant for us; an error when it is meant for us but spelled wrongly;
/// `None` for all other comments.
fn body<'a>(comment: &Comment<'a>) -> Option<Result<&'a str, String>> {
    let text = comment.text.trim();
    let lower = text.to_ascii_lowercase();
    let rest = lower.strip_prefix("stillwire")?;
    let command = rest.trim_start_matches([' ', '\t', ':', '-', ',']);
    let meant = rest.trim_start().starts_with(':')
        || ["signoff", "sign-off", "watch"]
            .into_iter()
            .chain(AssumptionKind::ALL.iter().map(|kind| kind.name()))
            .any(|word| command.split_whitespace().next() == Some(word));
    if !meant {
        return None;
    }
    Some(match text.strip_prefix("stillwire:") {
        _ if comment.block => Err("a sign-off must be a line comment".to_string()),
        Some(body) => Ok(body.trim()),
        None => Err("the comment must begin with `stillwire:`".to_string()),
    })
}

enum Parsed {
    Signoff(SignoffPragma),
    Watch(WatchPragma),
    Assumption(AssumptionPragma),
}

fn parse(body: &str, at: Span, line: usize) -> Result<Parsed, String> {
    let (command, rest) = body.split_once(char::is_whitespace).unwrap_or((body, ""));
    match command {
        "signoff" => parse_signoff(rest.trim(), at, line).map(Parsed::Signoff),
        "watch" => Ok(Parsed::Watch(WatchPragma { at, line, reason: reason_alone(command, rest)? })),
        "" => Err("a command is missing".to_string()),
        other => match AssumptionKind::from_name(other) {
            Some(kind) => {
                let reason = reason_alone(command, rest)?;
                Ok(Parsed::Assumption(AssumptionPragma { at, line, kind, reason }))
            }
            None => Err(format!("there is no command `{other}`")),
        },
    }
}

/// The reason of a command that takes nothing else.
fn reason_alone(command: &str, rest: &str) -> Result<String, String> {
    let (before, reason, after) = quoted(rest)?;
    if !before.is_empty() || !after.is_empty() {
        return Err(format!("`{command}` takes a reason in double quotes and nothing else"));
    }
    Ok(reason)
}

fn parse_signoff(text: &str, at: Span, line: usize) -> Result<SignoffPragma, String> {
    let (names, reason, rest) = quoted(text)?;
    let mut rules = Vec::new();
    for name in names.split(',').map(str::trim) {
        let rule = match Rule::from_name(name) {
            _ if name.is_empty() => return Err("the name of a rule is missing".to_string()),
            None => return Err(format!("there is no rule `{name}`")),
            Some(Rule::SignoffInvalid | Rule::SignoffStale | Rule::SignoffExpired) => {
                return Err(format!("`{name}` is about sign-offs and cannot be signed off"));
            }
            Some(rule) => rule,
        };
        if rules.contains(&rule) {
            return Err(format!("`{name}` is named twice"));
        }
        rules.push(rule);
    }
    let words: Vec<&str> = rest.split_whitespace().collect();
    let (words, until) = match words.as_slice() {
        [before @ .., "until", date] => (before, Some(parse_date(date)?)),
        [.., "until"] => return Err("the date behind `until` is missing".to_string()),
        all => (all, None),
    };
    let by = match words {
        [] => None,
        ["by"] => return Err("the name behind `by` is missing".to_string()),
        ["by", name @ ..] => Some(name.join(" ")),
        [other, ..] => return Err(format!("`{other}` is not expected behind the reason")),
    };
    if by.as_deref().is_some_and(|name| name.split(' ').any(|word| word == "until")) {
        return Err("the date must be the last thing, as `until YYYY-MM-DD`".to_string());
    }
    let signoff = Signoff { reason, by, until: until.map(|date| date.to_string()) };
    Ok(SignoffPragma { at, line, rules, signoff, until })
}

/// Text before a quoted string, the string, and the text behind it, all trimmed. The string must say something.
fn quoted(text: &str) -> Result<(&str, String, &str), String> {
    let missing = || "the reason in double quotes is missing".to_string();
    let (before, rest) = text.split_once('"').ok_or_else(missing)?;
    let (reason, after) = rest.split_once('"').ok_or_else(|| "the reason lacks its closing quote".to_string())?;
    let reason = reason.trim();
    if reason.is_empty() {
        return Err("the reason is empty".to_string());
    }
    Ok((before.trim(), reason.to_string(), after.trim()))
}

/// Exactly `YYYY-MM-DD`, and a day that exists.
fn parse_date(text: &str) -> Result<Date, String> {
    let shaped = text.len() == 10
        && text.bytes().enumerate().all(|(index, byte)| match index {
            4 | 7 => byte == b'-',
            _ => byte.is_ascii_digit(),
        });
    let date = if shaped { text.parse::<Date>().ok() } else { None };
    date.ok_or_else(|| format!("`{text}` is no date of the form YYYY-MM-DD"))
}
