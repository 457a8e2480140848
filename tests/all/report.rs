//! The rules' words and the two reports, on graphs built by hand: what the diagnostic of a glitching reset shows, and
//! that the machine-readable output says the same.

use stillwire::graph::{
    Cell, CellKind, Control, Edge, GraphBuilder, InstanceId, NodeId, Port, PortDirection, Site, SourceKind,
};
use stillwire::hazard::Options;
use stillwire::hazard::launch::Assumptions;
use stillwire::report::text::{self, Style};
use stillwire::report::{Coverage, Report, json};
use stillwire::rules::{self, Outcome, PinKind, Rule, Severity};
use stillwire::source::{FileId, SourceSet, Span};
use stillwire::syntax::Protection;

const TEXT: &str = "module top (input clk, s, a, b, d, output reg q);
    wire n = ~s;
    wire rst_n = (s & a) | (n & b);
    always @(posedge clk or negedge rst_n) if (!rst_n) q <= 0; else q <= d;
endmodule
";

/// A design in the making, with its text.
struct Scene {
    sources: SourceSet,
    file: FileId,
    builder: GraphBuilder,
    top: InstanceId,
}

impl Scene {
    fn new(text: &str) -> Self {
        let mut sources = SourceSet::default();
        let file = sources.add("top.v", text);
        let mut builder = GraphBuilder::new();
        let top = builder.instance(None, "top", "top", None);
        Self { sources, file, builder, top }
    }

    /// The first place of these words.
    fn at(&self, words: &str) -> Site {
        let start = self.sources.file(self.file).text.find(words).expect("the words are in the text");
        let span = Span { file: self.file, start: start as u32, end: (start + words.len()) as u32 };
        Site { instance: self.top, span: Some(span) }
    }

    /// A net with its driver.
    fn net(&mut self, name: &str, words: &str, driver: NodeId) -> NodeId {
        let span = self.at(words).span.expect("a place");
        let net = self.builder.net(self.top, name, span, vec![String::new()], true);
        let wire = self.builder.net_bits(net)[0];
        self.builder.drive(wire, driver);
        wire
    }

    fn input(&mut self, name: &str, words: &str) -> NodeId {
        let site = self.at(words);
        let source = self.builder.source(SourceKind::Input, site);
        self.net(name, words, source)
    }
}

/// The design of [`TEXT`], with or without the bridging term, and its report.
fn reset_selector(covered: bool) -> (SourceSet, Report) {
    let mut scene = Scene::new(TEXT);
    let [clk, s, a, b, d] = [("clk", "clk"), ("s", "s,"), ("a", "a,"), ("b", "b,"), ("d", "d,")]
        .map(|(name, words)| scene.input(name, words));
    let not = scene.builder.not(s, scene.at("~s"));
    let n = scene.net("n", "n = ~s", not);
    let left = scene.builder.and(&[s, a], scene.at("s & a"));
    let right = scene.builder.and(&[n, b], scene.at("n & b"));
    let mut terms = vec![left, right];
    if covered {
        terms.push(scene.builder.and(&[a, b], scene.at("rst_n =")));
    }
    let or = scene.builder.or(&terms, scene.at("(s & a) | (n & b)"));
    let reset = scene.net("rst_n", "rst_n", or);
    let output = scene.builder.source(SourceKind::FlipFlop, scene.at("q <= d"));
    let q = scene.net("q", "q)", output);
    let zero = scene.builder.constant(false);
    scene.builder.cell(Cell {
        kind: CellKind::FlipFlop { clock: clk, edge: Edge::Posedge },
        output,
        data: d,
        controls: vec![Control { net: reset, active: false, value: zero }],
        init: None,
        inferred_from: None,
    });
    let span = scene.at("q)").span.expect("a place");
    let port = scene.builder.net(scene.top, "q", span, vec![String::new()], true);
    let bit = scene.builder.net_bits(port)[0];
    scene.builder.drive(bit, q);
    scene.builder.port(Port {
        instance: scene.top,
        name: "q".to_string(),
        direction: PortDirection::Output,
        net: port,
        range: None,
    });
    let graph = scene.builder.freeze();
    let Outcome { mut findings, checked, pins, cells, loops } =
        rules::run(&graph, &[], &Assumptions::default(), &Protection::default(), &Options::default(), None);
    // The subject is how one finding looks.
    findings.retain(|finding| finding.rule == Rule::SetResetHazard);
    let coverage = Coverage { files_read: 1, modules_elaborated: 1, pins, cells, loops, ..Coverage::default() };
    let report = Report { tops: vec!["top".to_string()], findings, checked, coverage, ..Report::default() };
    (scene.sources, report)
}

#[test]
fn a_glitching_reset_is_one_error_with_one_witness() {
    let (_, report) = reset_selector(false);
    let [finding] = report.findings.as_slice() else { panic!("{} findings", report.findings.len()) };
    assert_eq!((finding.rule, finding.severity), (Rule::SetResetHazard, Severity::Error));
    assert_eq!(finding.net, "top.rst_n");
    assert_eq!(finding.instance, "top");
    let pin = finding.pin.as_ref().expect("a pin");
    assert_eq!((pin.kind, pin.active, pin.count), (PinKind::Reset, Some(false), 1));
    assert_eq!(pin.cells, ["top.q"]);
    // By hand: only `s` is on two ways of opposite parity, and the OR gate sees 1..0..1 while a = b = 1.
    let [hazard] = finding.hazards.as_slice() else { panic!("{} hazards", finding.hazards.len()) };
    assert_eq!((hazard.kind, hazard.cause), ("static-1", "logic"));
    assert_eq!(hazard.changes, ["top.s"]);
    for name in ["top.a", "top.b"] {
        assert!(hazard.before.contains(&(name.to_string(), true)) && hazard.after.contains(&(name.to_string(), true)));
    }
    assert_eq!(report.exit_code(Severity::Error), 1);
}

#[test]
fn the_bridging_term_makes_it_clean_and_counted() {
    let (_, report) = reset_selector(true);
    assert!(report.findings.is_empty());
    let reset = report.coverage.pins.get(PinKind::Reset);
    assert_eq!((reset.nets, reset.clean, reset.hazard, reset.undecided), (1, 1, 0, 0));
    assert_eq!(report.coverage.pins.get(PinKind::Clock).clean, 1);
    assert_eq!(report.coverage.pins.get(PinKind::Output).clean, 1);
    assert_eq!(report.exit_code(Severity::Note), 0);
}

#[test]
fn json_has_every_field_of_the_schema() {
    let (sources, report) = reset_selector(false);
    let value: serde_json::Value = serde_json::from_str(&json::render(&report, &sources)).expect("JSON");
    let keys = |value: &serde_json::Value| -> Vec<String> {
        value.as_object().map(|object| object.keys().cloned().collect()).unwrap_or_default()
    };
    for key in ["schema", "version", "tops", "complete", "findings", "coverage"] {
        assert!(keys(&value).contains(&key.to_string()), "{key}");
    }
    assert_eq!(value["schema"], "stillwire-findings/1");
    let finding = &value["findings"][0];
    for key in [
        "rule",
        "severity",
        "verdict",
        "message",
        "at",
        "trace",
        "instance",
        "net",
        "bits",
        "pin",
        "hazards",
        "cover",
        "loop",
        "fingerprint",
        "signoff",
    ] {
        assert!(keys(finding).contains(&key.to_string()), "{key}");
    }
    assert_eq!(finding["at"]["line"], 3);
    assert_eq!(finding["at"]["column"], 18);
    assert_eq!(finding["hazards"][0]["before"]["top.a"], 1);
    assert_eq!(finding["fingerprint"].as_str().map(str::len), Some(32));
    for kind in ["clock", "set", "reset", "load", "latch-enable", "watch", "output"] {
        assert_eq!(keys(&value["coverage"]["pins"][kind]), ["clean", "hazard", "nets", "undecided"], "{kind}");
    }
    assert_eq!(value["coverage"]["cells"], serde_json::json!({ "flip-flops": 1, "latches": 0 }));
    assert_eq!(value["coverage"]["loops"]["found"], 0);
}

#[test]
fn fingerprints_ignore_places_and_see_the_logic() {
    let one = reset_selector(false).1.findings[0].fingerprint.clone();
    assert_eq!(one, reset_selector(false).1.findings[0].fingerprint);
    let mut scene = Scene::new(&format!("// one more line\n{TEXT}"));
    let [s, a, b] = [("s", "s,"), ("a", "a,"), ("b", "b,")].map(|(name, words)| scene.input(name, words));
    let n = scene.builder.not(s, scene.at("~s"));
    let left = scene.builder.and(&[s, a], scene.at("s & a"));
    let right = scene.builder.and(&[n, b], scene.at("n & b"));
    let or = scene.builder.or(&[left, right], scene.at("(s & a) | (n & b)"));
    let reset = scene.net("rst_n", "rst_n", or);
    let output = scene.builder.source(SourceKind::FlipFlop, scene.at("q <= d"));
    let zero = scene.builder.constant(false);
    scene.builder.cell(Cell {
        kind: CellKind::FlipFlop { clock: s, edge: Edge::Posedge },
        output,
        data: a,
        controls: vec![Control { net: reset, active: false, value: zero }],
        init: None,
        inferred_from: None,
    });
    // The inner net `n` is gone, everything moved by a line, the cell has another clock: the same finding.
    let moved = rules::run(
        &scene.builder.freeze(),
        &[],
        &Assumptions::default(),
        &Protection::default(),
        &Options::default(),
        None,
    );
    assert_eq!(moved.findings[0].fingerprint, one);
}

#[test]
fn the_text_shows_what_a_reader_needs() {
    let (sources, report) = reset_selector(false);
    let rendered = text::render(&report, &sources, &Style::default());
    insta::assert_snapshot!(rendered);
}

#[test]
fn severities_below_show_are_counted_only() {
    let (sources, mut report) = reset_selector(false);
    report.findings[0].severity = Severity::Note;
    let rendered = text::render(&report, &sources, &Style::default());
    assert!(!rendered.contains("set-reset-hazard"), "{rendered}");
    assert!(rendered.contains("not shown: 1 note"), "{rendered}");
}
