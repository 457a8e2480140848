//! The converter from the parser's concrete tree: small sources against trees derived by hand from IEEE 1800-2017, written
//! in the compact form of [`dump`]. No expected tree was copied from a run.

mod dump;
mod literals;
mod modules;
mod operators;
mod places;
mod procedures;

use std::collections::HashMap;

use stillwire::diagnostic::Diagnostic;
use stillwire::source::{FileId, Places, Span};
use stillwire::syntax::ast::Unit;

/// Text without macros and includes: every place is its own offset.
struct Plain;

impl Places for Plain {
    fn place(&self, offset: usize, len: usize) -> Span {
        let at = |offset: usize| u32::try_from(offset).expect("a small source");
        Span { file: FileId::new(0), start: at(offset), end: at(offset + len) }
    }
}

/// Parses and converts on a thread with a large stack, since the parser recurses for every operator of a chain.
#[track_caller]
fn convert(source: &str) -> (Unit, Vec<Diagnostic>) {
    let text = source.to_string();
    let run = move || {
        let defines: sv_parser::Defines = HashMap::new();
        let includes: &[&str] = &[];
        sv_parser::parse_sv_str(&text, "test.sv", &defines, includes, false, false)
            .map(|(tree, _)| stillwire::syntax::convert(&tree, &Plain, FileId::new(0)))
            .map_err(|error| format!("{error:?}"))
    };
    let thread = std::thread::Builder::new().stack_size(1 << 28).spawn(run).expect("a thread");
    match thread.join() {
        Ok(Ok(converted)) => converted,
        Ok(Err(error)) => panic!("the parser refuses {source:?}: {error}"),
        Err(_) => panic!("the conversion of {source:?} panics"),
    }
}

/// Checks the items of a module's body.
#[track_caller]
fn check_items(body: &str, expected: &str) {
    let (unit, _) = convert(&format!("module m;\n{body}\nendmodule\n"));
    assert_eq!(dump::items(&unit.modules[0].items), expected, "for {body}");
}

/// Checks an expression on the right side of an assignment.
#[track_caller]
fn check_expr(source: &str, expected: &str) {
    check_items(&format!("assign y = {source};"), &format!("(assign y = {expected})"));
}

/// Checks the port list of a module with the header `module m HEADER;` and no body.
#[track_caller]
fn check_ports(header: &str, expected: &str) {
    let (unit, _) = convert(&format!("module m {header}; endmodule"));
    assert_eq!(dump::ports(&unit.modules[0].ports), expected, "for {header}");
}
