//! The SARIF output of whole runs: valid by the schema of OASIS, and saying the same as the JSON.

use std::path::{Path, PathBuf};
use std::process::Command;

use serde_json::Value;

use crate::outputs::outputs;

fn fixtures() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures")
}

/// A run's SARIF and findings.
#[track_caller]
fn scan(path: &Path, arguments: &[&str]) -> (Value, Value) {
    let run = outputs(path, arguments);
    (run.sarif, run.json)
}

fn list(value: &Value) -> &[Value] {
    value.as_array().map_or(&[], Vec::as_slice)
}

#[test]
fn sarif_says_what_the_json_says() {
    let (sarif, json) = scan(&fixtures().join("lock"), &[]);
    let run = &sarif["runs"][0];
    let results = list(&run["results"]);
    let findings = list(&json["findings"]);
    assert!(!findings.is_empty());
    assert_eq!(results.len(), findings.len());
    assert_eq!(run["invocations"][0]["executionSuccessful"], true);
    for (result, finding) in results.iter().zip(findings) {
        assert_eq!(result["ruleId"], finding["rule"]);
        let index = result["ruleIndex"].as_u64().expect("an index") as usize;
        assert_eq!(run["tool"]["driver"]["rules"][index]["id"], finding["rule"]);
        assert_eq!(result["level"], finding["severity"]);
        assert_eq!(result["partialFingerprints"]["fingerprint/v1"], finding["fingerprint"]);
        let region = &result["locations"][0]["physicalLocation"]["region"];
        assert_eq!(region["startLine"], finding["at"]["line"]);
        assert_eq!(region["endColumn"], finding["at"]["end_column"]);
        assert_eq!(result["locations"][0]["logicalLocations"][0]["fullyQualifiedName"], finding["net"]);
        assert_eq!(list(&result["suppressions"]).len(), usize::from(!finding["signoff"].is_null()));
    }
    // Two ways from `hand` to an OR gate, written as two terms.
    let gated = |result: &&Value| {
        result["locations"][0]["logicalLocations"][0]["fullyQualifiedName"] == "lock_top.u_pump.gated"
    };
    let flows = list(&results.iter().find(gated).expect("the demo has it")["codeFlows"]);
    assert_eq!(flows.len(), 2);
    for flow in flows {
        assert!(list(&flow["threadFlows"][0]["locations"]).len() >= 2, "{flow}");
    }
    let signed: Vec<&Value> = results.iter().filter(|result| !list(&result["suppressions"]).is_empty()).collect();
    assert!(!signed.is_empty());
    assert_eq!(signed[0]["suppressions"][0]["kind"], "inSource");
}

#[test]
fn undecided_is_open_and_incomplete_is_no_success() {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("t.v");
    let text = "module t(input d, output reg q); wire c; always @(posedge c) q <= d; endmodule\n";
    std::fs::write(&file, text).expect("written");
    let (sarif, _) = scan(&file, &[]);
    let run = &sarif["runs"][0];
    assert_eq!(run["invocations"][0]["executionSuccessful"], false);
    let open: Vec<&Value> = list(&run["results"]).iter().filter(|result| result["kind"] == "open").collect();
    assert_eq!(open.len(), 1);
    assert_eq!(open[0]["level"], "none");
    assert!(!list(&run["invocations"][0]["toolExecutionNotifications"]).is_empty());
}

#[test]
fn known_findings_are_suppressed_from_outside() {
    let folder = tempfile::tempdir().expect("a folder");
    let ledger = folder.path().join("known.toml");
    let lock = fixtures().join("lock");
    let status = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .args(["ledger", "write"])
        .arg(&lock)
        .arg("--ledger")
        .arg(&ledger)
        .status();
    assert!(status.expect("the program starts").success());
    let (sarif, _) = scan(&lock, &["--ledger", &ledger.to_string_lossy()]);
    for result in list(&sarif["runs"][0]["results"]) {
        let suppression = &result["suppressions"][0];
        assert!(suppression["justification"].as_str().is_some_and(|text| !text.is_empty()), "{result}");
        assert_eq!(suppression["status"], "accepted");
    }
}
