//! The decision: every target against every source that reaches it. Cheap and exact methods come first. The parity
//! filter settles most pairs; cones of few sources are enumerated; random simulation finds most of the hazards that are
//! left and the solver proves the rest. Work is divided by target while cones are small and by source where targets
//! share them, and each piece depends on nothing but the graph and the options, so the result is the same for any
//! number of threads.

use std::collections::BTreeMap;

use rayon::prelude::*;

use super::cone::{Cone, Edge, Op};
use super::order::Order;
use super::{HazardKind, Method, Options, Pair, TargetVerdict, Undecided, Witness};
use super::{enumerate, feedback, search};
use crate::graph::{Graph, NodeId, NodeKind};

/// The kinds in the order of the report.
pub(super) const KINDS: [HazardKind; 3] = HazardKind::ALL;

/// A set of hazard kinds.
#[derive(Clone, Copy, PartialEq, Eq, Default, Debug)]
pub(super) struct KindSet(u8);

impl KindSet {
    pub(super) const ALL: Self = Self(0b111);

    pub(super) fn insert(&mut self, kind: HazardKind) {
        self.0 |= 1 << kind as u8;
    }

    pub(super) fn contains(self, kind: HazardKind) -> bool {
        self.0 >> kind as u8 & 1 == 1
    }

    pub(super) fn union(self, other: Self) -> Self {
        Self(self.0 | other.0)
    }

    pub(super) fn is_empty(self) -> bool {
        self.0 == 0
    }
}

/// An answer other than "clean" to one question about a root of a cone.
pub(super) struct Answer {
    /// Index of the root.
    pub(super) root: usize,
    pub(super) source: NodeId,
    pub(super) kind: HazardKind,
    pub(super) result: Result<Witness, Undecided>,
}

/// Decides every target against every source that reaches it. Under [`Options::one_per_kind`] only the first witness of
/// a kind is listed per target, and pairs that were left out because of it are not in the list.
pub fn decide(graph: &Graph, targets: &[NodeId], options: &Options) -> Vec<TargetVerdict> {
    // Nets connected by nothing but wires are one net: each is decided once.
    let mut places: BTreeMap<NodeId, usize> = BTreeMap::new();
    for &target in targets {
        let next = places.len();
        places.entry(graph.root(target)).or_insert(next);
    }
    let mut nodes: Vec<(usize, NodeId)> = places.iter().map(|(&node, &place)| (place, node)).collect();
    nodes.sort_unstable();
    let nodes: Vec<NodeId> = nodes.into_iter().map(|(_, node)| node).collect();

    let cone = Cone::new(graph, &nodes, options.ignore_operators);
    let extents: Vec<Extent> = cone.roots.par_iter().map(|&root| Extent::new(graph, &cone, root)).collect();

    let small: Vec<usize> = (0..nodes.len()).filter(|&at| enumerate::fits(&extents[at].measure, options)).collect();
    let large: Vec<usize> = (0..nodes.len()).filter(|&at| !enumerate::fits(&extents[at].measure, options)).collect();
    let mut answers: Vec<Vec<Answer>> = (0..nodes.len()).map(|_| Vec::new()).collect();
    let mut methods = vec![Method::Structure; nodes.len()];
    let enumerated: Vec<(usize, Method, Vec<Answer>)> = small
        .into_par_iter()
        .map(|at| {
            let (method, found) = enumerate::enumerate(&cone.restrict(&[cone.roots[at]]), options);
            (at, method, found)
        })
        .collect();
    for (at, method, found) in enumerated {
        (methods[at], answers[at]) = (method, found);
    }
    if !large.is_empty() {
        let roots: Vec<Edge> = large.iter().map(|&at| cone.roots[at]).collect();
        let measures: Vec<Measure> = large.iter().map(|&at| extents[at].measure).collect();
        let (suspect, found) = search::search(&cone.restrict(&roots), &measures, options);
        for answer in found {
            answers[large[answer.root]].push(answer);
        }
        for root in suspect {
            methods[large[root]] = Method::Solver;
        }
    }

    let verdicts: Vec<TargetVerdict> = nodes
        .iter()
        .zip(answers.into_iter().zip(&extents).zip(methods))
        .map(|(&node, ((answers, extent), method))| TargetVerdict { method, ..extent.verdict(node, answers) })
        .collect();
    let verdicts: Vec<TargetVerdict> = verdicts
        .into_par_iter()
        .zip(&extents)
        .map(|(verdict, extent)| match extent.looped.as_slice() {
            [] => verdict,
            looped => feedback::decide(graph, &verdict, options).unwrap_or_else(|| restless(verdict, looped)),
        })
        .collect();
    targets.iter().map(|&target| TargetVerdict { target, ..verdicts[places[&graph.root(target)]].clone() }).collect()
}

/// Loops that could not be followed may move by themselves, whatever the sources do, and need not have the values that a
/// witness supposes.
fn restless(mut verdict: TargetVerdict, looped: &[NodeId]) -> TargetVerdict {
    let is_looped = |node: &NodeId| looped.binary_search(node).is_ok();
    if let Some(&first) = looped.first() {
        let at = verdict.pairs.partition_point(|pair| pair.source < first);
        if verdict.pairs.get(at).is_none_or(|pair| pair.source != first) {
            verdict.pairs.insert(at, Pair { source: first, hazards: Vec::new(), undecided: Vec::new() });
        }
    }
    for pair in &mut verdict.pairs {
        let supposed =
            |witness: &Witness| witness.holds.iter().chain(&witness.changes).any(|(node, _)| is_looped(node));
        let open: Vec<HazardKind> =
            pair.hazards.extract_if(.., |(_, witness)| supposed(witness)).map(|(kind, _)| kind).collect();
        pair.undecided.extend(open.into_iter().map(|kind| (kind, Undecided::Loop)));
        if is_looped(&pair.source) {
            pair.undecided = KINDS.map(|kind| (kind, Undecided::Loop)).to_vec();
        }
        pair.undecided.sort_unstable();
    }
    verdict
}

/// The size of a root's cone.
#[derive(Clone, Copy)]
pub(super) struct Measure {
    pub(super) nodes: usize,
    /// Sources and unknown constants.
    pub(super) frees: usize,
}

/// What one root depends on.
struct Extent {
    measure: Measure,
    /// How many sources reach the root, those behind loops and the nodes of loops included.
    sources: usize,
    /// The sources that reach the root through a loop.
    behind_loops: Vec<NodeId>,
    /// The nodes of loops that the root depends on directly; sorted.
    looped: Vec<NodeId>,
}

impl Extent {
    fn new(graph: &Graph, cone: &Cone, root: Edge) -> Self {
        let members = cone.closure([root.node()].into_iter(), |_| true);
        let mut frees = 0;
        let mut sources = Vec::new();
        let mut looped = Vec::new();
        for &member in &members {
            let origin = cone.origin[member as usize];
            if let Op::Free { changes } = cone.ops[member as usize] {
                frees += 1;
                if changes {
                    sources.push(origin);
                    if !matches!(graph.kind(origin), NodeKind::Source(_)) {
                        looped.push(origin);
                    }
                }
            }
        }
        let behind_loops = if looped.is_empty() { Vec::new() } else { Order::sources_behind(graph, &looped) };
        sources.extend_from_slice(&behind_loops);
        sources.sort_unstable();
        sources.dedup();
        looped.sort_unstable();
        Self { measure: Measure { nodes: members.len(), frees }, sources: sources.len(), behind_loops, looped }
    }

    /// Sorts the answers by source; what may come through a loop and is not proven hazardous stays open.
    fn verdict(&self, target: NodeId, answers: Vec<Answer>) -> TargetVerdict {
        let mut pairs: BTreeMap<NodeId, Pair> = BTreeMap::new();
        fn pair(pairs: &mut BTreeMap<NodeId, Pair>, source: NodeId) -> &mut Pair {
            pairs.entry(source).or_insert_with(|| Pair { source, hazards: Vec::new(), undecided: Vec::new() })
        }
        for answer in answers {
            // A witness in which the loop holds still while a source drives it shows nothing.
            let supposes =
                |witness: &Witness| witness.holds.iter().any(|(node, _)| self.looped.binary_search(node).is_ok());
            if self.behind_loops.binary_search(&answer.source).is_ok() && answer.result.as_ref().is_ok_and(supposes) {
                continue;
            }
            let pair = pair(&mut pairs, answer.source);
            match answer.result {
                Ok(witness) => pair.hazards.push((answer.kind, witness)),
                Err(reason) => pair.undecided.push((answer.kind, reason)),
            }
        }
        for &source in &self.behind_loops {
            let pair = pair(&mut pairs, source);
            let open = |kind: &HazardKind| pair.hazards.iter().all(|(known, _)| known != kind);
            pair.undecided = KINDS.into_iter().filter(open).map(|kind| (kind, Undecided::Loop)).collect();
        }
        let mut pairs: Vec<Pair> = pairs.into_values().collect();
        for pair in &mut pairs {
            pair.hazards.sort_unstable_by_key(|&(kind, _)| kind);
            pair.undecided.sort_unstable();
        }
        pairs.retain(|pair| !pair.hazards.is_empty() || !pair.undecided.is_empty());
        TargetVerdict { target, sources: self.sources, pairs, ..TargetVerdict::clean(target) }
    }
}
