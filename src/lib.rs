//! Stillwire reads an RTL tree, flattens it into a gate graph and says, with proof, where a wire that must hold still can
//! glitch. The modules stand in the order in which data flows; this page is the whole pipeline.
//!
//! Invariant: nothing here prints, reads the environment or the clock, or exits. Bad input is data; an `Err` means that
//! the paths themselves are wrong and nothing was analysed.

// The types of the parser nest deeper than the default limit allows rustdoc to follow.
#![recursion_limit = "512"]

pub mod assumptions;
pub mod cache;
pub mod cells;
pub mod cli;
pub mod cure;
pub mod diagnostic;
pub mod drawing;
pub mod elaborate;
pub mod graph;
pub mod hazard;
mod ids;
pub mod input;
mod remembered;
pub mod replay;
pub mod report;
pub mod rules;
pub mod serve;
pub mod settings;
pub mod signoff;
pub mod source;
pub mod spelling;
pub mod syntax;

use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;

use jiff::civil::Date;
use serde::{Deserialize, Serialize};

use diagnostic::{Diagnostic, Kind};
use report::{Coverage, LeftOut, Report};
use rules::{Rule, Severity};
use source::{Environment, Loaded, PathError, SourceSet};

/// What to analyse.
#[derive(Clone, Debug)]
pub struct Request {
    pub source: source::Request,
    /// Top modules; empty means every module that nobody instantiates.
    pub tops: Vec<String>,
    /// Values for parameters of the tops, as names and the texts of expressions.
    pub given: Vec<(String, String)>,
    /// Liberty libraries.
    pub libraries: Vec<std::path::PathBuf>,
    /// What the settings declare about modules.
    pub cells: Vec<cells::Declaration>,
    /// What the settings declare about nets.
    pub assumptions: Vec<assumptions::Declaration>,
    /// Severities that all findings of a rule get.
    pub severities: BTreeMap<Rule, Severity>,
    /// The day on which sign-offs are judged.
    pub today: Date,
    /// Number of threads, 0 for one per core. It never changes the result.
    pub threads: usize,
    /// Whether the findings are drawn, for the output that shows them.
    pub drawn: bool,
}

/// How far a run is.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Stage {
    /// So many of so many bytes are parsed.
    Reading {
        done: usize,
        total: usize,
    },
    Elaborating,
    Deciding,
}

/// Is told about each stage.
pub type Progress<'a> = &'a (dyn Fn(Stage) + Sync);

/// What a scan leaves: the report and the texts that its places refer to.
#[derive(Debug)]
pub struct Scan {
    pub sources: SourceSet,
    pub report: Report,
    /// One per finding when the request asks for drawings, else empty.
    pub exhibits: Vec<drawing::Exhibit>,
}

/// The main job, from paths to a report.
///
/// # Errors
/// Paths, file lists or tops that lead nowhere: nothing was analysed.
pub fn scan(request: &Request, environment: Environment<'_>, progress: Progress<'_>) -> Result<Scan, PathError> {
    on_big_stacks(request, || {
        let (mut loaded, asked) = read(request, environment, progress)?;
        let cache = request.source.cache.as_ref();
        let place = cache.and_then(|cache| Some((cache, remembered::key(request, &loaded, &asked)?)));
        // Drawings need the graph, which is not remembered.
        let known: Option<Judged> = place.as_ref().filter(|_| !request.drawn).and_then(|(cache, key)| cache.get(key));
        let (Judged { mut report, analysed, .. }, signoffs, graph) = match known {
            Some(judged) => (judged, signoff::collect(&loaded.sources).signoffs, None),
            None => {
                let (judged, signoffs, graph) = judged(request, &mut loaded, &asked, progress)?;
                if let Some((cache, key)) = place.filter(|_| judged.lasts) {
                    cache.put(&key, &judged);
                }
                (judged, signoffs, Some(graph))
            }
        };
        report.inputs = std::mem::take(&mut loaded.inputs);
        let missing: Vec<String> = report.coverage.black_boxes.keys().cloned().collect();
        for module in missing {
            if let Some(place) = loaded.nearby.module(&module) {
                rules::name_place(&mut report.findings, &module, &place);
            }
        }
        let applied = signoff::apply(&analysed, &loaded.sources, &signoffs, &mut report.findings, request.today);
        report.findings.extend(applied.findings);
        report.messages.extend(applied.messages);
        for finding in &mut report.findings {
            finding.severity = request.severities.get(&finding.rule).copied().unwrap_or(finding.severity);
        }
        report.coverage.severities = request.severities.clone();
        if let Some(cache) = cache {
            cache.prune(cache::LIMIT);
        }
        let mut scan = finished(report, loaded.sources);
        if let Some(graph) = graph.filter(|_| request.drawn) {
            scan.exhibits = drawing::exhibits(&graph, &scan.report.findings);
        }
        Ok(scan)
    })
}

/// What a scan has worked out before it looks at the date, at sign-offs, and beyond the files that it reads.
#[derive(Serialize, Deserialize)]
struct Judged {
    report: Report,
    /// The files that something in the graph comes from.
    analysed: BTreeSet<source::FileId>,
    /// Whether it depends on what was read alone, and not on what lies near it.
    lasts: bool,
}

fn judged(
    request: &Request,
    loaded: &mut Loaded,
    asked: &elaborate::Request,
    progress: Progress<'_>,
) -> Result<(Judged, Vec<signoff::SignoffPragma>, graph::Graph), PathError> {
    let (design, diagnostics) = elaborated(loaded, asked, progress)?;
    progress(Stage::Deciding);
    let protection = syntax::Protection::collect(&loaded.units);
    // The trees are not needed any more, and what follows needs room.
    loaded.units = Vec::new();
    let Decided { design, pragmas, unplaced, assumed, outcome } = decided(request, loaded, design, &protection)?;
    let mut report = report_on_input(loaded, &design, diagnostics.iter().chain(&pragmas.diagnostics));
    report.checked = outcome.checked;
    report.coverage.pins = outcome.pins;
    report.coverage.cells = outcome.cells;
    report.coverage.loops = outcome.loops;
    report.findings.extend(outcome.findings);
    report.findings.extend(unplaced);
    report.findings.extend(assumed.findings);
    report.coverage.assumptions = assumed.listed;
    let lasts = diagnostics.iter().all(|diagnostic| diagnostic.missing.is_none());
    let analysed = signoff::analysed_files(&design.graph);
    Ok((Judged { report, analysed, lasts }, pragmas.signoffs, design.graph))
}

/// What the rules find under the comments in the sources and the assumptions in force.
struct Decided {
    design: elaborate::Design,
    pragmas: signoff::Collected,
    /// Watches that mark nothing.
    unplaced: Vec<rules::Finding>,
    assumed: assumptions::Applied,
    outcome: rules::Outcome,
}

fn decided(
    request: &Request,
    loaded: &Loaded,
    mut design: elaborate::Design,
    protection: &syntax::Protection,
) -> Result<Decided, PathError> {
    let pragmas = signoff::collect(&loaded.sources);
    let (watches, unplaced) = signoff::watches(&design.graph, &loaded.sources, &pragmas.watches);
    let options = hazard::Options::default();
    let assumed = resolved(request, loaded, &design)?;
    let assumed = assumptions::apply(&design.graph, &loaded.sources, assumed, &pragmas.assumptions, &options);
    design.graph = design.graph.with_static(assumed.in_force.fixed.iter().copied());
    let cache = request.source.cache.as_ref();
    let outcome = rules::run(&design.graph, &watches, &assumed.in_force, protection, &options, cache);
    Ok(Decided { design, pragmas, unplaced, assumed, outcome })
}

/// The nets that the assumptions of the settings speak about. A name that fits nothing is a mistake of usage, unless the net
/// may lie in what could not be read.
fn resolved(
    request: &Request,
    loaded: &Loaded,
    design: &elaborate::Design,
) -> Result<Vec<assumptions::Resolved>, PathError> {
    let whole = loaded.files_failed == 0 && design.modules_failed == 0;
    let mut resolved = Vec::new();
    for declaration in &request.assumptions {
        match assumptions::resolve(&design.graph, std::slice::from_ref(declaration)) {
            Ok(found) => resolved.extend(found),
            Err(error) if whole => return Err(error),
            Err(_) => {}
        }
    }
    Ok(resolved)
}

/// The gate graph as structural Verilog, or the fan-in of one net, with a report on what was read.
///
/// # Errors
/// As [`scan`], and a net that does not exist.
pub fn flatten(
    request: &Request,
    cone: Option<&str>,
    environment: Environment<'_>,
    progress: Progress<'_>,
) -> Result<(String, Scan), PathError> {
    on_big_stacks(request, || {
        let (loaded, design, diagnostics) = front_end(request, environment, progress)?;
        let text = match cone {
            None => report::flatten::flatten(&design.graph),
            Some(net) => report::flatten::flatten_cone(&design.graph, net).map_err(|message| {
                PathError::new(message, "give the full name, from the top module down, such as `top.u_core.rst_n`")
            })?,
        };
        let report = report_on_input(&loaded, &design, &diagnostics);
        Ok((text, finished(report, loaded.sources)))
    })
}

/// Test benches and waveforms of one finding, which is named by the beginning of its fingerprint.
///
/// # Errors
/// As [`scan`], a fingerprint that fits no finding or several, and a finding without a witness.
pub fn replay(
    request: &Request,
    fingerprint: &str,
    environment: Environment<'_>,
    progress: Progress<'_>,
) -> Result<replay::Replay, PathError> {
    on_big_stacks(request, || {
        let (loaded, design, diagnostics) = front_end(request, environment, progress)?;
        progress(Stage::Deciding);
        let (design, findings) = findings(request, &loaded, design, &diagnostics)?;
        let finding = replay::select(&findings, fingerprint)?;
        replay::replay(&design.graph, finding)
    })
}

/// The change that removes one finding, which is named by the beginning of its fingerprint, proven by a scan of the
/// changed text. A diff is meant to be applied in `folder`.
///
/// # Errors
/// As [`scan`], a fingerprint that fits no finding or several, and a finding without a cover.
pub fn cure(
    request: &Request,
    fingerprint: &str,
    folder: &Path,
    environment: Environment<'_>,
    progress: Progress<'_>,
) -> Result<cure::Cure, PathError> {
    on_big_stacks(request, || {
        let (loaded, design, diagnostics) = front_end(request, environment, progress)?;
        progress(Stage::Deciding);
        let (design, before) = findings(request, &loaded, design, &diagnostics)?;
        let finding = replay::select(&before, fingerprint)?;
        let proposal = match cure::propose(&design.graph, &loaded.units, &loaded.sources, finding)? {
            Ok(proposal) => proposal,
            Err(cure) => return Ok(cure),
        };
        let mut changed = request.clone();
        changed.source.instead.push((proposal.file.clone(), proposal.text.clone()));
        let (again, cured, diagnostics) = front_end(&changed, environment, progress)?;
        if again.files_failed > loaded.files_failed || cured.modules_failed > design.modules_failed {
            let said = diagnostics.first().map_or(String::new(), |first| format!(": {}", first.message));
            return Ok(cure::Cure::Withheld { reason: format!("the changed text cannot be analysed{said}") });
        }
        let (_, after) = findings(&changed, &again, cured, &diagnostics)?;
        Ok(cure::judge(&proposal, finding, &before, &after, folder))
    })
}

/// All that a scan finds, without sign-offs.
fn findings(
    request: &Request,
    loaded: &Loaded,
    design: elaborate::Design,
    diagnostics: &[Diagnostic],
) -> Result<(elaborate::Design, Vec<rules::Finding>), PathError> {
    let protection = syntax::Protection::collect(&loaded.units);
    let Decided { design, pragmas, unplaced, assumed, outcome } = decided(request, loaded, design, &protection)?;
    let mut findings = outcome.findings;
    findings.extend(unplaced);
    findings.extend(assumed.findings);
    findings.extend(diagnostics.iter().chain(&pragmas.diagnostics).filter_map(|said| match rules::say(said) {
        rules::Said::Finding(finding) => Some(*finding),
        rules::Said::Message(_) => None,
    }));
    Ok((design, findings))
}

/// Every stage recurses over the nesting of the sources, and so does dropping its trees.
fn on_big_stacks<T: Send>(
    request: &Request,
    work: impl FnOnce() -> Result<T, PathError> + Send,
) -> Result<T, PathError> {
    let result = source::on_big_stacks(request.threads, work);
    result.unwrap_or_else(|problem| Err(PathError::new(problem, "raise the limit on memory or use `--threads 1`")))
}

/// Reads and elaborates.
fn front_end(
    request: &Request,
    environment: Environment<'_>,
    progress: Progress<'_>,
) -> Result<(Loaded, elaborate::Design, Vec<Diagnostic>), PathError> {
    let (mut loaded, asked) = read(request, environment, progress)?;
    let (design, diagnostics) = elaborated(&mut loaded, &asked, progress)?;
    Ok((loaded, design, diagnostics))
}

/// Reads everything that a verdict depends on.
fn read(
    request: &Request,
    environment: Environment<'_>,
    progress: Progress<'_>,
) -> Result<(Loaded, elaborate::Request), PathError> {
    let cells = cells::Cells::new(&request.libraries, &request.cells)?;
    let mut loaded =
        source::load(&request.source, environment, &|done, total| progress(Stage::Reading { done, total }))?;
    require_input(request, &loaded)?;
    loaded.inputs.extend(cells.inputs.iter().cloned());
    let given = request.given.iter().map(|(name, value)| source::given(name, value, &mut loaded.sources));
    let given = given.collect::<Result<Vec<_>, PathError>>()?;
    Ok((loaded, elaborate::Request { tops: request.tops.clone(), given, cells }))
}

fn elaborated(
    loaded: &mut Loaded,
    asked: &elaborate::Request,
    progress: Progress<'_>,
) -> Result<(elaborate::Design, Vec<Diagnostic>), PathError> {
    progress(Stage::Elaborating);
    let (design, mut more) = elaborate::elaborate(&loaded.units, asked);
    if let Some(elaborate::Misuse { message, help }) = design.misuse.first() {
        return Err(PathError::new(message, help));
    }
    if cfg!(debug_assertions) {
        let violations = graph::check(&design.graph);
        assert!(violations.is_empty(), "the graph is unsound:\n{}", violations.join("\n"));
    }
    loaded.nearby.hint(&mut more);
    let mut diagnostics = std::mem::take(&mut loaded.diagnostics);
    diagnostics.extend(more);
    diagnostics.extend(idle_cells(&asked.cells, &design));
    require_tops(loaded, &design, &diagnostics)?;
    Ok((design, diagnostics))
}

/// A run without any top, in which nothing else went wrong, has looked at nothing and must not end as a clean one.
fn require_tops(loaded: &Loaded, design: &elaborate::Design, diagnostics: &[Diagnostic]) -> Result<(), PathError> {
    let explained = diagnostics.iter().any(|diagnostic| diagnostic.kind == Kind::Incomplete);
    if !design.tops.is_empty() || loaded.files_failed > 0 || explained {
        return Ok(());
    }
    let help = "add the files of the design, or name a module with `--top`";
    Err(match design.benches_left_out.as_slice() {
        [] => PathError::new("nothing to analyse: there are interfaces or programs, but no module", help),
        [bench, ..] => {
            let message = format!(
                "nothing to analyse: no module is left besides test benches, which have no ports, such as `{bench}`"
            );
            PathError::new(message, help)
        }
    })
}

/// Declarations of cells that stand for nothing: a name may be misspelt.
fn idle_cells(cells: &cells::Cells, design: &elaborate::Design) -> Vec<Diagnostic> {
    let used =
        |name: &str| design.cells.contains_key(name) || design.graph.black_boxes.iter().any(|one| one.module == name);
    let idle = cells.all_declared().filter(|(name, _)| !used(name));
    idle.map(|(name, place)| {
        let message =
            format!("the cell `{name}` ({place}) stands for no instance: there is none, or the module has a text");
        Diagnostic::new(Kind::Note, "declared cell", message, None)
    })
    .collect()
}

/// Nothing to read and tops that nobody defines are mistakes of usage, as long as every file could be read.
fn require_input(request: &Request, loaded: &Loaded) -> Result<(), PathError> {
    if loaded.files_read == 0 {
        let paths: Vec<String> = request.source.paths.iter().map(|path| format!("`{}`", path.display())).collect();
        let place = if paths.is_empty() { "the current folder".to_string() } else { paths.join(", ") };
        let help = "give a file or a folder that contains .v or .sv files";
        return Err(PathError::new(format!("no Verilog file was found in {place}"), help));
    }
    if loaded.files_failed > 0 {
        return Ok(());
    }
    if loaded.units.iter().all(|unit| unit.modules.is_empty()) {
        let message = format!("no module was found in the {} files that were read", loaded.files_read);
        return Err(PathError::new(message, "check the paths, and the conditions (`ifdef) around the modules"));
    }
    let names: BTreeSet<&str> =
        loaded.units.iter().flat_map(|unit| &unit.modules).map(|module| module.name.name.as_str()).collect();
    match request.tops.iter().find(|top| !names.contains(top.as_str())) {
        None => Ok(()),
        Some(top) => {
            let help = match spelling::nearest(top, names.iter().copied()) {
                Some(nearest) => format!("did you mean `{nearest}`?"),
                None => "check the spelling, and that its file is among the paths".to_string(),
            };
            Err(PathError::new(format!("there is no module `{top}` to be the top"), help))
        }
    }
}

/// The report as far as reading and elaborating can tell.
fn report_on_input<'a>(
    loaded: &Loaded,
    design: &elaborate::Design,
    diagnostics: impl IntoIterator<Item = &'a Diagnostic>,
) -> Report {
    let mut report = Report {
        tops: design.tops.clone(),
        parameters: design.parameters.clone(),
        inputs: loaded.inputs.clone(),
        ..Report::default()
    };
    report.tops.sort();
    let mut coverage = Coverage {
        files_read: loaded.files_read,
        files_failed: loaded.files_failed,
        modules_elaborated: design.modules_elaborated,
        modules_failed: design.modules_failed,
        modelled_cells: design.cells.clone(),
        left_out: LeftOut {
            regions: loaded.regions.iter().map(|region| region.at).collect(),
            skipped: design.skipped.clone(),
            benches: design.benches_left_out.clone(),
            opaque_memories: design.opaque_memories.clone(),
        },
        ..Coverage::default()
    };
    for black_box in &design.graph.black_boxes {
        *coverage.black_boxes.entry(black_box.module.clone()).or_default() += 1;
    }
    for diagnostic in diagnostics {
        match diagnostic.kind {
            Kind::Unsupported => coverage.unsupported.push((diagnostic.construct.clone(), diagnostic.at)),
            Kind::Incomplete => coverage.incomplete = true,
            Kind::Note | Kind::Warning | Kind::SignoffInvalid => {}
        }
        match rules::say(diagnostic) {
            rules::Said::Finding(finding) => report.findings.push(*finding),
            rules::Said::Message(message) => report.messages.push(message),
        }
    }
    coverage.left_out.regions.sort();
    report.coverage = coverage;
    report
}

/// The report in the order of every output.
fn finished(mut report: Report, sources: SourceSet) -> Scan {
    rules::sort(&mut report.findings, |span| {
        let position = sources.position(span);
        (position.file, position.line)
    });
    let place = |span: source::Span| {
        let position = sources.position(span);
        (position.file, position.line, position.column)
    };
    report.coverage.unsupported.sort_by_cached_key(|(construct, at)| (at.map(place), construct.clone()));
    report.messages.sort_by_cached_key(|message| (message.at.map(place), message.text.clone()));
    Scan { sources, report, exhibits: Vec::new() }
}
