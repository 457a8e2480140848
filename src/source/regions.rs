//! Regions that the user switched off for synthesis: from a comment `<word> translate_off` to a comment
//! `<word> translate_on`, whatever the leading word. They are blanked before preprocessing (newlines kept, offsets
//! unchanged), so that nothing in them counts, and listed, so that the coverage can say what was left out.

use std::borrow::Cow;

use serde::Serialize;

use super::{FileId, Span};

/// A region that was left out.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize)]
pub struct Region {
    /// From the opening comment through the closing one.
    pub at: Span,
    /// Whether the closing comment exists; otherwise the region reaches to the end of the file.
    pub closed: bool,
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Switch {
    Off,
    On,
}

/// The text with its switched-off regions blanked, and those regions.
pub fn blank(text: &str, file: FileId) -> (Cow<'_, str>, Vec<Region>) {
    if !text.contains("translate_off") {
        return (Cow::Borrowed(text), Vec::new());
    }
    let mut ranges: Vec<(usize, usize, bool)> = Vec::new();
    let mut open = None;
    let bytes = text.as_bytes();
    let mut at = 0;
    while at < bytes.len() {
        match bytes[at] {
            b'/' if matches!(bytes.get(at + 1), Some(b'/' | b'*')) => {
                let end = comment_end(bytes, at);
                match (switch(&text[at..end]), open) {
                    (Some(Switch::Off), None) => open = Some(at),
                    (Some(Switch::On), Some(start)) => {
                        ranges.push((start, end, true));
                        open = None;
                    }
                    _ => {}
                }
                at = end;
            }
            // Inside a region anything may stand, so quotes mean nothing there.
            b'"' if open.is_none() => at = string_end(bytes, at),
            _ => at += 1,
        }
    }
    if let Some(start) = open {
        ranges.push((start, text.len(), false));
    }
    let mut out = String::with_capacity(text.len());
    let mut done = 0;
    let mut regions = Vec::new();
    for (start, end, closed) in ranges {
        out.push_str(&text[done..start]);
        out.extend(text[start..end].bytes().map(|byte| if matches!(byte, b'\n' | b'\r') { byte as char } else { ' ' }));
        done = end;
        regions.push(Region { at: Span { file, start: start as u32, end: end as u32 }, closed });
    }
    out.push_str(&text[done..]);
    (Cow::Owned(out), regions)
}

/// The end of the comment that starts at `at`. A `//` comment ends before its line end, also before a lone carriage
/// return, because a file with such line ends would otherwise be one single comment.
pub fn comment_end(bytes: &[u8], at: usize) -> usize {
    if bytes[at + 1] == b'/' {
        let rest = &bytes[at..];
        return at + rest.iter().position(|byte| matches!(byte, b'\n' | b'\r')).unwrap_or(rest.len());
    }
    let rest = bytes.get(at + 2..).unwrap_or_default();
    rest.windows(2).position(|pair| pair == b"*/").map_or(bytes.len(), |position| at + 2 + position + 2)
}

/// The end of the string that starts at `at`: behind its closing quote, or at the end of the line when there is none.
pub fn string_end(bytes: &[u8], at: usize) -> usize {
    let mut end = at + 1;
    while end < bytes.len() {
        match bytes[end] {
            b'"' => return end + 1,
            b'\n' => return end,
            b'\\' => end += 2,
            _ => end += 1,
        }
    }
    bytes.len()
}

/// What a comment switches, when it consists of at most one leading word and the switch.
fn switch(comment: &str) -> Option<Switch> {
    let body = comment.trim_start_matches('/').trim_start_matches('*').trim_end_matches('/').trim_end_matches('*');
    let mut words = body.split_whitespace();
    let last = words.next_back()?;
    if words.count() > 1 {
        return None;
    }
    match last {
        "translate_off" => Some(Switch::Off),
        "translate_on" => Some(Switch::On),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn blanked(text: &str) -> (String, Vec<(u32, u32, bool)>) {
        let (out, regions) = blank(text, FileId::new(0));
        assert_eq!(out.len(), text.len());
        let regions = regions.iter().map(|region| (region.at.start, region.at.end, region.closed)).collect();
        (out.into_owned(), regions)
    }

    #[test]
    fn any_leading_word_and_both_comment_forms() {
        let (out, regions) = blanked("a // tool translate_off\nb \"\n/* other translate_on */ c");
        assert_eq!(out.split_whitespace().collect::<Vec<_>>(), ["a", "c"]);
        assert_eq!(out.matches('\n').count(), 2);
        assert_eq!(regions.len(), 1);
        assert!(regions[0].2);
    }

    #[test]
    fn an_open_region_reaches_the_end_and_is_marked() {
        let (out, regions) = blanked("a\n// synthesis translate_off\nÄb");
        assert_eq!(out.trim(), "a");
        assert_eq!(regions, [(2, 32, false)]);
    }

    #[test]
    fn prose_and_strings_switch_nothing() {
        let text = "// see the translate_off region below\n\"// x translate_off\" b";
        assert_eq!(blanked(text), (text.to_string(), vec![]));
    }
}
