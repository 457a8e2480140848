//! Small words that every rule needs: numbers with nouns, quoted names, and what a hazard of a kind looks like.

use std::collections::BTreeSet;

use super::finding::Severity;
use crate::graph::{CellId, CellKind, GateKind, Graph, NodeId, NodeKind};
use crate::hazard::HazardKind;

use super::pins::{Use, User};

/// "1 gate", "3 gates", "no gates".
pub(super) fn count(number: usize, noun: &str) -> String {
    match number {
        0 => format!("no {noun}s"),
        1 => format!("1 {noun}"),
        _ => format!("{number} {noun}s"),
    }
}

/// How many cells hang on a net, however many of their pins do.
pub(super) fn cell_count(uses: &[Use]) -> usize {
    uses.iter().map(|one| one.cell).collect::<BTreeSet<User>>().len()
}

/// "17 flip-flops", "1 latch", "3 flip-flops and 2 latches".
pub(super) fn cells(graph: &Graph, uses: &[Use]) -> String {
    let users: BTreeSet<User> = uses.iter().map(|one| one.cell).collect();
    let (mut flops, mut latches, mut gates, mut boxes) = (0, 0, 0, 0);
    for user in users {
        match user {
            User::Box(_) => boxes += 1,
            User::Cell(cell) if graph.is_clock_gate(CellId::new(cell)) => gates += 1,
            User::Cell(cell) if matches!(graph.cells[cell].kind, CellKind::Latch { .. }) => latches += 1,
            User::Cell(_) => flops += 1,
        }
    }
    let counts =
        [(flops, "flip-flop", "s"), (latches, "latch", "es"), (gates, "clock gate", "s"), (boxes, "black box", "es")];
    let some = counts.into_iter().filter(|(number, ..)| *number > 0);
    let texts = some.map(|(number, noun, plural)| format!("{number} {noun}{}", if number == 1 { "" } else { plural }));
    let texts: Vec<String> = texts.collect();
    match texts.split_last() {
        None => count(0, "flip-flop"),
        Some((last, [])) => last.clone(),
        Some((last, rest)) => format!("{} and {last}", rest.join(", ")),
    }
}

/// "can pulse low the reset `n`" and its sisters: what the hazard makes `what` do.
pub(super) fn can(kind: HazardKind, what: &str) -> String {
    match kind {
        HazardKind::Static0 => format!("can pulse high {what}"),
        HazardKind::Static1 => format!("can pulse low {what}"),
        HazardKind::Dynamic => format!("can switch {what} more than once"),
    }
}

/// Who does it: "a change of `a` alone", "a change of `a` alone (or of any of 3 others)".
pub(super) fn who(lead: &str, sources: usize) -> String {
    match sources {
        0 | 1 => format!("a change of `{lead}` alone"),
        2 => format!("a change of `{lead}` alone (or of 1 other signal)"),
        _ => format!("a change of `{lead}` alone (or of any of {} others)", sources - 1),
    }
}

/// What a node is, with its article: "an AND gate".
pub(super) fn gate(graph: &Graph, node: NodeId) -> String {
    match graph.kind(node) {
        NodeKind::Gate(kind) => match kind {
            GateKind::Buf => "a buffer".to_string(),
            GateKind::Not => "an inverter".to_string(),
            GateKind::And | GateKind::Or | GateKind::Xor | GateKind::Xnor => {
                format!("{} gate", with_article(&kind.name().to_uppercase()))
            }
            GateKind::Nand | GateKind::Nor => format!("a {} gate", kind.name().to_uppercase()),
        },
        NodeKind::Table(table) => format!("a primitive `{}`", graph.tables[table.index()].name),
        NodeKind::OpIn(operator) | NodeKind::OpOut(operator) => with_article(graph.operators[operator.index()].what),
        NodeKind::Const(_) | NodeKind::Unknown => "a constant".to_string(),
        NodeKind::Source(_) => "a source".to_string(),
        NodeKind::Wire => "a wire".to_string(),
    }
}

pub(super) fn with_article(noun: &str) -> String {
    let vowel = noun.chars().next().is_some_and(|first| "aeiouAEIOX".contains(first));
    format!("{} {noun}", if vowel { "an" } else { "a" })
}

/// The worse of two judgements; texts of equal weight are kept both.
pub(super) fn worse(first: (Severity, String), second: (Severity, String)) -> (Severity, String) {
    let text = if first.1 == second.1 { first.1.clone() } else { format!("{}; {}", first.1, second.1) };
    (first.0.max(second.0), text)
}

/// What a pulse too short for its pins does, if there are several.
pub(super) fn short_pulse(uses: &[Use]) -> &'static str {
    if cell_count(uses) > 1 { "; a short pulse may take some of them and miss others" } else { "" }
}
