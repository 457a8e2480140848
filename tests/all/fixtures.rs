//! The fixtures of `fixtures/rules`: Verilog with the expected findings in comments on their lines, matched both ways. A
//! missing finding fails, and so does an unexpected one.
//!
//! `//! expect RULE SEVERITY [KIND...]` on the line of the finding, several separated by commas. With kinds, the kinds of
//! hazard must be exactly these. That resets end at any moment (reset-release) is only judged where a fixture speaks of
//! it: nearly every small module takes its reset from an input. A file without expectations says `//! quiet because ...`; one whose run must be incomplete,
//! `//! incomplete because ...`.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

use crate::pipeline::{Scan, scan};

/// A finding as a fixture speaks about it.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug)]
struct Expected {
    line: usize,
    rule: String,
    severity: String,
    kinds: BTreeSet<String>,
}

fn expectations(text: &str) -> Vec<Expected> {
    let mut expected = Vec::new();
    for (index, line) in text.lines().enumerate() {
        let Some((_, all)) = line.split_once("//! expect ") else { continue };
        for one in all.split(',') {
            let mut words = one.split_whitespace().map(str::to_string);
            let (rule, severity) = (words.next().expect("a rule"), words.next().expect("a severity"));
            expected.push(Expected { line: index + 1, rule, severity, kinds: words.collect() });
        }
    }
    expected.sort();
    expected
}

fn found(scan: &Scan, with_kinds: &BTreeSet<(usize, String)>) -> Vec<Expected> {
    let text = |value: &serde_json::Value| value.as_str().unwrap_or_default().to_string();
    let mut found: Vec<Expected> = scan
        .findings()
        .iter()
        .map(|finding| {
            let line = finding["at"]["line"].as_u64().unwrap_or(0) as usize;
            let rule = text(&finding["rule"]);
            let hazards = finding["hazards"].as_array().map_or(&[][..], Vec::as_slice);
            let kinds = hazards.iter().map(|hazard| text(&hazard["kind"]));
            let kinds = if with_kinds.contains(&(line, rule.clone())) { kinds.collect() } else { BTreeSet::new() };
            Expected { line, rule, severity: text(&finding["severity"]), kinds }
        })
        .collect();
    found.sort();
    found
}

#[track_caller]
fn check(name: &str) {
    let path = folder().join(name);
    let text = std::fs::read_to_string(&path).expect("the fixture is readable");
    let expected = expectations(&text);
    let quiet = text.lines().any(|line| line.starts_with("//! quiet because "));
    assert_eq!(expected.is_empty(), quiet, "{name}: a fixture expects findings or says why it is quiet");
    let scan = scan(&[&path], &[]);
    let complete = !text.lines().any(|line| line.starts_with("//! incomplete because "));
    assert_eq!(scan.json["complete"], complete, "{name}: whether it is analysed completely:\n{}", scan.text);
    let with_kinds = expected.iter().filter(|one| !one.kinds.is_empty());
    let with_kinds = with_kinds.map(|one| (one.line, one.rule.clone())).collect();
    let mut found = found(&scan, &with_kinds);
    if !text.contains("reset-release") {
        found.retain(|one| one.rule != "reset-release");
    }
    assert_eq!(found, expected, "{name}: found (left) is not what is expected\n{}", scan.text);
}

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/rules")
}

macro_rules! fixtures {
    ($($name:ident)*) => {
        $(
            #[test]
            fn $name() {
                check(concat!(stringify!($name), ".v"));
            }
        )*

        /// A fixture that nobody runs would prove nothing.
        #[test]
        fn every_fixture_is_run() {
            let named: BTreeSet<String> = [$(concat!(stringify!($name), ".v")),*].map(str::to_string).into();
            let present = std::fs::read_dir(folder()).expect("the folder of fixtures");
            let present = present.map(|entry| entry.expect("an entry").file_name().to_string_lossy().into_owned());
            assert_eq!(present.collect::<BTreeSet<_>>(), named);
        }
    };
}

fixtures! {
    arithmetic
    clock
    clock_safe
    cover_protected
    cover_unprotected
    gates
    hierarchy
    joint_launch
    latch_enable
    latch_enable_safe
    latch_ring
    loops
    missing_module
    output_events
    reset_release
    reset_synchronised
    selection
    set_reset_direction
    set_reset_exclusive
    set_reset_overlap
    set_reset_safe
    undriven
    watched
}
