//! (in work)

pub mod flatten;
