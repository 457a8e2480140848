//! The one place that knows the parser's types: it turns a file's concrete tree into the owned tree of [`super::ast`].
//! The conversion is total. Whatever the parser accepted is represented, as `Skipped` where only a simulator needs it,
//! or as `Unsupported` with its place; nothing is dropped in silence except timing (delays and strengths), which the
//! delay model replaces by arbitrary delays, and which one note per file counts.
//!
//! The parser reads what is ambiguous greedily and builds binary operators without precedence; each file here mends
//! that for the constructs it owns, and says how.

mod aggregates;
mod assignments;
mod calls;
mod children;
mod declarations;
mod dimensions;
mod expressions;
mod gates;
mod generate;
mod instances;
mod items;
mod literals;
mod names;
mod operators;
mod params;
mod ports;
mod selects;
mod statements;
mod subroutines;
mod timing;
mod tokens;
mod types;
mod udps;
mod units;

use std::cell::{Cell, RefCell};

use sv_parser as sv;

use super::ast;
use crate::diagnostic::{Diagnostic, Kind};
use crate::source::{FileId, Places, Span};

/// Converts one file's tree. `places` maps the preprocessed text back to the user's files; `file` is where a node
/// without any text is placed.
pub fn convert(tree: &sv::SyntaxTree, places: &dyn Places, file: FileId) -> (ast::Unit, Vec<Diagnostic>) {
    let converter = Converter::new(tree, places, file);
    let mut unit = ast::Unit::default();
    for node in tree {
        if let sv::RefNode::SourceText(source) = node {
            converter.source_text(source, &mut unit);
            break;
        }
    }
    unit.externs = converter.externs.take();
    (unit, converter.finish())
}

/// What every part of the conversion needs: the text, the way back to the user's files, and the notes taken on the way.
struct Converter<'a> {
    tree: &'a sv::SyntaxTree,
    places: &'a dyn Places,
    file: FileId,
    /// Changes of `` `default_nettype `` by their offset in the preprocessed text, in order.
    nettypes: Vec<(usize, ast::DefaultNettype)>,
    /// Inside an automatic task or function, whose variables are automatic too unless they say otherwise.
    automatic: Cell<bool>,
    /// Delays and strengths left out, and the place of the first.
    timing_dropped: Cell<usize>,
    timing_first: Cell<Option<Span>>,
    /// Headers of modules and interfaces declared `extern`.
    externs: RefCell<Vec<ast::Module>>,
    diagnostics: RefCell<Vec<Diagnostic>>,
}

impl<'a> Converter<'a> {
    fn new(tree: &'a sv::SyntaxTree, places: &'a dyn Places, file: FileId) -> Self {
        let mut converter = Self {
            tree,
            places,
            file,
            nettypes: Vec::new(),
            automatic: Cell::new(false),
            timing_dropped: Cell::new(0),
            timing_first: Cell::new(None),
            externs: RefCell::new(Vec::new()),
            diagnostics: RefCell::new(Vec::new()),
        };
        converter.nettypes = converter.default_nettypes();
        converter
    }

    fn finish(self) -> Vec<Diagnostic> {
        let mut diagnostics = self.diagnostics.into_inner();
        let dropped = self.timing_dropped.get();
        if dropped > 0 {
            diagnostics.push(Diagnostic::new(
                Kind::Note,
                "timing",
                format!(
                    "{dropped} delay or strength specifications of this file are left out: \
                     the analysis lets every gate and wire take any delay"
                ),
                self.timing_first.get(),
            ));
        }
        diagnostics
    }

    /// Counts a delay or a strength that the owned tree has no place for.
    fn drop_timing<'n>(&self, node: Option<impl Into<sv::RefNodes<'n>>>) {
        if let Some(node) = node {
            if self.timing_dropped.get() == 0 {
                self.timing_first.set(Some(self.span(node)));
            }
            self.timing_dropped.set(self.timing_dropped.get() + 1);
        }
    }
}
