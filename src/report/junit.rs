//! The report as JUnit XML, the form in which build servers count tests: one suite per role and one case per net that was
//! checked in that role, so that clean nets are seen as passed, what the design has beyond single nets (loops, sign-offs,
//! unsupported constructs) in a suite of its own, and one case that stands for the completeness of the analysis.
//!
//! A case fails when the gate would fail for it. It is skipped, with the reason, when the net has a hazard that was signed
//! off, that the ledger knows, or that is below the gate: such a net is not clean, and so it does not pass. It is an error
//! when it is undecided, whoever accepted that.
//!
//! Invariant: some case fails or is an error exactly when the exit code of the run is not 0.

use std::collections::BTreeMap;

use xml::writer::{EmitterConfig, Error, EventWriter, XmlEvent};

use super::{Report, told};
use crate::rules::{CheckedNet, Finding, NetState, PinKind, Severity, Verdict};
use crate::source::{SourceSet, Span};

/// The report as JUnit XML, indented, with a final line end. `gate` is the lowest severity that fails the run.
pub fn render(report: &Report, sources: &SourceSet, gate: Severity) -> String {
    let mut bytes = Vec::new();
    // Writing to memory does not fail.
    let _ =
        write(&mut EmitterConfig::new().perform_indent(true).create_writer(&mut bytes), &suites(report, sources, gate));
    let mut text = String::from_utf8(bytes).unwrap_or_default();
    text.push('\n');
    text
}

struct Suite {
    name: &'static str,
    cases: Vec<Case>,
}

struct Case {
    name: String,
    at: Option<Span>,
    /// File and line.
    place: Option<(String, usize)>,
    result: Judged,
    /// What is worth saying beside the result.
    output: String,
}

/// What a build server shows for a case.
enum Judged {
    Passed,
    Skipped(String),
    Failed(Trouble),
    Error(Trouble),
}

struct Trouble {
    /// The rule, or `undecided` or `incomplete`.
    kind: String,
    message: String,
    text: String,
}

fn suites(report: &Report, sources: &SourceSet, gate: Severity) -> Vec<Suite> {
    let mut about: Vec<Vec<&Finding>> = vec![Vec::new(); report.checked.len()];
    let mut others = Vec::new();
    let mut by_name: BTreeMap<&str, Vec<usize>> = BTreeMap::new();
    for (index, net) in report.checked.iter().enumerate() {
        by_name.entry(&net.net).or_default().push(index);
    }
    for finding in &report.findings {
        let named = by_name.get(finding.net.as_str()).into_iter().flatten();
        let subjects: Vec<usize> =
            named.copied().filter(|&index| report.checked[index].is_subject_of(finding)).collect();
        if subjects.is_empty() {
            others.push(finding);
        }
        subjects.into_iter().for_each(|index| about[index].push(finding));
    }
    let judge = Judge { report, gate };
    let mut suites: Vec<Suite> = PinKind::ALL.map(|kind| Suite { name: kind.name(), cases: Vec::new() }).into();
    for (net, findings) in report.checked.iter().zip(about) {
        suites[net.pin.kind as usize].cases.push(judge.net(net, &findings));
    }
    suites.push(Suite { name: "design", cases: others.into_iter().map(|finding| judge.other(finding)).collect() });
    suites.push(Suite { name: "analysis", cases: vec![judge.completeness()] });
    suites.retain(|suite| !suite.cases.is_empty());
    for suite in &mut suites {
        for case in &mut suite.cases {
            case.place = case.at.map(|at| sources.position(at)).map(|position| (position.file, position.line));
            if let (true, Some((file, line))) = (case.name.ends_with(AT_PLACE), &case.place) {
                case.name.push_str(&format!(" {file}:{line}"));
            }
        }
        number_equal_names(&mut suite.cases);
    }
    suites
}

/// The kind of trouble that no rule stands for.
const UNDECIDED: &str = "undecided";

/// How the name of a case ends that has no net to be named after.
const AT_PLACE: &str = " at";

struct Judge<'a> {
    report: &'a Report,
    gate: Severity,
}

impl Judge<'_> {
    fn net(&self, net: &CheckedNet, findings: &[&Finding]) -> Case {
        // A clean net may have findings of another sort, such as how its reset is released.
        let failing = findings.iter().copied().find(|finding| self.fails(finding));
        let mut output: Vec<String> = Vec::new();
        let (lead, result) = match &net.state {
            NetState::Clean(ground) => {
                output.push(format!("clean: {}", ground.text()));
                (failing, failing.map_or(Judged::Passed, |finding| Judged::Failed(trouble(finding))))
            }
            NetState::Hazard => {
                (failing, failing.map_or_else(|| self.skipped(findings), |finding| Judged::Failed(trouble(finding))))
            }
            NetState::Undecided(_) => {
                let open = findings.iter().copied().find(|finding| finding.verdict == Verdict::Undecided);
                let message = format!("not decided: whether `{}` can glitch", net.net);
                let text = open.map_or_else(String::new, told::message);
                (open, Judged::Error(Trouble { kind: UNDECIDED.to_string(), message, text }))
            }
        };
        let lead = lead.map(|finding| &finding.fingerprint);
        let others = findings.iter().filter(|finding| Some(&finding.fingerprint) != lead);
        output.extend(others.map(|finding| format!("{}: {}", finding.rule.name(), told::message(finding))));
        Case { name: net.net.clone(), at: net.at, place: None, result, output: output.join("\n\n") }
    }

    /// A finding that is not about one checked net.
    fn other(&self, finding: &Finding) -> Case {
        let mut output = String::new();
        let result = if finding.verdict == Verdict::Undecided {
            Judged::Error(Trouble { kind: UNDECIDED.to_string(), ..trouble(finding) })
        } else if self.fails(finding) {
            Judged::Failed(trouble(finding))
        } else {
            output = told::message(finding);
            self.skipped(&[finding])
        };
        let subject = if finding.net.is_empty() { AT_PLACE.to_string() } else { format!(" {}", finding.net) };
        let name = format!("{}{subject}", finding.rule.name());
        Case { name, at: finding.at, place: None, result, output }
    }

    fn fails(&self, finding: &Finding) -> bool {
        !finding.is_accepted() && finding.severity >= self.gate
    }

    /// Why findings do not fail the gate.
    fn skipped(&self, findings: &[&Finding]) -> Judged {
        let mut reasons: Vec<String> = Vec::new();
        for finding in findings {
            let reason = match (told::signoff(finding), told::known(self.report, finding)) {
                (Some(signoff), _) => format!("signed off: {signoff}"),
                (None, Some(known)) => known,
                (None, None) => {
                    let (severity, gate) = (finding.severity.name(), self.gate.name());
                    format!("below the gate: {severity}, the gate is {gate}")
                }
            };
            if !reasons.contains(&reason) {
                reasons.push(reason);
            }
        }
        Judged::Skipped(reasons.join("; "))
    }

    fn completeness(&self) -> Case {
        let missing = told::missing(self.report);
        let result = if missing.is_empty() {
            Judged::Passed
        } else {
            let text = missing.join("\n");
            let message =
                "part of the input was not analysed or not decided: a net that is not listed is not proven clean";
            Judged::Error(Trouble { kind: "incomplete".to_string(), message: message.to_string(), text })
        };
        Case { name: "complete".to_string(), at: None, place: None, result, output: String::new() }
    }
}

fn trouble(finding: &Finding) -> Trouble {
    Trouble { kind: finding.rule.name().to_string(), message: finding.message.clone(), text: told::message(finding) }
}

/// Build servers tell cases apart by name.
fn number_equal_names(cases: &mut [Case]) {
    let mut seen: BTreeMap<String, usize> = BTreeMap::new();
    for case in cases {
        let count = seen.entry(case.name.clone()).or_default();
        *count += 1;
        if *count > 1 {
            case.name.push_str(&format!(" #{count}"));
        }
    }
}

impl Suite {
    /// Tests, failures, errors, skipped.
    fn counts(&self) -> [usize; 4] {
        let count = |wanted: fn(&Judged) -> bool| self.cases.iter().filter(|case| wanted(&case.result)).count();
        [
            self.cases.len(),
            count(|result| matches!(result, Judged::Failed(_))),
            count(|result| matches!(result, Judged::Error(_))),
            count(|result| matches!(result, Judged::Skipped(_))),
        ]
    }
}

/// The names of the counts in the attributes of suites.
const COUNTS: [&str; 4] = ["tests", "failures", "errors", "skipped"];

type Writer<'a> = EventWriter<&'a mut Vec<u8>>;
type Written = Result<(), Error>;

fn write(writer: &mut Writer<'_>, suites: &[Suite]) -> Written {
    let totals: [usize; 4] = std::array::from_fn(|at| suites.iter().map(|suite| suite.counts()[at]).sum());
    start(writer, "testsuites", &attributes("stillwire", totals))?;
    for suite in suites {
        start(writer, "testsuite", &attributes(suite.name, suite.counts()))?;
        suite.cases.iter().try_for_each(|case| write_case(writer, suite.name, case))?;
        writer.write(XmlEvent::end_element())?;
    }
    writer.write(XmlEvent::end_element())
}

fn attributes(name: &str, counts: [usize; 4]) -> Vec<(&'static str, String)> {
    let counts = COUNTS.into_iter().zip(counts.map(|count| count.to_string()));
    std::iter::once(("name", name.to_string())).chain(counts).collect()
}

fn write_case(writer: &mut Writer<'_>, suite: &str, case: &Case) -> Written {
    let mut head = vec![("name", case.name.clone()), ("classname", format!("stillwire.{suite}"))];
    if let Some((file, line)) = &case.place {
        head.extend([("file", file.clone()), ("line", line.to_string())]);
    }
    start(writer, "testcase", &head)?;
    match &case.result {
        Judged::Passed => {}
        Judged::Skipped(reason) => element(writer, "skipped", &[("message", reason.clone())], "")?,
        Judged::Failed(trouble) => write_trouble(writer, "failure", trouble)?,
        Judged::Error(trouble) => write_trouble(writer, "error", trouble)?,
    }
    if !case.output.is_empty() {
        element(writer, "system-out", &[], &case.output)?;
    }
    writer.write(XmlEvent::end_element())
}

fn write_trouble(writer: &mut Writer<'_>, name: &str, trouble: &Trouble) -> Written {
    let head = [("type", trouble.kind.clone()), ("message", trouble.message.clone())];
    element(writer, name, &head, &trouble.text)
}

fn element(writer: &mut Writer<'_>, name: &str, head: &[(&str, String)], text: &str) -> Written {
    start(writer, name, head)?;
    if !text.is_empty() {
        writer.write(XmlEvent::characters(&allowed(text)))?;
    }
    writer.write(XmlEvent::end_element())
}

fn start(writer: &mut Writer<'_>, name: &str, head: &[(&str, String)]) -> Written {
    let head: Vec<(&str, String)> = head.iter().map(|(name, value)| (*name, allowed(value))).collect();
    let event = XmlEvent::start_element(name);
    writer.write(head.iter().fold(event, |event, (name, value)| event.attr(*name, value)))
}

/// XML 1.0 has no way to write most control characters, and an escaped identifier may contain them.
fn allowed(text: &str) -> String {
    let fits =
        |letter: char| !matches!(letter, '\0'..='\x08' | '\x0b' | '\x0c' | '\x0e'..='\x1f' | '\u{fffe}' | '\u{ffff}');
    text.chars().map(|letter| if fits(letter) { letter } else { char::REPLACEMENT_CHARACTER }).collect()
}
