//! The changed text: the expression and each term become wires of their own, a wire joins them, and all of them carry an
//! attribute (IEEE 1364-2005 clause 3.8) that asks the synthesiser to keep them. What stands before and behind the
//! statement on its lines, comments included, stays where it is; line ends and indentation are those of the file.

use super::statement::{Form, Statement};
use crate::graph::{Graph, NodeId};
use crate::hazard::Cover;
use crate::rules::names;

/// The attribute of the new wires.
const KEEP: &str = "(* keep *)";

/// Why the text cannot be changed.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) enum Obstacle {
    /// A term needs a signal that the module has no name for.
    NoName,
    /// A term needs a signal that is declared below the statement.
    DeclaredLater(String),
}

impl Obstacle {
    pub(super) fn words(&self) -> String {
        match self {
            Obstacle::NoName => "a term needs a signal that has no name in the module".to_string(),
            Obstacle::DeclaredLater(name) => format!("a term needs `{name}`, which is declared below the statement"),
        }
    }
}

/// The text of the whole file with the cover in place.
pub(super) fn patched(graph: &Graph, text: &str, statement: &Statement, cover: &Cover) -> Result<String, Obstacle> {
    let lines = replacement(graph, text, statement, cover)?;
    let (start, end) = (statement.at.start as usize, statement.at.end as usize);
    let line_start = text[..start].rfind('\n').map_or(0, |at| at + 1);
    let indent: String = text[line_start..].chars().take_while(|c| matches!(c, ' ' | '\t')).collect();
    let newline = if text.contains("\r\n") { "\r\n" } else { "\n" };
    let joined = lines.join(&format!("{newline}{indent}"));
    Ok(format!("{}{joined}{}", &text[..start], &text[end..]))
}

/// The statements that replace the one, in order.
fn replacement(graph: &Graph, text: &str, statement: &Statement, cover: &Cover) -> Result<Vec<String>, Obstacle> {
    let net = statement.net.as_str();
    let stem = fresh(text, net);
    let mut lines = Vec::new();
    let mut whole: Vec<String> = Vec::new();
    if !cover.replaces {
        let value = &text[statement.value.start as usize..statement.value.end as usize];
        lines.push(format!("{KEEP} wire {stem}_written = {value};"));
        whole.push(format!("{stem}_written"));
    }
    let mut number = 0;
    let mut feeds_back = false;
    let mut term = |literals: &[(NodeId, bool)], operator: &str, empty: &str| -> Result<String, Obstacle> {
        let mut texts = Vec::with_capacity(literals.len());
        for &(node, positive) in literals {
            let (name, is_net) = local(graph, statement, node)?;
            feeds_back |= is_net;
            texts.push(if positive { name } else { format!("~{name}") });
        }
        number += 1;
        let name = format!("{stem}_term{number}");
        let value = if texts.is_empty() { empty.to_string() } else { texts.join(operator) };
        lines.push(format!("{KEEP} wire {name} = {value};"));
        Ok(name)
    };
    for product in &cover.products {
        whole.push(term(product, " & ", "1'b1")?);
    }
    let mut joined = whole.join(" | ");
    let mut sums = Vec::new();
    for sum in &cover.sums {
        sums.push(term(sum, " | ", "1'b0")?);
    }
    if !sums.is_empty() {
        let alternatives = if whole.len() > 1 { format!("({joined})") } else { joined };
        joined = format!("{alternatives} & {}", sums.join(" & "));
    }
    let name = names::identifier(net);
    // A comment in front of the declaration may speak about it, and a term that feeds back reads the net.
    let watched = text[..statement.at.start as usize]
        .trim_end()
        .lines()
        .next_back()
        .is_some_and(|line| line.trim_start().starts_with("//"));
    match statement.form {
        Form::Initialiser if !watched && !feeds_back => lines.push(format!("{KEEP} wire {name} = {joined};")),
        form => {
            if form == Form::Initialiser {
                lines.insert(0, format!("wire {name};"));
            }
            lines.push(format!("{KEEP} wire {stem}_covered = {joined};"));
            lines.push(format!("assign {name} = {stem}_covered;"));
        }
    }
    Ok(lines)
}

/// The name of a source inside the module, and whether it is the net itself.
fn local(graph: &Graph, statement: &Statement, node: NodeId) -> Result<(String, bool), Obstacle> {
    let Some((name, declared)) = names::visible_name(graph, node, statement.scope) else {
        return Err(Obstacle::NoName);
    };
    let is_net = graph.root(node) == graph.root(statement.wire);
    let here = statement.at;
    if !is_net && declared.file == here.file && declared.start > here.start {
        return Err(Obstacle::DeclaredLater(name));
    }
    Ok((name, is_net))
}

/// A beginning for names that the file does not use yet.
fn fresh(text: &str, net: &str) -> String {
    let base: String = net.chars().map(|c| if c.is_ascii_alphanumeric() { c } else { '_' }).collect();
    let mut stem = base.trim_matches('_').to_string();
    if stem.is_empty() || stem.starts_with(|first: char| first.is_ascii_digit()) {
        stem.insert_str(0, "net");
    }
    while ["_written", "_term", "_covered"].iter().any(|ending| text.contains(&format!("{stem}{ending}"))) {
        stem.push_str("_hf");
    }
    stem
}
