//! `assumption-contradicted`: what the finding says about a declaration that the design breaks.

use super::{Listed, Origin, Resolved};
use crate::graph::{Graph, NodeId};
use crate::hazard::{AssumptionKind, Counterexample};
use crate::rules::{Finding, Rule, Severity, TraceStep, about_net, net_name};

pub(super) fn finding(graph: &Graph, resolved: &Resolved, listed: &Listed, example: &Counterexample) -> Finding {
    let nets = match listed.nets.as_slice() {
        [one] => format!("`{one}` is"),
        [first, rest @ ..] => format!("`{first}` and {} more are", rest.len()),
        [] => String::new(),
    };
    let kind = listed.kind.name();
    let shows = shows(graph, listed.kind, example);
    let message = format!("{nets} declared {kind}, but {shows}; the declaration is not used");
    let mut finding = about_net(graph, Rule::AssumptionContradicted, Severity::Error, resolved.first, message);
    let place = match &listed.origin {
        Origin::Comment(at) => {
            finding.trace.push(TraceStep::new(Some(*at), "assumed here"));
            String::new()
        }
        Origin::Settings { file, line } => format!(" ({file}:{line})"),
    };
    finding.notes.push(format!("the declaration{place} gives the reason: {}", listed.reason));
    finding.notes.push(
        "to do: mend the logic or the declaration; if the inputs are to guarantee it, declare it of the inputs as well"
            .to_string(),
    );
    finding
}

/// What breaks the assumption, as the rest of a sentence.
fn shows(graph: &Graph, kind: AssumptionKind, example: &Counterexample) -> String {
    let after = |steps: usize| match steps {
        0 => "in the reset state".to_string(),
        1 => "one step after reset".to_string(),
        _ => format!("{steps} steps after reset"),
    };
    match example {
        Counterexample::Impossible { alone: true } => {
            "no values of the registers and inputs can satisfy that".to_string()
        }
        Counterexample::Impossible { alone: false } => {
            "it cannot hold together with the assumptions declared before it".to_string()
        }
        Counterexample::State { steps, values } => {
            let ones: Vec<NodeId> = values.iter().filter(|(_, value)| *value).map(|(node, _)| *node).collect();
            let state = after(*steps);
            match ones.as_slice() {
                [] => format!("{state} none of its nets is 1"),
                _ => format!("{state} {} are 1", list(graph, &ones)),
            }
        }
        Counterexample::Step { steps, changes } => {
            let nodes: Vec<NodeId> = changes.iter().map(|(node, _)| *node).collect();
            if kind == AssumptionKind::Static {
                let (node, before) = changes.first().copied().unwrap_or((nodes[0], false));
                let (from, to) = (u8::from(before), u8::from(!before));
                format!("{} `{}` has changed from {from} to {to}", after(steps + 1), net_name(graph, node))
            } else {
                format!("the clock edge {} changes {} at once", after(*steps), list(graph, &nodes))
            }
        }
    }
}

/// "`a`, `b` and 3 more".
fn list(graph: &Graph, nodes: &[NodeId]) -> String {
    const SHOWN: usize = 3;
    let mut names: Vec<String> = nodes.iter().take(SHOWN).map(|&node| format!("`{}`", net_name(graph, node))).collect();
    if nodes.len() > SHOWN {
        names.push(format!("{} more", nodes.len() - SHOWN));
    }
    match names.split_last() {
        Some((last, [])) => last.clone(),
        Some((last, rest)) => format!("{} and {last}", rest.join(", ")),
        None => String::new(),
    }
}
