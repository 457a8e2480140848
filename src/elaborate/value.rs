//! Constant values: four-state vectors with a sign, and the operators of IEEE 1364-2005 clause 5 (IEEE 1800-2017
//! clause 11) on them. Elaboration uses them for parameters, ranges, generate conditions, constant functions, literals
//! and initial values.
//!
//! Widths are the caller's business where the standard makes them depend on the context: extend both operands with
//! [`Value::extend`] to the width and sign of the context first. Without that, [`Value::binary`] extends the narrower
//! operand by the rules of a self-determined expression. Nothing here panics, and nothing makes a value wider than
//! [`MAX_WIDTH`]: operations that could are partial.

use std::fmt;

use num_bigint::{BigInt, Sign};
use num_traits::{One, Signed, ToPrimitive, Zero};

use crate::syntax::ast::{BinaryOp, Literal, UnaryOp};

/// The widest value that is computed. Wider vectors are an input error ("vector too wide"), reported by the caller.
pub const MAX_WIDTH: usize = 1 << 20;

/// One bit of a constant.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Logic {
    Zero,
    One,
    X,
    Z,
}

impl Logic {
    /// `None` for x and z.
    pub fn to_bool(self) -> Option<bool> {
        match self {
            Logic::Zero => Some(false),
            Logic::One => Some(true),
            Logic::X | Logic::Z => None,
        }
    }

    /// The digit of a binary literal; anything but `0 1 z ?` is x.
    pub fn from_char(digit: char) -> Self {
        match digit {
            '0' => Logic::Zero,
            '1' => Logic::One,
            'z' | 'Z' | '?' => Logic::Z,
            _ => Logic::X,
        }
    }

    fn to_char(self) -> char {
        match self {
            Logic::Zero => '0',
            Logic::One => '1',
            Logic::X => 'x',
            Logic::Z => 'z',
        }
    }

    fn from_option(bit: Option<bool>) -> Self {
        bit.map_or(Logic::X, Logic::from)
    }

    fn not(self) -> Self {
        Logic::from_option(self.to_bool().map(|bit| !bit))
    }

    fn and(self, other: Self) -> Self {
        match (self.to_bool(), other.to_bool()) {
            (Some(false), _) | (_, Some(false)) => Logic::Zero,
            (Some(true), Some(true)) => Logic::One,
            _ => Logic::X,
        }
    }

    fn or(self, other: Self) -> Self {
        self.not().and(other.not()).not()
    }

    fn xor(self, other: Self) -> Self {
        Logic::from_option(self.to_bool().zip(other.to_bool()).map(|(a, b)| a != b))
    }

    /// What a conditional with an unknown condition makes of two alternatives.
    fn merge(self, other: Self) -> Self {
        if self == other { Logic::from_option(self.to_bool()) } else { Logic::X }
    }
}

impl From<bool> for Logic {
    fn from(bit: bool) -> Self {
        if bit { Logic::One } else { Logic::Zero }
    }
}

/// A constant: least significant bit first, at least one bit wide unless made from nothing.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub struct Value {
    pub signed: bool,
    pub bits: Vec<Logic>,
}

/// Constructors.
impl Value {
    pub fn new(signed: bool, bits: Vec<Logic>) -> Self {
        Self { signed, bits }
    }

    /// `width` bits of two's complement.
    pub fn from_i64(number: i64, width: usize, signed: bool) -> Self {
        let bits = (0..width).map(|bit| Logic::from(number >> bit.min(63) & 1 == 1)).collect();
        Self { signed, bits }
    }

    /// A plain decimal number: 32 bits, signed; wider when it does not fit.
    pub fn integer(number: i64) -> Self {
        let width = if i32::try_from(number).is_ok() { 32 } else { 64 };
        Self::from_i64(number, width, true)
    }

    /// One unsigned bit.
    pub fn bit(bit: Logic) -> Self {
        Self { signed: false, bits: vec![bit] }
    }

    /// All bits equal; unsigned. `'0`, `'1`, `'x` and `'z` are this at the width of their context.
    pub fn fill(bit: Logic, width: usize) -> Self {
        Self { signed: false, bits: vec![bit; width] }
    }

    /// Eight bits a character, the first the most significant; the empty string is one zero character.
    pub fn from_text(text: &str) -> Self {
        let mut bits = Vec::with_capacity(8 * text.len().max(1));
        for byte in text.bytes().rev() {
            bits.extend((0..8).map(|bit| Logic::from(byte >> bit & 1 == 1)));
        }
        if bits.is_empty() {
            bits.resize(8, Logic::Zero);
        }
        Self { signed: false, bits }
    }

    /// A literal at its own width: 32 bits or more when unsized. `None` past [`MAX_WIDTH`].
    pub fn from_literal(literal: &Literal) -> Option<Self> {
        Self::from_literal_in(literal, 0)
    }

    /// A literal in a context of `context` bits. Only an unsized literal with a leading x or z notices: it fills the
    /// context. The result is not narrowed to the context. `None` past [`MAX_WIDTH`].
    pub fn from_literal_in(literal: &Literal, context: usize) -> Option<Self> {
        let mut bits: Vec<Logic> = literal.bits.chars().rev().map(Logic::from_char).collect();
        let pad = match bits.last() {
            Some(&top) if top.to_bool().is_none() => top,
            _ => Logic::Zero,
        };
        let width = match literal.width {
            Some(width) => width as usize,
            None if pad == Logic::Zero => bits.len().max(32),
            None => bits.len().max(32).max(context),
        };
        if width > MAX_WIDTH || bits.len() > 64 * MAX_WIDTH {
            return None;
        }
        // A plain decimal is signed: its digits are a magnitude, and one that uses bit 31 needs a sign bit above it.
        let width = if literal.width.is_none() && !literal.based && bits.len() >= 32 {
            bits.iter().rposition(|&bit| bit == Logic::One).map_or(32, |top| (top + 2).max(32))
        } else {
            width
        };
        bits.resize(width, pad);
        Some(Self { signed: literal.signed, bits })
    }

    /// Two's complement of `number`, cut to `width` bits.
    pub fn from_bigint(number: &BigInt, width: usize, signed: bool) -> Self {
        let bytes = number.to_signed_bytes_le();
        let sign = number.is_negative();
        let bits = (0..width)
            .map(|bit| bytes.get(bit / 8).map_or(Logic::from(sign), |byte| Logic::from(byte >> (bit % 8) & 1 == 1)))
            .collect();
        Self { signed, bits }
    }
}

/// What a value is.
impl Value {
    pub fn width(&self) -> usize {
        self.bits.len()
    }

    /// Whether any bit is x or z.
    pub fn has_unknown(&self) -> bool {
        self.bits.iter().any(|bit| bit.to_bool().is_none())
    }

    /// The number, by the value's own sign; `None` when a bit is x or z.
    pub fn to_bigint(&self) -> Option<BigInt> {
        let mut bytes = vec![0u8; self.bits.len() / 8 + 1];
        for (index, bit) in self.bits.iter().enumerate() {
            if bit.to_bool()? {
                bytes[index / 8] |= 1 << (index % 8);
            }
        }
        if self.signed && self.bits.last() == Some(&Logic::One) {
            for index in self.bits.len()..8 * bytes.len() {
                bytes[index / 8] |= 1 << (index % 8);
            }
        }
        Some(BigInt::from_signed_bytes_le(&bytes))
    }

    /// `None` when unknown or out of range.
    pub fn to_i64(&self) -> Option<i64> {
        self.to_bigint()?.to_i64()
    }

    /// `None` when unknown, negative or out of range.
    pub fn to_u64(&self) -> Option<u64> {
        self.to_bigint()?.to_u64()
    }

    /// `None` when unknown, negative or out of range.
    pub fn to_usize(&self) -> Option<usize> {
        self.to_bigint()?.to_usize()
    }

    /// The truth of a condition: one when any bit is 1, zero when all are 0, else x.
    pub fn truth(&self) -> Logic {
        self.bits.iter().fold(Logic::Zero, |any, &bit| any.or(bit))
    }

    /// Whether a condition holds. An unknown condition does not.
    pub fn is_true(&self) -> bool {
        self.truth() == Logic::One
    }

    /// The logarithm to base 2, rounded up (`$clog2`): of the bits taken as unsigned; 0 of 0. `None` when unknown.
    pub fn clog2(&self) -> Option<usize> {
        let mut ones = 0;
        let mut top = 0;
        for (index, bit) in self.bits.iter().enumerate() {
            if bit.to_bool()? {
                ones += 1;
                top = index;
            }
        }
        Some(if ones > 1 { top + 1 } else { top })
    }

    /// The text of a string constant: characters from the most significant, leading zero bytes left out.
    pub fn to_text(&self) -> String {
        let bytes =
            self.bits.chunks(8).rev().map(|bits| {
                bits.iter().enumerate().fold(0u8, |byte, (at, &bit)| byte | u8::from(bit == Logic::One) << at)
            });
        bytes.skip_while(|&byte| byte == 0).map(char::from).collect()
    }

    /// Bits most significant first, as in a binary literal.
    pub fn to_bit_string(&self) -> String {
        self.bits.iter().rev().map(|bit| bit.to_char()).collect()
    }
}

impl fmt::Display for Value {
    /// A plain decimal for a known value, a binary literal otherwise.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self.to_bigint() {
            Some(number) => write!(f, "{number}"),
            None => write!(f, "{}'{}b{}", self.width(), if self.signed { "s" } else { "" }, self.to_bit_string()),
        }
    }
}

/// Widths, signs and selects.
impl Value {
    /// The value cut or extended to `width`: by its top bit when `signed` (x and z included), by zero otherwise. `signed`
    /// is the sign of the *context*, which becomes the sign of the result: a signed operand beside an unsigned one is
    /// extended by zero.
    pub fn extend(&self, width: usize, signed: bool) -> Self {
        let pad = match self.bits.last() {
            Some(&top) if signed => top,
            _ => Logic::Zero,
        };
        let mut bits = self.bits.clone();
        bits.resize(width, pad);
        Self { signed, bits }
    }

    /// Assignment to `width` bits: extended by the value's own sign, which the result keeps.
    pub fn resize(&self, width: usize) -> Self {
        self.extend(width, self.signed)
    }

    /// The same bits with another sign (`$signed`, `$unsigned`).
    pub fn with_sign(mut self, signed: bool) -> Self {
        self.signed = signed;
        self
    }

    /// The value in a two-state type: x and z become 0.
    pub fn two_state(mut self) -> Self {
        for bit in &mut self.bits {
            *bit = Logic::from(*bit == Logic::One);
        }
        self
    }

    /// `width` bits from offset `low` (0 is the least significant bit) as an unsigned value; x outside.
    pub fn slice(&self, low: i64, width: usize) -> Self {
        let bits = (0..width)
            .map(|at| {
                let index = i64::try_from(at).ok().and_then(|at| low.checked_add(at));
                index.and_then(|index| usize::try_from(index).ok()).and_then(|index| self.bits.get(index))
            })
            .map(|bit| bit.copied().unwrap_or(Logic::X))
            .collect();
        Self { signed: false, bits }
    }

    /// Concatenation, the first part the most significant; unsigned. `None` past [`MAX_WIDTH`].
    pub fn concat(parts: &[Value]) -> Option<Self> {
        if parts.iter().map(Value::width).sum::<usize>() > MAX_WIDTH {
            return None;
        }
        let bits = parts.iter().rev().flat_map(|part| part.bits.iter().copied()).collect();
        Some(Self { signed: false, bits })
    }

    /// `{count{self}}`; unsigned. `None` past [`MAX_WIDTH`].
    pub fn replicate(&self, count: usize) -> Option<Self> {
        match self.width().checked_mul(count) {
            Some(width) if width <= MAX_WIDTH => Some(Self { signed: false, bits: self.bits.repeat(count) }),
            _ => None,
        }
    }
}

/// Operators.
impl Value {
    /// A unary operator at the operand's width; reductions and `!` give one unsigned bit.
    pub fn unary(op: UnaryOp, operand: &Value) -> Self {
        let reduce =
            |combine: fn(Logic, Logic) -> Logic, start| operand.bits.iter().fold(start, |all, &bit| combine(all, bit));
        match op {
            UnaryOp::Plus => operand.clone(),
            UnaryOp::Minus => match operand.to_bigint() {
                Some(number) => Self::from_bigint(&-number, operand.width(), operand.signed),
                None => Self::fill(Logic::X, operand.width()).with_sign(operand.signed),
            },
            UnaryOp::Not => Self::new(operand.signed, operand.bits.iter().map(|bit| bit.not()).collect()),
            UnaryOp::LogicalNot => Self::bit(operand.truth().not()),
            UnaryOp::ReduceAnd => Self::bit(reduce(Logic::and, Logic::One)),
            UnaryOp::ReduceNand => Self::bit(reduce(Logic::and, Logic::One).not()),
            UnaryOp::ReduceOr => Self::bit(operand.truth()),
            UnaryOp::ReduceNor => Self::bit(operand.truth().not()),
            UnaryOp::ReduceXor => Self::bit(reduce(Logic::xor, Logic::Zero)),
            UnaryOp::ReduceXnor => Self::bit(reduce(Logic::xor, Logic::Zero).not()),
        }
    }

    /// A binary operator. Operands of unequal width are extended to the wider one, signed only when both are; the right
    /// operand of shifts and of `**` keeps its own width and sign, and the result has the left one's. Comparisons and
    /// logical operators give one unsigned bit.
    pub fn binary(op: BinaryOp, left: &Value, right: &Value) -> Self {
        let width = left.width().max(right.width());
        let signed = left.signed && right.signed;
        let (a, b) = (left.extend(width, signed), right.extend(width, signed));
        let bitwise = |combine: fn(Logic, Logic) -> Logic| {
            let bits = a.bits.iter().zip(&b.bits).map(|(&a, &b)| combine(a, b)).collect();
            Self::new(signed, bits)
        };
        let arithmetic = |compute: fn(BigInt, BigInt) -> Option<BigInt>| {
            let result = a.to_bigint().zip(b.to_bigint()).and_then(|(a, b)| compute(a, b));
            match result {
                Some(number) => Self::from_bigint(&number, width, signed),
                None => Self::fill(Logic::X, width).with_sign(signed),
            }
        };
        let compare = |holds: fn(&BigInt, &BigInt) -> bool| {
            let result = a.to_bigint().zip(b.to_bigint()).map(|(a, b)| holds(&a, &b));
            Self::bit(Logic::from_option(result))
        };
        match op {
            BinaryOp::Add => arithmetic(|a, b| Some(a + b)),
            BinaryOp::Sub => arithmetic(|a, b| Some(a - b)),
            BinaryOp::Mul => arithmetic(|a, b| Some(a * b)),
            // Both truncate towards zero, and the remainder takes the sign of the dividend, as the standard asks.
            BinaryOp::Div => arithmetic(|a, b| a.checked_div(&b)),
            BinaryOp::Mod => arithmetic(|a, b| if b.is_zero() { None } else { Some(a % b) }),
            BinaryOp::Lt => compare(|a, b| a < b),
            BinaryOp::Le => compare(|a, b| a <= b),
            BinaryOp::Gt => compare(|a, b| a > b),
            BinaryOp::Ge => compare(|a, b| a >= b),
            BinaryOp::And => bitwise(Logic::and),
            BinaryOp::Or => bitwise(Logic::or),
            BinaryOp::Xor => bitwise(Logic::xor),
            BinaryOp::Xnor => bitwise(|a, b| a.xor(b).not()),
            BinaryOp::CaseEq => Self::bit(Logic::from(a.bits == b.bits)),
            BinaryOp::CaseNe => Self::bit(Logic::from(a.bits != b.bits)),
            BinaryOp::Eq => Self::bit(equality(&a, &b, false)),
            BinaryOp::Ne => Self::bit(equality(&a, &b, false).not()),
            BinaryOp::WildEq => Self::bit(equality(&a, &b, true)),
            BinaryOp::WildNe => Self::bit(equality(&a, &b, true).not()),
            BinaryOp::Shl | BinaryOp::ArithShl | BinaryOp::Shr | BinaryOp::ArithShr => shift(op, left, right),
            BinaryOp::Pow => power(left, right),
            BinaryOp::LogicalAnd => Self::bit(left.truth().and(right.truth())),
            BinaryOp::LogicalOr => Self::bit(left.truth().or(right.truth())),
            BinaryOp::Implies => Self::bit(left.truth().not().or(right.truth())),
            BinaryOp::Equivalent => Self::bit(left.truth().xor(right.truth()).not()),
        }
    }

    /// `condition ? then : otherwise`, the alternatives extended to the wider one; merged bit by bit when the condition
    /// is unknown.
    pub fn conditional(condition: &Value, then: &Value, otherwise: &Value) -> Self {
        let width = then.width().max(otherwise.width());
        let signed = then.signed && otherwise.signed;
        let (then, otherwise) = (then.extend(width, signed), otherwise.extend(width, signed));
        match condition.truth().to_bool() {
            Some(true) => then,
            Some(false) => otherwise,
            None => {
                let bits = then.bits.iter().zip(&otherwise.bits).map(|(&a, &b)| a.merge(b)).collect();
                Self::new(signed, bits)
            }
        }
    }

    /// Whether a `case` label matches: `CaseKind::Case` compares with `===`, `casez` ignores z and `casex` also x on
    /// both sides. Labels and subject must have been extended to one width.
    pub fn case_match(&self, label: &Value, ignore_z: bool, ignore_x: bool) -> bool {
        let ignored = |bit: Logic| ignore_z && bit == Logic::Z || ignore_x && bit == Logic::X;
        self.bits.iter().zip(&label.bits).all(|(&a, &b)| a == b || ignored(a) || ignored(b))
    }
}

/// Equality of vectors of one width: a known difference decides, otherwise any unknown bit makes it unknown. With
/// `wild`, x and z bits of the right side match anything.
fn equality(left: &Value, right: &Value, wild: bool) -> Logic {
    let mut result = Logic::One;
    for (&a, &b) in left.bits.iter().zip(&right.bits) {
        if wild && b.to_bool().is_none() {
            continue;
        }
        result = result.and(a.xor(b).not());
    }
    result
}

fn shift(op: BinaryOp, left: &Value, right: &Value) -> Value {
    let width = left.width();
    let Some(amount) = right.clone().with_sign(false).to_bigint() else {
        return Value::fill(Logic::X, width).with_sign(left.signed);
    };
    let amount = amount.to_usize().unwrap_or(width).min(width);
    let fill = match left.bits.last() {
        Some(&top) if op == BinaryOp::ArithShr && left.signed => top,
        _ => Logic::Zero,
    };
    let bits = if matches!(op, BinaryOp::Shl | BinaryOp::ArithShl) {
        let mut bits = vec![Logic::Zero; amount];
        bits.extend_from_slice(&left.bits[..width - amount]);
        bits
    } else {
        let mut bits = left.bits[amount..].to_vec();
        bits.resize(width, fill);
        bits
    };
    Value::new(left.signed, bits)
}

/// IEEE 1364-2005 table 5-6: a negative exponent gives a fraction, hence 0, except for bases 1 and -1; 0 to a negative
/// power is x. So is what would take minutes to compute.
fn power(left: &Value, right: &Value) -> Value {
    let unknown = Value::fill(Logic::X, left.width()).with_sign(left.signed);
    let (Some(base), Some(exponent)) = (left.to_bigint(), right.to_bigint()) else {
        return unknown;
    };
    if left.width().saturating_mul(exponent.bits() as usize) > MAX_WIDTH {
        return unknown;
    }
    let result = match exponent.sign() {
        Sign::NoSign => BigInt::one(),
        Sign::Plus => base.modpow(&exponent, &(BigInt::one() << left.width())),
        Sign::Minus if base.is_zero() => return unknown,
        Sign::Minus if base.is_one() => BigInt::one(),
        Sign::Minus if (-&base).is_one() => {
            if exponent.bit(0) {
                base
            } else {
                BigInt::one()
            }
        }
        Sign::Minus => BigInt::zero(),
    };
    Value::from_bigint(&result, left.width(), left.signed)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// `4'b10xz`, `8'sb...` as in a binary literal.
    fn value(text: &str) -> Value {
        let (width, digits) = text.split_once('\'').unwrap_or(("1", text));
        let (signed, digits) = match digits.strip_prefix('s') {
            Some(digits) => (true, digits),
            None => (false, digits),
        };
        let bits: Vec<Logic> = digits.trim_start_matches('b').chars().rev().map(Logic::from_char).collect();
        assert_eq!(width, bits.len().to_string());
        Value::new(signed, bits)
    }

    fn literal(width: Option<u32>, signed: bool, based: bool, bits: &str) -> Literal {
        Literal { width, signed, based, bits: bits.to_string() }
    }

    #[track_caller]
    fn check(op: BinaryOp, left: &str, right: &str, expected: &str) {
        assert_eq!(Value::binary(op, &value(left), &value(right)), value(expected), "{left} {op:?} {right}");
    }

    /// IEEE 1364-2005 tables 5-11 to 5-14, row by row.
    #[test]
    fn bitwise_tables() {
        check(BinaryOp::And, "4'b0000", "4'b01xz", "4'b0000");
        check(BinaryOp::And, "4'b1111", "4'b01xz", "4'b01xx");
        check(BinaryOp::And, "4'bzzzz", "4'b01xz", "4'b0xxx");
        check(BinaryOp::Or, "4'b0000", "4'b01xz", "4'b01xx");
        check(BinaryOp::Or, "4'b1111", "4'b01xz", "4'b1111");
        check(BinaryOp::Or, "4'bxxxx", "4'b01xz", "4'bx1xx");
        check(BinaryOp::Xor, "4'b1111", "4'b01xz", "4'b10xx");
        check(BinaryOp::Xnor, "4'b0000", "4'b01xz", "4'b10xx");
    }

    /// IEEE 1364-2005 table 5-6.
    #[test]
    fn powers_of_the_table() {
        let rows = [
            ("4'sb1110", "4'sb0011", "4'sb1000"), // -2 ** 3 = -8
            ("4'sb1111", "4'sb0010", "4'sb0001"), // -1, even
            ("4'sb1111", "4'sb0011", "4'sb1111"), // -1, odd
            ("4'sb1111", "4'sb1110", "4'sb0001"), // -1, negative even
            ("4'sb1111", "4'sb1101", "4'sb1111"), // -1, negative odd
            ("4'sb0000", "4'sb0010", "4'sb0000"),
            ("4'sb0000", "4'sb0000", "4'sb0001"),
            ("4'sb0000", "4'sb1111", "4'sbxxxx"),
            ("4'sb0001", "4'sb1111", "4'sb0001"),
            ("4'sb0010", "4'sb1111", "4'sb0000"),
            ("4'b0010", "4'b0101", "4'b0000"), // 32 is cut
        ];
        for (base, exponent, expected) in rows {
            check(BinaryOp::Pow, base, exponent, expected);
        }
    }

    /// The examples of IEEE 1364-2005 tables 5-5 and 5-7 and of the text around them.
    #[test]
    fn examples_of_the_standard() {
        let integer = Value::integer;
        let modulus = |a, b| Value::binary(BinaryOp::Mod, &integer(a), &integer(b)).to_i64();
        assert_eq!(modulus(10, 3), Some(1));
        assert_eq!(modulus(12, 3), Some(0));
        assert_eq!(modulus(-10, 3), Some(-1));
        assert_eq!(modulus(11, -3), Some(2));
        // intA = -12; intA / 3 is -4, but -'d12 / 3 is 1431655761.
        let unsigned = integer(-12).with_sign(false);
        assert_eq!(Value::binary(BinaryOp::Div, &integer(-12), &integer(3)).to_i64(), Some(-4));
        assert_eq!(Value::binary(BinaryOp::Div, &unsigned, &integer(3)).to_i64(), Some(1_431_655_761));
        // start = 4'sb1000; start >>> 2 is 1110.
        check(BinaryOp::ArithShr, "4'sb1000", "2'b10", "4'sb1110");
        check(BinaryOp::Shr, "4'sb1000", "2'b10", "4'sb0010");
        check(BinaryOp::Div, "4'b0101", "4'b0000", "4'bxxxx");
        check(BinaryOp::Mod, "4'b0101", "4'b0000", "4'bxxxx");
    }

    /// IEEE 1364-2005, 3.5.1: how literals are padded.
    #[test]
    fn literals_are_padded_by_their_leading_digit() {
        let known = |literal: &Literal| Value::from_literal(literal).map(|value| value.to_bit_string());
        assert_eq!(known(&literal(Some(12), false, true, "xxxx")), Some("x".repeat(12)));
        assert_eq!(known(&literal(Some(6), false, true, "zz11")), Some("zzzz11".into()));
        assert_eq!(known(&literal(Some(5), false, true, "0011")), Some("00011".into()));
        assert_eq!(known(&literal(Some(2), false, true, "1101")), Some("01".into()));
        assert_eq!(known(&literal(None, false, true, "x")), Some("x".repeat(32)));
        let wide = Value::from_literal_in(&literal(None, false, true, "x"), 40).map(|value| value.width());
        assert_eq!(wide, Some(40));
        // 4294967295 is positive, so it needs a sign bit.
        let large = Value::from_literal(&literal(None, true, false, &"1".repeat(32)));
        assert_eq!(large.and_then(|value| value.to_i64()), Some(4_294_967_295));
        assert_eq!(Value::from_literal(&literal(Some(u32::MAX), false, true, "1")), None);
    }

    /// IEEE 1800-2017, 11.4.6: wildcards stand on the right side only.
    #[test]
    fn wildcard_equality() {
        check(BinaryOp::WildEq, "4'b1010", "4'b1x1z", "1'b1");
        check(BinaryOp::WildEq, "4'b1000", "4'b1x1z", "1'b0");
        check(BinaryOp::WildEq, "4'bx010", "4'b1x1z", "1'bx");
        check(BinaryOp::WildNe, "4'b1000", "4'b1x1z", "1'b1");
    }

    #[test]
    fn case_labels_match_by_kind() {
        let matches = |subject: &str, label: &str, z, x| value(subject).case_match(&value(label), z, x);
        assert!(matches("4'b10xz", "4'b10xz", false, false));
        assert!(!matches("4'b101z", "4'b10xz", false, false));
        assert!(matches("4'b1011", "4'b1zz1", true, false));
        assert!(!matches("4'b1011", "4'b1xz1", true, false));
        assert!(matches("4'b1011", "4'b1xz1", true, true));
    }

    #[test]
    fn selects_outside_are_unknown() {
        assert_eq!(value("4'b1010").slice(2, 4), value("4'bxx10"));
        assert_eq!(value("4'b1010").slice(-1, 3), value("3'b10x"));
        assert_eq!(value("4'b1010").slice(i64::MAX, 2), value("2'bxx"));
    }

    #[test]
    fn numbers_texts_and_logarithms() {
        assert_eq!(value("4'sb1000").to_i64(), Some(-8));
        assert_eq!(value("4'b1000").to_i64(), Some(8));
        assert_eq!(value("4'sb1000").to_u64(), None);
        assert_eq!(value("4'b10x0").to_i64(), None);
        assert_eq!(Value::from_text("AB").to_u64(), Some(0x4142));
        assert_eq!(Value::from_text("AB").to_text(), "AB");
        assert_eq!(Value::from_text("").width(), 8);
        let clog2 = |number| Value::integer(number).clog2();
        assert_eq!([0, 1, 2, 3, 4, 5, 8, 9].map(clog2), [0, 0, 1, 2, 2, 3, 3, 4].map(Some));
        assert_eq!(value("4'b10x0").to_string(), "4'b10x0");
        assert_eq!(value("4'sb1111").to_string(), "-1");
    }

    #[test]
    fn nothing_grows_without_bound() {
        assert_eq!(Value::fill(Logic::One, 8).replicate(usize::MAX), None);
        assert_eq!(Value::fill(Logic::One, MAX_WIDTH).replicate(2), None);
        let wide = Value::fill(Logic::One, 1 << 12);
        assert!(Value::binary(BinaryOp::Pow, &wide, &wide).has_unknown());
        assert_eq!(Value::binary(BinaryOp::Shl, &wide, &wide).to_u64(), Some(0));
    }
}
