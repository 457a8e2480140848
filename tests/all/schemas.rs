//! The published schemas of our formats: no word of the program may be missing in them, and every fixture's outputs keep
//! to them. What all the other tests produce is validated by `tests/outside/run`, see [`crate::outputs`].

use std::path::{Path, PathBuf};
use std::process::Command;

use serde_json::{Value, json};
use stillwire::graph::SourceKind;
use stillwire::hazard::{AssumptionKind, HazardKind, Method};
use stillwire::input::InputRole;
use stillwire::rules::{Ground, PinKind, Rule, Severity, Verdict};

use crate::outputs::{Outputs, outputs};
use crate::outside::data;
use crate::tree::Tree;

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

fn schema(name: &str) -> Value {
    let text = std::fs::read_to_string(root().join("docs").join(name)).expect("readable");
    serde_json::from_str(&text).expect("JSON")
}

#[test]
fn schema_of_the_findings_knows_every_word() {
    let schema = schema("findings.schema.json");
    let definitions = &schema["$defs"];
    assert_eq!(definitions["rule"]["enum"], json!(Rule::ALL.map(Rule::name)));
    let severities = [Severity::Error, Severity::Warning, Severity::Note].map(Severity::name);
    assert_eq!(definitions["severity"]["enum"], json!(severities));
    assert_eq!(definitions["pin"]["properties"]["kind"]["enum"], json!(PinKind::ALL.map(PinKind::name)));
    let kinds = [HazardKind::Static0, HazardKind::Static1, HazardKind::Dynamic].map(HazardKind::name);
    assert_eq!(definitions["hazard"]["properties"]["kind"]["enum"], json!(kinds));
    let verdicts = [Verdict::Proven, Verdict::Undecided].map(Verdict::name);
    assert_eq!(definitions["finding"]["properties"]["verdict"]["enum"], json!(verdicts));
    let assumptions = AssumptionKind::ALL.map(AssumptionKind::name);
    assert_eq!(definitions["assumption"]["properties"]["kind"]["enum"], json!(assumptions));
    let pins = definitions["coverage"]["properties"]["pins"]["properties"].as_object().expect("kinds of pins");
    let mut roles = PinKind::ALL.map(PinKind::name);
    roles.sort_unstable();
    assert_eq!(pins.keys().collect::<Vec<_>>(), roles);
}

#[test]
fn schema_of_the_evidence_knows_every_word() {
    let schema = schema("evidence.schema.json");
    assert_eq!(schema["$defs"]["net"]["properties"]["role"]["enum"], json!(PinKind::ALL.map(PinKind::name)));
    let role = &schema["properties"]["inputs"]["items"]["properties"]["role"];
    assert_eq!(role["enum"], json!(InputRole::ALL.map(InputRole::name)));
    let mut methods = grounds().map(Ground::name).to_vec();
    methods.sort_unstable();
    methods.dedup();
    let schema = &schema["$defs"]["net"]["properties"]["method"]["oneOf"][0]["enum"];
    let mut known: Vec<&str> = schema.as_array().expect("words").iter().filter_map(Value::as_str).collect();
    known.sort_unstable();
    assert_eq!(known, methods);
}

/// Everything that a clean net may rest on, as far as it has a word of its own. Whoever adds something to [`Ground`] or
/// [`Method`] is led here by the compiler.
fn grounds() -> [Ground; 9] {
    let decided = |changes: Method| match changes {
        Method::Structure | Method::Enumeration | Method::Solver | Method::Launches => {
            Ground::Decided { changes, launches: None, reachable: false, assuming: false, loops: false }
        }
    };
    let ground = |ground: Ground| match ground {
        Ground::Constant | Ground::Undriven | Ground::Source(_) | Ground::AssumedStatic | Ground::Decided { .. } => {
            ground
        }
    };
    [
        ground(Ground::Constant),
        Ground::Undriven,
        Ground::Source(SourceKind::Input),
        Ground::AssumedStatic,
        decided(Method::Structure),
        decided(Method::Enumeration),
        decided(Method::Solver),
        decided(Method::Launches),
        Ground::Decided { changes: Method::Structure, launches: None, reachable: true, assuming: false, loops: false },
    ]
}

/// The table of the README and the schema name the same methods.
#[test]
fn readme_explains_every_method() {
    let readme = std::fs::read_to_string(root().join("README.md")).expect("readable");
    let (_, table) = readme.split_once("| `method` |").expect("the table");
    let (table, _) = table.split_once("\n\n").expect("its end");
    for ground in grounds() {
        assert!(table.contains(&format!("`{}`", ground.name())), "{}\n{table}", ground.name());
    }
}

/// Everything is closed: a field that the program writes and the schema does not know is an error.
#[test]
fn no_object_of_fields_is_open() {
    fn closed(value: &Value, path: &str) {
        if let Some(object) = value.as_object() {
            if object.contains_key("properties") && object.contains_key("required") {
                assert_eq!(object.get("additionalProperties"), Some(&json!(false)), "{path}");
                let required = object["required"].as_array().expect("names").len();
                assert_eq!(required, object["properties"].as_object().expect("fields").len(), "{path}");
            }
            object.iter().for_each(|(key, value)| closed(value, &format!("{path}/{key}")));
        }
        if let Some(list) = value.as_array() {
            list.iter().for_each(|value| closed(value, path));
        }
    }
    for name in ["findings.schema.json", "evidence.schema.json"] {
        closed(&schema(name), name);
    }
}

/// Validates with the checker of `tests/schema`.
#[track_caller]
fn validate(schema: &Path, documents: &[Value]) {
    let folder = tempfile::tempdir().expect("a folder");
    for (index, document) in documents.iter().enumerate() {
        std::fs::write(folder.path().join(format!("{index}.json")), document.to_string()).expect("written");
    }
    let mut command = Command::new(root().join("tests/schema/target/debug/check-schema"));
    let output = command.arg(schema).arg(folder.path()).output().expect("it was built, see tests/outside/run");
    let said = String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{said}");
    assert!(said.contains(&format!("{} valid", documents.len())), "{said}");
}

#[track_caller]
fn validate_all(runs: &[Outputs]) {
    let of = |pick: fn(&Outputs) -> &Value| runs.iter().map(|run| pick(run).clone()).collect::<Vec<_>>();
    validate(&root().join("docs/findings.schema.json"), &of(|run| &run.json));
    validate(&root().join("docs/evidence.schema.json"), &of(|run| &run.evidence));
    validate(&data().join("sarif-schema-2.1.0.json"), &of(|run| &run.sarif));
}

/// The folders of fixtures, and each file of those that hold single designs.
fn fixtures() -> Vec<PathBuf> {
    let all = walkdir::WalkDir::new(root().join("fixtures")).sort_by_file_name().into_iter();
    let paths = all.map(|entry| entry.expect("readable").into_path());
    paths.filter(|path| path.is_dir() || path.extension().is_some_and(|end| end == "v" || end == "sv")).collect()
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn outputs_of_all_fixtures_are_valid() {
    use rayon::prelude::*;
    let runs: Vec<Outputs> = fixtures().par_iter().filter_map(|path| crate::outputs::try_outputs(path, &[])).collect();
    assert!(runs.len() > 100, "{} runs", runs.len());
    let has = |test: fn(&Outputs) -> bool| runs.iter().any(test);
    assert!(has(|run| run.exit == 0) && has(|run| run.exit == 1) && has(|run| run.exit == 3));
    validate_all(&runs);
}

/// What the fixtures may not have: suppressed by a comment and by the ledger, undecided, incomplete, places outside of
/// the folder with letters that a URI escapes.
#[test]
#[ignore = "outside: run tests/outside/run"]
fn outputs_of_every_standing_are_valid() {
    let text = "module t(input clk, s, a, b, d, output reg [2:0] q);
        wire known = s & a | ~s & b;
        wire signed_off = s & b | ~s & a; // stillwire: signoff set-reset-hazard \"held\" by Iva until 2999-01-01
        wire open;
        always @(posedge clk or negedge known) if (!known) q[0] <= 0; else q[0] <= d;
        always @(posedge clk or negedge signed_off) if (!signed_off) q[1] <= 0; else q[1] <= d;
        always @(posedge clk or negedge open) if (!open) q[2] <= 0; else q[2] <= d;
        wire \\odd\"<name = a ^ b; // stillwire: watch \"seen outside\"
        absent u(.i(s));
        endmodule\nmodule broken(\n";
    let tree = Tree::new(&[("a b/t ü.v", text)]);
    let ledger = tree.path("known.toml");
    let ledger = ledger.to_str().expect("UTF-8");
    let path = tree.path("a b");
    let before = outputs(&path, &[]);
    tree.ends(3, &["ledger", "write", "a b", "--ledger", ledger]);
    let after = outputs(&path, &["--ledger", ledger]);
    let results = after.sarif["runs"][0]["results"].as_array().expect("results").clone();
    let suppressed = |kind: &str| results.iter().any(|result| result["suppressions"][0]["kind"] == kind);
    assert!(suppressed("inSource") && suppressed("external"));
    assert!(results.iter().any(|result| result["kind"] == "open"));
    assert_eq!(after.sarif["runs"][0]["invocations"][0]["executionSuccessful"], false);
    validate_all(&[before, after]);
}
