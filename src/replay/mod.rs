//! Replay: whoever doubts a finding sees it happen in a simulator that knows nothing of us. For each hazard of a finding
//! delays are chosen under which it shows, and a self-contained test bench and the waveform are written. Where a cover
//! is known, a second bench adds it and draws the delays at random, many times.
//!
//! Invariant: a bench is only offered after our own simulation has seen the pulse under its delays.

mod bench;
mod circuit;
mod delays;
mod signal;
mod vcd;
mod walked;

use bench::Head;
use circuit::Circuit;
pub(crate) use circuit::Cut;
use delays::{Plan, Shown};
use walked::Walk;

use crate::graph::{Graph, NodeId};
use crate::hazard::{self, HazardKind};
use crate::rules::{Finding, Hazard, Verdict};
use crate::source::PathError;

/// How often a cured net is tried.
const ROUNDS: usize = 200;
/// Values that a witness leaves open are tried in all combinations up to this many.
const GUESSED: usize = 6;
/// The most findings named when none fits.
const NAMED: usize = 20;

/// What replaying a finding leaves.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Replay {
    /// Names without folders, and contents.
    pub files: Vec<(String, Vec<u8>)>,
    /// What they show, for standard output.
    pub summary: String,
    /// Whether every hazard of the finding is among them.
    pub complete: bool,
}

/// Why a hazard is not replayed.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(crate) enum Refusal {
    /// More gates than a test bench can hold.
    TooLarge,
    /// The witness is none of this graph.
    Foreign,
    /// The simulation does not show what the analysis says.
    NotSeen,
}

impl Refusal {
    fn words(self) -> &'static str {
        match self {
            Refusal::TooLarge => "the logic behind the net is too large for a test bench",
            Refusal::Foreign => "its witness does not fit the design",
            Refusal::NotSeen => "no delays were found that show it; this is a defect of stillwire, please report it",
        }
    }
}

/// The finding whose fingerprint begins with `prefix`; findings of one fingerprint are one.
///
/// # Errors
/// None or several such findings, with a list of what there is.
pub(crate) fn select<'a>(findings: &'a [Finding], prefix: &str) -> Result<&'a Finding, PathError> {
    let prefix = prefix.to_ascii_lowercase();
    let fitting: Vec<&Finding> = findings.iter().filter(|finding| finding.fingerprint.starts_with(&prefix)).collect();
    let listed = |findings: &[&Finding]| {
        let line = |finding: &&Finding| {
            format!("\n    {}  {} on {}", finding.short_fingerprint(), finding.rule.name(), finding.net)
        };
        let mut lines: String = findings.iter().take(NAMED).map(line).collect();
        if findings.len() > NAMED {
            lines += &format!("\n    and {} more: see the JSON output of scan", findings.len() - NAMED);
        }
        lines
    };
    match fitting.first() {
        Some(first) if fitting.iter().all(|other| other.fingerprint == first.fingerprint) => Ok(first),
        Some(_) => {
            let message = format!("{} findings have a fingerprint that begins with `{prefix}`", fitting.len());
            Err(PathError::new(message, format!("give more digits of one of these:{}", listed(&fitting))))
        }
        None => {
            let message = format!("no finding has a fingerprint that begins with `{prefix}`");
            // The nearest are those with the longest common beginning.
            let common = |finding: &Finding| {
                finding.fingerprint.bytes().zip(prefix.bytes()).take_while(|(one, other)| one == other).count()
            };
            let mut all: Vec<&Finding> = findings.iter().collect();
            all.sort_by_key(|finding| std::cmp::Reverse(common(finding)));
            let help = match all.is_empty() {
                true => "a scan of these paths finds nothing".to_string(),
                false => format!("the findings of these paths are:{}", listed(&all)),
            };
            Err(PathError::new(message, help))
        }
    }
}

/// The benches and waveforms of every hazard of a finding.
///
/// # Errors
/// A finding that has no witness, with the reason.
pub(crate) fn replay(graph: &Graph, finding: &Finding) -> Result<Replay, PathError> {
    if finding.hazards.is_empty() {
        return Err(nothing_to_replay(finding));
    }
    let count = finding.hazards.len();
    let mut replay = Replay { files: Vec::new(), summary: String::new(), complete: true };
    replay.summary =
        format!("{} on {} (fingerprint {})\n", finding.rule.name(), finding.net, finding.short_fingerprint());
    for (index, hazard) in finding.hazards.iter().enumerate() {
        let number = index + 1;
        replay.summary +=
            &format!("  hazard {number} of {count}: {} on {} when {}\n", hazard.kind, hazard.net, moves(hazard));
        let subject = Subject { graph, finding, hazard, number };
        match subject.files() {
            Ok(files) => {
                for (name, _) in &files {
                    replay.summary += &format!("    {name}\n");
                }
                replay.files.extend(files);
            }
            Err(refusal) => {
                replay.complete = false;
                replay.summary += &format!("    not replayed: {}\n", refusal.words());
            }
        }
    }
    Ok(replay)
}

fn nothing_to_replay(finding: &Finding) -> PathError {
    let message = format!("there is nothing to replay in this finding: {} on {}", finding.rule.name(), finding.net);
    let help = match (finding.verdict, &finding.loop_) {
        (_, Some(_)) => {
            "a feedback loop has no single transition to show; its stable states are in the finding's notes"
        }
        (Verdict::Undecided, None) => {
            "it is undecided: no transition is known that shows a hazard, and none is excluded"
        }
        (Verdict::Proven, None) => "it is not about a transition of a net",
    };
    PathError::new(message, help)
}

/// "top.s falls", or "top.clk rises, then top.s falls and top.t rises".
fn moves(hazard: &Hazard) -> String {
    let joined = |moving: &mut dyn Iterator<Item = &(String, bool)>| {
        let moves: Vec<String> =
            moving.map(|(name, before)| format!("{name} {}", if *before { "falls" } else { "rises" })).collect();
        moves.join(" and ")
    };
    let Some(launch) = &hazard.launch else {
        return joined(&mut hazard.before.iter().filter(|(name, _)| hazard.changes.contains(name)));
    };
    let root = (launch.root.clone(), !launch.rises);
    let others = launch.first.iter().filter(|(name, _)| *name != launch.root);
    let mut text = joined(&mut std::iter::once(&root).chain(others));
    if !launch.second.is_empty() {
        text += &format!(", then {}", joined(&mut launch.second.iter()));
    }
    if !launch.raced.is_empty() {
        text += &format!(", while the data of {} moves as it opens or closes", launch.raced.join(" and "));
    }
    text
}

/// One hazard of a finding.
struct Subject<'a> {
    graph: &'a Graph,
    finding: &'a Finding,
    hazard: &'a Hazard,
    number: usize,
}

impl Subject<'_> {
    fn files(&self) -> Result<Vec<(String, Vec<u8>)>, Refusal> {
        let transition = &self.hazard.transition;
        let cover = self.finding.cover.as_ref().filter(|cover| cover.proven && cover.target == transition.target);
        let mut literals: Vec<NodeId> = Vec::new();
        if let Some(cover) = cover {
            let terms = cover.cover.products.iter().chain(&cover.cover.sums);
            literals.extend(terms.flatten().map(|&(node, _)| node));
        }
        let (circuit, plan, steps) = match self.seen(&literals) {
            Ok(seen) => seen,
            Err(Refusal::NotSeen) => return self.walked().ok_or(Refusal::NotSeen),
            Err(refusal) => return Err(refusal),
        };
        let lengths: Vec<u64> = steps.iter().map(length).collect();
        let name = format!("{}-{}", self.number, self.hazard.kind);
        let mut files = Vec::new();
        let file = format!("{name}.v");
        let module = format!("replay_{}_{}", self.finding.short_fingerprint(), self.number);
        let head = Head { module: &module, story: &self.story(), file: &file };
        files.push((file.clone(), bench::chosen(&circuit, &plan, &lengths, &head).into_bytes()));
        let dump = vcd::dump(&circuit, &steps, &lengths).map_err(|_| Refusal::Foreign)?;
        files.push((format!("{name}.vcd"), dump));
        if let Some(covered) = cover.and_then(|cover| circuit.covered(&cover.cover)) {
            let file = format!("{name}-cured.v");
            let module = format!("{module}_cured");
            let mut story = self.story();
            story.push(format!("Here the net has its cover, and all delays are drawn at random {ROUNDS} times."));
            let head = Head { module: &module, story: &story, file: &file };
            let plan = delays::choose(&covered, 0);
            files.push((file.clone(), bench::random(&covered, &plan, ROUNDS, &head).into_bytes()));
        }
        Ok(files)
    }

    /// The files of a hazard for which the feedback of a loop moves.
    fn walked(&self) -> Option<Vec<(String, Vec<u8>)>> {
        let transition = &self.hazard.transition;
        let kind = HazardKind::ALL.into_iter().find(|kind| kind.name() == self.hazard.kind)?;
        let (target, witness) = (transition.target, &transition.witness);
        let walked = hazard::moves(self.graph, target, witness, kind, transition.calm)?;
        let walk = Walk::new(self.graph, target, witness, &walked)?;
        let shown = walk.shown();
        if !walk.is_seen(&shown) {
            return None;
        }
        let name = format!("{}-{}", self.number, self.hazard.kind);
        let file = format!("{name}.v");
        let mut story = self.story();
        story.pop();
        story.push("Gates and wires have delays of their own, drawn up as the order in which they move.".to_string());
        let module = format!("replay_{}_{}", self.finding.short_fingerprint(), self.number);
        let head = Head { module: &module, story: &story, file: &file };
        let bench = walk.bench(&head).into_bytes();
        let length = length(&shown);
        let dump = vcd::dump(&walk.circuit, &[shown], &[length]).ok()?;
        Some(vec![(file, bench), (format!("{name}.vcd"), dump)])
    }

    /// The circuit with delays under which the pulse was seen.
    fn seen(&self, literals: &[NodeId]) -> Result<(Circuit, Plan, Vec<Shown>), Refusal> {
        let transition = &self.hazard.transition;
        let unsaid = circuit::unsaid(&transition.witness);
        for guess in 0..1usize << unsaid.len().min(GUESSED) {
            let value = |(index, &node): (usize, &NodeId)| (node, index < GUESSED && guess >> index & 1 == 1);
            let guesses: Vec<(NodeId, bool)> = unsaid.iter().enumerate().map(value).collect();
            let circuit = Circuit::new(self.graph, transition, literals, &guesses)?;
            let plan = delays::choose(&circuit, 0);
            let steps: Vec<Shown> = (0..circuit.steps).map(|step| delays::simulate(&circuit, &plan, step)).collect();
            let changes: usize = steps.iter().map(|shown| shown.outputs[circuit.target].changes.len()).sum();
            if changes > circuit.needed && circuit.ends == transition.witness.target {
                return Ok((circuit, plan, steps));
            }
        }
        Err(Refusal::NotSeen)
    }

    /// What the bench is about, as comment lines.
    fn story(&self) -> Vec<String> {
        let hazard = self.hazard;
        let mut story = vec![
            format!(
                "Stillwire, finding {}: {} on {}",
                self.finding.fingerprint,
                self.finding.rule.name(),
                self.finding.net
            ),
            format!(
                "Hazard {}: {} on {}, {} -> {}",
                self.number,
                hazard.kind,
                hazard.net,
                u8::from(hazard.pin.0),
                u8::from(hazard.pin.1)
            ),
            format!("When {}, every other signal holding, the net changes more often than it needs.", moves(hazard)),
        ];
        let holds: Vec<String> = hazard
            .before
            .iter()
            .filter(|(name, _)| !hazard.changes.contains(name) && !hazard.moved.contains(name))
            .map(|(name, value)| format!("{name} = {}", u8::from(*value)))
            .collect();
        let begins: Vec<String> = (hazard.before.iter())
            .filter(|(name, _)| hazard.moved.contains(name))
            .map(|(name, value)| format!("{name} = {}", u8::from(*value)))
            .collect();
        if !begins.is_empty() {
            story.push(format!("The loop of gates rests with {} before.", begins.join(", ")));
        }
        if !holds.is_empty() {
            story.push(format!("What holds and matters: {}; the rest may have any value.", holds.join(", ")));
        }
        story.push("Gates have no delay; each wire that moves delivers every change of its driver, later.".to_string());
        if hazard.transition.calm {
            story.push("Arithmetic is taken as free of glitches: its results are part of the stimulus.".to_string());
        }
        // A name in a comment must not end the line.
        story.iter().map(|line| line.replace(['\n', '\r'], " ")).collect()
    }
}

/// How long a step takes to settle.
fn length(shown: &Shown) -> u64 {
    let signals = shown.outputs.iter().chain(shown.pins.iter().flatten());
    signals.map(signal::Signal::last).max().unwrap_or(0) + 1
}
