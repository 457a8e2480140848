//! Files of two SystemVerilog cores, chosen at random, each alone in an empty folder: their includes, packages and macros
//! are missing. Each run must end with an exit code of ours, and must not call complete what it cannot have read.
//!
//! What cannot have been read is found here independently of the product, by a small reader of directives and words: an
//! include that is not there, a macro that nobody defines, a package that nobody declares, a text that the parser alone
//! refuses or that opens more modules than it closes. A module without text is no gap by itself (it is a finding), but has
//! to be listed.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};
use std::process::Command;

use rayon::prelude::*;

use crate::outside::data;

const FILES: usize = 500;

/// What stands in a file besides comments, strings and what its own conditions switch off.
#[derive(Default)]
struct Contents {
    words: Vec<String>,
    /// Whether an include is in force.
    includes: bool,
    undefined_macros: BTreeSet<String>,
}

/// Directives that take no text of the design with them.
const DIRECTIVES: &[&str] = &[
    "begin_keywords",
    "celldefine",
    "default_nettype",
    "end_keywords",
    "endcelldefine",
    "line",
    "nounconnected_drive",
    "pragma",
    "resetall",
    "timescale",
    "unconnected_drive",
    "__FILE__",
    "__LINE__",
    "undefineall",
];

/// Words and single symbols; a directive is one word with its backquote. Ends of lines stay where a macro is defined.
fn split(text: &str) -> Vec<&str> {
    let mut words = Vec::new();
    let mut rest = text;
    while let Some(first) = rest.chars().next() {
        let word = |from: usize| {
            from + rest[from..]
                .find(|c: char| !c.is_alphanumeric() && c != '_' && c != '$')
                .unwrap_or(rest.len() - from)
        };
        let length = if rest.starts_with("//") {
            rest.find('\n').unwrap_or(rest.len())
        } else if rest.starts_with("/*") {
            rest.find("*/").map_or(rest.len(), |end| end + 2)
        } else if first == '"' {
            let mut escaped = false;
            let end = rest[1..].find(|c| {
                let ends = c == '"' && !escaped;
                escaped = c == '\\' && !escaped;
                ends
            });
            end.map_or(rest.len(), |end| end + 2)
        } else if first == '`' && rest[1..].starts_with(|c: char| c.is_alphabetic() || c == '_') {
            word(1)
        } else if rest.starts_with("\\\n") || rest.starts_with("\\\r\n") {
            rest.find('\n').map_or(rest.len(), |end| end + 1)
        } else if first.is_alphanumeric() || first == '_' || first == '$' {
            word(0)
        } else {
            first.len_utf8()
        };
        let (piece, after) = rest.split_at(length);
        rest = after;
        let is_comment = piece.starts_with("//") || piece.starts_with("/*");
        if !is_comment && (piece == "\n" || !piece.trim().is_empty()) && !piece.starts_with("\\\n") {
            words.push(piece);
        }
    }
    words
}

fn contents(text: &str) -> Contents {
    let mut contents = Contents::default();
    let mut defined = BTreeSet::new();
    // One per open condition: whether its present branch is read, and whether one was.
    let mut conditions: Vec<(bool, bool)> = Vec::new();
    let mut words = split(text).into_iter();
    while let Some(word) = words.next() {
        let is_read = conditions.iter().all(|(is_read, _)| *is_read);
        match word.strip_prefix('`') {
            None if word == "\n" => {}
            None if is_read => contents.words.push(word.to_string()),
            None => {}
            Some("ifdef" | "ifndef") => {
                let name = words.next().unwrap_or("");
                let holds = defined.contains(name) == (word == "`ifdef");
                conditions.push((holds, holds));
            }
            Some("elsif") => {
                let holds = words.next().is_some_and(|name| defined.contains(name));
                if let Some((is_read, was_read)) = conditions.last_mut() {
                    *is_read = holds && !*was_read;
                    *was_read |= holds;
                }
            }
            Some("else") => {
                if let Some((is_read, was_read)) = conditions.last_mut() {
                    *is_read = !*was_read;
                }
            }
            Some("endif") => {
                conditions.pop();
            }
            Some(_) if !is_read => {}
            Some("define") => {
                defined.extend(words.next());
                while words.next().is_some_and(|word| word != "\n") {}
            }
            Some("undef") => {
                words.next().map(|name| defined.remove(name));
            }
            Some("include") => contents.includes = true,
            Some(directive) if DIRECTIVES.contains(&directive) => {
                while words.next().is_some_and(|word| word != "\n") {}
            }
            Some(name) if defined.contains(name) => {}
            Some(name) => {
                contents.undefined_macros.insert(name.to_string());
            }
        }
    }
    contents
}

impl Contents {
    fn count(&self, word: &str) -> usize {
        self.words.iter().filter(|other| *other == word).count()
    }

    /// Packages that are imported and not declared here.
    fn missing_packages(&self) -> BTreeSet<&str> {
        let is_here = |name: &str| self.words.windows(2).any(|pair| pair[0] == "package" && pair[1] == name);
        let imported = self.words.windows(4).filter(|four| four[0] == "import" && four[2] == ":" && four[3] == ":");
        imported.map(|four| four[1].as_str()).filter(|name| !is_here(name)).collect()
    }

    /// Modules that are instantiated with parameters or under a usual name, unconditionally, and not declared here.
    fn missing_modules(&self) -> BTreeSet<&str> {
        let is_here = |name: &str| self.words.windows(2).any(|pair| pair[0] == "module" && pair[1] == name);
        let mut missing = BTreeSet::new();
        let mut depth = 0;
        for four in self.words.windows(4) {
            let [before, name, third, fourth] = four else { continue };
            depth += i32::from(before == "begin" || before == "case");
            depth -= i32::from(before == "end" || before == "endcase");
            let starts = depth == 0 && [";", "end", "endcase"].contains(&before.as_str());
            let with_parameters = third == "#" && fourth == "(";
            let under_usual_name = third.starts_with("u_") && fourth == "(";
            if starts && (with_parameters || under_usual_name) && name.starts_with(|c: char| c.is_alphabetic()) {
                missing.insert(name.as_str());
            }
        }
        missing.retain(|name| !is_here(name));
        missing
    }

    /// Why the file cannot be read whole, if anything here says so.
    fn gap(&self) -> Option<String> {
        if self.includes {
            return Some("an include".to_string());
        }
        if !self.undefined_macros.is_empty() {
            return Some(format!("macros {:?}", self.undefined_macros));
        }
        let (open, closed) = (self.count("module"), self.count("endmodule"));
        if open != closed && self.count("extern") == 0 {
            return Some(format!("{open} times `module`, {closed} times `endmodule`"));
        }
        // Classes and programs are passed over on purpose, and what they import with them.
        let packages = self.missing_packages();
        if !packages.is_empty() && self.count("class") + self.count("program") == 0 {
            return Some(format!("packages {packages:?}"));
        }
        None
    }
}

/// Whether the parser alone refuses the file.
fn is_refused(path: &Path) -> bool {
    let none: [&Path; 0] = [];
    let parse = || sv_parser::parse_sv(path, &sv_parser::Defines::new(), &none, true, false).is_err();
    std::panic::catch_unwind(parse).unwrap_or(true)
}

/// What a run did wrong, and its exit code.
fn check(path: &Path) -> (i32, Option<String>) {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let alone = folder.path().join(path.file_name().expect("a file name"));
    std::fs::copy(path, &alone).expect("the file is copied");
    let output = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .arg("scan")
        .arg(&alone)
        .args(["--threads", "1", "--write", "json:-"])
        .output()
        .expect("the program starts");
    let text = String::from_utf8_lossy(&output.stderr);
    let Some(exit) = output.status.code().filter(|code| (0..=3).contains(code)) else {
        return (-1, Some(format!("ended with {}: {text}", output.status)));
    };
    if text.contains("panicked") {
        return (exit, Some(format!("a panic: {text}")));
    }
    let contents = contents(&String::from_utf8_lossy(&std::fs::read(path).expect("a readable file")));
    if exit == 2 {
        let is_said = match contents.count("module") {
            0 => ["no module was found", "no Verilog file", "interfaces or programs"]
                .iter()
                .any(|one| text.contains(one)),
            _ => text.contains("besides test benches"),
        };
        return (exit, (!is_said).then(|| format!("nothing was analysed: {text}")));
    }
    let Ok(json) = crate::outputs::kept("json", &output.stdout) else {
        return (exit, Some(format!("no JSON: {text}")));
    };
    let complete = json["complete"] == true;
    let gap = contents.gap().or_else(|| is_refused(&alone).then(|| "the parser refuses it".to_string()));
    let problem = match gap {
        _ if complete == (exit == 3) => Some(format!("exit {exit} and complete = {complete}")),
        Some(gap) if complete => Some(format!("complete in spite of {gap}")),
        None if complete => {
            let mut missing = contents.missing_modules();
            let listed = json["coverage"]["black_boxes"].as_array().map_or(&[][..], Vec::as_slice);
            missing.retain(|name| !listed.iter().any(|one| one["module"] == *name));
            (!missing.is_empty()).then(|| format!("modules {missing:?} are not listed as missing"))
        }
        _ => None,
    };
    (exit, problem)
}

#[test]
#[ignore = "outside: run tests/outside/run"]
#[allow(clippy::print_stdout, reason = "how the runs ended belongs to the result of an outside check")]
fn files_of_two_cores_each_alone() {
    let is_verilog = |path: &PathBuf| {
        path.extension().is_some_and(|extension| ["v", "sv", "svh"].iter().any(|known| extension == *known))
    };
    let mut files: Vec<PathBuf> = ["ibex", "cv32e40p"]
        .iter()
        .flat_map(|core| walkdir::WalkDir::new(data().join(core)))
        .map(|entry| entry.expect("a readable folder").into_path())
        .filter(is_verilog)
        .collect();
    files.sort();
    assert!(files.len() >= FILES, "only {} files", files.len());
    let seed = std::env::var("STILLWIRE_FIRST").ok().and_then(|text| text.parse().ok()).unwrap_or(1);
    fastrand::Rng::with_seed(seed).shuffle(&mut files);
    files.truncate(FILES);
    let results: Vec<(i32, Option<String>)> = files.par_iter().map(|path| check(path)).collect();
    let ended = |code| results.iter().filter(|(exit, _)| *exit == code).count();
    println!(
        "{FILES} files, seed {seed}: {} exit 0, {} exit 1, {} exit 2 (no module), {} exit 3",
        ended(0),
        ended(1),
        ended(2),
        ended(3)
    );
    let problems: Vec<String> = files
        .iter()
        .zip(&results)
        .filter_map(|(path, (_, problem))| problem.as_ref().map(|problem| format!("{}: {problem}", path.display())))
        .collect();
    assert!(problems.is_empty(), "{} of {FILES}:\n{}", problems.len(), problems.join("\n"));
}

#[test]
fn what_a_file_lacks_is_found() {
    let gap = |text: &str| contents(text).gap();
    assert_eq!(gap("module m; // `include \"x\"\nendmodule"), None);
    assert_eq!(gap("`include \"x.svh\"\nmodule m; endmodule").as_deref(), Some("an include"));
    assert_eq!(gap("`ifdef A\n`include \"x.svh\"\n`endif\nmodule m; endmodule"), None);
    assert!(gap("`define A(x) x \\\n `B\nmodule m; `A(1) `C endmodule").is_some_and(|gap| gap.contains("\"C\"")));
    assert!(gap("module m; import p::*; endmodule").is_some_and(|gap| gap.contains("\"p\"")));
    assert_eq!(gap("package p; endpackage module m; import p::*; endmodule"), None);
    assert!(gap("module m; initial $display(\"endmodule\");").is_some());
    assert_eq!(contents("module m; sub #(1) u(a); other u_x (b); endmodule").missing_modules().len(), 2);
}
