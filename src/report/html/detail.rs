//! What unfolds below a finding, as one line of JSON: excerpts, the drawing, waveforms, the cover, notes, what became of
//! it, and the others of its family. Keys are short because a page may hold thousands of them; the script reads them.

use std::collections::BTreeMap;

use serde_json::{Value, json};

use super::super::shown::{self, Marked};
use super::super::waveform;
use super::{Group, place};
use crate::drawing::{Drawing, Symbol, Wire};
use crate::hazard::Wave;
use crate::rules::{Finding, Hazard};
use crate::source::{FileId, SourceSet};

/// The most held signals of one waveform.
const HELD: usize = 40;
/// The most hazards with a waveform.
const HAZARDS: usize = 30;
/// Lines shown before and after a marked one.
const AROUND: usize = 1;
/// Characters of a line that are shown.
const LONGEST: usize = 400;

/// The lead of the group in full, the others by name.
pub(super) fn render(group: &Group<'_>, sources: &SourceSet) -> String {
    let Some(&(finding, exhibit)) = group.first() else { return "{}".to_string() };
    let shown::Places { marked, notes } = shown::places(finding, sources);
    let mut excerpts: Vec<(FileId, Vec<&Marked>)> = Vec::new();
    for one in &marked {
        match excerpts.iter_mut().find(|(file, _)| *file == one.at.file) {
            Some((_, all)) => all.push(one),
            None => excerpts.push((one.at.file, vec![one])),
        }
    }
    let others: Vec<Value> = group[1..]
        .iter()
        .map(|(other, _)| json!([other.net, place(other, sources), other.short_fingerprint()]))
        .collect();
    let hazards: Vec<Value> = finding.hazards.iter().take(HAZARDS).map(|hazard| waves(finding, hazard)).collect();
    json!({
        "net": finding.net,
        "instance": finding.instance,
        "module": exhibit.module,
        "bits": finding.bits.map(|(low, high)| [low, high]),
        "pin": finding.pin.as_ref().map(|pin| json!({
            "kind": pin.kind.name(),
            "active": pin.active.map(u8::from),
            "edge": pin.edge,
            "cells": pin.cells,
            "count": pin.count,
        })),
        "excerpts": excerpts.iter().map(|(file, marked)| excerpt(*file, marked, sources)).collect::<Vec<_>>(),
        "told": notes,
        "hazards": hazards,
        "moreHazards": finding.hazards.len().saturating_sub(HAZARDS),
        "cover": finding.cover.as_ref().map(|cover| json!({
            "verilog": cover.verilog,
            "proven": cover.proven,
            "effect": shown::effect(finding, cover),
        })),
        "loop": finding.loop_.as_ref().map(|found| json!({ "nets": found.nets, "behaviour": found.behaviour })),
        "notes": finding.notes,
        "fingerprint": finding.fingerprint,
        "signoff": finding.signoff.as_ref().map(|signoff| json!({
            "reason": signoff.reason,
            "by": signoff.by,
            "until": signoff.until,
        })),
        "known": finding.known,
        "drawing": exhibit.drawing.as_ref().map(drawing),
        "others": others,
    })
    .to_string()
}

/// The marked lines of one file with their neighbours, and the marks in characters from 0.
fn excerpt(file: FileId, marked: &[&Marked], sources: &SourceSet) -> Value {
    let text = sources.file(file);
    let mut lines: BTreeMap<usize, Value> = BTreeMap::new();
    let mut marks: Vec<Value> = Vec::new();
    for one in marked {
        let (line, column) = text.line_column(one.at.start);
        let (end_line, end_column) = text.line_column(one.at.end.max(one.at.start));
        let length = text.text.get(text.line_range(line)).map_or(0, |line| line.chars().count());
        let end = if end_line > line { length } else { end_column - 1 };
        for near in line.saturating_sub(AROUND).max(1)..=(line + AROUND).min(text.lines()) {
            lines.entry(near).or_insert_with(|| {
                let whole = text.text.get(text.line_range(near)).unwrap_or("");
                json!([near, whole.chars().take(LONGEST).collect::<String>()])
            });
        }
        marks.push(json!([line, column - 1, end.max(column), one.text, one.primary, one.way]));
    }
    let lines: Vec<Value> = lines.into_values().collect();
    json!({ "file": text.name(), "lines": lines, "marks": marks })
}

/// One hazard: what it is in words, and its waveform in the five characters of the text.
fn waves(finding: &Finding, hazard: &Hazard) -> Value {
    let (rows, more) = waveform::rows(hazard, HELD);
    let mut title = shown::hazard(finding, hazard);
    if hazard.cause == "function" {
        title.push_str(", a function hazard");
    }
    if hazard.reach == "reachable-states" {
        title.push_str(", in a state reachable from reset");
    }
    json!({ "title": title, "harm": hazard.harm, "rows": rows, "more": more })
}

/// Numbers in the order in which the script reads them.
fn drawing(drawing: &Drawing) -> Value {
    json!({
        "size": [drawing.width, drawing.height],
        "leftOut": drawing.left_out,
        "witnessed": drawing.witnessed,
        "story": drawing.story,
        "symbols": drawing.symbols.iter().map(symbol).collect::<Vec<_>>(),
        "wires": drawing.wires.iter().map(wire).collect::<Vec<_>>(),
        "dots": drawing.dots,
    })
}

fn symbol(symbol: &Symbol) -> Value {
    let ways: Vec<&str> = symbol.ways.iter().map(|way| way.name()).collect();
    json!({
        "shape": symbol.shape.name(),
        "at": [symbol.x, symbol.y, symbol.width, symbol.height],
        "label": symbol.label,
        "full": symbol.full,
        "pins": symbol.pins.iter().map(|pin| json!([pin.y, u8::from(pin.inverted)])).collect::<Vec<_>>(),
        "wave": symbol.waves.iter().map(wave).collect::<String>(),
        "ways": ways,
    })
}

/// In the characters of the text: held, clean, or with a pulse.
fn wave(wave: &Wave) -> &'static str {
    match (wave.i, wave.f, wave.h) {
        (false, false, false) => "____",
        (true, true, false) => "~~~~",
        (false, true, false) => "__/~",
        (true, false, false) => "~~\\_",
        (false, false, true) => "_/~\\_",
        (true, true, true) => "~\\_/~",
        (false, true, true) => "_/~\\_/~",
        (true, false, true) => "~\\_/~\\_",
    }
}

fn wire(wire: &Wire) -> Value {
    json!([wire.from, wire.to, wire.pin, wire.way.map(|way| way.name()), wire.points])
}
