//! A second delay model beside that of the [`crate::explorer`]: pure transport delays, where no change is ever swallowed.
//! A wire then delivers every change of its driver, in order, each after a time of its own; and since these times are
//! free, the changes at the pins of a gate may arrive in every interleaving, whatever happened elsewhere. What matters of
//! a net's history is only how often it changed, because its values alternate. So this model follows, gate by gate,
//! every combination of change counts that the nets can have together, and for each gate every interleaving at its pins.
//!
//! Whether a hazard exists must not depend on the model, how many pulses it has does. The two explorers share the circuit
//! type and nothing else.

use std::collections::BTreeSet;

use crate::explorer::{Circuit, Pin, Seen, transition};
use crate::random_circuits::{Random, Written};

/// Counts are kept as sets of bits; a transition with more changes than this is given up.
const COUNTS: usize = 100;
/// The most interleavings' crossings, and combinations of counts, that are followed.
const LIMIT: usize = 20_000;

/// Whether some order of arrivals shows more changes of the target than it needs; `None` when there are too many.
fn glitches(circuit: &Circuit, target: usize, vector: u32, source: usize) -> Option<bool> {
    let before = circuit.settle(vector);
    let mut last_reader = vec![0; circuit.gates.len()];
    for (reader, gate) in circuit.gates.iter().enumerate().take(target + 1) {
        for &pin in &gate.pins {
            if let Pin::Gate(driver) = pin {
                last_reader[driver] = reader;
            }
        }
    }
    // One entry per gate so far: its number of changes, forgotten (0) after its last reader.
    let mut histories: BTreeSet<Vec<usize>> = BTreeSet::from([Vec::new()]);
    for index in 0..=target {
        let mut following = BTreeSet::new();
        for history in &histories {
            let pins: Vec<(bool, usize)> = circuit.gates[index]
                .pins
                .iter()
                .map(|&pin| match pin {
                    Pin::Input(input) => (vector >> input & 1 == 1, usize::from(input == source)),
                    Pin::Gate(driver) => (before[driver], history[driver]),
                    Pin::Constant(value) => (value, 0),
                })
                .collect();
            let counts = interleave(circuit, index, &pins)?;
            for count in (0..COUNTS).filter(|count| counts >> count & 1 == 1) {
                let mut next = history.clone();
                next.push(count);
                for driver in (0..index).filter(|&driver| last_reader[driver] <= index) {
                    next[driver] = 0;
                }
                following.insert(next);
            }
        }
        if following.len() > LIMIT {
            return None;
        }
        histories = following;
    }
    Some(histories.iter().any(|history| history[target] > 1))
}

/// The set of change counts that a gate can show when each pin, starting at a value, changes a number of times.
fn interleave(circuit: &Circuit, index: usize, pins: &[(bool, usize)]) -> Option<u128> {
    let crossings: usize = pins.iter().map(|&(_, changes)| changes + 1).product();
    if crossings > LIMIT {
        return None;
    }
    // A crossing is how many changes have arrived at each pin, read as a number of mixed radix.
    let value = |mut crossing: usize| {
        let arrived = pins.iter().map(|&(start, changes)| {
            let count = crossing % (changes + 1);
            crossing /= changes + 1;
            start ^ (count % 2 == 1)
        });
        circuit.gates[index].op.value(arrived)
    };
    let values: Vec<bool> = (0..crossings).map(value).collect();
    let mut counts = vec![0u128; crossings];
    counts[0] = 1;
    for crossing in 0..crossings {
        let mut stride = 1;
        for &(_, changes) in pins {
            if crossing / stride % (changes + 1) < changes {
                let next = crossing + stride;
                let change = u32::from(values[crossing] != values[next]);
                if counts[crossing] >> (COUNTS - 1) != 0 {
                    return None;
                }
                counts[next] |= counts[crossing] << change;
            }
            stride *= changes + 1;
        }
    }
    Some(counts[crossings - 1])
}

#[test]
fn hazards_exist_in_both_delay_models_or_in_neither() {
    let mut seen = Seen::default();
    let (mut compared, mut hazardous, mut given_up) = (0, 0, 0);
    for seed in 200_000..201_000 {
        let written = Written::random(&mut Random::new(seed));
        let (circuit, target) = (&written.circuit, written.target);
        for vector in 0..1u32 << circuit.inputs {
            for source in 0..circuit.inputs {
                let Some(transport) = glitches(circuit, target, vector, source) else {
                    given_up += 1;
                    continue;
                };
                let inertial = transition(circuit, target, vector, source, &mut seen);
                let place = || format!("seed {seed}, input {source} from {vector:b}\n{}", written.body());
                assert_eq!(transport, inertial.is_some(), "{}", place());
                compared += 1;
                hazardous += usize::from(inertial.is_some());
            }
        }
    }
    assert!(given_up * 100 < compared, "{given_up} given up beside {compared}");
    assert!(hazardous > 5_000, "{hazardous} of {compared} hazardous");
}
