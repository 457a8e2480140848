//! The independent opponent of the hazard decision: for a small circuit it walks through every order in which the
//! delays of all gates and all wires can expire, and sees whether the target glitches. It has its own circuit type and
//! uses nothing of the product, in particular no hazard algebra.
//!
//! The model, from first principles. Each gate output and each gate input pin (the wire that leads to it) is an element
//! with a present value. An element is excited when its value differs from what its inputs say: a wire from its
//! driver's value, a gate from its function of the values at its own pins. The circuit starts stable; the source changes;
//! from then on any excited element may fire next, and takes the value its inputs say at that moment. An excitation that
//! vanishes before it fires leaves no trace. Every choice of delays, changing from event to event, is one path through
//! the states, and the search visits every reachable state.
//!
//! Invariant: nothing is cut off that could matter. Left out are only elements that cannot change in this transition
//! (no change reaches them, or a pin with a constant controlling value holds them) and elements that do not lead to the
//! target. The target's own output element is replaced by its function: it may fire at once whenever it is excited, and
//! never changes more often than its function does.

use std::collections::BTreeSet;

/// What a gate computes; all but `Buf` and `Not` have any number of pins.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Op {
    Buf,
    Not,
    And,
    Nand,
    Or,
    Nor,
    Xor,
    Xnor,
}

/// Where a pin is connected.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Pin {
    Input(usize),
    Gate(usize),
    Constant(bool),
}

/// A gate; its pins lead to inputs, constants and earlier gates only.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Gate {
    pub op: Op,
    pub pins: Vec<Pin>,
}

/// A feed-forward circuit of at most 32 inputs.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct Circuit {
    pub inputs: usize,
    pub gates: Vec<Gate>,
}

/// What the target can show beyond the change it needs.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Glitch {
    Static0,
    Static1,
    Dynamic,
}

impl Glitch {
    /// As the product's output names it.
    pub fn name(self) -> &'static str {
        match self {
            Glitch::Static0 => "static-0",
            Glitch::Static1 => "static-1",
            Glitch::Dynamic => "dynamic",
        }
    }

    pub fn of(before: bool, after: bool) -> Glitch {
        match (before, after) {
            (false, false) => Glitch::Static0,
            (true, true) => Glitch::Static1,
            _ => Glitch::Dynamic,
        }
    }
}

impl Op {
    /// The value at a pin that alone decides the output.
    pub fn controlling(self) -> Option<bool> {
        match self {
            Op::And | Op::Nand => Some(false),
            Op::Or | Op::Nor => Some(true),
            Op::Buf | Op::Not | Op::Xor | Op::Xnor => None,
        }
    }

    pub fn value(self, pins: impl IntoIterator<Item = bool>) -> bool {
        let mut pins = pins.into_iter();
        match self {
            Op::Buf | Op::And => pins.all(|pin| pin),
            Op::Not | Op::Nand => !pins.all(|pin| pin),
            Op::Or => pins.any(|pin| pin),
            Op::Nor => !pins.any(|pin| pin),
            Op::Xor => pins.fold(false, |sum, pin| sum ^ pin),
            Op::Xnor => !pins.fold(false, |sum, pin| sum ^ pin),
        }
    }
}

impl Circuit {
    pub fn new(inputs: usize) -> Self {
        Self { inputs, gates: Vec::new() }
    }

    /// Adds a gate and returns a pin connected to its output.
    pub fn add(&mut self, op: Op, pins: &[Pin]) -> Pin {
        self.gates.push(Gate { op, pins: pins.to_vec() });
        Pin::Gate(self.gates.len() - 1)
    }

    /// The stable values of all gates; bit `k` of `vector` is input `k`.
    pub fn settle(&self, vector: u32) -> Vec<bool> {
        let mut values = Vec::with_capacity(self.gates.len());
        for gate in &self.gates {
            let value = gate.op.value(gate.pins.iter().map(|&pin| pin_value(pin, vector, &values)));
            values.push(value);
        }
        values
    }

    /// The inputs that lead to `target` through any path.
    pub fn cone_inputs(&self, target: usize) -> BTreeSet<usize> {
        let mut wanted = vec![false; self.gates.len()];
        wanted[target] = true;
        let mut inputs = BTreeSet::new();
        for index in (0..=target).rev() {
            if !wanted[index] {
                continue;
            }
            for &pin in &self.gates[index].pins {
                match pin {
                    Pin::Input(input) => {
                        inputs.insert(input);
                    }
                    Pin::Gate(driver) => wanted[driver] = true,
                    Pin::Constant(_) => {}
                }
            }
        }
        inputs
    }
}

fn pin_value(pin: Pin, vector: u32, gates: &[bool]) -> bool {
    match pin {
        Pin::Input(input) => vector >> input & 1 == 1,
        Pin::Gate(gate) => gates[gate],
        Pin::Constant(value) => value,
    }
}

/// A gate of the transition's moving part: its function over bits of the state.
#[derive(Clone, Copy)]
struct Element {
    /// The bits of the state that are its moving pins.
    pins: u64,
    function: Function,
    invert: bool,
    /// The bit that is its own output; unused for the target.
    output: u64,
}

/// A gate's function once its constant pins are folded in.
#[derive(Clone, Copy)]
enum Function {
    All,
    Any,
    Odd,
}

impl Element {
    fn value(&self, state: u64) -> bool {
        let plain = match self.function {
            Function::All => state & self.pins == self.pins,
            Function::Any => state & self.pins != 0,
            Function::Odd => (state & self.pins).count_ones() & 1 == 1,
        };
        plain ^ self.invert
    }
}

/// The moving part of a circuit in one transition, its state packed into 64 bits: the source's new value in bit 0, a bit
/// per wire and per gate output, and in the highest bit whether the target has reached its final value.
struct Transition {
    /// Driver's bit and own bit of each wire.
    wires: Vec<(u32, u32)>,
    gates: Vec<Element>,
    target: Element,
    start: u64,
    bits: u32,
    before: bool,
    after: bool,
}

/// The bit of a state that says that the target has reached its final value.
pub const REACHED: u64 = 1 << 63;

impl Transition {
    /// `None` when no change reaches the target.
    fn new(circuit: &Circuit, target: usize, vector: u32, source: usize) -> Option<Self> {
        let before = circuit.settle(vector);
        let after = circuit.settle(vector ^ 1 << source);
        let moving = moving_gates(circuit, target, source, vector, &before);
        if !moving[target] {
            return None;
        }
        let mut leads = vec![false; circuit.gates.len()];
        leads[target] = true;
        for index in (0..=target).rev() {
            for &pin in &circuit.gates[index].pins {
                if let Pin::Gate(driver) = pin {
                    leads[driver] |= leads[index] && moving[index] && moving[driver];
                }
            }
        }

        let mut start = u64::from(vector >> source & 1 == 0);
        let mut bits = 1u32;
        let mut place = |value: bool, start: &mut u64| {
            assert!(bits < 62, "the explorer packs at most 61 moving wires and gates");
            *start |= u64::from(value) << bits;
            bits += 1;
            bits - 1
        };
        let mut outputs = vec![0u32; circuit.gates.len()];
        let mut wires = Vec::new();
        let mut gates = Vec::new();
        for index in (0..=target).filter(|&index| leads[index] && moving[index]) {
            let gate = &circuit.gates[index];
            let mut pins = 0u64;
            let mut odd = false;
            for &pin in &gate.pins {
                let driver = match pin {
                    Pin::Input(input) if input == source => Some(0),
                    Pin::Gate(driver) if moving[driver] => Some(outputs[driver]),
                    _ => None,
                };
                let value = pin_value(pin, vector, &before);
                match driver {
                    Some(driver) => {
                        let own = place(value, &mut start);
                        wires.push((driver, own));
                        pins |= 1 << own;
                    }
                    // A constant pin of an AND or OR that can move is not controlling, so it has no part in the function.
                    None => odd ^= value,
                }
            }
            let (function, invert) = match gate.op {
                Op::Buf | Op::And => (Function::All, false),
                Op::Not | Op::Nand => (Function::All, true),
                Op::Or => (Function::Any, false),
                Op::Nor => (Function::Any, true),
                Op::Xor => (Function::Odd, odd),
                Op::Xnor => (Function::Odd, !odd),
            };
            let mut element = Element { pins, function, invert, output: 0 };
            if index == target {
                let (before, after) = (before[target], after[target]);
                return Some(Self { wires, gates, target: element, start, bits, before, after });
            }
            outputs[index] = place(before[index], &mut start);
            element.output = 1 << outputs[index];
            gates.push(element);
        }
        None
    }

    /// Calls `next` with every state that can follow; returns whether the state is stable.
    fn successors(&self, state: u64, mut next: impl FnMut(u64)) -> bool {
        let mut stable = true;
        for &(driver, own) in &self.wires {
            if (state >> driver ^ state >> own) & 1 == 1 {
                stable = false;
                next(state ^ 1 << own);
            }
        }
        for gate in &self.gates {
            if gate.value(state) != (state & gate.output != 0) {
                stable = false;
                next(state ^ gate.output);
            }
        }
        stable
    }

    /// Whether some order of delays shows more changes of the target than it needs.
    fn glitches(&self, seen: &mut Seen) -> bool {
        seen.clear(self.bits);
        let mut open = vec![self.start];
        seen.insert(self.start);
        while let Some(state) = open.pop() {
            let mut glitch = false;
            let stable = self.successors(state, |mut following| {
                let value = self.target.value(following);
                if self.before == self.after {
                    glitch |= value != self.before;
                } else if value == self.after {
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
            if stable {
                assert_eq!(self.target.value(state), self.after, "a feed-forward circuit has one stable state");
            }
        }
        false
    }
}

/// Which gates can change at all when `source` does.
fn moving_gates(circuit: &Circuit, target: usize, source: usize, vector: u32, before: &[bool]) -> Vec<bool> {
    let mut moving = vec![false; circuit.gates.len()];
    for index in 0..=target {
        let gate = &circuit.gates[index];
        let pin_moves = |pin: Pin| match pin {
            Pin::Input(input) => input == source,
            Pin::Gate(driver) => moving[driver],
            Pin::Constant(_) => false,
        };
        let held = gate
            .pins
            .iter()
            .any(|&pin| !pin_moves(pin) && Some(pin_value(pin, vector, before)) == gate.op.controlling());
        moving[index] = !held && gate.pins.iter().any(|&pin| pin_moves(pin));
    }
    moving
}

/// The states visited: a bit per state while that fits, a hash table beyond. Kept between searches to save the
/// allocation.
#[derive(Default)]
pub struct Seen {
    dense: bool,
    bits: u32,
    map: Vec<u64>,
    touched: Vec<usize>,
    table: Vec<u64>,
    filled: usize,
}

const DENSE_BITS: u32 = 22;

impl Seen {
    /// Forgets all states; the next ones use bits below `bits`, and bit 63.
    pub fn clear(&mut self, bits: u32) {
        for word in self.touched.drain(..) {
            self.map[word] = 0;
        }
        self.bits = bits;
        self.dense = bits <= DENSE_BITS;
        self.filled = 0;
        if self.dense {
            if self.map.is_empty() {
                self.map = vec![0; 1 << (DENSE_BITS + 1 - 6)];
            }
        } else {
            self.table.clear();
            self.table.resize(1 << 12, 0);
        }
    }

    /// Whether the state is new.
    pub fn insert(&mut self, state: u64) -> bool {
        if self.dense {
            let index = (state & !REACHED | (state >> 63) << self.bits) as usize;
            let word = &mut self.map[index / 64];
            if *word == 0 {
                self.touched.push(index / 64);
            }
            let bit = 1 << (index % 64);
            let new = *word & bit == 0;
            *word |= bit;
            return new;
        }
        // Zero marks a free slot, so states are stored complemented in their unused bit 62.
        if 2 * self.filled >= self.table.len() {
            let old = std::mem::take(&mut self.table);
            self.table = vec![0; old.len() * 4];
            self.filled = 0;
            for key in old.into_iter().filter(|&key| key != 0) {
                self.insert_key(key);
            }
        }
        self.insert_key(state | 1 << 62)
    }

    fn insert_key(&mut self, key: u64) -> bool {
        let mask = self.table.len() - 1;
        let mut slot = (key.wrapping_mul(0x9e37_79b9_7f4a_7c15) >> 20) as usize & mask;
        while self.table[slot] != 0 {
            if self.table[slot] == key {
                return false;
            }
            slot = (slot + 1) & mask;
        }
        self.table[slot] = key;
        self.filled += 1;
        true
    }
}

/// What the target can show when `source` alone changes from the stable state of `vector`.
pub fn transition(circuit: &Circuit, target: usize, vector: u32, source: usize, seen: &mut Seen) -> Option<Glitch> {
    let transition = Transition::new(circuit, target, vector, source)?;
    transition.glitches(seen).then(|| Glitch::of(transition.before, transition.after))
}

/// Every (source, kind) pair that some single-input change and some order of delays shows on the target.
pub fn glitches(circuit: &Circuit, target: usize) -> BTreeSet<(usize, Glitch)> {
    let inputs: Vec<usize> = circuit.cone_inputs(target).into_iter().collect();
    let mut found = BTreeSet::new();
    let mut seen = Seen::default();
    for pattern in 0..1u32 << inputs.len() {
        let vector = inputs.iter().enumerate().fold(0, |vector, (at, input)| vector | (pattern >> at & 1) << input);
        for &source in &inputs {
            let Some(transition) = Transition::new(circuit, target, vector, source) else { continue };
            // A pair already seen needs no second witness.
            let pair = (source, Glitch::of(transition.before, transition.after));
            if !found.contains(&pair) && transition.glitches(&mut seen) {
                found.insert(pair);
            }
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    const A: Pin = Pin::Input(0);
    const B: Pin = Pin::Input(1);
    const C: Pin = Pin::Input(2);

    /// Requires exactly these glitching transitions, each as "before-after" in the order of the inputs.
    #[track_caller]
    fn check(circuit: &Circuit, target: Pin, expected: &[(&str, Glitch)]) {
        let Pin::Gate(target) = target else { panic!("the target is a gate") };
        let mut seen = Seen::default();
        let mut found = Vec::new();
        let text = |vector: u32| -> String {
            (0..circuit.inputs).map(|input| if vector >> input & 1 == 1 { '1' } else { '0' }).collect()
        };
        for vector in 0..1u32 << circuit.inputs {
            for source in 0..circuit.inputs {
                if let Some(glitch) = transition(circuit, target, vector, source, &mut seen) {
                    found.push((format!("{}-{}", text(vector), text(vector ^ 1 << source)), glitch));
                }
            }
        }
        let mut wanted: Vec<_> = expected.iter().map(|&(place, glitch)| (place.to_string(), glitch)).collect();
        found.sort();
        wanted.sort();
        assert_eq!(found, wanted);
    }

    // The cases below are derived by hand.

    #[test]
    fn one_gate_with_one_path_per_input_is_clean() {
        for op in [Op::And, Op::Nand, Op::Or, Op::Nor, Op::Xor, Op::Xnor] {
            let mut circuit = Circuit::new(3);
            let y = circuit.add(op, &[A, B, C]);
            check(&circuit, y, &[]);
        }
    }

    /// The two pins of an XOR on one wire: one sees the change first, so the output leaves its value and returns.
    #[test]
    fn an_xor_of_a_signal_with_itself_glitches_both_ways() {
        let mut circuit = Circuit::new(1);
        let y = circuit.add(Op::Xor, &[A, A]);
        check(&circuit, y, &[("0-1", Glitch::Static0), ("1-0", Glitch::Static0)]);
        let mut circuit = Circuit::new(1);
        let y = circuit.add(Op::Xnor, &[A, A]);
        check(&circuit, y, &[("0-1", Glitch::Static1), ("1-0", Glitch::Static1)]);
    }

    #[test]
    fn an_and_of_a_signal_with_itself_only_waits() {
        let mut circuit = Circuit::new(1);
        let y = circuit.add(Op::And, &[A, A]);
        check(&circuit, y, &[]);
    }

    /// a a' can be 1 for a moment in both directions, since the wires' delays are free.
    #[test]
    fn opposite_inversions_meet() {
        let mut circuit = Circuit::new(1);
        let inverted = circuit.add(Op::Not, &[A]);
        let y = circuit.add(Op::And, &[A, inverted]);
        check(&circuit, y, &[("0-1", Glitch::Static0), ("1-0", Glitch::Static0)]);
    }

    /// A constant controlling pin holds the gate whatever pulses elsewhere.
    #[test]
    fn a_controlling_constant_blocks() {
        let mut circuit = Circuit::new(2);
        let pulse = circuit.add(Op::Xor, &[A, A]);
        let y = circuit.add(Op::And, &[pulse, B]);
        check(&circuit, y, &[("01-11", Glitch::Static0), ("11-01", Glitch::Static0)]);
        let mut circuit = Circuit::new(1);
        let pulse = circuit.add(Op::Xor, &[A, A]);
        let y = circuit.add(Op::Or, &[pulse, Pin::Constant(true)]);
        check(&circuit, y, &[]);
    }

    /// A pulse that joins a change at an OR: the change may come after the pulse or under its cover.
    #[test]
    fn a_pulse_makes_a_change_dynamic() {
        let mut circuit = Circuit::new(1);
        let pulse = circuit.add(Op::Xor, &[A, A]);
        let y = circuit.add(Op::Or, &[pulse, A]);
        check(&circuit, y, &[("0-1", Glitch::Dynamic), ("1-0", Glitch::Dynamic)]);
    }

    /// E1: AB + A'C, static-1 on 011-111 and nothing else; with BC added, nothing. Classic example, also in
    /// encyclopedic articles on static hazards.
    #[test]
    fn e1_and_its_cover() {
        let mut circuit = Circuit::new(3);
        let inverted = circuit.add(Op::Not, &[A]);
        let upper = circuit.add(Op::And, &[A, B]);
        let lower = circuit.add(Op::And, &[inverted, C]);
        let y = circuit.add(Op::Or, &[upper, lower]);
        check(&circuit, y, &[("011-111", Glitch::Static1), ("111-011", Glitch::Static1)]);
        let consensus = circuit.add(Op::And, &[B, C]);
        let y = circuit.add(Op::Or, &[upper, lower, consensus]);
        check(&circuit, y, &[]);
    }

    /// E11: the four-NAND exclusive-or, no static hazard, dynamic on 01-11 and 10-11. Textbook; computed.
    #[test]
    fn e11_the_four_nand_exclusive_or() {
        let mut circuit = Circuit::new(2);
        let m = circuit.add(Op::Nand, &[A, B]);
        let p = circuit.add(Op::Nand, &[A, m]);
        let q = circuit.add(Op::Nand, &[B, m]);
        let y = circuit.add(Op::Nand, &[p, q]);
        let expected = ["01-11", "11-01", "10-11", "11-10"].map(|place| (place, Glitch::Dynamic));
        check(&circuit, y, &expected);
    }

    /// The hash table of large state spaces answers as the dense map does.
    #[test]
    fn both_kinds_of_memory_agree() {
        let mut dense = Seen::default();
        let mut table = Seen::default();
        dense.clear(16);
        table.clear(40);
        let mut key = 1u64;
        for _ in 0..60_000 {
            key = key.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            let state = key >> 48 | key & REACHED;
            assert_eq!(dense.insert(state), table.insert(state));
        }
    }
}
