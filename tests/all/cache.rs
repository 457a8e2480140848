//! The cache never changes what is said. Over all fixtures a run that finds everything remembered, and one beside which a
//! file has changed, write the same bytes as a run without a cache; whatever a verdict depends on, a change of it is seen;
//! a damaged cache is one that is rebuilt; and runs may share one.
//!
//! That the cache was asked and had the answer is asserted too: a cache that never hits would pass everything else.

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use jiff::civil::{Date, date};
use stillwire::cache::{Cache, Key, Use};
use stillwire::report::{evidence, html, json, junit, sarif, text};
use stillwire::rules::{Rule, Severity};
use stillwire::{Request, assumptions, cells, settings};

use crate::checked;

const TODAY: Date = date(2026, 12, 1);

fn request(paths: &[&Path]) -> Request {
    let paths = paths.iter().map(|path| path.to_path_buf()).collect();
    Request { today: TODAY, ..checked::request(paths, 0) }
}

/// Everything a run writes, or why it refuses to run.
fn outputs(request: &Request) -> String {
    match stillwire::scan(request, &|_| None, &|_| {}) {
        Err(error) => format!("refused: {error}"),
        Ok(scan) => {
            let style = text::Style { show: Severity::Note, gate: Severity::Error, colours: false };
            let text = text::render(&scan.report, &scan.sources, &style);
            let (report, sources, gate) = (&scan.report, &scan.sources, Severity::Error);
            let run = evidence::Run::default();
            let mut all = vec![text, json::render(report, sources), sarif::render(report, sources)];
            all.extend([junit::render(report, sources, gate), evidence::render(report, sources, gate, &run)]);
            if request.drawn {
                all.push(html::render(report, &scan.exhibits, sources, gate));
            }
            all.join("\n")
        }
    }
}

/// The same with a cache in `folder`, and how often that helped.
fn cached(request: &Request, folder: &Path) -> (String, Use) {
    let cache = Cache::new(folder);
    let mut request = request.clone();
    request.source.cache = Some(cache.clone());
    (outputs(&request), cache.used())
}

fn temporary() -> tempfile::TempDir {
    tempfile::tempdir().expect("a temporary folder")
}

fn write(path: &Path, text: &str) {
    std::fs::create_dir_all(path.parent().expect("a folder")).expect("the folder is made");
    std::fs::write(path, text).expect("the file is written");
}

/// All entries of a cache, sorted.
fn entries(folder: &Path) -> Vec<PathBuf> {
    let files = walkdir::WalkDir::new(folder).into_iter().filter_map(Result::ok);
    let mut files: Vec<PathBuf> =
        files.filter(|entry| entry.file_type().is_file()).map(walkdir::DirEntry::into_path).collect();
    files.sort();
    files
}

const LANE: &str = "module lane(input clk, sel, a, b, d, output reg q, output y);
    wire clear_n = sel ? a : b;
    assign y = sel ? b : a;
    always @(posedge clk or negedge clear_n) if (!clear_n) q <= 1'b0; else q <= d;
endmodule
";

#[test]
fn all_fixtures_say_the_same_from_the_cache() {
    let fixtures = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures");
    let is_verilog = |path: &Path| path.extension().is_some_and(|extension| extension == "v" || extension == "sv");
    let mut seen = 0;
    let mut whole_runs = 0;
    let mut trees = 0;
    for path in entries(&fixtures).iter().filter(|path| is_verilog(path)).chain([&fixtures.join("lock")]) {
        let folder = temporary();
        let (cache, leaf) = (folder.path().join("cache"), folder.path().join("leaf.v"));
        let request = request(&[path, &leaf]);
        write(&leaf, "module a_leaf(input a, b, output y); assign y = a & b; endmodule\n");
        let cold = outputs(&request);
        assert_eq!(cached(&request, &cache).0, cold, "{}: filling the cache", path.display());
        let (warm, used) = cached(&request, &cache);
        assert_eq!(warm, cold, "{}: everything remembered", path.display());
        whole_runs += usize::from(used.misses == 0 && used.hits > 0);
        write(&leaf, "module a_leaf(input c, a, b, output y); wire n = ~a; assign y = (a & b) | (n & c); endmodule\n");
        let changed = outputs(&request);
        assert!(changed != cold, "{}: the leaf shows", path.display());
        let (warm, used) = cached(&request, &cache);
        assert_eq!(warm, changed, "{}: a file beside it has changed", path.display());
        trees += usize::from(used.hits > 0);
        seen += 1;
    }
    assert!(seen > 200, "{seen} fixtures");
    // Some fixtures refuse to be analysed, or miss something that is looked for nearby.
    assert!(whole_runs * 10 > seen * 9 && trees * 10 > seen * 9, "{whole_runs} and {trees} of {seen} were remembered");
}

/// The page needs the graph, so its run reads no whole run back, but trees and covers.
#[test]
fn the_page_is_the_same_from_the_cache() {
    let fixtures = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures");
    for (path, files) in [("lock", 9), ("catalogue", 58)] {
        let folder = temporary();
        let cache = folder.path().join("cache");
        let request = Request { drawn: true, ..request(&[&fixtures.join(path)]) };
        let cold = outputs(&request);
        assert!(cold.contains("\"symbols\":[{"), "{path}: something is drawn");
        assert_eq!(cached(&request, &cache).0, cold, "{path}: filling the cache");
        let (warm, used) = cached(&request, &cache);
        assert!(warm == cold, "{path}: everything remembered");
        assert!(used.misses == 0 && used.hits >= files, "{path}: {used:?}");
        // What the page's run leaves serves the other outputs.
        let plain = Request { drawn: false, ..request };
        let (warm, used) = cached(&plain, &cache);
        assert!(warm == outputs(&plain), "{path}: the other outputs");
        assert_eq!(used.misses, 0, "{path}: the whole run is remembered");
    }
}

/// The program itself, every format in one run: settings, ledger and command line are in some of them.
#[test]
fn every_format_is_the_same_from_the_cache() {
    let folder = temporary();
    let root = folder.path();
    let signed = LANE.replace("wire clear_n", "// stillwire: signoff set-reset-hazard \"known\"\n    wire clear_n");
    write(&root.join("rtl/signed.v"), &signed);
    write(&root.join("rtl/lane.v"), &LANE.replace("module lane", "module lane_2"));
    write(&root.join("stillwire.toml"), "paths = [\"rtl\"]\nledger = \"stillwire-ledger.toml\"\n");
    let run = |arguments: &[&str]| {
        let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
        command.current_dir(root).args(arguments).output().expect("the program starts")
    };
    assert_eq!(run(&["ledger", "write"]).status.code(), Some(0));
    write(&root.join("rtl/new.v"), &LANE.replace("module lane", "module lane_3"));
    let formats = ["json", "sarif", "junit", "evidence", "html"];
    let written = |cache: &str| {
        let outputs = formats.map(|format| format!("{format}:out.{format}"));
        let mut arguments = vec!["scan", "--cache", cache];
        outputs.iter().for_each(|output| arguments.extend(["--write", output]));
        let output = run(&arguments);
        assert_eq!(output.status.code(), Some(1), "{}", String::from_utf8_lossy(&output.stderr));
        let files = formats.map(|format| std::fs::read_to_string(root.join(format!("out.{format}"))).expect("written"));
        (output.stdout, files)
    };
    let (cold_text, cold) = written("cache");
    let (warm_text, warm) = written("cache");
    assert!(cold_text == warm_text, "text");
    for ((format, cold), warm) in formats.iter().zip(&cold).zip(&warm) {
        assert!(cold == warm, "{format}");
        assert!(cold.contains("lane_3") && cold.len() > 1000, "{format}: {cold}");
    }
}

/// Logic elsewhere moves the numbers of all nodes behind it, and changes neither the witnesses of a large cone nor what is
/// remembered of its cover.
#[test]
fn a_change_elsewhere_leaves_the_covers_of_large_cones() {
    let folder = temporary();
    let root = folder.path();
    write(&root.join("rtl/a_first.v"), "module a_first(input a, b, output y); assign y = a & b; endmodule\n");
    let arms: Vec<String> = (0..20).map(|arm| format!("({{4'b0, s}} == 8'd{arm} ? d[{arm}] : 1'b0)")).collect();
    write(
        &root.join("rtl/wide.v"),
        &format!("module wide(input [3:0] s, input [19:0] d, output y); assign y = {}; endmodule\n", arms.join(" | ")),
    );
    let request = request(&[&root.join("rtl")]);
    let cache = root.join("cache");
    assert!(cached(&request, &cache).0.contains("static-1"));
    let more = "module a_first(input a, b, c, d, output y); wire w = a & b; assign y = w & c & d; endmodule\n";
    write(&root.join("rtl/a_first.v"), more);
    let (warm, used) = cached(&request, &cache);
    assert_eq!(warm, outputs(&request));
    // Missed are the run and the changed file; the other tree and its cover are there.
    assert_eq!(used, Use { hits: 2, misses: 2 });
}

/// Deep trees are written and read back by recursion.
#[test]
fn the_deepest_trees_are_remembered() {
    let folder = temporary();
    let file = folder.path().join("deep.v");
    let sum = vec!["a"; 900].join(" & ");
    let nested = format!("{}a{}", "(".repeat(190), ")".repeat(190));
    let blocks = format!("{}y = a;{}", "begin if (a) ".repeat(150), " end".repeat(150));
    write(
        &file,
        &format!(
            "module deep(input a, output b, c, output reg y);\nassign b = {sum};\nassign c = {nested};\n\
             always @* begin y = 0; {blocks} end\nendmodule\n"
        ),
    );
    let request = request(&[&file]);
    let cold = outputs(&request);
    assert!(cold.contains("\"complete\": true"), "{cold}");
    let cache = folder.path().join("cache");
    assert_eq!(cached(&request, &cache).0, cold);
    let (warm, used) = cached(&request, &cache);
    assert_eq!((warm, used), (cold, Use { hits: 2, misses: 0 }));
}

/// Fills a cache with one request, changes something, and asks the same cache again.
#[track_caller]
fn seen(what: &str, folder: &Path, before: &Request, change: impl FnOnce() -> Request) {
    let cache = folder.join("cache");
    let first = outputs(before);
    assert!(!first.starts_with("refused"), "{what}: {first}");
    assert_eq!(cached(before, &cache).0, first, "{what}: filling");
    assert_eq!(cached(before, &cache).0, first, "{what}: unchanged");
    let after = change();
    let cold = outputs(&after);
    assert!(cold != first, "{what}: the change must show, or a stale answer would not");
    assert_eq!(cached(&after, &cache).0, cold, "{what}: a stale answer");
    assert_eq!(cached(&after, &cache).0, cold, "{what}: the second time");
}

fn seen_in_text(what: &str, before: &str, after: &str) {
    let folder = temporary();
    let file = folder.path().join("rtl/design.v");
    write(&file, before);
    let request = request(&[&folder.path().join("rtl")]);
    seen(what, folder.path(), &request, || {
        write(&file, after);
        request.clone()
    });
}

#[test]
fn changes_of_the_text_are_seen() {
    seen_in_text("logic", LANE, &LANE.replace("sel ? a : b", "sel ? a : (a & b)"));
    seen_in_text("an inserted line", LANE, &format!("\n{LANE}"));
    seen_in_text("a name", LANE, &LANE.replace("clear_n", "clr_n"));
    let signed = "// stillwire: signoff set-reset-hazard \"known\"\n    wire clear_n";
    seen_in_text("a sign-off", LANE, &LANE.replace("wire clear_n", signed));
    seen_in_text("a sign-off that goes", &LANE.replace("wire clear_n", signed), LANE);
    let watched = LANE.replace("assign y", "// stillwire: watch \"still\"\n    wire w = sel ? d : a;\n    assign y");
    seen_in_text("a watch", LANE, &watched);
    let fixed = LANE.replace("wire clear_n", "// stillwire: static \"strapped\"\n    wire s = sel;\n    wire clear_n");
    seen_in_text("an assumption in a comment", &fixed.replace("// stillwire: static \"strapped\"\n", ""), &fixed);
    let off =
        LANE.replace("assign y = sel ? b : a;", "// x translate_off\n    assign y = sel ? b : a;\n // x translate_on");
    seen_in_text("a region that is switched off", LANE, &off);
    let kept = LANE.replace("wire clear_n = sel ? a : b;", "wire clear_n = (sel & a) | (~sel & b) | (a & b);");
    let attribute = kept.replace("wire clear_n", "(* keep *) wire clear_n");
    seen_in_text("an attribute", &kept, &attribute);
    seen_in_text("a syntax error", LANE, &LANE.replace("endmodule", ""));
    seen_in_text("a module without text", LANE, &LANE.replace("sel ? b : a;", "sel ? b : a; gone u_gone(.a(a));"));
}

#[test]
fn changes_of_other_files_are_seen() {
    let folder = temporary();
    let root = folder.path();
    let including = LANE.replace("wire clear_n = sel ? a : b;", "`include \"part.vh\"");
    write(&root.join("rtl/lane.v"), &including);
    write(&root.join("inc/part.vh"), "wire clear_n = sel ? a : b;\n");
    write(&root.join("other/part.vh"), "wire clear_n = a;\n");
    let rtl = root.join("rtl");
    let mut including = request(&[&rtl]);
    including.source.include = vec![root.join("inc")];
    seen("another include folder", root, &including, || {
        let mut request = including.clone();
        request.source.include = vec![root.join("other")];
        request
    });
    seen("the text of an include", root, &including, || {
        write(&root.join("inc/part.vh"), "wire clear_n = sel ? a : (a & b);\n");
        including.clone()
    });
    seen("one more file", root, &including, || {
        write(&rtl.join("another.v"), "module another(input a, b, c, output y); assign y = a ? b : c; endmodule\n");
        including.clone()
    });
    seen("a renamed file", root, &including, || {
        std::fs::rename(rtl.join("another.v"), rtl.join("a.v")).expect("renamed");
        including.clone()
    });
    seen("a missing include", root, &including, || {
        let mut request = including.clone();
        request.source.include = Vec::new();
        std::fs::remove_file(root.join("inc/part.vh")).expect("removed");
        request
    });
}

/// What lies near is searched for what is missing, and is no part of what was read.
#[test]
fn what_lies_nearby_is_looked_at_anew() {
    let folder = temporary();
    let root = folder.path().join("tree");
    write(
        &root.join("rtl/lane.v"),
        &LANE.replace("wire clear_n = sel ? a : b;", "wire clear_n; gone u_gone(sel, clear_n);"),
    );
    let request = request(&[&root.join("rtl")]);
    seen("a module without text is found near", &root, &request, || {
        write(&root.join("more/gone.v"), "module gone(input a, output y); assign y = a; endmodule\n");
        request.clone()
    });
}

#[test]
fn changes_of_the_request_are_seen() {
    let folder = temporary();
    let root = folder.path();
    let file = root.join("rtl/lane.v");
    let text = LANE.replace("(input clk", "#(parameter W = 1) (input clk").replace(
        "assign y = sel ? b : a;",
        "`ifdef WIDE\n    assign y = W ? b : a;\n`else\n    assign y = W == 1 ? `TEXT : a;\n`endif",
    );
    write(
        &file,
        &format!(
            "`ifndef TEXT\n`define TEXT (sel ? b : a)\n`endif\n{text}module two(input a, output y); assign y = a; endmodule\n"
        ),
    );
    let plain = request(&[&file]);
    let with = |change: &dyn Fn(&mut Request)| {
        let mut request = plain.clone();
        change(&mut request);
        request
    };
    let check = |what: &str, change: &dyn Fn(&mut Request)| seen(what, root, &plain, || with(change));
    check("a macro", &|request| request.source.defines = vec![("WIDE".to_string(), None)]);
    check("the value of a macro", &|request| {
        request.source.defines = vec![("TEXT".to_string(), Some("(sel & b)".to_string()))];
    });
    check("a top", &|request| request.tops = vec!["two".to_string()]);
    let top = with(&|request| request.tops = vec!["lane".to_string()]);
    seen("a parameter", root, &top, || {
        let mut request = top.clone();
        request.given = vec![("W".to_string(), "2".to_string())];
        request
    });
    check("a severity", &|request| {
        request.severities = [(Rule::SetResetHazard, Severity::Note)].into();
    });
    check("an assumption", &|request| {
        request.assumptions = vec![assumptions::Declaration {
            kind: stillwire::hazard::AssumptionKind::Static,
            nets: vec!["lane.sel".to_string()],
            reason: "strapped".to_string(),
            origin: assumptions::Origin::Settings { file: "stillwire.toml".to_string(), line: 1 },
        }];
    });
}

#[test]
fn changes_of_cells_are_seen() {
    let folder = temporary();
    let root = folder.path();
    let library = root.join("cells.lib");
    let cell = |function: &str| {
        format!(
            "library (l) {{ cell (G) {{ pin (A) {{ direction : input; }} pin (B) {{ direction : input; }} \
             pin (S) {{ direction : input; }} pin (Y) {{ direction : output; function : \"{function}\"; }} }} }}\n"
        )
    };
    write(
        &root.join("rtl/lane.v"),
        &LANE.replace("wire clear_n = sel ? a : b;", "wire clear_n; G g(.A(a), .B(b), .S(sel), .Y(clear_n));"),
    );
    write(&library, &cell("(S A) + (!S B)"));
    let mut plain = request(&[&root.join("rtl")]);
    plain.libraries = vec![library.clone()];
    seen("the text of a library", root, &plain, || {
        write(&library, &cell("(S A) + (!S B) + (A B)"));
        plain.clone()
    });
    write(&library, &cell("(S A) + (!S B)"));
    seen("no library", root, &plain, || Request { libraries: Vec::new(), ..plain.clone() });
    let settings = root.join("stillwire.toml");
    write(
        &settings,
        "[[cell]]\nmodule = \"G\"\nkind = \"selector\"\nselect = \"S\"\ninputs = [\"B\", \"A\"]\noutput = \"Y\"\n",
    );
    let declared: Vec<cells::Declaration> = settings::read(&settings).expect("the settings are good").cells;
    seen("a declared cell", root, &plain, || Request { cells: declared, ..plain.clone() });
}

/// A sign-off ends by itself, without any change of a file.
#[test]
fn the_day_is_judged_anew() {
    let folder = temporary();
    let root = folder.path();
    let signed = "// stillwire: signoff set-reset-hazard \"known\" until 2026-12-01\n    wire clear_n";
    write(&root.join("rtl/lane.v"), &LANE.replace("wire clear_n", signed));
    let before = request(&[&root.join("rtl")]);
    let after = Request { today: date(2026, 12, 2), ..before.clone() };
    seen("the day after", root, &before, || after.clone());
    let (text, used) = cached(&after, &root.join("cache"));
    assert!(text.contains("signoff-expired"), "{text}");
    assert_eq!(used, Use { hits: 2, misses: 0 }, "the day is no part of what is remembered");
}

/// A file moves to other numbers in a run, and its tree is found all the same.
#[test]
fn a_tree_is_found_behind_a_new_file() {
    let folder = temporary();
    let root = folder.path();
    write(&root.join("rtl/lane.v"), LANE);
    write(&root.join("rtl/macros.vh"), "`define SUM(x, y) ((x) | (y))\n");
    write(
        &root.join("rtl/m.v"),
        "`include \"macros.vh\"\nmodule m(input a, b, output y); assign y = `SUM(a, ~a & b); endmodule\n",
    );
    let request = request(&[&root.join("rtl")]);
    let cache = root.join("cache");
    cached(&request, &cache);
    write(&root.join("rtl/a_new.v"), "module a_new(input a, output y); assign y = a; endmodule\n");
    let (warm, used) = cached(&request, &cache);
    assert_eq!(warm, outputs(&request));
    // Missed are the run and the new file; two trees and the covers of two outputs are there.
    assert_eq!(used, Use { hits: 4, misses: 2 });
}

#[test]
fn damage_costs_time_only() {
    let folder = temporary();
    let root = folder.path();
    write(&root.join("rtl/lane.v"), LANE);
    write(&root.join("rtl/m.v"), "module m(input a, b, output y); assign y = a ? b : ~b; endmodule\n");
    let request = request(&[&root.join("rtl")]);
    let cold = outputs(&request);
    let cache = root.join("cache");
    type Damage = (&'static str, fn(&Path, &[u8]));
    let damages: [Damage; 8] = [
        ("empty", |path, _| std::fs::write(path, "").expect("written")),
        ("cut in half", |path, bytes| std::fs::write(path, &bytes[..bytes.len() / 2]).expect("written")),
        ("without its last byte", |path, bytes| std::fs::write(path, &bytes[..bytes.len() - 1]).expect("written")),
        ("with a flipped bit", |path, bytes| {
            let mut bytes = bytes.to_vec();
            let at = bytes.len() * 2 / 3;
            bytes[at] ^= 4;
            std::fs::write(path, bytes).expect("written");
        }),
        ("with a flipped bit in its checksum", |path, bytes| {
            let mut bytes = bytes.to_vec();
            bytes[20] ^= 1;
            std::fs::write(path, bytes).expect("written");
        }),
        ("longer", |path, bytes| std::fs::write(path, [bytes, b"more"].concat()).expect("written")),
        ("of another program", |path, _| std::fs::write(path, "PK\u{3}\u{4} something else").expect("written")),
        ("a folder", |path, _| {
            std::fs::remove_file(path).expect("removed");
            std::fs::create_dir(path).expect("made");
        }),
    ];
    for (what, damage) in damages {
        let _ = std::fs::remove_dir_all(&cache);
        cached(&request, &cache);
        let files = entries(&cache);
        assert!(files.len() >= 4, "a run, two trees, a cover: {files:?}");
        for file in &files {
            damage(file, &std::fs::read(file).expect("readable"));
        }
        let (warm, used) = cached(&request, &cache);
        assert_eq!(warm, cold, "{what}");
        assert_eq!(used.hits, 0, "{what}: nothing of it is used");
        if what != "a folder" {
            assert_eq!(cached(&request, &cache), (cold.clone(), Use { hits: 3, misses: 0 }), "{what}: rebuilt");
        }
    }
    // Every entry under the name of every other.
    let _ = std::fs::remove_dir_all(&cache);
    cached(&request, &cache);
    let files = entries(&cache);
    let texts: Vec<Vec<u8>> = files.iter().map(|file| std::fs::read(file).expect("readable")).collect();
    for (index, file) in files.iter().enumerate() {
        std::fs::write(file, &texts[(index + 1) % texts.len()]).expect("written");
    }
    let (warm, used) = cached(&request, &cache);
    assert_eq!((warm, used.hits), (cold, 0));
}

#[test]
fn a_cache_that_cannot_be_written_is_no_obstacle() {
    let folder = temporary();
    let root = folder.path();
    write(&root.join("rtl/lane.v"), LANE);
    let request = request(&[&root.join("rtl")]);
    let cold = outputs(&request);
    write(&root.join("file"), "no folder");
    // Nobody can make a folder below a file or in the list of processes, whatever his rights.
    for place in [root.join("file/cache"), PathBuf::from("/proc/cache")] {
        let cache = Cache::new(&place);
        let mut with = request.clone();
        with.source.cache = Some(cache.clone());
        assert_eq!(outputs(&with), cold, "{}", place.display());
        assert!(cache.problem().is_some(), "{}: it is said", place.display());
    }
}

/// The program itself, many times at once on one cache and two trees.
#[test]
fn runs_share_a_cache() {
    let folder = temporary();
    let root = folder.path();
    for (tree, text) in [("one", LANE.to_string()), ("two", LANE.replace("sel ? a : b", "sel ? b : a"))] {
        write(&root.join(tree).join("lane.v"), &text);
        for file in 0..8 {
            write(
                &root.join(tree).join(format!("m{file}.v")),
                &format!("module m{file}(input a, b, output y); assign y = a ? b : ~b; endmodule\n"),
            );
        }
    }
    let run = |tree: &str, cache: bool| {
        let mut command = Command::new(env!("CARGO_BIN_EXE_stillwire"));
        command
            .current_dir(root)
            .args(["scan", tree, "--write", "json:-"])
            .stdout(Stdio::piped())
            .stderr(Stdio::piped());
        if cache {
            command.args(["--cache", "cache"]);
        }
        command.spawn().expect("the program starts")
    };
    let cold = ["one", "two"].map(|tree| run(tree, false).wait_with_output().expect("it ends"));
    for _ in 0..2 {
        let runs: Vec<_> = (0..8).map(|index| (index % 2, run(["one", "two"][index % 2], true))).collect();
        for (tree, child) in runs {
            assert_eq!(child.wait_with_output().expect("it ends"), cold[tree]);
        }
    }
    for file in entries(&root.join("cache")) {
        assert!(file.extension().is_some_and(|extension| extension == "entry"), "left behind: {}", file.display());
    }
}

#[test]
fn the_folder_is_bounded_and_foreign_files_stay() {
    let folder = temporary();
    let root = folder.path();
    write(&root.join("ab/notes.txt"), "mine");
    write(&root.join("README"), "mine");
    let cache = Cache::new(root);
    let key = |number: u32| Key::of("number", &number).expect("a key");
    for number in 0..100u32 {
        cache.put(&key(number), &vec![number as u8; 1000]);
    }
    let size = || entries(root).iter().map(|file| file.metadata().expect("a file").len()).sum::<u64>();
    let before = size();
    cache.prune(1 << 20);
    assert_eq!(size(), before, "below the limit nothing goes");
    // The one that was used last stays.
    std::thread::sleep(std::time::Duration::from_millis(20));
    assert_eq!(cache.get::<Vec<u8>>(&key(3)), Some(vec![3; 1000]));
    cache.prune(40_000);
    assert!(size() <= 40_000 && size() > 20_000, "{}", size());
    assert_eq!(cache.get::<Vec<u8>>(&key(3)), Some(vec![3; 1000]));
    assert!(root.join("ab/notes.txt").is_file() && root.join("README").is_file());
}

#[test]
fn a_file_is_no_cache() {
    let folder = temporary();
    write(&folder.path().join("lane.v"), LANE);
    write(&folder.path().join("file"), "no folder");
    let output = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .current_dir(folder.path())
        .args(["scan", "lane.v", "--cache", "file"])
        .output()
        .expect("the program starts");
    assert_eq!(output.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&output.stderr).contains("it is no folder"));
}
