//! Trees of files that an earlier run parsed. A tree depends on the preprocessed text, on where each part of it came from,
//! and on whether the file may be of the older language; all macros and includes are in that text already. The places in
//! it are counted within the file's own list of files, so that a tree is found again whatever else is read.

use std::path::Path;

use super::FileId;
use super::origin::MappedText;
use super::parse::Parsed;
use super::relative::relative_to;
use crate::cache::{Cache, Key};

/// Where the tree of one preprocessed file is remembered.
pub(super) struct Place {
    files: Vec<FileId>,
    key: Key,
}

impl Place {
    /// `None` when the tree cannot be remembered.
    pub(super) fn new(file: FileId, text: &MappedText, may_be_old: bool) -> Option<Self> {
        let files = text.files(file);
        let key = relative_to(&files, || Key::of("tree", &(text, may_be_old)))?;
        Some(Self { files, key })
    }

    pub(super) fn tree(&self, cache: &Cache) -> Option<Parsed> {
        relative_to(&self.files, || cache.get(&self.key))
    }

    pub(super) fn remember(&self, cache: &Cache, parsed: &Parsed) {
        relative_to(&self.files, || cache.put(&self.key, parsed));
    }
}

/// Whether a file may use keywords of SystemVerilog as names.
pub(super) fn may_be_old(path: &Path) -> bool {
    path.extension().is_some_and(|extension| extension == "v")
}
