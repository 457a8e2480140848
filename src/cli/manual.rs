//! What is made from the definition of the command line: manual pages in the `man` macros, and shell completions. A
//! command or option that is added there is in both at once.

use clap::{Command, CommandFactory};
use clap_complete::Shell;
use clap_mangen::Man;
use clap_mangen::roff::{Roff, bold, roman};

use super::{Cli, exit};

/// One manual page.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Page {
    /// The name of its file, such as `stillwire-scan.1`.
    pub file: String,
    pub text: String,
}

/// The files that commands read and write beside those that are named to them.
const FILES: [(&str, &str); 2] = [
    (
        "stillwire.toml",
        "The settings, looked for upward from the first path. `stillwire scan --show-settings` prints what is in force.",
    ),
    (
        "stillwire-ledger.toml",
        "The ledger that `stillwire ledger` writes when neither --ledger nor the settings name one.",
    ),
];

const ENVIRONMENT: [(&str, &str); 2] = [
    ("NO_COLOR", "When it is set and not empty, or TERM is `dumb`, text on a terminal has no colours."),
    ("NAME", "A variable that a file list mentions, as $NAME, ${NAME} or $(NAME)."),
];

/// What a shell reads to complete commands, options and their values.
pub fn completions(shell: Shell) -> String {
    let mut bytes = Vec::new();
    clap_complete::generate(shell, &mut Cli::command(), "stillwire", &mut bytes);
    String::from_utf8_lossy(&bytes).into_owned()
}

/// The page of the program first, then one for each command in the order of the help.
pub fn pages() -> Vec<Page> {
    let mut program = Cli::command().disable_help_subcommand(true);
    program.build();
    let mut pages = Vec::new();
    collect(&program, "", &mut pages);
    pages
}

/// `words` are the command's words behind the name of the program.
fn collect(command: &Command, words: &str, pages: &mut Vec<Page>) {
    pages.push(page(command, words));
    for inner in command.get_subcommands() {
        let words = format!("{words} {}", inner.get_name());
        collect(inner, words.trim_start(), pages);
    }
}

fn page(command: &Command, words: &str) -> Page {
    let man = Man::new(command.clone()).source(concat!("stillwire ", env!("CARGO_PKG_VERSION"))).manual("Stillwire");
    let mut rest = Roff::new();
    rest.control("SH", ["EXIT STATUS"]);
    if command.has_subcommands() {
        rest.text([roman("The page of each command lists its exit codes.")]);
    }
    let codes = exit::codes(words).unwrap_or_default();
    codes.iter().for_each(|(code, meaning)| entry(&mut rest, &code.to_string(), meaning));
    let reads_design = command.get_arguments().any(|argument| argument.get_long() == Some("settings"));
    let (files, variables) = match words {
        _ if reads_design || words.is_empty() => (&FILES[..], &ENVIRONMENT[..]),
        "explain" => (&[][..], &ENVIRONMENT[..1]),
        _ => (&[][..], &[][..]),
    };
    for (heading, entries) in [("FILES", files), ("ENVIRONMENT", variables)] {
        if !entries.is_empty() {
            rest.control("SH", [heading]);
            entries.iter().for_each(|(name, meaning)| entry(&mut rest, name, meaning));
        }
    }
    if !words.is_empty() {
        rest.control("SH", ["SEE ALSO"]);
        rest.text([bold("stillwire"), roman("(1)")]);
    }

    let mut bytes = Vec::new();
    // Writing to memory cannot fail.
    let _ = man.render_title(&mut bytes);
    let _ = man.render_name_section(&mut bytes);
    let _ = man.render_synopsis_section(&mut bytes);
    let _ = man.render_description_section(&mut bytes);
    let _ = man.render_options_section(&mut bytes);
    if command.has_subcommands() {
        let _ = man.render_subcommands_section(&mut bytes);
    }
    let _ = rest.to_writer(&mut bytes);
    Page { file: man.get_filename(), text: String::from_utf8_lossy(&bytes).into_owned() }
}

/// A word with its explanation indented below.
fn entry(roff: &mut Roff, word: &str, meaning: &str) {
    roff.control("TP", []);
    roff.text([bold(word)]);
    roff.text([roman(meaning)]);
}
