//! From watch comments to the nets they mark.

use std::collections::{BTreeMap, BTreeSet};

use super::pragma::WatchPragma;
use crate::graph::{Graph, NetId};
use crate::rules::{Finding, Rule, Severity, Watch, bookkeeping};
use crate::source::{FileId, SourceSet};

/// The nets declared on the lines that the comments speak about, in every instance; and a finding for each comment that
/// marks nothing although its file was analysed, because a net that is thought to be watched and is not is worse than
/// none.
pub fn watches(graph: &Graph, sources: &SourceSet, pragmas: &[WatchPragma]) -> (Vec<Watch>, Vec<Finding>) {
    let declared = if pragmas.is_empty() { BTreeMap::new() } else { declared_on(graph, sources) };
    let analysed = analysed_files(graph);
    let mut watches = Vec::new();
    let mut findings = Vec::new();
    for pragma in pragmas {
        match declared.get(&(pragma.at.file, pragma.line)) {
            Some(nets) => {
                watches.extend(nets.iter().map(|&net| Watch { net, reason: pragma.reason.clone() }));
            }
            None if analysed.contains(&pragma.at.file) => findings.push(bookkeeping(
                Rule::SignoffStale,
                Severity::Warning,
                "this watch marks no declaration of a net that was analysed; nothing is watched".to_string(),
                pragma.at,
                "put it on the line of the declaration, or alone on the line before",
                &pragma.reason,
            )),
            None => {}
        }
    }
    (watches, findings)
}

/// The nets declared on each line.
pub fn declared_on(graph: &Graph, sources: &SourceSet) -> BTreeMap<(FileId, usize), Vec<NetId>> {
    let mut declared: BTreeMap<(FileId, usize), Vec<NetId>> = BTreeMap::new();
    for (index, net) in graph.nets.iter().enumerate() {
        let line = sources.file(net.span.file).line_column(net.span.start).0;
        declared.entry((net.span.file, line)).or_default().push(NetId::new(index));
    }
    declared
}

/// The files that something in the graph comes from. Comments elsewhere cannot be judged.
pub fn analysed_files(graph: &Graph) -> BTreeSet<FileId> {
    let nets = graph.nets.iter().map(|net| net.span.file);
    let nodes = graph.nodes().filter_map(|node| graph.span(node)).map(|span| span.file);
    nets.chain(nodes).collect()
}
