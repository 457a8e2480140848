//! `--show-settings`: everything that is in force, as TOML that the program itself could read, each value with the place it
//! comes from in a comment behind it.

use std::fmt::Write;
use std::path::PathBuf;

use super::Settings;
use crate::assumptions::Origin;
use crate::cells::{PinName, PinRole, Role};
use crate::rules::Severity;

/// The settings in force when the command line says what `given` does: no exclusions, severities, assumptions or cells,
/// since it has no words for them. The text ends with a line end.
pub fn show(settings: &Settings, given: &Settings) -> String {
    let file = settings.file.as_ref().map_or_else(String::new, |file| file.display().to_string());
    let mut out = Out { text: String::new(), settings, file };
    match &settings.file {
        Some(file) => {
            let _ = writeln!(out.text, "# settings file: {}", file.display());
        }
        None => out.text.push_str("# no settings file\n"),
    }
    let paths = |paths: &[PathBuf]| paths.iter().map(|path| path.display().to_string()).collect::<Vec<_>>();
    // What is read and its tops replace those of the file; everything else of the command line comes before or on top.
    let (read, lists) = settings.read_unless(given.paths.clone(), given.lists.clone());
    if given.paths.is_empty() && given.lists.is_empty() {
        out.list("paths", &[], &paths(&read));
        out.list("lists", &[], &paths(&lists));
    } else {
        out.list("paths", &paths(&read), &[]);
        out.list("lists", &paths(&lists), &[]);
    }
    if given.top.is_empty() {
        out.list("top", &[], &settings.top);
    } else {
        out.list("top", &given.top, &[]);
    }
    out.list("include", &paths(&given.include), &paths(&settings.include));
    out.list("libraries", &paths(&given.libraries), &paths(&settings.libraries));
    let defines = |defines: &[(String, Option<String>)]| {
        let text = |(name, value): &(String, Option<String>)| match value {
            Some(value) => format!("{name}={value}"),
            None => name.clone(),
        };
        defines.iter().map(text).collect::<Vec<_>>()
    };
    out.list("define", &defines(&given.define), &defines(&settings.define));
    out.list("exclude", &[], &settings.exclude);
    out.ledger(given);
    out.severity("gate", given.gate, settings.gate, Severity::Error);
    out.severity("show", given.show, settings.show, Severity::Warning);
    out.parameters(given);
    out.severities();
    out.assumptions();
    out.cells();
    out.text
}

struct Out<'a> {
    text: String,
    settings: &'a Settings,
    file: String,
}

/// A basic string of TOML.
fn quoted(text: &str) -> String {
    let mut out = String::from("\"");
    for letter in text.chars() {
        match letter {
            '"' | '\\' => out.extend(['\\', letter]),
            '\n' => out.push_str("\\n"),
            letter if letter.is_control() => {
                let _ = write!(out, "\\u{:04x}", u32::from(letter));
            }
            letter => out.push(letter),
        }
    }
    out.push('"');
    out
}

impl Out<'_> {
    fn origin(&self, key: &'static str, index: usize) -> String {
        match self.settings.lines.get(&(key, index)) {
            Some(line) => format!("{}:{line}", self.file),
            None => "default".to_string(),
        }
    }

    fn list(&mut self, key: &'static str, given: &[String], settings: &[String]) {
        if given.is_empty() && settings.is_empty() {
            let _ = writeln!(self.text, "{key} = []  # default");
            return;
        }
        let _ = writeln!(self.text, "{key} = [");
        for text in given {
            let _ = writeln!(self.text, "  {},  # command line", quoted(text));
        }
        for (index, text) in settings.iter().enumerate() {
            let _ = writeln!(self.text, "  {},  # {}", quoted(text), self.origin(key, index));
        }
        self.text.push_str("]\n");
    }

    fn ledger(&mut self, given: &Settings) {
        let (file, origin) = match (&given.ledger, &self.settings.ledger) {
            (Some(given), _) => (given, "command line".to_string()),
            (None, Some(file)) => (file, self.origin("ledger", 0)),
            (None, None) => return,
        };
        let _ = writeln!(self.text, "ledger = {}  # {origin}", quoted(&file.display().to_string()));
    }

    fn severity(&mut self, key: &'static str, given: Option<Severity>, settings: Option<Severity>, default: Severity) {
        let (severity, origin) = match (given, settings) {
            (Some(given), _) => (given, "command line".to_string()),
            (None, Some(settings)) => (settings, self.origin(key, 0)),
            (None, None) => (default, "default".to_string()),
        };
        let _ = writeln!(self.text, "{key} = \"{}\"  # {origin}", severity.name());
    }

    fn parameters(&mut self, given: &Settings) {
        if given.set.is_empty() && self.settings.set.is_empty() {
            return;
        }
        self.text.push_str("\n[set]\n");
        for (name, value) in &given.set {
            let _ = writeln!(self.text, "{} = {}  # command line", quoted(name), quoted(value));
        }
        for (index, (name, value)) in self.settings.set.iter().enumerate() {
            if given.set.iter().all(|(other, _)| other != name) {
                let _ = writeln!(self.text, "{} = {}  # {}", quoted(name), quoted(value), self.origin("set", index));
            }
        }
    }

    fn severities(&mut self) {
        if self.settings.severities.is_empty() {
            return;
        }
        self.text.push_str("\n[severities]\n");
        for (index, (rule, severity)) in self.settings.severities.iter().enumerate() {
            let origin = self.origin("severities", index);
            let _ = writeln!(self.text, "{} = \"{}\"  # {origin}", rule.name(), severity.name());
        }
    }

    fn assumptions(&mut self) {
        for declared in &self.settings.assumptions {
            let origin = match &declared.origin {
                Origin::Settings { line, .. } => format!("{}:{line}", self.file),
                Origin::Comment(_) => "comment".to_string(),
            };
            let nets: Vec<String> = declared.nets.iter().map(|net| quoted(net)).collect();
            let _ = writeln!(self.text, "\n[[assume]]  # {origin}");
            let _ = writeln!(self.text, "kind = \"{}\"", declared.kind.name());
            let _ = writeln!(self.text, "nets = [{}]", nets.join(", "));
            let _ = writeln!(self.text, "reason = {}", quoted(&declared.reason));
        }
    }

    fn cells(&mut self) {
        for declared in &self.settings.cells {
            let names = |names: &[String]| {
                let names: Vec<String> = names.iter().map(|name| quoted(name)).collect();
                format!("[{}]", names.join(", "))
            };
            let pins = |pins: &[&PinName]| names(&pins.iter().map(|pin| pin.to_string()).collect::<Vec<_>>());
            let _ = writeln!(self.text, "\n[[cell]]  # {}:{}", self.file, declared.line);
            let _ = writeln!(self.text, "module = {}", names(&declared.modules));
            let mut line = |key: &str, value: String| {
                let _ = writeln!(self.text, "{key} = {value}");
            };
            match &declared.role {
                Role::Pins { pins: all, outputs } => {
                    for role in PinRole::ALL {
                        let of_role: Vec<&PinName> =
                            all.iter().filter(|one| one.role == role).map(|one| &one.pin).collect();
                        if !of_role.is_empty() {
                            line(role.name(), pins(&of_role));
                        }
                    }
                    if !outputs.is_empty() {
                        line("output", names(outputs));
                    }
                }
                Role::Selector { select, inputs, output } => {
                    line("kind", quoted("selector"));
                    line("select", pins(&select.iter().collect::<Vec<_>>()));
                    line("inputs", names(inputs));
                    line("output", pins(&[output]));
                }
                Role::ClockGate { clock, enables, output } => {
                    line("kind", quoted("clock-gate"));
                    line("clock", pins(&[clock]));
                    line("enable", pins(&enables.iter().collect::<Vec<_>>()));
                    line("output", pins(&[output]));
                }
            }
        }
    }
}
