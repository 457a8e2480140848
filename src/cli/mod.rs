//! The command line. Its words are fixed by the design: other people's scripts depend on them. This file turns arguments
//! into data and knows nothing of what happens then.

pub mod exit;
pub mod manual;

use std::path::PathBuf;

use clap::builder::PossibleValue;
use clap::{Args, Parser, Subcommand, ValueEnum, ValueHint};
use clap_complete::Shell;

use crate::rules::{Rule, Severity};
use crate::source::define;

/// Finds, before synthesis and with proof, the wires of an RTL design that must hold still and can glitch.
#[derive(Parser, Debug)]
#[command(name = "stillwire", version, arg_required_else_help = true)]
#[command(after_help = exit::help("scan"))]
pub struct Cli {
    #[command(subcommand)]
    pub command: Command,
}

#[derive(Subcommand, Debug)]
pub enum Command {
    /// Analyse files and folders, and report every net that must hold still and can glitch.
    #[command(after_help = exit::help("scan"))]
    Scan(Scan),
    /// Print the page of a rule: what it finds, why it matters, how to cure it.
    #[command(after_help = exit::help("explain"))]
    Explain {
        /// The rule's name, as the findings print it
        rule: Rule,
    },
    /// Keep the file of the findings that were known when the tool was adopted; `scan --ledger` fails only on others.
    #[command(subcommand)]
    Ledger(Ledger),
    /// Write the gate graph, or the fan-in of one net, as structural Verilog on standard output.
    #[command(after_help = exit::help("flatten"))]
    Flatten(Flatten),
    /// Write test benches that show the hazards of a finding in any simulator, and their waveforms.
    #[command(after_help = exit::help("replay"))]
    Replay(Replay),
    /// Print the change that removes a finding as a unified diff, proven before it is printed.
    #[command(after_help = exit::help("cure"))]
    Cure(Cure),
    /// Serve an editor by the Language Server Protocol over standard input and output; without a path the open folder is
    /// scanned.
    #[command(after_help = exit::help("serve"))]
    Serve(Serve),
    /// Print what makes a shell complete the commands and options of stillwire.
    #[command(after_help = exit::help("completions"))]
    Completions {
        /// The shell that is to read it
        shell: Shell,
    },
    /// Print the manual page, or write the pages of all commands as files.
    #[command(after_help = exit::help("manual"))]
    Manual {
        /// The folder for one page per command (stillwire-scan.1, ...); it is made if it does not exist
        #[arg(long, value_name = "DIR", value_hint = ValueHint::DirPath)]
        to: Option<PathBuf>,
    },
}

/// What is read, and how.
#[derive(Args, Clone, Debug)]
pub struct Input {
    /// Files and folders of Verilog and SystemVerilog [default: those in the settings, or the current folder]
    #[arg(value_name = "PATH")]
    pub paths: Vec<PathBuf>,
    /// A top module; may be repeated [default: every module that nobody instantiates]
    #[arg(long, value_name = "NAME")]
    pub top: Vec<String>,
    /// Set a parameter of the top modules to a constant expression, a text in quotes, or a member of its enumeration by
    /// name; may be repeated
    #[arg(long, value_name = "NAME=VALUE", value_parser = parameter_value)]
    pub set: Vec<(String, String)>,
    /// A folder to look for included files in; may be repeated
    #[arg(short = 'I', value_name = "DIR", value_hint = ValueHint::DirPath)]
    pub include: Vec<PathBuf>,
    /// Define a macro; without a value it is 1
    #[arg(short = 'D', value_name = "NAME[=VALUE]", value_parser = macro_definition)]
    pub define: Vec<(String, Option<String>)>,
    /// A file list, with the options +incdir+, +define+, -y, -v and +libext+ inside; may be repeated
    #[arg(short = 'f', value_name = "FILE")]
    pub list: Vec<PathBuf>,
    /// A Liberty library with the cells of a mapped netlist; may be repeated
    #[arg(long, value_name = "FILE.lib")]
    pub cells: Vec<PathBuf>,
    /// The settings file [default: stillwire.toml, looked for upward from the first path]
    #[arg(long, value_name = "FILE")]
    pub settings: Option<PathBuf>,
    /// Remember here what this run works out, and use what earlier runs did; never changes what is reported
    #[arg(long, value_name = "DIR", value_parser = cache_folder, value_hint = ValueHint::DirPath)]
    pub cache: Option<PathBuf>,
    /// Number of threads [default: one per core]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    pub threads: Option<u16>,
}

#[derive(Args, Debug)]
pub struct Serve {
    #[command(flatten)]
    pub input: Input,
}

#[derive(Args, Debug)]
pub struct Scan {
    #[command(flatten)]
    pub input: Input,
    /// Print what is in force, and where each value comes from, as TOML; nothing is analysed
    #[arg(long)]
    pub show_settings: bool,
    /// Write the findings to a file as well, or to standard output with `-`; FORMAT is json, sarif, junit, evidence or html; may be repeated
    #[arg(long, value_name = "FORMAT:FILE", value_parser = output)]
    pub write: Vec<Output>,
    /// Fail only on findings that are not in this ledger (see `stillwire ledger write`) [default: the one in the settings, if any]
    #[arg(long, value_name = "FILE")]
    pub ledger: Option<PathBuf>,
    /// The lowest severity that fails the run [default: error]
    #[arg(long, value_name = "SEVERITY")]
    pub gate: Option<Level>,
    /// The lowest severity that is printed as text; the rest is counted [default: warning]
    #[arg(long, value_name = "SEVERITY")]
    pub show: Option<Level>,
}

#[derive(Subcommand, Debug)]
pub enum Ledger {
    /// Record today's findings, all but those that are signed off.
    #[command(after_help = exit::help("ledger write"))]
    Write(LedgerRun),
    /// Drop the entries whose finding is gone; nothing is added.
    #[command(after_help = exit::help("ledger prune"))]
    Prune(LedgerRun),
}

#[derive(Args, Debug)]
pub struct LedgerRun {
    #[command(flatten)]
    pub input: Input,
    /// The ledger [default: the one in the settings, or stillwire-ledger.toml]
    #[arg(long, value_name = "FILE")]
    pub ledger: Option<PathBuf>,
}

#[derive(Args, Debug)]
pub struct Flatten {
    #[command(flatten)]
    pub input: Input,
    /// Only the fan-in of this net, by its full name such as top.u_core.rst_n; a bit of a vector with its index
    #[arg(long, value_name = "NET")]
    pub cone: Option<String>,
}

#[derive(Args, Debug)]
pub struct Replay {
    /// The beginning of the finding's fingerprint, as scan prints it
    #[arg(value_parser = fingerprint)]
    pub fingerprint: String,
    #[command(flatten)]
    pub input: Input,
    /// The folder for the test benches (.v) and waveforms (.vcd); it is made if it does not exist
    #[arg(long, value_name = "DIR", value_hint = ValueHint::DirPath)]
    pub to: PathBuf,
}

#[derive(Args, Debug)]
pub struct Cure {
    /// The beginning of the finding's fingerprint, as scan prints it
    #[arg(value_parser = fingerprint)]
    pub fingerprint: String,
    #[command(flatten)]
    pub input: Input,
}

#[derive(Clone, Copy, PartialEq, Eq, ValueEnum, Debug)]
pub enum Level {
    Error,
    Warning,
    Note,
}

impl From<Level> for Severity {
    fn from(level: Level) -> Severity {
        match level {
            Level::Error => Severity::Error,
            Level::Warning => Severity::Warning,
            Level::Note => Severity::Note,
        }
    }
}

/// By its name, so that help, errors and completions list the rules.
impl ValueEnum for Rule {
    fn value_variants<'a>() -> &'a [Rule] {
        &Rule::ALL
    }

    fn to_possible_value(&self) -> Option<PossibleValue> {
        Some(PossibleValue::new(self.name()))
    }
}

/// A format of `--write`.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Format {
    Json,
    Sarif,
    Junit,
    Evidence,
    Html,
}

/// The formats with their names.
const FORMATS: [(&str, Format); 5] = [
    ("json", Format::Json),
    ("sarif", Format::Sarif),
    ("junit", Format::Junit),
    ("evidence", Format::Evidence),
    ("html", Format::Html),
];

/// One `--write`.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Output {
    pub format: Format,
    /// `None` is standard output.
    pub file: Option<PathBuf>,
}

fn output(text: &str) -> Result<Output, String> {
    let Some((format, file)) = text.split_once(':') else {
        return Err("write it as FORMAT:FILE, such as json:findings.json".to_string());
    };
    let Some(&(_, format)) = FORMATS.iter().find(|(name, _)| *name == format) else {
        let names = FORMATS.map(|(name, _)| name).join(", ");
        return Err(format!("the format `{format}` is not known; there are {names}"));
    };
    match file {
        "" => Err("the file is missing; `-` is standard output".to_string()),
        "-" => Ok(Output { format, file: None }),
        file => Ok(Output { format, file: Some(PathBuf::from(file)) }),
    }
}

/// A file cannot be a cache, and a run that quietly remembers nothing would only be slow.
fn cache_folder(text: &str) -> Result<PathBuf, String> {
    let folder = PathBuf::from(text);
    if folder.exists() && !folder.is_dir() { Err("it is no folder".to_string()) } else { Ok(folder) }
}

fn fingerprint(text: &str) -> Result<String, String> {
    if !text.is_empty() && text.chars().all(|digit| digit.is_ascii_hexdigit()) {
        Ok(text.to_ascii_lowercase())
    } else {
        Err("a fingerprint is made of hexadecimal digits, as scan prints it".to_string())
    }
}

fn parameter_value(text: &str) -> Result<(String, String), String> {
    match text.split_once('=') {
        Some((name, value)) if is_name(name.trim()) => Ok((name.trim().to_string(), value.to_string())),
        Some((name, _)) => Err(format!("`{name}` is no name of a parameter")),
        None => Err("write it as NAME=VALUE, such as WIDTH=8".to_string()),
    }
}

fn is_name(name: &str) -> bool {
    let mut letters = name.chars();
    letters.next().is_some_and(|first| first.is_ascii_alphabetic() || first == '_')
        && letters.all(|letter| letter.is_ascii_alphanumeric() || matches!(letter, '_' | '$'))
}

fn macro_definition(text: &str) -> Result<(String, Option<String>), String> {
    let (name, value) = define(text);
    if is_name(&name) { Ok((name, value)) } else { Err(format!("`{name}` is no name of a macro")) }
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_definition_is_consistent() {
        Cli::command().debug_assert();
    }

    #[test]
    fn options_may_be_repeated_and_joined() {
        let line = "stillwire scan rtl -Iinc -I more -DA=1 -D B --top a --top b -f x.f --write json:- --gate note";
        let Ok(Cli { command: Command::Scan(scan) }) = Cli::try_parse_from(line.split(' ')) else {
            panic!("the line is good");
        };
        assert_eq!(scan.input.include, [PathBuf::from("inc"), PathBuf::from("more")]);
        assert_eq!(scan.input.define, [("A".to_string(), Some("1".to_string())), ("B".to_string(), None)]);
        assert_eq!(scan.input.top, ["a", "b"]);
        assert_eq!(scan.write, [Output { format: Format::Json, file: None }]);
        assert_eq!(scan.gate, Some(Level::Note));
    }
}
