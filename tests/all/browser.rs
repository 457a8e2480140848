//! The HTML report in a real browser: headless Chromium, driven over the pipe of the DevTools protocol. The pages are
//! opened as files, without any server. Needs `chromium`, which `tests/outside/run` installs.

use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};
use std::time::Duration;

use serde_json::{Value, json};

use crate::html::scan;

/// A browser with one page.
struct Browser {
    child: Child,
    write: ChildStdin,
    read: BufReader<ChildStdout>,
    session: String,
    last: u64,
    /// Addresses that pages asked for.
    requested: Vec<String>,
    _profile: tempfile::TempDir,
}

impl Browser {
    fn start() -> Self {
        let profile = tempfile::tempdir().expect("a folder");
        // The protocol runs over the file descriptors 3 (in) and 4 (out).
        let line = format!(
            "exec chromium --headless --no-sandbox --disable-gpu --no-first-run --window-size=1300,900 \
             --user-data-dir={} --remote-debugging-pipe about:blank 3<&0 4>&1 </dev/null >/dev/null 2>&1",
            profile.path().display()
        );
        let mut child = Command::new("bash")
            .args(["-c", &line])
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .expect("bash starts");
        let (write, read) = (child.stdin.take().expect("piped"), child.stdout.take().expect("piped"));
        let mut browser = Self {
            child,
            write,
            read: BufReader::new(read),
            session: String::new(),
            last: 0,
            requested: Vec::new(),
            _profile: profile,
        };
        let target = browser.call("Target.createTarget", json!({ "url": "about:blank" }));
        let attached =
            browser.call("Target.attachToTarget", json!({ "targetId": target["targetId"], "flatten": true }));
        browser.session = attached["sessionId"].as_str().expect("a session").to_string();
        for domain in ["Page.enable", "Runtime.enable", "Network.enable"] {
            browser.call(domain, json!({}));
        }
        browser
    }

    fn message(&mut self) -> Value {
        let mut bytes = Vec::new();
        self.read.read_until(0, &mut bytes).expect("the browser talks");
        assert!(!bytes.is_empty(), "the browser went away");
        bytes.pop();
        let message: Value = serde_json::from_slice(&bytes).expect("JSON");
        if message["method"] == "Network.requestWillBeSent" {
            let url = message["params"]["request"]["url"].as_str().unwrap_or_default();
            self.requested.push(url.to_string());
        }
        let failed = message["method"] == "Runtime.exceptionThrown";
        assert!(!failed, "the page failed: {message}");
        message
    }

    #[track_caller]
    fn call(&mut self, method: &str, parameters: Value) -> Value {
        self.last += 1;
        let mut call = json!({ "id": self.last, "method": method, "params": parameters });
        if !self.session.is_empty() {
            call["sessionId"] = self.session.clone().into();
        }
        self.write.write_all(call.to_string().as_bytes()).and_then(|()| self.write.write_all(&[0])).expect("sent");
        self.write.flush().expect("sent");
        loop {
            let mut message = self.message();
            if message["id"] == self.last {
                assert!(message["error"].is_null(), "{method}: {message}");
                return message["result"].take();
            }
        }
    }

    /// Opens a page and waits until it is loaded.
    fn open(&mut self, page: &Path, fragment: &str) {
        // A change of the fragment alone would load nothing.
        self.load("about:blank");
        self.load(&format!("file://{}{fragment}", page.display()));
    }

    fn load(&mut self, url: &str) {
        self.call("Page.navigate", json!({ "url": url }));
        for _ in 0..600 {
            if self.run("document.readyState + location.protocol") == json!("completefile:")
                || url == "about:blank" && self.run("location.protocol") == json!("about:")
            {
                return;
            }
            std::thread::sleep(Duration::from_millis(100));
        }
        panic!("{url} was never loaded");
    }

    /// The value of an expression of JavaScript.
    #[track_caller]
    fn run(&mut self, expression: &str) -> Value {
        let parameters = json!({ "expression": expression, "returnByValue": true, "awaitPromise": true });
        let mut result = self.call("Runtime.evaluate", parameters);
        assert!(result["exceptionDetails"].is_null(), "{expression}: {result}");
        result["result"]["value"].take()
    }

    /// Presses and releases a key as a user does.
    fn key(&mut self, key: &str) {
        let text = match key {
            "Enter" => "\r",
            key if key.len() == 1 => key,
            _ => "",
        };
        let code = match key {
            "Enter" => 13,
            "ArrowDown" => 40,
            "ArrowUp" => 38,
            "Escape" => 27,
            "Tab" => 9,
            _ => 0,
        };
        let mut down = json!({ "type": "keyDown", "key": key, "windowsVirtualKeyCode": code });
        if !text.is_empty() {
            down["text"] = text.into();
        }
        self.call("Input.dispatchKeyEvent", down);
        self.call("Input.dispatchKeyEvent", json!({ "type": "keyUp", "key": key, "windowsVirtualKeyCode": code }));
    }

    fn type_(&mut self, text: &str) {
        self.call("Input.insertText", json!({ "text": text }));
    }

    /// Keeps a picture or a print where STILLWIRE_SHOTS says, for whoever wants to look.
    fn keep(&mut self, name: &str) {
        let shown = self.call("Page.captureScreenshot", json!({ "format": "png" }));
        let data = shown["data"].as_str().expect("a picture");
        assert!(data.starts_with("iVBORw0KGgo"), "no PNG");
        if let Some(folder) = std::env::var_os("STILLWIRE_SHOTS") {
            std::fs::write(Path::new(&folder).join(name), decoded(data)).expect("written");
        }
    }
}

impl Drop for Browser {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

/// Base 64 (RFC 4648).
fn decoded(text: &str) -> Vec<u8> {
    const LETTERS: &[u8] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    let value = |byte: u8| LETTERS.iter().position(|&letter| letter == byte).unwrap_or(0) as u32;
    let mut bytes = Vec::new();
    for four in text.trim_end_matches('=').as_bytes().chunks(4) {
        let bits = four.iter().enumerate().fold(0, |bits, (at, &byte)| bits | value(byte) << (18 - 6 * at));
        bytes.extend_from_slice(&bits.to_be_bytes()[1..four.len()]);
    }
    bytes
}

/// A page in a folder of its own.
struct Page {
    _folder: tempfile::TempDir,
    file: PathBuf,
    json: Value,
}

#[track_caller]
fn page(paths: &[&Path], arguments: &[&str]) -> Page {
    let (html, json) = scan(paths, arguments);
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("report.html");
    std::fs::write(&file, html).expect("written");
    Page { _folder: folder, file, json }
}

fn lock() -> Page {
    page(&[&Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/lock")], &[])
}

const SHOWN: &str = "document.querySelectorAll('article.finding:not([hidden])').length";

#[test]
#[ignore = "outside: run tests/outside/run"]
fn a_report_is_filtered_and_expanded_by_keyboard() {
    let page = lock();
    let all = page.json["findings"].as_array().map_or(0, Vec::len);
    let mut browser = Browser::start();
    browser.open(&page.file, "");
    assert_eq!(browser.run(SHOWN), all);
    browser.keep("lock-light.png");

    // `/` goes to the filter, what is typed there filters, and the address follows.
    browser.key("/");
    assert_eq!(browser.run("document.activeElement.id"), "text");
    browser.type_("stop_n");
    assert_eq!(browser.run(SHOWN), 1);
    assert_eq!(browser.run("document.getElementById('status').textContent"), format!("1 of {all} findings"));
    assert_eq!(browser.run("location.hash"), "#text=stop_n");
    browser.key("Escape");
    assert_eq!(browser.run(SHOWN), all);

    // j and k step, Enter unfolds and folds.
    browser.key("j");
    browser.key("j");
    browser.key("ArrowDown");
    browser.key("k");
    let here = "document.activeElement.closest('article').id";
    assert_eq!(browser.run(here), "f1");
    browser.key("Enter");
    assert_eq!(browser.run("document.activeElement.getAttribute('aria-expanded')"), "true");
    let inside = |what: &str| format!("document.querySelectorAll('#f1 .detail {what}').length");
    assert_eq!(browser.run(&inside("svg.drawing")), 1);
    assert_eq!(browser.run(&inside("table.waves")), 1);
    assert_eq!(browser.run(&inside(".excerpt mark.primary")), 1);
    browser.keep("lock-expanded.png");
    browser.key("Enter");
    assert_eq!(browser.run("document.getElementById('d1').hidden"), true);

    // Each choice leaves exactly the findings that the JSON has.
    for (field, key) in [("rule", "rule"), ("severity", "severity"), ("verdict", "verdict")] {
        let options = browser.run(&format!("[...document.getElementById('{field}').options].map((one) => one.value)"));
        for option in
            options.as_array().expect("options").iter().filter_map(Value::as_str).filter(|one| !one.is_empty())
        {
            let expected =
                page.json["findings"].as_array().map_or(0, |all| all.iter().filter(|one| one[key] == option).count());
            browser.run(&format!(
                "{{ const field = document.getElementById('{field}'); field.value = '{option}'; \
                 field.dispatchEvent(new Event('input')); }}"
            ));
            assert_eq!(browser.run(SHOWN), expected, "{field} = {option}");
        }
        browser.run("document.getElementById('reset').click()");
        assert_eq!(browser.run(SHOWN), all);
    }
    assert!(browser.requested.iter().all(|url| url.starts_with("file:") || url == "data:,"), "{:?}", browser.requested);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn an_address_names_a_view() {
    let page = lock();
    let fingerprint = page.json["findings"][3]["fingerprint"].as_str().expect("a fingerprint")[..12].to_string();
    let mut browser = Browser::start();
    browser.open(&page.file, &format!("#severity=error&open={fingerprint}"));
    assert_eq!(browser.run("document.getElementById('severity').value"), "error");
    assert_eq!(browser.run("document.activeElement.closest('article').id"), "f3");
    assert_eq!(browser.run("document.querySelectorAll('article .detail:not([hidden])').length"), 1);
    browser.keep("lock-linked.png");
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn dark_light_and_paper() {
    let page = lock();
    let mut browser = Browser::start();
    let scheme = |value: &str| json!({ "features": [{ "name": "prefers-color-scheme", "value": value }] });
    let ground = "getComputedStyle(document.body).backgroundColor";
    browser.call("Emulation.setEmulatedMedia", scheme("light"));
    browser.open(&page.file, "");
    let light = browser.run(ground);
    browser.call("Emulation.setEmulatedMedia", scheme("dark"));
    let dark = browser.run(ground);
    assert_ne!(light, dark);
    browser.run("document.getElementById('fold').click()");
    browser.keep("lock-dark.png");
    // The switch holds against the system.
    browser.run(
        "{ const theme = document.getElementById('theme'); theme.value = 'light'; theme.dispatchEvent(new Event('input')); }",
    );
    assert_eq!(browser.run(ground), light);
    browser.call("Emulation.setEmulatedMedia", scheme("light"));
    browser.run(
        "{ const theme = document.getElementById('theme'); theme.value = 'dark'; theme.dispatchEvent(new Event('input')); }",
    );
    assert_eq!(browser.run(ground), dark);
    browser.run("document.getElementById('fold').click()");
    let folded = "[...document.querySelectorAll('.detail')].every((one) => one.hidden)";
    assert_eq!(browser.run(folded), true);

    // On paper everything is expanded, and folded again afterwards.
    browser.run("window.dispatchEvent(new Event('beforeprint'))");
    let expanded = "[...document.querySelectorAll('.detail')].every((one) => !one.hidden && one.children.length > 0)";
    assert_eq!(browser.run(expanded), true);
    browser.run("window.dispatchEvent(new Event('afterprint'))");
    assert_eq!(browser.run(folded), true);
    let printed = browser.call("Page.printToPDF", json!({}));
    let data = printed["data"].as_str().expect("a print");
    assert!(data.starts_with("JVBERi0"), "no PDF");
    if let Some(folder) = std::env::var_os("STILLWIRE_SHOTS") {
        std::fs::write(Path::new(&folder).join("lock.pdf"), decoded(data)).expect("written");
    }
    browser.call("Emulation.setEmulatedMedia", json!({ "media": "print" }));
    assert_eq!(browser.run("getComputedStyle(document.getElementById('controls')).display"), "none");
}

/// Whatever a design calls its nets, nothing of it runs or becomes an element.
#[test]
#[ignore = "outside: run tests/outside/run"]
fn names_stay_text() {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("t.v");
    let text = "module t(input \\</script><script>document.title='broken'</script> , input \\<img/src=x/onerror=alert(1)> , b, d, clk, output reg q);\n\
                wire \\<b>r = \\</script><script>document.title='broken'</script>  ? \\<img/src=x/onerror=alert(1)> : b; // </script><b>\n\
                always @(posedge clk or posedge \\<b>r ) if (\\<b>r ) q <= 0; else q <= d;\nendmodule\n";
    std::fs::write(&file, text).expect("written");
    let page = page(&[&file], &[]);
    let mut browser = Browser::start();
    browser.open(&page.file, "");
    browser.run("document.getElementById('fold').click()");
    assert_eq!(browser.run("document.title"), "Stillwire: t");
    assert_eq!(browser.run("document.querySelectorAll('img, b, script').length"), 2);
    assert_eq!(
        browser.run("document.querySelector('.detail').textContent.includes('</script><script>document')"),
        true
    );
    assert!(browser.requested.iter().all(|url| url.starts_with("file:") || url == "data:,"), "{:?}", browser.requested);
}

/// 2,000 findings of different nets: loading, filtering and expanding, by the page's own clock.
#[test]
#[ignore = "outside: run tests/outside/run"]
#[allow(clippy::print_stdout, reason = "the times are the result")]
fn two_thousand_findings_stay_responsive() {
    const FINDINGS: usize = 2_000;
    let mut text = format!("module t(input clk, d, s, input [{FINDINGS}:0] a, output reg [{}:0] q);\n", FINDINGS - 1);
    for at in 0..FINDINGS {
        text += &format!(
            "wire r{at} = s ? a[{at}] : a[{}]; always @(posedge clk or posedge r{at}) if (r{at}) q[{at}] <= 0; else q[{at}] <= d;\n",
            at + 1
        );
    }
    text += "endmodule\n";
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("t.v");
    std::fs::write(&file, text).expect("written");
    let page = page(&[&file], &[]);
    let size = std::fs::metadata(&page.file).expect("the page").len();
    let mut browser = Browser::start();
    browser.open(&page.file, "");
    assert_eq!(browser.run("findings.length >= 2000"), true);
    let loaded = browser.run("performance.getEntriesByType('navigation')[0].domComplete");
    // The handler and the layout that it causes.
    let timed = |work: &str| {
        format!(
            "(() => {{ const begin = performance.now(); {work}; document.body.offsetHeight; return performance.now() - begin; }})()"
        )
    };
    let typed = |text: &str| {
        timed(&format!(
            "{{ const field = byId('text'); field.value = '{text}'; field.dispatchEvent(new Event('input')); }}"
        ))
    };
    let some = browser.run(&typed("r1234"));
    assert_eq!(browser.run(SHOWN), 1);
    let many = browser.run(&typed("r1"));
    let all = browser.run(&typed(""));
    let expanded = browser.run(&timed("findings[1000].head.click()"));
    let milliseconds = |value: &Value| value.as_f64().expect("a time");
    println!(
        "{size} bytes; loaded {:.0} ms, filter to one {:.1} ms, to many {:.1} ms, to all {:.1} ms, expand {:.1} ms",
        milliseconds(&loaded),
        milliseconds(&some),
        milliseconds(&many),
        milliseconds(&all),
        milliseconds(&expanded)
    );
    for time in [&some, &many, &all, &expanded] {
        assert!(milliseconds(time) < 500.0, "{time} ms");
    }
    assert!(milliseconds(&loaded) < 15_000.0, "{loaded} ms");
    browser.keep("two-thousand.png");
}
