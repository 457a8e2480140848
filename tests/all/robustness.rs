//! Hostile input, end to end: each case ends within the time and memory that are promised (10 s, 2 GB), with a report and
//! without a crash, and never with a clean verdict on something that was not analysed.

use std::process::{Command, Output};
use std::time::Duration;

use crate::tree::Tree;

/// The promised 10 s on two cores, in seconds of processor time, which other work on the machine does not add to.
const TIME: &str = "20";
/// The promised 2 GB, in kB of resident memory.
const MEMORY_KB: u64 = 2_000_000;

struct Run {
    exit: i32,
    text: String,
}

#[track_caller]
fn run(tree: &Tree, arguments: &[&str]) -> Run {
    let path = tree.path("");
    let Output { status, stdout, stderr } = Command::new("sh")
        .args(["-c", &format!("ulimit -t {TIME}; exec \"$@\""), "sh", env!("CARGO_BIN_EXE_stillwire"), "scan"])
        .arg(&path)
        .args(["--show", "note", "--threads", "2"])
        .args(arguments)
        .output()
        .expect("the program starts");
    let text = String::from_utf8_lossy(&stdout).into_owned() + &String::from_utf8_lossy(&stderr);
    let text = text.chars().take(4000).collect();
    let exit = status.code().unwrap_or_else(|| panic!("ended by a signal, which the limit on time gives too: {text}"));
    Run { exit, text }
}

/// One file with this text must give exit code 3 and say `message`.
#[track_caller]
fn check_refused(text: &str, message: &str) {
    let run = run(&Tree::new(&[("a.v", text)]), &[]);
    assert_eq!(run.exit, 3, "{}", run.text);
    assert!(run.text.contains(message), "{}", run.text);
}

/// One file with this text must be analysed as a whole.
#[track_caller]
fn check_accepted(text: &str) {
    let run = run(&Tree::new(&[("a.v", text)]), &["--gate", "error"]);
    assert_eq!(run.exit, 0, "{}", run.text);
}

fn module(body: &str) -> String {
    format!("module m(input a, output reg y);\n{body}\nendmodule\n")
}

#[test]
fn parentheses_ten_thousand_deep() {
    let text = format!("assign w = {}a{};", "(".repeat(10_000), ")".repeat(10_000));
    check_refused(&module(&text), "nested too deeply");
}

#[test]
fn a_chain_of_a_hundred_thousand_operators() {
    check_refused(&module(&format!("wire w = a{};", " & a".repeat(100_000))), "nested too deeply");
}

#[test]
fn what_is_just_accepted_fits() {
    check_accepted(&module(&format!("wire w = {}a{};", "(".repeat(150), ")".repeat(150))));
    check_accepted(&module(&format!("wire w = a{};", " & a".repeat(600))));
    check_accepted(&module(&format!("always @* {} y = a; {}", "begin ".repeat(250), "end ".repeat(250))));
    check_accepted(&module(&format!("always @* {} y = a;", "if (a) y = 0; else ".repeat(500))));
}

#[test]
fn lines_of_twenty_megabytes() {
    check_accepted(&module(&format!("wire w = a; /* {} */", "x ".repeat(10_000_000))));
    check_accepted(&module(&format!("wire w = a;{}", " ".repeat(20_000_000))));
    check_refused(&module(&"assign w = a;".repeat(1_600_000)), "longer than 4 MiB");
    check_refused(&"x".repeat(20_000_000), "longer than 4 MiB");
}

#[test]
fn macros_without_end() {
    check_refused(&format!("`define A `A\n{}", module("wire w = `A;")), "`A` expands to itself");
    check_refused(&format!("`define A `B\n`define B `A\n{}", module("wire w = `A;")), "expands to itself");
    let level = |index: usize| format!("`define M{} `M{index} `M{index}\n", index + 1);
    let levels: String = (0..60).map(level).collect();
    check_refused(&format!("`define M0\n{levels}{}", module("wire w = a `M60;")), "past 64 MiB");
    check_refused(&format!("`define M0 a +\n{levels}{}", module("wire w = `M60 a;")), "past 64 MiB");
}

#[test]
fn includes_without_end() {
    let run = run(&Tree::new(&[("a.v", "`include \"a.v\"\nmodule m; endmodule")]), &[]);
    assert_eq!(run.exit, 3, "{}", run.text);
    assert!(run.text.contains("includes itself without end"), "{}", run.text);
}

#[test]
fn elaboration_without_end() {
    check_refused("module m(input a); m u(a); endmodule", "`m`");
    check_refused(&module("genvar i; for (i = 0; i >= 0; i = i + 1) begin wire w; end"), "generate loop");
    check_refused("module m #(parameter P = 1 / 0) (input [P:0] a); endmodule", "division by zero");
    check_refused("module m(input [2147483647:0] a); endmodule", "bits");
}

#[test]
fn nothing_to_analyse_is_no_pass() {
    for files in
        [&[("a.v", "")][..], &[("a.txt", "module m; endmodule")], &[("a.v", "`ifdef X\nmodule m; endmodule\n`endif")]]
    {
        let run = run(&Tree::new(files), &[]);
        assert_eq!(run.exit, 2, "{}", run.text);
    }
}

#[test]
fn wrong_usage_names_the_thing() {
    let tree = Tree::new(&[("a.v", "module first(input a); endmodule"), ("stillwire.toml", "tops = \"x\"")]);
    let unknown = run(&tree, &[]);
    assert_eq!(unknown.exit, 2);
    assert!(
        unknown.text.contains("unknown key `tops`") && unknown.text.contains("did you mean `top`?"),
        "{}",
        unknown.text
    );
    let tree = Tree::new(&[("a.v", "module first(input a); endmodule")]);
    let top = run(&tree, &["--top", "frist"]);
    assert_eq!(top.exit, 2);
    assert!(top.text.contains("no module `frist`") && top.text.contains("did you mean `first`?"), "{}", top.text);
    for (arguments, word) in [
        (&["--write", "xml:a"][..], "`xml`"),
        (&["--write", "json:/does/not/exist/a.json"], "`/does/not/exist`"),
        (&["--gate", "fatal"], "fatal"),
        (&["-D", "1A"], "1A"),
        (&["-f", "/does/not/exist.f"], "`/does/not/exist.f`"),
    ] {
        let run = run(&tree, arguments);
        assert_eq!(run.exit, 2, "{}", run.text);
        assert!(run.text.contains(word), "{}", run.text);
    }
}

#[test]
fn the_same_bytes_for_any_number_of_threads() {
    let lock = concat!(env!("CARGO_MANIFEST_DIR"), "/fixtures/lock");
    let outputs: Vec<(Vec<u8>, Vec<u8>)> = ["1", "2", "8"]
        .map(|threads| {
            let output = Command::new(env!("CARGO_BIN_EXE_stillwire"))
                .args(["scan", lock, "--show", "note", "--write", "json:-", "--threads", threads])
                .output()
                .expect("the program starts");
            (output.stdout, output.stderr)
        })
        .into();
    assert!(!outputs[0].0.is_empty() && !outputs[0].1.is_empty());
    assert!(outputs.iter().all(|output| *output == outputs[0]));
}

/// Memory is measured where the kernel tells it.
#[cfg(target_os = "linux")]
#[test]
fn hostile_input_stays_within_two_gigabytes() {
    let cases = [
        module(&format!("wire w = a{};", " & a".repeat(900))),
        module(&"assign w = a;".repeat(1_600_000)),
        format!(
            "`define M(x) x x x x x x x x\n{}",
            module(&format!("wire w = {}a{};", "`M(".repeat(40), ")".repeat(40)))
        ),
    ];
    for text in cases {
        let tree = Tree::new(&[("a.v", &text)]);
        let mut child = Command::new(env!("CARGO_BIN_EXE_stillwire"))
            .arg("scan")
            .arg(tree.path(""))
            .stdout(std::process::Stdio::null())
            .stderr(std::process::Stdio::null())
            .spawn()
            .expect("the program starts");
        let status = format!("/proc/{}/status", child.id());
        let mut peak = 0;
        while child.try_wait().expect("the program can be waited for").is_none() {
            let text = std::fs::read_to_string(&status).unwrap_or_default();
            let line = text.lines().find_map(|line| line.strip_prefix("VmHWM:"));
            let kb = line.and_then(|line| line.trim().trim_end_matches(" kB").parse::<u64>().ok());
            peak = peak.max(kb.unwrap_or(0));
            std::thread::sleep(Duration::from_millis(10));
        }
        assert!(peak > 0 && peak < MEMORY_KB, "{peak} kB");
    }
}

/// An output may be a pipe or a device: renaming a file over it would put a plain file into its place.
#[test]
#[cfg(unix)]
fn an_output_that_is_no_plain_file_stays_what_it_is() {
    use std::os::unix::fs::FileTypeExt;
    let folder = tempfile::tempdir().expect("a temporary folder");
    let (pipe, plain, link) = (folder.path().join("pipe"), folder.path().join("plain"), folder.path().join("link"));
    assert!(Command::new("mkfifo").arg(&pipe).status().expect("mkfifo starts").success());
    std::fs::write(&plain, "old").expect("written");
    std::os::unix::fs::symlink(&plain, &link).expect("linked");
    let reader = std::thread::spawn({
        let pipe = pipe.clone();
        move || std::fs::read_to_string(pipe).expect("readable")
    });
    let lock = concat!(env!("CARGO_MANIFEST_DIR"), "/fixtures/lock");
    let status = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .args(["scan", lock])
        .arg("--write")
        .arg(format!("json:{}", pipe.display()))
        .arg("--write")
        .arg(format!("json:{}", link.display()))
        .output()
        .expect("the program starts")
        .status;
    assert_eq!(status.code(), Some(1));
    assert!(std::fs::metadata(&pipe).expect("there").file_type().is_fifo(), "the pipe is still one");
    let text = reader.join().expect("read to the end");
    assert!(text.contains("stillwire-findings/1"));
    assert!(std::fs::symlink_metadata(&link).expect("there").is_symlink(), "the link is still one");
    assert_eq!(std::fs::read_to_string(&plain).expect("readable"), text);
}

/// The top is there, in a text that could not be read: the message says so instead of sending the reader to search.
#[test]
fn a_top_in_a_text_that_was_lost_is_named() {
    let tree = Tree::new(&[
        ("rtl/core.v", "module core(input a, output y);\n  assign y = ;\nendmodule\n"),
        ("rtl/other.v", "module other(input a, output y);\n  assign y = a;\nendmodule\n"),
    ]);
    let text = tree.ends(3, &["scan", "rtl", "--top", "core"]);
    assert!(text.contains("`rtl/core.v:1` declares it, but that text was left out"), "{text}");
}
