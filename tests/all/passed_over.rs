//! What is for simulation only is passed over: wherever it stands, the design flattens to the same gates with and without
//! it, the run is complete, nothing is called unsupported, and the coverage counts it by kind.

use std::process::Command;

use serde_json::Value;

/// Where a snippet is put.
#[derive(Clone, Copy, PartialEq, Debug)]
enum Spot {
    /// Between the modules of a file.
    Unit,
    Package,
    Module,
    Generate,
    /// In `always_ff`, `always_comb` and a function.
    Process,
}

use Spot::{Generate, Module, Package, Process, Unit};

/// Everywhere among declarations.
const DECLARED: &[Spot] = &[Unit, Package, Module, Generate];
const ITEMS: &[Spot] = &[Module, Generate];

/// Kind in the coverage, text, places.
const SNIPPETS: &[(&str, &str, &[Spot])] = &[
    ("assertion", "assert property (@(posedge clk) a |-> ##1 b) else $error(\"no\");", ITEMS),
    ("assertion", "assume property (@(posedge clk) disable iff (!rst_n) a);", ITEMS),
    ("assertion", "cover property (@(posedge clk) a ##[1:3] b);", ITEMS),
    ("assertion", "cover sequence (@(posedge clk) a ##1 b);", ITEMS),
    ("assertion", "restrict property (@(posedge clk) a);", ITEMS),
    ("assertion", "named: assert #0 (a) else $error(\"no\");", ITEMS),
    ("assertion", "assert final (a);", ITEMS),
    ("assertion", "sequence s1; @(posedge clk) a ##1 b; endsequence", ITEMS),
    ("assertion", "property p1; @(posedge clk) a |=> b; endproperty assert property (p1);", ITEMS),
    ("assertion", "default disable iff (!rst_n);", &[Module]),
    ("assertion", "sequence s2(x); x; endsequence property p2(x); x; endproperty", DECLARED),
    ("assertion", "assert (a) else $error(\"no\");", &[Process]),
    ("assertion", "assert (a); assume (b); cover (a);", &[Process]),
    ("assertion", "assert #0 (a); assert final (b);", &[Process]),
    ("assertion", "if (a) named: assert (b) else begin $display(\"no\"); end", &[Process]),
    ("clocking block", "clocking cb @(posedge clk); default input #1step output #2; input a; endclocking", ITEMS),
    ("clocking block", "default clocking dc @(posedge clk); endclocking assert property (a |=> b);", &[Module]),
    ("covergroup", "covergroup cg @(posedge clk); coverpoint a { bins x = {0}; } endgroup cg c1 = new();", ITEMS),
    ("covergroup", "covergroup cg2; coverpoint a; endgroup cg2 c2 = new; always @(posedge clk) c2.sample();", ITEMS),
    ("covergroup", "covergroup cg3; endgroup", DECLARED),
    ("class", "class k1; rand bit [3:0] x; constraint c { x < 4; } function new(); endfunction endclass", DECLARED),
    ("class", "class k2 #(type T = int); T x; task run(); #1; endtask endclass", DECLARED),
    ("class object", "class k3; int x; endclass k3 h; initial begin h = new; h.x = 1; end", ITEMS),
    ("class object", "mailbox mb; semaphore sm; initial sm = new(1);", ITEMS),
    ("checker", "checker ck1(x); assert #0 (x); endchecker", DECLARED),
    ("checker", "checker ck2(x); assert #0 (x); endchecker ck2 i2(a);", ITEMS),
    ("program", "program pg1; initial $display(\"p\"); endprogram", &[Unit, Module]),
    ("DPI import", "import \"DPI-C\" function int f1(input int x);", DECLARED),
    ("DPI import", "import \"DPI-C\" context task t1(input int x); initial t1(3);", ITEMS),
    ("DPI import", "import \"DPI-C\" function void f2(input int x); always @(posedge clk) f2(a);", ITEMS),
    ("DPI export", "export \"DPI-C\" function keep;", &[Module]),
    ("final procedure", "final begin $display(\"end\"); end final $display(\"end\");", ITEMS),
    ("initial block that is not constant", "reg ck; initial begin ck = 0; forever #5 ck = ~ck; end", ITEMS),
    ("initial block that is not constant", "initial begin #10 $finish; end initial fork #1; #2; join", ITEMS),
    ("initial block that is not constant", "initial begin force y = 1; #1 release y; end", ITEMS),
    (
        "initial block that is not constant",
        "initial begin @(posedge clk); wait (a); expect (@(posedge clk) a); end",
        ITEMS,
    ),
    ("initial block that is not constant", "initial if ($test$plusargs(\"x\")) $dumpvars(0, host);", ITEMS),
    ("$dumpvars", "initial begin $dumpfile(\"x\"); $dumpvars; $asserton; $timeformat(-9, 2, \"ns\", 10); end", ITEMS),
    ("$display", "$display(\"a=%b t=%t\", a, $time);", &[Process]),
    ("$strobe", "$strobe(\"x\"); $monitor(\"x\"); $write(\"x\"); $fdisplay(1, \"x\");", &[Process]),
    ("$error", "if (a) $error(\"no\"); else $info(\"yes\");", &[Process]),
    ("$fatal", "if (a && b) $fatal(\"no\"); if (a && b) $fatal(1, \"no\");", &[Process]),
    ("$info", "$info(\"built\"); if (0) $fatal(1, \"no\"); if (0) $error(\"no\");", ITEMS),
    ("$warning", "$warning; if (0) $fatal(\"no\");", ITEMS),
    ("real variable", "real r1; always @(posedge clk) r1 = 1.5;", ITEMS),
    ("string variable", "string s3 = \"x\"; always @(posedge clk) s3 = $sformatf(\"%d\", a);", ITEMS),
    ("event", "event e1; always @(posedge clk) -> e1; always @(e1) $display(\"e\");", ITEMS),
    ("dynamic array", "int q1[$]; int a1[string]; int d1[]; initial q1.push_back(1);", ITEMS),
    ("virtual interface", "virtual bus vb;", ITEMS),
    ("specify block", "specify (a => y) = (1, 2); $setup(a, posedge clk, 1); endspecify", &[Module]),
    ("specparam", "specparam sp = 1;", &[Module]),
    ("time unit", "timeunit 1ns / 1ps;", &[Unit, Package]),
];

/// The design around the snippet: a flip-flop with a reset, a function of it, an output.
fn host(spot: Option<Spot>, snippet: &str) -> String {
    let at = |wanted: Spot| if spot == Some(wanted) { snippet } else { "" };
    format!(
        "{unit}\ninterface bus; logic w; endinterface\npackage pk;\n{package}\n  typedef logic bit_t;\nendpackage\n\
         module host import pk::*; (input logic clk, rst_n, a, b, output bit_t y, z, q);\n{module}\n\
         function automatic logic keep(input logic a, b);\n{process}\nreturn a ^ b;\nendfunction\n\
         if (1) begin : g\n{generate}\n  assign z = a | b;\nend\n\
         always_comb begin\n{process}\ny = keep(a, b) & q;\nend\n\
         always_ff @(posedge clk or negedge rst_n) begin\nif (!rst_n) q <= 0; else begin\n{process}\nq <= a;\nend\nend\n\
         endmodule\n",
        unit = at(Unit),
        package = at(Package),
        module = at(Module),
        generate = at(Generate),
        process = at(Process),
    )
}

/// The flattened form and the report.
fn run(text: &str) -> Result<(String, Value), String> {
    let folder = tempfile::tempdir().map_err(|error| error.to_string())?;
    let file = folder.path().join("host.sv");
    std::fs::write(&file, text).map_err(|error| error.to_string())?;
    let program = |command: &str, more: &[&str]| {
        let command = Command::new(env!("CARGO_BIN_EXE_stillwire")).arg(command).arg(&file).args(more).output();
        command.expect("the program starts")
    };
    let flat = program("flatten", &["--top", "host"]);
    let scan = program("scan", &["--top", "host", "--show", "note", "--write", "json:-"]);
    let said = String::from_utf8_lossy(&scan.stderr).into_owned();
    let json = crate::outputs::kept("json", &scan.stdout).map_err(|error| format!("{error}: {said}"))?;
    if flat.status.code() != Some(0) || scan.status.code() != Some(0) {
        return Err(said);
    }
    Ok((String::from_utf8_lossy(&flat.stdout).into_owned(), json))
}

/// The flattened form with one name for all inner nets, whose numbers shift when a snippet declares a variable.
fn without_numbers(flat: &str) -> String {
    let words = flat.split_inclusive(|c: char| !c.is_alphanumeric());
    let word = |word: &str| {
        let name = word.trim_end_matches(|c: char| !c.is_alphanumeric());
        let is_inner =
            name.strip_prefix('n').is_some_and(|rest| !rest.is_empty() && rest.bytes().all(|b| b.is_ascii_digit()));
        if is_inner { format!("n{}", &word[name.len()..]) } else { word.to_string() }
    };
    words.map(word).collect()
}

#[test]
fn every_kind_in_every_place() {
    let (bare, _) = run(&host(None, "")).expect("the bare design is analysed");
    assert!(bare.contains("always @(posedge \\host.clk  or negedge \\host.rst_n )"), "{bare}");
    let bare = without_numbers(&bare);
    let mut failures = Vec::new();
    for (kind, snippet, spots) in SNIPPETS {
        for &spot in *spots {
            let problem = match run(&host(Some(spot), snippet)) {
                Err(said) => Some(said),
                Ok((_, json)) if json["complete"] != true => Some(format!("incomplete: {}", json["findings"])),
                Ok((_, json)) if json["coverage"]["left_out"]["simulation_only"][kind].as_u64().is_none() => {
                    Some(format!("not counted: {}", json["coverage"]["left_out"]["simulation_only"]))
                }
                Ok((flat, _)) => {
                    let flat = without_numbers(&flat);
                    let lost: Vec<&str> = bare.lines().filter(|line| !flat.contains(line)).collect();
                    (!lost.is_empty()).then(|| format!("other gates, without {lost:?}: {flat}"))
                }
            };
            if let Some(problem) = problem {
                failures.push(format!("{kind} {spot:?} {snippet}\n{problem}"));
            }
        }
    }
    assert!(failures.is_empty(), "{} failures:\n{}", failures.len(), failures.join("\n"));
}

/// Where a value of such a thing, or an effect on the design, would have to be known, it is never passed over.
#[test]
fn what_reaches_the_design_is_told() {
    for (snippet, construct) in [
        ("import \"DPI-C\" function int f(input int x); wire w = f(a);", "value of a DPI import in logic"),
        ("import \"DPI-C\" function void f(output int x); int v; always_comb f(v);", "value of a DPI import in logic"),
        ("real r; wire w = r > 1.0;", "value of a real variable in logic"),
        ("event e; logic w; always @(e) w = a;", "event control with something that is no net or variable"),
        ("logic w; always_comb begin w = a; $mine(w); end", "system task $mine"),
        (
            "class k; task t(output logic x); endtask endclass k h; logic w; always_comb h.t(w);",
            "class object in logic",
        ),
        ("virtual bus vb; always_comb vb.w = a;", "virtual interface in logic"),
        ("logic w; always @(a) begin #1 w = a; end", "delay control inside a process"),
        ("logic w; always_comb force w = a;", "force or release"),
    ] {
        let folder = tempfile::tempdir().expect("a folder");
        let file = folder.path().join("host.sv");
        std::fs::write(&file, host(Some(Module), snippet)).expect("written");
        let scan = crate::pipeline::scan(&[&file], &["--top", "host"]);
        assert_eq!((scan.exit, scan.json["complete"].as_bool()), (3, Some(false)), "{snippet}\n{}", scan.text);
        let constructs = scan.json["coverage"]["unsupported"].to_string();
        assert!(constructs.contains(construct), "{snippet}: {constructs}");
    }
}
