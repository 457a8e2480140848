//! What a finding says, on small designs that an engineer could meet: names that exist, covers that can be pasted,
//! witnesses without ballast, places that end where the text does. Every expectation is derived by hand.

use serde_json::Value;

use crate::pipeline::{Scan, scan_text};
use crate::tree::Tree;

/// The one finding of a rule.
#[track_caller]
fn only<'a>(scan: &'a Scan, rule: &str) -> &'a Value {
    let found: Vec<&Value> = scan.findings().iter().filter(|finding| finding["rule"] == rule).collect();
    let [finding] = found.as_slice() else { panic!("{} findings\n{}", found.len(), scan.text) };
    finding
}

#[track_caller]
fn names(values: &Value) -> Vec<&str> {
    values.as_object().expect("an object").keys().map(String::as_str).collect()
}

/// The net is 0 for both values of `s`, so that the cover is a sum term without literals: the constant 0.
#[test]
fn the_cover_of_a_constant_net_is_verilog() {
    let scan = scan_text(
        "module t (input clk, s, output reg q);
            wire r = s & ~s;
            always @(posedge clk or posedge r) if (r) q <= 1'b0; else q <= s;
        endmodule",
    );
    let cover = &only(&scan, "set-reset-hazard")["cover"];
    assert_eq!(cover["verilog"], "wire r_covered = r & 1'b0;");
    assert_eq!(cover["terms"], serde_json::json!(["1'b0"]));
}

/// Inside a generate block the nets of the module around it go by their plain names, unless the block hides them.
#[test]
fn a_cover_in_a_generate_block_uses_the_names_visible_there() {
    let scan = scan_text(
        "module t (input clk, s, a, b, output reg q, p);
            generate
                if (1) begin : plain
                    wire r = s ? a : b;
                    always @(posedge clk or negedge r) if (!r) q <= 1'b0; else q <= ~q;
                end
                if (1) begin : hiding
                    wire r = s ? a : t.b;
                    wire a = ~clk;
                    wire c = s ? t.a : b;
                    always @(posedge clk or negedge c) if (!c) p <= a; else p <= r;
                end
            endgenerate
        endmodule",
    );
    let covers: Vec<&str> = scan.findings().iter().filter_map(|finding| finding["cover"]["verilog"].as_str()).collect();
    assert_eq!(covers, ["wire r_covered = r | (a & b);", "wire c_covered = c | (t.a & b);"], "{}", scan.text);
}

/// The enable of an inferred latch has no name in the design, so its present logic is not called by one. The latch is
/// open for `s` of 0, 1 and 5; the change of `s[0]` between 0 and 1 leaves one match for the other, and so does that of
/// `s[2]` between 1 and 5.
#[test]
fn the_cover_of_an_unnamed_enable_names_nothing_that_is_not_there() {
    let scan = scan_text(
        "module t (input [2:0] s, input a, output reg z);
            always @(*) case (s) 3'd0: z = a; 3'd1: z = ~a; 3'd5: z = 1'b1; endcase
        endmodule",
    );
    let finding = only(&scan, "latch-enable-hazard");
    let verilog = finding["cover"]["verilog"].as_str().expect("a cover");
    assert!(verilog.starts_with("wire z_enable_covered = <present logic> | "), "{verilog}");
    assert!(verilog.contains("(~s[1] & ~s[2])") && verilog.contains("(s[0] & ~s[1])"), "{verilog}");
}

/// `m[1]` = 0 closes the upper half, so that neither `a[2]` nor `a[3]` matters.
#[test]
fn a_witness_names_no_element_that_the_index_cannot_reach() {
    let scan = scan_text(
        "module t (input clk, input [3:0] a, input [1:0] m, output reg q);
            wire r = a[m];
            always @(posedge clk or negedge r) if (!r) q <= 1'b0; else q <= ~q;
        endmodule",
    );
    let finding = only(&scan, "set-reset-hazard");
    let hazards = finding["hazards"].as_array().expect("hazards");
    assert_eq!(hazards.len(), 2);
    for hazard in hazards {
        // The two index bits and the two elements between which the change selects.
        assert_eq!(names(&hazard["before"]).len(), 4, "{hazard}");
    }
}

/// The head of a statement ends behind the parenthesis of its condition.
#[test]
fn the_head_of_an_if_is_underlined_to_its_end() {
    let text = "module t (input clk, s, a, b, output reg q);
    reg r;
    always @* if ( s ) r = a; else r = b;
    always @(posedge clk or negedge r) if (!r) q <= 1'b0; else q <= ~q;
endmodule";
    let line = "    always @* if ( s ) r = a; else r = b;";
    let head = "if ( s )";
    let start = line.find(head).expect("the head") + 1;
    let scan = scan_text(text);
    let at = &only(&scan, "set-reset-hazard")["at"];
    assert_eq!((&at["line"], &at["column"]), (&3.into(), &start.into()));
    assert_eq!((&at["end_line"], &at["end_column"]), (&3.into(), &(start + head.len()).into()));
}

/// Whatever drives an `inout` from outside has no net of its own.
#[test]
fn the_outside_of_an_inout_is_named_after_its_port() {
    let scan = scan_text(
        "module t (input oe, d, inout [1:0] pad);
            assign pad[1] = oe ? d : 1'bz;
            assign pad[0] = 1'bz;
        endmodule",
    );
    let finding = only(&scan, "reconvergent-inversion");
    assert_eq!(names(&finding["hazards"][0]["before"]), ["t.<outside value of pad[1]>", "t.d", "t.oe"]);
}

/// The select between two wide comparisons: 24 bits of an address hold, one line of the waveform says so.
#[test]
fn wide_comparisons_stay_readable() {
    let scan = scan_text(
        "module t (input s, a, b, input [31:0] addr, output q);
            wire y; // stillwire: watch \"strobe\"
            assign y = (s & (addr[31:8] == 24'h40_0123)) | (~s & (addr[31:8] == 24'h40_0123));
            wire z; // stillwire: watch \"strobe\"
            assign z = (s & a & addr[2] & addr[0]) | (~s & b & addr[2] & addr[0]);
        endmodule",
    );
    let lines: Vec<&str> = scan.text.lines().map(str::trim).collect();
    assert!(lines.contains(&"t.addr[31:8]  ==========  holds 24'h400123"), "{}", scan.text);
    for alone in ["t.addr[2]  ~~~~~~~~~~  holds 1", "t.addr[0]  ~~~~~~~~~~  holds 1"] {
        assert!(lines.contains(&alone), "{alone}\n{}", scan.text);
    }
    // The machine-readable output keeps every bit.
    let watched = scan.findings().iter().find(|finding| finding["net"] == "t.y").expect("a finding on t.y");
    assert_eq!(names(&watched["hazards"][0]["before"]).len(), 25);
}

/// Both `s` and `t` select; the second is one short line, whose four conditions are left to the JSON.
#[test]
fn further_changes_are_one_short_line_each() {
    let scan = scan_text(
        "module t (input clk, s, t, a, b, c, d, e, output reg q);
            wire r = ((s & a) | (~s & b)) & ((t & c) | (~t & d)) & e;
            always @(posedge clk or negedge r) if (!r) q <= 1'b0; else q <= ~q;
        endmodule",
    );
    only(&scan, "set-reset-hazard");
    // Both halves must be 1: e, c = d = 1 and one way through the other selector, which is two more signals.
    let line = scan.text.lines().find(|line| line.contains("static-1 by `t.t`")).expect("a line for t.t");
    assert_eq!(line.trim(), "static-1 by `t.t`, while 5 others hold (see the JSON output)");
}

/// What is about no net is told with the places of the others.
#[test]
fn further_missing_files_are_told_by_place() {
    let text = "`include \"defs.vh\"\nmodule NAME(input a, output y); assign y = a; endmodule\n";
    let (first, second) = (text.replace("NAME", "m"), text.replace("NAME", "n"));
    let tree = Tree::new(&[("m.v", &first), ("n.v", &second)]);
    let said = tree.ends(3, &["scan", "."]);
    assert!(
        said.contains("the same in 1 more:\n      ./n.v:1\n") || said.contains("the same in 1 more:\n      n.v:1\n"),
        "{said}"
    );
}
