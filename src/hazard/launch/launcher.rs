//! Launches in the verdict on a target. The decision about single changes says which source could show which hazard if it
//! changed alone; here each of these pairs must be found in an event, or it is dropped. What events show beyond them is
//! added, fewest changes first. Nothing is passed over: an event that could not be decided leaves the target undecided.

use std::collections::BTreeSet;

use super::Assumptions;
use super::describe::describe;
use super::encode::{Event, Layer};
use super::exact::{Bounds, Inquiry, Target, WHOLE};
use super::fabric::{Fabric, Role};
use super::reach::Reachable;
use super::shown::questions;
use crate::graph::{Graph, NodeId};
use crate::hazard::cone::Edge;
use crate::hazard::solver::Literal;
use crate::hazard::{
    Cause, Cover, HazardKind, LaunchHazard, Method, OpenLaunch, Options, Pair, Reach, Step, TargetVerdict, Undecided,
    Witness,
};

/// How many sources a witness is freed of, one at a time, to move as few as possible.
const FEWER: usize = 32;

/// Literals and waveforms of all events of a target that are kept from pass to pass.
const KEPT: usize = 1_000_000;

/// What all answers about one target may cost; see [`Inquiry::effort`]. Some seconds of one core.
const EFFORT: u64 = 100_000_000;

/// Why a cover does not hold under launches.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(in crate::hazard) enum Unproven {
    /// A launch still shows a hazard of this cause.
    Shows(Cause),
    Open,
}

/// The design, ready for questions about many targets; see the module documentation.
pub struct Launcher<'a> {
    pub(super) fabric: Fabric<'a>,
    pub(super) options: Options,
}

impl<'a> Launcher<'a> {
    /// `targets` are those that will be asked about.
    pub fn new(graph: &Graph, targets: &[NodeId], assumptions: &'a Assumptions, options: &Options) -> Self {
        Self { fabric: Fabric::new(graph, targets, assumptions, options.ignore_operators), options: *options }
    }

    /// The verdict under events, from that on single changes with every pair listed. What is shown from some state is
    /// asked again from the reachable ones, where these are known.
    pub fn refine(&self, verdict: TargetVerdict) -> TargetVerdict {
        let Some(net) = self.fabric.place(verdict.target) else { return verdict };
        let refined = Refinement::new(self, net, verdict.clone()).run(None);
        if refined.is_clean() {
            return refined;
        }
        match self.reachable(net) {
            Some(reachable) => Refinement::new(self, net, verdict).run(Some(&reachable)),
            None => refined,
        }
    }

    fn reachable(&self, net: Edge) -> Option<Reachable> {
        Reachable::of(&self.fabric, &self.fabric.expanded(&[net.node()]))
    }

    /// Whether no event shows a hazard at the target of `verdict` once the terms are there.
    pub(in crate::hazard) fn proves(&self, verdict: &TargetVerdict, cover: &Cover) -> Result<(), Unproven> {
        let Some(net) = self.fabric.place(verdict.target) else { return Err(Unproven::Open) };
        let terms = |list: &[Vec<(NodeId, bool)>]| -> Option<Vec<Vec<Edge>>> {
            let literal =
                |&(node, positive): &(NodeId, bool)| self.fabric.place(node).map(|edge| edge.inverted_if(!positive));
            list.iter().map(|term| term.iter().map(literal).collect()).collect()
        };
        let (Some(products), Some(sums)) = (terms(&cover.products), terms(&cover.sums)) else {
            return Err(Unproven::Open);
        };
        let covered = Target { net: (!cover.replaces).then_some(net), products, sums };
        let whole = self.fabric.closure(&covered.nodes(), WHOLE);
        let leans = verdict.reach == Reach::ReachableStates;
        let reachable = if leans { self.reachable(net) } else { None };
        let bounds = Bounds { whole: whole.as_deref(), reachable: reachable.as_ref() };
        let mut effort = EFFORT;
        for event in self.events(&covered) {
            let inquiry = Inquiry::new(&self.fabric, event, &covered, bounds, self.options.conflicts);
            let mut inquiry = inquiry.map_err(|_| Unproven::Open)?;
            inquiry.effort = effort.saturating_sub(inquiry.encoder.size() as u64);
            for (step, _, wanted) in questions(&inquiry) {
                match inquiry.ask(&wanted) {
                    Ok(false) => {}
                    Err(_) => return Err(Unproven::Open),
                    // Added terms leave the function as it is, so the present logic tells the cause.
                    Ok(true) => {
                        let launch = describe(&inquiry, net, step).launch;
                        return Err(Unproven::Shows(launch.map_or(Cause::Logic, |launch| launch.cause)));
                    }
                }
            }
            effort = inquiry.effort;
            if effort == 0 {
                return Err(Unproven::Open);
            }
        }
        Ok(())
    }

    pub(super) fn events(&self, target: &Target) -> Vec<Event> {
        let roots = self.fabric.roots(&target.nodes(), target.plain_node());
        roots.into_iter().flat_map(|root| [false, true].map(|rises| Event { root, rises })).collect()
    }
}

/// The events of one target that can show anything. Few are kept from pass to pass, many are made again.
struct Events<'a, 'b> {
    launcher: &'b Launcher<'a>,
    bounds: Bounds<'b>,
    target: Target,
    events: Vec<(Event, Option<Inquiry<'b>>)>,
    /// The events that some question was not asked of, and why.
    left: Vec<(Event, Undecided)>,
    effort: u64,
    /// Whether some answer leaned on the reachable states.
    lean: bool,
}

impl<'a, 'b> Events<'a, 'b> {
    fn new(launcher: &'b Launcher<'a>, bounds: Bounds<'b>, target: &Target) -> Self {
        let mut this = Self {
            launcher,
            bounds,
            target: target.clone(),
            events: Vec::new(),
            left: Vec::new(),
            effort: EFFORT,
            lean: false,
        };
        let mut kept = 0;
        for event in launcher.events(target) {
            match this.inquiry(event) {
                Ok(inquiry) if inquiry.is_suspect() => {
                    kept += inquiry.encoder.size();
                    this.events.push((event, (kept < KEPT).then_some(inquiry)));
                }
                Ok(_) => {}
                Err(reason) => this.left.push((event, reason)),
            }
        }
        this
    }

    fn inquiry(&mut self, event: Event) -> Result<Inquiry<'b>, Undecided> {
        if self.effort == 0 {
            return Err(Undecided::Budget);
        }
        let conflicts = self.launcher.options.conflicts;
        let inquiry = Inquiry::new(&self.launcher.fabric, event, &self.target, self.bounds, conflicts);
        let inquiry = inquiry.map_err(|_| Undecided::Loop)?;
        self.effort = self.effort.saturating_sub(inquiry.encoder.size() as u64);
        Ok(inquiry)
    }

    fn each(&mut self, mut work: impl FnMut(&mut Inquiry<'b>)) {
        let mut events = std::mem::take(&mut self.events);
        for (event, kept) in &mut events {
            let mut made = None;
            let inquiry = match kept {
                Some(inquiry) => inquiry,
                None => match self.inquiry(*event) {
                    Ok(inquiry) => made.insert(inquiry),
                    Err(reason) => {
                        self.left.push((*event, reason));
                        continue;
                    }
                },
            };
            inquiry.effort = self.effort;
            work(inquiry);
            self.effort = inquiry.effort;
            self.lean |= inquiry.leans;
        }
        self.events = events;
    }
}

/// A (source, kind) pair that a single change could show.
pub(super) struct Candidate {
    pub(super) source: NodeId,
    /// A free node.
    pub(super) node: usize,
    pub(super) kind: HazardKind,
    pub(super) supposed: Result<Witness, Undecided>,
    pub(super) found: Option<Witness>,
    /// Why some event that could show it stayed open.
    pub(super) open: Option<Undecided>,
}

/// What a candidate's event must be like, in the order in which they are looked for.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Fit {
    /// The witness that is known, which was made to be read, happens in it.
    Supposed,
    /// The source changes once.
    Clean,
    /// The source is a latch that shows a hazard itself.
    Any,
}

/// One target being worked on.
pub(super) struct Refinement<'a, 'b> {
    launcher: &'b Launcher<'a>,
    pub(super) net: Edge,
    pub(super) target: Target,
    pub(super) verdict: TargetVerdict,
    /// The free nodes of the target's combinational cone.
    frees: Vec<usize>,
    /// Whether latches are among them.
    has_latches: bool,
    pub(super) candidates: Vec<Candidate>,
    /// Pairs that no event is asked about: what a combinational loop leaves open.
    pub(super) kept: Vec<Pair>,
    open: BTreeSet<OpenLaunch>,
}

impl<'a, 'b> Refinement<'a, 'b> {
    pub(super) fn new(launcher: &'b Launcher<'a>, net: Edge, mut verdict: TargetVerdict) -> Self {
        let fabric = &launcher.fabric;
        let frees = fabric.frees(&[net.node()]);
        let latch = |&node: &usize| fabric.cell(node).is_some_and(|cell| cell.enable.is_some());
        let has_latches = frees.iter().any(latch);
        let mut candidates = Vec::new();
        let mut kept = Vec::new();
        for pair in std::mem::take(&mut verdict.pairs) {
            let place = fabric.place(pair.source).map(Edge::node);
            let known = place.filter(|&node| matches!(fabric.role(node), Role::Outside | Role::Cell(_)));
            let behind_loop = pair.undecided.iter().any(|&(_, reason)| reason != Undecided::Budget);
            let Some(node) = known.filter(|_| !behind_loop) else {
                kept.push(pair);
                continue;
            };
            let hazards = pair.hazards.into_iter().map(|(kind, witness)| (kind, Ok(witness)));
            let open = pair.undecided.into_iter().map(|(kind, reason)| (kind, Err(reason)));
            candidates.extend(hazards.chain(open).map(|(kind, supposed)| Candidate {
                source: pair.source,
                node,
                kind,
                supposed,
                found: None,
                open: None,
            }));
        }
        let target = Target::plain(net);
        Self { launcher, net, target, verdict, frees, has_latches, candidates, kept, open: BTreeSet::new() }
    }

    fn run(mut self, reachable: Option<&Reachable>) -> TargetVerdict {
        let fabric = &self.launcher.fabric;
        let whole = fabric.closure(&self.target.nodes(), WHOLE);
        let bounds = Bounds { whole: whole.as_deref(), reachable };
        let mut events = Events::new(self.launcher, bounds, &self.target);
        // A witness that is known already was made to be read; it is kept where it fits some event.
        events.each(|inquiry| self.confirm(inquiry, Fit::Supposed));
        events.each(|inquiry| self.confirm(inquiry, Fit::Clean));
        if self.has_latches {
            events.each(|inquiry| self.confirm(inquiry, Fit::Any));
            events.each(|inquiry| self.through_latches(inquiry));
        }
        let mut launches = Vec::new();
        events.each(|inquiry| self.launches(inquiry, &mut launches));
        launches.sort_by_key(|found: &LaunchHazard| found.witness.changes.len());
        for (event, reason) in std::mem::take(&mut events.left) {
            for candidate in &mut self.candidates {
                if fabric.role(candidate.node) != Role::Outside || candidate.node == event.root {
                    candidate.open = Some(reason);
                }
            }
            self.leave_open(event, reason);
        }
        let leans = events.lean;
        if !self.candidates.is_empty() {
            self.verdict.method = Method::Launches;
        }
        let asked = !events.events.is_empty();
        self.verdict.launch_method = Some(if asked { Method::Solver } else { Method::Structure });
        let mut verdict = self.finish(launches);
        if reachable.is_some() && (leans || !verdict.is_clean()) {
            verdict.reach = Reach::ReachableStates;
            verdict.launches.iter_mut().for_each(|found| found.reach = Reach::ReachableStates);
        }
        verdict
    }

    fn leave_open(&mut self, event: Event, reason: Undecided) {
        let root = self.launcher.fabric.cone.origin[event.root];
        self.open.insert(OpenLaunch { root, rises: event.rises, reason });
    }

    /// Looks for the candidates in one event: each pair's source alone may move in the step that shows it.
    pub(super) fn confirm(&mut self, inquiry: &mut Inquiry<'_>, fit: Fit) {
        for index in 0..self.candidates.len() {
            let candidate = &self.candidates[index];
            if candidate.found.is_some() {
                continue;
            }
            let (source, kind) = (candidate.node, candidate.kind);
            let witness = match (&candidate.supposed, fit) {
                (Ok(witness), Fit::Supposed) => Some(witness.clone()),
                (Err(_), Fit::Supposed) => continue,
                (_, Fit::Clean | Fit::Any) => None,
            };
            let steps = match self.launcher.fabric.role(source) {
                Role::Cell(_) => vec![Step::Second, Step::First],
                _ if source == inquiry.encoder.event.root => vec![Step::First],
                _ => continue,
            };
            for step in steps {
                let Some(alone) = self.alone(inquiry, step, source, fit) else { continue };
                for (asked, shows, mut wanted) in questions(inquiry) {
                    if asked != step || shows != kind {
                        continue;
                    }
                    wanted.extend_from_slice(&alone);
                    if let Some(witness) = &witness {
                        wanted.extend(self.as_supposed(inquiry, step, witness));
                    }
                    let answer = inquiry.ask(&wanted);
                    let candidate = &mut self.candidates[index];
                    match answer {
                        Ok(true) => {
                            let mut found = describe(inquiry, self.net, step);
                            if let Some(witness) = &witness {
                                (found.changes, found.holds) = (witness.changes.clone(), witness.holds.clone());
                            }
                            // The event of a source that changes by itself is that change.
                            found.launch = found.launch.filter(|launch| {
                                self.launcher.fabric.role(source) != Role::Outside || launch.is_of_latches()
                            });
                            candidate.found = Some(found);
                        }
                        Ok(false) => {}
                        Err(reason) => candidate.open = Some(reason),
                    }
                    if candidate.found.is_some() {
                        break;
                    }
                }
                if self.candidates[index].found.is_some() {
                    break;
                }
            }
        }
    }

    /// Literals that say that of the target's sources only `source` moves in a step; `None` when it cannot.
    fn alone(&self, inquiry: &mut Inquiry<'_>, step: Step, source: usize, fit: Fit) -> Option<Vec<Literal>> {
        let layer = if step == Step::First { Layer::First } else { Layer::Second };
        if !inquiry.encoder.done(layer, Edge::new(source, false)).wave.may_move() {
            return None;
        }
        let mut literals = Vec::new();
        let raced = |inquiry: &Inquiry<'_>, node: usize| {
            inquiry.encoder.latches[layer as usize].get(&node).map(|does| does.raced)
        };
        for &node in self.frees.iter().filter(|&&node| node != source) {
            literals.extend(inquiry.encoder.changes(layer, node).map(|changes| !changes));
            literals.extend(raced(inquiry, node).map(|raced| !raced));
        }
        let h = inquiry.encoder.done(layer, Edge::new(source, false)).wave.h;
        let does: Vec<Literal> = raced(inquiry, source).into_iter().chain(h).collect();
        match fit {
            // Nothing is left that was not asked about before.
            Fit::Any if does.is_empty() => return None,
            Fit::Any => {}
            Fit::Supposed | Fit::Clean => literals.extend(does.into_iter().map(|does| !does)),
        }
        Some(literals)
    }

    /// Literals that say that the sources are as a witness has them when a step begins.
    fn as_supposed(&self, inquiry: &Inquiry<'_>, step: Step, witness: &Witness) -> Vec<Literal> {
        let layer = if step == Step::First { Layer::First } else { Layer::Second };
        let place = |node: NodeId| self.launcher.fabric.place(node);
        let values = witness.holds.iter().chain(&witness.changes);
        let literals = values.filter_map(|&(node, value)| {
            let wave = inquiry.encoder.done(layer, place(node)?).wave;
            Some(wave.i.inverted_if(!value))
        });
        literals.collect()
    }

    /// Changes of a root that reach the target through latches only, where no pair of a latch tells of the same kind.
    fn through_latches(&mut self, inquiry: &mut Inquiry<'_>) {
        let root = inquiry.encoder.event.root;
        if self.launcher.fabric.role(root) != Role::Outside {
            return;
        }
        for (step, kind, wanted) in questions(inquiry) {
            let known = self.candidates.iter().any(|candidate| {
                let latch = self.launcher.fabric.cell(candidate.node).is_some_and(|cell| cell.enable.is_some());
                candidate.kind == kind && candidate.found.is_some() && (latch || candidate.node == root)
            });
            if step != Step::First || known {
                continue;
            }
            match inquiry.ask(&wanted) {
                Ok(true) => {
                    let found = Some(describe(inquiry, self.net, step));
                    let source = self.launcher.fabric.cone.origin[root];
                    let supposed = Err(Undecided::Budget);
                    self.candidates.push(Candidate { source, node: root, kind, supposed, found, open: None });
                }
                Ok(false) => {}
                Err(reason) => self.leave_open(inquiry.encoder.event, reason),
            }
        }
    }

    /// What an event shows beyond the pairs, one witness per kind.
    fn launches(&mut self, inquiry: &mut Inquiry<'_>, launches: &mut Vec<LaunchHazard>) {
        let mut shown: BTreeSet<HazardKind> = BTreeSet::new();
        for (step, kind, wanted) in questions(inquiry) {
            if step == Step::First || shown.contains(&kind) {
                continue;
            }
            let explained = self.candidates.iter().any(|one| one.kind == kind && one.found.is_some());
            match inquiry.ask(&wanted) {
                Ok(true) => {
                    if !self.move_fewer(inquiry, step, wanted) {
                        self.leave_open(inquiry.encoder.event, Undecided::Budget);
                        continue;
                    }
                    let witness = describe(inquiry, self.net, step);
                    let cause = witness.launch.as_ref().map(|launch| launch.cause);
                    if !explained || cause == Some(Cause::Function) {
                        shown.insert(kind);
                        launches.push(LaunchHazard { kind, witness, reach: Reach::AnyState });
                    }
                }
                Ok(false) => {}
                Err(reason) if !explained => self.leave_open(inquiry.encoder.event, reason),
                Err(_) => {}
            }
        }
    }

    /// Asks again with ever more sources held still; the last model is one that fits, unless the effort was spent, which
    /// gives false.
    pub(super) fn move_fewer(&self, inquiry: &mut Inquiry<'_>, step: Step, mut wanted: Vec<Literal>) -> bool {
        let mut stale = false;
        let layers: &[Layer] = if step == Step::Both { &[Layer::First, Layer::Second] } else { &[Layer::Second] };
        let mut tried = 0;
        for &node in &self.frees {
            for &layer in layers {
                let Some(changes) = inquiry.encoder.changes(layer, node).filter(|_| tried < FEWER) else { continue };
                tried += 1;
                wanted.push(!changes);
                stale = inquiry.ask(&wanted) != Ok(true);
                if stale {
                    wanted.pop();
                }
            }
        }
        // What was possible before is so again.
        !stale || inquiry.ask(&wanted) == Ok(true)
    }

    fn finish(mut self, launches: Vec<LaunchHazard>) -> TargetVerdict {
        let mut pairs = self.kept;
        self.candidates.sort_by_key(|candidate| (candidate.source, candidate.kind));
        for candidate in self.candidates {
            let open = candidate.found.is_none().then_some(candidate.open).flatten();
            if candidate.found.is_none() && open.is_none() {
                continue;
            }
            let at = match pairs.iter().position(|pair| pair.source == candidate.source) {
                Some(at) => at,
                None => {
                    pairs.push(Pair { source: candidate.source, hazards: Vec::new(), undecided: Vec::new() });
                    pairs.len() - 1
                }
            };
            pairs[at].hazards.extend(candidate.found.map(|witness| (candidate.kind, witness)));
            pairs[at].undecided.extend(open.map(|reason| (candidate.kind, reason)));
        }
        pairs.sort_by_key(|pair| pair.source);
        TargetVerdict { pairs, launches, open_launches: self.open.into_iter().collect(), ..self.verdict }
    }
}
