//! Combinational loops: the strongly connected components of the graph. Sources have no fan-in, so every flip-flop,
//! latch, black box and memory cuts the graph by itself. The algorithm is Tarjan's (SIAM Journal on Computing 1, 1972)
//! with an explicit stack, because real fan-in chains are longer than a call stack. Only components that hold a cycle
//! are kept: more than one node, or one node in its own fan-in.

use super::{Graph, NodeId};

/// The components that hold a cycle, by smallest node.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Components {
    lists: Vec<Vec<NodeId>>,
    /// Index into `lists` per node; empty when there is no loop at all, the usual case.
    of: Vec<Option<u32>>,
}

impl Components {
    pub fn len(&self) -> usize {
        self.lists.len()
    }

    pub fn is_empty(&self) -> bool {
        self.lists.is_empty()
    }

    /// The components in order of their smallest node; the nodes of each are sorted.
    pub fn iter(&self) -> impl Iterator<Item = &[NodeId]> {
        self.lists.iter().map(Vec::as_slice)
    }

    /// The nodes of one component, sorted.
    pub fn nodes(&self, component: usize) -> &[NodeId] {
        &self.lists[component]
    }

    /// The component a node lies on, `None` for a node on no cycle.
    pub fn component_of(&self, node: NodeId) -> Option<usize> {
        self.of.get(node.index()).copied().flatten().map(|index| index as usize)
    }
}

const UNSEEN: u32 = u32::MAX;

/// Finds all combinational loops in time linear in nodes and edges.
pub fn components(graph: &Graph) -> Components {
    let count = graph.len();
    // `low` starts as the visiting order of a node and sinks to the smallest order it can reach.
    let mut low = vec![UNSEEN; count];
    let mut done = vec![false; count];
    let mut open: Vec<NodeId> = Vec::new();
    let mut path: Vec<(NodeId, u32, u32)> = Vec::new();
    let mut clock = 0u32;
    let mut lists: Vec<Vec<NodeId>> = Vec::new();
    for start in graph.nodes() {
        if low[start.index()] != UNSEEN {
            continue;
        }
        low[start.index()] = clock;
        path.push((start, clock, 0));
        open.push(start);
        clock += 1;
        while let Some((node, order, pin)) = path.pop() {
            let fanin = graph.fanin(node);
            let mut pin = pin as usize;
            let mut lowest = low[node.index()];
            let mut descend = None;
            while pin < fanin.len() {
                let next = fanin[pin];
                if low[next.index()] == UNSEEN {
                    // The pin is looked at again after the descent, which then takes over the child's value.
                    descend = Some(next);
                    break;
                }
                if !done[next.index()] {
                    lowest = lowest.min(low[next.index()]);
                }
                pin += 1;
            }
            low[node.index()] = lowest;
            if let Some(next) = descend {
                path.push((node, order, pin as u32));
                low[next.index()] = clock;
                path.push((next, clock, 0));
                open.push(next);
                clock += 1;
                continue;
            }
            if lowest != order {
                continue;
            }
            let first = open.iter().rposition(|&other| other == node).unwrap_or(0);
            let mut members = open.split_off(first);
            for member in &members {
                done[member.index()] = true;
            }
            if members.len() > 1 || fanin.contains(&node) {
                members.sort_unstable();
                lists.push(members);
            }
        }
    }
    lists.sort_unstable_by_key(|list| list[0]);
    let mut of = Vec::new();
    if !lists.is_empty() {
        of = vec![None; count];
        for (index, list) in lists.iter().enumerate() {
            for node in list {
                of[node.index()] = Some(index as u32);
            }
        }
    }
    Components { lists, of }
}
