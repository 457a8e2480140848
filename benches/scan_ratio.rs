//! The time of a whole scan of mor1kx, as a user runs it, against the time of parsing its files and nothing else on the
//! same number of threads. The parser is the floor: no tool that uses it can be faster.
//!
//! Needs the outside data: `STILLWIRE_DATA=$(tests/outside/fetch) cargo bench --profile dev --bench scan_ratio`.
#![allow(clippy::print_stdout, reason = "a bench prints what it measured")]

use std::collections::HashMap;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use rayon::prelude::*;
use stillwire::source::{Request, load, on_big_stacks};

/// The shortest of this many runs counts, for both sides.
const RUNS: usize = 5;

fn data() -> Option<PathBuf> {
    let fetched = std::env::var_os("STILLWIRE_DATA").map(PathBuf::from);
    let folder = fetched.unwrap_or_else(|| Path::new(env!("CARGO_MANIFEST_DIR")).join("target/outside"));
    folder.join("stamp").is_file().then_some(folder)
}

/// Every Verilog file below `folder` that is no header.
fn files(folder: &Path) -> Vec<PathBuf> {
    let mut files: Vec<PathBuf> = walkdir::WalkDir::new(folder)
        .into_iter()
        .filter_map(Result::ok)
        .map(walkdir::DirEntry::into_path)
        .filter(|path| path.extension().is_some_and(|extension| extension == "v"))
        .collect();
    files.sort();
    files
}

/// The parser alone, file by file in parallel, with its own preprocessor.
fn parse(files: &[PathBuf], folder: &Path) {
    let defines = HashMap::new();
    let parsed = files.par_iter().with_max_len(1).filter(|file| {
        let result = sv_parser::parse_sv(file, &defines, &[folder], false, false);
        result.is_ok()
    });
    // One file of the core is a part that others include, and is not parsed by itself.
    assert!(parsed.count() + 1 >= files.len(), "the parser reads the core");
}

fn scan(folder: &Path) {
    let status = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .arg("scan")
        .arg(folder)
        .args(["--top", "mor1kx", "--write", "json:-"])
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .status()
        .expect("the program starts");
    assert!(matches!(status.code(), Some(0 | 1)), "the scan is complete");
}

fn shortest(mut work: impl FnMut()) -> f64 {
    let mut best = Duration::MAX;
    for _ in 0..RUNS {
        let start = Instant::now();
        work();
        best = best.min(start.elapsed());
    }
    best.as_secs_f64()
}

fn run(data: &Path) {
    let folder = data.join("mor1kx/rtl/verilog");
    let files = files(&folder);
    let bytes: u64 = files.iter().filter_map(|file| file.metadata().ok()).map(|metadata| metadata.len()).sum();
    let threads = rayon::current_num_threads();
    let parsing = shortest(|| parse(&files, &folder));
    let request = Request { paths: vec![folder.clone()], ..Request::default() };
    let reading = shortest(|| drop(load(&request, &|_| None, &|_, _| {})));
    let scanning = shortest(|| scan(&folder));
    println!("mor1kx, {} files, {} kB, {threads} threads, best of {RUNS}", files.len(), bytes / 1000);
    println!("parser alone {parsing:7.3} s");
    println!("reading      {reading:7.3} s (our preprocessing, parsing, own tree)");
    println!("whole scan   {scanning:7.3} s");
    // The stricter of the two counts: our reading cuts files into pieces and so keeps all threads busier.
    let ratio = scanning / parsing.min(reading);
    println!("ratio to the parser alone {:.2}, to the faster of both {ratio:.2}; the aim is 1.30", scanning / parsing);
}

fn main() {
    match data() {
        Some(data) => on_big_stacks(0, || run(&data)).expect("threads"),
        None => println!("scan_ratio: no outside data, run tests/outside/fetch first"),
    }
}
