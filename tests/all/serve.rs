//! The language server over pipes, by messages written out here as the protocol has them (Language Server Protocol 3.17). An
//! independent client is the business of `tests/outside/editor.py`.

use std::io::{BufRead, BufReader, Write};
use std::process::{Child, ChildStdin, Command, Stdio};
use std::sync::mpsc::{Receiver, channel};
use std::time::Duration;

use serde_json::{Value, json};

use crate::tree::Tree;

const LANE: &str = "module lane(input clk, sel, a, b, d, output reg q);
    wire clear_n = sel ? a : b;
    always @(posedge clk or negedge clear_n) if (!clear_n) q <= 1'b0; else q <= d;
endmodule
";

/// A machine under load is slow; nothing here should take a second.
const PATIENCE: Duration = Duration::from_secs(120);

struct Editor {
    child: Child,
    to: Option<ChildStdin>,
    from: Receiver<Value>,
    /// Notifications that came while something else was waited for.
    news: Vec<Value>,
    next: u64,
    uri: String,
}

impl Editor {
    /// Starts the server in the folder of `tree`.
    fn start(tree: &Tree) -> Editor {
        let mut child = Command::new(env!("CARGO_BIN_EXE_stillwire"))
            .args(["serve", "--cache", ".cache"])
            .current_dir(tree.path(""))
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .expect("the program starts");
        let (sender, from) = channel();
        let mut output = BufReader::new(child.stdout.take().expect("a pipe"));
        std::thread::spawn(move || {
            while let Some(message) = read(&mut output) {
                if sender.send(message).is_err() {
                    return;
                }
            }
        });
        let to = child.stdin.take();
        let folder = std::fs::canonicalize(tree.path("")).expect("the folder exists");
        let uri = format!("file://{}", folder.display());
        Editor { child, to, from, news: Vec::new(), next: 0, uri }
    }

    fn initialized(tree: &Tree) -> Editor {
        let mut editor = Self::start(tree);
        let capabilities =
            json!({ "textDocument": { "codeAction": { "resolveSupport": { "properties": ["edit"] } } } });
        let root = editor.uri.clone();
        let answer =
            editor.ask("initialize", json!({ "processId": null, "rootUri": root, "capabilities": capabilities }));
        assert_eq!(answer["result"]["serverInfo"]["name"], "stillwire", "{answer}");
        editor.tell("initialized", json!({}));
        editor
    }

    fn file(&self) -> String {
        format!("{}/rtl/lane.v", self.uri)
    }

    fn write(&mut self, message: &Value) {
        let text = message.to_string();
        let to = self.to.as_mut().expect("the pipe is open");
        write!(to, "Content-Length: {}\r\n\r\n{text}", text.len()).expect("the server reads");
        to.flush().expect("the server reads");
    }

    fn tell(&mut self, method: &str, params: Value) {
        self.write(&json!({ "jsonrpc": "2.0", "method": method, "params": params }));
    }

    fn request(&mut self, method: &str, params: Value) -> u64 {
        self.next += 1;
        self.write(&json!({ "jsonrpc": "2.0", "id": self.next, "method": method, "params": params }));
        self.next
    }

    #[track_caller]
    fn answer(&mut self, id: u64) -> Value {
        loop {
            let message = self.from.recv_timeout(PATIENCE).expect("an answer");
            if message["id"] == id && message.get("method").is_none() {
                return message;
            }
            self.news.push(message);
        }
    }

    #[track_caller]
    fn ask(&mut self, method: &str, params: Value) -> Value {
        let id = self.request(method, params);
        self.answer(id)
    }

    /// The rules of the next diagnostics of the file that are as wanted.
    #[track_caller]
    fn diagnostics(&mut self, wanted: impl Fn(&[String]) -> bool) -> Vec<Value> {
        let file = self.file();
        loop {
            let message = if self.news.is_empty() {
                self.from.recv_timeout(PATIENCE).expect("diagnostics")
            } else {
                self.news.remove(0)
            };
            if message["method"] == "textDocument/publishDiagnostics" && message["params"]["uri"] == file {
                let all = message["params"]["diagnostics"].as_array().expect("a list").clone();
                let codes: Vec<String> =
                    all.iter().map(|one| one["code"].as_str().unwrap_or_default().to_string()).collect();
                if wanted(&codes) {
                    return all;
                }
            }
        }
    }

    fn actions(&mut self) -> Vec<Value> {
        let place = json!({ "line": 1, "character": 9 });
        let params = json!({ "textDocument": { "uri": self.file() }, "range": { "start": place, "end": place }, "context": { "diagnostics": [] } });
        self.ask("textDocument/codeAction", params)["result"].as_array().expect("a list").clone()
    }

    fn end(mut self) -> i32 {
        let answer = self.ask("shutdown", Value::Null);
        assert_eq!(answer["result"], Value::Null, "{answer}");
        let refused = self.ask("textDocument/hover", json!({}));
        assert_eq!(refused["error"]["code"], -32600, "{refused}");
        self.tell("exit", Value::Null);
        self.child.wait().expect("it ends").code().expect("no signal")
    }
}

fn read(from: &mut impl BufRead) -> Option<Value> {
    let mut length = 0;
    loop {
        let mut line = String::new();
        if from.read_line(&mut line).ok()? == 0 {
            return None;
        }
        match line.trim_end() {
            "" => break,
            header => {
                if let Some(value) = header.strip_prefix("Content-Length: ") {
                    length = value.parse().ok()?;
                }
            }
        }
    }
    let mut body = vec![0; length];
    from.read_exact(&mut body).ok()?;
    serde_json::from_slice(&body).ok()
}

/// The text with the one edit of whole lines that a code action makes.
fn applied(text: &str, action: &Value, file: &str) -> String {
    let edit = &action["edit"]["changes"][file][0];
    let line = |end: &str| {
        assert_eq!(edit["range"][end]["character"], 0, "{action}");
        edit["range"][end]["line"].as_u64().expect("a line") as usize
    };
    let lines: Vec<&str> = text.split_inclusive('\n').collect();
    let new = edit["newText"].as_str().expect("a text");
    [&lines[..line("start")].concat(), new, &lines[line("end")..].concat()].concat()
}

fn has(codes: &[String], rule: &str) -> bool {
    codes.iter().any(|code| code == rule)
}

#[test]
fn an_editor_sees_signs_off_and_cures() {
    let tree = Tree::new(&[("rtl/lane.v", LANE)]);
    let mut editor = Editor::initialized(&tree);
    let file = editor.file();
    let all = editor.diagnostics(|codes| has(codes, "set-reset-hazard"));
    let finding = all.iter().find(|one| one["code"] == "set-reset-hazard").expect("the finding");
    assert_eq!((&finding["severity"], &finding["range"]["start"]["line"]), (&json!(1), &json!(1)));
    let related = finding["relatedInformation"].as_array().expect("a list");
    assert!(related.len() >= 2 && related.iter().all(|one| one["location"]["uri"] == file), "{finding}");

    let place = json!({ "line": 1, "character": 9 });
    let hover = editor.ask("textDocument/hover", json!({ "textDocument": { "uri": file }, "position": place }));
    let text = hover["result"]["contents"]["value"].as_str().expect("Markdown").to_string();
    assert!(
        text.contains("- `lane.sel` changes from 1 to 0") || text.contains("- `lane.sel` changes from 0 to 1"),
        "{text}"
    );
    assert!(text.contains("meanwhile `lane.a` = 1, `lane.b` = 1"), "{text}");
    let elsewhere = json!({ "textDocument": { "uri": file }, "position": { "line": 3, "character": 0 } });
    assert_eq!(editor.ask("textDocument/hover", elsewhere)["result"], Value::Null);

    let actions = editor.actions();
    let action = |wanted: &str| {
        let found = actions.iter().find(|one| one["title"].as_str().is_some_and(|title| title.starts_with(wanted)));
        found.unwrap_or_else(|| panic!("no `{wanted}` in {actions:?}")).clone()
    };
    let signed = applied(LANE, &action("Sign off set-reset-hazard"), &file);
    assert!(signed.contains("\n    // stillwire: signoff set-reset-hazard \"\"\n    wire clear_n"), "{signed}");
    let cured = editor.ask("codeAction/resolve", action("Cure set-reset-hazard"));
    let cured = applied(LANE, &cured["result"], &file);

    // Without a reason the comment accepts nothing.
    for (text, rule, stands) in [
        (signed.clone(), "signoff-invalid", true),
        (signed.replace("\"\"", "\"slow relay\""), "set-reset-hazard", false),
        (LANE.to_string(), "set-reset-hazard", true),
        (cured, "set-reset-hazard", false),
    ] {
        tree.write("rtl/lane.v", text.as_bytes());
        editor.tell("textDocument/didSave", json!({ "textDocument": { "uri": file } }));
        editor.diagnostics(|codes| has(codes, rule) == stands);
    }
    assert_eq!(editor.end(), 0);
}

#[test]
fn what_is_not_saved_is_not_analysed() {
    let tree = Tree::new(&[("rtl/lane.v", LANE)]);
    let mut editor = Editor::initialized(&tree);
    let file = editor.file();
    editor.diagnostics(|codes| has(codes, "set-reset-hazard"));
    let change =
        |text: &str| json!({ "textDocument": { "uri": file, "version": 2 }, "contentChanges": [{ "text": text }] });
    editor.tell("textDocument/didChange", change(&format!("\n{LANE}")));
    assert_eq!(editor.actions(), Vec::<Value>::new(), "no edit fits a text that was not scanned");
    let said = editor.news.iter().any(|one| {
        one["method"] == "window/logMessage"
            && one["params"]["message"].as_str().is_some_and(|text| text.contains("unsaved edits are not analysed"))
    });
    assert!(said, "{:?}", editor.news);
    let place = json!({ "line": 1, "character": 9 });
    let hover = editor.ask("textDocument/hover", json!({ "textDocument": { "uri": file }, "position": place }));
    assert!(hover.to_string().contains("unsaved edits"), "{hover}");
    editor.tell("textDocument/didChange", change(LANE));
    assert!(!editor.actions().is_empty(), "the edits are undone");
    assert_eq!(editor.end(), 0);
}

#[test]
fn bad_requests_get_errors_and_do_no_harm() {
    let tree = Tree::new(&[("rtl/lane.v", LANE)]);
    let mut early = Editor::start(&tree);
    let code = |answer: &Value| answer["error"]["code"].as_i64();
    assert_eq!(code(&early.ask("textDocument/hover", json!({}))), Some(-32002));
    early.tell("exit", Value::Null);
    assert_eq!(early.child.wait().expect("it ends").code(), Some(1), "an exit without a shutdown");

    let mut editor = Editor::initialized(&tree);
    assert_eq!(code(&editor.ask("no/such/method", json!({}))), Some(-32601));
    assert_eq!(code(&editor.ask("textDocument/hover", json!({ "position": "here" }))), Some(-32602));
    assert_eq!(code(&editor.ask("codeAction/resolve", json!({ "title": "mine" }))), Some(-32602));
    let unknown = editor.ask("codeAction/resolve", json!({ "title": "x", "data": { "fingerprint": "0123" } }));
    assert_eq!(code(&unknown), Some(-32803), "{unknown}");
    editor.tell("textDocument/didOpen", json!([1, 2]));
    editor.tell("no/such/notification", json!({}));
    editor.diagnostics(|codes| has(codes, "set-reset-hazard"));
    assert_eq!(editor.end(), 0);
}

/// The scan of this takes far longer than the answer may.
#[test]
fn a_scan_in_flight_does_not_hold_up_the_end() {
    let mut module = String::from("module wide(input [63:0] a, b, output [63:0] y);\n");
    for index in 0..4000 {
        module += &format!("    wire w{index} = (a[{}] & b[{}]) | (~a[{0}] & {index});\n", index % 64, index % 61);
    }
    module += "endmodule\n";
    let tree =
        Tree::new(&[("rtl/lane.v", LANE), ("rtl/wide.v", &module), ("rtl/more.v", &module.replace("wide", "more"))]);
    let editor = Editor::initialized(&tree);
    // Nothing was published yet: the scan has not ended.
    assert_eq!(editor.end(), 0);
}

#[test]
fn a_scan_that_fails_is_said_and_clears_nothing() {
    let tree = Tree::new(&[("rtl/lane.v", LANE)]);
    let mut editor = Editor::initialized(&tree);
    let file = editor.file();
    editor.diagnostics(|codes| has(codes, "set-reset-hazard"));
    tree.write("stillwire.toml", b"tops = 1\n");
    editor.tell("textDocument/didSave", json!({ "textDocument": { "uri": file } }));
    loop {
        let message = editor.from.recv_timeout(PATIENCE).expect("news");
        assert!(message["method"] != "textDocument/publishDiagnostics", "{message}");
        if message["method"] == "window/showMessage" {
            assert_eq!(message["params"]["type"], 1);
            assert!(
                message["params"]["message"].as_str().is_some_and(|text| text.contains("stillwire.toml")),
                "{message}"
            );
            break;
        }
    }
    assert_eq!(editor.end(), 0);
}

#[test]
fn a_client_that_goes_away_ends_it() {
    let tree = Tree::new(&[("rtl/lane.v", LANE)]);
    let mut editor = Editor::initialized(&tree);
    editor.to = None;
    assert_eq!(editor.child.wait().expect("it ends").code(), Some(1));
}

/// What is no message of the protocol ends the session, with a reason and without a panic: where one message ends is then
/// not known.
#[test]
fn what_is_no_message_ends_it_with_a_reason() {
    let framed = |text: &str| format!("Content-Length: {}\r\n\r\n{text}", text.len());
    let start = framed(
        &json!({ "jsonrpc": "2.0", "id": 1, "method": "initialize", "params": { "capabilities": {} } }).to_string(),
    );
    let ready = framed(&json!({ "jsonrpc": "2.0", "method": "initialized", "params": {} }).to_string());
    let cut = "Content-Length: 50\r\n\r\n{\"jsonrpc\"".to_string();
    for (what, bad) in [
        ("no JSON", framed("{not json")),
        ("JSON, but no message", framed("[1, 2]")),
        ("no length", "Content-Type: text\r\n\r\n{}".to_string()),
        ("a length that is none", "Content-Length: long\r\n\r\n{}".to_string()),
        ("the end within a message", cut),
    ] {
        for begun in [false, true] {
            let tree = Tree::new(&[("rtl/lane.v", LANE)]);
            let mut child = Command::new(env!("CARGO_BIN_EXE_stillwire"))
                .arg("serve")
                .current_dir(tree.path(""))
                .stdin(Stdio::piped())
                .stdout(Stdio::piped())
                .stderr(Stdio::piped())
                .spawn()
                .expect("the program starts");
            let sent = if begun { format!("{start}{ready}{bad}") } else { bad.clone() };
            child.stdin.take().expect("a pipe").write_all(sent.as_bytes()).expect("the server reads");
            let output = child.wait_with_output().expect("it ends");
            let said = String::from_utf8_lossy(&output.stderr);
            assert_eq!(output.status.code(), Some(1), "{what}: {said}");
            assert!(said.contains("error: the session with the editor broke off"), "{what}: {said}");
            assert!(!said.contains("panicked"), "{what}: {said}");
        }
    }
}
