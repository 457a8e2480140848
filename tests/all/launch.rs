//! What events show, on small designs in the text form of the graph whose answers follow from the semantics by hand.

use stillwire::graph::text;
use stillwire::hazard::launch::{self, Assumptions, Shown};
use stillwire::hazard::{HazardKind, Options, Step};

/// Root, direction, step and kind, with the root by its label.
fn shown(design: &str, target: &str) -> Vec<(String, bool, Step, HazardKind)> {
    shown_under(design, target, |_| Assumptions::default())
}

fn shown_under(
    design: &str,
    target: &str,
    assume: impl Fn(&text::Parsed) -> Assumptions,
) -> Vec<(String, bool, Step, HazardKind)> {
    let parsed = text::parse(design).unwrap_or_else(|error| panic!("{error}"));
    let labels: Vec<&str> = design.lines().filter_map(|line| line.split_once(" = ")).map(|(label, _)| label).collect();
    let node = |label: &str| parsed.node(label).unwrap_or_else(|| panic!("no {label}"));
    let assumptions = assume(&parsed);
    let (found, open) = launch::shown(&parsed.graph, node(target), &assumptions, &Options::default());
    assert!(open.is_empty(), "{open:?}");
    let name = |shown: &Shown| {
        let label = labels.iter().find(|label| parsed.node(label) == Some(shown.root));
        label.unwrap_or_else(|| panic!("an unknown root")).to_string()
    };
    found.iter().map(|one| (name(one), one.rises, one.step, one.kind)).collect()
}

/// Two flip-flops that count 0, 1, 2, 3 and the decode of 3.
const BINARY: &str = "
clk = input
a = flip-flop
b = flip-flop
na = not a
ab = xor a b
t = and a b
c0 = cell a data na posedge clk
c1 = cell b data ab posedge clk
";

#[test]
fn a_decode_of_a_binary_counter_glitches_when_two_bits_change() {
    // 01 -> 10 passes through 11 or 00.
    assert_eq!(shown(BINARY, "t"), [("clk".to_string(), true, Step::Second, HazardKind::Static0)]);
}

#[test]
fn a_decode_of_a_gray_counter_is_still() {
    let gray = "
clk = input
a = flip-flop
b = flip-flop
nb = not b
t = and a b
c0 = cell a data nb posedge clk
c1 = cell b data a posedge clk
";
    assert_eq!(shown(gray, "t"), []);
}

/// A flip-flop of either edge whose output gates the clock with an AND.
fn gated(edge: &str) -> String {
    format!(
        "
clk = input
d = input
e = flip-flop
t = and clk e
c0 = cell e data d {edge} clk
"
    )
}

#[test]
fn an_and_gate_on_a_clock_wants_its_enable_from_the_falling_edge() {
    // The clock rises, then the enable falls: the pulse is cut short. Where it rises instead, the pulse begins late: the
    // pin changes once, and no hazard is shown.
    assert_eq!(shown(&gated("posedge"), "t"), [("clk".to_string(), true, Step::Both, HazardKind::Static0)]);
    assert_eq!(shown(&gated("negedge"), "t"), []);
}

/// A gated clock with a latch that is open at a level of the clock.
fn latched(level: u8) -> String {
    format!(
        "
clk = input
d = input
q = flip-flop
e = latch
t = and clk e
c0 = cell q data d posedge clk
c1 = cell e data q enable clk {level}
"
    )
}

#[test]
fn a_latch_in_front_of_an_and_gate_must_be_open_while_the_clock_is_low() {
    assert_eq!(shown(&latched(0), "t"), []);
    // The clock opens the latch, which passes what the flip-flop then launches.
    let found = shown(&latched(1), "t");
    assert!(found.contains(&("clk".to_string(), true, Step::Both, HazardKind::Static0)), "{found:?}");
}

#[test]
fn an_input_passes_an_open_latch_with_its_hazards() {
    let design = "
g = input
s = input
a = input
b = input
ns = not s
u = and s a
v = and ns b
m = or u v
q = latch
c0 = cell q data m enable g 1
r = flip-flop
one = one
c1 = cell r data one posedge q
";
    let found = shown(design, "q");
    for rises in [false, true] {
        assert!(found.contains(&("s".to_string(), rises, Step::First, HazardKind::Static1)), "{found:?}");
    }
    assert!(found.iter().all(|(root, _, step, _)| root == "s" && *step == Step::First), "{found:?}");
}

#[test]
fn a_flip_flop_that_clears_itself_shows_a_pulse() {
    let design = "
clk = input
one = one
zero = zero
q = flip-flop
c0 = cell q data one posedge clk control q 1 zero
";
    assert_eq!(shown(design, "q"), [("q".to_string(), true, Step::Both, HazardKind::Static0)]);
}

#[test]
fn what_is_declared_static_has_no_event() {
    let design = "
s = input
a = input
b = input
ns = not s
u = and s a
v = and ns b
t = or u v
";
    assert_eq!(shown(design, "t").len(), 2);
    let fixed =
        |parsed: &text::Parsed| Assumptions { fixed: parsed.node("s").into_iter().collect(), ..Assumptions::default() };
    assert_eq!(shown_under(design, "t", fixed), []);
}

#[test]
fn a_code_declared_one_hot_moves_by_two_bits_at_most() {
    let design = "
clk = input
x = input
y = input
a = flip-flop
b = flip-flop
nb = not b
t = and a nb
c0 = cell a data x posedge clk
c1 = cell b data y posedge clk
";
    let kinds = |found: Vec<(String, bool, Step, HazardKind)>| -> Vec<HazardKind> {
        found.into_iter().map(|(_, _, _, kind)| kind).collect()
    };
    // 00 -> 11 and back show 0-1-0.
    assert_eq!(kinds(shown(design, "t")), [HazardKind::Static0]);
    let pair = |parsed: &text::Parsed| ["a", "b"].iter().filter_map(|label| parsed.node(label)).collect::<Vec<_>>();
    let one_hot = |parsed: &text::Parsed| Assumptions { one_hot: vec![pair(parsed)], ..Assumptions::default() };
    assert_eq!(shown_under(design, "t", one_hot), []);
    let one_bit = |parsed: &text::Parsed| Assumptions { one_bit: vec![pair(parsed)], ..Assumptions::default() };
    assert_eq!(shown_under(design, "t", one_bit), []);
}
