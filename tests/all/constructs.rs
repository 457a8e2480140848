//! Every construct that has a fixture in `fixtures/constructs` is elaborated whole: nothing unsupported, nothing opaque,
//! nothing left out. That it is elaborated *rightly* is checked from outside, by [`crate::simulator`].

use std::path::{Path, PathBuf};

use crate::pipeline;

/// The fixtures, each with the name of its top.
pub fn fixtures() -> Vec<(PathBuf, String)> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/constructs");
    let entries = std::fs::read_dir(folder).expect("the folder");
    let mut files: Vec<PathBuf> = entries.map(|entry| entry.expect("an entry").path()).collect();
    files.retain(|file| file.is_file());
    files.sort();
    assert!(files.len() >= 50, "only {} constructs", files.len());
    files
        .into_iter()
        .map(|file| {
            let top = file.file_stem().expect("a name").to_string_lossy().into_owned();
            (file, top)
        })
        .collect()
}

#[test]
fn every_construct_is_understood_whole() {
    let mut failures = Vec::new();
    for (file, top) in fixtures() {
        let scan = pipeline::scan(&[&file], &["--top", &top]);
        let coverage = &scan.json["coverage"];
        let nothing = |list: &str| coverage[list].as_array().is_some_and(Vec::is_empty);
        let whole = scan.json["complete"] == true
            && nothing("unsupported")
            && nothing("black_boxes")
            && coverage["modules"]["failed"] == 0
            && coverage["modules"]["elaborated"].as_u64().is_some_and(|count| count > 0);
        if !whole {
            failures.push(format!("{top}: exit {}\n{}", scan.exit, scan.text));
        }
    }
    assert!(failures.is_empty(), "{} constructs:\n{}", failures.len(), failures.join("\n"));
}
