//! Which files are read, their text, and their concrete syntax trees.

mod places;
mod set;
mod span;

pub use places::Places;
pub use set::{Position, SourceFile, SourceSet};
pub use span::{FileId, Span};
