//! The files that a run read, each with its role and the SHA-256 (FIPS 180-4) of its bytes, so that a record can say what
//! exactly was analysed. The digest is taken where the bytes are read: a file that is changed meanwhile cannot be recorded
//! as something that it was not.

use std::fmt::Write;
use std::path::{Path, PathBuf};

use sha2::{Digest, Sha256};

/// Why a file was read, in the order of the record.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum InputRole {
    Settings,
    List,
    Library,
    Ledger,
    /// Included files as well.
    Source,
}

impl InputRole {
    pub const ALL: [InputRole; 5] =
        [InputRole::Settings, InputRole::List, InputRole::Library, InputRole::Ledger, InputRole::Source];

    pub fn name(self) -> &'static str {
        match self {
            InputRole::Settings => "settings",
            InputRole::List => "file-list",
            InputRole::Library => "library",
            InputRole::Ledger => "ledger",
            InputRole::Source => "source",
        }
    }
}

/// One file.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Input {
    pub role: InputRole,
    /// As it was given, joined with what was found below it.
    pub path: PathBuf,
    /// 64 hexadecimal digits; `None` for a file that could not be read.
    pub sha256: Option<String>,
}

impl Input {
    pub fn read(role: InputRole, path: &Path, bytes: &[u8]) -> Self {
        let mut digits = String::with_capacity(64);
        for byte in Sha256::digest(bytes) {
            let _ = write!(digits, "{byte:02x}");
        }
        Self { role, path: path.to_path_buf(), sha256: Some(digits) }
    }

    pub fn unreadable(role: InputRole, path: &Path) -> Self {
        Self { role, path: path.to_path_buf(), sha256: None }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The example of FIPS 180-2, appendix B.1.
    #[test]
    fn digest_of_abc() {
        let input = Input::read(InputRole::Source, Path::new("a.v"), b"abc");
        let digest = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";
        assert_eq!(input.sha256.as_deref(), Some(digest));
    }
}
