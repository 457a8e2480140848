//! What combinational loops do, on loops whose behaviour is published or follows from a textbook definition; the source
//! stands beside each check. Afterwards an independent, plain count of stable states on random loops, small enough to be
//! counted and large enough to be searched.

use stillwire::graph::{NodeId, text};
use stillwire::hazard::{BehaviourKind, LoopVerdict, Options, loops};

#[track_caller]
fn parsed(text: &str) -> text::Parsed {
    text::parse(text).unwrap_or_else(|error| panic!("{error} in:\n{text}"))
}

/// One loop as text, with its verdict.
struct Case {
    circuit: text::Parsed,
    verdict: LoopVerdict,
}

impl Case {
    #[track_caller]
    fn new(text: &str) -> Self {
        let circuit = parsed(text);
        let mut verdicts = loops(&circuit.graph, &Options::default());
        assert_eq!(verdicts.len(), 1, "one loop in:\n{text}");
        Self { circuit, verdict: verdicts.remove(0) }
    }

    fn node(&self, label: &str) -> NodeId {
        self.circuit.node(label).unwrap_or_else(|| panic!("no node {label}"))
    }

    fn kinds(&self) -> Vec<&'static str> {
        self.verdict.behaviours.iter().map(|behaviour| behaviour.kind.name()).collect()
    }

    /// The inputs that show a behaviour, as `label=value`.
    fn shown(&self, kind: BehaviourKind, labels: &[&str]) -> Vec<String> {
        let behaviour = self.verdict.behaviours.iter().find(|behaviour| behaviour.kind == kind).expect("shown");
        let label = |node: NodeId| labels.iter().find(|label| self.node(label) == node).copied().unwrap_or("?");
        behaviour.inputs.iter().map(|&(node, value)| format!("{}={}", label(node), u8::from(value))).collect()
    }
}

#[track_caller]
fn behaves(text: &str, kinds: &[&str]) -> Case {
    let case = Case::new(text);
    assert_eq!(case.kinds(), kinds, "{text}");
    case
}

/// Stores, and no single change loses the state.
#[track_caller]
fn keeps(text: &str) -> Case {
    let case = behaves(text, &["stores"]);
    assert!(case.verdict.loss_decided);
    assert_eq!(case.verdict.loses_state, None);
    case
}

/// L1. R. L. Rivest, The necessity of feedback in minimal monotone combinational circuits, IEEE Trans. Computers C-26,
/// 1977.
#[test]
fn six_gates_in_a_ring_settle() {
    behaves(
        "x1 = input\nx2 = input\nx3 = input\nf1 = and x1 f6\nf2 = or x2 f1\nf3 = and x3 f2\n\
         f4 = or x1 f3\nf5 = and x2 f4\nf6 = or x3 f5",
        &["settles"],
    );
}

/// L2. S. Malik, Analysis of cyclic combinational circuits, IEEE Trans. CAD 13, 1994 (after Stok); memory.
#[test]
fn two_shared_units_that_never_close_their_loop_settle() {
    behaves(
        "a = input\nb = input\nc = input\nx = input\nnc = not c\n\
         p1 = and nc x\np2 = and c g\nfi = or p1 p2\nf = and fi a\n\
         p3 = and c x\np4 = and nc f\ngi = or p3 p4\ng = or gi b\n\
         p5 = and c f\np6 = and nc g\nout = or p5 p6",
        &["settles"],
    );
}

/// L3. Textbook: two stable states for S = R = 0; S = R = 1 gives 0 on both outputs.
#[test]
fn the_nor_latch_stores() {
    let case = keeps("s = input\nr = input\nq = nor r nq\nnq = nor s q");
    assert_eq!(case.shown(BehaviourKind::Stores, &["s", "r"]), ["s=0", "r=0"]);
    let behaviour = &case.verdict.behaviours[0];
    let feedback = behaviour.states[0][0].0;
    assert!(feedback == case.node("q") || feedback == case.node("nq"));
    assert_eq!(behaviour.states, [vec![(feedback, false)], vec![(feedback, true)]]);
}

/// L4. The dual.
#[test]
fn the_nand_latch_stores() {
    let case = keeps("s = input\nr = input\nq = nand s nq\nnq = nand r q");
    assert_eq!(case.shown(BehaviourKind::Stores, &["s", "r"]), ["s=1", "r=1"]);
}

/// L5. Textbook: the gated D latch of four NAND and an inverter holds at G = 0; opening, closing and D while closed have
/// one outcome each.
#[test]
fn the_gated_latch_stores_and_keeps() {
    let case = keeps("d = input\ng = input\nnd = not d\ns = nand d g\nr = nand nd g\nq = nand s nq\nnq = nand r q");
    assert_eq!(case.shown(BehaviourKind::Stores, &["d", "g"]), ["g=0"]);
}

/// L6. M. M. Mano, Digital Design, chapter 9; memory: q = dg + g'q may lose the state with d = q = 1 when g falls; with
/// the term dq it cannot.
#[test]
fn the_latch_without_consensus_loses_its_state() {
    let case =
        behaves("d = input\ng = input\nng = not g\na = and d g\nb = and ng q\nq = or a b\nout = wire q", &["stores"]);
    assert!(case.verdict.loss_decided);
    let loss = case.verdict.loses_state.as_ref().expect("the state is lost");
    assert_eq!(loss.node, case.node("q"));
    assert_eq!(loss.source, case.node("g"));
    assert_eq!(loss.witness.changes, [(case.node("g"), true)]);
    assert_eq!(loss.witness.target, (true, true));
    assert!(loss.witness.holds.contains(&(case.node("d"), true)));
    assert!(loss.witness.holds.contains(&(loss.node, true)));
    let cover = loss.cover.as_ref().expect("a cover keeps it");
    assert_eq!(cover.products, [vec![(case.node("d"), true), (loss.node, true)]]);
    assert!(cover.sums.is_empty() && !cover.replaces && cover.proven);
}

#[test]
fn the_latch_with_consensus_keeps_its_state() {
    keeps("d = input\ng = input\nng = not g\na = and d g\nb = and ng q\nc = and d q\nq = or a b c");
}

/// L7. The C-element of D. E. Muller, 1959; one outcome for every single change.
#[test]
fn the_c_element_stores_and_keeps() {
    let case = keeps("a = input\nb = input\nt = and a b\nu = and a y\nv = and b y\ny = or t u v");
    let shown = case.shown(BehaviourKind::Stores, &["a", "b"]);
    assert!(shown == ["a=0", "b=1"] || shown == ["a=1", "b=0"], "{shown:?}");
}

/// L8. Textbook: an odd ring of inverters has no stable state, an even one has two; a three-ring with a NAND as enable
/// is stable at 0 and has no stable state at 1.
#[test]
fn rings_of_inverters() {
    for length in 1..9 {
        let ring: Vec<String> = (0..length).map(|at| format!("n{at} = not n{}", (at + 1) % length)).collect();
        behaves(&ring.join("\n"), if length % 2 == 1 { &["oscillates"] } else { &["stores"] });
    }
    let case = behaves("en = input\na = nand en c\nb = not a\nc = not b", &["oscillates"]);
    assert_eq!(case.shown(BehaviourKind::Oscillates, &["en"]), ["en=1"]);
}

/// L9. G. Berry and T. Shiple on constructive circuits: one Boolean fixpoint, ternary simulation does not find it.
#[test]
fn a_fixpoint_that_only_logic_knows_is_delay_dependent() {
    behaves("n = not y\ny = or y n", &["delay-dependent"]);
    behaves("n = not y\ny = and y n", &["delay-dependent"]);
}

/// L12. The flip-flop of six NAND gates (function tables of 74-series dual flip-flops): two loops, one behind the
/// other; both store, and no single change loses the state.
#[test]
fn the_edge_triggered_flip_flop_stores() {
    let circuit = parsed(
        "pre = input\nclr = input\nck = input\nd = input\n\
         n1 = nand pre n4 n2\nn2 = nand n1 clr ck\nn3 = nand n2 ck n4\nn4 = nand n3 clr d\n\
         q = nand pre n2 qn\nqn = nand clr n3 q",
    );
    let verdicts = loops(&circuit.graph, &Options::default());
    assert_eq!(verdicts.len(), 2);
    for verdict in &verdicts {
        let kinds: Vec<&str> = verdict.behaviours.iter().map(|behaviour| behaviour.kind.name()).collect();
        assert_eq!(kinds, ["stores"]);
        assert!(verdict.loss_decided && verdict.loses_state.is_none(), "{verdict:?}");
    }
}

/// A plain, scalar reading of a loop, one point at a time, that shares nothing with the product: how many assignments
/// of all nodes fit together for each value of the inputs, and whether ternary rounds resolve every node.
fn expected(gates: &[(&str, usize, usize)], inputs: usize) -> Vec<&'static str> {
    let (mut none, mut many, mut resolved) = (false, false, true);
    for input in 0..1usize << inputs {
        let fits = |state: usize| {
            gates.iter().enumerate().all(|(gate, &(kind, a, b))| {
                let read = |pin: usize| if pin < inputs { input >> pin & 1 } else { state >> (pin - inputs) & 1 };
                let value = match kind {
                    "and" => read(a) & read(b),
                    "or" => read(a) | read(b),
                    "nand" => 1 - (read(a) & read(b)),
                    "nor" => 1 - (read(a) | read(b)),
                    _ => read(a) ^ read(b),
                };
                value == state >> gate & 1
            })
        };
        let count = (0..1usize << gates.len()).filter(|&state| fits(state)).count();
        none |= count == 0;
        many |= count > 1;
        let mut values: Vec<Option<usize>> = vec![None; gates.len()];
        for _ in 0..=gates.len() {
            for (gate, &(kind, a, b)) in gates.iter().enumerate() {
                let read = |pin: usize| if pin < inputs { Some(input >> pin & 1) } else { values[pin - inputs] };
                values[gate] = match (kind, read(a), read(b)) {
                    ("and", Some(0), _) | ("and", _, Some(0)) => Some(0),
                    ("or", Some(1), _) | ("or", _, Some(1)) => Some(1),
                    ("nand", Some(0), _) | ("nand", _, Some(0)) => Some(1),
                    ("nor", Some(1), _) | ("nor", _, Some(1)) => Some(0),
                    ("and", Some(a), Some(b)) => Some(a & b),
                    ("or", Some(a), Some(b)) => Some(a | b),
                    ("nand", Some(a), Some(b)) => Some(1 - (a & b)),
                    ("nor", Some(a), Some(b)) => Some(1 - (a | b)),
                    ("xor", Some(a), Some(b)) => Some(a ^ b),
                    _ => None,
                };
            }
        }
        resolved &= values.iter().all(Option::is_some);
    }
    match (none, many) {
        (true, true) => vec!["oscillates", "stores"],
        (true, false) => vec!["oscillates"],
        (false, true) => vec!["stores"],
        (false, false) if resolved => vec!["settles"],
        (false, false) => vec!["delay-dependent"],
    }
}

#[test]
fn random_loops_agree_with_a_plain_count() {
    let mut state = 0x1009_u64;
    let mut random = |below: usize| {
        state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (state >> 33) as usize % below
    };
    let mut seen = std::collections::BTreeMap::new();
    for _ in 0..3000 {
        let (inputs, count) = (1 + random(4), 2 + random(6));
        // Every gate reads the gate before it, so that all gates lie on one loop.
        let gates: Vec<(&str, usize, usize)> = (0..count)
            .map(|gate| {
                let kind = ["and", "or", "nand", "nor", "xor"][random(5)];
                (kind, inputs + (gate + count - 1) % count, random(inputs + count))
            })
            .collect();
        let mut text: String = (0..inputs).map(|input| format!("n{input} = input\n")).collect();
        for (gate, (kind, a, b)) in gates.iter().enumerate() {
            text.push_str(&format!("n{} = {kind} n{a} n{b}\n", inputs + gate));
        }
        let verdicts = loops(&parsed(&text).graph, &Options::default());
        assert_eq!(verdicts.len(), 1, "{text}");
        let kinds: Vec<&str> = verdicts[0].behaviours.iter().map(|behaviour| behaviour.kind.name()).collect();
        assert_eq!(kinds, expected(&gates, inputs), "{text}");
        *seen.entry(kinds).or_insert(0) += 1;
    }
    assert_eq!(seen.len(), 5, "every behaviour must occur: {seen:?}");
}
