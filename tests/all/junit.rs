//! The JUnit output of whole runs: well-formed by a parser, its counts those of its cases, and its verdicts those of the
//! JSON output and of the exit code.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use serde_json::Value;
use xml::reader::XmlEvent;

use crate::outputs::{Outputs, outputs};
use crate::tree::Tree;

#[derive(Default, Debug)]
struct Element {
    name: String,
    attributes: BTreeMap<String, String>,
    children: Vec<Element>,
    text: String,
}

impl Element {
    fn get(&self, attribute: &str) -> &str {
        self.attributes.get(attribute).map_or("", String::as_str)
    }

    fn number(&self, attribute: &str) -> usize {
        self.get(attribute).parse().unwrap_or_else(|_| panic!("{attribute} of {}", self.name))
    }

    fn child(&self, name: &str) -> Option<&Element> {
        self.children.iter().find(|child| child.name == name)
    }
}

/// The document's one element.
#[track_caller]
fn parsed(text: &str) -> Element {
    let mut open = vec![Element::default()];
    for event in xml::EventReader::new(text.as_bytes()) {
        match event.unwrap_or_else(|error| panic!("{error}\n{text}")) {
            XmlEvent::StartElement { name, attributes, .. } => {
                let attributes = attributes.into_iter().map(|one| (one.name.local_name, one.value)).collect();
                open.push(Element { name: name.local_name, attributes, ..Element::default() });
            }
            XmlEvent::EndElement { .. } => {
                let element = open.pop().expect("it is open");
                open.last_mut().expect("the document").children.push(element);
            }
            XmlEvent::Characters(more) | XmlEvent::CData(more) => {
                open.last_mut().expect("the document").text.push_str(&more);
            }
            _ => {}
        }
    }
    let mut document = open.pop().expect("the document");
    assert!(open.is_empty());
    document.children.remove(0)
}

fn result(case: &Element) -> &'static str {
    let of = |name| case.child(name).is_some();
    match (of("failure"), of("error"), of("skipped")) {
        (false, false, false) => "passed",
        (true, false, false) => "failure",
        (false, true, false) => "error",
        (false, false, true) => "skipped",
        _ => panic!("two results: {case:?}"),
    }
}

/// The suites by name, after everything that holds for every run has been checked.
#[track_caller]
fn checked(run: &Outputs) -> BTreeMap<String, Element> {
    let all = parsed(&run.junit);
    assert_eq!(all.name, "testsuites");
    let mut sums = [0; 4];
    for suite in &all.children {
        assert_eq!(suite.name, "testsuite");
        let count = |wanted: &str| suite.children.iter().filter(|case| result(case) == wanted).count();
        let counts = [suite.children.len(), count("failure"), count("error"), count("skipped")];
        let said = ["tests", "failures", "errors", "skipped"].map(|name| suite.number(name));
        assert_eq!(said, counts, "{}", suite.get("name"));
        sums.iter_mut().zip(counts).for_each(|(sum, count)| *sum += count);
        let mut names: Vec<&str> = suite.children.iter().map(|case| case.get("name")).collect();
        names.sort_unstable();
        names.dedup();
        assert_eq!(names.len(), suite.children.len(), "two cases of one name in {}", suite.get("name"));
    }
    assert_eq!(["tests", "failures", "errors", "skipped"].map(|name| all.number(name)), sums);
    assert_eq!(sums[1] + sums[2] > 0, run.exit != 0, "exit {}\n{}\n{}", run.exit, run.text, run.junit);

    let suites: BTreeMap<String, Element> =
        all.children.into_iter().map(|suite| (suite.get("name").to_string(), suite)).collect();
    for (kind, count) in run.json["coverage"]["pins"].as_object().expect("counts") {
        let cases = suites.get(kind).map_or(&[][..], |suite| &suite.children);
        assert_eq!(count["nets"], cases.len(), "{kind}");
        let undecided = cases.iter().filter(|case| result(case) == "error").count();
        assert_eq!(count["undecided"], undecided, "{kind}");
        let clean = |case: &&Element| case.child("system-out").is_some_and(|out| out.text.starts_with("clean: "));
        assert_eq!(count["clean"], cases.iter().filter(clean).count(), "{kind}");
    }
    suites
}

fn lock() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/lock")
}

#[test]
fn counts_agree_with_the_other_outputs_for_every_gate() {
    let mut failing = Vec::new();
    for gate in ["error", "warning", "note"] {
        let run = outputs(&lock(), &["--gate", gate]);
        let suites = checked(&run);
        failing.push(suites.values().map(|suite| suite.number("failures")).sum::<usize>());
        // Every finding is told somewhere.
        for finding in run.json["findings"].as_array().expect("findings") {
            let message = finding["message"].as_str().expect("a message");
            let told = |case: &Element| case.children.iter().any(|child| child.text.contains(message));
            assert!(suites.values().any(|suite| suite.children.iter().any(told)), "{message}");
        }
    }
    assert!(failing[0] > 0 && failing[0] < failing[2], "{failing:?}");
}

/// A design with a net of each sort, and its ledger: `known` was there when the ledger was written, `fresh` came later.
fn design(fresh: bool) -> String {
    let last = if fresh { "s & b | ~s & a" } else { "1'b1" };
    format!(
        "module t(input clk, s, a, b, input d, output reg [5:0] q);
        wire still = a & b;
        wire known = s & a | ~s & b;
        // stillwire: signoff set-reset-hazard \"held by the host\" by Iva Holm until 2999-01-01
        wire signed_off = ~s & a | s & b;
        wire open;
        wire fresh = {last};
        always @(posedge clk or negedge still) if (!still) q[0] <= 0; else q[0] <= d;
        always @(posedge clk or negedge known) if (!known) q[1] <= 0; else q[1] <= d;
        always @(posedge clk or negedge signed_off) if (!signed_off) q[2] <= 0; else q[2] <= d;
        always @(posedge clk or negedge open) if (!open) q[3] <= 0; else q[3] <= d;
        always @(posedge clk or negedge fresh) if (!fresh) q[4] <= 0; else q[4] <= d;
        wire \\odd<\"&'>name = a ^ b;
        always @(posedge clk or negedge \\odd<\"&'>name ) if (!\\odd<\"&'>name ) q[5] <= 0; else q[5] <= d;
        endmodule\n"
    )
}

#[test]
fn every_sort_of_net_has_its_result() {
    let tree = Tree::new(&[("t.v", &design(false))]);
    let ledger = tree.path("known.toml");
    let ledger = ledger.to_str().expect("UTF-8");
    tree.ends(3, &["ledger", "write", "t.v", "--ledger", ledger]);
    tree.write("t.v", design(true).as_bytes());
    let run = outputs(&tree.path("t.v"), &["--ledger", ledger]);
    let suites = checked(&run);
    let case = |name: &str| {
        let found = suites["reset"].children.iter().find(|case| case.get("name") == name);
        found.unwrap_or_else(|| panic!("no case {name}\n{}", run.junit))
    };
    assert_eq!(result(case("t.still")), "passed");
    assert_eq!(case("t.still").get("classname"), "stillwire.reset");
    assert_eq!(case("t.still").get("line"), "2");
    let known = case("t.known").child("skipped").expect("skipped");
    assert!(known.get("message").contains("known.toml"), "{known:?}");
    let signed = case("t.signed_off").child("skipped").expect("skipped");
    assert_eq!(signed.get("message"), "signed off: held by the host, by Iva Holm, until 2999-01-01");
    assert_eq!(case("t.open").child("error").expect("an error").get("type"), "undecided");
    let failure = case("t.fresh").child("failure").expect("a failure");
    assert_eq!(failure.get("type"), "set-reset-hazard");
    assert!(failure.text.contains("witness") && failure.get("message").contains("`t.fresh`"), "{failure:?}");
    case("t.odd<\"&'>name");
    let complete = &suites["analysis"].children[0];
    assert_eq!((complete.get("name"), result(complete)), ("complete", "error"));
}

#[test]
fn what_is_about_no_net_has_a_case_as_well() {
    let text = "module t(input a, output y);\nwire p, n;\nassign p = ~(a & n);\nassign n = p;\nassign y = a;\n\
                // stillwire: sign-off clock-hazard\nendmodule\n";
    let tree = Tree::new(&[("t.v", text)]);
    let run = outputs(&tree.path("t.v"), &[]);
    let suites = checked(&run);
    let results: Vec<(&str, &str)> =
        suites["design"].children.iter().map(|case| (case.get("name"), result(case))).collect();
    let is = |start: &str, wanted: &str| results.iter().any(|(name, got)| name.starts_with(start) && *got == wanted);
    assert!(is("combinational-loop t.", "failure"), "{results:?}");
    assert!(is("signoff-invalid at ", "failure"), "{results:?}");
}

/// A control character in an escaped name cannot be written in XML at all.
#[test]
fn text_that_xml_cannot_hold_is_replaced() {
    let text = "module t(input a, b, output \\y\u{1}z );\nassign \\y\u{1}z = a ^ b;\nendmodule\n";
    let tree = Tree::new(&[("t.v", text)]);
    let run = outputs(&tree.path("t.v"), &[]);
    let output = &checked(&run)["output"].children[0];
    assert_eq!((output.get("name"), result(output)), ("t.y\u{fffd}z", "passed"));
}

#[test]
fn incomplete_run_without_any_finding_on_nets_is_an_error() {
    let text = "module t(input a, output y);\nassign y = a;\nmissing u(.a(a));\nendmodule\nmodule broken(\n";
    let tree = Tree::new(&[("t.v", text)]);
    let run = outputs(&tree.path("t.v"), &[]);
    assert_eq!(run.json["complete"], Value::Bool(false));
    let complete = &checked(&run)["analysis"].children[0];
    assert_eq!(complete.child("error").expect("an error").get("type"), "incomplete");
}
