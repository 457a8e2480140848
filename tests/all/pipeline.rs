//! Runs the program as a user does, on Verilog text, and reads its machine-readable output. Tests built on this see only
//! what other programs see.

use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;
use std::process::Command;

use serde_json::Value;
use stillwire::elaborate;
use stillwire::graph::{Graph, NodeId};
use stillwire::source::{Request, load, on_big_stacks};

/// What a run of `stillwire scan` left behind.
pub struct Scan {
    pub exit: i32,
    pub json: Value,
    /// Diagnostics, for messages of failing tests.
    pub text: String,
}

/// Scans `paths` with further arguments.
#[track_caller]
pub fn scan(paths: &[&Path], arguments: &[&str]) -> Scan {
    scan_in(&[], paths, arguments)
}

/// The same with environment variables set, for file lists that use them.
#[track_caller]
pub fn scan_in(environment: &[(&str, &Path)], paths: &[&Path], arguments: &[&str]) -> Scan {
    let output = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .envs(environment.iter().copied())
        .arg("scan")
        .args(paths)
        .args(["--write", "json:-"])
        .args(arguments)
        .output()
        .expect("the program starts");
    let text = String::from_utf8_lossy(&output.stderr).into_owned();
    let exit = output.status.code().unwrap_or_else(|| panic!("ended by a signal: {text}"));
    match crate::outputs::kept("json", &output.stdout) {
        Ok(json) => Scan { exit, json, text },
        Err(error) => panic!("exit {exit}, no JSON ({error}): {text}"),
    }
}

/// Scans one file with this text and requires a complete analysis.
#[track_caller]
pub fn scan_text(verilog: &str) -> Scan {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    std::fs::write(&file, verilog).expect("the file is written");
    let scan = scan(&[&file], &[]);
    assert_eq!(scan.json["complete"], true, "{}\n{verilog}", scan.text);
    scan
}

/// The gate graph of a design, for questions that no output answers; everything must be read and elaborated.
#[track_caller]
pub fn graph(path: &Path, top: &str) -> Graph {
    let request = Request { paths: vec![path.to_path_buf()], ..Request::default() };
    let work = || {
        let loaded = load(&request, &|_| None, &|_, _| {}).expect("the path exists");
        assert_eq!(loaded.files_failed, 0, "{:?}", loaded.diagnostics);
        let (design, _) = elaborate::elaborate(
            &loaded.units,
            &elaborate::Request { tops: vec![top.to_string()], ..elaborate::Request::default() },
        );
        assert_eq!((design.modules_failed, design.graph.black_boxes.len()), (0, 0));
        design.graph
    };
    on_big_stacks(0, work).expect("threads")
}

/// The node that drives the net of this full name.
#[track_caller]
pub fn driver(graph: &Graph, name: &str) -> NodeId {
    let node = graph.nodes().find(|&node| graph.name(node).as_deref() == Some(name));
    graph.root(node.unwrap_or_else(|| panic!("no net {name}")))
}

/// One entry of a finding's `hazards`.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Hazard {
    /// The changing sources by their names within the instance.
    pub changes: Vec<String>,
    pub kind: String,
    pub cause: String,
    pub before: BTreeMap<String, bool>,
    pub after: BTreeMap<String, bool>,
}

impl Scan {
    pub fn findings(&self) -> &[Value] {
        self.json["findings"].as_array().map_or(&[], Vec::as_slice)
    }

    /// How many findings are worse than a note.
    pub fn worse_than_notes(&self) -> usize {
        self.findings().iter().filter(|finding| finding["severity"] != "note").count()
    }

    /// The findings in one instance on what its nets can show. That a reset ends at any moment, or that stillness hangs on
    /// redundant logic, is another matter.
    pub fn findings_in(&self, instance: &str) -> Vec<&Value> {
        let about_nets =
            |finding: &&Value| finding["rule"] != "reset-release" && finding["rule"] != "cover-unprotected";
        self.findings().iter().filter(|finding| finding["instance"] == instance).filter(about_nets).collect()
    }

    /// A count of `coverage.pins`.
    pub fn pins(&self, kind: &str, count: &str) -> u64 {
        let value = &self.json["coverage"]["pins"][kind][count];
        value.as_u64().unwrap_or_else(|| panic!("no coverage.pins.{kind}.{count}"))
    }
}

/// The hazards of a finding, names relative to `instance`.
pub fn hazards(finding: &Value, instance: &str) -> Vec<Hazard> {
    let prefix = format!("{instance}.");
    let short = |name: &str| name.strip_prefix(&prefix).unwrap_or(name).to_string();
    let values = |object: &Value| -> BTreeMap<String, bool> {
        let object = object.as_object().expect("an object of source values");
        object.iter().map(|(name, value)| (short(name), value.as_u64() == Some(1))).collect()
    };
    let list = finding["hazards"].as_array().expect("a list of hazards");
    list.iter()
        .map(|hazard| Hazard {
            changes: hazard["changes"]
                .as_array()
                .expect("a list of sources")
                .iter()
                .map(|name| short(name.as_str().expect("a name")))
                .collect(),
            kind: hazard["kind"].as_str().expect("a kind").to_string(),
            cause: hazard["cause"].as_str().expect("a cause").to_string(),
            before: values(&hazard["before"]),
            after: values(&hazard["after"]),
        })
        .collect()
}

/// The (changing source, kind) pairs of a list of hazards.
pub fn pairs(hazards: &[Hazard]) -> BTreeSet<(String, String)> {
    hazards.iter().map(|hazard| (hazard.changes.join("+"), hazard.kind.clone())).collect()
}

/// Nothing of this may pass as clean: what the net really does is not known.
#[test]
fn net_with_several_drivers_makes_the_run_incomplete() {
    let source = "module t(input a, b, d, output reg q); wire c; assign c = a; assign c = b;\n\
                  always @(posedge c) q <= d; endmodule\n";
    assert_incomplete(source);
}

/// The outside drives an input already, so a driver inside is a second one and must not be dropped.
#[test]
fn input_driven_from_inside_makes_the_run_incomplete() {
    assert_incomplete("module t(input clk, a, r, output y); always @(posedge clk) r <= a; assign y = r; endmodule\n");
    assert_incomplete("module t(input [1:0] r, input a, output y); assign r[1] = a; assign y = ^r; endmodule\n");
}

#[test]
fn process_that_waits_for_a_named_event_is_no_plain_logic() {
    let source = "module t(input d, output reg q); event e; always @(e) q = d; endmodule\n";
    let scan = assert_incomplete(source);
    let construct = &scan.json["coverage"]["unsupported"][0]["construct"];
    assert_eq!(construct, "event control with something that is no net or variable");
}

#[track_caller]
pub fn assert_incomplete(source: &str) -> Scan {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("t.v");
    std::fs::write(&file, source).expect("written");
    let scan = scan(&[&file], &[]);
    assert_eq!(scan.exit, 3, "{}", scan.text);
    assert_eq!(scan.json["complete"], false);
    scan
}
