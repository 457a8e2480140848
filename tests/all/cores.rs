//! Scans of three processor cores that nobody here wrote: complete, nothing undecided, and with exactly the findings that
//! were read one by one and found right. How many pins there are is counted independently: clock nets, reset nets and register
//! bits from the program that Debian's `iverilog` (a general simulator) compiles the same sources into.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};
use std::process::Command;

use stillwire::graph::{CellKind, NodeId};

use crate::outside::data;
use crate::pipeline::{Scan, graph, scan};

/// A core and what is known about it.
struct Core {
    /// Below the outside data.
    path: &'static str,
    top: &'static str,
    /// Whether it has asynchronous resets.
    asynchronous: bool,
    /// Register bits that the simulator has and the analysis has not: only assigned where a parameter never lets control
    /// pass, or between `translate_off` and `translate_on`.
    absent: usize,
    /// Register bits of asynchronous processes that the branch of the reset leaves alone: no pin is on them.
    without_reset: usize,
    /// Register bits of asynchronous processes that do not test the reset: it clocks them.
    two_clocks: usize,
    /// Rule, severity, net and hazard kinds of each finding, reviewed.
    findings: &'static [(&'static str, &'static str, &'static str, &'static [&'static str])],
}

/// `mem_16bit_buffer` is written under `COMPRESSED_ISA` only, which is 0.
const PICORV32: Core = Core {
    path: "picorv32/picorv32.v",
    top: "picorv32_axi",
    asynchronous: false,
    absent: 16,
    without_reset: 0,
    two_clocks: 0,
    findings: &[],
};

const SERV: Core = Core {
    path: "serv/rtl",
    top: "serv_rf_top",
    asynchronous: false,
    absent: 0,
    without_reset: 0,
    two_clocks: 0,
    findings: &[],
};

/// `monitor_execute_insn_reg` stands between `translate_off` and `translate_on`.
const MOR1KX: Core = Core {
    path: "mor1kx/rtl/verilog",
    top: "mor1kx",
    asynchronous: false,
    absent: 32,
    without_reset: 0,
    two_clocks: 0,
    findings: MOR1KX_FINDINGS,
};

/// Two oversights of the core: the branch of the reset forgets `ctrl_except_dtlb_miss_o` and `ctrl_except_dpagefault_o`, and
/// `pc_execute_o` is written in a process that waits for the reset and never tests it.
const MOR1KX_ASYNC: Core = Core {
    path: "mor1kx-async/rtl/verilog",
    top: "mor1kx",
    asynchronous: true,
    absent: 32,
    without_reset: 2,
    two_clocks: 32,
    findings: MOR1KX_ASYNC_FINDINGS,
};

/// The kind of reset changes nothing about the combinational outputs, so both settings have the same findings. Both are in
/// mor1kx_bus_if_wb32.v, bridge of the instruction bus. Why they are right:
///
/// - The address is `bursting ? {burst_address, 2'b00} : cpu_adr_i`, a plain two-way selector: with both data bits 1 the
///   output falls for a moment when `bursting` changes. Bits 0 and 1 select a literal 0 and are clean.
/// - The cycle type is `bursting ? (finish_burst ? 3'b111 : 3'b010) : 3'b000`. `finish_burst` is an OR of a comparison for
///   equality with a decremented counter and one for inequality with the address: one address bit raises one and lowers
///   the other (static-1), and one counter bit changes several compared bits at once (static-0).
const MOR1KX_FINDINGS: &[(&str, &str, &str, &[&str])] = &[
    ("reconvergent-inversion", "warning", "mor1kx.iwbm_adr_o", &["static-1"]),
    ("reconvergent-inversion", "warning", "mor1kx.iwbm_cti_o", &["static-0", "static-1"]),
];

/// The reset comes straight from a port and nothing in the core synchronises its release: that is for who instantiates the
/// core, and the note tells him.
const MOR1KX_ASYNC_FINDINGS: &[(&str, &str, &str, &[&str])] =
    &[MOR1KX_FINDINGS[0], MOR1KX_FINDINGS[1], ("reset-release", "note", "mor1kx.rst", &[])];

/// The Verilog sources of a core, headers left out.
fn sources(core: &Core) -> Vec<PathBuf> {
    let path = data().join(core.path);
    let mut files: Vec<PathBuf> = walkdir::WalkDir::new(path)
        .into_iter()
        .map(|entry| entry.expect("a readable folder").into_path())
        .filter(|path| path.extension().is_some_and(|extension| extension == "v"))
        .collect();
    files.sort();
    files
}

/// Register bits that clocked processes assign with `<=`, and variables they only assign with `=`.
#[derive(PartialEq, Eq, Default, Debug)]
struct Registers {
    /// Nets whose edges processes wait for: clocks and asynchronous resets.
    nets: usize,
    synchronous: usize,
    /// Of processes that wait for more than one net.
    asynchronous: usize,
    /// Bits of variables that clocked processes only assign with `=`: registers or mere temporaries.
    temporary: usize,
}

/// Counted in the program that `iverilog` compiles the core into: each clocked thread waits for an event of one net
/// (synchronous) or several (asynchronous), and assigns variables whose widths the program declares.
fn simulated_registers(core: &Core) -> Registers {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let program = folder.path().join("core.vvp");
    let sources = sources(core);
    let include = sources[0].parent().expect("a folder");
    let compiled = Command::new("iverilog")
        .args(["-g2005-sv", "-s", core.top, "-I"])
        .arg(include)
        .arg("-o")
        .arg(&program)
        .args(&sources)
        .output()
        .expect("iverilog runs");
    assert!(compiled.status.success(), "{}", String::from_utf8_lossy(&compiled.stderr));
    let text = std::fs::read_to_string(&program).expect("the compiled program");

    let range = |words: &[&str]| -> usize {
        let number = |word: &str| word.trim_end_matches([',', ';']).parse::<i64>().expect("an index");
        words.chunks(2).map(|pair| number(pair[0]).abs_diff(number(pair[1])) as usize + 1).product()
    };
    let mut widths: BTreeMap<&str, usize> = BTreeMap::new();
    let mut events: BTreeMap<&str, Vec<&str>> = BTreeMap::new();
    let mut waits: Option<Vec<&str>> = None;
    let mut nonblocking: BTreeMap<&str, &str> = BTreeMap::new();
    let mut blocking: BTreeSet<&str> = BTreeSet::new();
    let mut edges = BTreeSet::new();
    for line in text.lines() {
        let words: Vec<&str> = line.split_whitespace().collect();
        match words[..] {
            [label, kind, _, ref indices @ ..] if kind.starts_with(".var") && indices.len() >= 2 => {
                widths.insert(label, range(&indices[..2]));
            }
            // Arrays of nets have one range only.
            [label, ".array" | ".array/s" | ".array/i", _, ref indices @ ..] if indices.len() >= 4 => {
                widths.insert(label, range(&indices[..4]));
            }
            [label, ".event", ref rest @ ..] => {
                events.insert(label, rest.to_vec());
            }
            [".thread", ..] => waits = None,
            ["%wait", event] => waits = events.get(event.trim_end_matches(';')).cloned(),
            [operation, variable, ..] if operation.starts_with("%assign/") || operation.starts_with("%store/") => {
                let Some([edge, nets @ ..]) = waits.as_deref() else { continue };
                if !matches!(*edge, "posedge," | "negedge,") {
                    continue;
                }
                edges.extend(nets.iter().map(|net| net.trim_end_matches([',', ';'])));
                let variable = variable.trim_end_matches([',', ';']);
                if operation.starts_with("%assign/") {
                    nonblocking.insert(variable, if nets.len() > 1 { "asynchronous" } else { "synchronous" });
                } else {
                    blocking.insert(variable);
                }
            }
            _ => {}
        }
    }
    let mut registers = Registers { nets: edges.len(), ..Registers::default() };
    for (variable, kind) in &nonblocking {
        let count = if *kind == "asynchronous" { &mut registers.asynchronous } else { &mut registers.synchronous };
        *count += widths[variable];
    }
    let temporary = blocking.iter().filter(|variable| !nonblocking.contains_key(*variable));
    registers.temporary = temporary.filter_map(|variable| widths.get(variable)).sum();
    registers
}

/// The same from the elaborated graph, and the bits that several nets clock.
fn elaborated_registers(path: &Path, top: &str) -> (Registers, usize) {
    let graph = graph(path, top);
    let mut nets = BTreeSet::new();
    // A bit that several nets clock is one cell for each of them.
    let mut bits: BTreeMap<NodeId, (usize, bool)> = BTreeMap::new();
    for cell in &graph.cells {
        let CellKind::FlipFlop { clock, .. } = cell.kind else { panic!("no latch is written in the core") };
        nets.insert(graph.root(clock));
        nets.extend(cell.controls.iter().map(|control| graph.root(control.net)));
        let (clocks, controlled) = bits.entry(cell.output).or_default();
        *clocks += 1;
        *controlled |= !cell.controls.is_empty();
    }
    let asynchronous = bits.values().filter(|&&(clocks, controlled)| controlled || clocks > 1).count();
    let synchronous = bits.len() - asynchronous;
    let several = bits.values().filter(|&&(clocks, _)| clocks > 1).count();
    (Registers { nets: nets.len(), asynchronous, synchronous, temporary: 0 }, several)
}

/// Rule, severity, net and hazard kinds of each finding, sorted.
pub fn findings(scan: &Scan) -> Vec<(String, String, String, BTreeSet<String>)> {
    let mut found: Vec<_> = scan
        .findings()
        .iter()
        .map(|finding| {
            let text = |key: &str| finding[key].as_str().unwrap_or_default().to_string();
            let hazards = finding["hazards"].as_array().map_or(&[][..], Vec::as_slice);
            let kinds = hazards.iter().filter_map(|hazard| hazard["kind"].as_str()).map(str::to_string).collect();
            (text("rule"), text("severity"), text("net"), kinds)
        })
        .collect();
    found.sort();
    found
}

#[track_caller]
fn check(core: &Core) {
    let path = data().join(core.path);
    let scan = scan(&[&path], &["--top", core.top]);
    assert_eq!(scan.json["complete"], true, "{}", scan.text);
    assert_eq!(scan.json["coverage"]["unsupported"].as_array().map(Vec::len), Some(0), "{}", scan.text);
    assert_eq!(scan.json["coverage"]["black_boxes"].as_array().map(Vec::len), Some(0), "{}", scan.text);
    for kind in ["clock", "set", "reset", "load", "latch-enable", "watch", "output"] {
        assert_eq!(scan.pins(kind, "undecided"), 0, "{kind}");
    }

    let found = findings(&scan);
    let mut reviewed: Vec<_> = core
        .findings
        .iter()
        .map(|(rule, severity, net, kinds)| {
            let kinds = kinds.iter().map(|kind| (*kind).to_string()).collect();
            ((*rule).to_string(), (*severity).to_string(), (*net).to_string(), kinds)
        })
        .collect();
    reviewed.sort();
    assert_eq!(found, reviewed, "the findings are not the reviewed ones\n{}", scan.text);
    let worst = found.iter().any(|finding| finding.1 == "error");
    assert_eq!(scan.exit, i32::from(worst), "{}", scan.text);

    let simulated = simulated_registers(core);
    let (elaborated, several) = elaborated_registers(&path, core.top);
    let asynchronous = elaborated.asynchronous + core.without_reset;
    assert_eq!(asynchronous, simulated.asynchronous, "{simulated:?}, {elaborated:?}");
    assert_eq!(elaborated.asynchronous > 0, core.asynchronous);
    assert_eq!(elaborated.nets, simulated.nets);
    assert_eq!(several, core.two_clocks);
    assert_eq!(scan.pins("clock", "nets"), 1 + u64::from(several > 0));
    let resets: u64 = ["set", "reset", "load"].map(|kind| scan.pins(kind, "nets")).iter().sum();
    assert_eq!(resets, u64::from(core.asynchronous));
    assert_eq!(scan.pins("latch-enable", "nets"), 0);
    let least = simulated.synchronous + core.without_reset - core.absent;
    let most = least + simulated.temporary;
    assert!((least..=most).contains(&elaborated.synchronous), "{simulated:?}, {elaborated:?}");
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn picorv32() {
    check(&PICORV32);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn serv() {
    check(&SERV);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn mor1kx() {
    check(&MOR1KX);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn mor1kx_with_asynchronous_resets() {
    check(&MOR1KX_ASYNC);
}
