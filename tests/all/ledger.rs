//! The ledger through the command line: what is known does not fail, what is new or worse does, what is gone can be
//! dropped, and one mistake in a module is one entry however often the module is used.

use std::path::Path;

use serde_json::Value;

use crate::tree::Tree;

/// A lane whose clear glitches when `sel` changes, used several times.
const LANE: &str = "module lane(input clk, sel, a, b, d, output reg q);
    wire clear_n = sel ? a : b;
    always @(posedge clk or negedge clear_n) if (!clear_n) q <= 1'b0; else q <= d;
endmodule
";

const TOP: &str = "module gates(input clk, input [3:0] sel, a, b, d, output [3:0] q);
    genvar i;
    generate for (i = 0; i < 3; i = i + 1) begin : each
        lane u_lane(.clk(clk), .sel(sel[i]), .a(a[i]), .b(b[i]), .d(d[i]), .q(q[i]));
    end endgenerate
    lane u_last(.clk(clk), .sel(sel[3]), .a(a[3]), .b(b[3]), .d(d[3]), .q(q[3]));
endmodule
";

#[test]
fn one_mistake_in_a_module_is_one_entry() {
    let tree = Tree::new(&[("rtl/lane.v", LANE), ("rtl/gates.v", TOP)]);
    let findings = tree.json(&["scan", "rtl"]);
    assert_eq!(findings["findings"].as_array().map(Vec::len), Some(4));
    tree.ends(0, &["ledger", "write", "rtl", "--ledger", "known.toml"]);
    let ledger = tree.read("known.toml");
    assert_eq!(ledger.matches("[[known]]").count(), 1, "{ledger}");
    assert!(ledger.contains("count = 4"), "{ledger}");
    let text = tree.ends(0, &["scan", "rtl", "--ledger", "known.toml"]);
    assert!(text.contains("known in the ledger: 4"), "{text}");
    assert!(text.contains("1 entry remains"), "{text}");
}

#[test]
fn the_ledger_survives_edits_elsewhere() {
    let tree = Tree::new(&[("rtl/lane.v", LANE), ("rtl/gates.v", TOP)]);
    tree.ends(1, &["scan", "rtl"]);
    tree.ends(0, &["ledger", "write", "rtl", "--ledger", "known.toml"]);
    // Moved and renamed files, inserted lines, other line breaks, another order: the same findings.
    for name in ["lane.v", "gates.v"] {
        std::fs::remove_file(tree.path("rtl").join(name)).expect("removed");
    }
    tree.write("rtl/a_top/renamed_top.v", format!("// moved\n\n{TOP}").as_bytes());
    tree.write("rtl/z/renamed_lane.v", LANE.replace("sel ? a : b", "\n   sel\n     ? a\n     : b").as_bytes());
    tree.ends(0, &["scan", "rtl", "--ledger", "known.toml"]);
}

#[test]
fn changed_logic_and_new_findings_fail() {
    let tree = Tree::new(&[("rtl/lane.v", LANE), ("rtl/gates.v", TOP)]);
    tree.ends(0, &["ledger", "write", "rtl", "--ledger", "known.toml"]);
    tree.write("rtl/lane.v", LANE.replace("sel ? a : b", "sel ? a : (b & d)").as_bytes());
    let text = tree.ends(1, &["scan", "rtl", "--ledger", "known.toml"]);
    assert!(text.contains("0 entries remain, 1 is gone"), "{text}");
    tree.write("rtl/lane.v", LANE.as_bytes());
    tree.write("rtl/more.v", LANE.replace("module lane", "module other_lane").as_bytes());
    let scanned = tree.json(&["scan", "rtl", "--ledger", "known.toml"]);
    let open: Vec<&Value> =
        scanned["findings"].as_array().expect("a list").iter().filter(|f| f["known"] == false).collect();
    assert_eq!(open.len(), 1, "{open:?}");
    assert_eq!(open[0]["instance"], "other_lane");
}

#[test]
fn a_known_finding_that_became_worse_is_new() {
    // A static-0 hazard on an active-low reset is a warning; with the level turned it is an error on the same net.
    let mild = "module t(input clk, s, a, b, d, output reg q);
        wire r = (s | a) & (~s | b);
        always @(posedge clk or negedge r) if (!r) q <= 1'b0; else q <= d;
    endmodule\n";
    let bad = mild.replace("negedge r", "posedge r").replace("!r", "r");
    let tree = Tree::new(&[("t.v", mild)]);
    tree.ends(0, &["ledger", "write", "t.v", "--ledger", "known.toml"]);
    tree.ends(0, &["scan", "t.v", "--gate", "warning", "--ledger", "known.toml"]);
    tree.write("t.v", bad.as_bytes());
    tree.ends(1, &["scan", "t.v", "--gate", "warning", "--ledger", "known.toml"]);
}

#[test]
fn prune_drops_only_what_is_gone() {
    let other = LANE.replace("module lane", "module other_lane");
    let tree = Tree::new(&[("rtl/lane.v", LANE), ("rtl/other.v", &other)]);
    tree.ends(0, &["ledger", "write", "rtl", "--ledger", "known.toml"]);
    let full = tree.read("known.toml");
    assert_eq!(full.matches("[[known]]").count(), 2, "{full}");
    let text = tree.ends(0, &["ledger", "prune", "rtl", "--ledger", "known.toml"]);
    assert!(text.contains("0 entries dropped, 2 left"), "{text}");
    assert_eq!(tree.read("known.toml"), full);
    tree.write("rtl/other.v", other.replace("sel ? a : b", "a").as_bytes());
    let text = tree.ends(0, &["ledger", "prune", "rtl", "--ledger", "known.toml"]);
    assert!(text.contains("1 entry dropped, 1 left"), "{text}");
    tree.ends(0, &["scan", "rtl", "--ledger", "known.toml"]);
    // What cannot be read is not gone.
    tree.write("rtl/lane.v", "module lane(input a; endmodule\n".as_bytes());
    let text = tree.ends(3, &["ledger", "prune", "rtl", "--ledger", "known.toml"]);
    assert!(text.contains("nothing dropped"), "{text}");
    assert_eq!(tree.read("known.toml").matches("[[known]]").count(), 1);
}

#[test]
fn a_ledger_that_cannot_be_read_stops_the_run() {
    let tree = Tree::new(&[("rtl/lane.v", LANE)]);
    let text = tree.ends(2, &["scan", "rtl", "--ledger", "known.toml"]);
    assert!(text.contains("ledger write"), "{text}");
    tree.ends(0, &["ledger", "write", "rtl", "--ledger", "known.toml"]);
    let good = tree.read("known.toml");
    for bad in [
        &good[..good.len() / 2],
        "",
        "known = 3",
        &good.replace("ledger/1", "ledger/9"),
        &good.replace("\"error\"", "\"dire\""),
    ] {
        tree.write("known.toml", bad.as_bytes());
        tree.ends(2, &["scan", "rtl", "--ledger", "known.toml"]);
    }
    assert!(!Path::new("stillwire-ledger.toml").exists());
}

#[test]
fn signed_off_findings_stay_out_of_the_ledger() {
    let signed = LANE.replace(
        "    wire clear_n",
        "    // stillwire: signoff set-reset-hazard \"sel is a strap\" by keeper\n    wire clear_n",
    );
    let tree = Tree::new(&[("lane.v", &signed)]);
    let text = tree.ends(0, &["ledger", "write", "lane.v"]);
    assert!(text.contains("0 entries written"), "{text}");
    assert!(!tree.read("stillwire-ledger.toml").contains("[[known]]"));
}
