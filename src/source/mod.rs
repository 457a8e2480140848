//! Which files are read, their text, and their concrete syntax trees.

mod places;
mod span;

pub use places::Places;
pub use span::{FileId, Span};
