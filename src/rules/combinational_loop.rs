//! `combinational-loop`: feedback without a flip-flop or declared latch in it, bit by bit. What the loop does decides how
//! bad it is: one that oscillates or races is an error, one that stores is a latch that nobody declared (an error when a
//! single input change can lose its state), and one that always settles is worth no more than a note.

use std::collections::{BTreeMap, BTreeSet, VecDeque};

use super::evidence;
use super::finding::{Finding, LoopText, Rule, Severity, TraceStep, Verdict};
use super::{cover_text, fingerprint, names, words};
use crate::graph::{Graph, NodeId, NodeKind};
use crate::hazard::{Behaviour, BehaviourKind, HazardKind, LoopVerdict, StateLoss};
use crate::source::Span;

/// The most places shown of one loop; the nets are all in the finding's `loop`.
const SHOWN_STEPS: usize = 10;

/// `endpoints` are the nodes that cells and ports read.
pub(super) fn finding(graph: &Graph, verdict: &LoopVerdict, endpoints: &BTreeSet<NodeId>) -> Option<Finding> {
    let mut nets: Vec<(String, NodeId)> =
        verdict.nodes.iter().filter_map(|&node| Some((graph.name(node)?, node))).collect();
    nets.sort();
    // The net that the rest of the design reads is the one that the reader knows; by name, so that moved code keeps it.
    let read = |node: NodeId| {
        let outside = |reader: &NodeId| verdict.nodes.binary_search(reader).is_err();
        endpoints.contains(&node) || graph.fanout(node).iter().any(outside)
    };
    let start = (nets.iter().find(|(_, node)| read(*node)))
        .or_else(|| nets.first())
        .map(|(_, node)| *node)
        .or_else(|| verdict.nodes.first().copied())?;
    let net = names::name(graph, start);
    let mut ring = ring(graph, verdict, start);
    // The gate that drives the net comes first: it is the finding's place.
    let driver = ring.iter().rposition(|&node| graph.kind(node) != NodeKind::Wire).unwrap_or(0);
    ring.rotate_left(driver);
    let at = evidence::place(graph, graph.root(start));
    let (severity, what) = judge(verdict);
    let stores = verdict.behaviours.iter().any(|behaviour| behaviour.kind == BehaviourKind::Stores);
    let loss_open = stores && verdict.loses_state.is_none() && !verdict.loss_decided;
    let undecided = loss_open || verdict.behaviours.iter().any(|behaviour| behaviour.kind == BehaviourKind::Undecided);
    let size = words::count(nets.len().max(1), "net");
    let mut message = format!("combinational loop of {size} through `{net}` {what}");
    let identity = fingerprint::of_cone(graph, Rule::CombinationalLoop, &net, &[start]);
    let mut finding = Finding {
        rule: Rule::CombinationalLoop,
        severity,
        verdict: if undecided { Verdict::Undecided } else { Verdict::Proven },
        message: String::new(),
        at,
        declared: names::declaration(graph, start),
        trace: trace(graph, &ring, at),
        instance: graph.instances[names::instance(graph, start).index()].path.clone(),
        net: net.clone(),
        bits: None,
        pin: None,
        hazards: Vec::new(),
        cover: None,
        loop_: Some(LoopText {
            nets: nets.into_iter().map(|(name, _)| name).collect(),
            behaviour: verdict.behaviours.iter().map(|behaviour| behaviour.kind.name()).collect(),
        }),
        notes: verdict.behaviours.iter().map(|behaviour| explain(graph, behaviour)).collect(),
        fingerprint: identity.fingerprint,
        family: identity.family,
        signoff: None,
        known: false,
    };
    if let Some(loss) = &verdict.loses_state {
        message.push_str(&format!("; a change of `{}` alone can lose the value", names::name(graph, loss.source)));
        lost_state(graph, loss, &mut finding);
    }
    if loss_open {
        finding
            .notes
            .push("undecided: whether a change of one input can lose the value; this is not a pass".to_string());
    }
    finding.message = message;
    finding.notes.push(cure(verdict).to_string());
    Some(finding)
}

/// The worst of the behaviours, and all of them in words.
fn judge(verdict: &LoopVerdict) -> (Severity, String) {
    let judged: Vec<(Severity, &str)> = verdict
        .behaviours
        .iter()
        .map(|behaviour| match behaviour.kind {
            BehaviourKind::Oscillates => (Severity::Error, "oscillates"),
            BehaviourKind::Stores if verdict.loses_state.is_some() => (Severity::Error, "stores a value"),
            BehaviourKind::Stores if !verdict.loss_decided => (Severity::Warning, "stores a value"),
            BehaviourKind::Stores => (Severity::Note, "stores a value"),
            BehaviourKind::Settles => (Severity::Note, "always settles: it is combinational in fact"),
            BehaviourKind::DelayDependent => (Severity::Error, "may or may not settle, depending on delays"),
            BehaviourKind::Undecided => (Severity::Warning, "is not decided"),
        })
        .collect();
    let severity = judged.iter().map(|(severity, _)| *severity).max().unwrap_or(Severity::Note);
    let texts: Vec<&str> = judged.iter().map(|(_, text)| *text).collect();
    (severity, texts.join(" and "))
}

fn explain(graph: &Graph, behaviour: &Behaviour) -> String {
    let when = values(graph, &behaviour.inputs);
    let when = if when.is_empty() { String::new() } else { format!(" when {when}") };
    match behaviour.kind {
        BehaviourKind::Oscillates => format!("oscillates{when}: no state is stable then"),
        BehaviourKind::Stores => {
            let states: Vec<String> = behaviour.states.iter().map(|state| values(graph, state)).collect();
            format!("stores{when}: stable are {}", states.join(" as well as "))
        }
        BehaviourKind::Settles => {
            "settles: from any state, every value of its inputs resolves every net of it".to_string()
        }
        BehaviourKind::DelayDependent => {
            format!("delay-dependent{when}: one state is stable, but some order of delays never reaches it")
        }
        BehaviourKind::Undecided => {
            "undecided: the loop is too large for a proof of what it does; this is not a pass".to_string()
        }
    }
}

/// "`top.s` = 0, `top.r` = 1".
fn values(graph: &Graph, nodes: &[(NodeId, bool)]) -> String {
    let mut texts: Vec<String> =
        nodes.iter().map(|&(node, value)| format!("`{}` = {}", names::name(graph, node), u8::from(value))).collect();
    texts.sort();
    texts.dedup();
    texts.join(", ")
}

fn lost_state(graph: &Graph, loss: &StateLoss, finding: &mut Finding) {
    let kind = match loss.witness.target {
        (false, false) => HazardKind::Static0,
        (true, true) => HazardKind::Static1,
        _ => HazardKind::Dynamic,
    };
    let harm = "the feedback can catch the pulse and keep the wrong value".to_string();
    finding.hazards.push(evidence::hazard_text(graph, loss.node, kind, &loss.witness, harm));
    match &loss.cover {
        Some(cover) => finding.cover = cover_text::of_loop(graph, loss.node, cover),
        None => finding.notes.push("no cover is known that keeps the state".to_string()),
    }
}

fn cure(verdict: &LoopVerdict) -> &'static str {
    let stores = verdict.behaviours.iter().any(|behaviour| behaviour.kind == BehaviourKind::Stores);
    if stores {
        "to do: if it is meant to store, declare a latch (always_latch) or use a latch cell; otherwise cut the feedback"
    } else {
        "to do: cut the feedback with a flip-flop, or rewrite the selection so that no net depends on itself"
    }
}

/// A shortest way from `start` back to itself inside the component, `start` first. A component always has one.
fn ring(graph: &Graph, verdict: &LoopVerdict, start: NodeId) -> Vec<NodeId> {
    let mut from: BTreeMap<NodeId, NodeId> = BTreeMap::new();
    let mut queue = VecDeque::from([start]);
    while let Some(node) = queue.pop_front() {
        for &reader in graph.fanout(node) {
            if reader == start {
                let mut ring = vec![node];
                let mut here = node;
                while here != start {
                    match from.get(&here) {
                        Some(&before) => here = before,
                        None => break,
                    }
                    ring.push(here);
                }
                ring.reverse();
                return ring;
            }
            if verdict.nodes.binary_search(&reader).is_ok() && !from.contains_key(&reader) {
                from.insert(reader, node);
                queue.push_back(reader);
            }
        }
    }
    vec![start]
}

/// The stations of the ring: each gate by the net that it drives, gates of one place together.
fn trace(graph: &Graph, ring: &[NodeId], at: Option<Span>) -> Vec<TraceStep> {
    let mut steps: Vec<TraceStep> = Vec::new();
    for &node in ring.iter().filter(|&&node| graph.kind(node) != NodeKind::Wire) {
        let place = evidence::place(graph, node);
        if steps.last().is_some_and(|last| last.at == place) {
            continue;
        }
        let number = steps.len() + 1;
        let drives = match names::wire_of(graph, node) {
            Some(wire) => format!(", drives `{}`", names::name(graph, wire)),
            None => String::new(),
        };
        steps.push(TraceStep::new(place, format!("{number}: {}{drives}", words::gate(graph, node))));
    }
    if steps.len() > SHOWN_STEPS {
        let left_out = steps.len() - SHOWN_STEPS;
        steps.truncate(SHOWN_STEPS);
        let text = format!("and {} more on the way back here, not shown", words::count(left_out, "place"));
        steps.push(TraceStep::new(at, text));
    }
    steps
}
