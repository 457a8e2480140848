//! The recipes of `docs/ci.md` and the hook for the pre-commit framework, executed: their commands are taken from the
//! page, run on a small design with a known finding, and must pass there, fail on a new finding and fail on a file that
//! cannot be read.
//!
//! Not executed are the CI systems themselves, and the hook that builds the program, since it would build the parser.

use std::path::Path;
use std::process::{Command, Output};

use crate::tree::Tree;

const ROOT: &str = env!("CARGO_MANIFEST_DIR");

const KNOWN: &str = "module known(input clk, s, a, b, d, output reg q);
    wire r = s ? a : b;
    always @(posedge clk or negedge r) if (!r) q <= 0; else q <= d;
endmodule
";

/// The blocks of a language under a heading of the page, in order.
#[track_caller]
fn blocks(heading: &str, language: &str) -> Vec<String> {
    let page = std::fs::read_to_string(Path::new(ROOT).join("docs/ci.md")).expect("the page");
    let part =
        page.split("\n## ").find(|part| part.trim_start_matches("# ").starts_with(heading)).expect("the heading");
    let fence = format!("```{language}\n");
    part.split(&fence).skip(1).map(|block| block.split("```").next().unwrap_or_default().to_string()).collect()
}

/// The commands that a recipe gives to a shell.
#[track_caller]
fn commands(recipe: &str, begin: &str, end: &str) -> Vec<String> {
    let lines = recipe.lines().filter_map(|line| line.trim().strip_prefix(begin)?.strip_suffix(end));
    lines.map(str::to_string).collect()
}

/// A command in the folder, with the program on the path.
fn run(tree: &Tree, command: &mut Command) -> Output {
    let program = Path::new(env!("CARGO_BIN_EXE_stillwire")).parent().expect("a folder").display().to_string();
    let path = format!("{program}:{}", std::env::var("PATH").expect("a path"));
    command.current_dir(tree.path("")).env("PATH", path).output().expect("it starts")
}

fn told(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr)
}

/// Runs commands one by one, as a CI system does, up to the first that fails; returns its exit code.
fn job(tree: &Tree, commands: &[String]) -> i32 {
    for command in commands {
        let output = run(tree, Command::new("bash").args(["-e", "-c", command]));
        match output.status.code() {
            Some(0) => {}
            code => return code.unwrap_or_else(|| panic!("{command}: {}", told(&output))),
        }
    }
    0
}

/// A design with a ledger of what is known in it, made by the commands of the page.
#[track_caller]
fn adopted() -> Tree {
    let tree = Tree::new(&[("rtl/known.v", KNOWN)]);
    assert_eq!(tree.run(&["scan", "rtl"]).status.code(), Some(1), "without a ledger it fails");
    let ledger = blocks("Stillwire in continuous", "sh").into_iter().find(|block| block.contains("ledger write"));
    assert_eq!(job(&tree, &[ledger.expect("the commands")]), 0);
    tree
}

/// The recipe passes, fails and is incomplete as it should; `reports` are there each time.
#[track_caller]
fn check(recipe: &[String], reports: &[&str]) {
    assert!(recipe.iter().any(|command| command.starts_with("stillwire scan")), "{recipe:?}");
    let tree = adopted();
    let judge = |what: &str, expected: i32| {
        assert_eq!(job(&tree, recipe), expected, "{what}");
        for report in reports {
            let text = tree.read(&format!("reports/{report}"));
            assert!(serde_json::from_str::<serde_json::Value>(&text).is_ok(), "{what}: {report}");
            std::fs::remove_file(tree.path(&format!("reports/{report}"))).expect("removed");
        }
    };
    judge("what is known passes", 0);
    tree.write("rtl/new.v", KNOWN.replace("module known", "module new_one").as_bytes());
    judge("a new finding fails", 1);
    tree.write("rtl/new.v", b"module broken(input a;\nendmodule\n");
    judge("a file that cannot be read fails", 3);
    std::fs::remove_file(tree.path("rtl/new.v")).expect("removed");
    judge("it passes again", 0);
}

#[test]
#[ignore = "needs bash"]
fn jenkins_recipe() {
    let recipe = blocks("Jenkins", "groovy").concat();
    check(&commands(&recipe, "sh '", "'"), &["stillwire.json", "stillwire.sarif"]);
}

#[test]
#[ignore = "needs bash"]
fn forgejo_recipe() {
    let recipe = blocks("Forgejo", "yaml").concat();
    check(&commands(&recipe, "- run: ", ""), &["stillwire.json"]);
}

/// Commits everything in the folder; the hook may refuse it.
fn commit(tree: &Tree) -> Output {
    run(tree, Command::new("git").args(["add", "--all"]));
    let mut git = Command::new("git");
    git.args(["-c", "user.name=T. Lockwood", "-c", "user.email=lock@example.org", "commit", "-m", "change"]);
    run(tree, git.env("PRE_COMMIT_HOME", tree.path(".git/hooks-home")).env("PRE_COMMIT_COLOR", "never"))
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn hook_before_a_commit() {
    let framework = Path::new(ROOT).join("target/hooks/bin/pre-commit");
    assert!(framework.is_file(), "{} is missing: tests/outside/run installs it", framework.display());
    let head = Command::new("git").args(["-C", ROOT, "rev-parse", "HEAD"]).output().expect("git starts");
    let head = String::from_utf8_lossy(&head.stdout).trim().to_string();
    let config = blocks("Before the commit", "yaml").concat();
    assert!(config.contains("stillwire-system") && config.contains("rev: v0.1.0"), "{config}");
    let config = config.replace("/path/to/stillwire", ROOT).replace("v0.1.0", &head);

    let tree = adopted();
    tree.write(".pre-commit-config.yaml", config.as_bytes());
    assert!(run(&tree, Command::new("git").args(["init", "-q"])).status.success());
    let installed = run(&tree, Command::new(&framework).arg("install"));
    assert!(installed.status.success(), "{}", told(&installed));

    let said = told(&commit(&tree));
    assert!(said.contains("wires that must hold still") && said.contains("Passed"), "{said}");
    tree.write("rtl/new.v", KNOWN.replace("module known", "module new_one").as_bytes());
    let refused = commit(&tree);
    let said = told(&refused);
    assert!(!refused.status.success() && said.contains("error[set-reset-hazard]"), "{said}");
    assert!(said.contains("known in the ledger: 1"), "{said}");
    std::fs::remove_file(tree.path("rtl/new.v")).expect("removed");
    tree.write("notes.txt", b"nothing about wires");
    let said = told(&commit(&tree));
    assert!(said.contains("Skipped"), "{said}");
    tree.write("rtl/new.sv", b"module broken(input a;\nendmodule\n");
    let refused = commit(&tree);
    assert!(!refused.status.success() && told(&refused).contains("exit code: 3"), "{}", told(&refused));
}
