//! Keeps the folder bounded. Only files with our own kind of name are counted and deleted, so that a folder given by
//! mistake loses nothing. Another run may delete at the same time: a file that is gone already is no problem, and a run
//! that wanted it works without.

use std::fs;
use std::path::{Path, PathBuf};
use std::time::{Duration, SystemTime};

/// Of entries.
pub(super) const SUFFIX: &str = "entry";
/// Begins the names of files that are being written.
pub(super) const UNDER_WAY: &str = ".new-";
/// A file that is being written for longer was left behind by a run that was killed.
const ABANDONED: Duration = Duration::from_secs(3600);
/// Pruning goes down to this part of the limit, in quarters, so that it is rarely needed.
const QUARTERS_KEPT: u64 = 3;

/// Deletes the files used least recently until those left take less than the limit by a good part; does nothing below it.
pub(super) fn prune(folder: &Path, limit: u64) {
    let mut files = files(folder);
    let mut size: u64 = files.iter().map(|file| file.size).sum();
    if size <= limit {
        return;
    }
    files.sort_by(|one, other| (one.used, &one.path).cmp(&(other.used, &other.path)));
    let enough = limit / 4 * QUARTERS_KEPT;
    for file in files {
        if size <= enough {
            break;
        }
        if fs::remove_file(&file.path).is_ok() {
            size -= file.size;
        }
    }
}

struct File {
    used: SystemTime,
    path: PathBuf,
    size: u64,
}

/// The entries, and deletes what killed runs left behind.
fn files(folder: &Path) -> Vec<File> {
    let list = |folder: &Path| fs::read_dir(folder).into_iter().flatten().flatten();
    let mut files = Vec::new();
    for shelf in list(folder).filter(|shelf| is_hexadecimal(&shelf.file_name().to_string_lossy(), 2)) {
        for file in list(&shelf.path()) {
            let Ok(metadata) = file.metadata() else { continue };
            let used = metadata.modified().unwrap_or(SystemTime::UNIX_EPOCH);
            let name = file.file_name().to_string_lossy().into_owned();
            if !metadata.is_file() {
                continue;
            }
            if name
                .strip_suffix(SUFFIX)
                .and_then(|name| name.strip_suffix('.'))
                .is_some_and(|name| is_hexadecimal(name, 62))
            {
                files.push(File { used, path: file.path(), size: metadata.len() });
            } else if name.starts_with(UNDER_WAY) && used.elapsed().is_ok_and(|age| age > ABANDONED) {
                let _ = fs::remove_file(file.path());
            }
        }
    }
    files
}

fn is_hexadecimal(name: &str, digits: usize) -> bool {
    name.len() == digits && name.bytes().all(|byte| matches!(byte, b'0'..=b'9' | b'a'..=b'f'))
}
