//! The part of the graph that some nodes depend on, in topological order. Flip-flops and latches end it by themselves
//! because they are sources; combinational loops are cut: the nodes of a loop stand in the order like sources, without
//! what drives them, so that everything behind a loop can still be judged for each value the loop may take.

use crate::graph::cycles::{self, Components};
use crate::graph::{Graph, NodeId, NodeKind};

/// Fan-ins stand before the nodes they drive.
pub(crate) struct Order {
    pub(crate) nodes: Vec<NodeId>,
    /// Per entry of `nodes`: a node on a loop or one that is declared static, whose fan-in is not followed. A bit of a net on a loop is not marked: it
    /// passes the value of the gate that drives it, so that gate and net stay one.
    pub(crate) looped: Vec<bool>,
}

impl Order {
    pub(crate) fn new(graph: &Graph, roots: &[NodeId]) -> Self {
        // Most cones have no loop, and whole-graph components are not worth computing for them.
        match Self::walk(graph, roots, None) {
            Some(order) => order,
            None => {
                let components = cycles::components(graph);
                Self::walk(graph, roots, Some(&components)).unwrap_or(Self { nodes: Vec::new(), looped: Vec::new() })
            }
        }
    }

    /// Depth first, without recursion. `None` when there is a loop that `components` does not cut.
    fn walk(graph: &Graph, roots: &[NodeId], components: Option<&Components>) -> Option<Self> {
        const UNSEEN: u8 = 0;
        const OPEN: u8 = 1;
        const DONE: u8 = 2;
        let mut state = vec![UNSEEN; graph.len()];
        let mut order = Self { nodes: Vec::new(), looped: Vec::new() };
        let mut path: Vec<(NodeId, usize)> = Vec::new();
        let cut = |node: NodeId| {
            graph.is_static(node)
                || components.is_some_and(|components| components.component_of(node).is_some())
                    && (graph.kind(node) != NodeKind::Wire || graph.kind(graph.root(node)) == NodeKind::Wire)
        };
        for &root in roots {
            if state[root.index()] != UNSEEN {
                continue;
            }
            state[root.index()] = OPEN;
            path.push((root, 0));
            while let Some((node, pin)) = path.pop() {
                let looped = cut(node);
                let fanin = if looped { &[] } else { graph.fanin(node) };
                match fanin.get(pin) {
                    Some(&next) => {
                        path.push((node, pin + 1));
                        match state[next.index()] {
                            UNSEEN => {
                                state[next.index()] = OPEN;
                                path.push((next, 0));
                            }
                            OPEN => return None,
                            _ => {}
                        }
                    }
                    None => {
                        state[node.index()] = DONE;
                        order.nodes.push(node);
                        order.looped.push(looped);
                    }
                }
            }
        }
        Some(order)
    }

    /// Whether a loop had to be cut.
    pub(crate) fn has_loop(&self, graph: &Graph) -> bool {
        self.nodes.iter().zip(&self.looped).any(|(&node, &looped)| looped && !graph.is_static(node))
    }

    /// The sources that reach one of `nodes`, through loops as well; sorted.
    pub(super) fn sources_behind(graph: &Graph, nodes: &[NodeId]) -> Vec<NodeId> {
        let mut seen = vec![false; graph.len()];
        let mut open = nodes.to_vec();
        let mut sources = Vec::new();
        while let Some(node) = open.pop() {
            if std::mem::replace(&mut seen[node.index()], true) {
                continue;
            }
            if matches!(graph.kind(node), NodeKind::Source(_)) && !graph.is_static(node) {
                sources.push(node);
            }
            if !graph.is_static(node) {
                open.extend_from_slice(graph.fanin(node));
            }
        }
        sources.sort_unstable();
        sources
    }
}
