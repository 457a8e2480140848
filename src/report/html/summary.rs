//! The top of the page: whether the run passes, what was checked, and everything that was not; then the controls of the
//! filter, whose choices are those that occur.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt::Write;

use super::super::summary::{CAUTION, known, number, result};
use super::super::{Message, Report};
use super::{Group, coded, escaped, state};
use crate::assumptions::Origin;
use crate::rules::{self, NetCount, PinKind, Rule, Severity};
use crate::source::{SourceSet, Span};

/// The header of the page.
pub(super) fn render(report: &Report, sources: &SourceSet, gate: Severity) -> String {
    let mut page = String::from("<header>\n");
    let tops = match report.tops.as_slice() {
        [] => "no top module".to_string(),
        tops => tops.join(", "),
    };
    let _ = writeln!(
        page,
        "<h1><span class=\"product\">Stillwire</span> {}</h1>\n<p class=\"what\">Wires that must hold still and can \
         glitch, before synthesis. Version {}.</p>",
        escaped(&tops),
        env!("CARGO_PKG_VERSION")
    );
    let verdict = match (report.fails(gate), report.complete()) {
        (true, _) => "fails",
        (false, false) => "incomplete",
        (false, true) => "passes",
    };
    let _ = writeln!(page, "<p id=\"result\" class=\"{verdict}\">{}</p>", coded(&result(report, gate)));
    page.push_str("</header>\n<section id=\"summary\" aria-label=\"summary\">\n");
    findings(report, &mut page);
    pins(report, &mut page);
    read(report, sources, &mut page);
    messages(&report.messages, sources, &mut page);
    let _ = writeln!(page, "<p class=\"caution\">{CAUTION}</p>\n</section>");
    page
}

/// How many findings there are, by severity and by what became of them.
fn findings(report: &Report, page: &mut String) {
    page.push_str(
        "<table class=\"counts\"><caption>Findings</caption>\n<tr><th scope=\"col\">severity</th><th \
         scope=\"col\">open</th><th scope=\"col\">signed off</th><th scope=\"col\">in the ledger</th></tr>\n",
    );
    for severity in [Severity::Error, Severity::Warning, Severity::Note] {
        let count = |wanted: &str| {
            report.findings.iter().filter(|one| one.severity == severity && state(one) == wanted).count()
        };
        let _ = writeln!(
            page,
            "<tr><th scope=\"row\">{}</th><td>{}</td><td>{}</td><td>{}</td></tr>",
            severity.name(),
            count("open"),
            count("signed-off"),
            count("known")
        );
    }
    page.push_str("</table>\n");
}

fn pins(report: &Report, page: &mut String) {
    let pins = &report.coverage.pins;
    page.push_str("<div><table class=\"counts\"><caption>Nets checked</caption>\n");
    if pins.total().nets == 0 {
        page.push_str(
            "<tr><td>none; there are no clocks, asynchronous pins, latch enables, watched nets or \
                       outputs</td></tr></table></div>\n",
        );
        return;
    }
    page.push_str(
        "<tr><th scope=\"col\">kind</th><th scope=\"col\">all</th><th scope=\"col\">clean</th><th \
         scope=\"col\">hazard</th><th scope=\"col\">undecided</th></tr>\n",
    );
    let mut row = |name: &str, count: NetCount| {
        let _ = writeln!(
            page,
            "<tr><th scope=\"row\">{name}</th><td>{}</td><td>{}</td><td>{}</td><td>{}</td></tr>",
            count.nets, count.clean, count.hazard, count.undecided
        );
    };
    for kind in PinKind::ALL.into_iter().filter(|&kind| pins.get(kind).nets > 0) {
        row(kind.name(), pins.get(kind));
    }
    row("together", pins.total());
    page.push_str("</table>\n<p>Asked of each: whether a change of one signal, or an edge with all that it launches, can glitch it");
    page.push_str(if pins.get(PinKind::Output).nets > 0 {
        "; of outputs: one signal, where some event makes the change."
    } else {
        "."
    });
    if pins.clean_if_reached > 0 {
        let _ = write!(page, " Of the clean, only in the states reachable from reset: {}.", pins.clean_if_reached);
    }
    page.push_str("</p></div>\n");
}

/// What was read and what was not.
fn read(report: &Report, sources: &SourceSet, page: &mut String) {
    let coverage = &report.coverage;
    page.push_str("<div class=\"read\"><h2>Read, and not read</h2>\n<ul>\n");
    let mut item = |text: &str| {
        let _ = writeln!(page, "<li>{}</li>", escaped(text));
    };
    item(&format!("{} read, {} failed", number(coverage.files_read, "file"), coverage.files_failed));
    item(&format!("{} elaborated, {} failed", number(coverage.modules_elaborated, "module"), coverage.modules_failed));
    item(&format!(
        "{} stored in flip-flops, {} in latches",
        number(coverage.cells.flip_flops, "bit"),
        coverage.cells.latches
    ));
    if coverage.loops > 0 {
        item(&format!("{} found", number(coverage.loops, "combinational loop")));
    }
    if coverage.incomplete {
        item("part of the input was lost; the messages below say what");
    }
    if let Some(ledger) = &report.ledger {
        item(known(ledger).trim());
    }
    let place = |at: Option<Span>| at.map_or(String::new(), |at| where_(at, sources));
    let unsupported = coverage.unsupported.iter().map(|(what, at)| format!("{what} {}", place(*at)));
    list("unsupported constructs", unsupported.collect(), page);
    let counted = |of: &BTreeMap<String, usize>| of.iter().map(|(name, count)| format!("{name} ({count}x)")).collect();
    list("black boxes, outputs taken as clean and free", counted(&coverage.black_boxes), page);
    list("cells from libraries and settings", counted(&coverage.modelled_cells), page);
    list("benches left out", coverage.left_out.benches.clone(), page);
    list("memories too large to flatten", coverage.left_out.opaque_memories.clone(), page);
    list("for simulation only, left out", counted(&coverage.left_out.skipped), page);
    let regions = coverage.left_out.regions.iter().map(|&at| where_(at, sources)).collect();
    list("translate_off regions left out", regions, page);
    let assumptions = coverage.assumptions.iter().map(|one| {
        let origin = match &one.origin {
            Origin::Comment(at) => where_(*at, sources),
            Origin::Settings { file, line } => format!("{file}:{line}"),
        };
        format!("{} {}; {}; \"{}\" ({origin})", one.kind.name(), one.nets.join(", "), one.why(), one.reason)
    });
    list("assumptions", assumptions.collect(), page);
    let severities = coverage.severities.iter().map(|(rule, severity)| format!("{} {}", rule.name(), severity.name()));
    list("severities fixed by the settings", severities.collect(), page);
    page.push_str("</ul></div>\n");
}

fn where_(at: Span, sources: &SourceSet) -> String {
    let position = sources.position(at);
    format!("{}:{}", position.file, position.line)
}

/// An item that unfolds.
fn list(what: &str, all: Vec<String>, page: &mut String) {
    if all.is_empty() {
        return;
    }
    let _ = write!(page, "<li><details><summary>{what}: {}</summary><ul>", all.len());
    for one in all {
        let _ = write!(page, "<li>{}</li>", escaped(&one));
    }
    page.push_str("</ul></details></li>\n");
}

/// What the front end says beside the findings.
fn messages(messages: &[Message], sources: &SourceSet, page: &mut String) {
    if messages.is_empty() {
        return;
    }
    let worst = messages.iter().map(|message| message.severity).max().unwrap_or(Severity::Note);
    let open = if worst > Severity::Note { " open" } else { "" };
    let _ = writeln!(
        page,
        "<details class=\"messages\"{open}><summary>{} of the reader</summary><ul>",
        number(messages.len(), "message")
    );
    for message in messages {
        let place = message.at.map_or(String::new(), |at| format!(" ({})", where_(at, sources)));
        let help = message.help.as_ref().map_or(String::new(), |help| format!("; {}", coded(help)));
        let _ = writeln!(
            page,
            "<li><span class=\"badge {0}\">{0}</span> {1}{2}{help}</li>",
            message.severity.name(),
            coded(&message.text),
            escaped(&place)
        );
    }
    page.push_str("</ul></details>\n");
}

/// The filter and the switches. They do nothing without the script, which shows them.
pub(super) fn controls(groups: &[Group<'_>]) -> String {
    let mut rules: BTreeMap<&str, usize> = BTreeMap::new();
    let mut modules: BTreeMap<&str, usize> = BTreeMap::new();
    let mut severities: BTreeMap<&str, usize> = BTreeMap::new();
    let mut verdicts: BTreeMap<&str, usize> = BTreeMap::new();
    let mut states: BTreeMap<&str, usize> = BTreeMap::new();
    for (finding, exhibit) in groups.iter().flatten() {
        *rules.entry(finding.rule.name()).or_default() += 1;
        *modules.entry(&exhibit.module).or_default() += 1;
        *severities.entry(finding.severity.name()).or_default() += 1;
        *verdicts.entry(finding.verdict.name()).or_default() += 1;
        *states.entry(state(finding)).or_default() += 1;
    }
    let mut page = String::from(
        "<form id=\"controls\" role=\"search\" aria-label=\"filter\" hidden>\n<label class=\"text\">Filter <input \
         id=\"text\" type=\"search\" placeholder=\"net, message, file, fingerprint\" aria-keyshortcuts=\"/\" \
         autocomplete=\"off\" spellcheck=\"false\"></label>\n",
    );
    select("severity", &severities, &mut page);
    select("rule", &rules, &mut page);
    select("module", &modules, &mut page);
    select("verdict", &verdicts, &mut page);
    select("state", &states, &mut page);
    page.push_str(
        "<span class=\"buttons\"><button type=\"button\" id=\"reset\">Reset</button>\n\
         <button type=\"button\" id=\"fold\">Expand all</button>\n\
         <label>Theme <select id=\"theme\"><option value=\"\">as the system</option><option>light</option>\
         <option>dark</option></select></label></span>\n<p id=\"status\" role=\"status\"></p>\n\
         <p class=\"keys\"><kbd>/</kbd> filter, <kbd>j</kbd> <kbd>k</kbd> or arrows next and previous, <kbd>Enter</kbd> \
         expand</p>\n</form>\n",
    );
    page
}

/// The pages of the rules that occur, so that a reader needs nothing else.
pub(super) fn rules(groups: &[Group<'_>]) -> String {
    let occurring: BTreeSet<Rule> = groups.iter().flatten().map(|(finding, _)| finding.rule).collect();
    if occurring.is_empty() {
        return String::new();
    }
    let mut page = String::from("<section id=\"rules\" aria-label=\"rules\">\n<h2>What the rules mean</h2>\n");
    for rule in occurring {
        let _ = writeln!(
            page,
            "<details id=\"rule-{0}\"><summary><span class=\"rule\">{0}</span>: {1}</summary><pre><code>{2}</code></pre></details>",
            rule.name(),
            coded(&rules::summary(rule)),
            escaped(rules::page(rule))
        );
    }
    page.push_str("</section>\n");
    page
}

fn select(name: &str, choices: &BTreeMap<&str, usize>, page: &mut String) {
    let label = match name.chars().next() {
        Some(first) => format!("{}{}", first.to_uppercase(), &name[first.len_utf8()..]),
        None => String::new(),
    };
    let _ = write!(page, "<label>{label} <select id=\"{name}\"><option value=\"\">all</option>");
    for (choice, count) in choices {
        let text = if choice.is_empty() { "none" } else { choice };
        // An empty value would be "all".
        let value = if choice.is_empty() { "-" } else { choice };
        let _ = write!(page, "<option value=\"{}\">{} ({count})</option>", escaped(value), escaped(text));
    }
    page.push_str("</select></label>\n");
}
