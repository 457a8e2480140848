//! Gives each build of the program a name that changes with its sources. What the cache remembers is filed under it, so
//! that a verdict of another version is never taken for one of this version, not even during development.
//!
//! The entry point is left out: it only reads arguments and writes results.

use std::collections::hash_map::DefaultHasher;
use std::hash::Hasher;
use std::path::{Path, PathBuf};

/// What decides about verdicts: our sources, and the versions of everything else.
const INPUTS: [&str; 3] = ["src", "Cargo.lock", "Cargo.toml"];
const ENTRY: &str = "src/main.rs";

fn main() {
    let mut hasher = DefaultHasher::new();
    for input in INPUTS {
        println!("cargo::rerun-if-changed={input}");
        let mut files = Vec::new();
        collect(Path::new(input), &mut files);
        files.sort();
        for file in files.iter().filter(|file| *file != Path::new(ENTRY)) {
            hasher.write(file.to_string_lossy().as_bytes());
            hasher.write(&std::fs::read(file).unwrap_or_default());
        }
    }
    println!("cargo::rustc-env=STILLWIRE_BUILD={:016x}", hasher.finish());
}

fn collect(path: &Path, files: &mut Vec<PathBuf>) {
    match std::fs::read_dir(path) {
        Ok(entries) => entries.flatten().for_each(|entry| collect(&entry.path(), files)),
        Err(_) => files.push(path.to_path_buf()),
    }
}
