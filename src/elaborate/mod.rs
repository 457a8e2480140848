//! (in work)

pub mod blast;
pub mod udp;
pub mod value;
