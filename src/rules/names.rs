//! What the reader calls a node. A node that drives a declared net goes by that net's hierarchical name; a source by the
//! net that holds it. For Verilog that the reader can paste, a node goes by a name that is visible in one given
//! instance, if it has one there.

use crate::graph::{Graph, InstanceId, NodeId, NodeKind, SourceKind};
use crate::source::Span;

/// The first declared wire that `node` drives directly, or `node` itself when it is one.
pub(super) fn wire_of(graph: &Graph, node: NodeId) -> Option<NodeId> {
    if graph.node_name(node).is_some() {
        return Some(node);
    }
    graph.fanout(node).iter().copied().find(|&reader| is_wire(graph, reader))
}

fn is_wire(graph: &Graph, node: NodeId) -> bool {
    graph.kind(node) == NodeKind::Wire && graph.node_name(node).is_some()
}

/// The hierarchical name of the net that `node` drives; a description when it drives none.
pub(super) fn name(graph: &Graph, node: NodeId) -> String {
    if let Some(name) = wire_of(graph, node).and_then(|wire| graph.name(wire)) {
        return name;
    }
    let instance = &graph.instances[graph.site(node).instance.index()].path;
    let what = match graph.kind(node) {
        NodeKind::Const(value) => return format!("1'b{}", u8::from(value)),
        NodeKind::Unknown => "unknown constant",
        NodeKind::Source(SourceKind::Input) => "unnamed input",
        NodeKind::Source(SourceKind::FlipFlop) => "unnamed flip-flop",
        NodeKind::Source(SourceKind::Latch) => "unnamed latch",
        NodeKind::Source(SourceKind::BlackBox) => "output of a module without text",
        NodeKind::Source(SourceKind::Memory) => "unnamed memory output",
        NodeKind::Wire => "unnamed wire",
        NodeKind::Gate(gate) => return format!("{instance}.<unnamed {} output>", gate.name()),
        NodeKind::Table(table) => return format!("{instance}.<unnamed {} output>", graph.tables[table.index()].name),
        NodeKind::OpIn(operator) | NodeKind::OpOut(operator) => {
            return format!("{instance}.<unnamed {} result>", graph.operators[operator.index()].what);
        }
    };
    format!("{instance}.<{what}>")
}

/// Where the net that `node` drives is declared.
pub(super) fn declaration(graph: &Graph, node: NodeId) -> Option<Span> {
    let name = wire_of(graph, node).and_then(|wire| graph.node_name(wire))?;
    Some(graph.nets[name.net.index()].span)
}

/// The instance in which `node` is best known: that of the wire it drives.
pub(super) fn instance(graph: &Graph, node: NodeId) -> InstanceId {
    match wire_of(graph, node).and_then(|wire| graph.node_name(wire)) {
        Some(name) => graph.nets[name.net.index()].instance,
        None => graph.site(node).instance,
    }
}

/// The net of `node` as it may be written in Verilog inside `scope`: by the name of an equal net declared there, or by
/// its full name when there is none. `None` when the node has no name at all.
pub(super) fn verilog(graph: &Graph, node: NodeId, scope: InstanceId) -> Option<String> {
    let root = graph.root(node);
    let mut open = vec![root];
    let mut first = None;
    // Wires that follow a root form a tree, so that every one of them is met once.
    while let Some(here) = open.pop() {
        if let Some(name) = graph.node_name(here) {
            let net = &graph.nets[name.net.index()];
            if net.instance == scope {
                return Some(format!("{}{}", identifier(&net.name), name.suffix));
            }
            let path = &graph.instances[net.instance.index()].path;
            if first.is_none() {
                first = Some(format!("{path}.{}{}", identifier(&net.name), name.suffix));
            }
        }
        let readers = graph.fanout(here).iter().rev().copied();
        open.extend(readers.filter(|&reader| reader != here && graph.kind(reader) == NodeKind::Wire));
    }
    first
}

/// A name as Verilog wants it: escaped unless it is a simple identifier.
fn identifier(name: &str) -> String {
    let mut chars = name.chars();
    let starts = chars.next().is_some_and(|first| first.is_ascii_alphabetic() || first == '_');
    if starts && chars.all(|c| c.is_ascii_alphanumeric() || c == '_' || c == '$') {
        name.to_string()
    } else {
        format!("\\{name} ")
    }
}
