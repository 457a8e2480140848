//! Replays: what `stillwire replay` writes is run by a simulator that knows nothing of the product. Every proven finding
//! of the fixtures and of random circuits must print PULSE, and with its cover and random delays NO PULSE. The runs with
//! `iverilog` are ignored by default; the others look at the files.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use crate::pipeline::{Scan, scan};
use crate::random_circuits::{Random, Written, module};
use crate::random_launches;

/// Benches that one simulation runs side by side.
const BATCH: usize = 60;
/// Random circuits that must replay, and the number of the first.
const CIRCUITS: u64 = 300;
const FIRST_SEED: u64 = 500_000;
/// Sequential ones beside them, for the witnesses of launches.
const LAUNCHES: u64 = 150;

/// What is proven about these is no transition of a net, so there is none to replay: a loop without a lost state, a
/// structure that needs its redundant terms, a release that nothing synchronises, a state with set and reset active, and
/// what could not be read.
const WITHOUT_TRANSITION: [&str; 5] =
    ["combinational-loop", "cover-unprotected", "reset-release", "set-reset-overlap", "unsupported-construct"];

fn replay(fingerprint: &str, path: &Path, to: &Path) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
    command.args(["replay", fingerprint]).arg(path).arg("--to").arg(to);
    command.output().expect("the program starts")
}

fn files(folder: &Path, ending: &str) -> Vec<PathBuf> {
    let entries = std::fs::read_dir(folder).expect("the folder of the replay");
    let mut files: Vec<PathBuf> = entries.map(|entry| entry.expect("an entry").path()).collect();
    files.retain(|file| file.to_string_lossy().ends_with(ending));
    files.sort();
    files
}

fn has_witness(finding: &&serde_json::Value) -> bool {
    finding["hazards"].as_array().is_some_and(|hazards| !hazards.is_empty())
}

fn proven(scan: &Scan) -> impl Iterator<Item = &serde_json::Value> {
    scan.findings().iter().filter(|finding| finding["verdict"] == "proven")
}

/// The findings that have something to replay, by fingerprint.
fn replayable(scan: &Scan) -> BTreeSet<String> {
    let findings = proven(scan).filter(has_witness);
    findings.map(|finding| finding["fingerprint"].as_str().expect("a fingerprint").to_string()).collect()
}

/// What was replayed.
#[derive(Default)]
struct Replays {
    benches: Vec<PathBuf>,
    findings: usize,
    /// How many hazards of them are those of a launch.
    launched: usize,
    /// Proven findings without a transition, by rule.
    without: BTreeMap<String, usize>,
    /// What was said about those that failed.
    failed: String,
}

impl Replays {
    /// Replays every finding under `path` into folders below `to`; returns how many.
    fn of(&mut self, path: &Path, to: &Path) -> usize {
        // A file of packages or of test benches alone has nothing to analyse.
        let status =
            Command::new(env!("CARGO_BIN_EXE_stillwire")).arg("scan").arg(path).output().expect("it starts").status;
        if status.code() == Some(2) {
            return 0;
        }
        let scan = scan(&[path], &[]);
        for finding in proven(&scan) {
            let launches = finding["hazards"].as_array().into_iter().flatten();
            self.launched += launches.filter(|hazard| hazard["launch"].is_object()).count();
            if !has_witness(&finding) {
                let rule = finding["rule"].as_str().expect("a rule");
                *self.without.entry(rule.to_string()).or_default() += 1;
            }
        }
        let fingerprints = replayable(&scan);
        for fingerprint in &fingerprints {
            let folder = to.join(fingerprint);
            let output = replay(fingerprint, path, &folder);
            let text = String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr);
            if !output.status.success() {
                self.failed += &format!("{}: {text}\n", path.display());
            }
            self.benches.extend(files(&folder, ".v"));
        }
        self.findings += fingerprints.len();
        fingerprints.len()
    }

    /// Says how much there was, requires that nothing failed or was passed over, and tells how many benches are cured.
    #[allow(clippy::print_stdout, reason = "how much was compared belongs to the result of an outside check")]
    fn judge(&self, of: &str) -> usize {
        assert!(self.failed.is_empty(), "{}", self.failed);
        let cured = self.benches.iter().filter(|bench| bench.to_string_lossy().contains("-cured")).count();
        println!(
            "{} findings of {of}: {} benches, {cured} of them cured, {} hazards of launches",
            self.findings,
            self.benches.len(),
            self.launched
        );
        for (rule, count) in &self.without {
            println!("    {count} of {rule}: not about a transition of a net, so nothing to replay");
            assert!(WITHOUT_TRANSITION.contains(&rule.as_str()), "{rule} without a witness");
        }
        cured
    }
}

/// Runs the benches; `Err` lists what printed the wrong word.
fn simulate(benches: &[PathBuf], folder: &Path) -> Result<(), String> {
    let mut wrong = String::new();
    for batch in benches.chunks(BATCH) {
        let program = folder.join("benches.vvp");
        let compiled = Command::new("iverilog").args(["-g2001", "-o"]).arg(&program).args(batch).output();
        let compiled = compiled.expect("iverilog starts");
        assert!(compiled.status.success(), "{}", String::from_utf8_lossy(&compiled.stderr));
        let output = Command::new("vvp").arg(&program).output().expect("vvp starts");
        let output = String::from_utf8_lossy(&output.stdout);
        let lines: Vec<&str> = output.lines().collect();
        assert_eq!(lines.len(), batch.len(), "one line per bench:\n{output}");
        for line in lines {
            let expected = if line.contains("_cured:") { "NO PULSE " } else { "PULSE " };
            if !line.starts_with(expected) {
                wrong += &format!("{line}\n");
            }
        }
    }
    if wrong.is_empty() { Ok(()) } else { Err(wrong) }
}

fn fixtures(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(folder).expect("a folder of fixtures") {
        let path = entry.expect("an entry").path();
        // The seeds of the fuzzer are broken on purpose.
        if path.is_dir() && !path.ends_with("fuzz") {
            fixtures(&path, found);
        } else if path.is_file() && path.extension().is_some_and(|extension| extension == "v" || extension == "sv") {
            found.push(path);
        }
    }
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn every_finding_of_the_fixtures_replays() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures");
    let mut paths = Vec::new();
    fixtures(&root, &mut paths);
    paths.sort();
    let mut replays = Replays::default();
    for (index, path) in paths.iter().enumerate() {
        replays.of(path, &folder.path().join(index.to_string()));
    }
    let cured = replays.judge(&format!("{} fixtures", paths.len()));
    let (findings, launched) = (replays.findings, replays.launched);
    assert!(findings > 250 && cured > 200 && launched > 60, "{findings} findings, {cured} cured, {launched} launched");
    // The same module in two fixtures makes benches of one name, which no simulation can hold together.
    let mut names = BTreeSet::new();
    let named = |bench: &PathBuf| bench.iter().rev().take(2).map(|part| part.to_os_string()).collect::<Vec<_>>();
    let (first, again): (Vec<PathBuf>, Vec<PathBuf>) =
        replays.benches.into_iter().partition(|bench| names.insert(named(bench)));
    let result = simulate(&first, folder.path()).and_then(|()| simulate(&again, folder.path()));
    assert_eq!(result, Ok(()));
}

/// Circuits from `write` until `count` of them have a hazard: one without has nothing to show. Returns how many benches
/// are cured, and how many hazards are those of a launch.
fn random(first: u64, count: u64, write: impl Fn(u64) -> String) -> (usize, usize) {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let mut replays = Replays::default();
    let mut circuits = 0;
    for seed in first.. {
        if circuits == count {
            break;
        }
        let file = folder.path().join(format!("t{seed}.v"));
        std::fs::write(&file, write(seed)).expect("written");
        circuits += u64::from(replays.of(&file, &folder.path().join(seed.to_string())) > 0);
    }
    let cured = replays.judge(&format!("{circuits} random circuits"));
    assert_eq!(simulate(&replays.benches, folder.path()), Ok(()));
    (cured, replays.launched)
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn every_finding_of_random_circuits_replays() {
    let write = |seed| module(seed, &Written::random(&mut Random::new(seed)));
    let (cured, _) = random(FIRST_SEED, CIRCUITS, write);
    assert!(cured > 500, "{cured} cured");
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn every_finding_of_random_launches_replays() {
    let write = |seed| random_launches::written(&format!("t{seed}"), seed);
    // Few of them have a cover that holds in every launch.
    let (cured, launched) = random(FIRST_SEED, LAUNCHES, write);
    assert!(cured > 10 && launched > 250, "{cured} cured, {launched} hazards of launches");
}

/// A selector on a clock.
const SELECTOR: &str = "module t(input s, a, b, d, output reg q);\n  wire r = s ? a : b;\n  \
                        always @(posedge r) q <= d;\nendmodule\n";

fn written(folder: &Path, text: &str) -> PathBuf {
    let file = folder.join("design.v");
    std::fs::write(&file, text).expect("written");
    file
}

/// The dump shows the pulse: its target goes away from 1 and comes back (IEEE 1364-2005 clause 18, by the `vcd` crate).
#[test]
fn the_dump_shows_the_pulse() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = written(folder.path(), SELECTOR);
    let fingerprints = replayable(&scan(&[&file], &[]));
    let to = folder.path().join("out");
    let output = replay(fingerprints.first().expect("a finding"), &file, &to);
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    let dump = std::fs::read(to.join("1-static-1.vcd")).expect("the dump");
    let mut parser = vcd::Parser::new(dump.as_slice());
    let header = parser.parse_header().expect("a header");
    let net = header.find_var(&["replay", "t", "r"]).expect("the net under its instance").code;
    let mut values = Vec::new();
    for command in parser {
        if let vcd::Command::ChangeScalar(code, value) = command.expect("a command")
            && code == net
        {
            values.push(value);
        }
    }
    assert_eq!(values, [vcd::Value::V1, vcd::Value::V0, vcd::Value::V1]);
}

#[test]
fn fingerprints_are_found_by_their_beginning() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = written(folder.path(), SELECTOR);
    let fingerprint = replayable(&scan(&[&file], &[])).pop_first().expect("a finding");
    let to = folder.path().join("out");
    let output = replay(&fingerprint[..6].to_uppercase(), &file, &to);
    assert_eq!(output.status.code(), Some(0));
    assert!(String::from_utf8_lossy(&output.stdout).contains("static-1 on t.r when t.s"));
    let unknown = if fingerprint.starts_with('0') { "1" } else { "0" };
    let output = replay(unknown, &file, &to);
    assert_eq!(output.status.code(), Some(2));
    let message = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(message.contains("no finding has a fingerprint that begins with"), "{message}");
    assert!(message.contains(&fingerprint[..12]), "{message}");
    let output = replay("xyz", &file, &to);
    assert_eq!(output.status.code(), Some(2));
}

#[test]
fn a_finding_without_a_witness_says_why() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = written(folder.path(), "module t(output y);\n  wire y = ~y;\nendmodule\n");
    let scan = scan(&[&file], &[]);
    let finding = &scan.findings()[0];
    assert_eq!(finding["rule"], "combinational-loop");
    let output = replay(finding["fingerprint"].as_str().expect("text"), &file, &folder.path().join("out"));
    assert_eq!(output.status.code(), Some(2));
    let message = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(message.contains("nothing to replay"), "{message}");
    assert!(!folder.path().join("out").exists(), "nothing is written");
}
