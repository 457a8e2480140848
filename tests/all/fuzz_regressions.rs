//! What the fuzzer of `benches/fuzz` found: each entry of `fixtures/fuzz/regressions` is an input, minimised, that once broke
//! something, a file or a folder named after what broke. Its seeds run here too. Every run must end by itself within the
//! promised time, and with a module behind it that cannot be parsed it must not be complete.

use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use serde_json::Value;

/// Seconds of processor time that one input may take.
const TIME: &str = "10";
/// Longer modules are refused, in bytes.
const LONGEST_MODULE: usize = 4 << 20;

fn entries(folder: &str) -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/fuzz").join(folder);
    let mut entries: Vec<PathBuf> =
        folder.read_dir().expect("the folder is there").map(|entry| entry.expect("readable").path()).collect();
    entries.sort();
    assert!(!entries.is_empty());
    entries
}

/// Runs the program within the limit of time.
fn stillwire(arguments: &[&str], path: &Path) -> Output {
    Command::new("sh")
        .args(["-c", &format!("ulimit -t {TIME}; exec \"$@\""), "sh", env!("CARGO_BIN_EXE_stillwire")])
        .args(arguments)
        .arg(path)
        .output()
        .expect("the program starts")
}

/// What a scan found, `null` where there was nothing to analyse, or how it failed.
fn scan(path: &Path) -> Result<Value, String> {
    let output = stillwire(&["scan", "--show", "note", "--write", "json:-"], path);
    let text = String::from_utf8_lossy(&output.stderr);
    match output.status.code() {
        Some(0..=3) if !text.contains("panicked") => {
            Ok(crate::outputs::kept("json", &output.stdout).unwrap_or_default())
        }
        _ => Err(format!("{}: {}: {}", path.display(), output.status, text.chars().take(1000).collect::<String>())),
    }
}

/// A copy of the input whose first file ends with a module that cannot be parsed.
fn with_broken_tail(path: &Path) -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let files = walkdir::WalkDir::new(path).sort_by_file_name().into_iter().map(|entry| entry.expect("readable"));
    for (index, file) in files.filter(|entry| entry.file_type().is_file()).enumerate() {
        let mut text = std::fs::read(file.path()).expect("readable");
        if index == 0 {
            text.extend(b"\n\nmodule broken_at_the_end(input a, output y); assign y = & ; endmodule\n");
        }
        std::fs::write(folder.path().join(file.file_name()), text).expect("written");
    }
    folder
}

#[test]
fn what_once_broke_ends_with_a_report() {
    let mut failures = Vec::new();
    for path in entries("regressions").into_iter().chain(entries("seeds")) {
        failures.extend(scan(&path).err());
        match scan(with_broken_tail(&path).path()) {
            Ok(json) if json["complete"] != true => {}
            Ok(_) => failures.push(format!("{}: complete in spite of a broken module", path.display())),
            Err(failure) => failures.push(failure),
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}

/// What is called complete flattens to a netlist that is read whole: every port and net has one name and one driver.
#[test]
fn what_is_complete_is_read_back() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let netlist = folder.path().join("netlist.v");
    let (mut failures, mut read_back) = (Vec::new(), 0);
    for path in entries("regressions").into_iter().chain(entries("seeds")) {
        if scan(&path).is_ok_and(|json| json["complete"] != true) {
            continue;
        }
        let text = String::from_utf8(stillwire(&["flatten"], &path).stdout).expect("text");
        if text.len() > LONGEST_MODULE {
            continue;
        }
        // The copies that wait for the gates are for simulators.
        std::fs::write(&netlist, text.replace("#0; ", "")).expect("written");
        read_back += 1;
        let json = scan(&netlist).unwrap_or_else(|failure| panic!("{failure}"));
        let findings = json["findings"].as_array().expect("findings");
        let unread = findings.iter().filter(|finding| finding["rule"] == "unsupported-construct");
        failures.extend(unread.map(|finding| format!("{}: {}", path.display(), finding["message"])));
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
    assert!(read_back > 0, "nothing was complete");
}
