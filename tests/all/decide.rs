//! The hazard decision against a naive opponent: random graphs over every kind of node, each transition of each source
//! evaluated one by one with the rules of the waveform algebra written down again, straight from the documentation of
//! the graph. Enumeration, simulation and solver must give exactly the opponent's set of (target, source, kind), and
//! every witness must hold for any completion of the sources it does not list.

use std::collections::{BTreeMap, BTreeSet};

use stillwire::graph::{GateKind, Graph, GraphBuilder, NodeId, NodeKind, Site, SourceKind, Symbol, Table};
use stillwire::hazard::{HazardKind, Options, Pair, TargetVerdict, decide, waveform};

type Bits = (bool, bool, bool);

pub struct Random(pub u64);

impl Random {
    pub fn below(&mut self, bound: usize) -> usize {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        (self.0 >> 33) as usize % bound
    }

    pub fn chance(&mut self, percent: usize) -> bool {
        self.below(100) < percent
    }
}

/// A table that gives every combination a value: random points, some rows widened to `?` or `x` where that is true.
fn random_table(random: &mut Random, name: String) -> Table {
    let inputs = 2 + random.below(2);
    let points: Vec<bool> = (0..1 << inputs).map(|_| random.chance(50)).collect();
    let symbol = |value: bool| if value { Symbol::One } else { Symbol::Zero };
    let mut rows = Vec::new();
    for (point, &value) in points.iter().enumerate() {
        let row = (0..inputs).map(|at| symbol(point >> at & 1 == 1)).collect();
        // One combination in ten has no row.
        if !random.chance(10) {
            rows.push((row, symbol(value)));
        }
    }
    for (point, &value) in points.iter().enumerate() {
        for at in 0..inputs {
            if points[point ^ 1 << at] == value && random.chance(50) {
                let mut row: Vec<Symbol> = (0..inputs).map(|at| symbol(point >> at & 1 == 1)).collect();
                row[at] = [Symbol::Any, Symbol::X, Symbol::Binary][random.below(3)];
                rows.push((row, symbol(value)));
            }
        }
    }
    Table { name, rows }
}

pub fn random_graph(random: &mut Random, sources: usize, gates: usize) -> (Graph, Vec<NodeId>) {
    let mut builder = GraphBuilder::new();
    let top = builder.instance(None, "top", "top", None);
    let site = Site { instance: top, span: None };
    let mut nodes: Vec<NodeId> = (0..sources).map(|_| builder.source(SourceKind::Input, site)).collect();
    if random.chance(30) {
        nodes.push(builder.unknown(site));
    }
    let operator = builder.operator("adder", None);
    for number in 0..gates {
        // Late nodes are more likely, for depth.
        let pick = |random: &mut Random| {
            let back = random.below(nodes.len()).min(random.below(nodes.len()));
            nodes[nodes.len() - 1 - back]
        };
        let kinds = [GateKind::And, GateKind::Nand, GateKind::Or, GateKind::Nor, GateKind::Xor, GateKind::Xnor];
        let node = match random.below(20) {
            0..=11 => {
                let choice = if random.chance(30) { 6 } else { 4 };
                let kind = kinds[random.below(choice)];
                let pins: Vec<NodeId> = (0..2 + random.below(3)).map(|_| pick(random)).collect();
                builder.gate(kind, &pins, site)
            }
            12..=14 => {
                let pin = pick(random);
                builder.gate(if random.chance(80) { GateKind::Not } else { GateKind::Buf }, &[pin], site)
            }
            15 => {
                let table = random_table(random, format!("t{number}"));
                let inputs = table.rows.first().map_or(0, |row| row.0.len());
                let pins: Vec<NodeId> = (0..inputs).map(|_| pick(random)).collect();
                let table = builder.table(table);
                builder.table_node(table, &pins, site)
            }
            16 => {
                let entry = pick(random);
                let entry = builder.op_in(operator, entry, site);
                let other = pick(random);
                let inner = builder.xor(&[entry, other], site);
                builder.op_out(operator, inner, site)
            }
            17 => {
                let driver = pick(random);
                let wire = bare_wire(&mut builder, top, number);
                builder.drive(wire, driver);
                wire
            }
            18 => {
                let driver = builder.constant(random.chance(50));
                let wire = bare_wire(&mut builder, top, number);
                builder.drive(wire, driver);
                wire
            }
            _ if random.chance(20) => bare_wire(&mut builder, top, number),
            _ => {
                let (select, then, otherwise) = (pick(random), pick(random), pick(random));
                builder.select(select, then, otherwise, site)
            }
        };
        nodes.push(node);
    }
    // Folding yields the same constant again and again.
    nodes.sort_unstable();
    nodes.dedup();
    (builder.freeze(), nodes)
}

pub fn bare_wire(builder: &mut GraphBuilder, top: stillwire::graph::InstanceId, number: usize) -> NodeId {
    let span = stillwire::source::Span { file: stillwire::source::FileId::new(0), start: 0, end: 0 };
    let net = builder.net(top, &format!("w{number}"), span, vec![String::new()], true);
    builder.net_bits(net)[0]
}

fn naive(graph: &Graph, before: &BTreeMap<NodeId, bool>, after: &BTreeMap<NodeId, bool>, quiet: bool) -> Vec<Bits> {
    let mut all: Vec<Option<Bits>> = vec![None; graph.len()];
    for node in graph.nodes() {
        naive_node(graph, before, after, quiet, &mut all, node);
    }
    all.into_iter().map(|bits| bits.expect("visited")).collect()
}

fn naive_node(
    graph: &Graph,
    before: &BTreeMap<NodeId, bool>,
    after: &BTreeMap<NodeId, bool>,
    quiet: bool,
    all: &mut Vec<Option<Bits>>,
    node: NodeId,
) -> Bits {
    if let Some(bits) = all[node.index()] {
        return bits;
    }
    let pins: Vec<Bits> =
        graph.fanin(node).iter().map(|&pin| naive_node(graph, before, after, quiet, all, pin)).collect();
    let free = (before.get(&node) == Some(&true), after.get(&node) == Some(&true), false);
    let bits = match graph.kind(node) {
        NodeKind::Const(value) => (value, value, false),
        NodeKind::Unknown | NodeKind::Source(_) => free,
        NodeKind::Wire if pins.is_empty() => free,
        NodeKind::Wire => pins[0],
        NodeKind::OpIn(_) => (pins[0].0, pins[0].1, pins[0].2 || pins[0].0 != pins[0].1),
        NodeKind::OpOut(_) => (pins[0].0, pins[0].1, pins[0].2 && !quiet),
        NodeKind::Gate(kind) => naive_gate(kind, &pins),
        NodeKind::Table(table) => naive_table(&graph.tables[table.index()], &pins),
    };
    all[node.index()] = Some(bits);
    bits
}

fn naive_gate(kind: GateKind, pins: &[Bits]) -> Bits {
    let function = |of: fn(&Bits) -> bool| {
        let mut values = pins.iter().map(of);
        match kind {
            GateKind::Buf => values.next() == Some(true),
            GateKind::Not => values.next() != Some(true),
            GateKind::And => values.all(|value| value),
            GateKind::Nand => !values.all(|value| value),
            GateKind::Or => values.any(|value| value),
            GateKind::Nor => !values.any(|value| value),
            GateKind::Xor => values.filter(|value| *value).count() % 2 == 1,
            GateKind::Xnor => values.filter(|value| *value).count() % 2 == 0,
        }
    };
    let some_h = pins.iter().any(|pin| pin.2);
    let both = pins.contains(&(false, true, false)) && pins.contains(&(true, false, false));
    let h = match kind {
        GateKind::Buf | GateKind::Not => some_h,
        GateKind::And | GateKind::Nand => !pins.contains(&(false, false, false)) && (some_h || both),
        GateKind::Or | GateKind::Nor => !pins.contains(&(true, true, false)) && (some_h || both),
        GateKind::Xor | GateKind::Xnor => some_h || pins.iter().filter(|pin| pin.0 != pin.1).count() >= 2,
    };
    (function(|pin| pin.0), function(|pin| pin.1), h)
}

fn naive_table(table: &Table, pins: &[Bits]) -> Bits {
    let lookup = |point: &[bool]| -> Option<bool> {
        let fits = |symbol: &Symbol, bit: &bool| match symbol {
            Symbol::Zero => !bit,
            Symbol::One => *bit,
            Symbol::X => false,
            Symbol::Any | Symbol::Binary => true,
        };
        table
            .rows
            .iter()
            .find(|(row, _)| row.iter().zip(point).all(|(symbol, bit)| fits(symbol, bit)))
            .map(|(_, output)| *output == Symbol::One)
    };
    let before: Vec<bool> = pins.iter().map(|pin| pin.0).collect();
    let after: Vec<bool> = pins.iter().map(|pin| pin.1).collect();
    let (i, f) = (lookup(&before), lookup(&after));
    let moving: Vec<&Bits> = pins.iter().filter(|pin| pin.0 != pin.1 || pin.2).collect();
    // The cube of the inputs lies in a row whose every combination has the row's result.
    let resolved = table.rows.iter().any(|(row, output)| {
        let inside = row.iter().zip(pins).all(|(symbol, pin)| match symbol {
            Symbol::Zero => *pin == (false, false, false),
            Symbol::One => *pin == (true, true, false),
            Symbol::Binary => pin.0 == pin.1 && !pin.2,
            Symbol::X | Symbol::Any => true,
        });
        let sound = (0..1usize << row.len()).all(|point| {
            let point: Vec<bool> = (0..row.len()).map(|at| point >> at & 1 == 1).collect();
            let fits = row.iter().zip(&point).all(|(symbol, &bit)| match symbol {
                Symbol::Zero => !bit,
                Symbol::One => bit,
                _ => true,
            });
            !fits || lookup(&point) == Some(*output == Symbol::One)
        });
        inside && sound
    });
    let h = match moving.as_slice() {
        [] => false,
        _ if resolved => false,
        [one] => one.2 || i.is_none() || f.is_none() || i == f,
        _ => true,
    };
    (i == Some(true), f == Some(true), h)
}

fn kind_of(bits: Bits) -> Option<HazardKind> {
    match bits {
        (_, _, false) => None,
        (false, false, true) => Some(HazardKind::Static0),
        (true, true, true) => Some(HazardKind::Static1),
        (_, _, true) => Some(HazardKind::Dynamic),
    }
}

fn frees(graph: &Graph) -> Vec<NodeId> {
    let free = |&node: &NodeId| match graph.kind(node) {
        NodeKind::Unknown | NodeKind::Source(_) => true,
        NodeKind::Wire => graph.fanin(node).is_empty(),
        _ => false,
    };
    graph.nodes().filter(free).collect()
}

type Set = BTreeSet<(NodeId, NodeId, HazardKind)>;

fn expected(graph: &Graph, targets: &[NodeId], quiet: bool) -> Set {
    let frees = frees(graph);
    let mut set = Set::new();
    for pattern in 0..1usize << frees.len() {
        let before: BTreeMap<NodeId, bool> =
            frees.iter().enumerate().map(|(at, &node)| (node, pattern >> at & 1 == 1)).collect();
        for &source in frees.iter().filter(|&&node| matches!(graph.kind(node), NodeKind::Source(_))) {
            let mut after = before.clone();
            after.insert(source, !before[&source]);
            let all = naive(graph, &before, &after, quiet);
            for &target in targets {
                if let Some(kind) = kind_of(all[target.index()]) {
                    set.insert((target, source, kind));
                }
            }
        }
    }
    set
}

fn listed(verdicts: &[TargetVerdict]) -> Set {
    let mut set = Set::new();
    for verdict in verdicts {
        for pair in &verdict.pairs {
            assert!(pair.undecided.is_empty(), "undecided: {pair:?}");
            for (kind, _) in &pair.hazards {
                assert!(set.insert((verdict.target, pair.source, *kind)), "listed twice");
            }
        }
    }
    set
}

#[track_caller]
fn witnesses_hold(graph: &Graph, verdicts: &[TargetVerdict], quiet: bool, random: &mut Random) {
    for verdict in verdicts {
        for (pair, (kind, witness)) in
            verdict.pairs.iter().flat_map(|pair| pair.hazards.iter().map(move |hazard| (pair, hazard)))
        {
            assert_eq!(witness.changes.len(), 1);
            assert_eq!(witness.changes[0].0, pair.source);
            for _ in 0..4 {
                let mut before: BTreeMap<NodeId, bool> =
                    frees(graph).into_iter().map(|node| (node, random.chance(50))).collect();
                before.extend(witness.holds.iter().copied());
                before.extend(witness.changes.iter().copied());
                let mut after = before.clone();
                after.extend(witness.changes.iter().map(|&(node, value)| (node, !value)));
                let bits = naive(graph, &before, &after, quiet)[verdict.target.index()];
                assert_eq!(kind_of(bits), Some(*kind), "{witness:?}");
                assert_eq!((bits.0, bits.1), witness.target);
                if !quiet {
                    let wave = waveform(graph, &before, &after, verdict.target);
                    assert_eq!((wave.i, wave.f, wave.h), bits);
                }
            }
        }
    }
}

#[test]
fn every_method_agrees_with_the_naive_opponent() {
    let default = Options::default();
    let ways = [
        default,
        Options { exhaustive_sources: 0, ..default },
        Options { exhaustive_sources: 0, patterns: 0, ..default },
        Options { ignore_operators: true, ..default },
        Options { exhaustive_sources: 0, patterns: 0, ignore_operators: true, ..default },
    ];
    let mut hazards = 0;
    for seed in 1..=400u64 {
        let mut random = Random(seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1);
        let sources = 2 + random.below(4);
        let gates = 3 + random.below(22);
        let (graph, targets) = random_graph(&mut random, sources, gates);
        for options in ways {
            let expected = expected(&graph, &targets, options.ignore_operators);
            let verdicts = decide(&graph, &targets, &options);
            assert_eq!(listed(&verdicts), expected, "seed {seed}, {options:?}");
            witnesses_hold(&graph, &verdicts, options.ignore_operators, &mut random);
            hazards += expected.len();
        }
    }
    assert!(hazards > 10_000, "the graphs must be worth it: {hazards}");
}

#[test]
fn one_per_kind_finds_every_kind_once() {
    let default = Options { one_per_kind: true, ..Options::default() };
    for seed in 1..=100u64 {
        let mut random = Random(seed.wrapping_mul(0xd134_2543_de82_ef95) | 1);
        let (graph, targets) = random_graph(&mut random, 5, 20);
        let kinds = |set: Set| -> Vec<(NodeId, HazardKind)> {
            set.into_iter().map(|(target, _, kind)| (target, kind)).collect()
        };
        let mut expected = kinds(expected(&graph, &targets, false));
        expected.sort();
        expected.dedup();
        for options in [
            default,
            Options { exhaustive_sources: 0, ..default },
            Options { exhaustive_sources: 0, patterns: 0, ..default },
        ] {
            let mut found = kinds(listed(&decide(&graph, &targets, &options)));
            found.sort();
            assert_eq!(found, expected, "seed {seed}, {options:?}");
        }
    }
}

#[test]
fn thread_count_changes_nothing() {
    let mut random = Random(77);
    let (graph, targets) = random_graph(&mut random, 24, 120);
    let options = Options { patterns: 512, ..Options::default() };
    let run = |threads| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("a pool");
        pool.install(|| decide(&graph, &targets, &options))
    };
    let one = run(1);
    assert!(one.iter().any(|verdict| !verdict.pairs.is_empty()));
    assert_eq!(one, run(2));
    assert_eq!(one, run(8));
}

/// A latch made of NOR gates in front of a plain AND-OR: only its stable states count, and what changes them.
#[test]
fn what_comes_through_a_latch_of_gates_is_decided() {
    let mut builder = GraphBuilder::new();
    let top = builder.instance(None, "top", "top", None);
    let site = Site { instance: top, span: None };
    let [set, reset, a] = [0; 3].map(|_| builder.source(SourceKind::Input, site));
    let q = bare_wire(&mut builder, top, 0);
    let inverse = builder.gate(GateKind::Nor, &[set, q], site);
    let driver = builder.gate(GateKind::Nor, &[reset, inverse], site);
    builder.drive(q, driver);
    let low = builder.not(a, site);
    let upper = builder.and(&[a, q], site);
    let lower = builder.and(&[low, q], site);
    let target = builder.or(&[upper, lower], site);
    let beside = builder.and(&[a, set], site);
    // `set` drives the latch as well: it may change while `q` holds 1, and when it rises `q` may follow.
    let not_set = builder.not(set, site);
    let upper = builder.and(&[set, q], site);
    let lower = builder.and(&[not_set, q], site);
    let both = builder.or(&[upper, lower], site);
    // The same through `a`, where the latch only masks.
    let upper = builder.and(&[set, a], site);
    let lower = builder.and(&[not_set, a], site);
    let either = builder.or(&[upper, lower, q], site);
    let despite = builder.and(&[either, a], site);
    let graph = builder.freeze();

    for exhaustive_sources in [0, 16] {
        let options = Options { exhaustive_sources, ..Options::default() };
        let verdicts = decide(&graph, &[target, beside, both, despite], &options);
        let kinds = |verdict: &TargetVerdict| -> Vec<(NodeId, Vec<HazardKind>)> {
            assert!(verdict.pairs.iter().all(|pair| pair.undecided.is_empty()), "{verdict:?}");
            let kinds = |pair: &Pair| pair.hazards.iter().map(|(kind, _)| *kind).collect();
            verdict.pairs.iter().map(|pair| (pair.source, kinds(pair))).collect()
        };
        assert_eq!(verdicts[0].sources, 3);
        assert_eq!(kinds(&verdicts[0]), [(a, vec![HazardKind::Static1])]);
        let witness = &verdicts[0].pairs[0].hazards[0].1;
        assert!(witness.holds.contains(&(reset, false)), "{witness:?}");
        assert!(!witness.holds.iter().any(|&(node, _)| node == set), "{witness:?}");
        assert!(verdicts[1].is_clean());
        assert_eq!(verdicts[1].sources, 2);
        // As `set` rises, `q` may follow while the slow inverter still lets it through: 0, 1, 0, 1.
        assert_eq!(kinds(&verdicts[2]), [(set, vec![HazardKind::Static1, HazardKind::Dynamic])]);
        assert_eq!(kinds(&verdicts[3]), [(set, vec![HazardKind::Static1])]);
    }
}
