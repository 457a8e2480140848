//! The texts of everything that was read. A [`SourceFile`] keeps the decoded original text, because spans are byte ranges
//! of exactly that text; line and column are computed here and only when something is printed.
//!
//! Invariant: a file is in the set once, whatever the number of ways that lead to it, and ids are given in the order of
//! first reading, which does not depend on the number of threads.

use std::path::PathBuf;
use std::sync::Arc;

use super::{FileId, Span};

/// One file as it was read.
#[derive(Clone, Debug)]
pub struct SourceFile {
    pub id: FileId,
    /// The path as the user gave it, joined with what was found below it.
    pub path: PathBuf,
    /// The original text. Bytes that are no UTF-8 were read as Latin-1, so that no byte is lost.
    pub text: Arc<str>,
    line_starts: Vec<u32>,
}

impl SourceFile {
    /// The path for messages and output.
    pub fn name(&self) -> String {
        self.path.to_string_lossy().into_owned()
    }

    /// Line and column of a byte offset, both from 1; columns count characters.
    pub fn line_column(&self, offset: u32) -> (usize, usize) {
        let offset = (offset as usize).min(self.text.len());
        let line = self.line_starts.partition_point(|&start| start as usize <= offset).max(1);
        let start = self.line_starts.get(line - 1).map_or(0, |&start| start as usize);
        let column = self.text.as_bytes()[start..offset].iter().filter(|&&byte| byte & 0xC0 != 0x80).count();
        (line, column + 1)
    }

    /// The number of the last line.
    pub fn lines(&self) -> usize {
        self.line_starts.len()
    }

    /// The byte range of a line (from 1) without its line end; empty past the last line.
    pub fn line_range(&self, line: usize) -> std::ops::Range<usize> {
        let Some(&start) = line.checked_sub(1).and_then(|index| self.line_starts.get(index)) else {
            return self.text.len()..self.text.len();
        };
        let end = self.line_starts.get(line).map_or(self.text.len(), |&next| next as usize);
        let line = &self.text[start as usize..end];
        start as usize..start as usize + line.trim_end_matches(['\n', '\r']).len()
    }
}

/// All files that were read, headers included.
#[derive(Clone, Debug, Default)]
pub struct SourceSet {
    pub files: Vec<SourceFile>,
    /// Where macros with a place are used, and where each is defined; sorted once everything is read.
    macro_uses: Vec<(Span, Span)>,
}

/// A span in words that people and other programs use: 1-based lines and columns, the end exclusive as in the span.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Position {
    pub file: String,
    pub line: usize,
    pub column: usize,
    pub end_line: usize,
    pub end_column: usize,
}

impl SourceSet {
    /// Adds a text and gives it its id.
    pub fn add(&mut self, path: impl Into<PathBuf>, text: impl Into<Arc<str>>) -> FileId {
        let id = FileId::new(self.files.len());
        let text = text.into();
        let newlines = text.bytes().enumerate().filter(|&(_, byte)| byte == b'\n').map(|(at, _)| at as u32 + 1);
        let line_starts = std::iter::once(0).chain(newlines).collect();
        self.files.push(SourceFile { id, path: path.into(), text, line_starts });
        id
    }

    pub fn add_macro_use(&mut self, at: Span, defined: Span) {
        self.macro_uses.push((at, defined));
    }

    /// Must follow the last use that is added.
    pub fn sort_macro_uses(&mut self) {
        self.macro_uses.sort_unstable();
        self.macro_uses.dedup();
    }

    /// Uses of macros with a place, and where each is defined.
    pub fn macro_uses(&self) -> &[(Span, Span)] {
        &self.macro_uses
    }

    /// Where the macro is defined whose use `span` is or lies in: from `` `define `` through its name.
    pub fn macro_behind(&self, span: Span) -> Option<Span> {
        let index = self.macro_uses.partition_point(|(at, _)| (at.file, at.start) <= (span.file, span.start));
        let (at, defined) = *self.macro_uses.get(index.checked_sub(1)?)?;
        (at.file == span.file && span.end <= at.end && span.start < at.end).then_some(defined)
    }

    /// The file of an id that this set gave out.
    pub fn file(&self, id: FileId) -> &SourceFile {
        &self.files[id.index()]
    }

    /// The text under a span; empty when the span does not fit the text.
    pub fn slice(&self, span: Span) -> &str {
        self.file(span.file).text.get(span.start as usize..span.end as usize).unwrap_or("")
    }

    /// File, line and column of both ends of a span.
    pub fn position(&self, span: Span) -> Position {
        let file = self.file(span.file);
        let (line, column) = file.line_column(span.start);
        let (end_line, end_column) = file.line_column(span.end.max(span.start));
        Position { file: file.name(), line, column, end_line, end_column }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn columns_count_characters() {
        let mut set = SourceSet::default();
        let id = set.add("a.v", "ab\nÄö x\r\nlast");
        let file = set.file(id);
        let x = file.text.find('x').unwrap_or_default() as u32;
        assert_eq!(file.line_column(x), (2, 4));
        assert_eq!(file.line_column(0), (1, 1));
        assert_eq!(file.line_column(file.text.len() as u32), (3, 5));
        assert_eq!(&file.text[file.line_range(2)], "Äö x");
        assert_eq!(&file.text[file.line_range(3)], "last");
        assert_eq!(file.line_range(9), file.text.len()..file.text.len());
    }
}
