//! Everything that launches show at a target, one answer for each root, direction, step and kind, regardless of what is
//! worth reporting. This is the relation that tests compare with other ways to find it.

use super::Assumptions;
use super::encode::Event;
use super::exact::{Bounds, Inquiry, Target, WHOLE};
use super::fabric::{Fabric, Role};
use crate::graph::{Graph, NodeId};
use crate::hazard::solver::Literal;
use crate::hazard::{HazardKind, OpenLaunch, Options, Step, Undecided};

/// One hazard of one event.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Shown {
    pub root: NodeId,
    /// Whether the root rises.
    pub rises: bool,
    pub step: Step,
    pub kind: HazardKind,
}

/// All that events show at `target`, sorted, and the events that stayed undecided.
pub fn shown(
    graph: &Graph,
    target: NodeId,
    assumptions: &Assumptions,
    options: &Options,
) -> (Vec<Shown>, Vec<OpenLaunch>) {
    let fabric = Fabric::new(graph, &[target], assumptions, options.ignore_operators);
    let (mut found, mut open) = (Vec::new(), Vec::new());
    let Some(net) = fabric.place(target) else { return (found, open) };
    let target = Target::plain(net);
    let whole = fabric.closure(&target.nodes(), WHOLE);
    for root in fabric.roots(&target.nodes(), target.plain_node()) {
        for rises in [false, true] {
            let event = Event { root, rises };
            let origin = fabric.cone.origin[root];
            let mut undecided = |reason| open.push(OpenLaunch { root: origin, rises, reason });
            let bounds = Bounds { whole: whole.as_deref(), reachable: None };
            let Ok(mut inquiry) = Inquiry::new(&fabric, event, &target, bounds, options.conflicts) else {
                undecided(Undecided::Loop);
                continue;
            };
            if !inquiry.is_suspect() {
                continue;
            }
            for (step, kind, wanted) in questions(&inquiry) {
                match inquiry.ask(&wanted) {
                    Ok(true) => found.push(Shown { root: origin, rises, step, kind }),
                    Ok(false) => {}
                    Err(reason) => undecided(reason),
                }
            }
        }
    }
    found.sort_unstable();
    found.dedup();
    open.sort_unstable();
    open.dedup();
    (found, open)
}

/// What can be asked about an event: which step, which kind, and the literals that say so. A dynamic hazard takes two
/// questions, one for each direction.
pub(super) fn questions(inquiry: &Inquiry<'_>) -> Vec<(Step, HazardKind, Vec<Literal>)> {
    let (first, second) = (inquiry.first.wave, inquiry.second.wave);
    let mut questions = Vec::new();
    let root_is_cell = matches!(inquiry.encoder.fabric.role(inquiry.encoder.event.root), Role::Cell(_));
    let judged = [(Step::First, first, !root_is_cell), (Step::Second, second, true)];
    for (step, wave, asked) in judged {
        let Some(h) = wave.h.filter(|_| asked) else { continue };
        let ends = [
            (HazardKind::Static0, [!wave.i, !wave.f]),
            (HazardKind::Static1, [wave.i, wave.f]),
            (HazardKind::Dynamic, [!wave.i, wave.f]),
            (HazardKind::Dynamic, [wave.i, !wave.f]),
        ];
        questions.extend(ends.into_iter().map(|(kind, [i, f])| (step, kind, vec![h, i, f])));
    }
    if first.i != first.f && second.i != second.f {
        for (kind, low) in [(HazardKind::Static0, true), (HazardKind::Static1, false)] {
            let ends = [first.i.inverted_if(low), first.f.inverted_if(!low), second.f.inverted_if(low)];
            questions.push((Step::Both, kind, ends.to_vec()));
        }
    }
    questions
}
