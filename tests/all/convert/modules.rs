//! Headers, ports, declarations, instances and generate constructs.

use super::{check_items, check_ports, convert, dump};
use stillwire::syntax::ast::{DefaultNettype, NetKind};

/// IEEE 1800-2017 clause 23.2.2.3.
#[test]
fn ansi_ports_inherit_and_default() {
    check_ports("(input a, b)", "(Input Wire implicit a) (Input Wire implicit b)");
    check_ports(
        "(input [3:0] a, b, output c)",
        "(Input Wire implicit[3:0] a) (Input Wire implicit[3:0] b) (Output Wire implicit c)",
    );
    // A data type alone takes the direction, not the sign or the range, of the port before.
    check_ports("(input signed [3:0] a, [1:0] b)", "(Input Wire implicit signed[3:0] a) (Input Wire implicit[1:0] b)");
    check_ports("(output reg q, r)", "(Output var logic q) (Output var logic r)");
    check_ports("(output [2:0] s, output logic t)", "(Output Wire implicit[2:0] s) (Output var logic t)");
    check_ports("(input logic a, output wire logic b)", "(Input Wire logic a) (Output Wire logic b)");
    check_ports("(inout tri a, b)", "(Inout Tri implicit a) (Inout Tri implicit b)");
    check_ports("(input var logic a, ref logic b)", "(Input var logic a) (Ref var logic b)");
    check_ports("(input foo_t a, output foo_t [1:0] b)", "(Input Wire foo_t a) (Output var foo_t[1:0] b)");
    check_ports("(input bit n [2], o [3:0])", "(Input Wire bit n[2]) (Input Wire bit o[3:0])");
    check_ports(
        "(bus_if.master m, interface i, input a, bus_if b)",
        "(interface bus_if.master Inout m) (interface _._ Inout i) (Input Wire implicit a) (interface bus_if._ Input b)",
    );
    check_ports("(input a, .x(b[3:0]))", "(Input Wire implicit a) (Input explicit b[3:0] x)");
    check_ports("((* k = 1 *) input a = 1)", "((* k=1 *) Input Wire implicit a=1)");
    check_ports("()", "none");
}

#[test]
fn other_port_lists() {
    check_ports("(a, b)", "(ref a a) (ref b b)");
    check_ports(
        "(.a(x), .b({y, z[3:0]}), c[1:0], {d, e}, )",
        "(ref a x) (ref b {y z[3:0]}) (ref _ c[1:0]) (ref _ {d e}) (ref _ _)",
    );
    let (unit, _) = convert(
        "module m(a, b); input wire [3:0] a; output reg b; output c; input signed d; output logic e; state_t s; endmodule",
    );
    assert_eq!(
        dump::items(&unit.modules[0].items),
        "(port Input Wire implicit[3:0] a) (port Output _ var logic b) (port Output _ implicit c) \
         (port Input _ implicit signed d) (port Output _ var logic e) (var state_t s)"
    );
}

#[test]
fn header_parameters() {
    let (unit, _) = convert(
        "(* keep *) module m import p::*; #(parameter A = 1, B = 2, localparam C = 3, D = 4, parameter type T = logic, \
         parameter int W = 8, X = 9) (input a); endmodule",
    );
    assert_eq!(
        dump::module(&unit.modules[0]),
        "(* keep=_ *) (Module m #[(parameter _ A 1) (parameter _ B 2) (localparam _ C 3) (localparam _ D 4) \
         (parameter type T logic) (parameter int W 8) (parameter int X 9)] [(Input Wire implicit a)] )"
    );
}

#[test]
fn the_default_net_type_is_that_at_the_header() {
    let (unit, _) = convert(
        "module a; endmodule\n`default_nettype none\nmodule b(input x);\n`default_nettype wand\nendmodule\n\
         module c(input x); endmodule\n`resetall\nmodule d; endmodule\n",
    );
    let found: Vec<_> = unit.modules.iter().map(|module| module.default_nettype).collect();
    let net = DefaultNettype::Net;
    assert_eq!(found, [net(NetKind::Wire), DefaultNettype::None, net(NetKind::Wand), net(NetKind::Wire)]);
    assert_eq!(dump::ports(&unit.modules[2].ports), "(Input Wand implicit x)");
}

#[test]
fn declarations() {
    check_items(
        "wire a, b = c; wire signed [3:0] #2 d; supply0 g; tri1 logic h;",
        "(net Wire implicit a b=c) (net Wire implicit signed[3:0] d) (net Supply0 implicit g) (net Tri1 logic h)",
    );
    check_items(
        "reg [7:0] mem [0:255]; integer i; logic signed [1:0][3:0] s = '0; foo_t f; p::t g [N];",
        "(var logic[7:0] mem[0:255]) (var integer i) (var logic signed[1:0][3:0] s='0) (var foo_t f) (var p::t g[N])",
    );
    check_items("logic a [], b [$], c [*];", "(var logic a[dynamic] b[dynamic] c[dynamic])");
    check_items(
        "typedef enum logic [1:0] {A, B = 2, C[3], D[2:0] = 5} e_t;",
        "(typedef e_t enum logic[1:0] {A=_ B=2 C[3:_]=_ D[2:0]=5})",
    );
    check_items(
        "typedef struct packed signed {logic [3:0] a; t b, c;} s_t; typedef union packed {bit x; logic y;} u_t;",
        "(typedef s_t struct packed {logic[3:0] a; t b; t c;} signed) (typedef u_t union packed {bit x; logic y;})",
    );
    check_items(
        "import p::*, q::r; genvar i, j; defparam u.v.W = 3; alias a = b = c;",
        "(import p::* q::r) (genvar i j) (defparam u.v.W = 3) (alias a b c)",
    );
    check_items("assign a = b, c[1] = d;", "(assign a = b c[1] = d)");
    check_items(
        "parameter P = 1; localparam signed [3:0] Q = 2, R = 3; localparam type T = logic;",
        "(parameter _ P 1) (localparam implicit signed[3:0] Q 2) (localparam implicit signed[3:0] R 3) \
         (localparam type T logic)",
    );
}

#[test]
fn instances() {
    check_items("foo u1(a, , b), u2(.x(a), .y(), .z, .*);", "(inst foo #() u1(a _ b) u2(.x(a) .y(_) .z .*))");
    check_items("(* keep *) foo #(1, W) u3 [3:0] ();", "(* keep=_ *) (inst foo #(1 W) u3[3:0]())");
    check_items("foo #(.A(1), .T(logic [3:0]), .B()) u4 (a);", "(inst foo #(.A(1) .T(type logic[3:0]) .B(_)) u4(a))");
    check_items(
        "bind top.u1 foo u(.*); bind foo: a.b, c[2] bar v(x);",
        "(bind top.u1 (inst foo #() u(.*))) (bind a.b (inst bar #() v(x))) (bind c[2] (inst bar #() v(x)))",
    );
}

#[test]
fn gates_and_primitive_instances() {
    check_items(
        "and (o, a, b); nand #3 n1 (o, a), n2 (p, b, c); buf (strong0, pull1) b1 [3:0] (o, p, i);",
        "(gate And _(o a b)) (gate Nand n1(o a) n2(p b c)) (gate Buf b1[3:0](o p i))",
    );
    check_items(
        "bufif1 (o, i, e); rnmos (o, i, g); cmos c (o, i, n, p); tran (a, b); tranif0 (a, b, c); pullup (a);",
        "(gate Bufif1 _(o i e)) (gate Rnmos _(o i g)) (gate Cmos c(o i n p)) (gate Tran _(a b)) \
         (gate Tranif0 _(a b c)) (gate Pullup _(a))",
    );
    check_items("udp (o, a); udp (strong0, strong1) #2 u (o, a, b);", "(inst udp #() (o a)) (inst udp #() u(o a b))");
}

#[test]
fn delays_and_strengths_are_counted() {
    let (_, diagnostics) =
        convert("module m; wire #1 a; assign (strong0, weak1) #(1, 2) b = c; not #1 (a, b); endmodule");
    assert_eq!(diagnostics.len(), 1);
    assert!(diagnostics[0].message.starts_with("4 delay or strength"), "{}", diagnostics[0].message);
}

#[test]
fn primitives() {
    let (unit, _) = convert(
        "primitive p1 (o, a, b); output o; input a, b; table 0 0 : 0; 1 ? : 1; b x : X; endtable endprimitive\n\
         primitive p2 (q, d, c); output q; reg q; input d, c; initial q = 1'b0; table 0 (01) : ? : 0; 1 r : ? : 1; \
         ? f : ? : -; * ? : 1 : -; 1 (0?) : 1 : 1; endtable endprimitive\n\
         primitive p3 (output reg q = 1'b1, input d, e, input c); table 0 1 1 : ? : 0; endtable endprimitive\n",
    );
    assert_eq!(dump::udp(&unit.udps[0]), "(combinational p1 o [a b] 00:0 1?:1 bx:x)");
    assert_eq!(dump::udp(&unit.udps[1]), "(sequential p2 q [d c] initial 0 0(01):?:0 1r:?:1 ?f:?:- *?:1:- 1(0?):1:1)");
    assert_eq!(dump::udp(&unit.udps[2]), "(sequential p3 q [d e c] initial 1 011:?:0)");
}

#[test]
fn generate_constructs_nest_as_written() {
    check_items(
        "generate for (i = 0; i < 4; i = i + 1) begin : g wire a; end endgenerate",
        "(generate < (genfor i=0 (Lt i 4) i = (Add i 1) begin:g (net Wire implicit a) end) >)",
    );
    check_items(
        "for (genvar j = 0; j < N; j++) assign a[j] = b;",
        "(genfor genvar j=0 (Lt j N) j Add= 1 < (assign a[j] = b) >)",
    );
    check_items(
        "if (A) begin : x assign a = 1; end else if (B) assign a = 2; else begin assign a = 3; end",
        "(genif A begin:x (assign a = 1) end < (genif B < (assign a = 2) > begin (assign a = 3) end) >)",
    );
    check_items(
        "if (A) if (B) assign a = 1; else assign a = 2;",
        "(genif A < (genif B < (assign a = 1) > < (assign a = 2) >) > _)",
    );
    check_items(
        "case (W) 1, 2: begin : c assign a = 1; end default: ; endcase",
        "(gencase W (1 2: begin:c (assign a = 1) end) <  >)",
    );
}

#[test]
fn other_design_units() {
    let (unit, _) = convert(
        "package p; parameter A = 1; export q::*; function int f(int x); return x; endfunction endpackage\n\
         interface ii(input clk); logic a, b; modport m(input a, output .x(b)); endinterface\n\
         program pr(input a); initial $finish; endprogram\n\
         typedef logic t; class c; endclass config g; design top; endconfig\n\
         module outer; module inner; endmodule endmodule\n",
    );
    assert_eq!(
        dump::items(&unit.packages[0].items),
        "(parameter _ A 1) (export q::*) (function int f [(Input int x)] [] (return x))"
    );
    let modules: Vec<_> = unit.modules.iter().map(dump::module).collect();
    assert_eq!(
        modules,
        [
            "(Interface ii #[] [(Input Wire implicit clk)] (var logic a b) (modport m (Input a) (Output x=b)))",
            "(Program pr #[] [(Input Wire implicit a)] (skipped program))",
            "(Module outer #[] [none] (Module inner #[] [none] ))",
        ]
    );
    assert_eq!(dump::items(&unit.items), "(typedef t logic) (skipped class c) (unsupported configuration)");
}

#[test]
fn what_only_a_simulator_needs_is_skipped_and_nothing_vanishes() {
    check_items("specify (a => b) = 3; endspecify", "(skipped specify block)");
    check_items("specparam t = 3; timeunit 1ns;", "(skipped specparam) (skipped time unit)");
    check_items(
        "assert property (@(posedge clk) a |-> b); property q; a; endproperty",
        "(skipped assertion) (skipped assertion)",
    );
    check_items(
        "covergroup cg @(posedge clk); endgroup class c; endclass",
        "(skipped covergroup cg) (skipped class c)",
    );
    check_items(
        "clocking cb @(posedge clk); endclocking default disable iff r;",
        "(skipped clocking block) (skipped assertion)",
    );
    check_items(
        "import \"DPI-C\" function int f(input int a); final $display;",
        "(skipped DPI import f) (skipped final procedure)",
    );
    check_items("nettype t w; $error(\"x\");", "(typedef w t) (elab $error)");
    check_items("nettype t w with f;", "(unsupported net type with a resolution function)");
    check_items("let op(x, y = 2) = x & y;", "(let op [x=_ y=2] (And x y))");
}
