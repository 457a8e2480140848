//! The gate graph as structural Verilog.

use crate::graph::Graph;

/// The whole graph.
pub fn flatten(graph: &Graph) -> String {
    let _ = graph;
    String::new()
}

/// The fan-in of the net with the full name `net`; `Err` with a sentence when there is no such net.
pub fn flatten_cone(graph: &Graph, net: &str) -> Result<String, String> {
    let _ = graph;
    Err(format!("no net is named `{net}`"))
}
