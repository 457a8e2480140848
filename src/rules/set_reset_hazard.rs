//! `set-reset-hazard`: asynchronous set, reset and load pins. Such a pin acts at once and for as long as it is active, so
//! a pulse on it is as good as the real thing. A pulse towards the active level asserts it out of nothing (error); a
//! pulse the other way, while it is asserted, releases the cells for a moment (warning); so does a bouncing edge.

use std::collections::BTreeSet;

use super::evidence::{self, Subject};
use super::finding::{Finding, PinKind, Rule, Severity};
use super::pins::{self, Role, Takes, Use};
use super::{Context, words};
use crate::graph::Graph;
use crate::hazard::{HazardKind, TargetVerdict};

const CURE: &str = "to do: drive the pin from a flip-flop of the pin's own clock domain, or make the logic hazard-free \
                    by its cover and forbid the synthesiser to remove the redundant terms";

pub(super) fn finding(graph: &Graph, verdict: &TargetVerdict, uses: &[Use], context: &Context<'_>) -> Option<Finding> {
    let pin = pins::pin(graph, uses);
    let noun = match pin.kind {
        PinKind::Set => "asynchronous set",
        PinKind::Load => "asynchronous load",
        _ if mixed(uses) => "asynchronous set and reset",
        _ => "asynchronous reset",
    };
    let net = super::names::name(graph, verdict.target);
    let what = format!("the {noun} `{net}` of {}", words::cells(graph, uses));
    let judge = |kind| judge(graph, uses, kind);
    evidence::finding(
        graph,
        verdict,
        &Subject { rule: Rule::SetResetHazard, pin, what, judge: &judge, cure: CURE },
        context,
    )
}

fn takes(uses: &[Use], wanted: Takes) -> bool {
    uses.iter().any(|one| matches!(one.role, Role::Control { takes, .. } if takes == wanted))
}

fn mixed(uses: &[Use]) -> bool {
    takes(uses, Takes::Zero) && takes(uses, Takes::One)
}

/// The worst over both active levels, if cells of both hang on the net.
fn judge(graph: &Graph, uses: &[Use], kind: HazardKind) -> (Severity, String) {
    let levels: BTreeSet<bool> = uses.iter().filter_map(active).collect();
    let judged = levels.into_iter().map(|level| {
        let here: Vec<Use> = uses.iter().copied().filter(|one| active(one) == Some(level)).collect();
        judge_level(graph, &here, level, kind)
    });
    judged.reduce(words::worse).unwrap_or((Severity::Warning, String::new()))
}

fn active(one: &Use) -> Option<bool> {
    match one.role {
        Role::Control { active, .. } => Some(active),
        Role::Clock(_) | Role::Enable(_) => None,
    }
}

fn judge_level(graph: &Graph, uses: &[Use], active: bool, kind: HazardKind) -> (Severity, String) {
    let cells = words::cells(graph, uses);
    let (acts, acted, state) = if takes(uses, Takes::Loads) {
        ("loads", "load", "loading")
    } else if mixed(uses) {
        ("sets or resets", "set or reset", "set and reset")
    } else if takes(uses, Takes::One) {
        ("sets", "set", "set")
    } else {
        ("resets", "reset", "reset")
    };
    let towards = if active { HazardKind::Static0 } else { HazardKind::Static1 };
    if kind == HazardKind::Dynamic {
        (
            Severity::Warning,
            format!("{acts} {cells} more than once, or lets go in between: what was taken up there is lost"),
        )
    } else if kind == towards {
        (Severity::Error, format!("{acts} {cells} although no {acted} is asserted{}", words::short_pulse(uses)))
    } else {
        let whose = if words::cell_count(uses) == 1 { "its" } else { "their" };
        (
            Severity::Warning,
            format!("releases {cells} from {state} for a moment: a clock edge just then changes {whose} state"),
        )
    }
}
