//! Puts a verdict into words: the list of hazards with their witnesses, the places on the two ways of the change, and
//! the cover. What a hazard means is the rule's business and is passed in as a judge.
//!
//! The first of the hazards is the lead, the one that the message and the trace are about: the worst, and among equals
//! the one that needs the fewest other signals to hold, because it is the easiest to follow.

use std::collections::BTreeSet;

use super::cover_text;
use super::finding::{CoverText, Finding, Hazard, Pin, Rule, Severity, TraceStep, Transition, Verdict};
use super::{Context, fingerprint, launch_text, loop_text, names, pins, remembered, words};
use crate::graph::{Graph, InstanceId, NodeId, NodeKind};
use crate::hazard::{
    self, Cause, HazardKind, LaunchHazard, Path, Paths, Reach, Step, TargetVerdict, Undecided, Witness,
};
use crate::source::Span;

/// What a hazard of a kind does to this pin: how bad it is, and in words.
pub(super) type Judge<'a> = dyn Fn(HazardKind) -> (Severity, String) + Sync + 'a;

/// What a rule knows about a net before it looks at the verdict.
pub(super) struct Subject<'a> {
    pub rule: Rule,
    pub pin: Pin,
    /// "the asynchronous reset `top.rst_n` of 17 flip-flops".
    pub what: String,
    pub judge: &'a Judge<'a>,
    /// What to do about it, besides the cover.
    pub cure: &'a str,
}

/// The finding on one net, or `None` when the net is clean.
pub(super) fn finding(
    graph: &Graph,
    verdict: &TargetVerdict,
    subject: &Subject<'_>,
    context: &Context<'_>,
) -> Option<Finding> {
    if verdict.is_clean() {
        return None;
    }
    let root = verdict.target;
    let net = names::name(graph, root);
    let hazards = ranked(graph, verdict, subject.judge);
    let undriven = pins::is_undriven(graph, root);
    let sources: BTreeSet<NodeId> =
        verdict.pairs.iter().filter(|pair| !pair.hazards.is_empty()).map(|pair| pair.source).collect();
    let identity = fingerprint::of_cone(graph, subject.rule, &net, &[root]);
    let mut finding = Finding {
        rule: subject.rule,
        severity: Severity::Warning,
        verdict: Verdict::Undecided,
        message: String::new(),
        at: place(graph, root),
        declared: names::declaration(graph, root),
        trace: Vec::new(),
        instance: graph.instances[names::instance(graph, root).index()].path.clone(),
        net: net.clone(),
        bits: None,
        pin: Some(subject.pin.clone()),
        hazards: hazards.iter().map(|ranked| ranked.hazard(graph, root, context)).collect(),
        cover: None,
        loop_: None,
        notes: Vec::new(),
        fingerprint: identity.fingerprint,
        family: identity.family,
        signoff: None,
        known: false,
    };
    if let Some(lead) = hazards.first() {
        finding.severity = lead.severity;
        finding.verdict = Verdict::Proven;
        let can = words::can(lead.kind, &subject.what);
        let paths = hazard::paths(graph, root, lead.witness);
        let launch = lead.witness.launch.as_ref().filter(|launch| lead.launched || launch.is_of_latches());
        match launch {
            Some(launch) => {
                finding.message = launch_text::message(graph, launch, &can);
                finding.trace = launch_text::trace(graph, root, launch, &paths, finding.at);
            }
            None => {
                let who = words::who(&names::name(graph, lead.source), sources.len());
                finding.message = format!("{who} {can}");
                finding.trace = loop_text::trace(graph, root, lead.witness, lead.kind, finding.at)
                    .unwrap_or_else(|| trace(graph, root, lead.source, &paths, finding.at));
            }
        }
        finding.notes.extend(loop_text::note(graph, lead.witness));
        let (cover, note) = cover(graph, verdict, context);
        finding.cover = cover;
        finding.notes.extend(note);
        finding.notes.extend(launch_text::notes(verdict));
    } else {
        finding.message = format!("not decided: whether {} can glitch", subject.what);
        let done = if undriven { "declared" } else { "driven" };
        finding.trace.push(TraceStep::new(finding.at, format!("`{net}` is {done} here")));
    }
    finding.notes.extend(undecided(graph, verdict));
    if !undriven && !launch_text::has_its_own_cure(verdict) {
        finding.notes.push(subject.cure.to_string());
    }
    Some(finding)
}

/// The cover of a target in words, or why there is none.
fn cover(graph: &Graph, verdict: &TargetVerdict, context: &Context<'_>) -> (Option<CoverText>, Option<String>) {
    match remembered::cover(graph, verdict, context) {
        Ok(cover) => match cover_text::of(graph, verdict.target, &cover) {
            Some(text) => (Some(text), None),
            None => {
                (None, Some("a cover exists, but it needs signals that have no name; name them to see it".to_string()))
            }
        },
        Err(withheld) => (None, Some(format!("no cover is offered because {}", withheld.words()))),
    }
}

/// Where a node was written: the node itself, else the wire it drives.
pub(super) fn place(graph: &Graph, node: NodeId) -> Option<Span> {
    graph.span(node).or_else(|| names::wire_of(graph, node).and_then(|wire| graph.span(wire)))
}

/// One hazard with what the rule thinks of it.
struct Ranked<'a> {
    source: NodeId,
    kind: HazardKind,
    witness: &'a Witness,
    severity: Severity,
    harm: String,
    reach: Reach,
    /// Shown by no single change; the source is the root of the event.
    launched: bool,
}

/// All hazards of a target, the lead first, the others by source and kind, those of launches behind them.
fn ranked<'a>(graph: &Graph, verdict: &'a TargetVerdict, judge: &Judge<'_>) -> Vec<Ranked<'a>> {
    let mut all: Vec<Ranked<'a>> = Vec::new();
    for pair in &verdict.pairs {
        for (kind, witness) in &pair.hazards {
            let (severity, harm) = judge(*kind);
            let reach = verdict.reach;
            all.push(Ranked { source: pair.source, kind: *kind, witness, severity, harm, reach, launched: false });
        }
    }
    for LaunchHazard { kind, witness, reach } in &verdict.launches {
        let Some(launch) = &witness.launch else { continue };
        let (severity, harm) = judge(*kind);
        all.push(Ranked { source: launch.root, kind: *kind, witness, severity, harm, reach: *reach, launched: true });
    }
    all.sort_by_cached_key(|ranked| (ranked.launched, names::name(graph, ranked.source), ranked.kind));
    let lead = (0..all.len()).min_by_key(|&index| {
        let ranked = &all[index];
        (std::cmp::Reverse(ranked.severity), ranked.launched, ranked.kind, ranked.witness.holds.len(), index)
    });
    if let Some(lead) = lead {
        all[..=lead].rotate_right(1);
    }
    all
}

/// All hazards of a target in words, the lead first.
pub(super) fn hazards(graph: &Graph, verdict: &TargetVerdict, judge: &Judge<'_>, context: &Context<'_>) -> Vec<Hazard> {
    ranked(graph, verdict, judge).iter().map(|ranked| ranked.hazard(graph, verdict.target, context)).collect()
}

impl Ranked<'_> {
    fn hazard(&self, graph: &Graph, target: NodeId, context: &Context<'_>) -> Hazard {
        let mut hazard = hazard_text(graph, target, self.kind, self.witness, self.harm.clone());
        hazard.transition.calm = context.options.ignore_operators;
        hazard.reach = launch_text::reach(self.reach);
        hazard
    }
}

/// A witness in names. Under a change of one source alone every hazard is a logic hazard: there is no third value
/// between the two endpoints that the function could pass through.
pub(super) fn hazard_text(graph: &Graph, target: NodeId, kind: HazardKind, witness: &Witness, harm: String) -> Hazard {
    let mut before: Vec<(String, bool)> = Vec::new();
    let mut after: Vec<(String, bool)> = Vec::new();
    for &(node, value) in &witness.changes {
        before.push((names::name(graph, node), value));
        after.push((names::name(graph, node), !value));
    }
    for &(node, value) in &witness.holds {
        before.push((names::name(graph, node), value));
        after.push((names::name(graph, node), value));
    }
    before.sort();
    after.sort();
    let mut changes: Vec<String> = witness.changes.iter().map(|&(node, _)| names::name(graph, node)).collect();
    changes.sort();
    let net = names::name(graph, target);
    let launch = witness.launch.as_ref();
    let cause = match launch.map(|launch| launch.cause) {
        Some(Cause::Function) => "function",
        Some(Cause::Logic) | None => "logic",
    };
    // Where both steps matter, a source may come back to where it was.
    if let Some(launch) = launch.filter(|launch| launch.step == Step::Both) {
        for (name, value) in &mut after {
            let last = launch.first.iter().chain(&launch.second).rfind(|&&(node, _)| names::name(graph, node) == *name);
            *value = last.map_or(*value, |&(_, before)| !before);
        }
    }
    let ends = loop_text::moved(graph, target, kind, witness);
    for (name, value) in &mut after {
        *value = ends.get(name).copied().unwrap_or(*value);
    }
    Hazard {
        net,
        moved: ends.into_keys().collect(),
        kind: kind.name(),
        cause,
        changes,
        harm,
        before,
        after,
        pin: witness.target,
        transition: Transition { target, witness: witness.clone(), calm: false },
        launch: launch.map(|launch| launch_text::of(graph, launch)),
        reach: launch_text::reach(Reach::AnyState),
    }
}

/// One sentence per reason why questions about this target stayed open.
fn undecided(graph: &Graph, verdict: &TargetVerdict) -> Vec<String> {
    let mut notes = Vec::new();
    for reason in [Undecided::Budget, Undecided::Loop, Undecided::Race, Undecided::Undriven] {
        let open = |why: &(HazardKind, Undecided)| why.1 == reason;
        let pairs = verdict.pairs.iter().filter(|pair| pair.undecided.iter().any(open)).map(|pair| pair.source);
        let launches = verdict.open_launches.iter().filter(|open| open.reason == reason).map(|open| open.root);
        let sources: BTreeSet<NodeId> = pairs.chain(launches).collect();
        let Some(&first) = sources.first() else { continue };
        let first = names::name(graph, first);
        let who = match sources.len() {
            1 => format!("a change of `{first}`"),
            more => format!("a change of `{first}` or of {}", words::count(more - 1, "other signal")),
        };
        notes.push(match reason {
            Undecided::Budget => format!(
                "undecided for {who}: no proof within the budget of the solver; this is not a pass. Drive the pin from \
                 a flip-flop, or split the logic in front of it"
            ),
            Undecided::Loop => format!(
                "undecided for {who}: the change passes a combinational loop that could not be followed, because it is \
                 too large, has no stable state for some inputs, or several of its inputs can change at once; this is \
                 not a pass. Break the loop (rule combinational-loop), or use a latch cell"
            ),
            Undecided::Race => format!(
                "undecided for {who}: from some stable state, which state a combinational loop settles in depends on \
                 delays, so what this net ends at is not known; this is not a pass. Let each change have one outcome: \
                 add the term that holds the state meanwhile, or use a latch cell (rule combinational-loop)"
            ),
            Undecided::Undriven => {
                "undecided because nothing drives this net: it may float, and what it shows is not in \
                                    the design; this is not a pass. Connect it, or tie it to a constant"
                    .to_string()
            }
        });
    }
    notes
}

/// The most labels shown for one way; what is left out is said in the last.
const SHOWN_HOPS: usize = 8;

/// The places of a hazard in the order in which the change meets them: the stem, both ways, where they meet, the target.
fn trace(graph: &Graph, target: NodeId, source: NodeId, paths: &Paths, at: Option<Span>) -> Vec<TraceStep> {
    let mut steps = vec![stem(graph, source, paths)];
    let meet_place = place(graph, paths.meet);
    for (number, way) in paths.ways.iter().enumerate() {
        let mut hops = hops(graph, paths, way);
        // A way that runs within the place where both meet is told by its length alone.
        if hops.iter().all(|hop| hop.at == meet_place) {
            hops.clear();
        }
        for (letter, hop) in hops.into_iter().enumerate() {
            let letter = char::from(b'a' + (letter % 26) as u8);
            let text = format!("{}{letter}: {}", number + 1, hop.text);
            steps.push(TraceStep { way: Some(number as u8 + 1), ..TraceStep::new(hop.at, text) });
        }
    }
    let meet = words::gate(graph, paths.meet);
    let lengths: Vec<String> = (paths.ways.iter().enumerate())
        .map(|(number, way)| {
            format!(
                "{} ({}, {})",
                number + 1,
                words::count(way.gates, "gate"),
                words::count(way.inversions, "inversion")
            )
        })
        .collect();
    let joined = match graph.kind(paths.meet) {
        NodeKind::OpOut(_) | NodeKind::OpIn(_) => {
            format!("inside {meet} no implementation is fixed before synthesis: a change of its result may glitch")
        }
        NodeKind::Table(_) if paths.ways.len() < 2 => {
            format!("{meet}, whose table has no row for x that promises a still output here")
        }
        _ => format!("paths {} meet in {meet}", lengths.join(" and ")),
    };
    let target_name = names::name(graph, target);
    let between = paths.tail.iter().filter(|&&node| node != paths.meet && counts_as_gate(graph, node)).count();
    if between == 0 && meet_place == at {
        steps.push(TraceStep::new(at, joined));
    } else {
        steps.push(TraceStep::new(meet_place, joined));
        let way = match between {
            0 => "the pulse reaches".to_string(),
            _ => format!("{} further, the pulse reaches", words::count(between, "gate")),
        };
        steps.push(TraceStep::new(at, format!("{way} `{target_name}`")));
    }
    steps
}

/// Where the change splits, at the declaration of that net. Deep in the hierarchy the net has another name than the
/// signal that the message is about.
fn stem(graph: &Graph, source: NodeId, paths: &Paths) -> TraceStep {
    let name = names::name(graph, paths.stem);
    let signal = names::name(graph, source);
    let same = graph.root(paths.stem) == graph.root(source) && name != signal;
    let also = if same { format!(", which is `{signal}`,") } else { String::new() };
    let does = if paths.ways.len() > 1 { "splits here into paths 1 and 2" } else { "changes" };
    let wire = names::wire_of(graph, paths.stem);
    if wire.is_none() && !matches!(graph.kind(paths.stem), NodeKind::Source(_)) {
        let text = format!("the output of {} {does}", words::gate(graph, paths.stem));
        return TraceStep::new(place(graph, paths.stem), text);
    }
    let wire = wire.and_then(|wire| graph.span(wire));
    TraceStep::new(wire.or_else(|| place(graph, paths.stem)), format!("`{name}`{also} {does}"))
}

/// A gate to the reader: wires do not count, an operator counts once, at its exit.
fn counts_as_gate(graph: &Graph, node: NodeId) -> bool {
    matches!(graph.kind(node), NodeKind::Gate(_) | NodeKind::Table(_) | NodeKind::OpOut(_))
}

/// A stretch of a way that one label covers: gates written at one place, or a step through a port.
struct Hop {
    at: Option<Span>,
    text: String,
}

/// The gates of one place while they are being collected.
#[derive(Default)]
struct Stretch {
    first: Option<NodeId>,
    at: Option<Span>,
    gates: usize,
    inversions: usize,
}

/// The labels between the stem and the meeting gate, both left out.
fn hops(graph: &Graph, paths: &Paths, way: &Path) -> Vec<Hop> {
    let mut hops: Vec<Hop> = Vec::new();
    let mut stretch = Stretch::default();
    let mut gates_in: Vec<usize> = Vec::new();
    let mut scope: InstanceId = names::instance(graph, paths.stem);
    let mut inside = None;
    for step in &way.steps {
        let node = step.node;
        if node == paths.stem || node == paths.meet {
            continue;
        }
        match graph.kind(node) {
            NodeKind::OpIn(operator) => inside = Some(operator),
            NodeKind::OpOut(_) => inside = None,
            _ if inside.is_some() => continue,
            _ => {}
        }
        if graph.kind(node) == NodeKind::Wire {
            let Some(name) = graph.node_name(node) else { continue };
            let net = &graph.nets[name.net.index()];
            let enters = net.instance != scope;
            if let Some(hop) = stretch.finish(graph, Some(node)) {
                gates_in.push(stretch.gates);
                hops.push(hop);
            } else if enters {
                let path = &graph.instances[net.instance.index()].path;
                gates_in.push(0);
                hops.push(Hop { at: Some(net.span), text: format!("passes `{path}.{}{}`", net.name, name.suffix) });
            }
            scope = net.instance;
            stretch = Stretch::default();
        } else {
            let at = graph.span(node);
            if stretch.first.is_some() && stretch.at != at {
                if let Some(hop) = stretch.finish(graph, None) {
                    gates_in.push(stretch.gates);
                    hops.push(hop);
                }
                stretch = Stretch::default();
            }
            stretch.first.get_or_insert(node);
            stretch.at = at;
            if counts_as_gate(graph, node) {
                stretch.gates += 1;
            }
            if let NodeKind::Gate(kind) = graph.kind(node) {
                stretch.inversions += usize::from(kind.inverts());
            }
        }
    }
    if let Some(hop) = stretch.finish(graph, None) {
        gates_in.push(stretch.gates);
        hops.push(hop);
    }
    if hops.len() > SHOWN_HOPS {
        let left_out: usize = gates_in[SHOWN_HOPS - 1..].iter().sum();
        hops.truncate(SHOWN_HOPS);
        if let Some(last) = hops.last_mut() {
            last.text = format!("from here {} more to where the paths meet, not shown", words::count(left_out, "gate"));
        }
    }
    hops
}

impl Stretch {
    /// The label of this stretch, and the net it drives if the next step is one.
    fn finish(&self, graph: &Graph, drives: Option<NodeId>) -> Option<Hop> {
        let first = self.first?;
        let mut text = match (self.gates, graph.kind(first)) {
            (0 | 1, NodeKind::OpIn(operator) | NodeKind::OpOut(operator)) => {
                format!("through {}", words::with_article(graph.operators[operator.index()].what))
            }
            (0 | 1, NodeKind::Gate(kind)) if kind.inverts() && self.inversions == 1 => {
                let inverts = if graph.fanin(first).len() > 1 { ", inverts" } else { "" };
                format!("{}{inverts}", words::gate(graph, first))
            }
            (0 | 1, _) => words::gate(graph, first),
            (gates, _) => {
                format!("{}, {}", words::count(gates, "gate"), words::count(self.inversions, "inversion"))
            }
        };
        // The excerpt shows the module's own text, where the local name is the one to look for.
        if let Some(name) = drives.and_then(|wire| graph.node_name(wire)) {
            text.push_str(&format!(", drives `{}{}`", graph.nets[name.net.index()].name, name.suffix));
        }
        Some(Hop { at: self.at, text })
    }
}
