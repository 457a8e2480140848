//! Assumptions: what they do to a decision, against the same question asked for each value of the static nets; how they are
//! tried, against a walk through all states of small random machines; and how the report and mistakes look to the user.

use std::collections::{BTreeMap, BTreeSet};
use std::process::Command;

use serde_json::Value;
use stillwire::graph::{
    Cell, CellKind, Control, Edge, GateKind, Graph, GraphBuilder, NodeId, NodeKind, Site, SourceKind,
};
use stillwire::hazard::{
    Assumption, AssumptionKind, HazardKind, Options, Proof, Standing, TargetVerdict, decide, try_assumptions,
};

use crate::decide::{Random, random_graph};
use crate::pipeline::{Scan, scan};

fn pairs(verdicts: &[TargetVerdict]) -> BTreeSet<(NodeId, NodeId, HazardKind)> {
    let mut found = BTreeSet::new();
    for verdict in verdicts {
        for pair in &verdict.pairs {
            assert!(pair.undecided.is_empty());
            found.extend(pair.hazards.iter().map(|&(kind, _)| (verdict.target, pair.source, kind)));
        }
    }
    found
}

/// A constant of unknown value is 0 or 1: what can happen under it is what can happen under one of them.
#[test]
fn a_static_source_is_either_constant() {
    let mut random = Random(0x5eed_0001);
    let options = [
        Options::default(),
        // Simulation and solver instead of enumeration.
        Options { exhaustive_sources: 0, ..Options::default() },
    ];
    let mut differs = 0;
    for _ in 0..60 {
        let (graph, targets) = random_graph(&mut random, 5, 14);
        let sources: Vec<NodeId> =
            graph.nodes().filter(|&node| matches!(graph.kind(node), NodeKind::Source(_))).collect();
        let fixed = sources[random.below(sources.len())];
        let mut either = BTreeSet::new();
        for value in [false, true] {
            let mut cone = stillwire::graph::cone::Cone::of(&graph, &targets);
            cone.tie(fixed, value);
            let cone = cone.freeze();
            let copies: Vec<NodeId> = targets.iter().filter_map(|&target| cone.copy_of(target)).collect();
            let verdicts = decide(&cone.graph, &copies, &Options::default());
            let original = |node| cone.original(node).expect("a copied node");
            either.extend(
                pairs(&verdicts).into_iter().map(|(target, source, kind)| (original(target), original(source), kind)),
            );
        }
        let free = pairs(&decide(&graph, &targets, &Options::default()));
        let graph = graph.with_static([fixed]);
        for options in &options {
            assert_eq!(pairs(&decide(&graph, &targets, options)), either);
        }
        differs += usize::from(free != either);
    }
    assert!(differs > 20, "the comparison has little to compare: {differs}");
}

/// A static net that logic drives holds as well, and whoever drives it no longer reaches the target through it.
#[test]
fn a_static_gate_hides_what_drives_it() {
    let mut builder = GraphBuilder::new();
    let site = Site { instance: builder.instance(None, "top", "top", None), span: None };
    let [s, a, b] = std::array::from_fn(|_| builder.source(SourceKind::Input, site));
    let and = builder.and(&[s, a], site);
    let chosen = builder.select(and, a, b, site);
    let graph = builder.freeze();
    assert!(pairs(&decide(&graph, &[chosen], &Options::default())).iter().any(|&(_, source, _)| source == s));
    let graph = graph.with_static([and]);
    assert!(decide(&graph, &[chosen], &Options::default())[0].is_clean());
}

/// A random machine: flip-flops of one clock with a reset, next states as sums of products that the test evaluates by
/// itself.
struct Machine {
    graph: Graph,
    flops: Vec<NodeId>,
    reset: u32,
    /// Per flip-flop: products of (variable, positive), flip-flops first, inputs behind them.
    next: Vec<Vec<Vec<(usize, bool)>>>,
    inputs: usize,
}

impl Machine {
    fn random(random: &mut Random) -> Self {
        let (count, inputs) = (2 + random.below(3), random.below(3));
        let mut builder = GraphBuilder::new();
        let site = Site { instance: builder.instance(None, "top", "top", None), span: None };
        let clock = builder.source(SourceKind::Input, site);
        let rst = builder.source(SourceKind::Input, site);
        let outside: Vec<NodeId> = (0..inputs).map(|_| builder.source(SourceKind::Input, site)).collect();
        let flops: Vec<NodeId> = (0..count).map(|_| builder.source(SourceKind::FlipFlop, site)).collect();
        let variables: Vec<NodeId> = flops.iter().chain(&outside).copied().collect();
        let reset = random.below(1 << count) as u32;
        let mut next = Vec::new();
        for (index, &output) in flops.iter().enumerate() {
            let mut products = Vec::new();
            let mut terms = Vec::new();
            for _ in 0..1 + random.below(3) {
                let mut product: BTreeMap<usize, bool> = BTreeMap::new();
                for _ in 0..1 + random.below(2) {
                    product.insert(random.below(variables.len()), random.chance(50));
                }
                let literals: Vec<NodeId> = product
                    .iter()
                    .map(|(&at, &positive)| if positive { variables[at] } else { builder.not(variables[at], site) })
                    .collect();
                terms.push(builder.and(&literals, site));
                products.push(product.into_iter().collect());
            }
            let data = builder.gate(GateKind::Or, &terms, site);
            next.push(products);
            let value = builder.constant(reset >> index & 1 == 1);
            builder.cell(Cell {
                kind: CellKind::FlipFlop { clock, edge: Edge::Posedge },
                output,
                data,
                controls: vec![Control { net: rst, active: true, value }],
                init: None,
                inferred_from: None,
            });
        }
        Self { graph: builder.freeze(), flops, reset, next, inputs }
    }

    fn successors(&self, state: u32) -> BTreeSet<u32> {
        let count = self.flops.len();
        (0..1u32 << self.inputs)
            .map(|inputs| {
                let all = state | inputs << count;
                let holds = |&(at, positive): &(usize, bool)| (all >> at & 1 == 1) == positive;
                let bit = |products: &Vec<Vec<(usize, bool)>>| products.iter().any(|product| product.iter().all(holds));
                self.next.iter().enumerate().fold(0, |word, (at, products)| word | u32::from(bit(products)) << at)
            })
            .collect()
    }

    fn reachable(&self) -> BTreeSet<u32> {
        let mut seen = BTreeSet::from([self.reset]);
        let mut open = vec![self.reset];
        while let Some(state) = open.pop() {
            for next in self.successors(state) {
                if seen.insert(next) {
                    open.push(next);
                }
            }
        }
        seen
    }
}

#[test]
fn machines_are_judged_as_a_walk_through_their_states_says() {
    let mut random = Random(0x5eed_0002);
    let mut counts: BTreeMap<(AssumptionKind, &str), usize> = BTreeMap::new();
    for _ in 0..400 {
        let machine = Machine::random(&mut random);
        let reachable = machine.reachable();
        for kind in AssumptionKind::ALL {
            let nodes = if kind == AssumptionKind::Static { vec![machine.flops[0]] } else { machine.flops.clone() };
            let holds = match kind {
                AssumptionKind::OneHot => reachable.iter().all(|state| state.count_ones() == 1),
                AssumptionKind::MutuallyExclusive => reachable.iter().all(|state| state.count_ones() <= 1),
                AssumptionKind::Static => reachable.iter().all(|state| (state ^ machine.reset) & 1 == 0),
                AssumptionKind::OneBitChanging => reachable
                    .iter()
                    .all(|&state| machine.successors(state).iter().all(|next| (next ^ state).count_ones() <= 1)),
            };
            let standing = &try_assumptions(&machine.graph, &[Assumption { kind, nodes }], &Options::default())[0];
            let word = match standing {
                Standing::Checked(Proof::Induction) => {
                    assert!(holds, "{kind:?} is broken and was checked");
                    "checked"
                }
                Standing::Contradicted(_) => {
                    assert!(!holds, "{kind:?} holds and was contradicted: {standing:?}");
                    "contradicted"
                }
                Standing::Trusted(_) => {
                    assert!(holds, "{kind:?} is broken within a few steps and was taken on trust: {standing:?}");
                    "trusted"
                }
                Standing::Checked(Proof::Logic) => panic!("free registers guarantee nothing by logic"),
            };
            *counts.entry((kind, word)).or_default() += 1;
        }
    }
    for kind in AssumptionKind::ALL {
        for word in ["checked", "contradicted"] {
            let count = counts.get(&(kind, word)).copied().unwrap_or(0);
            assert!(count >= 5, "{kind:?} {word}: {count}; {counts:?}");
        }
    }
}

const DESIGN: &str = "module lock (input clk, input rst_n, input test_mode, input a, input b, output reg q);\n\
    wire r = test_mode ? a : b;\n\
    always @(posedge clk or negedge r) if (!r) q <= 0; else q <= rst_n;\nendmodule\n";

fn folder(design: &str, settings: &str) -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a temporary folder");
    std::fs::write(folder.path().join("design.v"), design).expect("written");
    std::fs::write(folder.path().join("stillwire.toml"), settings).expect("written");
    folder
}

fn scanned(design: &str, settings: &str) -> Scan {
    scan(&[folder(design, settings).path()], &[])
}

fn listed(scan: &Scan) -> Vec<(&str, &str)> {
    let list = scan.json["coverage"]["assumptions"].as_array().expect("a list");
    let text = |value: &'_ Value| -> &'static str { Box::leak(value.as_str().unwrap_or("").to_string().into()) };
    list.iter().map(|one| (text(&one["kind"]), text(&one["standing"]))).collect()
}

#[test]
fn a_static_test_mode_makes_a_selector_quiet() {
    assert_eq!(scanned(DESIGN, "").findings().len(), 1);
    let settings = "[[assume]]\nkind = \"static\"\nnets = \"lock.test_mode\"\nreason = \"a strap\"\n";
    let scan = scanned(DESIGN, settings);
    assert_eq!((scan.worse_than_notes(), scan.exit), (0, 0), "{}", scan.text);
    assert_eq!(listed(&scan), [("static", "trusted")]);
    let assumption = &scan.json["coverage"]["assumptions"][0];
    assert_eq!(assumption["settings"], "stillwire.toml:1");
    assert_eq!((&assumption["nets"][0], &assumption["reason"]), (&"lock.test_mode".into(), &"a strap".into()));
    let said = "static lock.test_mode; taken on trust: it depends on what the inputs do; \"a strap\"";
    assert!(scan.text.contains(said), "{}", scan.text);
}

#[test]
fn the_same_as_a_comment_in_every_instance() {
    let design = "module top (input clk, input m, n, a, b, output p, q);\n\
        part one (clk, m, a, b, p); part two (clk, n, a, b, q);\nendmodule\n\
        module part (input clk,\n  input mode, // stillwire: static \"a strap\"\n  input a, b, output reg q);\n\
        wire r = mode ? a : b;\n\
        always @(posedge clk or negedge r) if (!r) q <= 0; else q <= 1;\nendmodule\n";
    let scan = scanned(design, "");
    assert_eq!((scan.worse_than_notes(), listed(&scan)), (0, vec![("static", "trusted"); 2]), "{}", scan.text);
    assert_eq!(scan.json["coverage"]["assumptions"][0]["at"]["line"], 5);
}

#[test]
fn patterns_speak_about_each_instance_by_itself() {
    let design = "module top (input clk, rst, output [5:0] q);\n\
        ring one (clk, rst, q[2:0]); ring two (clk, rst, q[5:3]);\nendmodule\n\
        module ring (input clk, rst, output reg [2:0] step);\n\
        always @(posedge clk or posedge rst) if (rst) step <= 1; else step <= {step[1:0], step[2]};\nendmodule\n";
    let assume = |nets: &str| format!("[[assume]]\nkind = \"one-hot\"\nnets = {nets}\nreason = \"a ring\"\n");
    let scan = scanned(design, &assume("\"top.*.step\""));
    assert_eq!(listed(&scan), [("one-hot", "checked"); 2], "{}", scan.text);
    // Both rings together have two ones.
    let scan = scanned(design, &assume("[\"top.one.step\", \"top.two.step\"]"));
    assert_eq!((listed(&scan), scan.exit), (vec![("one-hot", "contradicted")], 1), "{}", scan.text);
    let finding = &scan.findings()[0];
    assert_eq!(finding["rule"], "assumption-contradicted");
    let message = "`top.one.step` and 1 more are declared one-hot, but in the reset state `top.one.step[0]` and \
                   `top.two.step[0]` are 1; the declaration is not used";
    assert_eq!(finding["message"], message);
    let scan = scanned(design, &assume("[\"top.one.step[0]\", \"top.one.step[2]\"]"));
    assert_eq!(listed(&scan), [("one-hot", "contradicted")], "{}", scan.text);
}

#[test]
fn assumptions_that_exclude_each_other_are_found_out() {
    let settings = "[[assume]]\nkind = \"one-hot\"\nnets = [\"lock.a\", \"lock.b\"]\nreason = \"x\"\n\
        [[assume]]\nkind = \"one-hot\"\nnets = [\"lock.b\", \"lock.test_mode\"]\nreason = \"x\"\n\
        [[assume]]\nkind = \"one-hot\"\nnets = [\"lock.a\", \"lock.test_mode\"]\nreason = \"x\"\n";
    let scan = scanned(DESIGN, settings);
    let standings: Vec<&str> = listed(&scan).into_iter().map(|(_, standing)| standing).collect();
    assert_eq!(standings, ["trusted", "trusted", "contradicted"], "{}", scan.text);
    assert!(scan.text.contains("it cannot hold together with the assumptions declared before it"), "{}", scan.text);
}

#[track_caller]
fn refused(settings: &str) -> String {
    let folder = folder(DESIGN, settings);
    let output = Command::new(env!("CARGO_BIN_EXE_stillwire")).arg("scan").arg(folder.path()).output().expect("runs");
    assert_eq!(output.status.code(), Some(2));
    let text = String::from_utf8_lossy(&output.stderr).into_owned();
    text.replace(&folder.path().display().to_string(), "")
}

#[test]
fn mistakes_are_refused_with_a_suggestion() {
    let assume = |kind: &str, nets: &str| format!("[[assume]]\nkind = {kind}\nnets = {nets}\nreason = \"x\"\n");
    let text = refused(&assume("\"static\"", "\"lock.tst_mode\""));
    assert!(text.contains("stillwire.toml:1: no net fits `lock.tst_mode` of this `static` assumption"), "{text}");
    assert!(text.contains("did you mean `lock.test_mode`?"), "{text}");
    let text = refused(&assume("\"statc\"", "\"lock.a\""));
    assert!(text.contains("stillwire.toml:2: there is no assumption of the kind `statc`"), "{text}");
    assert!(text.contains("did you mean `static`?"), "{text}");
    let text = refused(&assume("\"one-hot\"", "\"lock.a\""));
    assert!(text.contains("`one-hot` speaks about one bit, `lock.a`"), "{text}");
    let text = refused("[[assume]]\nkind = \"static\"\nnet = \"lock.a\"\n");
    assert!(text.contains("stillwire.toml:3: unknown key `assume.net`") && text.contains("did you mean `nets`?"));
    let text = refused("[[assume]]\nkind = \"static\"\nnets = \"lock.a\"\n");
    assert!(text.contains("`[[assume]]` without `reason`"), "{text}");
}

#[test]
fn comments_that_mean_nothing_are_told() {
    let design = "module lock (input clk, input d, output reg q); // stillwire: one-hot \"one bit\"\n\
        // stillwire: static \"no declaration here\"\n\
        always @(posedge clk) q <= d;\n// stillwire: static\nendmodule\n";
    let design = design.replace("input clk, input d, output reg q", "clk, d, q").replace(
        "// stillwire: one-hot",
        "input clk, d; // stillwire: static \"two inputs\"\noutput reg q; // stillwire: one-hot",
    );
    let scan = scanned(&design, "");
    let mut rules: Vec<(&str, u64)> = scan
        .findings()
        .iter()
        .map(|finding| (finding["rule"].as_str().unwrap_or(""), finding["at"]["line"].as_u64().unwrap_or(0)))
        .collect();
    rules.sort_unstable();
    assert_eq!(rules, [("signoff-invalid", 2), ("signoff-invalid", 5), ("signoff-stale", 3)], "{}", scan.text);
}
