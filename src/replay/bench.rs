//! A witness as a test bench in IEEE 1364-2001: the logic as gates without delay, each wire that moves as a transport
//! delay (`always @(x) y <= #d x;`, since the delays of primitives would swallow short pulses), the stimulus, and a check
//! that prints PULSE or NO PULSE. It needs nothing beside itself. It ends by itself when nothing moves any more, so that
//! several benches can run in one simulation.

use std::fmt::Write;

use super::circuit::{Circuit, Element, Op};
use super::delays::{self, Plan, Timing};
use crate::hazard::{Need, Promises, Wave};

/// How long the nets rest before the stimulus, and between its steps.
pub(super) const REST: u64 = 10;
/// The longest delay that is drawn at random.
const LONGEST: u64 = 32;

/// What a bench is about, in words for its head.
pub(super) struct Head<'a> {
    /// Name of the module.
    pub(super) module: &'a str,
    /// Lines of text.
    pub(super) story: &'a [String],
    /// The file's own name.
    pub(super) file: &'a str,
}

/// The bench under the delays of `plan`. `lengths` are the lengths of the steps.
pub(super) fn chosen(circuit: &Circuit, plan: &Plan, lengths: &[u64], head: &Head<'_>) -> String {
    let writer = Writer { circuit, plan, random: false };
    let mut text = writer.head(head);
    text += &writer.body();
    text += "  initial begin\n    step = 0; changes = 0;\n";
    let _ = writeln!(text, "    #{REST};");
    for (step, length) in lengths.iter().enumerate() {
        text += &writer.stimulus(step, "    ");
        let _ = writeln!(text, "    #{};", length + REST);
    }
    let name = writer.shown_name();
    let _ = writeln!(text, "    if (changes > {})", circuit.needed);
    let _ = writeln!(
        text,
        "      $display(\"PULSE {}: %0d changes of {name} where {} would do\", changes);",
        head.module, circuit.needed
    );
    let _ = writeln!(
        text,
        "    else\n      $display(\"NO PULSE {}: %0d changes of {name}\", changes);\n  end",
        head.module
    );
    text += "  initial if ($test$plusargs(\"dump\")) begin\n";
    let _ =
        writeln!(text, "    $dumpfile(\"{}.dump.vcd\"); $dumpvars(0, {});\n  end\nendmodule", head.module, head.module);
    text
}

/// The bench under `rounds` random assignments of delays.
pub(super) fn random(circuit: &Circuit, plan: &Plan, rounds: usize, head: &Head<'_>) -> String {
    let writer = Writer { circuit, plan, random: true };
    let wires = writer.wires();
    let settle = writer.longest_way() + REST;
    let mut text = writer.head(head);
    let _ = writeln!(text, "  integer d [0:{}];", wires.max(1) - 1);
    text += &writer.body();
    let _ = writeln!(
        text,
        "  integer round, wire_number, seed, bad;\n  initial begin\n    seed = 1; bad = 0; step = 0; changes = 0;"
    );
    for wire in 0..wires {
        let _ = writeln!(text, "    d[{wire}] = 1;");
    }
    let _ = writeln!(text, "    for (round = 0; round < {rounds}; round = round + 1) begin\n      step = 0;");
    text += &writer.rest("      ");
    let _ = writeln!(
        text,
        "      #{settle};\n      for (wire_number = 0; wire_number < {wires}; wire_number = wire_number + 1)"
    );
    let _ = writeln!(text, "        d[wire_number] = 1 + ({{$random(seed)}} % {LONGEST});\n      changes = 0;");
    for step in 0..circuit.steps {
        text += &writer.stimulus(step, "      ");
        let _ = writeln!(text, "      #{settle};");
    }
    let _ = writeln!(text, "      if (changes > {}) bad = bad + 1;\n    end", circuit.needed);
    let _ = writeln!(
        text,
        "    if (bad > 0) $display(\"PULSE {}: in %0d of {rounds} assignments of delays\", bad);",
        head.module
    );
    let _ = writeln!(
        text,
        "    else $display(\"NO PULSE {}: in {rounds} random assignments of delays\");\n  end\nendmodule",
        head.module
    );
    text
}

struct Writer<'a> {
    circuit: &'a Circuit,
    plan: &'a Plan,
    random: bool,
}

impl Writer<'_> {
    fn head(&self, head: &Head<'_>) -> String {
        let mut text = String::new();
        for line in head.story {
            let _ = writeln!(text, "// {line}");
        }
        let _ = writeln!(
            text,
            "//\n// Run it in any simulator of IEEE 1364, for example: iverilog -o replay {} && vvp replay",
            head.file
        );
        let _ = writeln!(text, "`timescale 1ns / 1ns\nmodule {};", head.module);
        text
    }

    fn name(&self, element: usize) -> String {
        match &self.circuit.elements[element].name {
            // An escaped name ends at a blank.
            Some(name) => format!("\\{name} "),
            None => format!("n{element}"),
        }
    }

    /// The name of the target for a message of the bench.
    fn shown_name(&self) -> String {
        let name = self.name(self.circuit.target);
        name.trim_start_matches('\\').trim_end().replace('%', "%%").replace('"', "'")
    }

    /// Whether an element can move in any step; what the terms of a cover do was not worked out.
    fn moves(&self, element: usize) -> bool {
        let waves = &self.circuit.elements[element].waves;
        waves.is_empty() || waves.iter().any(|wave| wave.moves())
    }

    /// What a pin reads: its wire when it moves, else its driver.
    fn pin(&self, element: usize, pin: usize) -> String {
        let driver = self.circuit.elements[element].pins[pin];
        if self.moves(driver) { format!("w{element}_{pin}") } else { self.name(driver) }
    }

    fn wires(&self) -> usize {
        let pins = self.circuit.elements.iter().flat_map(|element| &element.pins);
        pins.filter(|&&driver| self.moves(driver)).count()
    }

    /// Declarations, wires and gates.
    fn body(&self) -> String {
        let mut text =
            String::from("  // 0 before the stimulus, then the number of its step.\n  integer step, changes, start;\n");
        let mut wire = 0;
        for (at, element) in self.circuit.elements.iter().enumerate() {
            let name = self.name(at);
            let timing = &self.plan.timings[at];
            let before = u8::from(self.before(at));
            for (pin, &driver) in element.pins.iter().enumerate().filter(|(_, driver)| self.moves(**driver)) {
                let delay = if self.random { format!("(d[{wire}])") } else { timing.pins[pin].to_string() };
                wire += 1;
                let (to, from) = (self.pin(at, pin), self.name(driver));
                let value = u8::from(self.before(driver));
                let _ = writeln!(text, "  reg {to} = 1'b{value}; always @({from}) {to} <= #{delay} {from};");
            }
            let held = !timing.held.is_empty() && !self.random;
            let drives = if held || timing.flip.is_some() { format!("raw{at}") } else { name.clone() };
            match &element.op {
                Op::Given => {
                    let _ = writeln!(text, "  reg {name} = 1'b{before};");
                }
                Op::Const(value) => {
                    let _ = writeln!(text, "  wire {name} = 1'b{};", u8::from(*value));
                }
                Op::Gate(kind) => {
                    let pins: Vec<String> = (0..element.pins.len()).map(|pin| self.pin(at, pin)).collect();
                    let _ = writeln!(text, "  wire {drives}; {} g{at} ({drives}, {});", kind.name(), pins.join(", "));
                }
                Op::Table(table) => {
                    let value = self.table(at, table);
                    let _ = writeln!(text, "  wire {drives} = {value};");
                }
                Op::Late => {
                    let _ = writeln!(text, "  // A latch that opens as the step begins.");
                    let data = self.pin(at, 0);
                    let _ =
                        writeln!(text, "  wire {drives} = (step == {}) ? {data} : 1'b{before};", self.plan.step + 1);
                }
                Op::Entry => text += &self.entry(at, &drives),
            }
            text += &self.flip(at, timing, &drives, &name, held);
            if held {
                text += &self.held(at, timing, &name);
            }
        }
        let target = self.name(self.circuit.target);
        let value = u8::from(self.before(self.circuit.target));
        // What lasts no time is no pulse: the copy is taken when all of one time has happened.
        let _ = writeln!(text, "  reg seen = 1'b{value}; always @({target}) seen <= {target};");
        let _ = writeln!(text, "  always @(seen) if (step > 0) changes = changes + 1;");
        text
    }

    fn before(&self, element: usize) -> bool {
        match self.circuit.elements[element].waves.first() {
            Some(wave) => wave.i,
            None => {
                let element = &self.circuit.elements[element];
                let pins: Vec<bool> = element.pins.iter().map(|&pin| self.before(pin)).collect();
                delays::settled(&element.op, &pins)
            }
        }
    }

    fn table(&self, at: usize, table: &Promises) -> String {
        let mut text = String::new();
        for (needs, value) in &table.function {
            let literals: Vec<String> = needs
                .iter()
                .enumerate()
                .filter_map(|(pin, need)| match need {
                    Need::Value(true) => Some(self.pin(at, pin)),
                    Need::Value(false) => Some(format!("~{}", self.pin(at, pin))),
                    Need::Still | Need::Nothing => None,
                })
                .collect();
            let fits = if literals.is_empty() { "1'b1".to_string() } else { literals.join(" & ") };
            let _ = write!(text, "({fits}) ? 1'b{} : ", u8::from(*value));
        }
        text + "1'b0"
    }

    fn entry(&self, at: usize, drives: &str) -> String {
        let pin = self.pin(at, 0);
        let value = u8::from(self.before(at));
        if !self.moves(self.circuit.elements[at].pins[0]) {
            return format!("  wire {drives} = {pin};\n");
        }
        format!(
            "  // Into arithmetic whose implementation nobody fixed: a change may bounce there.\n  \
             reg {drives} = 1'b{value}; always @({pin}) begin {drives} <= #1 {pin}; \
             if (step > 0) begin {drives} <= #2 ~{pin}; {drives} <= #3 {pin}; end end\n"
        )
    }

    fn flip(&self, at: usize, timing: &Timing, drives: &str, name: &str, held: bool) -> String {
        let Some((pin, delay)) = timing.flip else { return String::new() };
        let step = self.plan.step + 1;
        let pin = self.pin(at, pin);
        let out = if held { format!("flipped{at}") } else { name.to_string() };
        format!(
            "  // No row of the primitive's table holds its output while {pin} changes.\n  \
             reg flip{at} = 1'b0; always @({pin}) if (step == {step}) begin flip{at} <= #{delay} 1'b1; \
             flip{at} <= #{} 1'b0; end\n  wire {out} = {drives} ^ flip{at};\n",
            delay + 1
        )
    }

    /// The wire that varies from change to change.
    fn held(&self, at: usize, timing: &Timing, name: &str) -> String {
        let raw = if timing.flip.is_some() { format!("flipped{at}") } else { format!("raw{at}") };
        let mut delay = String::from("1");
        for (until, arrival) in timing.held.iter().rev() {
            delay = format!("$time - start <= {until} ? {arrival} - ($time - start) : {delay}");
        }
        let step = self.plan.step + 1;
        format!(
            "  reg {name} = 1'b{}; always @({raw}) {name} <= #(step != {step} ? 1 : {delay}) {raw};\n",
            u8::from(self.before(at))
        )
    }

    fn given(&self) -> impl Iterator<Item = (usize, &Element)> {
        self.circuit.elements.iter().enumerate().filter(|(_, element)| matches!(element.op, Op::Given))
    }

    /// Brings every source back to where it was before the first step.
    fn rest(&self, indent: &str) -> String {
        let moving = self.given().filter(|&(at, _)| self.moves(at));
        moving.map(|(at, _)| format!("{indent}{} <= 1'b{};\n", self.name(at), u8::from(self.before(at)))).collect()
    }

    /// The changes of the sources in one step, all at once.
    fn stimulus(&self, step: usize, indent: &str) -> String {
        let mut text = format!("{indent}step = {}; start = $time;\n", step + 1);
        for (at, element) in self.given() {
            let wave = element.waves.get(step).copied().unwrap_or(Wave::constant(false));
            for (time, value) in delays::stimulus(wave).values() {
                let delay = if time == 0 { String::new() } else { format!("#{time} ") };
                let _ = writeln!(text, "{indent}{} <= {delay}1'b{};", self.name(at), u8::from(value));
            }
        }
        text
    }

    /// No change is under way longer than this when every delay is drawn at random.
    fn longest_way(&self) -> u64 {
        let mut ways: Vec<u64> = Vec::with_capacity(self.circuit.elements.len());
        for (element, timing) in self.circuit.elements.iter().zip(&self.plan.timings) {
            let before = element.pins.iter().map(|&pin| ways[pin]).max().map_or(4, |way| way + LONGEST);
            let inside = if matches!(element.op, Op::Entry) { 3 } else { 0 };
            ways.push(before + inside + timing.flip.map_or(0, |(_, delay)| delay + 1));
        }
        ways.last().copied().unwrap_or(0).max(ways.get(self.circuit.target).copied().unwrap_or(0))
    }
}
