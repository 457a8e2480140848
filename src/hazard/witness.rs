//! Witnesses that say only what matters. One lane of a simulation fixes every free node; most of them do not matter for
//! the waveform of the target. In all but the smallest cones the values are first justified backwards: where a clean
//! constant forces a gate, one such pin is kept and the others are let go. Then, in cones small enough, each source that is left is dropped when the
//! target's waveform stays determined without it, by the algebra lifted to sets of waveforms. Both steps are sound:
//! whatever the sources let go may hold, the target shows the same three bits.

use std::collections::BinaryHeap;
use std::sync::LazyLock;

use super::cone::{Cone, Edge, Op};
use super::parity::Region;
use super::simulate::{self, Lanes, Response};
use super::tables::{Need, Promises};
use super::wave::{self, Wave};
use super::{HazardKind, Witness};
use crate::graph::GateKind;

/// How many node evaluations the second step may cost per witness.
const EFFORT: usize = 1 << 14;

/// The second step looks at all nodes behind the target, justified or not, when they are fewer than this: the choice that
/// a justification makes at each gate by itself may need more signals than the target does.
const WHOLE: usize = 64;

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
        let frees = |kept: &[usize]| -> Vec<usize> {
            let free = |&node: &usize| node != source && matches!(self.cone.ops[node], Op::Free { .. });
            kept.iter().copied().filter(free).collect()
        };
        let mut kept = self.behind(root, WHOLE);
        let mut holds = frees(&kept);
        if kept.len() >= WHOLE || holds.len().saturating_mul(kept.len()) > EFFORT {
            kept = self.justified(root);
            holds = frees(&kept);
        }
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
            launch: None,
        }
    }

    /// `root` and all nodes behind it, ascending, as far as they are fewer than `most`.
    fn behind(&self, root: Edge, most: usize) -> Vec<usize> {
        let mut heap = BinaryHeap::from([root.node()]);
        let mut kept: Vec<usize> = Vec::new();
        while let Some(node) = heap.pop() {
            if kept.last() == Some(&node) {
                continue;
            }
            kept.push(node);
            if kept.len() >= most {
                break;
            }
            heap.extend(self.cone.fanin(node).iter().map(|pin| pin.node()));
        }
        kept.reverse();
        kept
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
        let mut lifted = Lifted::new(self, kept);
        let mut candidates = holds.clone();
        // A signal that many gates read is worth more than one of them, so those that few read go first.
        candidates.sort_by_cached_key(|&node| (lifted.readers(node), self.cone.origin[node]));
        candidates.retain(|&candidate| lifted.stays_determined_without(candidate, root.node()));
        holds.retain(|node| !candidates.contains(node));
    }
}

/// The kept nodes under the algebra lifted to sets of waveforms: each node has the set of those it may show, given that
/// the sources dropped so far are any clean constant and nodes that were not kept are anything at all.
struct Lifted<'a> {
    cone: &'a Cone,
    kept: &'a [usize],
    sets: Vec<u8>,
    /// Pins by position in `kept`, `None` for a node that was not kept; in one list, with where each node's begin.
    pins: Vec<(Option<usize>, bool)>,
    starts: Vec<usize>,
    dirty: Vec<bool>,
}

impl<'a> Lifted<'a> {
    fn new(lane: &Lane<'a>, kept: &'a [usize]) -> Self {
        let cone = lane.cone;
        let mut pins = Vec::new();
        let mut starts = vec![0];
        for &node in kept {
            let fanin = cone.fanin(node).iter();
            pins.extend(fanin.map(|pin| (kept.binary_search(&pin.node()).ok(), pin.inverted())));
            starts.push(pins.len());
        }
        let sets = kept.iter().map(|&node| only(lane.wave(Edge::new(node, false)))).collect();
        Self { cone, kept, sets, pins, starts, dirty: vec![false; kept.len()] }
    }

    /// How many of the kept nodes' pins read `node`.
    fn readers(&self, node: usize) -> usize {
        let at = self.kept.binary_search(&node).ok();
        self.pins.iter().filter(|(pin, _)| *pin == at).count()
    }

    /// Drops `candidate` if `root` keeps its one waveform without it, and tells whether it did.
    fn stays_determined_without(&mut self, candidate: usize, root: usize) -> bool {
        let Ok(at) = self.kept.binary_search(&candidate) else { return false };
        let mut changed = vec![(at, self.sets[at])];
        self.sets[at] = STILL;
        self.dirty[at] = true;
        for position in at + 1..self.kept.len() {
            let pins = &self.pins[self.starts[position]..self.starts[position + 1]];
            if !pins.iter().any(|&(pin, _)| pin.is_some_and(|pin| self.dirty[pin])) {
                continue;
            }
            let set = self.set(position);
            if set != self.sets[position] {
                changed.push((position, std::mem::replace(&mut self.sets[position], set)));
                self.dirty[position] = true;
            }
        }
        let determined = self.kept.binary_search(&root).is_ok_and(|at| self.sets[at].count_ones() == 1);
        for (position, before) in changed {
            self.dirty[position] = false;
            if !determined {
                self.sets[position] = before;
            }
        }
        determined
    }

    /// All waveforms a node can have when its pins have any of theirs.
    fn set(&self, position: usize) -> u8 {
        let pins = &self.pins[self.starts[position]..self.starts[position + 1]];
        let pins = pins.iter().map(|&(pin, flip)| match pin {
            Some(at) if flip => inverted(self.sets[at]),
            Some(at) => self.sets[at],
            None => ANY,
        });
        match self.cone.ops[self.kept[position]] {
            Op::Zero | Op::Free { .. } => self.sets[position],
            op => lifted(op, &self.cone.tables, pins),
        }
    }
}

/// All waveforms that a node with pins can have when each of them has any of its set.
pub(super) fn lifted(op: Op, tables: &[Promises], pins: impl Iterator<Item = u8>) -> u8 {
    match op {
        Op::Zero | Op::Free { .. } => only(Wave::constant(false)),
        Op::And => pins.fold(only(Wave::constant(true)), |all, set| PAIRS.and(all, set)),
        Op::Xor => pins.fold(only(Wave::constant(false)), |all, set| PAIRS.xor(all, set)),
        Op::Enter => {
            let moved = pins.flat_map(members).map(|pin| Wave { h: pin.moves(), ..pin });
            moved.fold(0, |all, wave| all | only(wave))
        }
        Op::Calm => pins.flat_map(members).fold(0, |all, pin| all | only(Wave { h: false, ..pin })),
        Op::Table(table) => {
            let table = &tables[table as usize];
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

/// Every waveform.
const ANY: u8 = 0xff;
/// The two clean constants.
pub(super) const STILL: u8 = 1 << 0 | 1 << 3;

pub(super) fn only(wave: Wave) -> u8 {
    1 << (u8::from(wave.i) | u8::from(wave.f) << 1 | u8::from(wave.h) << 2)
}

fn member(index: u8) -> Wave {
    Wave { i: index & 1 == 1, f: index & 2 == 2, h: index & 4 == 4 }
}

pub(super) fn members(set: u8) -> impl Iterator<Item = Wave> {
    (0..8u8).filter(move |index| set >> index & 1 == 1).map(member)
}

/// Inversion swaps waveform 0 with 3, 1 with 2, 4 with 7 and 5 with 6.
pub(super) fn inverted(set: u8) -> u8 {
    (set >> 3 & 0x11) | (set >> 1 & 0x22) | (set << 1 & 0x44) | (set << 3 & 0x88)
}

/// AND and XOR of every two sets of waveforms.
struct Pairs {
    and: Vec<u8>,
    xor: Vec<u8>,
}

static PAIRS: LazyLock<Pairs> =
    LazyLock::new(|| Pairs { and: Pairs::table(GateKind::And), xor: Pairs::table(GateKind::Xor) });

impl Pairs {
    fn and(&self, left: u8, right: u8) -> u8 {
        self.and[usize::from(left) << 8 | usize::from(right)]
    }

    fn xor(&self, left: u8, right: u8) -> u8 {
        self.xor[usize::from(left) << 8 | usize::from(right)]
    }

    fn table(kind: GateKind) -> Vec<u8> {
        let mut table = vec![0u8; 1 << 16];
        for left in 1..256usize {
            for right in 1..256usize {
                // Sets of one each by the algebra, larger ones as unions of smaller ones.
                let rest = [(left & (left - 1), right), (left, right & (right - 1))];
                table[left << 8 | right] = match rest.into_iter().find(|&(left, right)| left != 0 && right != 0) {
                    Some((smaller, same)) if same == right => {
                        table[smaller << 8 | right] | table[(left ^ smaller) << 8 | right]
                    }
                    Some((_, smaller)) => table[left << 8 | smaller] | table[left << 8 | (right ^ smaller)],
                    None => {
                        let pins = [left, right].map(|set| member(set.trailing_zeros() as u8));
                        only(wave::gate(kind, &pins))
                    }
                };
            }
        }
        table
    }
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
