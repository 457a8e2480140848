//! File lists (`-f`): the traditional way to name sources, macros, include folders and libraries in compilation order.
//! A list is words separated by white space, with `//`, `#` and `/* */` comments, double quotes around words that contain
//! spaces, and environment variables as `$NAME`, `${NAME}` or `$(NAME)`.
//!
//! Relative paths are relative to the current folder, as the tradition has it, and when nothing is there, to the folder of
//! the list itself. Inside a list that another one includes with `-F` the list's own folder comes first.
//!
//! Invariant: the environment is only read through the function that the caller passes.

use std::path::{Path, PathBuf};

use super::PathError;
use crate::input::{Input, InputRole};

/// Looks up an environment variable.
pub type Environment<'a> = &'a (dyn Fn(&str) -> Option<String> + Sync);

/// Everything that one or several lists say, in order.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct FileList {
    pub files: Vec<PathBuf>,
    pub include: Vec<PathBuf>,
    pub defines: Vec<(String, Option<String>)>,
    pub library_files: Vec<PathBuf>,
    pub library_folders: Vec<PathBuf>,
    /// Suffixes of library files, dot included.
    pub library_suffixes: Vec<String>,
    /// Options that mean nothing here, each with its list and line.
    pub ignored: Vec<String>,
    /// The lists themselves, nested ones included.
    pub inputs: Vec<Input>,
}

/// Lists that include lists deeper than this include each other.
const MAX_DEPTH: usize = 32;

impl FileList {
    /// Reads the list `path` and everything it includes, and appends what it says.
    ///
    /// # Errors
    /// A list or a file that does not exist, an option without its argument, an undefined environment variable.
    pub fn read(&mut self, path: &Path, environment: Environment<'_>) -> Result<(), PathError> {
        self.read_nested(path, false, environment, 0)
    }

    fn read_nested(
        &mut self,
        path: &Path,
        own_folder_first: bool,
        environment: Environment<'_>,
        depth: usize,
    ) -> Result<(), PathError> {
        if depth > MAX_DEPTH {
            let message = format!("the file list `{}` includes itself", path.display());
            return Err(PathError::new(message, "remove the `-f` line that leads back to it"));
        }
        let bytes = std::fs::read(path).map_err(|error| {
            let message = format!("the file list `{}` cannot be read: {error}", path.display());
            PathError::new(message, "check its path; `-f` wants a text file with one source per line")
        })?;
        self.inputs.push(Input::read(InputRole::List, path, &bytes));
        let text = String::from_utf8_lossy(&bytes);
        let list = List { path, own_folder_first, environment };
        let mut words = list.words(&text)?.into_iter();
        while let Some((line, word)) = words.next() {
            let mut argument = |option: &str| {
                words.next().map(|(_, word)| word).ok_or_else(|| {
                    let message = format!("{}:{line}: `{option}` has no argument", path.display());
                    PathError::new(message, "write the file or folder behind it")
                })
            };
            match word.as_str() {
                "-f" | "-F" => {
                    let nested = list.existing(&argument(&word)?, line)?;
                    self.read_nested(&nested, word == "-F", environment, depth + 1)?;
                }
                "-v" => self.library_files.push(list.existing(&argument("-v")?, line)?),
                "-y" => self.library_folders.push(list.existing(&argument("-y")?, line)?),
                "-I" => self.include.push(list.resolve(&argument("-I")?)),
                "-D" => self.defines.push(define(&argument("-D")?)),
                other => self.word(&list, line, other)?,
            }
        }
        Ok(())
    }

    fn word(&mut self, list: &List<'_>, line: usize, word: &str) -> Result<(), PathError> {
        let parts =
            |rest: &str| rest.split('+').filter(|part| !part.is_empty()).map(str::to_string).collect::<Vec<_>>();
        if let Some(rest) = word.strip_prefix("+incdir+") {
            self.include.extend(parts(rest).iter().map(|folder| list.resolve(folder)));
        } else if let Some(rest) = word.strip_prefix("+define+") {
            self.defines.extend(parts(rest).iter().map(|text| define(text)));
        } else if let Some(rest) = word.strip_prefix("+libext+") {
            self.library_suffixes.extend(parts(rest));
        } else if let Some(folder) = word.strip_prefix("-I").filter(|rest| !rest.is_empty()) {
            self.include.push(list.resolve(folder));
        } else if let Some(text) = word.strip_prefix("-D").filter(|rest| !rest.is_empty()) {
            self.defines.push(define(text));
        } else if word.starts_with(['-', '+']) {
            self.ignored.push(format!("{}:{line}: `{word}`", list.path.display()));
        } else {
            self.files.push(list.existing(word, line)?);
        }
        Ok(())
    }
}

/// `NAME` or `NAME=VALUE`.
pub fn define(text: &str) -> (String, Option<String>) {
    match text.split_once('=') {
        Some((name, value)) => (name.to_string(), Some(value.to_string())),
        None => (text.to_string(), None),
    }
}

/// One list while it is read.
struct List<'a> {
    path: &'a Path,
    own_folder_first: bool,
    environment: Environment<'a>,
}

impl List<'_> {
    /// The words with their line numbers.
    fn words(&self, text: &str) -> Result<Vec<(usize, String)>, PathError> {
        let mut words = Vec::new();
        let mut word: Option<(usize, String)> = None;
        let mut line = 1;
        let mut quoted = false;
        let mut rest = text;
        while let Some(next) = rest.chars().next() {
            if !quoted && word.is_none() && (rest.starts_with("//") || next == '#') {
                rest = &rest[rest.find('\n').unwrap_or(rest.len())..];
                continue;
            }
            if !quoted && word.is_none() && rest.starts_with("/*") {
                let end = rest[2..].find("*/").map_or(rest.len(), |at| at + 4);
                line += rest[..end].matches('\n').count();
                rest = &rest[end..];
                continue;
            }
            rest = &rest[next.len_utf8()..];
            match next {
                '"' => {
                    quoted = !quoted;
                    word.get_or_insert_with(|| (line, String::new()));
                }
                '$' => {
                    let (value, behind) = self.variable(rest, line)?;
                    word.get_or_insert_with(|| (line, String::new())).1.push_str(&value);
                    rest = behind;
                }
                space if space.is_whitespace() && !quoted => words.extend(word.take()),
                other => word.get_or_insert_with(|| (line, String::new())).1.push(other),
            }
            line += usize::from(next == '\n');
        }
        words.extend(word);
        Ok(words)
    }

    /// The value of the variable whose name stands at the start of `rest`, and the text behind the name. A `$` without a
    /// name stands for itself.
    fn variable<'t>(&self, rest: &'t str, line: usize) -> Result<(String, &'t str), PathError> {
        let close = match rest.chars().next() {
            Some('{') => Some('}'),
            Some('(') => Some(')'),
            _ => None,
        };
        let (name, behind) = match close {
            Some(close) => {
                let Some(end) = rest.find(close) else {
                    let message = format!("{}:{line}: `${}` is not closed", self.path.display(), &rest[..1]);
                    return Err(PathError::new(message, format!("write `{close}` behind the variable's name")));
                };
                (&rest[1..end], &rest[end + 1..])
            }
            None => {
                let end = rest.find(|c: char| !c.is_ascii_alphanumeric() && c != '_').unwrap_or(rest.len());
                rest.split_at(end)
            }
        };
        if name.is_empty() {
            return Ok(("$".to_string(), behind));
        }
        match (self.environment)(name) {
            Some(value) => Ok((value, behind)),
            None => {
                let message = format!("{}:{line}: the environment variable `{name}` is not set", self.path.display());
                Err(PathError::new(message, format!("set it, as in `{name}=... stillwire scan`")))
            }
        }
    }

    /// Where a relative path points: to the current folder or to that of the list, whichever has it.
    fn resolve(&self, text: &str) -> PathBuf {
        let path = PathBuf::from(text);
        let beside = self.path.parent().unwrap_or(Path::new("")).join(&path);
        let (first, second) = if self.own_folder_first { (beside, path) } else { (path, beside) };
        if !first.exists() && second.exists() { second } else { first }
    }

    fn existing(&self, text: &str, line: usize) -> Result<PathBuf, PathError> {
        let path = self.resolve(text);
        if path.exists() {
            return Ok(path);
        }
        let message = format!("{}:{line}: `{text}` does not exist", self.path.display());
        Err(PathError::new(message, "paths are relative to the current folder, or to the folder of the list"))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn read(files: &[(&str, &str)]) -> (tempfile::TempDir, Result<FileList, PathError>) {
        let folder = tempfile::tempdir().expect("a temporary folder");
        for (name, text) in files {
            let path = folder.path().join(name);
            std::fs::create_dir_all(path.parent().expect("a parent")).expect("folders");
            std::fs::write(path, text).expect("a file");
        }
        let root = folder.path().to_string_lossy().into_owned();
        let environment = move |name: &str| (name == "ROOT").then(|| root.clone());
        let mut list = FileList::default();
        let result = list.read(&folder.path().join("top.f"), &environment).map(|()| list);
        (folder, result)
    }

    #[test]
    fn everything_a_list_can_say() {
        let top = "// comment\n$ROOT/a.v # another\n/* c.v\n */ ${ROOT}/b.v\n+incdir+inc+$(ROOT)/more\n\
                   +define+A=1+B -y lib -v cells.v +libext+.v+.sv\n-F sub/sub.f\n\"with space.v\" -sverilog\n";
        let files = [
            ("top.f", top),
            ("a.v", ""),
            ("b.v", ""),
            ("with space.v", ""),
            ("cells.v", ""),
            ("lib/x.v", ""),
            ("inc/x.vh", ""),
            ("sub/sub.f", "inner.v"),
            ("sub/inner.v", ""),
        ];
        let (folder, list) = read(&files);
        let list = list.expect("a good list");
        let at = |name: &str| folder.path().join(name);
        assert_eq!(list.files, [at("a.v"), at("b.v"), at("sub/inner.v"), at("with space.v")]);
        assert_eq!(list.include, [at("inc"), at("more")]);
        assert_eq!(list.defines, [("A".to_string(), Some("1".to_string())), ("B".to_string(), None)]);
        assert_eq!((list.library_folders, list.library_files), (vec![at("lib")], vec![at("cells.v")]));
        assert_eq!(list.library_suffixes, [".v", ".sv"]);
        assert_eq!(list.ignored.len(), 1);
    }

    #[test]
    fn mistakes_name_list_and_line() {
        let message = |text: &str| read(&[("top.f", text)]).1.expect_err("a mistake").message;
        assert!(message("\n$NOWHERE/a.v").ends_with("top.f:2: the environment variable `NOWHERE` is not set"));
        assert!(message("a\n").ends_with("top.f:1: `a` does not exist"));
        assert!(message("-v").ends_with("top.f:1: `-v` has no argument"));
        assert!(message("-f top.f").ends_with("top.f` includes itself"));
    }
}
