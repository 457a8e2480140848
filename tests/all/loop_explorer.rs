//! The independent opponent of what is decided about pins behind loops of gates: for a small circuit with loops, from each
//! of its stable states, it walks through every order in which the delays of all gates and all wires can expire after one
//! input has changed. It shares nothing with the product: no algebra, no ternary simulation, no cut of the loops.
//!
//! The model is that of [`crate::explorer`]: each gate output and each gate pin has a value; one that differs from what it
//! hears may take it at any moment, and an excitation that vanishes leaves no trace. A circuit with loops may end in more
//! than one stable state, or in none: it goes on for ever where it can walk round in a set of states and no element that
//! stays excited all the time is passed over, since every delay ends.

use std::collections::{BTreeSet, HashMap};

use crate::explorer::{Glitch, Op};

/// Where a pin is connected; gates may come later than their readers.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Pin {
    Input(usize),
    Gate(usize),
}

/// A circuit of plain gates in any order.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct Looped {
    pub inputs: usize,
    pub gates: Vec<(Op, Vec<Pin>)>,
}

/// What one change from one stable state can do to the target.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct Shown {
    /// Glitches of walks that end at rest.
    pub glitches: BTreeSet<Glitch>,
    /// The target's values in the stable states that can be reached.
    pub ends: BTreeSet<bool>,
    /// Whether the circuit can end in several states, or need not end.
    pub unsettled: bool,
}

impl Looped {
    fn value(&self, pin: Pin, vector: u32, gates: u64) -> bool {
        match pin {
            Pin::Input(input) => vector >> input & 1 == 1,
            Pin::Gate(gate) => gates >> gate & 1 == 1,
        }
    }

    fn function(&self, gate: usize, vector: u32, gates: u64) -> bool {
        let (op, pins) = &self.gates[gate];
        op.value(pins.iter().map(|&pin| self.value(pin, vector, gates)))
    }

    /// The values of all gates that fit together for these inputs, bit by gate.
    pub fn stable(&self, vector: u32) -> Vec<u64> {
        let fits = |gates: &u64| {
            (0..self.gates.len()).all(|gate| self.function(gate, vector, *gates) == (gates >> gate & 1 == 1))
        };
        (0..1u64 << self.gates.len()).filter(fits).collect()
    }

    /// What `target` can show when `source` changes in a stable state; `None` when there are too many states.
    pub fn change(&self, target: usize, vector: u32, gates: u64, source: usize, most: usize) -> Option<Shown> {
        // Bits: the gates, then the wires in order, then whether the target has come back to where it began.
        let wires: Vec<(usize, usize)> =
            (0..self.gates.len()).flat_map(|gate| (0..self.gates[gate].1.len()).map(move |pin| (gate, pin))).collect();
        let first: Vec<usize> = self
            .gates
            .iter()
            .scan(self.gates.len(), |next, (_, pins)| {
                *next += pins.len();
                Some(*next - pins.len())
            })
            .collect();
        let back = 1u64 << 63;
        assert!(self.gates.len() + wires.len() < 63, "too large a circuit for the explorer");
        let mut start = gates;
        for (at, &(gate, pin)) in wires.iter().enumerate() {
            start |= u64::from(self.value(self.gates[gate].1[pin], vector, gates)) << (self.gates.len() + at);
        }
        let after = vector ^ 1 << source;
        let mut shown = Shown::default();
        let mut places: HashMap<u64, usize> = HashMap::from([(start, 0)]);
        let mut states = vec![start];
        // Successors, with the element that moves.
        let mut edges: Vec<Vec<(usize, usize)>> = Vec::new();
        let mut resting: BTreeSet<u64> = BTreeSet::new();
        let mut at = 0;
        while at < states.len() {
            let state = states[at];
            let mut here = Vec::new();
            let mut go = |next: u64, element: usize, states: &mut Vec<u64>| {
                let place = *places.entry(next).or_insert_with(|| {
                    states.push(next);
                    states.len() - 1
                });
                here.push((place, element));
            };
            for (index, &(gate, pin)) in wires.iter().enumerate() {
                let own = self.gates.len() + index;
                if self.value(self.gates[gate].1[pin], after, state) != (state >> own & 1 == 1) {
                    go(state ^ 1 << own, own, &mut states);
                }
            }
            for (gate, ((op, pins), first)) in self.gates.iter().zip(&first).enumerate() {
                let heard = op.value((0..pins.len()).map(|pin| state >> (first + pin) & 1 == 1));
                if heard != (state >> gate & 1 == 1) {
                    let mut next = state ^ 1 << gate;
                    if gate == target && (next ^ gates) >> target & 1 == 0 {
                        next |= back;
                    }
                    go(next, gate, &mut states);
                }
            }
            if here.is_empty() {
                resting.insert(state & !back);
                let (before, end) = (gates >> target & 1 == 1, state >> target & 1 == 1);
                shown.ends.insert(end);
                if state & back != 0 {
                    shown.glitches.insert(Glitch::of(before, end));
                }
            }
            if states.len() > most {
                return None;
            }
            edges.push(here);
            at += 1;
        }
        shown.unsettled = resting.len() != 1 || goes_on(&edges);
        Some(shown)
    }
}

/// Whether a walk can go on for ever: some states lead to each other, and each element that is excited in all of them
/// moves within them.
fn goes_on(edges: &[Vec<(usize, usize)>]) -> bool {
    let mut back: Vec<Vec<usize>> = vec![Vec::new(); edges.len()];
    for (from, here) in edges.iter().enumerate() {
        here.iter().for_each(|&(to, _)| back[to].push(from));
    }
    // Sets of states that lead to each other, by two passes over the graph (Kosaraju; textbook).
    let mut seen = vec![false; edges.len()];
    let mut finished = Vec::new();
    for start in 0..edges.len() {
        let mut path = vec![(start, 0)];
        if std::mem::replace(&mut seen[start], true) {
            continue;
        }
        while let Some((node, next)) = path.pop() {
            match edges[node].get(next) {
                Some(&(to, _)) => {
                    path.push((node, next + 1));
                    if !std::mem::replace(&mut seen[to], true) {
                        path.push((to, 0));
                    }
                }
                None => finished.push(node),
            }
        }
    }
    let mut set = vec![usize::MAX; edges.len()];
    for (number, &start) in finished.iter().rev().enumerate() {
        let mut open = vec![start];
        let mut members = Vec::new();
        while let Some(node) = open.pop() {
            if set[node] == usize::MAX {
                set[node] = number;
                members.push(node);
                open.extend(&back[node]);
            }
        }
        let moves: BTreeSet<usize> = (members.iter().flat_map(|&node| &edges[node]))
            .filter(|&&(to, _)| set[to] == number)
            .map(|&(_, element)| element)
            .collect();
        let excited = |node: usize| edges[node].iter().map(|&(_, element)| element).collect::<BTreeSet<usize>>();
        let always = members.iter().map(|&node| excited(node)).reduce(|all, here| &all & &here).unwrap_or_default();
        if !moves.is_empty() && always.is_subset(&moves) {
            return true;
        }
    }
    false
}

#[cfg(test)]
mod tests {
    use super::*;

    const A: Pin = Pin::Input(0);
    const B: Pin = Pin::Input(1);

    /// Textbook: the latch of two NOR gates has two stable states while both inputs are 0, and each change of one input
    /// has one outcome.
    #[test]
    fn the_nor_latch_has_one_outcome_for_each_change() {
        let latch =
            Looped { inputs: 2, gates: vec![(Op::Nor, vec![A, Pin::Gate(1)]), (Op::Nor, vec![B, Pin::Gate(0)])] };
        assert_eq!(latch.stable(0), [0b01, 0b10]);
        for vector in 0..4 {
            for gates in latch.stable(vector) {
                for source in 0..2 {
                    let shown = latch.change(0, vector, gates, source, 1 << 16).expect("small");
                    assert!(shown.glitches.is_empty() && shown.ends.len() == 1 && !shown.unsettled, "{shown:?}");
                }
            }
        }
    }

    /// Textbook (M. M. Mano, Digital Design; memory): q = dg + g'q may lose a stored 1 as g falls with d at 1: it pulses,
    /// and both ends are possible.
    #[test]
    fn the_latch_without_consensus_pulses_and_races() {
        let gates = vec![
            (Op::Not, vec![B]),
            (Op::And, vec![A, B]),
            (Op::And, vec![Pin::Gate(0), Pin::Gate(3)]),
            (Op::Or, vec![Pin::Gate(1), Pin::Gate(2)]),
        ];
        let latch = Looped { inputs: 2, gates };
        assert_eq!(latch.stable(0b11), [0b1010]);
        let shown = latch.change(3, 0b11, 0b1010, 1, 1 << 16).expect("small");
        assert_eq!(shown.ends, BTreeSet::from([false, true]));
        assert!(shown.glitches.contains(&Glitch::Static1) && shown.unsettled);
    }

    /// An odd ring that is let go never rests again.
    #[test]
    fn a_ring_goes_on() {
        let ring = Looped { inputs: 1, gates: vec![(Op::Nand, vec![A, Pin::Gate(0)])] };
        assert_eq!(ring.stable(0), [1]);
        let shown = ring.change(0, 0, 1, 0, 1 << 16).expect("small");
        assert!(shown.unsettled && shown.ends.is_empty());
    }
}
