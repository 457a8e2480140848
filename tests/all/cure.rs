//! Cures: the diff applies with the usual tools, and what it makes is clean and means the same.

use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use crate::pipeline::{Scan, scan};

fn cure(fingerprint: &str, folder: &Path, path: &str) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
    command.current_dir(folder).args(["cure", fingerprint, path]).output().expect("the program starts")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

/// The fingerprint of the only finding of a rule.
#[track_caller]
fn fingerprint(scan: &Scan, rule: &str) -> String {
    let found: Vec<_> = scan.findings().iter().filter(|finding| finding["rule"] == rule).collect();
    assert_eq!(found.len(), 1, "{}", scan.text);
    found[0]["fingerprint"].as_str().expect("a fingerprint").to_string()
}

fn rules(scan: &Scan) -> Vec<String> {
    scan.findings().iter().filter_map(|finding| finding["rule"].as_str()).map(str::to_string).collect()
}

fn apply(tool: &[&str], folder: &Path, diff: &Path) {
    let output =
        Command::new(tool[0]).args(&tool[1..]).arg(diff).current_dir(folder).output().expect("the tool starts");
    assert!(output.status.success(), "{tool:?}: {}{}", text(&output.stdout), text(&output.stderr));
}

/// Cures the one finding of `rule` in `source`, applies the diff with both tools, and returns the changed text.
#[track_caller]
fn cured(source: &str, rule: &str) -> String {
    let mut results = Vec::new();
    for tool in [["patch", "-p1", "-i"], ["git", "apply", "--whitespace=nowarn"]] {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let file = folder.path().join("rtl/design.v");
        std::fs::create_dir(folder.path().join("rtl")).expect("a folder");
        std::fs::write(&file, source).expect("written");
        let before = scan(&[&file], &[]);
        let output = cure(&fingerprint(&before, rule), folder.path(), "rtl");
        assert_eq!(output.status.code(), Some(0), "{}{}", text(&output.stdout), text(&output.stderr));
        assert!(text(&output.stderr).contains("proven: with this change"), "{}", text(&output.stderr));
        let diff = folder.path().join("cure.patch");
        std::fs::write(&diff, &output.stdout).expect("written");
        // `patch` asks for a binary mode to keep the line ends of DOS.
        let mut words: Vec<&str> = tool.to_vec();
        if tool[0] == "patch" {
            words.insert(1, "--binary");
        }
        apply(&words, folder.path(), &diff);
        let after = scan(&[&file], &[]);
        assert!(!rules(&after).iter().any(|found| found == rule), "{}", after.text);
        assert!(!rules(&after).iter().any(|found| found == "cover-unprotected"), "{}", after.text);
        results.push(std::fs::read_to_string(&file).expect("the file"));
    }
    assert_eq!(results[0], results[1], "both tools make the same of the diff");
    results.swap_remove(0)
}

#[test]
fn an_assign_gets_its_term() {
    let source = "module t(input s, a, b, d, output reg q);\n    wire c;\n    // Which clock.\n    assign c = s ? a : b; // by hand\n    \
                  always @(posedge c) q <= d;\nendmodule\n";
    let after = cured(source, "clock-hazard");
    let expected = "module t(input s, a, b, d, output reg q);\n    wire c;\n    // Which clock.\n    \
                    (* keep *) wire c_written = s ? a : b;\n    (* keep *) wire c_term1 = a & b;\n    \
                    (* keep *) wire c_covered = c_written | c_term1;\n    assign c = c_covered; // by hand\n    \
                    always @(posedge c) q <= d;\nendmodule\n";
    assert_eq!(after, expected);
}

#[test]
fn an_initialiser_keeps_tabs_and_line_ends() {
    let source = "module t(input s, a, b, clk, d, output reg q);\r\n\twire r = s\r\n\t\t? a : b;\r\n\t\
                  always @(posedge clk or posedge r) if (r) q <= 0; else q <= d;\r\nendmodule\r\n";
    let after = cured(source, "set-reset-hazard");
    let expected = "module t(input s, a, b, clk, d, output reg q);\r\n\t(* keep *) wire r_written = s\r\n\t\t? a : b;\r\n\t\
                    (* keep *) wire r_term1 = a & b;\r\n\t(* keep *) wire r = r_written | r_term1;\r\n\t\
                    always @(posedge clk or posedge r) if (r) q <= 0; else q <= d;\r\nendmodule\r\n";
    assert_eq!(after, expected);
}

/// The statement shares its line with others, the file has no last line end, a name of ours is taken.
#[test]
fn a_statement_among_others_is_cut_out() {
    let source = "module t(input s, a, b, d, output reg q); wire c_term1 = d; wire c = s ? a : b; always @(posedge c) q <= c_term1; endmodule";
    let after = cured(source, "clock-hazard");
    assert!(after.contains("(* keep *) wire c_hf_written = s ? a : b;\n"), "{after}");
    assert!(
        after.ends_with("wire c = c_hf_written | c_hf_term1; always @(posedge c) q <= c_term1; endmodule"),
        "{after}"
    );
}

/// A watch comment stays with the declaration that it marks.
#[test]
fn a_watched_net_stays_watched() {
    let source = "module t(input clk, s, a, b, output reg q);\n  // stillwire: watch \"a relay\"\n  wire y = s ? a : b;\n  \
                  always @(posedge clk) q <= y;\nendmodule\n";
    let after = cured(source, "reconvergent-inversion");
    assert!(after.contains("watch \"a relay\"\n  wire y;\n  (* keep *) wire y_written = s ? a : b;"), "{after}");
}

/// A watch on the line of the declaration would stay behind on the line of the last statement and mark nothing: that
/// the finding is gone then proves nothing.
#[test]
fn a_watch_that_would_be_lost_withholds_the_cure() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    let source = "module t(input clk, s, a, b, output reg q);\n  wire y; assign y = s ? a : b; // stillwire: watch \"a relay\"\n  \
                  always @(posedge clk) q <= y;\nendmodule\n";
    std::fs::write(&file, source).expect("written");
    let output = cure(&fingerprint(&scan(&[&file], &[]), "reconvergent-inversion"), folder.path(), "design.v");
    assert_eq!(output.status.code(), Some(1), "{}", text(&output.stdout));
    assert!(text(&output.stderr).contains("this watch marks no declaration"), "{}", text(&output.stderr));
}

/// A dynamic hazard takes other logic in place of the written one.
#[test]
fn a_dynamic_hazard_is_replaced() {
    let source = "module t(input a, b, c, e, d, output reg q);\n  wire f = (a | b) & (~b & c | b & ~e);\n  \
                  always @(posedge f) q <= d;\nendmodule\n";
    let after = cured(source, "clock-hazard");
    assert!(!after.contains("f_written"), "{after}");
}

/// Each instance of a module gets the cure, since there is but one text.
#[test]
fn a_module_used_twice_is_cured_once() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    let source = "module sel(input s, a, b, output y);\n  assign y = s ? a : b;\nendmodule\n\
                  module t(input s, a, b, d, output reg q, output reg p);\n  wire c, e;\n  sel u_c (s, a, b, c);\n  \
                  sel u_e (a, s, b, e);\n  always @(posedge c) q <= d;\n  always @(posedge e) p <= d;\nendmodule\n";
    std::fs::write(&file, source).expect("written");
    let before = scan(&[&file], &[]);
    let first = before.findings()[0]["fingerprint"].as_str().expect("a fingerprint").to_string();
    let output = cure(&first, folder.path(), "design.v");
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    let diff = folder.path().join("cure.patch");
    std::fs::write(&diff, &output.stdout).expect("written");
    apply(&["patch", "-p1", "-i"], folder.path(), &diff);
    let after = scan(&[&file], &[]);
    assert!(!rules(&after).iter().any(|rule| rule == "clock-hazard"), "{}", after.text);
}

#[test]
fn a_process_gets_its_terms_as_text() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    let source = "module t(input s, a, b, d, output reg q);\n  reg c;\n  always @* if (s) c = a; else c = b;\n  \
                  always @(posedge c) q <= d;\nendmodule\n";
    std::fs::write(&file, source).expect("written");
    let output = cure(&fingerprint(&scan(&[&file], &[]), "clock-hazard"), folder.path(), "design.v");
    assert_eq!(output.status.code(), Some(0));
    let said = text(&output.stdout);
    assert!(said.contains("not driven by a plain `assign`") && said.contains("  a & b\n"), "{said}");
}

/// The term needs a signal that the module does not see.
#[test]
fn a_term_from_elsewhere_is_told_as_text() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file: PathBuf = folder.path().join("design.v");
    let source = "module join_ (input x, y, output z);\n  assign z = x | y;\nendmodule\n\
                  module t(input s, a, b, d, output reg q);\n  wire c;\n  join_ u_join (s & a, ~s & b, c);\n  \
                  always @(posedge c) q <= d;\nendmodule\n";
    std::fs::write(&file, source).expect("written");
    let output = cure(&fingerprint(&scan(&[&file], &[]), "clock-hazard"), folder.path(), "design.v");
    assert_eq!(output.status.code(), Some(0));
    assert!(text(&output.stdout).contains("no name in the module"), "{}", text(&output.stdout));
}

#[test]
fn a_finding_without_a_cover_says_why() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    let source = "module t(input [3:0] a, b, input d, output reg q);\n  wire [3:0] s = a + b;\n  wire c = s[3];\n  \
                  always @(posedge c) q <= d;\nendmodule\n";
    std::fs::write(&file, source).expect("written");
    let output = cure(&fingerprint(&scan(&[&file], &[]), "clock-hazard"), folder.path(), "design.v");
    assert_eq!(output.status.code(), Some(2));
    assert!(text(&output.stderr).contains("arithmetic operator"), "{}", text(&output.stderr));
}
