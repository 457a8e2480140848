//! Findings that are about a text and not about a net: `unsupported-construct`, the bookkeeping rules, and what else the
//! front end has to say. A limit of ours looks like any other finding: it has a rule, a place and a cure, and it is never
//! silent, because whatever lies behind it was not analysed.

use super::finding::{Finding, Rule, Severity, TraceStep, Verdict};
use super::fingerprint::{self, Identity};
use super::names;
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{Graph, NetId, NodeId};
use crate::report::Message;
use crate::source::Span;

/// A diagnostic as the report shows it.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Said {
    Finding(Box<Finding>),
    Message(Message),
}

/// Sorts a front-end diagnostic: what was lost is a finding, the rest a message. A construct that is not supported is a
/// note; input that could not be read or elaborated is a warning, so that it shows without being asked for.
pub fn say(diagnostic: &Diagnostic) -> Said {
    let (rule, severity) = match diagnostic.kind {
        Kind::Note | Kind::Warning => {
            let is_note = diagnostic.kind == Kind::Note;
            return Said::Message(Message {
                severity: if is_note { Severity::Note } else { Severity::Warning },
                text: diagnostic.message.clone(),
                at: diagnostic.at,
                also: diagnostic.also.clone(),
                help: diagnostic.help.clone(),
            });
        }
        Kind::Unsupported => (Rule::UnsupportedConstruct, Severity::Note),
        Kind::Incomplete => (Rule::UnsupportedConstruct, Severity::Warning),
        Kind::SignoffInvalid => (Rule::SignoffInvalid, Severity::Error),
    };
    let mut notes: Vec<String> = diagnostic.help.iter().cloned().collect();
    if rule == Rule::UnsupportedConstruct {
        notes.push("what depends on it was not analysed; the run is incomplete".to_string());
    }
    let trace = diagnostic.also.iter().map(|(at, text)| TraceStep::new(Some(*at), text)).collect();
    let identity = fingerprint::of_text(rule, &[&diagnostic.construct, &diagnostic.message]);
    let mut finding = plain(rule, severity, diagnostic.message.clone(), diagnostic.at, identity);
    finding.trace = trace;
    finding.notes = notes;
    Said::Finding(Box::new(finding))
}

/// A finding about the sign-off comments themselves.
pub(crate) fn bookkeeping(
    rule: Rule,
    severity: Severity,
    message: String,
    at: Span,
    cure: &str,
    reason: &str,
) -> Finding {
    let identity = fingerprint::of_text(rule, &[&message, reason]);
    let mut finding = plain(rule, severity, message, Some(at), identity);
    finding.notes.push(format!("to do: {cure}"));
    finding
}

/// A finding that is about a declared net and not about hazards on it.
pub(crate) fn about_net(graph: &Graph, rule: Rule, severity: Severity, net: NetId, message: String) -> Finding {
    let declared = &graph.nets[net.index()];
    let instance = &graph.instances[declared.instance.index()].path;
    let name = format!("{instance}.{}", declared.name);
    let identity = fingerprint::of_net(graph, rule, net, &name);
    let mut finding = plain(rule, severity, message, Some(declared.span), identity);
    finding.declared = Some(declared.span);
    finding.instance = instance.clone();
    finding.net = name;
    finding
}

/// What the reader calls a node.
pub(crate) fn net_name(graph: &Graph, node: NodeId) -> String {
    names::name(graph, node)
}

/// A finding that is about a text and not about a net.
pub(super) fn plain(rule: Rule, severity: Severity, message: String, at: Option<Span>, identity: Identity) -> Finding {
    Finding {
        rule,
        severity,
        verdict: Verdict::Proven,
        message,
        at,
        declared: None,
        trace: Vec::new(),
        instance: String::new(),
        net: String::new(),
        bits: None,
        pin: None,
        hazards: Vec::new(),
        cover: None,
        loop_: None,
        notes: Vec::new(),
        fingerprint: identity.fingerprint,
        family: identity.family,
        signoff: None,
        known: false,
    }
}
