//! Launches in words: which edge of which signal starts the event, which signals move together, what the pin shows on the
//! way, and what cures it. A hazard of the function has no cover, and whoever reads of one should hear at once what does
//! help.

use super::finding::{LaunchText, TraceStep};
use super::{bundle, evidence, names, words};
use crate::graph::{Graph, NodeId, NodeKind, SourceKind};
use crate::hazard::{Cause, Launch, Paths, Reach, Step, TargetVerdict};
use crate::source::Span;

/// So many signals, or vectors, are named in a sentence.
const NAMED: usize = 3;
/// So many signals, or bits of a vector, are shown at their declaration.
const SHOWN: usize = 4;

const FUNCTION: &str = "function hazard: between the two codes the net itself has the other value, whatever gates make \
                        it and however fast they are, so no cover removes it; to do: put a flip-flop behind the decode, \
                        or use a code in which one bit changes at a time";
const PHASE: &str = "the edge reaches this net before what it launches does; to do: let that signal move while the \
                     clock rests: from a flip-flop of the other edge, or through a latch that is open while the clock \
                     is inactive";
const RACE: &str = "to do: let the data of the latch hold still while it opens and closes: launch it from the other edge, \
                    or make the latch open in the other phase";

/// The event as data.
pub(super) fn of(graph: &Graph, launch: &Launch) -> LaunchText {
    let moves = |list: &[(NodeId, bool)]| {
        let mut named: Vec<(String, bool)> =
            list.iter().map(|&(node, value)| (names::name(graph, node), value)).collect();
        named.sort();
        named
    };
    let names = |list: &[NodeId]| {
        let mut named: Vec<String> = list.iter().map(|&node| names::name(graph, node)).collect();
        named.sort();
        named
    };
    LaunchText {
        root: names::name(graph, launch.root),
        rises: launch.rises,
        step: match launch.step {
            Step::First => "first",
            Step::Second => "second",
            Step::Both => "both",
        },
        first: moves(&launch.first),
        second: moves(&launch.second),
        passing: names(&launch.passing),
        raced: names(&launch.raced),
        pin: launch.target,
    }
}

pub(super) fn reach(reach: Reach) -> &'static str {
    match reach {
        Reach::AnyState => "any-state",
        Reach::ReachableStates => "reachable-states",
    }
}

/// "the rising edge of `clk`".
fn edge(graph: &Graph, launch: &Launch) -> String {
    let way = if launch.rises { "rising" } else { "falling" };
    format!("the {way} edge of `{}`", names::name(graph, launch.root))
}

/// "`a`, bits 3:0 of `b` and 3 more".
fn listed(graph: &Graph, nodes: &[NodeId]) -> String {
    let named: Vec<String> = nodes.iter().map(|&node| names::name(graph, node)).collect();
    bundle::listed(named.iter().map(String::as_str), NAMED)
}

fn nodes(moves: &[(NodeId, bool)]) -> Vec<NodeId> {
    moves.iter().map(|&(node, _)| node).collect()
}

/// The sentence that stands alone; `can` is what the hazard makes of the pin.
pub(super) fn message(graph: &Graph, launch: &Launch, can: &str) -> String {
    let edge = edge(graph, launch);
    let judged = if launch.step == Step::First { &launch.first } else { &launch.second };
    let moved: Vec<NodeId> = nodes(judged).into_iter().filter(|&node| node != launch.root).collect();
    if !launch.raced.is_empty() {
        let latches = listed(graph, &launch.raced);
        return format!("{edge} moves the data of the latch {latches} while it opens or closes, which {can}");
    }
    if launch.step == Step::Both {
        let taken_back =
            if moved.is_empty() { String::new() } else { format!(" and then moves {}", listed(graph, &moved)) };
        return format!("{edge} reaches the pin{taken_back}, which {can}");
    }
    if !launch.passing.is_empty() && moved.is_empty() {
        return format!(
            "a change of `{}` alone, through the open latch {}, {can}",
            names::name(graph, launch.root),
            listed(graph, &launch.passing)
        );
    }
    let together = if moved.len() > 1 { " together" } else { "" };
    format!("{edge} moves {}{together}, which {can}", listed(graph, &moved))
}

/// The places of an event: what starts it, what moves, where the changes meet.
pub(super) fn trace(graph: &Graph, target: NodeId, launch: &Launch, paths: &Paths, at: Option<Span>) -> Vec<TraceStep> {
    let place = |node: NodeId| {
        let wire = names::wire_of(graph, node).and_then(|wire| graph.span(wire));
        wire.or_else(|| evidence::place(graph, node))
    };
    let way = if launch.rises { "rises" } else { "falls" };
    let mut steps = vec![TraceStep::new(place(launch.root), format!("`{}` {way}", names::name(graph, launch.root)))];
    let moved = launch.first.iter().chain(&launch.second).copied().filter(|&(node, _)| node != launch.root);
    let moved: Vec<Moved> = moved.map(|(node, before)| Moved::of(graph, node, before, place(node))).collect();
    // What is declared together and goes the same way is told together.
    let mut groups: Vec<Vec<&Moved>> = Vec::new();
    for one in &moved {
        match groups.iter_mut().find(|group| group[0].is_beside(one)) {
            Some(group) => group.push(one),
            None => groups.push(vec![one]),
        }
    }
    steps.extend(groups.iter().take(SHOWN).map(|group| TraceStep::new(group[0].at, told(group))));
    let more: usize = groups.iter().skip(SHOWN).map(Vec::len).sum();
    if more > 0 {
        let more = words::count(more, "more signal");
        steps.push(TraceStep::new(None, format!("{more} move with them, all in the JSON output")));
    }
    for &latch in &launch.raced {
        let text = format!("the data of the latch `{}` moves while it opens or closes", names::name(graph, latch));
        steps.push(TraceStep::new(place(latch), text));
    }
    for &latch in &launch.passing {
        let text = format!("the latch `{}` is open and passes it on", names::name(graph, latch));
        steps.push(TraceStep::new(place(latch), text));
    }
    let name = names::name(graph, target);
    if launch.step != Step::Both && paths.meet != target && !launch.is_of_latches() {
        let meet = words::gate(graph, paths.meet);
        let meet_place = evidence::place(graph, paths.meet);
        if meet_place != at {
            steps.push(TraceStep::new(meet_place, format!("the changes meet in {meet}")));
        }
    }
    let [before, between, after] = launch.target.map(u8::from);
    let text = match launch.step {
        Step::Both => {
            format!("`{name}` goes from {before} to {between} with the edge and back to {after} with what follows")
        }
        Step::First if before == between => {
            format!("`{name}` should stay {before} and can show {} meanwhile", 1 - before)
        }
        Step::Second if between == after => {
            format!("`{name}` should stay {after} and can show {} meanwhile", 1 - after)
        }
        Step::First => format!("`{name}` should go from {before} to {between} once and can bounce"),
        Step::Second => format!("`{name}` should go from {between} to {after} once and can bounce"),
    };
    steps.push(TraceStep::new(at, text));
    steps
}

/// A signal that a launch moves.
struct Moved {
    name: String,
    what: &'static str,
    before: bool,
    at: Option<Span>,
}

impl Moved {
    fn of(graph: &Graph, node: NodeId, before: bool, at: Option<Span>) -> Self {
        let what = match graph.kind(node) {
            NodeKind::Source(SourceKind::Latch) => "the latch ",
            NodeKind::Source(SourceKind::FlipFlop) => "the flip-flop ",
            _ => "",
        };
        Self { name: names::name(graph, node), what, before, at }
    }

    fn is_beside(&self, other: &Self) -> bool {
        let same_vector = bundle::split(&self.name).0 == bundle::split(&other.name).0;
        (self.what, self.before, self.at) == (other.what, other.before, other.at) && same_vector
    }
}

/// "then the flip-flop `a` goes from 0 to 1", "then bits 3:0 of `a` go from 0 to 1".
fn told(group: &[&Moved]) -> String {
    let names = bundle::listed(group.iter().map(|one| one.name.as_str()), 1);
    let (from, to) = (u8::from(group[0].before), u8::from(!group[0].before));
    match group {
        [one] => format!("then {}{names} goes from {from} to {to}", one.what),
        _ => format!("then {names} go from {from} to {to}"),
    }
}

/// What the launches of a verdict call for, most telling first.
pub(super) fn notes(verdict: &TargetVerdict) -> Vec<String> {
    let mut notes = Vec::new();
    let launches = verdict.launches.iter().filter_map(|found| found.witness.launch.as_ref());
    let mut of = |wanted: &dyn Fn(&Launch) -> bool, note: &str| {
        if launches.clone().any(wanted) {
            notes.push(note.to_string());
        }
    };
    of(&|launch| launch.is_of_latches(), RACE);
    of(&|launch| launch.step == Step::Both && !launch.is_of_latches(), PHASE);
    of(&|launch| launch.step == Step::Second && launch.cause == Cause::Function && !launch.is_of_latches(), FUNCTION);
    notes
}

/// Whether the notes on launches say all that is to be done.
pub(super) fn has_its_own_cure(verdict: &TargetVerdict) -> bool {
    let proven = verdict.pairs.iter().any(|pair| !pair.hazards.is_empty());
    !proven && !notes(verdict).is_empty()
}
