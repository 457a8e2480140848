//! Places in the user's files. A span is a file id and a byte range of that file's original text (never of the
//! preprocessed text), so that every later stage can point at what the user wrote. Line and column are computed only
//! when something is printed.

use serde::{Deserialize, Serialize};

use crate::define_id;

define_id!(FileId, "f", "A file of the source set: anything whose text was read, headers included.");

/// A half-open byte range `start..end` in the original text of `file`.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub struct Span {
    #[serde(with = "super::relative")]
    pub file: FileId,
    pub start: u32,
    pub end: u32,
}

impl Span {
    /// The smallest span that covers both; `self` when they lie in different files.
    pub fn to(self, other: Span) -> Span {
        if self.file != other.file {
            return self;
        }
        Span { file: self.file, start: self.start.min(other.start), end: self.end.max(other.end) }
    }
}
