//! Elaboration against facts derived by hand from IEEE 1364-2005: how many cells of which kind a process makes, what
//! their controls are, what the width and sign rules give, what becomes of wrong and endless input. Values are looked at
//! through an evaluator of a dozen lines that shares nothing with the product.

use std::collections::HashMap;
use std::time::Duration;

use stillwire::diagnostic::{Diagnostic, Kind};
use stillwire::elaborate::{Design, Request, elaborate};
use stillwire::graph::{Cell, CellKind, Edge, GateKind, Graph, NodeId, NodeKind, SourceKind, check};
use stillwire::source::{self, SourceSet};

struct Elaborated {
    design: Design,
    diagnostics: Vec<Diagnostic>,
    sources: SourceSet,
}

fn run(text: &str, tops: &[&str]) -> Elaborated {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("t.sv");
    std::fs::write(&file, text).expect("written");
    let request = source::Request { paths: vec![file], ..source::Request::default() };
    let loaded = source::on_big_stacks(1, || source::load(&request, &|_| None, &|_, _| {}).expect("loads"));
    let loaded = loaded.expect("threads");
    assert_eq!(loaded.diagnostics, [], "the text parses");
    let request = Request { tops: tops.iter().map(|top| top.to_string()).collect(), ..Request::default() };
    let (design, diagnostics) = elaborate(&loaded.units, &request);
    assert_eq!(check(&design.graph), Vec::<String>::new(), "the graph is sound");
    Elaborated { design, diagnostics, sources: loaded.sources }
}

/// Elaborates a text that must give no diagnostics.
#[track_caller]
fn clean(text: &str) -> Elaborated {
    let elaborated = run(text, &[]);
    assert_eq!(elaborated.diagnostics, []);
    elaborated
}

impl Elaborated {
    fn graph(&self) -> &Graph {
        &self.design.graph
    }

    #[track_caller]
    fn wire(&self, name: &str) -> NodeId {
        let graph = self.graph();
        let found = graph.nodes().find(|&node| graph.name(node).as_deref() == Some(name));
        found.unwrap_or_else(|| panic!("there is no net `{name}`"))
    }

    /// The cells that drive a net, all of its bits.
    fn cells(&self, net: &str) -> Vec<&Cell> {
        let graph = self.graph();
        let driven = |cell: &&Cell| {
            graph
                .fanout(cell.output)
                .iter()
                .filter_map(|&wire| graph.name(wire))
                .any(|name| name == net || name.strip_prefix(net).is_some_and(|suffix| suffix.starts_with('[')))
        };
        graph.cells.iter().filter(driven).collect()
    }

    fn name(&self, node: NodeId) -> String {
        self.graph().name(node).unwrap_or_else(|| format!("{:?}", self.graph().kind(node)))
    }

    /// The value of an output for given input values; vectors as numbers, ports of the top by name.
    #[track_caller]
    fn value(&self, output: &str, inputs: &[(&str, u64)]) -> u64 {
        let graph = self.graph();
        let mut known: HashMap<NodeId, bool> = HashMap::new();
        for port in &graph.ports {
            if let Some((_, value)) = inputs.iter().find(|(name, _)| *name == port.name) {
                for (at, &bit) in graph.nets[port.net.index()].bits.iter().enumerate() {
                    known.insert(graph.root(bit), value >> at & 1 == 1);
                }
            }
        }
        let port = graph.ports.iter().find(|port| port.name == output).expect("the output exists");
        let bits = &graph.nets[port.net.index()].bits;
        bits.iter().enumerate().fold(0, |sum, (at, &bit)| sum | u64::from(evaluate(graph, bit, &mut known)) << at)
    }
}

fn evaluate(graph: &Graph, node: NodeId, known: &mut HashMap<NodeId, bool>) -> bool {
    if let Some(&value) = known.get(&node) {
        return value;
    }
    let inputs: Vec<bool> = graph.fanin(node).iter().map(|&input| evaluate(graph, input, known)).collect();
    let value = match graph.kind(node) {
        NodeKind::Const(value) => value,
        NodeKind::Wire | NodeKind::OpIn(_) | NodeKind::OpOut(_) => inputs[0],
        NodeKind::Gate(kind) => {
            let plain = match kind {
                GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => inputs.iter().all(|&input| input),
                GateKind::Or | GateKind::Nor => inputs.iter().any(|&input| input),
                GateKind::Xor | GateKind::Xnor => inputs.iter().filter(|&&input| input).count() % 2 == 1,
            };
            plain ^ matches!(kind, GateKind::Not | GateKind::Nand | GateKind::Nor | GateKind::Xnor)
        }
        other => panic!("the value depends on {other:?}"),
    };
    known.insert(node, value);
    value
}

#[test]
fn asynchronous_reset_of_each_bit() {
    let t = clean(
        "module t(input clk, input rst_n, input [3:0] d, input en, output reg [3:0] q);
         always @(posedge clk or negedge rst_n) if (!rst_n) q <= 4'b0101; else if (en) q <= d;
         endmodule",
    );
    let cells = t.cells("t.q");
    assert_eq!(cells.len(), 4);
    for (bit, cell) in cells.iter().enumerate() {
        let CellKind::FlipFlop { clock, edge } = cell.kind else { panic!("a flip-flop") };
        assert_eq!((t.name(clock).as_str(), edge), ("t.clk", Edge::Posedge));
        let [control] = cell.controls.as_slice() else { panic!("one control") };
        assert_eq!((t.name(control.net).as_str(), control.active), ("t.rst_n", false));
        assert_eq!(t.graph().kind(control.value), NodeKind::Const(bit % 2 == 0));
    }
}

#[test]
fn controls_in_order_of_priority() {
    let t = clean(
        "module t(input clk, rst, ld, input [1:0] d, v, output reg [1:0] q);
         always @(negedge clk, posedge rst, posedge ld) begin
           if (rst) q <= 2'b10; else if (ld) q <= v; else q <= d;
         end
         endmodule",
    );
    let cells = t.cells("t.q");
    assert_eq!(cells.len(), 2);
    for cell in cells {
        assert!(matches!(cell.kind, CellKind::FlipFlop { edge: Edge::Negedge, .. }));
        let nets: Vec<String> = cell.controls.iter().map(|control| t.name(control.net)).collect();
        assert_eq!(nets, ["t.rst", "t.ld"]);
        assert!(matches!(t.graph().kind(cell.controls[1].value), NodeKind::Wire), "a load is no constant");
    }
}

#[test]
fn a_bit_that_reset_leaves_alone_is_gated_instead() {
    let t = clean(
        "module t(input clk, rst, input [1:0] d, output reg [1:0] q);
         always @(posedge clk or posedge rst) if (rst) q[0] <= 1'b0; else q <= d;
         endmodule",
    );
    let cells = t.cells("t.q");
    assert_eq!(cells.iter().map(|cell| cell.controls.len()).collect::<Vec<_>>(), [1, 0]);
    // While rst is high the clocked branch is not executed: the data of q[1] is rst ? q[1] : d[1].
    let mut known = HashMap::new();
    for (name, value) in [("t.rst", true), ("t.d[1]", false), ("t.q[1]", true)] {
        known.insert(t.wire(name), value);
    }
    assert!(evaluate(t.graph(), cells[1].data, &mut known));
}

#[test]
fn a_condition_over_several_listed_signals_is_one_named_pin() {
    let t = clean(
        "module t(input clk, a, b, d, output reg q);
         always @(posedge clk or posedge a or posedge b) if (a | b) q <= 1'b1; else q <= d;
         endmodule",
    );
    let cells = t.cells("t.q");
    assert_eq!(t.name(cells[0].controls[0].net), "t.q.set");
    assert!(cells[0].controls[0].active);
}

#[test]
fn clock_that_cannot_be_told_is_not_supported() {
    let t = run(
        "module t(input c1, c2, d, output reg q);
         always @(posedge c1 or posedge c2) if (c1 & d) q <= 1'b0; else q <= d;
         endmodule",
        &[],
    );
    assert_eq!(t.diagnostics.iter().map(|one| one.kind).collect::<Vec<_>>(), [Kind::Unsupported]);
    assert_eq!(t.graph().cells.len(), 0);
    assert_eq!(t.graph().kind(t.graph().root(t.wire("t.q"))), NodeKind::Source(SourceKind::BlackBox));
}

#[test]
fn untested_edges_all_clock() {
    let t =
        run("module t(input clk, rst, d, output reg q); always @(posedge clk or posedge rst) q <= d; endmodule", &[]);
    assert_eq!(t.diagnostics.iter().map(|one| one.kind).collect::<Vec<_>>(), [Kind::Note]);
    let clocks: Vec<String> = t
        .cells("t.q")
        .iter()
        .map(|cell| match cell.kind {
            CellKind::FlipFlop { clock, .. } => t.name(clock),
            CellKind::Latch { .. } => panic!("a flip-flop"),
        })
        .collect();
    assert_eq!(clocks, ["t.clk", "t.rst"]);
}

#[test]
fn missing_assignment_makes_a_latch() {
    let t = clean(
        "module t(input en, input [1:0] s, input d, output reg l, output reg m, output reg n);
         always @* if (en) l = d;
         always @* begin n = 1'b0; case (s) 2'd0: m = d; 2'd1: m = ~d; 2'd2: n = d; endcase end
         endmodule",
    );
    let latches = |net| t.cells(net).len();
    assert_eq!([latches("t.l"), latches("t.m"), latches("t.n")], [1, 1, 0]);
    let cell = t.cells("t.l")[0];
    assert!(matches!(cell.kind, CellKind::Latch { active: true, .. }));
    assert_eq!(cell.inferred_from.map(|span| t.sources.slice(span).to_string()).as_deref(), Some("if (en)"));
    let CellKind::Latch { enable, active } = t.cells("t.m")[0].kind else { panic!("a latch") };
    for s in 0..4u64 {
        let mut known = HashMap::from([(t.wire("t.s[0]"), s & 1 == 1), (t.wire("t.s[1]"), s & 2 == 2)]);
        assert_eq!(evaluate(t.graph(), enable, &mut known) == active, s < 2, "s = {s}");
    }
    assert_eq!(t.name(enable), "t.m.enable");
}

#[test]
fn case_that_covers_everything_makes_no_latch() {
    let t = clean(
        "module t(input [1:0] s, input a, b, output reg y, output reg z);
         always @* case (s) 0: y = a; 1, 2: y = b; 3: y = a & b; endcase
         always @* casez (s) 2'b1?: z = a; 2'b01: z = b; 2'b00: z = 1'b0; endcase
         endmodule",
    );
    assert_eq!(t.graph().cells.len(), 0);
    // One AND-OR level: the OR at the root has one AND for each arm, and nothing for a missing default.
    let root = t.graph().root(t.wire("t.y"));
    assert_eq!(t.graph().kind(root), NodeKind::Gate(GateKind::Or));
    assert_eq!(t.graph().fanin(root).len(), 3);
    for (s, a, b) in (0..16u64).map(|v| (v & 3, v >> 2 & 1, v >> 3 & 1)) {
        let inputs = [("s", s), ("a", a), ("b", b)];
        assert_eq!(t.value("y", &inputs), [a, b, b, a & b][s as usize]);
        assert_eq!(t.value("z", &inputs), [0, b, a, a][s as usize]);
    }
}

#[test]
fn constant_rung_of_a_latch_is_a_control() {
    let t = clean(
        "module t(input rst_n, en, d, output reg q);
         always @* if (!rst_n) q = 1'b0; else if (en) q = d;
         endmodule",
    );
    let cells = t.cells("t.q");
    let [control] = cells[0].controls.as_slice() else { panic!("one control") };
    assert_eq!((t.name(control.net).as_str(), control.active), ("t.rst_n", false));
    let CellKind::Latch { enable, active } = cells[0].kind else { panic!("a latch") };
    assert_eq!((t.name(enable).as_str(), active), ("t.en", true));
}

/// Wherever it is decided, and whichever branch it is: the form of a latch with an asynchronous control of its own.
#[test]
fn controls_of_latches_behind_other_statements() {
    let t = clean(
        "module t(input rst_n, set, d, input [2:0] en, output reg [2:0] q, output reg p, z);
         integer k;
         always @* begin
           z = 1'b0;
           for (k = 0; k < 3; k = k + 1) if (~rst_n) q[k] = 1'b0; else if (en[k] == 1'b1) q[k] = d;
         end
         always @* if (rst_n) begin if (set) p = 1'b1; else if (en[0]) p = d; end else p = 1'b0;
         endmodule",
    );
    for k in 0..3 {
        let [cell] = t.cells(&format!("t.q[{k}]"))[..] else { panic!("one cell") };
        let [control] = cell.controls.as_slice() else { panic!("one control") };
        assert_eq!((t.name(control.net).as_str(), control.active), ("t.rst_n", false));
        let CellKind::Latch { enable, active } = cell.kind else { panic!("a latch") };
        assert_eq!((t.name(enable), active), (format!("t.en[{k}]"), true));
    }
    let [cell] = t.cells("t.p")[..] else { panic!("one cell") };
    let controls: Vec<(String, bool)> =
        cell.controls.iter().map(|control| (t.name(control.net).to_string(), control.active)).collect();
    assert_eq!(controls, [("t.rst_n".to_string(), false), ("t.set".to_string(), true)]);
    assert!(matches!(cell.kind, CellKind::Latch { enable, active: true } if t.name(enable) == "t.en[0]"));
    assert_eq!(t.cells("t.z").len(), 0);
}

#[test]
fn loop_counters_make_no_cells() {
    let t = clean(
        "module t(input clk, rst, input [3:0] d, output reg [3:0] q, r);
         integer i;
         always @(posedge clk or posedge rst)
           if (rst) for (i = 0; i < 4; i = i + 1) q[i] <= 1'b0; else for (i = 0; i < 4; i = i + 1) q[3 - i] <= d[i];
         always @* for (i = 0; i < 4; i = i + 1) r[i] = d[i] & ~q[i];
         endmodule",
    );
    assert_eq!(t.graph().cells.len(), 4);
    assert!(t.graph().cells.iter().all(|cell| cell.controls.len() == 1));
}

#[test]
fn widths_and_signs_follow_the_context() {
    let t = clean(
        "module t(input [3:0] a, b, input signed [3:0] s, input signed [2:0] u,
                  output [3:0] narrow, output [4:0] wide, output [3:0] shifted, output less, output unsigned_less,
                  output signed [5:0] sum, output [7:0] cat, output ge);
         assign narrow = (a + b) >> 1;
         assign wide = (a + b) >> 1;
         assign shifted = s >>> 1;
         assign less = s < u;
         assign unsigned_less = s < a;
         assign sum = s + u;
         assign cat = {a + b, b};
         assign ge = a - b >= 0;
         endmodule",
    );
    let signed = |value: u64, width: u32| (value as i64) << (64 - width) >> (64 - width);
    for a in 0..16u64 {
        for b in 0..16u64 {
            for u in 0..8u64 {
                let s = b;
                let inputs = [("a", a), ("b", b), ("s", s), ("u", u)];
                let (ss, su) = (signed(s, 4), signed(u, 3));
                assert_eq!(t.value("narrow", &inputs), ((a + b) % 16) >> 1, "the carry is lost at four bits");
                assert_eq!(t.value("wide", &inputs), (a + b) >> 1, "the left side widens the addition");
                assert_eq!(t.value("shifted", &inputs), (ss >> 1) as u64 & 15);
                assert_eq!(t.value("less", &inputs), u64::from(ss < su));
                assert_eq!(t.value("unsigned_less", &inputs), u64::from(s < a), "one unsigned side makes it unsigned");
                assert_eq!(t.value("sum", &inputs), (ss + su) as u64 & 63);
                assert_eq!(t.value("cat", &inputs), ((a + b) % 16) << 4 | b, "an operand of {{}} has its own width");
                assert_eq!(t.value("ge", &inputs), 1, "0 is signed, a - b is not");
            }
        }
    }
}

#[test]
fn instances_parameters_and_generate_names() {
    let t = clean(
        "module leaf #(parameter W = 1, K = 0) (input [W-1:0] x, output [W-1:0] y); assign y = x ^ K; endmodule
         module t(input [3:0] x, output [3:0] y, z);
         genvar i;
         generate
           for (i = 0; i < 4; i = i + 1) begin : bit_of
             leaf u (.x(x[i]), .y(y[i]));
             defparam u.K = i % 2;
           end
           if (1) begin leaf #(4, 9) v (x, z); end
         endgenerate
         endmodule",
    );
    let paths: Vec<&str> = t.graph().instances.iter().map(|instance| instance.path.as_str()).collect();
    assert!(paths.contains(&"t.bit_of[3].u"), "{paths:?}");
    assert!(paths.contains(&"t.genblk2.v"), "the second generate construct without a name: {paths:?}");
    assert_eq!(t.value("y", &[("x", 0b0110)]), 0b1100);
    assert_eq!(t.value("z", &[("x", 0b0110)]), 0b1111);
    assert_eq!(t.design.modules_elaborated, 2);
}

#[test]
fn several_drivers() {
    let t = run(
        "module t(input a, b, ea, eb, output y, output w, output z);
         wand x; assign y = a; assign y = b;
         assign x = a; assign x = b; assign w = x;
         assign z = ea ? a : 1'bz; bufif1 (z, b, eb);
         endmodule",
        &[],
    );
    let notes: Vec<(Kind, &str)> = t.diagnostics.iter().map(|one| (one.kind, one.construct.as_str())).collect();
    assert_eq!(notes, [(Kind::Incomplete, "multiple drivers")]);
    assert_eq!(t.graph().kind(t.graph().root(t.wire("t.y"))), NodeKind::Unknown);
    assert_eq!(t.value("w", &[("a", 1), ("b", 0)]), 0);
    assert_eq!(t.value("w", &[("a", 1), ("b", 1)]), 1);
    // z = (ea AND a) OR (eb AND b) OR (NOR(ea, eb) AND unknown)
    let root = t.graph().root(t.wire("t.z"));
    assert_eq!((t.graph().kind(root), t.graph().fanin(root).len()), (NodeKind::Gate(GateKind::Or), 3));
}

/// Without the text nobody knows which of the nets around are connected, so those that nothing drives may be driven.
#[test]
fn all_ports_of_a_module_without_text_are_reported() {
    crate::pipeline::assert_incomplete(
        "module t(input a, output y); wire z; mystery u(.*); assign y = a & z; endmodule",
    );
}

#[test]
fn missing_modules_are_black_boxes() {
    let t =
        clean("module t(input a, output y); wire m; missing #(3) u (.i(a), .k(1'b1), .o(m)); assign y = ~m; endmodule");
    let [one] = t.graph().black_boxes.as_slice() else { panic!("one black box") };
    let names = |side: &[(String, Vec<NodeId>)]| side.iter().map(|(name, _)| name.clone()).collect::<Vec<_>>();
    assert_eq!((names(&one.inputs), names(&one.outputs)), (vec!["i".into(), "k".into()], vec!["o".to_string()]));
}

#[test]
fn a_module_that_cannot_be_elaborated_does_not_lose_the_others() {
    let t = run(
        "module bad(input a, output b); wire [1/0:0] w; assign b = a; endmodule
         module t(input a, output y, z); bad u (a, y); assign z = ~a; endmodule",
        &[],
    );
    assert_eq!(t.diagnostics.iter().map(|one| one.kind).collect::<Vec<_>>(), [Kind::Incomplete]);
    assert_eq!((t.design.modules_elaborated, t.design.modules_failed), (1, 1));
    assert_eq!(t.value("z", &[("a", 0)]), 1);
    assert_eq!(t.graph().kind(t.graph().root(t.wire("t.y"))), NodeKind::Source(SourceKind::BlackBox));
}

#[test]
fn benches_are_left_out() {
    let t =
        clean("module tb; reg a; wire y; t u (a, y); endmodule module t(input a, output y); assign y = a; endmodule");
    assert_eq!(t.design.tops, ["t"]);
    assert_eq!(t.design.benches_left_out, ["tb"]);
}

#[test]
fn endless_and_oversized_input_ends_with_a_clear_error() {
    let cases = [
        ("module t(input a, output y); t u (a, y); endmodule", "instantiates itself"),
        (
            "module t(input a); genvar i; generate for (i = 0; i < 4; i = i) begin : g wire w; end endgenerate endmodule",
            "does not end",
        ),
        (
            "module t(input a); genvar i; generate for (i = 0; i >= 0; i = i + 1) begin : g end endgenerate endmodule",
            "does not end",
        ),
        (
            "module t(input a, output y); function integer f(input integer n); while (1) n = n + 1; endfunction
             localparam P = f(1); wire [P:0] w; assign y = a; endmodule",
            "does not end",
        ),
        ("module t(input a); parameter P = 4 / 0; wire [P:0] w; endmodule", "division by zero"),
        ("module t(input a); wire [2147483647:0] w; endmodule", "more than 16777216 bits"),
        ("module t(input a); parameter P = Q, Q = P; wire [P:0] w; endmodule", "depends on itself"),
        (
            "module t(input a, output reg y); integer i; always @* for (i = 0; i < 1; i = i) y = a; endmodule",
            "does not end",
        ),
    ];
    for (text, expected) in cases {
        let start = processor_time();
        let t = run(text, &["t"]);
        let messages: Vec<&str> = t.diagnostics.iter().map(|one| one.message.as_str()).collect();
        assert_eq!(messages.len(), 1, "{messages:?}");
        assert!(messages[0].contains(expected), "{messages:?}");
        assert_eq!(t.diagnostics[0].kind, Kind::Incomplete);
        let took = processor_time() - start;
        assert!(took < Duration::from_secs(10), "{expected}: {took:?}");
    }
}

/// What this thread has used of the processor, which other work on the machine does not add to.
fn processor_time() -> Duration {
    let text = std::fs::read_to_string("/proc/thread-self/schedstat").expect("a Linux kernel");
    let nanoseconds = text.split(' ').next().and_then(|field| field.parse().ok());
    Duration::from_nanos(nanoseconds.expect("the first field is the time on the processor"))
}

#[test]
fn a_name_declared_twice_is_reported_and_a_port_of_the_old_style_is_not() {
    clean("module t(q, a); output q; input a; reg q; always @* q = a; endmodule");
    let messages = |text: &str| {
        let t = run(text, &["t"]);
        t.diagnostics.iter().map(|one| (one.kind, one.message.clone())).collect::<Vec<_>>()
    };
    let twice = messages("module t(input a, output reg q); wire q; always @* q = a; endmodule");
    assert_eq!(twice, [(Kind::Note, "`q` is declared twice".to_string())]);
    let thrice = messages("module t(q, a); output q; input a; reg q; wire q; always @* q = a; endmodule");
    assert_eq!(thrice, [(Kind::Note, "`q` is declared twice".to_string())]);
    let different = messages("module t(input a, output q); wire [3:0] q; assign q = a; endmodule");
    let message = "module `t` cannot be elaborated: `q` is declared twice and with different widths";
    assert_eq!(different, [(Kind::Incomplete, message.to_string())]);
}

/// Nothing drives the variable, so the pin on it is undecided, not clean.
#[test]
fn a_variable_of_a_package_is_not_taken_for_an_unknown() {
    let scan = crate::pipeline::assert_incomplete(
        "package p; logic v; endpackage
         module t(input clk, a, output logic q); import p::*;
         always @(posedge clk or posedge v) if (v) q <= 0; else q <= a; endmodule",
    );
    assert_eq!(scan.json["coverage"]["pins"]["reset"]["undecided"], 1, "{}", scan.text);
}

/// The values of a text that asks for far more gates than its length suggests become opaque, with one reason.
#[track_caller]
fn too_much(text: &str) {
    let elaborated = run(text, &[]);
    let said = "what is written here takes more gates and nets than a design with so little text is given";
    assert!(elaborated.diagnostics.iter().any(|found| found.message == said), "{:?}", elaborated.diagnostics);
    assert!(elaborated.diagnostics.iter().all(|found| found.kind != Kind::Note), "{:?}", elaborated.diagnostics);
    assert!(elaborated.diagnostics.len() < 4, "one piece of text, one reason: {:?}", elaborated.diagnostics);
}

#[test]
fn a_few_characters_cannot_ask_for_millions_of_gates() {
    too_much("module m(input [65535:0] a, b, output [65535:0] y); assign y = a * b; endmodule");
    too_much("module m(input [8191:0] a, b, output [8191:0] y); assign y = a / b; endmodule");
    too_much("module m(input [262143:0] a, b, output y); assign y = a < b; endmodule");
    too_much("module m(input [262143:0] a, input [17:0] b, output [262143:0] y); assign y = a >> b; endmodule");
    too_much(
        "module m(output y); function int f(int n); logic [1048575:0] v; v = 1; \
         for (int i = 0; i < 100000; i++) v = v + n; return v[31:0]; endfunction localparam P = f(3); assign y = P; \
         endmodule",
    );
}

/// Large designs are made of copies: a text may make far more than it has characters.
#[test]
fn copies_may_make_more_than_their_text_suggests() {
    let text = "module part(input [127:0] a, b, output [127:0] y); assign y = a * b; endmodule \
         module m(input [127:0] a [12], b, output [127:0] y [12]); \
         for (genvar i = 0; i < 12; i++) part p(a[i], b, y[i]); endmodule";
    let elaborated = clean(text);
    assert!(elaborated.graph().len() > 2_000 * text.len(), "{}", elaborated.graph().len());
}

/// Small pieces are never refused where they stand in the text, but their copies are counted: 65,535 of them would take a
/// minute.
#[test]
fn copies_of_a_small_piece_cannot_ask_for_millions_of_gates_either() {
    too_much(
        "module m(input [63:0] a, b, output [63:0] y [2]); \
         for (genvar i = 0; i < 65536; i++) assign y[i] = a + b < i ? a : b; endmodule",
    );
}
