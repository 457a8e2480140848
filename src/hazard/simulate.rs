//! The waveform algebra on 512 transitions at a time. Initial values are computed once per batch for a whole cone; a
//! change of one source is then followed through its fan-out only.

use super::cone::{Cone, Op};
use super::parity::{Pin, Region};
use super::tables::{Need, Promises};

const WORDS: usize = 8;

/// One bit for each of the transitions of a batch.
pub(super) type Lanes = [u64; WORDS];

/// How many transitions a batch holds.
pub(super) const BATCH: usize = 64 * WORDS;

pub(super) const NONE: Lanes = [0; WORDS];

pub(super) fn bit(lanes: &Lanes, lane: usize) -> bool {
    lanes[lane / 64] >> (lane % 64) & 1 == 1
}

/// The first lane that is set.
pub(super) fn first(lanes: &Lanes) -> Option<usize> {
    lanes.iter().position(|&word| word != 0).map(|at| at * 64 + lanes[at].trailing_zeros() as usize)
}

/// Values of `nodes` (ascending) from those of the free nodes, which are in place.
pub(super) fn values(cone: &Cone, nodes: impl Iterator<Item = usize>, values: &mut [Lanes]) {
    for node in nodes {
        let fanin = cone.fanin(node);
        let result = match cone.ops[node] {
            Op::Free { .. } => continue,
            Op::Zero => NONE,
            Op::And => fanin.iter().fold([u64::MAX; WORDS], |mut all, pin| {
                let (value, mask) = (&values[pin.node()], pin.mask());
                for word in 0..WORDS {
                    all[word] &= value[word] ^ mask;
                }
                all
            }),
            Op::Xor | Op::Enter | Op::Calm => fanin.iter().fold(NONE, |mut sum, pin| {
                let (value, mask) = (&values[pin.node()], pin.mask());
                for word in 0..WORDS {
                    sum[word] ^= value[word] ^ mask;
                }
                sum
            }),
            Op::Table(table) => {
                let mut result = NONE;
                let mut pins = vec![0; fanin.len()];
                for (word, result) in result.iter_mut().enumerate() {
                    for (slot, pin) in pins.iter_mut().zip(fanin) {
                        *slot = values[pin.node()][word] ^ pin.mask();
                    }
                    *result = table_value(&cone.tables[table as usize], &pins).0;
                }
                result
            }
        };
        values[node] = result;
    }
}

/// Value, and whether a row gives it.
fn table_value(table: &Promises, pins: &[u64]) -> (u64, u64) {
    let mut open = u64::MAX;
    let mut result = 0;
    for (needs, value) in &table.function {
        let fits = needs.iter().zip(pins).fold(open, |fits, (need, &pin)| match need {
            Need::Value(value) => fits & if *value { pin } else { !pin },
            Need::Still | Need::Nothing => fits,
        });
        if *value {
            result |= fits;
        }
        open &= !fits;
    }
    (result, !open)
}

/// Final values and hazards by position in a region; initial values are those of the cone.
#[derive(Default)]
pub(super) struct Response {
    pub(super) f: Vec<Lanes>,
    pub(super) h: Vec<Lanes>,
}

/// The waveform of a pin.
#[derive(Clone, Copy)]
struct Seen {
    i: Lanes,
    f: Lanes,
    h: Lanes,
}

/// Follows a change of the region's source in every lane, whatever its direction there.
pub(super) fn respond(cone: &Cone, region: &Region, values: &[Lanes], response: &mut Response) {
    response.f.clear();
    response.h.clear();
    for (position, &node) in region.nodes.iter().enumerate() {
        let node = node as usize;
        let pins = region.pins(position);
        let may = region.may[position];
        let seen = |pin: &Pin| see(region, values, response, pin);
        let (f, h) = match cone.ops[node] {
            Op::Zero | Op::Free { .. } => (std::array::from_fn(|word| !values[node][word]), NONE),
            Op::And => {
                let mut f = [u64::MAX; WORDS];
                let mut h = NONE;
                if may {
                    let mut live = [u64::MAX; WORDS];
                    for pin in pins.iter().map(seen) {
                        for word in 0..WORDS {
                            f[word] &= pin.f[word];
                            h[word] |= pin.h[word];
                            live[word] &= pin.i[word] | pin.f[word] | pin.h[word];
                        }
                    }
                    for word in 0..WORDS {
                        h[word] = live[word] & (h[word] | !(values[node][word] | f[word]));
                    }
                } else {
                    for pin in pins {
                        let (value, mask) = final_value(values, response, pin);
                        for word in 0..WORDS {
                            f[word] &= value[word] ^ mask;
                        }
                    }
                }
                (f, h)
            }
            Op::Xor => {
                let mut f = NONE;
                let mut h = NONE;
                let mut changed = NONE;
                for pin in pins.iter().map(seen) {
                    for word in 0..WORDS {
                        let change = pin.i[word] ^ pin.f[word];
                        f[word] ^= pin.f[word];
                        h[word] |= pin.h[word] | (changed[word] & change);
                        changed[word] |= change;
                    }
                }
                (f, if may { h } else { NONE })
            }
            Op::Enter | Op::Calm => {
                let mut f = NONE;
                let mut h = NONE;
                for pin in pins.iter().map(seen) {
                    f = pin.f;
                    if may {
                        h = std::array::from_fn(|word| pin.h[word] | (pin.i[word] ^ pin.f[word]));
                    }
                }
                (f, h)
            }
            Op::Table(table) => {
                let pins: Vec<Seen> = pins.iter().map(seen).collect();
                let mut f = NONE;
                let mut h = NONE;
                for word in 0..WORDS {
                    (f[word], h[word]) = table_response(&cone.tables[table as usize], &pins, word);
                }
                (f, if may { h } else { NONE })
            }
        };
        response.f.push(f);
        response.h.push(h);
    }
}

fn final_value<'a>(values: &'a [Lanes], response: &'a Response, pin: &Pin) -> (&'a Lanes, u64) {
    match *pin {
        Pin::Inside(at, inverted) => (&response.f[at as usize], (inverted as u64).wrapping_neg()),
        Pin::Outside(edge) => (&values[edge.node()], edge.mask()),
    }
}

fn see(region: &Region, values: &[Lanes], response: &Response, pin: &Pin) -> Seen {
    match *pin {
        Pin::Inside(at, inverted) => {
            let mask = (inverted as u64).wrapping_neg();
            let at = at as usize;
            let i = &values[region.nodes[at] as usize];
            let f = &response.f[at];
            Seen {
                i: std::array::from_fn(|word| i[word] ^ mask),
                f: std::array::from_fn(|word| f[word] ^ mask),
                h: response.h[at],
            }
        }
        Pin::Outside(edge) => {
            let value = &values[edge.node()];
            let value = std::array::from_fn(|word| value[word] ^ edge.mask());
            Seen { i: value, f: value, h: NONE }
        }
    }
}

/// Final value and hazard of a table in one word.
fn table_response(table: &Promises, pins: &[Seen], word: usize) -> (u64, u64) {
    let column = |of: fn(&Seen) -> &Lanes| -> Vec<u64> { pins.iter().map(|pin| of(pin)[word]).collect() };
    let (i, given_before) = table_value(table, &column(|pin| &pin.i));
    let (f, given_after) = table_value(table, &column(|pin| &pin.f));
    let moves = |pin: &Seen| (pin.i[word] ^ pin.f[word]) | pin.h[word];
    let mut promised = 0;
    for (needs, _) in &table.rows {
        promised |= needs.iter().zip(pins).fold(u64::MAX, |fits, (need, pin)| match need {
            Need::Value(true) => fits & !moves(pin) & pin.i[word],
            Need::Value(false) => fits & !moves(pin) & !pin.i[word],
            Need::Still => fits & !moves(pin),
            Need::Nothing => fits,
        });
    }
    let (mut some, mut several, mut hazards) = (0, 0, 0);
    for pin in pins {
        several |= some & moves(pin);
        some |= moves(pin);
        hazards |= pin.h[word];
    }
    let single = !several & !hazards & (i ^ f) & given_before & given_after;
    (f, some & !promised & !single)
}
