//! Operators and their precedence, IEEE 1800-2017 table 11-2. The parser hands over binary operators without
//! precedence, as a chain that leans to the right, so the chain is first laid out flat and then grouped here with an
//! explicit stack: a chain of a hundred thousand operators needs no recursion.

use super::ast::{BinaryOp, Expr, ExprKind, UnaryOp};
use crate::source::Span;

/// A piece of a flat expression, in the order of the text.
pub(super) enum Piece {
    Operand(Expr),
    Binary(BinaryOp),
    /// `&&&`, which joins conditions of `if` and `?:`.
    Joined,
    /// `? middle :`; what follows is the third operand.
    Cond(Expr),
    /// `inside { ... }`, with the place of the closing brace.
    Inside(Vec<Expr>, Span),
}

pub(super) fn unary_op(symbol: &str) -> Option<UnaryOp> {
    Some(match symbol {
        "+" => UnaryOp::Plus,
        "-" => UnaryOp::Minus,
        "!" => UnaryOp::LogicalNot,
        "~" => UnaryOp::Not,
        "&" => UnaryOp::ReduceAnd,
        "~&" => UnaryOp::ReduceNand,
        "|" => UnaryOp::ReduceOr,
        "~|" => UnaryOp::ReduceNor,
        "^" => UnaryOp::ReduceXor,
        "~^" | "^~" => UnaryOp::ReduceXnor,
        _ => return None,
    })
}

pub(super) fn binary_op(symbol: &str) -> Option<BinaryOp> {
    Some(match symbol {
        "+" => BinaryOp::Add,
        "-" => BinaryOp::Sub,
        "*" => BinaryOp::Mul,
        "/" => BinaryOp::Div,
        "%" => BinaryOp::Mod,
        "**" => BinaryOp::Pow,
        "==" => BinaryOp::Eq,
        "!=" => BinaryOp::Ne,
        "===" => BinaryOp::CaseEq,
        "!==" => BinaryOp::CaseNe,
        "==?" => BinaryOp::WildEq,
        "!=?" => BinaryOp::WildNe,
        "&&" => BinaryOp::LogicalAnd,
        "||" => BinaryOp::LogicalOr,
        "->" => BinaryOp::Implies,
        "<->" => BinaryOp::Equivalent,
        "<" => BinaryOp::Lt,
        "<=" => BinaryOp::Le,
        ">" => BinaryOp::Gt,
        ">=" => BinaryOp::Ge,
        "&" => BinaryOp::And,
        "|" => BinaryOp::Or,
        "^" => BinaryOp::Xor,
        "~^" | "^~" => BinaryOp::Xnor,
        ">>" => BinaryOp::Shr,
        "<<" => BinaryOp::Shl,
        ">>>" => BinaryOp::ArithShr,
        "<<<" => BinaryOp::ArithShl,
        _ => return None,
    })
}

/// How tightly an operator binds, the greater the tighter.
type Strength = u8;

const COND: Strength = 2;
/// `inside` stands with the relational operators.
const RELATIONAL: Strength = 10;
/// Between `?:`, whose condition may be several joined ones, and the operators that may stand in each of them.
const JOINED: Strength = 3;

fn strength(op: BinaryOp) -> Strength {
    match op {
        BinaryOp::Pow => 14,
        BinaryOp::Mul | BinaryOp::Div | BinaryOp::Mod => 13,
        BinaryOp::Add | BinaryOp::Sub => 12,
        BinaryOp::Shl | BinaryOp::Shr | BinaryOp::ArithShl | BinaryOp::ArithShr => 11,
        BinaryOp::Lt | BinaryOp::Le | BinaryOp::Gt | BinaryOp::Ge => RELATIONAL,
        BinaryOp::Eq | BinaryOp::Ne | BinaryOp::CaseEq | BinaryOp::CaseNe | BinaryOp::WildEq | BinaryOp::WildNe => 9,
        BinaryOp::And => 8,
        BinaryOp::Xor | BinaryOp::Xnor => 7,
        BinaryOp::Or => 6,
        BinaryOp::LogicalAnd => 5,
        BinaryOp::LogicalOr => 4,
        BinaryOp::Implies | BinaryOp::Equivalent => 1,
    }
}

fn right_associative(op: BinaryOp) -> bool {
    matches!(op, BinaryOp::Implies | BinaryOp::Equivalent)
}

/// An operator whose right operand is not complete yet.
enum Pending {
    Binary(BinaryOp),
    Joined,
    Cond(Expr),
}

impl Pending {
    fn strength(&self) -> Strength {
        match self {
            Pending::Binary(op) => strength(*op),
            Pending::Joined => JOINED,
            Pending::Cond(_) => COND,
        }
    }
}

/// Groups a flat expression. Returns nothing when the pieces do not alternate as they must, which no text that the
/// parser accepts gives.
pub(super) fn group(pieces: Vec<Piece>) -> Option<Expr> {
    let mut operands: Vec<Expr> = Vec::new();
    let mut pending: Vec<Pending> = Vec::new();
    for piece in pieces {
        match piece {
            Piece::Operand(expr) => operands.push(expr),
            Piece::Binary(op) => {
                let minimum = strength(op) + u8::from(right_associative(op));
                reduce(&mut operands, &mut pending, minimum)?;
                pending.push(Pending::Binary(op));
            }
            Piece::Joined => {
                reduce(&mut operands, &mut pending, JOINED)?;
                pending.push(Pending::Joined);
            }
            Piece::Cond(middle) => {
                reduce(&mut operands, &mut pending, COND + 1)?;
                pending.push(Pending::Cond(middle));
            }
            Piece::Inside(ranges, end) => {
                reduce(&mut operands, &mut pending, RELATIONAL)?;
                let subject = operands.pop()?;
                let span = subject.span.to(end);
                operands.push(Expr { kind: ExprKind::Inside(Box::new(subject), ranges), span });
            }
        }
    }
    reduce(&mut operands, &mut pending, 0)?;
    let result = operands.pop()?;
    operands.is_empty().then_some(result)
}

/// Completes every pending operator that binds at least as tightly as `minimum`.
fn reduce(operands: &mut Vec<Expr>, pending: &mut Vec<Pending>, minimum: Strength) -> Option<()> {
    while pending.last().is_some_and(|top| top.strength() >= minimum) {
        let right = operands.pop()?;
        let left = operands.pop()?;
        let span = left.span.to(right.span);
        let kind = match pending.pop()? {
            Pending::Binary(op) => ExprKind::Binary(op, Box::new(left), Box::new(right)),
            Pending::Joined => ExprKind::Binary(BinaryOp::LogicalAnd, Box::new(left), Box::new(right)),
            Pending::Cond(middle) => ExprKind::Cond(Box::new(left), Box::new(middle), Box::new(right)),
        };
        operands.push(Expr { kind, span });
    }
    Some(())
}
