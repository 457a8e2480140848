//! `stillwire.toml` as a user meets it: what is in force and where it comes from, severities, and the schema for editors,
//! which must accept and refuse what the program does.

use std::path::Path;
use std::process::Command;

use serde_json::Value;
use stillwire::rules::Rule;
use stillwire::settings;

use crate::pipeline::scan;
use crate::tree::Tree;

const EVERYTHING: &str = r#"
paths = ["rtl", "ip"]
lists = ["cells.f"]
ledger = "known.toml"
top = "lock"
include = ["rtl/include", "more"]
define = ["A", "B=2"]
exclude = ["sim"]
libraries = "cells.lib"
gate = "warning"
show = "note"

[set]
WIDTH = 8
FAST = true
NAME = "2 * 4"

[severities]
clock-hazard = "warning"
signoff-stale = "error"

[[assume]]
kind = "static"
nets = ["lock.test_mode", "lock.u_*.strap"]
reason = "strapped on the \"board\""

[[assume]]
kind = "one-hot"
nets = "lock.step"
reason = "a ring"

[[cell]]
module = "ram"
clock = "ck"
set = "st"
reset = ["!rn", "rq"]
enable = "!we"
output = ["q"]

[[cell]]
module = ["mux2", "mux2b"]
kind = "selector"
select = "S"
inputs = ["A", "B"]
output = "!Y"

[[cell]]
module = "icg"
kind = "clock-gate"
clock = "!CKN"
enable = ["E", "TE"]
output = "GCK"
"#;

fn shown(folder: &Path, arguments: &[&str]) -> String {
    let output = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .args(["scan", "--show-settings"])
        .args(arguments)
        .current_dir(folder)
        .output()
        .expect("the program starts");
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8(output.stdout).expect("text")
}

#[test]
fn everything_is_shown_with_its_origin() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("stillwire.toml");
    std::fs::write(&file, EVERYTHING).expect("written");
    let text = shown(folder.path(), &["-I", "first", "--gate", "error", "--set", "WIDTH=4"]);
    let place = |line: usize| format!("stillwire.toml:{line}");
    for line in [
        "  \"first\",  # command line".to_string(),
        format!("  \"more\",  # {}", place(6)),
        format!("  \"B=2\",  # {}", place(7)),
        "gate = \"error\"  # command line".to_string(),
        format!("show = \"note\"  # {}", place(11)),
        "\"WIDTH\" = \"4\"  # command line".to_string(),
        format!("\"FAST\" = \"1\"  # {}", place(15)),
        format!("clock-hazard = \"warning\"  # {}", place(19)),
        format!("[[assume]]  # {}", place(22)),
        format!("[[cell]]  # {}", place(32)),
    ] {
        assert!(text.lines().any(|shown| shown == line), "no line {line}\n{text}");
    }
    // What is shown is itself a settings file that says the same.
    let read = |text: &str| {
        settings::parse(text, Path::new("stillwire.toml")).unwrap_or_else(|error| panic!("{error}\n{text}"))
    };
    let (mut first, mut again) = (read(EVERYTHING), read(&shown(folder.path(), &[])));
    for settings in [&mut first, &mut again] {
        settings.lines.clear();
        settings.cells.iter_mut().for_each(|cell| cell.line = 0);
        for assumption in &mut settings.assumptions {
            assumption.origin = stillwire::assumptions::Origin::Settings { file: String::new(), line: 0 };
        }
        settings.set.sort();
    }
    assert_eq!(first, again);
}

#[test]
fn without_a_file_all_is_default() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let text = shown(folder.path(), &["--top", "core"]);
    assert!(text.starts_with("# no settings file\npaths = []  # default\nlists = []  # default\ntop = [\n  \"core\",  # command line\n]\ninclude = []  # default\n"));
    assert!(text.contains("gate = \"error\"  # default\nshow = \"warning\"  # default\n"), "{text}");
}

/// From below the folder of the settings, too, and not beside paths of the command line.
#[test]
fn the_settings_say_what_is_read() {
    let tree = Tree::new(&[
        ("stillwire.toml", "paths = \"rtl\"\nledger = \"known.toml\"\n"),
        (
            "rtl/t.v",
            "module t (input a, b, s, d, output reg q); wire k = s ? a : b;\nalways @(posedge k) q <= d; endmodule\n",
        ),
        ("other/u.v", "module u (input a, output y); assign y = a; endmodule\n"),
    ]);
    tree.ends(2, &["scan"]);
    let said = tree.ends(0, &["ledger", "write"]);
    assert!(said.contains("known.toml: 1 entry written"), "{said}");
    let text = tree.ends(0, &["scan", "--gate", "warning"]);
    assert!(text.contains("read: 1 file,"), "{text}");
    tree.ends(0, &["scan", "other", "--gate", "warning"]);
    std::fs::remove_file(tree.path("known.toml")).expect("removed");
    let below = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .args(["ledger", "write"])
        .current_dir(tree.path("other"))
        .output();
    assert_eq!(below.expect("the program starts").status.code(), Some(0));
    assert_eq!(tree.read("known.toml").matches("[[known]]").count(), 1);
}

#[test]
fn severities_of_rules_are_fixed_and_said() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let design = "module t (input a, b, s, d, output reg q); wire k = s ? a : b;\n\
        always @(posedge k) q <= d; endmodule\n";
    std::fs::write(folder.path().join("t.v"), design).expect("written");
    assert_eq!(scan(&[folder.path()], &[]).exit, 1);
    std::fs::write(folder.path().join("stillwire.toml"), "[severities]\nclock-hazard = \"note\"\n").expect("written");
    let scan = scan(&[folder.path()], &[]);
    assert_eq!((scan.exit, &scan.findings()[0]["severity"]), (0, &"note".into()), "{}", scan.text);
    assert_eq!(scan.json["coverage"]["severities"]["clock-hazard"], "note");
    assert!(scan.text.contains("severities fixed by the settings: clock-hazard note"), "{}", scan.text);
}

fn schema() -> Value {
    let file = Path::new(env!("CARGO_MANIFEST_DIR")).join("docs/settings.schema.json");
    serde_json::from_str(&std::fs::read_to_string(file).expect("the schema is readable")).expect("JSON")
}

const GOOD: [&str; 7] = [
    EVERYTHING,
    "paths = [\"rtl\", \"ip\"]\nlists = \"cells.f\"\nledger = \"known.toml\"",
    "",
    "top = [\"a\", \"b\"]",
    "[define]\nA = true\nB = 3\nC = \"x\"",
    "[[assume]]\nkind = \"one-bit-changing\"\nnets = \"t.gray\"\nreason = \"x\"",
    "[[cell]]\nmodule = \"m\"\nkind = \"pins\"\nenable = \"en\"",
];

const BAD: [&str; 22] = [
    "ledger = [\"a\"]",
    "tops = \"a\"",
    "top = 1",
    "gate = \"fatal\"",
    "[define]\nA = false",
    "[set]\nW = 1.5",
    "[severities]\nclok-hazard = \"note\"",
    "[severities]\nclock-hazard = \"off\"",
    "[[assume]]\nkind = \"static\"\nnets = \"t.a\"",
    "[[assume]]\nkind = \"constant\"\nnets = \"t.a\"\nreason = \"x\"",
    "[[assume]]\nkind = \"static\"\nnets = []\nreason = \"x\"",
    "[[assume]]\nkind = \"static\"\nnets = \"t.a\"\nreason = \" \"",
    "assume = 1",
    "[[cell]]\nclock = \"ck\"",
    "[[cell]]\nmodule = \"m\"",
    "[[cell]]\nmodule = \"m\"\nclk = \"ck\"",
    "[[cell]]\nmodule = \"m\"\nclock = \"!\"",
    "[[cell]]\nmodule = \"m\"\nkind = \"mux\"\nclock = \"ck\"",
    "[[cell]]\nmodule = \"m\"\nkind = \"clock-gate\"\nclock = \"ck\"\noutput = \"g\"",
    "[[cell]]\nmodule = \"m\"\nkind = \"clock-gate\"\nclock = [\"a\", \"b\"]\nenable = \"e\"\noutput = \"g\"",
    "[[cell]]\nmodule = \"m\"\nkind = \"selector\"\nselect = \"s\"\ninputs = [\"a\", \"b\"]\noutput = \"y\"\nclock = \"c\"",
    "[[cell]]\nmodule = \"m\"\nkind = \"pins\"\nselect = \"s\"",
];

#[test]
fn the_program_takes_and_refuses() {
    for text in GOOD {
        assert!(settings::parse(text, Path::new("stillwire.toml")).is_ok(), "{text}");
    }
    for text in BAD {
        assert!(settings::parse(text, Path::new("stillwire.toml")).is_err(), "{text}");
    }
}

/// The same texts by the schema, which must take and refuse what the program does.
#[test]
#[ignore = "outside: run tests/outside/run"]
fn the_schema_agrees_with_the_program() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let folder = tempfile::tempdir().expect("a temporary folder");
    let texts: Vec<&str> = GOOD.into_iter().chain(BAD).collect();
    let mut command = Command::new(root.join("tests/schema/target/debug/check-schema"));
    command.arg(root.join("docs/settings.schema.json"));
    for (index, text) in texts.iter().enumerate() {
        let value: toml::Table = text.parse().expect("TOML");
        let file = folder.path().join(format!("{index}.json"));
        std::fs::write(&file, serde_json::to_string(&value).expect("a value")).expect("written");
        command.arg(file);
    }
    let output = command.output().expect("the checker was built, see tests/outside/run");
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    let said = String::from_utf8_lossy(&output.stdout).into_owned();
    let said: Vec<&str> = said.lines().collect();
    assert_eq!(said.len(), texts.len());
    for (index, (text, said)) in texts.iter().zip(said).enumerate() {
        assert_eq!(said == "valid", index < GOOD.len(), "{said}: {text}");
    }
}

/// The schema names the rules there are.
#[test]
fn the_schema_knows_every_rule() {
    let names: Vec<&str> = Rule::ALL.iter().map(|rule| rule.name()).collect();
    assert_eq!(schema()["properties"]["severities"]["propertyNames"]["enum"], Value::from(names));
}
