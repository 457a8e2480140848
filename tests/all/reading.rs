//! Reading whole trees: which files, in which order, with which macros, and what is said when something is wrong. The
//! expectations come from the project's words on reading and from IEEE 1800-2017 clause 22.

use std::path::Path;

use stillwire::diagnostic::{Diagnostic, Kind};
use stillwire::source::{self, Loaded, PathError, Request};

use crate::tree::Tree;

impl Tree {
    fn request(&self) -> Request {
        Request { paths: vec![self.path("")], ..Request::default() }
    }

    #[track_caller]
    fn load(&self) -> Loaded {
        load(&self.request()).expect("good paths")
    }
}

fn load(request: &Request) -> Result<Loaded, PathError> {
    let environment = |name: &str| (name == "UNIT").then(|| "b".to_string());
    source::on_big_stacks(2, || source::load(request, &environment, &|_, _| {})).expect("threads")
}

fn modules(loaded: &Loaded) -> Vec<&str> {
    loaded.units.iter().flat_map(|unit| &unit.modules).map(|module| module.name.name.as_str()).collect()
}

/// What a diagnostic says, with the name of its file and its line.
fn said(loaded: &Loaded, diagnostic: &Diagnostic) -> String {
    let place = diagnostic.at.map(|span| loaded.sources.position(span));
    let place = place.map_or(String::new(), |place| {
        let name = Path::new(&place.file).file_name().unwrap_or_default().to_string_lossy().into_owned();
        format!("{name}:{}:{}: ", place.line, place.column)
    });
    format!("{place}{}", diagnostic.message)
}

fn of_kind(loaded: &Loaded, kind: Kind) -> Vec<String> {
    loaded.diagnostics.iter().filter(|one| one.kind == kind).map(|one| said(loaded, one)).collect()
}

#[track_caller]
fn check_clean(loaded: &Loaded) {
    assert_eq!(of_kind(loaded, Kind::Incomplete), [] as [&str; 0]);
    assert_eq!(loaded.files_failed, 0);
}

#[test]
fn folders_are_walked_in_a_stable_order() {
    let tree = Tree::new(&[
        ("b.v", "module b; endmodule"),
        ("a/z.sv", "module z; endmodule"),
        ("a/c.v", "module c; endmodule"),
        (".hidden/h.v", "module h; endmodule"),
        ("defs.vh", "this is no module"),
        ("more.svh", "nor this"),
        ("readme.txt", "nor this"),
        ("dir.v/inner.v", "module inner; endmodule"),
    ]);
    let loaded = tree.load();
    check_clean(&loaded);
    assert_eq!(modules(&loaded), ["c", "z", "b", "inner"]);
    assert_eq!(loaded.files_read, 4);
}

#[cfg(unix)]
#[test]
fn links_in_a_circle_are_named_and_not_followed() {
    let tree = Tree::new(&[("sub/a.v", "module a; endmodule")]);
    std::os::unix::fs::symlink(tree.path(""), tree.path("sub/up")).expect("a link");
    std::os::unix::fs::symlink(tree.path("sub/a.v"), tree.path("again.v")).expect("a link");
    std::os::unix::fs::symlink(tree.path("nowhere.v"), tree.path("dead.v")).expect("a link");
    let loaded = tree.load();
    assert_eq!(modules(&loaded), ["a"], "the same file by two names is one file");
    assert!(of_kind(&loaded, Kind::Note)[0].contains("leads back to its own folder"));
    let lost = of_kind(&loaded, Kind::Incomplete);
    assert!(lost.len() == 1 && lost[0].contains("dead.v` cannot be read"), "{lost:?}");
}

#[test]
fn bytes_that_are_no_text_are_named_and_lose_only_their_file() {
    let tree = Tree::new(&[("empty.v", ""), ("good.v", "module good; endmodule")]);
    tree.write("latin.v", b"// f\xfcr alle\nmodule latin; endmodule");
    tree.write("nul.v", b"module nul;\n  \0 endmodule");
    let loaded = tree.load();
    assert_eq!(modules(&loaded), ["good", "latin"]);
    let lost = of_kind(&loaded, Kind::Incomplete);
    assert!(lost.len() == 1 && lost[0].starts_with("nul.v:2:3: ") && lost[0].contains("NUL byte"), "{lost:?}");
    assert_eq!(loaded.files_failed, 1);
    assert!(of_kind(&loaded, Kind::Note)[0].contains("empty.v` is empty"));
    let name = &loaded.units.iter().flat_map(|unit| &unit.modules).nth(1).expect("a module").name;
    assert_eq!(loaded.sources.slice(name.span), "latin");
}

#[test]
fn a_missing_path_is_an_error_that_names_it() {
    let error = load(&Request { paths: vec!["does/not/exist".into()], ..Request::default() }).expect_err("no path");
    assert!(error.message.contains("`does/not/exist`"), "{error}");
}

#[test]
fn a_file_with_a_mistake_does_not_lose_the_others() {
    let tree = Tree::new(&[
        ("bad.v", "module before; endmodule\nmodule bad;\n  wire = ;\nendmodule\nmodule after; endmodule"),
        ("include.v", "\n  `include \"nowhere.vh\"\nmodule i; endmodule"),
        ("macro.v", "module m;\n  wire w = `NOWHERE;\nendmodule"),
        ("open.v", "`ifdef A\nmodule o; endmodule"),
        ("good.v", "module good; endmodule"),
    ]);
    let loaded = tree.load();
    assert_eq!(modules(&loaded), ["before", "after", "good", "i"]);
    let mut lost = of_kind(&loaded, Kind::Incomplete);
    lost.sort();
    let expected = [
        "bad.v:3:8: syntax error at `=`",
        "include.v:2:3: the included file `nowhere.vh` was not found",
        "macro.v:2:12: the macro `NOWHERE` is not defined here",
        "open.v:1:1: this condition is not closed",
    ];
    assert_eq!(lost, expected);
    assert_eq!(loaded.files_failed, 4);
    assert!(loaded.diagnostics.iter().all(|one| one.kind != Kind::Incomplete || one.help.is_some()));
}

#[test]
fn includes_are_found_beside_then_by_option_then_anywhere() {
    let tree = Tree::new(&[
        ("rtl/a.v", "`include \"near.vh\"\n`include \"far.vh\"\n`include \"opt.vh\"\nmodule `NEAR`FAR`OPT; endmodule"),
        ("rtl/near.vh", "`define NEAR right"),
        ("other/near.vh", "`define NEAR wrong"),
        ("deep/down/far.vh", "`define FAR _far"),
        ("one/opt.vh", "`define OPT _one"),
        ("two/opt.vh", "`define OPT _two"),
    ]);
    let loaded = tree.load();
    let lost = of_kind(&loaded, Kind::Incomplete);
    assert!(lost.len() == 1 && lost[0].starts_with("a.v:3:1: `opt.vh` may be any of"), "{lost:?}");
    let help = loaded.diagnostics[0].help.clone().unwrap_or_default();
    assert!(help.contains(&format!("`-I {}`", tree.path("two").display())), "{help}");
    let request = Request { include: vec![tree.path("two")], ..tree.request() };
    let loaded = load(&request).expect("good paths");
    check_clean(&loaded);
    assert_eq!(modules(&loaded), ["right_far_two"]);
}

#[test]
fn macros_of_one_file_reach_another_only_inside_a_list() {
    let files = [
        ("a.v", "`define W 8\nmodule a; endmodule"),
        ("b.v", "`ifdef W\nmodule b_with; endmodule\n`else\nmodule b_without; endmodule\n`endif"),
    ];
    let tree = Tree::new(&files);
    assert_eq!(modules(&tree.load()), ["a", "b_without"]);
    let defined = Request { defines: vec![("W".into(), None)], ..tree.request() };
    assert_eq!(modules(&load(&defined).expect("good paths")), ["a", "b_with"]);
    tree.write("all.f", b"a.v // first\n${UNIT}.v\n");
    let listed = Request { lists: vec![tree.path("all.f")], ..Request::default() };
    assert_eq!(modules(&load(&listed).expect("good paths")), ["a", "b_with"]);
}

#[test]
fn libraries_give_only_what_is_needed() {
    let tree = Tree::new(&[
        ("top.v", "module top; used u(); if (1) begin deep d(); end in_top t(); endmodule\nmodule in_top; endmodule"),
        ("cells.v", "module unused; endmodule module used; chained c(); endmodule module in_top; endmodule"),
        ("lib/chained.v", "module chained; endmodule"),
        ("lib/deep.sv", "module deep; endmodule"),
        ("lib/other.v", "module other; endmodule"),
        ("all.f", "top.v -v cells.v -y lib +libext+.v+.sv"),
    ]);
    let loaded = load(&Request { lists: vec![tree.path("all.f")], ..Request::default() }).expect("good paths");
    check_clean(&loaded);
    let mut names = modules(&loaded);
    names.sort();
    assert_eq!(names, ["chained", "deep", "in_top", "top", "used"]);
}

#[test]
fn of_one_name_the_first_is_used() {
    let tree = Tree::new(&[
        ("a.v", "module m; wire first; endmodule"),
        ("b.v", "\nmodule m; wire second; endmodule"),
        ("c.v", "`include \"a.v\""),
    ]);
    let loaded = tree.load();
    check_clean(&loaded);
    assert_eq!(modules(&loaded), ["m"]);
    assert_eq!(of_kind(&loaded, Kind::Note), ["b.v:2:8: another module `m`, which is not used"]);
}

#[test]
fn a_part_that_others_include_need_not_stand_alone() {
    let tree = Tree::new(&[
        ("part.v", "wire a; endmodule"),
        ("whole.v", "module whole;\n`include \"part.v\"\n"),
        ("circle.v", "`include \"circle.v\"\n"),
    ]);
    let loaded = tree.load();
    assert_eq!(modules(&loaded), ["whole"]);
    let lost = of_kind(&loaded, Kind::Incomplete);
    assert!(lost.len() == 1 && lost[0].contains("circle.v` includes itself"), "{lost:?}");
}

#[test]
fn places_point_at_what_the_user_wrote() {
    let text = "`define REG(n, w) reg [w-1:0] n; wire n``_next\n`define TWO `REG(two, 2)\n\
                module m; /* ä */ `REG(one, 4); `TWO; wire last /* \u{20ac} */ = \"a\"  == \\e+ ;\nendmodule";
    let tree = Tree::new(&[("a.v", text)]);
    let loaded = tree.load();
    check_clean(&loaded);
    let items = &loaded.units[0].modules[0].items;
    let at = |index: usize| loaded.sources.slice(items[index].span);
    assert_eq!(at(0), "`REG(one, 4)");
    assert_eq!(at(2), "`TWO");
    assert!(at(items.len() - 1).starts_with("wire last"), "{}", at(items.len() - 1));
    assert!(at(items.len() - 1).ends_with("\\e+ ;"), "{}", at(items.len() - 1));
}

#[test]
fn old_sources_may_use_new_keywords_as_names() {
    let text = "module old(input bit, output do); assign do = bit; endmodule";
    let tree = Tree::new(&[("old.v", text), ("new.sv", &text.replace("old", "new"))]);
    let loaded = tree.load();
    assert_eq!(modules(&loaded), ["old"]);
    assert_eq!(of_kind(&loaded, Kind::Incomplete).len(), 1);
}

#[test]
fn switched_off_regions_are_left_out_and_listed() {
    let text = "module a;\n// synthesis translate_off\n  $%& no verilog \"\n/* any translate_on */\nendmodule\n\
                // pragma translate_off\nmodule b; endmodule";
    let loaded = Tree::new(&[("a.v", text)]).load();
    check_clean(&loaded);
    assert_eq!(modules(&loaded), ["a"]);
    let lines: Vec<_> = loaded.regions.iter().map(|region| loaded.sources.position(region.at)).collect();
    assert_eq!(lines.iter().map(|at| (at.line, at.end_line)).collect::<Vec<_>>(), [(2, 4), (6, 7)]);
    assert!(of_kind(&loaded, Kind::Note)[0].starts_with("a.v:6:1: this region is switched off to the end"));
}

#[test]
fn the_default_net_type_reaches_later_modules() {
    use stillwire::syntax::ast::{DefaultNettype, NetKind};
    let text = "module a; endmodule\n`default_nettype none\nmodule b; endmodule module c; endmodule\n\
                `default_nettype wire\nmodule d; endmodule";
    let loaded = Tree::new(&[("a.v", text)]).load();
    let kinds: Vec<_> = loaded.units[0].modules.iter().map(|module| module.default_nettype).collect();
    let wire = DefaultNettype::Net(NetKind::Wire);
    assert_eq!(kinds, [wire, DefaultNettype::None, DefaultNettype::None, wire]);
}
