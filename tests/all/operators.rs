//! The operators on constants, compared with an independent simulator (Debian's `iverilog`, IEEE 1364-2005) on random
//! operands of random width, sign and unknown bits. One Verilog file with one `$display` per case; nothing of ours
//! computes the expected text.

use std::fmt::Write;

use stillwire::elaborate::value::{Logic, Value};
use stillwire::syntax::ast::{BinaryOp, UnaryOp};

use crate::simulator::{Random, display_lines};

const CASES: usize = 400;

const BINARY: [(BinaryOp, &str); 26] = [
    (BinaryOp::Add, "+"),
    (BinaryOp::Sub, "-"),
    (BinaryOp::Mul, "*"),
    (BinaryOp::Div, "/"),
    (BinaryOp::Mod, "%"),
    (BinaryOp::Pow, "**"),
    (BinaryOp::Eq, "=="),
    (BinaryOp::Ne, "!="),
    (BinaryOp::CaseEq, "==="),
    (BinaryOp::CaseNe, "!=="),
    (BinaryOp::WildEq, "==?"),
    (BinaryOp::WildNe, "!=?"),
    (BinaryOp::LogicalAnd, "&&"),
    (BinaryOp::LogicalOr, "||"),
    (BinaryOp::Lt, "<"),
    (BinaryOp::Le, "<="),
    (BinaryOp::Gt, ">"),
    (BinaryOp::Ge, ">="),
    (BinaryOp::And, "&"),
    (BinaryOp::Or, "|"),
    (BinaryOp::Xor, "^"),
    (BinaryOp::Xnor, "~^"),
    (BinaryOp::Shr, ">>"),
    (BinaryOp::Shl, "<<"),
    (BinaryOp::ArithShr, ">>>"),
    (BinaryOp::ArithShl, "<<<"),
];

const UNARY: [(UnaryOp, &str); 10] = [
    (UnaryOp::Plus, "+"),
    (UnaryOp::Minus, "-"),
    (UnaryOp::LogicalNot, "!"),
    (UnaryOp::Not, "~"),
    (UnaryOp::ReduceAnd, "&"),
    (UnaryOp::ReduceNand, "~&"),
    (UnaryOp::ReduceOr, "|"),
    (UnaryOp::ReduceNor, "~|"),
    (UnaryOp::ReduceXor, "^"),
    (UnaryOp::ReduceXnor, "~^"),
];

/// A random value: often narrow, often extreme, with unknown bits in one of four.
fn random_value(random: &mut Random) -> Value {
    let width = match random.below(4) {
        0 => 1 + random.below(4),
        1 | 2 => 1 + random.below(12),
        _ => 1 + random.below(140),
    };
    let unknown = random.below(4) == 0;
    let shape = random.below(8);
    let signed = random.below(2) == 0;
    let bits = (0..width).map(|at| match (shape, random.below(8)) {
        (_, 0) if unknown => Logic::X,
        (_, 1) if unknown => Logic::Z,
        (0, _) => Logic::Zero,
        (1, _) => Logic::One,
        (2, _) => Logic::from(at == 0),
        (3, _) => Logic::from(at + 1 == width),
        (_, bit) => Logic::from(bit % 2 == 1),
    });
    Value::new(signed, bits.collect())
}

fn literal(value: &Value) -> String {
    format!("{}'{}b{}", value.width(), if value.signed { "s" } else { "" }, value.to_bit_string())
}

/// Simulates `$display("%b", expression)` for each expression and compares with `expected`.
#[track_caller]
fn check(cases: &[(String, Value)]) {
    let mut source = String::from("module t;\n initial begin\n");
    for (expression, _) in cases {
        let _ = writeln!(source, "  $display(\"%b\", {expression});");
    }
    source.push_str(" end\nendmodule\n");
    let lines = display_lines(&source);
    assert_eq!(lines.len(), cases.len(), "one line per case");
    let wrong: Vec<String> = cases
        .iter()
        .zip(&lines)
        .filter(|((_, ours), line)| ours.to_bit_string() != **line)
        .map(|((expression, ours), line)| format!("{expression}: simulator {line}, ours {}", ours.to_bit_string()))
        .collect();
    assert!(
        wrong.is_empty(),
        "{} of {} differ:\n{}",
        wrong.len(),
        cases.len(),
        wrong[..wrong.len().min(12)].join("\n")
    );
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn binary_operators_agree_with_a_simulator() {
    let mut random = Random::new(0x5717);
    let mut cases = Vec::new();
    for (op, symbol) in BINARY {
        for _ in 0..CASES {
            let (left, right) = (random_value(&mut random), random_value(&mut random));
            let expression = format!("({} {symbol} {})", literal(&left), literal(&right));
            cases.push((expression, Value::binary(op, &left, &right)));
        }
    }
    check(&cases);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn unary_and_conditional_operators_agree_with_a_simulator() {
    let mut random = Random::new(0x5718);
    let mut cases = Vec::new();
    for (op, symbol) in UNARY {
        for _ in 0..CASES {
            let operand = random_value(&mut random);
            cases.push((format!("({symbol} {})", literal(&operand)), Value::unary(op, &operand)));
        }
    }
    for _ in 0..CASES {
        let [condition, then, otherwise] = [(); 3].map(|()| random_value(&mut random));
        // This simulator keeps a z that both alternatives have; table 5-21 of the standard says x.
        let [then, otherwise] = [then, otherwise].map(|value| {
            let without_z = |bit| if bit == Logic::Z { Logic::X } else { bit };
            Value::new(value.signed, value.bits.into_iter().map(without_z).collect())
        });
        let expression = format!("({} ? {} : {})", literal(&condition), literal(&then), literal(&otherwise));
        cases.push((expression, Value::conditional(&condition, &then, &otherwise)));
    }
    check(&cases);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn concatenations_and_replications_agree_with_a_simulator() {
    let mut random = Random::new(0x5719);
    let mut cases = Vec::new();
    for _ in 0..CASES {
        let parts = [(); 3].map(|()| random_value(&mut random));
        let text: Vec<String> = parts.iter().map(literal).collect();
        let count = 1 + random.below(5);
        let joined = Value::concat(&parts).expect("narrow");
        cases.push((format!("{{{count}{{{}}}}}", text.join(", ")), joined.replicate(count).expect("narrow")));
    }
    check(&cases);
}
