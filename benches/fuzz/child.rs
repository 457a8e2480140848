//! The process in which inputs run, from both sides. The parent writes an input's files into the child's folder and one
//! line to its standard input; the child answers with one line of JSON. Meanwhile the parent reads the child's processor
//! time and resident memory from `/proc` and ends it when a limit is passed.
//!
//! Invariant: a child that failed or grew is replaced, so that no input pays for another.

use std::collections::{BTreeMap, BTreeSet};
use std::io::{BufRead, BufReader, Write};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, Command, Stdio};
use std::sync::Mutex;
use std::sync::mpsc::{Receiver, RecvTimeoutError, channel};
use std::time::{Duration, Instant};

use stillwire::report::{json, text};
use stillwire::rules::Severity;
use stillwire::{Request, Scan, source};
use tempfile::TempDir;

use crate::corpus::Input;
use crate::outcome::{Failure, Kind, Outcome};

/// The first argument of a child; the second is its folder.
pub const ARGUMENT: &str = "--child";
/// Processor time that one input may take.
pub const TIME: Duration = Duration::from_secs(10);
/// Resident memory that one input may take.
pub const MEMORY_KB: u64 = 2_000_000;
/// A child that computes nothing for so long on the clock is called stalled.
const STALL: Duration = Duration::from_secs(120);
/// Longer netlists are not read back: it takes longer than the whole input.
const READ_BACK: usize = 15_000;
/// A child is replaced once it keeps this much between inputs.
const KEPT_KB: u64 = 600_000;
/// Linux reports processor time in these units to programs, whatever its own clock.
const TICK: Duration = Duration::from_millis(10);

/// The parent's side.
pub struct Handle {
    folder: TempDir,
    running: Option<Running>,
}

struct Running {
    child: Child,
    stdin: ChildStdin,
    answers: Receiver<String>,
}

impl Handle {
    pub fn new() -> Self {
        Self { folder: tempfile::tempdir().expect("a temporary folder"), running: None }
    }

    /// Runs one input within the limits.
    pub fn run(&mut self, input: &Input) -> Outcome {
        let folder = self.folder.path().join("input");
        std::fs::remove_dir_all(&folder).ok();
        input.write(&folder);
        let running = self.running.get_or_insert_with(|| Running::start(self.folder.path()));
        let pid = running.child.id();
        // Starts the measure of the peak anew.
        std::fs::write(format!("/proc/{pid}/clear_refs"), "5").ok();
        let before = processor_time(pid);
        let mut progress = (before, Instant::now());
        if writeln!(running.stdin, "{}", if input.broken_tail { "broken" } else { "plain" }).is_err() {
            return self.failed(Failure::new(Kind::Signal, "", "the child ended between two inputs"), before);
        }
        loop {
            match running.answers.recv_timeout(Duration::from_millis(20)) {
                Ok(line) => {
                    let mut outcome: Outcome = match serde_json::from_str(&line) {
                        Ok(outcome) => outcome,
                        Err(error) => {
                            return self
                                .failed(Failure::new(Kind::Signal, "", format!("answer {line}: {error}")), before);
                        }
                    };
                    outcome.time = processor_time(pid).saturating_sub(before);
                    outcome.peak_kb = memory(pid, "VmHWM:");
                    if outcome.failure.is_none() {
                        outcome.failure = over_limit(outcome.time, outcome.peak_kb);
                    }
                    if outcome.failure.is_some() || memory(pid, "VmRSS:") > KEPT_KB {
                        self.end();
                    }
                    return outcome;
                }
                Err(RecvTimeoutError::Timeout) => {
                    let now = processor_time(pid);
                    let mut failure = over_limit(now.saturating_sub(before), memory(pid, "VmHWM:"));
                    if now > progress.0 {
                        progress = (now, Instant::now());
                    } else if failure.is_none() && progress.1.elapsed() > STALL {
                        failure = Some(Failure::new(Kind::Stalled, "", format!("nothing happened for {STALL:?}")));
                    }
                    if let Some(failure) = failure {
                        return self.failed(failure, before);
                    }
                }
                Err(RecvTimeoutError::Disconnected) => {
                    let status =
                        running.child.wait().map_or_else(|error| error.to_string(), |status| status.to_string());
                    return self.failed(Failure::new(Kind::Signal, status.clone(), status), before);
                }
            }
        }
    }

    fn failed(&mut self, failure: Failure, before: Duration) -> Outcome {
        let mut outcome = Outcome { failure: Some(failure), ..Outcome::default() };
        if let Some(running) = &self.running {
            outcome.time = processor_time(running.child.id()).saturating_sub(before);
            outcome.peak_kb = memory(running.child.id(), "VmHWM:");
        }
        self.end();
        outcome
    }

    fn end(&mut self) {
        if let Some(mut running) = self.running.take() {
            running.child.kill().ok();
            running.child.wait().ok();
        }
    }
}

impl Drop for Handle {
    fn drop(&mut self) {
        self.end();
    }
}

impl Running {
    fn start(folder: &Path) -> Self {
        let program = std::env::current_exe().expect("the path of this program");
        let mut child = Command::new(program)
            .arg(ARGUMENT)
            .arg(folder)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::null())
            .spawn()
            .expect("a child process");
        let stdin = child.stdin.take().expect("the child's input");
        let stdout = child.stdout.take().expect("the child's output");
        let (send, answers) = channel();
        std::thread::spawn(move || {
            for line in BufReader::new(stdout).lines().map_while(Result::ok) {
                if send.send(line).is_err() {
                    break;
                }
            }
        });
        Self { child, stdin, answers }
    }
}

fn over_limit(time: Duration, peak_kb: u64) -> Option<Failure> {
    if time > TIME {
        Some(Failure::new(Kind::Time, "", format!("{time:?} of processor time")))
    } else if peak_kb > MEMORY_KB {
        Some(Failure::new(Kind::Memory, "", format!("{peak_kb} kB")))
    } else {
        None
    }
}

/// User and system time of a process and all its threads.
fn processor_time(pid: u32) -> Duration {
    let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap_or_default();
    // The name of the program stands in parentheses and may contain blanks; the state follows it.
    let fields: Vec<&str> = stat.rsplit(") ").next().unwrap_or("").split(' ').collect();
    let ticks: u32 =
        fields.get(11..13).map_or(0, |times| times.iter().filter_map(|time| time.parse::<u32>().ok()).sum());
    TICK * ticks
}

/// A line of the process's status, in kB.
fn memory(pid: u32, name: &str) -> u64 {
    let status = std::fs::read_to_string(format!("/proc/{pid}/status")).unwrap_or_default();
    let line = status.lines().find_map(|line| line.strip_prefix(name));
    line.and_then(|line| line.trim().trim_end_matches(" kB").parse().ok()).unwrap_or(0)
}

/// Where the last panics happened, with their messages.
static PANICS: Mutex<Vec<(String, String)>> = Mutex::new(Vec::new());

fn panics() -> Vec<(String, String)> {
    std::mem::take(&mut *PANICS.lock().unwrap_or_else(std::sync::PoisonError::into_inner))
}

/// The child's side: answers until its input ends.
pub fn serve() {
    let folder = PathBuf::from(std::env::args().nth(2).expect("the folder of the child"));
    std::panic::set_hook(Box::new(|info| {
        let mut place = info.location().map_or_else(String::new, |at| format!("{}:{}", at.file(), at.line()));
        if !place.starts_with("src/") && !is_of_the_parser(&place) {
            place = caller(&std::backtrace::Backtrace::force_capture().to_string()).unwrap_or(place);
        }
        PANICS.lock().unwrap_or_else(std::sync::PoisonError::into_inner).push((place, info.to_string()));
    }));
    for line in std::io::stdin().lines().map_while(Result::ok) {
        let outcome = run(&folder, line == "broken");
        println!("{}", serde_json::to_string(&outcome).expect("plain data"));
    }
}

/// The first place in our sources on a backtrace: the standard library panics on behalf of its caller.
fn caller(backtrace: &str) -> Option<String> {
    let mut places = backtrace.lines().filter_map(|line| line.trim().strip_prefix("at ./"));
    places
        .find(|place| place.starts_with("src/"))
        .map(|place| place.rsplit_once(':').map_or(place, |(line, _)| line).to_string())
}

fn run(folder: &Path, broken_tail: bool) -> Outcome {
    panics();
    let result = catch_unwind(AssertUnwindSafe(|| analyse(folder, broken_tail)));
    let mut outcome = result.unwrap_or_default();
    // The reader catches panics of the parser, but the converter runs under the same guard and is ours.
    let (theirs, ours): (Vec<_>, Vec<_>) = panics().into_iter().partition(|(place, _)| is_of_the_parser(place));
    outcome.parser_panics = theirs.len();
    if let Some((place, message)) = ours.into_iter().next() {
        outcome.failure = Some(Failure::new(Kind::Panic, place, message));
    }
    outcome
}

fn is_of_the_parser(place: &str) -> bool {
    ["/sv-parser", "/nom"].iter().any(|name| place.contains(name))
}

fn request(path: PathBuf) -> Request {
    Request {
        source: source::Request { paths: vec![path], ..source::Request::default() },
        tops: Vec::new(),
        given: Vec::new(),
        libraries: Vec::new(),
        cells: Vec::new(),
        assumptions: Vec::new(),
        severities: BTreeMap::new(),
        today: jiff::civil::date(2026, 1, 1),
        threads: 1,
        drawn: false,
    }
}

fn analyse(folder: &Path, broken_tail: bool) -> Outcome {
    let mut outcome = Outcome::default();
    let (netlist, Scan { sources, report, .. }) =
        match stillwire::flatten(&request(folder.join("input")), None, &|_| None, &|_| {}) {
            Ok(result) => result,
            Err(error) => {
                outcome.said.push(without_names(&error.message));
                return outcome;
            }
        };
    let style = text::Style { show: Severity::Note, gate: Severity::Error, colours: false };
    text::render(&report, &sources, &style);
    json::render(&report, &sources);
    outcome.complete = report.complete();
    outcome.nodes = netlist.lines().filter(|line| line.contains('(')).count();
    let constructs = report.coverage.unsupported.iter().map(|(construct, _)| construct.as_str());
    let messages = report.messages.iter().map(|message| message.text.as_str());
    let findings = report.findings.iter().map(|finding| finding.message.as_str());
    let skipped = report.coverage.left_out.skipped.keys().map(String::as_str);
    outcome.said.extend(messages.chain(findings).chain(constructs).chain(skipped).map(without_names));
    let left_out = !report.coverage.left_out.regions.is_empty();
    if broken_tail && outcome.complete && !left_out {
        outcome.failure = Some(Failure::new(Kind::FalselyComplete, "", "the last module is broken"));
    } else if outcome.complete && netlist.len() < READ_BACK && !has_two_clocks(&netlist) {
        outcome.failure = read_back(folder, &netlist);
    }
    outcome
}

/// Our own netlist must be legal input of ours. Its copies that wait for the gates (`#0`) are for simulators.
fn read_back(folder: &Path, netlist: &str) -> Option<Failure> {
    let file = folder.join("netlist.v");
    std::fs::write(&file, netlist.replace("#0; ", "")).expect("the netlist is written");
    let report = match stillwire::flatten(&request(file), None, &|_| None, &|_| {}) {
        Ok((_, scan)) => scan.report,
        // Nothing but empty modules.
        Err(error) => return netlist.contains("module").then(|| Failure::new(Kind::NotReadBack, "", error.message)),
    };
    if report.complete() {
        return None;
    }
    let messages = report.messages.iter().map(|message| message.text.clone());
    let said: Vec<String> = messages.chain(report.findings.iter().map(|finding| finding.message.clone())).collect();
    let place = said.first().map_or(String::new(), |first| without_names(first));
    Some(Failure::new(Kind::NotReadBack, place, said.join("; ")))
}

/// Whether some register is written by several processes: the form of a flip-flop with several clocks, which only a
/// simulator reads.
fn has_two_clocks(netlist: &str) -> bool {
    let written = netlist.lines().filter(|line| line.contains("always @(") && line.contains("edge "));
    let names = written.filter_map(|line| line.split_once(" <= ")?.0.split_whitespace().last());
    let mut seen = BTreeSet::new();
    !names.into_iter().all(|name| seen.insert(name))
}

/// A message without what differs from input to input: quoted text and digits.
fn without_names(message: &str) -> String {
    let outside = message.split('`').step_by(2);
    outside.collect::<Vec<_>>().join("`").chars().filter(|c| !c.is_ascii_digit()).collect()
}
