//! Reading a whole design: from paths and file lists to one owned syntax tree per file. Preprocessing runs file by file,
//! because files of a list hand macros on and because it is a thousand times faster than parsing; parsing runs in
//! parallel over all pieces of all files.
//!
//! Invariant: units, ids and diagnostics come in the order of the files, whatever the number of threads.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

use rayon::prelude::*;

use super::chunks::{Chunk, chunks};
use super::discover::{Exclude, PathError, discover};
use super::filelist::{Environment, FileList};
use super::include::IncludeSearch;
use super::macros::{Macro, Macros};
use super::nearby::Nearby;
use super::origin::MappedText;
use super::preprocess::preprocess;
use super::regions::Region;
use super::texts::Texts;
use super::{FileId, SourceSet, Span, parse};
use crate::diagnostic::{Diagnostic, Kind};
use crate::input::Input;
use crate::syntax::{ast, externs};

/// What to read.
#[derive(Clone, Default, Debug)]
pub struct Request {
    /// Files and folders, and file lists with the suffix `.f`; when there is neither a path nor a list, the current folder.
    pub paths: Vec<PathBuf>,
    /// File lists, which form one compilation order with shared macros.
    pub lists: Vec<PathBuf>,
    pub include: Vec<PathBuf>,
    pub defines: Vec<(String, Option<String>)>,
    pub exclude: Exclude,
    /// Texts to read in place of those of the files.
    pub instead: Vec<(PathBuf, String)>,
}

/// Is told how many of how many bytes are parsed.
pub type Progress<'a> = &'a (dyn Fn(usize, usize) + Sync);

/// What was read.
#[derive(Debug, Default)]
pub struct Loaded {
    pub sources: SourceSet,
    /// One per parsed file, in order.
    pub units: Vec<ast::Unit>,
    pub diagnostics: Vec<Diagnostic>,
    /// Regions that the sources switch off.
    pub regions: Vec<Region>,
    /// Files whose text was read, headers included.
    pub files_read: usize,
    /// Files that could not be read or parsed, wholly or in part.
    pub files_failed: usize,
    /// Knows where missing things are.
    pub nearby: Nearby,
    /// Every file that was read, file lists included.
    pub inputs: Vec<Input>,
}

/// Reads everything that `request` names. `environment` answers the variables of file lists.
///
/// # Errors
/// A path, a file list or a file named by one that does not exist.
pub fn load(request: &Request, environment: Environment<'_>, progress: Progress<'_>) -> Result<Loaded, PathError> {
    // `.f` is what file lists are called; as Verilog such a file would only be one syntax error.
    let is_list = |path: &&PathBuf| path.extension().is_some_and(|extension| extension == "f") && path.is_file();
    let (lists, paths): (Vec<&PathBuf>, Vec<&PathBuf>) = request.paths.iter().partition(is_list);
    let mut list = FileList::default();
    for path in request.lists.iter().chain(lists.iter().copied()) {
        list.read(path, environment)?;
    }
    let mut paths: Vec<PathBuf> = paths.into_iter().cloned().collect();
    if request.paths.is_empty() && request.lists.is_empty() {
        paths.push(PathBuf::from("."));
    }
    let found = discover(&paths, &request.exclude)?;

    let folders = request.include.iter().chain(&list.include).cloned().collect();
    let listed = list.files.iter().chain(&list.library_files).filter(|path| path.is_file()).cloned();
    let tree: Vec<PathBuf> = found.tree.into_iter().chain(listed).collect();
    let mut reader = Reader {
        texts: Texts::new(&request.instead),
        search: IncludeSearch::new(folders, tree.clone()),
        nearby: Nearby::new(paths.iter().chain(&list.files).cloned().collect(), tree),
        units: Vec::new(),
        included: BTreeMap::new(),
        failed: BTreeSet::new(),
        failures: Vec::new(),
        diagnostics: found.diagnostics,
        progress,
    };
    for path in lists {
        let message = format!("`{}` is read as a file list", path.display());
        let note = Diagnostic::new(Kind::Note, "file list", message, None);
        reader.diagnostics.push(note.with_help(format!("give it with `-f {}` to say so", path.display())));
    }
    for ignored in &list.ignored {
        let message = format!("{ignored} means nothing here and is ignored");
        reader.diagnostics.push(Diagnostic::new(Kind::Note, "file list", message, None));
    }

    for folder in request.include.iter().chain(&list.include).filter(|folder| !folder.is_dir()) {
        let message = format!("the include folder `{}` does not exist", folder.display());
        let warning = Diagnostic::new(Kind::Warning, "include folder", message, None);
        reader.diagnostics.push(warning.with_help("check its spelling; relative ones count from the current folder"));
    }

    let mut list_macros = macros(list.defines.iter().chain(&request.defines));
    let mut planned = Vec::new();
    for path in &list.files {
        planned.extend(reader.plan(path, &mut list_macros));
    }
    for path in &found.units {
        planned.extend(reader.plan(path, &mut macros(&request.defines)));
    }
    reader.parse(planned);
    reader.add_libraries(&list, &mut list_macros);
    reader.note_duplicates();
    Ok(reader.finish(list.inputs))
}

fn macros<'a>(defines: impl IntoIterator<Item = &'a (String, Option<String>)>) -> Macros {
    // A macro without a value is 1, so that it can also be used in an expression.
    let define = |(name, value): &(String, Option<String>)| {
        let body = value.clone().unwrap_or_else(|| "1".to_string());
        (name.clone(), Arc::new(Macro { params: None, body, at: None }))
    };
    defines.into_iter().map(define).collect()
}

/// A preprocessed file with its pieces.
struct Planned {
    file: FileId,
    text: MappedText,
    chunks: Vec<Chunk>,
}

struct Reader<'a> {
    texts: Texts,
    search: IncludeSearch,
    nearby: Nearby,
    units: Vec<(FileId, ast::Unit)>,
    /// Which units included a file.
    included: BTreeMap<FileId, BTreeSet<FileId>>,
    failed: BTreeSet<FileId>,
    /// What is wrong with files as units of their own.
    failures: Vec<(FileId, Diagnostic)>,
    diagnostics: Vec<Diagnostic>,
    progress: Progress<'a>,
}

impl Reader<'_> {
    /// Reads and preprocesses one unit, unless it is one already.
    fn plan(&mut self, path: &Path, macros: &mut Macros) -> Option<Planned> {
        let before = self.texts.set.files.len();
        let Some(file) = self.texts.read(path) else {
            self.failed.extend((before..self.texts.set.files.len()).map(FileId::new));
            return None;
        };
        if !self.texts.claim(file) {
            return None;
        }
        if self.texts.set.file(file).text.trim().is_empty() {
            let message = format!("`{}` is empty", self.texts.set.file(file).name());
            let at = Span { file, start: 0, end: 0 };
            self.diagnostics.push(Diagnostic::new(Kind::Note, "file", message, Some(at)));
        }
        let preprocessed = preprocess(&mut self.texts, &self.search, macros, file);
        self.failures.extend(preprocessed.problems.into_iter().map(|problem| (file, problem)));
        for included in preprocessed.included {
            self.included.entry(included).or_default().insert(file);
        }
        match preprocessed.text {
            Ok(text) => {
                let all = chunks(&text.text);
                let lost = text.gaps.iter().filter_map(|&gap| all.iter().position(|chunk| gap < chunk.end));
                let lost: BTreeSet<usize> = lost.collect();
                let kept = all.into_iter().enumerate().filter(|(index, _)| !lost.contains(index));
                let chunks = kept.map(|(_, chunk)| chunk).collect();
                Some(Planned { file, text, chunks })
            }
            Err(diagnostic) => {
                self.failures.push((file, *diagnostic));
                None
            }
        }
    }

    /// Parses all pieces of the planned files in parallel and adds one unit per file.
    fn parse(&mut self, planned: Vec<Planned>) {
        let pieces: Vec<(&Planned, &Chunk)> =
            planned.iter().flat_map(|unit| unit.chunks.iter().map(move |chunk| (unit, chunk))).collect();
        let total = pieces.iter().map(|(_, chunk)| chunk.end - chunk.start).sum();
        let done = AtomicUsize::new(0);
        let results: Vec<_> = pieces
            .par_iter()
            .with_max_len(1)
            .map(|(unit, chunk)| {
                let is_old = self.texts.set.file(unit.file).path.extension().is_some_and(|extension| extension == "v");
                let result = parse::parse(&unit.text, chunk, unit.file, is_old);
                let length = chunk.end - chunk.start;
                (self.progress)(done.fetch_add(length, Ordering::Relaxed) + length, total);
                result
            })
            .collect();
        let mut results = results.into_iter();
        for unit in &planned {
            let mut whole = ast::Unit::default();
            for result in results.by_ref().take(unit.chunks.len()) {
                whole.append(result.unit);
                self.diagnostics.extend(result.diagnostics);
                self.failures.extend(result.failures.into_iter().map(|failure| (unit.file, failure)));
            }
            externs::resolve(&mut whole);
            self.units.push((unit.file, whole));
        }
    }

    /// Reads library files as long as they define a module that is used and not defined.
    fn add_libraries(&mut self, list: &FileList, macros: &mut Macros) {
        if list.library_files.is_empty() && list.library_folders.is_empty() {
            return;
        }
        // What the `-v` files offer is parsed once and taken module by module.
        let design = std::mem::take(&mut self.units);
        let planned: Vec<Planned> = list.library_files.iter().filter_map(|path| self.plan(path, macros)).collect();
        self.parse(planned);
        let mut shelf = Shelf::new(std::mem::replace(&mut self.units, design));
        let default = [".v".to_string()];
        let suffixes = if list.library_suffixes.is_empty() { &default[..] } else { &list.library_suffixes[..] };
        let mut asked = BTreeSet::new();
        loop {
            let wanted: Vec<String> = undefined(&self.units).into_iter().filter(|name| !asked.contains(name)).collect();
            if wanted.is_empty() {
                return;
            }
            let mut planned = Vec::new();
            for name in wanted {
                match shelf.take(&name) {
                    Some(unit) => self.units.push(unit),
                    None => {
                        let candidates = list
                            .library_folders
                            .iter()
                            .flat_map(|folder| suffixes.iter().map(|suffix| folder.join(format!("{name}{suffix}"))));
                        if let Some(path) = candidates.into_iter().find(|path| path.is_file()) {
                            planned.extend(self.plan(&path, macros));
                        }
                    }
                }
                asked.insert(name);
            }
            self.parse(planned);
        }
    }

    /// Of modules, packages and primitives with one name the first is used, and each other one is named in a note.
    fn note_duplicates(&mut self) {
        let mut modules = First::new("module");
        let mut packages = First::new("package");
        for (_, unit) in &mut self.units {
            unit.modules.retain(|module| modules.keep(&module.name, &mut self.diagnostics));
            unit.udps.retain(|udp| modules.keep(&udp.name, &mut self.diagnostics));
            unit.packages.retain(|package| packages.keep(&package.name, &mut self.diagnostics));
        }
    }

    fn finish(mut self, mut inputs: Vec<Input>) -> Loaded {
        inputs.append(&mut self.texts.inputs);
        let mut diagnostics = std::mem::take(&mut self.texts.diagnostics);
        diagnostics.append(&mut self.diagnostics);
        let failing: BTreeSet<FileId> = self.failures.iter().map(|(file, _)| *file).collect();
        for (file, failure) in self.failures {
            let includers = self.included.get(&file);
            if includers.is_some_and(|units| units.iter().any(|unit| !failing.contains(unit))) {
                // A part of a module that other files include need not be a unit of its own.
                let name = self.texts.set.file(file).name();
                let message = format!("`{name}` is included by other files and is read only there");
                let note = Diagnostic::new(Kind::Note, "include", message, failure.at);
                diagnostics.push(note.with_help(format!("on its own: {}", failure.message)));
            } else {
                self.failed.insert(file);
                diagnostics.push(failure);
            }
        }
        self.nearby.hint(&mut diagnostics);
        self.texts.set.sort_macro_uses();
        Loaded {
            inputs,
            files_read: self.texts.set.files.len(),
            files_failed: self.failed.len(),
            nearby: self.nearby,
            sources: self.texts.set,
            units: self.units.into_iter().map(|(_, unit)| unit).collect(),
            diagnostics,
            regions: self.texts.regions,
        }
    }
}

/// Modules that a library offers, by name.
struct Shelf {
    units: Vec<(FileId, ast::Unit)>,
}

impl Shelf {
    fn new(units: Vec<(FileId, ast::Unit)>) -> Self {
        Self { units }
    }

    /// Takes the first module or primitive of that name, together with what its file declares outside of modules.
    fn take(&mut self, name: &str) -> Option<(FileId, ast::Unit)> {
        for (file, unit) in &mut self.units {
            let mut taken = ast::Unit::default();
            if let Some(index) = unit.modules.iter().position(|module| module.name.name == name) {
                taken.modules.push(unit.modules.remove(index));
            } else if let Some(index) = unit.udps.iter().position(|udp| udp.name.name == name) {
                taken.udps.push(unit.udps.remove(index));
            } else {
                continue;
            }
            taken.items.append(&mut unit.items);
            taken.packages.append(&mut unit.packages);
            return Some((*file, taken));
        }
        None
    }
}

/// The names of instantiated modules that no unit defines, sorted.
fn undefined(units: &[(FileId, ast::Unit)]) -> BTreeSet<String> {
    let mut used = BTreeSet::new();
    let mut defined = BTreeSet::new();
    for (_, unit) in units {
        defined.extend(unit.udps.iter().map(|udp| udp.name.name.as_str()));
        for module in &unit.modules {
            names_of_module(module, &mut used, &mut defined);
        }
        names_of_items(&unit.items, &mut used, &mut defined);
    }
    used.into_iter().filter(|name| !defined.contains(name)).map(str::to_string).collect()
}

fn names_of_module<'a>(module: &'a ast::Module, used: &mut BTreeSet<&'a str>, defined: &mut BTreeSet<&'a str>) {
    defined.insert(&module.name.name);
    names_of_items(&module.items, used, defined);
}

fn names_of_items<'a>(items: &'a [ast::Item], used: &mut BTreeSet<&'a str>, defined: &mut BTreeSet<&'a str>) {
    use ast::ItemKind;
    for item in items {
        match &item.kind {
            ItemKind::Instances { module, .. } => {
                used.insert(&module.name);
            }
            ItemKind::Module(module) => names_of_module(module, used, defined),
            ItemKind::Bind { item, .. } => names_of_items(std::slice::from_ref(item), used, defined),
            ItemKind::GenBlock(block) => names_of_items(&block.items, used, defined),
            ItemKind::GenFor { body, .. } => names_of_items(&body.items, used, defined),
            ItemKind::GenIf { then, otherwise, .. } => {
                for block in std::iter::once(then).chain(otherwise) {
                    names_of_items(&block.items, used, defined);
                }
            }
            ItemKind::GenCase { arms, default, .. } => {
                for block in arms.iter().map(|(_, block)| block).chain(default) {
                    names_of_items(&block.items, used, defined);
                }
            }
            _ => {}
        }
    }
}

/// Which names of one kind are taken, and where.
struct First {
    kind: &'static str,
    seen: BTreeMap<String, ast::Ident>,
}

impl First {
    fn new(kind: &'static str) -> Self {
        Self { kind, seen: BTreeMap::new() }
    }

    /// Whether this is the first of its name. The same text read twice, by an include, is not worth a note.
    fn keep(&mut self, name: &ast::Ident, diagnostics: &mut Vec<Diagnostic>) -> bool {
        let Some(first) = self.seen.get(&name.name) else {
            self.seen.insert(name.name.clone(), name.clone());
            return true;
        };
        if first.span != name.span {
            let message = format!("another {} `{}`, which is not used", self.kind, name.name);
            let note = Diagnostic::new(Kind::Note, "duplicate name", message, Some(name.span));
            let note = note.with_also(first.span, "this first one is used");
            diagnostics.push(note.with_help("leave one of the files out, or rename one of the two"));
        }
        false
    }
}
