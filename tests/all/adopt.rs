//! The section of the README on adopting the program on an old tree, run as it stands: a shell gets its commands one by
//! one, on copies of the cores, and says what the README says. A line `...` stands for any lines, and a line that ends
//! with ` ...` for any line that begins so.

use std::path::Path;
use std::process::Command;

use crate::outside::data;

/// Parts of the output of a shell, each from one command.
const MARK: char = '\u{1}';

/// A command and the lines that it prints.
struct Step {
    command: String,
    prints: Vec<String>,
}

/// The steps of all blocks of the section.
fn steps(readme: &str) -> Vec<Step> {
    let (_, section) = readme.split_once("## Adopt it on an existing tree").expect("the section");
    let (section, _) = section.split_once("\n## ").expect("the next section");
    let mut steps: Vec<Step> = Vec::new();
    let mut inside = false;
    for line in section.lines() {
        if line.starts_with("```") {
            inside = line == "```console";
        } else if let (true, Some(command)) = (inside, line.strip_prefix("$ ")) {
            steps.push(Step { command: command.to_string(), prints: Vec::new() });
        } else if let (true, Some(step)) = (inside, steps.last_mut()) {
            match line.strip_prefix("> ") {
                Some(more) => step.command += &format!("\n{more}"),
                None => step.prints.push(line.to_string()),
            }
        }
    }
    steps
}

/// Whether the lines of an output are those of the README.
fn fits(expected: &[String], output: &[&str]) -> bool {
    match (expected, output) {
        ([], []) => true,
        ([any, rest @ ..], _) if any == "..." => (0..=output.len()).any(|skip| fits(rest, &output[skip..])),
        ([line, rest @ ..], [said, others @ ..]) => {
            let same = match line.strip_suffix(" ...") {
                Some(start) => said.starts_with(start),
                None => line == said,
            };
            same && fits(rest, others)
        }
        _ => false,
    }
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn the_readme_adopts_it_on_two_cores() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    for core in ["mor1kx", "ibex"] {
        let copied = Command::new("cp").arg("-r").arg(data().join(core)).arg(folder.path()).status();
        assert!(copied.expect("cp starts").success());
    }
    let readme = std::fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("README.md")).expect("the README");
    let steps = steps(&readme);
    assert!(steps.len() > 15, "only {} commands", steps.len());
    // `$?` of a step is that of the step before.
    let mut script = format!("code=0; step() {{ (exit $code); eval \"$1\"; code=$?; printf '{MARK}'; }}\nexec 2>&1\n");
    for step in &steps {
        let command = match step.command.strip_prefix("cd ") {
            Some(core) => format!("cd {}", folder.path().join(core).display()),
            None => step.command.clone(),
        };
        script += &format!("step '{}'\n", command.replace('\'', "'\\''"));
    }
    let program = Path::new(env!("CARGO_BIN_EXE_stillwire")).parent().expect("a folder").display().to_string();
    let path = format!("{program}:{}", std::env::var("PATH").expect("a path"));
    let output = Command::new("bash").arg("-c").arg(script).env("PATH", path).output().expect("bash starts");
    let output = String::from_utf8_lossy(&output.stdout).into_owned();
    let mut parts = output.split(MARK);
    for step in &steps {
        let said: Vec<&str> = parts.next().unwrap_or_default().lines().collect();
        assert!(
            fits(&step.prints, &said),
            "`{}` is in the README with\n{}\nand says\n{}",
            step.command,
            step.prints.join("\n"),
            said.join("\n")
        );
    }
}

/// The comparison itself must be able to fail.
#[test]
fn other_lines_do_not_fit() {
    let expected = |lines: &[&str]| lines.iter().map(|line| (*line).to_string()).collect::<Vec<_>>();
    assert!(fits(&expected(&["a ...", "...", "z"]), &["a b", "c", "z"]));
    assert!(fits(&expected(&["a", "..."]), &["a"]));
    assert!(!fits(&expected(&["a", "...", "z"]), &["a", "z", "b"]));
    assert!(!fits(&expected(&["a"]), &["a", "b"]));
    assert!(!fits(&expected(&["a", "b"]), &["a"]));
}
