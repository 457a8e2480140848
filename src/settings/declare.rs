//! The declarations of the settings file: `[[assume]]` about nets and `[[cell]]` about modules.

use std::path::Path;

use toml::de::DeTable;

use super::entry::{Entry, Text, entries};
use crate::assumptions::{self, Origin};
use crate::cells::{Declaration, DeclaredPin, PinName, PinRole, Role};
use crate::hazard::AssumptionKind;
use crate::source::PathError;
use crate::spelling::nearest;

const ASSUME_KEYS: [&str; 3] = ["kind", "nets", "reason"];

/// The longest select of a glitch-free selector; each further bit triples its terms.
const MAX_SELECT: usize = 4;

pub(super) fn assumptions(entry: &Entry<'_>) -> Result<Vec<assumptions::Declaration>, PathError> {
    entry.tables()?.into_iter().map(|(table, at)| assumption(entry.source, table, at)).collect()
}

fn assumption(source: Text<'_>, table: &DeTable<'_>, at: usize) -> Result<assumptions::Declaration, PathError> {
    let entries = entries(source, "assume", table, &ASSUME_KEYS)?;
    let required = |key: &str| {
        let missing = || source.error(at, &format!("`[[assume]]` without `{key}`"), format!("add `{key} = ...`"));
        entries.get(key).ok_or_else(missing)
    };
    let kind = required("kind")?;
    let names: Vec<&str> = AssumptionKind::ALL.iter().map(|kind| kind.name()).collect();
    let text = kind.text()?;
    let known = AssumptionKind::from_name(&text).ok_or_else(|| {
        let help = match nearest(&text, names.iter().copied()) {
            Some(nearest) => format!("did you mean `{nearest}`?"),
            None => format!("the kinds are {}", names.join(", ")),
        };
        source.error(kind.at, &format!("there is no assumption of the kind `{text}`"), help)
    })?;
    let nets = required("nets")?;
    let names = nets.texts()?;
    if names.is_empty() {
        return Err(nets.wrong("at least one name, such as `\"top.u_core.test_mode\"`"));
    }
    let reason = required("reason")?.text()?;
    let origin = Origin::Settings { file: file_name(source.path), line: source.line(at) };
    Ok(assumptions::Declaration { kind: known, nets: names, reason, origin })
}

fn file_name(path: &Path) -> String {
    path.file_name().unwrap_or_default().to_string_lossy().into_owned()
}

const CELL_KEYS: [&str; 9] = ["module", "clock", "set", "reset", "enable", "select", "inputs", "output", "kind"];

pub(super) fn cells(entry: &Entry<'_>) -> Result<Vec<Declaration>, PathError> {
    entry.tables()?.into_iter().map(|(table, at)| cell(entry.source, table, at)).collect()
}

fn cell(source: Text<'_>, table: &DeTable<'_>, at: usize) -> Result<Declaration, PathError> {
    let entries = entries(source, "cell", table, &CELL_KEYS)?;
    let missing = |key: &str| source.error(at, &format!("`[[cell]]` without `{key}`"), format!("add `{key} = ...`"));
    let modules = entries.get("module").ok_or_else(|| missing("module"))?.texts()?;
    let pins = |key: &str| -> Result<Vec<PinName>, PathError> {
        let Some(entry) = entries.get(key) else { return Ok(Vec::new()) };
        entry.texts()?.iter().map(|text| pin(entry, text)).collect()
    };
    let one = |key: &str| -> Result<PinName, PathError> {
        match pins(key)?.as_slice() {
            [pin] => Ok(pin.clone()),
            [] => Err(missing(key)),
            _ => Err(entries[key].wrong("the name of one pin")),
        }
    };
    let only = |allowed: &[&str]| match entries.values().find(|entry| !allowed.contains(&leaf(&entry.key))) {
        Some(entry) => {
            let allowed: Vec<String> = allowed.iter().map(|key| format!("`{key}`")).collect();
            let message = format!("`{}` does not belong to this kind of cell", leaf(&entry.key));
            Err(source.error(entry.at, &message, format!("its keys are {}", allowed.join(", "))))
        }
        None => Ok(()),
    };
    let kind = match entries.get("kind") {
        Some(entry) => Some((entry, entry.text()?)),
        None => None,
    };
    let role = match kind.as_ref().map_or("pins", |(_, kind)| kind.as_str()) {
        "pins" => {
            only(&["module", "kind", "clock", "set", "reset", "enable", "output"])?;
            let mut all = Vec::new();
            for (key, role) in [
                ("clock", PinRole::Clock),
                ("set", PinRole::Set),
                ("reset", PinRole::Reset),
                ("enable", PinRole::Enable),
            ] {
                all.extend(pins(key)?.into_iter().map(|pin| DeclaredPin { role, pin }));
            }
            if all.is_empty() {
                return Err(source.error(at, "`[[cell]]` names no pin", "add `clock`, `set`, `reset` or `enable`"));
            }
            let outputs = pins("output")?.into_iter().map(|pin| pin.name).collect();
            Role::Pins { pins: all, outputs }
        }
        "selector" => {
            only(&["module", "kind", "select", "inputs", "output"])?;
            let select = pins("select")?;
            let inputs = entries.get("inputs").ok_or_else(|| missing("inputs"))?.texts()?;
            if select.is_empty() {
                return Err(missing("select"));
            }
            if select.len() > MAX_SELECT || inputs.len() != 1 << select.len() {
                return Err(entries["inputs"].wrong(
                    "one input for each value of the select pins, the one for 0 first; at most four select pins, the \
                     most significant first",
                ));
            }
            Role::Selector { select, inputs, output: one("output")? }
        }
        "clock-gate" => {
            only(&["module", "kind", "clock", "enable", "output"])?;
            let enables = pins("enable")?;
            if enables.is_empty() {
                return Err(missing("enable"));
            }
            Role::ClockGate { clock: one("clock")?, enables, output: one("output")? }
        }
        other => {
            let known = ["pins", "selector", "clock-gate"];
            let help = match nearest(other, known) {
                Some(nearest) => format!("did you mean `{nearest}`?"),
                None => format!("the kinds are {}", known.join(", ")),
            };
            let at = kind.as_ref().map_or(at, |(entry, _)| entry.at);
            return Err(source.error(at, &format!("there is no cell of the kind `{other}`"), help));
        }
    };
    Ok(Declaration { modules, role, file: file_name(source.path), line: source.line(at) })
}

fn leaf(key: &str) -> &str {
    key.rsplit('.').next().unwrap_or(key)
}

/// `NAME`, or `!NAME` for a pin that acts when it is low.
fn pin(entry: &Entry<'_>, text: &str) -> Result<PinName, PathError> {
    let (name, inverted) = match text.trim().strip_prefix('!') {
        Some(name) => (name.trim(), true),
        None => (text.trim(), false),
    };
    if name.is_empty() {
        return Err(entry.wrong("names of pins, with `!` before one that acts when it is low"));
    }
    Ok(PinName { name: name.to_string(), inverted })
}
