//! Serialised spans. What is remembered about one file must not depend on the numbers that the files of a run happen to
//! have, so within [`relative_to`] a span names its file by the position in a list of that file's own: the file itself,
//! and those that its text comes from. Outside of it a span has the number of the run.
//!
//! The list is a variable of the thread because serde hands no context down to a field. Nothing is serialised on another
//! thread meanwhile.

use std::cell::RefCell;

use serde::de::Error as _;
use serde::ser::Error as _;
use serde::{Deserialize, Deserializer, Serialize, Serializer};

use super::FileId;

thread_local! {
    static FILES: RefCell<Option<Vec<FileId>>> = const { RefCell::new(None) };
}

/// Runs `work`, in which spans are serialised and read with their files as positions in `files`.
pub(super) fn relative_to<T>(files: &[FileId], work: impl FnOnce() -> T) -> T {
    /// Takes the list away, also when `work` panics.
    struct Reset;
    impl Drop for Reset {
        fn drop(&mut self) {
            FILES.set(None);
        }
    }
    FILES.set(Some(files.to_vec()));
    let _reset = Reset;
    work()
}

pub(super) fn serialize<S: Serializer>(file: &FileId, serializer: S) -> Result<S::Ok, S::Error> {
    let position = FILES.with_borrow(|files| match files {
        None => Some(*file),
        Some(files) => files.iter().position(|known| known == file).map(FileId::new),
    });
    position.ok_or_else(|| S::Error::custom("a span outside of the files of its text"))?.serialize(serializer)
}

pub(super) fn deserialize<'de, D: Deserializer<'de>>(deserializer: D) -> Result<FileId, D::Error> {
    let position = FileId::deserialize(deserializer)?;
    FILES.with_borrow(|files| match files {
        None => Ok(position),
        Some(files) => files
            .get(position.index())
            .copied()
            .ok_or_else(|| D::Error::custom("a span outside of the files of its text")),
    })
}
