//! Witnesses that say only what matters. One lane of a simulation fixes every free node; most of them do not matter for
//! the waveform of the target. First the values are justified backwards: where a clean constant forces a gate, one such
//! pin is kept and the others are let go. Then, in cones small enough, each source that is left is dropped when the
//! target's waveform stays determined without it, by the algebra lifted to sets of waveforms. Both steps are sound:
//! whatever the sources let go may hold, the target shows the same three bits.

use std::collections::BinaryHeap;

use super::cone::{Cone, Edge, Op};
use super::parity::Region;
use super::simulate::{self, Lanes, Response};
use super::tables::Need;
use super::wave::{self, Wave};
use super::{HazardKind, Witness};
use crate::graph::GateKind;

/// How many node evaluations the second step may cost per witness.
const EFFORT: usize = 1 << 14;

/// One lane of a simulation.
pub(super) struct Lane<'a> {
    pub(super) cone: &'a Cone,
    pub(super) region: &'a Region,
    pub(super) values: &'a [Lanes],
    pub(super) response: &'a Response,
    pub(super) lane: usize,
}

impl Lane<'_> {
    fn wave(&self, edge: Edge) -> Wave {
        let i = simulate::bit(&self.values[edge.node()], self.lane);
        let wave = match self.region.position(edge.node()) {
            Some(at) => Wave {
                i,
                f: simulate::bit(&self.response.f[at], self.lane),
                h: simulate::bit(&self.response.h[at], self.lane),
            },
            None => Wave::constant(i),
        };
        if edge.inverted() { wave.inverted() } else { wave }
    }

    /// The witness of what the lane shows at `root`.
    pub(super) fn witness(&self, root: Edge) -> Witness {
        let source = self.region.nodes[0] as usize;
        let kept = self.justified(root);
        let mut holds: Vec<usize> = kept
            .iter()
            .copied()
            .filter(|&node| node != source && matches!(self.cone.ops[node], Op::Free { .. }))
            .collect();
        if holds.len().saturating_mul(kept.len()) <= EFFORT {
            self.drop_idle(root, &kept, &mut holds);
        }
        let mut holds: Vec<_> = holds
            .into_iter()
            .map(|node| (self.cone.origin[node], simulate::bit(&self.values[node], self.lane)))
            .collect();
        holds.sort_unstable();
        let target = self.wave(root);
        Witness {
            changes: vec![(self.cone.origin[source], simulate::bit(&self.values[source], self.lane))],
            holds,
            target: (target.i, target.f),
        }
    }

    /// Nodes whose waveforms together force that of `root`; ascending.
    fn justified(&self, root: Edge) -> Vec<usize> {
        let mut heap = BinaryHeap::from([root.node()]);
        let mut kept = Vec::new();
        while let Some(node) = heap.pop() {
            if kept.last() == Some(&node) {
                continue;
            }
            kept.push(node);
            let fanin = self.cone.fanin(node);
            let forcing = || {
                if self.cone.ops[node] != Op::And || !self.wave(Edge::new(node, false)).holds(false) {
                    return None;
                }
                let forcing = fanin.iter().filter(|&&pin| self.wave(pin).holds(false));
                forcing.min_by_key(|pin| (self.cone.cost[pin.node()], pin.node()))
            };
            match forcing() {
                Some(pin) => heap.push(pin.node()),
                None => heap.extend(fanin.iter().map(|pin| pin.node())),
            }
        }
        kept.reverse();
        kept
    }

    /// Drops every node of `holds` without which the waveform of `root` stays determined.
    fn drop_idle(&self, root: Edge, kept: &[usize], holds: &mut Vec<usize>) {
        let mut sets: Vec<u8> = vec![ANY; kept.len()];
        let mut open: Vec<bool> = vec![false; kept.len()];
        let mut candidates = holds.clone();
        candidates.sort_unstable_by_key(|&node| self.cone.origin[node]);
        for candidate in candidates {
            let Ok(at) = kept.binary_search(&candidate) else { continue };
            open[at] = true;
            for (position, &node) in kept.iter().enumerate() {
                sets[position] = if !matches!(self.cone.ops[node], Op::Free { .. }) {
                    self.lifted(node, kept, &sets)
                } else if open[position] {
                    STILL
                } else {
                    only(self.wave(Edge::new(node, false)))
                };
            }
            let determined = kept.binary_search(&root.node()).is_ok_and(|at| sets[at].count_ones() == 1);
            if determined {
                holds.retain(|&node| node != candidate);
            } else {
                open[at] = false;
            }
        }
    }

    /// All waveforms a node can have when its pins have any of theirs.
    fn lifted(&self, node: usize, kept: &[usize], sets: &[u8]) -> u8 {
        let pins = self.cone.fanin(node).iter().map(|pin| match kept.binary_search(&pin.node()) {
            Ok(at) if pin.inverted() => inverted(sets[at]),
            Ok(at) => sets[at],
            Err(_) => ANY,
        });
        let fold = |kind: GateKind, neutral: bool| {
            pins.clone().fold(only(Wave::constant(neutral)), |all, set| {
                let mut result = 0;
                for left in members(all) {
                    for right in members(set) {
                        result |= only(wave::gate(kind, &[left, right]));
                    }
                }
                result
            })
        };
        match self.cone.ops[node] {
            Op::Zero => only(Wave::constant(false)),
            Op::Free { .. } => STILL,
            Op::And => fold(GateKind::And, true),
            Op::Xor => fold(GateKind::Xor, false),
            Op::Enter => {
                let moved = pins.clone().flat_map(members).map(|pin| Wave { h: pin.moves(), ..pin });
                moved.fold(0, |all, wave| all | only(wave))
            }
            Op::Calm => pins.clone().flat_map(members).fold(0, |all, pin| all | only(Wave { h: false, ..pin })),
            Op::Table(table) => {
                let table = &self.cone.tables[table as usize];
                let pins: Vec<u8> = pins.collect();
                if pins.iter().all(|set| set.count_ones() == 1) {
                    let waves: Vec<Wave> = pins.iter().flat_map(|&set| members(set)).collect();
                    return only(table.wave(&waves));
                }
                let fits = |need: &Need, set: u8| match need {
                    Need::Value(value) => set == only(Wave::constant(*value)),
                    Need::Still => set & !STILL == 0,
                    Need::Nothing => true,
                };
                let promise =
                    table.rows.iter().find(|(needs, _)| needs.iter().zip(&pins).all(|(need, &set)| fits(need, set)));
                promise.map_or(ANY, |&(_, value)| only(Wave::constant(value)))
            }
        }
    }
}

/// Every waveform.
const ANY: u8 = 0xff;
/// The two clean constants.
const STILL: u8 = 1 << 0 | 1 << 3;

fn only(wave: Wave) -> u8 {
    1 << (u8::from(wave.i) | u8::from(wave.f) << 1 | u8::from(wave.h) << 2)
}

fn members(set: u8) -> impl Iterator<Item = Wave> {
    (0..8u8).filter(move |index| set >> index & 1 == 1).map(|index| Wave {
        i: index & 1 == 1,
        f: index & 2 == 2,
        h: index & 4 == 4,
    })
}

fn inverted(set: u8) -> u8 {
    members(set).fold(0, |all, wave| all | only(wave.inverted()))
}

/// Where in `lanes` of a response a root shows hazards of each kind.
pub(super) fn shown(root: Edge, i: &Lanes, f: &Lanes, h: &Lanes) -> [(HazardKind, Lanes); 3] {
    let mask = root.mask();
    let of = |value: fn(u64, u64) -> u64| -> Lanes {
        std::array::from_fn(|word| h[word] & value(i[word] ^ mask, f[word] ^ mask))
    };
    [
        (HazardKind::Static0, of(|i, f| !i & !f)),
        (HazardKind::Static1, of(|i, f| i & f)),
        (HazardKind::Dynamic, of(|i, f| i ^ f)),
    ]
}
