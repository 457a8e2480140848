//! Where every byte of a preprocessed text came from. The text is a sequence of segments: one copied byte for byte from
//! a file, or one that stands as a whole for a place (a macro's expansion maps to the macro's use).
//!
//! Invariant: segments are sorted by their start and cover the text without gaps, because every byte is pushed together
//! with its origin.

use std::collections::BTreeSet;

use serde::Serialize;

use super::reshape::Piece;
use super::{FileId, Places, Span};

#[derive(Clone, Copy, Debug, Serialize)]
struct Segment {
    /// Offset in the preprocessed text.
    start: u32,
    origin: Span,
    /// Copied byte for byte, so that offsets inside the segment carry over.
    verbatim: bool,
}

/// A preprocessed text with its way back.
#[derive(Clone, Default, Debug, Serialize)]
pub struct MappedText {
    pub text: String,
    segments: Vec<Segment>,
    /// Offsets at which text is missing: what stands there does not mean what it says.
    pub gaps: Vec<usize>,
}

impl MappedText {
    /// `file`, whose text this is, and the other files that parts of it come from, in order of the text.
    pub fn files(&self, file: FileId) -> Vec<FileId> {
        let mut seen = BTreeSet::from([file]);
        let mut files = vec![file];
        files.extend(self.segments.iter().map(|segment| segment.origin.file).filter(|&file| seen.insert(file)));
        files
    }

    /// Appends `text`, which stands at `start` of `file`.
    pub fn push_verbatim(&mut self, text: &str, file: FileId, start: usize) {
        if text.is_empty() {
            return;
        }
        let origin = Span { file, start: start as u32, end: (start + text.len()) as u32 };
        self.segments.push(Segment { start: self.text.len() as u32, origin, verbatim: true });
        self.text.push_str(text);
    }

    /// Appends `text`, all of which stands for the place `origin`.
    pub fn push_whole(&mut self, text: &str, origin: Span) {
        if text.is_empty() {
            return;
        }
        let continues = self.segments.last().is_some_and(|last| !last.verbatim && last.origin == origin);
        if !continues {
            self.segments.push(Segment { start: self.text.len() as u32, origin, verbatim: false });
        }
        self.text.push_str(text);
    }

    /// Notes that text is missing here, which stands for the place `origin`.
    pub fn push_gap(&mut self, origin: Span) {
        self.gaps.push(self.text.len());
        self.push_whole(" ", origin);
    }

    /// The text with `pieces` instead of the bytes from `start` on, which is what their offsets count from. Everything
    /// keeps its place.
    pub fn with_pieces(&self, start: usize, pieces: &[Piece]) -> MappedText {
        let mut out = MappedText::default();
        for piece in pieces {
            match piece {
                Piece::Kept(range) => self.copy_into(&mut out, start + range.start, start + range.end),
                Piece::Word(word, at) => {
                    if let Some(origin) = self.byte(start + at) {
                        out.push_whole(word, origin);
                    }
                }
            }
        }
        out
    }

    fn copy_into(&self, out: &mut MappedText, start: usize, end: usize) {
        let first = self.segments.partition_point(|segment| segment.start as usize <= start).saturating_sub(1);
        for (index, segment) in self.segments.iter().enumerate().skip(first) {
            let from = start.max(segment.start as usize);
            let until = self.segments.get(index + 1).map_or(self.text.len(), |next| next.start as usize).min(end);
            if from >= until {
                return;
            }
            let text = &self.text[from..until];
            if segment.verbatim {
                let into = from - segment.start as usize;
                out.push_verbatim(text, segment.origin.file, segment.origin.start as usize + into);
            } else {
                out.push_whole(text, segment.origin);
            }
        }
    }

    /// The original place of one byte; `None` only for an empty text. Past the end it is the last byte's place.
    fn byte(&self, offset: usize) -> Option<Span> {
        let index = self.segments.partition_point(|segment| segment.start as usize <= offset).saturating_sub(1);
        let segment = self.segments.get(index)?;
        if !segment.verbatim {
            return Some(segment.origin);
        }
        let into = (offset as u32).saturating_sub(segment.start);
        let start = (segment.origin.start + into).min(segment.origin.end);
        Some(Span { file: segment.origin.file, start, end: (start + 1).min(segment.origin.end) })
    }

    /// The original place of a range; `None` only for an empty text.
    pub fn place(&self, offset: usize, len: usize) -> Option<Span> {
        let first = self.byte(offset)?;
        if len == 0 {
            return Some(Span { end: first.start, ..first });
        }
        let last = self.byte(offset + len - 1)?;
        Some(if last.file == first.file && last.start >= first.start { first.to(last) } else { first })
    }
}

/// The way back for one chunk of a preprocessed text, which the parser sees behind a prefix of `prefix` bytes.
pub struct ChunkPlaces<'a> {
    pub text: &'a MappedText,
    /// Offset of the chunk in `text`.
    pub start: usize,
    pub prefix: usize,
    /// Blanks that the parser's side has more: from which offset on how many bytes.
    pub added: Vec<(usize, usize)>,
    /// The file that the text belongs to, for an empty text.
    pub file: FileId,
}

impl ChunkPlaces<'_> {
    /// From an offset that the parser knows to one of the whole text.
    fn in_text(&self, offset: usize) -> usize {
        let index = self.added.partition_point(|&(from, _)| from <= offset);
        let added = index.checked_sub(1).map_or(0, |index| self.added[index].1);
        self.start + offset.saturating_sub(self.prefix + added)
    }
}

impl Places for ChunkPlaces<'_> {
    fn place(&self, offset: usize, len: usize) -> Span {
        let start = self.in_text(offset);
        let end = self.in_text(offset + len).max(start);
        self.text.place(start, end - start).unwrap_or(Span { file: self.file, start: 0, end: 0 })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ranges_cross_segments() {
        let file = FileId::new(0);
        let mut text = MappedText::default();
        text.push_verbatim("abc ", file, 10);
        text.push_whole("expanded", Span { file, start: 14, end: 18 });
        text.push_verbatim(" z", file, 18);
        let place = |offset, len| text.place(offset, len).map(|span| (span.start, span.end));
        assert_eq!(place(1, 2), Some((11, 13)));
        assert_eq!(place(5, 3), Some((14, 18)));
        assert_eq!(place(0, 14), Some((10, 20)));
        assert_eq!(place(13, 1), Some((19, 20)));
    }

    #[test]
    fn pieces_keep_their_places() {
        let file = FileId::new(0);
        let mut text = MappedText::default();
        text.push_verbatim("ab cd ", file, 10);
        text.push_whole("macro", Span { file, start: 16, end: 18 });
        text.push_verbatim(" ef", file, 18);
        let moved = text.with_pieces(1, &[Piece::Kept(11..13), Piece::Word("new", 2), Piece::Kept(3..8)]);
        assert_eq!(moved.text, "efnewd mac");
        let place = |offset, len| moved.place(offset, len).map(|span| (span.start, span.end));
        assert_eq!(place(0, 2), Some((19, 21)));
        assert_eq!(place(2, 3), Some((13, 14)));
        assert_eq!(place(5, 1), Some((14, 15)));
        assert_eq!(place(7, 3), Some((16, 18)));
    }
}
