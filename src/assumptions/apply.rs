//! Tries the declarations and sorts out what the analysis may rest on.

use std::collections::BTreeMap;

use super::resolve::group_of_nets;
use super::{Declaration, Listed, Origin, Resolved, contradicted};
use crate::graph::{Graph, InstanceId, NetId};
use crate::hazard::launch::Assumptions;
use crate::hazard::{AssumptionKind, Options, Standing, try_assumptions};
use crate::rules::{Finding, Rule, Severity, bookkeeping};
use crate::signoff::{AssumptionPragma, declared_on};
use crate::source::{FileId, SourceSet};

/// What the declarations amount to.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Applied {
    /// All of them, those of the settings first.
    pub listed: Vec<Listed>,
    /// What the analysis may rest on: all that are not contradicted.
    pub in_force: Assumptions,
    /// `assumption-contradicted`, and comments that speak about nothing.
    pub findings: Vec<Finding>,
}

/// Tries the declarations of the settings (already resolved) and of comments on `graph`.
pub fn apply(
    graph: &Graph,
    sources: &SourceSet,
    mut resolved: Vec<Resolved>,
    pragmas: &[AssumptionPragma],
    options: &Options,
) -> Applied {
    let mut applied = Applied::default();
    of_comments(graph, sources, pragmas, &mut resolved, &mut applied.findings);
    let assumptions: Vec<_> = resolved.iter().map(|one| one.assumption.clone()).collect();
    let standings = try_assumptions(graph, &assumptions, options);
    for (resolved, standing) in resolved.into_iter().zip(standings) {
        let listed = Listed {
            kind: resolved.assumption.kind,
            nets: resolved.nets.clone(),
            reason: resolved.reason.clone(),
            origin: resolved.origin.clone(),
            standing,
        };
        if let Standing::Contradicted(example) = &listed.standing {
            applied.findings.push(contradicted::finding(graph, &resolved, &listed, example));
        } else {
            let nodes = resolved.assumption.nodes;
            let in_force = &mut applied.in_force;
            match listed.kind {
                AssumptionKind::Static => in_force.fixed.extend(nodes),
                AssumptionKind::OneHot => in_force.one_hot.push(nodes),
                AssumptionKind::MutuallyExclusive => in_force.exclusive.push(nodes),
                AssumptionKind::OneBitChanging => in_force.one_bit.push(nodes),
            }
        }
        applied.listed.push(listed);
    }
    applied.in_force.fixed.sort_unstable();
    applied.in_force.fixed.dedup();
    applied
}

/// A comment speaks about the nets declared on its line, in each instance by itself.
fn of_comments(
    graph: &Graph,
    sources: &SourceSet,
    pragmas: &[AssumptionPragma],
    resolved: &mut Vec<Resolved>,
    findings: &mut Vec<Finding>,
) {
    if pragmas.is_empty() {
        return;
    }
    let declared: BTreeMap<(FileId, usize), Vec<NetId>> = declared_on(graph, sources);
    for pragma in pragmas {
        let Some(nets) = declared.get(&(pragma.at.file, pragma.line)) else {
            // Of a file of which nothing was analysed nothing can be said.
            if declared.keys().any(|(file, _)| *file == pragma.at.file) {
                findings.push(bookkeeping(
                    Rule::SignoffStale,
                    Severity::Warning,
                    format!("this `{}` speaks about no declaration of a net that was analysed", pragma.kind.name()),
                    pragma.at,
                    "put it on the line of the declaration, or alone on the line before",
                    &pragma.reason,
                ));
            }
            continue;
        };
        let declaration = Declaration {
            kind: pragma.kind,
            nets: Vec::new(),
            reason: pragma.reason.clone(),
            origin: Origin::Comment(pragma.at),
        };
        let mut by_instance: BTreeMap<InstanceId, Vec<NetId>> = BTreeMap::new();
        for &net in nets {
            by_instance.entry(graph.nets[net.index()].instance).or_default().push(net);
        }
        let groups: Vec<Option<Resolved>> =
            by_instance.values().map(|nets| group_of_nets(graph, &declaration, nets)).collect();
        if groups.contains(&None) {
            findings.push(bookkeeping(
                Rule::SignoffInvalid,
                Severity::Error,
                format!("`{}` needs a declaration of two bits or more; the comment has no effect", pragma.kind.name()),
                pragma.at,
                "put it at the declaration of a vector, or declare several nets in the settings with `[[assume]]`",
                &pragma.reason,
            ));
        }
        resolved.extend(groups.into_iter().flatten());
    }
}
