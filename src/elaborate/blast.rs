//! Exact gate forms of the arithmetic operators: additions, comparisons, shifts and the rest become ordinary gates, so that a
//! proof can use their function bit by bit. No implementation of them is fixed before synthesis; every call therefore
//! stands between [`GraphBuilder::op_in`] and [`GraphBuilder::op_out`], which make the waveform algebra answer "hazard
//! as soon as an input changes and the result is not forced". The structure chosen here is the plainest one and
//! carries no meaning of its own.
//!
//! Operands are least significant bit first. Literal constants fold by the builder's rules; what folds to pure wiring (a
//! shift by a constant) is wiring and no operator. Nothing here panics: a missing bit counts as 0.

use crate::graph::{GateKind, GraphBuilder, NodeId, OperatorId, Site};
use crate::syntax::ast::BinaryOp;

/// The gates of one `**` with a variable exponent beyond which [`pow`] gives up.
const POWER_GATES: usize = 1 << 20;

/// Gates of an adder, and of what is made of one, for each bit.
pub const GATES_BY_BIT: usize = 8;

/// About how many gates an operator takes on such operands.
pub fn gates(builder: &GraphBuilder, op: BinaryOp, a: &[NodeId], b: &[NodeId]) -> usize {
    let row = GATES_BY_BIT.saturating_mul(a.len());
    let variable = b.iter().filter(|&&bit| builder.as_constant(bit).is_none()).count();
    match op {
        BinaryOp::Mul => {
            let set = b.iter().filter(|&&bit| builder.as_constant(bit) != Some(false)).count();
            row.saturating_mul(set)
        }
        BinaryOp::Div | BinaryOp::Mod => row.saturating_mul(a.len()),
        BinaryOp::Shl | BinaryOp::ArithShl | BinaryOp::Shr | BinaryOp::ArithShr => {
            let rows = variable.min(a.len().max(1).ilog2() as usize + 1);
            a.len().saturating_mul(4).saturating_mul(rows)
        }
        // A power has a limit of its own.
        _ => row,
    }
}

/// The operator under construction: where its gates go and what marks its border.
struct Blaster<'a> {
    builder: &'a mut GraphBuilder,
    operator: OperatorId,
    site: Site,
}

impl<'a> Blaster<'a> {
    fn new(builder: &'a mut GraphBuilder, what: &'static str, site: Site) -> Self {
        let operator = builder.operator(what, site.span);
        Self { builder, operator, site }
    }

    /// An operand inside the border, at `width` bits: extended by 0, or by its top bit when `signed`.
    fn enter(&mut self, operand: &[NodeId], width: usize, signed: bool) -> Vec<NodeId> {
        let mut bits: Vec<NodeId> =
            operand.iter().take(width).map(|&bit| self.builder.op_in(self.operator, bit, self.site)).collect();
        let pad = match bits.last() {
            Some(&top) if signed => top,
            _ => self.builder.constant(false),
        };
        bits.resize(width, pad);
        bits
    }

    fn leave(&mut self, result: &[NodeId]) -> Vec<NodeId> {
        result.iter().map(|&bit| self.builder.op_out(self.operator, bit, self.site)).collect()
    }

    fn constant(&mut self, value: bool) -> NodeId {
        self.builder.constant(value)
    }

    fn not(&mut self, input: NodeId) -> NodeId {
        self.builder.not(input, self.site)
    }

    fn and(&mut self, a: NodeId, b: NodeId) -> NodeId {
        self.builder.and(&[a, b], self.site)
    }

    fn or(&mut self, inputs: &[NodeId]) -> NodeId {
        self.builder.or(inputs, self.site)
    }

    fn xor(&mut self, inputs: &[NodeId]) -> NodeId {
        self.builder.xor(inputs, self.site)
    }

    fn invert(&mut self, bits: &[NodeId]) -> Vec<NodeId> {
        bits.iter().map(|&bit| self.not(bit)).collect()
    }

    fn select(&mut self, select: NodeId, then: &[NodeId], otherwise: &[NodeId]) -> Vec<NodeId> {
        then.iter().zip(otherwise).map(|(&a, &b)| self.builder.select(select, a, b, self.site)).collect()
    }

    /// Sum and carry of three bits: an XOR and the majority as an AND-OR.
    fn full_adder(&mut self, a: NodeId, b: NodeId, carry: NodeId) -> (NodeId, NodeId) {
        let sum = self.xor(&[a, b, carry]);
        let terms = [self.and(a, b), self.and(a, carry), self.and(b, carry)];
        (sum, self.or(&terms))
    }

    /// Ripple-carry sum and the carry out.
    fn sum(&mut self, a: &[NodeId], b: &[NodeId], mut carry: NodeId) -> (Vec<NodeId>, NodeId) {
        let mut sum = Vec::with_capacity(a.len());
        for (&a, &b) in a.iter().zip(b) {
            let (bit, next) = self.full_adder(a, b, carry);
            sum.push(bit);
            carry = next;
        }
        (sum, carry)
    }

    /// `a - b` and whether `a >= b` as unsigned numbers (no borrow).
    fn difference(&mut self, a: &[NodeId], b: &[NodeId]) -> (Vec<NodeId>, NodeId) {
        let inverted = self.invert(b);
        let one = self.constant(true);
        self.sum(a, &inverted, one)
    }

    fn negated(&mut self, a: &[NodeId]) -> Vec<NodeId> {
        let zero = vec![self.constant(false); a.len()];
        self.difference(&zero, a).0
    }

    /// `a` when `negate` is 0, else `-a`.
    fn negated_if(&mut self, negate: NodeId, a: &[NodeId]) -> Vec<NodeId> {
        let negative = self.negated(a);
        self.select(negate, &negative, a)
    }

    /// The product cut to the operands' width: rows of partial products, each added by a ripple-carry adder.
    fn product(&mut self, a: &[NodeId], b: &[NodeId]) -> Vec<NodeId> {
        let width = a.len();
        let zero = self.constant(false);
        let mut total = vec![zero; width];
        for (shift, &digit) in b.iter().enumerate() {
            if self.builder.as_constant(digit) == Some(false) {
                continue;
            }
            let row: Vec<NodeId> = a[..width - shift].iter().map(|&bit| self.and(bit, digit)).collect();
            let (upper, _) = self.sum(&total[shift..], &row, zero);
            total.splice(shift.., upper);
        }
        total
    }

    /// Quotient and remainder of unsigned numbers by restoring division, one subtraction a quotient bit.
    fn divided(&mut self, a: &[NodeId], b: &[NodeId]) -> (Vec<NodeId>, Vec<NodeId>) {
        let zero = self.constant(false);
        let mut divisor = b.to_vec();
        divisor.push(zero);
        let mut quotient = vec![zero; a.len()];
        let mut remainder = vec![zero; a.len()];
        for index in (0..a.len()).rev() {
            let mut trial = vec![a[index]];
            trial.extend_from_slice(&remainder);
            let (reduced, fits) = self.difference(&trial, &divisor);
            quotient[index] = fits;
            remainder = self.select(fits, &reduced[..a.len()], &trial[..a.len()]);
        }
        (quotient, remainder)
    }

    fn equals(&mut self, a: &[NodeId], b: &[NodeId]) -> NodeId {
        let same: Vec<NodeId> =
            a.iter().zip(b).map(|(&a, &b)| self.builder.gate(GateKind::Xnor, &[a, b], self.site)).collect();
        self.builder.and(&same, self.site)
    }
}

/// Which way a shift goes and what comes in.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Shift {
    Left,
    Right,
    Arithmetic,
}

/// `a + b`: a ripple-carry adder; the carry out is dropped.
pub fn add(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], site: Site) -> Vec<NodeId> {
    let mut blaster = Blaster::new(builder, "adder", site);
    let width = a.len().max(b.len());
    let (a, b) = (blaster.enter(a, width, false), blaster.enter(b, width, false));
    let zero = blaster.constant(false);
    let (sum, _) = blaster.sum(&a, &b, zero);
    blaster.leave(&sum)
}

/// `a - b`: a ripple-carry adder of `a`, NOT `b` and a carry in of 1.
pub fn sub(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], site: Site) -> Vec<NodeId> {
    let mut blaster = Blaster::new(builder, "subtractor", site);
    let width = a.len().max(b.len());
    let (a, b) = (blaster.enter(a, width, false), blaster.enter(b, width, false));
    let (difference, _) = blaster.difference(&a, &b);
    blaster.leave(&difference)
}

/// `-a` in two's complement, as `0 - a`.
pub fn neg(builder: &mut GraphBuilder, a: &[NodeId], site: Site) -> Vec<NodeId> {
    let mut blaster = Blaster::new(builder, "negation", site);
    let a = blaster.enter(a, a.len(), false);
    let negated = blaster.negated(&a);
    blaster.leave(&negated)
}

/// `a * b` cut to the operands' width, the same for signed and unsigned: an array of AND gates and ripple-carry rows.
pub fn mul(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], site: Site) -> Vec<NodeId> {
    let mut blaster = Blaster::new(builder, "multiplier", site);
    let width = a.len().max(b.len());
    let (a, b) = (blaster.enter(a, width, false), blaster.enter(b, width, false));
    let product = blaster.product(&a, &b);
    blaster.leave(&product)
}

/// Quotient or remainder: restoring division of the magnitudes, then the sign of the standard (quotient negative when the
/// signs differ, remainder with the sign of the dividend). A divisor of 0 gives unknown bits: each result bit
/// is then selected from a fresh [`GraphBuilder::unknown`].
fn divide(
    builder: &mut GraphBuilder,
    a: &[NodeId],
    b: &[NodeId],
    signed: bool,
    want_quotient: bool,
    site: Site,
) -> Vec<NodeId> {
    let what = if want_quotient { "divider" } else { "remainder" };
    let mut blaster = Blaster::new(builder, what, site);
    let width = a.len().max(b.len());
    let (a, b) = (blaster.enter(a, width, signed), blaster.enter(b, width, signed));
    let zero = blaster.constant(false);
    let top = |bits: &[NodeId]| if signed { bits.last().copied().unwrap_or(zero) } else { zero };
    let (a_negative, b_negative) = (top(&a), top(&b));
    let (a_size, b_size) = (blaster.negated_if(a_negative, &a), blaster.negated_if(b_negative, &b));
    let (quotient, remainder) = blaster.divided(&a_size, &b_size);
    let result = if want_quotient {
        let negative = blaster.xor(&[a_negative, b_negative]);
        blaster.negated_if(negative, &quotient)
    } else {
        blaster.negated_if(a_negative, &remainder)
    };
    let nonzero = blaster.or(&b);
    let result = match blaster.builder.as_constant(nonzero) {
        Some(true) => result,
        _ => {
            let unknown: Vec<NodeId> = (0..width).map(|_| blaster.builder.unknown(site)).collect();
            blaster.select(nonzero, &result, &unknown)
        }
    };
    blaster.leave(&result)
}

/// `a / b`, truncated towards zero: a restoring divider. Division by zero gives unknown bits.
pub fn div(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], signed: bool, site: Site) -> Vec<NodeId> {
    divide(builder, a, b, signed, true, site)
}

/// `a % b` with the sign of `a`: a restoring divider. Division by zero gives unknown bits.
pub fn rem(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], signed: bool, site: Site) -> Vec<NodeId> {
    divide(builder, a, b, signed, false, site)
}

/// `base ** exponent` at the width of the base, by squaring: one selected multiplication per bit of the exponent that is
/// not a literal 0. `exponent` may have any width. A negative exponent (when `exponent_signed`) follows IEEE 1364-2005
/// table 5-6, with unknown bits for a base of 0. `None` when it would take an unreasonable number of gates.
pub fn pow(
    builder: &mut GraphBuilder,
    base: &[NodeId],
    exponent: &[NodeId],
    base_signed: bool,
    exponent_signed: bool,
    site: Site,
) -> Option<Vec<NodeId>> {
    let width = base.len();
    let digits = exponent.iter().rposition(|&bit| builder.as_constant(bit) != Some(false)).map_or(0, |top| top + 1);
    if width.checked_mul(width)?.checked_mul(digits)?.checked_mul(12)? > POWER_GATES {
        return None;
    }
    let mut blaster = Blaster::new(builder, "power", site);
    let base = blaster.enter(base, width, false);
    let exponent = blaster.enter(exponent, exponent.len(), false);
    let zero = blaster.constant(false);
    let mut one = vec![zero; width];
    if let Some(lowest) = one.first_mut() {
        *lowest = blaster.constant(true);
    }
    let mut result = one.clone();
    let mut square = base.clone();
    for (index, &digit) in exponent[..digits].iter().enumerate() {
        if index > 0 {
            square = blaster.product(&square, &square);
        }
        let longer = blaster.product(&result, &square);
        result = blaster.select(digit, &longer, &result);
    }
    let negative = if exponent_signed { exponent.last().copied().unwrap_or(zero) } else { zero };
    if blaster.builder.as_constant(negative) != Some(false) {
        let ones = vec![blaster.constant(true); width];
        let is_one = blaster.equals(&base, &one);
        let is_zero = {
            let any = blaster.or(&base);
            blaster.not(any)
        };
        let is_minus_one = if base_signed { blaster.equals(&base, &ones) } else { zero };
        let odd = exponent.first().copied().unwrap_or(zero);
        let unknown: Vec<NodeId> = (0..width).map(|_| blaster.builder.unknown(site)).collect();
        let sign = blaster.select(odd, &ones, &one);
        let mut fraction = blaster.select(is_zero, &unknown, &vec![zero; width]);
        fraction = blaster.select(is_minus_one, &sign, &fraction);
        fraction = blaster.select(is_one, &one, &fraction);
        result = blaster.select(negative, &fraction, &result);
    }
    Some(blaster.leave(&result))
}

/// The borrow of `a - b`, signs swapped in by inverting the top bits: 1 when `a < b`.
fn compare(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], signed: bool, or_equal: bool, site: Site) -> NodeId {
    let mut blaster = Blaster::new(builder, "comparison", site);
    let width = a.len().max(b.len());
    let (mut a, mut b) = (blaster.enter(a, width, signed), blaster.enter(b, width, signed));
    if signed {
        for side in [&mut a, &mut b] {
            if let Some(top) = side.last_mut() {
                *top = blaster.not(*top);
            }
        }
    }
    // a <= b is the carry of b - a; a < b is the missing carry of a - b.
    let result = if or_equal {
        blaster.difference(&b, &a).1
    } else {
        let not_less = blaster.difference(&a, &b).1;
        blaster.not(not_less)
    };
    let operator = blaster.operator;
    builder.op_out(operator, result, site)
}

/// `a < b`: the borrow chain of a ripple subtractor.
pub fn less_than(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], signed: bool, site: Site) -> NodeId {
    compare(builder, a, b, signed, false, site)
}

/// `a <= b`: the carry chain of a ripple subtractor.
pub fn less_equal(builder: &mut GraphBuilder, a: &[NodeId], b: &[NodeId], signed: bool, site: Site) -> NodeId {
    compare(builder, a, b, signed, true, site)
}

/// `bits` moved by `distance`, which is at most their number.
fn moved(bits: &[NodeId], distance: usize, fill: NodeId, kind: Shift) -> Vec<NodeId> {
    let kept = bits.len() - distance;
    let mut result = vec![fill; bits.len()];
    if kind == Shift::Left {
        result[distance..].copy_from_slice(&bits[..kept]);
    } else {
        result[..kept].copy_from_slice(&bits[distance..]);
    }
    result
}

/// A barrel shifter: one row of AND-OR selectors for each bit of the amount that can matter, then, when any higher bit of
/// the amount is set, everything replaced by the fill. A constant amount is wiring.
fn shift(builder: &mut GraphBuilder, a: &[NodeId], amount: &[NodeId], kind: Shift, site: Site) -> Vec<NodeId> {
    let zero = builder.constant(false);
    let width = a.len();
    let fill = |bits: &[NodeId]| match bits.last() {
        Some(&top) if kind == Shift::Arithmetic => top,
        _ => zero,
    };
    if let Some(digits) = amount.iter().map(|&bit| builder.as_constant(bit)).collect::<Option<Vec<bool>>>() {
        let distance = digits.iter().rev().fold(0usize, |sum, &bit| sum.saturating_mul(2).saturating_add(bit.into()));
        return moved(a, distance.min(width), fill(a), kind);
    }
    let mut blaster = Blaster::new(builder, "shift", site);
    let mut bits = blaster.enter(a, width, false);
    let amount = blaster.enter(amount, amount.len(), false);
    let fill = fill(&bits);
    let rows = (0..amount.len().min(31)).take_while(|&row| 1 << row < width).count();
    for (row, &digit) in amount[..rows].iter().enumerate() {
        let further = moved(&bits, 1 << row, fill, kind);
        bits = blaster.select(digit, &further, &bits);
    }
    let beyond = blaster.or(&amount[rows..]);
    bits = blaster.select(beyond, &vec![fill; width], &bits);
    blaster.leave(&bits)
}

/// `a << amount`; the amount is unsigned and of any width.
pub fn shift_left(builder: &mut GraphBuilder, a: &[NodeId], amount: &[NodeId], site: Site) -> Vec<NodeId> {
    shift(builder, a, amount, Shift::Left, site)
}

/// `a >> amount`; the amount is unsigned and of any width.
pub fn shift_right(builder: &mut GraphBuilder, a: &[NodeId], amount: &[NodeId], site: Site) -> Vec<NodeId> {
    shift(builder, a, amount, Shift::Right, site)
}

/// `a >>> amount` of a signed `a`: the top bit comes in; the amount is unsigned and of any width.
pub fn shift_arith(builder: &mut GraphBuilder, a: &[NodeId], amount: &[NodeId], site: Site) -> Vec<NodeId> {
    shift(builder, a, amount, Shift::Arithmetic, site)
}

/// The number of ones (`$countones`), in just as many bits as the largest count needs: a chain of adders.
pub fn count_ones(builder: &mut GraphBuilder, a: &[NodeId], site: Site) -> Vec<NodeId> {
    let mut blaster = Blaster::new(builder, "population count", site);
    let width = (usize::BITS - a.len().leading_zeros()) as usize;
    let a = blaster.enter(a, a.len(), false);
    let zero = blaster.constant(false);
    let mut count = vec![zero; width];
    for bit in a {
        let mut one = vec![zero; width];
        if let Some(lowest) = one.first_mut() {
            *lowest = bit;
        }
        count = blaster.sum(&count, &one, zero).0;
    }
    blaster.leave(&count)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::graph::{Graph, NodeKind, SourceKind};

    /// Operands as sources or as literal constants, and the builder they live in.
    struct Bench {
        builder: GraphBuilder,
        site: Site,
        inputs: Vec<NodeId>,
        seed: u64,
    }

    impl Bench {
        fn new(seed: u64) -> Self {
            let mut builder = GraphBuilder::new();
            let instance = builder.instance(None, "t", "t", None);
            Self { builder, site: Site { instance, span: None }, inputs: Vec::new(), seed: seed * 2 + 1 }
        }

        fn random(&mut self) -> u64 {
            self.seed ^= self.seed << 13;
            self.seed ^= self.seed >> 7;
            self.seed ^= self.seed << 17;
            self.seed >> 8
        }

        fn operand(&mut self, width: usize) -> Vec<NodeId> {
            let bits: Vec<NodeId> = (0..width).map(|_| self.builder.source(SourceKind::Input, self.site)).collect();
            self.inputs.extend(&bits);
            bits
        }

        fn literal(&mut self, number: u64, width: usize) -> Vec<NodeId> {
            (0..width).map(|bit| self.builder.constant(number >> bit & 1 == 1)).collect()
        }
    }

    /// Evaluates the whole graph for one assignment of `inputs`; `None` is unknown. Nodes are built after their fan-in, so
    /// one pass in order of ids suffices.
    fn evaluate(graph: &Graph, inputs: &[NodeId], bits: &[bool]) -> Vec<Option<bool>> {
        let mut values: Vec<Option<bool>> = vec![None; graph.len()];
        for node in graph.nodes() {
            let fanin: Vec<Option<bool>> = graph.fanin(node).iter().map(|input| values[input.index()]).collect();
            values[node.index()] = match graph.kind(node) {
                NodeKind::Const(value) => Some(value),
                NodeKind::Source(_) => inputs.iter().position(|&input| input == node).map(|at| bits[at]),
                NodeKind::Gate(gate) => {
                    let plain = match gate {
                        GateKind::And | GateKind::Nand if fanin.contains(&Some(false)) => Some(false),
                        GateKind::Or | GateKind::Nor if fanin.contains(&Some(true)) => Some(true),
                        _ if fanin.contains(&None) => None,
                        GateKind::And | GateKind::Nand => Some(true),
                        GateKind::Or | GateKind::Nor => Some(false),
                        GateKind::Xor | GateKind::Xnor | GateKind::Not | GateKind::Buf => {
                            Some(fanin.iter().filter(|bit| **bit == Some(true)).count() % 2 == 1)
                        }
                    };
                    plain.map(|bit| bit != gate.inverts())
                }
                _ => fanin.first().copied().flatten(),
            };
        }
        values
    }

    fn unsigned(values: &[Option<bool>], bits: &[NodeId]) -> Option<u64> {
        bits.iter().rev().try_fold(0, |sum, bit| Some(sum << 1 | u64::from(values[bit.index()]?)))
    }

    fn mask(width: usize) -> u64 {
        (1 << width) - 1
    }

    fn sign_extended(number: u64, width: usize) -> i64 {
        ((number << (64 - width)) as i64) >> (64 - width)
    }

    type Form = fn(&mut GraphBuilder, &[NodeId], &[NodeId], Site) -> Vec<NodeId>;

    /// Compares the gates of `form` with `expected` on random values: both operands variable, then the right one, then the
    /// left one literal. `expected` gets both operands and the width, and returns `None` for unknown.
    #[track_caller]
    fn check(form: Form, right_width: usize, expected: fn(u64, u64, usize) -> Option<u64>) {
        for width in [1, 2, 3, 5, 8] {
            let right_width = if right_width == 0 { width } else { right_width };
            for round in 0..12 {
                let mut bench = Bench::new(round + 77);
                let fixed = bench.random();
                let a = if round % 3 == 2 { bench.literal(fixed, width) } else { bench.operand(width) };
                let b = if round % 3 == 1 { bench.literal(fixed, right_width) } else { bench.operand(right_width) };
                let result = form(&mut bench.builder, &a, &b, bench.site);
                let samples: Vec<u64> = (0..40).map(|_| bench.random()).collect();
                let graph = bench.builder.freeze();
                for sample in samples {
                    let bits: Vec<bool> = (0..bench.inputs.len()).map(|at| sample >> at & 1 == 1).collect();
                    let values = evaluate(&graph, &bench.inputs, &bits);
                    let (a, b) = (unsigned(&values, &a).unwrap_or(0), unsigned(&values, &b).unwrap_or(0));
                    let want = expected(a, b, width).map(|number| number & mask(result.len()));
                    assert_eq!(unsigned(&values, &result), want, "{a} and {b} at {width} bits");
                }
            }
        }
    }

    #[test]
    fn sums_differences_and_products() {
        check(add, 0, |a, b, _| Some(a.wrapping_add(b)));
        check(sub, 0, |a, b, _| Some(a.wrapping_sub(b)));
        check(mul, 0, |a, b, _| Some(a.wrapping_mul(b)));
        check(|builder, a, _, site| neg(builder, a, site), 0, |a, _, _| Some(a.wrapping_neg()));
    }

    #[test]
    fn quotients_and_remainders() {
        check(|builder, a, b, site| div(builder, a, b, false, site), 0, |a, b, _| a.checked_div(b));
        check(|builder, a, b, site| rem(builder, a, b, false, site), 0, |a, b, _| a.checked_rem(b));
        check(
            |builder, a, b, site| div(builder, a, b, true, site),
            0,
            |a, b, width| sign_extended(a, width).checked_div(sign_extended(b, width)).map(|result| result as u64),
        );
        check(
            |builder, a, b, site| rem(builder, a, b, true, site),
            0,
            |a, b, width| sign_extended(a, width).checked_rem(sign_extended(b, width)).map(|result| result as u64),
        );
    }

    #[test]
    fn comparisons() {
        check(|builder, a, b, site| vec![less_than(builder, a, b, false, site)], 0, |a, b, _| Some(u64::from(a < b)));
        check(|builder, a, b, site| vec![less_equal(builder, a, b, false, site)], 0, |a, b, _| Some(u64::from(a <= b)));
        check(
            |builder, a, b, site| vec![less_than(builder, a, b, true, site)],
            0,
            |a, b, width| Some(u64::from(sign_extended(a, width) < sign_extended(b, width))),
        );
        check(
            |builder, a, b, site| vec![less_equal(builder, a, b, true, site)],
            0,
            |a, b, width| Some(u64::from(sign_extended(a, width) <= sign_extended(b, width))),
        );
    }

    #[test]
    fn shifts() {
        for amount_width in [1, 2, 4, 7] {
            check(shift_left, amount_width, |a, b, _| Some(a.checked_shl(b as u32).unwrap_or(0)));
            check(shift_right, amount_width, |a, b, _| Some(a.checked_shr(b as u32).unwrap_or(0)));
            check(shift_arith, amount_width, |a, b, width| Some((sign_extended(a, width) >> b.min(63)) as u64));
        }
    }

    #[test]
    fn powers() {
        let power: Form = |builder, a, b, site| pow(builder, a, b, false, false, site).unwrap_or_default();
        check(power, 3, |a, b, _| Some(a.wrapping_pow(b as u32)));
        check(
            |builder, a, b, site| pow(builder, a, b, true, true, site).unwrap_or_default(),
            3,
            |a, b, width| match (sign_extended(a, width), sign_extended(b, 3)) {
                (a, b) if b >= 0 => Some(a.wrapping_pow(b as u32) as u64),
                (0, _) => None,
                (1, _) => Some(1),
                (-1, b) => Some(if b % 2 == 0 { 1 } else { u64::MAX }),
                _ => Some(0),
            },
        );
    }

    #[test]
    fn population_count() {
        check(|builder, a, _, site| count_ones(builder, a, site), 0, |a, _, _| Some(u64::from(a.count_ones())));
    }

    #[test]
    fn a_constant_shift_is_wiring() {
        let mut bench = Bench::new(1);
        let a = bench.operand(4);
        let amount = bench.literal(1, 3);
        let shifted = shift_right(&mut bench.builder, &a, &amount, bench.site);
        assert_eq!(shifted[..3], a[1..]);
        assert_eq!(bench.builder.as_constant(shifted[3]), Some(false));
        assert!(bench.builder.freeze().operators.is_empty());
    }

    #[test]
    fn literal_operands_fold() {
        let mut bench = Bench::new(1);
        let (a, b) = (bench.literal(13, 8), bench.literal(9, 8));
        let product = mul(&mut bench.builder, &a, &b, bench.site);
        let bits: Option<Vec<bool>> = product.iter().map(|&bit| bench.builder.as_constant(bit)).collect();
        assert_eq!(bits, Some((0..8).map(|bit| 117 >> bit & 1 == 1).collect()));
    }

    #[test]
    fn every_variable_operand_passes_the_border() {
        let mut bench = Bench::new(1);
        let (a, b) = (bench.operand(6), bench.operand(6));
        let product = mul(&mut bench.builder, &a, &b, bench.site);
        assert!(product.iter().all(|&bit| matches!(bench.builder.kind(bit), NodeKind::OpOut(_))));
        let graph = bench.builder.freeze();
        for &input in &bench.inputs {
            assert!(graph.fanout(input).iter().all(|&reader| matches!(graph.kind(reader), NodeKind::OpIn(_))));
        }
    }

    #[test]
    fn an_absurd_power_is_refused() {
        let mut bench = Bench::new(1);
        let (a, b) = (bench.operand(500), bench.operand(64));
        assert_eq!(pow(&mut bench.builder, &a, &b, false, false, bench.site), None);
    }
}
