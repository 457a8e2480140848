//! The signals that hold still in a witness, as a reader wants them: consecutive bits of one vector are one signal with
//! one value, so that a comparison of 24 address bits is one line and not 24. The JSON keeps every bit by itself.

use crate::rules::Hazard;
use crate::rules::bundle::split;

/// Up to so many bits a value is written in binary, beyond in hexadecimal.
const WIDEST_BINARY: usize = 8;

/// One held signal: a net, or consecutive bits of a vector.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(crate) struct Held {
    /// `top.a`, `top.a[3]`, `top.a[7:4]`.
    pub name: String,
    /// The highest index first.
    pub bits: Vec<bool>,
}

impl Held {
    /// `1` of one bit, `4'b0110` or `12'h7f0` of several.
    pub fn value(&self) -> String {
        let width = self.bits.len();
        if let [bit] = self.bits.as_slice() {
            return u8::from(*bit).to_string();
        }
        if width <= WIDEST_BINARY {
            let digits: String = self.bits.iter().map(|&bit| if bit { '1' } else { '0' }).collect();
            return format!("{width}'b{digits}");
        }
        let digits = self.bits.rchunks(4).rev().map(|four| {
            let digit = four.iter().fold(0, |digit, &bit| 2 * digit + u32::from(bit));
            char::from_digit(digit, 16).unwrap_or('?')
        });
        format!("{width}'h{}", digits.collect::<String>())
    }
}

/// All signals that hold still, by name and with the higher bits of a vector first.
pub(crate) fn held(hazard: &Hazard) -> Vec<Held> {
    let mut bits: Vec<(&str, Option<u64>, bool)> = (hazard.before.iter())
        .filter(|(name, _)| !hazard.changes.contains(name) && !hazard.moved.contains(name))
        .map(|(name, value)| {
            // What a loop feeds back is told by itself, because it is the loop's own net.
            let (vector, index) = if *name == hazard.net { (name.as_str(), None) } else { split(name) };
            (vector, index, *value)
        })
        .collect();
    bits.sort_by_key(|&(vector, index, _)| (vector, std::cmp::Reverse(index)));
    let mut held: Vec<Held> = Vec::new();
    let mut rest = bits.as_slice();
    while let Some(&(vector, first, value)) = rest.first() {
        let run = 1 + rest.windows(2).take_while(|pair| follows(&pair[0], &pair[1])).count();
        let name = match (first, rest[run - 1].1) {
            (None, _) => vector.to_string(),
            (Some(first), Some(last)) if run > 1 => format!("{vector}[{first}:{last}]"),
            (Some(first), _) => format!("{vector}[{first}]"),
        };
        let bits = if run > 1 { rest[..run].iter().map(|bit| bit.2).collect() } else { vec![value] };
        held.push(Held { name, bits });
        rest = &rest[run..];
    }
    held
}

/// Whether `low` is the bit just below `high`.
fn follows(high: &(&str, Option<u64>, bool), low: &(&str, Option<u64>, bool)) -> bool {
    high.0 == low.0 && matches!((high.1, low.1), (Some(high), Some(low)) if low + 1 == high)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::graph::NodeId;
    use crate::hazard::Witness;
    use crate::rules::Transition;

    fn hazard(net: &str, changes: &str, before: &[(&str, bool)]) -> Hazard {
        let before: Vec<_> = before.iter().map(|&(name, value)| (name.to_string(), value)).collect();
        Hazard {
            net: net.to_string(),
            kind: "static-1",
            cause: "logic",
            changes: vec![changes.to_string()],
            moved: Vec::new(),
            harm: String::new(),
            after: before.clone(),
            before,
            pin: (true, true),
            transition: Transition {
                target: NodeId::new(0),
                witness: Witness { changes: Vec::new(), holds: Vec::new(), target: (true, true), launch: None },
                calm: false,
            },
            launch: None,
            reach: "any-state",
        }
    }

    fn shown(hazard: &Hazard) -> Vec<String> {
        held(hazard).iter().map(|held| format!("{} = {}", held.name, held.value())).collect()
    }

    #[test]
    fn consecutive_bits_are_one_signal() {
        let before = [("t.a[10]", true), ("t.a[8]", false), ("t.a[9]", false), ("t.a[6]", true), ("t.b", false)];
        assert_eq!(shown(&hazard("t.n", "t.s", &before)), ["t.a[10:8] = 3'b100", "t.a[6] = 1", "t.b = 0"]);
    }

    #[test]
    fn a_changing_bit_parts_its_vector() {
        let before = [("t.a[0]", true), ("t.a[1]", true), ("t.a[2]", true), ("t.a[3]", false)];
        assert_eq!(shown(&hazard("t.n", "t.a[1]", &before)), ["t.a[3:2] = 2'b01", "t.a[0] = 1"]);
    }

    #[test]
    fn words_of_a_memory_stay_apart() {
        let before = [("t.m[0][1]", true), ("t.m[1][0]", true), ("t.m[1][1]", false)];
        assert_eq!(shown(&hazard("t.n", "t.s", &before)), ["t.m[0][1] = 1", "t.m[1][1:0] = 2'b01"]);
    }

    #[test]
    fn wide_values_are_hexadecimal() {
        let names: Vec<String> = (0..10).map(|index| format!("t.a[{index}]")).collect();
        let before: Vec<(&str, bool)> =
            names.iter().map(String::as_str).zip((0..10).map(|i| i != 3 && i != 8)).collect();
        // Bits 9 downto 0: 10_1111_0111.
        assert_eq!(shown(&hazard("t.n", "t.s", &before)), ["t.a[9:0] = 10'h2f7"]);
    }

    #[test]
    fn what_a_loop_feeds_back_stays_by_itself() {
        let before = [("t.q[0]", true), ("t.q[1]", true)];
        assert_eq!(shown(&hazard("t.q[1]", "t.s", &before)), ["t.q[0] = 1", "t.q[1] = 1"]);
    }
}
