//! The whole design as the launch engine computes on it: one cone over every pin of every cell, and for each free node of
//! it what it is and, for a cell, where its pins hang. Pins are active high here: the edges carry the inversion.

use std::collections::{BTreeMap, BTreeSet};

use super::Assumptions;
use crate::graph::{self, CellKind, Graph, NodeId, NodeKind};
use crate::hazard::cone::{Cone, Edge, Op};
use crate::hazard::order::Order;
use crate::hazard::parity::Region;

/// What a free node of the cone is.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Role {
    /// Changes by itself, one at a time: an input, an output of a black box or memory, a source of which no cell is known.
    Outside,
    /// Never changes.
    Still,
    /// The output of a flip-flop or latch, by index into [`Fabric::cells`].
    Cell(usize),
    /// On a combinational loop, by index into [`Fabric::behind`].
    Looped(usize),
}

/// An asynchronous control; `net` is active when 1.
#[derive(Clone, Copy, Debug)]
pub(super) struct Control {
    pub(super) net: Edge,
    pub(super) value: Edge,
}

/// A flip-flop or latch; the flip-flop of several clocks is one cell here.
#[derive(Clone, Debug)]
pub(super) struct Cell {
    /// The free node of the cone that is its output.
    pub(super) node: usize,
    pub(super) data: Edge,
    /// Empty for a latch.
    pub(super) clocks: Vec<(Edge, graph::Edge)>,
    /// Of a latch; open when 1.
    pub(super) enable: Option<Edge>,
    /// The strongest first.
    pub(super) controls: Vec<Control>,
    /// Its value where an initialiser gives one.
    pub(super) init: Option<bool>,
    /// Whether its output reaches a clock, enable or control pin through combinational logic, so that its changes are
    /// events of their own.
    pub(super) is_root: bool,
}

/// See the module documentation.
pub(super) struct Fabric<'a> {
    pub(super) cone: Cone,
    pub(super) cells: Vec<Cell>,
    /// For each node of a combinational loop the free nodes that reach it.
    pub(super) behind: Vec<Vec<usize>>,
    pub(super) assumptions: &'a Assumptions,
    roles: BTreeMap<usize, Role>,
    /// Where the nodes that were asked for are.
    places: BTreeMap<NodeId, Edge>,
    /// For each node that drives pins, and the data of latches: the roots that reach it, through latches as well; ascending.
    roots_of_pin: BTreeMap<usize, Vec<usize>>,
}

impl<'a> Fabric<'a> {
    /// `targets` are what will be asked about, besides the pins of cells; `calm` takes arithmetic as clean.
    pub(super) fn new(graph: &Graph, targets: &[NodeId], assumptions: &'a Assumptions, calm: bool) -> Self {
        let mut nodes: BTreeSet<NodeId> = targets.iter().copied().collect();
        for cell in &graph.cells {
            let pin = match cell.kind {
                CellKind::FlipFlop { clock, .. } => clock,
                CellKind::Latch { enable, .. } => enable,
            };
            nodes.extend([cell.output, cell.data, pin]);
            nodes.extend(cell.controls.iter().flat_map(|control| [control.net, control.value]));
        }
        let groups = [&assumptions.one_hot, &assumptions.exclusive, &assumptions.one_bit];
        nodes.extend(groups.into_iter().flatten().flatten().chain(&assumptions.fixed));
        let nodes: Vec<NodeId> = nodes.into_iter().collect();
        let cone = Cone::new(graph, &nodes, calm);
        let places: BTreeMap<NodeId, Edge> = nodes.iter().copied().zip(cone.roots.iter().copied()).collect();

        let mut fabric = Self {
            cone,
            cells: Vec::new(),
            behind: Vec::new(),
            assumptions,
            roles: BTreeMap::new(),
            places,
            roots_of_pin: BTreeMap::new(),
        };
        fabric.take_cells(graph);
        fabric.take_roles(graph);
        fabric.mark_roots();
        fabric
    }

    fn take_cells(&mut self, graph: &Graph) {
        let mut known: BTreeMap<NodeId, usize> = BTreeMap::new();
        for cell in &graph.cells {
            let at = |node: NodeId, active: bool| self.places.get(&node).map(|edge| edge.inverted_if(!active));
            let (Some(output), Some(data)) = (at(cell.output, true), at(cell.data, true)) else { continue };
            let clock = match cell.kind {
                CellKind::FlipFlop { clock, edge } => at(clock, true).map(|clock| (clock, edge)),
                CellKind::Latch { .. } => None,
            };
            if let Some(&index) = known.get(&cell.output) {
                self.cells[index].clocks.extend(clock);
                continue;
            }
            let enable = match cell.kind {
                CellKind::Latch { enable, active } => at(enable, active),
                CellKind::FlipFlop { .. } => None,
            };
            let controls = cell.controls.iter().filter_map(|control| {
                Some(Control { net: at(control.net, control.active)?, value: at(control.value, true)? })
            });
            let new = Cell {
                node: output.node(),
                data,
                clocks: clock.into_iter().collect(),
                enable,
                controls: controls.collect(),
                init: cell.init,
                is_root: false,
            };
            known.insert(cell.output, self.cells.len());
            self.cells.push(new);
        }
    }

    fn take_roles(&mut self, graph: &Graph) {
        // A cell that is declared static is a constant to the cone and gets its role below.
        for (index, cell) in self.cells.iter().enumerate() {
            if self.cone.ops[cell.node] == (Op::Free { changes: true }) {
                self.roles.insert(cell.node, Role::Cell(index));
            }
        }
        let free: BTreeMap<NodeId, usize> =
            self.cone.frees.iter().map(|&node| (self.cone.origin[node as usize], node as usize)).collect();
        self.places.extend(free.iter().map(|(&origin, &node)| (origin, Edge::new(node, false))));
        for (&origin, &node) in &free {
            if self.roles.contains_key(&node) {
                continue;
            }
            let role = match (self.cone.ops[node], graph.kind(origin)) {
                (Op::Free { changes: true }, NodeKind::Source(_)) => Role::Outside,
                (Op::Free { changes: true }, _) => {
                    let behind = Order::sources_behind(graph, &[origin]);
                    self.behind.push(behind.iter().filter_map(|source| free.get(source)).copied().collect());
                    Role::Looped(self.behind.len() - 1)
                }
                _ => Role::Still,
            };
            self.roles.insert(node, role);
        }
    }

    fn mark_roots(&mut self) {
        let pins: BTreeSet<usize> = self.cells.iter().flat_map(Cell::pins).map(Edge::node).collect();
        for node in self.cone.closure(pins.iter().copied(), |_| true) {
            if let Some(Role::Cell(cell)) = self.roles.get(&(node as usize)).copied() {
                self.cells[cell].is_root = true;
            }
        }
        let values = self.cells.iter().flat_map(|cell| &cell.controls).map(|control| control.value.node());
        let latches = self.cells.iter().filter(|cell| cell.enable.is_some()).map(|cell| cell.data.node());
        let pins: BTreeSet<usize> = pins.iter().copied().chain(values).chain(latches).collect();
        self.roots_of_pin = pins
            .into_iter()
            .map(|pin| {
                let reached = self.expanded(&[pin]);
                (pin, reached.into_iter().filter(|&node| self.is_root(node)).collect())
            })
            .collect();
    }

    pub(super) fn role(&self, node: usize) -> Role {
        self.roles.get(&node).copied().unwrap_or(Role::Still)
    }

    pub(super) fn cell(&self, node: usize) -> Option<&Cell> {
        match self.role(node) {
            Role::Cell(cell) => Some(&self.cells[cell]),
            _ => None,
        }
    }

    /// The index of the latch whose output a node is.
    pub(super) fn latch(&self, node: usize) -> Option<usize> {
        match self.role(node) {
            Role::Cell(cell) if self.cells[cell].enable.is_some() => Some(cell),
            _ => None,
        }
    }

    /// Where a node is that was asked for, or any source.
    pub(super) fn place(&self, node: NodeId) -> Option<Edge> {
        self.places.get(&node).copied()
    }

    fn is_root(&self, node: usize) -> bool {
        let declared_still = self.assumptions.fixed.contains(&self.cone.origin[node]);
        match self.role(node) {
            _ if declared_still => false,
            Role::Outside => true,
            Role::Cell(cell) => self.cells[cell].is_root,
            // A loop may move by itself; its events are left undecided.
            Role::Looped(_) => true,
            Role::Still => false,
        }
    }

    /// The free nodes of the combinational cone of some nodes; ascending.
    pub(super) fn frees(&self, nodes: &[usize]) -> Vec<usize> {
        let members = self.cone.closure(nodes.iter().copied(), |_| true);
        let members = members.into_iter().map(|node| node as usize);
        members.filter(|&node| matches!(self.cone.ops[node], Op::Free { .. })).collect()
    }

    /// The free nodes that some nodes depend on within a step: through the pins of latches and through loops; ascending.
    pub(super) fn expanded(&self, nodes: &[usize]) -> Vec<usize> {
        let mut found: BTreeSet<usize> = BTreeSet::new();
        let mut next = self.frees(nodes);
        while !next.is_empty() {
            let mut pins = Vec::new();
            for node in next {
                if !found.insert(node) {
                    continue;
                }
                match self.role(node) {
                    Role::Cell(cell) if self.cells[cell].enable.is_some() => {
                        pins.extend(self.cells[cell].pins().map(Edge::node));
                        pins.push(self.cells[cell].data.node());
                    }
                    Role::Looped(behind) => pins.extend(&self.behind[behind]),
                    _ => {}
                }
            }
            next = if pins.is_empty() { pins } else { self.frees(&pins) };
            next.retain(|node| !found.contains(node));
        }
        found.into_iter().collect()
    }

    /// The roots that reach a node which drives pins.
    pub(super) fn roots_of(&self, pin: usize) -> &[usize] {
        self.roots_of_pin.get(&pin).map_or(&[], Vec::as_slice)
    }

    /// The roots whose events can show anything at a target, ascending: those that make the cells among what it depends on
    /// within a step do something, and those that may show a hazard of their own there. `net` is the target where it is a
    /// net as it stands, without a cover.
    pub(super) fn roots(&self, nodes: &[usize], net: Option<usize>) -> Vec<usize> {
        let expanded = self.expanded(nodes);
        let mut moving: BTreeSet<usize> = BTreeSet::new();
        for &node in &expanded {
            let Some(cell) = self.cell(node) else { continue };
            let values = cell.controls.iter().map(|control| control.value);
            let data = cell.enable.map(|_| cell.data);
            for pin in cell.pins().chain(values).chain(data) {
                moving.extend(self.roots_of(pin.node()));
            }
        }
        let looped = expanded.iter().any(|&node| matches!(self.role(node), Role::Looped(_)));
        let own: Vec<usize> = expanded.into_iter().filter(|&node| self.is_root(node)).collect();
        if looped {
            moving.extend(own);
            return moving.into_iter().collect();
        }
        // What moves no cell only passes through gates, and as the root of an event a cell is not judged there.
        let live = net.map(|net| {
            let mut live = vec![false; self.cone.len()];
            self.cone.closure(std::iter::once(net), |_| true).into_iter().for_each(|node| live[node as usize] = true);
            (net, live)
        });
        for root in own.into_iter().filter(|&root| self.role(root) == Role::Outside) {
            let suspect =
                |(net, live): &(usize, Vec<bool>)| Region::new(&self.cone, root, live).suspect(*net).is_some();
            if !moving.contains(&root) && live.as_ref().is_none_or(suspect) {
                moving.insert(root);
            }
        }
        moving.into_iter().collect()
    }

    /// The cells in the transitive fan-in of a target, through every pin; `None` when there are more than `most`.
    pub(super) fn closure(&self, nodes: &[usize], most: usize) -> Option<Vec<usize>> {
        let mut found: BTreeSet<usize> = BTreeSet::new();
        let mut next = self.frees(nodes);
        while !next.is_empty() {
            let mut pins = Vec::new();
            for node in next {
                if let Role::Cell(index) = self.role(node)
                    && found.insert(index)
                {
                    let cell = &self.cells[index];
                    pins.extend(cell.pins().map(Edge::node));
                    pins.push(cell.data.node());
                    pins.extend(cell.controls.iter().map(|control| control.value.node()));
                }
            }
            if found.len() > most {
                return None;
            }
            next = if pins.is_empty() { pins } else { self.frees(&pins) };
        }
        Some(found.into_iter().collect())
    }
}

impl Cell {
    /// Clocks or enable, and control nets.
    pub(super) fn pins(&self) -> impl Iterator<Item = Edge> + '_ {
        let clocks = self.clocks.iter().map(|&(clock, _)| clock);
        clocks.chain(self.enable).chain(self.controls.iter().map(|control| control.net))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::graph::text;

    /// A decode of registers resets a flip-flop, so that each of them starts events of its own; none of these can make the
    /// decode do anything but follow. Of the inputs, only one splits into ways that meet again.
    #[test]
    fn only_events_that_can_show_something_are_asked_about() {
        let design = "
clk = input
d = input
s = input
e = input
a = flip-flop
b = flip-flop
o = flip-flop
na = not a
ns = not s
u = and s a
v = and ns b
t = or u v e
c0 = cell a data d posedge clk
c1 = cell b data na posedge clk
c2 = cell o data d posedge clk control t 1 d
";
        let parsed = text::parse(design).unwrap_or_else(|error| panic!("{error}"));
        let node = |label: &str| parsed.node(label).unwrap_or_else(|| panic!("no {label}"));
        let assumptions = Assumptions::default();
        let fabric = Fabric::new(&parsed.graph, &[node("t")], &assumptions, false);
        let net = fabric.place(node("t")).unwrap_or_else(|| panic!("no place")).node();
        let names = |roots: Vec<usize>| -> Vec<NodeId> { roots.iter().map(|&root| fabric.cone.origin[root]).collect() };
        assert!(fabric.cells.iter().filter(|cell| cell.is_root).count() >= 2, "the registers are roots");
        assert_eq!(names(fabric.roots(&[net], Some(net))), [node("clk"), node("s")]);
        // Behind a cover, an input may show something that it does not show at the net.
        assert_eq!(names(fabric.roots(&[net], None)), [node("clk"), node("s"), node("e")]);
    }
}
