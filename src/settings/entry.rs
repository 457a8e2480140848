//! One entry of the settings file while it is read: a key with its value and its place. Every mistake names the line.

use std::collections::BTreeMap;
use std::path::Path;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use crate::rules::Severity;
use crate::source::PathError;
use crate::spelling::nearest;

/// The text of the file and its path, for places.
#[derive(Clone, Copy)]
pub(super) struct Text<'a> {
    pub path: &'a Path,
    pub text: &'a str,
}

impl Text<'_> {
    /// The line of a byte, 1-based.
    pub fn line(self, at: usize) -> usize {
        1 + self.text.as_bytes()[..at.min(self.text.len())].iter().filter(|&&byte| byte == b'\n').count()
    }

    pub fn error(self, at: usize, message: &str, help: impl Into<String>) -> PathError {
        PathError::new(format!("{}:{}: {message}", self.path.display(), self.line(at)), help)
    }
}

pub(super) struct Entry<'a> {
    pub source: Text<'a>,
    /// `define`, or `assume.nets` inside of a table.
    pub key: String,
    /// Where the key begins.
    pub at: usize,
    pub value: &'a DeValue<'a>,
}

/// The entries of a table by key, all of them among `known`.
pub(super) fn entries<'a>(
    source: Text<'a>,
    prefix: &str,
    table: &'a DeTable<'a>,
    known: &[&str],
) -> Result<BTreeMap<&'a str, Entry<'a>>, PathError> {
    let mut found = BTreeMap::new();
    for (key, value) in table {
        let name: &str = key.as_ref();
        let entry = Entry::new(source, prefix, key, value);
        if !known.contains(&name) {
            let help = match nearest(name, known.iter().copied()) {
                Some(nearest) => format!("did you mean `{nearest}`?"),
                None => {
                    let known: Vec<String> = known.iter().map(|key| format!("`{key}`")).collect();
                    format!("the keys are {}", known.join(", "))
                }
            };
            return Err(source.error(entry.at, &format!("unknown key `{}`", entry.key), help));
        }
        found.insert(name, entry);
    }
    Ok(found)
}

impl<'a> Entry<'a> {
    pub fn new(
        source: Text<'a>,
        prefix: &str,
        key: &'a Spanned<std::borrow::Cow<'a, str>>,
        value: &'a Spanned<DeValue<'a>>,
    ) -> Self {
        let name: &str = key.as_ref();
        let name = if prefix.is_empty() { name.to_string() } else { format!("{prefix}.{name}") };
        Self { source, key: name, at: key.span().start, value: value.get_ref() }
    }

    pub fn line(&self) -> usize {
        self.source.line(self.at)
    }

    pub fn wrong(&self, wanted: &str) -> PathError {
        let message = format!("the value of `{}` is wrong", self.key);
        self.source.error(self.at, &message, format!("write {wanted}"))
    }

    /// A text that says something.
    pub fn text(&self) -> Result<String, PathError> {
        let text = self.value.as_str().map(str::trim).filter(|text| !text.is_empty());
        text.map(str::to_string).ok_or_else(|| self.wrong("a text in double quotes"))
    }

    /// A text or a list of texts, each with its line.
    pub fn lines(&self) -> Result<Vec<(String, usize)>, PathError> {
        let wanted = "a text or a list of texts, as in `[\"a\", \"b\"]`";
        match self.value {
            DeValue::String(text) => Ok(vec![(text.to_string(), self.line())]),
            DeValue::Array(values) => values
                .iter()
                .map(|value| {
                    let text = value.get_ref().as_str().ok_or_else(|| self.wrong(wanted))?;
                    Ok((text.to_string(), self.source.line(value.span().start)))
                })
                .collect(),
            _ => Err(self.wrong(wanted)),
        }
    }

    pub fn texts(&self) -> Result<Vec<String>, PathError> {
        Ok(self.lines()?.into_iter().map(|(text, _)| text).collect())
    }

    pub fn table(&self) -> Result<&'a DeTable<'a>, PathError> {
        let value = self.value;
        value.as_table().ok_or_else(|| self.wrong(&format!("a table, headed `[{}]`", self.key)))
    }

    /// The tables of an array of tables, each with the place where it begins.
    pub fn tables(&self) -> Result<Vec<(&'a DeTable<'a>, usize)>, PathError> {
        let wrong = || self.wrong(&format!("tables, each headed `[[{}]]`", self.key));
        let value = self.value;
        let tables = value.as_array().ok_or_else(wrong)?;
        tables.iter().map(|table| Ok((table.get_ref().as_table().ok_or_else(wrong)?, table.span().start))).collect()
    }

    pub fn severity(&self) -> Result<Severity, PathError> {
        match self.value.as_str() {
            Some("error") => Ok(Severity::Error),
            Some("warning") => Ok(Severity::Warning),
            Some("note") => Ok(Severity::Note),
            _ => Err(self.wrong("`\"error\"`, `\"warning\"` or `\"note\"`")),
        }
    }
}
