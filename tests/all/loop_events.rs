//! Launches in front of pins behind loops of gates, as a user sees them: what one signal at a time moves is decided, what
//! several signals of one clock move is clean only if it is clean in every order, and everything else is undecided. The
//! expectations follow from the definition of an event.

use std::path::Path;

use serde_json::Value;

use crate::pipeline::{Scan, scan};

fn scanned(verilog: &str) -> Scan {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    std::fs::write(&file, verilog).expect("the file is written");
    let path: &Path = &file;
    scan(&[path], &[])
}

/// The finding of a rule.
fn of<'a>(scan: &'a Scan, rule: &str) -> Option<&'a Value> {
    scan.findings().iter().find(|finding| finding["rule"] == rule)
}

fn kinds(finding: &Value) -> Vec<String> {
    let hazards = finding["hazards"].as_array().expect("a list");
    let mut kinds: Vec<String> =
        hazards.iter().map(|hazard| hazard["kind"].as_str().expect("a kind").to_string()).collect();
    kinds.sort();
    kinds.dedup();
    kinds
}

const LATCH: &str = "nor (x, clear, y); nor (y, set, x); always @(posedge x) q <= d; endmodule";

/// One flip-flop and one input: each event moves one of them.
#[test]
fn one_signal_of_a_clock_is_a_single_change() {
    let scan = scanned(&format!(
        "module t (input clk, n, clear, d, output reg q); wire x, y; reg set; always @(posedge clk) set <= n; {LATCH}"
    ));
    assert_eq!(scan.exit, 0, "{}", scan.text);
    assert!(of(&scan, "clock-hazard").is_none(), "{}", scan.text);
}

/// Set and clear that change at one edge race: which gate wins depends on delays.
#[test]
fn set_and_clear_of_one_clock_stay_undecided() {
    let scan = scanned(&format!(
        "module t (input clk, n, m, d, output reg q); wire x, y; reg set, clear;\n\
         always @(posedge clk) begin set <= n; clear <= m; end {LATCH}"
    ));
    let finding = of(&scan, "clock-hazard").expect("undecided is reported");
    assert_eq!(finding["verdict"], "undecided");
    assert_eq!(scan.json["complete"], false);
    let notes = finding["notes"].to_string();
    assert!(notes.contains("several of its inputs can change at once"), "{notes}");
}

/// Two flip-flops of one clock whose AND may pulse, in front of a latch input that only lets a rest pass.
#[test]
fn what_is_clean_in_every_order_is_clean() {
    let scan = scanned(
        "module t (input clk, n, m, clear, d, output reg q); wire x, y; reg a, b; wire keep = a & b;\n\
         always @(posedge clk) begin a <= n; b <= m; end\n\
         nand (x, clear, y); nand (y, keep, x); always @(posedge x) q <= d; endmodule",
    );
    // While x is 0, y is 1 whatever `keep` does; while x is 1, either `clear` holds it or y is 0 and `keep` is 1.
    let finding = of(&scan, "clock-hazard");
    assert!(finding.is_none(), "{}", scan.text);
    assert_eq!(scan.json["complete"], true);
}

const KEEPER: &str = "wire x = g & e | ~g & x; always @(posedge x) q <= d; endmodule";

/// A hazard of a flip-flop's change counts if an edge can make that change while the rest holds.
#[test]
fn a_change_of_a_flip_flop_must_happen() {
    let scan =
        scanned(&format!("module t (input clk, n, e, d, output reg q); reg g; always @(posedge clk) g <= n; {KEEPER}"));
    let finding = of(&scan, "clock-hazard").expect("found");
    assert_eq!((finding["verdict"].as_str(), scan.exit), (Some("proven"), 1), "{}", scan.text);
    assert_eq!(kinds(finding), ["dynamic", "static-1"]);
    let stuck = scanned(&format!(
        "module t (input clk, n, e, d, output reg q); reg g; always @(posedge clk) g <= g | n & ~n; {KEEPER}"
    ));
    let finding = of(&stuck, "clock-hazard").expect("reported");
    assert_eq!(finding["verdict"], "undecided", "{}", stuck.text);
}

/// A latch in front of the loop passes what its data does.
#[test]
fn a_latch_in_front_of_a_loop_stays_undecided() {
    let scan = scanned(&format!(
        "module t (input en, n, clear, d, output reg q); wire x, y; reg set; always @* if (en) set = n; {LATCH}"
    ));
    let finding = of(&scan, "clock-hazard").expect("undecided is reported");
    assert_eq!(finding["verdict"], "undecided", "{}", scan.text);
}

/// The finding says from which state the loop starts, and both kinds of witness can be replayed.
#[test]
fn a_finding_behind_a_loop_names_its_state() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    std::fs::write(&file, format!("module t (input g, e, d, output reg q); {KEEPER}")).expect("the file is written");
    let scan = scan(&[&file], &[]);
    assert_eq!(scan.json["complete"], true, "{}", scan.text);
    let finding = of(&scan, "clock-hazard").expect("found");
    assert_eq!(kinds(finding), ["dynamic", "static-1"]);
    let first = &finding["hazards"][0];
    assert_eq!((first["before"]["t.x"].as_u64(), first["before"]["t.e"].as_u64()), (Some(1), Some(1)), "{first}");
    let notes = finding["notes"].to_string();
    assert!(notes.contains("the loop of gates rests with `t.x` = 1 before the change"), "{notes}");
    // To fall more than once the latch has to lose its state.
    let second = &finding["hazards"][1];
    assert_eq!((second["before"]["t.x"].as_u64(), second["after"]["t.x"].as_u64()), (Some(1), Some(0)), "{second}");
    let out = folder.path().join("replay");
    let mut command = std::process::Command::new(env!("CARGO_BIN_EXE_stillwire"));
    command.args(["replay", finding["fingerprint"].as_str().expect("a fingerprint")]).arg(&file);
    let output = command.arg("--to").arg(&out).output().expect("the program starts");
    let said = String::from_utf8_lossy(&output.stdout);
    assert!(output.status.success(), "{said}{}", String::from_utf8_lossy(&output.stderr));
    for name in ["1-static-1.v", "2-dynamic.v"] {
        assert!(out.join(name).is_file(), "{name} of\n{said}");
    }
}

/// An oscillator has no source, and still moves what it clocks together.
#[test]
fn what_an_oscillator_clocks_moves_together() {
    let scan = scanned(&format!(
        "module t (input n, m, d, output reg q); wire r = ~r; wire x, y; reg set, clear;\n\
         always @(posedge r) set <= n; always @(negedge r) clear <= m; {LATCH}"
    ));
    let finding = scan.findings().iter().find(|finding| finding["rule"] == "clock-hazard" && finding["net"] == "t.x");
    assert_eq!(finding.map(|finding| finding["verdict"].clone()), Some("undecided".into()), "{}", scan.text);
}
