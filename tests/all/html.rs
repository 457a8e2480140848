//! The HTML report of whole runs, as text: well-formed, self-contained, everything of the JSON in it, nothing of a design
//! able to break out, the same bytes every time. How it behaves in a browser is tested in `browser.rs`.

use std::path::{Path, PathBuf};
use std::process::Command;

use serde_json::Value;

fn fixtures() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures")
}

/// A run's page and findings.
#[track_caller]
pub fn scan(paths: &[&Path], arguments: &[&str]) -> (String, Value) {
    let folder = tempfile::tempdir().expect("a folder");
    let (html, json) = (folder.path().join("out.html"), folder.path().join("out.json"));
    let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
    command.arg("scan").args(paths).args(arguments);
    command.args(["--write", &format!("html:{}", html.display()), "--write", &format!("json:{}", json.display())]);
    let output = command.output().expect("the program starts");
    let read = |file: &Path| {
        std::fs::read_to_string(file).unwrap_or_else(|_| panic!("{}", String::from_utf8_lossy(&output.stderr)))
    };
    (read(&html), serde_json::from_str(&read(&json)).expect("JSON"))
}

fn list(value: &Value) -> &[Value] {
    value.as_array().map_or(&[], Vec::as_slice)
}

/// The details in the page, parsed.
#[track_caller]
fn details(page: &str) -> Vec<Value> {
    let begin = "<script type=\"application/json\" id=\"details\">\n";
    let from = page.find(begin).expect("the details") + begin.len();
    let text = &page[from..from + page[from..].find("</script>").expect("their end")];
    text.lines().map(|line| serde_json::from_str(line).unwrap_or_else(|error| panic!("{error}: {line}"))).collect()
}

/// Every tag is closed in order; script and style hold raw text; every attribute is quoted.
#[track_caller]
fn well_formed(page: &str) {
    const VOID: [&str; 4] = ["meta", "link", "input", "br"];
    assert!(page.starts_with("<!DOCTYPE html>\n"));
    let mut rest = &page["<!DOCTYPE html>".len()..];
    let mut open: Vec<&str> = Vec::new();
    while let Some(at) = rest.find('<') {
        let end = at + rest[at..].find('>').expect("a tag ends");
        let tag = &rest[at + 1..end];
        rest = &rest[end + 1..];
        if let Some(name) = tag.strip_prefix('/') {
            assert_eq!(open.pop(), Some(name), "closed out of order before {}", &rest[..rest.len().min(80)]);
            continue;
        }
        let name = tag.split(' ').next().expect("a name");
        assert!(name.chars().all(|letter| letter.is_ascii_lowercase() || letter.is_ascii_digit()), "<{tag}>");
        assert_eq!(tag.matches('"').count() % 2, 0, "<{tag}>");
        if !VOID.contains(&name) {
            open.push(name);
        }
        if matches!(name, "script" | "style") {
            rest = &rest[rest.find(&format!("</{name}>")).expect("raw text ends")..];
        }
    }
    assert!(open.is_empty(), "never closed: {open:?}");
}

/// No way out of the file: no element or style that loads, and a policy that forbids it.
#[track_caller]
fn self_contained(page: &str) {
    assert!(page.contains("default-src 'none'"));
    for loader in [" src=", "url(", "@import", "<iframe", "<object", "<img", "fetch(", "XMLHttpRequest", "import("] {
        assert!(!page.contains(loader), "{loader}");
    }
    for (at, _) in page.match_indices("http") {
        let shown = &page[at..page.len().min(at + 40)];
        // The name of the SVG namespace, and the attribute of the policy.
        assert!(shown.starts_with("http://www.w3.org/2000/svg\"") || shown.starts_with("http-equiv="), "{shown}");
    }
}

#[test]
fn the_demo_is_well_formed_self_contained_and_whole() {
    let (page, json) = scan(&[&fixtures().join("lock")], &[]);
    well_formed(&page);
    self_contained(&page);
    let findings = list(&json["findings"]);
    let details = details(&page);
    assert_eq!(details.len(), findings.len());
    assert_eq!(page.matches("<article ").count(), findings.len());
    for (detail, finding) in details.iter().zip(findings) {
        for key in ["fingerprint", "net", "instance", "bits", "notes", "signoff", "known"] {
            assert_eq!(detail[key], finding[key]);
        }
        assert_eq!(detail["cover"]["verilog"], finding["cover"]["verilog"]);
        assert_eq!(list(&detail["hazards"]).len(), list(&finding["hazards"]).len());
        let line = finding["at"]["line"].as_u64();
        let marks = list(&detail["excerpts"][0]["marks"]);
        assert!(marks.iter().any(|mark| mark[0].as_u64() == line && mark[4] == true), "{detail}");
        if !list(&finding["hazards"]).is_empty() {
            assert!(!list(&detail["drawing"]["symbols"]).is_empty(), "{detail}");
        }
    }
    // The summary says what the JSON says.
    assert!(page.contains("FAILS, 5 findings at or above"));
    assert!(page.contains("9 files read, 0 failed"));
    assert!(page.contains("Delays, metastability, analogue effects"));
    let excerpt =
        &details.iter().find(|one| one["net"] == "lock_top.u_stop.stop_n").expect("the stop line")["excerpts"][0];
    let line = list(&excerpt["lines"]).iter().find(|line| line[0] == 11).expect("its line");
    assert_eq!(line[1], "    assign stop_n = hand ? panel_stop_n : auto_stop_n;");
}

#[test]
fn the_same_input_gives_the_same_bytes() {
    let lock = fixtures().join("lock");
    let one = scan(&[&lock], &["--threads", "1"]).0;
    assert_eq!(one, scan(&[&lock], &["--threads", "4"]).0);
}

#[test]
fn nothing_of_a_design_breaks_out() {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("a<b>&\"'.v");
    let text = "module t(input \\</script><script>alert(1)</script> , input \\\"><img/src=x> , \\<!-- , d, clk, output reg q);\n\
                // </script><b>comment</b> & \"quoted\"\n\
                // stillwire: signoff set-reset-hazard \"</script><i>reason</i>\" by <b>me</b>\n\
                wire \\r`&amp; = \\</script><script>alert(1)</script>  ? \\\"><img/src=x> : \\<!-- ;\n\
                always @(posedge clk or posedge \\r`&amp; ) if (\\r`&amp; ) q <= 0; else q <= d;\nendmodule\n";
    std::fs::write(&file, text).expect("written");
    let (page, json) = scan(&[&file], &[]);
    assert!(!list(&json["findings"]).is_empty(), "{json}");
    well_formed(&page);
    self_contained(&page);
    for forbidden in ["<script>alert", "<img", "<!--", "<b>", "<i>reason"] {
        assert!(!page.contains(forbidden), "{forbidden}");
    }
    assert_eq!(page.matches("</script").count(), 2);
    // Still there for the reader.
    let details = details(&page);
    assert!(details.iter().any(|one| one["net"] == "t.r`&amp;"), "{page}");
    assert!(details[0].to_string().contains("</script><b>comment</b>"));
}

#[test]
fn families_are_one_head_and_all_are_named() {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("t.v");
    let text = "module cell_(input s, a, b, clk, d, output reg q);\nwire r = s ? a : b;\n\
                always @(posedge clk or posedge r) if (r) q <= 0; else q <= d;\nendmodule\n\
                module t(input s, a, b, clk, d, output [4:0] q);\n\
                genvar i; generate for (i = 0; i < 5; i = i + 1) begin : g\n\
                cell_ u(s, a, b, clk, d, q[i]); end endgenerate\nendmodule\n";
    std::fs::write(&file, text).expect("written");
    let (page, json) = scan(&[&file], &[]);
    well_formed(&page);
    let hazards = list(&json["findings"]).iter().filter(|one| one["rule"] == "set-reset-hazard").count();
    assert_eq!(hazards, 5);
    let details = details(&page);
    let group = details.iter().find(|one| one["net"] == "t.g[0].u.r").expect("the first");
    assert_eq!(list(&group["others"]).len(), 4);
    assert!(page.contains("data-module=\"cell_\" data-count=\"5\""));
}

#[test]
fn what_is_undecided_known_or_not_read_is_said() {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("t.v");
    let text = "module t(input s, a, b, d, output reg q, p); wire c; always @(posedge c) q <= d;\n\
                wire r = s ? a : b; always @(posedge d or posedge r) if (r) p <= 0; else p <= s;\nendmodule\n";
    std::fs::write(&file, text).expect("written");
    let ledger = folder.path().join("known.toml");
    let written = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .args(["ledger", "write", "--ledger"])
        .args([&ledger, &file])
        .output()
        .expect("the program starts");
    assert!(ledger.is_file(), "{}", String::from_utf8_lossy(&written.stderr));
    let (page, json) = scan(&[&file], &["--ledger", ledger.to_str().expect("a path")]);
    assert_eq!(json["complete"], false);
    well_formed(&page);
    assert!(page.contains("id=\"result\" class=\"incomplete\""), "{page}");
    assert!(page.contains("INCOMPLETE"));
    assert!(page.contains("data-verdict=\"undecided\" data-state=\"known\""));
    assert!(page.contains("known in the ledger"));
}
