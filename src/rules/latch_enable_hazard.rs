//! `latch-enable-hazard`: enables of latches, declared ones and those that an incomplete assignment inferred; of the
//! latter the finding shows the assignment that is missing. A pulse that opens a closed latch overwrites what it stores
//! (error); one that closes an open latch only delays its data (warning).

use super::evidence::{self, Subject};
use super::finding::{Finding, Rule, Severity, TraceStep};
use super::pins::{self, Role, Use};
use super::{Context, names, words};
use crate::graph::Graph;
use crate::hazard::{HazardKind, TargetVerdict};

const CURE: &str = "to do: drive the enable from a flip-flop, or make its logic hazard-free by its cover; if no latch \
                    was meant, assign its value on every way through the process";

pub(super) fn finding(graph: &Graph, verdict: &TargetVerdict, uses: &[Use], context: &Context<'_>) -> Option<Finding> {
    let pin = pins::pin(graph, uses);
    let net = names::name(graph, verdict.target);
    let what = format!("the enable `{net}` of {}", words::cells(graph, uses));
    let judge = |kind| judge(graph, uses, kind);
    let subject = Subject { rule: Rule::LatchEnableHazard, pin, what, judge: &judge, cure: CURE };
    let mut finding = evidence::finding(graph, verdict, &subject, context)?;
    let inferred = missing_assignments(graph, uses);
    // The last step belongs to the place of the finding itself; these places come before it.
    let end = finding.trace.len().saturating_sub(1);
    finding.trace.splice(end..end, inferred);
    Some(finding)
}

/// One step for each place that inferred a latch, bits of one vector together.
fn missing_assignments(graph: &Graph, uses: &[Use]) -> Vec<TraceStep> {
    let mut places = Vec::new();
    for one in uses {
        let Some(cell) = one.cell.cell(graph) else { continue };
        let Some(at) = cell.inferred_from else { continue };
        match places.iter_mut().find(|(known, _, _)| *known == at) {
            Some((_, _, more)) => *more += 1,
            None => places.push((at, names::name(graph, cell.output), 0)),
        }
    }
    let text = |name: String, more: usize| match more {
        0 => format!("no assignment to `{name}` here, so it is a latch"),
        _ => format!("no assignment to `{name}` and {more} more here, so they are latches"),
    };
    places.into_iter().map(|(at, name, more)| TraceStep::new(Some(at), text(name, more))).collect()
}

fn judge(graph: &Graph, uses: &[Use], kind: HazardKind) -> (Severity, String) {
    let judged = [false, true].into_iter().filter_map(|level| {
        let here: Vec<Use> = uses.iter().copied().filter(|one| one.role == Role::Enable(level)).collect();
        if here.is_empty() { None } else { Some(judge_level(&words::cells(graph, &here), level, kind)) }
    });
    judged.reduce(words::worse).unwrap_or((Severity::Warning, String::new()))
}

fn judge_level(cells: &str, active: bool, kind: HazardKind) -> (Severity, String) {
    let opens = if active { HazardKind::Static0 } else { HazardKind::Static1 };
    if kind == HazardKind::Dynamic {
        (Severity::Warning, format!("opens and closes {cells} more than once"))
    } else if kind == opens {
        (
            Severity::Error,
            format!("opens {cells} that should hold: the stored value is overwritten by whatever is at the data input"),
        )
    } else {
        (
            Severity::Warning,
            format!("closes {cells} for a moment while data should pass: the output can lag behind its data"),
        )
    }
}
