//! Pins behind loops of gates, decided by the product and explored by the [`crate::loop_explorer`], on random circuits and
//! on the constructs of the trade. Neither may contradict the other: what is proven must be seen, with its witness, from
//! every stable state that fits it; what is clean must not be. What stays undecided is counted and bounded.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt::Write;

use stillwire::graph::text;
use stillwire::hazard::{HazardKind, Options, Pair, Undecided, decide};

use crate::explorer::{Glitch, Op};
use crate::loop_explorer::{Looped, Pin};
use crate::random_circuits::Random;

/// Random circuits that are compared.
const CIRCUITS: usize = 400;
/// States of one exploration; circuits beyond are left out and counted.
const STATES: usize = 15_000;

fn glitch(kind: HazardKind) -> Glitch {
    match kind {
        HazardKind::Static0 => Glitch::Static0,
        HazardKind::Static1 => Glitch::Static1,
        HazardKind::Dynamic => Glitch::Dynamic,
    }
}

const KINDS: [HazardKind; 3] = HazardKind::ALL;

/// The circuit for the product: inputs first, then gates.
fn written(circuit: &Looped) -> text::Parsed {
    let mut text: String = (0..circuit.inputs).map(|input| format!("n{input} = input\n")).collect();
    for (gate, (op, pins)) in circuit.gates.iter().enumerate() {
        let _ = write!(text, "n{} = {}", circuit.inputs + gate, format!("{op:?}").to_lowercase());
        for pin in pins {
            let _ = match pin {
                Pin::Input(input) => write!(text, " n{input}"),
                Pin::Gate(gate) => write!(text, " n{}", circuit.inputs + gate),
            };
        }
        text.push('\n');
    }
    text::parse(&text).unwrap_or_else(|error| panic!("{error} in:\n{text}"))
}

/// What a source does to the target, from all stable states.
#[derive(Default)]
struct Explored {
    glitches: BTreeSet<Glitch>,
    /// Values of the target from which what the circuit ends at, or whether it ends, depends on delays.
    open: BTreeSet<bool>,
    /// Per start: inputs, gates, what was seen.
    starts: Vec<(u32, u64, BTreeSet<Glitch>)>,
}

/// `None` when some exploration is too large.
fn explored(circuit: &Looped, target: usize) -> Option<BTreeMap<usize, Explored>> {
    let mut all: BTreeMap<usize, Explored> = BTreeMap::new();
    for vector in 0..1u32 << circuit.inputs {
        for gates in circuit.stable(vector) {
            for source in 0..circuit.inputs {
                let shown = circuit.change(target, vector, gates, source, STATES)?;
                let here = all.entry(source).or_default();
                here.glitches.extend(shown.glitches.iter().copied());
                if shown.unsettled {
                    here.open.insert(gates >> target & 1 == 1);
                }
                here.starts.push((vector, gates, shown.glitches));
            }
        }
    }
    Some(all)
}

/// How the questions about one target were answered.
#[derive(Default, Debug)]
struct Tally {
    proven: usize,
    clean: usize,
    /// Left open because the outcome depends on delays, and rightly so.
    races: usize,
    /// Left open although the exploration knows the answer.
    open: usize,
}

/// Compares one target; `restless` says that some inputs have no stable state.
#[track_caller]
fn compare(circuit: &Looped, target: usize, restless: bool, tally: &mut Tally) -> bool {
    let Some(expected) = explored(circuit, target) else { return false };
    let parsed = written(circuit);
    let node = |number: usize| parsed.node(&format!("n{number}")).expect("a node");
    let verdict = decide(&parsed.graph, &[node(circuit.inputs + target)], &Options::default()).remove(0);
    let open = verdict.pairs.iter().any(|pair| !pair.undecided.is_empty());
    assert!(open || !restless, "nothing is open although some inputs have no stable state: {circuit:?}");
    let empty = Explored::default();
    for source in 0..circuit.inputs {
        let none = Pair { source: node(source), hazards: Vec::new(), undecided: Vec::new() };
        let pair = verdict.pairs.iter().find(|pair| pair.source == node(source)).unwrap_or(&none);
        let expected = expected.get(&source).unwrap_or(&empty);
        for kind in KINDS {
            let context = || format!("input {source}, {}, target {target} of {circuit:?}: {pair:?}", kind.name());
            let seen = expected.glitches.contains(&glitch(kind));
            let proven = pair.hazards.iter().find(|(one, _)| *one == kind);
            let open = pair.undecided.iter().find(|(one, _)| *one == kind);
            assert!(proven.is_none() || open.is_none(), "{}", context());
            let unsure = match kind {
                HazardKind::Static0 => expected.open.contains(&false),
                HazardKind::Static1 => expected.open.contains(&true),
                HazardKind::Dynamic => !expected.open.is_empty(),
            };
            if restless && proven.is_some() {
                // Shown whatever the loop does, which need not rest in any state that could be explored.
            } else if let Some((_, witness)) = proven {
                assert!(seen, "a false alarm: {}", context());
                assert_eq!(witness.changes.len(), 1);
                let value = |number: usize, vector: u32, gates: u64| match number.checked_sub(circuit.inputs) {
                    None => vector >> number & 1 == 1,
                    Some(gate) => gates >> gate & 1 == 1,
                };
                let numbers = 0..circuit.inputs + circuit.gates.len();
                let said: Vec<(usize, bool)> = (witness.holds.iter().chain(&witness.changes))
                    .map(|&(held, value)| (numbers.clone().find(|&one| node(one) == held).expect("known"), value))
                    .collect();
                let fits = |&&(vector, gates, _): &&(u32, u64, BTreeSet<Glitch>)| {
                    said.iter().all(|&(number, held)| value(number, vector, gates) == held)
                };
                let fitting: Vec<_> = expected.starts.iter().filter(fits).collect();
                assert!(!fitting.is_empty(), "no stable state fits the witness: {}", context());
                let shows = fitting.iter().all(|(_, gates, glitches)| {
                    glitches.contains(&glitch(kind)) && (gates >> target & 1 == 1) == witness.target.0
                });
                assert!(shows, "the witness does not show it: {}", context());
                tally.proven += 1;
            } else if let Some((_, reason)) = open {
                let rightly = *reason == Undecided::Race && unsure || restless;
                *if rightly { &mut tally.races } else { &mut tally.open } += 1;
            } else {
                assert!(!seen, "a false clean: {}", context());
                assert!(!unsure, "clean although the outcome depends on delays: {}", context());
                tally.clean += 1;
            }
        }
    }
    true
}

fn restless(circuit: &Looped) -> bool {
    (0..1u32 << circuit.inputs).any(|vector| circuit.stable(vector).is_empty())
}

/// A circuit with at least one loop of two gates or more, and a gate that it reaches as the target.
fn random(random: &mut Random) -> (Looped, usize) {
    const OPS: [Op; 8] = [Op::And, Op::Nand, Op::Or, Op::Nor, Op::And, Op::Or, Op::Xor, Op::Not];
    let inputs = 2 + random.below(2);
    let count = 3 + random.below(4);
    let ring = 1 + random.below(3).min(count - 1);
    let gates = (0..count)
        .map(|gate| {
            let op = OPS[random.below(OPS.len())];
            // The first gates read each other in a ring; the others read what comes before them, or, seldom, anything.
            let chained = if gate < ring { (gate + ring - 1) % ring } else { gate - 1 };
            let mut pins = vec![Pin::Gate(chained)];
            let width = if op == Op::Not { 1 } else { 2 + usize::from(random.chance(25)) };
            while pins.len() < width {
                pins.push(if random.chance(60) {
                    Pin::Input(random.below(inputs))
                } else {
                    let reach = if random.chance(20) { count } else { gate + 1 };
                    Pin::Gate(random.below(reach))
                });
            }
            (op, pins)
        })
        .collect();
    (Looped { inputs, gates }, count - 1)
}

/// What is proven or clean is so, and of what can be decided no more than one question in a hundred stays open.
#[test]
fn random_loops_agree_with_the_exploration() {
    let mut numbers = Random::new(0x1007);
    let (mut tally, mut compared, mut quiet, mut left_out) = (Tally::default(), 0, 0, 0);
    while compared < CIRCUITS {
        let (circuit, target) = random(&mut numbers);
        if restless(&circuit) {
            // Decided as far as it is sound; a few of them are enough.
            quiet += 1;
            if quiet > CIRCUITS / 10 {
                continue;
            }
            let mut aside = Tally::default();
            compare(&circuit, target, true, &mut aside);
            continue;
        }
        if compare(&circuit, target, false, &mut tally) {
            compared += 1;
        } else {
            left_out += 1;
        }
    }
    assert!(left_out <= CIRCUITS / 4, "{left_out} circuits were too large to explore");
    assert!(tally.proven >= CIRCUITS / 10 && tally.clean >= CIRCUITS, "{tally:?}");
    assert!(tally.open * 100 <= tally.proven + tally.clean, "too much stays open: {tally:?}");
}

const A: Pin = Pin::Input(0);
const B: Pin = Pin::Input(1);
const C: Pin = Pin::Input(2);

fn gate(number: usize) -> Pin {
    Pin::Gate(number)
}

/// Each construct with the gate that drives the pin. Nothing of them may stay open.
fn constructs() -> Vec<(&'static str, Looped, usize)> {
    let looped = |inputs: usize, gates: &[(Op, &[Pin])]| Looped {
        inputs,
        gates: gates.iter().map(|(op, pins)| (*op, pins.to_vec())).collect(),
    };
    let latch = |bridged: bool| {
        let mut joined = vec![gate(1), gate(2)];
        joined.extend(bridged.then_some(gate(4)));
        looped(
            2,
            &[
                (Op::Not, &[A]),
                (Op::And, &[A, B]),
                (Op::And, &[gate(0), gate(3)]),
                (Op::Or, &joined),
                (Op::And, &[B, gate(3)]),
            ],
        )
    };
    vec![
        ("NOR latch", looped(2, &[(Op::Nor, &[A, gate(1)]), (Op::Nor, &[B, gate(0)])]), 0),
        ("NAND latch", looped(2, &[(Op::Nand, &[A, gate(1)]), (Op::Nand, &[B, gate(0)])]), 1),
        ("data latch without consensus", latch(false), 3),
        ("data latch with consensus", latch(true), 3),
        (
            "data latch of NAND gates",
            looped(
                2,
                &[
                    (Op::Not, &[B]),
                    (Op::Nand, &[A, B]),
                    (Op::Nand, &[A, gate(0)]),
                    (Op::Nand, &[gate(1), gate(4)]),
                    (Op::Nand, &[gate(2), gate(3)]),
                ],
            ),
            3,
        ),
        (
            "C-element",
            looped(
                2,
                &[
                    (Op::And, &[A, B]),
                    (Op::And, &[A, gate(3)]),
                    (Op::And, &[B, gate(3)]),
                    (Op::Or, &[gate(0), gate(1), gate(2)]),
                ],
            ),
            3,
        ),
        (
            "C-element without two of its pairs",
            looped(
                2,
                &[
                    (Op::And, &[A, B]),
                    (Op::Xor, &[A, B]),
                    (Op::And, &[gate(1), gate(3)]),
                    (Op::Or, &[gate(0), gate(2)]),
                ],
            ),
            3,
        ),
        (
            "clock switch whose gates lock each other out",
            looped(
                3,
                &[
                    (Op::Not, &[C]),
                    (Op::Nand, &[C, gate(2)]),
                    (Op::Nand, &[gate(0), gate(1)]),
                    (Op::Nor, &[A, gate(1)]),
                    (Op::Nor, &[B, gate(2)]),
                    (Op::Or, &[gate(3), gate(4)]),
                ],
            ),
            5,
        ),
        (
            "set that can pulse in front of a NOR latch",
            looped(
                3,
                &[
                    (Op::Not, &[A]),
                    (Op::Or, &[A, C]),
                    (Op::And, &[gate(0), gate(1)]),
                    (Op::Nor, &[B, gate(4)]),
                    (Op::Nor, &[gate(2), gate(3)]),
                ],
            ),
            3,
        ),
    ]
}

/// Which pairs of input and kind each construct shows is known from the trade; all of them are decided.
#[test]
fn constructs_are_decided_in_full() {
    for (name, circuit, target) in constructs() {
        assert!(!restless(&circuit), "{name}");
        let mut tally = Tally::default();
        assert!(compare(&circuit, target, false, &mut tally), "{name} is small");
        assert_eq!((tally.open, tally.races), (0, 0), "{name}: {tally:?}");
        let quiet = ["NOR latch", "NAND latch", "data latch with consensus", "data latch of NAND gates", "C-element"];
        assert_eq!(tally.proven == 0, quiet.contains(&name), "{name}: {tally:?}");
    }
}
