//! Which file an `` `include `` means: one beside the including file, else one in the include folders in their order, else
//! the only file of the scanned tree whose path ends in the written name. When several end in it, nobody can know which
//! one is meant, and all are named.

use std::collections::BTreeMap;
use std::path::{Component, Path, PathBuf};

/// The places that are searched.
#[derive(Default, Debug)]
pub struct IncludeSearch {
    folders: Vec<PathBuf>,
    /// Files of the scanned tree by their name, each list in the order of discovery.
    tree: BTreeMap<std::ffi::OsString, Vec<PathBuf>>,
}

/// Why no file was chosen.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum IncludeProblem {
    Missing,
    Ambiguous(Vec<PathBuf>),
}

impl IncludeSearch {
    pub fn new(folders: Vec<PathBuf>, tree: Vec<PathBuf>) -> Self {
        let mut by_name: BTreeMap<_, Vec<PathBuf>> = BTreeMap::new();
        for path in tree {
            if let Some(name) = path.file_name() {
                by_name.entry(name.to_os_string()).or_default().push(path);
            }
        }
        Self { folders, tree: by_name }
    }

    /// The file that `name` means inside `including`.
    pub fn find(&self, name: &str, including: &Path) -> Result<PathBuf, IncludeProblem> {
        let name = Path::new(name);
        let beside = including.parent().unwrap_or(Path::new("")).join(name);
        let candidates = std::iter::once(beside).chain(self.folders.iter().map(|folder| folder.join(name)));
        if let Some(found) = candidates.into_iter().find(|path| path.is_file()) {
            return Ok(found);
        }
        let wanted: PathBuf = name.components().filter(|part| matches!(part, Component::Normal(_))).collect();
        let same_name = name.file_name().and_then(|name| self.tree.get(name));
        let mut found: Vec<&PathBuf> = Vec::new();
        let mut seen = Vec::new();
        for path in same_name.into_iter().flatten().filter(|path| path.ends_with(&wanted)) {
            let canonical = path.canonicalize().unwrap_or_else(|_| path.clone());
            if !seen.contains(&canonical) {
                seen.push(canonical);
                found.push(path);
            }
        }
        match found[..] {
            [] => Err(IncludeProblem::Missing),
            [only] => Ok(only.clone()),
            _ => Err(IncludeProblem::Ambiguous(found.into_iter().cloned().collect())),
        }
    }

    /// The include folder that would make `name` mean `path`.
    pub fn folder_for(name: &str, path: &Path) -> PathBuf {
        let depth = Path::new(name).components().filter(|part| matches!(part, Component::Normal(_))).count();
        let folder = path.ancestors().nth(depth).unwrap_or(Path::new(""));
        if folder.as_os_str().is_empty() { PathBuf::from(".") } else { folder.to_path_buf() }
    }
}
