//! `unsupported-construct`, for modules whose text is not there. Their outputs are taken as clean sources, as the inputs
//! of a top are, because a macro for a memory or a clock generator is part of most designs and must not make every run
//! incomplete. But the reader has to be told when a pin that must hold still hangs on one: its verdict says nothing
//! about what happens inside. One finding per module, however many instances there are.

use std::collections::{BTreeMap, BTreeSet};

use super::about_text::plain;
use super::finding::{Finding, PinKind, Rule, Severity, TraceStep};
use super::pins::Pins;
use super::{fingerprint, names, pins, words};
use crate::graph::{BlackBox, Graph, NodeId};

/// How many instances and how many pins are named.
const SHOWN: usize = 5;

pub(super) fn findings(graph: &Graph, pins: &Pins, watched: &BTreeSet<NodeId>) -> Vec<Finding> {
    let mut modules: BTreeMap<&str, Vec<&BlackBox>> = BTreeMap::new();
    for black_box in &graph.black_boxes {
        modules.entry(&black_box.module).or_default().push(black_box);
    }
    let sensitive = sensitive(pins, watched);
    modules.into_iter().map(|(module, boxes)| finding(graph, module, &boxes, &sensitive)).collect()
}

/// Every net that must hold still, by root.
fn sensitive(pins: &Pins, watched: &BTreeSet<NodeId>) -> BTreeMap<NodeId, &'static str> {
    let mut nets: BTreeMap<NodeId, &'static str> = watched.iter().map(|&root| (root, "watched net")).collect();
    for (&root, uses) in [&pins.controls, &pins.enables, &pins.clocks].into_iter().flatten() {
        let noun = match pins::kind(uses) {
            PinKind::Clock => "clock",
            PinKind::LatchEnable => "latch enable",
            PinKind::Set => "asynchronous set",
            PinKind::Load => "asynchronous load",
            _ => "asynchronous reset",
        };
        nets.insert(root, noun);
    }
    nets
}

fn finding(graph: &Graph, module: &str, boxes: &[&BlackBox], sensitive: &BTreeMap<NodeId, &'static str>) -> Finding {
    let outputs = boxes.iter().flat_map(|one| &one.outputs).flat_map(|(_, nodes)| nodes.iter().copied());
    let reached = reached(graph, outputs);
    let hanging: Vec<String> = sensitive
        .iter()
        .filter(|(root, _)| reached.contains(root))
        .map(|(&root, noun)| format!("the {noun} `{}`", names::name(graph, root)))
        .collect();
    let taken = format!("there is no text of module `{module}`, so its outputs are taken as clean sources");
    let (severity, message) = match hanging.as_slice() {
        [] => (Severity::Note, taken),
        [one] => (Severity::Warning, format!("{taken}; {one} hangs on them")),
        [first, rest @ ..] => (
            Severity::Warning,
            format!("{taken}; {first} and {} hang on them", words::count(rest.len(), "other pin net")),
        ),
    };
    let instance = |one: &BlackBox| &graph.instances[one.instance.index()];
    let at = boxes.first().and_then(|one| instance(one).span);
    let mut finding = plain(Rule::UnsupportedConstruct, severity, message, at, identity(module));
    finding.trace = boxes
        .iter()
        .take(SHOWN)
        .filter(|one| instance(one).span != at)
        .map(|one| TraceStep::new(instance(one).span, format!("also `{}`", instance(one).path)))
        .collect();
    if boxes.len() > SHOWN {
        finding.notes.push(format!("{} instances in all, {SHOWN} are shown", boxes.len()));
    }
    if hanging.len() > 1 {
        let left_out = hanging.len().saturating_sub(SHOWN);
        let more = if left_out == 0 { String::new() } else { format!(" and {left_out} more") };
        finding.notes.push(format!("on its outputs hang {}{more}", hanging[..hanging.len().min(SHOWN)].join(", ")));
    }
    finding.notes.push(
        "to do: add the file or folder of the module to the scan; if it is a macro without text, make sure that its \
         outputs cannot glitch and sign this off with that reason"
            .to_string(),
    );
    finding
}

/// Tells in the finding about `module` where its text is.
pub(crate) fn name_place(findings: &mut [Finding], module: &str, place: &str) {
    let fingerprint = identity(module).fingerprint;
    for finding in findings.iter_mut().filter(|finding| finding.fingerprint == fingerprint) {
        finding.notes.insert(0, place.to_string());
    }
}

fn identity(module: &str) -> fingerprint::Identity {
    fingerprint::of_text(Rule::UnsupportedConstruct, &["missing module", module])
}

/// The roots that a change of one of `nodes` reaches without passing a cell.
fn reached(graph: &Graph, nodes: impl Iterator<Item = NodeId>) -> BTreeSet<NodeId> {
    let mut open: Vec<NodeId> = nodes.collect();
    let mut seen = BTreeSet::new();
    while let Some(node) = open.pop() {
        if seen.insert(node) {
            open.extend_from_slice(graph.fanout(node));
        }
    }
    seen
}
