//! What every output for people does alike: findings of one family are one, the places of a finding are told in one
//! order, and a hazard and a cover are put into the same words.

use std::collections::HashMap;

use crate::rules::bundle::listed;
use crate::rules::{CoverText, Finding, Hazard, PinKind, Severity};
use crate::source::{SourceSet, Span};

/// So many signals, or vectors, that change together are named.
const SHOWN_SIGNALS: usize = 3;

/// A place to be shown in the source.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Marked {
    pub(super) at: Span,
    pub(super) text: String,
    /// The finding's own place.
    pub(super) primary: bool,
    /// The way of the change that it lies on, where it lies on one.
    pub(super) way: Option<u8>,
}

/// All that the trace of a finding says: with a place, and without.
pub(super) struct Places {
    pub(super) marked: Vec<Marked>,
    pub(super) notes: Vec<String>,
}

/// The findings that are one to a reader: of one family, equally bad and equally accepted.
type Alike<'a> = (&'a str, Severity, bool, Option<(&'a str, Option<&'a str>, Option<&'a str>)>);

/// The findings by family, the worst and first of each in front, in the order in which the families first occur. What is
/// accepted for another reason is another group.
pub(super) fn families<'a, T: Copy>(all: impl Iterator<Item = T>, finding: impl Fn(T) -> &'a Finding) -> Vec<Vec<T>> {
    let mut groups: Vec<Vec<T>> = Vec::new();
    let mut known: HashMap<Alike<'a>, usize> = HashMap::new();
    for one in all {
        let finding = finding(one);
        let signoff =
            finding.signoff.as_ref().map(|one| (one.reason.as_str(), one.by.as_deref(), one.until.as_deref()));
        let alike = (finding.family.as_str(), finding.severity, finding.known, signoff);
        let group = *known.entry(alike).or_insert(groups.len());
        match groups.get_mut(group) {
            Some(group) => group.push(one),
            None => groups.push(vec![one]),
        }
    }
    groups
}

/// The finding's own place first, then the others in the order of the trace; steps at one place are one.
pub(super) fn places(finding: &Finding, sources: &SourceSet) -> Places {
    // The last step of a trace at the finding's own place says what happens there.
    let own = finding.trace.iter().rposition(|step| step.at == finding.at && step.at.is_some());
    let mut others: Vec<Marked> = Vec::new();
    let mut notes = Vec::new();
    for (index, step) in finding.trace.iter().enumerate() {
        match step.at {
            _ if Some(index) == own => {}
            Some(at) => match others.iter_mut().find(|known| known.at == at) {
                Some(known) => {
                    known.text.push_str(&format!("; {}", step.text));
                    known.way = known.way.filter(|_| known.way == step.way);
                }
                None => others.push(Marked { at, text: step.text.clone(), primary: false, way: step.way }),
            },
            None => notes.push(step.text.clone()),
        }
    }
    let mut marked = Vec::new();
    if let Some(at) = finding.at {
        let own = own.map(|index| finding.trace[index].text.clone());
        let before = others.iter().position(|known| known.at == at).map(|index| others.remove(index).text);
        let text: Vec<String> = before.into_iter().chain(own).collect();
        marked.push(Marked { at, text: text.join("; "), primary: true, way: None });
    }
    marked.extend(others);
    if let Some(at) = finding.at.and_then(|at| sources.macro_behind(at)) {
        let text = "the text comes from this macro".to_string();
        marked.push(Marked { at, text, primary: false, way: None });
    }
    Places { marked, notes }
}

/// What the proof of a cover says.
pub(super) fn effect(finding: &Finding, cover: &CoverText) -> &'static str {
    match (cover.proven, &finding.loop_) {
        (false, _) => "not proven",
        (true, None) if finding.pin.as_ref().is_some_and(|pin| pin.kind == PinKind::Output) => {
            "proven: with it, no change of one signal can glitch this net"
        }
        (true, None) => "proven: with it, no change of one signal and no clock edge can glitch this net",
        (true, Some(_)) => "proven: with it, no change of one signal can lose the value",
    }
}

/// "static-1 on `top.n` by `top.s` with the rising edge of `top.clk`".
pub(super) fn hazard(finding: &Finding, hazard: &Hazard) -> String {
    let on = if hazard.net == finding.net { String::new() } else { format!(" on `{}`", hazard.net) };
    let event = match &hazard.launch {
        Some(launch) if hazard.changes.len() != 1 || launch.step != "second" => {
            let edge = if launch.rises { "rising" } else { "falling" };
            format!(" with the {edge} edge of `{}`", launch.root)
        }
        _ => String::new(),
    };
    format!("{}{on} by {}{event}", hazard.kind, changing(hazard))
}

/// The signals that change; latches that race when nothing else does.
fn changing(hazard: &Hazard) -> String {
    match &hazard.launch {
        Some(launch) if hazard.changes.is_empty() => {
            format!("the latch {}", listed(launch.raced.iter().map(String::as_str), SHOWN_SIGNALS))
        }
        _ => listed(hazard.changes.iter().map(String::as_str), SHOWN_SIGNALS),
    }
}
