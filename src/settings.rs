//! `stillwire.toml`: what a project fixes once instead of repeating it on every command line. The file is looked for
//! upward from the first path; whatever the command line says wins over it.
//!
//! Invariant: a key that is not known is an error, never ignored, because a misspelt setting that does nothing would make
//! a report look cleaner or dirtier than the user thinks. Paths are relative to the folder of the file.

use std::path::{Path, PathBuf};

use toml::{Table, Value};

use crate::rules::Severity;
use crate::source::PathError;
use crate::spelling::distance;

/// The name that is looked for.
pub const FILE_NAME: &str = "stillwire.toml";

const KEYS: [&str; 6] = ["top", "include", "define", "gate", "show", "exclude"];

/// What the file says.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct Settings {
    pub top: Vec<String>,
    pub include: Vec<PathBuf>,
    pub define: Vec<(String, Option<String>)>,
    pub gate: Option<Severity>,
    pub show: Option<Severity>,
    /// Paths or patterns to leave out, relative to `folder`.
    pub exclude: Vec<String>,
    pub folder: PathBuf,
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
    parse(&text, path)
}

fn parse(text: &str, path: &Path) -> Result<Settings, PathError> {
    let table: Table = text.parse().map_err(|error: toml::de::Error| {
        let line = error.span().map_or(1, |span| 1 + text[..span.start.min(text.len())].matches('\n').count());
        let message = format!("{}:{line}: {}", path.display(), error.message());
        PathError::new(message, "the settings are TOML: `key = value`, text in double quotes")
    })?;
    let folder = path.parent().unwrap_or(Path::new("")).to_path_buf();
    let mut settings = Settings { folder: folder.clone(), ..Settings::default() };
    for (key, value) in &table {
        let reader = Reader { path, key, value };
        match key.as_str() {
            "top" => settings.top = reader.texts()?,
            "include" => settings.include = reader.texts()?.iter().map(|text| folder.join(text)).collect(),
            "define" => settings.define = reader.defines()?,
            "gate" => settings.gate = Some(reader.severity()?),
            "show" => settings.show = Some(reader.severity()?),
            "exclude" => settings.exclude = reader.texts()?,
            _ => return Err(unknown_key(path, key)),
        }
    }
    Ok(settings)
}

fn unknown_key(path: &Path, key: &str) -> PathError {
    let nearest = KEYS.into_iter().min_by_key(|known| distance(key, known)).unwrap_or(KEYS[0]);
    let help = if distance(key, nearest) <= 3 {
        format!("did you mean `{nearest}`?")
    } else {
        format!("the keys are {}", KEYS.map(|key| format!("`{key}`")).join(", "))
    };
    PathError::new(format!("{}: unknown key `{key}`", path.display()), help)
}

/// One entry while it is read.
struct Reader<'a> {
    path: &'a Path,
    key: &'a str,
    value: &'a Value,
}

impl Reader<'_> {
    fn wrong(&self, wanted: &str) -> PathError {
        let message = format!("{}: the value of `{}` is wrong", self.path.display(), self.key);
        PathError::new(message, format!("write {wanted}"))
    }

    /// A text or a list of texts.
    fn texts(&self) -> Result<Vec<String>, PathError> {
        let wanted = "a text or a list of texts, as in `[\"a\", \"b\"]`";
        match self.value {
            Value::String(text) => Ok(vec![text.clone()]),
            Value::Array(values) => {
                let text = |value: &Value| value.as_str().map(str::to_string).ok_or_else(|| self.wrong(wanted));
                values.iter().map(text).collect()
            }
            _ => Err(self.wrong(wanted)),
        }
    }

    /// A list of `NAME` and `NAME=VALUE`, or a table of names and values.
    fn defines(&self) -> Result<Vec<(String, Option<String>)>, PathError> {
        let Value::Table(table) = self.value else {
            return Ok(self.texts()?.iter().map(|text| crate::source::define(text)).collect());
        };
        let define = |(name, value): (&String, &Value)| match value {
            Value::String(text) => Ok((name.clone(), Some(text.clone()))),
            Value::Integer(number) => Ok((name.clone(), Some(number.to_string()))),
            Value::Boolean(true) => Ok((name.clone(), None)),
            _ => Err(self.wrong("a text, a number or `true` for each macro")),
        };
        table.iter().map(define).collect()
    }

    fn severity(&self) -> Result<Severity, PathError> {
        match self.value.as_str() {
            Some("error") => Ok(Severity::Error),
            Some("warning") => Ok(Severity::Warning),
            Some("note") => Ok(Severity::Note),
            _ => Err(self.wrong("`\"error\"`, `\"warning\"` or `\"note\"`")),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parsed(text: &str) -> Result<Settings, String> {
        parse(text, Path::new("project/stillwire.toml")).map_err(|error| error.to_string())
    }

    #[test]
    fn every_key() {
        let text = "top = \"core\"\ninclude = [\"rtl/include\"]\ndefine = [\"A\", \"B=2\"]\ngate = \"warning\"\n\
                    show = \"note\"\nexclude = [\"sim\"]";
        let settings = parsed(text).expect("good settings");
        assert_eq!(settings.top, ["core"]);
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
        assert_eq!(error("tops = \"a\""), "project/stillwire.toml: unknown key `tops`; did you mean `top`?");
        assert!(error("colour = true").contains("the keys are `top`, `include`"));
        assert!(error("gate = \"fatal\"").contains("the value of `gate` is wrong; write `\"error\"`"));
        assert!(error("top = 1").contains("write a text or a list of texts"));
        assert!(error("\ntop = ").contains("project/stillwire.toml:2: "));
    }
}
