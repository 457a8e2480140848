//! The paths of a witness: on random graphs every claim they make is checked against the simulated waveforms and the
//! edges of the graph, and one small circuit is read by hand.

use std::collections::{BTreeMap, BTreeSet};

use stillwire::graph::{GateKind, Graph, GraphBuilder, NodeId, NodeKind, Site, SourceKind};
use stillwire::hazard::{HazardKind, Options, Paths, Wave, Witness, decide, paths, waveform};

use crate::decide::{Random, bare_wire, random_graph};

/// The waveforms of all nodes under a witness, the sources it leaves open at 0.
fn simulate(graph: &Graph, witness: &Witness) -> BTreeMap<NodeId, Wave> {
    let mut before: BTreeMap<NodeId, bool> = witness.holds.iter().copied().collect();
    before.extend(witness.changes.iter().copied());
    let after = witness.changes.iter().map(|&(node, value)| (node, !value)).collect();
    graph.nodes().map(|node| (node, waveform(graph, &before, &after, node))).collect()
}

/// Whether `to` follows `from`, with nothing between them but the unnamed inside of an operator.
fn follows(graph: &Graph, from: NodeId, to: NodeId) -> bool {
    if graph.fanin(to).contains(&from) {
        return true;
    }
    let mut open = if matches!(graph.kind(to), NodeKind::OpOut(_)) { vec![to] } else { Vec::new() };
    let mut seen = BTreeSet::new();
    while let Some(node) = open.pop() {
        if !seen.insert(node) || (node != to && matches!(graph.kind(node), NodeKind::OpOut(_) | NodeKind::Source(_))) {
            continue;
        }
        if graph.fanin(node).contains(&from) {
            return true;
        }
        open.extend_from_slice(graph.fanin(node));
    }
    false
}

fn check(graph: &Graph, target: NodeId, witness: &Witness, paths: &Paths) {
    let waves = simulate(graph, witness);
    let operator = matches!(graph.kind(paths.meet), NodeKind::OpOut(_));
    assert_eq!(paths.tail.first(), Some(&paths.meet));
    assert_eq!(paths.tail.last(), Some(&target));
    assert!(paths.tail.iter().all(|node| waves[node].h));
    assert!(paths.tail.windows(2).all(|pair| follows(graph, pair[0], pair[1])));
    let lonely = operator || matches!(graph.kind(paths.meet), NodeKind::Table(_));
    assert!(paths.ways.len() == 2 || (lonely && paths.ways.len() == 1), "{paths:?}");
    let mut last = Vec::new();
    for way in &paths.ways {
        let nodes: Vec<NodeId> = way.steps.iter().map(|step| step.node).collect();
        assert_eq!(nodes.first(), Some(&paths.stem));
        assert_eq!(nodes.last(), Some(&paths.meet));
        assert!(nodes.len() >= 2);
        assert!(nodes[..nodes.len() - 1].iter().all(|node| waves[node].changes()));
        assert!(nodes.windows(2).all(|pair| follows(graph, pair[0], pair[1])), "{nodes:?}");
        let between = &nodes[1..nodes.len() - 1];
        assert_eq!(way.gates, between.iter().filter(|&&node| graph.kind(node) != NodeKind::Wire).count());
        let arrival = nodes[nodes.len() - 2];
        assert_eq!(way.inversions % 2 == 1, waves[&paths.stem].rises() != waves[&arrival].rises());
        last.push(waves[&arrival].rises());
    }
    if let [left, right] = paths.ways.as_slice() {
        let inside = |way: &stillwire::hazard::Path| -> BTreeSet<NodeId> {
            way.steps[1..way.steps.len() - 1].iter().map(|step| step.node).collect()
        };
        assert!(inside(left).is_disjoint(&inside(right)), "the stem is the last common node");
        if matches!(
            graph.kind(paths.meet),
            NodeKind::Gate(GateKind::And | GateKind::Nand | GateKind::Or | GateKind::Nor)
        ) {
            assert_ne!(last[0], last[1], "one rises, one falls");
        }
    }
}

#[test]
fn every_step_of_a_path_happens() {
    let (mut double, mut single) = (0, 0);
    for seed in 1..=150u64 {
        let mut random = Random(seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1);
        let (graph, targets) = random_graph(&mut random, 4, 25);
        for ignore_operators in [false, true] {
            let options = Options { ignore_operators, ..Options::default() };
            for verdict in decide(&graph, &targets, &options) {
                for (_, witness) in verdict.pairs.iter().flat_map(|pair| &pair.hazards) {
                    let paths = paths(&graph, verdict.target, witness);
                    check(&graph, verdict.target, witness, &paths);
                    assert!(!ignore_operators || !matches!(graph.kind(paths.meet), NodeKind::OpOut(_)));
                    *(if paths.ways.len() == 2 { &mut double } else { &mut single }) += 1;
                }
            }
        }
    }
    assert!(double > 1000 && single > 100, "{double} and {single}");
}

/// AB + A'C (a classic example of a static-1 hazard, in every textbook) through wires: A splits, one half goes through
/// the inverter, and the halves meet at the OR.
#[test]
fn the_classic_selector() {
    let mut builder = GraphBuilder::new();
    let top = builder.instance(None, "top", "top", None);
    let site = Site { instance: top, span: None };
    let [a, b, c] = [0; 3].map(|_| builder.source(SourceKind::Input, site));
    let wire = bare_wire(&mut builder, top, 0);
    builder.drive(wire, a);
    let inverse = builder.not(wire, site);
    let upper = builder.and(&[wire, b], site);
    let lower = builder.and(&[inverse, c], site);
    let either = builder.or(&[upper, lower], site);
    let target = bare_wire(&mut builder, top, 1);
    builder.drive(target, either);
    let graph = builder.freeze();

    let verdicts = decide(&graph, &[target], &Options::default());
    let [pair] = verdicts[0].pairs.as_slice() else { panic!("one pair: {verdicts:?}") };
    assert_eq!(pair.source, a);
    let [(HazardKind::Static1, witness)] = pair.hazards.as_slice() else { panic!("one hazard: {pair:?}") };
    assert_eq!(witness.holds, vec![(b, true), (c, true)]);
    assert_eq!(witness.target, (true, true));
    let paths = paths(&graph, target, witness);
    assert_eq!((paths.stem, paths.meet), (wire, either));
    assert_eq!(paths.tail, vec![either, target]);
    let mut ways: Vec<(Vec<NodeId>, usize, usize)> = paths
        .ways
        .iter()
        .map(|way| (way.steps.iter().map(|step| step.node).collect(), way.gates, way.inversions))
        .collect();
    ways.sort();
    assert_eq!(ways, vec![(vec![wire, inverse, lower, either], 2, 1), (vec![wire, upper, either], 1, 0)]);
}
