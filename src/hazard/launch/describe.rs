//! From a model of the solver to a witness: what moves in which step, what must hold for the target to show it, and
//! whether gates are to blame or the function.

use super::encode::Layer;
use super::exact::Inquiry;
use super::region::{Leaf, Region, holding};
use crate::graph::NodeId;
use crate::hazard::cone::Edge;
use crate::hazard::{Cause, Launch, Step, Witness};

/// The witness of the inquiry's last model, in which `net` shows a hazard in `step`.
pub(super) fn describe(inquiry: &Inquiry<'_>, net: Edge, step: Step) -> Witness {
    let judged = match step {
        Step::First => Some(Layer::First),
        Step::Second => Some(Layer::Second),
        Step::Both => None,
    };
    let origin = |node: usize| inquiry.encoder.fabric.cone.origin[node];
    let region = |layer: Layer| Region::new(inquiry, layer, net, judged == Some(layer));
    let (first, second) = (region(Layer::First), region(Layer::Second));
    let moves = |region: &Region<'_>| -> Vec<(NodeId, bool)> {
        let changing = region.leaves.iter().filter(|leaf| leaf.wave.changes());
        // A latch that opens with an old value moves by itself, besides what lies in front of it.
        let late = region.late.iter().map(|&(node, before)| (origin(node), before));
        sorted(changing.map(|leaf| (origin(leaf.node), leaf.wave.i)).chain(late).collect())
    };
    let target = [first.wave().i, first.wave().f, second.wave().f];
    let (changes, regions, cause) = match step {
        Step::First => (moves(&first), vec![&first], of_function(first.function_moves())),
        Step::Second => (moves(&second), vec![&second], of_function(second.function_moves())),
        Step::Both => {
            // A source that moves twice is told by its first move.
            let mut changes = moves(&first);
            let later = moves(&second).into_iter().filter(|(node, _)| changes.iter().all(|(other, _)| other != node));
            let later: Vec<(NodeId, bool)> = later.collect();
            changes.extend(later);
            (sorted(changes), vec![&first, &second], Cause::Function)
        }
    };
    let held = holding(&regions, step == Step::Both);
    let value = |node: usize| {
        let leaf = regions.iter().flat_map(|region| &region.leaves).find(|leaf: &&Leaf| leaf.node == node);
        leaf.is_some_and(|leaf| leaf.wave.i)
    };
    let holds = sorted(held.into_iter().map(|node| (origin(node), value(node))).collect());
    let raced = regions.iter().flat_map(|region| &region.leaves).filter(|leaf| leaf.wave.h);
    let mut raced: Vec<NodeId> = raced.map(|leaf| origin(leaf.node)).collect();
    raced.sort_unstable();
    raced.dedup();
    let latches = |of: fn(&Region<'_>) -> Vec<usize>| -> Vec<NodeId> {
        let judged = regions.iter().filter(|_| step != Step::Both).flat_map(|&region| of(region));
        let mut latches: Vec<NodeId> = judged.map(origin).collect();
        latches.sort_unstable();
        latches
    };
    let event = inquiry.encoder.event;
    let launch = Launch {
        root: origin(event.root),
        rises: event.rises,
        step,
        cause,
        first: moves(&first),
        second: if step == Step::First { Vec::new() } else { moves(&second) },
        passing: latches(|region| region.passing.clone()),
        late: latches(|region| region.late.iter().map(|&(node, _)| node).collect()),
        raced,
        target,
    };
    let ends = match step {
        Step::First => (target[0], target[1]),
        Step::Second => (target[1], target[2]),
        Step::Both => (target[0], target[2]),
    };
    Witness { changes, holds, target: ends, launch: Some(launch) }
}

fn of_function(moves: bool) -> Cause {
    if moves { Cause::Function } else { Cause::Logic }
}

fn sorted(mut list: Vec<(NodeId, bool)>) -> Vec<(NodeId, bool)> {
    list.sort_unstable();
    list
}
