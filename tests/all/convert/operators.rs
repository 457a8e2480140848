//! Precedence and associativity, each expectation derived from IEEE 1800-2017 table 11-2.

use super::{check_expr, check_items};

#[test]
fn each_row_of_the_table_binds_tighter_than_the_next() {
    check_expr("-a ** b", "(Pow (Minus a) b)");
    check_expr("a * b ** c", "(Mul a (Pow b c))");
    check_expr("a + b * c % d / e", "(Add a (Div (Mod (Mul b c) d) e))");
    check_expr("a << b + c", "(Shl a (Add b c))");
    check_expr("a < b >> c", "(Lt a (Shr b c))");
    check_expr("a == b < c", "(Eq a (Lt b c))");
    check_expr("a & b == c", "(And a (Eq b c))");
    check_expr("a ^ b & c", "(Xor a (And b c))");
    check_expr("a | b ^ c", "(Or a (Xor b c))");
    check_expr("a && b | c", "(LogicalAnd a (Or b c))");
    check_expr("a || b && c", "(LogicalOr a (LogicalAnd b c))");
    check_expr("a || b ? c : d", "(? (LogicalOr a b) c d)");
    check_expr("a -> b ? c : d", "(Implies a (? b c d))");
    check_expr("a ? b : c -> d", "(Implies (? a b c) d)");
}

#[test]
fn the_looser_operator_first_gives_the_same_grouping() {
    check_expr("a ** b * c", "(Mul (Pow a b) c)");
    check_expr("a * b + c", "(Add (Mul a b) c)");
    check_expr("a & b | c & d", "(Or (And a b) (And c d))");
    check_expr("a == b && c != d || e", "(LogicalOr (LogicalAnd (Eq a b) (Ne c d)) e)");
    check_expr("a | b & c ^ d", "(Or a (Xor (And b c) d))");
}

#[test]
fn equal_operators_associate_to_the_left() {
    check_expr("a - b - c - d", "(Sub (Sub (Sub a b) c) d)");
    check_expr("a ** b ** c", "(Pow (Pow a b) c)");
    check_expr("a / b * c", "(Mul (Div a b) c)");
    check_expr("a >>> b >> c <<< d", "(ArithShl (Shr (ArithShr a b) c) d)");
    check_expr("a === b !== c ==? d !=? e", "(WildNe (WildEq (CaseNe (CaseEq a b) c) d) e)");
    check_expr("a ^ b ~^ c ^~ d", "(Xnor (Xnor (Xor a b) c) d)");
    check_expr("a <= b >= c", "(Ge (Le a b) c)");
}

#[test]
fn conditional_and_implication_associate_to_the_right() {
    check_expr("a ? b : c ? d : e", "(? a b (? c d e))");
    check_expr("a ? b ? c : d : e", "(? a (? b c d) e)");
    check_expr("a ? b : c | d ? e : f & g", "(? a b (? (Or c d) e (And f g)))");
    check_expr("a -> b -> c", "(Implies a (Implies b c))");
    check_expr("a <-> b -> c", "(Equivalent a (Implies b c))");
}

#[test]
fn unary_operators_bind_tightest_and_parentheses_group() {
    check_expr("~a & !b", "(And (Not a) (LogicalNot b))");
    check_expr("&a & |b ^ ~^c", "(Xor (And (ReduceAnd a) (ReduceOr b)) (ReduceXnor c))");
    check_expr("~&a | ~|b + ^c", "(Or (ReduceNand a) (Add (ReduceNor b) (ReduceXor c)))");
    check_expr("a - -b", "(Sub a (Minus b))");
    check_expr("(a | b) & c", "(And (Or a b) c)");
    check_expr("a - (b - c)", "(Sub a (Sub b c))");
    check_expr("~(a + b) * c", "(Mul (Not (Add a b)) c)");
    check_expr("((a))", "a");
}

#[test]
fn inside_stands_with_the_relational_operators() {
    check_expr("a && b inside {1, [2:3], [4:$]} || c", "(LogicalOr (LogicalAnd a (inside b 1 [2:3] [4:_])) c)");
    check_expr("a + b inside {c}", "(inside (Add a b) c)");
    check_expr("a == b inside {c} ? d : e", "(? (Eq a (inside b c)) d e)");
}

#[test]
fn constant_expressions_group_in_the_same_way() {
    check_items(
        "localparam P = A | B & C ? D + E * F : G - H - I;",
        "(localparam _ P (? (Or A (And B C)) (Add D (Mul E F)) (Sub (Sub G H) I)))",
    );
    check_items("wire [W - 1 - X:0] a;", "(net Wire implicit[(Sub (Sub W 1) X):0] a)");
}

/// `&&&` is one token by IEEE 1800-2017 clause 5.5, but the parser splits it into `&&` and a reduction.
#[test]
fn the_triple_ampersand_is_not_a_reduction() {
    check_expr("a && &b", "(LogicalAnd a (ReduceAnd b))");
    check_expr("a &&& b", "(LogicalAnd a b)");
    check_expr("a || b &&& c == d", "(LogicalAnd (LogicalOr a b) (Eq c d))");
    check_expr("a &&& b ? c : d", "(? (LogicalAnd a b) c d)");
}

#[test]
fn a_long_chain_is_grouped_to_the_left() {
    let operands: Vec<String> = (0..300).map(|i| format!("a{i}")).collect();
    let expected = operands.iter().skip(1).fold("a0".to_string(), |left, right| format!("(Sub {left} {right})"));
    check_expr(&operands.join(" - "), &expected);
}
