//! Delays under which a hazard shows, and the simulation that confirms it.
//!
//! Each wire gets one delay, so that what it delivers is what it was given, later. That is enough for every hazard of
//! the algebra. By induction every net whose waveform has a hazard gets at least two changes more than its end points
//! need: where opposite changes meet, the one that opens the gate comes first; where a pin has a hazard of its own, it
//! arrives while the other pins let it through, those that end open before it, those that begin open after it, and
//! pulses of several pins together. At an exclusive-or all pins change one after the other.
//!
//! Pulses multiply where exclusive-ors meet again and again. A net with many of them gets a wire that varies from
//! change to change: it holds back what comes early, so that two or three changes are left. The delay model allows
//! that, and no promise of the algebra is lost by it.

use super::circuit::{Circuit, Element, Op};
use super::signal::Signal;
use crate::graph::GateKind;
use crate::hazard::{Promises, Wave};

/// A net with more changes than this, or with longer pauses between them, gets a wire that varies.
const CHANGES: usize = 8;
const SPREAD: u64 = 1_000;

/// The delays of one element.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub(super) struct Timing {
    /// Of the wire to each pin.
    pub(super) pins: Vec<u64>,
    /// A wire behind the element that varies: a change until the first time arrives at the second.
    pub(super) held: Vec<(u64, u64)>,
    /// The table promises nothing while this pin changes: so long after each of its changes the output flips for a unit.
    pub(super) flip: Option<(usize, u64)>,
}

/// The delays of a whole circuit, chosen for one step of the stimulus.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Plan {
    pub(super) step: usize,
    pub(super) timings: Vec<Timing>,
}

/// What every element shows in one step, and what arrives at its pins.
#[derive(Clone, Debug, Default)]
pub(super) struct Shown {
    pub(super) outputs: Vec<Signal>,
    pub(super) pins: Vec<Vec<Signal>>,
}

/// Chooses the delays under which the target shows its hazard in `step`.
pub(super) fn choose(circuit: &Circuit, step: usize) -> Plan {
    let mut plan = Plan { step, timings: Vec::with_capacity(circuit.elements.len()) };
    let mut outputs: Vec<Signal> = Vec::with_capacity(circuit.elements.len());
    for element in &circuit.elements {
        let drivers: Vec<&Signal> = element.pins.iter().map(|&pin| &outputs[pin]).collect();
        let wave = element.waves.get(step).copied().unwrap_or(Wave::constant(false));
        let mut timing = Timing { pins: arranged(&element.op, &drivers, wave.h), ..Timing::default() };
        let arrived = arrivals(&drivers, &timing);
        if let (Op::Table(_), true) = (&element.op, wave.h) {
            // The pin that changes last; then the table has reached its final value before the flip.
            let last = (0..arrived.len()).filter(|&pin| !arrived[pin].changes.is_empty());
            let last = last.max_by_key(|&pin| arrived[pin].last());
            timing.flip = last.map(|pin| (pin, arrived[pin].last() - arrived[pin].first() + 1));
        }
        let mut output = shown(element, &arrived, wave, &timing, true);
        let keep = usize::from(wave.changes()) + if wave.h { 2 } else { 0 };
        let spread = output.last() - output.first();
        if output.changes.len() > keep && output.changes.len() > CHANGES || wave.h && spread > SPREAD {
            timing.held = holding_back(&output, keep);
            output = held_back(&output, &timing);
        }
        plan.timings.push(timing);
        outputs.push(output);
    }
    plan
}

/// What happens in `step` under these delays.
pub(super) fn simulate(circuit: &Circuit, plan: &Plan, step: usize) -> Shown {
    let mut result = Shown::default();
    for (element, timing) in circuit.elements.iter().zip(&plan.timings) {
        let drivers: Vec<&Signal> = element.pins.iter().map(|&pin| &result.outputs[pin]).collect();
        let arrived = arrivals(&drivers, timing);
        let wave = element.waves.get(step).copied().unwrap_or(Wave::constant(false));
        let mut output = shown(element, &arrived, wave, timing, step == plan.step);
        if step == plan.step {
            output = held_back(&output, timing);
        }
        result.outputs.push(output);
        result.pins.push(arrived);
    }
    result
}

fn arrivals(drivers: &[&Signal], timing: &Timing) -> Vec<Signal> {
    drivers.iter().zip(&timing.pins).map(|(driver, &delay)| driver.delayed(delay)).collect()
}

/// The changes of a source that shows `wave`: two units apart when it bounces.
pub(super) fn stimulus(wave: Wave) -> Signal {
    let count = usize::from(wave.changes()) + if wave.h { 2 } else { 0 };
    Signal { start: wave.i, changes: (0..count as u64).map(|change| 2 * change).collect() }
}

/// The output of an element from what arrives at its pins.
fn shown(element: &Element, arrived: &[Signal], wave: Wave, timing: &Timing, flips: bool) -> Signal {
    match &element.op {
        Op::Given => stimulus(wave),
        Op::Late => {
            let data = arrived.first().cloned().unwrap_or_else(|| Signal::constant(false));
            let opens = std::iter::once((0, data.start));
            Signal::assigned(!data.start, opens.chain(data.values()).collect())
        }
        Op::Const(value) => Signal::constant(*value),
        Op::Gate(kind) => Signal::combined(arrived, |pins| gate(*kind, pins)),
        Op::Table(table) => {
            let plain = Signal::combined(arrived, |pins| value(table, pins));
            match timing.flip.filter(|_| flips) {
                Some((pin, delay)) => {
                    let flips =
                        arrived[pin].changes.iter().flat_map(|at| [(at + delay, true), (at + delay + 1, false)]);
                    let flip = Signal::assigned(false, flips.collect());
                    Signal::combined(&[plain, flip], |pins| pins[0] != pins[1])
                }
                None => plain,
            }
        }
        Op::Entry => {
            let bounces = |(at, value): (u64, bool)| [(at + 1, value), (at + 2, !value), (at + 3, value)];
            let start = arrived.first().is_some_and(|pin| pin.start);
            Signal::assigned(start, arrived.iter().flat_map(|pin| pin.values().flat_map(bounces)).collect())
        }
    }
}

pub(super) fn value(table: &Promises, pins: &[bool]) -> bool {
    // A combination without a row counts as 0 in the analysis.
    table.value(pins).unwrap_or(false)
}

fn gate(kind: GateKind, pins: &[bool]) -> bool {
    let plain = match kind {
        GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => pins.iter().all(|&pin| pin),
        GateKind::Or | GateKind::Nor => pins.iter().any(|&pin| pin),
        GateKind::Xor | GateKind::Xnor => pins.iter().filter(|&&pin| pin).count() % 2 == 1,
    };
    plain ^ kind.inverts()
}

/// The delays of the wires to the pins of an element that is to show a hazard or not.
fn arranged(op: &Op, drivers: &[&Signal], hazard: bool) -> Vec<u64> {
    match op {
        Op::Gate(GateKind::And | GateKind::Nand) if hazard => let_through(drivers, false),
        Op::Gate(GateKind::Or | GateKind::Nor) if hazard => let_through(drivers, true),
        Op::Gate(GateKind::Xor | GateKind::Xnor) | Op::Table(_) if hazard => one_after_the_other(drivers),
        _ => vec![1; drivers.len()],
    }
}

fn one_after_the_other(drivers: &[&Signal]) -> Vec<u64> {
    let mut delays = vec![1; drivers.len()];
    let mut end = 0u64;
    for (driver, delay) in drivers.iter().zip(&mut delays).filter(|(driver, _)| !driver.changes.is_empty()) {
        *delay = (end + 1).saturating_sub(driver.first()).max(1);
        end = driver.last() + *delay;
    }
    delays
}

/// An AND (with `inverted`, an OR): first the pins that end at 1, then the pulses, then those that begin at 1.
fn let_through(drivers: &[&Signal], inverted: bool) -> Vec<u64> {
    #[derive(Clone, Copy, PartialEq, Eq)]
    enum Slot {
        Still,
        Early,
        Middle,
        Late,
    }
    let pins: Vec<Signal> = drivers.iter().map(|driver| driver.inverted_if(inverted)).collect();
    let pulse = |pin: &Signal| !pin.changes.is_empty() && !pin.start && !pin.end();
    let mut slots: Vec<Slot> = pins
        .iter()
        .map(|pin| match pin.changes.is_empty() {
            true => Slot::Still,
            false if pulse(pin) => Slot::Middle,
            false if pin.end() => Slot::Early,
            false => Slot::Late,
        })
        .collect();
    if !slots.contains(&Slot::Middle) {
        // No pulse: a pin with a hazard of its own takes its place, so that all of it is let through.
        if let Some(own) = pins.iter().position(|pin| pin.changes.len() > 1) {
            slots[own] = Slot::Middle;
        }
    }
    let mut delays = vec![1; pins.len()];
    let mut end = 0u64;
    for slot in [Slot::Early, Slot::Middle, Slot::Late] {
        let here: Vec<usize> = (0..pins.len()).filter(|&pin| slots[pin] == slot).collect();
        // Pulses must overlap, so that all pins of the middle begin together; for the others any time will do.
        let together = here.iter().map(|&pin| pins[pin].first() + 1).max().unwrap_or(0).max(end + 1);
        let before = end;
        for pin in here {
            let earliest = if slot == Slot::Middle { together } else { before + 1 };
            delays[pin] = earliest.saturating_sub(pins[pin].first()).max(1);
            end = end.max(pins[pin].last() + delays[pin]);
        }
    }
    delays
}

/// The delays of a wire that lets `keep` changes through, one unit apart at the end.
fn holding_back(signal: &Signal, keep: usize) -> Vec<(u64, u64)> {
    let count = signal.changes.len();
    let last = signal.last() + 1;
    (count - keep..count).zip((0..keep as u64).rev()).map(|(at, left)| (signal.changes[at], last - left)).collect()
}

fn held_back(signal: &Signal, timing: &Timing) -> Signal {
    if timing.held.is_empty() {
        return signal.clone();
    }
    let arrives = |at: u64| timing.held.iter().find(|(until, _)| at <= *until).map_or(at + 1, |&(_, arrival)| arrival);
    Signal::assigned(signal.start, signal.values().map(|(at, value)| (arrives(at), value)).collect())
}

/// The output of an element that rests, from its pins.
pub(super) fn settled(op: &Op, pins: &[bool]) -> bool {
    match op {
        Op::Const(value) => *value,
        Op::Gate(kind) => gate(*kind, pins),
        Op::Table(table) => value(table, pins),
        Op::Given | Op::Entry => pins.first().copied().unwrap_or(false),
        Op::Late => pins.first().is_some_and(|data| !data),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::graph::{NodeId, text};
    use crate::hazard::{Cause, Launch, Options, Step, Witness, decide};
    use crate::rules::Transition;

    /// The changes of the target in all steps under the chosen delays, and how many would do.
    fn changes(graph: &crate::graph::Graph, transition: &Transition) -> (usize, usize) {
        let circuit = Circuit::new(graph, transition, &[], &[]).unwrap_or_else(|refusal| panic!("{refusal:?}"));
        let plan = choose(&circuit, 0);
        let steps = (0..circuit.steps).map(|step| simulate(&circuit, &plan, step));
        (steps.map(|shown| shown.outputs[circuit.target].changes.len()).sum(), circuit.needed)
    }

    #[track_caller]
    fn parsed(circuit: &str) -> text::Parsed {
        text::parse(circuit).unwrap_or_else(|error| panic!("{error} in:\n{circuit}"))
    }

    /// Each step is clean; the second takes back what the first did.
    #[test]
    fn two_clean_steps_make_a_pulse() {
        let circuit = parsed("c = input\nq = input\nf = and c q");
        let node = |name: &str| circuit.node(name).unwrap_or(NodeId::new(0));
        let launch = Launch {
            root: node("c"),
            rises: true,
            step: Step::Both,
            cause: Cause::Function,
            first: vec![(node("c"), false)],
            second: vec![(node("q"), true)],
            passing: Vec::new(),
            late: Vec::new(),
            raced: Vec::new(),
            target: [false, true, false],
        };
        let changes_of = vec![(node("c"), false), (node("q"), true)];
        let witness = Witness { changes: changes_of, holds: Vec::new(), target: (false, false), launch: Some(launch) };
        let transition = Transition { target: node("f"), witness, calm: false };
        assert_eq!(changes(&circuit.graph, &transition), (2, 0));
    }

    /// A latch that may do anything passes a pulse although it ends where it began.
    #[test]
    fn a_raced_source_bounces() {
        let circuit = parsed("c = input\nl = input\nf = or c l");
        let node = |name: &str| circuit.node(name).unwrap_or(NodeId::new(0));
        let launch = Launch {
            root: node("c"),
            rises: false,
            step: Step::Second,
            cause: Cause::Function,
            first: Vec::new(),
            second: Vec::new(),
            passing: Vec::new(),
            late: Vec::new(),
            raced: vec![node("l")],
            target: [false; 3],
        };
        let holds = vec![(node("c"), false)];
        let witness = Witness { changes: Vec::new(), holds, target: (false, false), launch: Some(launch) };
        let transition = Transition { target: node("f"), witness, calm: false };
        assert_eq!(changes(&circuit.graph, &transition), (2, 0));
    }

    /// A latch that held 1 opens as the step begins, finds its data at 0 and passes a pulse of it.
    #[test]
    fn a_latch_that_opens_late_moves_first() {
        let nodes = "e = input\na = input\nb = input\nn = not b\nd = and a n\nl = latch\nf = buf l\n";
        let circuit = parsed(&format!("{nodes}c0 = cell l data d enable e 1"));
        let node = |name: &str| circuit.node(name).unwrap_or(NodeId::new(0));
        let both = vec![(node("a"), false), (node("b"), false)];
        let launch = Launch {
            root: node("e"),
            rises: true,
            step: Step::Second,
            cause: Cause::Function,
            first: Vec::new(),
            second: both.clone(),
            passing: vec![node("l")],
            late: vec![node("l")],
            raced: Vec::new(),
            target: [true, true, false],
        };
        let witness = Witness { changes: both, holds: Vec::new(), target: (true, false), launch: Some(launch) };
        let transition = Transition { target: node("f"), witness, calm: false };
        assert_eq!(changes(&circuit.graph, &transition), (3, 1));
    }

    /// Pulses that multiply through a ladder of exclusive-ors of a net and its delayed self are held back, and every
    /// hazard still shows.
    #[test]
    fn a_ladder_of_exclusive_ors_stays_small() {
        let mut ladder = String::from("a = input\nb = input\nn0 = xor a b\n");
        for stage in 1..40 {
            let before = stage - 1;
            ladder += &format!(
                "i{stage} = not n{before}\nx{stage} = xor i{stage} n{before} a\nn{stage} = xor x{stage} n{before}\n"
            );
        }
        let circuit = parsed(&ladder);
        let target = circuit.node("n39").unwrap_or(NodeId::new(0));
        let verdict = decide(&circuit.graph, &[target], &Options::default()).remove(0);
        assert!(!verdict.is_clean());
        for (_, witness) in verdict.pairs.iter().flat_map(|pair| &pair.hazards) {
            let transition = Transition { target, witness: witness.clone(), calm: false };
            let (changes, needed) = changes(&circuit.graph, &transition);
            assert!(changes > needed && changes < 100, "{changes} changes");
        }
    }
}
