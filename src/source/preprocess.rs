//! The preprocessor of IEEE 1800-2017 clause 22: macros, conditions and includes, with an exact way back for every byte.
//! It is our own because everything downstream points at what the user wrote: text from a macro maps to the place of its
//! use, an include is searched beside the including file first, and whatever goes wrong has a place. Comments become one
//! space; directives that the parser or the converter must see stay in the text.
//!
//! Invariant: the work is bounded. Every scanned byte of an expansion or include counts against one budget per unit, so
//! that macros or includes that multiply end in a clear error.

use std::sync::Arc;

use super::include::{IncludeProblem, IncludeSearch};
use super::macros::{self, Macro, Macros, PASTE};
use super::origin::MappedText;
use super::regions::{comment_end, string_end};
use super::texts::Texts;
use super::{FileId, Span};
use crate::diagnostic::{Diagnostic, Kind, Missing};

/// Bytes of expansions and includes that may be scanned for one unit, counted each time.
const MAX_EXPANSION: usize = 64 << 20;
/// What one macro used inside another costs beside its text, so that empty macros that multiply end as well.
const EXPANSION_COST: usize = 100;
/// Includes within includes; the standard asks for at least 15.
const MAX_INCLUDE_DEPTH: usize = 64;
/// Files included by one unit, counted each time.
const MAX_INCLUSIONS: usize = 20_000;
/// Uses of an unknown macro that are named beside the first.
const SHOWN_USES: usize = 5;
/// Macros within macros.
const MAX_MACRO_DEPTH: usize = 256;

/// Directives of simulators older than the standard that say nothing about the design and have no argument. A macro of
/// such a name is that macro.
const OLD_DIRECTIVES: &[&str] = &[
    "accelerate",
    "noaccelerate",
    "autoexpand_vectornets",
    "expand_vectornets",
    "noexpand_vectornets",
    "remove_gatenames",
    "noremove_gatenames",
    "remove_netnames",
    "noremove_netnames",
    "suppress_faults",
    "nosuppress_faults",
    "enable_portfaults",
    "disable_portfaults",
    "protect",
    "endprotect",
];

/// A preprocessed unit, or why there is none, and the files that it included.
pub struct Preprocessed {
    pub text: Result<MappedText, Box<Diagnostic>>,
    pub included: Vec<FileId>,
    /// What is missing; the text has gaps where that may matter.
    pub problems: Vec<Diagnostic>,
}

/// Preprocesses one file. `macros` holds the macros in force before and, afterwards, behind it.
pub fn preprocess(texts: &mut Texts, search: &IncludeSearch, macros: &mut Macros, file: FileId) -> Preprocessed {
    let mut run = Preprocessor {
        texts,
        search,
        macros,
        out: MappedText::default(),
        work: 0,
        active: Vec::new(),
        files: Vec::new(),
        included: Vec::new(),
        problems: Vec::new(),
        lost_include: None,
    };
    let result = run.file(file);
    Preprocessed { text: result.map(|()| run.out), included: run.included, problems: run.problems }
}

type Outcome<T> = Result<T, Box<Diagnostic>>;

struct Preprocessor<'a> {
    texts: &'a mut Texts,
    search: &'a IncludeSearch,
    macros: &'a mut Macros,
    out: MappedText,
    work: usize,
    /// Macros that are being expanded.
    active: Vec<String>,
    /// Files that are being read, the unit first.
    files: Vec<FileId>,
    included: Vec<FileId>,
    problems: Vec<Diagnostic>,
    /// Which of them is the first include that was not found.
    lost_include: Option<usize>,
}

/// Where a scanned text stands.
#[derive(Clone, Copy)]
enum Origin {
    /// It is the text of this file.
    File(FileId),
    /// It came from a macro used at this place.
    Use(Span),
}

impl Origin {
    fn span(self, start: usize, end: usize) -> Span {
        match self {
            Origin::File(file) => Span { file, start: start as u32, end: end as u32 },
            Origin::Use(span) => span,
        }
    }
}

/// An open `` `ifdef ``.
struct Condition {
    at: Span,
    /// Whether the text around it counts.
    outer: bool,
    /// Whether the present branch counts.
    now: bool,
    /// Whether some branch counted already.
    taken: bool,
    is_else: bool,
}

/// One text while it is scanned.
struct Scan<'t> {
    text: &'t str,
    origin: Origin,
    conditions: Vec<Condition>,
}

impl Scan<'_> {
    fn counts(&self) -> bool {
        self.conditions.last().is_none_or(|condition| condition.now)
    }
}

/// What to do after a directive.
enum Next {
    /// Go on here; the directive leaves nothing behind.
    Skip(usize),
    /// Go on here; the directive itself stays in the text.
    Keep(usize),
}

impl Preprocessor<'_> {
    fn file(&mut self, file: FileId) -> Outcome<()> {
        self.files.push(file);
        let text = self.texts.blanked(file);
        let result = self.scan(&text, Origin::File(file));
        self.files.pop();
        result
    }

    fn scan(&mut self, text: &str, origin: Origin) -> Outcome<()> {
        let is_unit = self.files.len() == 1 && matches!(origin, Origin::File(_));
        let overhead = if self.active.len() > 1 { EXPANSION_COST } else { 0 };
        self.work += if is_unit { 0 } else { text.len() + overhead };
        if self.work > MAX_EXPANSION {
            return Err(too_much(origin.span(0, text.len().min(1))));
        }
        let bytes = text.as_bytes();
        let mut scan = Scan { text, origin, conditions: Vec::new() };
        let mut at = 0;
        let mut copied = 0;
        let special = |byte: &u8| matches!(byte, b'/' | b'"' | b'`' | b'\\' | &PASTE);
        while let Some(step) = bytes.get(at..).and_then(|rest| rest.iter().position(special)) {
            at += step;
            match bytes[at] {
                b'/' if matches!(bytes.get(at + 1), Some(b'/' | b'*')) => {
                    self.copy(&scan, copied, at);
                    let end = comment_end(bytes, at);
                    if bytes[at + 1] == b'*' && (end - at < 4 || !bytes[..end].ends_with(b"*/")) {
                        let at = origin.span(at, at + 2);
                        return Err(failure(at, "this comment is not closed", "write `*/` where it ends"));
                    }
                    if scan.counts() {
                        self.push(" ", origin.span(at, end));
                    }
                    (at, copied) = (end, end);
                }
                b'"' => at = string_end(bytes, at),
                b'\\' => at += 1 + bytes[at + 1..].iter().take_while(|byte| !byte.is_ascii_whitespace()).count(),
                PASTE if matches!(origin, Origin::Use(_)) => {
                    self.copy(&scan, copied, at);
                    at += 1;
                    copied = at;
                }
                b'`' => {
                    self.copy(&scan, copied, at);
                    copied = at;
                    match self.directive(&mut scan, at)? {
                        Next::Skip(end) => (at, copied) = (end, end),
                        Next::Keep(end) => at = end,
                    }
                }
                _ => at += 1,
            }
        }
        self.copy(&scan, copied, text.len());
        match scan.conditions.pop() {
            Some(open) => Err(failure(open.at, "this condition is not closed", "write `endif where it ends")),
            None => Ok(()),
        }
    }

    /// Copies a part of the scanned text to the output, if it counts.
    fn copy(&mut self, scan: &Scan<'_>, start: usize, end: usize) {
        if !scan.counts() {
            return;
        }
        match scan.origin {
            Origin::File(file) => self.out.push_verbatim(&scan.text[start..end], file, start),
            Origin::Use(span) => self.out.push_whole(&scan.text[start..end], span),
        }
    }

    fn push(&mut self, text: &str, at: Span) {
        self.out.push_whole(text, at);
    }

    /// Handles the backquote at `at`.
    fn directive(&mut self, scan: &mut Scan<'_>, at: usize) -> Outcome<Next> {
        let text = scan.text;
        let Some((name, end)) = macros::identifier(text, at + 1) else {
            if !scan.counts() {
                return Ok(Next::Skip(at + 1));
            }
            let at = scan.origin.span(at, at + 1);
            return Err(failure(at, "a stray backquote", "a directive or the name of a macro must follow it"));
        };
        let span = scan.origin.span(at, end);
        match name {
            "ifdef" | "ifndef" => {
                let (wanted, end) = self.condition_name(scan, name, span, end)?;
                let outer = scan.counts();
                let now = outer && self.macros.contains_key(wanted) == (name == "ifdef");
                scan.conditions.push(Condition { at: span, outer, now, taken: now, is_else: false });
                return Ok(Next::Skip(end));
            }
            "elsif" => {
                let (wanted, end) = self.condition_name(scan, name, span, end)?;
                let defined = self.macros.contains_key(wanted);
                let condition = open_condition(scan, name, span)?;
                condition.now = condition.outer && !condition.taken && defined;
                condition.taken |= condition.now;
                return Ok(Next::Skip(end));
            }
            "else" => {
                let condition = open_condition(scan, name, span)?;
                condition.now = condition.outer && !condition.taken;
                condition.taken = true;
                condition.is_else = true;
                return Ok(Next::Skip(end));
            }
            "endif" => {
                if scan.conditions.pop().is_none() {
                    return Err(failure(span, "`endif without an open `ifdef", "remove it, or write the `ifdef"));
                }
                return Ok(Next::Skip(end));
            }
            _ if !scan.counts() => return Ok(Next::Skip(end)),
            _ => {}
        }
        match name {
            "define" => {
                let named =
                    macros::identifier(text, macros::skip_blanks(text.as_bytes(), end)).map_or(end, |(_, end)| end);
                let (name, mut definition, end) = macros::definition(text, end).map_err(|(at, message)| {
                    failure(
                        scan.origin.span(at, at + 1),
                        message,
                        "write `define NAME text, or `define NAME(a, b) text",
                    )
                })?;
                definition.at = Some(scan.origin.span(at, named));
                self.macros.insert(name, Arc::new(definition));
                Ok(Next::Skip(end))
            }
            "undef" => {
                let (name, end) = self.condition_name(scan, name, span, end)?;
                self.macros.remove(name);
                Ok(Next::Skip(end))
            }
            "undefineall" => {
                self.macros.clear();
                Ok(Next::Skip(end))
            }
            "include" => self.include(scan, at, end).map(Next::Skip),
            "__FILE__" => {
                let path = self.files.last().map_or_else(String::new, |&file| self.texts.set.file(file).name());
                self.push(&format!("\"{}\"", path.replace('\\', "\\\\").replace('"', "\\\"")), span);
                Ok(Next::Skip(end))
            }
            "__LINE__" => {
                let line = self.texts.set.file(span.file).line_column(span.start).0;
                self.push(&line.to_string(), span);
                Ok(Next::Skip(end))
            }
            "resetall"
            | "default_nettype"
            | "celldefine"
            | "endcelldefine"
            | "unconnected_drive"
            | "nounconnected_drive"
            | "begin_keywords"
            | "end_keywords" => Ok(Next::Keep(end)),
            "timescale" => Ok(Next::Skip(timescale_end(text.as_bytes(), end))),
            "line"
            | "pragma"
            | "default_decay_time"
            | "default_trireg_strength"
            | "delay_mode_distributed"
            | "delay_mode_path"
            | "delay_mode_unit"
            | "delay_mode_zero" => Ok(Next::Skip(line_end(text, end))),
            _ if self.macros.contains_key(name) => self.expand(scan, at, name, end).map(Next::Skip),
            "uselib" => Ok(Next::Skip(line_end(text, end))),
            "protected" => {
                let help =
                    "ask its supplier for readable text, or leave the file out: its modules are then black boxes";
                Err(failure(span, "what follows is encrypted and cannot be read", help))
            }
            _ if OLD_DIRECTIVES.contains(&name) => Ok(Next::Skip(end)),
            _ => self.expand(scan, at, name, end).map(Next::Skip),
        }
    }

    /// The macro name behind `` `ifdef `` and its kin.
    fn condition_name<'t>(&self, scan: &Scan<'t>, directive: &str, span: Span, at: usize) -> Outcome<(&'t str, usize)> {
        let name = macros::identifier(scan.text, macros::skip_blanks(scan.text.as_bytes(), at));
        name.ok_or_else(|| {
            failure(span, format!("`{directive} needs the name of a macro"), "write one name behind it, on its line")
        })
    }

    /// Expands the use of the macro `name`, whose backquote stands at `start`, and returns the offset behind the use.
    fn expand(&mut self, scan: &Scan<'_>, start: usize, name: &str, end: usize) -> Outcome<usize> {
        let bytes = scan.text.as_bytes();
        let Some(definition) = self.macros.get(name).cloned() else {
            // `` `pre``post `` may also mean the macro `prepost`.
            if bytes.get(end) == Some(&PASTE)
                && let Some((rest, rest_end)) = macros::identifier(scan.text, end + 1)
            {
                return self.expand(scan, start, &format!("{name}{rest}"), rest_end);
            }
            self.undefined(name, scan.origin.span(start, end));
            return Ok(end);
        };
        let open = end + bytes[end..].iter().take_while(|byte| byte.is_ascii_whitespace()).count();
        let has_arguments = bytes.get(open) == Some(&b'(');
        let mut behind = end;
        let mut given = Vec::new();
        // A macro without parameters whose body ends in the use of one with parameters passes the parentheses on.
        let passes_on = definition.params.is_none() && has_arguments && self.ends_in_call(&definition);
        if definition.params.is_some() || passes_on {
            let parsed = if has_arguments { macros::arguments(scan.text, open) } else { None };
            let Some((list, list_end)) = parsed else {
                let message = format!("the macro `{name}` needs its arguments in parentheses");
                return Err(self.at_macro(&definition, scan.origin.span(start, end), message, "write them behind it"));
            };
            given = list;
            behind = list_end;
        }
        let span = scan.origin.span(start, behind);
        if let (Origin::File(_), Some(defined)) = (scan.origin, definition.at) {
            self.texts.set.add_macro_use(span, defined);
        }
        if self.active.iter().any(|active| active == name) {
            let message = format!("the macro `{name}` expands to itself");
            return Err(self.at_macro(&definition, span, message, "break the circle of definitions"));
        }
        if self.active.len() >= MAX_MACRO_DEPTH {
            let message = format!("macros are nested deeper than {MAX_MACRO_DEPTH} at the macro `{name}`");
            return Err(self.at_macro(&definition, span, message, "use fewer levels of macros"));
        }
        let mut body = if passes_on {
            definition.substitute(&[], MAX_EXPANSION)
        } else {
            let arguments = self.arguments(name, &definition, &given, span)?;
            definition.substitute(&arguments, MAX_EXPANSION)
        }
        .ok_or_else(|| too_much(span))?;
        if passes_on {
            body.push_str(&scan.text[open..behind]);
        }
        self.active.push(name.to_string());
        let result = self.scan(&body, Origin::Use(span));
        self.active.pop();
        result.map(|()| behind)
    }

    /// Leaves a gap for an unknown macro. Behind a missing include that is no message of its own, nor is the second use.
    fn undefined(&mut self, name: &str, span: Span) {
        self.out.push_gap(span);
        let wanted = Missing::Macro(name.to_string());
        let before = self.problems.iter().position(|problem| problem.missing.as_deref() == Some(&wanted));
        if let Some(cause) = self.lost_include.or(before).and_then(|index| self.problems.get_mut(index)) {
            if cause.also.len() < SHOWN_USES {
                let text = if self.lost_include.is_some() {
                    format!("`{name}` is not defined: what it stands in is left out")
                } else {
                    "also used here".to_string()
                };
                cause.also.push((span, text));
            }
            return;
        }
        let message = format!("the macro `{name}` is not defined here");
        let help = "the module or package that it stands in is left out";
        self.problems.push(failure(span, message, help).about_missing(wanted));
    }

    fn ends_in_call(&self, definition: &Macro) -> bool {
        let Some((_, last)) = definition.body.rsplit_once('`') else { return false };
        let called = self.macros.get(last);
        called.is_some_and(|called| called.params.is_some())
    }

    /// The arguments of a use, expanded, with defaults filled in.
    fn arguments(&mut self, name: &str, definition: &Macro, given: &[&str], span: Span) -> Outcome<Vec<String>> {
        let params = definition.params.as_deref().unwrap_or_default();
        let blank = given.len() == 1 && given[0].trim().is_empty();
        if given.len() > params.len() && !(params.is_empty() && blank) {
            let message = format!("the macro `{name}` takes {} arguments, not {}", params.len(), given.len());
            return Err(self.at_macro(definition, span, message, "give as many as its definition names"));
        }
        let mut arguments = Vec::with_capacity(params.len());
        for (index, param) in params.iter().enumerate() {
            let written = given.get(index).map(|text| text.trim());
            let text = match (written, &param.default) {
                (Some(""), Some(default)) | (None, Some(default)) => default.as_str(),
                (Some(text), _) => text,
                (None, None) => {
                    let message = format!("the macro `{name}` has no argument for its parameter `{}`", param.name);
                    return Err(self.at_macro(definition, span, message, "give as many as its definition names"));
                }
            };
            arguments.push(self.expanded(text, span)?);
        }
        Ok(arguments)
    }

    /// A piece of text with its macros expanded and its comments removed.
    fn expanded(&mut self, text: &str, span: Span) -> Outcome<String> {
        if !text.contains(['`', '/', PASTE as char]) {
            return Ok(text.to_string());
        }
        let outer = std::mem::take(&mut self.out);
        let result = self.scan(text, Origin::Use(span));
        let inner = std::mem::replace(&mut self.out, outer);
        if !inner.gaps.is_empty() {
            self.out.push_gap(span);
        }
        result.map(|()| inner.text)
    }

    fn include(&mut self, scan: &Scan<'_>, start: usize, at: usize) -> Outcome<usize> {
        let text = scan.text;
        let at = macros::skip_blanks(text.as_bytes(), at);
        let help = "write `include \"file\"";
        let bad = || failure(scan.origin.span(start, at), "`include needs the name of a file", help);
        let (name, end) = match text.as_bytes().get(at) {
            Some(b'"') => {
                let end = string_end(text.as_bytes(), at);
                let name = text[at..end].strip_prefix('"').and_then(|name| name.strip_suffix('"')).ok_or_else(bad)?;
                (name.to_string(), end)
            }
            Some(b'<') => {
                let length = text[at..].find('>').ok_or_else(bad)?;
                (text[at + 1..at + length].to_string(), at + length + 1)
            }
            Some(b'`') => {
                let (name, end) = macros::identifier(text, at + 1).ok_or_else(bad)?;
                let outer = std::mem::take(&mut self.out);
                let result = self.expand(scan, at, name, end);
                let inner = std::mem::replace(&mut self.out, outer);
                let end = result?;
                if !inner.gaps.is_empty() {
                    self.out.push_gap(scan.origin.span(start, end));
                    return Ok(end);
                }
                let name = inner.text.trim();
                (name.trim_matches(['"', '<', '>']).to_string(), end)
            }
            _ => return Err(bad()),
        };
        self.include_file(&name, scan.origin.span(start, end))?;
        Ok(end)
    }

    fn include_file(&mut self, name: &str, span: Span) -> Outcome<()> {
        let including = self.files.last().copied().unwrap_or(span.file);
        let found = self.search.find(name, &self.texts.set.file(including).path).map_err(|problem| match problem {
            IncludeProblem::Missing => {
                let message = format!("the included file `{name}` was not found");
                let help = "the rest is read without it, so conditions on its macros may be taken wrongly";
                Box::new(failure(span, message, help).about_missing(Missing::Include(name.to_string())))
            }
            IncludeProblem::Ambiguous(paths) => {
                let list: Vec<String> = paths.iter().map(|path| format!("`{}`", path.display())).collect();
                let folders: Vec<String> = paths
                    .iter()
                    .map(|path| format!("`-I {}`", IncludeSearch::folder_for(name, path).display()))
                    .collect();
                let message = format!("`{name}` may be any of {}", list.join(", "));
                failure(span, message, format!("choose one with {}", folders.join(" or ")))
            }
        });
        let path = match found {
            Ok(path) => path,
            Err(problem) => {
                self.push(" ", span);
                self.lost_include.get_or_insert(self.problems.len());
                self.problems.push(*problem);
                return Ok(());
            }
        };
        let Some(file) = self.texts.read(&path) else {
            let message = format!("the included file `{}` cannot be used", path.display());
            return Err(failure(span, message, "see the message about that file"));
        };
        if self.files.len() > MAX_INCLUDE_DEPTH {
            let message = if self.files.contains(&file) {
                format!("`{}` includes itself without end", path.display())
            } else {
                format!("includes are nested deeper than {MAX_INCLUDE_DEPTH} at `{}`", path.display())
            };
            return Err(failure(span, message, "guard the file with `ifndef, or break the circle of includes"));
        }
        if self.included.len() >= MAX_INCLUSIONS {
            return Err(too_much(span));
        }
        self.included.push(file);
        self.file(file)
    }

    fn at_macro(&self, definition: &Macro, span: Span, message: String, help: &str) -> Box<Diagnostic> {
        let mut diagnostic = failure(span, message, help);
        if let Some(at) = definition.at {
            diagnostic.also.push((at, "defined here".to_string()));
        }
        diagnostic
    }
}

fn too_much(span: Span) -> Box<Diagnostic> {
    let message = format!("macros and includes expand this file past {} MiB", MAX_EXPANSION >> 20);
    failure(span, message, "look for macros or includes that multiply each other")
}

fn open_condition<'s>(scan: &'s mut Scan<'_>, directive: &str, span: Span) -> Outcome<&'s mut Condition> {
    match scan.conditions.last_mut() {
        Some(condition) if !condition.is_else => Ok(condition),
        _ => {
            let message = format!("`{directive} without an open `ifdef");
            Err(failure(span, message, "remove it, or write the `ifdef that it belongs to"))
        }
    }
}

fn line_end(text: &str, at: usize) -> usize {
    text[at..].find(['\n', '\r']).map_or(text.len(), |rest| at + rest)
}

/// The offset behind `1ns / 1ps`; unchanged when something else stands there, so that the parser can say so.
fn timescale_end(bytes: &[u8], at: usize) -> usize {
    let blanks = |at: usize| at + bytes[at..].iter().take_while(|byte| byte.is_ascii_whitespace()).count();
    let time = |at: usize| {
        let at = blanks(at);
        let digits = bytes[at..].iter().take_while(|byte| byte.is_ascii_digit()).count();
        let at = blanks(at + digits);
        let unit = bytes[at..].iter().take_while(|byte| byte.is_ascii_alphabetic()).count();
        (digits > 0 && unit > 0).then_some(at + unit)
    };
    let end = time(at).map(blanks).filter(|&at| bytes.get(at) == Some(&b'/')).and_then(|at| time(at + 1));
    end.unwrap_or(at)
}

fn failure(at: Span, message: impl Into<String>, help: impl Into<String>) -> Box<Diagnostic> {
    Box::new(Diagnostic::new(Kind::Incomplete, "preprocessing", message, Some(at)).with_help(help))
}
