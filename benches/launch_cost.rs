//! What the analysis of launches adds to a scan of cv32e40p, with its register file of flip-flops and with that of
//! latches: the same tree is decided with launches and without, in turns. The scan is reading, elaborating and deciding.
//! Times are those of the processor, so that a loaded machine changes little; they need Linux.
//!
//! Needs the outside data: `STILLWIRE_DATA=$(tests/outside/fetch) cargo bench --profile dev --bench launch_cost`.
#![allow(clippy::print_stdout, reason = "a bench prints what it measured")]

use std::path::{Path, PathBuf};
use std::time::Duration;

use stillwire::elaborate::{self, Design};
use stillwire::hazard::Options;
use stillwire::hazard::launch::Assumptions;
use stillwire::rules;
use stillwire::source::{Request, load, on_big_stacks};
use stillwire::syntax::Protection;

/// The shortest of this many runs counts, on both sides.
const RUNS: usize = 3;
const TOP: &str = "cv32e40p_top";

fn data() -> Option<PathBuf> {
    let fetched = std::env::var_os("STILLWIRE_DATA").map(PathBuf::from);
    let folder = fetched.unwrap_or_else(|| Path::new(env!("CARGO_MANIFEST_DIR")).join("target/outside"));
    folder.join("stamp").is_file().then_some(folder)
}

fn front_end(list: &Path, rtl: &Path) -> Design {
    let request = Request { lists: vec![list.to_path_buf()], ..Request::default() };
    let environment = |name: &str| (name == "DESIGN_RTL_DIR").then(|| rtl.display().to_string());
    let loaded = load(&request, &environment, &|_, _| {}).expect("the list is there");
    let asked = elaborate::Request { tops: vec![TOP.to_string()], ..elaborate::Request::default() };
    let (design, _) = elaborate::elaborate(&loaded.units, &asked);
    assert_eq!((loaded.files_failed, design.modules_failed, design.graph.black_boxes.len()), (0, 0, 0));
    design
}

/// The time that all threads of this process have spent on a processor.
fn processor_time() -> Duration {
    let tasks = std::fs::read_dir("/proc/self/task").expect("a Linux kernel").filter_map(Result::ok);
    let texts = tasks.filter_map(|task| std::fs::read_to_string(task.path().join("schedstat")).ok());
    Duration::from_nanos(texts.filter_map(|text| text.split(' ').next()?.parse::<u64>().ok()).sum())
}

/// In seconds.
fn time(work: impl FnOnce()) -> f64 {
    let start = processor_time();
    work();
    processor_time().saturating_sub(start).as_secs_f64()
}

fn run(data: &Path) {
    let core = data.join("cv32e40p");
    let manifest = std::fs::read_to_string(core.join("cv32e40p_manifest.flist")).expect("the manifest");
    let folder = tempfile::tempdir().expect("a temporary folder");
    for (name, file) in [("flip-flops", "cv32e40p_register_file_ff.sv"), ("latches", "cv32e40p_register_file_latch.sv")]
    {
        let list = folder.path().join("list");
        std::fs::write(&list, manifest.replace("cv32e40p_register_file_ff.sv", file)).expect("the list is written");
        let [mut reading, mut without, mut with] = [f64::INFINITY; 3];
        for _ in 0..RUNS {
            let mut read = None;
            reading = reading.min(time(|| read = Some(front_end(&list, &core.join("rtl")))));
            let Some(design) = read else { continue };
            let decide = |single_changes: bool| {
                let options = Options { single_changes, ..Options::default() };
                rules::run(&design.graph, &[], &Assumptions::default(), &Protection::default(), &options, None)
            };
            without = without.min(time(|| drop(decide(true))));
            with = with.min(time(|| drop(decide(false))));
        }
        println!("cv32e40p with {name}, {} threads, best of {RUNS}", rayon::current_num_threads());
        println!("  reading and elaborating    {reading:7.3} s");
        println!("  deciding, single changes   {without:7.3} s");
        println!("  deciding, launches as well {with:7.3} s");
        let ratio = (reading + with) / (reading + without);
        println!("  launches add {:.1}% to the scan; the aim is at most 30%", 100.0 * (ratio - 1.0));
    }
}

fn main() {
    match data() {
        Some(data) => on_big_stacks(0, || run(&data)).expect("threads"),
        None => println!("launch_cost: no outside data, run tests/outside/fetch first"),
    }
}
