//! A cover as Verilog over the design's own names, or the reason why none is proposed. The text declares a new net made
//! of the old one and the terms, so that it can be pasted behind the present logic whatever that looks like.

use super::finding::CoverText;
use super::names;
use crate::graph::{Graph, InstanceId, NodeId};
use crate::hazard::Cover;

/// Stands for logic that has no name of its own in the design.
const PRESENT: &str = "<present logic>";

/// The cover of a pin: a net to be read in place of the present one. `None` when a literal has no name in the design.
pub(super) fn of(graph: &Graph, target: NodeId, cover: &Cover) -> Option<CoverText> {
    let scope = names::instance(graph, target);
    let old = names::verilog(graph, target, scope)?;
    let present = if names::is_made(graph, target) { PRESENT } else { &old };
    let name: String = old.chars().map(|c| if c.is_ascii_alphanumeric() { c } else { '_' }).collect();
    let name = name.trim_matches('_');
    text(graph, target, cover, present, &format!("wire {name}_covered"))
}

/// The cover of a loop: the terms must stand inside the feedback, so the net itself is assigned.
pub(super) fn of_loop(graph: &Graph, target: NodeId, cover: &Cover) -> Option<CoverText> {
    let name = names::verilog(graph, target, names::instance(graph, target))?;
    text(graph, target, cover, PRESENT, &format!("assign {name}"))
}

/// `<left> = <terms over present>;`
fn text(graph: &Graph, target: NodeId, cover: &Cover, present: &str, left: &str) -> Option<CoverText> {
    let scope = names::instance(graph, target);
    let term = |literals: &Vec<(NodeId, bool)>, operator: &str| -> Option<String> {
        let literals: Option<Vec<String>> =
            literals.iter().map(|&(node, positive)| literal(graph, node, positive, scope)).collect();
        let literals = literals?;
        // A term without literals is the constant that the net keeps whatever its signals do.
        Some(match (literals.is_empty(), operator) {
            (false, _) => literals.join(operator),
            (true, " & ") => "1'b1".to_string(),
            (true, _) => "1'b0".to_string(),
        })
    };
    let products: Option<Vec<String>> = cover.products.iter().map(|literals| term(literals, " & ")).collect();
    let sums: Option<Vec<String>> = cover.sums.iter().map(|literals| term(literals, " | ")).collect();
    let (products, sums) = (products?, sums?);
    let mut alternatives: Vec<String> = Vec::new();
    if !cover.replaces {
        alternatives.push(present.to_string());
    }
    alternatives.extend(products.iter().map(|product| parenthesised(product, " & ")));
    let mut whole = alternatives.join(" | ");
    if !sums.is_empty() {
        whole = parenthesised(&whole, " | ");
        for sum in &sums {
            whole.push_str(&format!(" & {}", parenthesised(sum, " | ")));
        }
    }
    let verilog = format!("{left} = {whole};");
    let terms = products.into_iter().chain(sums).collect();
    Some(CoverText { terms, verilog, proven: cover.proven, target, cover: cover.clone() })
}

fn parenthesised(text: &str, operator: &str) -> String {
    if text.contains(operator) { format!("({text})") } else { text.to_string() }
}

fn literal(graph: &Graph, node: NodeId, positive: bool, scope: InstanceId) -> Option<String> {
    let name = names::verilog(graph, node, scope)?;
    Some(if positive { name } else { format!("~{name}") })
}
