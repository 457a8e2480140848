//! The rules: what each looks at and what it says. [`run`] decides every pin, watched net and output once, in bulk, and
//! hands the verdicts to one file per rule, which puts them into words. No output format is known here: a [`Finding`] is
//! plain data. Nothing that was asked is dropped: each net is counted as clean, hazardous or undecided.

mod about_text;
pub(crate) mod bundle;
mod checked;
mod clock_hazard;
mod combinational_loop;
mod cover_text;
mod cover_unprotected;
mod coverage;
mod evidence;
mod finding;
mod fingerprint;
mod known;
mod latch_enable_hazard;
mod launch_text;
mod loop_text;
mod missing_module;
pub(crate) mod names;
mod pages;
mod pins;
mod reconvergent_inversion;
mod remembered;
mod reset_release;
mod set_reset_hazard;
mod set_reset_overlap;
mod words;

use std::cmp::Reverse;
use std::collections::BTreeSet;

use rayon::prelude::*;

use checked::Checker;

use crate::cache::Cache;
use crate::graph::{Graph, NetId, NodeId, Port, PortDirection};
use crate::hazard::launch::{Assumptions, Launcher};
use crate::hazard::{self, Options, TargetVerdict};
use crate::source::Span;
use crate::syntax::Protection;

pub use about_text::{Said, say};
pub(crate) use about_text::{about_net, bookkeeping, net_name};
pub use checked::{CheckedNet, Ground, NetState};
pub use coverage::{CellCount, NetCount, PinCoverage};
pub use finding::{
    CoverText, Finding, Hazard, LaunchText, LoopText, Pin, PinKind, Rule, Severity, Signoff, TraceStep, Transition,
    Verdict,
};
pub(crate) use missing_module::name_place;
pub use pages::{page, summary};

/// A net that the designer marked with `// stillwire: watch`.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Watch {
    pub net: NetId,
    pub reason: String,
}

/// What the rules found and how much they looked at.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Outcome {
    /// By rule and place in the graph; [`sort`] puts them into the order of the report.
    pub findings: Vec<Finding>,
    /// Every net that was asked about, once per role; by role, name and place.
    pub checked: Vec<CheckedNet>,
    pub pins: PinCoverage,
    pub cells: CellCount,
    /// Combinational loops found.
    pub loops: usize,
}

/// Looks at everything every rule asks about. `options` bound the effort; their scope is set per rule; `cache`
/// remembers what takes long.
pub fn run(
    graph: &Graph,
    watches: &[Watch],
    assumptions: &Assumptions,
    protection: &Protection,
    options: &Options,
    cache: Option<&Cache>,
) -> Outcome {
    let listing = Options { ignore_operators: false, one_per_kind: false, ..*options };
    let outside = Options { ignore_operators: true, one_per_kind: true, ..*options };
    let pins = pins::collect(graph);
    let watched: Vec<(&Watch, NodeId)> = watches
        .iter()
        .flat_map(|watch| graph.nets[watch.net.index()].bits.iter().map(move |&bit| (watch, graph.root(bit))))
        .collect();
    let outputs: Vec<&Port> = graph.ports.iter().filter(|port| port.direction != PortDirection::Input).collect();

    let pin_roots = [&pins.controls, &pins.clocks, &pins.enables].into_iter().flat_map(|nets| nets.keys().copied());
    let roots: BTreeSet<NodeId> = pin_roots.chain(watched.iter().map(|&(_, root)| root)).collect();
    let launched = roots.iter().copied().filter(|&root| pins::can_glitch_in_a_launch(graph, root));
    let launched: Vec<NodeId> = if options.single_changes { Vec::new() } else { launched.collect() };
    let cells = hazard::Cells::new(graph);
    let launcher = (!options.single_changes).then(|| Launcher::new(graph, &launched, assumptions, &listing));
    let mut verdicts = decided(graph, roots.iter().copied(), &listing);
    if let Some(launcher) = &launcher {
        let refined: Vec<TargetVerdict> = launched
            .par_iter()
            .map(|&root| match verdicts.get(&root).cloned().unwrap_or(TargetVerdict::clean(root)) {
                verdict if verdict.follows_loops => {
                    hazard::events_behind_loops(graph, &cells, assumptions, verdict, &listing)
                }
                verdict => launcher.refine(verdict),
            })
            .collect();
        verdicts.extend(refined.into_iter().map(|verdict| (verdict.target, verdict)));
    }
    let pin_context = &Context { options: &listing, launcher: launcher.as_ref(), cache };
    verdicts.extend(roots.into_iter().filter(|&root| pins::is_undriven(graph, root)).map(pins::undriven));
    let bits = outputs.iter().flat_map(|port| &graph.nets[port.net.index()].bits);
    let mut outside_verdicts = decided(graph, bits.map(|&bit| graph.root(bit)), &outside);
    let suspects: Vec<Vec<NodeId>> = suspects(graph, &outputs, &outside_verdicts);
    let asked = suspects.concat();
    let outside_launcher =
        (!options.single_changes && !asked.is_empty()).then(|| Launcher::new(graph, &asked, assumptions, &outside));
    if let Some(launcher) = &outside_launcher {
        let of = |root: &NodeId| outside_verdicts.get(root).cloned();
        let confirmed: Vec<Vec<TargetVerdict>> =
            suspects.par_iter().map(|roots| launcher.confirm(roots.iter().filter_map(of).collect())).collect();
        outside_verdicts.extend(confirmed.into_iter().flatten().map(|verdict| (verdict.target, verdict)));
    }
    let outside_context = &Context { options: &outside, launcher: outside_launcher.as_ref(), cache };
    let loops = hazard::loops(graph, options);

    let checker = Checker { graph, assumptions };
    let mut checked: Vec<CheckedNet> = [&pins.controls, &pins.clocks, &pins.enables]
        .into_iter()
        .flatten()
        .map(|(&root, uses)| checker.net(root, pins::pin(graph, uses), verdicts.get(&root)))
        .collect();
    // A net with two watches on it, or two bits with one driver, is still one net.
    let mut seen = BTreeSet::new();
    let watched: Vec<_> = watched.into_iter().filter(|&(_, root)| seen.insert(root)).collect();
    let watch_pin = || reconvergent_inversion::pin(PinKind::Watch);
    checked.extend(watched.iter().map(|(_, root)| checker.net(*root, watch_pin(), verdicts.get(root))));
    let output_pin = || reconvergent_inversion::pin(PinKind::Output);
    checked.extend(outputs.iter().map(|port| checker.output(port, output_pin(), &outside_verdicts)));
    checked::sort(&mut checked);
    let mut coverage = PinCoverage::default();
    checked.iter().for_each(|net| coverage.count(net));
    for verdict in verdicts.values().chain(outside_verdicts.values()) {
        let pairs = verdict.pairs.iter().map(|pair| pair.undecided.len()).sum::<usize>();
        coverage.open_questions += pairs + verdict.open_launches.len();
    }

    let endpoints: BTreeSet<NodeId> = if loops.is_empty() { BTreeSet::new() } else { graph.endpoints().collect() };
    let endpoints = &endpoints;

    // Paths and covers are worked out per finding, which is where the time goes; the order is that of the tasks.
    let mut tasks: Vec<Task<'_>> = Vec::new();
    for (nets, rule) in [
        (&pins.controls, set_reset_hazard::finding as PinRule),
        (&pins.clocks, clock_hazard::finding),
        (&pins.enables, latch_enable_hazard::finding),
    ] {
        for (root, uses) in nets {
            let Some(verdict) = verdicts.get(root) else { continue };
            tasks.push(Box::new(move || rule(graph, verdict, uses, pin_context)));
        }
    }
    for &(watch, root) in &watched {
        let Some(verdict) = verdicts.get(&root) else { continue };
        tasks.push(Box::new(move || reconvergent_inversion::watched(graph, verdict, watch, pin_context)));
    }
    for (nets, noun) in [(&pins.controls, "control"), (&pins.clocks, "clock"), (&pins.enables, "latch enable")] {
        for (&root, uses) in nets {
            if verdicts.get(&root).is_some_and(TargetVerdict::is_clean) {
                let listing = &listing;
                tasks.push(Box::new(move || {
                    let what = format!("the {noun} `{}` of {}", names::name(graph, root), words::cells(graph, uses));
                    cover_unprotected::finding(graph, root, &what, pins::pin(graph, uses), protection, listing)
                }));
            }
        }
    }
    for &(_, root) in &watched {
        if verdicts.get(&root).is_some_and(TargetVerdict::is_clean) {
            let listing = &listing;
            tasks.push(Box::new(move || {
                let what = format!("the watched net `{}`", names::name(graph, root));
                cover_unprotected::finding(graph, root, &what, watch_pin(), protection, listing)
            }));
        }
    }
    for port in &outputs {
        let verdicts = &outside_verdicts;
        tasks.push(Box::new(move || reconvergent_inversion::output(graph, port, verdicts, outside_context)));
    }
    for verdict in &loops {
        tasks.push(Box::new(move || combinational_loop::finding(graph, verdict, endpoints)));
    }
    let found: Vec<Option<Finding>> = tasks.par_iter().map(|task| task()).collect();
    let mut findings: Vec<Finding> = found.into_iter().flatten().collect();
    findings.extend(missing_module::findings(graph, &pins, &seen));
    findings.extend(set_reset_overlap::findings(graph, &cells, options));
    findings.extend(reset_release::findings(graph, &cells, &pins.controls, &verdicts, options));
    Outcome { findings, checked, pins: coverage, cells: CellCount::of(graph), loops: loops.len() }
}

type PinRule = fn(&Graph, &TargetVerdict, &[pins::Use], &Context<'_>) -> Option<Finding>;
type Task<'a> = Box<dyn Fn() -> Option<Finding> + Send + Sync + 'a>;

/// How a verdict was made, for what is asked about it later.
#[derive(Clone, Copy)]
struct Context<'a> {
    options: &'a Options,
    /// Absent where only single changes were looked at.
    launcher: Option<&'a Launcher<'a>>,
    cache: Option<&'a Cache>,
}

/// The bits of each output that can show anything, each under the first port that has it. Those behind loops of gates are
/// told by changes of one source.
fn suspects(graph: &Graph, outputs: &[&Port], verdicts: &pins::Verdicts) -> Vec<Vec<NodeId>> {
    let mut seen: BTreeSet<NodeId> = BTreeSet::new();
    let mut suspect = |&bit: &NodeId| {
        let root = graph.root(bit);
        let suspect = verdicts.get(&root).is_some_and(|verdict| !verdict.is_clean() && !verdict.follows_loops);
        (suspect && seen.insert(root)).then_some(root)
    };
    outputs.iter().map(|port| graph.nets[port.net.index()].bits.iter().filter_map(&mut suspect).collect()).collect()
}

/// Decides each root that logic drives once.
fn decided(graph: &Graph, roots: impl Iterator<Item = NodeId>, options: &Options) -> pins::Verdicts {
    let roots: BTreeSet<NodeId> = roots.filter(|&root| pins::is_driven_by_logic(graph, root)).collect();
    let roots: Vec<NodeId> = roots.into_iter().collect();
    let verdicts = hazard::decide(graph, &roots, options);
    verdicts.into_iter().map(|verdict| (verdict.target, verdict)).collect()
}

/// Puts findings into the order of every output: the worst first, then by file, line and net. `position` gives the file
/// name and the line of a place.
pub fn sort(findings: &mut [Finding], position: impl Fn(Span) -> (String, usize)) {
    findings.sort_by_cached_key(|finding| {
        let place = finding.at.map(&position);
        (Reverse(finding.severity), place, finding.rule, finding.net.clone(), finding.at, finding.message.clone())
    });
}
