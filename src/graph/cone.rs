//! A part of the graph as a graph of its own: the fan-in of some targets, optionally cut at some nodes, with gates
//! appended. This is how a cover is proven (the decision runs on the cone with the terms added) and how the next-state
//! function of a loop is looked at (the loop is cut at its feedback nodes). Nodes are copied one to one in order of id,
//! names and places included; nothing is folded or shared. Cells, ports and black boxes are left behind.

use std::collections::{BTreeMap, BTreeSet};

use super::{
    GateKind, Graph, Instance, InstanceId, Net, NetId, NodeId, NodeKind, NodeName, Operator, OperatorId, Site,
    SourceKind, Table, TableId,
};

/// A copy under construction; [`Cone::freeze`] ends it.
#[derive(Debug)]
pub struct Cone {
    kinds: Vec<NodeKind>,
    fanins: Vec<Vec<NodeId>>,
    sites: Vec<Site>,
    names: Vec<Option<NodeName>>,
    instances: Vec<Instance>,
    nets: Vec<Net>,
    tables: Vec<Table>,
    operators: Vec<Operator>,
    copies: BTreeMap<NodeId, NodeId>,
    cuts: BTreeMap<NodeId, NodeId>,
    originals: Vec<Option<NodeId>>,
    /// Copies of nodes that never change.
    statics: Vec<NodeId>,
}

/// The finished copy and the way back to the graph it was taken from.
#[derive(Debug)]
pub struct FrozenCone {
    pub graph: Graph,
    copies: BTreeMap<NodeId, NodeId>,
    originals: Vec<Option<NodeId>>,
}

impl Cone {
    /// Copies the whole transitive fan-in of `targets`.
    pub fn of(graph: &Graph, targets: &[NodeId]) -> Self {
        Self::cut(graph, targets, &[])
    }

    /// The same, but whoever reads a node of `cuts` reads a fresh source instead. The logic that drives such a node is
    /// copied only when the node is itself a target.
    pub fn cut(graph: &Graph, targets: &[NodeId], cuts: &[NodeId]) -> Self {
        let cut: BTreeSet<NodeId> = cuts.iter().copied().collect();
        let mut members: BTreeSet<NodeId> = BTreeSet::new();
        let mut read: BTreeSet<NodeId> = BTreeSet::new();
        let mut todo: Vec<NodeId> = targets.to_vec();
        while let Some(node) = todo.pop() {
            if !members.insert(node) {
                continue;
            }
            for &driver in graph.fanin(node) {
                if cut.contains(&driver) {
                    read.insert(driver);
                } else {
                    todo.push(driver);
                }
            }
        }
        let mut cone = Self {
            kinds: Vec::with_capacity(members.len()),
            fanins: Vec::with_capacity(members.len()),
            sites: Vec::with_capacity(members.len()),
            names: vec![None; members.len() + read.len()],
            instances: Vec::new(),
            nets: Vec::new(),
            tables: Vec::new(),
            operators: Vec::new(),
            copies: members.iter().enumerate().map(|(index, &node)| (node, NodeId::new(index))).collect(),
            cuts: read.iter().enumerate().map(|(index, &node)| (node, NodeId::new(members.len() + index))).collect(),
            originals: members.iter().chain(&read).map(|&node| Some(node)).collect(),
            statics: (members.iter().chain(&read).enumerate())
                .filter(|&(_, &node)| graph.is_static(node))
                .map(|(index, _)| NodeId::new(index))
                .collect(),
        };
        cone.copy(graph, &members, &read);
        cone
    }

    fn copy(&mut self, graph: &Graph, members: &BTreeSet<NodeId>, read: &BTreeSet<NodeId>) {
        let mut instances: BTreeSet<InstanceId> = BTreeSet::new();
        let mut nets: BTreeSet<NetId> = BTreeSet::new();
        for &node in members.iter().chain(read) {
            let name = graph.node_name(node);
            nets.extend(name.map(|name| name.net));
            let declared = name.map(|name| graph.nets[name.net.index()].instance);
            for instance in [Some(graph.site(node).instance), declared].into_iter().flatten() {
                let mut next = Some(instance);
                while let Some(instance) = next.filter(|&instance| instances.insert(instance)) {
                    next = graph.instances[instance.index()].parent;
                }
            }
        }
        let instances: BTreeMap<InstanceId, InstanceId> =
            instances.into_iter().enumerate().map(|(index, old)| (old, InstanceId::new(index))).collect();
        for old in instances.keys() {
            let mut instance = graph.instances[old.index()].clone();
            instance.parent = instance.parent.map(|parent| instances[&parent]);
            self.instances.push(instance);
        }
        let nets: BTreeMap<NetId, NetId> =
            nets.into_iter().enumerate().map(|(index, old)| (old, NetId::new(index))).collect();
        for old in nets.keys() {
            let net = &graph.nets[old.index()];
            // Where a node was copied twice, the name stays with the copy that has the logic.
            let bits = net.bits.iter().filter_map(|bit| self.copies.get(bit)).copied().collect();
            self.nets.push(Net { instance: instances[&net.instance], bits, ..net.clone() });
        }
        let mut tables: BTreeMap<TableId, TableId> = BTreeMap::new();
        let mut operators: BTreeMap<OperatorId, OperatorId> = BTreeMap::new();
        for &node in members {
            let kind = match graph.kind(node) {
                NodeKind::Table(table) => NodeKind::Table(*tables.entry(table).or_insert_with(|| {
                    self.tables.push(graph.tables[table.index()].clone());
                    TableId::new(self.tables.len() - 1)
                })),
                NodeKind::OpIn(operator) => {
                    NodeKind::OpIn(copied_operator(graph, operator, &mut operators, &mut self.operators))
                }
                NodeKind::OpOut(operator) => {
                    NodeKind::OpOut(copied_operator(graph, operator, &mut operators, &mut self.operators))
                }
                kind => kind,
            };
            if let Some(name) = graph.node_name(node) {
                self.names[self.kinds.len()] = Some(NodeName { net: nets[&name.net], suffix: name.suffix.clone() });
            }
            self.kinds.push(kind);
            self.fanins.push(
                graph
                    .fanin(node)
                    .iter()
                    .map(|driver| *self.cuts.get(driver).unwrap_or_else(|| &self.copies[driver]))
                    .collect(),
            );
            self.sites.push(mapped(graph.site(node), &instances));
        }
        for &node in read {
            self.kinds.push(NodeKind::Source(SourceKind::Input));
            self.fanins.push(Vec::new());
            self.sites.push(mapped(graph.site(node), &instances));
        }
    }

    /// The copy of a node, with its logic.
    pub fn copy_of(&self, node: NodeId) -> Option<NodeId> {
        self.copies.get(&node).copied()
    }

    /// What readers of a node read: the fresh source for a cut node, else its copy.
    pub fn read_of(&self, node: NodeId) -> Option<NodeId> {
        self.cuts.get(&node).or_else(|| self.copies.get(&node)).copied()
    }

    fn append(&mut self, kind: NodeKind, fanin: Vec<NodeId>, site: Site) -> NodeId {
        self.kinds.push(kind);
        self.fanins.push(fanin);
        self.sites.push(site);
        self.names.push(None);
        self.originals.push(None);
        NodeId::new(self.kinds.len() - 1)
    }

    /// Appends a gate over nodes of the cone, placed where `near` is. A gate of one input becomes BUF or NOT.
    pub fn gate(&mut self, kind: GateKind, inputs: &[NodeId], near: NodeId) -> NodeId {
        let kind = match (inputs.len(), kind.inverts()) {
            (1, false) => GateKind::Buf,
            (1, true) => GateKind::Not,
            _ => kind,
        };
        let site = self.sites[near.index()];
        self.append(NodeKind::Gate(kind), inputs.to_vec(), site)
    }

    /// Appends a clean constant, placed where `near` is.
    pub fn constant(&mut self, value: bool, near: NodeId) -> NodeId {
        let site = self.sites[near.index()];
        self.append(NodeKind::Const(value), Vec::new(), site)
    }

    /// Ties the copy of a source to a clean constant.
    pub fn tie(&mut self, source: NodeId, value: bool) {
        if let Some(copy) = self.copy_of(source).filter(|copy| self.fanins[copy.index()].is_empty()) {
            self.kinds[copy.index()] = NodeKind::Const(value);
        }
    }

    /// Turns the copy of a source into a buffer of another copied node: an open latch passes its data.
    pub fn follow(&mut self, source: NodeId, data: NodeId) {
        if let (Some(copy), Some(data)) = (self.copy_of(source), self.read_of(data)) {
            self.kinds[copy.index()] = NodeKind::Gate(GateKind::Buf);
            self.fanins[copy.index()] = vec![data];
        }
    }

    /// Copies the logic of `targets` once more, reading `instead` where it answers; other nodes without fan-in are
    /// shared with the first copy, which must have them. Returns the new targets.
    pub fn repeat(
        &mut self,
        graph: &Graph,
        targets: &[NodeId],
        instead: impl Fn(NodeId) -> Option<NodeId>,
    ) -> Vec<NodeId> {
        let mut again: BTreeMap<NodeId, NodeId> = BTreeMap::new();
        let mut todo: Vec<NodeId> = targets.to_vec();
        let mut members: Vec<NodeId> = Vec::new();
        while let Some(node) = todo.pop() {
            if again.contains_key(&node) {
                continue;
            }
            let ready = instead(node).or_else(|| self.read_of(node).filter(|_| graph.fanin(node).is_empty()));
            let copy = ready.unwrap_or_else(|| {
                members.push(node);
                todo.extend_from_slice(graph.fanin(node));
                let near = self.copies.get(&node).map_or(0, |copy| copy.index());
                let site = self.sites[near];
                self.append(NodeKind::Unknown, Vec::new(), site)
            });
            again.insert(node, copy);
        }
        for node in members {
            let copy = again[&node].index();
            // Tables and operators were numbered anew by the first copy.
            self.kinds[copy] = self.copies.get(&node).map_or(NodeKind::Unknown, |first| self.kinds[first.index()]);
            self.fanins[copy] = graph.fanin(node).iter().map(|pin| again[pin]).collect();
        }
        targets.iter().map(|target| again[target]).collect()
    }

    /// Freezes the copy.
    pub fn freeze(self) -> FrozenCone {
        let graph = Graph::new(
            self.kinds,
            self.fanins,
            self.sites,
            self.names,
            self.instances,
            self.nets,
            self.tables,
            self.operators,
            Vec::new(),
            Vec::new(),
            Vec::new(),
        )
        .with_static(self.statics);
        FrozenCone { graph, copies: self.copies, originals: self.originals }
    }
}

impl FrozenCone {
    /// The copy of a node, with its logic.
    pub fn copy_of(&self, node: NodeId) -> Option<NodeId> {
        self.copies.get(&node).copied()
    }

    /// The node a copy (or the source that stands for a cut node) was made from; `None` for what was appended.
    pub fn original(&self, node: NodeId) -> Option<NodeId> {
        self.originals.get(node.index()).copied().flatten()
    }
}

fn mapped(site: Site, instances: &BTreeMap<InstanceId, InstanceId>) -> Site {
    Site { instance: instances[&site.instance], span: site.span }
}

fn copied_operator(
    graph: &Graph,
    operator: OperatorId,
    ids: &mut BTreeMap<OperatorId, OperatorId>,
    operators: &mut Vec<Operator>,
) -> OperatorId {
    *ids.entry(operator).or_insert_with(|| {
        operators.push(graph.operators[operator.index()].clone());
        OperatorId::new(operators.len() - 1)
    })
}
