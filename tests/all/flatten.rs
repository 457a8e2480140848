//! The structural Verilog of small graphs, line by line. That it simulates like the original is the business of
//! [`crate::simulator`]; here stands what a reader relies on: names, ranges, structure kept, honest gaps.

use stillwire::graph::{
    BlackBox, Cell, CellKind, Control, Edge, Graph, GraphBuilder, InstanceId, NodeId, Port, PortDirection, Site,
    SourceKind, Symbol, Table,
};
use stillwire::report::flatten::{flatten, flatten_cone};
use stillwire::source::{FileId, Span};

struct Design {
    builder: GraphBuilder,
    top: InstanceId,
    site: Site,
}

impl Design {
    fn new() -> Self {
        let mut builder = GraphBuilder::new();
        let top = builder.instance(None, "top", "top", None);
        Self { builder, top, site: Site { instance: top, span: None } }
    }

    fn net(&mut self, name: &str, width: usize) -> Vec<NodeId> {
        let span = Span { file: FileId::new(0), start: 0, end: 0 };
        let suffixes =
            if width == 1 { vec![String::new()] } else { (0..width).map(|bit| format!("[{bit}]")).collect() };
        let net = self.builder.net(self.top, name, span, suffixes, width == 1);
        self.builder.net_bits(net).to_vec()
    }

    fn port(&mut self, name: &str, direction: PortDirection, range: Option<(i64, i64)>) -> Vec<NodeId> {
        let width = range.map_or(1, |(left, right)| left.abs_diff(right) as usize + 1);
        let span = Span { file: FileId::new(0), start: 0, end: 0 };
        let suffixes = match range {
            None => vec![String::new()],
            Some((left, right)) => (0..width as i64)
                .map(|bit| format!("[{}]", if left >= right { right + bit } else { right - bit }))
                .collect(),
        };
        let net = self.builder.net(self.top, name, span, suffixes, range.is_none());
        self.builder.port(Port { instance: self.top, name: name.to_string(), direction, net, range });
        let bits = self.builder.net_bits(net).to_vec();
        if direction == PortDirection::Input {
            for &bit in &bits {
                let source = self.builder.source(SourceKind::Input, self.site);
                self.builder.drive(bit, source);
            }
        }
        bits
    }

    fn input(&mut self, name: &str) -> NodeId {
        self.port(name, PortDirection::Input, None)[0]
    }

    fn output(&mut self, name: &str, driver: NodeId) {
        let bit = self.port(name, PortDirection::Output, None)[0];
        self.builder.drive(bit, driver);
    }
}

#[track_caller]
fn expect(graph: &Graph, lines: &[&str]) {
    let text = flatten(graph);
    for line in lines {
        assert!(text.lines().any(|found| found.trim() == *line), "no line `{line}` in\n{text}");
    }
}

#[test]
fn ports_keep_names_and_ranges() {
    let mut design = Design::new();
    let up = design.port("up", PortDirection::Input, Some((2, 4)));
    let y = design.port("y", PortDirection::Output, Some((7, 5)));
    for (&from, &to) in up.iter().zip(&y) {
        design.builder.drive(to, from);
    }
    design.input("wire");
    let graph = design.builder.freeze();
    // The least significant bit of `[2:4]` is 4, that of `[7:5]` is 5.
    expect(
        &graph,
        &[
            "module top (up, y, \\wire );",
            "input [2:4] up;",
            "output [7:5] y;",
            "input \\wire ;",
            "assign y[5] = \\top.y[5] ;",
            "assign \\top.y[5]  = \\top.up[4] ;",
        ],
    );
}

#[test]
fn redundant_gates_stay() {
    let mut design = Design::new();
    let (a, b, c) = (design.input("a"), design.input("b"), design.input("c"));
    let site = design.site;
    let builder = &mut design.builder;
    let inverted = builder.not(a, site);
    let terms = [builder.and(&[a, b], site), builder.and(&[inverted, c], site), builder.and(&[b, c], site)];
    let any = builder.or(&terms, site);
    design.output("y", any);
    let text = flatten(&design.builder.freeze());
    assert_eq!(text.lines().filter(|line| line.trim().starts_with("and (")).count(), 3, "{text}");
    assert!(
        text.lines().any(|line| line.trim().starts_with("and (") && line.ends_with("\\top.b , \\top.c );")),
        "{text}"
    );
}

#[test]
fn a_flip_flop_is_an_always_block_with_its_ladder() {
    let mut design = Design::new();
    let (clk, rst_n, set, d) = (design.input("clk"), design.input("rst_n"), design.input("set"), design.input("d"));
    let q = design.builder.source(SourceKind::FlipFlop, design.site);
    let (zero, one) = (design.builder.constant(false), design.builder.constant(true));
    design.builder.cell(Cell {
        kind: CellKind::FlipFlop { clock: clk, edge: Edge::Negedge },
        output: q,
        data: d,
        controls: vec![
            Control { net: rst_n, active: false, value: zero },
            Control { net: set, active: true, value: one },
        ],
        init: Some(true),
        inferred_from: None,
    });
    design.output("q", q);
    let graph = design.builder.freeze();
    let name = format!("n{}", q.index());
    expect(
        &graph,
        &[
            &format!("reg {name};"),
            &format!("initial {name} = 1'b1;"),
            &format!(
                "always @(negedge \\top.clk  or negedge \\top.rst_n  or posedge \\top.set ) if (!\\top.rst_n ) {name} <= \
                 1'b0; else if (\\top.set ) {name} <= 1'b1; else {name} <= \\top.d ;"
            ),
        ],
    );
}

#[test]
fn a_computed_pin_goes_through_a_settled_copy() {
    let mut design = Design::new();
    let (clk, en, d) = (design.input("clk"), design.input("en"), design.input("d"));
    let gated = design.builder.and(&[clk, en], design.site);
    let q = design.builder.source(SourceKind::FlipFlop, design.site);
    let kind = CellKind::FlipFlop { clock: gated, edge: Edge::Posedge };
    design.builder.cell(Cell { kind, output: q, data: d, controls: Vec::new(), init: None, inferred_from: None });
    let graph = design.builder.freeze();
    let (pin, q) = (gated.index(), q.index());
    expect(
        &graph,
        &[
            &format!("always @(n{pin}) begin #0; \\n{pin}$settled  = n{pin}; end"),
            &format!("always @(posedge \\n{pin}$settled ) n{q} <= \\top.d ;"),
        ],
    );
}

#[test]
fn what_is_unknown_is_said_to_be_unknown() {
    let mut design = Design::new();
    let unknown = design.builder.unknown(design.site);
    let memory = design.builder.source(SourceKind::Memory, design.site);
    design.net("floating", 1);
    design.output("y", unknown);
    let graph = design.builder.freeze();
    expect(&graph, &[&format!("assign n{} = 1'bx;", unknown.index()), "wire \\top.floating ;"]);
    let text = flatten(&graph);
    assert!(!text.contains("assign \\top.floating"), "{text}");
    let comment =
        format!("// n{} is left undriven: read port of a memory that is too large to flatten", memory.index());
    expect(&graph, &[&comment]);
}

#[test]
fn tables_become_primitives_and_black_boxes_instances() {
    let mut design = Design::new();
    let (a, b) = (design.input("a"), design.input("b"));
    let rows = vec![(vec![Symbol::Zero, Symbol::Any], Symbol::One), (vec![Symbol::One, Symbol::Binary], Symbol::X)];
    let table = design.builder.table(Table { name: "odd".into(), rows });
    let node = design.builder.table_node(table, &[a, b], design.site);
    let inner = design.builder.instance(Some(design.top), "u", "vendor_cell", None);
    let out = design.builder.source(SourceKind::BlackBox, design.site);
    design.builder.black_box(BlackBox {
        module: "vendor_cell".into(),
        instance: inner,
        inputs: vec![("D".into(), vec![a, b])],
        outputs: vec![("Q".into(), vec![out])],
        pins: Vec::new(),
    });
    let graph = design.builder.freeze();
    expect(
        &graph,
        &[
            "primitive odd (y, i0, i1);",
            "0 ? : 1;",
            "1 b : x;",
            &format!("odd (n{}, \\top.a , \\top.b );", node.index()),
            &format!("vendor_cell \\top.u  (.D({{\\top.b , \\top.a }}), .Q(n{}));", out.index()),
        ],
    );
}

#[test]
fn anonymous_nodes_do_not_collide_with_ports() {
    let mut design = Design::new();
    let n5 = design.input("n5");
    let inverted = design.builder.not(n5, design.site);
    design.output("y", inverted);
    let graph = design.builder.freeze();
    expect(&graph, &[&format!("not (n_{}, \\top.n5 );", inverted.index())]);
}

#[test]
fn a_cone_stops_at_the_sources() {
    let mut design = Design::new();
    let (a, b, unrelated) = (design.input("a"), design.input("b"), design.input("unrelated"));
    let both = design.builder.and(&[a, b], design.site);
    let wire = design.net("both", 1)[0];
    design.builder.drive(wire, both);
    let other = design.builder.or(&[a, unrelated], design.site);
    design.output("y", other);
    let graph = design.builder.freeze();
    let text = flatten_cone(&graph, "top.both").expect("the net exists");
    let expected = format!(
        "module cone (\n  input \\top.a ,\n  input \\top.b ,\n  output \\top.both \n);\n  wire n{a};\n  wire n{b};\n  wire \
         n{both};\n  assign n{a} = \\top.a ;\n  assign n{b} = \\top.b ;\n  and (n{both}, n{a}, n{b});\n  assign \\top.both  = \
         n{both};\nendmodule\n",
        a = graph.fanin(a)[0].index(),
        b = graph.fanin(b)[0].index(),
        both = both.index(),
    );
    assert_eq!(text, expected);
    assert_eq!(
        flatten_cone(&graph, "both"),
        Err("no net is named `both`; names start with the top module, as in `top.u_core.en[3]`".into())
    );
}
