//! Exactness of the launch analysis on random circuits: 500 small sequential ones, each written as Verilog, read by the
//! whole pipeline, and compared net by net with the [`crate::launch_explorer`], which knows neither the product's graph nor
//! its algebra nor its solver. The circuits have flip-flops of both edges and of several clocks, ripple clocks, clocks
//! gated by AND, OR and latches, enables (some shared), resets decoded from the state, latches of both phases.
//!
//! Compared are, for each net that drives a clock, a control or a latch enable, the pairs of one changing source and a kind,
//! and the kinds that occur at all. A hazard too few is a false "clean", one too many a false alarm.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt::Write;

use stillwire::graph::{Graph, NodeId};
use stillwire::hazard::{self, Options, Step, TargetVerdict, launch};

use crate::explorer::Op;
use crate::launch_explorer::{Cell, Control, Explorer, Machine, Net, Shown, Trigger, When};
use crate::launch_reach::Reach;
use crate::pipeline::{Hazard, Scan, driver, graph, hazards, scan_text};
use crate::random_circuits::Random;

/// How many circuits are compared, and the number of the first.
const CIRCUITS: u64 = 500;
const FIRST_SEED: u64 = 1;

/// The most sources of a circuit: every combination of their values is a state to start from.
const SOURCES: usize = 9;

/// A machine in the making. Gates that latches read must not depend on later latches, so each net knows the latest latch
/// that it is computed from.
struct Maker<'a> {
    random: &'a mut Random,
    machine: Machine,
    /// How many of the cells feed others; those behind them only carry the pins under test.
    core: usize,
    latches: Vec<bool>,
}

impl Maker<'_> {
    fn pick<T: Copy>(&mut self, from: &[T]) -> T {
        from[self.random.below(from.len())]
    }

    fn invert(&mut self, net: Net) -> Net {
        self.machine.gate(Op::Not, &[net])
    }

    /// The net or its inverse.
    fn literal(&mut self, net: Net) -> Net {
        if self.random.chance(40) { self.invert(net) } else { net }
    }

    /// A source that may be read by cell `reader`.
    fn source(&mut self, reader: Option<usize>) -> Net {
        let allowed: Vec<Net> = (0..self.core)
            .filter(|&cell| match reader {
                Some(reader) if self.latches[reader] => !self.latches[cell] || cell < reader,
                _ => true,
            })
            .map(Net::Cell)
            .collect();
        if allowed.is_empty() || self.random.chance(25) {
            Net::Input(self.random.below(self.machine.inputs))
        } else {
            self.pick(&allowed)
        }
    }

    fn two_sources(&mut self, reader: Option<usize>) -> (Net, Net) {
        let one = self.source(reader);
        for _ in 0..4 {
            let other = self.source(reader);
            if other != one {
                return (one, other);
            }
        }
        (one, Net::Input(self.machine.inputs - 1))
    }

    fn operator(&mut self) -> Op {
        self.pick(&[Op::And, Op::And, Op::Or, Op::Or, Op::Nand, Op::Nor, Op::Xor, Op::Xnor])
    }

    /// What a cell of the core stores, written so that counters, shift registers and held values are frequent.
    fn data(&mut self, cell: usize, enable: Net) -> Net {
        let present = Net::Cell(cell);
        let latch = self.latches[cell];
        let plain = match self.random.below(10) {
            0 | 1 if !latch => self.invert(present),
            2 if !latch => {
                let other = self.source(Some(cell));
                self.machine.gate(Op::Xor, &[present, other])
            }
            3..=5 => {
                let source = self.source(Some(cell));
                self.literal(source)
            }
            6 | 7 => {
                let (one, other) = self.two_sources(Some(cell));
                let (one, other) = (self.literal(one), self.literal(other));
                let op = self.operator();
                self.machine.gate(op, &[one, other])
            }
            _ => self.source(Some(cell)),
        };
        // A register that only ever takes its own value is a constant to the program, and so is one that takes its own
        // clock: to the language that is the value behind the edge, to a circuit the one before.
        let own_clock = matches!(self.machine.cells[cell].trigger, Trigger::Clock { net, .. } if net == plain);
        let plain = if plain == present || own_clock { self.invert(present) } else { plain };
        if !latch && self.random.chance(30) { self.select(enable, plain, present) } else { plain }
    }

    fn select(&mut self, select: Net, then: Net, otherwise: Net) -> Net {
        let inverted = self.invert(select);
        let upper = self.machine.gate(Op::And, &[select, then]);
        let lower = self.machine.gate(Op::And, &[inverted, otherwise]);
        self.machine.gate(Op::Or, &[upper, lower])
    }

    /// The clock of a flip-flop of the core.
    fn clock(&mut self, cell: usize) -> Trigger {
        let rising = self.random.chance(75);
        let net = match self.random.below(20) {
            0..=11 => Net::Input(0),
            12 | 13 => Net::Input(1),
            14 | 15 if cell > 0 => Net::Cell(self.random.below(cell)),
            16..=18 => self.gated(Some(cell)),
            _ => Net::Input(0),
        };
        Trigger::Clock { net, rising }
    }

    fn enable(&mut self, cell: usize) -> Trigger {
        let active = self.random.chance(50);
        let net = match self.random.below(10) {
            0..=5 => Net::Input(0),
            6 | 7 => Net::Input(1),
            _ => {
                let allowed: Vec<usize> = (0..self.core).filter(|&one| !self.latches[one] || one < cell).collect();
                let partner = if allowed.is_empty() { Net::Input(1) } else { Net::Cell(self.pick(&allowed)) };
                let clock = self.literal(Net::Input(0));
                let op = self.pick(&[Op::And, Op::Or]);
                self.machine.gate(op, &[clock, partner])
            }
        };
        Trigger::Enable { net, active }
    }

    /// A clock behind a gate.
    fn gated(&mut self, reader: Option<usize>) -> Net {
        let partner = self.source(reader);
        let partner = if partner == Net::Input(0) { Net::Input(1) } else { partner };
        let partner = self.literal(partner);
        let op = self.pick(&[Op::And, Op::And, Op::Or, Op::Nand]);
        self.machine.gate(op, &[Net::Input(0), partner])
    }

    /// A net worth watching: a decode of the state, a selector, a gated clock, sometimes a cell itself.
    fn target(&mut self) -> Net {
        match self.random.below(12) {
            0 | 1 => self.gated(None),
            2 => {
                let select = self.source(None);
                let (then, otherwise) = self.two_sources(None);
                self.select(select, then, otherwise)
            }
            3 => Net::Cell(self.random.below(self.core)),
            4 => {
                let (one, other) = self.two_sources(None);
                self.machine.gate(Op::Xor, &[one, other])
            }
            5 | 6 => {
                let (one, other) = self.two_sources(None);
                let (one, other) = (self.literal(one), self.literal(other));
                let joined = self.machine.gate(Op::And, &[one, other]);
                let (third, fourth) = self.two_sources(None);
                let (third, fourth) = (self.literal(third), self.literal(fourth));
                let second = self.machine.gate(Op::And, &[third, fourth]);
                self.machine.gate(Op::Or, &[joined, second])
            }
            _ => {
                let width = 2 + self.random.below(2);
                let mut pins: Vec<Net> = Vec::new();
                for _ in 0..8 {
                    let source = self.source(None);
                    if pins.len() < width && !pins.contains(&source) {
                        pins.push(source);
                    }
                }
                let pins: Vec<Net> = pins.into_iter().map(|pin| self.literal(pin)).collect();
                let op = self.pick(&[Op::And, Op::And, Op::Or, Op::Nor, Op::Nand]);
                self.machine.gate(op, &pins)
            }
        }
    }

    /// A decode of the state, an input, or both, as a reset.
    fn control(&mut self, cell: usize) -> Control {
        let net = match self.random.below(4) {
            0 | 1 => Net::Input(self.machine.inputs - 1),
            _ => {
                let (one, other) = self.two_sources(Some(cell));
                let (one, other) = (self.literal(one), self.literal(other));
                self.machine.gate(Op::And, &[one, other])
            }
        };
        let value = if self.random.chance(85) { Net::Constant(self.random.chance(30)) } else { Net::Input(1) };
        Control { net, active: self.random.chance(60), value }
    }
}

/// The machine of a seed.
fn machine(seed: u64) -> Machine {
    let mut random = Random::new(seed);
    let inputs = 2 + random.below(3);
    let core = 2 + random.below(4);
    let tests = (1 + random.below(2)).min(SOURCES - inputs - core.min(SOURCES - inputs - 1));
    let core = core.min(SOURCES - inputs - tests);
    let latches: Vec<bool> = (0..core).map(|_| random.chance(25)).collect();
    let mut maker = Maker { random: &mut random, machine: Machine::new(inputs), core, latches };
    for cell in 0..core {
        let trigger = if maker.latches[cell] { maker.enable(cell) } else { maker.clock(cell) };
        maker.machine.cell(trigger, Net::Constant(false));
    }
    let shared = maker.source(None);
    let shared = match shared {
        Net::Cell(cell) if maker.latches[cell] => Net::Input(1),
        other => other,
    };
    for cell in 0..core {
        maker.machine.cells[cell].data = maker.data(cell, shared);
        if !maker.latches[cell] && maker.random.chance(20) {
            let control = maker.control(cell);
            // A net that is clock and control of one cell is no construct that the program reads.
            if !matches!(maker.machine.cells[cell].trigger, Trigger::Clock { net, .. } if net == control.net) {
                maker.machine.cells[cell].controls.push(control);
            }
        }
    }
    // Often all flip-flops of the core have a first value, or none.
    let with_init = [0, 0, 0, 50, 100][maker.random.below(5)];
    for cell in (0..core).filter(|&cell| !maker.latches[cell]) {
        maker.machine.cells[cell].init = maker.random.chance(with_init).then(|| maker.random.chance(30));
    }
    for _ in 0..tests {
        let target = maker.target();
        let data = Net::Input(maker.random.below(inputs));
        match maker.random.below(3) {
            0 => {
                let rising = maker.random.chance(50);
                maker.machine.cell(Trigger::Clock { net: target, rising }, data);
            }
            1 => {
                let active = maker.random.chance(50);
                maker.machine.cell(Trigger::Enable { net: target, active }, data);
            }
            _ => {
                let clock = Net::Input(usize::from(data == Net::Input(0)));
                maker.machine.cell(Trigger::Clock { net: clock, rising: true }, data);
                let control = Control { net: target, active: maker.random.chance(50), value: Net::Constant(false) };
                let last = maker.machine.cells.len() - 1;
                maker.machine.cells[last].controls.push(control);
            }
        }
    }
    maker.machine
}

fn name(net: Net) -> String {
    match net {
        Net::Input(input) => format!("i{input}"),
        Net::Cell(cell) => format!("q{cell}"),
        Net::Gate(gate) => format!("n{gate}"),
        Net::Constant(value) => format!("1'b{}", u8::from(value)),
    }
}

fn source_name(machine: &Machine, source: usize) -> String {
    match source.checked_sub(machine.inputs) {
        Some(cell) => name(Net::Cell(cell)),
        None => name(Net::Input(source)),
    }
}

/// The machine as a module of this name.
fn module(title: &str, machine: &Machine) -> String {
    let inputs = (0..machine.inputs).map(|input| format!("input {}", name(Net::Input(input))));
    // Outputs, because a latch that nobody reads is none to the program.
    let outputs = machine.cells.iter().zip(0..).map(|(cell, index)| {
        let init = cell.init.map_or(String::new(), |init| format!(" = 1'b{}", u8::from(init)));
        format!("output reg q{index}{init}")
    });
    let ports: Vec<String> = inputs.chain(outputs).collect();
    let mut text = format!("module {title} ({});\n", ports.join(", "));
    for (index, gate) in machine.gates.iter().enumerate() {
        let pins: Vec<String> = gate.pins.iter().map(|&pin| name(pin)).collect();
        let expression = match gate.op {
            Op::Buf => pins[0].clone(),
            Op::Not => format!("~{}", pins[0]),
            Op::And => pins.join(" & "),
            Op::Nand => format!("~({})", pins.join(" & ")),
            Op::Or => pins.join(" | "),
            Op::Nor => format!("~({})", pins.join(" | ")),
            Op::Xor => pins.join(" ^ "),
            Op::Xnor => format!("~({})", pins.join(" ^ ")),
        };
        let _ = writeln!(text, "  wire n{index} = {expression};");
    }
    for (index, cell) in machine.cells.iter().enumerate() {
        let data = name(cell.data);
        let _ = match cell.trigger {
            Trigger::Enable { net, active } => {
                let inversion = if active { "" } else { "!" };
                writeln!(text, "  always @* if ({inversion}{}) q{index} = {data};", name(net))
            }
            Trigger::Clock { net, rising } => writeln!(text, "  {}", flip_flop(index, cell, net, rising)),
        };
    }
    text.push_str("endmodule\n");
    text
}

/// The machine of a seed as a module of this name.
pub fn written(title: &str, seed: u64) -> String {
    module(title, &machine(seed))
}

fn flip_flop(index: usize, cell: &Cell, clock: Net, rising: bool) -> String {
    let edge = |rising: bool| if rising { "posedge" } else { "negedge" };
    let mut events = format!("{} {}", edge(rising), name(clock));
    let mut choice = String::new();
    for control in &cell.controls {
        let (net, inversion) = (name(control.net), if control.active { "" } else { "!" });
        let _ = write!(events, " or {} {net}", edge(control.active));
        let _ = write!(choice, "if ({inversion}{net}) q{index} <= {}; else ", name(control.value));
    }
    format!("always @({events}) {choice}q{index} <= {};", name(cell.data))
}

/// What is said about a net: the pairs of a source that changes alone and a kind, and all kinds.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
struct Said {
    pairs: BTreeSet<(String, String)>,
    kinds: BTreeSet<String>,
}

impl Said {
    /// What must be said: every source whose clean change alone explains a hazard.
    fn at_least(machine: &Machine, shown: &BTreeSet<Shown>) -> Self {
        Self::of(machine, shown, |one| one.alone.into_iter().filter(|_| one.clean).collect())
    }

    /// What may be said: where a change passes a latch, the latch may be named or what moves behind it.
    fn at_most(machine: &Machine, shown: &BTreeSet<Shown>) -> Self {
        Self::of(machine, shown, |one| one.alone.into_iter().chain(one.behind).collect())
    }

    fn of(machine: &Machine, shown: &BTreeSet<Shown>, named: impl Fn(&Shown) -> Vec<usize>) -> Self {
        let mut said = Self::default();
        for one in shown {
            let kind = one.kind.name().to_string();
            let named = named(one).into_iter().map(|source| (source_name(machine, source), kind.clone()));
            said.pairs.extend(named);
            said.kinds.insert(kind);
        }
        said
    }

    fn is_within(&self, other: &Self) -> bool {
        self.pairs.is_subset(&other.pairs) && self.kinds.is_subset(&other.kinds)
    }

    /// A logic hazard that names one changing source is a pair; if it is a function hazard, it is the latch that races.
    fn by_program(hazards: &[Hazard]) -> Self {
        let kinds = hazards.iter().map(|hazard| hazard.kind.clone()).collect();
        let single = hazards.iter().filter(|hazard| hazard.changes.len() == 1 && hazard.cause == "logic");
        let pairs = single.map(|hazard| (hazard.changes[0].clone(), hazard.kind.clone())).collect();
        Self { pairs, kinds }
    }
}

/// The rules that speak about pins.
const RULES: [&str; 3] = ["clock-hazard", "set-reset-hazard", "latch-enable-hazard"];

/// What the program lists about the pin nets of an instance.
fn listed(scan: &Scan, instance: &str) -> Result<BTreeMap<String, Vec<Hazard>>, String> {
    let mut all: BTreeMap<String, Vec<Hazard>> = BTreeMap::new();
    for finding in scan.findings_in(instance) {
        if !RULES.iter().any(|rule| finding["rule"] == *rule) {
            continue;
        }
        if finding["verdict"] != "proven" {
            return Err(format!("{} is undecided: {}", finding["net"], finding["message"]));
        }
        let net = finding["net"].as_str().unwrap_or_default();
        let net = net.strip_prefix(&format!("{instance}.")).unwrap_or(net).to_string();
        all.entry(net).or_default().extend(hazards(finding, instance));
    }
    Ok(all)
}

/// Compares one circuit; `Err` says what differs. Where registers have reset values, what the program finds lies between
/// what is shown from the states that a careless estimate reaches and what is shown from any state; returns how many nets
/// had one possible answer, and how many there were.
fn compare(instance: &str, machine: &Machine, scan: &Scan) -> Result<(usize, usize), String> {
    let mut listed = listed(scan, instance)?;
    let mut explorer = Explorer::new(machine);
    let reach = Reach::of(machine);
    let mut wrong = String::new();
    let (mut exact, mut nets) = (0, 0);
    for net in machine.pins() {
        let shown = explorer.shown(net, |_, _| true);
        let most = Said::at_most(machine, &shown);
        let least = Said::at_least(machine, &explorer.shown(net, |state, root| reach.occurs(state, root)));
        nets += 1;
        exact += usize::from(least.kinds == most.kinds);
        let hazards = listed.remove(&name(net)).unwrap_or_default();
        let found = Said::by_program(&hazards);
        if !least.is_within(&found) || !found.is_within(&most) {
            let _ = writeln!(
                wrong,
                "{}: found {found:?}\n  at least {least:?}\n  at most {most:?}\n  from {hazards:?}",
                name(net)
            );
            for one in &shown {
                let _ = writeln!(wrong, "    {one:?}");
            }
        }
    }
    if !listed.is_empty() {
        let _ = writeln!(wrong, "unexpected: {listed:?}");
    }
    if wrong.is_empty() { Ok((exact, nets)) } else { Err(wrong) }
}

#[test]
fn the_program_finds_exactly_what_the_launch_explorer_finds() {
    const BATCH: usize = 50;
    let seeds: Vec<u64> = (FIRST_SEED..FIRST_SEED + CIRCUITS).collect();
    let mut failures = Vec::new();
    let (mut hazardous, mut exact, mut nets) = (0, 0, 0);
    for batch in seeds.chunks(BATCH) {
        let machines: Vec<(String, Machine)> = batch.iter().map(|&seed| (format!("t{seed}"), machine(seed))).collect();
        let text: String = machines.iter().map(|(title, machine)| module(title, machine)).collect();
        let scan = scan_text(&text);
        for (title, machine) in &machines {
            hazardous += usize::from(!scan.findings_in(title).is_empty());
            match compare(title, machine, &scan) {
                Ok((one, all)) => {
                    exact += one;
                    nets += all;
                }
                Err(difference) => failures.push(format!("{difference}\n{}", module(title, machine))),
            }
        }
    }
    assert!(failures.is_empty(), "{} circuits differ, first:\n{}", failures.len(), failures.join("\n"));
    // The generator must keep both answers common, or the comparison says little.
    assert!(hazardous > 150 && hazardous < 450, "{hazardous} hazardous circuits");
    assert!(10 * exact > 9 * nets, "one answer is possible for {exact} of {nets} nets only");
}

fn graph_of(text: &str) -> Graph {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("t.v");
    std::fs::write(&file, text).expect("the file is written");
    graph(&file, "t")
}

/// The whole relation of root, direction, step and kind, net by net, as the library tells it before anything is selected
/// for a report. It is about any state: reset values have no part in it.
#[test]
fn the_engine_shows_exactly_what_the_launch_explorer_shows() {
    let mut failures = Vec::new();
    let mut hazards = 0;
    for seed in FIRST_SEED..FIRST_SEED + CIRCUITS {
        let machine = machine(seed);
        let text = module("t", &machine);
        let graph = graph_of(&text);
        let names = (0..machine.sources()).map(|source| source_name(&machine, source));
        let names: BTreeMap<NodeId, String> = names.map(|name| (driver(&graph, &format!("t.{name}")), name)).collect();
        let mut explorer = Explorer::new(&machine);
        for net in machine.pins() {
            let (found, open) = launch::shown(
                &graph,
                driver(&graph, &format!("t.{}", name(net))),
                &launch::Assumptions::default(),
                &Options::default(),
            );
            let found: BTreeSet<_> = found
                .iter()
                .map(|one| (names[&one.root].clone(), one.rises, step(one.step), one.kind.name()))
                .collect();
            let expected: BTreeSet<_> = (explorer.shown(net, |_, _| true).iter())
                .map(|one| (source_name(&machine, one.root), one.rises, one.when, one.kind.name()))
                .collect();
            hazards += expected.len();
            if !open.is_empty() || found != expected {
                let more: Vec<_> = found.difference(&expected).collect();
                let less: Vec<_> = expected.difference(&found).collect();
                let net = name(net);
                failures.push(format!(
                    "seed {seed}, {net}:\n  false {more:?}\n  missing {less:?}\n  open {open:?}\n{text}"
                ));
            }
        }
    }
    assert!(failures.is_empty(), "{} nets differ, first:\n{}", failures.len(), failures.join("\n"));
    assert!(hazards > 700, "{hazards} hazards compared");
}

/// What single changes show of a net, kept as far as events show it: nets one by one, where every kind is decided, and
/// all gates of a circuit as if they were the bits of a port, where each kind is confirmed once and each net once.
#[test]
fn confirmed_kinds_are_those_that_the_launch_explorer_shows() {
    const CONFIRMED: u64 = 150;
    let (mut kept, mut dropped, mut launched) = (0, 0, 0);
    for seed in FIRST_SEED..FIRST_SEED + CONFIRMED {
        let machine = machine(seed);
        let text = module("t", &machine);
        let graph = graph_of(&text);
        let nets: Vec<Net> = (0..machine.gates.len()).map(Net::Gate).collect();
        let nodes: Vec<NodeId> = nets.iter().map(|&net| driver(&graph, &format!("t.{}", name(net)))).collect();
        let options = Options { one_per_kind: true, ..Options::default() };
        let alone = hazard::decide(&graph, &nodes, &options);
        let mut explorer = Explorer::new(&machine);
        let real: Vec<BTreeSet<&str>> = nets
            .iter()
            .map(|&net| explorer.shown(net, |_, _| true).iter().map(|one| one.kind.name()).collect())
            .collect();
        let assumptions = launch::Assumptions::default();
        let launcher = launch::Launcher::new(&graph, &nodes, &assumptions, &options);
        for ((verdict, real), &net) in alone.iter().zip(&real).zip(&nets) {
            let before = told(verdict);
            let after = launcher.confirm(vec![verdict.clone()]).pop().expect("one verdict");
            assert!(after.alone.is_empty(), "seed {seed}, {}: {after:?}\n{text}", name(net));
            let expected: BTreeSet<&str> = before.intersection(real).copied().collect();
            assert_eq!(told(&after), expected, "seed {seed}, {}: {verdict:?}\n{text}", name(net));
            kept += expected.len();
            dropped += before.len() - expected.len();
            launched += after.launches.len();
        }
        let together = launcher.confirm(alone.clone());
        let mut union: BTreeSet<&str> = BTreeSet::new();
        let mut expected: BTreeSet<&str> = BTreeSet::new();
        for (((one, verdict), real), &net) in together.iter().zip(&alone).zip(&real).zip(&nets) {
            let open: BTreeSet<&str> = one.alone.iter().map(|kind| kind.name()).collect();
            let confirmed: BTreeSet<&str> = told(one).difference(&open).copied().collect();
            let possible: BTreeSet<&str> = told(verdict).intersection(real).copied().collect();
            assert!(confirmed.is_subset(&possible), "seed {seed}, {}: {one:?}\n{text}", name(net));
            assert_eq!(confirmed.is_empty(), possible.is_empty(), "seed {seed}, {}: {one:?}\n{text}", name(net));
            union.extend(confirmed);
            expected.extend(possible);
        }
        assert_eq!(union, expected, "seed {seed}\n{text}");
    }
    assert!(kept > 100 && dropped > 10 && launched > 5, "{kept} kinds kept, {dropped} dropped, {launched} by launches");
}

/// The kinds that a verdict shows.
fn told(verdict: &TargetVerdict) -> BTreeSet<&'static str> {
    let pairs = verdict.pairs.iter().flat_map(|pair| &pair.hazards).map(|(kind, _)| kind.name());
    pairs.chain(verdict.launches.iter().map(|found| found.kind.name())).collect()
}

fn step(step: Step) -> When {
    match step {
        Step::First => When::First,
        Step::Second => When::Second,
        Step::Both => When::Both,
    }
}
