//! Covers: the published terms of published examples, each with its source, and on random circuits that the terms leave
//! the function alone and remove every hazard, both checked transition by transition with the plain evaluator.

use std::collections::{BTreeMap, BTreeSet};

use stillwire::graph::{Graph, NodeId, NodeKind, text};
use stillwire::hazard::{Cover, HazardKind, Options, Withheld, cover, decide, waveform};

use crate::decide::{Random, random_graph};

#[track_caller]
fn parsed(text: &str) -> text::Parsed {
    text::parse(text).unwrap_or_else(|error| panic!("{error} in:\n{text}"))
}

/// The cover of the node `f`.
#[track_caller]
fn covered(text: &str) -> (text::Parsed, Result<Cover, Withheld>) {
    let circuit = parsed(text);
    let target = circuit.node("f").expect("f");
    let options = Options::default();
    let verdict = decide(&circuit.graph, &[target], &options).remove(0);
    let found = cover(&circuit.graph, &verdict, None, &options);
    (circuit, found)
}

/// Requires exactly these added terms, in the notation `a b'`, over the labels of the inputs.
#[track_caller]
fn adds(text: &str, products: &[&str], sums: &[&str]) {
    let (circuit, found) = covered(text);
    let cover = found.expect("a cover");
    let terms = |texts: &[&str]| -> BTreeSet<BTreeSet<(NodeId, bool)>> {
        let literal = |word: &str| {
            let name = word.trim_end_matches('\'');
            (circuit.node(name).expect("an input"), name == word)
        };
        texts.iter().map(|term| term.split_whitespace().map(literal).collect()).collect()
    };
    let sets = |terms: &[Vec<(NodeId, bool)>]| -> BTreeSet<BTreeSet<(NodeId, bool)>> {
        terms.iter().map(|term| term.iter().copied().collect()).collect()
    };
    assert_eq!(sets(&cover.products), terms(products), "products of\n{text}");
    assert_eq!(sets(&cover.sums), terms(sums), "sums of\n{text}");
    assert!(cover.proven && !cover.replaces);
}

/// E1. Classic example, also in encyclopedic articles on static hazards.
#[test]
fn e1_the_multiplexer() {
    adds("a = input\nb = input\nc = input\nna = not a\np = and a b\nq = and na c\nf = or p q", &["b c"], &[]);
}

/// E1b. The dual of E1, computed.
#[test]
fn e1b_the_dual_of_the_multiplexer() {
    adds("a = input\nc = input\nd = input\nna = not a\np = or a d\nq = or na c\nf = and p q", &[], &["c d"]);
}

/// E2a. Katz, Contemporary Logic Design; memory.
#[test]
fn e2a_katz() {
    adds(
        "a = input\nb = input\nc = input\nd = input\nna = not a\nnc = not c\np = and na d\nq = and a nc\nf = or p q",
        &["c' d"],
        &[],
    );
}

/// E3. Kinney, EE2301 discussion 7 (2009), answer seen: the cured form (B+D)(B'+C)(C+D)(A'+D).
#[test]
fn e3_kinney() {
    adds(
        "a = input\nb = input\nc = input\nd = input\nna = not a\nnb = not b\nnc = not c\n\
         p = or b d\nq = or nb c\nr = or na nc d\nf = and p q r",
        &[],
        &["c d", "a' d"],
    );
}

/// E8. Exercise with answer seen: W'Z' + XYZ + WX'Z needs W'XY and WYZ.
#[test]
fn e8_two_missing_terms() {
    adds(
        "w = input\nx = input\ny = input\nz = input\nnw = not w\nnx = not x\nnz = not z\n\
         p = and nw nz\nq = and x y z\nr = and w nx z\nf = or p q r",
        &["w' x y", "w y z"],
        &[],
    );
}

/// E13. c17 of ISCAS-85 (Brglez, Fujiwara 1985), output N22; computed.
#[test]
fn e13_c17() {
    adds(
        "n1 = input\nn2 = input\nn3 = input\nn6 = input\nn7 = input\n\
         n10 = nand n1 n3\nn11 = nand n3 n6\nn16 = nand n2 n11\nf = nand n10 n16",
        &["n1 n2"],
        &[],
    );
}

/// E6. Textbook exercise 8.11, computed: (A+B)(B'C+BD') has a dynamic hazard, which no added term cures.
#[test]
fn e6_a_dynamic_hazard_is_replaced() {
    let (circuit, found) = covered(
        "a = input\nb = input\nc = input\nd = input\nnb = not b\nnd = not d\n\
         p = or a b\nq = and nb c\nr = and b nd\ns = or q r\nf = and p s",
    );
    let cover = found.expect("a cover");
    assert!(cover.replaces && cover.proven && cover.sums.is_empty());
    confirm(&circuit.graph, circuit.node("f").expect("f"), &cover);
}

#[test]
fn withheld_with_a_reason() {
    let (_, clean) = covered("a = input\nb = input\nf = and a b");
    assert_eq!(clean, Err(Withheld::Clean));
    // One bit of an adder behind its operator: the sum of two bits and a carry.
    let (_, operator) = covered(
        "o = operator \"adder\"\na = input\nb = input\nia = op-in o a\nib = op-in o b\ns = xor ia ib\nf = op-out o s",
    );
    assert_eq!(operator, Err(Withheld::Operator));
    // The term would be "b u" with an u nobody knows.
    let (_, unknown) = covered("a = input\nb = input\nu = unknown\nna = not a\np = and a b\nq = and na u\nf = or p q");
    assert_eq!(unknown, Err(Withheld::Unknown));
    // The parity of twelve sources through a selector: dynamic, and too wide for a replacing form.
    let mut text: String = (0..12).map(|at| format!("i{at} = input\n")).collect();
    text.push_str(
        "x = xor i0 i1 i2 i3 i4 i5 i6 i7 i8 i9 i10 i11\nm = nand x i0\np = nand m x\nq = nand m i0\nf = nand p q",
    );
    assert_eq!(covered(&text).1, Err(Withheld::TooManySources));
}

/// Beyond a truth table the solver finds the same kind of term.
#[test]
fn a_wide_selector_gets_its_term() {
    let mut text: String = (0..20).map(|at| format!("i{at} = input\n")).collect();
    text.push_str("s = input\nns = not s\n");
    text.push_str(
        "p = and s i0 i1 i2 i3 i4 i5 i6 i7 i8 i9\nq = and ns i10 i11 i12 i13 i14 i15 i16 i17 i18 i19\nf = or p q",
    );
    let all: Vec<String> = (0..20).map(|at| format!("i{at}")).collect();
    adds(&text, &[&all.join(" ")], &[]);
}

/// The target with the terms, as a graph, and the target in it.
fn cured(graph: &Graph, target: NodeId, cover: &Cover) -> (Graph, NodeId) {
    let mut text = text::print(graph);
    let mut term = |kind: &str, list: &str, inputs: &mut Vec<String>, literals: &[(NodeId, bool)]| {
        let name = format!("{list}{}", inputs.len());
        let mut pins = Vec::new();
        for (at, (node, value)) in literals.iter().enumerate() {
            if *value {
                pins.push(node.to_string());
            } else {
                text.push_str(&format!("{name}_{at} = not {node}\n"));
                pins.push(format!("{name}_{at}"));
            }
        }
        match pins.len() {
            0 => text.push_str(&format!("{name} = {}\n", if kind == "and" { "one" } else { "zero" })),
            1 => text.push_str(&format!("{name} = buf {}\n", pins[0])),
            _ => text.push_str(&format!("{name} = {kind} {}\n", pins.join(" "))),
        }
        inputs.push(name);
    };
    let mut products = if cover.replaces { Vec::new() } else { vec![target.to_string()] };
    cover.products.iter().for_each(|literals| term("and", "product", &mut products, literals));
    let mut sums = vec!["with_products".to_string()];
    cover.sums.iter().for_each(|literals| term("or", "sum", &mut sums, literals));
    for (name, kind, inputs) in [("with_products", "or", &products), ("cured", "and", &sums)] {
        let kind = if inputs.len() > 1 { kind } else { "buf" };
        text.push_str(&format!("{name} = {kind} {}\n", inputs.join(" ")));
    }
    let circuit = parsed(&text);
    let cured = circuit.node("cured").expect("cured");
    (circuit.graph, cured)
}

/// Every transition of every source: the function is that of the target, the waveform clean.
#[track_caller]
fn confirm(graph: &Graph, target: NodeId, cover: &Cover) {
    let (extended, cured) = cured(graph, target, cover);
    let sources: Vec<NodeId> =
        graph.nodes().filter(|&node| matches!(graph.kind(node), NodeKind::Source(_) | NodeKind::Unknown)).collect();
    for point in 0..1usize << sources.len() {
        let before: BTreeMap<NodeId, bool> =
            sources.iter().enumerate().map(|(at, &node)| (node, point >> at & 1 == 1)).collect();
        for &source in sources.iter().filter(|&&node| graph.kind(node) != NodeKind::Unknown) {
            let mut after = before.clone();
            after.insert(source, !before[&source]);
            let (old, new) = (waveform(graph, &before, &after, target), waveform(&extended, &before, &after, cured));
            assert!(!new.h, "{source} still shows at {before:?} with {cover:?} in\n{}", text::print(graph));
            assert_eq!((old.i, old.f), (new.i, new.f), "{cover:?} changes the function of\n{}", text::print(graph));
        }
    }
}

#[test]
fn covers_of_random_circuits_cure_and_change_nothing() {
    let mut random = Random(0xc0fe);
    let mut outcomes: BTreeMap<String, usize> = BTreeMap::new();
    for _ in 0..400 {
        let sources = 3 + random.below(4);
        let gates = 4 + random.below(10);
        let (graph, targets) = random_graph(&mut random, sources, gates);
        let options = Options::default();
        for verdict in decide(&graph, &targets, &options) {
            let outcome = match cover(&graph, &verdict, None, &options) {
                Ok(found) => {
                    assert!(found.proven);
                    confirm(&graph, verdict.target, &found);
                    let dynamic = verdict
                        .pairs
                        .iter()
                        .any(|pair| pair.hazards.iter().any(|(kind, _)| *kind == HazardKind::Dynamic));
                    assert!(found.replaces || !dynamic, "a dynamic hazard needs another form");
                    if found.replaces { "replaced".to_string() } else { "amended".to_string() }
                }
                Err(reason) => format!("{reason:?}"),
            };
            *outcomes.entry(outcome).or_insert(0) += 1;
        }
    }
    assert!(outcomes["amended"] > 50 && outcomes["replaced"] > 50, "{outcomes:?}");
    assert!(!outcomes.contains_key("Undecided"), "{outcomes:?}");
}
