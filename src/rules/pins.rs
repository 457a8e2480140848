//! Which nets drive which pins. Nets are told apart by their root, the node that really drives them, so that one net
//! seen under many names in the hierarchy is decided and reported once, however many cells hang on it.

use std::collections::BTreeMap;

use super::finding::{Pin, PinKind};
use super::names;
use crate::graph::{BoxPin, BoxRole, Cell, CellId, CellKind, Edge, Graph, NodeId, NodeKind, SourceKind};
use crate::hazard::{HazardKind, Pair, TargetVerdict, Undecided};

/// One cell's use of a net.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Use {
    pub cell: User,
    pub role: Role,
}

/// Whose pin it is.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub(super) enum User {
    /// Index into `graph.cells`.
    Cell(usize),
    /// Index into `graph.black_boxes`.
    Box(usize),
}

impl User {
    /// The flip-flop or latch.
    pub fn cell(self, graph: &Graph) -> Option<&Cell> {
        match self {
            User::Cell(cell) => graph.cells.get(cell),
            User::Box(_) => None,
        }
    }

    fn name(self, graph: &Graph) -> String {
        match self {
            User::Cell(cell) => names::name(graph, graph.cells[cell].output),
            User::Box(index) => graph.instances[graph.black_boxes[index].instance.index()].path.clone(),
        }
    }
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Role {
    Clock(Edge),
    /// Transparent while the net has this value.
    Enable(bool),
    Control {
        active: bool,
        takes: Takes,
    },
}

/// What an asynchronous control puts into its cell.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Takes {
    Zero,
    One,
    Loads,
}

/// The pin nets of one rule by root, each with its uses in order of cell.
pub(super) type Nets = BTreeMap<NodeId, Vec<Use>>;

/// Everything that hangs on asynchronous pins, clocks and enables.
#[derive(Debug, Default)]
pub(super) struct Pins {
    pub controls: Nets,
    pub clocks: Nets,
    pub enables: Nets,
}

/// Sorts every pin of every cell under the net that drives it.
pub(super) fn collect(graph: &Graph) -> Pins {
    let mut pins = Pins::default();
    for (index, Cell { kind, controls, .. }) in graph.cells.iter().enumerate() {
        let cell = User::Cell(index);
        match *kind {
            CellKind::FlipFlop { clock, edge } => {
                pins.clocks.entry(graph.root(clock)).or_default().push(Use { cell, role: Role::Clock(edge) });
            }
            // The gate behind the latch is active while the latch is closed.
            CellKind::Latch { enable, active } if graph.is_clock_gate(CellId::new(index)) => {
                let edge = if active { Edge::Negedge } else { Edge::Posedge };
                pins.clocks.entry(graph.root(enable)).or_default().push(Use { cell, role: Role::Clock(edge) });
            }
            CellKind::Latch { enable, active } => {
                pins.enables.entry(graph.root(enable)).or_default().push(Use { cell, role: Role::Enable(active) });
            }
        }
        for control in controls {
            let takes = match graph.kind(graph.root(control.value)) {
                NodeKind::Const(false) => Takes::Zero,
                NodeKind::Const(true) => Takes::One,
                _ => Takes::Loads,
            };
            let role = Role::Control { active: control.active, takes };
            pins.controls.entry(graph.root(control.net)).or_default().push(Use { cell, role });
        }
    }
    for (index, black_box) in graph.black_boxes.iter().enumerate() {
        for &BoxPin { net, role } in &black_box.pins {
            let (nets, role) = match role {
                BoxRole::Clock(edge) => (&mut pins.clocks, Role::Clock(edge)),
                BoxRole::Enable(active) => (&mut pins.enables, Role::Enable(active)),
                BoxRole::Set(active) => (&mut pins.controls, Role::Control { active, takes: Takes::One }),
                BoxRole::Reset(active) => (&mut pins.controls, Role::Control { active, takes: Takes::Zero }),
            };
            nets.entry(graph.root(net)).or_default().push(Use { cell: User::Box(index), role });
        }
    }
    pins
}

/// Whether the net can change in any way but cleanly: constants and sources cannot.
pub(super) fn is_driven_by_logic(graph: &Graph, root: NodeId) -> bool {
    matches!(graph.kind(root), NodeKind::Gate(_) | NodeKind::Table(_) | NodeKind::OpIn(_) | NodeKind::OpOut(_))
        || (graph.kind(root) == NodeKind::Wire && !graph.fanin(root).is_empty())
}

/// Whether an event can make the net pulse: logic may, a latch passes what its data does, and a cell whose own output
/// reaches its controls may take back what it did.
pub(super) fn can_glitch_in_a_launch(graph: &Graph, root: NodeId) -> bool {
    is_driven_by_logic(graph, root)
        || matches!(graph.kind(root), NodeKind::Source(SourceKind::FlipFlop | SourceKind::Latch))
}

/// Whether nothing drives the net, or nothing but an `x` or `z` literal. The decision takes such a net as a constant, and
/// so it may be inside a cone; but a pin that hangs on one is not clean, it is unknown.
pub(super) fn is_undriven(graph: &Graph, root: NodeId) -> bool {
    graph.kind(root) == NodeKind::Unknown || (graph.kind(root) == NodeKind::Wire && graph.fanin(root).is_empty())
}

/// The verdict on an undriven pin.
pub(super) fn undriven(root: NodeId) -> (NodeId, TargetVerdict) {
    let undecided = [HazardKind::Static0, HazardKind::Static1, HazardKind::Dynamic];
    let undecided = undecided.map(|kind| (kind, Undecided::Undriven)).to_vec();
    let pairs = vec![Pair { source: root, hazards: Vec::new(), undecided }];
    (root, TargetVerdict { pairs, ..TargetVerdict::clean(root) })
}

/// The kind that stands for all uses of a net.
pub(super) fn kind(uses: &[Use]) -> PinKind {
    let all = |wanted: fn(Role) -> bool| uses.iter().all(|one| wanted(one.role));
    if all(|role| matches!(role, Role::Clock(_))) {
        PinKind::Clock
    } else if all(|role| matches!(role, Role::Enable(_))) {
        PinKind::LatchEnable
    } else if all(|role| matches!(role, Role::Control { takes: Takes::One, .. })) {
        PinKind::Set
    } else if uses.iter().any(|one| matches!(one.role, Role::Control { takes: Takes::Loads, .. })) {
        PinKind::Load
    } else {
        PinKind::Reset
    }
}

/// The pin as the report shows it. Where the cells disagree about level or edge, there is none.
pub(super) fn pin(graph: &Graph, uses: &[Use]) -> Pin {
    let agreed = |level: fn(Role) -> Option<bool>| {
        let first = uses.first().and_then(|one| level(one.role));
        first.filter(|_| uses.iter().all(|one| level(one.role) == first))
    };
    let edge = match uses.first().map(|one| one.role) {
        Some(Role::Clock(edge)) if uses.iter().all(|one| one.role == Role::Clock(edge)) => match edge {
            Edge::Posedge => Some("posedge"),
            Edge::Negedge => Some("negedge"),
            Edge::Both => None,
        },
        _ => None,
    };
    let mut cells: Vec<String> = uses.iter().map(|one| one.cell.name(graph)).collect();
    cells.sort();
    cells.dedup();
    let count = cells.len();
    cells.truncate(SHOWN_CELLS);
    let active = agreed(|role| match role {
        Role::Clock(_) => None,
        Role::Enable(active) | Role::Control { active, .. } => Some(active),
    });
    Pin { kind: kind(uses), active, edge, cells, count }
}

/// How many cells a pin names; its count has all of them.
pub(super) const SHOWN_CELLS: usize = 20;

/// The verdicts of one bulk decision by root.
pub(super) type Verdicts = BTreeMap<NodeId, TargetVerdict>;

#[cfg(test)]
mod tests {
    use super::*;

    fn control(cell: usize, active: bool, takes: Takes) -> Use {
        Use { cell: User::Cell(cell), role: Role::Control { active, takes } }
    }

    #[test]
    fn kind_of_a_mixed_net_is_reset_unless_something_is_loaded() {
        assert_eq!(kind(&[control(0, true, Takes::One)]), PinKind::Set);
        assert_eq!(kind(&[control(0, true, Takes::One), control(1, true, Takes::Zero)]), PinKind::Reset);
        assert_eq!(kind(&[control(0, true, Takes::One), control(1, true, Takes::Loads)]), PinKind::Load);
    }
}
