//! The evidence record of whole runs: it holds everything that a run rested on, and the same bytes come out whenever,
//! wherever and with however many threads the run is made again.

use serde_json::{Value, json};

use crate::outputs::{kept, outputs};
use crate::tree::Tree;

const DESIGN: &str = "module core #(parameter W = 0) (input clk, rst, s, a, b, d, output reg [3:0] q, output y);
    wire mode /* strapped */; // stillwire: static \"strapped on the board\"
    assign mode = s;
    wire still = rst & mode;
    wire shaky = rst & a | ~rst & b; // stillwire: signoff set-reset-hazard \"held while asserted\" by Iva Holm until 2999-01-01
    wire known = a & b | ~a & rst;
    wire open;
    assign y = `include \"part.vh\"
    ;
    always @(posedge clk or negedge still) if (!still) q[0] <= 0; else q[0] <= d;
    always @(posedge clk or posedge shaky) if (shaky) q[1] <= 0; else q[1] <= d;
    always @(posedge clk or negedge known) if (!known) q[2] <= 0; else q[2] <= d;
    always @(posedge clk or negedge open) if (!open) q[3] <= 0; else q[3] <= d;
    wire abc = d;
    absent u(.i(d));
    KEEP v(.I(a));
    // synthesis translate_off
    initial $display(\"left out\");
    // synthesis translate_on
endmodule
";

const SETTINGS: &str = "lists = \"design.f\"\nexclude = \"old\"\nlibraries = \"cells.lib\"\nledger = \"known.toml\"\n\
                        gate = \"warning\"\n\n[severities]\nclock-hazard = \"warning\"\n";

const LIBRARY: &str = "library (tiny) { cell (KEEP) { pin (I) { direction : input; } pin (O) { direction : output; \
                       function : \"I\"; } } }\n";

fn tree() -> Tree {
    let files = [
        ("core.v", DESIGN),
        // The three bytes whose digest FIPS 180-2 gives in appendix B.1.
        ("part.vh", "abc"),
        ("design.f", "core.v\n"),
        ("cells.lib", LIBRARY),
        ("stillwire.toml", SETTINGS),
        ("known.toml", "format = \"stillwire-ledger/1\"\n"),
    ];
    let tree = Tree::new(&files);
    // The ledger knows what is not signed off: of the records' findings `known` and its like.
    let said = tree.ends(3, &["ledger", "write"]);
    assert!(said.contains("known.toml"), "{said}");
    tree
}

#[track_caller]
fn record(tree: &Tree, more: &[&str]) -> (Vec<u8>, Value) {
    let output = tree.run(&[&["scan", "--write", "evidence:record.json"], more].concat());
    let bytes = std::fs::read(tree.path("record.json"));
    let bytes = bytes.unwrap_or_else(|_| panic!("{}", String::from_utf8_lossy(&output.stderr)));
    let value = kept("evidence", &bytes).expect("JSON");
    assert_eq!(value["result"]["exit"], json!(output.status.code()));
    (bytes, value)
}

#[test]
fn same_input_gives_the_same_bytes() {
    let (here, _) = record(&tree(), &["--threads", "1"]);
    let (there, _) = record(&tree(), &["--threads=8"]);
    assert_eq!(String::from_utf8_lossy(&here), String::from_utf8_lossy(&there));
    let changed = tree();
    changed.write("part.vh", b"abc ");
    assert!(record(&changed, &[]).0 != here, "one more byte of input must be seen");
}

#[test]
fn every_file_that_was_read_is_there_with_its_digest() {
    let (_, record) = record(&tree(), &[]);
    let inputs = record["inputs"].as_array().expect("inputs");
    let files: Vec<(&str, &str)> = inputs
        .iter()
        .map(|input| (input["role"].as_str().expect("a role"), input["file"].as_str().expect("a file")))
        .collect();
    let wanted = [
        ("settings", "stillwire.toml"),
        ("file-list", "design.f"),
        ("library", "cells.lib"),
        ("ledger", "known.toml"),
        ("source", "core.v"),
        ("source", "part.vh"),
    ];
    assert_eq!(files, wanted);
    let digest = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";
    assert_eq!(inputs[5]["sha256"], digest);
}

#[test]
fn parameters_that_hold_are_listed() {
    let tree = Tree::new(&[(
        "t.sv",
        "package p; typedef enum logic [1:0] {Slow, Fast = 2} speed_e; endpackage
         module t import p::*; #(parameter int W = 4, localparam int Double = 2 * W, parameter speed_e S = Fast,
             parameter string Name = \"a\", parameter type Data = logic [2:0], parameter logic [79:0] Wide = 80'hface_0000_0000_0000_0001,
             parameter real Share = 0.5, parameter logic [1:0] Open = 2'b1x, parameter bit Unused = Nothing)
           (input Data d, output Data q);
           localparam Inside = W + 1;
           assign q = d;
         endmodule
         module plain(input a, output y); assign y = a; endmodule
         module other #(parameter W = 1) (input [W-1:0] a, output [W-1:0] y); assign y = a; endmodule",
    )]);
    tree.run(&["scan", "t.sv", "--set", "W=8'h5", "--write", "evidence:record.json"]);
    let record = kept("evidence", tree.read("record.json").as_bytes()).expect("JSON");
    let wanted = json!({
        "other": { "W": "5" },
        "plain": {},
        "t": { "Data": "a type of 3 bits", "Double": "10", "Inside": "6", "Name": "\"a\"", "Open": "2'b1x", "S": "2",
               "Share": "0.5", "W": "5", "Wide": "80'hface0000000000000001" },
    });
    assert_eq!(record["parameters_in_force"], wanted);
}

#[test]
fn run_and_its_limits_are_told() {
    let (_, record) = record(&tree(), &["--set", "W=1", "--top", "core"]);
    assert_eq!(record["tool"]["version"], env!("CARGO_PKG_VERSION"));
    assert_eq!(record["command"], json!(["scan", "--write", "evidence:record.json", "--set", "W=1", "--top", "core"]));
    let settings = record["settings"].as_array().expect("lines");
    assert!(settings.contains(&json!("gate = \"warning\"  # stillwire.toml:5")), "{settings:?}");
    assert_eq!((&record["tops"], &record["parameters"]), (&json!(["core"]), &json!({ "W": "1" })));
    let net = |name: &str| {
        let nets = record["nets"].as_array().expect("nets");
        nets.iter().find(|net| net["net"] == name).unwrap_or_else(|| panic!("no {name} in {nets:?}"))
    };
    let still = net("core.still");
    assert_eq!(
        (&still["role"], &still["verdict"], &still["method"]),
        (&json!("reset"), &json!("clean"), &json!("structure"))
    );
    assert!(still["rests_on"].as_str().expect("a sentence").ends_with("declared assumptions may be part of the proof"));
    assert_eq!(net("core.known")["verdict"], "hazard");
    assert_eq!(net("core.open")["open"], json!(["nothing drives the net"]));
    let finding = |name: &str| {
        let findings = record["findings"].as_array().expect("findings");
        let found = findings.iter().find(|finding| finding["net"] == name && finding["rule"] == "set-reset-hazard");
        found.unwrap_or_else(|| panic!("no finding on {name}"))
    };
    let signoff = json!({ "reason": "held while asserted", "by": "Iva Holm", "until": "2999-01-01" });
    assert_eq!(finding("core.shaky")["signoff"], signoff);
    assert_eq!(finding("core.known")["known"], true);
    let coverage = &record["coverage"];
    assert_eq!(coverage["black_boxes"][0]["module"], "absent");
    assert_eq!(coverage["modelled_cells"][0]["module"], "KEEP");
    assert_eq!(coverage["assumptions"][0]["reason"], "strapped on the board");
    assert_eq!(coverage["assumptions"][0]["standing"], "trusted");
    assert_eq!(coverage["left_out"]["regions"].as_array().map(Vec::len), Some(1));
    assert_eq!(coverage["severities"], json!({ "clock-hazard": "warning" }));
    assert_eq!((&record["result"]["complete"], &record["result"]["gate"]), (&json!(false), &json!("warning")));
    assert!(!record["result"]["missing"].as_array().expect("sentences").is_empty());
    assert!(record["caution"].as_str().expect("a sentence").contains("metastability"));
}

/// The nets are those that the findings count.
#[test]
fn nets_add_up_to_the_coverage() {
    let lock = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/lock");
    let run = outputs(&lock, &[]);
    for (role, count) in run.json["coverage"]["pins"].as_object().expect("counts") {
        let nets = run.evidence["nets"].as_array().expect("nets").iter().filter(|net| net["role"] == *role);
        let verdicts: Vec<&Value> = nets.map(|net| &net["verdict"]).collect();
        for verdict in ["clean", "hazard", "undecided"] {
            let of = verdicts.iter().filter(|one| **one == verdict).count();
            assert_eq!(count[verdict], of, "{role} {verdict}");
        }
    }
}
