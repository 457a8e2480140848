//! The catalogue of trade constructs in `fixtures/catalogue`: each file is one construct, written dangerously in a module
//! `NAME_dangerous` and safely in `NAME_safe`. What is dangerous must be found by the right rule with the right kinds and
//! causes, what is safe must be quiet; both ways, so that nothing else may be found either. The expectations were derived
//! on paper from the semantics before the engine existed.
//!
//! `//! expect RULE SEVERITY [KIND[/CAUSE]...]` on the line of the finding, as in [`crate::fixtures`]; without kinds or a
//! cause these stay open. A safe module says `//! quiet because ...`; it may expect notes, which do not fail a run. Notes
//! that no fixture expects are not matched.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt::Write;
use std::path::{Path, PathBuf};

use serde_json::Value;

use crate::pipeline::{Scan, scan};

/// A finding as a fixture speaks about it; the kinds with their causes.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Expected {
    pub rule: String,
    pub severity: String,
    pub kinds: BTreeMap<String, Option<String>>,
}

/// A module of a fixture.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Module {
    pub name: String,
    /// Whether it declares a signal as static.
    pub is_static: bool,
    quiet: Option<String>,
    /// By line.
    pub expected: Vec<(usize, Expected)>,
}

impl Module {
    /// Whether it is about a loop of gates.
    pub fn has_loop(&self) -> bool {
        self.expected.iter().any(|(_, expected)| expected.rule == "combinational-loop")
    }
}

/// A file of the catalogue.
pub struct Construct {
    pub name: String,
    /// The comment at its top.
    about: String,
    pub modules: Vec<Module>,
}

pub fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/catalogue")
}

fn expectation(text: &str) -> Expected {
    let mut words = text.split_whitespace().map(str::to_string);
    let (rule, severity) = (words.next().expect("a rule"), words.next().expect("a severity"));
    let kinds = words.map(|kind| match kind.split_once('/') {
        Some((kind, cause)) => (kind.to_string(), Some(cause.to_string())),
        None => (kind, None),
    });
    Expected { rule, severity, kinds: kinds.collect() }
}

fn parse(name: &str, text: &str) -> Construct {
    let about = text.lines().map_while(|line| line.strip_prefix("// ")).collect::<Vec<_>>().join(" ");
    let mut modules: Vec<Module> = Vec::new();
    for (index, line) in text.lines().enumerate() {
        let number = index + 1;
        if let Some(rest) = line.strip_prefix("module ") {
            let name = rest.split([' ', '(']).next().unwrap_or_default().to_string();
            modules.push(Module { name, is_static: false, quiet: None, expected: Vec::new() });
        }
        let Some(module) = modules.last_mut() else { continue };
        module.is_static |= line.contains("// stillwire: static ");
        if let Some((_, reason)) = line.split_once("//! quiet because ") {
            module.quiet = Some(reason.to_string());
        }
        if let Some((_, all)) = line.split_once("//! expect ") {
            module.expected.extend(all.split(',').map(|one| (number, expectation(one))));
        }
    }
    Construct { name: name.to_string(), about, modules }
}

/// Every construct, by name.
pub fn constructs() -> Vec<Construct> {
    let entries = std::fs::read_dir(folder()).expect("the folder of the catalogue");
    let paths = entries.map(|entry| entry.expect("an entry").path());
    let sources = paths.filter(|path| path.extension().is_some_and(|extension| extension == "v"));
    let mut all: Vec<Construct> = sources
        .map(|path| {
            let name = path.file_stem().expect("a name").to_string_lossy().into_owned();
            parse(&name, &std::fs::read_to_string(&path).expect("the fixture is readable"))
        })
        .collect();
    all.sort_by(|a, b| a.name.cmp(&b.name));
    all
}

impl Construct {
    fn dangerous(&self) -> &Module {
        &self.modules[0]
    }

    fn safe(&self) -> &Module {
        &self.modules[1]
    }
}

fn word<'a>(value: &'a Value, field: &str) -> &'a str {
    value[field].as_str().unwrap_or_default()
}

/// Whether the finding is what is expected here.
fn fits(expected: &Expected, finding: &Value) -> bool {
    let none = Vec::new();
    let hazards = finding["hazards"].as_array().unwrap_or(&none);
    let kinds: BTreeSet<&str> = hazards.iter().map(|hazard| word(hazard, "kind")).collect();
    let named: BTreeSet<&str> = expected.kinds.keys().map(String::as_str).collect();
    let causes = hazards.iter().all(|hazard| match expected.kinds.get(word(hazard, "kind")) {
        Some(Some(cause)) => cause == word(hazard, "cause"),
        _ => true,
    });
    word(finding, "rule") == expected.rule
        && word(finding, "severity") == expected.severity
        && (named.is_empty() || named == kinds && causes)
}

/// What differs between a construct's expectations and the findings of a scan.
fn differences(construct: &Construct, scan: &Scan) -> Vec<String> {
    let line = |finding: &Value| finding["at"]["line"].as_u64().unwrap_or(0) as usize;
    let mut open: Vec<&Value> = scan.findings().iter().collect();
    let mut differences = Vec::new();
    for module in &construct.modules {
        for (number, expected) in &module.expected {
            match open.iter().position(|finding| line(finding) == *number && fits(expected, finding)) {
                Some(found) => {
                    open.remove(found);
                }
                None => differences.push(format!("line {number}: missing {expected:?}")),
            }
        }
    }
    for finding in open.iter().filter(|finding| word(finding, "severity") != "note") {
        let kinds: Vec<String> = finding["hazards"]
            .as_array()
            .map_or(&[][..], Vec::as_slice)
            .iter()
            .map(|hazard| format!("{}/{} {}", word(hazard, "kind"), word(hazard, "cause"), hazard["changes"]))
            .collect();
        let (rule, severity, verdict) = (word(finding, "rule"), word(finding, "severity"), word(finding, "verdict"));
        differences.push(format!("line {}: unexpected {verdict} {rule} {severity} {kinds:?}", line(finding)));
    }
    if scan.json["complete"] != true {
        differences.push("the analysis is not complete".to_string());
    }
    differences
}

/// The page that lists the catalogue.
fn index(constructs: &[Construct]) -> String {
    let mut text = String::from(
        "# Catalogue of trade constructs\n\n\
         Each file shows one construct twice: a module that is dangerous, with the finding it must give, and one that is\n\
         safe, with the reason why it is quiet. `cargo test catalogue` scans them all, and writes this page when\n\
         `CATALOGUE_UPDATE` is set.\n\n",
    );
    for construct in constructs {
        let (dangerous, safe) = (construct.dangerous(), construct.safe());
        let _ = writeln!(text, "## [{0}]({0}.v)\n\n{1}\n", construct.name, construct.about);
        for (_, expected) in &dangerous.expected {
            let kinds: Vec<String> = (expected.kinds.iter())
                .map(|(kind, cause)| match cause {
                    Some(cause) => format!("{kind} ({cause} hazard)"),
                    None => kind.clone(),
                })
                .collect();
            let kinds = if kinds.is_empty() { String::new() } else { format!(": {}", kinds.join(", ")) };
            let _ = writeln!(text, "- Dangerous: `{}`, {}{kinds}", expected.rule, expected.severity);
        }
        let _ = writeln!(text, "- Safe: quiet because {}\n", safe.quiet.as_deref().unwrap_or_default());
    }
    text.truncate(text.trim_end().len());
    text.push('\n');
    text
}

/// At least 40 constructs, each with both sides, and every side says what is expected of it.
#[test]
fn each_construct_has_a_dangerous_and_a_safe_side() {
    let all = constructs();
    assert!(all.len() >= 40, "{} constructs", all.len());
    for construct in &all {
        let names: Vec<&str> = construct.modules.iter().map(|module| module.name.as_str()).collect();
        let name = &construct.name;
        assert_eq!(names, [format!("{name}_dangerous"), format!("{name}_safe")], "{name}: its modules");
        assert!(construct.about.len() > 40, "{name}: says what the construct is");
        let dangerous = construct.dangerous();
        assert!(dangerous.quiet.is_none(), "{name}: a dangerous module is not quiet");
        let fails = |(_, expected): &(usize, Expected)| expected.severity != "note";
        assert!(dangerous.expected.iter().any(fails), "{name}: the dangerous module expects a finding");
        let safe = construct.safe();
        assert!(safe.quiet.as_ref().is_some_and(|reason| reason.len() > 20), "{name}: says why it is quiet");
        assert!(!safe.expected.iter().any(fails), "{name}: the safe module expects no more than notes");
    }
}

#[test]
fn each_construct_is_found_as_expected() {
    let mut wrong = String::new();
    for construct in constructs() {
        let path = folder().join(format!("{}.v", construct.name));
        let scan = scan(&[&path], &[]);
        let differences = differences(&construct, &scan);
        if !differences.is_empty() {
            let _ = writeln!(wrong, "{}:\n  {}", construct.name, differences.join("\n  "));
        }
    }
    assert!(wrong.is_empty(), "{wrong}");
}

#[test]
fn the_index_lists_every_construct() {
    let page = folder().join("README.md");
    let wanted = index(&constructs());
    if std::env::var_os("CATALOGUE_UPDATE").is_some() {
        std::fs::write(&page, &wanted).expect("the page is written");
    }
    let present = std::fs::read_to_string(&page).unwrap_or_default();
    assert!(present == wanted, "fixtures/catalogue/README.md is out of date: run the test with CATALOGUE_UPDATE=1");
}
