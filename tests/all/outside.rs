//! Where the outside data is: cores and netlists that `tests/outside/fetch` unpacks. Every test that needs them, or the
//! simulator, is ignored by default with the reason "outside: run tests/outside/run".

use std::path::PathBuf;

/// The folder that `tests/outside/fetch` filled: the variable STILLWIRE_DATA, by default `target/outside`.
///
/// # Panics
/// When it was not fetched: an outside test that is asked for must not pass by doing nothing.
pub fn data() -> PathBuf {
    let folder = match std::env::var_os("STILLWIRE_DATA") {
        Some(folder) => PathBuf::from(folder),
        None => PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("target/outside"),
    };
    assert!(folder.join("stamp").is_file(), "no outside data in {}: run tests/outside/fetch", folder.display());
    folder
}
