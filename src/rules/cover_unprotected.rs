//! `cover-unprotected`: a pin or watched net that holds still only because of redundant logic, and nothing that keeps a
//! synthesiser from removing it. Each term and the gate that joins it need protection: an attribute on the net, the
//! instance or the module; a module instance of their own; an instantiated cell. A primitive gate of the
//! language is none: to a synthesiser it is logic like any other.

use super::about_text;
use super::finding::{Finding, Pin, Rule, Severity, TraceStep};
use super::{evidence, fingerprint, names, words};
use crate::graph::{GateKind, Graph, InstanceId, NodeId, NodeKind};
use crate::hazard::{self, HazardKind, Options, Redundant};
use crate::syntax::Protection;

const CURE: &str = "to do: put each redundant term and the joined net on a wire of its own and protect all of them, for \
                    example as `(* keep *) wire term = b & c;`, or instantiate cells of the library for them";

/// What keeps a piece of logic.
enum Guard {
    None,
    Attribute(String),
    Hierarchy(String),
    Cell(String),
    /// A signal and no logic of its own.
    Signal,
}

impl Guard {
    fn is_none(&self) -> bool {
        matches!(self, Guard::None)
    }

    fn words(&self) -> String {
        match self {
            Guard::None => "protection: none".to_string(),
            Guard::Attribute(name) => format!("protected by the attribute `{name}`"),
            Guard::Hierarchy(path) => format!("protected by its instance `{path}`, as long as the hierarchy is kept"),
            Guard::Cell(name) => format!("protected as the instantiated cell `{name}`"),
            Guard::Signal => "a signal of its own".to_string(),
        }
    }
}

/// The finding on a clean net. `what` names it and its cells: "the clock `top.gated` of 2 flip-flops".
pub(super) fn finding(
    graph: &Graph,
    root: NodeId,
    what: &str,
    pin: Pin,
    protection: &Protection,
    options: &Options,
) -> Option<Finding> {
    let mut trace: Vec<TraceStep> = Vec::new();
    let mut joined: Vec<NodeId> = Vec::new();
    let mut lost: Option<Redundant> = None;
    let mut terms = 0;
    for term in hazard::redundant(graph, root, options) {
        // The gates of a cell of a library, or of a declared one, all stand where its instance stands.
        let inner = graph.root(graph.fanin(term.gate)[term.pin]);
        if graph.span(inner).is_some() && graph.span(inner) == graph.span(term.gate) {
            continue;
        }
        let (of_term, of_gate) = (guard_of_term(graph, protection, &term), guard_of_gate(graph, protection, term.gate));
        if !of_term.is_none() && !of_gate.is_none() {
            continue;
        }
        terms += 1;
        let driver = graph.root(graph.fanin(term.gate)[term.pin]);
        let named = match graph.name(graph.fanin(term.gate)[term.pin]) {
            Some(name) => format!("`{name}`"),
            None => words::gate(graph, driver),
        };
        let at = evidence::place(graph, driver);
        trace.push(TraceStep { at, way: None, text: format!("redundant term {terms}: {named}; {}", of_term.words()) });
        if !joined.contains(&term.gate) {
            joined.push(term.gate);
            let text = format!("joined by {}; {}", words::gate(graph, term.gate), of_gate.words());
            trace.push(TraceStep { at: evidence::place(graph, term.gate), way: None, text });
        }
        lost.get_or_insert(term);
    }
    let lost = lost?;
    let net = names::name(graph, root);
    let identity = fingerprint::of_cone(graph, Rule::CoverUnprotected, &net, &[root]);
    let at = evidence::place(graph, root);
    let message = format!(
        "{what} holds still only thanks to {}, and nothing keeps synthesis from removing it",
        words::count(terms, "redundant term")
    );
    let mut finding = about_text::plain(Rule::CoverUnprotected, Severity::Warning, message, at, identity);
    let changes: Vec<String> = lost.witness.changes.iter().map(|&(node, _)| names::name(graph, node)).collect();
    let shows = match lost.kind {
        HazardKind::Static0 => "pulses it high",
        HazardKind::Static1 => "pulses it low",
        HazardKind::Dynamic => "switches it more than once",
    };
    finding.notes.push(format!(
        "proven: without term 1 the net has the same function, and a change of `{}` alone {shows}",
        changes.join("` and `")
    ));
    finding.notes.push(CURE.to_string());
    finding.instance = graph.instances[names::instance(graph, root).index()].path.clone();
    finding.declared = names::declaration(graph, root);
    finding.net = net;
    finding.pin = Some(pin);
    finding.trace = trace;
    Some(finding)
}

fn guard_of_term(graph: &Graph, protection: &Protection, term: &Redundant) -> Guard {
    // Every net between the term and the gate, whatever inverters are in between.
    let mut root = graph.fanin(term.gate)[term.pin];
    let mut nets = Vec::new();
    while let (NodeKind::Wire | NodeKind::Gate(GateKind::Buf | GateKind::Not), &[driver]) =
        (graph.kind(root), graph.fanin(root))
    {
        nets.push(root);
        root = driver;
    }
    if matches!(graph.kind(root), NodeKind::Source(_)) {
        return Guard::Signal;
    }
    let own = guard(graph, protection, root, &nets);
    let (here, there) = (module(graph, graph.site(term.gate).instance), module(graph, graph.site(root).instance));
    match own {
        Guard::None if here != there => Guard::Hierarchy(graph.instances[there.index()].path.clone()),
        own => own,
    }
}

fn guard_of_gate(graph: &Graph, protection: &Protection, gate: NodeId) -> Guard {
    let here = module(graph, graph.site(gate).instance);
    // A chain of gates of one kind in one expression is one gate to its reader.
    let mut last = gate;
    while let &[reader] = graph.fanout(last) {
        if graph.kind(reader) != graph.kind(gate) || graph.kind(reader) == NodeKind::Wire {
            break;
        }
        last = reader;
    }
    let nets: Vec<NodeId> =
        graph.fanout(last).iter().copied().filter(|&reader| graph.kind(reader) == NodeKind::Wire).collect();
    match guard(graph, protection, gate, &nets) {
        Guard::None if stands_alone(graph, gate, here) => Guard::Hierarchy(graph.instances[here.index()].path.clone()),
        own => own,
    }
}

/// Whether a gate, with gates of its own kind in front of it, is all that its module holds between ports.
fn stands_alone(graph: &Graph, gate: NodeId, here: InstanceId) -> bool {
    let mut open = vec![gate];
    while let Some(node) = open.pop() {
        for &pin in graph.fanin(node) {
            let driver = graph.root(pin);
            if module(graph, graph.site(driver).instance) == here {
                if graph.kind(driver) != graph.kind(gate) {
                    return false;
                }
                open.push(driver);
            }
        }
    }
    true
}

/// The protection of a gate and of the nets that it drives.
fn guard(graph: &Graph, protection: &Protection, node: NodeId, nets: &[NodeId]) -> Guard {
    if let NodeKind::Table(table) = graph.kind(node) {
        return Guard::Cell(graph.tables[table.index()].name.clone());
    }
    let mut declared =
        nets.iter().filter_map(|&net| graph.node_name(net)).map(|name| graph.nets[name.net.index()].span);
    if let Some(name) = declared.find_map(|place| protection.of_net(place)) {
        return Guard::Attribute(name.to_string());
    }
    let mut places: Vec<_> = graph.span(node).into_iter().collect();
    let mut instance = Some(graph.site(node).instance);
    while let Some(at) = instance {
        places.extend(graph.instances[at.index()].span);
        instance = graph.instances[at.index()].parent;
    }
    match places.into_iter().find_map(|place| protection.around(place)) {
        Some(name) => Guard::Attribute(name.to_string()),
        None => Guard::None,
    }
}

/// The instance of a module that an instance or generate block belongs to.
fn module(graph: &Graph, mut instance: InstanceId) -> InstanceId {
    while let Some(parent) =
        graph.instances[instance.index()].parent.filter(|_| graph.instances[instance.index()].block)
    {
        instance = parent;
    }
    instance
}
