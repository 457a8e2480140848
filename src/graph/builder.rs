//! Builds a graph node by node. Its only rewriting is the folding of literal constants; sharing happens only between
//! nodes of the same kind, fan-in and source place, which cannot change any of the three bits of a waveform.

use std::hash::BuildHasher;

use hashbrown::{DefaultHashBuilder, HashTable};

use super::node::{
    BlackBox, Cell, CellId, GateKind, Instance, InstanceId, Net, NetId, NodeId, NodeKind, Operator, OperatorId, Port,
    PortDirection, PortId, SourceKind, Table, TableId,
};
use super::{Graph, NodeName};
use crate::source::Span;

/// Where a node comes from: the instance it belongs to and the source text that made it.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
pub struct Site {
    pub instance: InstanceId,
    pub span: Option<Span>,
}

/// See the module documentation.
#[derive(Default)]
pub struct GraphBuilder {
    kinds: Vec<NodeKind>,
    fanins: Vec<Vec<NodeId>>,
    links: usize,
    sites: Vec<Site>,
    names: Vec<Option<NodeName>>,
    instances: Vec<Instance>,
    nets: Vec<Net>,
    tables: Vec<Table>,
    operators: Vec<Operator>,
    cells: Vec<Cell>,
    ports: Vec<Port>,
    black_boxes: Vec<BlackBox>,
    clock_gates: Vec<CellId>,
    /// Nodes that the next of the same kind, fan-in and place share, found by these three.
    shared: HashTable<NodeId>,
    hasher: DefaultHashBuilder,
    constants: [Option<NodeId>; 2],
}

impl GraphBuilder {
    pub fn new() -> Self {
        Self::default()
    }

    fn push(&mut self, kind: NodeKind, fanin: Vec<NodeId>, site: Site) -> NodeId {
        let id = NodeId::new(self.kinds.len());
        self.kinds.push(kind);
        self.links += fanin.len();
        self.fanins.push(fanin);
        self.sites.push(site);
        self.names.push(None);
        id
    }

    fn shared(&mut self, kind: NodeKind, fanin: Vec<NodeId>, site: Site) -> NodeId {
        let Self { kinds, fanins, sites, shared, hasher, .. } = &*self;
        let hash = hasher.hash_one((kind, &fanin, site));
        let same = |&id: &NodeId| {
            let at = id.index();
            kinds[at] == kind && fanins[at] == fanin && sites[at] == site
        };
        if let Some(&id) = shared.find(hash, same) {
            return id;
        }
        let id = self.push(kind, fanin, site);
        let Self { kinds, fanins, sites, shared, hasher, .. } = self;
        shared.insert_unique(hash, id, |&id| {
            let at = id.index();
            hasher.hash_one((kinds[at], &fanins[at], sites[at]))
        });
        id
    }

    /// Adds an instance; `parent` is `None` for a top.
    pub fn instance(&mut self, parent: Option<InstanceId>, name: &str, module: &str, span: Option<Span>) -> InstanceId {
        let path = match parent {
            Some(parent) => format!("{}.{name}", self.instances[parent.index()].path),
            None => name.to_string(),
        };
        self.instances.push(Instance { parent, path, module: module.to_string(), block: false, span });
        InstanceId::new(self.instances.len() - 1)
    }

    /// Adds a generate block of `parent`.
    pub fn block(&mut self, parent: InstanceId, name: &str, span: Option<Span>) -> InstanceId {
        let module = self.instance_module(parent).to_string();
        let id = self.instance(Some(parent), name, &module, span);
        self.instances[id.index()].block = true;
        id
    }

    /// The clean constant. An instance must exist.
    pub fn constant(&mut self, value: bool) -> NodeId {
        if let Some(id) = self.constants[usize::from(value)] {
            return id;
        }
        let site = Site { instance: InstanceId::new(0), span: None };
        let id = self.push(NodeKind::Const(value), Vec::new(), site);
        self.constants[usize::from(value)] = Some(id);
        id
    }

    /// The value of a literal constant node; `None` for everything else, also for a wire tied to a constant.
    pub fn as_constant(&self, node: NodeId) -> Option<bool> {
        match self.kinds[node.index()] {
            NodeKind::Const(value) => Some(value),
            _ => None,
        }
    }

    /// A fresh unknown constant.
    pub fn unknown(&mut self, site: Site) -> NodeId {
        self.push(NodeKind::Unknown, Vec::new(), site)
    }

    /// A fresh source.
    pub fn source(&mut self, kind: SourceKind, site: Site) -> NodeId {
        self.push(NodeKind::Source(kind), Vec::new(), site)
    }

    /// Declares a net with one undriven wire per bit. `suffixes` are what follows the net's name for each bit, least
    /// significant first: `""` for a scalar, `"[3]"`, `"[2][0]"`, `".valid"`.
    pub fn net(&mut self, instance: InstanceId, name: &str, span: Span, suffixes: Vec<String>, scalar: bool) -> NetId {
        let net = NetId::new(self.nets.len());
        let site = Site { instance, span: Some(span) };
        let mut bits = Vec::with_capacity(suffixes.len());
        for suffix in suffixes {
            let bit = self.push(NodeKind::Wire, Vec::new(), site);
            self.names[bit.index()] = Some(NodeName { net, suffix: suffix.into_boxed_str() });
            bits.push(bit);
        }
        self.nets.push(Net { instance, name: name.to_string(), span, bits, scalar });
        net
    }

    pub fn net_bits(&self, net: NetId) -> &[NodeId] {
        &self.nets[net.index()].bits
    }

    /// Connects the one driver of a wire.
    ///
    /// # Panics
    /// When `wire` is not a wire or has a driver; resolve several drivers before.
    pub fn drive(&mut self, wire: NodeId, driver: NodeId) {
        assert_eq!(self.kinds[wire.index()], NodeKind::Wire, "only wires are driven");
        assert!(self.fanins[wire.index()].is_empty(), "a wire has one driver");
        self.links += 1;
        self.fanins[wire.index()].push(driver);
    }

    /// The driver of a wire, if connected already.
    pub fn driver(&self, wire: NodeId) -> Option<NodeId> {
        self.fanins[wire.index()].first().copied()
    }

    pub fn kind(&self, node: NodeId) -> NodeKind {
        self.kinds[node.index()]
    }

    pub fn fanin(&self, node: NodeId) -> &[NodeId] {
        &self.fanins[node.index()]
    }

    /// The number of nodes so far.
    pub fn len(&self) -> usize {
        self.kinds.len()
    }

    /// The number of fan-in links so far.
    pub fn links(&self) -> usize {
        self.links
    }

    pub fn is_empty(&self) -> bool {
        self.kinds.is_empty()
    }

    /// Where a node comes from.
    pub fn site(&self, node: NodeId) -> Site {
        self.sites[node.index()]
    }

    /// The full path of an instance.
    pub fn instance_path(&self, instance: InstanceId) -> &str {
        self.instances.get(instance.index()).map_or("", |instance| &instance.path)
    }

    /// The top that an instance stands in.
    pub fn root(&self, mut instance: InstanceId) -> InstanceId {
        while let Some(parent) = self.instances.get(instance.index()).and_then(|instance| instance.parent) {
            instance = parent;
        }
        instance
    }

    /// The module that an instance is of.
    pub fn instance_module(&self, instance: InstanceId) -> &str {
        self.instances.get(instance.index()).map_or("", |instance| &instance.module)
    }

    /// Moves the place of a node, for sources that learn late what they stand for.
    pub fn set_site(&mut self, node: NodeId, site: Site) {
        self.sites[node.index()] = site;
    }

    /// A gate of any width over `inputs`, literal constants folded.
    pub fn gate(&mut self, kind: GateKind, inputs: &[NodeId], site: Site) -> NodeId {
        let (plain, invert) = match kind {
            GateKind::Buf => return self.shared(NodeKind::Gate(GateKind::Buf), inputs[..1].to_vec(), site),
            GateKind::Not => return self.not(inputs[0], site),
            GateKind::And | GateKind::Nand => (GateKind::And, kind.inverts()),
            GateKind::Or | GateKind::Nor => (GateKind::Or, kind.inverts()),
            GateKind::Xor | GateKind::Xnor => (GateKind::Xor, kind.inverts()),
        };
        let mut live = Vec::with_capacity(inputs.len());
        let mut flip = invert;
        for &input in inputs {
            match (plain, self.as_constant(input)) {
                (_, None) => live.push(input),
                (GateKind::And, Some(false)) => return self.constant(invert),
                (GateKind::Or, Some(true)) => return self.constant(!invert),
                (GateKind::Xor, Some(true)) => flip = !flip,
                (_, Some(_)) => {}
            }
        }
        match live.as_slice() {
            [] => {
                let neutral = plain == GateKind::And;
                self.constant(neutral ^ flip)
            }
            &[one] => {
                if flip {
                    self.not(one, site)
                } else {
                    one
                }
            }
            _ => {
                let kind = match (plain, flip) {
                    (GateKind::And, true) => GateKind::Nand,
                    (GateKind::Or, true) => GateKind::Nor,
                    (GateKind::Xor, true) => GateKind::Xnor,
                    (plain, _) => plain,
                };
                self.shared(NodeKind::Gate(kind), live, site)
            }
        }
    }

    pub fn not(&mut self, input: NodeId, site: Site) -> NodeId {
        match self.as_constant(input) {
            Some(value) => self.constant(!value),
            None => self.shared(NodeKind::Gate(GateKind::Not), vec![input], site),
        }
    }

    pub fn and(&mut self, inputs: &[NodeId], site: Site) -> NodeId {
        self.gate(GateKind::And, inputs, site)
    }

    pub fn or(&mut self, inputs: &[NodeId], site: Site) -> NodeId {
        self.gate(GateKind::Or, inputs, site)
    }

    pub fn xor(&mut self, inputs: &[NodeId], site: Site) -> NodeId {
        self.gate(GateKind::Xor, inputs, site)
    }

    /// The two-way selector as written: `(select AND then) OR (NOT select AND otherwise)`.
    pub fn select(&mut self, select: NodeId, then: NodeId, otherwise: NodeId, site: Site) -> NodeId {
        if let Some(value) = self.as_constant(select) {
            return if value { then } else { otherwise };
        }
        let inverted = self.not(select, site);
        let upper = self.and(&[select, then], site);
        let lower = self.and(&[inverted, otherwise], site);
        self.or(&[upper, lower], site)
    }

    pub fn table(&mut self, table: Table) -> TableId {
        self.tables.push(table);
        TableId::new(self.tables.len() - 1)
    }

    /// An instance of a combinational user-defined primitive.
    pub fn table_node(&mut self, table: TableId, inputs: &[NodeId], site: Site) -> NodeId {
        self.push(NodeKind::Table(table), inputs.to_vec(), site)
    }

    pub fn operator(&mut self, what: &'static str, span: Option<Span>) -> OperatorId {
        self.operators.push(Operator { what, span });
        OperatorId::new(self.operators.len() - 1)
    }

    /// Entry into the blasted form of an operator; a literal constant stays one.
    pub fn op_in(&mut self, operator: OperatorId, input: NodeId, site: Site) -> NodeId {
        match self.as_constant(input) {
            Some(_) => input,
            None => self.shared(NodeKind::OpIn(operator), vec![input], site),
        }
    }

    /// Exit from the blasted form of an operator; a literal constant stays one.
    pub fn op_out(&mut self, operator: OperatorId, result: NodeId, site: Site) -> NodeId {
        match self.as_constant(result) {
            Some(_) => result,
            None => self.shared(NodeKind::OpOut(operator), vec![result], site),
        }
    }

    /// Follows inverters down from a pin condition: the node that really toggles and whether the condition is true when
    /// that node is 1. Stops at the first declared net, which is the name the reader knows.
    pub fn strip_inverters(&self, mut node: NodeId) -> (NodeId, bool) {
        let mut active = true;
        while self.kinds[node.index()] == NodeKind::Gate(GateKind::Not) {
            node = self.fanins[node.index()][0];
            active = !active;
        }
        (node, active)
    }

    pub fn cell(&mut self, cell: Cell) -> CellId {
        self.cells.push(cell);
        CellId::new(self.cells.len() - 1)
    }

    /// Marks a latch as part of a clock gate; see [`Graph::is_clock_gate`].
    pub fn clock_gate(&mut self, cell: CellId) {
        self.clock_gates.push(cell);
    }

    pub fn port(&mut self, port: Port) -> PortId {
        self.ports.push(port);
        PortId::new(self.ports.len() - 1)
    }

    pub fn port_direction(&mut self, port: PortId) -> &mut PortDirection {
        &mut self.ports[port.index()].direction
    }

    pub fn black_box(&mut self, black_box: BlackBox) {
        self.black_boxes.push(black_box);
    }

    /// Freezes the graph: fan-in and fan-out in compressed rows.
    pub fn freeze(self) -> Graph {
        Graph::new(
            self.kinds,
            self.fanins,
            self.sites,
            self.names,
            self.instances,
            self.nets,
            self.tables,
            self.operators,
            self.cells,
            self.ports,
            self.black_boxes,
        )
        .with_clock_gates(self.clock_gates)
    }
}
