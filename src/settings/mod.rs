//! `stillwire.toml`: what a project fixes once instead of repeating it on every command line. The file is looked for
//! upward from the first path; whatever the command line says wins over it.
//!
//! Invariant: a key that is not known is an error, never ignored, because a misspelt setting that does nothing would make
//! a report look cleaner or dirtier than the user thinks. Paths are relative to the folder of the file; below the current
//! folder they are told as from there, so that reports name files in the same way on every machine.

mod declare;
mod entry;
mod show;

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use toml::de::{DeTable, DeValue};

use crate::assumptions;
use crate::cells;
use crate::input::{Input, InputRole};
use crate::rules::{Rule, Severity};
use crate::source::PathError;
use entry::{Entry, Text, entries};

pub use show::show;

/// The name that is looked for.
pub const FILE_NAME: &str = "stillwire.toml";

const KEYS: [&str; 14] = [
    "paths",
    "lists",
    "top",
    "set",
    "include",
    "define",
    "exclude",
    "libraries",
    "ledger",
    "gate",
    "show",
    "severities",
    "assume",
    "cell",
];

/// What the file says.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct Settings {
    /// What is read when the command line names neither paths nor lists.
    pub paths: Vec<PathBuf>,
    /// File lists, as `-f`.
    pub lists: Vec<PathBuf>,
    pub top: Vec<String>,
    /// Values of parameters of the tops.
    pub set: Vec<(String, String)>,
    pub include: Vec<PathBuf>,
    pub define: Vec<(String, Option<String>)>,
    /// Liberty files.
    pub libraries: Vec<PathBuf>,
    pub ledger: Option<PathBuf>,
    pub gate: Option<Severity>,
    pub show: Option<Severity>,
    /// Severities that all findings of a rule get.
    pub severities: BTreeMap<Rule, Severity>,
    /// Paths or patterns to leave out, relative to `folder`.
    pub exclude: Vec<String>,
    pub assumptions: Vec<assumptions::Declaration>,
    pub cells: Vec<cells::Declaration>,
    pub folder: PathBuf,
    /// The file itself; `None` when there is none.
    pub file: Option<PathBuf>,
    /// The same by its content.
    pub input: Option<Input>,
    /// The line of each value: by key, and by position where the key has several.
    pub lines: BTreeMap<(&'static str, usize), usize>,
}

impl Settings {
    /// The paths and file lists that are read when the command line names these: those of the file when it names none.
    pub fn read_unless(&self, paths: Vec<PathBuf>, lists: Vec<PathBuf>) -> (Vec<PathBuf>, Vec<PathBuf>) {
        if paths.is_empty() && lists.is_empty() { (self.paths.clone(), self.lists.clone()) } else { (paths, lists) }
    }
}

/// The settings file that holds for `path`: the nearest one in its folder or above.
pub fn find(path: &Path) -> Option<PathBuf> {
    let start = std::path::absolute(path).ok()?;
    start.ancestors().map(|folder| folder.join(FILE_NAME)).find(|file| file.is_file())
}

/// Reads a settings file.
///
/// # Errors
/// A file that cannot be read or is no TOML, an unknown key, a value of the wrong kind.
pub fn read(path: &Path) -> Result<Settings, PathError> {
    let text = std::fs::read_to_string(path).map_err(|error| {
        let message = format!("the settings `{}` cannot be read: {error}", path.display());
        PathError::new(message, "check the path, or leave `--settings` away")
    })?;
    let settings = parse(&text, path)?;
    Ok(Settings { input: Some(Input::read(InputRole::Settings, path, text.as_bytes())), ..settings })
}

/// The settings that a text holds; `path` is what messages call it, and paths in it are relative to its folder.
///
/// # Errors
/// As [`read`].
pub fn parse(text: &str, path: &Path) -> Result<Settings, PathError> {
    let source = Text { path, text };
    let table = DeTable::parse(text).map_err(|error| {
        let at = error.span().map_or(0, |span| span.start);
        source.error(at, error.message(), "the settings are TOML: `key = value`, text in double quotes")
    })?;
    let folder = path.parent().unwrap_or(Path::new("")).to_path_buf();
    let mut settings = Settings { folder: folder.clone(), file: Some(path.to_path_buf()), ..Settings::default() };
    for (key, entry) in &entries(source, "", table.get_ref(), &KEYS)? {
        let Some(key) = KEYS.into_iter().find(|known| known == key) else { continue };
        let paths = |entry: &Entry<'_>| -> Result<Vec<PathBuf>, PathError> {
            Ok(entry.texts()?.iter().map(|text| folder.join(text)).collect())
        };
        let mut lines = vec![entry.line()];
        match key {
            "paths" => settings.paths = paths(entry)?,
            "lists" => settings.lists = paths(entry)?,
            "top" => settings.top = entry.texts()?,
            "include" => settings.include = paths(entry)?,
            "libraries" => settings.libraries = paths(entry)?,
            "define" => (settings.define, lines) = defines(entry)?,
            "set" => (settings.set, lines) = parameters(entry)?,
            "ledger" => settings.ledger = Some(folder.join(entry.text()?)),
            "gate" => settings.gate = Some(entry.severity()?),
            "show" => settings.show = Some(entry.severity()?),
            "exclude" => settings.exclude = entry.texts()?,
            "severities" => {
                let named = severities(entry)?;
                lines = named.iter().map(|(_, _, line)| *line).collect();
                settings.severities = named.into_iter().map(|(rule, severity, _)| (rule, severity)).collect();
            }
            "assume" => settings.assumptions = declare::assumptions(entry)?,
            _ => settings.cells = declare::cells(entry)?,
        }
        if matches!(key, "paths" | "lists" | "top" | "include" | "libraries" | "exclude") {
            lines = entry.lines()?.into_iter().map(|(_, line)| line).collect();
        }
        for (index, line) in lines.into_iter().enumerate() {
            settings.lines.insert((key, index), line);
        }
    }
    Ok(settings)
}

type Lines = Vec<usize>;
type Defines = Vec<(String, Option<String>)>;

/// A list of `NAME` and `NAME=VALUE`, or a table of names and values.
fn defines(entry: &Entry<'_>) -> Result<(Defines, Lines), PathError> {
    let DeValue::Table(table) = entry.value else {
        let lines = entry.lines()?;
        return Ok(lines.into_iter().map(|(text, line)| (crate::source::define(&text), line)).unzip());
    };
    let define = |(name, value)| {
        let inner = Entry::new(entry.source, &entry.key, name, value);
        let text = match inner.value {
            DeValue::String(text) => Some(text.to_string()),
            DeValue::Integer(number) => Some(number.to_string()),
            DeValue::Boolean(true) => None,
            _ => return Err(inner.wrong("a text, a number or `true` for each macro")),
        };
        let name: &str = name.as_ref();
        Ok(((name.to_string(), text), inner.line()))
    };
    Ok(table.iter().map(define).collect::<Result<Vec<_>, PathError>>()?.into_iter().unzip())
}

/// A table of parameters and values.
fn parameters(entry: &Entry<'_>) -> Result<(Vec<(String, String)>, Lines), PathError> {
    let value = |(name, value)| {
        let inner = Entry::new(entry.source, &entry.key, name, value);
        let text = match inner.value {
            DeValue::String(text) => text.to_string(),
            DeValue::Integer(number) => number.to_string(),
            DeValue::Boolean(value) => u8::from(*value).to_string(),
            _ => return Err(inner.wrong("a number, a truth value, or an expression as text, for each parameter")),
        };
        let name: &str = name.as_ref();
        Ok(((name.to_string(), text), inner.line()))
    };
    Ok(entry.table()?.iter().map(value).collect::<Result<Vec<_>, PathError>>()?.into_iter().unzip())
}

/// A table of rules and severities, with lines.
fn severities(entry: &Entry<'_>) -> Result<Vec<(Rule, Severity, usize)>, PathError> {
    let names: Vec<&str> = Rule::ALL.iter().map(|rule| rule.name()).collect();
    let named = entries(entry.source, &entry.key, entry.table()?, &names)?;
    let mut found = Vec::new();
    for (name, entry) in &named {
        let rule = Rule::from_name(name);
        let rule = rule.ok_or_else(|| entry.wrong("the severity of a rule"))?;
        found.push((rule, entry.severity()?, entry.line()));
    }
    found.sort_unstable();
    Ok(found)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parsed(text: &str) -> Result<Settings, String> {
        parse(text, Path::new("project/stillwire.toml")).map_err(|error| error.to_string())
    }

    #[test]
    fn every_key() {
        let text = "paths = \"rtl\"\nlists = [\"cells.f\"]\nledger = \"known.toml\"\ntop = \"core\"\ninclude = [\"rtl/include\"]\ndefine = [\"A\", \"B=2\"]\ngate = \"warning\"\n\
                    show = \"note\"\nexclude = [\"sim\"]";
        let settings = parsed(text).expect("good settings");
        let folder = Path::new("project");
        assert_eq!(
            (&settings.paths[..], &settings.lists[..]),
            (&[folder.join("rtl")][..], &[folder.join("cells.f")][..])
        );
        assert_eq!((settings.top, settings.ledger), (vec!["core".to_string()], Some(folder.join("known.toml"))));
        assert_eq!(settings.include, [Path::new("project/rtl/include")]);
        assert_eq!(settings.define, [("A".to_string(), None), ("B".to_string(), Some("2".to_string()))]);
        assert_eq!((settings.gate, settings.show), (Some(Severity::Warning), Some(Severity::Note)));
        assert_eq!((settings.exclude, settings.folder), (vec!["sim".to_string()], PathBuf::from("project")));
        let table = parsed("[define]\nA = true\nW = 8").expect("good settings");
        assert_eq!(table.define, [("A".to_string(), None), ("W".to_string(), Some("8".to_string()))]);
    }

    #[test]
    fn mistakes_say_what_to_write() {
        let error = |text: &str| parsed(text).expect_err("a mistake");
        assert_eq!(error("tops = \"a\""), "project/stillwire.toml:1: unknown key `tops`; did you mean `top`?");
        assert!(error("colour = true").contains("the keys are `paths`, `lists`, `top`, `set`"));
        assert!(error("gate = \"fatal\"").contains("the value of `gate` is wrong; write `\"error\"`"));
        assert!(error("top = 1").contains("write a text or a list of texts"));
        assert!(error("\ntop = ").contains("project/stillwire.toml:2: "));
    }
}
