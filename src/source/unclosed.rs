//! A module whose `endmodule` is missing swallows everything behind it. When such a piece does not parse, it is cut anew
//! before each keyword at the beginning of a line that can only begin another description, so that the one mistake loses
//! one module.
//!
//! Invariant: the parts cover the piece in order.

use std::ops::Range;

use super::macros::identifier;

const OPENING: &[&str] = &["module", "macromodule", "package", "primitive", "program"];
const CLOSING: &[&str] = &["endmodule", "endpackage", "endprimitive", "endprogram"];

/// A part of a piece that closes less than it opens.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Part {
    pub range: Range<usize>,
    /// Directives of the parts before that are still in force.
    pub prefix: String,
    /// The keyword that opens the part, when nothing closes it.
    pub unclosed: Option<Range<usize>>,
}

/// The parts of `text`; `None` when everything in it is closed.
pub fn parts(text: &str) -> Option<Vec<Part>> {
    let opened: Vec<Range<usize>> = line_starts(text).filter_map(|at| keyword(text, at, OPENING)).collect();
    let closed = words(text).filter(|word| CLOSING.contains(word)).count();
    if opened.len() <= closed {
        return None;
    }
    let mut prefix = String::new();
    let mut parts = Vec::new();
    let bounds = opened.iter().map(|keyword| keyword.start).skip(1).chain([text.len()]);
    let mut start = 0;
    for (keyword, end) in opened.iter().zip(bounds) {
        let part = &text[start..end];
        let is_closed = words(part).any(|word| CLOSING.contains(&word));
        let unclosed = (!is_closed).then(|| keyword.clone());
        parts.push(Part { range: start..end, prefix: prefix.clone(), unclosed });
        for (at, directive) in part.match_indices("`default_nettype") {
            let argument = at + directive.len();
            let blanks = part[argument..].len() - part[argument..].trim_start().len();
            if let Some((kind, _)) = identifier(part, argument + blanks) {
                prefix = format!("`default_nettype {kind} ");
            }
        }
        start = end;
    }
    Some(parts)
}

fn words(text: &str) -> impl Iterator<Item = &str> {
    text.split(|c: char| !c.is_alphanumeric() && !matches!(c, '_' | '$' | '\\'))
}

/// The first byte of each line that is no blank.
fn line_starts(text: &str) -> impl Iterator<Item = usize> {
    let lines = std::iter::once(0).chain(text.match_indices('\n').map(|(at, _)| at + 1));
    lines.map(move |at| at + text[at..].len() - text[at..].trim_start_matches([' ', '\t', '\r']).len())
}

fn keyword(text: &str, at: usize, of: &[&str]) -> Option<Range<usize>> {
    let (word, end) = identifier(text, at)?;
    of.contains(&word).then_some(at..end)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_what_is_open_is_cut() {
        assert_eq!(parts("module a;\n module b; endmodule\nendmodule"), None);
        let text = "`default_nettype none\nmodule a; wire x\n module b; endmodule\nmodule c; endmodule";
        let parts = parts(text).expect("parts");
        let shown: Vec<(&str, bool)> =
            parts.iter().map(|part| (text[part.range.clone()].trim(), part.unclosed.is_some())).collect();
        let expected = [
            ("`default_nettype none\nmodule a; wire x", true),
            ("module b; endmodule", false),
            ("module c; endmodule", false),
        ];
        assert_eq!(shown, expected);
        assert_eq!(parts[1].prefix, "`default_nettype none ");
        assert_eq!(text[parts[0].unclosed.clone().expect("open")].trim(), "module");
    }
}
