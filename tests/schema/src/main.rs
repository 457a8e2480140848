//! Validates JSON files against a JSON Schema: `check-schema SCHEMA FILE...` prints one line per file, `valid`, or `invalid:`
//! and why. The exit code is 2 when something cannot be read.

use std::process::ExitCode;

use serde_json::Value;

fn main() -> ExitCode {
    match run() {
        Ok(()) => ExitCode::SUCCESS,
        Err(problem) => {
            eprintln!("{problem}");
            ExitCode::from(2)
        }
    }
}

fn run() -> Result<(), String> {
    let mut paths = std::env::args().skip(1);
    let schema = read(&paths.next().ok_or("usage: check-schema SCHEMA FILE...")?)?;
    let validator = jsonschema::validator_for(&schema).map_err(|error| format!("the schema is wrong: {error}"))?;
    for path in paths {
        match validator.validate(&read(&path)?) {
            Ok(()) => println!("valid"),
            Err(error) => println!("invalid: {}: {error}", error.instance_path()),
        }
    }
    Ok(())
}

fn read(path: &str) -> Result<Value, String> {
    let text = std::fs::read_to_string(path).map_err(|error| format!("{path}: {error}"))?;
    serde_json::from_str(&text).map_err(|error| format!("{path}: {error}"))
}
