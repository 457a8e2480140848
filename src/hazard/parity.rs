//! The fan-out of one source within a cone, and where in it a hazard can start at all. A change of the source reaches a
//! node with an even or an odd number of inversions; an AND (or, by duality, an OR) can show a hazard of its own only
//! where two pins see opposite parities, an XOR where two pins see the change at all. Everything else is settled by
//! this linear walk without looking at a single value.

use super::cone::{Cone, Edge, Op};

const EVEN: u8 = 1;
const ODD: u8 = 2;

/// A pin of a node in a region.
#[derive(Clone, Copy, Debug)]
pub(super) enum Pin {
    /// Driven from within the region, by position.
    Inside(u32, bool),
    /// Driven by a node of the cone that does not see the change.
    Outside(Edge),
}

/// The nodes that see a change of one source and are seen by a root still of interest.
pub(super) struct Region {
    /// Ascending, the source first.
    pub(super) nodes: Vec<u32>,
    /// Per position: whether a hazard is possible here and matters.
    pub(super) may: Vec<bool>,
    starts: Vec<u32>,
    pins: Vec<Pin>,
    /// Position plus one per node of the cone, 0 outside.
    place: Vec<u32>,
}

impl Region {
    /// `live` tells which nodes a root still of interest depends on.
    pub(super) fn new(cone: &Cone, source: usize, live: &[bool]) -> Self {
        let mut place = vec![0u32; cone.len()];
        let mut nodes = vec![source as u32];
        place[source] = 1;
        let mut next = 0;
        while next < nodes.len() {
            for &to in cone.fanout(nodes[next] as usize) {
                if place[to as usize] == 0 && live[to as usize] {
                    place[to as usize] = 1;
                    nodes.push(to);
                }
            }
            next += 1;
        }
        nodes.sort_unstable();
        let mut region = Self { may: Vec::with_capacity(nodes.len()), starts: vec![0], pins: Vec::new(), place, nodes };
        let mut parity: Vec<u8> = Vec::with_capacity(region.nodes.len());
        for position in 0..region.nodes.len() {
            let node = region.nodes[position] as usize;
            region.place[node] = position as u32 + 1;
            for &edge in cone.fanin(node) {
                region.pins.push(match region.position(edge.node()) {
                    Some(inside) => Pin::Inside(inside as u32, edge.inverted()),
                    None => Pin::Outside(edge),
                });
            }
            region.starts.push(region.pins.len() as u32);
            let seen = |pin: &Pin| match *pin {
                Pin::Inside(inside, inverted) => {
                    let parity = parity[inside as usize];
                    Some(if inverted { parity >> 1 | (parity & EVEN) << 1 } else { parity })
                }
                Pin::Outside(_) => None,
            };
            let pins = region.pins(position);
            let all = pins.iter().filter_map(seen).fold(0, |all, parity| all | parity);
            let passes = pins.iter().any(|pin| matches!(*pin, Pin::Inside(inside, _) if region.may[inside as usize]));
            let (own, starts) = match cone.ops[node] {
                Op::Zero | Op::Free { .. } => (EVEN, false),
                Op::And => (all, opposed(pins.iter().filter_map(seen))),
                Op::Xor => (EVEN | ODD, pins.iter().filter_map(seen).count() >= 2),
                Op::Table(_) => (EVEN | ODD, true),
                Op::Enter => (all, true),
                Op::Calm => (all, false),
            };
            let may = (starts || passes) && cone.ops[node] != Op::Calm && cone.audible[node];
            parity.push(own);
            region.may.push(may);
        }
        region
    }

    pub(super) fn pins(&self, position: usize) -> &[Pin] {
        &self.pins[self.starts[position] as usize..self.starts[position + 1] as usize]
    }

    pub(super) fn position(&self, node: usize) -> Option<usize> {
        (self.place[node] as usize).checked_sub(1)
    }

    /// The position of `node` when a hazard is possible there.
    pub(super) fn suspect(&self, node: usize) -> Option<usize> {
        self.position(node).filter(|&position| self.may[position])
    }
}

/// Whether two different pins can change in opposite directions.
fn opposed(parities: impl Iterator<Item = u8>) -> bool {
    let mut before = 0;
    for parity in parities {
        if (parity & EVEN != 0 && before & ODD != 0) || (parity & ODD != 0 && before & EVEN != 0) {
            return true;
        }
        before |= parity;
    }
    false
}
