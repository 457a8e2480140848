//! Which files are read, their text, and their concrete syntax trees.
//!
//! The parts stand in the order in which data flows: file lists and folders say which files ([`filelist`],
//! [`discover`]); their texts are decoded ([`texts`]) and regions that the user switched off are blanked ([`regions`]);
//! our own preprocessor resolves macros and includes and remembers where every byte came from ([`preprocess`],
//! [`origin`]); the result is cut into descriptions whose nesting is known to fit the stack ([`chunks`]) and parsed in
//! parallel ([`parse`]), after a change of form where the parser refuses what is legal ([`reshape`]). [`load()`] runs it
//! all.

mod chunks;
mod declared;
mod discover;
mod filelist;
mod given;
mod include;
mod load;
mod macros;
mod nearby;
mod origin;
mod parse;
mod places;
mod preprocess;
mod regions;
mod relative;
mod remembered;
mod reshape;
mod set;
mod span;
mod stack;
mod texts;
mod unclosed;

pub use discover::{Exclude, PathError};
pub use filelist::{Environment, define};
pub use given::{Given, given};
pub use load::{Loaded, Progress, Request, load};
pub use nearby::Nearby;
pub use places::Places;
pub use regions::Region;
pub use set::{Position, SourceFile, SourceSet};
pub use span::{FileId, Span};
pub use stack::on_big_stacks;
