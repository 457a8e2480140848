//! Hazards behind loops of gates in words: in which state the loop rests before, and, where its nets move while the
//! change is under way, what moves in which order.

use std::collections::BTreeMap;

use super::finding::TraceStep;
use super::{evidence, names, words};
use crate::graph::{Graph, NodeId};
use crate::hazard::{self, HazardKind, Walked, Witness};
use crate::source::Span;

/// The most moves of gates that are shown.
const SHOWN: usize = 9;

/// The nets of loops that a witness gives values.
pub(super) fn states(graph: &Graph, witness: &Witness) -> Vec<(NodeId, bool)> {
    let on_loop = |&(node, _): &(NodeId, bool)| !graph.is_static(node) && !graph.fanin(node).is_empty();
    witness.holds.iter().copied().filter(on_loop).collect()
}

/// What the reader must know about the loop to follow the witness; `None` where there is none.
pub(super) fn note(graph: &Graph, witness: &Witness) -> Option<String> {
    let states = states(graph, witness);
    if states.is_empty() {
        return None;
    }
    let mut named: Vec<String> =
        states.iter().map(|&(node, value)| format!("`{}` = {}", names::name(graph, node), u8::from(value))).collect();
    named.sort();
    named.dedup();
    Some(format!(
        "the loop of gates rests with {} before the change; loops are followed from every stable state while one source \
         changes and everything else waits until they rest again",
        named.join(", ")
    ))
}

/// The order of moves that shows the hazard, where nets of a loop have to move for it.
fn walked(graph: &Graph, target: NodeId, witness: &Witness, kind: HazardKind) -> Option<Walked> {
    if witness.launch.is_some() || !hazard::moves_loops(graph, target, witness) {
        return None;
    }
    let moves = |calm| hazard::moves(graph, target, witness, kind, calm);
    moves(false).or_else(|| moves(true))
}

/// The nets of loops that move while the change is under way, with the values at which they end.
pub(super) fn moved(graph: &Graph, target: NodeId, kind: HazardKind, witness: &Witness) -> BTreeMap<String, bool> {
    let Some(walked) = walked(graph, target, witness, kind) else { return BTreeMap::new() };
    let mut ends = BTreeMap::new();
    for (node, _) in states(graph, witness) {
        let last = walked.moves.iter().rfind(|one| one.gate == node && one.pin.is_none());
        ends.extend(last.map(|last| (names::name(graph, node), last.value)));
    }
    ends
}

/// The order of moves that shows the hazard; `None` where the loop may hold still.
pub(super) fn trace(
    graph: &Graph,
    target: NodeId,
    witness: &Witness,
    kind: HazardKind,
    at: Option<Span>,
) -> Option<Vec<TraceStep>> {
    let &[(source, before)] = witness.changes.as_slice() else { return None };
    let moves = walked(graph, target, witness, kind)?;
    let way = |value: bool| if value { "rises" } else { "falls" };
    let wire = names::wire_of(graph, source).and_then(|wire| graph.span(wire));
    let start = wire.or_else(|| evidence::place(graph, source));
    let mut steps = vec![TraceStep::new(start, format!("`{}` {}", names::name(graph, source), way(!before)))];
    let gates: Vec<(NodeId, bool)> =
        moves.moves.iter().filter(|one| one.pin.is_none()).map(|one| (one.gate, one.value)).collect();
    for (number, &(gate, value)) in gates.iter().enumerate().take(SHOWN) {
        let drives = match names::wire_of(graph, gate) {
            Some(net) => format!("`{}` {}", names::name(graph, net), way(value)),
            None => format!("the output of {} {}", words::gate(graph, gate), way(value)),
        };
        steps.push(TraceStep::new(evidence::place(graph, gate), format!("{}: {drives}", number + 1)));
    }
    if gates.len() > SHOWN {
        let more = words::count(gates.len() - SHOWN, "more move");
        steps.push(TraceStep::new(None, format!("{more} of gates, which the replay shows")));
    }
    let changes = gates.iter().filter(|(gate, _)| *gate == target).count();
    let name = names::name(graph, target);
    steps.push(TraceStep::new(at, format!("in this order of delays `{name}` changes {}", times(changes))));
    Some(steps)
}

fn times(count: usize) -> String {
    match count {
        2 => "twice".to_string(),
        _ => format!("{count} times"),
    }
}
