//! What the cache saves: whole scans of two cores, as a user runs them, without a cache, with nothing changed since the last
//! run, and with a change in one leaf file, all in one run and as ratios. Each changed text is new, so that every such
//! run really meets it for the first time. What is written must be the same bytes with and without the cache.
//!
//! Needs the outside data: `STILLWIRE_DATA=$(tests/outside/fetch) cargo bench --profile dev --bench cache_ratio`.
#![allow(clippy::print_stdout, reason = "a bench prints what it measured")]

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

/// The shortest of this many runs counts.
const RUNS: usize = 5;
const AIM_UNCHANGED: f64 = 0.10;
const AIM_LEAF: f64 = 0.20;

struct Core {
    folder: &'static str,
    /// Below the folder: what is given to the program.
    arguments: &'static [&'static str],
    /// A module that instantiates nothing.
    leaf: &'static str,
}

const CORES: [Core; 2] = [
    Core { folder: "mor1kx", arguments: &["rtl/verilog", "--top", "mor1kx"], leaf: "rtl/verilog/mor1kx_decode.v" },
    Core {
        folder: "cv32e40p",
        arguments: &["-f", "cv32e40p_manifest.flist", "--top", "cv32e40p_top"],
        leaf: "rtl/cv32e40p_alu_div.sv",
    },
];

fn data() -> Option<PathBuf> {
    let fetched = std::env::var_os("STILLWIRE_DATA").map(PathBuf::from);
    let folder = fetched.unwrap_or_else(|| Path::new(env!("CARGO_MANIFEST_DIR")).join("target/outside"));
    folder.join("stamp").is_file().then_some(folder)
}

/// A copy in which files can be changed.
fn copy(from: &Path, to: &Path) {
    for entry in walkdir::WalkDir::new(from).into_iter().filter_map(Result::ok) {
        let target = to.join(entry.path().strip_prefix(from).expect("below the folder"));
        if entry.file_type().is_dir() {
            std::fs::create_dir_all(target).expect("a folder");
        } else {
            std::fs::copy(entry.path(), target).expect("a file");
        }
    }
}

/// The time of a scan, and what it wrote.
fn scan(core: &Core, folder: &Path, cached: bool) -> (Duration, Vec<u8>) {
    let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
    command.current_dir(folder).env("DESIGN_RTL_DIR", folder.join("rtl"));
    command.arg("scan").args(core.arguments).args(["--write", "json:-"]);
    if cached {
        command.args(["--cache", ".cache"]);
    }
    let start = Instant::now();
    let output = command.stderr(Stdio::null()).output().expect("the program starts");
    assert!(matches!(output.status.code(), Some(0 | 1)), "the scan is complete");
    (start.elapsed(), output.stdout)
}

fn measure(core: &Core, data: &Path) {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let folder = folder.path();
    copy(&data.join(core.folder), folder);
    let leaf = folder.join(core.leaf);
    let text = std::fs::read_to_string(&leaf).expect("the leaf is readable");
    let mut shortest = [Duration::MAX; 3];
    let keep = |best: &mut Duration, time: Duration| *best = (*best).min(time);
    for run in 0..RUNS {
        std::fs::write(&leaf, &text).expect("the leaf is written");
        let (time, cold) = scan(core, folder, false);
        keep(&mut shortest[0], time);
        scan(core, folder, true);
        let (time, warm) = scan(core, folder, true);
        keep(&mut shortest[1], time);
        assert!(warm == cold, "the cache changes nothing");
        // Logic that was not there before, at the end of the leaf's first module.
        let more = format!("wire added_{run} = 1'b{};\nendmodule", run % 2);
        std::fs::write(&leaf, text.replacen("endmodule", &more, 1)).expect("the leaf is written");
        let (time, warm) = scan(core, folder, true);
        keep(&mut shortest[2], time);
        assert!(warm == scan(core, folder, false).1, "the cache changes nothing behind a change");
    }
    let [cold, unchanged, leaf] = shortest.map(|time| time.as_secs_f64());
    println!("{}, best of {RUNS}: cold {cold:.3} s", core.folder);
    println!("  unchanged tree      {unchanged:.3} s, ratio {:.3}; the aim is {AIM_UNCHANGED:.2}", unchanged / cold);
    println!("  one leaf changed    {leaf:.3} s, ratio {:.3}; the aim is {AIM_LEAF:.2}", leaf / cold);
}

fn main() {
    match data() {
        Some(data) => CORES.iter().for_each(|core| measure(core, &data)),
        None => println!("cache_ratio: no outside data, run tests/outside/fetch first"),
    }
}
