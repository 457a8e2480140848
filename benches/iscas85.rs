//! The hazard decision on the ISCAS-85 circuits (Brglez, Fujiwara 1985) as `circuitgraph` packs them, resynthesised: every
//! output against every source that reaches it, as `watch` asks it, on one core. Nothing may stay undecided. The time is
//! that of the decision alone; reading the netlists is not in it.
//!
//! Needs the outside data: `STILLWIRE_DATA=$(tests/outside/fetch) cargo bench --profile dev --bench iscas85`.
#![allow(clippy::print_stdout, reason = "a bench prints what it measured")]

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use stillwire::elaborate::{self, elaborate};
use stillwire::graph::{Graph, NodeId, PortDirection};
use stillwire::hazard::{Options, decide};
use stillwire::source::{Request, load, on_big_stacks};

/// The circuits with the number of outputs that their published description gives (Hansen, Yalcin, Hayes 1999).
const CIRCUITS: [(&str, usize); 11] = [
    ("c17", 2),
    ("c432", 7),
    ("c499", 32),
    ("c880", 26),
    ("c1355", 32),
    ("c1908", 25),
    ("c2670", 140),
    ("c3540", 22),
    ("c5315", 123),
    ("c6288", 32),
    ("c7552", 108),
];

/// Where `tests/outside/fetch` put the data; `None` when it was not called.
fn data() -> Option<PathBuf> {
    let fetched = std::env::var_os("STILLWIRE_DATA").map(PathBuf::from);
    let folder = fetched.unwrap_or_else(|| Path::new(env!("CARGO_MANIFEST_DIR")).join("target/outside"));
    folder.join("stamp").is_file().then_some(folder)
}

fn read(file: &Path) -> Graph {
    let request = Request { paths: vec![file.to_path_buf()], ..Request::default() };
    let loaded = load(&request, &|_| None, &|_, _| {}).expect("the netlist is there");
    assert!(loaded.diagnostics.is_empty(), "{:?}", loaded.diagnostics);
    let (design, diagnostics) = elaborate(&loaded.units, &elaborate::Request::default());
    assert!(diagnostics.is_empty(), "{diagnostics:?}");
    design.graph
}

/// What is left of the outputs once each driver is asked only once.
fn targets(graph: &Graph) -> (usize, Vec<NodeId>) {
    let outputs: Vec<NodeId> = graph
        .ports
        .iter()
        .filter(|port| port.direction == PortDirection::Output)
        .flat_map(|port| &graph.nets[port.net.index()].bits)
        .map(|&bit| graph.root(bit))
        .collect();
    let distinct: BTreeSet<NodeId> = outputs.iter().copied().collect();
    (outputs.len(), distinct.into_iter().collect())
}

fn run(data: &Path) {
    let (mut questions, mut time) = (0, Duration::ZERO);
    println!("circuit outputs questions hazards   seconds");
    for (name, published) in CIRCUITS {
        let graph = read(&data.join("netlists").join(name).with_extension("v"));
        let (outputs, targets) = targets(&graph);
        assert_eq!(outputs, published, "{name} is the published circuit");
        let start = Instant::now();
        let verdicts = decide(&graph, &targets, &Options::default());
        let elapsed = start.elapsed();
        // Three kinds of hazard for every pair of an output and a source.
        let asked: usize = verdicts.iter().map(|verdict| 3 * verdict.sources).sum();
        let pairs = || verdicts.iter().flat_map(|verdict| &verdict.pairs);
        let hazards: usize = pairs().map(|pair| pair.hazards.len()).sum();
        assert!(pairs().all(|pair| pair.undecided.is_empty()), "{name} has undecided questions");
        println!("{name:7} {outputs:7} {asked:9} {hazards:7} {:9.3}", elapsed.as_secs_f64());
        questions += asked;
        time += elapsed;
    }
    let seconds = time.as_secs_f64();
    println!("{questions} questions in {seconds:.2} s on one core, {:.0} per second", questions as f64 / seconds);
    println!("0 undecided; the aim is 6 s");
}

fn main() {
    match data() {
        Some(data) => on_big_stacks(1, || run(&data)).expect("one thread"),
        None => println!("iscas85: no outside data, run tests/outside/fetch first"),
    }
}
