//! Process entry: arguments in, exit code out. Only this file prints, reads the environment and the clock, looks at
//! terminals, writes files and exits.

use std::io::{IsTerminal, Write};
use std::path::{Path, PathBuf};
use std::process::ExitCode;
use std::sync::{Arc, mpsc};
use std::time::Duration;

use clap::Parser;
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use lsp_server::Connection;
use stillwire::cache::Cache;
use stillwire::cli::{self, Cli, Command, Format, Input, Output, manual};
use stillwire::cure::Cure;
use stillwire::input::{self, InputRole};
use stillwire::report::{evidence, html, json, junit, page, sarif, text};
use stillwire::rules::{self, Rule, Severity};
use stillwire::settings::{self, Settings};
use stillwire::signoff::ledger::{self, Ledger};
use stillwire::source::{self, Exclude, PathError};
use stillwire::{Request, Scan, Stage};

/// A finding stands.
const FOUND: u8 = 1;
/// Wrong usage, settings or paths.
const USAGE: u8 = 2;
/// Part of the input could not be analysed.
const INCOMPLETE: u8 = 3;

fn main() -> ExitCode {
    let result = match Cli::parse().command {
        Command::Scan(arguments) => scan(&arguments),
        Command::Explain { rule } => explain(rule).map(|()| 0),
        Command::Flatten(arguments) => flatten(&arguments),
        Command::Ledger(command) => ledger(&command),
        Command::Replay(arguments) => replay(&arguments),
        Command::Cure(arguments) => cure(&arguments),
        Command::Serve(arguments) => serve(arguments.input),
        Command::Completions { shell } => print(&manual::completions(shell)).map(|()| 0),
        Command::Manual { to } => manual_pages(to.as_deref()).map(|()| 0),
    };
    let code = result.unwrap_or_else(|error| {
        complain(&format!("error: {}\n  help: {}\n", error.message, error.help));
        USAGE
    });
    ExitCode::from(code)
}

/// Laid out on a terminal, otherwise Markdown as it is, for other programs and for files.
fn explain(rule: Rule) -> Result<(), PathError> {
    let markdown = rules::page(rule);
    if !std::io::stdout().is_terminal() {
        return print(markdown);
    }
    let columns = terminal_size::terminal_size_of(std::io::stdout()).map_or(80, |(width, _)| usize::from(width.0));
    print(&page::render(markdown, &page::Look { columns, colours: colours_wanted() }))
}

fn scan(arguments: &cli::Scan) -> Result<u8, PathError> {
    let settings = read_settings(&arguments.input)?;
    if arguments.show_settings {
        print(&settings::show(&settings, &command_line(arguments)))?;
        return Ok(0);
    }
    check_outputs(&arguments.write)?;
    let ledger = arguments.ledger.as_deref().or(settings.ledger.as_deref());
    let ledger = ledger.map(|file| Ok((file, read_ledger(file)?))).transpose()?;
    let mut request = request(&arguments.input, &settings);
    request.drawn = arguments.write.iter().any(|output| output.format == Format::Html);
    let mut scan = with_progress(|progress| stillwire::scan(&request, &environment, progress))?;
    if let Some((folder, problem)) =
        arguments.input.cache.as_ref().zip(request.source.cache.as_ref().and_then(Cache::problem))
    {
        complain(&format!(
            "warning: the cache `{}` cannot be written: {problem}; the next run will be no faster\n",
            folder.display()
        ));
    }
    let mut inputs: Vec<input::Input> = settings.input.iter().cloned().collect();
    if let Some((file, (ledger, read))) = ledger {
        inputs.push(read);
        let used = ledger.apply(&file.to_string_lossy(), &mut scan.report.findings);
        scan.report.ledger = Some(used);
    }

    let gate = arguments.gate.map(Severity::from).or(settings.gate).unwrap_or(Severity::Error);
    let show = arguments.show.map(Severity::from).or(settings.show).unwrap_or(Severity::Warning);
    let to_stderr = arguments.write.iter().any(|output| output.file.is_none());
    let is_terminal = if to_stderr { std::io::stderr().is_terminal() } else { std::io::stdout().is_terminal() };
    let style = text::Style { show, gate, colours: is_terminal && colours_wanted() };
    let rendered = text::render(&scan.report, &scan.sources, &style);
    // A text that cannot be written must not keep the other outputs from being written.
    let printed = if to_stderr {
        complain(&rendered);
        Ok(())
    } else {
        print(&rendered)
    };
    for output in &arguments.write {
        let rendered = match output.format {
            Format::Json => json::render(&scan.report, &scan.sources),
            Format::Sarif => sarif::render(&scan.report, &scan.sources),
            Format::Junit => junit::render(&scan.report, &scan.sources, gate),
            Format::Evidence => {
                let run = evidence::Run {
                    command: command_given(),
                    settings: settings::show(&settings, &command_line(arguments)),
                    parameters: request.given.iter().cloned().collect(),
                    inputs: inputs.clone(),
                };
                evidence::render(&scan.report, &scan.sources, gate, &run)
            }
            Format::Html => html::render(&scan.report, &scan.exhibits, &scan.sources, gate),
        };
        match &output.file {
            None => print(&rendered)?,
            Some(file) => write_beside_and_rename(file, rendered.as_bytes())?,
        }
    }
    printed?;
    Ok(scan.report.exit_code(gate))
}

/// The arguments of this run but the number of threads, which changes nothing.
fn command_given() -> Vec<String> {
    let mut given = Vec::new();
    let mut arguments = std::env::args_os().skip(1).map(|argument| argument.to_string_lossy().into_owned());
    while let Some(argument) = arguments.next() {
        if argument == "--threads" {
            arguments.next();
        } else if !argument.starts_with("--threads=") {
            given.push(argument);
        }
    }
    given
}

/// Writes or prunes the ledger. An incomplete run records what it found, and drops nothing: what was not read is not gone.
fn ledger(command: &cli::Ledger) -> Result<u8, PathError> {
    let (cli::Ledger::Write(arguments) | cli::Ledger::Prune(arguments)) = command;
    let settings = read_settings(&arguments.input)?;
    let place = arguments.ledger.as_deref().or(settings.ledger.as_deref()).unwrap_or(Path::new(ledger::FILE_NAME));
    check_output(place)?;
    let known = match command {
        cli::Ledger::Write(_) => None,
        cli::Ledger::Prune(_) => Some(read_ledger(place)?.0),
    };
    let request = request(&arguments.input, &settings);
    let mut scan = with_progress(|progress| stillwire::scan(&request, &environment, progress))?;
    let file = place.display();
    let complete = scan.report.complete();
    let (ledger, said) = match known {
        None => {
            let ledger = Ledger::of(&scan.report.findings);
            let said = format!("{file}: {} written\n", entries(ledger.entries().len()));
            (ledger, said)
        }
        Some(known) if complete => {
            let used = known.apply(&file.to_string(), &mut scan.report.findings);
            let said = format!("{file}: {} dropped, {} left\n", entries(used.gone.len()), used.remaining);
            (known.pruned(&used), said)
        }
        Some(known) => (known, format!("{file}: nothing dropped, because the run is incomplete\n")),
    };
    write_beside_and_rename(place, ledger.render().as_bytes())?;
    print(&said)?;
    if !complete {
        complain("warning: part of the input was not analysed; run `stillwire scan` to see what\n");
    }
    Ok(if complete { 0 } else { INCOMPLETE })
}

fn entries(count: usize) -> String {
    if count == 1 { "1 entry".to_string() } else { format!("{count} entries") }
}

fn read_ledger(file: &Path) -> Result<(Ledger, input::Input), PathError> {
    let text = std::fs::read_to_string(file).map_err(|error| {
        let message = format!("the ledger `{}` cannot be read: {error}", file.display());
        PathError::new(message, "write it with `stillwire ledger write`, or check the path")
    })?;
    let ledger = Ledger::parse(&text).map_err(|problem| {
        let message = format!("the ledger `{}` is damaged: {problem}", file.display());
        PathError::new(message, "take it from version control, or write it anew with `stillwire ledger write`")
    })?;
    Ok((ledger, input::Input::read(InputRole::Ledger, file, text.as_bytes())))
}

fn flatten(arguments: &cli::Flatten) -> Result<u8, PathError> {
    let settings = read_settings(&arguments.input)?;
    let request = request(&arguments.input, &settings);
    let cone = arguments.cone.as_deref();
    let (verilog, Scan { sources, report, .. }) =
        with_progress(|progress| stillwire::flatten(&request, cone, &environment, progress))?;
    if !report.complete() {
        let style = text::Style {
            show: Severity::Note,
            gate: Severity::Error,
            colours: std::io::stderr().is_terminal() && colours_wanted(),
        };
        complain(&text::render(&report, &sources, &style));
    }
    print(&verilog)?;
    Ok(if report.complete() { 0 } else { INCOMPLETE })
}

fn replay(arguments: &cli::Replay) -> Result<u8, PathError> {
    let settings = read_settings(&arguments.input)?;
    let request = request(&arguments.input, &settings);
    let fingerprint = &arguments.fingerprint;
    let replay = with_progress(|progress| stillwire::replay(&request, fingerprint, &environment, progress))?;
    let folder = &arguments.to;
    make_folder(folder)?;
    for (name, contents) in &replay.files {
        write_beside_and_rename(&folder.join(name), contents)?;
    }
    print(&replay.summary)?;
    Ok(if replay.complete { 0 } else { INCOMPLETE })
}

/// The diff alone goes to standard output, so that it can be piped into `patch -p1` or `git apply`.
fn cure(arguments: &cli::Cure) -> Result<u8, PathError> {
    let settings = read_settings(&arguments.input)?;
    let request = request(&arguments.input, &settings);
    let folder = std::env::current_dir().unwrap_or_else(|_| PathBuf::from("."));
    let fingerprint = &arguments.fingerprint;
    let cure = with_progress(|progress| stillwire::cure(&request, fingerprint, &folder, &environment, progress))?;
    match cure {
        Cure::Patch { diff, proof, .. } => {
            complain(&format!("{proof}\n"));
            print(&diff)?;
            Ok(0)
        }
        Cure::Terms { text } => {
            print(&text)?;
            Ok(0)
        }
        Cure::Withheld { reason } => {
            complain(&format!("no cure is offered: {reason}\n"));
            Ok(FOUND)
        }
    }
}

/// Standard input and output belong to the protocol. The settings are read anew for each scan.
fn serve(input: Input) -> Result<u8, PathError> {
    let current = std::env::current_dir().map_err(|error| {
        PathError::new(format!("the current folder is gone: {error}"), "start in a folder that exists")
    })?;
    let prepare = move |root: &Path| {
        let mut input = input.clone();
        let named = !input.paths.is_empty() || !input.list.is_empty();
        if !named {
            input.paths.push(root.to_path_buf());
        }
        let settings = read_settings(&input)?;
        if !named && (!settings.paths.is_empty() || !settings.lists.is_empty()) {
            input.paths.clear();
        }
        Ok(request(&input, &settings))
    };
    let (connection, threads) = Connection::stdio();
    let in_order = stillwire::serve::serve(&connection, &current, environment, Arc::new(prepare));
    drop(connection);
    // What was answered last is still on its way.
    let written = threads.join();
    if let Err(error) = &written {
        complain(&format!("error: the session with the editor broke off: {error}\n"));
    }
    Ok(if in_order && written.is_ok() { 0 } else { FOUND })
}

/// The page of the program for a reader such as `man -l -`, or all pages as files.
fn manual_pages(folder: Option<&Path>) -> Result<(), PathError> {
    let pages = manual::pages();
    let Some(folder) = folder else { return pages.first().map_or(Ok(()), |page| print(&page.text)) };
    make_folder(folder)?;
    pages.iter().try_for_each(|page| write_beside_and_rename(&folder.join(&page.file), page.text.as_bytes()))
}

fn make_folder(folder: &Path) -> Result<(), PathError> {
    std::fs::create_dir_all(folder).map_err(|error| {
        let message = format!("the folder `{}` cannot be made: {error}", folder.display());
        PathError::new(message, "give another folder to --to")
    })
}

/// The settings that hold: those named, else those found upward from the first path.
fn read_settings(input: &Input) -> Result<Settings, PathError> {
    if let Some(file) = &input.settings {
        return settings::read(file);
    }
    let current = PathBuf::from(".");
    let first = input.paths.first().or(input.list.first()).unwrap_or(&current);
    let here = std::env::current_dir().unwrap_or_default();
    match settings::find(first) {
        Some(file) => settings::read(file.strip_prefix(here).unwrap_or(&file)),
        None => Ok(Settings::default()),
    }
}

/// What the command line says in the terms of the settings.
fn command_line(arguments: &cli::Scan) -> Settings {
    let input = &arguments.input;
    Settings {
        paths: input.paths.clone(),
        lists: input.list.clone(),
        top: input.top.clone(),
        set: input.set.clone(),
        include: input.include.clone(),
        define: input.define.clone(),
        libraries: input.cells.clone(),
        ledger: arguments.ledger.clone(),
        gate: arguments.gate.map(Severity::from),
        show: arguments.show.map(Severity::from),
        ..Settings::default()
    }
}

/// The command line with the settings behind it.
fn request(input: &Input, settings: &Settings) -> Request {
    // A macro of the command line replaces one of the settings, because the later definition holds.
    let defines = settings.define.iter().chain(&input.define).cloned().collect();
    let (paths, lists) = settings.read_unless(input.paths.clone(), input.list.clone());
    Request {
        source: source::Request {
            paths,
            lists,
            include: input.include.iter().chain(&settings.include).cloned().collect(),
            defines,
            exclude: Exclude { root: settings.folder.clone(), patterns: settings.exclude.clone() },
            instead: Vec::new(),
            cache: input.cache.as_deref().map(Cache::new),
        },
        tops: if input.top.is_empty() { settings.top.clone() } else { input.top.clone() },
        // A value of the command line comes later and so holds.
        given: settings.set.iter().chain(&input.set).cloned().collect(),
        libraries: input.cells.iter().chain(&settings.libraries).cloned().collect(),
        cells: settings.cells.clone(),
        assumptions: settings.assumptions.clone(),
        severities: settings.severities.clone(),
        today: jiff::Zoned::now().date(),
        threads: input.threads.map_or(0, usize::from),
        drawn: false,
    }
}

fn environment(name: &str) -> Option<String> {
    std::env::var(name).ok()
}

fn colours_wanted() -> bool {
    let refused = environment("NO_COLOR").is_some_and(|value| !value.is_empty());
    !refused && environment("TERM").is_none_or(|terminal| terminal != "dumb")
}

/// Runs `work` with a progress bar on standard error, which shows only on a terminal and only past one second.
fn with_progress<T>(work: impl FnOnce(stillwire::Progress<'_>) -> T) -> T {
    if !std::io::stderr().is_terminal() {
        return work(&|_| {});
    }
    let bar = ProgressBar::with_draw_target(Some(0), ProgressDrawTarget::hidden());
    if let Ok(style) = ProgressStyle::with_template("{spinner} {msg} [{bar:30}] {elapsed}") {
        bar.set_style(style.progress_chars("=> "));
    }
    let (finished, wait) = mpsc::channel::<()>();
    let bar = &bar;
    std::thread::scope(|scope| {
        scope.spawn(move || {
            if wait.recv_timeout(Duration::from_secs(1)) == Err(mpsc::RecvTimeoutError::Timeout) {
                bar.set_draw_target(ProgressDrawTarget::stderr());
                bar.enable_steady_tick(Duration::from_millis(200));
            }
        });
        let result = work(&|stage| match stage {
            Stage::Reading { done, total } => {
                bar.set_message("reading");
                bar.set_length(total as u64);
                bar.set_position(done as u64);
            }
            Stage::Elaborating => bar.set_message("elaborating"),
            Stage::Deciding => bar.set_message("deciding"),
        });
        drop(finished);
        bar.finish_and_clear();
        result
    })
}

/// Complains about an output that cannot be written before the analysis and not after it.
fn check_outputs(outputs: &[Output]) -> Result<(), PathError> {
    if outputs.iter().filter(|output| output.file.is_none()).count() > 1 {
        return Err(PathError::new("two outputs go to standard output", "write one of them to a file"));
    }
    outputs.iter().filter_map(|output| output.file.as_deref()).try_for_each(check_output)
}

fn check_output(file: &Path) -> Result<(), PathError> {
    if file.is_dir() {
        let message = format!("the output `{}` is a folder", file.display());
        return Err(PathError::new(message, "name a file in it"));
    }
    let folder = folder_of(file);
    if !folder.is_dir() {
        let message = format!("the folder `{}` of the output does not exist", folder.display());
        return Err(PathError::new(message, "make it first"));
    }
    Ok(())
}

fn folder_of(file: &Path) -> &Path {
    file.parent().filter(|folder| !folder.as_os_str().is_empty()).unwrap_or(Path::new("."))
}

/// Nobody ever sees half a file: it is written beside its place and renamed. A link keeps pointing where it does, and what
/// is no file (a device, a pipe) is written to as it is, since a rename would replace it.
fn write_beside_and_rename(file: &Path, contents: &[u8]) -> Result<(), PathError> {
    let special = std::fs::metadata(file).is_ok_and(|known| !known.is_file() && !known.is_dir());
    let place = std::fs::canonicalize(file).unwrap_or_else(|_| file.to_path_buf());
    let name = place.file_name().unwrap_or_default().to_string_lossy().into_owned();
    let beside = folder_of(&place).join(format!(".{name}.{}", std::process::id()));
    let result = if special {
        std::fs::write(file, contents)
    } else {
        std::fs::write(&beside, contents).and_then(|()| std::fs::rename(&beside, &place))
    };
    result.map_err(|error| {
        let _ = std::fs::remove_file(&beside);
        let message = format!("the output `{}` cannot be written: {error}", file.display());
        PathError::new(message, "check its folder's permissions and space")
    })
}

/// A reader that goes away early (`| head`) is no error of ours; a full disk behind the standard output is one.
fn print(text: &str) -> Result<(), PathError> {
    let mut stdout = std::io::stdout().lock();
    match stdout.write_all(text.as_bytes()).and_then(|()| stdout.flush()) {
        Err(error) if error.kind() != std::io::ErrorKind::BrokenPipe => {
            let message = format!("the standard output cannot be written: {error}");
            Err(PathError::new(message, "what was written of it is not whole; check the space where it goes"))
        }
        _ => Ok(()),
    }
}

fn complain(text: &str) {
    let _ = std::io::stderr().lock().write_all(text.as_bytes());
}
