//! Sign-off: what the designer says in comments about findings. `// stillwire: signoff RULE[, RULE] "reason" [by NAME]
//! [until YYYY-MM-DD]` accepts findings, `// stillwire: watch "reason"` marks a net that must not glitch, `// stillwire:
//! static "reason"` and its sisters declare what [`crate::assumptions`] makes use of. Comments are
//! found in the original texts by a scanner that knows strings and block comments, so that neither a string nor
//! commented-out code can suppress anything. Findings of the time before the tool was adopted stand in the ledger instead.
//!
//! Invariant: a comment that is not understood suppresses nothing and is an error; one that matches nothing is reported.

mod apply;
mod comments;
pub mod ledger;
mod pragma;
mod watch;

pub use apply::{Applied, apply};
pub use pragma::{AssumptionPragma, Collected, SignoffPragma, WatchPragma, collect};
pub use watch::{analysed_files, declared_on, watches};
