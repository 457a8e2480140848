//! The pages of the rules. Every page has the same parts, and its examples are scanned in both directions: the hazardous
//! one must yield the rule, the safe one must not.

use stillwire::rules::{Rule, page};

use crate::pipeline::scan;

/// The code block of a page with this word behind its language.
#[track_caller]
fn example(rule: Rule, word: &str) -> String {
    let page = page(rule);
    let fence = format!("```verilog {word}\n");
    let (_, rest) = page.split_once(&fence).unwrap_or_else(|| panic!("{}: no {word} example", rule.name()));
    let (code, rest) = rest.split_once("```").expect("the block is closed");
    assert!(!rest.contains(&fence), "{}: a second {word} example is not tested", rule.name());
    code.to_string()
}

/// The rules that a scan of this text yields.
fn rules_of(verilog: &str) -> Vec<String> {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("example.v");
    std::fs::write(&file, verilog).expect("the file is written");
    let scan = scan(&[&file], &[]);
    assert_eq!(scan.json["coverage"]["files"]["failed"], 0, "{}", scan.text);
    scan.findings().iter().filter_map(|finding| finding["rule"].as_str()).map(str::to_string).collect()
}

#[track_caller]
fn check(rule: Rule) {
    let hazardous = rules_of(&example(rule, "hazardous"));
    assert!(hazardous.iter().any(|found| found == rule.name()), "{}: found only {hazardous:?}", rule.name());
    let safe = rules_of(&example(rule, "safe"));
    assert!(safe.iter().all(|found| found != rule.name()), "{}: the safe example yields it", rule.name());
}

#[test]
fn every_page_has_the_same_parts() {
    for rule in Rule::ALL {
        let page = page(rule);
        assert!(page.starts_with(&format!("# {}\n", rule.name())));
        for part in
            ["**What.**", "**Why it matters.**", "## Hazardous", "## Safe", "## The cure", "## Source of the method"]
        {
            assert!(page.contains(part), "{}: no part {part}", rule.name());
        }
    }
}

macro_rules! pages {
    ($($name:ident $rule:ident)*) => {
        $(
            #[test]
            fn $name() {
                check(Rule::$rule);
            }
        )*
    };
}

pages! {
    combinational_loop CombinationalLoop
    reconvergent_inversion ReconvergentInversion
    set_reset_hazard SetResetHazard
    clock_hazard ClockHazard
    latch_enable_hazard LatchEnableHazard
    cover_unprotected CoverUnprotected
    set_reset_overlap SetResetOverlap
    reset_release ResetRelease
    signoff_invalid SignoffInvalid
    signoff_stale SignoffStale
    signoff_expired SignoffExpired
    assumption_contradicted AssumptionContradicted
    unsupported_construct UnsupportedConstruct
}
