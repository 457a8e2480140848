//! Finds the comments of a Verilog text. The scanner knows just enough of the language not to be fooled: strings, block
//! comments and escaped identifiers, all of which may contain `//`.

/// A comment and where it stands.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Comment<'a> {
    /// Byte range of the whole comment.
    pub start: usize,
    pub end: usize,
    /// What follows `//`, or stands between the marks of a block comment.
    pub text: &'a str,
    pub block: bool,
    /// Nothing but white space stands before it on its line.
    pub alone: bool,
}

/// All comments in order.
pub(super) fn comments(text: &str) -> Vec<Comment<'_>> {
    let bytes = text.as_bytes();
    let mut found = Vec::new();
    let mut alone = true;
    let mut at = 0;
    while at < bytes.len() {
        match bytes[at] {
            b'\n' => {
                alone = true;
                at += 1;
            }
            b'"' => {
                alone = false;
                at = string_end(bytes, at + 1);
            }
            b'\\' => {
                alone = false;
                at += 1;
                while at < bytes.len() && !bytes[at].is_ascii_whitespace() {
                    at += 1;
                }
            }
            b'/' if bytes.get(at + 1) == Some(&b'/') => {
                let end = bytes[at..].iter().position(|&byte| byte == b'\n').map_or(bytes.len(), |length| at + length);
                let body = text.get(at + 2..end).unwrap_or("");
                found.push(Comment { start: at, end, text: body, block: false, alone });
                at = end;
            }
            b'/' if bytes.get(at + 1) == Some(&b'*') => {
                let close = text.get(at + 2..).and_then(|rest| rest.find("*/"));
                let end = close.map_or(bytes.len(), |length| at + length + 4);
                let body = text.get(at + 2..close.map_or(bytes.len(), |length| at + 2 + length)).unwrap_or("");
                found.push(Comment { start: at, end, text: body, block: true, alone });
                at = end;
            }
            byte => {
                alone &= byte.is_ascii_whitespace();
                at += 1;
            }
        }
    }
    found
}

/// Just behind the string that begins before `at`. A string ends at its line's end unless that is escaped, so that one
/// missing quote does not swallow the file.
fn string_end(bytes: &[u8], mut at: usize) -> usize {
    while at < bytes.len() {
        match bytes[at] {
            b'\\' => at += 2,
            b'"' => return at + 1,
            b'\n' => return at,
            _ => at += 1,
        }
    }
    bytes.len()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn texts(text: &str) -> Vec<(&str, bool)> {
        comments(text).into_iter().map(|comment| (comment.text, comment.alone)).collect()
    }

    #[test]
    fn strings_and_escaped_names_hide_no_comment() {
        assert_eq!(texts("a = \"// no\"; // yes\n  // alone\n"), [(" yes", false), (" alone", true)]);
        assert_eq!(texts("wire \\a//b ; // c"), [(" c", false)]);
        assert_eq!(texts("\"a\\\"// no\" /* one // two */ x // three"), [(" one // two ", false), (" three", false)]);
        assert_eq!(texts("\"broken\n// found"), [(" found", true)]);
    }
}
