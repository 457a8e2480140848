//! Every machine-readable output of one run, and where they are kept: what tests read goes through [`kept`], which also
//! puts it into the folder that `STILLWIRE_KEPT` names, so that `tests/outside/run` can validate it against its schema.

use std::path::Path;
use std::process::Command;

use serde_json::Value;

/// The outputs of one run.
pub struct Outputs {
    pub exit: i32,
    pub json: Value,
    pub sarif: Value,
    pub junit: String,
    pub evidence: Value,
    /// Diagnostics, for messages of failing tests.
    pub text: String,
}

/// Scans `path` with further arguments and takes every output.
#[track_caller]
pub fn outputs(path: &Path, arguments: &[&str]) -> Outputs {
    try_outputs(path, arguments).expect("something to analyse")
}

/// The same; `None` when there was nothing to analyse.
#[track_caller]
pub fn try_outputs(path: &Path, arguments: &[&str]) -> Option<Outputs> {
    let folder = tempfile::tempdir().expect("a folder");
    let place = |format: &str| folder.path().join(format);
    let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
    command.arg("scan").arg(path).args(arguments);
    for format in ["json", "sarif", "junit", "evidence"] {
        command.args(["--write", &format!("{format}:{}", place(format).display())]);
    }
    let output = command.output().expect("the program starts");
    let text = String::from_utf8_lossy(&output.stderr).into_owned();
    let exit = output.status.code().unwrap_or_else(|| panic!("ended by a signal: {text}"));
    if exit == 2 {
        return None;
    }
    let read = |format: &str| std::fs::read(place(format)).unwrap_or_else(|_| panic!("no {format}: {text}"));
    let parse = |format: &str| kept(format, &read(format)).expect("JSON");
    let junit = String::from_utf8(read("junit")).expect("UTF-8");
    Some(Outputs { exit, json: parse("json"), sarif: parse("sarif"), junit, evidence: parse("evidence"), text })
}

/// Reads JSON of a format of `--write`, and keeps it when it is asked for and is JSON.
pub fn kept(format: &str, bytes: &[u8]) -> serde_json::Result<Value> {
    let value: Value = serde_json::from_slice(bytes)?;
    if let Some(folder) = std::env::var_os("STILLWIRE_KEPT") {
        let folder = Path::new(&folder).join(format);
        std::fs::create_dir_all(&folder).expect("a folder");
        // Equal outputs are kept once; tests run side by side, so that none may be half written under its name.
        let mut file = tempfile::NamedTempFile::new_in(&folder).expect("a file");
        std::io::Write::write_all(&mut file, bytes).expect("written");
        file.persist(folder.join(format!("{:016x}.json", hash(bytes)))).expect("renamed");
    }
    Ok(value)
}

/// FNV-1a of 64 bits (Fowler, Noll, Vo; draft-eastlake-fnv).
fn hash(bytes: &[u8]) -> u64 {
    bytes.iter().fold(0xcbf2_9ce4_8422_2325, |hash, &byte| (hash ^ u64::from(byte)).wrapping_mul(0x0100_0000_01b3))
}
