//! Where a missing thing is: an include file, a macro, a package or a module that the sources name and do not have. The
//! scanned trees are searched first, then the folders near them, so that a diagnostic can say which `-I`, `-D` or path would
//! help. Nothing found here is read into the design: whether it belongs there only the user knows.
//!
//! Invariant: the search is bounded in folders, files and bytes, and its result depends on names and texts only.

use std::collections::{BTreeMap, BTreeSet};
use std::ffi::OsString;
use std::path::{Path, PathBuf};

use walkdir::WalkDir;

use super::declared::{Kind, declared};
use super::include::IncludeSearch;
use crate::diagnostic::{Diagnostic, Missing};

/// Folders above a scanned one that count as near.
const LEVELS: usize = 2;
/// Depth of the search below such a folder.
const DEPTH: usize = 8;
/// Entries looked at outside of the scanned trees.
const MAX_ENTRIES: usize = 20_000;
/// Bytes of text read for declarations.
const MAX_BYTES: u64 = 64 << 20;
/// So many places are named.
const SHOWN: usize = 3;

/// Answers where things are. Nothing is searched before the first question.
#[derive(Debug, Default)]
pub struct Nearby {
    /// The paths of the scan.
    roots: Vec<PathBuf>,
    /// Every file of the scanned trees.
    tree: Vec<PathBuf>,
    index: Option<Index>,
}

#[derive(Debug, Default)]
struct Index {
    /// Files outside of the scanned trees by name.
    near: BTreeMap<OsString, Vec<PathBuf>>,
    /// Files of the scanned trees by name.
    scanned: BTreeMap<OsString, Vec<PathBuf>>,
    declared: BTreeMap<(Kind, String), Vec<Place>>,
}

#[derive(Clone, Debug)]
struct Place {
    path: PathBuf,
    line: usize,
    scanned: bool,
}

impl Nearby {
    pub fn new(roots: Vec<PathBuf>, tree: Vec<PathBuf>) -> Self {
        Self { roots, tree, index: None }
    }

    /// Adds to each diagnostic about something missing where it is.
    pub fn hint(&mut self, diagnostics: &mut [Diagnostic]) {
        for diagnostic in diagnostics {
            if let Some(missing) = &diagnostic.missing {
                let place = self.place(missing);
                diagnostic.help = Some(match diagnostic.help.take() {
                    Some(help) => format!("{place}; {help}"),
                    None => place,
                });
            }
        }
    }

    /// Where a module is declared, if that is known.
    pub fn module(&mut self, name: &str) -> Option<String> {
        let index = self.index();
        index.declared.contains_key(&(Kind::Module, name.to_string())).then(|| index.declaration(Kind::Module, name))
    }

    fn index(&mut self) -> &Index {
        let Self { roots, tree, index } = self;
        index.get_or_insert_with(|| Index::new(roots, tree))
    }

    /// Where it is and which option or path gives it.
    fn place(&mut self, missing: &Missing) -> String {
        let index = self.index();
        match missing {
            Missing::Include(name) => index.include(name),
            Missing::Macro(name) => index.declaration(Kind::Macro, name),
            Missing::Package(name) => index.declaration(Kind::Package, name),
            Missing::Module(name) => index.declaration(Kind::Module, name),
        }
    }
}

impl Index {
    fn new(roots: &[PathBuf], tree: &[PathBuf]) -> Self {
        let mut index = Self::default();
        let mut known: BTreeSet<PathBuf> = BTreeSet::new();
        let mut bytes = 0;
        for path in tree {
            if known.insert(absolute(path)) {
                index.scanned.entry(file_name(path)).or_default().push(path.clone());
                index.read(path, true, &mut bytes);
            }
        }
        let mut entries = 0;
        for (root, start) in roots.iter().map(|root| (root, folder_of(root))) {
            for folder in start.ancestors().take(LEVELS + 1).filter(|folder| is_near(folder)) {
                let hidden = |entry: &walkdir::DirEntry| {
                    entry.depth() > 0 && entry.file_name().to_string_lossy().starts_with('.')
                };
                let walk = WalkDir::new(folder).max_depth(DEPTH).sort_by_file_name().into_iter();
                for entry in walk.filter_entry(|entry| !hidden(entry)).flatten() {
                    entries += 1;
                    if entries > MAX_ENTRIES {
                        return index;
                    }
                    if entry.file_type().is_file() && known.insert(entry.path().to_path_buf()) {
                        let path = shown(entry.path(), root);
                        index.near.entry(file_name(&path)).or_default().push(path.clone());
                        index.read(&path, false, &mut bytes);
                    }
                }
                if folder.join(".git").exists() {
                    break;
                }
            }
        }
        index
    }

    fn read(&mut self, path: &Path, scanned: bool, bytes: &mut u64) {
        let extension = path.extension().and_then(|extension| extension.to_str());
        if !matches!(extension, Some("v" | "sv" | "vh" | "svh" | "h" | "inc")) {
            return;
        }
        let size = std::fs::metadata(path).map_or(u64::MAX, |metadata| metadata.len());
        if bytes.saturating_add(size) > MAX_BYTES {
            return;
        }
        *bytes += size;
        let Ok(text) = std::fs::read(path) else { return };
        for (kind, name, line) in declared(&String::from_utf8_lossy(&text)) {
            let places = self.declared.entry((kind, name.to_string())).or_default();
            if places.last().is_none_or(|place| place.path != path) {
                places.push(Place { path: path.to_path_buf(), line, scanned });
            }
        }
    }

    fn include(&self, name: &str) -> String {
        let wanted = file_name(Path::new(name));
        let found = self.near.get(&wanted).map_or(&[][..], Vec::as_slice);
        let fitting: Vec<&PathBuf> = found.iter().filter(|path| path.ends_with(name)).collect();
        if !fitting.is_empty() {
            let options = fitting.iter().take(SHOWN);
            let options: Vec<String> = options.map(|path| folder_option(name, path)).collect();
            let files: Vec<String> = fitting.iter().take(SHOWN).map(|path| format!("`{}`", path.display())).collect();
            return format!("it may be {}: give {}", files.join(" or "), options.join(" or "));
        }
        let elsewhere = self.scanned.get(&wanted).into_iter().flatten().chain(found);
        let elsewhere: Vec<String> = elsewhere.take(SHOWN).map(|path| format!("`{}`", path.display())).collect();
        if elsewhere.is_empty() {
            return "no file of that name is in or near the scanned folders: name its folder with `-I`".to_string();
        }
        format!(
            "its name is that of {}, but in a folder of another name than the include says",
            elsewhere.join(" and ")
        )
    }

    fn declaration(&self, kind: Kind, name: &str) -> String {
        let places = self.declared.get(&(kind, name.to_string())).map_or(&[][..], Vec::as_slice);
        let list: Vec<String> =
            places.iter().take(SHOWN).map(|place| format!("`{}:{}`", place.path.display(), place.line)).collect();
        let list = list.join(" and ");
        let scanned = places.iter().any(|place| place.scanned);
        let (defines, declares) = if places.len() > 1 { ("define", "declare") } else { ("defines", "declares") };
        match (kind, places) {
            (Kind::Macro, []) => format!(
                "nothing in or near the scanned folders defines it: define it with `-D {name}` or `-D {name}=VALUE`"
            ),
            (Kind::Macro, _) => {
                format!("{list} {defines} it: include that file here, or list it before this one in a file list (`-f`)")
            }
            (_, []) => {
                let what = if kind == Kind::Package { "package" } else { "module" };
                format!(
                    "no file in or near the scanned folders declares this {what}: add its file or folder to the paths"
                )
            }
            (_, _) if scanned => {
                format!(
                    "{list} declares it, but that text was left out: see what is said about it, and the conditions around it"
                )
            }
            (_, [first, ..]) => format!("{list} {declares} it: add `{}` to the paths", first.path.display()),
        }
    }
}

fn folder_option(name: &str, path: &Path) -> String {
    format!("`-I {}`", IncludeSearch::folder_for(name, path).display())
}

fn absolute(path: &Path) -> PathBuf {
    std::path::absolute(path).unwrap_or_else(|_| path.to_path_buf())
}

fn folder_of(path: &Path) -> PathBuf {
    let path = absolute(path);
    match path.parent() {
        Some(parent) if path.is_file() => parent.to_path_buf(),
        _ => path,
    }
}

fn file_name(path: &Path) -> OsString {
    path.file_name().unwrap_or_default().to_os_string()
}

/// Folders such as `/`, `/tmp` or a home are shared by too much to be near anything.
fn is_near(folder: &Path) -> bool {
    let names: Vec<_> = folder.iter().skip(1).collect();
    let is_home = names.first().is_some_and(|first| *first == "home" || *first == "Users") && names.len() == 2;
    (names.len() >= 2 && !is_home) || folder.join(".git").exists()
}

/// A path as the user would write it: relative to the current folder if the scanned path is.
fn shown(path: &Path, root: &Path) -> PathBuf {
    let current = absolute(Path::new("."));
    match path.strip_prefix(&current) {
        Ok(relative) if root.is_relative() => relative.to_path_buf(),
        _ => path.to_path_buf(),
    }
}
