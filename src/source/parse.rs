//! Parses one piece of a preprocessed text and converts its concrete tree, which is dropped at once: it takes hundreds of
//! bytes for each byte of source. Only this file and the converter know the parser.
//!
//! A piece that the parser refuses is tried again in another form ([`reshape()`]) and, when something in it is not closed, part
//! by part ([`unclosed`]). Sources older than SystemVerilog use its keywords as names (`bit`, `do`, `final`), so a piece of a `.v` file that does
//! not parse is tried again with the keywords of IEEE 1364-2005.

use std::panic::{AssertUnwindSafe, catch_unwind};

use serde::{Deserialize, Serialize};

use super::chunks::{Chunk, Refusal};
use super::origin::{ChunkPlaces, MappedText};
use super::reshape::reshape;
use super::unclosed;
use super::{FileId, Span};
use crate::diagnostic::{Diagnostic, Kind};
use crate::syntax::{ast, convert};

const OLD_KEYWORDS: &str = "`begin_keywords \"1364-2005\" ";

/// What a text, or one piece of it, gives.
#[derive(Default, Serialize, Deserialize)]
pub struct Parsed {
    pub unit: ast::Unit,
    pub diagnostics: Vec<Diagnostic>,
    /// Why a part of the piece, or all of it, is left out.
    pub failures: Vec<Diagnostic>,
}

impl Parsed {
    /// The pieces of one text together.
    pub fn join(pieces: impl Iterator<Item = Parsed>) -> Self {
        let mut whole = Self::default();
        for piece in pieces {
            whole.unit.append(piece.unit);
            whole.diagnostics.extend(piece.diagnostics);
            whole.failures.extend(piece.failures);
        }
        whole
    }
}

/// Parses `chunk` of `text`, which belongs to `file`.
pub fn parse(text: &MappedText, chunk: &Chunk, file: FileId, may_be_old: bool) -> Parsed {
    if let Some(refusal) = chunk.refused {
        return Parsed { failures: vec![*refused(text, refusal, file)], ..Parsed::default() };
    }
    let failure = match parse_any_form(text, chunk, file, may_be_old) {
        Ok((unit, diagnostics)) => return Parsed { unit, diagnostics, failures: Vec::new() },
        Err(failure) => failure,
    };
    let Some(parts) = unclosed::parts(&text.text[chunk.start..chunk.end]) else {
        return Parsed { failures: vec![*failure], ..Parsed::default() };
    };
    let mut parsed = Parsed::default();
    for part in parts {
        if let Some(keyword) = part.unclosed {
            let at = text.place(chunk.start + keyword.start, keyword.len());
            parsed.failures.push(not_closed(&text.text[chunk.start..][keyword], at));
            continue;
        }
        let prefix = [chunk.prefix.as_str(), &part.prefix].concat();
        let (start, end) = (chunk.start + part.range.start, chunk.start + part.range.end);
        match parse_any_form(text, &Chunk { start, end, prefix, refused: None }, file, may_be_old) {
            Ok((unit, diagnostics)) => {
                parsed.unit.append(unit);
                parsed.diagnostics.extend(diagnostics);
            }
            Err(failure) => parsed.failures.push(*failure),
        }
    }
    parsed
}

type Attempt = Result<(ast::Unit, Vec<Diagnostic>), Box<Diagnostic>>;

/// Parses a piece as it stands, or else in the form that [`reshape()`] gives it.
fn parse_any_form(text: &MappedText, chunk: &Chunk, file: FileId, may_be_old: bool) -> Attempt {
    let first = parse_any_age(text, chunk, file, may_be_old);
    if first.is_ok() {
        return first;
    }
    let Some(pieces) = reshape(&text.text[chunk.start..chunk.end]) else { return first };
    let text = text.with_pieces(chunk.start, &pieces);
    let chunk = Chunk { start: 0, end: text.text.len(), prefix: chunk.prefix.clone(), refused: None };
    // Its error is the one to show: the first one may be about the form that is mended here.
    parse_any_age(&text, &chunk, file, may_be_old)
}

fn parse_any_age(text: &MappedText, chunk: &Chunk, file: FileId, may_be_old: bool) -> Attempt {
    let first = parse_behind(&chunk.prefix, text, chunk, file);
    if first.is_ok() || !may_be_old || chunk.prefix.contains("begin_keywords") {
        return first;
    }
    // The first error is the one to show: it speaks of the newer language, which includes the older one.
    parse_behind(&format!("{OLD_KEYWORDS}{}", chunk.prefix), text, chunk, file).or(first)
}

fn parse_behind(prefix: &str, text: &MappedText, chunk: &Chunk, file: FileId) -> Attempt {
    let piece = [prefix, &text.text[chunk.start..chunk.end], "\n"].concat();
    let place = |offset: usize| {
        let at = (chunk.start + offset.saturating_sub(prefix.len())).min(chunk.end.saturating_sub(1));
        (at, text.place(at, 1).unwrap_or(Span { file, start: 0, end: 0 }))
    };
    // The parser is not ours, and a panic in it must not lose the other files.
    let parsed = catch_unwind(AssertUnwindSafe(|| {
        let (preprocessed, defines) =
            sv_parser::preprocess_str(&piece, "", &sv_parser::Defines::new(), NO_FOLDERS, true, false, 0, 0)?;
        let added = added_blanks(preprocessed.text(), &piece).ok_or(sv_parser::Error::Preprocess(None))?;
        sv_parser::parse_sv_pp(preprocessed, defines, false).map(|(tree, _)| {
            let places = ChunkPlaces { text, start: chunk.start, prefix: prefix.len(), added, file };
            convert(&tree, &places, file)
        })
    }));
    match parsed {
        Ok(Ok(result)) => Ok(result),
        Ok(Err(sv_parser::Error::Parse(at) | sv_parser::Error::Preprocess(at))) => {
            let (offset, span) = place(at.map_or(piece.len(), |(_, offset)| offset));
            Err(syntax_error(&text.text[..chunk.end], offset, span))
        }
        Ok(Err(error)) => {
            let message = format!("this part of the file cannot be parsed: {error}");
            Err(Box::new(Diagnostic::new(Kind::Incomplete, "syntax", message, Some(place(prefix.len()).1))))
        }
        Err(_) => {
            let message = "the parser gave up on this module or package";
            let diagnostic = Diagnostic::new(Kind::Incomplete, "syntax", message, Some(place(prefix.len()).1));
            Err(Box::new(diagnostic.with_help("this is a defect of the parser or of ours; please report the file")))
        }
    }
}

/// Where the parser's own preprocessor added white space to `piece`: it doubles what follows a string or an escaped
/// identifier. Each entry says from which offset of `parsed` on how many bytes were added; `None` when there is any other
/// difference.
fn added_blanks(parsed: &str, piece: &str) -> Option<Vec<(usize, usize)>> {
    let (parsed, piece) = (parsed.as_bytes(), piece.as_bytes());
    let mut added = Vec::new();
    let mut at = 0;
    let mut count = 0;
    while at < parsed.len() {
        let rest = parsed[at..].iter().zip(piece.get(at - count..)?);
        at += rest.take_while(|(left, right)| left == right).count();
        let blanks = parsed[at..].iter().take_while(|byte| byte.is_ascii_whitespace()).count();
        if at < parsed.len() && blanks == 0 {
            return None;
        }
        if blanks > 0 {
            (at, count) = (at + blanks, count + blanks);
            added.push((at, count));
        }
    }
    (at - count == piece.len()).then_some(added)
}

const NO_FOLDERS: &[&str] = &[];

fn syntax_error(text: &str, offset: usize, span: Span) -> Box<Diagnostic> {
    let rest = text.get(offset..).unwrap_or("").trim_start();
    let length = rest.find(|c: char| !c.is_alphanumeric() && c != '_').unwrap_or(rest.len());
    let length = if length == 0 { rest.chars().next().map_or(0, char::len_utf8) } else { length };
    let message = match &rest[..length] {
        "" => "syntax error: the text ends too early".to_string(),
        token => format!("syntax error at `{token}`"),
    };
    let help = "the module or package around this place is left out; everything before it was understood";
    Box::new(Diagnostic::new(Kind::Incomplete, "syntax", message, Some(span)).with_help(help))
}

fn not_closed(keyword: &str, at: Option<Span>) -> Diagnostic {
    let message = format!("this {keyword} is not closed: its `end{}` is missing", keyword.trim_start_matches("macro"));
    let help = "it is left out; the modules behind it are analysed as if it were closed before them";
    Diagnostic::new(Kind::Incomplete, "syntax", message, at).with_help(help)
}

fn refused(text: &MappedText, refusal: Refusal, file: FileId) -> Box<Diagnostic> {
    let (at, message, help) = match refusal {
        Refusal::TooDeep(at) => (
            at,
            "this is nested too deeply to be parsed: more than 1,000 operators, some 200 brackets or 500 modules around one place",
            "split the expression or statement; the module around it is left out",
        ),
        Refusal::TooLong(at) => (
            at,
            "the module that begins here is longer than 4 MiB",
            "split it into several; it is left out of the analysis",
        ),
    };
    let place = text.place(at, 1).unwrap_or(Span { file, start: 0, end: 0 });
    Box::new(Diagnostic::new(Kind::Incomplete, "size", message, Some(place)).with_help(help))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn added_blanks_are_found() {
        assert_eq!(added_blanks("a b c", "a b c"), Some(vec![]));
        assert_eq!(added_blanks("\"s\"  x \\e   y", "\"s\" x \\e  y"), Some(vec![(5, 1), (12, 2)]));
        assert_eq!(added_blanks("a  ", "a "), Some(vec![(3, 1)]));
        assert_eq!(added_blanks("a x", "a y"), None);
        assert_eq!(added_blanks("a", "a y"), None);
    }
}
