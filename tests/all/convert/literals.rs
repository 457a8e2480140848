//! Literals (IEEE 1800-2017 clause 5.7 to 5.9), selects, calls, casts and aggregates.

use super::{check_expr, check_items};

#[test]
fn based_numbers_expand_to_bits() {
    check_expr("8'hFx", "8'b1111xxxx");
    check_expr("8 'o 7_z", "8'b111zzz");
    check_expr("4'b1?x_0", "4'b1zx0");
    check_expr("'sd12", "'sb1100");
    check_expr("16'SHa", "16'sb1010");
    check_expr("5'dx", "5'bx");
    check_expr("5'd?", "5'bz");
    check_expr("'hAB", "'b10101011");
    check_expr("3'd7", "3'b111");
}

#[test]
fn plain_decimals_may_be_of_any_size() {
    check_expr("1_234", "1234");
    // 2^64 + 1, one bit more than a machine word holds.
    let bits = format!("1{}1", "0".repeat(63));
    check_expr("18446744073709551617", &format!("d{bits}"));
    check_expr("80'd18446744073709551617", &format!("80'b{bits}"));
}

#[test]
fn fills_reals_times_and_strings() {
    check_items("assign a = '0, b = '1, c = 'x, d = 'Z;", "(assign a = '0 b = '1 c = 'x d = 'z)");
    check_expr("1_0.2_5", "10.25");
    check_expr("3E+2", "300.0");
    check_expr("2.5e-1", "0.25");
    check_expr("12ns", "1.2e-8s");
    check_expr(r#""a\"b\\c\n\x41\101""#, r#""a\"b\\c\nAA""#);
}

#[test]
fn selects_and_hierarchical_names() {
    check_expr("a.b[3].c[7:0]", "a.b[3].c[7:0]");
    check_expr("m[i][j][3 +: 2]", "m[i][j][3+:2]");
    check_expr("m[i - 1 -: W]", "m[(Sub i 1)-:W]");
    check_expr("top.g[2].u.q", "top.g[2].u.q");
    check_expr("p::c + $unit::d", "(Add p::c $unit::d)");
    check_expr("{a, b}[3:0]", "{a b}[3:0]");
    check_expr("\\a+b + c", "(Add a+b c)");
    check_items("assign {a, b[1], c.d[3:2]} = e;", "(assign {a b[1] c.d[3:2]} = e)");
    check_items(
        "localparam A = B, C = p::D, E = G.H, F = I[2];",
        "(localparam _ A B) (localparam _ C p::D) (localparam _ E G.H) (localparam _ F I[2])",
    );
}

#[test]
fn calls() {
    check_expr("f(a, , 3)", "f(a _ 3)");
    check_expr("f()", "f()");
    check_expr("f(.a(1), .b())", "f(.a=1 .b=_)");
    check_expr("p::f(x) + u.g(y)", "(Add p::f(x) u.g(y))");
    check_expr("e.next + e.next()", "(Add e.next e.next())");
    check_expr("a.sum() + a.xor", "(Add a.sum() a.xor())");
    check_expr("$signed({1'b0, a})", "$signed({1'b0 a})");
    check_expr("$bits(logic [3:0]) + $bits(T)", "(Add $bits(type logic[3:0]) $bits(T))");
    check_items("localparam A = $clog2(N) + f(2);", "(localparam _ A (Add $clog2(N) f(2)))");
}

#[test]
fn casts_and_aggregates() {
    check_expr("8'(x)", "(cast 8 x)");
    check_expr("T'(x) + (W + 1)'(y)", "(Add (cast T x) (cast (Add W 1) y))");
    check_expr("signed'(x) + unsigned'(y)", "(Add (cast Signed x) (cast Unsigned y))");
    check_expr("int'(x) + p::t'(y)", "(Add (cast type int x) (cast p::t y))");
    check_expr("{3{a, b}}", "{3 x a b}");
    check_expr("'{1, 2}", "_'{1 2}");
    check_expr("'{x: 1, y: 2, default: '0}", "_'{x:1 y:2 default:'0}");
    check_expr("T'{a: 1, int: 5}", "T'{a:1 type int:5}");
    check_expr("'{3{2}}", "_'{3x2}");
    check_expr("{<< 8 {a, b}}", "{<< 8 a b}");
    check_expr("{>> {a}}", "{>> _ a}");
    check_expr("(1:2:3)", "(mtm 1 2 3)");
}
