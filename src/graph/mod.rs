//! The flattened gate graph: one node per bit, frozen fan-in and fan-out, and tables beside the nodes for names, places
//! and instances. It knows no Verilog.

mod builder;
mod check;
pub mod cone;
pub mod cycles;
mod node;
mod rows;
pub mod text;

pub use builder::{GraphBuilder, Site};
pub use check::check;
pub use node::{
    BlackBox, BoxPin, BoxRole, Cell, CellId, CellKind, Control, Edge, GateKind, Instance, InstanceId, Net, NetId,
    NodeId, NodeKind, Operator, OperatorId, Port, PortDirection, PortId, SourceKind, Symbol, Table, TableId,
};
use rows::Rows;

use crate::source::Span;

/// The net a wire is a bit of, and what follows the net's name.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct NodeName {
    pub net: NetId,
    pub suffix: Box<str>,
}

/// See the module documentation. Built by [`GraphBuilder::freeze`]; immutable.
#[derive(Debug)]
pub struct Graph {
    kinds: Vec<NodeKind>,
    fanin: Rows,
    fanout: Rows,
    sites: Vec<Site>,
    names: Vec<Option<NodeName>>,
    pub instances: Vec<Instance>,
    pub nets: Vec<Net>,
    pub tables: Vec<Table>,
    pub operators: Vec<Operator>,
    pub cells: Vec<Cell>,
    pub ports: Vec<Port>,
    pub black_boxes: Vec<BlackBox>,
    /// Per node: whether it is declared never to change. Empty while nothing is.
    statics: Vec<bool>,
    /// Latches that are part of a clock gate, sorted: their enable is a clock pin.
    clock_gates: Vec<CellId>,
}

impl Graph {
    #[allow(clippy::too_many_arguments, reason = "called once, by the builder, which owns the same tables")]
    fn new(
        kinds: Vec<NodeKind>,
        fanins: Vec<Vec<NodeId>>,
        sites: Vec<Site>,
        names: Vec<Option<NodeName>>,
        instances: Vec<Instance>,
        nets: Vec<Net>,
        tables: Vec<Table>,
        operators: Vec<Operator>,
        cells: Vec<Cell>,
        ports: Vec<Port>,
        black_boxes: Vec<BlackBox>,
    ) -> Self {
        let fanin = Rows::new(&fanins);
        let fanout = fanin.transposed();
        let (statics, clock_gates) = (Vec::new(), Vec::new());
        Self {
            kinds,
            fanin,
            fanout,
            sites,
            names,
            instances,
            nets,
            tables,
            operators,
            cells,
            ports,
            black_boxes,
            statics,
            clock_gates,
        }
    }

    /// The same graph in which `nodes` never change: an assumption of the designer's. Such a node has an unknown, constant
    /// value, whatever drives it.
    pub fn with_static(mut self, nodes: impl IntoIterator<Item = NodeId>) -> Self {
        for node in nodes {
            if matches!(self.kinds[node.index()], NodeKind::Const(_)) {
                continue;
            }
            if self.statics.is_empty() {
                self.statics = vec![false; self.kinds.len()];
            }
            self.statics[node.index()] = true;
        }
        self
    }

    /// Whether a latch is part of a clock gate that is right by construction: its enable is the clock pin of the gate, and
    /// nothing but the gate behind it sees its output.
    pub fn is_clock_gate(&self, cell: CellId) -> bool {
        self.clock_gates.binary_search(&cell).is_ok()
    }

    fn with_clock_gates(mut self, mut cells: Vec<CellId>) -> Self {
        cells.sort_unstable();
        self.clock_gates = cells;
        self
    }

    /// Whether the node is declared never to change.
    pub fn is_static(&self, node: NodeId) -> bool {
        self.statics.get(node.index()).copied().unwrap_or(false)
    }

    /// The number of nodes; ids run from 0 to this.
    pub fn len(&self) -> usize {
        self.kinds.len()
    }

    pub fn is_empty(&self) -> bool {
        self.kinds.is_empty()
    }

    pub fn nodes(&self) -> impl Iterator<Item = NodeId> + use<> {
        (0..self.kinds.len()).map(NodeId::new)
    }

    pub fn kind(&self, node: NodeId) -> NodeKind {
        self.kinds[node.index()]
    }

    /// In pin order.
    pub fn fanin(&self, node: NodeId) -> &[NodeId] {
        self.fanin.row(node)
    }

    /// Once per pin, in order of node id.
    pub fn fanout(&self, node: NodeId) -> &[NodeId] {
        self.fanout.row(node)
    }

    pub fn site(&self, node: NodeId) -> Site {
        self.sites[node.index()]
    }

    pub fn span(&self, node: NodeId) -> Option<Span> {
        self.sites[node.index()].span
    }

    pub fn node_name(&self, node: NodeId) -> Option<&NodeName> {
        self.names[node.index()].as_ref()
    }

    /// `top.u_core.en[3]` for a wire, `None` for an anonymous node.
    pub fn name(&self, node: NodeId) -> Option<String> {
        let name = self.names[node.index()].as_ref()?;
        let net = &self.nets[name.net.index()];
        Some(format!("{}.{}{}", self.instances[net.instance.index()].path, net.name, name.suffix))
    }

    /// Every node that a cell, a module without text or a port of a top reads, in no useful order; the fan-out of a node
    /// lists only other nodes.
    pub fn endpoints(&self) -> impl Iterator<Item = NodeId> + '_ {
        let cells = self.cells.iter().flat_map(|cell| {
            let pin = match cell.kind {
                CellKind::FlipFlop { clock, .. } => clock,
                CellKind::Latch { enable, .. } => enable,
            };
            let controls = cell.controls.iter().flat_map(|control| [control.net, control.value]);
            [cell.data, pin].into_iter().chain(controls)
        });
        let boxes = self.black_boxes.iter().flat_map(|one| &one.inputs).flat_map(|(_, nodes)| nodes.iter().copied());
        let outputs = self.ports.iter().filter(|port| port.direction != PortDirection::Input);
        let outputs = outputs.flat_map(|port| self.nets[port.net.index()].bits.iter().copied());
        cells.chain(boxes).chain(outputs)
    }

    /// Follows wires down to the node that drives them: two nets with the same root are one net.
    pub fn root(&self, mut node: NodeId) -> NodeId {
        let mut steps = 0;
        while self.kinds[node.index()] == NodeKind::Wire {
            match self.fanin(node) {
                [driver] if steps <= self.kinds.len() => node = *driver,
                _ => break,
            }
            steps += 1;
        }
        node
    }
}
