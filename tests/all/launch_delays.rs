//! One step of the [`crate::launch_explorer`]: sources that hold, move, pass, open or race, and every order in which the
//! delays of the gates and wires behind them can expire.
//!
//! Each gate output and each gate pin (the wire that leads to it) is an element with a present value; an element that
//! differs from what its inputs say may change next. A source that moves has its last value from the start, since its
//! wires have delays of their own. An open latch is a buffer; one that opens has its old value until some moment, then
//! that of its data; one that races changes as it likes.
//!
//! Invariant: left out are only elements that no delay can change in this step. The target's own output element is
//! replaced by its function, which changes whenever the element could.

use std::collections::HashMap;

use crate::explorer::{Op, REACHED, Seen};
use crate::launch_explorer::{Gate, Machine, Net};

/// What a source does in a step.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
pub enum Role {
    Holds,
    /// Changes once, if its two values differ.
    Moves,
    /// A latch that is open all the time.
    Passes,
    /// A latch that opens at some moment of the step.
    Opens,
    /// A latch whose data moved as it closed: anything can happen.
    Races,
}

/// One step: the values of all sources before and after, and what each does in between.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub struct Step {
    pub before: u32,
    pub after: u32,
    pub roles: Vec<Role>,
}

impl Step {
    pub fn new(machine: &Machine, state: u32) -> Self {
        Self { before: state, after: state, roles: vec![Role::Holds; machine.sources()] }
    }

    pub fn set(&mut self, source: usize, role: Role, value: bool) {
        self.roles[source] = role;
        self.after = self.after & !(1 << source) | u32::from(value) << source;
    }

    pub fn moved(&self) -> u32 {
        self.before ^ self.after
    }
}

/// What an element computes over bits of the state.
#[derive(Clone, Copy, Debug)]
enum Function {
    All,
    Any,
    Odd,
    /// A latch: `old` until the bit `opened` is set, then the one pin.
    Opened {
        opened: u64,
        old: bool,
    },
}

#[derive(Clone, Copy, Debug)]
struct Element {
    pins: u64,
    function: Function,
    invert: bool,
    output: u64,
}

impl Element {
    fn value(&self, state: u64) -> bool {
        let plain = match self.function {
            Function::All => state & self.pins == self.pins,
            Function::Any => state & self.pins != 0,
            Function::Odd => (state & self.pins).count_ones() & 1 == 1,
            Function::Opened { opened, old } if state & opened == 0 => old,
            Function::Opened { .. } => state & self.pins != 0,
        };
        plain ^ self.invert
    }
}

/// The moving part of a circuit in a step. Sources that move have their last value from the start: it is their wires that
/// take their time. Each gate pin is a wire with a delay of its own; wires and gates are bits of a state of 64.
pub struct Delays<'a> {
    machine: &'a Machine,
    step: &'a Step,
    /// Values of nets that cannot change, and the bits of those that can.
    fixed: HashMap<Net, Option<bool>>,
    signals: HashMap<Net, u32>,
    /// Driver's bit and own bit.
    wires: Vec<(u32, u32)>,
    gates: Vec<Element>,
    /// Bits that change as they like, and bits that are set once.
    free: u64,
    once: u64,
    /// The values before the step, and those from which the exploration starts.
    before: u64,
    start: u64,
    bits: u32,
    target: Element,
    values: (bool, bool),
}

impl<'a> Delays<'a> {
    /// `None` when no change reaches the target.
    pub fn new(machine: &'a Machine, target: Net, step: &'a Step) -> Option<Self> {
        let none = Element { pins: 0, function: Function::All, invert: false, output: 0 };
        let mut delays = Self {
            machine,
            step,
            fixed: HashMap::new(),
            signals: HashMap::new(),
            wires: Vec::new(),
            gates: Vec::new(),
            free: 0,
            once: 0,
            before: 0,
            start: 0,
            bits: 0,
            target: none,
            values: (machine.at(target, step.before), machine.at(target, step.after)),
        };
        if delays.fixed(target).is_some() {
            return None;
        }
        delays.target = match target {
            Net::Gate(gate) => delays.element(gate),
            _ => {
                let driver = delays.signal(target);
                delays.buffer(driver)
            }
        };
        Some(delays)
    }

    fn place(&mut self, before: bool, start: bool) -> u32 {
        assert!(self.bits < 62, "the explorer packs at most 61 moving wires and gates");
        self.before |= u64::from(before) << self.bits;
        self.start |= u64::from(start) << self.bits;
        self.bits += 1;
        self.bits - 1
    }

    /// A wire from a moving signal; it still has the value from before the step.
    fn wire(&mut self, driver: u32) -> u64 {
        let value = self.before >> driver & 1 == 1;
        let own = self.place(value, value);
        self.wires.push((driver, own));
        1 << own
    }

    fn buffer(&mut self, driver: u32) -> Element {
        Element { pins: self.wire(driver), function: Function::All, invert: false, output: 0 }
    }

    /// Gives an element its output bit.
    fn drive(&mut self, mut element: Element) -> u32 {
        let value = element.value(self.before);
        let output = self.place(value, value);
        element.output = 1 << output;
        self.gates.push(element);
        output
    }

    /// The net's value, if no delay can change it in this step.
    fn fixed(&mut self, net: Net) -> Option<bool> {
        if let Some(&known) = self.fixed.get(&net) {
            return known;
        }
        let machine = self.machine;
        let fixed = match net {
            Net::Constant(value) => Some(value),
            Net::Gate(gate) => {
                let Gate { op, pins } = &machine.gates[gate];
                let pins: Vec<Option<bool>> = pins.iter().map(|&pin| self.fixed(pin)).collect();
                let known = || pins.iter().filter_map(|&pin| pin);
                let held = known().any(|value| Some(value) == op.controlling());
                (held || known().count() == pins.len()).then(|| op.value(known()))
            }
            Net::Input(source) => self.fixed_source(source, None),
            Net::Cell(cell) => self.fixed_source(machine.inputs + cell, Some(machine.cells[cell].data)),
        };
        self.fixed.insert(net, fixed);
        fixed
    }

    fn fixed_source(&mut self, source: usize, data: Option<Net>) -> Option<bool> {
        let before = self.step.before >> source & 1 == 1;
        let after = self.step.after >> source & 1 == 1;
        let still = match (self.step.roles[source], data) {
            (Role::Races, _) => false,
            (Role::Passes | Role::Opens, Some(data)) => before == after && self.fixed(data).is_some(),
            _ => before == after,
        };
        still.then_some(before)
    }

    /// The bit of a net that moves; it must not be fixed.
    fn signal(&mut self, net: Net) -> u32 {
        if let Some(&known) = self.signals.get(&net) {
            return known;
        }
        let signal = match net {
            Net::Constant(_) => unreachable!("a constant is fixed"),
            Net::Gate(gate) => {
                let element = self.element(gate);
                self.drive(element)
            }
            Net::Input(source) => self.source(source, None),
            Net::Cell(cell) => self.source(self.machine.inputs + cell, Some(self.machine.cells[cell].data)),
        };
        self.signals.insert(net, signal);
        signal
    }

    fn source(&mut self, source: usize, data: Option<Net>) -> u32 {
        let before = self.step.before >> source & 1 == 1;
        let after = self.step.after >> source & 1 == 1;
        match (self.step.roles[source], data) {
            (Role::Races, _) => {
                let bit = self.place(before, before);
                self.free |= 1 << bit;
                bit
            }
            (Role::Passes, Some(data)) => {
                let driver = self.signal(data);
                let element = self.buffer(driver);
                self.drive(element)
            }
            (Role::Opens, Some(data)) if self.fixed(data).is_none() => {
                let driver = self.signal(data);
                let opened = 1 << self.place(false, false);
                self.once |= opened;
                let pins = self.wire(driver);
                self.drive(Element {
                    pins,
                    function: Function::Opened { opened, old: before },
                    invert: false,
                    output: 0,
                })
            }
            _ => self.place(before, after),
        }
    }

    /// A gate over its moving pins. A fixed pin of an AND or OR that can move is not controlling, so it has no part in the
    /// function.
    fn element(&mut self, gate: usize) -> Element {
        let Gate { op, pins } = &self.machine.gates[gate];
        let mut odd = false;
        let mut moving = 0;
        for &pin in pins {
            match self.fixed(pin) {
                Some(value) => odd ^= value,
                None => {
                    let driver = self.signal(pin);
                    moving |= self.wire(driver);
                }
            }
        }
        let (function, invert) = match op {
            Op::Buf | Op::And => (Function::All, false),
            Op::Not | Op::Nand => (Function::All, true),
            Op::Or => (Function::Any, false),
            Op::Nor => (Function::Any, true),
            Op::Xor => (Function::Odd, odd),
            Op::Xnor => (Function::Odd, !odd),
        };
        Element { pins: moving, function, invert, output: 0 }
    }

    /// Calls `next` with every state that can follow.
    fn successors(&self, state: u64, mut next: impl FnMut(u64)) {
        for &(driver, own) in &self.wires {
            if (state >> driver ^ state >> own) & 1 == 1 {
                next(state ^ 1 << own);
            }
        }
        for gate in &self.gates {
            if gate.value(state) != (state & gate.output != 0) {
                next(state ^ gate.output);
            }
        }
        for bit in (0..self.bits).map(|bit| 1u64 << bit) {
            if self.free & bit != 0 || self.once & bit & !state != 0 {
                next(state ^ bit);
            }
        }
    }

    /// Whether some order of delays shows more changes of the target than its two values need.
    pub fn glitches(&self, seen: &mut Seen) -> bool {
        let (before, after) = self.values;
        assert_eq!(self.target.value(self.before), before, "the exploration starts at rest");
        seen.clear(self.bits);
        let mut open = vec![self.start];
        seen.insert(self.start);
        while let Some(state) = open.pop() {
            let mut glitch = false;
            self.successors(state, |mut following| {
                let value = self.target.value(following);
                if before == after {
                    glitch |= value != before;
                } else if value == after {
                    following |= REACHED;
                } else {
                    glitch |= following & REACHED != 0;
                }
                if !glitch && seen.insert(following) {
                    open.push(following);
                }
            });
            if glitch {
                return true;
            }
        }
        false
    }
}
