//! Text macros of IEEE 1800-2017 clause 22.5: reading a definition, splitting the arguments of a use, and putting the
//! arguments into the body. All of it is plain text work; the preprocessor decides when a result is scanned again.

use std::collections::HashMap;
use std::sync::Arc;

use super::Span;
use super::regions::{comment_end, string_end};

/// Stands for `` `` `` in a substituted body until it is scanned: it ends a name without leaving a trace. It cannot
/// come from a file whose text is used, because it is only meaningful in texts made here.
pub const PASTE: u8 = 1;

/// A macro as it was defined.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Macro {
    /// `None` for a macro that is used without parentheses.
    pub params: Option<Vec<Param>>,
    /// Without comments and line continuations.
    pub body: String,
    /// `None` for a macro of the command line.
    pub at: Option<Span>,
}

#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Param {
    pub name: String,
    pub default: Option<String>,
}

/// The macros in force; only looked up by name, never iterated.
pub type Macros = HashMap<String, Arc<Macro>>;

/// The simple or escaped identifier at `at` and the offset behind it.
pub fn identifier(text: &str, at: usize) -> Option<(&str, usize)> {
    let bytes = text.as_bytes();
    match bytes.get(at)? {
        b'\\' => {
            let end = word_end(bytes, at, |byte| !byte.is_ascii_whitespace());
            (end > at + 1).then(|| (&text[at + 1..end], end))
        }
        first if first.is_ascii_alphabetic() || *first == b'_' => {
            let end = word_end(bytes, at, |byte| byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'$'));
            Some((&text[at..end], end))
        }
        _ => None,
    }
}

fn word_end(bytes: &[u8], at: usize, belongs: impl Fn(u8) -> bool) -> usize {
    bytes[at..].iter().position(|&byte| !belongs(byte)).map_or(bytes.len(), |length| at + length)
}

/// Skips blanks and line continuations, but no line end.
pub fn skip_blanks(bytes: &[u8], mut at: usize) -> usize {
    loop {
        match bytes.get(at) {
            Some(b' ' | b'\t' | b'\x0c') => at += 1,
            Some(b'\\') => match continuation(bytes, at) {
                Some(end) => at = end,
                None => return at,
            },
            _ => return at,
        }
    }
}

/// The offset behind a backslash that ends its line.
fn continuation(bytes: &[u8], at: usize) -> Option<usize> {
    match (bytes.get(at + 1), bytes.get(at + 2)) {
        (Some(b'\r'), Some(b'\n')) => Some(at + 3),
        (Some(b'\n' | b'\r'), _) => Some(at + 2),
        _ => None,
    }
}

/// Reads what stands behind `` `define `` at `at`: the name, the macro (without its place) and the offset behind it.
///
/// # Errors
/// The offset and what is wrong there.
pub fn definition(text: &str, at: usize) -> Result<(String, Macro, usize), (usize, &'static str)> {
    let bytes = text.as_bytes();
    let at = skip_blanks(bytes, at);
    let (name, mut at) = identifier(text, at).ok_or((at, "`define` needs a name"))?;
    let mut params = None;
    if bytes.get(at) == Some(&b'(') {
        let (list, end) = arguments(text, at).ok_or((at, "the parameter list of this macro is not closed"))?;
        params = Some(parameters(&list).ok_or((at, "a parameter of this macro has no name"))?);
        at = end;
    }
    let (body, end) = body(text, at);
    Ok((name.to_string(), Macro { params, body, at: None }, end))
}

fn parameters(list: &[&str]) -> Option<Vec<Param>> {
    if let [only] = list
        && only.trim().is_empty()
    {
        return Some(Vec::new());
    }
    let parameter = |text: &&str| {
        let text = text.trim_matches(|c: char| c.is_whitespace() || c == '\\');
        let (name, end) = identifier(text, 0)?;
        let rest = text[end..].trim_start();
        let default = rest.strip_prefix('=').map(|default| default.trim().to_string());
        (rest.is_empty() || default.is_some()).then(|| Param { name: name.to_string(), default })
    };
    list.iter().map(parameter).collect()
}

/// The rest of the line and of the lines that it continues on, without comments.
fn body(text: &str, mut at: usize) -> (String, usize) {
    let bytes = text.as_bytes();
    let mut body = String::new();
    let mut run = at;
    while at < bytes.len() {
        match bytes[at] {
            b'\n' => break,
            b'\r' if bytes.get(at + 1) != Some(&b'\n') => break,
            b'\\' => match continuation(bytes, at) {
                Some(end) => {
                    body.push_str(&text[run..at]);
                    body.push('\n');
                    (at, run) = (end, end);
                }
                None => at = word_end(bytes, at + 1, |byte| !byte.is_ascii_whitespace()).max(at + 1),
            },
            b'"' if at == 0 || bytes[at - 1] != b'`' => at = string_end(bytes, at),
            b'/' if matches!(bytes.get(at + 1), Some(b'/' | b'*')) => {
                body.push_str(&text[run..at]);
                body.push(' ');
                let mut end = comment_end(bytes, at);
                // A line comment that ends in a backslash ends the comment, not the macro.
                if bytes[at + 1] == b'/' && bytes[at..end].ends_with(b"\\") {
                    end -= 1;
                }
                (at, run) = (end, end);
            }
            _ => at += 1,
        }
    }
    body.push_str(&text[run..at]);
    (body.trim().to_string(), at)
}

/// The arguments in the parentheses that open at `at`, and the offset behind them; `None` when they do not close.
pub fn arguments(text: &str, at: usize) -> Option<(Vec<&str>, usize)> {
    let bytes = text.as_bytes();
    let mut arguments = Vec::new();
    let mut depth = 0usize;
    let mut start = at + 1;
    let mut at = at;
    while at < bytes.len() {
        match bytes[at] {
            b'(' | b'[' | b'{' => depth += 1,
            b')' | b']' | b'}' => {
                depth = depth.saturating_sub(1);
                if depth == 0 {
                    arguments.push(&text[start..at]);
                    return Some((arguments, at + 1));
                }
            }
            b',' if depth == 1 => {
                arguments.push(&text[start..at]);
                start = at + 1;
            }
            b'"' => {
                at = string_end(bytes, at);
                continue;
            }
            b'/' if matches!(bytes.get(at + 1), Some(b'/' | b'*')) => {
                at = comment_end(bytes, at);
                continue;
            }
            _ => {}
        }
        at += 1;
    }
    None
}

impl Macro {
    /// The body with `arguments` in the place of the parameters; `None` when it grows past `limit` bytes. Strings are
    /// left alone, `` `" `` makes a quote, `` `\`" `` an escaped one, and `` `` `` leaves a [`PASTE`] mark.
    pub fn substitute(&self, arguments: &[String], limit: usize) -> Option<String> {
        let params = self.params.as_deref().unwrap_or_default();
        let text = self.body.as_str();
        let bytes = text.as_bytes();
        let mut out = String::with_capacity(text.len());
        let mut at = 0;
        while at < bytes.len() {
            if out.len() > limit {
                return None;
            }
            let start = at;
            match bytes[at] {
                b'`' if text[at..].starts_with("`\\`\"") => {
                    out.push_str("\\\"");
                    at += 4;
                }
                b'`' if bytes.get(at + 1) == Some(&b'"') => {
                    out.push('"');
                    at += 2;
                }
                b'`' if bytes.get(at + 1) == Some(&b'`') => {
                    out.push(PASTE as char);
                    at += 2;
                }
                b'"' => {
                    at = string_end(bytes, at);
                    out.push_str(&text[start..at]);
                }
                b'\\' => {
                    at = word_end(bytes, at + 1, |byte| !byte.is_ascii_whitespace() && byte != b'`');
                    out.push_str(&text[start..at]);
                }
                byte if byte.is_ascii_digit() => {
                    // A number such as `4'hA` or `1e3` is no name.
                    at = word_end(bytes, at, |byte| byte.is_ascii_alphanumeric() || byte == b'_');
                    out.push_str(&text[start..at]);
                }
                _ => match identifier(text, at) {
                    Some((name, end)) => {
                        let position = params.iter().position(|param| param.name == name);
                        out.push_str(position.and_then(|index| arguments.get(index)).map_or(name, String::as_str));
                        at = end;
                    }
                    None => {
                        at = word_end(bytes, at + 1, |byte| {
                            !byte.is_ascii_alphanumeric() && !matches!(byte, b'_' | b'`' | b'"' | b'\\')
                        });
                        out.push_str(&text[start..at]);
                    }
                },
            }
        }
        Some(out)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn defined(text: &str) -> (String, Macro) {
        let (name, definition, _) = definition(text, 0).expect("a definition");
        (name, definition)
    }

    fn used(definition: &str, arguments: &[&str]) -> String {
        let arguments: Vec<String> = arguments.iter().map(ToString::to_string).collect();
        defined(definition).1.substitute(&arguments, 1000).expect("a small result")
    }

    #[test]
    fn definitions() {
        let (name, plain) = defined(" W 8 // eight\nrest");
        assert_eq!((name.as_str(), plain.body.as_str(), plain.params), ("W", "8", None));
        let (_, two) = defined(" MAX(a, b=(1,2)) ((a) > (b) \\\r\n ? (a) : /* else */ (b))\n");
        let params: Vec<_> = two.params.iter().flatten().map(|p| (p.name.as_str(), p.default.as_deref())).collect();
        assert_eq!(params, [("a", None), ("b", Some("(1,2)"))]);
        assert_eq!(two.body, "((a) > (b) \n ? (a) :   (b))");
        assert_eq!(defined(" SPACED (a)\n").1.body, "(a)");
        assert_eq!(defined(" S \"a // b\"\n").1.body, "\"a // b\"");
        assert_eq!(defined(" C a // note \\\n b\n").1.body, "a  \n b");
    }

    #[test]
    fn substitution() {
        assert_eq!(used(" P(a) a``_x a_x \"a\"\n", &["q"]), "q\u{1}_x a_x \"a\"");
        assert_eq!(used(" S(a) `\"a`\" `\\`\"a`\\`\"\n", &["q"]), "\"q\" \\\"q\\\"");
        assert_eq!(used(" N(h, b) 4'h0 8'b1 h+b\n", &["x", "y"]), "4'h0 8'b1 x+y");
        assert_eq!(used(" M(x) `x(1)\n", &["F"]), "`F(1)");
    }

    #[test]
    fn arguments_split_at_the_outermost_commas() {
        let (list, end) = arguments("(a, f(b, c), {d, e}, \",)\") x", 0).expect("closed");
        assert_eq!(list, ["a", " f(b, c)", " {d, e}", " \",)\""]);
        assert_eq!(end, 26);
        assert_eq!(arguments("(a, b", 0), None);
    }
}
