//! What earlier runs worked out, in a folder that any number of runs may share. The cache knows nothing of what it keeps:
//! whoever remembers something names it by a [`Key`], which is a hash over *everything* that the thing depends on. So
//! there is nothing to invalidate: what depends on something else has another name. The version of the program is part
//! of every key.
//!
//! Invariants: an entry is used only if it is whole and was written under its very key ([`entry`]); whatever is wrong with
//! the folder or a file in it costs time and changes nothing else. An entry appears as a whole, by a rename, so that
//! readers never see half of one. The folder is bounded ([`prune`]).

mod entry;
mod key;
mod prune;

use std::fs;
use std::io::Write;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Arc, OnceLock};
use std::time::SystemTime;

use serde::Serialize;
use serde::de::DeserializeOwned;

pub use key::Key;

/// The largest size of the folder in bytes; beyond it the entries that were used least recently are dropped.
pub const LIMIT: u64 = 1 << 30;

/// A folder with what earlier runs worked out; clones share it.
#[derive(Clone, Debug)]
pub struct Cache {
    shared: Arc<Shared>,
}

#[derive(Debug)]
struct Shared {
    folder: PathBuf,
    /// Bytes written by this run.
    written: AtomicU64,
    /// Numbers the files under way.
    next: AtomicU64,
    hits: AtomicU64,
    misses: AtomicU64,
    /// Why something could not be written.
    problem: OnceLock<String>,
}

/// How often a run found what it asked for.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default)]
pub struct Use {
    pub hits: u64,
    pub misses: u64,
}

impl Cache {
    /// The cache in `folder`, which is made when something is first written.
    pub fn new(folder: &Path) -> Self {
        let counter = || AtomicU64::new(0);
        let shared = Shared {
            folder: folder.to_path_buf(),
            written: counter(),
            next: counter(),
            hits: counter(),
            misses: counter(),
            problem: OnceLock::new(),
        };
        Self { shared: Arc::new(shared) }
    }

    /// What was put under the key. `None` when there is nothing, or nothing that can be trusted.
    pub fn get<T: DeserializeOwned>(&self, key: &Key) -> Option<T> {
        let path = self.path(key);
        let found = fs::read(&path).ok().and_then(|bytes| entry::decode(key, &bytes));
        let counter = if found.is_some() { &self.shared.hits } else { &self.shared.misses };
        counter.fetch_add(1, Ordering::Relaxed);
        if found.is_some() {
            // The time of last use decides what is dropped; where it cannot be set, that of writing does.
            let _ = fs::File::options().append(true).open(&path).map(|file| file.set_modified(SystemTime::now()));
        }
        found
    }

    /// Puts a value under a key. A folder that cannot be written costs time in the next run and nothing in this one.
    pub fn put(&self, key: &Key, value: &impl Serialize) {
        let Some(bytes) = entry::encode(key, value) else { return };
        let path = self.path(key);
        let number = self.shared.next.fetch_add(1, Ordering::Relaxed);
        let name = format!("{}{}-{number}", prune::UNDER_WAY, std::process::id());
        let beside = path.with_file_name(name);
        let write = || {
            if let Some(folder) = path.parent() {
                fs::create_dir_all(folder)?;
            }
            let mut file = fs::File::options().write(true).create_new(true).open(&beside)?;
            file.write_all(&bytes)?;
            fs::rename(&beside, &path)
        };
        match write() {
            Ok(()) => {
                self.shared.written.fetch_add(bytes.len() as u64, Ordering::Relaxed);
            }
            Err(error) => {
                let _ = self.shared.problem.set(error.to_string());
                let _ = fs::remove_file(&beside);
            }
        }
    }

    /// Drops the entries used least recently if this run wrote anything and the folder has outgrown `limit` bytes.
    pub fn prune(&self, limit: u64) {
        if self.shared.written.load(Ordering::Relaxed) > 0 {
            prune::prune(&self.shared.folder, limit);
        }
    }

    /// Why something could not be written, if that happened.
    pub fn problem(&self) -> Option<&str> {
        self.shared.problem.get().map(String::as_str)
    }

    pub fn used(&self) -> Use {
        let read = |counter: &AtomicU64| counter.load(Ordering::Relaxed);
        Use { hits: read(&self.shared.hits), misses: read(&self.shared.misses) }
    }

    fn path(&self, key: &Key) -> PathBuf {
        let name = key.name();
        let (folder, file) = name.split_at(2);
        self.shared.folder.join(folder).join(format!("{file}.{}", prune::SUFFIX))
    }
}
