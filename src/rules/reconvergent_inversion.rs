//! `reconvergent-inversion`: two ways of one change that meet with opposite inversions, on nets that have no cell behind
//! them to judge by: nets under `// stillwire: watch` (error, every pair listed), and combinational outputs of a top
//! module (warning, one finding per port; a hazard that only an arithmetic operator causes is no finding there, since
//! every implementation has it). What an output shows by a change of one source counts only when some event shows it.

use std::collections::BTreeSet;

use super::evidence::{self, Subject};
use super::finding::{Finding, Pin, PinKind, Rule, Severity};
use super::pins::Verdicts;
use super::{Context, Watch, fingerprint, names, words};
use crate::graph::{Graph, NodeId, Port};
use crate::hazard::{HazardKind, TargetVerdict};

const CURE_WATCH: &str = "to do: register the net, or make its logic hazard-free by its cover";
const CURE_OUTPUT: &str = "to do: register the output if its reader acts on edges or levels at once; harmless if it is \
                           sampled by a clock, then sign it off with that reason";

/// The finding on one bit of a watched net.
pub(super) fn watched(graph: &Graph, verdict: &TargetVerdict, watch: &Watch, context: &Context<'_>) -> Option<Finding> {
    let net = names::name(graph, verdict.target);
    let what = format!("the watched net `{net}`");
    let judge = |_: HazardKind| (Severity::Error, format!("the net was to hold still: {}", watch.reason));
    let pin = pin(PinKind::Watch);
    let subject = Subject { rule: Rule::ReconvergentInversion, pin, what, judge: &judge, cure: CURE_WATCH };
    evidence::finding(graph, verdict, &subject, context)
}

/// The finding on a whole output port: its worst bit shown, its hazardous bits named.
pub(super) fn output(graph: &Graph, port: &Port, verdicts: &Verdicts, context: &Context<'_>) -> Option<Finding> {
    let net = &graph.nets[port.net.index()];
    let path = &graph.instances[port.instance.index()].path;
    let of_bit = |bit: NodeId| verdicts.get(&graph.root(bit)).filter(|verdict| !verdict.is_clean());
    let proven = |verdict: &&TargetVerdict| {
        verdict.pairs.iter().any(|pair| !pair.hazards.is_empty()) || !verdict.launches.is_empty()
    };
    let bits: Vec<usize> =
        (0..net.bits.len()).filter(|&bit| of_bit(net.bits[bit]).as_ref().is_some_and(proven)).collect();
    let verdicts = told(bits.iter().filter_map(|&bit| of_bit(net.bits[bit])));
    let open = || net.bits.iter().find_map(|&bit| of_bit(bit));
    let shown = verdicts.first().or_else(open)?;
    let name = format!("{path}.{}", net.name);
    let what = match (net.bits.iter().position(|&bit| graph.root(bit) == shown.target), port.range) {
        (Some(bit), Some(range)) => format!("bit {} of the combinational output `{name}`", index(range, bit)),
        _ => format!("the combinational output `{name}`"),
    };
    let judge = |_: HazardKind| (Severity::Warning, "whatever reads the output outside sees the pulse".to_string());
    let pin = pin(PinKind::Output);
    let subject = Subject { rule: Rule::ReconvergentInversion, pin, what, judge: &judge, cure: CURE_OUTPUT };
    // A cover speaks of launches only where one is among the hazards.
    let launcher = context.launcher.filter(|_| !shown.launches.is_empty());
    let context = &Context { launcher, ..*context };
    let mut finding = evidence::finding(graph, shown, &subject, context)?;
    if let (Some(&low), Some(&high), Some(range)) = (bits.first(), bits.last(), port.range) {
        let ends = [index(range, low), index(range, high)];
        finding.bits = Some((ends[0].min(ends[1]), ends[0].max(ends[1])));
    }
    let roots: Vec<NodeId> = net.bits.iter().map(|&bit| graph.root(bit)).collect();
    let identity = fingerprint::of_cone(graph, Rule::ReconvergentInversion, &name, &roots);
    (finding.fingerprint, finding.family) = (identity.fingerprint, identity.family);
    finding.instance = path.clone();
    finding.net = name;
    for verdict in &verdicts {
        for hazard in evidence::hazards(graph, verdict, &judge, context) {
            if finding.hazards.iter().all(|known| known.kind != hazard.kind) {
                finding.hazards.push(hazard);
            }
        }
    }
    let alone: BTreeSet<HazardKind> = verdicts.iter().flat_map(|verdict| verdict.alone.iter().copied()).collect();
    if !alone.is_empty() {
        let kinds: Vec<&str> = alone.iter().map(|kind| kind.name()).collect();
        finding.notes.push(format!(
            "{} by a change of one signal alone: whether any edge of the design makes that change, or another that shows \
             the same, stayed undecided",
            kinds.join(" and ")
        ));
    }
    if bits.len() > 1 {
        let all = words::count(net.bits.len(), "bit");
        finding.notes.insert(0, format!("{} of {all} of this port can glitch; one is shown", bits.len()));
    }
    Some(finding)
}

/// The verdicts on the bits of a port as they are told, the one to be shown first: a kind that is confirmed on one bit is
/// not told of another where that stayed open.
fn told<'a>(bits: impl Iterator<Item = &'a TargetVerdict>) -> Vec<TargetVerdict> {
    let mut verdicts: Vec<TargetVerdict> = bits.cloned().collect();
    let kinds = |verdict: &TargetVerdict| -> BTreeSet<HazardKind> {
        let pairs = verdict.pairs.iter().flat_map(|pair| &pair.hazards).map(|&(kind, _)| kind);
        pairs
            .filter(|kind| !verdict.alone.contains(kind))
            .chain(verdict.launches.iter().map(|found| found.kind))
            .collect()
    };
    let confirmed: BTreeSet<HazardKind> = verdicts.iter().flat_map(kinds).collect();
    for verdict in &mut verdicts {
        let told = |kind: &HazardKind| !verdict.alone.contains(kind) || !confirmed.contains(kind);
        verdict.pairs.iter_mut().for_each(|pair| pair.hazards.retain(|(kind, _)| told(kind)));
        verdict.alone.retain(|kind| !confirmed.contains(kind));
        verdict.pairs.retain(|pair| !pair.hazards.is_empty() || !pair.undecided.is_empty());
    }
    verdicts.retain(|verdict| !verdict.is_clean());
    verdicts.sort_by_key(|verdict| kinds(verdict).is_empty());
    verdicts
}

/// The declared index of a bit, counted from the least significant one.
fn index((left, right): (i64, i64), bit: usize) -> i64 {
    if left >= right { right + bit as i64 } else { right - bit as i64 }
}

pub(super) fn pin(kind: PinKind) -> Pin {
    Pin { kind, active: None, edge: None, cells: Vec::new(), count: 0 }
}
