//! Which files a scan reads when it is given folders: every `.v .sv .vh .svh` below them in a stable order, hidden folders
//! left out. Headers are known for include lookup and are no units of their own.
//!
//! Invariant: the result depends on names only, never on the order in which the file system lists them.

use std::fmt;
use std::path::{Component, Path, PathBuf};

use walkdir::WalkDir;

use crate::diagnostic::{Diagnostic, Kind};

/// Wrong paths, file lists, settings or usage: nothing was analysed.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct PathError {
    /// Names the thing.
    pub message: String,
    /// Says what to do.
    pub help: String,
}

impl PathError {
    pub fn new(message: impl Into<String>, help: impl Into<String>) -> Self {
        Self { message: message.into(), help: help.into() }
    }
}

impl fmt::Display for PathError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}; {}", self.message, self.help)
    }
}

/// Files and folders that the settings leave out: paths relative to `root`, where `*` stands for any characters within
/// one name and `**` for any number of folders.
#[derive(Clone, Default, Debug)]
pub struct Exclude {
    pub root: PathBuf,
    pub patterns: Vec<String>,
}

impl Exclude {
    fn matches(&self, path: &Path) -> bool {
        if self.patterns.is_empty() {
            return false;
        }
        let absolute = |path: &Path| std::path::absolute(path).unwrap_or_else(|_| path.to_path_buf());
        let root = absolute(&self.root);
        let path = absolute(path);
        let Ok(relative) = path.strip_prefix(&root) else { return false };
        let parts = names(relative);
        self.patterns.iter().any(|pattern| {
            let pattern = names(Path::new(pattern));
            matches_names(&pattern, &parts)
        })
    }
}

fn names(path: &Path) -> Vec<String> {
    let normal = |component| match component {
        Component::Normal(name) => Some(name.to_string_lossy().into_owned()),
        _ => None,
    };
    path.components().filter_map(normal).collect()
}

fn matches_names(pattern: &[String], names: &[String]) -> bool {
    match (pattern.split_first(), names.split_first()) {
        (None, _) => names.is_empty(),
        (Some((first, rest)), _) if first == "**" => {
            matches_names(rest, names) || names.split_first().is_some_and(|(_, names)| matches_names(pattern, names))
        }
        (Some((first, rest)), Some((name, names))) => matches_name(first, name) && matches_names(rest, names),
        (Some(_), None) => false,
    }
}

fn matches_name(pattern: &str, name: &str) -> bool {
    let mut parts = pattern.split('*');
    let Some(mut rest) = parts.next().and_then(|first| name.strip_prefix(first)) else { return false };
    let parts: Vec<&str> = parts.collect();
    let Some((last, middle)) = parts.split_last() else { return rest.is_empty() };
    for part in middle {
        match rest.find(part) {
            Some(at) => rest = &rest[at + part.len()..],
            None => return false,
        }
    }
    rest.len() >= last.len() && rest.ends_with(last)
}

/// What the paths lead to.
#[derive(Default)]
pub struct Discovered {
    /// Files to parse, in order.
    pub units: Vec<PathBuf>,
    /// Every regular file below the paths, for include lookup.
    pub tree: Vec<PathBuf>,
    pub diagnostics: Vec<Diagnostic>,
}

#[derive(PartialEq, Eq)]
enum Role {
    Unit,
    Header,
    Other,
}

fn role(path: &Path) -> Role {
    match path.extension().and_then(|extension| extension.to_str()) {
        Some("v" | "sv") => Role::Unit,
        Some("vh" | "svh") => Role::Header,
        _ => Role::Other,
    }
}

/// Walks the paths in the given order.
///
/// # Errors
/// A path that does not exist or is neither file nor folder.
pub fn discover(paths: &[PathBuf], exclude: &Exclude) -> Result<Discovered, PathError> {
    let mut found = Discovered::default();
    for path in paths {
        let metadata = std::fs::metadata(path).map_err(|error| {
            let help = match error.kind() {
                std::io::ErrorKind::NotFound => "check the spelling; paths are relative to the current folder",
                _ => "check that it may be read",
            };
            PathError::new(format!("the path `{}` cannot be read: {error}", path.display()), help)
        })?;
        if metadata.is_dir() {
            walk(path, exclude, &mut found);
        } else if metadata.is_file() {
            // A file that is named outright is parsed whatever its name says, except that headers stay headers:
            // `scan rtl/*` must mean the same as `scan rtl`.
            if role(path) != Role::Header {
                found.units.push(path.clone());
            }
            found.tree.push(path.clone());
        } else {
            let message = format!("the path `{}` is neither a file nor a folder", path.display());
            return Err(PathError::new(message, "give files or folders of Verilog sources"));
        }
    }
    Ok(found)
}

fn walk(folder: &Path, exclude: &Exclude, found: &mut Discovered) {
    let hidden = |entry: &walkdir::DirEntry| entry.depth() > 0 && entry.file_name().to_string_lossy().starts_with('.');
    let entries = WalkDir::new(folder).follow_links(true).sort_by_file_name().into_iter();
    for entry in entries.filter_entry(|entry| !hidden(entry) && !exclude.matches(entry.path())) {
        match entry {
            Ok(entry) if entry.file_type().is_file() => {
                let path = entry.into_path();
                let path = path.strip_prefix("./").map(Path::to_path_buf).unwrap_or(path);
                if role(&path) == Role::Unit {
                    found.units.push(path.clone());
                }
                found.tree.push(path);
            }
            Ok(_) => {}
            Err(error) => found.diagnostics.extend(problem(&error)),
        }
    }
}

fn problem(error: &walkdir::Error) -> Option<Diagnostic> {
    let path = error.path()?;
    if let Some(ancestor) = error.loop_ancestor() {
        let message = format!("the link `{}` leads back to its own folder `{}`", path.display(), ancestor.display());
        let diagnostic = Diagnostic::new(Kind::Note, "link cycle", message, None);
        return Some(diagnostic.with_help("the link is not followed; nothing below it is lost"));
    }
    let is_dead_link = std::fs::symlink_metadata(path).is_ok_and(|metadata| metadata.is_symlink());
    // A dead link that would not have been read anyway takes nothing away.
    if is_dead_link && role(path) == Role::Other {
        return None;
    }
    let reason = error.io_error().map_or_else(|| error.to_string(), ToString::to_string);
    let message = format!("`{}` cannot be read: {reason}", path.display());
    let help = if is_dead_link { "remove the dead link or restore its target" } else { "check its permissions" };
    Some(Diagnostic::new(Kind::Incomplete, "file", message, None).with_help(help))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exclude_patterns() {
        let check = |pattern: &str, path: &str| matches_names(&names(Path::new(pattern)), &names(Path::new(path)));
        assert!(check("sim", "sim"));
        assert!(check("**/tb_*.v", "a/b/tb_top.v"));
        assert!(check("**/tb_*.v", "tb_top.v"));
        assert!(check("rtl/*_sim*.sv", "rtl/core_sim_1.sv"));
        assert!(!check("rtl/*.v", "rtl/sub/a.v"));
        assert!(!check("sim", "simulator"));
    }
}
