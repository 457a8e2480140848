//! A fuzzer of the whole front end: from files through preprocessing, parsing, elaboration and the graph's checker to the
//! rendered report and the flattened netlist. Inputs are mutations of the fixtures and of modules from a grammar of
//! SystemVerilog; those that make the front end say something new are mutated further.
//!
//! `cargo bench --profile dev --bench fuzz -- --seconds 60 [--seed N] [--workers N] [--inputs N] [--minimise SECONDS]
//! [--out FOLDER]`
//!
//! Every input runs in a child process. A failure is a panic of ours (also one that the reader would catch), an end by a
//! signal such as an overflown stack, more than 10 s of processor time, more than 2 GB of resident memory, no progress for
//! two minutes, an unsound graph, a flattened netlist that is not read back whole, and an input with a broken module
//! at its end that is called complete. The time limit counts the processor time of the child, not the time on the clock,
//! so that a loaded machine changes nothing. The first inputs of each failure are saved below `target/fuzz`, minimised
//! after the search within a budget of its own (`--minimise`, a minute), and the run ends with 1.
//!
//! The inputs of a worker depend on the tree (fixtures, messages of the front end), the seed and the worker's number,
//! on nothing else: a run of a minute executes the beginning of what a longer run of the same tree executes. The summary
//! shows digests of the inputs by which two runs can be compared. Only an input that fails, by a limit that another
//! machine keeps, can part them.
//!
//! A plain program instead of a coverage-guided engine: those need a nightly compiler and would build the parser again.
#![allow(clippy::print_stdout, clippy::print_stderr, reason = "a bench prints what it did")]

mod child;
mod corpus;
mod dictionary;
mod expressions;
mod grammar;
mod minimise;
mod mutate;
mod outcome;
mod statements;

use std::collections::BTreeMap;
use std::hash::{DefaultHasher, Hash, Hasher};
use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::time::{Duration, Instant};

use fastrand::Rng;

use corpus::{Corpus, Input};
use outcome::{Failure, Outcome};

/// A minimised input up to this many bytes is printed, so that the log of a machine that keeps no files is enough.
const PRINTED: usize = 2000;

struct Options {
    seconds: u64,
    /// Each worker ends after so many inputs.
    inputs: usize,
    /// Seconds for making what failed small, for all failures together.
    minimise: u64,
    seed: u64,
    workers: usize,
    out: PathBuf,
    /// Run these inputs once each instead.
    replay: Vec<PathBuf>,
    /// Print this many modules of the grammar instead.
    print: u64,
}

impl Options {
    /// # Errors
    /// An argument that is not known or has no value.
    fn read(mut arguments: impl Iterator<Item = String>) -> Result<Self, String> {
        let mut options = Self {
            seconds: 60,
            inputs: usize::MAX,
            minimise: 60,
            seed: 1,
            workers: 2,
            out: Path::new(env!("CARGO_MANIFEST_DIR")).join("target/fuzz"),
            replay: Vec::new(),
            print: 0,
        };
        while let Some(name) = arguments.next() {
            // Cargo adds this one.
            if name == "--bench" {
                continue;
            }
            let value = arguments.next().ok_or(format!("{name} needs a value"))?;
            let number = || value.parse::<u64>().map_err(|_| format!("{name}: `{value}` is no number"));
            match name.as_str() {
                "--seconds" => options.seconds = number()?,
                "--inputs" => options.inputs = usize::try_from(number()?).unwrap_or(usize::MAX),
                "--minimise" => options.minimise = number()?,
                "--seed" => options.seed = number()?,
                "--workers" => options.workers = usize::try_from(number()?).unwrap_or(1),
                "--out" => options.out = PathBuf::from(value),
                "--replay" => options.replay.push(PathBuf::from(value)),
                "--print" => options.print = number()?,
                _ => return Err(format!("unknown argument {name}")),
            }
        }
        Ok(options)
    }
}

/// One line of search. Its inputs follow from the seed and its number alone: it has its own random numbers and its own
/// corpus, and what another worker finds or how fast anything runs changes nothing.
struct Worker {
    rng: Rng,
    corpus: Corpus,
    counts: Counts,
    trail: Trail,
}

/// What failed, by what failures have in common.
type Found = BTreeMap<String, Vec<(Input, Failure)>>;

/// Inputs that are kept of each kind of failure; all are counted.
const KEPT_OF_EACH: usize = 3;

#[derive(Default)]
struct Counts {
    inputs: usize,
    generated: usize,
    generated_complete: usize,
    complete: usize,
    /// Inputs from which at least one gate came.
    with_gates: usize,
    /// Panics inside the parser, which the reader turns into diagnostics.
    parser_panics: usize,
    /// Processor time of all inputs together.
    total: Duration,
    slowest: Duration,
    largest_kb: u64,
}

fn main() {
    let mut arguments = std::env::args().skip(1).peekable();
    if arguments.peek().is_some_and(|first| first == child::ARGUMENT) {
        child::serve();
        return;
    }
    let options = Options::read(arguments).unwrap_or_else(|error| {
        eprintln!("fuzz: {error}");
        std::process::exit(2);
    });
    if options.print > 0 {
        for seed in options.seed..options.seed + options.print {
            println!("{}", grammar::design(&mut Rng::with_seed(seed)));
        }
        return;
    }
    let failed = if options.replay.is_empty() { fuzz(&options) } else { replay(&options.replay) };
    std::process::exit(i32::from(failed));
}

fn replay(paths: &[PathBuf]) -> bool {
    let mut child = child::Handle::new();
    let mut failed = false;
    for path in paths {
        let input = Input::read(path);
        for broken_tail in [false, true] {
            let outcome = child.run(&Input { broken_tail, ..input.clone() });
            println!("{}{}: {outcome:?}", path.display(), if broken_tail { " and a broken module" } else { "" });
            failed |= outcome.failure.is_some();
        }
    }
    failed
}

fn fuzz(options: &Options) -> bool {
    let start = Instant::now();
    let end = start + Duration::from_secs(options.seconds);
    let corpus = Corpus::read(&Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures"));
    let found = Mutex::new(Found::new());
    let workers: Vec<Worker> = std::thread::scope(|scope| {
        let started: Vec<_> = (0..options.workers)
            .map(|number| {
                let mut worker = Worker::new(options.seed, number, corpus.clone());
                let found = &found;
                scope.spawn(move || {
                    let mut child = child::Handle::new();
                    while Instant::now() < end && worker.counts.inputs < options.inputs {
                        if let Some((input, failure)) = worker.one(&mut child) {
                            note(input, failure, found, &options.out);
                        }
                    }
                    worker
                })
            })
            .collect();
        started.into_iter().map(|worker| worker.join().expect("a worker that ends")).collect()
    });
    summary(&workers, corpus.len(), options, start.elapsed());
    let found = found.into_inner().unwrap_or_else(std::sync::PoisonError::into_inner);
    report(&found, options);
    !found.is_empty()
}

/// Saves a failing input as it is, at once, so that a run that is ended from outside has lost nothing.
fn note(input: Input, failure: Failure, found: &Mutex<Found>, out: &Path) {
    let key = failure.key();
    let mut found = found.lock().unwrap_or_else(std::sync::PoisonError::into_inner);
    let same = found.entry(key.clone()).or_default();
    if same.len() < KEPT_OF_EACH {
        let place = input.save(out, &format!("{key}-{}", same.len() + 1));
        println!("{failure}\n  {} bytes: {}", input.size(), place.display());
    }
    same.push((input, failure));
}

/// Minimises what was kept of each failure, within one budget for all, and prints it.
fn report(found: &Found, options: &Options) {
    let mut left: usize = found.values().map(|same| same.len().min(KEPT_OF_EACH)).sum();
    let end = Instant::now() + Duration::from_secs(options.minimise);
    let mut child = child::Handle::new();
    for (key, same) in found {
        println!("  FAILED {} times: {key}", same.len());
        for (index, (input, failure)) in same.iter().take(KEPT_OF_EACH).enumerate() {
            let share = end.saturating_duration_since(Instant::now()) / u32::try_from(left).unwrap_or(1);
            let small = minimise::minimise(input.clone(), failure, share, &mut child);
            left -= 1;
            let place = small.save(&options.out, &format!("{key}-{}", index + 1));
            println!("    {} of {} bytes are left: {}", small.size(), input.size(), place.display());
            if small.size() <= PRINTED {
                for (name, text) in &small.files {
                    println!("    --- {name}\n{}\n    ---", text.escape_ascii().to_string().replace("\\n", "\n"));
                }
            }
        }
    }
    if found.is_empty() {
        println!("  no failure");
    }
}

impl Worker {
    fn new(seed: u64, number: usize, corpus: Corpus) -> Self {
        let rng = Rng::with_seed(seed.wrapping_mul(1000).wrapping_add(number as u64));
        Self { rng, corpus, counts: Counts::default(), trail: Trail::default() }
    }

    /// Makes one input, runs it, and keeps it when it is worth it. Returns it when it fails.
    fn one(&mut self, child: &mut child::Handle) -> Option<(Input, Failure)> {
        let rng = &mut self.rng;
        let generated = rng.u32(..5) == 0;
        let mut input = if generated {
            Input::single("generated.sv", grammar::design(rng).into_bytes())
        } else {
            self.corpus.pick(rng)
        };
        let plain = generated && rng.u32(..4) == 0;
        if !plain {
            let other = self.corpus.pick(rng);
            mutate::mutate(&mut input, &other, rng);
        }
        input.broken_tail = rng.u32(..6) == 0;
        self.trail.add(&input);
        let outcome = child.run(&input);
        self.counts.add(&outcome, plain && !input.broken_tail);
        if outcome.failure.is_none() && !input.broken_tail {
            self.corpus.keep_if_new(&input, &outcome.said);
        }
        outcome.failure.map(|failure| (input, failure))
    }
}

/// A digest of the inputs so far, noted whenever their number is a power of two, so that two runs can be compared.
#[derive(Default)]
struct Trail {
    hasher: DefaultHasher,
    inputs: usize,
    digests: Vec<u16>,
}

impl Trail {
    fn add(&mut self, input: &Input) {
        (&input.files, input.broken_tail).hash(&mut self.hasher);
        self.inputs += 1;
        if self.inputs.is_power_of_two() {
            self.digests.push((self.hasher.finish() & 0xffff) as u16);
        }
    }
}

impl Counts {
    fn add(&mut self, outcome: &Outcome, generated: bool) {
        self.inputs += 1;
        self.complete += usize::from(outcome.complete);
        self.with_gates += usize::from(outcome.nodes > 0);
        self.parser_panics += outcome.parser_panics;
        self.total += outcome.time;
        self.slowest = self.slowest.max(outcome.time);
        self.largest_kb = self.largest_kb.max(outcome.peak_kb);
        self.generated += usize::from(generated);
        self.generated_complete += usize::from(generated && outcome.complete);
    }

    fn join(&mut self, other: &Self) {
        self.inputs += other.inputs;
        self.generated += other.generated;
        self.generated_complete += other.generated_complete;
        self.complete += other.complete;
        self.with_gates += other.with_gates;
        self.parser_panics += other.parser_panics;
        self.total += other.total;
        self.slowest = self.slowest.max(other.slowest);
        self.largest_kb = self.largest_kb.max(other.largest_kb);
    }
}

fn summary(workers: &[Worker], seeds: usize, options: &Options, elapsed: Duration) {
    let mut counts = Counts::default();
    for worker in workers {
        counts.join(&worker.counts);
    }
    println!(
        "fuzz: {} inputs in {:.0} s on {} workers, seed {}, {seeds} files to begin with",
        counts.inputs,
        elapsed.as_secs_f64(),
        workers.len(),
        options.seed,
    );
    println!(
        "  {} gave gates, {} were read complete; of {} unmutated generated designs {} were complete",
        counts.with_gates, counts.complete, counts.generated, counts.generated_complete
    );
    println!("  {} panics inside the parser, caught by the reader", counts.parser_panics);
    println!(
        "  {:.0} s of processor time together, the slowest {:.1} s (limit {} s); the largest {} MB (limit {} MB)",
        counts.total.as_secs_f64(),
        counts.slowest.as_secs_f64(),
        child::TIME.as_secs(),
        counts.largest_kb / 1000,
        child::MEMORY_KB / 1000
    );
    for (number, worker) in workers.iter().enumerate() {
        let digests: Vec<String> = worker.trail.digests.iter().map(|digest| format!("{digest:04x}")).collect();
        println!(
            "  worker {number}: {} inputs, {} statements of the front end, {} inputs kept for them; after 1, 2, 4... \
             inputs {}",
            worker.counts.inputs,
            worker.corpus.said(),
            worker.corpus.len() - seeds,
            digests.join(" ")
        );
    }
}

/// A failure as a person reads it.
impl std::fmt::Display for Failure {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "FAILED {}: {}", self.key(), self.detail)
    }
}
