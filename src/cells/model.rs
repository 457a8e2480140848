//! What a cell does, in one form for Liberty cells and for declared selectors and clock gates: its state, and the functions
//! of its outputs over pins and state.
//!
//! A cell is no magic: its function is taken as gates just as it is written, and so a multiplexer cell can glitch between
//! equal inputs, unless it is declared a glitch-free selector. A pulse inside one complex gate is not excluded by any
//! standard.

use super::declared::{Declaration, PinName, Role};
use super::function::Function;

#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Model {
    pub name: String,
    /// `cells.lib:12` or `stillwire.toml:4`.
    pub place: String,
    /// In order, for connections by position.
    pub pins: Vec<Pin>,
    pub states: Vec<State>,
    pub outputs: Vec<Output>,
    /// Whether each pin must be connected, because its name may be misspelt otherwise.
    pub declared: bool,
}

#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Pin {
    pub name: String,
    pub direction: Direction,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Direction {
    Input,
    Output,
    Inout,
    /// No pin of the instance, only a name for a function.
    Internal,
    /// Supply and ground.
    Power,
}

#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Output {
    pub pin: String,
    pub function: Function,
    /// The output floats while this is 1.
    pub three_state: Option<Function>,
}

/// A flip-flop or latch inside the cell.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct State {
    /// What functions call its value, and its complement.
    pub name: String,
    pub complement: Option<String>,
    pub kind: StateKind,
    pub clear: Option<Function>,
    pub preset: Option<Function>,
    /// What value and complement are while clear and preset are both active.
    pub both: [Both; 2],
    /// The latch of a clock gate: its enable is the clock pin.
    pub gates_clock: bool,
}

impl State {
    /// Whether value and complement differ even while clear and preset are both active.
    pub fn opposite(&self) -> bool {
        let both_act = self.clear.is_some() && self.preset.is_some();
        !both_act || matches!(self.both, [Both::Zero, Both::One] | [Both::One, Both::Zero])
    }
}

#[derive(Clone, PartialEq, Eq, Debug)]
pub enum StateKind {
    /// Takes `next` when `clock` rises.
    FlipFlop { clock: Function, next: Function },
    /// Passes `data` while `enable` is 1.
    Latch { enable: Function, data: Function },
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Both {
    Zero,
    One,
    /// Anything else: undefined, kept or toggled.
    Unknown,
}

/// The state of a clock gate; no pin can be called that.
const HELD: &str = "held enable";

impl Model {
    pub fn pin(&self, name: &str) -> Option<&Pin> {
        self.pins.iter().find(|pin| pin.name == name)
    }

    /// The model of a declared selector or clock gate; a declaration of pins alone has none.
    pub fn declared(declaration: &Declaration, name: &str) -> Option<Model> {
        let place = format!("{}:{}", declaration.file, declaration.line);
        let (inputs, output, states, function) = match &declaration.role {
            Role::Pins { .. } => return None,
            Role::Selector { select, inputs, output } => {
                let names = select.iter().map(|pin| pin.name.clone()).chain(inputs.iter().cloned()).collect();
                (names, output, Vec::new(), selector(select, inputs))
            }
            Role::ClockGate { clock, enables, output } => {
                let names: Vec<String> = [clock].into_iter().chain(enables).map(|pin| pin.name.clone()).collect();
                let enables = any(enables.iter().map(literal).collect());
                let (state, function) = clock_gate(&clock.name, clock.inverted, enables, None);
                (names, output, vec![state], function)
            }
        };
        let function = if output.inverted { function.negated() } else { function };
        let pins = inputs.into_iter().map(|name| Pin { name, direction: Direction::Input });
        let pins = pins.chain([Pin { name: output.name.clone(), direction: Direction::Output }]).collect();
        let outputs = vec![Output { pin: output.name.clone(), function, three_state: None }];
        Some(Model { name: name.to_string(), place, pins, states, outputs, declared: true })
    }
}

fn literal(pin: &PinName) -> Function {
    let function = Function::name(&pin.name);
    if pin.inverted { function.negated() } else { function }
}

/// An OR of one or more.
pub(super) fn any(mut parts: Vec<Function>) -> Function {
    if parts.len() == 1 { parts.remove(0) } else { Function::Or(parts) }
}

/// All prime implicants of a selector: for each choice of select bits that are fixed or let go, the fixed bits and every
/// input that is then still possible. With one select bit these are (s and a), (not s and b), (a and b).
fn selector(select: &[PinName], inputs: &[String]) -> Function {
    let mut terms = Vec::new();
    for free in 0..1usize << select.len() {
        for value in 0..1usize << select.len() {
            if value & free != 0 {
                continue;
            }
            let mut term = Vec::new();
            for (position, pin) in select.iter().rev().enumerate() {
                if free >> position & 1 == 0 {
                    let inverted = (value >> position & 1 == 0) ^ pin.inverted;
                    term.push(literal(&PinName { name: pin.name.clone(), inverted }));
                }
            }
            let possible = inputs.iter().enumerate().filter(|(index, _)| index & !free == value);
            term.extend(possible.map(|(_, name)| Function::name(name)));
            terms.push(Function::And(term));
        }
    }
    Function::Or(terms)
}

/// A latch that is open while the clock is inactive, and the gate behind it. `late` joins the enable behind the latch.
pub(super) fn clock_gate(clock: &str, active_low: bool, enable: Function, late: Option<Function>) -> (State, Function) {
    let pin = Function::name(clock);
    let open = if active_low { pin.clone() } else { pin.clone().negated() };
    let state = State {
        name: HELD.to_string(),
        complement: None,
        kind: StateKind::Latch { enable: open, data: enable },
        clear: None,
        preset: None,
        both: [Both::Unknown; 2],
        gates_clock: true,
    };
    let held = Function::name(HELD);
    let held = match late {
        Some(late) => Function::Or(vec![held, late]),
        None => held,
    };
    let output = if active_low { Function::Or(vec![pin, held.negated()]) } else { Function::And(vec![pin, held]) };
    (state, output)
}
