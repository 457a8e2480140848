//! The hazard decision and the waveform algebra against the explorer, on graphs built gate by gate without any Verilog:
//! every transition, and every layer of the decision by itself. When a random circuit fails end to end, this tells
//! whether the front end or the decision is wrong.

use std::collections::{BTreeMap, BTreeSet};

use stillwire::graph::{GateKind, Graph, GraphBuilder, NodeId, Site, SourceKind};
use stillwire::hazard::{HazardKind, Options, decide, waveform};

use crate::explorer::{Circuit, Glitch, Op, Pin, Seen, glitches, transition};
use crate::random_circuits::{Random, Written};

/// Seeds apart from those of the end-to-end comparison.
const SEEDS: std::ops::Range<u64> = 100_000..101_000;

/// The circuit as a gate graph: the nodes of its inputs and of its target.
fn build(circuit: &Circuit, target: usize) -> (Graph, Vec<NodeId>, NodeId) {
    let mut builder = GraphBuilder::new();
    let instance = builder.instance(None, "t", "t", None);
    let site = Site { instance, span: None };
    let inputs: Vec<NodeId> = (0..circuit.inputs).map(|_| builder.source(SourceKind::Input, site)).collect();
    let mut gates = Vec::new();
    for gate in &circuit.gates {
        let pins: Vec<NodeId> = gate
            .pins
            .iter()
            .map(|&pin| match pin {
                Pin::Input(input) => inputs[input],
                Pin::Gate(driver) => gates[driver],
                Pin::Constant(value) => builder.constant(value),
            })
            .collect();
        let kind = match gate.op {
            Op::Buf => GateKind::Buf,
            Op::Not => GateKind::Not,
            Op::And => GateKind::And,
            Op::Nand => GateKind::Nand,
            Op::Or => GateKind::Or,
            Op::Nor => GateKind::Nor,
            Op::Xor => GateKind::Xor,
            Op::Xnor => GateKind::Xnor,
        };
        gates.push(builder.gate(kind, &pins, site));
    }
    (builder.freeze(), inputs, gates[target])
}

fn glitch(kind: HazardKind) -> Glitch {
    match kind {
        HazardKind::Static0 => Glitch::Static0,
        HazardKind::Static1 => Glitch::Static1,
        HazardKind::Dynamic => Glitch::Dynamic,
    }
}

fn values(inputs: &[NodeId], vector: u32) -> BTreeMap<NodeId, bool> {
    inputs.iter().enumerate().map(|(at, &node)| (node, vector >> at & 1 == 1)).collect()
}

/// Eichelberger's ternary simulation (IBM J. R&D 9, 1965): the value of every gate while `source` is unknown.
fn ternary(circuit: &Circuit, vector: u32, source: usize) -> Vec<Option<bool>> {
    let mut known: Vec<Option<bool>> = Vec::new();
    for gate in &circuit.gates {
        let pins: Vec<Option<bool>> = gate
            .pins
            .iter()
            .map(|&pin| match pin {
                Pin::Input(input) if input == source => None,
                Pin::Input(input) => Some(vector >> input & 1 == 1),
                Pin::Gate(driver) => known[driver],
                Pin::Constant(value) => Some(value),
            })
            .collect();
        let any = |value: bool| pins.contains(&Some(value));
        let all_known = pins.iter().all(Option::is_some);
        let plain = match gate.op {
            Op::Buf | Op::Not | Op::And | Op::Nand if any(false) => Some(false),
            Op::Or | Op::Nor if any(true) => Some(true),
            _ if !all_known => None,
            Op::Buf | Op::Not | Op::And | Op::Nand => Some(true),
            Op::Or | Op::Nor => Some(false),
            Op::Xor | Op::Xnor => Some(pins.iter().filter(|pin| **pin == Some(true)).count() % 2 == 1),
        };
        let invert = matches!(gate.op, Op::Not | Op::Nand | Op::Nor | Op::Xnor);
        known.push(plain.map(|value| value ^ invert));
    }
    known
}

#[test]
fn the_algebra_equals_the_explorer_on_every_transition() {
    let mut seen = Seen::default();
    let mut transitions = 0;
    for seed in SEEDS {
        let written = Written::random(&mut Random::new(seed));
        let (circuit, target) = (&written.circuit, written.target);
        let (graph, inputs, node) = build(circuit, target);
        for vector in 0..1u32 << circuit.inputs {
            for source in 0..circuit.inputs {
                let other = vector ^ 1 << source;
                let wave = waveform(&graph, &values(&inputs, vector), &values(&inputs, other), node);
                let place = || format!("seed {seed}, input {source} from {vector:b}\n{}", written.body());
                assert_eq!((wave.i, wave.f), (circuit.settle(vector)[target], circuit.settle(other)[target]));
                let shown = transition(circuit, target, vector, source, &mut seen);
                assert_eq!(wave.hazard().map(glitch), shown, "{}", place());
                // Eichelberger 1965: with equal ends, a hazard exists exactly when the ternary value is unknown.
                if wave.i == wave.f {
                    assert_eq!(ternary(circuit, vector, source)[target].is_none(), shown.is_some(), "{}", place());
                }
                transitions += 1;
            }
        }
    }
    assert!(transitions > 50_000, "{transitions} transitions");
}

/// Decides random circuits with `options` and requires the explorer's pairs, with nothing undecided.
#[track_caller]
fn check(options: Options, seeds: std::ops::Range<u64>) {
    let mut seen = Seen::default();
    for seed in seeds {
        let written = Written::random(&mut Random::new(seed));
        let (graph, inputs, node) = build(&written.circuit, written.target);
        let verdicts = decide(&graph, &[node], &options);
        assert_eq!(verdicts.len(), 1);
        let mut found = BTreeSet::new();
        for pair in &verdicts[0].pairs {
            assert!(pair.undecided.is_empty(), "seed {seed}: {pair:?}");
            let source = inputs.iter().position(|&input| input == pair.source).expect("a source of the circuit");
            for (kind, witness) in &pair.hazards {
                found.insert((source, glitch(*kind)));
                let [(changing, before)] = witness.changes[..] else { panic!("seed {seed}: {witness:?}") };
                assert_eq!(changing, pair.source);
                let mut start: BTreeMap<NodeId, bool> = witness.holds.iter().copied().collect();
                start.insert(changing, before);
                let mut end = start.clone();
                end.insert(changing, !before);
                let wave = waveform(&graph, &start, &end, node);
                assert_eq!(
                    (wave.hazard(), (wave.i, wave.f)),
                    (Some(*kind), witness.target),
                    "seed {seed}: {witness:?}"
                );
                // Sources that the witness leaves out may have any value.
                let bit = |node: NodeId| 1u32 << inputs.iter().position(|&input| input == node).expect("an input");
                let fixed = start.keys().fold(0, |mask, &node| mask | bit(node));
                let vector = start.iter().filter(|&(_, &value)| value).fold(0, |mask, (&node, _)| mask | bit(node));
                for free in (0..1u32 << inputs.len()).filter(|free| free & fixed == 0) {
                    let shown = transition(&written.circuit, written.target, vector | free, source, &mut seen);
                    assert_eq!(shown, Some(glitch(*kind)), "seed {seed}: {witness:?} with {free:b}");
                }
            }
        }
        assert_eq!(found, glitches(&written.circuit, written.target), "seed {seed}\n{}", written.body());
    }
}

#[test]
fn the_decision_equals_the_explorer() {
    check(Options::default(), SEEDS);
}

#[test]
fn the_solver_alone_equals_the_explorer() {
    check(Options { exhaustive_sources: 0, patterns: 0, ..Options::default() }, SEEDS.start..SEEDS.start + 400);
}

#[test]
fn random_patterns_and_the_solver_equal_the_explorer() {
    check(Options { exhaustive_sources: 0, patterns: 64, ..Options::default() }, SEEDS.start + 400..SEEDS.end);
}
