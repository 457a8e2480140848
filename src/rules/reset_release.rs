//! `reset-release`: an asynchronous set or reset that can end at any moment of the clock of the flip-flops that it holds.
//! Those that see the clock edge before the release and those that see it after part company; a flip-flop that sees both
//! at once may hang between its values. One finding per net, a note: whether the release matters, the designer knows.
//!
//! Quiet where every release is made by a flip-flop of the held ones' clock: the usual synchroniser, also when its output
//! is gated with the raw reset, because in every settled state the synchroniser still holds while the raw reset does. The
//! flip-flops of a synchroniser are held by the raw reset on purpose and do not count among those that it holds.

use std::collections::{BTreeMap, BTreeSet};

use rayon::prelude::*;

use super::about_text;
use super::finding::{Finding, Rule, Severity, TraceStep};
use super::pins::{self, Nets, Role, Takes, Use, User, Verdicts};
use super::{evidence, fingerprint, names, words};
use crate::graph::{CellKind, Graph, NodeId, NodeKind};
use crate::hazard::{Cells, Demand, Happening, Options, TargetVerdict, is_free};

const CURE: &str = "to do: release it through two flip-flops of that clock that the raw reset clears at once; sign it \
                    off where the clock is known to stand still during the release";
/// The most sources named in one finding.
const NAMED: usize = 3;
/// Sources that are asked about per net.
const ASKED: usize = 64;
/// A net that holds more cells holds more than a synchroniser.
const STAGES: usize = 16;

/// All findings, in order of nets.
pub(super) fn findings(
    graph: &Graph,
    cells: &Cells<'_>,
    controls: &Nets,
    verdicts: &Verdicts,
    options: &Options,
) -> Vec<Finding> {
    let domains = Domains::new(graph, cells);
    // A net that can glitch is reported for that, and its cure is the same.
    let clean = |root: &NodeId| verdicts.get(root).is_none_or(TargetVerdict::is_clean);
    let nets: Vec<(&NodeId, &Vec<Use>)> = controls.iter().filter(|(root, _)| clean(root)).collect();
    let found: Vec<Option<Finding>> =
        nets.par_iter().map(|(root, uses)| finding(graph, cells, &domains, **root, uses, options)).collect();
    found.into_iter().flatten().collect()
}

/// The inputs that the clocks of a design come from, by clock net: through gates, and through the flip-flops that divide
/// them.
struct Domains {
    of: BTreeMap<NodeId, BTreeSet<NodeId>>,
}

impl Domains {
    fn new(graph: &Graph, cells: &Cells<'_>) -> Self {
        let clock = |kind: CellKind| match kind {
            CellKind::FlipFlop { clock, .. } => Some(graph.root(clock)),
            CellKind::Latch { .. } => None,
        };
        let clocks: BTreeSet<NodeId> = graph.cells.iter().filter_map(|cell| clock(cell.kind)).collect();
        let behind: BTreeMap<NodeId, Vec<NodeId>> =
            clocks.iter().map(|&clock| (clock, cells.sources(&[clock]))).collect();
        let mut of = BTreeMap::new();
        for &start in &clocks {
            let mut seen = BTreeSet::new();
            let mut open = vec![start];
            let mut inputs = BTreeSet::new();
            while let Some(net) = open.pop() {
                if !seen.insert(net) {
                    continue;
                }
                for &source in behind.get(&net).into_iter().flatten() {
                    let clocks: Vec<NodeId> = cells.of(source).filter_map(|cell| clock(cell.kind)).collect();
                    if clocks.is_empty() {
                        inputs.insert(source);
                    }
                    open.extend(clocks);
                }
            }
            of.insert(start, inputs);
        }
        Self { of }
    }

    fn meet(&self, one: NodeId, other: NodeId) -> bool {
        match (self.of.get(&one), self.of.get(&other)) {
            (Some(one), Some(other)) => !one.is_disjoint(other),
            _ => one == other,
        }
    }
}

fn finding(
    graph: &Graph,
    cells: &Cells<'_>,
    domains: &Domains,
    root: NodeId,
    uses: &[Use],
    options: &Options,
) -> Option<Finding> {
    let stages = stages(graph, cells, root, uses, options);
    let uses: Vec<Use> = uses.iter().copied().filter(|one| !stages.contains(&one.cell)).collect();
    let uses = uses.as_slice();
    // The clocks of what it holds, and the levels at which it does.
    let mut held: BTreeSet<NodeId> = BTreeSet::new();
    let mut levels: BTreeSet<bool> = BTreeSet::new();
    for one in uses {
        if let (Role::Control { active, takes: Takes::Zero | Takes::One }, Some(CellKind::FlipFlop { clock, .. })) =
            (one.role, one.cell.cell(graph).map(|cell| cell.kind))
        {
            held.insert(graph.root(clock));
            levels.insert(active);
        }
    }
    let first = *held.first()?;
    let releases = |source: NodeId| -> bool {
        levels.iter().any(|&active| {
            let before: [Demand; 1] = [(root, active)];
            let after: [Demand; 1] = [(root, !active)];
            cells.leads(&before, Happening::Change(source), &after, options.conflicts).is_some()
        })
    };
    let foreign = |source: NodeId| -> bool {
        let clocks: Vec<NodeId> = cells
            .of(source)
            .filter_map(|cell| match cell.kind {
                CellKind::FlipFlop { clock, .. } => Some(graph.root(clock)),
                CellKind::Latch { .. } => None,
            })
            .collect();
        is_free(graph, source) || !held.iter().all(|&held| clocks.iter().any(|&clock| domains.meet(held, clock)))
    };
    let sources = cells.sources(&[root]);
    let sources: Vec<NodeId> =
        sources.into_iter().filter(|&source| foreign(source)).take(ASKED).filter(|&source| releases(source)).collect();
    let lead = *sources.first()?;
    let net = names::name(graph, root);
    let identity = fingerprint::of_cone(graph, Rule::ResetRelease, &net, &[root]);
    let kind = if matches!(pins::kind(uses), super::PinKind::Set) { "set" } else { "reset" };
    let whose = if words::cell_count(uses) == 1 { "its" } else { "their" };
    let clock = match held.len() {
        1 => format!("{whose} clock `{}`", names::name(graph, first)),
        more => format!("{whose} {}", words::count(more, "clock")),
    };
    let message = format!(
        "the release of the asynchronous {kind} `{net}` of {} is not synchronised to {clock}",
        words::cells(graph, uses)
    );
    let mut finding =
        about_text::plain(Rule::ResetRelease, Severity::Note, message, evidence::place(graph, root), identity);
    let named: Vec<String> =
        sources.iter().take(NAMED).map(|&source| format!("`{}`", names::name(graph, source))).collect();
    let more = if sources.len() > NAMED { format!(" and {} more", sources.len() - NAMED) } else { String::new() };
    finding.notes.push(format!("released at any moment by {}{more}", named.join(", ")));
    finding.notes.push(CURE.to_string());
    finding.trace = vec![TraceStep {
        at: evidence::place(graph, lead),
        way: None,
        text: format!("`{}` ends it, and nothing ties that to the clock", names::name(graph, lead)),
    }];
    finding.instance = graph.instances[names::instance(graph, root).index()].path.clone();
    finding.declared = names::declaration(graph, root);
    finding.net = net;
    finding.pin = Some(pins::pin(graph, uses));
    Some(finding)
}

/// The cells on a net that may be released at any moment: those that keep their value at the first edge whatever comes,
/// because what they would take is what they hold; and the first stage in front of them, which takes a constant.
fn stages(graph: &Graph, cells: &Cells<'_>, root: NodeId, uses: &[Use], options: &Options) -> BTreeSet<User> {
    let mut stages = BTreeSet::new();
    if uses.len() > STAGES {
        return stages;
    }
    for one in uses {
        let Role::Control { active, takes } = one.role else { continue };
        let value = match takes {
            Takes::Zero => false,
            Takes::One => true,
            Takes::Loads => continue,
        };
        let Some(data) = one.cell.cell(graph).map(|cell| cell.data) else { continue };
        if !is_constant(graph, data) && cells.excludes(&[(root, active), (data, !value)], options.conflicts) {
            stages.insert(one.cell);
        }
    }
    let is_first = |user: &User| {
        let cell = user.cell(graph);
        cell.is_some_and(|cell| is_constant(graph, cell.data) && only_feeds(graph, cell.output, &stages))
    };
    let firsts: Vec<User> = uses.iter().map(|one| one.cell).filter(is_first).collect();
    stages.extend(firsts);
    stages
}

fn is_constant(graph: &Graph, node: NodeId) -> bool {
    matches!(graph.kind(graph.root(node)), NodeKind::Const(_))
}

/// Whether a flip-flop is read by the data pins of `stages` and by nothing else inside the design.
fn only_feeds(graph: &Graph, output: NodeId, stages: &BTreeSet<User>) -> bool {
    let mut wires = vec![output];
    let mut next = 0;
    while let Some(&node) = wires.get(next) {
        next += 1;
        if graph.fanout(node).iter().any(|&reader| graph.kind(reader) != NodeKind::Wire) {
            return false;
        }
        wires.extend_from_slice(graph.fanout(node));
    }
    let reads = |node: NodeId| wires.contains(&node);
    let mut feeds = false;
    for (index, cell) in graph.cells.iter().enumerate() {
        let pin = match cell.kind {
            CellKind::FlipFlop { clock, .. } => clock,
            CellKind::Latch { enable, .. } => enable,
        };
        if reads(pin) || cell.controls.iter().any(|control| reads(control.net) || reads(control.value)) {
            return false;
        }
        if reads(cell.data) {
            if !stages.contains(&User::Cell(index)) {
                return false;
            }
            feeds = true;
        }
    }
    feeds
}
