//! What is known about modules beyond their text: declarations of the settings file about pins, glitch-free selectors and
//! clock gates, and the cells of Liberty libraries. Elaboration asks here about each instance.
//!
//! Invariant: what a declaration says is never guessed further. A pin that an instance does not have is reported, and a
//! cell whose behaviour is not understood stays a module without text.

mod declared;

pub use declared::{Declaration, DeclaredPin, PinName, PinRole, Role};
