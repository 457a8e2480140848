//! Covers that an earlier run worked out. Most of the time of a decision goes into covers: each is proven by deciding its
//! net again, for every source. A cover without launches depends on the gates in front of the net, on the verdict and on
//! the bounds of the effort, all of which are in the key; nodes are numbered within the cone, in order, exactly as the
//! search for covers numbers them ([`crate::graph::cone`]), so that the same cone elsewhere in a design, or in a design
//! that has changed elsewhere, is found again.
//!
//! Covers under launches depend on the cells all around and are worked out anew.

use std::collections::{BTreeMap, BTreeSet};

use serde::Serialize;

use super::Context;
use crate::cache::{Cache, Key};
use crate::graph::{Graph, NodeId, NodeKind, OperatorId, Table, TableId};
use crate::hazard::{self, Cover, Options, TargetVerdict, Withheld};

/// The cover of the target of `verdict`, or why there is none: [`hazard::cover`], remembered.
pub(super) fn cover(graph: &Graph, verdict: &TargetVerdict, context: &Context<'_>) -> Result<Cover, Withheld> {
    let work = || hazard::cover(graph, verdict, context.launcher, context.options);
    let (Some(cache), None) = (context.cache, context.launcher) else { return work() };
    let cone = Cone::new(graph, verdict.target);
    let Some(key) = cone.key(graph, verdict, context.options) else { return work() };
    look(cache, &key, &cone).unwrap_or_else(|| {
        let result = work();
        if let Some(local) = translated(&result, |node| cone.local(node)) {
            cache.put(&key, &local);
        }
        result
    })
}

fn look(cache: &Cache, key: &Key, cone: &Cone) -> Option<Result<Cover, Withheld>> {
    let found = cache.get::<Result<Cover, Withheld>>(key)?;
    translated(&found, |node| cone.members.get(node.index()).copied())
}

/// The same over other nodes.
fn translated(
    result: &Result<Cover, Withheld>,
    other: impl Fn(NodeId) -> Option<NodeId>,
) -> Option<Result<Cover, Withheld>> {
    let Ok(cover) = result else { return Some(result.clone()) };
    let mut cover = cover.clone();
    for (node, _) in cover.products.iter_mut().chain(&mut cover.sums).flatten() {
        *node = other(*node)?;
    }
    Some(Ok(cover))
}

/// The whole fan-in of a node, in order.
struct Cone {
    members: Vec<NodeId>,
}

/// All that is known about a node.
#[derive(Serialize)]
struct Member {
    /// Tables and operators are numbered in order of first use.
    kind: NodeKind,
    fanin: Vec<NodeId>,
    fixed: bool,
}

impl Cone {
    fn new(graph: &Graph, root: NodeId) -> Self {
        let mut members = BTreeSet::new();
        let mut open = vec![root];
        while let Some(node) = open.pop() {
            if members.insert(node) {
                open.extend_from_slice(graph.fanin(node));
            }
        }
        Self { members: members.into_iter().collect() }
    }

    fn local(&self, node: NodeId) -> Option<NodeId> {
        self.members.binary_search(&node).ok().map(NodeId::new)
    }

    /// `None` for a verdict that speaks of more than the cone.
    fn key(&self, graph: &Graph, verdict: &TargetVerdict, options: &Options) -> Option<Key> {
        let verdict = self.localised(verdict)?;
        let mut tables: Vec<&Table> = Vec::new();
        let mut known_tables: BTreeMap<TableId, TableId> = BTreeMap::new();
        let mut operators: BTreeMap<OperatorId, OperatorId> = BTreeMap::new();
        let mut members = Vec::with_capacity(self.members.len());
        for &node in &self.members {
            let next = OperatorId::new(operators.len());
            let kind = match graph.kind(node) {
                NodeKind::Table(table) => NodeKind::Table(*known_tables.entry(table).or_insert_with(|| {
                    tables.push(&graph.tables[table.index()]);
                    TableId::new(tables.len() - 1)
                })),
                NodeKind::OpIn(operator) => NodeKind::OpIn(*operators.entry(operator).or_insert(next)),
                NodeKind::OpOut(operator) => NodeKind::OpOut(*operators.entry(operator).or_insert(next)),
                kind => kind,
            };
            let fanin = graph.fanin(node).iter().map(|&pin| self.local(pin)).collect::<Option<_>>()?;
            members.push(Member { kind, fanin, fixed: graph.is_static(node) });
        }
        Key::of("cover", &(members, tables, verdict, options))
    }

    fn localised(&self, verdict: &TargetVerdict) -> Option<TargetVerdict> {
        let mut verdict = verdict.clone();
        if !verdict.launches.is_empty() || !verdict.open_launches.is_empty() {
            return None;
        }
        verdict.target = self.local(verdict.target)?;
        for pair in &mut verdict.pairs {
            pair.source = self.local(pair.source)?;
            for (_, witness) in &mut pair.hazards {
                if witness.launch.is_some() {
                    return None;
                }
                for (node, _) in witness.changes.iter_mut().chain(&mut witness.holds) {
                    *node = self.local(*node)?;
                }
            }
        }
        Some(verdict)
    }
}
