//! Inputs and where they come from: the committed fixtures, and what was found worth keeping during this run.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use fastrand::Rng;

/// The files of one run. Text is bytes: not every file is UTF-8.
#[derive(Clone, Debug)]
pub struct Input {
    pub files: Vec<(String, Vec<u8>)>,
    /// Whether a module with a syntax error is put behind the first file, so that the run must not be complete.
    pub broken_tail: bool,
}

const BROKEN: &str = "\n\nmodule broken_at_the_end(input a, output y); assign y = & ; endmodule\n";

impl Input {
    pub fn single(name: &str, text: Vec<u8>) -> Self {
        Self { files: vec![(name.to_string(), text)], broken_tail: false }
    }

    /// A file, or a folder of files.
    pub fn read(path: &Path) -> Self {
        let mut files = Vec::new();
        for entry in walkdir::WalkDir::new(path).sort_by_file_name().into_iter().filter_map(Result::ok) {
            if entry.file_type().is_file() {
                let text = std::fs::read(entry.path()).expect("a readable fixture");
                files.push((entry.file_name().to_string_lossy().into_owned(), text));
            }
        }
        Self { files, broken_tail: false }
    }

    pub fn size(&self) -> usize {
        self.files.iter().map(|(_, text)| text.len()).sum()
    }

    pub fn write(&self, folder: &Path) {
        std::fs::create_dir_all(folder).expect("a writable folder");
        for (index, (name, text)) in self.files.iter().enumerate() {
            let tail = if self.broken_tail && index == 0 { BROKEN } else { "" };
            std::fs::write(folder.join(name), [text.as_slice(), tail.as_bytes()].concat()).expect("a writable file");
        }
    }

    /// Writes the input below `folder` under `name` and returns where.
    pub fn save(&self, folder: &Path, name: &str) -> PathBuf {
        let place = folder.join(name);
        std::fs::remove_dir_all(&place).ok();
        self.write(&place);
        place
    }
}

#[derive(Clone)]
pub struct Corpus {
    /// Shared by the workers; what each keeps is its own.
    seeds: Arc<[Input]>,
    kept: Vec<Input>,
    said: BTreeSet<String>,
}

/// Larger inputs are not kept: mutations only ever grow them.
const MAX_KEPT: usize = 30_000;

impl Corpus {
    /// Every Verilog file below `folder`, each on its own.
    pub fn read(folder: &Path) -> Self {
        let is_verilog = |path: &Path| path.extension().is_some_and(|extension| extension == "v" || extension == "sv");
        let mut files: Vec<PathBuf> = walkdir::WalkDir::new(folder)
            .into_iter()
            .filter_map(Result::ok)
            .map(walkdir::DirEntry::into_path)
            .filter(|path| is_verilog(path))
            .collect();
        files.sort();
        assert!(!files.is_empty(), "no seeds below {}", folder.display());
        Self { seeds: files.iter().map(|file| Input::read(file)).collect(), kept: Vec::new(), said: BTreeSet::new() }
    }

    pub fn len(&self) -> usize {
        self.seeds.len() + self.kept.len()
    }

    /// How many different things the front end said.
    pub fn said(&self) -> usize {
        self.said.len()
    }

    pub fn pick(&self, rng: &mut Rng) -> Input {
        let pool = if self.kept.is_empty() || rng.bool() { &self.seeds[..] } else { &self.kept };
        pool[rng.usize(..pool.len())].clone()
    }

    /// Keeps an input that made the front end say what no other did.
    pub fn keep_if_new(&mut self, input: &Input, said: &[String]) {
        let before = self.said.len();
        self.said.extend(said.iter().cloned());
        if self.said.len() > before && input.size() < MAX_KEPT {
            self.kept.push(input.clone());
        }
    }
}
