//! Number, time and string literals. Digits are expanded to bits here, most significant first, and not yet sized: sizing
//! depends on the context (IEEE 1800-2017 clause 5.7.1). A decimal number may be of any length.

use num_bigint::BigUint;
use sv_parser as sv;

use super::Converter;
use super::ast::{Expr, ExprKind, Literal};
use crate::source::Span;

/// Longest decimal number that is expanded; the conversion to binary takes quadratic time.
const DECIMAL_DIGITS: usize = 20_000;

impl Converter<'_> {
    pub(super) fn primary_literal(&self, literal: &sv::PrimaryLiteral) -> Expr {
        match literal {
            sv::PrimaryLiteral::Number(x) => self.number(x),
            sv::PrimaryLiteral::TimeLiteral(x) => {
                Expr { kind: ExprKind::TimeLiteral(self.time_literal(x)), span: self.span(&**x) }
            }
            sv::PrimaryLiteral::UnbasedUnsizedLiteral(x) => {
                let text = self.symbol(&x.nodes.0).to_ascii_lowercase();
                let fill = match text.chars().last() {
                    Some('?') => 'z',
                    Some(digit) => digit,
                    None => 'x',
                };
                Expr { kind: ExprKind::Fill(fill), span: self.span(&**x) }
            }
            sv::PrimaryLiteral::StringLiteral(x) => {
                Expr { kind: ExprKind::String(unescape(self.token(&x.nodes.0))), span: self.span(&**x) }
            }
        }
    }

    pub(super) fn number(&self, number: &sv::Number) -> Expr {
        match number {
            sv::Number::IntegralNumber(x) => self.integral(x),
            sv::Number::RealNumber(x) => Expr { kind: ExprKind::Real(self.real(x)), span: self.span(&**x) },
        }
    }

    fn real(&self, number: &sv::RealNumber) -> f64 {
        let mut text = String::new();
        match number {
            sv::RealNumber::FixedPointNumber(x) => self.fixed_point(x, &mut text),
            sv::RealNumber::Floating(x) => {
                let (whole, fraction, _, sign, exponent) = &x.nodes;
                text.push_str(self.token(&whole.nodes.0));
                if let Some((_, fraction)) = fraction {
                    text.push('.');
                    text.push_str(self.token(&fraction.nodes.0));
                }
                text.push('e');
                if matches!(sign, Some(sv::Sign::Minus(_))) {
                    text.push('-');
                }
                text.push_str(self.token(&exponent.nodes.0));
            }
        }
        parse_real(&text)
    }

    fn fixed_point(&self, number: &sv::FixedPointNumber, text: &mut String) {
        let (whole, _, fraction) = &number.nodes;
        text.push_str(self.token(&whole.nodes.0));
        text.push('.');
        text.push_str(self.token(&fraction.nodes.0));
    }

    /// The value in seconds.
    fn time_literal(&self, literal: &sv::TimeLiteral) -> f64 {
        let mut text = String::new();
        let unit = match literal {
            sv::TimeLiteral::Unsigned(x) => {
                text.push_str(self.token(&x.nodes.0.nodes.0));
                &x.nodes.1
            }
            sv::TimeLiteral::FixedPoint(x) => {
                self.fixed_point(&x.nodes.0, &mut text);
                &x.nodes.1
            }
        };
        text.push_str(match unit {
            sv::TimeUnit::S(_) => "e0",
            sv::TimeUnit::MS(_) => "e-3",
            sv::TimeUnit::US(_) => "e-6",
            sv::TimeUnit::NS(_) => "e-9",
            sv::TimeUnit::PS(_) => "e-12",
            sv::TimeUnit::FS(_) => "e-15",
        });
        parse_real(&text)
    }

    pub(super) fn integral(&self, number: &sv::IntegralNumber) -> Expr {
        let span = self.span(number);
        let (size, base, digits) = match number {
            sv::IntegralNumber::DecimalNumber(x) => match &**x {
                sv::DecimalNumber::UnsignedNumber(x) => return self.plain_decimal(self.token(&x.nodes.0), span),
                sv::DecimalNumber::BaseUnsigned(x) => (&x.nodes.0, &x.nodes.1.nodes.0, &x.nodes.2.nodes.0),
                sv::DecimalNumber::BaseXNumber(x) => (&x.nodes.0, &x.nodes.1.nodes.0, &x.nodes.2.nodes.0),
                sv::DecimalNumber::BaseZNumber(x) => (&x.nodes.0, &x.nodes.1.nodes.0, &x.nodes.2.nodes.0),
            },
            sv::IntegralNumber::BinaryNumber(x) => (&x.nodes.0, &x.nodes.1.nodes.0, &x.nodes.2.nodes.0),
            sv::IntegralNumber::OctalNumber(x) => (&x.nodes.0, &x.nodes.1.nodes.0, &x.nodes.2.nodes.0),
            sv::IntegralNumber::HexNumber(x) => (&x.nodes.0, &x.nodes.1.nodes.0, &x.nodes.2.nodes.0),
        };
        let width = match size {
            None => None,
            Some(size) => match self.token(&size.nodes.0.nodes.0).replace('_', "").parse::<u32>() {
                Ok(width) => Some(width),
                Err(_) => return self.unsupported_expr("literal wider than 2^32 bits", span),
            },
        };
        let base = self.token(base).to_ascii_lowercase();
        let digits = self.token(digits);
        let bits = match base.trim_end().chars().last() {
            Some('b') => expand(digits, 1),
            Some('o') => expand(digits, 3),
            Some('h') => expand(digits, 4),
            _ => decimal_bits(digits),
        };
        match bits {
            Some(bits) => {
                let literal = Literal { width, signed: base.contains('s'), based: true, bits };
                Expr { kind: ExprKind::Number(literal), span }
            }
            None => self.unsupported_expr("number literal of this form", span),
        }
    }

    fn plain_decimal(&self, digits: &str, span: Span) -> Expr {
        match decimal_bits(digits) {
            Some(bits) => {
                Expr { kind: ExprKind::Number(Literal { width: None, signed: true, based: false, bits }), span }
            }
            None => self.unsupported_expr("decimal number of this length", span),
        }
    }
}

fn parse_real(text: &str) -> f64 {
    let text: String = text.chars().filter(|c| *c != '_' && !c.is_whitespace()).collect();
    text.parse().unwrap_or(f64::NAN)
}

/// Digits of a base that is a power of two, `bits` bits each.
fn expand(digits: &str, bits: usize) -> Option<String> {
    let mut out = String::with_capacity(digits.len() * bits);
    for digit in digits.chars() {
        match digit.to_ascii_lowercase() {
            '_' => {}
            c if c.is_whitespace() => {}
            'x' => out.extend(std::iter::repeat_n('x', bits)),
            'z' | '?' => out.extend(std::iter::repeat_n('z', bits)),
            c => {
                let value = c.to_digit(1 << bits)?;
                out.extend((0..bits).rev().map(|bit| if value >> bit & 1 == 1 { '1' } else { '0' }));
            }
        }
    }
    (!out.is_empty()).then_some(out)
}

/// Decimal digits, or the single `x` or `z` that a decimal number may be.
fn decimal_bits(digits: &str) -> Option<String> {
    let digits: Vec<u8> = digits.bytes().filter(|c| *c != b'_' && !c.is_ascii_whitespace()).collect();
    match digits.as_slice() {
        [b'x' | b'X'] => return Some("x".to_string()),
        [b'z' | b'Z' | b'?'] => return Some("z".to_string()),
        _ => {}
    }
    if digits.len() > DECIMAL_DIGITS {
        return None;
    }
    Some(BigUint::parse_bytes(&digits, 10)?.to_str_radix(2))
}

/// The characters of a string literal with its quotes, escapes of IEEE 1800-2017 table 5-1 replaced. Bytes above 127
/// are characters of their own, as an octal or hexadecimal escape writes them.
fn unescape(literal: &str) -> String {
    let inner = literal.strip_prefix('"').unwrap_or(literal);
    let inner = inner.strip_suffix('"').unwrap_or(inner);
    let mut out = String::with_capacity(inner.len());
    let mut chars = inner.chars().peekable();
    while let Some(c) = chars.next() {
        if c != '\\' {
            out.push(c);
            continue;
        }
        match chars.next() {
            Some('n') => out.push('\n'),
            Some('t') => out.push('\t'),
            Some('v') => out.push('\u{b}'),
            Some('f') => out.push('\u{c}'),
            Some('a') => out.push('\u{7}'),
            // A backslash before a line end continues the string on the next line.
            Some('\n') => {}
            Some('\r') => {
                chars.next_if_eq(&'\n');
            }
            Some('x') => {
                let mut value = 0;
                for _ in 0..2 {
                    match chars.peek().and_then(|c| c.to_digit(16)) {
                        Some(digit) => value = value * 16 + digit,
                        None => break,
                    }
                    chars.next();
                }
                out.extend(char::from_u32(value));
            }
            Some(c @ '0'..='7') => {
                let mut value = c.to_digit(8).unwrap_or(0);
                for _ in 0..2 {
                    match chars.peek().and_then(|c| c.to_digit(8)) {
                        Some(digit) => value = value * 8 + digit,
                        None => break,
                    }
                    chars.next();
                }
                out.extend(char::from_u32(value & 0xff));
            }
            Some(c) => out.push(c),
            None => out.push('\\'),
        }
    }
    out
}
