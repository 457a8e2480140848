//! Validates JSON files against a JSON Schema: `check-schema SCHEMA PATH...` prints one line per file, `valid`, or `invalid:`
//! and why; of a folder, whose files are all read, only the number of valid ones and a line for each other. Schemas that
//! this one refers to are those beside it, by their `$id`. The exit code is 1 when something is invalid in a folder, 2 when
//! something cannot be read.

use std::error::Error;
use std::path::{Path, PathBuf};
use std::process::ExitCode;

use jsonschema::{Retrieve, Uri, Validator};
use serde_json::Value;

fn main() -> ExitCode {
    match run() {
        Ok(code) => code,
        Err(problem) => {
            eprintln!("{problem}");
            ExitCode::from(2)
        }
    }
}

fn run() -> Result<ExitCode, String> {
    let mut paths = std::env::args().skip(1).map(PathBuf::from);
    let schema = paths.next().ok_or("usage: check-schema SCHEMA PATH...")?;
    let folder = schema.parent().unwrap_or(Path::new("")).to_path_buf();
    let options = jsonschema::options().with_retriever(Beside { folder });
    let mut schema = read(&schema)?;
    escape_patterns(&mut schema);
    let validator = options.build(&schema).map_err(|error| format!("the schema is wrong: {error}"))?;
    let mut code = ExitCode::SUCCESS;
    for path in paths {
        if !path.is_dir() {
            match problem(&validator, &path)? {
                None => println!("valid"),
                Some(problem) => println!("invalid: {problem}"),
            }
            continue;
        }
        let mut files = files(&path)?;
        files.sort();
        if files.is_empty() {
            return Err(format!("{} is empty", path.display()));
        }
        let mut valid = 0;
        for file in files {
            match problem(&validator, &file)? {
                None => valid += 1,
                Some(problem) => {
                    println!("{}: invalid: {problem}", file.display());
                    code = ExitCode::from(1);
                }
            }
        }
        println!("{}: {valid} valid", path.display());
    }
    Ok(code)
}

/// A `]` outside of a class stands for itself in ECMA 262, which JSON Schema refers to (the schema of SARIF has one), but
/// the validator takes it only escaped.
fn escape_patterns(schema: &mut Value) {
    match schema {
        Value::Object(fields) => {
            if let Some(Value::String(pattern)) = fields.get_mut("pattern") {
                let (mut escaped, mut text) = (false, String::new());
                let mut in_class = false;
                for letter in pattern.chars() {
                    match letter {
                        '[' if !escaped => in_class = true,
                        ']' if !escaped && !in_class => text.push('\\'),
                        ']' if !escaped => in_class = false,
                        _ => {}
                    }
                    escaped = letter == '\\' && !escaped;
                    text.push(letter);
                }
                *pattern = text;
            }
            fields.values_mut().for_each(escape_patterns);
        }
        Value::Array(values) => values.iter_mut().for_each(escape_patterns),
        _ => {}
    }
}

/// What is wrong with a file.
fn problem(validator: &Validator, path: &Path) -> Result<Option<String>, String> {
    let value = read(path)?;
    Ok(validator.validate(&value).err().map(|error| format!("{}: {error}", error.instance_path())))
}

fn read(path: &Path) -> Result<Value, String> {
    let text = std::fs::read_to_string(path).map_err(|error| format!("{}: {error}", path.display()))?;
    serde_json::from_str(&text).map_err(|error| format!("{}: {error}", path.display()))
}

fn files(folder: &Path) -> Result<Vec<PathBuf>, String> {
    let entries = std::fs::read_dir(folder).and_then(Iterator::collect::<Result<Vec<_>, _>>);
    let entries = entries.map_err(|error| format!("{}: {error}", folder.display()))?;
    Ok(entries.into_iter().map(|entry| entry.path()).filter(|path| path.is_file()).collect())
}

/// The schemas in a folder.
struct Beside {
    folder: PathBuf,
}

impl Retrieve for Beside {
    fn retrieve(&self, uri: &Uri<String>) -> Result<Value, Box<dyn Error + Send + Sync>> {
        let schemas = files(&self.folder)?.into_iter().filter(|path| path.to_string_lossy().ends_with(".schema.json"));
        for path in schemas {
            let schema = read(&path)?;
            if schema["$id"] == uri.as_str() {
                return Ok(schema);
            }
        }
        Err(format!("no schema beside this one is called {uri}").into())
    }
}
