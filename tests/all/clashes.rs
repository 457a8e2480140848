//! One name, one declaration (IEEE 1800-2017 clause 3.13): a second one in the same scope is text that nobody reads, so it is
//! reported and the run is not complete. What only looks like a clash is read.

use stillwire::Scan;

use crate::checked::request;

fn scan(text: &str) -> (Vec<String>, bool) {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("t.sv");
    std::fs::write(&file, text).expect("written");
    let Scan { report, .. } = stillwire::scan(&request(vec![file], 1), &|_| None, &|_| {}).expect("read");
    let complete = report.complete();
    (report.findings.into_iter().map(|finding| finding.message).collect(), complete)
}

/// Reads a text in which one name is declared twice.
#[track_caller]
fn twice(name: &str, text: &str) {
    refused(&format!("`{name}` is declared twice, and only the first is read"), text);
}

#[track_caller]
fn refused(message: &str, text: &str) {
    let (findings, complete) = scan(text);
    assert!(findings.iter().any(|finding| finding.contains(message)), "{findings:?}");
    assert!(!complete);
}

#[track_caller]
fn read(text: &str) {
    let (findings, complete) = scan(text);
    assert!(complete && !findings.iter().any(|finding| finding.contains("twice")), "{findings:?}");
}

#[test]
fn a_second_declaration_in_the_same_scope_is_reported() {
    let module = |items: &str| format!("module t(input [1:0] a, output [1:0] y); {items} endmodule");
    twice(
        "f",
        &module(
            "function f(input x); return x; endfunction function f(input x); return !x; endfunction assign y = f(a[0]);",
        ),
    );
    twice("x", &module("function [1:0] f(input [1:0] x, input [1:0] x); return x; endfunction assign y = f(a, a);"));
    twice("q", &module("typedef logic [1:0] q; typedef logic q; q z; assign z = a; assign y = z;"));
    twice("A", &module("typedef enum logic [1:0] {A, B, A} e; assign y = A;"));
    twice("B", &module("typedef enum logic [1:0] {A, B} e; localparam B = 3; assign y = B;"));
    twice("i", &module("genvar i; genvar i; for (i = 0; i < 2; i++) assign y[i] = a[i];"));
    twice("y", &module("localparam y = 1;"));
    twice("P", "module t #(parameter P = 1, parameter P = 2)(input a, output [1:0] y); assign y = P; endmodule");
    twice(
        "X",
        "package p; localparam X = 1; localparam X = 0; endpackage module t(output y); assign y = p::X; endmodule",
    );
    twice(
        "u",
        "module s(input a, output y); assign y = a; endmodule \
         module t(input [1:0] a, output [1:0] y); s u(a[0], y[0]); s u(a[1], y[1]); endmodule",
    );
    twice(
        "m",
        "interface i; logic a; modport m(input a); modport m(output a); endinterface \
         module t(input a, output y); i u(); assign u.a = a; assign y = u.a; endmodule",
    );
    twice("z", &module("if (1) begin : g let z = a; localparam z = 1; assign y = z; end"));
}

#[test]
fn what_is_given_twice_is_reported() {
    refused(
        "`p` is a member of this type already",
        "module t(input a, output y); struct packed {logic p; logic q; logic p;} v; assign v = {3{a}}; assign y = v.p; endmodule",
    );
    refused(
        "an item of an assignment pattern that is given twice",
        "module t(input [1:0] a, output [1:0] y); struct packed {logic p; logic q;} v; \
         assign v = '{p: a[0], p: a[1], q: 0}; assign y = v; endmodule",
    );
    refused(
        "an argument of `f` that is given twice",
        "module t(input a, output y); function f(input x, input z); return x ^ z; endfunction \
         assign y = f(.x(a), .x(a), .z(a)); endmodule",
    );
    let leaf = "module s #(parameter P = 0)(input a, output y); assign y = a ^ P; endmodule";
    refused(
        "parameter `P` is overridden twice here",
        &format!("{leaf} module t(input a, output y); s #(.P(1), .P(0)) u(.a(a), .y(y)); endmodule"),
    );
    refused(
        "a second connection to the same port of `s`, which is not taken",
        &format!("{leaf} module t(input a, b, output y); s u(.a(a), .a(b), .y(y)); endmodule"),
    );
    refused(
        "`g` is the name of something else in this scope",
        "module t(input [1:0] a, output [1:0] y); if (1) begin : g wire x = a[0]; end if (1) begin : g wire x = a[1]; end \
         assign y = {g.x, g.x}; endmodule",
    );
}

#[test]
fn a_second_default_is_reported() {
    let module = |items: &str| format!("module t(input [1:0] a, output logic y); {items} endmodule");
    refused(
        "case with more than one default",
        &module("always_comb case (a) default: y = 0; 1: y = 1; default: y = 1; endcase"),
    );
    refused(
        "case with more than one default",
        &module("always_comb case (a) inside default: y = 0; 1: y = 1; default: y = 1; endcase"),
    );
    refused(
        "case generate with more than one default",
        &module("case (1) default: assign y = a[0]; default: assign y = a[1]; endcase"),
    );
}

#[test]
fn what_only_looks_like_a_clash_is_read() {
    read("module t(a, y); input a; output y; wire a; reg y; always @* y = a; endmodule");
    read("module t(input a, output y); typedef q; typedef logic q; q z; assign z = a, y = z; endmodule");
    read(
        "package p; localparam X = 1; endpackage \
         module t(input a, output y); import p::X; import p::X; import p::*; assign y = a ^ X; endmodule",
    );
    read(
        "package p; export q::*; localparam X = 1; endpackage package q; import p::*; export p::*; endpackage \
         module t(input a, output y); assign y = a ^ q::X; endmodule",
    );
    read(
        "module t #(parameter P = 1)(input a, output y); if (P) begin : g assign y = a; end \
         else begin : g assign y = !a; end endmodule",
    );
    read(
        "module t(input a, output y); wire x = a; function f(input x); return !x; endfunction \
         if (1) begin : g wire x = f(a); assign y = x; end endmodule",
    );
    read(
        "module t(input a, output y); for (genvar i = 0; i < 1; i++) begin : g assign y = a; end \
         for (genvar i = 0; i < 1; i++) begin : h wire z = a; end endmodule",
    );
}

/// Found by the fuzzer: two instances that the text gives no name had one name in the flattened netlist.
#[test]
fn instances_without_a_name_are_told_apart_when_flattened() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("t.v");
    std::fs::write(&file, "module t(input c, output z); g(z, c); h(z, c); endmodule").expect("written");
    let (netlist, _) = stillwire::flatten(&request(vec![file], 1), None, &|_| None, &|_| {}).expect("read");
    let (findings, _) = scan(&netlist);
    assert!(netlist.contains("  g ") && netlist.contains("  h "), "{netlist}");
    assert!(!findings.iter().any(|finding| finding.contains("twice")), "{findings:?}\n{netlist}");
}
