//! The ledger: the findings that were known when the tool was adopted on an old tree. A later scan fails only on what is
//! not in it. One entry stands for one family, however many instances of a module show the finding.
//!
//! Invariant: an entry covers no more than what was recorded. A finding that became worse (a higher severity, or proven
//! where it was undecided) is new, and the bookkeeping of sign-offs is never covered. An entry never makes a run complete.

use std::collections::{BTreeMap, BTreeSet};

use serde::{Deserialize, Serialize};

use crate::rules::{Finding, Rule, Severity, Verdict};

/// The name of the file unless the user gives another.
pub const FILE_NAME: &str = "stillwire-ledger.toml";

/// What the file says of itself; it changes when an old ledger can no longer be read.
const FORMAT: &str = "stillwire-ledger/1";

const HEAD: &str = "\
# Findings that were known when Stillwire was adopted here; a scan with `--ledger` fails only on others.
# `stillwire ledger write` makes this file, `stillwire ledger prune` drops what is gone. Commit it beside the sources.
";

/// One known finding. `net`, `count` and `message` tell the reader what it is; the family decides.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, Debug)]
#[serde(deny_unknown_fields)]
pub struct Entry {
    pub rule: String,
    pub severity: String,
    pub verdict: String,
    /// The first net that showed it.
    pub net: String,
    /// How many nets showed it.
    pub count: usize,
    pub message: String,
    pub family: String,
}

/// The file as data.
#[derive(Clone, PartialEq, Eq, Serialize, Deserialize, Debug)]
#[serde(deny_unknown_fields)]
pub struct Ledger {
    format: String,
    #[serde(default)]
    known: Vec<Entry>,
}

/// What a ledger did in a scan.
#[derive(Clone, PartialEq, Eq, Default, Debug, Serialize, Deserialize)]
pub struct Use {
    /// As the user gave it.
    pub file: String,
    /// Entries that still have a finding.
    pub remaining: usize,
    /// Entries whose finding is gone, in the order of the file.
    pub gone: Vec<Entry>,
}

impl Ledger {
    /// The findings of a scan that nobody signed off.
    pub fn of(findings: &[Finding]) -> Self {
        let mut entries: BTreeMap<&str, Entry> = BTreeMap::new();
        for finding in findings.iter().filter(|finding| finding.signoff.is_none() && can_be_known(finding.rule)) {
            let entry = entries.entry(&finding.family).or_insert_with(|| Entry {
                rule: finding.rule.name().to_string(),
                severity: finding.severity.name().to_string(),
                verdict: finding.verdict.name().to_string(),
                net: finding.net.clone(),
                count: 0,
                message: finding.message.clone(),
                family: finding.family.clone(),
            });
            entry.count += 1;
            if Severity::from_name(&entry.severity) < Some(finding.severity) {
                entry.severity = finding.severity.name().to_string();
            }
            if finding.verdict == Verdict::Proven {
                entry.verdict = finding.verdict.name().to_string();
            }
        }
        let mut known: Vec<Entry> = entries.into_values().collect();
        known.sort();
        Self { format: FORMAT.to_string(), known }
    }

    /// Reads the file.
    ///
    /// # Errors
    /// Why the text is no ledger, in words for the user, with the line where there is one.
    pub fn parse(text: &str) -> Result<Self, String> {
        let ledger: Ledger = toml::from_str(text).map_err(|error| {
            let line = error.span().map(|span| 1 + text[..span.start.min(text.len())].matches('\n').count());
            let place = line.map_or(String::new(), |line| format!("line {line}: "));
            format!("{place}{}", error.message())
        })?;
        if ledger.format != FORMAT {
            return Err(format!("its format is `{}`, this version reads `{FORMAT}`", ledger.format));
        }
        for entry in &ledger.known {
            if Rule::from_name(&entry.rule).is_none() {
                return Err(format!("there is no rule `{}`", entry.rule));
            }
            if Severity::from_name(&entry.severity).is_none() {
                return Err(format!("there is no severity `{}`", entry.severity));
            }
            if Verdict::from_name(&entry.verdict).is_none() {
                return Err(format!("there is no verdict `{}`", entry.verdict));
            }
        }
        Ok(ledger)
    }

    /// The file's text.
    pub fn render(&self) -> String {
        // Strings and numbers can always be written.
        format!("{HEAD}{}", toml::to_string(self).unwrap_or_default())
    }

    pub fn entries(&self) -> &[Entry] {
        &self.known
    }

    /// Marks the findings that are known and says what remains of the ledger.
    pub fn apply(&self, file: &str, findings: &mut [Finding]) -> Use {
        let entries: BTreeMap<&str, &Entry> = self.known.iter().map(|entry| (entry.family.as_str(), entry)).collect();
        let mut met: BTreeSet<&str> = BTreeSet::new();
        for finding in findings.iter_mut().filter(|finding| can_be_known(finding.rule)) {
            let Some((&family, entry)) = entries.get_key_value(finding.family.as_str()) else { continue };
            met.insert(family);
            let worse = Severity::from_name(&entry.severity) < Some(finding.severity)
                || Verdict::from_name(&entry.verdict) > Some(finding.verdict);
            finding.known = !worse && entry.rule == finding.rule.name();
        }
        let gone: Vec<Entry> =
            self.known.iter().filter(|entry| !met.contains(entry.family.as_str())).cloned().collect();
        Use { file: file.to_string(), remaining: self.known.len() - gone.len(), gone }
    }

    /// The ledger without the entries that are gone.
    pub fn pruned(&self, used: &Use) -> Self {
        let known = self.known.iter().filter(|entry| !used.gone.contains(entry)).cloned().collect();
        Self { format: self.format.clone(), known }
    }
}

/// Sign-offs are kept right at their place, not in a ledger.
fn can_be_known(rule: Rule) -> bool {
    !matches!(rule, Rule::SignoffInvalid | Rule::SignoffStale | Rule::SignoffExpired)
}
