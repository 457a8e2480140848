//! Elaboration checked from outside: the flattened form of a design must simulate like the original. Both are run in an
//! independent simulator (Debian's `iverilog`, IEEE 1364-2005) under one bench with the same random stimulus, and every
//! output bit that both know must be equal, every time it is looked at.
//!
//! The bench knows clocks and resets by their names. It connects ports by order, so that the simulator itself complains
//! when the flattened module has lost or resized one. Inputs change one after the other, never together with a clock:
//! two simulations may order simultaneous changes differently and both be right.

use std::collections::BTreeSet;
use std::fmt::Write;
use std::path::{Path, PathBuf};
use std::process::Command;

use crate::{constructs, outside};

/// A small reproducible generator (xorshift).
pub struct Random(u64);

impl Random {
    pub fn new(seed: u64) -> Self {
        Self(seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1)
    }

    pub fn next(&mut self) -> u64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        self.0
    }

    pub fn below(&mut self, bound: usize) -> usize {
        (self.next() >> 33) as usize % bound
    }
}

/// Compiles and runs one Verilog source; the lines it prints.
#[track_caller]
pub fn display_lines(source: &str) -> Vec<String> {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let input = folder.path().join("t.v");
    std::fs::write(&input, source).expect("written");
    simulate(&[input], &[], folder.path()).expect("simulates")
}

/// Compiles `files` and runs the result in `folder`; the printed lines, or what the simulator had against it. Warnings
/// about ports count.
fn simulate(files: &[PathBuf], options: &[String], folder: &Path) -> Result<Vec<String>, String> {
    let program = folder.join("t.vvp");
    let compiled = Command::new("iverilog")
        .args(["-g2012", "-Wportbind", "-Wimplicit", "-o"])
        .arg(&program)
        .args(options)
        .args(files)
        .output()
        .map_err(|error| format!("iverilog does not run: {error}"))?;
    let complaints = String::from_utf8_lossy(&compiled.stderr);
    let about_ports = complaints.lines().any(|line| line.contains("bench.v") && line.contains("expects"));
    if !compiled.status.success() || about_ports {
        let first: Vec<&str> = complaints.lines().take(12).collect();
        return Err(format!("iverilog complains:\n{}", first.join("\n")));
    }
    let run = Command::new("vvp").arg("-n").arg(&program).output().map_err(|error| format!("vvp: {error}"))?;
    if !run.status.success() {
        return Err(format!("vvp fails: {}", String::from_utf8_lossy(&run.stderr)));
    }
    Ok(String::from_utf8_lossy(&run.stdout).lines().map(str::to_string).collect())
}

/// A port as the flattened module declares it.
#[derive(Clone, Debug)]
struct Port {
    direction: String,
    /// `[7:0]` or nothing.
    range: String,
    name: String,
}

impl Port {
    fn width(&self) -> usize {
        let Some((left, right)) = self.range.trim_matches(['[', ']']).split_once(':') else { return 1 };
        let number = |text: &str| text.parse::<i64>().expect("a number");
        (number(left).abs_diff(number(right)) + 1) as usize
    }

    fn is_clock(&self) -> bool {
        let name = self.name.to_lowercase();
        name.starts_with("clk") || name.ends_with("clk") || name.starts_with("clock")
    }

    /// `Some(active level)` of a reset.
    fn reset(&self) -> Option<u8> {
        let name = self.name.to_lowercase();
        let is_reset = name.contains("rst") || name.contains("reset");
        is_reset.then_some(u8::from(!name.ends_with('n')))
    }
}

fn ports(flat: &str, top: &str) -> Vec<Port> {
    let header = format!("module {top} (");
    let lines = flat.lines().skip_while(|line| !line.starts_with(&header)).skip(1);
    lines
        .map_while(|line| {
            let mut words = line.trim().trim_end_matches(';').split_whitespace();
            let direction = words.next().filter(|word| matches!(*word, "input" | "output" | "inout"))?.to_string();
            let rest: Vec<&str> = words.collect();
            let (range, name) = match rest[..] {
                [name] => (String::new(), name.to_string()),
                [range, name] => (range.to_string(), name.to_string()),
                _ => panic!("an unexpected port: {line}"),
            };
            // An escaped name ends with a blank, wherever it is used.
            let name = if name.starts_with('\\') { name + " " } else { name };
            Some(Port { direction, range, name })
        })
        .collect()
}

/// What to compare, and how.
pub struct Trial<'t> {
    /// Files and folders given to the product.
    pub paths: Vec<PathBuf>,
    /// Options for both: include folders and defines.
    pub options: Vec<String>,
    /// Files given to the simulator.
    pub files: Vec<PathBuf>,
    pub top: String,
    pub cycles: usize,
    /// A reset comes about every so many cycles.
    pub reset_every: usize,
    /// Verilog expressions for inputs that would do nothing interesting with plain random values.
    pub stimuli: Vec<(&'static str, &'static str)>,
    /// Outputs that are compared, but are constant or mostly unknown since the default parameters switch their unit off.
    pub quiet: Vec<&'t str>,
    /// Whether all storage starts with the same random values on both sides. Designs that never reset their storage need
    /// it: a simulator takes the else branch of an unknown condition, which no gate does.
    pub preset: bool,
    /// What the simulator calls unnamed generate blocks where it departs from IEEE 1364-2005, 12.4.3: it counts an else
    /// branch as a construct of its own.
    pub renamed: Vec<(&'static str, &'static str)>,
}

/// What both simulations assign to their storage at the beginning.
#[derive(Debug, Default)]
struct Preset {
    original: String,
    flat: String,
}

/// The registers of the flattened form, each with the variable of the original that it stands for: the net that it
/// drives. A name that the original does not have is an error of the simulator.
fn preset(flat: &str, trial: &Trial<'_>) -> Preset {
    let registers: BTreeSet<&str> =
        flat.lines().filter_map(|line| line.strip_prefix("  reg ")?.strip_suffix(';')).collect();
    let mut random = Random::new(11);
    let mut preset = Preset::default();
    for line in flat.lines() {
        let Some((name, driver)) = line.strip_prefix("  assign \\").and_then(|rest| rest.split_once(" = ")) else {
            continue;
        };
        let driver = driver.trim_end_matches(';');
        if registers.contains(driver) {
            let value = random.below(2);
            let inner = name.trim_end().strip_prefix(trial.top.as_str()).unwrap_or(name);
            let renamed = trial.renamed.iter().fold(inner.to_string(), |name, (from, to)| name.replace(from, to));
            let _ = writeln!(preset.original, "    dut{renamed} = 1'b{value};");
            let _ = writeln!(preset.flat, "    dut.{driver} = 1'b{value};");
        }
    }
    preset
}

/// How many output bits were compared.
#[derive(Debug, Default)]
pub struct Counts {
    pub compared: usize,
    original_unknown: usize,
    flat_unknown: usize,
}

/// The bench: it prints all outputs in binary after the inputs have changed and after each clock edge.
fn bench(trial: &Trial<'_>, ports: &[Port], preset: &str) -> String {
    let mut text = String::from("`timescale 1ns/1ns\nmodule bench;\n  integer seed = 7, cycle;\n");
    for port in ports {
        let kind = if port.direction == "input" { "reg" } else { "wire" };
        let _ = writeln!(text, "  {kind} {} {};", port.range, port.name);
    }
    // From outside, an inout port is driven weakly, so that the module wins whenever it drives.
    let inouts: Vec<&Port> = ports.iter().filter(|port| port.direction == "inout").collect();
    for Port { range, name, .. } in &inouts {
        let _ = writeln!(text, "  reg {range} {name}_outside;\n  assign (weak0, weak1) {name} = {name}_outside;");
    }
    let names: Vec<&str> = ports.iter().map(|port| port.name.as_str()).collect();
    let _ = writeln!(text, "  {} dut ({});", trial.top, names.join(", "));
    let outputs: Vec<&str> =
        ports.iter().filter(|port| port.direction != "input").map(|port| port.name.as_str()).collect();
    let formats = vec!["%b"; outputs.len()].join(" ");
    let _ = writeln!(text, "  task show; $display(\"{formats}\", {}); endtask", outputs.join(", "));
    let inputs: Vec<&Port> = ports.iter().filter(|port| port.direction == "input").collect();
    let clocks: Vec<&Port> = inputs.iter().copied().filter(|port| port.is_clock()).collect();
    let _ = write!(text, "  initial begin\n    #1;\n{preset}");
    for input in &inputs {
        let _ = writeln!(text, "    {} = {}; #1;", input.name, input.reset().unwrap_or(0));
    }
    let _ = writeln!(text, "    for (cycle = 0; cycle < {}; cycle = cycle + 1) begin", trial.cycles);
    for input in inputs.iter().filter(|port| !port.is_clock()) {
        let name = &input.name;
        let words = vec!["$random(seed)"; input.width().div_ceil(32)].join(", ");
        let custom = trial.stimuli.iter().find(|(port, _)| port == name);
        if let Some(active) = input.reset() {
            let every = trial.reset_every;
            let _ = writeln!(
                text,
                "      if (cycle < 4) {name} = {active}; \
                 else {name} = ($unsigned($random(seed)) % {every} == 0) ? {active} : {}; #1;",
                1 - active
            );
        } else if let Some((_, expression)) = custom {
            let _ = writeln!(text, "      {name} = {expression}; #1;");
        } else {
            let _ = writeln!(
                text,
                "      case ($unsigned($random(seed)) % 8) 0: {name} = 0; 1: {name} = ~0; 2: {name} = {name} + 1; \
                 3: {name} = {name} << 1; default: {name} = {{{words}}}; endcase #1;"
            );
        }
    }
    for name in inouts.iter().map(|port| &port.name) {
        let _ = writeln!(text, "      {name}_outside = $random(seed); #1;");
    }
    text.push_str("      show;\n");
    for level in [1, 0] {
        for clock in &clocks {
            let _ = writeln!(text, "      {} = {level}; #1 show;", clock.name);
        }
    }
    text.push_str("    end\n    $finish(0);\n  end\nendmodule\n");
    text
}

/// Runs one trial: the counts, or what is wrong.
pub fn run(trial: &Trial<'_>) -> Result<Counts, String> {
    let flat = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .arg("flatten")
        .args(&trial.paths)
        .args(["--top", &trial.top])
        .args(&trial.options)
        .output()
        .map_err(|error| format!("the product does not run: {error}"))?;
    if !flat.status.success() {
        return Err(format!("flatten: {}\n{}", flat.status, String::from_utf8_lossy(&flat.stderr)));
    }
    let flat = String::from_utf8_lossy(&flat.stdout).into_owned();
    let ports = ports(&flat, &trial.top);
    if ports.is_empty() {
        return Err(format!("the flattened form has no module `{}` with ports", trial.top));
    }
    let folder = tempfile::tempdir().map_err(|error| error.to_string())?;
    let preset = if trial.preset { preset(&flat, trial) } else { Preset::default() };
    let texts = [
        ("bench.v", bench(trial, &ports, &preset.original)),
        ("flat_bench.v", bench(trial, &ports, &preset.flat)),
        ("flat.v", flat),
    ];
    // The failing case can be kept for a look: `STILLWIRE_KEEP=FOLDER`.
    let keep = std::env::var_os("STILLWIRE_KEEP");
    for (name, text) in &texts {
        std::fs::write(folder.path().join(name), text).map_err(|error| error.to_string())?;
        if let Some(keep) = &keep {
            let kept = Path::new(keep).join(format!("{}.{name}", trial.top));
            std::fs::write(kept, text).map_err(|error| error.to_string())?;
        }
    }
    let mut files = trial.files.clone();
    files.push(folder.path().join("bench.v"));
    let original = simulate(&files, &trial.options, folder.path()).map_err(|text| format!("original: {text}"))?;
    let files = ["flat_bench.v", "flat.v"].map(|name| folder.path().join(name));
    let flat = simulate(&files, &[], folder.path()).map_err(|text| format!("flattened: {text}"))?;
    let outputs: Vec<&Port> = ports.iter().filter(|port| port.direction != "input").collect();
    compare(trial, &outputs, &original, &flat)
}

fn compare(trial: &Trial<'_>, outputs: &[&Port], original: &[String], flat: &[String]) -> Result<Counts, String> {
    if original.len() != flat.len() || original.len() < trial.cycles {
        return Err(format!("{} and {} lines for {} cycles", original.len(), flat.len(), trial.cycles));
    }
    let mut total = Counts::default();
    let mut compared = vec![0; outputs.len()];
    let mut moves = vec![false; outputs.len()];
    let mut wrong = Vec::new();
    let first: Vec<&str> = original[original.len() / 2].split(' ').collect();
    for (step, (original, flat)) in original.iter().zip(flat).enumerate() {
        let (original, flat): (Vec<&str>, Vec<&str>) = (original.split(' ').collect(), flat.split(' ').collect());
        if original.len() != outputs.len() || flat.len() != outputs.len() {
            return Err(format!("step {step}: not one word for each output"));
        }
        for (at, (original, flat)) in original.iter().zip(&flat).enumerate() {
            moves[at] |= *original != first[at];
            let mut differs = false;
            for (a, b) in original.chars().zip(flat.chars()) {
                match (a, b) {
                    ('0' | '1', '0' | '1') => {
                        total.compared += 1;
                        compared[at] += 1;
                        differs |= a != b;
                    }
                    ('0' | '1', _) => total.flat_unknown += 1,
                    _ => total.original_unknown += 1,
                }
            }
            if differs {
                wrong.push(format!("step {step}, {}: original {original}, flattened {flat}", outputs[at].name));
            }
        }
    }
    if !wrong.is_empty() {
        let shown = wrong[..wrong.len().min(8)].join("\n");
        return Err(format!("{} words differ ({total:?}):\n{shown}", wrong.len()));
    }
    for (at, output) in outputs.iter().enumerate() {
        if trial.quiet.contains(&output.name.as_str()) {
            continue;
        }
        let bits = original.len() * output.width();
        if compared[at] * 2 < bits {
            wrong.push(format!("{}: only {} of {bits} bits could be compared", output.name, compared[at]));
        }
        if !moves[at] {
            wrong.push(format!("{}: never changes", output.name));
        }
    }
    if wrong.is_empty() { Ok(total) } else { Err(format!("too little is compared ({total:?}):\n{}", wrong.join("\n"))) }
}

/// Every file of `fixtures/constructs`: one construct each, the top named like the file. Where the simulator does not
/// know the construct, `reference/` holds the same function written by hand in plain Verilog.
#[test]
#[ignore = "outside: run tests/outside/run"]
#[allow(clippy::print_stdout, reason = "how much was compared belongs to the result of an outside check")]
fn constructs_simulate_like_their_flattened_form() {
    let references = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/constructs/reference");
    let only = std::env::var("STILLWIRE_CONSTRUCT").ok();
    let mut failures = Vec::new();
    for (file, top) in constructs::fixtures() {
        if only.as_ref().is_some_and(|only| *only != top) {
            continue;
        }
        let reference = references.join(format!("{top}.v"));
        let original = if reference.is_file() { reference } else { file.clone() };
        let trial = Trial {
            paths: vec![file.clone()],
            options: Vec::new(),
            files: vec![original],
            top: top.clone(),
            cycles: 600,
            reset_every: 24,
            stimuli: Vec::new(),
            quiet: Vec::new(),
            preset: false,
            renamed: Vec::new(),
        };
        match run(&trial) {
            Ok(counts) => println!("{top}: {counts:?}"),
            Err(message) => failures.push(format!("{top}: {message}")),
        }
    }
    assert!(failures.is_empty(), "{} constructs:\n{}", failures.len(), failures.join("\n\n"));
}

/// The comparison notices a difference in one term of one output.
#[test]
#[ignore = "outside: run tests/outside/run"]
fn a_wrong_reference_is_noticed() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/constructs");
    let reference = std::fs::read_to_string(folder.join("reference/set_membership.v")).expect("the reference");
    let scratch = tempfile::tempdir().expect("a temporary folder");
    for (right, wrong) in [("a >= 9", "a >= 10"), ("b == 6", "b == 7"), ("kind = 2", "kind = 0")] {
        assert!(reference.contains(right), "the reference has no `{right}`");
        let file = scratch.path().join("wrong.v");
        std::fs::write(&file, reference.replace(right, wrong)).expect("written");
        let trial = Trial {
            paths: vec![folder.join("set_membership.sv")],
            options: Vec::new(),
            files: vec![file],
            top: "set_membership".to_string(),
            cycles: 600,
            reset_every: 24,
            stimuli: Vec::new(),
            quiet: Vec::new(),
            preset: false,
            renamed: Vec::new(),
        };
        let message = run(&trial).expect_err("a wrong reference");
        assert!(message.contains("words differ"), "{message}");
    }
}

/// A word that is an instruction often enough to get a processor going: one of the opcodes of the RV32I base set.
const INSTRUCTION: &str = "($unsigned($random(seed)) % 10 == 0) ? $random(seed) : \
    {$random(seed), 7'b0} | ({7'h33, 7'h13, 7'h03, 7'h23, 7'h63, 7'h6f, 7'h67, 7'h37, 7'h17, 7'h13} \
    >> (7 * ($unsigned($random(seed)) % 10)) & 7'h7f)";

fn core(name: &str, files: &[&str], top: &str, stimuli: Vec<(&'static str, &'static str)>) -> Trial<'static> {
    let folder = outside::data().join(name);
    let files: Vec<PathBuf> = files.iter().map(|file| folder.join(file)).collect();
    Trial {
        paths: files.clone(),
        options: Vec::new(),
        files,
        top: top.to_string(),
        cycles: 5_000,
        reset_every: 150,
        stimuli,
        quiet: Vec::new(),
        preset: true,
        renamed: Vec::new(),
    }
}

/// The Verilog files of a folder of the outside data.
fn verilog_files(folder: &str) -> Vec<PathBuf> {
    let entries = std::fs::read_dir(outside::data().join(folder)).expect("the core");
    let mut files: Vec<PathBuf> = entries.map(|entry| entry.expect("an entry").path()).collect();
    files.retain(|path| path.extension().is_some_and(|extension| extension == "v"));
    files.sort();
    files
}

#[track_caller]
#[allow(clippy::print_stdout, reason = "how much was compared belongs to the result of an outside check")]
fn check_core(trial: &Trial<'_>) {
    match run(trial) {
        Ok(counts) => println!("{}: {counts:?}", trial.top),
        Err(message) => panic!("{}: {message}", trial.top),
    }
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn picorv32_simulates_like_its_flattened_form() {
    let mut trial = core("picorv32", &["picorv32.v"], "picorv32_axi", vec![("mem_axi_rdata", INSTRUCTION)]);
    trial.quiet = vec!["mem_axi_awprot", "pcpi_valid", "pcpi_insn", "pcpi_rs1", "pcpi_rs2", "trace_data"];
    check_core(&trial);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn serv_simulates_like_its_flattened_form() {
    let files = verilog_files("serv/rtl");
    let mut trial = core("serv", &[], "serv_rf_top", vec![("i_ibus_rdt", INSTRUCTION)]);
    trial.paths = files.clone();
    trial.files = files;
    trial.quiet = vec!["o_mdu_valid"];
    trial.renamed = vec![("cpu.genblk3.", "cpu.genblk5.")];
    check_core(&trial);
}
