//! Outputs under events. What an output shows is first decided by changes of single sources, one witness per kind; here
//! each of these kinds must be found in an event, or no event may show it. First it is asked whether an event makes the
//! very change of the witness, which needs no logic but that in front of the sources it names; then whether one moves its
//! source alone, and only then whether any event shows the kind.
//! A kind is dropped only when that is proven impossible of every event; what the effort does not settle stays and is
//! told apart. Launches that show more kinds than single changes do are not looked for.

use std::collections::{BTreeMap, BTreeSet};

use super::describe::describe;
use super::encode::{Event, Layer};
use super::exact::{Bounds, Inquiry, Target, WHOLE};
use super::fabric::{Fabric, Role};
use super::launcher::{Candidate, Fit, Launcher, Refinement};
use super::shown::questions;
use crate::hazard::cone::Edge;
use crate::hazard::solver::Literal;
use crate::hazard::{HazardKind, Launch, LaunchHazard, Method, Pair, Reach, Step, TargetVerdict, Undecided, Witness};

/// What all answers about the nets of one call may cost; see [`Inquiry::effort`].
const EFFORT: u64 = 10_000_000;

/// What of it may go to the question whether a kind is shown by its source alone, because a witness that is easy to read
/// is worth less than an answer.
const READABLE: u64 = 250_000;

/// Literals and waveforms beyond which a new inquiry is begun.
const SHARED: usize = 100_000;

impl Launcher<'_> {
    /// Verdicts by changes of single sources, with one witness per kind, under events. The nets are the bits of a port:
    /// each kind that one of them shows is looked for until one is confirmed, and on each net until one kind is.
    pub fn confirm(&self, verdicts: Vec<TargetVerdict>) -> Vec<TargetVerdict> {
        // In a small design every cell behind the nets is settled; that is asked for all of them at once, because what is
        // found from fewer states is found.
        let nodes = verdicts.iter().filter_map(|verdict| self.fabric.place(verdict.target));
        let nodes: Vec<usize> = nodes.map(Edge::node).collect();
        let whole = self.fabric.closure(&nodes, WHOLE);
        let bounds = Bounds { whole: whole.as_deref(), reachable: None };
        let mut group =
            Group { launcher: self, bounds, shared: BTreeMap::new(), changes: BTreeMap::new(), effort: EFFORT };
        let mut known: BTreeSet<HazardKind> = BTreeSet::new();
        let mut nets: Vec<Net<'_, '_>> = Vec::new();
        for verdict in verdicts {
            nets.push(group.begin(verdict, &mut known));
        }
        let mut finished = Vec::new();
        for net in nets {
            finished.push(match net {
                Net::Asked(asked) => group.finish(*asked, &mut known),
                Net::Done(verdict) => verdict,
            });
        }
        finished
    }
}

/// One net on the way to its verdict.
enum Net<'a, 'b> {
    Done(TargetVerdict),
    Asked(Box<Refinement<'a, 'b>>),
}

fn confirmed(candidates: &[Candidate]) -> BTreeSet<HazardKind> {
    candidates.iter().filter(|candidate| candidate.found.is_some()).map(|candidate| candidate.kind).collect()
}

/// Nets that are asked about one after the other.
struct Group<'a, 'b> {
    launcher: &'b Launcher<'a>,
    bounds: Bounds<'b>,
    /// What is known of each event, and about which net it was asked last; `None` where a loop was met.
    shared: BTreeMap<Event, Option<(Inquiry<'b>, Edge)>>,
    /// What is known of each event by way of the sources of witnesses.
    changes: BTreeMap<Event, Inquiry<'b>>,
    effort: u64,
}

/// A kind that was found, and how.
enum Found {
    /// An input changes.
    Pair(Pair),
    Launch(LaunchHazard),
}

impl<'a, 'b> Group<'a, 'b> {
    /// Looks for events that make the changes of the witnesses, as far as they matter; `known` are the kinds that some net
    /// has.
    fn begin(&mut self, verdict: TargetVerdict, known: &mut BTreeSet<HazardKind>) -> Net<'a, 'b> {
        let launcher = self.launcher;
        if verdict.pairs.is_empty() {
            return Net::Done(verdict);
        }
        let Some(net) = launcher.fabric.place(verdict.target) else { return Net::Done(unconfirmed(verdict)) };
        let mut asked = Refinement::new(launcher, net, verdict);
        let mut bare = true;
        // What must be asked anyway comes first.
        asked.candidates.sort_by_key(|candidate| (known.contains(&candidate.kind), candidate.kind, candidate.source));
        for candidate in &mut asked.candidates {
            let Ok(witness) = &candidate.supposed else { continue };
            if known.contains(&candidate.kind) && !bare {
                continue;
            }
            if self.makes(candidate.node, witness) {
                candidate.found = Some(witness.clone());
                known.insert(candidate.kind);
                bare = false;
            }
        }
        Net::Asked(Box::new(asked))
    }

    /// Looks further for the kinds that matter; `known` are those that some net has.
    fn finish(&mut self, mut asked: Refinement<'a, 'b>, known: &mut BTreeSet<HazardKind>) -> TargetVerdict {
        let whole = self.launcher.fabric.closure(&asked.target.nodes(), WHOLE);
        let bounds = Bounds { whole: whole.as_deref(), reachable: None };
        let mut bare = confirmed(&asked.candidates).is_empty();
        let lacking: BTreeSet<HazardKind> = asked.candidates.iter().map(|candidate| candidate.kind).collect();
        let (mut found, mut open) = (Vec::new(), BTreeSet::new());
        for kind in lacking {
            if confirmed(&asked.candidates).contains(&kind) {
                continue;
            }
            if known.contains(&kind) && !bare {
                open.insert(kind);
                continue;
            }
            if self.effort == 0 {
                open.insert(kind);
                continue;
            }
            self.alone(&mut asked, kind);
            if !confirmed(&asked.candidates).contains(&kind) {
                match self.any(&asked, kind, bounds) {
                    Ok(Some(shown)) => found.push(shown),
                    Ok(None) => continue,
                    Err(_) => {
                        open.insert(kind);
                        continue;
                    }
                }
            }
            bare = false;
            known.insert(kind);
        }
        assemble(asked, found, &open)
    }

    /// Looks for events that move the sources of a kind's witnesses and no other source in front of the net.
    fn alone(&mut self, asked: &mut Refinement<'a, 'b>, kind: HazardKind) {
        let launcher = self.launcher;
        let (wanted, others): (Vec<Candidate>, Vec<Candidate>) =
            std::mem::take(&mut asked.candidates).into_iter().partition(|candidate| candidate.kind == kind);
        let events: BTreeSet<Event> = wanted.iter().flat_map(|candidate| launcher.events_of(candidate.node)).collect();
        asked.candidates = wanted;
        let mut readable = self.effort.min(READABLE);
        for event in events {
            if readable == 0 {
                break;
            }
            let Some(inquiry) = self.shared(event, asked.net) else { continue };
            inquiry.effort = readable;
            asked.confirm(inquiry, Fit::Clean);
            let left = inquiry.effort;
            self.effort = self.effort.saturating_sub(readable - left);
            readable = left;
        }
        for candidate in &mut asked.candidates {
            let Some(found) = &mut candidate.found else { continue };
            // The change happens, so it is told as the change of one source that it is.
            found.launch = found.launch.take().filter(Launch::is_of_latches);
        }
        asked.candidates.extend(others);
    }

    /// Whether an event was found that makes the change of a witness by one source: it changes, and what must hold holds.
    /// Whatever else moves in the event may do so before, and then the target shows what the witness says, so no more is
    /// asked.
    fn makes(&mut self, source: usize, witness: &Witness) -> bool {
        let launcher = self.launcher;
        let fabric = &launcher.fabric;
        let changes = witness.changes.iter().map(|&(node, value)| (node, value, !value));
        let values = changes.chain(witness.holds.iter().map(|&(node, value)| (node, value, value)));
        let values: Option<Vec<(Edge, bool, bool)>> =
            values.map(|(node, before, after)| Some((fabric.place(node)?, before, after))).collect();
        let Some(values) = values else { return false };
        // A product of all that is named has every waveform worked out.
        let named = values.iter().map(|&(edge, ..)| edge).collect();
        let target = Target { net: None, products: vec![named], sums: Vec::new() };
        for event in launcher.events_of(source) {
            let layers = layers(fabric, event, source);
            if layers.is_empty() || self.effort == 0 {
                continue;
            }
            let conflicts = launcher.options.conflicts;
            let kept = self.changes.remove(&event);
            let kept = match kept {
                Some(mut inquiry) if inquiry.encoder.size() < SHARED => {
                    let before = inquiry.encoder.size();
                    let aimed = inquiry.aim(&target, self.bounds, conflicts);
                    self.effort = self.effort.saturating_sub((inquiry.encoder.size() - before) as u64);
                    aimed.ok().map(|()| inquiry)
                }
                _ => {
                    let inquiry = Inquiry::new(fabric, event, &target, self.bounds, conflicts).ok();
                    let size = inquiry.as_ref().map_or(0, |inquiry| inquiry.encoder.size());
                    self.effort = self.effort.saturating_sub(size as u64);
                    inquiry
                }
            };
            let Some(mut inquiry) = kept else { continue };
            inquiry.effort = self.effort;
            let made = layers.iter().any(|&layer| {
                let wanted = values.iter().flat_map(|&(edge, before, after)| {
                    let wave = inquiry.encoder.done(layer, edge).wave;
                    [wave.i.inverted_if(!before), wave.f.inverted_if(!after)]
                });
                let wanted: Vec<Literal> = wanted.collect();
                inquiry.ask(&wanted) == Ok(true)
            });
            self.effort = inquiry.effort;
            self.changes.insert(event, inquiry);
            if made {
                return true;
            }
        }
        false
    }

    /// An inquiry about an event, which asks about `net` from here on.
    fn shared(&mut self, event: Event, net: Edge) -> Option<&mut Inquiry<'b>> {
        let launcher = self.launcher;
        let target = Target::plain(net);
        let conflicts = launcher.options.conflicts;
        let bounds = self.bounds;
        let kept = self.shared.entry(event).or_insert_with(|| {
            let inquiry = Inquiry::new(&launcher.fabric, event, &target, bounds, conflicts).ok()?;
            self.effort = self.effort.saturating_sub(inquiry.encoder.size() as u64);
            Some((inquiry, net))
        });
        if let Some((inquiry, aim)) = kept
            && *aim != net
        {
            let before = inquiry.encoder.size();
            let aimed = inquiry.aim(&target, bounds, conflicts);
            self.effort = self.effort.saturating_sub((inquiry.encoder.size() - before) as u64);
            *aim = net;
            if aimed.is_err() {
                *kept = None;
            }
        }
        kept.as_mut().map(|(inquiry, _)| inquiry)
    }

    /// Looks for a kind in every event.
    ///
    /// # Errors
    /// When some event stayed open and none was found that shows it.
    fn any(
        &mut self,
        asked: &Refinement<'a, 'b>,
        wanted_kind: HazardKind,
        bounds: Bounds<'_>,
    ) -> Result<Option<Found>, Undecided> {
        let launcher = self.launcher;
        let own: BTreeSet<Event> =
            asked.candidates.iter().flat_map(|candidate| launcher.events_of(candidate.node)).collect();
        let mut events = launcher.events(&asked.target);
        events.sort_by_key(|event| !own.contains(event));
        let mut open = None;
        for event in events {
            if self.effort == 0 {
                return Err(Undecided::Budget);
            }
            let inquiry = Inquiry::new(&launcher.fabric, event, &asked.target, bounds, launcher.options.conflicts);
            let Ok(mut inquiry) = inquiry else {
                open = Some(Undecided::Loop);
                continue;
            };
            inquiry.effort = self.effort.saturating_sub(inquiry.encoder.size() as u64);
            let questions = if inquiry.is_suspect() { questions(&inquiry) } else { Vec::new() };
            for (step, kind, wanted) in questions {
                if kind != wanted_kind {
                    continue;
                }
                match inquiry.ask(&wanted) {
                    Ok(false) => {}
                    Ok(true) if asked.move_fewer(&mut inquiry, step, wanted) => {
                        self.effort = inquiry.effort;
                        return Ok(Some(told(asked, &inquiry, step, kind)));
                    }
                    Ok(true) => open = Some(Undecided::Budget),
                    Err(reason) => open = Some(reason),
                }
            }
            self.effort = inquiry.effort;
        }
        open.map_or(Ok(None), Err)
    }
}

/// What the last model shows.
fn told(asked: &Refinement<'_, '_>, inquiry: &Inquiry<'_>, step: Step, kind: HazardKind) -> Found {
    let mut witness = describe(inquiry, asked.net, step);
    if step == Step::First && !witness.launch.as_ref().is_some_and(Launch::is_of_latches) {
        witness.launch = None;
        let source = inquiry.encoder.fabric.cone.origin[inquiry.encoder.event.root];
        return Found::Pair(Pair { source, hazards: vec![(kind, witness)], undecided: Vec::new() });
    }
    Found::Launch(LaunchHazard { kind, witness, reach: Reach::AnyState })
}

/// The verdict from what was found of each kind; `open` are the kinds that stay as they were.
fn assemble(asked: Refinement<'_, '_>, found: Vec<Found>, open: &BTreeSet<HazardKind>) -> TargetVerdict {
    let mut verdict = asked.verdict;
    let mut pairs = asked.kept;
    for candidate in asked.candidates {
        let mut pair = Pair { source: candidate.source, hazards: Vec::new(), undecided: Vec::new() };
        match (candidate.found, candidate.supposed) {
            (Some(found), _) => pair.hazards.push((candidate.kind, found)),
            (None, Ok(supposed)) if open.contains(&candidate.kind) => {
                pair.hazards.push((candidate.kind, supposed));
                verdict.alone.push(candidate.kind);
            }
            (None, Err(reason)) if open.contains(&candidate.kind) => pair.undecided.push((candidate.kind, reason)),
            (None, _) => continue,
        }
        pairs.push(pair);
    }
    for found in found {
        match found {
            Found::Pair(pair) => pairs.push(pair),
            Found::Launch(launch) => verdict.launches.push(launch),
        }
    }
    pairs.sort_by_key(|pair| pair.source);
    for pair in pairs {
        match verdict.pairs.last_mut().filter(|last| last.source == pair.source) {
            Some(last) => {
                last.hazards.extend(pair.hazards);
                last.undecided.extend(pair.undecided);
            }
            None => verdict.pairs.push(pair),
        }
    }
    for pair in &mut verdict.pairs {
        pair.hazards.sort_by_key(|&(kind, _)| kind);
        pair.undecided.sort_unstable();
    }
    verdict.launches.sort_by_key(|found| found.kind);
    verdict.alone.sort_unstable();
    (verdict.method, verdict.launch_method) = (Method::Launches, Some(Method::Solver));
    verdict
}

/// The verdict as it was, every kind told apart.
fn unconfirmed(mut verdict: TargetVerdict) -> TargetVerdict {
    let kinds: BTreeSet<HazardKind> =
        verdict.pairs.iter().flat_map(|pair| &pair.hazards).map(|&(kind, _)| kind).collect();
    verdict.alone = kinds.into_iter().collect();
    verdict
}

impl Launcher<'_> {
    /// The events that can move a source by itself.
    fn events_of(&self, node: usize) -> Vec<Event> {
        let roots = match self.fabric.role(node) {
            Role::Cell(index) => {
                let cell = &self.fabric.cells[index];
                let values = cell.controls.iter().map(|control| control.value);
                let data = cell.enable.map(|_| cell.data);
                let pins = cell.pins().chain(values).chain(data);
                pins.flat_map(|pin| self.fabric.roots_of(pin.node())).copied().collect()
            }
            _ => BTreeSet::from([node]),
        };
        roots.into_iter().flat_map(|root| [false, true].map(|rises| Event { root, rises })).collect()
    }
}

/// The steps in which an event may move a source that is asked about: the change of an input travels in the first; cells
/// move in the second, and latches that pass in the first, which is not judged for a root that is a cell.
fn layers(fabric: &Fabric<'_>, event: Event, source: usize) -> &'static [Layer] {
    match (fabric.role(source), fabric.role(event.root)) {
        (Role::Cell(_), Role::Cell(_)) => &[Layer::Second],
        (Role::Cell(_), _) => &[Layer::Second, Layer::First],
        _ if source == event.root => &[Layer::First],
        _ => &[],
    }
}
