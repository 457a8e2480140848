//! Cells from Liberty libraries and from declarations in the settings: a mapped netlist is checked as the text it came from
//! would be, against the same logic written in Verilog; what is not understood is said.

use std::path::{Path, PathBuf};
use std::process::Command;

use serde_json::Value;

use crate::pipeline::{Scan, hazards, pairs, scan};

fn library() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/cells/canal.lib")
}

/// A scan of this text with the library of the fixtures and these settings.
fn scanned(verilog: &str, settings: &str) -> Scan {
    let folder = tempfile::tempdir().expect("a temporary folder");
    std::fs::write(folder.path().join("design.v"), verilog).expect("written");
    std::fs::write(folder.path().join("stillwire.toml"), settings).expect("written");
    scan(&[folder.path()], &["--cells", &library().display().to_string()])
}

/// Rule, line and message of each finding that is about a net.
fn found(scan: &Scan) -> Vec<(String, u64, String)> {
    let text = |value: &Value| value.as_str().unwrap_or_default().to_string();
    // Where resets end has its own fixtures.
    let wanted = |finding: &&Value| finding["net"] != "" && finding["rule"] != "reset-release";
    let of_net = scan.findings().iter().filter(wanted);
    let entry = |finding: &Value| {
        (text(&finding["rule"]), finding["at"]["line"].as_u64().unwrap_or(0), text(&finding["message"]))
    };
    of_net.map(entry).collect()
}

#[test]
fn mapped_netlist() {
    let file = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/cells/mapped.v");
    let scan = scan(&[&file], &["--cells", &library().display().to_string()]);
    assert_eq!(scan.json["complete"], true, "{}", scan.text);
    let text = std::fs::read_to_string(&file).expect("readable");
    let expected: Vec<u64> =
        (1..).zip(text.lines()).filter(|(_, line)| line.contains("//! expect")).map(|(number, _)| number).collect();
    let mut lines: Vec<u64> = found(&scan).iter().map(|(_, line, _)| *line).collect();
    lines.sort_unstable();
    assert_eq!(lines, expected, "{}", scan.text);
    for finding in scan.findings() {
        assert_eq!((&finding["rule"], &finding["severity"]), (&"set-reset-hazard".into(), &"error".into()));
        let hazards = hazards(finding, "mapped");
        assert_eq!(pairs(&hazards), [("mode".to_string(), "static-1".to_string())].into(), "{}", scan.text);
    }
    assert!(found(&scan)[0].2.contains("the asynchronous reset `mapped.drop` of 1 flip-flop"), "{}", scan.text);
    let cells = scan.json["coverage"]["modelled_cells"].as_array().expect("a list");
    let used: Vec<(&str, u64)> = cells
        .iter()
        .map(|cell| (cell["module"].as_str().unwrap_or(""), cell["instances"].as_u64().unwrap_or(0)))
        .collect();
    assert_eq!(used, [("DFF", 1), ("DFFR", 2), ("GATE", 1), ("INV", 1), ("MUX2", 1), ("NAND2", 3)]);
    // The clock of the gated flip-flop, and the clock that the gate and the others share.
    assert_eq!((scan.pins("clock", "nets"), scan.pins("clock", "clean"), scan.pins("latch-enable", "nets")), (2, 2, 0));
}

/// The functions of the cells, against the simulator: the flattened netlist and the same text in Verilog.
#[test]
fn cells_do_what_the_same_verilog_does() {
    let netlist = "module t (input [5:0] i, output [5:0] o);\n\
        wire bus;\n\
        AOI21 a (.A1(i[0]), .A2(i[1]), .B(i[2]), .Y(o[0]));\n\
        XOR2 b (i[0], i[1], o[1]);\n\
        MUX2 c (.D0(i[0]), .D1(i[1]), .S(i[2]), .Y(o[2]));\n\
        TBUF d (.A(i[3]), .EN(i[4]), .Y(bus)), e (.A(i[5]), .EN(~i[4]), .Y(bus));\n\
        INV f (.A(bus), .Y(o[3]));\n\
        NAND2 g [1:0] (.A(i[1:0]), .B(i[3:2]), .Y(o[5:4]));\nendmodule\n";
    let wanted = |i: u32| {
        let bit = |at: u32| i >> at & 1 == 1;
        let bus = if bit(4) { bit(3) } else { bit(5) };
        [
            !(bit(0) && bit(1) || bit(2)),
            bit(0) != bit(1),
            if bit(2) { bit(1) } else { bit(0) },
            !bus,
            !(bit(0) && bit(2)),
            !(bit(1) && bit(3)),
        ]
    };
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("t.v");
    std::fs::write(&file, netlist).expect("written");
    let graph = graph(&file);
    let node = |name: &str| {
        let node = graph.nodes().find(|&node| graph.name(node).as_deref() == Some(name));
        graph.root(node.unwrap_or_else(|| panic!("no net {name}")))
    };
    for i in 0..64 {
        let values = (0..6).map(|at| (node(&format!("t.i[{at}]")), i >> at & 1 == 1)).collect();
        for (at, wanted) in wanted(i).into_iter().enumerate() {
            let wave = stillwire::hazard::waveform(&graph, &values, &values, node(&format!("t.o[{at}]")));
            assert_eq!(wave.i, wanted, "o[{at}] for {i:06b}");
        }
    }
}

fn graph(file: &Path) -> stillwire::graph::Graph {
    use stillwire::{cells, elaborate, source};
    let request = source::Request { paths: vec![file.to_path_buf()], ..source::Request::default() };
    let work = || {
        let loaded = source::load(&request, &|_| None, &|_, _| {}).expect("the path exists");
        let cells = cells::Cells::new(&[library()], &[]).expect("a good library");
        let request = elaborate::Request { tops: vec!["t".to_string()], cells, ..elaborate::Request::default() };
        let (design, diagnostics) = elaborate::elaborate(&loaded.units, &request);
        assert!(diagnostics.is_empty(), "{diagnostics:?}");
        assert!(stillwire::graph::check(&design.graph).is_empty());
        design.graph
    };
    source::on_big_stacks(0, work).expect("threads")
}

/// Clear, preset, scan and edges of flip-flops, with the level and edge of each pin.
#[test]
fn pins_of_flip_flops_and_latches() {
    let netlist = "module t (input a, b, s, c, d, output q, qn, n, l);\n\
        wire p, r, k, e;\n\
        MUX2 m1 (.D0(a), .D1(b), .S(s), .Y(p));\n\
        MUX2 m2 (.D0(a), .D1(b), .S(s), .Y(r));\n\
        MUX2 m3 (.D0(a), .D1(b), .S(s), .Y(k));\n\
        MUX2 m4 (.D0(a), .D1(b), .S(s), .Y(e));\n\
        DFFRS u (.CK(c), .D(d), .SE(s), .SI(a), .RN(r), .S(p), .Q(q), .QN(qn));\n\
        DFFN v (.CKN(k), .D(d), .QN(n));\n\
        LATCH w (.G(e), .D(d), .Q(l));\nendmodule\n";
    let scan = scanned(netlist, "");
    let mut pins: Vec<(&str, u64, &Value, &Value)> = scan
        .findings()
        .iter()
        .filter(|finding| finding["rule"].as_str().is_some_and(|rule| rule.ends_with("-hazard")))
        .map(|finding| {
            let pin = &finding["pin"];
            (
                pin["kind"].as_str().unwrap_or(""),
                finding["at"]["line"].as_u64().unwrap_or(0),
                &pin["active"],
                &pin["edge"],
            )
        })
        .collect();
    pins.sort_by_key(|&(kind, line, ..)| (kind, line));
    let (zero, one, none, falls) = (Value::from(0), Value::from(1), Value::Null, Value::from("negedge"));
    // On a net that sets one output and resets the other the pin counts as a reset.
    let expected = [
        ("clock", 5, &none, &falls),
        ("latch-enable", 6, &one, &none),
        ("reset", 3, &one, &none),
        ("reset", 4, &zero, &none),
    ];
    assert_eq!(pins, expected, "{}", scan.text);
    assert_eq!(scan.json["complete"], true, "{}", scan.text);
}

#[test]
fn a_test_enable_behind_the_latch_is_alive() {
    let netlist = |gate: &str| {
        format!(
            "module t (input clk, a, b, s, e, d, output q); wire te, g;\n\
             MUX2 m (.D0(a), .D1(b), .S(s), .Y(te));\n\
             {gate} u (.CK(clk), .E(e), .TE(te), .GCK(g));\nDFF f (.CK(g), .D(d), .Q(q));\nendmodule\n"
        )
    };
    let scan = scanned(&netlist("GATE"), "");
    assert!(found(&scan).is_empty(), "{}", scan.text);
    let scan = scanned(&netlist("GATEPOST"), "");
    let [(rule, line, _)] = found(&scan).try_into().expect("one finding");
    assert_eq!((rule.as_str(), line), ("clock-hazard", 3), "{}", scan.text);
}

#[test]
fn a_declared_selector_is_glitch_free_and_replaces_text_and_library() {
    let declared = "[[cell]]\nmodule = [\"MUX2\", \"pick\"]\nkind = \"selector\"\nselect = \"S\"\n\
        inputs = [\"D0\", \"D1\"]\noutput = \"Y\"\n";
    let design = "module t (input a, b, s, clk, output reg q, output p); wire r, k;\n\
        MUX2 m (.D0(a), .D1(b), .S(s), .Y(r)); pick n (.D0(a), .D1(b), .S(s), .Y(k));\n\
        always @(posedge clk or negedge r) if (!r) q <= 0; else q <= 1;\n\
        DFF f (.CK(k), .D(a), .Q(p));\nendmodule\n\
        module pick (input D0, D1, S, output Y); assign Y = S ? D1 : D0; endmodule\n";
    assert_eq!(found(&scanned(design, "")).len(), 2);
    let scan = scanned(design, declared);
    assert!(found(&scan).is_empty() && scan.json["complete"] == true, "{}", scan.text);
    // Only equal inputs keep it still: a select that arrives together with a reconverging input still glitches.
    let racing = design.replace(".D1(b)", ".D1(~a)").replace("a, b, s", "a, s").replace(".S(s)", ".S(a)");
    assert_eq!(found(&scanned(&racing, declared)).len(), 2);
}

/// Four inputs: the sum of all prime implicants, judged by the exhaustive meaning of "glitch-free": a change of one select
/// bit shows nothing while the two chosen inputs are equal.
#[test]
fn a_wide_declared_selector() {
    let declared = "[[cell]]\nmodule = \"pick4\"\nkind = \"selector\"\nselect = [\"S1\", \"S0\"]\n\
        inputs = [\"A\", \"B\", \"C\", \"D\"]\noutput = \"!Y\"\n";
    let design = "module t (input a, b, c, d, s, z, clk, output reg q); wire r;\n\
        pick4 m (.A(a), .B(b), .C(c), .D(d), .S1(s), .S0(z), .Y(r));\n\
        always @(posedge clk or posedge r) if (r) q <= 0; else q <= 1;\nendmodule\n";
    let scan = scanned(design, declared);
    assert!(found(&scan).is_empty() && scan.json["complete"] == true, "{}", scan.text);
    assert_eq!((scan.pins("reset", "nets"), scan.pins("reset", "clean")), (1, 1));
}

#[test]
fn a_declared_clock_gate_and_its_clock_pin() {
    let declared = "[[cell]]\nmodule = \"slow\"\nkind = \"clock-gate\"\nclock = \"ck\"\nenable = [\"en\", \"!off\"]\n\
        output = \"gck\"\n";
    let design = "module t (input a, b, s, z, e, d, output reg q); wire k = s ? a : b; wire en = z ? e : d; wire g;\n\
        slow u (.ck(k), .en(en), .off(d), .gck(g));\n\
        always @(posedge g) q <= d;\nendmodule\n";
    let scan = scanned(design, declared);
    // The clock itself is hazardous, at the gate and behind it; the enable is no source of a hazard.
    let found = found(&scan);
    assert_eq!(found.len(), 2, "{}", scan.text);
    assert!(found.iter().any(|(_, _, message)| message.contains("the clock `t.k` of 1 clock gate")), "{}", scan.text);
    for finding in scan.findings().iter().filter(|finding| finding["rule"] == "clock-hazard") {
        let hazards = hazards(finding, "t");
        assert!(hazards.iter().all(|hazard| hazard.changes == ["s"]), "{}", scan.text);
    }
    let quiet = design.replace("s ? a : b", "a");
    assert!(self::found(&scanned(&quiet, declared)).is_empty());
    // A declaration that stands for nothing is told.
    let idle = scanned(&quiet.replace("slow u", "fast u"), declared);
    let note = "the cell `slow` (stillwire.toml:1) stands for no instance: there is none, or the module has a text";
    assert_eq!(idle.json["messages"][0]["text"], note);
}

#[test]
fn declared_pins_of_a_black_box_are_checked() {
    let declared =
        "[[cell]]\nmodule = \"ram\"\nclock = \"ck\"\nreset = \"!rn\"\nset = \"st\"\nenable = \"!we\"\noutput = \"q\"\n";
    let design = "module t (input a, b, s, output [3:0] q); wire r = s ? a : b; wire k = s ? a : b;\n\
        wire w = s ? a : b; wire p = s ? a : b;\n\
        ram u (.ck(k), .rn(r), .we(w), .st(p), .q(q));\nendmodule\n";
    let scan = scanned(design, declared);
    let mut rules: Vec<(String, String)> = found(&scan).into_iter().map(|(rule, _, message)| (rule, message)).collect();
    rules.sort();
    let starts: Vec<&str> = rules.iter().map(|(rule, _)| rule.as_str()).collect();
    assert_eq!(
        starts,
        ["clock-hazard", "latch-enable-hazard", "set-reset-hazard", "set-reset-hazard"],
        "{}",
        scan.text
    );
    assert!(rules[0].1.contains("the clock `t.k` of 1 black box"), "{}", scan.text);
    let of = |net: &str| scan.findings().iter().find(|finding| finding["net"] == net).expect("a finding");
    assert_eq!((&of("t.r")["pin"]["active"], &of("t.r")["severity"]), (&0.into(), &"error".into()));
    assert_eq!((&of("t.w")["pin"]["active"], &of("t.w")["severity"]), (&0.into(), &"error".into()));
    assert_eq!(of("t.p")["severity"], "warning");
    assert_eq!(of("t.k")["pin"]["cells"][0], "t.u");
    let misspelt = declared.replace("\"!rn\"", "\"!rm\"");
    let scan = scanned(design, &misspelt);
    assert_eq!(scan.json["complete"], false);
    assert!(scan.text.contains("does not connect the declared pin `rm`"), "{}", scan.text);
    assert!(scan.text.contains("did you mean `rn` in stillwire.toml:1?"), "{}", scan.text);
}

#[test]
fn cells_that_are_not_understood_are_said() {
    let netlist = |cell: &str| format!("module t (input a, b, output y); {cell} u (.A(a), .B(b), .Y(y)); endmodule\n");
    for (cell, why) in [
        ("KEEPER", "state tables are not supported"),
        ("WRONG", "the function \"A + (B\" is not understood: a `)` is missing"),
    ] {
        let scan = scanned(&netlist(cell), "");
        assert_eq!((&scan.json["complete"], scan.exit), (&false.into(), 3), "{}", scan.text);
        let messages: Vec<&str> = scan.findings().iter().filter_map(|finding| finding["message"].as_str()).collect();
        let said = messages.iter().any(|message| message.contains(why) && message.contains("canal.lib:"));
        assert!(said, "{messages:?}");
        assert_eq!(scan.json["coverage"]["black_boxes"][0]["module"], cell);
        // Declared pins stand for what was not understood.
        let declared = format!("[[cell]]\nmodule = \"{cell}\"\nenable = \"A\"\noutput = \"Y\"\n");
        let scan = scanned(&netlist(cell), &declared);
        assert_eq!((&scan.json["complete"], scan.pins("latch-enable", "nets")), (&true.into(), 1), "{}", scan.text);
    }
    let scan = scanned("module t (input a, b, output y); NAND2 u (.A(a), .C(b), .Y(y)); endmodule\n", "");
    assert_eq!(scan.json["complete"], false);
    assert!(scan.text.contains("connects a pin `C` that the cell does not have"), "{}", scan.text);
}

#[track_caller]
fn refused(library: &str) -> String {
    let folder = tempfile::tempdir().expect("a temporary folder");
    std::fs::write(folder.path().join("t.v"), "module t (input a, output y); assign y = a; endmodule\n")
        .expect("written");
    let file = folder.path().join("x.lib");
    std::fs::write(&file, library).expect("written");
    let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
    let output = command.arg("scan").arg(folder.path()).arg("--cells").arg(&file).output().expect("runs");
    assert_eq!(output.status.code(), Some(2));
    String::from_utf8_lossy(&output.stderr).replace(&folder.path().display().to_string(), "")
}

#[test]
fn broken_libraries_are_refused_with_the_line() {
    let text = refused("library (x) {\n  cell (A) {\n    pin (Y) { function : \"A;\n  }\n}\n");
    assert!(text.contains("error: /x.lib:3: a text in quotes begins here and does not end"), "{text}");
    let text = refused("library (x) {\n  cell (A) {\n  }\n");
    assert!(text.contains("error: /x.lib:4: the group `library` of line 1 is not closed"), "{text}");
    assert!(refused("").contains("/x.lib:1: there is no `library (...) { ... }` in it"));
    assert!(refused("module t; endmodule").contains("help: the file must be a Liberty library"));
}

/// Whatever is cut off or written over, the library is refused or read, and nothing else.
#[test]
fn damaged_libraries_do_no_harm() {
    let text = std::fs::read_to_string(library()).expect("readable");
    let whole = stillwire::cells::read_library(&text, &library()).expect("a good library");
    assert_eq!(whole.len(), 15);
    let mut refused = 0;
    for at in (0..text.len()).step_by(29).filter(|&at| text.is_char_boundary(at)) {
        refused += usize::from(stillwire::cells::read_library(&text[..at], &library()).is_err());
        for letter in ["{", "}", "\"", "(", "\\", ";", "/*"] {
            let damaged = format!("{}{letter}{}", &text[..at], &text[at..]);
            refused += usize::from(stillwire::cells::read_library(&damaged, &library()).is_err());
        }
    }
    assert!(refused > 300, "{refused}");
}
