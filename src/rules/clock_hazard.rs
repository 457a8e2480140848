//! `clock-hazard`: clock pins of flip-flops. Every pulse on a clock holds a rising and a falling edge, so each of the
//! three kinds of hazard clocks the cells once more than intended, whatever edge they use.

use super::evidence::{self, Subject};
use super::finding::{Finding, Rule, Severity};
use super::pins::{self, Use};
use super::{Context, words};
use crate::graph::Graph;
use crate::hazard::{HazardKind, TargetVerdict};

const CURE: &str = "to do: gate the clock with a latch that is transparent while the clock is inactive, so that the \
                    enable holds still during the other phase, or use a clock enable in front of the data input";

pub(super) fn finding(graph: &Graph, verdict: &TargetVerdict, uses: &[Use], context: &Context<'_>) -> Option<Finding> {
    let pin = pins::pin(graph, uses);
    let cells = words::cells(graph, uses);
    let net = super::names::name(graph, verdict.target);
    let what = format!("the clock `{net}` of {cells}");
    let judge = |kind| judge(&cells, uses, kind);
    evidence::finding(
        graph,
        verdict,
        &Subject { rule: Rule::ClockHazard, pin, what, judge: &judge, cure: CURE },
        context,
    )
}

fn judge(cells: &str, uses: &[Use], kind: HazardKind) -> (Severity, String) {
    let harm = match kind {
        HazardKind::Static0 | HazardKind::Static1 => {
            format!("clocks {cells} although no edge was due{}", words::short_pulse(uses))
        }
        HazardKind::Dynamic => format!("clocks {cells} more than once where one edge was due"),
    };
    (Severity::Error, harm)
}
