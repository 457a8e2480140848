//! The list of checked nets: each sensitive net once per role, its state, and what a clean one rests on. The designs are
//! so small that the ground of each verdict can be told by hand.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use stillwire::rules::{NetState, PinKind};
use stillwire::source;
use stillwire::{Request, Scan};

/// A request to the library for these paths and nothing else.
pub fn request(paths: Vec<PathBuf>, threads: usize) -> Request {
    Request {
        source: source::Request { paths, ..source::Request::default() },
        tops: Vec::new(),
        given: Vec::new(),
        libraries: Vec::new(),
        cells: Vec::new(),
        assumptions: Vec::new(),
        severities: BTreeMap::new(),
        today: jiff::civil::date(2026, 1, 1),
        drawn: false,
        threads,
    }
}

/// Scans through the library.
#[track_caller]
pub fn library_scan(path: &Path, threads: usize) -> Scan {
    let request = request(vec![path.to_path_buf()], threads);
    stillwire::scan(&request, &|_| None, &|_| {}).unwrap_or_else(|error| panic!("{error}"))
}

/// Role, net and ground (or state) of all nets but clocks and outputs.
#[track_caller]
fn controls(text: &str) -> Vec<(PinKind, String, String)> {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("t.v");
    std::fs::write(&file, text).expect("written");
    let nets = library_scan(&file, 1).report.checked.into_iter();
    let others = nets.filter(|net| !matches!(net.pin.kind, PinKind::Clock | PinKind::Output));
    let said = others.map(|net| {
        assert!(net.at.is_some(), "{} has no place", net.net);
        let ground = match &net.state {
            NetState::Clean(ground) => ground.name().to_string(),
            other => other.name().to_string(),
        };
        (net.pin.kind, net.net, ground)
    });
    said.collect()
}

/// The ground of the reset `r` of one flip-flop; `body` declares and drives it.
#[track_caller]
fn ground_of_reset(ports: &str, body: &str) -> String {
    let text = format!(
        "module t(input clk, d, {ports} output reg q);\n{body}\nalways @(posedge clk or posedge r) if (r) q <= 1'b0; \
         else q <= d;\nendmodule\n"
    );
    let found = controls(&text);
    let reset = found.into_iter().find(|(_, net, _)| net == "t.r");
    reset.unwrap_or_else(|| panic!("no reset in\n{text}")).2
}

#[test]
fn nets_without_logic_are_clean_by_what_they_are() {
    assert_eq!(ground_of_reset("input r,", ""), "source");
    assert_eq!(ground_of_reset("", "reg r; always @(posedge clk) r <= d;"), "source");
    assert_eq!(ground_of_reset("", "wire r = 1'b0;"), "constant");
    assert_eq!(ground_of_reset("", "wire r;"), "undecided");
}

#[test]
fn what_is_declared_static_is_clean_by_that_declaration() {
    let body = "wire r /* */ ; // stillwire: static \"strapped on the board\"\nassign r = a & ~b | ~a & b;";
    assert_eq!(ground_of_reset("input a, b,", body), "assumed-static");
}

/// One inversion on one way is no reconvergence.
#[test]
fn structure_alone_settles_what_has_no_opposite_ways() {
    assert_eq!(ground_of_reset("input a, b,", "wire r = a & ~b;"), "structure");
}

/// The bridging term holds the net, which no structure tells; more sources than are enumerated are left to the solver.
#[test]
fn covered_selector_needs_a_proof() {
    let selector = "(s & a) | (~s & b) | (a & b)";
    assert_eq!(ground_of_reset("input s, a, b,", &format!("wire r = {selector};")), "solver");
    let wide = format!("wire r = {selector} | (&w);");
    assert_eq!(ground_of_reset("input s, a, b, input [19:0] w,", &wide), "solver");
}

/// While `a` and `b` are both 1, which is what the hazard needs, `s` keeps its value at every clock edge.
#[test]
fn change_that_never_happens_is_ruled_out_by_launches() {
    let body = "reg s; always @(posedge clk) if (!(a & b)) s <= d;\nwire r = (s & a) | (~s & b);";
    assert_eq!(ground_of_reset("input a, b,", body), "launches");
}

/// From its reset the ring never has two ones, which the hazard needs.
#[test]
fn state_that_is_never_reached_is_named_as_the_ground() {
    let body = "reg p, n;\nalways @(posedge clk or posedge clear) if (clear) begin p <= 1'b1; n <= 1'b0; end\n\
                else begin p <= n; n <= p; end\nwire r = (s & p) | (~s & n);";
    assert_eq!(ground_of_reset("input s, clear,", body), "reachable-states");
}

#[test]
fn net_with_two_roles_is_listed_in_each() {
    let text = "module t(input clk, d, s, a, b, output reg q, l);\nwire r = (s & a) | (~s & b);\n\
                always @(posedge clk or posedge r) if (r) q <= 1'b0; else q <= d;\n\
                always @* if (r) l = d;\nendmodule\n";
    let listed = |kind| (kind, "t.r".to_string(), "hazard".to_string());
    assert_eq!(controls(text), [listed(PinKind::Reset), listed(PinKind::LatchEnable)]);
}

/// Each finding on a net finds its net in the list, so that formats which go by nets lose none.
#[test]
fn findings_on_nets_are_about_listed_nets() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures");
    let mut met: BTreeSet<&str> = BTreeSet::new();
    for folder in ["lock", "rules", "catalogue"] {
        let report = library_scan(&root.join(folder), 1).report;
        for finding in report.findings.iter().filter(|finding| finding.pin.is_some()) {
            met.insert(finding.rule.name());
            let about = |net: &&stillwire::rules::CheckedNet| net.is_subject_of(finding);
            assert!(report.checked.iter().any(|net| about(&net)), "{}: {}", finding.rule.name(), finding.net);
        }
        for net in report.checked.iter().filter(|net| net.state == NetState::Hazard) {
            let about = report.findings.iter().any(|finding| net.is_subject_of(finding) && !finding.hazards.is_empty());
            assert!(about, "{} has a hazard and no finding", net.net);
        }
    }
    let wanted = ["clock-hazard", "latch-enable-hazard", "reconvergent-inversion", "set-reset-hazard"];
    assert!(wanted.iter().all(|rule| met.contains(rule)), "{met:?}");
}
