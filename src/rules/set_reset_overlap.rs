//! `set-reset-overlap`: an asynchronous set and an asynchronous reset of one flip-flop that can be active together, or
//! swap in one event. The text says which is stronger; the cell need not agree, and when both end at once the cell may
//! keep either value. One finding per pair of nets.

use std::collections::BTreeMap;

use super::about_text;
use super::finding::{Finding, Pin, PinKind, Rule, Severity, TraceStep};
use super::{evidence, fingerprint, names, pins, words};
use crate::graph::{CellKind, Graph, NodeId, NodeKind};
use crate::hazard::{Cells, Demand, Happening, Options};

const CURE: &str = "to do: derive set and reset from one flip-flop each that exclude each other, or gate the weaker one \
                    with the inactive level of the stronger; a register that needs only one of them is better still";

/// A control net and the value that makes it active.
type Active = (NodeId, bool);

/// The pairs of set and reset nets, each with the cells that they both act on.
fn pairs(graph: &Graph) -> BTreeMap<(Active, Active), Vec<usize>> {
    let mut pairs: BTreeMap<(Active, Active), Vec<usize>> = BTreeMap::new();
    for (index, cell) in graph.cells.iter().enumerate() {
        let of = |value: bool| {
            cell.controls
                .iter()
                .filter(move |control| graph.kind(graph.root(control.value)) == NodeKind::Const(value))
                .map(|control| (graph.root(control.net), control.active))
        };
        for set in of(true) {
            for reset in of(false) {
                pairs.entry((set, reset)).or_default().push(index);
            }
        }
    }
    pairs
}

/// All findings, in order of nets.
pub(super) fn findings(graph: &Graph, cells: &Cells<'_>, options: &Options) -> Vec<Finding> {
    let pairs = pairs(graph);
    // A flip-flop with an inverted output has the same two nets the other way round.
    let first = |set: Active, reset: Active| set < reset || !pairs.contains_key(&(reset, set));
    let pairs = pairs.iter().filter(|&(&(set, reset), _)| first(set, reset));
    pairs.filter_map(|(&(set, reset), on)| finding(graph, cells, set, reset, on, options)).collect()
}

fn finding(
    graph: &Graph,
    cells: &Cells<'_>,
    set: Active,
    reset: Active,
    on: &[usize],
    options: &Options,
) -> Option<Finding> {
    let names = [names::name(graph, set.0), names::name(graph, reset.0)];
    let (together, state) = match cells.together(&[set, reset], options.conflicts) {
        Some(state) => (true, state),
        None => (false, swap(graph, cells, set, reset, options)?),
    };
    let does = if together { "can be active together" } else { "can swap in one event" };
    let mut outputs: Vec<String> = on.iter().map(|&cell| names::name(graph, graph.cells[cell].output)).collect();
    outputs.sort();
    outputs.dedup();
    let count = outputs.len();
    let message =
        format!("set `{}` and reset `{}` of {} {does}", names[0], names[1], words::count(count, "register bit"));
    let identity = fingerprint::of_cone(graph, Rule::SetResetOverlap, &names.join(" "), &[set.0, reset.0]);
    let at = on.first().and_then(|&cell| evidence::place(graph, graph.cells[cell].output));
    let mut finding = about_text::plain(Rule::SetResetOverlap, Severity::Warning, message, at, identity);
    let values: Vec<String> =
        state.iter().map(|&(node, value)| format!("`{}` = {}", names::name(graph, node), u8::from(value))).collect();
    let when = if values.is_empty() { String::new() } else { format!(" when {}", values.join(", ")) };
    finding.notes.push(if together {
        format!("both are active{when}; when they end at once, the cell may keep either value")
    } else {
        format!("one ends and the other begins{when}; which comes first is a matter of delays")
    });
    finding.notes.push(CURE.to_string());
    finding.trace = [(set, "set"), (reset, "reset")]
        .into_iter()
        .zip(&names)
        .map(|((net, role), name)| {
            let level = if net.1 { "high" } else { "low" };
            let place = evidence::place(graph, net.0);
            TraceStep { at: place, way: None, text: format!("the {role} `{name}`, active {level}") }
        })
        .collect();
    finding.instance = graph.instances[names::instance(graph, set.0).index()].path.clone();
    finding.net = names[0].clone();
    outputs.truncate(pins::SHOWN_CELLS);
    finding.pin = Some(Pin { kind: PinKind::Set, active: Some(set.1), edge: None, cells: outputs, count });
    Some(finding)
}

/// A state from which one event ends the one and begins the other.
fn swap(graph: &Graph, cells: &Cells<'_>, set: Active, reset: Active, options: &Options) -> Option<Vec<Demand>> {
    let mut happenings: Vec<Happening> = Vec::new();
    for source in cells.sources(&[set.0, reset.0]) {
        happenings.push(Happening::Change(source));
        for cell in cells.of(source) {
            if let CellKind::FlipFlop { clock, edge } = cell.kind {
                happenings.push(Happening::Clock(graph.root(clock), edge));
            }
        }
    }
    happenings.sort_unstable();
    happenings.dedup();
    let not = |(net, active): Active| (net, !active);
    happenings.into_iter().find_map(|happening| {
        [(set, reset), (reset, set)].into_iter().find_map(|(ends, begins)| {
            let before = [ends, not(begins)];
            let after = [not(ends), begins];
            cells.leads(&before, happening, &after, options.conflicts)
        })
    })
}
