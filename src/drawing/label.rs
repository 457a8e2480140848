//! What is written at the symbols: the name that the reader knows, short enough to stand in a drawing, and what a pin is
//! for. The full name always goes along.

use super::{End, Shape, original};
use crate::graph::{NodeId, NodeKind, SourceKind};
use crate::rules::{Finding, PinKind, names};

use super::logic::Logic;

/// The most characters of a name that are shown.
const SHOWN: usize = 24;
/// The most members of a bundle that are named.
const MEMBERS: usize = 40;

/// The name of the net that a symbol drives, if it drives one.
pub(super) fn name(logic: &Logic<'_>, node: NodeId) -> Option<String> {
    names::wire_of(logic.graph, original(logic.cut, node)).and_then(|wire| logic.graph.name(wire))
}

/// What the reader calls a source, whether it has a name or not.
pub(super) fn source_name(logic: &Logic<'_>, node: NodeId) -> String {
    names::name(logic.graph, original(logic.cut, node))
}

/// A name as seen from the finding's instance: what lies in it by its local name, the rest by its last two parts.
pub(super) fn short(name: &str, instance: &str) -> String {
    let local = name.strip_prefix(instance).and_then(|rest| rest.strip_prefix('.'));
    let text = match local {
        Some(local) => local.to_string(),
        None => {
            let parts: Vec<&str> = name.rsplitn(3, '.').collect();
            match parts.as_slice() {
                [last, before, _] => format!("\u{2026}{before}.{last}"),
                _ => name.to_string(),
            }
        }
    };
    let length = text.chars().count();
    if length <= SHOWN {
        return text;
    }
    // The end of a name tells more than its middle.
    let (head, tail) = (SHOWN / 2 - 2, SHOWN / 2 + 1);
    let head: String = text.chars().take(head).collect();
    let tail: String = text.chars().skip(length - tail).collect();
    format!("{head}\u{2026}{tail}")
}

/// The shape of a symbol of the logic.
pub(super) fn shape(logic: &Logic<'_>, node: NodeId) -> Shape {
    if logic.is_looped(node) {
        return Shape::Feedback;
    }
    match logic.kind(node) {
        NodeKind::Const(_) => Shape::Constant,
        NodeKind::Unknown | NodeKind::Wire => Shape::Unknown,
        // A cut loop is read from a source of its own.
        NodeKind::Source(_) if !logic.graph.fanin(original(logic.cut, node)).is_empty() => Shape::Feedback,
        NodeKind::Source(SourceKind::Input) => Shape::Input,
        NodeKind::Source(SourceKind::FlipFlop) => Shape::FlipFlop,
        NodeKind::Source(SourceKind::Latch) => Shape::Latch,
        NodeKind::Source(SourceKind::BlackBox) => Shape::BlackBox,
        NodeKind::Source(SourceKind::Memory) => Shape::Memory,
        NodeKind::Gate(kind) => Shape::Gate(kind),
        NodeKind::Table(_) => Shape::Table,
        NodeKind::OpIn(_) | NodeKind::OpOut(_) => Shape::Operator,
    }
}

/// What a symbol without inputs is called, and what stands in one that has them.
pub(super) fn inscription(logic: &Logic<'_>, node: NodeId, instance: &str) -> (String, String) {
    match (shape(logic, node), logic.kind(node)) {
        (Shape::Constant, NodeKind::Const(value)) => {
            (u8::from(value).to_string(), format!("constant {}", u8::from(value)))
        }
        (Shape::Table, NodeKind::Table(table)) => {
            let name = &logic.cut.frozen.graph.tables[table.index()].name;
            (short(name, ""), format!("primitive {name}"))
        }
        (Shape::Operator, NodeKind::OpOut(operator)) => {
            let what = logic.cut.frozen.graph.operators[operator.index()].what;
            (what.to_string(), what.to_string())
        }
        _ => {
            let name = source_name(logic, node);
            (short(&name, instance), name)
        }
    }
}

/// Several signals as one: "addr (16 bits)", and their names.
pub(super) fn bundle(logic: &Logic<'_>, members: &[NodeId], instance: &str) -> (String, String) {
    let mut all: Vec<String> = members.iter().map(|&node| source_name(logic, node)).collect();
    all.sort();
    let vector = |name: &str| name.rsplit_once('[').map_or(name, |(vector, _)| vector).to_string();
    let first = all.first().map(|name| vector(name)).unwrap_or_default();
    let named = members.iter().all(|&node| logic.pins(node).is_empty() || name(logic, node).is_some());
    let label = match named && all.iter().all(|name| vector(name) == first) {
        true => format!("{} ({} bits)", short(&first, instance), all.len()),
        false => format!("{} more inputs", all.len()),
    };
    let left_out = all.len().saturating_sub(MEMBERS);
    all.truncate(MEMBERS);
    if left_out > 0 {
        all.push(format!("and {left_out} more"));
    }
    (label, all.join(", "))
}

/// The pin that the net ends at: its shape, what is written in it, all of it, and whether it acts on 0 or on the falling
/// edge.
pub(super) fn end(finding: &Finding) -> (Shape, String, String, bool) {
    let Some(pin) = &finding.pin else {
        return match &finding.loop_ {
            Some(_) => (Shape::End(End::Feedback), "fed back".to_string(), finding.net.clone(), false),
            None => (Shape::End(End::Net), short(&finding.net, &finding.instance), finding.net.clone(), false),
        };
    };
    let cells = match pin.count {
        1 => "1 cell".to_string(),
        count => format!("{count} cells"),
    };
    let full = format!("{} of {cells}: {}", pin.kind.name(), pin.cells.join(", "));
    let (end, inverted) = match pin.kind {
        PinKind::Clock => (End::Clock, pin.edge == Some("negedge")),
        PinKind::Set | PinKind::Reset | PinKind::Load => (End::Control, pin.active == Some(false)),
        PinKind::LatchEnable => (End::Enable, pin.active == Some(false)),
        PinKind::Watch | PinKind::Output => {
            return (Shape::End(End::Net), pin.kind.name().to_string(), finding.net.clone(), false);
        }
    };
    let what = if pin.kind == PinKind::LatchEnable { "enable" } else { pin.kind.name() };
    (Shape::End(end), format!("{what} of {cells}"), full, inverted)
}
