//! What is made from the command line: the manual pages name every command, option and exit code and are free of
//! warnings, and a shell that reads the completions completes by them.

use std::process::Command;

use clap::CommandFactory;
use stillwire::cli::{Cli, exit, manual};

use crate::tree::Tree;

/// Every command with its words behind the name of the program, the program itself first.
fn commands() -> Vec<(String, clap::Command)> {
    let mut program = Cli::command().disable_help_subcommand(true);
    program.build();
    let mut commands = vec![(String::new(), program)];
    let mut next = 0;
    while let Some((words, command)) = commands.get(next).cloned() {
        let inner = command.get_subcommands();
        commands.extend(inner.map(|inner| (format!("{words} {}", inner.get_name()).trim().to_string(), inner.clone())));
        next += 1;
    }
    commands
}

/// The options of a command as they are typed.
fn options(command: &clap::Command) -> Vec<String> {
    let long = command.get_arguments().filter_map(clap::Arg::get_long).map(|name| format!("--{name}"));
    let short = command.get_arguments().filter_map(clap::Arg::get_short).map(|name| format!("-{name}"));
    long.chain(short).collect()
}

fn file_of(words: &str) -> String {
    format!("stillwire {words}.1").replace(" .1", ".1").replace(' ', "-")
}

#[test]
fn every_command_has_a_page_with_all_that_it_takes() {
    let tree = Tree::new(&[]);
    tree.ends(0, &["manual", "--to", "man/man1"]);
    let commands = commands();
    for words in ["scan", "ledger prune", "completions", "manual"] {
        assert!(commands.iter().any(|(known, _)| known == words), "{words}");
    }
    for (words, command) in &commands {
        // In the text of a page a hyphen is escaped, so that it is not taken for one that parts words.
        let page = tree.read(&format!("man/man1/{}", file_of(words))).replace("\\-", "-");
        for option in options(command) {
            assert!(page.contains(&format!("\\fB{option}\\fR")), "{words}: {option}\n{page}");
        }
        for inner in command.get_subcommands() {
            assert!(page.contains(inner.get_name()), "{words}: {}\n{page}", inner.get_name());
        }
        let reads_design = options(command).contains(&"--settings".to_string());
        assert_eq!(page.contains("stillwire.toml"), reads_design || words.is_empty(), "{words}\n{page}");
        let codes = exit::codes(words);
        assert_eq!(codes.is_some(), !command.has_subcommands(), "{words}: exit codes");
        for (code, meaning) in codes.unwrap_or_default() {
            assert!(page.contains(&format!("\\fB{code}\\fR\n{meaning}")), "{words}: {code}\n{page}");
            let help = command.clone().render_help().to_string();
            assert!(help.contains(&format!("\n  {code}  ")), "{words}: {code}\n{help}");
        }
    }
    let written = std::fs::read_dir(tree.path("man/man1")).expect("the folder is there").count();
    assert_eq!(written, commands.len(), "no page of something else");
    assert_eq!(tree.ends(0, &["manual"]), tree.read("man/man1/stillwire.1"));
}

#[test]
fn a_folder_that_cannot_be_made_is_said() {
    let tree = Tree::new(&[("file", "")]);
    let said = tree.ends(2, &["manual", "--to", "file/man1"]);
    assert!(said.contains("error: the folder `file/man1` cannot be made"), "{said}");
}

#[test]
fn an_unknown_rule_is_answered_with_the_rules() {
    let said = Tree::new(&[]).ends(2, &["explain", "clock-hazzard"]);
    assert!(said.contains("'clock-hazard'") && said.contains("set-reset-overlap"), "{said}");
}

/// As readers see them. A name may be broken at a hyphen only where a line ends, so the lines are made long.
#[test]
#[ignore = "needs groff"]
fn pages_are_set_without_a_warning() {
    let commands = commands();
    for page in manual::pages() {
        let tree = Tree::new(&[(&page.file, &page.text)]);
        let mut groff = Command::new("groff");
        let groff = groff.args(["-man", "-Tascii", "-ww", "-rLL=200n", "-P-cbou", &page.file]);
        let output = groff.current_dir(tree.path("")).output().expect("groff starts");
        let (set, said) = (String::from_utf8_lossy(&output.stdout), String::from_utf8_lossy(&output.stderr));
        assert!(output.status.success() && said.is_empty(), "{}: {said}", page.file);
        let (words, command) = commands.iter().find(|(words, _)| file_of(words) == page.file).expect("a command");
        assert!(set.contains("EXIT STATUS"), "{set}");
        for option in options(command) {
            assert!(set.contains(&option), "{words}: {option}\n{set}");
        }
        for inner in command.get_subcommands() {
            let inner = format!("{words} {}", inner.get_name());
            let named = file_of(inner.trim()).replace(".1", "(1)");
            assert!(set.contains(&named), "{named}\n{set}");
        }
    }
}

/// What a shell offers behind `line`, whose last word is not finished.
#[track_caller]
fn offered(line: &str) -> Vec<String> {
    let tree = Tree::new(&[]);
    tree.write("completions", &tree.run(&["completions", "bash"]).stdout);
    let script = format!(
        "source completions\n[[ $(complete -p stillwire) == *'-F _stillwire '* ]] || exit 9\n\
         COMP_WORDS=({line}); [[ '{line}' == *' ' ]] && COMP_WORDS+=('')\nCOMP_CWORD=$((${{#COMP_WORDS[@]}} - 1))\n\
         _stillwire stillwire \"${{COMP_WORDS[COMP_CWORD]}}\" \"${{COMP_WORDS[COMP_CWORD-1]}}\"\n\
         printf '%s\\n' \"${{COMPREPLY[@]}}\"\n"
    );
    let output = Command::new("bash").args(["-c", &script]).current_dir(tree.path("")).output().expect("bash starts");
    assert!(output.status.success() && output.stderr.is_empty(), "{}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8_lossy(&output.stdout).lines().map(str::to_string).collect()
}

#[test]
#[ignore = "needs bash"]
fn bash_completes_commands_options_and_values() {
    assert_eq!(offered("stillwire le"), ["ledger"]);
    assert_eq!(offered("stillwire scan --sho"), ["--show-settings", "--show"]);
    assert_eq!(offered("stillwire scan rtl --gate "), ["error", "warning", "note"]);
    assert_eq!(offered("stillwire explain set-"), ["set-reset-hazard", "set-reset-overlap"]);
    let ledger = offered("stillwire ledger ");
    assert!(ledger.contains(&"write".to_string()) && ledger.contains(&"prune".to_string()), "{ledger:?}");
    assert!(!ledger.contains(&"scan".to_string()), "{ledger:?}");
}

#[test]
fn every_shell_gets_completions_that_name_every_command() {
    for shell in ["bash", "elvish", "fish", "powershell", "zsh"] {
        let script = Tree::new(&[]).ends(0, &["completions", shell]);
        for (words, command) in commands() {
            assert!(script.contains(command.get_name()), "{shell}: {words}");
            for option in options(&command) {
                assert!(script.contains(option.trim_start_matches('-')), "{shell}: {words} {option}");
            }
        }
    }
}
