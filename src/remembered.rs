//! The key of a whole run: a hash over all that was read and all that was asked for. What follows from these alone is
//! remembered, so that a scan of an unchanged tree ends here.
//!
//! Not in the key, because it is judged anew in every run: the day, which sign-offs depend on; the severities of the
//! settings; what lies near the files that were read; the ledger and the formats.

use std::path::PathBuf;

use rayon::prelude::*;
use serde::Serialize;

use crate::cache::Key;
use crate::diagnostic::Diagnostic;
use crate::source::{Loaded, Region, Span};
use crate::{Request, elaborate};

#[derive(Serialize)]
struct Inputs<'a> {
    /// One per tree, in order.
    units: Vec<Key>,
    /// As given, with their texts: comments in them are read as well.
    files: Vec<(&'a PathBuf, &'a str)>,
    macro_uses: &'a [(Span, Span)],
    diagnostics: &'a [Diagnostic],
    regions: &'a [Region],
    files_read: usize,
    files_failed: usize,
    tops: &'a [String],
    given: &'a [(String, String)],
    /// In full, as their derived debugging form.
    cells: String,
    assumptions: String,
}

/// `None` when the run cannot be remembered.
pub(crate) fn key(request: &Request, loaded: &Loaded, asked: &elaborate::Request) -> Option<Key> {
    let units = loaded.units.par_iter().map(|unit| Key::of("unit", unit)).collect::<Option<Vec<Key>>>()?;
    let inputs = Inputs {
        units,
        files: loaded.sources.files.iter().map(|file| (&file.path, &*file.text)).collect(),
        macro_uses: loaded.sources.macro_uses(),
        diagnostics: &loaded.diagnostics,
        regions: &loaded.regions,
        files_read: loaded.files_read,
        files_failed: loaded.files_failed,
        tops: &request.tops,
        given: &request.given,
        cells: format!("{:?}", asked.cells),
        assumptions: format!("{:?}", request.assumptions),
    };
    Key::of("scan", &inputs)
}
