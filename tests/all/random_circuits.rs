//! Exactness on random circuits: 2,000 of them, each written as Verilog, read by the whole pipeline, and compared with the
//! [`crate::explorer`], which knows neither the product's graph nor its algebra. The sets of (changing source, kind)
//! pairs must be equal: a pair too few is a false "clean", a pair too many a false alarm.
//!
//! The circuits come from a generator seeded with their number, so a failure is repeated by its seed. All gate kinds occur,
//! as primitives, as operators, folded into longer expressions, and as selectors; the target is a clock pin, a set or
//! reset pin, a latch enable, or a watched net or output, in turn.

use std::collections::BTreeSet;
use std::fmt::Write;

use crate::explorer::{Circuit, Glitch, Op, Pin, Seen, glitches, transition};
use crate::pipeline::{Hazard, Scan, hazards, pairs, scan_text};

/// How many circuits are compared, and the number of the first.
const CIRCUITS: u64 = 2_000;
const FIRST_SEED: u64 = 1;

/// The generator of Steele, Lea and Flood (SplitMix64, 2014): small, and the same on every machine.
pub struct Random(u64);

impl Random {
    pub fn new(seed: u64) -> Self {
        Self(seed)
    }

    pub fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ z >> 30).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ z >> 27).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ z >> 31
    }

    pub fn below(&mut self, bound: usize) -> usize {
        (self.next() % bound as u64) as usize
    }

    /// True in `percent` of 100 cases.
    pub fn chance(&mut self, percent: usize) -> bool {
        self.below(100) < percent
    }
}

/// How a gate is written.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Form {
    Primitive,
    /// An `assign` of its own.
    Assign,
    /// Part of the expression of the one gate that reads it.
    Inline,
    /// The last gate of a selector written with `?:`, and with `if` and `else`.
    Select,
    If,
    /// One of the other three gates of a selector.
    Inside,
}

/// A circuit and the way it is written.
pub struct Written {
    pub circuit: Circuit,
    pub target: usize,
    forms: Vec<Form>,
    /// Picks between spellings of the same operator.
    spelling: Vec<usize>,
}

impl Written {
    /// 3 to 6 inputs, 4 to 12 gates; the last gate is the target.
    pub fn random(random: &mut Random) -> Self {
        let inputs = 3 + random.below(4);
        let count = 4 + random.below(9);
        let mut circuit = Circuit::new(inputs);
        let mut forms = Vec::new();
        let mut unread: Vec<usize> = Vec::new();
        while circuit.gates.len() < count {
            let left = count - circuit.gates.len();
            if left >= 4 && random.chance(15) {
                let pins: Vec<Pin> = (0..3).map(|_| pick(random, &circuit, &forms, &mut unread, false)).collect();
                let inverted = circuit.add(Op::Not, &pins[..1]);
                let upper = circuit.add(Op::And, &[pins[0], pins[1]]);
                let lower = circuit.add(Op::And, &[inverted, pins[2]]);
                circuit.add(Op::Or, &[upper, lower]);
                forms.extend([Form::Inside; 3]);
                forms.push(if random.chance(50) { Form::Select } else { Form::If });
            } else {
                let op = OPS[random.below(OPS.len())];
                let width = match op {
                    Op::Buf | Op::Not => 1,
                    // The target reads what nobody else reads, so that the circuit hangs together.
                    _ if left == 1 => unread.len().clamp(2, 4),
                    _ => [2, 2, 2, 3, 3, 4][random.below(6)],
                };
                let mut pins: Vec<Pin> = Vec::new();
                while pins.len() < width {
                    let pin = pick(random, &circuit, &forms, &mut unread, left == 1);
                    // Two pins on one net stay possible but rare.
                    if !pins.contains(&pin) || random.chance(15) {
                        pins.push(pin);
                    }
                }
                circuit.add(op, &pins);
                forms.push(if random.chance(50) { Form::Primitive } else { Form::Assign });
            }
            unread.push(circuit.gates.len() - 1);
        }
        let spelling = forms.iter().map(|_| random.below(12)).collect();
        let mut written = Self { target: count - 1, circuit, forms, spelling };
        written.inline_some(random);
        written
    }

    /// Folds some gates that have one reader into the expression of that reader.
    fn inline_some(&mut self, random: &mut Random) {
        for index in 0..self.target {
            let readers: Vec<usize> = (0..self.circuit.gates.len())
                .flat_map(|reader| self.circuit.gates[reader].pins.iter().map(move |pin| (reader, *pin)))
                .filter(|&(_, pin)| pin == Pin::Gate(index))
                .map(|(reader, _)| reader)
                .collect();
            if let [reader] = readers[..]
                && self.forms[index] == Form::Assign
                && self.forms[reader] == Form::Assign
                && random.chance(60)
            {
                self.forms[index] = Form::Inline;
            }
        }
    }

    /// The declarations and statements of all gates; the target is the net `y`, the inputs are `i0`, `i1`, ...
    pub fn body(&self) -> String {
        let mut text = String::new();
        for (index, form) in self.forms.iter().enumerate() {
            let name = self.name(index);
            let gate = &self.circuit.gates[index];
            let net = if *form == Form::If { "reg" } else { "wire" };
            if !matches!(form, Form::Inside | Form::Inline) && index != self.target {
                let _ = writeln!(text, "  {net} {name};");
            }
            let _ = match form {
                Form::Inside | Form::Inline => Ok(()),
                Form::Primitive => {
                    let pins: Vec<String> = gate.pins.iter().map(|&pin| self.operand(pin)).collect();
                    writeln!(text, "  {} g{index} ({name}, {});", primitive(gate.op), pins.join(", "))
                }
                Form::Assign => writeln!(text, "  assign {name} = {};", self.expression(index)),
                Form::Select => {
                    let [select, then, otherwise] = self.selector(index);
                    writeln!(text, "  assign {name} = {select} ? {then} : {otherwise};")
                }
                Form::If => {
                    let [select, then, otherwise] = self.selector(index);
                    writeln!(text, "  always @* if ({select}) {name} = {then}; else {name} = {otherwise};")
                }
            };
        }
        text
    }

    /// `wire` or `reg`, as the statement that drives the target needs it.
    pub fn target_net(&self) -> &'static str {
        if self.forms[self.target] == Form::If { "reg" } else { "wire" }
    }

    fn name(&self, gate: usize) -> String {
        if gate == self.target { "y".to_string() } else { format!("n{gate}") }
    }

    /// The select, then and else operands of the selector whose last gate is `index`.
    fn selector(&self, index: usize) -> [String; 3] {
        let upper = &self.circuit.gates[index - 2].pins;
        let lower = &self.circuit.gates[index - 1].pins;
        [upper[0], upper[1], lower[1]].map(|pin| self.operand(pin))
    }

    fn operand(&self, pin: Pin) -> String {
        match pin {
            Pin::Input(input) => format!("i{input}"),
            Pin::Constant(value) => format!("1'b{}", u8::from(value)),
            Pin::Gate(gate) if self.forms[gate] == Form::Inline => format!("({})", self.expression(gate)),
            Pin::Gate(gate) => self.name(gate),
        }
    }

    fn expression(&self, index: usize) -> String {
        let gate = &self.circuit.gates[index];
        let pins: Vec<String> = gate.pins.iter().map(|&pin| self.operand(pin)).collect();
        let spelling = self.spelling[index];
        let (inverts, operators, reduction) = match gate.op {
            Op::Buf => return pins[0].clone(),
            Op::Not => return format!("{}{}", ["~", "!"][spelling % 2], pins[0]),
            Op::And => (false, [" & ", " && "], "&"),
            Op::Nand => (true, [" & ", " && "], "~&"),
            Op::Or => (false, [" | ", " || "], "|"),
            Op::Nor => (true, [" | ", " || "], "~|"),
            Op::Xor => (false, [" ^ ", " ^ "], "^"),
            Op::Xnor => (true, [" ^ ", " ^ "], "~^"),
        };
        match (spelling % 4, pins.len(), gate.op) {
            (0, _, _) => format!("{reduction}{{{}}}", pins.join(", ")),
            (1, 2, Op::Xnor) => pins.join(" ~^ "),
            (2, 2, Op::Xnor) => format!("{} == {}", pins[0], pins[1]),
            (2, 2, Op::Xor) => format!("{} != {}", pins[0], pins[1]),
            (_, _, _) => {
                let joined = pins.join(operators[spelling / 4 % 2]);
                if inverts { format!("~({joined})") } else { joined }
            }
        }
    }
}

const OPS: [Op; 21] = [
    Op::Buf,
    Op::Not,
    Op::Not,
    Op::Not,
    Op::And,
    Op::And,
    Op::And,
    Op::And,
    Op::Nand,
    Op::Nand,
    Op::Nand,
    Op::Or,
    Op::Or,
    Op::Or,
    Op::Or,
    Op::Nor,
    Op::Nor,
    Op::Nor,
    Op::Xor,
    Op::Xor,
    Op::Xnor,
];

fn primitive(op: Op) -> &'static str {
    match op {
        Op::Buf => "buf",
        Op::Not => "not",
        Op::And => "and",
        Op::Nand => "nand",
        Op::Or => "or",
        Op::Nor => "nor",
        Op::Xor => "xor",
        Op::Xnor => "xnor",
    }
}

/// A driver for the next pin: an input, an earlier gate, rarely a constant.
fn pick(random: &mut Random, circuit: &Circuit, forms: &[Form], unread: &mut Vec<usize>, gather: bool) -> Pin {
    if !unread.is_empty() && (gather || random.chance(35)) {
        return Pin::Gate(unread.swap_remove(random.below(unread.len())));
    }
    let gates: Vec<usize> = (0..circuit.gates.len()).filter(|&gate| forms[gate] != Form::Inside).collect();
    if !gates.is_empty() && random.chance(25) {
        return Pin::Gate(gates[random.below(gates.len())]);
    }
    if random.chance(3) {
        return Pin::Constant(random.chance(50));
    }
    Pin::Input(random.below(circuit.inputs))
}

/// What the target of a circuit drives.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Use {
    Clock,
    SetReset,
    LatchEnable,
    Watch,
    Output,
}

impl Use {
    fn of(seed: u64) -> Use {
        match seed % 8 {
            0 | 4 => Use::Clock,
            1 | 5 => Use::SetReset,
            2 | 6 => Use::LatchEnable,
            3 => Use::Watch,
            _ => Use::Output,
        }
    }

    fn rule(self) -> &'static str {
        match self {
            Use::Clock => "clock-hazard",
            Use::SetReset => "set-reset-hazard",
            Use::LatchEnable => "latch-enable-hazard",
            Use::Watch | Use::Output => "reconvergent-inversion",
        }
    }
}

/// The whole module `t<seed>`.
pub fn module(seed: u64, written: &Written) -> String {
    let inputs: Vec<String> = (0..written.circuit.inputs).map(|input| format!("i{input}")).collect();
    let inputs = inputs.join(", ");
    let net = written.target_net();
    let variant = seed / 8 % 4;
    let (ports, declaration, cell) = match Use::of(seed) {
        Use::Clock => {
            let edge = ["posedge", "negedge"][variant as usize % 2];
            ("input d, output reg q", format!("{net} y;"), format!("always @({edge} y) q <= d;"))
        }
        Use::SetReset => {
            let (edge, inversion) = [("posedge", ""), ("negedge", "!")][variant as usize % 2];
            let value = ["1'b0", "1'b1", "l", "1'b0"][variant as usize];
            (
                "input c, input d, input l, output reg q",
                format!("{net} y;"),
                format!("always @(posedge c or {edge} y) if ({inversion}y) q <= {value}; else q <= d;"),
            )
        }
        Use::LatchEnable => {
            let inversion = ["", "!"][variant as usize % 2];
            ("input d, output reg q", format!("{net} y;"), format!("always @* if ({inversion}y) q = d;"))
        }
        Use::Watch => {
            let declaration = format!("{net} y; // stillwire: watch \"compared with the explorer\"");
            ("input c, output reg q", declaration, "always @(posedge c) q <= y;".to_string())
        }
        Use::Output => {
            return format!("module t{seed} (input {inputs}, output {net} y);\n{}endmodule\n", written.body());
        }
    };
    format!("module t{seed} (input {inputs}, {ports});\n  {declaration}\n{}  {cell}\nendmodule\n", written.body())
}

/// Compares the findings of one module with the explorer; `Err` says what differs.
fn compare(seed: u64, written: &Written, scan: &Scan) -> Result<(), String> {
    let instance = format!("t{seed}");
    let findings = scan.findings_in(&instance);
    let usage = Use::of(seed);
    let mut found = BTreeSet::new();
    for finding in &findings {
        if finding["rule"] != usage.rule() || finding["verdict"] != "proven" {
            return Err(format!("unexpected {} ({})", finding["rule"], finding["verdict"]));
        }
        let hazards = hazards(finding, &instance);
        for hazard in &hazards {
            replay(written, hazard)?;
        }
        found.extend(pairs(&hazards));
    }
    let expected: BTreeSet<(String, String)> = glitches(&written.circuit, written.target)
        .into_iter()
        .map(|(source, glitch)| (format!("i{source}"), glitch.name().to_string()))
        .collect();
    if usage == Use::Output {
        // An output lists one witness per kind; that the pair is real was seen by the replay.
        let kinds = |pairs: BTreeSet<(String, String)>| pairs.into_iter().map(|pair| pair.1).collect::<BTreeSet<_>>();
        let (found, expected) = (kinds(found), kinds(expected));
        return if found == expected { Ok(()) } else { Err(format!("found {found:?}, the explorer {expected:?}")) };
    }
    if found == expected { Ok(()) } else { Err(format!("found {found:?}, the explorer {expected:?}")) }
}

/// A witness must show its hazard to the explorer whatever the sources it leaves out are.
fn replay(written: &Written, hazard: &Hazard) -> Result<(), String> {
    let number = |name: &String| name.strip_prefix('i').and_then(|digits| digits.parse::<usize>().ok());
    let [Some(source)] = hazard.changes.iter().map(number).collect::<Vec<_>>()[..] else {
        return Err(format!("{:?} is not one input", hazard.changes));
    };
    let (mut fixed, mut vector) = (0u32, 0u32);
    for (name, &value) in &hazard.before {
        let input = number(name).ok_or_else(|| format!("{name} is no input"))?;
        let after = hazard.after.get(name).copied();
        if after != Some(value ^ (input == source)) {
            return Err(format!("the witness changes {name} to {after:?}"));
        }
        fixed |= 1 << input;
        vector |= u32::from(value) << input;
    }
    if fixed >> source & 1 == 0 || hazard.before.len() != hazard.after.len() {
        return Err(format!("the witness {hazard:?} is not a transition"));
    }
    let mut seen = Seen::default();
    for free in (0..1u32 << written.circuit.inputs).filter(|free| free & fixed == 0) {
        let shown = transition(&written.circuit, written.target, vector | free, source, &mut seen);
        if shown.map(Glitch::name) != Some(&hazard.kind) {
            return Err(format!("the witness {hazard:?} shows {shown:?} with the other inputs at {free:b}"));
        }
    }
    Ok(())
}

#[test]
fn the_program_finds_exactly_what_the_explorer_finds() {
    const BATCH: u64 = 100;
    let seeds: Vec<u64> = (FIRST_SEED..FIRST_SEED + CIRCUITS).collect();
    let mut failures = Vec::new();
    let mut hazardous = 0;
    for batch in seeds.chunks(BATCH as usize) {
        let circuits: Vec<(u64, Written)> =
            batch.iter().map(|&seed| (seed, Written::random(&mut Random::new(seed)))).collect();
        let text: String = circuits.iter().map(|(seed, written)| module(*seed, written)).collect();
        let scan = scan_text(&text);
        for (seed, written) in &circuits {
            hazardous += usize::from(!scan.findings_in(&format!("t{seed}")).is_empty());
            if let Err(difference) = compare(*seed, written, &scan) {
                failures.push(format!("seed {seed}: {difference}\n{}", module(*seed, written)));
            }
        }
        let nets: u64 = PINS.iter().map(|kind| scan.pins(kind, "nets")).sum();
        let undecided: u64 = PINS.iter().map(|kind| scan.pins(kind, "undecided")).sum();
        assert_eq!(undecided, 0);
        assert!(nets >= batch.len() as u64, "{nets} pins checked in {} circuits", batch.len());
    }
    assert!(failures.is_empty(), "{} circuits differ, first:\n{}", failures.len(), failures[0]);
    // The generator must keep both answers common, or the comparison says little.
    assert!(hazardous > 600 && hazardous < 1_900, "{hazardous} hazardous circuits");
}

const PINS: [&str; 7] = ["clock", "set", "reset", "load", "latch-enable", "watch", "output"];
