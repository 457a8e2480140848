//! What a text declares, found without parsing or preprocessing it: the names of its macros, packages and modules. It serves
//! hints only, so a text that is torn or switched off by a condition is read as well.

use super::macros::{identifier, skip_blanks};
use super::regions::{comment_end, string_end};

/// The kinds of names that a design may miss.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Kind {
    Macro,
    Package,
    /// A module, interface or primitive.
    Module,
}

/// Kind, name and line of everything that `text` declares, in order.
pub fn declared(text: &str) -> Vec<(Kind, &str, usize)> {
    let bytes = text.as_bytes();
    let mut found = Vec::new();
    let mut wanted: Option<Kind> = None;
    let (mut at, mut line, mut counted) = (0, 1, 0);
    while let Some(&byte) = bytes.get(at) {
        match byte {
            b'/' if matches!(bytes.get(at + 1), Some(b'/' | b'*')) => at = comment_end(bytes, at),
            b'"' => {
                at = string_end(bytes, at);
                wanted = None;
            }
            b'`' if text[at + 1..].starts_with("define") => {
                let name = skip_blanks(bytes, at + 1 + "define".len());
                line += text[counted..at].matches('\n').count();
                counted = at;
                match identifier(text, name) {
                    Some((macro_name, end)) => {
                        found.push((Kind::Macro, macro_name, line));
                        at = end;
                    }
                    None => at += 1,
                }
                wanted = None;
            }
            _ => match identifier(text, at) {
                Some((word, end)) => {
                    wanted = match (wanted, word) {
                        (Some(kind), "automatic" | "static") => Some(kind),
                        (Some(kind), name) => {
                            line += text[counted..at].matches('\n').count();
                            counted = at;
                            found.push((kind, name, line));
                            None
                        }
                        (None, "package") => Some(Kind::Package),
                        (None, "module" | "macromodule" | "interface" | "primitive") => Some(Kind::Module),
                        (None, _) => None,
                    };
                    at = end;
                }
                None => {
                    wanted = wanted.filter(|_| byte.is_ascii_whitespace());
                    at += 1 + bytes[at + 1..].iter().take_while(|byte| **byte & 0xC0 == 0x80).count();
                }
            },
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_and_lines() {
        let text = "// module no\n`define W(a) a\npackage automatic p; endpackage\n\"module s\" module m #(x)();\n/* \n */ \
                    interface\n i; endinterface modport module ; ä `define";
        let expected = [(Kind::Macro, "W", 2), (Kind::Package, "p", 3), (Kind::Module, "m", 4), (Kind::Module, "i", 7)];
        assert_eq!(declared(text), expected);
    }
}
