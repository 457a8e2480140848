//! The texts that the editor has open.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

#[derive(Default)]
pub(super) struct Documents {
    texts: BTreeMap<PathBuf, String>,
}

impl Documents {
    pub(super) fn set(&mut self, path: &Path, text: String) {
        self.texts.insert(path.to_path_buf(), text);
    }

    pub(super) fn forget(&mut self, path: &Path) {
        self.texts.remove(path);
    }

    /// Whether the file is open with another text than this.
    pub(super) fn differs(&self, path: &Path, text: Option<&str>) -> bool {
        match (self.texts.get(path), text) {
            (Some(open), Some(text)) => open.strip_prefix('\u{feff}').unwrap_or(open) != text,
            _ => false,
        }
    }
}
