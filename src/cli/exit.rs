//! The exit codes of each command and what they mean there: scripts depend on them. The help of the command line and the
//! manual pages print these very words.

use std::fmt::Write;

/// A code and when a command ends with it.
pub type Code = (u8, &'static str);

const DONE: Code = (0, "done");
const USAGE: Code = (2, "wrong usage, settings or paths; nothing was analysed");
const NOTHING_LOST: Code = (0, "done, and the analysis is complete");
const PART_LOST: Code = (3, "done, but part of the input could not be analysed");

/// The codes of a command by its name on the command line, the names of subcommands parted by blanks.
pub fn codes(command: &str) -> Option<Vec<Code>> {
    let codes = match command {
        "scan" => vec![
            (0, "nothing at or above the gate, and the analysis is complete"),
            (1, "findings at or above the gate"),
            USAGE,
            (3, "nothing to fail on, but part of the input could not be analysed or decided"),
        ],
        "ledger write" => vec![NOTHING_LOST, USAGE, PART_LOST],
        "ledger prune" => {
            vec![NOTHING_LOST, USAGE, (3, "nothing was dropped, because part of the input could not be analysed")]
        }
        "flatten" => vec![NOTHING_LOST, USAGE, PART_LOST],
        "replay" => {
            vec![(0, "every hazard of the finding is shown"), USAGE, (3, "done, but not every hazard is shown")]
        }
        "cure" => vec![
            (0, "the change, or the terms where the text cannot be changed for you, are printed"),
            (1, "no cure is offered; the reason is printed"),
            USAGE,
        ],
        "serve" => vec![
            (0, "the editor ended the session in order"),
            (1, "the session ended otherwise, or what the editor sent is no message of the protocol"),
            (2, "wrong usage"),
        ],
        "explain" | "completions" | "manual" => vec![DONE, (2, "wrong usage, or the output cannot be written")],
        _ => return None,
    };
    Some(codes)
}

/// The end of the help of a command.
pub(super) fn help(command: &str) -> String {
    let mut text = format!("Exit codes of {command}:");
    for (code, meaning) in codes(command).unwrap_or_default() {
        // Writing to memory cannot fail.
        let _ = write!(text, "\n  {code}  {meaning}");
    }
    text
}
