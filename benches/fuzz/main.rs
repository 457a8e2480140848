//! A fuzzer of the whole front end: from files through preprocessing, parsing, elaboration and the graph's checker to the
//! rendered report and the flattened netlist. Inputs are mutations of the fixtures and of modules from a grammar of
//! SystemVerilog; those that make the front end say something new are mutated further.
//!
//! `cargo bench --profile dev --bench fuzz -- --seconds 60 [--seed N] [--workers N] [--out FOLDER]`
//!
//! Every input runs in a child process. A failure is a panic of ours (also one that the reader would catch), an end by a
//! signal such as an overflown stack, more than 10 s of processor time, more than 2 GB of resident memory, no progress for
//! two minutes, an unsound graph, a flattened netlist that is not read back whole, and an input with a broken module
//! at its end that is called complete. The time limit counts the processor time of the child, not the time on the clock,
//! so that a loaded machine changes nothing. The first input of each failure is minimised and saved below `target/fuzz`,
//! and the run ends with 1.
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
use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::time::{Duration, Instant};

use fastrand::Rng;

use corpus::{Corpus, Input};
use outcome::{Failure, Outcome};

struct Options {
    seconds: u64,
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

/// What all workers share.
struct Shared {
    corpus: Corpus,
    counts: Counts,
    /// By what they have in common, with where the smallest input is saved.
    failures: BTreeMap<String, (usize, String)>,
}

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
    let seeds = corpus.len();
    let shared = Mutex::new(Shared { corpus, counts: Counts::default(), failures: BTreeMap::new() });
    std::thread::scope(|scope| {
        for worker in 0..options.workers {
            let shared = &shared;
            scope.spawn(move || {
                let mut rng = Rng::with_seed(options.seed.wrapping_mul(1000).wrapping_add(worker as u64));
                let mut child = child::Handle::new();
                while Instant::now() < end {
                    one(&mut rng, &mut child, shared, &options.out);
                }
            });
        }
    });
    let shared = shared.into_inner().unwrap_or_else(std::sync::PoisonError::into_inner);
    summary(&shared, seeds, options, start.elapsed());
    !shared.failures.is_empty()
}

/// Makes one input, runs it and keeps it when it is worth it.
fn one(rng: &mut Rng, child: &mut child::Handle, shared: &Mutex<Shared>, out: &Path) {
    let lock = || shared.lock().unwrap_or_else(std::sync::PoisonError::into_inner);
    let generated = rng.u32(..5) == 0;
    let mut input = if generated {
        Input::single("generated.sv", grammar::design(rng).into_bytes())
    } else {
        lock().corpus.pick(rng)
    };
    let plain = generated && rng.u32(..4) == 0;
    if !plain {
        let other = lock().corpus.pick(rng);
        mutate::mutate(&mut input, &other, rng);
    }
    input.broken_tail = rng.u32(..6) == 0;
    let outcome = child.run(&input);
    {
        let mut shared = lock();
        shared.counts.add(&outcome, plain && !input.broken_tail);
        if outcome.failure.is_none() && !input.broken_tail {
            shared.corpus.keep_if_new(&input, &outcome.said);
        }
    }
    if let Some(failure) = outcome.failure {
        let key = failure.key();
        let size = input.size();
        let is_new = {
            let mut shared = lock();
            let known = shared.failures.contains_key(&key);
            let entry = shared.failures.entry(key.clone()).or_insert((0, String::new()));
            entry.0 += 1;
            !known
        };
        if is_new {
            println!("{failure}\n  in {size} bytes, minimising");
            let small = minimise::minimise(input, &failure, child);
            let place = small.save(out, &key);
            println!("  {} bytes are left: {}", small.size(), place.display());
            if let Some(entry) = lock().failures.get_mut(&key) {
                entry.1 = place.display().to_string();
            }
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
}

fn summary(shared: &Shared, seeds: usize, options: &Options, elapsed: Duration) {
    let counts = &shared.counts;
    println!(
        "fuzz: {} inputs in {:.0} s on {} workers, seed {}; {seeds} seeds, {} kept because they brought something new",
        counts.inputs,
        elapsed.as_secs_f64(),
        options.workers,
        options.seed,
        shared.corpus.len() - seeds,
    );
    println!(
        "  {} gave gates, {} were read complete; of {} unmutated generated designs {} were complete",
        counts.with_gates, counts.complete, counts.generated, counts.generated_complete
    );
    println!(
        "  {} different statements of the front end; {} panics inside the parser, caught by the reader",
        shared.corpus.said(),
        counts.parser_panics
    );
    println!(
        "  {:.0} s of processor time together, the slowest {:.1} s (limit {} s); the largest {} MB (limit {} MB)",
        counts.total.as_secs_f64(),
        counts.slowest.as_secs_f64(),
        child::TIME.as_secs(),
        counts.largest_kb / 1000,
        child::MEMORY_KB / 1000
    );
    for (key, (count, place)) in &shared.failures {
        println!("  FAILED {count} times: {key}\n    {place}");
    }
    if shared.failures.is_empty() {
        println!("  no failure");
    }
}

/// A failure as a person reads it.
impl std::fmt::Display for Failure {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "FAILED {}: {}", self.key(), self.detail)
    }
}
