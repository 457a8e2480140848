//! The `[[cell]]` tables of the settings file, as data.

use std::fmt;

use crate::syntax::ast::Direction;

/// What a user says about modules of some names.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Declaration {
    pub modules: Vec<String>,
    pub role: Role,
    /// The name of the settings file and the line of the table.
    pub file: String,
    pub line: usize,
}

#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Role {
    /// A module without text, of which some pins are known.
    Pins { pins: Vec<DeclaredPin>, outputs: Vec<String> },
    /// A selector that is glitch-free by construction: while the chosen inputs agree, a change of the select shows nothing at
    /// the output. Its output is the sum of all prime implicants of its function.
    Selector {
        /// The most significant first.
        select: Vec<PinName>,
        /// By value of the select.
        inputs: Vec<String>,
        output: PinName,
    },
    /// A clock gate that is right by construction: the enables are taken up by a latch that is open while the clock is
    /// inactive, and the output is active only while the clock is. An inverted clock pin is active low, and then the
    /// output rests at 1.
    ClockGate { clock: PinName, enables: Vec<PinName>, output: PinName },
}

impl Declaration {
    /// The pins of a declaration of pins alone.
    pub fn pins(&self) -> impl Iterator<Item = (&PinName, PinRole)> {
        let pins: &[DeclaredPin] = match &self.role {
            Role::Pins { pins, .. } => pins,
            _ => &[],
        };
        pins.iter().map(|one| (&one.pin, one.role))
    }

    /// Which way a pin of this name goes, as far as the declaration says.
    pub fn direction(&self, name: &str) -> Option<Direction> {
        let Role::Pins { pins, outputs } = &self.role else { return None };
        if pins.iter().any(|one| one.pin.name == name) {
            Some(Direction::Input)
        } else {
            outputs.iter().any(|output| output == name).then_some(Direction::Output)
        }
    }
}

#[derive(Clone, PartialEq, Eq, Debug)]
pub struct DeclaredPin {
    pub role: PinRole,
    pub pin: PinName,
}

/// A pin, and whether it acts when it is low (at the falling edge, for a clock). Written `NAME` or `!NAME`.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct PinName {
    pub name: String,
    pub inverted: bool,
}

impl fmt::Display for PinName {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}{}", if self.inverted { "!" } else { "" }, self.name)
    }
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum PinRole {
    Clock,
    Set,
    Reset,
    Enable,
}

impl PinRole {
    pub const ALL: [PinRole; 4] = [PinRole::Clock, PinRole::Set, PinRole::Reset, PinRole::Enable];

    /// The key in the settings file.
    pub fn name(self) -> &'static str {
        match self {
            PinRole::Clock => "clock",
            PinRole::Set => "set",
            PinRole::Reset => "reset",
            PinRole::Enable => "enable",
        }
    }
}
