//! Processes, statements, functions and tasks.

use super::check_items;

/// Checks a statement that is the body of an `always @*`.
#[track_caller]
fn check_stmt(source: &str, expected: &str) {
    check_items(&format!("always @* {source}"), &format!("(Always @* {expected})"));
}

#[test]
fn the_event_control_heads_the_process() {
    check_items("always @(posedge clk or negedge rst) q <= d;", "(Always @((Posedge clk) (Negedge rst)) (q <= d))");
    check_items("always @(a, b or c, edge d iff e) x = 1;", "(Always @((a) (b) (c) (Both d iff e)) (x = 1))");
    check_items("always @(*) x = a; always @* x = a;", "(Always @* (x = a)) (Always @* (x = a))");
    check_items("always @ clk x = a;", "(Always @((clk)) (x = a))");
    check_items(
        "always_comb x = a; always_latch if (g) q <= d; always_ff @(posedge c) q <= d;",
        "(AlwaysComb (x = a)) (AlwaysLatch (if g (q <= d))) (AlwaysFf @((Posedge c)) (q <= d))",
    );
    check_items(
        "always #5 x = ~x; initial x = 1;",
        "(Always (timed \"delay control\" (x = (Not x)))) (Initial (x = 1))",
    );
}

#[test]
fn assignments() {
    check_stmt(
        "begin a += 1; a <<= 2; a >>>= 1; a ^= b; a++; --b; end",
        "(begin (a Add= 1) (a Shl= 2) (a ArithShr= 1) (a Xor= b) (a Add= 1) (b Sub= 1))",
    );
    check_stmt(
        "begin {a, b} = c; a.b[2].c <= 1; x[3:0] = y; x[i +: 2] <= z; end",
        "(begin ({a b} = c) (a.b[2].c <= 1) (x[3:0] = y) (x[i+:2] <= z))",
    );
    check_stmt(
        "begin a <= #1 b; a = @(posedge c) b; end",
        "(begin (a <= b) (unsupported event control inside an assignment))",
    );
    check_stmt(
        "begin assign a = b; force a = b; end",
        "(begin (unsupported procedural continuous assignment) (unsupported force or release))",
    );
}

#[test]
fn decisions() {
    check_stmt("if (a) x = 1; else if (b) x = 2; else x = 3;", "(if a (x = 1) (if b (x = 2) (x = 3)))");
    check_stmt("if (a) if (b) x = 1; else x = 2;", "(if a (if b (x = 1) (x = 2)))");
    check_stmt("unique if (a) x = 1; else if (b) x = 2;", "(Unique if a (x = 1) (if b (x = 2)))");
    check_stmt("if (a) ; else x = 1;", "(if a (;) (x = 1))");
    check_stmt(
        "unique case (s) 2'b00, 2'b01: a = 1; default: ; endcase",
        "(Unique Case s (2'b00 2'b01: (a = 1)) (default (;)))",
    );
    check_stmt("priority casez (s) 4'b1???: a = 1; endcase", "(Priority Casez s (4'b1zzz: (a = 1)))");
    check_stmt("(* full_case *) casex (s) 2'bx1: a = 1; endcase", "(* full_case=_ *) (Casex s (2'bx1: (a = 1)))");
    check_stmt("case (s) inside [1:3], 5: a = 1; endcase", "(Inside s ([1:3] 5: (a = 1)))");
}

#[test]
fn loops() {
    check_stmt("for (i = 0; i < 4; i = i + 1) a[i] = b;", "(for [(i = 0)] (Lt i 4) [(i = (Add i 1))] (a[i] = b))");
    check_stmt(
        "for (int i = 0, k = 1; i < 4; i++, k += 2) begin continue; break; end",
        "(for [(int i = 0) (int k = 1)] (Lt i 4) [(i Add= 1) (k Add= 2)] (begin (continue) (break)))",
    );
    check_stmt(
        "begin while (a) a = b; do a = b; while (c); repeat (4) a = b; forever a = b; foreach (m[i, j]) m[i][j] = 0; end",
        "(begin (while a (a = b)) (do (a = b) c) (repeat 4 (a = b)) (forever (a = b)) (foreach m[i j] (m[i][j] = 0)))",
    );
}

#[test]
fn blocks_calls_and_the_rest() {
    check_stmt(
        "begin : b reg t; integer i, j; localparam P = 2; t = a; disable b; end",
        "(begin:b [(var logic t) (var integer i j) (localparam _ P 2)] (t = a) (disable b))",
    );
    check_stmt("begin lab: a = 1; lab2: begin b = 1; end end", "(begin (begin:lab (a = 1)) (begin:lab2 (b = 1)))");
    check_stmt(
        "begin foo; foo(a); u.foo(1); p::foo(2); void'(f(x)); end",
        "(begin (call foo()) (call foo(a)) (call u.foo(1)) (call p::foo(2)) (call f(x)))",
    );
    check_stmt(
        "begin $display(\"a\"); $readmemh(\"f\", m); assert (a); end",
        "(begin (skipped $display) (call $readmemh(\"f\" m)) (skipped assertion))",
    );
    check_stmt(
        "begin @(posedge c) x = 1; #5; wait (z) w = 1; fork join -> ev; end",
        "(begin (timed \"event control\" (x = 1)) (timed \"delay control\" (;)) (timed \"wait\" (w = 1)) \
         (unsupported fork) (skipped event trigger))",
    );
}

/// IEEE 1800-2017 clause 6.21: a static variable takes its initial value once, not each time the block runs.
#[test]
fn variables_of_a_block_that_are_initialised_once_are_not_taken_for_automatic_ones() {
    check_stmt("begin automatic int k = 3; x = k; end", "(begin [(var int k=3)] (x = k))");
    check_stmt("begin static int k = 3; x = k; end", "(begin [(var int once k=3)] (x = k))");
    check_items(
        "function automatic f(input a); logic t = a; f = t; endfunction",
        "(function automatic implicit f [(Input implicit a)] [(var logic t=a)] (f = t))",
    );
    check_items(
        "function f(input a); logic t = a; f = t; endfunction",
        "(function implicit f [(Input implicit a)] [(var logic once t=a)] (f = t))",
    );
}

/// IEEE 1800-2017 clause 13.3 for what an argument leaves out.
#[test]
fn functions_and_tasks() {
    check_items(
        "function [3:0] f; input [3:0] a, b; input c; reg [1:0] c; reg t; begin f = a; end endfunction",
        "(function implicit[3:0] f [(Input implicit[3:0] a) (Input implicit[3:0] b) (Input logic[1:0] c)] \
         [(var logic t)] (begin (f = a)))",
    );
    check_items(
        "function automatic integer g(input [3:0] a, b, input c, output logic d, e, inout [1:0] h = 3); return a; endfunction",
        "(function automatic integer g [(Input implicit[3:0] a) (Input implicit[3:0] b) (Input implicit c) \
         (Output logic d) (Output logic e) (Inout implicit[1:0] h=3)] [] (return a))",
    );
    check_items(
        "function f(a, b); f = a; endfunction",
        "(function implicit f [(Input implicit a) (Input implicit b)] [] (f = a))",
    );
    check_items("function void f(); endfunction", "(function void f [] [] )");
    check_items(
        "task t; input a; output [3:0] b; integer i; b = a; endtask",
        "(task void t [(Input implicit a) (Output implicit[3:0] b)] [(var integer i)] (b = a))",
    );
    check_items(
        "task automatic t(input a, output reg b); b = a; endtask",
        "(task automatic void t [(Input implicit a) (Output logic b)] [] (b = a))",
    );
}
