//! The way back from preprocessed text to the user's files, as the converter needs it.

use super::Span;

/// Maps byte ranges of a preprocessed text to the original files, through includes and macro expansions.
pub trait Places {
    /// The original place of `offset .. offset + len` of the preprocessed text. Text that came from a macro maps to the
    /// place of the macro's use.
    fn place(&self, offset: usize, len: usize) -> Span;
}
