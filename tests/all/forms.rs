//! Legal or common forms that the parser refuses are read like the forms of equal meaning that it accepts, and what is really
//! wrong loses only itself.

use std::path::Path;
use std::process::Command;

use crate::pipeline;
use crate::tree::Tree;

#[track_caller]
fn flat(text: &str) -> String {
    let tree = Tree::new(&[("t.v", text)]);
    let output = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .args(["flatten", "--top", "t"])
        .arg(tree.path("t.v"))
        .output()
        .expect("the program starts");
    assert_eq!(output.status.code(), Some(0), "{}\n{text}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8_lossy(&output.stdout).into_owned()
}

#[track_caller]
fn check_same(refused: &str, accepted: &str) {
    assert_eq!(flat(refused), flat(accepted), "{refused}");
}

#[test]
fn blocks_among_items() {
    let module =
        |body: &str| format!("module t(input a, c, output q, output r);\n{body}\nassign r = c ^ q;\nendmodule");
    check_same(
        &module("generate begin wire w; assign w = ~a; assign q = w; end endgenerate"),
        &module("wire w; assign w = ~a; assign q = w;"),
    );
    let named = module("if (1) begin : x wire w; assign w = ~a; end assign q = x.w;");
    check_same(&module("begin : x wire w; assign w = ~a; end assign q = x.w;"), &named);
    check_same(&module("generate begin : x wire w; assign w = ~a; end : x endgenerate assign q = x.w;"), &named);
    check_same(
        &module("generate if (1) begin : o begin : i wire w = a & c; end assign q = i.w; end endgenerate"),
        &module("generate if (1) begin : o if (1) begin : i wire w = a & c; end assign q = i.w; end endgenerate"),
    );
}

#[test]
fn initial_values_of_ports() {
    check_same(
        "module t(q, p, clk); input clk; output reg [1:0] q = 2'd2, p = 0; always @(posedge clk) {q, p} <= {p, ~q}; endmodule",
        "module t(q, p, clk); input clk; output reg [1:0] q, p; initial q = 2'd2; initial p = 0; \
         always @(posedge clk) {q, p} <= {p, ~q}; endmodule",
    );
}

#[test]
fn directives_of_old_simulators() {
    check_same(
        "`suppress_faults\n`uselib dir=cells\n`protect\nmodule t(input a, output q); assign q = ~a; endmodule\n`endprotect",
        "module t(input a, output q); assign q = ~a; endmodule",
    );
}

#[test]
fn places_in_a_changed_form_are_those_of_the_file() {
    let text = "module t(q, clk, r);\n  input clk, r;\n  output reg q = 0;\n  wire x = r ? clk : ~r;\n\
                generate begin\n  always @(posedge clk or posedge x)\n    if (x) q <= 0; else q <= ~q;\nend endgenerate\nendmodule";
    let tree = Tree::new(&[("t.v", text)]);
    let scan = pipeline::scan(&[&tree.path("t.v")], &[]);
    assert_eq!(scan.json["complete"], true, "{}", scan.text);
    let finding = &scan.findings()[0];
    assert_eq!((finding["rule"].as_str(), finding["at"]["line"].as_u64()), (Some("set-reset-hazard"), Some(4)));
}

#[test]
fn a_missing_end_loses_one_module() {
    let tree = Tree::new(&[(
        "t.v",
        "module a(input x, output y); assign y = x; endmodule\n\nmodule b(input x);\n  wire w = x;\n\n\
         module c(input x, output y); assign y = ~x; endmodule\nmodule d(input x, output y); c u(x, y); endmodule",
    )]);
    let scan = pipeline::scan(&[&tree.path("t.v")], &[]);
    assert_eq!(scan.exit, 3, "{}", scan.text);
    assert_eq!(scan.json["tops"], serde_json::json!(["a", "d"]));
    assert!(scan.text.contains("this module is not closed: its `endmodule` is missing"), "{}", scan.text);
    assert!(scan.text.contains("t.v:3:1"), "{}", scan.text);
}

#[test]
fn encrypted_text_is_named() {
    let tree = Tree::new(&[("t.v", "`protected\n$%!\n`endprotected"), ("u.v", "module u(input a); endmodule")]);
    let scan = pipeline::scan(&[&tree.path("")], &[]);
    assert_eq!(scan.exit, 3);
    assert!(scan.text.contains("what follows is encrypted"), "{}", scan.text);
}

#[test]
fn a_list_given_as_a_path_is_read_as_one() {
    let tree = Tree::new(&[("design.f", "+define+W=3\nt.v"), ("t.v", "module t(input [`W:0] a); endmodule")]);
    let scan = pipeline::scan(&[&tree.path("design.f")], &["--show", "note"]);
    assert_eq!((scan.exit, scan.json["tops"].clone()), (0, serde_json::json!(["t"])), "{}", scan.text);
    assert!(scan.text.contains("is read as a file list"), "{}", scan.text);
}

#[test]
fn a_folder_that_does_not_exist_is_seen() {
    let tree = Tree::new(&[("t.v", "module t(input a); endmodule")]);
    let scan = pipeline::scan(&[&tree.path("t.v")], &["-I", "no/such/folder"]);
    assert_eq!(scan.exit, 0);
    assert!(scan.text.contains("warning: the include folder `no/such/folder` does not exist"), "{}", scan.text);
}

/// What is missing, with the place where it is: `files` are written, `scanned` of them is given to the program.
#[track_caller]
fn check_hint(files: &[(&str, &str)], scanned: &str, expected: &[&str], tops: &[&str]) {
    let tree = Tree::new(files);
    let root = tree.path("").display().to_string();
    let scan = pipeline::scan(&[Path::new(&tree.path(scanned))], &["--show", "note"]);
    let unwrapped = scan.text.split_whitespace().collect::<Vec<_>>().join(" ").replace("= ", "").replace(&root, "");
    for one in expected {
        assert!(unwrapped.contains(one), "{one}\n{}", scan.text);
    }
    let mut tops: Vec<&str> = tops.to_vec();
    tops.sort_unstable();
    assert_eq!(scan.json["tops"], serde_json::json!(tops), "{}", scan.text);
}

#[test]
fn a_missing_include_loses_only_what_needs_it() {
    let text = "`include \"widths.vh\"\nmodule plain(input a, output y); assign y = a; endmodule\n\
                module wide(input [`WIDTH:0] a); endmodule\nmodule last(input a); endmodule";
    let files = [("p/rtl/t.v", text), ("p/inc/widths.vh", "`define WIDTH 7")];
    let expected = [
        "the included file `widths.vh` was not found",
        "it may be `p/inc/widths.vh`: give `-I p/inc`",
        "`WIDTH` is not defined: what it stands in is left out",
    ];
    check_hint(&files, "p/rtl", &expected, &["plain", "last"]);
    check_hint(&files[..1], "p/rtl", &["no file of that name is in or near"], &["plain", "last"]);
    check_hint(&files, "p", &[], &["plain", "wide", "last"]);
}

#[test]
fn an_unknown_macro_loses_only_its_module() {
    let text = "module a(input x); endmodule\nmodule b(input x); wire [`W:0] w; wire [`W:0] v; endmodule\n\
                module c(input x); endmodule\n`define F(x) x\nmodule d(input x); wire [`F(`W):0] w; endmodule\n\
                module e(input x); endmodule";
    let files = [("p/rtl/t.v", text), ("p/rtl/w.vh", "// `define W 1\n\n`define W 4")];
    let expected =
        ["the macro `W` is not defined here", "also used here", "`p/rtl/w.vh:3` defines it: include that file"];
    check_hint(&files, "p/rtl", &expected, &["a", "c", "e"]);
    check_hint(
        &files[..1],
        "p/rtl",
        &["nothing in or near the scanned folders defines it: define it with `-D W`"],
        &["a", "c", "e"],
    );
}

#[test]
fn an_unknown_package_or_module_is_named_with_its_file() {
    let files = [
        (
            "p/rtl/t.sv",
            "module t import pk::*; (input w_t a); endmodule\nmodule u(input a, output y); sub s(a, y); endmodule",
        ),
        ("p/common/pk.sv", "/* package pk */\npackage pk; typedef logic w_t; endpackage"),
        ("p/lib/sub.v", "module sub(input a, output y); assign y = a; endmodule"),
    ];
    let expected = [
        "there is no package `pk`",
        "`p/common/pk.sv:2` declares it: add `p/common/pk.sv` to the paths",
        "`p/lib/sub.v:1` declares it: add `p/lib/sub.v` to the paths",
    ];
    check_hint(&files, "p/rtl", &expected, &["t", "u"]);
    check_hint(&files, "p", &[], &["t", "u"]);
}

#[test]
fn packages_may_stand_behind_their_use() {
    let files = [
        ("a.sv", "import z::*;\nmodule a import z::W; (input [W-1:0] x, output t y); assign y = x; endmodule"),
        ("b.sv", "package y; import x::*; localparam V = U + 1; export x::*; endpackage"),
        (
            "c.sv",
            "package z; localparam W = y::V; typedef logic [W-1:0] t; endpackage\npackage x; localparam U = 3; endpackage",
        ),
    ];
    let tree = Tree::new(&files);
    let scan = pipeline::scan(&[&tree.path("")], &[]);
    assert_eq!((scan.exit, scan.json["complete"].as_bool()), (0, Some(true)), "{}", scan.text);
}

#[test]
fn a_finding_in_a_macro_has_both_places() {
    let text = "`define UNUSED 1\n`define MIX(s, a = d) \\\n  (s & a | ~s & a)\nmodule t(input clk, s, d, output reg q);\n\
                wire r = `MIX(s);\nalways @(posedge clk or posedge r) if (r) q <= 0; else q <= d;\nendmodule";
    let tree = Tree::new(&[("t.v", text)]);
    let scan = pipeline::scan(&[&tree.path("t.v")], &[]);
    let findings = scan.findings();
    let finding = findings.iter().find(|one| one["rule"] == "set-reset-hazard").expect("a finding");
    assert_eq!(finding["at"]["line"], 5);
    assert_eq!((finding["macro_at"]["line"].as_u64(), finding["macro_at"]["column"].as_u64()), (Some(2), Some(1)));
    assert!(scan.text.contains("the text comes from this macro"), "{}", scan.text);
}
