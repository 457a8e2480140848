//! Rules about our own sources that no compiler checks.

use std::path::Path;

use walkdir::WalkDir;

/// A file that does not say why it exists is read wrongly by the next person who changes it.
#[test]
fn every_source_file_opens_with_what_it_owns() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut seen = 0;
    for folder in ["src", "tests", "benches"].map(|name| root.join(name)).iter().filter(|folder| folder.exists()) {
        let ours = WalkDir::new(folder).into_iter().filter_entry(|entry| entry.file_name() != "target");
        for entry in ours.filter_map(Result::ok) {
            if entry.path().extension().is_some_and(|extension| extension == "rs") {
                let text = std::fs::read_to_string(entry.path()).expect("a source file is readable");
                assert!(text.starts_with("//! "), "{} does not open with `//!`", entry.path().display());
                seen += 1;
            }
        }
    }
    assert!(seen > 30, "only {seen} files were looked at");
}
