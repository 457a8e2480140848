//! The graph's own tools: the text form reads back what it prints, the checker sees each kind of damage, components are
//! those of an independent, quadratic definition of reachability.

use stillwire::graph::{self, Graph, NodeId, cycles, text};

const WHOLE: &str = r#"
i0 = instance "top" of "lock"
i1 = instance "top.u core" of "cell" in i0
t0 = table "pick" 0?1:0 1b?:1 x01:x
o0 = operator "adder"
n0 = input
n1 = wire n0
n2 = not n1
n3 = nand n1 n2 n12 in i1
n4 = one
n5 = unknown
n6 = table t0 n1 n2 n3
n7 = op-in o0 n6
n8 = op-out o0 n7
n9 = flip-flop in i1
n10 = latch
n11 = wire n8
n12 = wire in i1
n13 = black-box-output
w0 = net i0 "level" scalar n1 ""
w1 = net i1 "odd \" name" n11 "[0]" n12 "[1]"
c0 = cell n9 data n3 posedge n1 control n2 0 n4 control n3 1 n11 init 1
c1 = cell n10 data n3 enable n2 0
port i0 "level" input w0
port i0 "bus" output w0 3 -1
black-box i1 "pad" input "a" n1 n2 output "y" n13
"#;

fn parsed(text: &str) -> text::Parsed {
    text::parse(text).unwrap_or_else(|error| panic!("{error} in:\n{text}"))
}

#[test]
fn the_text_form_prints_what_it_parsed() {
    assert_eq!(text::print(&parsed(WHOLE).graph), WHOLE.trim_start());
    assert_eq!(graph::check(&parsed(WHOLE).graph), Vec::<String>::new());
}

#[test]
fn labels_are_free_and_may_come_late() {
    let circuit = parsed("set = input\nq = nor reset nq # crossed\nnq = nor set q\nreset = input");
    let graph = &circuit.graph;
    let q = circuit.node("q").expect("q is declared");
    assert_eq!(graph.fanin(q), [circuit.node("reset"), circuit.node("nq")].map(|node| node.expect("declared")));
    assert_eq!(graph.instances.len(), 1);
}

#[test]
fn broken_text_names_its_line() {
    for (text, line) in [
        ("a = input\nb = and a c", 2),
        ("a = input\na = input", 2),
        ("a = what", 1),
        ("a = input \"x", 1),
        ("a", 1),
        ("a = not a trailing", 1),
        ("t = table \"t\" 01", 1),
    ] {
        let error = text::parse(text).expect_err(text);
        assert!(error.starts_with(&format!("line {line}: ")), "{error}");
    }
}

#[track_caller]
fn one_violation(text: &str, part: &str) {
    let found = graph::check(&parsed(text).graph);
    assert!(found.len() == 1 && found[0].contains(part), "{found:?}");
}

#[test]
fn the_checker_sees_each_kind_of_damage() {
    one_violation("a = input\nb = and a", "n1 has 1 fan-in, not two or more");
    one_violation("a = input\nb = input a", "n1 has 1 fan-in, not no");
    one_violation("a = input\nb = wire a a", "n1 has 2 fan-in, not at most one");
    one_violation("t = table \"t\" 00:1\na = input\nb = table t a", "n1 has 1 fan-in, not 2");
    one_violation("t = table \"t\" 00:1 0:0", "row 1 of t0 has 1 columns, not 2");
    one_violation("t = table \"t\" 0:?", "row 0 of t0 has no value as output");
    one_violation("t = table \"t\"", "t0 has no rows");
    one_violation("a = input\nw = net i0 \"a\" a \"\"", "n0 is named but no wire");
    one_violation("a = wire\nb = wire\nw = net i0 \"v\" a \"[0]\" b \"[0]\"", "two bits of w0");
    one_violation("a = wire\nb = wire\nw = net i0 \"v\" scalar a \"[0]\" b \"[1]\"", "scalar but has 2 bits");
    one_violation("a = wire\nw = net i0 \"v\" a \"\"\nx = net i0 \"u\" a \"\"", "n0 is a bit of w0 but not named");
    one_violation("a = input\nc = cell a data a posedge a", "no source of its kind");
    one_violation("a = latch\nc = cell a data a enable a 1\nd = cell a data a enable a 1", "output of c0 and of c1");
    one_violation("i = instance \"t\"\nj = instance \"u.j\" in i", "does not extend");
    one_violation("a = input\nblack-box i0 \"pad\" output \"y\" a", "no source of one");
    one_violation(
        "i = instance \"t\"\nj = instance \"u\"\na = wire\nw = net j \"v\" a \"\"\nport i \"v\" input w",
        "stands in another top",
    );
}

/// Components by definition: two nodes belong together when each reaches the other.
fn by_reachability(graph: &Graph) -> Vec<Vec<NodeId>> {
    let reach: Vec<Vec<bool>> = graph
        .nodes()
        .map(|start| {
            let mut seen = vec![false; graph.len()];
            let mut todo: Vec<NodeId> = graph.fanin(start).to_vec();
            while let Some(node) = todo.pop() {
                if !std::mem::replace(&mut seen[node.index()], true) {
                    todo.extend_from_slice(graph.fanin(node));
                }
            }
            seen
        })
        .collect();
    let mut components: Vec<Vec<NodeId>> = Vec::new();
    for node in graph.nodes().filter(|node| reach[node.index()][node.index()]) {
        let peers: Vec<NodeId> = graph
            .nodes()
            .filter(|peer| reach[node.index()][peer.index()] && reach[peer.index()][node.index()])
            .collect();
        if peers[0] == node {
            components.push(peers);
        }
    }
    components
}

#[test]
fn components_agree_with_reachability() {
    let mut state = 0x5eed_u64;
    let mut random = |below: usize| {
        state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (state >> 33) as usize % below
    };
    let mut loops = 0;
    for _ in 0..300 {
        let gates = 2 + random(14);
        let mut text = String::from("n0 = input\n");
        for gate in 1..=gates {
            let (first, second) = (random(gates + 1), random(gates + 1));
            // A mix of forward edges and few backward ones gives components of all sizes.
            let first = if random(3) > 0 { first.min(gate - 1) } else { first };
            let second = if random(2) > 0 { second.min(gate - 1) } else { second };
            text.push_str(&format!("n{gate} = and n{first} n{second}\n"));
        }
        let graph = parsed(&text).graph;
        let components = cycles::components(&graph);
        let found: Vec<Vec<NodeId>> = components.iter().map(<[NodeId]>::to_vec).collect();
        assert_eq!(found, by_reachability(&graph), "{text}");
        for node in graph.nodes() {
            let expected = found.iter().position(|nodes| nodes.contains(&node));
            assert_eq!(components.component_of(node), expected);
        }
        loops += found.len();
    }
    assert!(loops > 200, "the circuits must have loops, only {loops} found");
}

#[test]
fn a_long_chain_needs_no_call_stack() {
    let mut text = String::from("n0 = and n1 n1\n");
    for node in 1..200_000 {
        text.push_str(&format!("n{node} = not n{}\n", (node + 1) % 200_000));
    }
    let components = cycles::components(&parsed(&text).graph);
    assert_eq!(components.len(), 1);
    assert_eq!(components.nodes(0).len(), 200_000);
}
