//! `stillwire explain`: the page of a rule as Markdown where no terminal reads it, and laid out where one does. Both forms
//! say the same words, and no line of the second is wider than the terminal.

use std::process::Command;

use stillwire::report::page::{Look, render};
use stillwire::rules::{Rule, page};

use crate::tree::Tree;

/// Letters and digits alone, so that forms can be compared.
fn words(text: &str) -> Vec<String> {
    let words = text.split(|letter: char| !letter.is_alphanumeric()).filter(|word| !word.is_empty());
    words.map(str::to_string).collect()
}

/// A text without escape sequences, of which there are only those that end in `m` (ECMA-48, select graphic rendition).
fn unstyled(text: &str) -> String {
    let mut parts = text.split("\x1b[");
    let first = parts.next().unwrap_or_default().to_string();
    parts.fold(first, |text, part| text + part.split_once('m').expect("closed").1)
}

#[test]
fn markdown_where_no_terminal_reads_it() {
    for rule in Rule::ALL {
        assert_eq!(Tree::new(&[]).ends(0, &["explain", rule.name()]), page(rule));
    }
}

#[test]
fn every_page_fits_the_terminal_and_loses_no_word() {
    for rule in Rule::ALL {
        // The language of a block of code and the word behind it are no text.
        let unfenced = |line: &&str| !line.starts_with("```") && !line.starts_with("|---");
        let markdown: Vec<&str> = page(rule).lines().filter(unfenced).collect();
        let mut expected = words(&markdown.join("\n"));
        for columns in [80, 120] {
            let plain = render(page(rule), &Look { columns, colours: false });
            assert!(!plain.contains("**") && !plain.contains("```") && !plain.contains('\x1b'), "{plain}");
            let coloured = render(page(rule), &Look { columns, colours: true });
            assert!(coloured.contains('\x1b'), "{coloured}");
            for shown in [plain, unstyled(&coloured)] {
                for line in shown.lines() {
                    assert!(line.chars().count() <= columns.min(100), "{}: too wide: {line}", rule.name());
                    assert_eq!(line, line.trim_end(), "{}: blanks at the end", rule.name());
                }
                // Cells of a table stand beside each other, so that their words come in another order.
                let mut found = words(&shown);
                if page(rule).contains("\n|---") {
                    found.sort();
                    expected.sort();
                }
                assert_eq!(found, expected, "{}", rule.name());
            }
        }
    }
}

#[test]
fn parts_of_a_page_look_as_they_should() {
    let markdown = "# a-rule\n\n**What.** A `net` that *must* hold **still**, whatever happens around it.\n\n\
                    - one\n- two words that are too long for one line\n\n1. first\n2. second\n\n\
                    | pin | harm |\n|---|---|\n| low | **error** |\n| a rather long one | this cell needs three lines |\n\n\
                    ## Safe\n\n```verilog safe\nmodule m;\n\n    wire a_wire_of_more_than_thirty_columns;\nendmodule\n```\n";
    let expected = "a-rule\n\n  What. A `net` that must hold\n  still, whatever happens\n  around it.\n\n\
                    \x20 - one\n  - two words that are too long\n    for one line\n\n  1. first\n  2. second\n\n\
                    \x20 pin             harm\n  --------------  -------------\n  low             error\n\
                    \x20 a rather long   this cell\n  one             needs three\n                  lines\n\n\
                    Safe\n\n    module m;\n\n        wire a_wire_of_more_than_thirty_columns;\n    endmodule\n";
    assert_eq!(render(markdown, &Look { columns: 31, colours: false }), expected);
    let coloured = render("**bold** `code` *slanted*", &Look { columns: 80, colours: true });
    assert_eq!(coloured, "  \x1b[0m\x1b[1mbold\x1b[0m \x1b[0m\x1b[32mcode\x1b[0m \x1b[0m\x1b[3mslanted\x1b[0m\n");
}

/// What the program prints on a terminal of so many columns, line ends as on a terminal.
#[track_caller]
fn on_terminal(columns: u16, variables: &str) -> String {
    let program = env!("CARGO_BIN_EXE_stillwire");
    let command = format!("stty rows 24 cols {columns}; {variables} '{program}' explain set-reset-hazard");
    let mut script = Command::new("script");
    script.args(["-qec", &command, "/dev/null"]).stdin(std::process::Stdio::null());
    let output = script.env_remove("NO_COLOR").env("TERM", "xterm").output().expect("script starts");
    assert!(output.status.success());
    String::from_utf8_lossy(&output.stdout).replace("\r\n", "\n")
}

#[test]
#[ignore = "needs script, which makes a terminal"]
fn a_terminal_gets_the_page_in_its_width() {
    let laid_out = |columns, colours| render(page(Rule::SetResetHazard), &Look { columns, colours });
    assert_eq!(on_terminal(60, ""), laid_out(60, true));
    assert_eq!(on_terminal(90, "NO_COLOR=1"), laid_out(90, false));
    assert_eq!(on_terminal(200, "TERM=dumb"), laid_out(100, false));
}
