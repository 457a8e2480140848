//! Compressed rows: a list of lists in two flat arrays, as the frozen graph needs it for fan-in and fan-out.

use super::NodeId;

#[derive(Debug)]
pub(super) struct Rows {
    starts: Vec<u32>,
    items: Vec<NodeId>,
}

impl Rows {
    pub(super) fn new(lists: &[Vec<NodeId>]) -> Self {
        let mut starts = Vec::with_capacity(lists.len() + 1);
        let mut items = Vec::with_capacity(lists.iter().map(Vec::len).sum());
        starts.push(0);
        for list in lists {
            items.extend_from_slice(list);
            starts.push(items.len() as u32);
        }
        Self { starts, items }
    }

    pub(super) fn row(&self, node: NodeId) -> &[NodeId] {
        let index = node.index();
        &self.items[self.starts[index] as usize..self.starts[index + 1] as usize]
    }

    /// The rows of the reversed edges, each in order of node id.
    pub(super) fn transposed(&self) -> Self {
        let count = self.starts.len() - 1;
        let mut starts = vec![0u32; count + 1];
        for item in &self.items {
            starts[item.index() + 1] += 1;
        }
        for index in 0..count {
            starts[index + 1] += starts[index];
        }
        let mut next = starts.clone();
        let mut items = self.items.clone();
        for index in 0..count {
            let from = NodeId::new(index);
            for &to in self.row(from) {
                let slot = &mut next[to.index()];
                items[*slot as usize] = from;
                *slot += 1;
            }
        }
        Self { starts, items }
    }
}
