//! The page `docs/constructs.md`: each construct of IEEE 1800-2017 with the fixture that exercises it, and each one that is
//! refused with the fixture that shows it. It is made from the lines `//! clause NUMBER WORDS` that open the fixtures, so
//! that it cannot tell of a construct that no test looks at. `STILLWIRE_UPDATE=1 cargo test construct_page` writes it.

use std::fmt::Write;
use std::path::{Path, PathBuf};

use crate::{constructs, pipeline};

/// One `//! clause` line.
struct Line {
    /// The numbers of the clause, for sorting.
    key: Vec<u32>,
    clause: String,
    words: String,
    file: PathBuf,
}

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

fn lines(file: &Path) -> Vec<Line> {
    let text = std::fs::read_to_string(file).expect("a fixture");
    let clauses = text.lines().filter_map(|line| line.strip_prefix("//! clause "));
    clauses
        .map(|rest| {
            let (clause, words) = rest.split_once(' ').unwrap_or_else(|| panic!("{}: no words", file.display()));
            let key: Vec<u32> = clause.split('.').map(|part| part.parse().expect("the number of a clause")).collect();
            Line { key, clause: clause.to_string(), words: words.trim().to_string(), file: file.to_path_buf() }
        })
        .collect()
}

fn refused() -> Vec<PathBuf> {
    let entries = std::fs::read_dir(root().join("fixtures/constructs/unsupported")).expect("the folder");
    let mut files: Vec<PathBuf> = entries.map(|entry| entry.expect("an entry").path()).collect();
    files.sort();
    files
}

fn sorted(files: &[PathBuf]) -> Vec<Line> {
    let mut all = Vec::new();
    for file in files {
        let own = lines(file);
        assert!(!own.is_empty(), "{} has no line `//! clause NUMBER WORDS`", file.display());
        all.extend(own);
    }
    all.sort_by(|a, b| (&a.key, &a.words, &a.file).cmp(&(&b.key, &b.words, &b.file)));
    all
}

fn link(file: &Path) -> String {
    let inside = file.strip_prefix(root()).expect("a file of the project");
    let name = file.file_name().expect("a name").to_string_lossy();
    format!("[{name}](../{})", inside.display())
}

fn page() -> String {
    let files: Vec<PathBuf> = constructs::fixtures().into_iter().map(|(file, _)| file).collect();
    let supported = sorted(&files);
    let mut text = String::from(
        "# Constructs\n\n\
         This page is made from the fixtures by `tests/all/construct_page.rs`; do not edit it.\n\n\
         Clauses are those of IEEE 1800-2017, named in our own words. Every fixture is elaborated whole by `cargo test`; \
         `tests/outside/run` simulates its flattened form beside the original, or, where the simulator cannot read the \
         original, beside the same function written by hand in plain Verilog (`fixtures/constructs/reference`).\n\n\
         | clause | construct | fixture | simulated beside |\n|---|---|---|---|\n",
    );
    for line in &supported {
        let stem = line.file.file_stem().expect("a name").to_string_lossy();
        let reference = root().join(format!("fixtures/constructs/reference/{stem}.v"));
        let beside = if reference.is_file() { link(&reference) } else { "itself".to_string() };
        let _ = writeln!(text, "| {} | {} | {} | {beside} |", line.clause, line.words, link(&line.file));
    }
    text.push_str(
        "\n## Refused\n\n\
         These are reported as `unsupported-construct` with their place, what depends on them is taken as unknown, and the \
         run is incomplete.\n\n| clause | construct | fixture |\n|---|---|---|\n",
    );
    for line in sorted(&refused()) {
        let _ = writeln!(text, "| {} | {} | {} |", line.clause, line.words, link(&line.file));
    }
    text
}

#[test]
fn the_page_is_made_from_the_fixtures() {
    let path = root().join("docs/constructs.md");
    let page = page();
    if std::env::var_os("STILLWIRE_UPDATE").is_some() {
        std::fs::create_dir_all(root().join("docs")).expect("the folder");
        std::fs::write(&path, &page).expect("written");
    }
    let written = std::fs::read_to_string(&path).unwrap_or_default();
    assert!(written == page, "docs/constructs.md is stale: run `STILLWIRE_UPDATE=1 cargo test construct_page`");
}

/// A construct that is refused is reported on the line that says so, and the run is no pass.
#[test]
fn what_is_refused_is_reported_where_it_stands() {
    let mut failures = Vec::new();
    for file in refused() {
        let text = std::fs::read_to_string(&file).expect("a fixture");
        let marked: Vec<u64> =
            (1u64..).zip(text.lines()).filter(|(_, line)| line.ends_with("//! refused")).map(|(at, _)| at).collect();
        let top = file.file_stem().expect("a name").to_string_lossy().into_owned();
        let scan = pipeline::scan(&[&file], &["--top", &top]);
        let found = scan.json["findings"].as_array().into_iter().flatten();
        let mut reported: Vec<u64> = found
            .filter(|finding| finding["rule"] == "unsupported-construct")
            .filter_map(|finding| finding["at"]["line"].as_u64())
            .collect();
        reported.sort_unstable();
        reported.dedup();
        let complete = scan.json["complete"] != false;
        if marked.is_empty() || complete || reported != marked {
            failures
                .push(format!("{top}: marked {marked:?}, reported {reported:?}, exit {}\n{}", scan.exit, scan.text));
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}
