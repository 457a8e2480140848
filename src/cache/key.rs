//! Names of entries: SHA-256 (FIPS 180-4) over the version of the program, the kind of thing and everything that the thing
//! depends on, serialised. A collision of two keys would be a wrong verdict, so the hash is a cryptographic one.

use std::fmt;

use serde::Serialize;
use sha2::{Digest, Sha256};

/// Changes with the sources of the program; see `build.rs`.
const VERSION: &str = concat!(env!("CARGO_PKG_VERSION"), " ", env!("STILLWIRE_BUILD"));

/// The name of an entry.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Serialize)]
pub struct Key([u8; 32]);

impl Key {
    /// The key of a `kind` of thing that depends on `inputs` and on nothing else. `None` when these cannot be serialised;
    /// then the thing cannot be remembered.
    pub fn of(kind: &str, inputs: &impl Serialize) -> Option<Key> {
        let bytes = postcard::to_allocvec(&(VERSION, kind, inputs)).ok()?;
        Some(Key(Sha256::digest(bytes).into()))
    }

    pub(super) fn bytes(&self) -> &[u8; 32] {
        &self.0
    }

    /// 64 hexadecimal digits.
    pub(super) fn name(&self) -> String {
        self.0.iter().map(|byte| format!("{byte:02x}")).collect()
    }
}

impl fmt::Debug for Key {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.name())
    }
}
