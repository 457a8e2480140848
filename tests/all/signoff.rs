//! Sign-off comments: what is understood, what is refused, and which findings a comment covers.

use jiff::civil::{Date, date};
use stillwire::graph::{GateKind, Graph, GraphBuilder, InstanceId, NodeId, Site, SourceKind};
use stillwire::rules::{Finding, Rule, Severity, Verdict};
use stillwire::signoff::{self, Collected};
use stillwire::source::{FileId, SourceSet, Span};

fn collect(text: &str) -> Collected {
    let mut sources = SourceSet::default();
    sources.add("a.v", text);
    signoff::collect(&sources)
}

/// A comment that must be refused, with the word that its message must hold.
#[track_caller]
fn refused(text: &str, word: &str) {
    let collected = collect(text);
    assert!(collected.signoffs.is_empty() && collected.watches.is_empty(), "{text} took effect");
    let [diagnostic] = collected.diagnostics.as_slice() else {
        panic!("{text}: {} diagnostics", collected.diagnostics.len());
    };
    assert!(diagnostic.message.contains(word), "{text}: {}", diagnostic.message);
    assert!(diagnostic.at.is_some());
}

#[test]
fn a_full_comment_is_understood() {
    let collected = collect(
        "assign a = b; // stillwire: signoff clock-hazard, set-reset-hazard \"slow relay\" by A. Keeper until 2031-02-28\n",
    );
    assert!(collected.diagnostics.is_empty());
    let [pragma] = collected.signoffs.as_slice() else { panic!("one pragma") };
    assert_eq!(pragma.line, 1);
    assert_eq!(pragma.rules, [Rule::ClockHazard, Rule::SetResetHazard]);
    assert_eq!(pragma.signoff.reason, "slow relay");
    assert_eq!(pragma.signoff.by.as_deref(), Some("A. Keeper"));
    assert_eq!(pragma.signoff.until.as_deref(), Some("2031-02-28"));
    assert_eq!(pragma.until, Some(date(2031, 2, 28)));
}

#[test]
fn a_comment_alone_speaks_about_the_line_behind_it() {
    let text = "\n  // stillwire: signoff clock-hazard \"one\"\n  // stillwire: signoff latch-enable-hazard \"two\"\nassign a = b;\n";
    let lines: Vec<usize> = collect(text).signoffs.iter().map(|pragma| pragma.line).collect();
    assert_eq!(lines, [4, 4]);
    let watch = collect("// stillwire: watch \"still\"\nwire w;\n");
    assert_eq!(watch.watches[0].line, 2);
    assert_eq!(collect("wire w; // stillwire: watch \"still\"\n").watches[0].line, 1);
}

#[test]
fn what_is_misspelled_is_refused() {
    refused("// stillwire: signoff no-such-rule \"why\"", "no-such-rule");
    refused("// stillwire: signoff clock-hazard", "reason");
    refused("// stillwire: signoff clock-hazard \"  \"", "empty");
    refused("// stillwire: signoff clock-hazard \"why", "closing quote");
    refused("// stillwire: signoff \"why\"", "name of a rule");
    refused("// stillwire: signoff clock-hazard, \"why\"", "name of a rule");
    refused("// stillwire: signoff clock-hazard \"why\" until 2024-02-30", "2024-02-30");
    refused("// stillwire: signoff clock-hazard \"why\" until 24-2-3", "24-2-3");
    refused("// stillwire: signoff clock-hazard \"why\" until", "date");
    refused("// stillwire: signoff clock-hazard \"why\" by", "name");
    refused("// stillwire: signoff clock-hazard \"why\" soon", "soon");
    refused("// stillwire: signoff clock-hazard \"why\" until 2030-01-01 by me", "until");
    refused("// stillwire: signoff signoff-invalid \"why\"", "signoff-invalid");
    refused("// stillwire: watch", "reason");
    refused("// stillwire: watch net \"why\"", "nothing else");
    refused("// stillwire: ignore \"why\"", "ignore");
    refused("// stillwire:", "command");
    refused("// stillwire signoff clock-hazard \"why\"", "stillwire:");
    refused("// Stillwire: watch \"why\"", "stillwire:");
    refused("/* stillwire: signoff clock-hazard \"why\" */", "line comment");
}

#[test]
fn strings_block_comments_and_prose_say_nothing() {
    for text in [
        "initial s = \"// stillwire: signoff clock-hazard \\\"why\\\"\";",
        "/* disabled: // stillwire: signoff clock-hazard \"why\" */",
        "// stillwire is run before synthesis",
        "// see stillwire: signoff clock-hazard \"why\"",
        "wire \\// ;",
    ] {
        assert_eq!(collect(text), Collected::default(), "{text}");
    }
}

/// A design of one AND gate over two inputs in file 0, the net `y` declared on line 1 and driven on line 3, and one
/// finding about it.
fn scene(text: &str) -> (SourceSet, Graph, Finding) {
    let mut sources = SourceSet::default();
    let file = sources.add("a.v", text);
    let on_line = |line: usize| {
        let range = sources.file(file).line_range(line);
        Span { file, start: range.start as u32, end: range.end as u32 }
    };
    let mut builder = GraphBuilder::new();
    let top = builder.instance(None, "top", "top", None);
    let site = |span: Span| Site { instance: top, span: Some(span) };
    let a = input(&mut builder, top, on_line(2));
    let b = input(&mut builder, top, on_line(2));
    let y = builder.net(top, "y", on_line(1), vec![String::new()], true);
    let gate = builder.gate(GateKind::And, &[a, b], site(on_line(3)));
    let wire = builder.net_bits(y)[0];
    builder.drive(wire, gate);
    let finding = Finding {
        rule: Rule::ClockHazard,
        severity: Severity::Error,
        verdict: Verdict::Proven,
        message: "m".to_string(),
        at: Some(on_line(3)),
        declared: Some(on_line(1)),
        trace: Vec::new(),
        instance: "top".to_string(),
        net: "top.y".to_string(),
        bits: None,
        pin: None,
        hazards: Vec::new(),
        cover: None,
        loop_: None,
        notes: Vec::new(),
        fingerprint: String::new(),
        family: String::new(),
        signoff: None,
        known: false,
    };
    (sources, builder.freeze(), finding)
}

fn input(builder: &mut GraphBuilder, instance: InstanceId, span: Span) -> NodeId {
    builder.source(SourceKind::Input, Site { instance, span: Some(span) })
}

/// Whether the finding is signed off, and the rules of the findings that were added.
fn applied(text: &str, today: Date) -> (bool, Vec<Rule>) {
    let (sources, graph, finding) = scene(text);
    let mut findings = [finding];
    let pragmas = signoff::collect(&sources).signoffs;
    let added = signoff::apply(&signoff::analysed_files(&graph), &sources, &pragmas, &mut findings, today);
    (findings[0].signoff.is_some(), added.findings.iter().map(|finding| finding.rule).collect())
}

const TODAY: Date = date(2026, 6, 15);

#[test]
fn the_line_of_the_finding_and_of_the_declaration_count() {
    let own = "wire y;\n\nassign y = a & b; // stillwire: signoff clock-hazard \"why\"\n";
    assert_eq!(applied(own, TODAY), (true, vec![]));
    let declaration = "wire y; // stillwire: signoff clock-hazard \"why\"\n\nassign y = a & b;\n";
    assert_eq!(applied(declaration, TODAY), (true, vec![]));
    let before = "wire y;\n// stillwire: signoff clock-hazard \"why\"\nassign y = a & b;\n";
    assert_eq!(applied(before, TODAY), (true, vec![]));
}

#[test]
fn other_lines_and_other_rules_are_stale() {
    let elsewhere = "wire y;\n\nassign y = a & b;\nassign z = 0; // stillwire: signoff clock-hazard \"why\"\n";
    assert_eq!(applied(elsewhere, TODAY), (false, vec![Rule::SignoffStale]));
    let other = "wire y;\n\nassign y = a & b; // stillwire: signoff set-reset-hazard \"why\"\n";
    assert_eq!(applied(other, TODAY), (false, vec![Rule::SignoffStale]));
    let half = "wire y;\n\nassign y = a & b; // stillwire: signoff set-reset-hazard, clock-hazard \"why\"\n";
    assert_eq!(applied(half, TODAY), (true, vec![Rule::SignoffStale]));
}

#[test]
fn a_signoff_holds_through_its_last_day() {
    let text =
        |day: &str| format!("wire y;\n\nassign y = a & b; // stillwire: signoff clock-hazard \"why\" until {day}\n");
    assert_eq!(applied(&text("2026-06-15"), TODAY), (true, vec![]));
    assert_eq!(applied(&text("2026-06-14"), TODAY), (false, vec![Rule::SignoffExpired]));
}

#[test]
fn files_of_which_nothing_was_analysed_are_not_judged() {
    let (mut sources, graph, finding) = scene("wire y;\n\nassign y = a & b;\n");
    let other = sources.add("other.v", "assign q = 0; // stillwire: signoff clock-hazard \"why\"\n");
    assert_eq!(other, FileId::new(1));
    let pragmas = signoff::collect(&sources).signoffs;
    let added = signoff::apply(&signoff::analysed_files(&graph), &sources, &pragmas, &mut [finding], TODAY);
    assert!(added.findings.is_empty());
    assert_eq!(added.messages.len(), 1);
}

#[test]
fn a_watch_marks_the_nets_of_its_line_or_is_stale() {
    let (sources, graph, _) = scene("wire y; // stillwire: watch \"still\"\n\nassign y = a & b;\n");
    let (watches, findings) = signoff::watches(&graph, &sources, &signoff::collect(&sources).watches);
    assert_eq!((watches.len(), findings.len()), (1, 0));
    assert_eq!(graph.nets[watches[0].net.index()].name, "y");
    let (sources, graph, _) = scene("wire y;\n\nassign y = a & b; // stillwire: watch \"still\"\n");
    let (watches, findings) = signoff::watches(&graph, &sources, &signoff::collect(&sources).watches);
    assert_eq!((watches.len(), findings.len()), (0, 1));
    assert_eq!(findings[0].rule, Rule::SignoffStale);
}
