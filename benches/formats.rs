//! What each output costs for ten thousand findings: processor time, peak of the memory it takes beside the report, and
//! size. The findings are those of a scan: as many modules, each with a mistake of its own. The bench fails beyond the
//! promised five seconds or gigabyte. It needs Linux, whose `/proc` counts time and memory.
//!
//! `cargo bench --profile dev --bench formats`
#![allow(clippy::print_stdout, reason = "a bench prints what it measured")]

use std::path::PathBuf;

use stillwire::report::{evidence, html, json, junit, sarif, text};
use stillwire::rules::Severity;
use stillwire::{Request, source};

const FINDINGS: usize = 10_000;
const PER_FILE: usize = 100;
const MOST_SECONDS: f64 = 5.0;
const MOST_MEGABYTES: f64 = 1000.0;

/// A reset that glitches, behind a selector; the name makes each a mistake of its own.
fn module(number: usize) -> String {
    format!(
        "module motor_{number}(input clk, hand, panel, auto, d, output reg q);\n    wire stop_n = hand ? panel : auto;\n    \
         always @(posedge clk or negedge stop_n)\n        if (!stop_n) q <= 1'b0;\n        else q <= d;\nendmodule\n\n"
    )
}

fn request(paths: Vec<PathBuf>) -> Request {
    Request {
        source: source::Request { paths, ..source::Request::default() },
        tops: Vec::new(),
        given: Vec::new(),
        libraries: Vec::new(),
        cells: Vec::new(),
        assumptions: Vec::new(),
        severities: [].into(),
        today: jiff::civil::date(2026, 12, 1),
        threads: 0,
        drawn: true,
    }
}

/// Seconds of a processor that this thread has used.
fn seconds() -> f64 {
    let text = std::fs::read_to_string("/proc/thread-self/schedstat").expect("a Linux kernel");
    text.split(' ').next().and_then(|text| text.parse::<f64>().ok()).expect("nanoseconds") / 1e9
}

/// A line of the status of this process, in megabytes.
fn memory(line: &str) -> f64 {
    let status = std::fs::read_to_string("/proc/self/status").expect("a Linux kernel");
    let line = status.lines().find_map(|text| text.strip_prefix(line)?.strip_prefix(':')).expect("the line");
    line.trim().trim_end_matches(" kB").parse::<f64>().expect("kilobytes") / 1000.0
}

fn measure(format: &str, render: impl FnOnce() -> String) {
    // The peak begins anew from what is in use.
    std::fs::write("/proc/self/clear_refs", "5").expect("a Linux kernel");
    let (before, start) = (memory("VmRSS"), seconds());
    let text = render();
    let (seconds, megabytes) = (seconds() - start, memory("VmHWM") - before);
    let size = text.len() as f64 / 1e6;
    println!(
        "  {format:9} {seconds:6.2} s  {megabytes:6.0} MB of memory  {size:6.1} MB  {:7} lines",
        text.lines().count()
    );
    assert!(seconds < MOST_SECONDS && megabytes < MOST_MEGABYTES, "{format} takes more than was promised");
}

fn main() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    for file in 0..FINDINGS / PER_FILE {
        let modules: String = (file * PER_FILE..(file + 1) * PER_FILE).map(module).collect();
        std::fs::write(folder.path().join(format!("motors_{file}.v")), modules).expect("a file");
    }
    let asked = request(vec![folder.path().to_path_buf()]);
    let start = std::time::Instant::now();
    let scan = stillwire::scan(&asked, &|_| None, &|_| {}).unwrap_or_else(|error| panic!("{error}"));
    let (report, sources, gate) = (&scan.report, &scan.sources, Severity::Error);
    let found = report.findings.iter().filter(|finding| !finding.hazards.is_empty()).count();
    assert_eq!(found, FINDINGS, "each module has its finding");
    println!(
        "{} findings after {:.1} s, {:.0} MB in use; the limits are {MOST_SECONDS} s and {MOST_MEGABYTES} MB",
        report.findings.len(),
        start.elapsed().as_secs_f64(),
        memory("VmRSS")
    );
    measure("text", || text::render(report, sources, &text::Style::default()));
    measure("json", || json::render(report, sources));
    measure("sarif", || sarif::render(report, sources));
    measure("junit", || junit::render(report, sources, gate));
    measure("evidence", || evidence::render(report, sources, gate, &evidence::Run::default()));
    measure("html", || html::render(report, &scan.exhibits, sources, gate));
}
