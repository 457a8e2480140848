//! What the reader calls a node. A node that drives a declared net goes by that net's hierarchical name; a source by the
//! net that holds it. For Verilog that the reader can paste, a node goes by a name that is visible in one given
//! instance, if it has one there.

use crate::graph::{Graph, InstanceId, NodeId, NodeKind, SourceKind};
use crate::source::Span;

/// How many nodes are looked at to find the net near one that has no name.
const NEAR: usize = 64;

/// The first declared wire that `node` drives directly, or `node` itself when it is one.
pub(crate) fn wire_of(graph: &Graph, node: NodeId) -> Option<NodeId> {
    if graph.node_name(node).is_some() {
        return Some(node);
    }
    graph.fanout(node).iter().copied().find(|&reader| is_wire(graph, reader))
}

fn is_wire(graph: &Graph, node: NodeId) -> bool {
    graph.kind(node) == NodeKind::Wire && graph.node_name(node).is_some()
}

/// The hierarchical name of the net that `node` drives; a description when it drives none.
pub(crate) fn name(graph: &Graph, node: NodeId) -> String {
    if let Some(name) = wire_of(graph, node).and_then(|wire| graph.name(wire)) {
        return name;
    }
    let instance = &graph.instances[graph.site(node).instance.index()].path;
    let what = match graph.kind(node) {
        NodeKind::Const(value) => return format!("1'b{}", u8::from(value)),
        NodeKind::Unknown => return format!("{instance}.<unknown value{}>", of_reader(graph, node)),
        NodeKind::Source(SourceKind::Input) => return format!("{instance}.<outside value{}>", of_reader(graph, node)),
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

/// `" of bus[0]"`: the nearest net that depends on a node without a name of its own, such as the port that is driven from
/// outside as well.
fn of_reader(graph: &Graph, node: NodeId) -> String {
    let mut met = vec![node];
    let mut next = 0;
    while let Some(&here) = met.get(next) {
        next += 1;
        if is_wire(graph, here)
            && let Some(name) = graph.node_name(here)
        {
            return format!(" of {}{}", graph.nets[name.net.index()].name, name.suffix);
        }
        if met.len() < NEAR {
            let readers = graph.fanout(here).iter().filter(|reader| !met.contains(reader));
            let readers: Vec<NodeId> = readers.copied().collect();
            met.extend(readers);
        }
    }
    String::new()
}

/// Whether the net that `node` drives is a name of our own for an enable or the like that the text does not name. Such
/// a name is that of the cell's variable with a word behind it.
pub(super) fn is_made(graph: &Graph, node: NodeId) -> bool {
    let Some(name) = wire_of(graph, node).and_then(|wire| graph.node_name(wire)) else { return true };
    let net = &graph.nets[name.net.index()];
    let Some((variable, _)) = net.name.rsplit_once('.') else { return false };
    graph.nets.iter().any(|other| other.instance == net.instance && other.name == variable)
}

/// Where the net that `node` drives is declared.
pub(super) fn declaration(graph: &Graph, node: NodeId) -> Option<Span> {
    let name = wire_of(graph, node).and_then(|wire| graph.node_name(wire))?;
    Some(graph.nets[name.net.index()].span)
}

/// The instance in which `node` is best known: that of the wire it drives.
pub(crate) fn instance(graph: &Graph, node: NodeId) -> InstanceId {
    match wire_of(graph, node).and_then(|wire| graph.node_name(wire)) {
        Some(name) => graph.nets[name.net.index()].instance,
        None => graph.site(node).instance,
    }
}

/// The net of `node` as it may be written in Verilog inside `scope`: by the name of an equal net that is visible there,
/// or by its full name when there is none. `None` when the node has no name at all.
pub(super) fn verilog(graph: &Graph, node: NodeId, scope: InstanceId) -> Option<String> {
    nearest(graph, node, scope).map(|(_, text, _)| text)
}

/// The same without names from elsewhere in the hierarchy, and where that name is declared.
pub(crate) fn visible_name(graph: &Graph, node: NodeId, scope: InstanceId) -> Option<(String, Span)> {
    let (depth, text, declared) = nearest(graph, node, scope)?;
    (depth != usize::MAX).then_some((text, declared))
}

/// How many scopes out the name is visible (`usize::MAX`: not at all), the name, and its declaration.
fn nearest(graph: &Graph, node: NodeId, scope: InstanceId) -> Option<(usize, String, Span)> {
    let scopes = visible(graph, scope);
    let root = graph.root(node);
    let mut open = vec![root];
    let mut nearest: Option<(usize, String, Span)> = None;
    // Wires that follow a root form a tree, so that every one of them is met once.
    while let Some(here) = open.pop() {
        if let Some(name) = graph.node_name(here) {
            let net = &graph.nets[name.net.index()];
            let depth = scopes.iter().position(|&scope| scope == net.instance);
            let depth = depth.filter(|&depth| !hidden(graph, &net.name, &scopes[..depth]));
            let text = format!("{}{}", identifier(&net.name), name.suffix);
            let found = match depth {
                Some(0) => return Some((0, text, net.span)),
                Some(depth) => (depth, text, net.span),
                None => (usize::MAX, format!("{}.{text}", graph.instances[net.instance.index()].path), net.span),
            };
            if nearest.as_ref().is_none_or(|nearest| found.0 < nearest.0) {
                nearest = Some(found);
            }
        }
        let readers = graph.fanout(here).iter().rev().copied();
        open.extend(readers.filter(|&reader| reader != here && graph.kind(reader) == NodeKind::Wire));
    }
    nearest
}

/// The instances whose names are visible in `scope`: itself and, from a generate block, the blocks and the module around
/// it, from the inside out.
fn visible(graph: &Graph, scope: InstanceId) -> Vec<InstanceId> {
    let mut scopes = vec![scope];
    let mut instance = &graph.instances[scope.index()];
    while let Some(parent) = instance.parent.filter(|_| instance.block) {
        scopes.push(parent);
        instance = &graph.instances[parent.index()];
    }
    scopes
}

/// Whether a net of an inner scope has this name as well.
fn hidden(graph: &Graph, name: &str, inner: &[InstanceId]) -> bool {
    !inner.is_empty() && graph.nets.iter().any(|net| inner.contains(&net.instance) && net.name == name)
}

/// A name as Verilog wants it: escaped unless it is a simple identifier.
pub(crate) fn identifier(name: &str) -> String {
    let mut chars = name.chars();
    let starts = chars.next().is_some_and(|first| first.is_ascii_alphabetic() || first == '_');
    if starts && chars.all(|c| c.is_ascii_alphanumeric() || c == '_' || c == '$') {
        name.to_string()
    } else {
        format!("\\{name} ")
    }
}
