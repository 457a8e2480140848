//! What the fuzzer of `benches/fuzz` found: each entry of `fixtures/fuzz/regressions` is an input, minimised, that once broke
//! something, a file or a folder named after what broke. Its seeds run here too. Every run must end by itself within the
//! promised time, and with a module behind it that cannot be parsed it must not be complete.

use std::path::{Path, PathBuf};
use std::process::Command;

/// Seconds of processor time that one input may take.
const TIME: &str = "10";

fn entries(folder: &str) -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/fuzz").join(folder);
    let mut entries: Vec<PathBuf> =
        folder.read_dir().expect("the folder is there").map(|entry| entry.expect("readable").path()).collect();
    entries.sort();
    assert!(!entries.is_empty());
    entries
}

/// Whether a scan was complete, or how it failed. Where nothing was found to analyse it was not.
fn run(path: &Path) -> Result<bool, String> {
    let output = Command::new("sh")
        .args(["-c", &format!("ulimit -t {TIME}; exec \"$@\""), "sh", env!("CARGO_BIN_EXE_stillwire"), "scan"])
        .arg(path)
        .args(["--show", "note", "--write", "json:-"])
        .output()
        .expect("the program starts");
    let text = String::from_utf8_lossy(&output.stderr);
    match output.status.code() {
        Some(0..=3) if !text.contains("panicked") => {
            let json = crate::outputs::kept("json", &output.stdout);
            Ok(json.is_ok_and(|json| json["complete"] == true))
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
        failures.extend(run(&path).err());
        match run(with_broken_tail(&path).path()) {
            Ok(false) => {}
            Ok(true) => failures.push(format!("{}: complete in spite of a broken module", path.display())),
            Err(failure) => failures.push(failure),
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}
