//! A cone in the form the decision computes on: nothing but AND, XOR, tables and the two marks of operators, with
//! inversion on the edges. This is a change of notation, not a simplification: NOT, OR and the inverting gates are exact
//! in it for all three bits of a waveform, wires and buffers pass theirs unchanged, and no gate is merged or dropped.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::order::Order;
use super::tables::Promises;
use crate::graph::{GateKind, Graph, NodeId, NodeKind};

/// A node of a cone, or its complement.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub(super) struct Edge(u32);

impl Edge {
    pub(super) fn new(node: usize, inverted: bool) -> Self {
        Self((node as u32) << 1 | u32::from(inverted))
    }

    pub(super) fn node(self) -> usize {
        (self.0 >> 1) as usize
    }

    pub(super) fn inverted(self) -> bool {
        self.0 & 1 == 1
    }

    pub(super) fn inverted_if(self, inverted: bool) -> Self {
        Self(self.0 ^ u32::from(inverted))
    }

    /// All ones when inverted, for bit-parallel evaluation.
    pub(super) fn mask(self) -> u64 {
        (self.inverted() as u64).wrapping_neg()
    }
}

/// What a node of a cone does; see [`NodeKind`] for the waveforms.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Op {
    /// The constant 0.
    Zero,
    /// A source, a node on a loop (both may change), an unknown constant or a node declared static (which may not).
    Free {
        changes: bool,
    },
    And,
    Xor,
    Table(u32),
    /// Entry of an operator: a change is a hazard.
    Enter,
    /// Exit of an operator whose hazards are to be ignored.
    Calm,
}

/// See the module documentation. Fan-ins have smaller indices than the nodes they drive.
pub(super) struct Cone {
    pub(super) ops: Vec<Op>,
    /// The node of the graph each node stands for.
    pub(super) origin: Vec<NodeId>,
    starts: Vec<u32>,
    edges: Vec<Edge>,
    fanout_starts: Vec<u32>,
    fanouts: Vec<u32>,
    pub(super) tables: Arc<Vec<Promises>>,
    /// What the cone was made for.
    pub(super) roots: Vec<Edge>,
    /// The free nodes, ascending.
    pub(super) frees: Vec<u32>,
    /// Whether a hazard here can be seen at a root, [`Op::Calm`] being opaque.
    pub(super) audible: Vec<bool>,
    /// How much it takes to fix a node's value, roughly: the free nodes below it, counted once per path and saturating.
    pub(super) cost: Vec<u32>,
}

impl Cone {
    /// The cone of `roots`; with `ignore_operators` the exits of operators are clean.
    pub(super) fn new(graph: &Graph, roots: &[NodeId], ignore_operators: bool) -> Self {
        let order = Order::new(graph, roots);
        let mut parts = Parts::default();
        let mut place: Vec<Option<Edge>> = vec![None; graph.len()];
        let mut table_index = BTreeMap::new();
        let mut tables = Vec::new();
        for (&node, &looped) in order.nodes.iter().zip(&order.looped) {
            let kind = graph.kind(node);
            let pins: Vec<Edge> = if looped {
                Vec::new()
            } else {
                graph.fanin(node).iter().filter_map(|fanin| place[fanin.index()]).collect()
            };
            let edge = match (kind, pins.as_slice()) {
                _ if graph.is_static(node) => parts.push(node, Op::Free { changes: false }, &[]),
                _ if looped => parts.push(node, Op::Free { changes: true }, &[]),
                (NodeKind::Source(_), _) => parts.push(node, Op::Free { changes: true }, &[]),
                (NodeKind::Const(value), _) => parts.push(node, Op::Zero, &[]).inverted_if(value),
                (NodeKind::Wire, &[driver]) => driver,
                (NodeKind::OpOut(_), pins) if ignore_operators => parts.push(node, Op::Calm, pins),
                (NodeKind::OpOut(_), &[driver]) => driver,
                (NodeKind::OpIn(_), pins @ &[_]) => parts.push(node, Op::Enter, pins),
                (NodeKind::Unknown | NodeKind::Wire | NodeKind::OpIn(_) | NodeKind::OpOut(_), _) => {
                    parts.push(node, Op::Free { changes: false }, &[])
                }
                (NodeKind::Gate(GateKind::Buf | GateKind::Not), &[driver]) => {
                    driver.inverted_if(kind == NodeKind::Gate(GateKind::Not))
                }
                (NodeKind::Gate(gate), pins) => {
                    let (op, flip) = match gate {
                        GateKind::Or | GateKind::Nor => (Op::And, true),
                        GateKind::Xor | GateKind::Xnor => (Op::Xor, false),
                        _ => (Op::And, false),
                    };
                    let pins: Vec<Edge> = pins.iter().map(|pin| pin.inverted_if(flip)).collect();
                    parts.push(node, op, &pins).inverted_if(flip ^ gate.inverts())
                }
                (NodeKind::Table(table), pins) => {
                    let index = *table_index.entry(table.index()).or_insert_with(|| {
                        tables.push(Promises::new(&graph.tables[table.index()]));
                        tables.len() as u32 - 1
                    });
                    parts.push(node, Op::Table(index), pins)
                }
            };
            place[node.index()] = Some(edge);
        }
        let roots = roots.iter().filter_map(|root| place[root.index()]).collect();
        parts.finish(Arc::new(tables), roots)
    }

    /// The cone of some of the roots alone.
    pub(super) fn restrict(&self, roots: &[Edge]) -> Self {
        let members = self.closure(roots.iter().map(|root| root.node()), |_| true);
        let mut place = vec![0u32; self.len()];
        let mut parts = Parts::default();
        let moved = |place: &[u32], edge: &Edge| Edge::new(place[edge.node()] as usize, edge.inverted());
        for &member in &members {
            let member = member as usize;
            let pins: Vec<Edge> = self.fanin(member).iter().map(|pin| moved(&place, pin)).collect();
            place[member] = parts.push(self.origin[member], self.ops[member], &pins).node() as u32;
        }
        let roots = roots.iter().map(|root| moved(&place, root)).collect();
        parts.finish(Arc::clone(&self.tables), roots)
    }

    pub(super) fn len(&self) -> usize {
        self.ops.len()
    }

    pub(super) fn fanin(&self, node: usize) -> &[Edge] {
        &self.edges[self.starts[node] as usize..self.starts[node + 1] as usize]
    }

    pub(super) fn fanout(&self, node: usize) -> &[u32] {
        &self.fanouts[self.fanout_starts[node] as usize..self.fanout_starts[node + 1] as usize]
    }

    /// The nodes that `starts` depend on and themselves, ascending, without entering nodes that `enter` refuses.
    pub(super) fn closure(&self, starts: impl Iterator<Item = usize>, enter: impl Fn(usize) -> bool) -> Vec<u32> {
        let mut seen = vec![false; self.len()];
        let mut members = Vec::new();
        let visit = |node: usize, seen: &mut Vec<bool>, members: &mut Vec<u32>| {
            if !seen[node] && enter(node) {
                seen[node] = true;
                members.push(node as u32);
            }
        };
        for start in starts {
            visit(start, &mut seen, &mut members);
        }
        let mut next = 0;
        while next < members.len() {
            let node = members[next] as usize;
            next += 1;
            for pin in self.fanin(node) {
                visit(pin.node(), &mut seen, &mut members);
            }
        }
        members.sort_unstable();
        members
    }
}

/// A cone under construction.
#[derive(Default)]
struct Parts {
    ops: Vec<Op>,
    origin: Vec<NodeId>,
    starts: Vec<u32>,
    edges: Vec<Edge>,
}

impl Parts {
    fn push(&mut self, origin: NodeId, op: Op, pins: &[Edge]) -> Edge {
        self.starts.push(self.edges.len() as u32);
        self.edges.extend_from_slice(pins);
        self.ops.push(op);
        self.origin.push(origin);
        Edge::new(self.ops.len() - 1, false)
    }

    fn finish(mut self, tables: Arc<Vec<Promises>>, roots: Vec<Edge>) -> Cone {
        let count = self.ops.len();
        self.starts.push(self.edges.len() as u32);
        let pins = |node: usize| self.starts[node] as usize..self.starts[node + 1] as usize;

        let mut fanout_starts = vec![0u32; count + 1];
        for edge in &self.edges {
            fanout_starts[edge.node() + 1] += 1;
        }
        for node in 0..count {
            fanout_starts[node + 1] += fanout_starts[node];
        }
        let mut next = fanout_starts.clone();
        let mut fanouts = vec![0u32; self.edges.len()];
        let mut cost = vec![1u32; count];
        for node in 0..count {
            for edge in &self.edges[pins(node)] {
                fanouts[next[edge.node()] as usize] = node as u32;
                next[edge.node()] += 1;
            }
            if !pins(node).is_empty() {
                cost[node] = self.edges[pins(node)].iter().fold(0, |sum, edge| cost[edge.node()].saturating_add(sum));
            }
        }

        let mut audible = vec![false; count];
        for root in &roots {
            audible[root.node()] = true;
        }
        for node in (0..count).rev() {
            if audible[node] && self.ops[node] != Op::Calm {
                for edge in &self.edges[pins(node)] {
                    audible[edge.node()] = true;
                }
            }
        }

        let frees =
            (0..count).filter(|&node| matches!(self.ops[node], Op::Free { .. })).map(|node| node as u32).collect();
        Cone {
            ops: self.ops,
            origin: self.origin,
            starts: self.starts,
            edges: self.edges,
            fanout_starts,
            fanouts,
            tables,
            roots,
            frees,
            audible,
            cost,
        }
    }
}
