//! The owned syntax tree and the one converter that builds it from the parser's concrete tree.

pub mod ast;
mod convert;
pub mod externs;
mod protection;

pub use convert::convert;
pub use protection::Protection;
