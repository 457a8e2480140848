//! Cure: the change that removes a finding, as a unified diff against the source. Nothing is offered on trust: the changed
//! text is read, elaborated and decided like any other, and the diff is printed only when the finding is gone and no
//! other error or warning came.

mod patch;
mod statement;

use std::collections::BTreeSet;
use std::path::{Component, Path, PathBuf};

use similar::TextDiff;

use crate::graph::Graph;
use crate::rules::{CoverText, Finding, PinKind, Rule, Severity, Verdict};
use crate::source::{PathError, SourceSet};
use crate::syntax::ast::Unit;

/// Lines shown around a change.
const CONTEXT: usize = 3;

/// What can be done about a finding.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Cure {
    /// The diff, what was proven about it, and the same as whole texts.
    Patch { diff: String, proof: String, change: Box<Change> },
    /// No statement can be changed in place: the terms, with the reason.
    Terms { text: String },
    /// A change was made and did not hold what it promised.
    Withheld { reason: String },
}

/// A file before and after.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Change {
    /// As it was named when it was read.
    pub file: PathBuf,
    pub before: String,
    pub after: String,
}

/// A changed file that waits for its proof.
pub(crate) struct Proposal {
    /// The file as it was named when it was read.
    pub(crate) file: PathBuf,
    pub(crate) text: String,
    original: String,
}

/// The change for `finding`, or the terms when there is no statement to change.
///
/// # Errors
/// A finding that has no cover, with the reason.
pub(crate) fn propose(
    graph: &Graph,
    units: &[Unit],
    sources: &SourceSet,
    finding: &Finding,
) -> Result<Result<Proposal, Cure>, PathError> {
    let Some(cover) = finding.cover.as_ref().filter(|cover| cover.proven) else {
        return Err(no_cover(finding));
    };
    let root = graph.root(cover.target);
    let Some(statement) = statement::find(graph, units, sources, root) else {
        return Ok(Err(terms(cover, "the net is not driven by a plain `assign` or wire initialiser of its own")));
    };
    let file = sources.file(statement.at.file);
    let original = file.text.to_string();
    // A diff against a text that was decoded, or whose byte order mark was dropped, would not apply.
    if std::fs::read(&file.path).ok().as_deref() != Some(original.as_bytes()) {
        return Ok(Err(terms(cover, "its file is not plain UTF-8 text")));
    }
    match patch::patched(graph, &original, &statement, &cover.cover) {
        Ok(text) => Ok(Ok(Proposal { file: file.path.clone(), text, original })),
        Err(obstacle) => Ok(Err(terms(cover, &obstacle.words()))),
    }
}

fn no_cover(finding: &Finding) -> PathError {
    let message = format!("there is no cover for this finding: {} on {}", finding.rule.name(), finding.net);
    let why = finding.notes.iter().find(|note| note.starts_with("no cover")).cloned();
    let help = why.unwrap_or_else(|| match (finding.verdict, finding.hazards.is_empty()) {
        (Verdict::Undecided, _) => "it is undecided: no hazard is known that a term could cover".to_string(),
        (Verdict::Proven, true) => "it is not about a hazard of a net".to_string(),
        (Verdict::Proven, false) => finding.notes.last().cloned().unwrap_or_default(),
    });
    PathError::new(message, help)
}

fn terms(cover: &CoverText, why: &str) -> Cure {
    let mut text = format!("no diff is offered because {why}; the terms, proven on the net's logic:\n");
    for term in &cover.terms {
        text += &format!("  {term}\n");
    }
    text += &format!(
        "to write by hand, each term and the gate that joins them protected from the synthesiser:\n  {}\n",
        cover.verilog
    );
    Cure::Terms { text }
}

/// Judges a proposal by the findings of the design before and after it. `folder` is where the diff is to be applied.
pub(crate) fn judge(
    proposal: &Proposal,
    finding: &Finding,
    before: &[Finding],
    after: &[Finding],
    folder: &Path,
) -> Cure {
    // What is not about a net is told apart by its message.
    let same = |one: &Finding, other: &Finding| {
        one.rule == other.rule && one.net == other.net && (!one.net.is_empty() || one.message == other.message)
    };
    if after.iter().any(|other| same(other, finding)) {
        let reason = format!("the changed text still shows {} on {}", finding.rule.name(), finding.net);
        return Cure::Withheld { reason };
    }
    // Notes may come up that were not worth saying beside the finding, but what is not analysed any more is no cure.
    let counts = |new: &&Finding| new.severity > Severity::Note || new.rule == Rule::UnsupportedConstruct;
    for new in after.iter().filter(counts) {
        let old = before.iter().find(|old| same(old, new));
        let worse = old.is_none_or(|old| new.severity > old.severity || !shown(new).is_subset(&shown(old)));
        if worse {
            let reason = format!("the changed text brings another finding: {}", new.message);
            return Cure::Withheld { reason };
        }
    }
    let proof = format!(
        "proven: with this change {} on {} is gone and no other error or warning came (findings: {} before, {} after)",
        finding.rule.name(),
        finding.net,
        before.len(),
        after.len()
    );
    let change =
        Change { file: proposal.file.clone(), before: proposal.original.clone(), after: proposal.text.clone() };
    Cure::Patch { diff: diff(proposal, folder), proof, change: Box::new(change) }
}

/// The hazards of a finding. An output lists one source of several for each kind.
fn shown(finding: &Finding) -> BTreeSet<(Vec<String>, &'static str)> {
    let any_source = finding.pin.as_ref().is_some_and(|pin| pin.kind == PinKind::Output);
    let hazards = finding.hazards.iter();
    hazards.map(|hazard| (if any_source { Vec::new() } else { hazard.changes.clone() }, hazard.kind)).collect()
}

/// In the form that `patch -p1` and `git apply` take, to be applied in `folder`, or in the root of the file system for a
/// file elsewhere.
fn diff(proposal: &Proposal, folder: &Path) -> String {
    let absolute = |path: &Path| path.canonicalize().unwrap_or_else(|_| path.to_path_buf());
    let file = absolute(&proposal.file);
    let path = file.strip_prefix(absolute(folder)).unwrap_or(&file);
    let parts: Vec<String> = path
        .components()
        .filter_map(|part| match part {
            Component::Normal(name) => Some(name.to_string_lossy().into_owned()),
            _ => None,
        })
        .collect();
    let path = parts.join("/");
    TextDiff::from_lines(proposal.original.as_str(), proposal.text.as_str())
        .unified_diff()
        .context_radius(CONTEXT)
        .header(&format!("a/{path}"), &format!("b/{path}"))
        .to_string()
}
