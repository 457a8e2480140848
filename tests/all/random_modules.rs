//! Elaboration checked from outside on random modules: small legal Verilog-2005 with mixed widths and signs, every
//! operator, nested if and case, casez and casex with overlapping labels, partial and indexed assignments, blocking
//! temporaries, functions, flip-flops with asynchronous ladders and latches. Each module and its flattened form run in
//! `iverilog` side by side, as [`crate::simulator`] does for the fixtures.
//!
//! Everything generated is free of races and of unknown values, since there a simulator and gates rightly differ: divisors
//! are odd, indices stay in range, and a latch's data does not depend on its enable.

use std::fmt::Write;

use crate::simulator::{Random, Trial, run};

struct Signal {
    name: String,
    width: usize,
    signed: bool,
    /// The index of the least significant bit.
    low: usize,
    /// Declared `[low:high]`.
    ascending: bool,
}

impl Signal {
    fn range(&self) -> String {
        let (low, high) = (self.low, self.low + self.width - 1);
        let sign = if self.signed { "signed " } else { "" };
        if self.ascending { format!("{sign}[{low}:{high}]") } else { format!("{sign}[{high}:{low}]") }
    }

    /// `count` bits from offset `at` on, counted from the lowest index.
    fn part(&self, at: usize, count: usize) -> String {
        let (low, high) = (self.low + at, self.low + at + count - 1);
        if self.ascending { format!("{}[{low}:{high}]", self.name) } else { format!("{}[{high}:{low}]", self.name) }
    }
}

struct Function {
    name: String,
    args: usize,
}

struct Generator {
    random: Random,
    /// What an expression may read.
    readable: Vec<Signal>,
    functions: Vec<Function>,
    text: String,
    number: usize,
}

impl Generator {
    fn chance(&mut self, one_in: usize) -> bool {
        self.random.below(one_in) == 0
    }

    fn pick<'t>(&mut self, words: &[&'t str]) -> &'t str {
        words[self.random.below(words.len())]
    }

    fn width(&mut self) -> usize {
        if self.chance(3) { 1 + self.random.below(3) } else { 1 + self.random.below(11) }
    }

    fn signal(&mut self, stem: &str) -> Signal {
        self.number += 1;
        let width = self.width();
        Signal {
            name: format!("{stem}{}", self.number),
            width,
            signed: self.chance(2),
            low: if self.chance(3) { self.random.below(4) } else { 0 },
            ascending: self.chance(5),
        }
    }

    fn literal(&mut self) -> String {
        let value = self.random.next() & 0xfff;
        match self.random.below(8) {
            0 => format!("{}", value % 20),
            1 => format!("(-{})", value % 9),
            2 => format!("{}'sd{}", 2 + self.random.below(8), value % 4),
            3 => format!("{}'sb{:b}", 1 + self.random.below(6), value % 64),
            4 => format!("{}'h{:x}", 1 + self.random.below(12), value),
            5 => format!("'h{:x}", value % 300),
            6 => format!("'sd{}", value % 30),
            _ => format!("{}'b{:b}", 1 + self.random.below(8), value % 256),
        }
    }

    fn leaf(&mut self) -> String {
        if self.chance(5) {
            return self.literal();
        }
        let index = self.random.below(self.readable.len());
        let shape = self.random.below(8);
        let at = self.random.below(self.readable[index].width);
        let count = 1 + self.random.below(self.readable[index].width - at);
        let signal = &self.readable[index];
        // IEEE 1364-2005, 5.5.1: a select is unsigned even when it is the whole vector; this simulator keeps its sign.
        if signal.signed && count == signal.width {
            return signal.name.clone();
        }
        match shape {
            0 if signal.width > 1 => format!("{}[{}]", signal.name, signal.low + at),
            1 => signal.part(at, count),
            2 => format!("{}[{} +: {count}]", signal.name, signal.low + at),
            3 => format!("{}[{} -: {count}]", signal.name, signal.low + at + count - 1),
            _ => signal.name.clone(),
        }
    }

    fn expr(&mut self, depth: usize) -> String {
        if depth == 0 || self.chance(8) {
            return self.leaf();
        }
        let a = self.expr(depth - 1);
        let below = depth - 1;
        match self.random.below(22) {
            0 | 1 => {
                let op = self.pick(&["~", "-", "+", "!", "&", "|", "^", "~&", "~|", "~^"]);
                format!("({op}({a}))")
            }
            2..=5 => {
                let op = self.pick(&["+", "-", "*", "&", "|", "^", "~^", "+", "-"]);
                if op == "*" {
                    return format!("({} * {})", self.leaf(), self.leaf());
                }
                format!("({a} {op} {})", self.expr(below))
            }
            6..=8 => {
                let op = self.pick(&["==", "!=", "<", "<=", ">", ">=", "===", "!==", "&&", "||"]);
                format!("({a} {op} {})", self.expr(below))
            }
            9..=11 => {
                let op = self.pick(&["<<", ">>", "<<<", ">>>", ">>>", ">>"]);
                let amount = if self.chance(2) { self.leaf() } else { format!("{}", self.random.below(7)) };
                format!("({a} {op} {amount})")
            }
            12..=14 => {
                let (b, c) = (self.expr(below), self.expr(below));
                format!("({a} ? {b} : {c})")
            }
            15 => {
                let (a, b) = (self.sized(below), self.sized(below.min(1)));
                format!("{{{a}, {b}}}")
            }
            16 => {
                let a = self.sized_leaf();
                format!("{{{}{{{a}}}}}", 1 + self.random.below(3))
            }
            17 => format!("$signed({a})"),
            18 => format!("$unsigned({a})"),
            19 => {
                let op = self.pick(&["/", "%"]);
                let (a, divisor) = (self.leaf(), format!("{{{}, 1'b1}}", self.sized_leaf()));
                if self.chance(2) { format!("({a} {op} $signed({divisor}))") } else { format!("({a} {op} {divisor})") }
            }
            20 => {
                let small = format!("{}'d{}", 2, self.random.below(4));
                format!("({} ** {small})", self.leaf())
            }
            _ if !self.functions.is_empty() => {
                let at = self.random.below(self.functions.len());
                let (name, args) = (self.functions[at].name.clone(), self.functions[at].args);
                let args: Vec<String> = (0..args).map(|_| self.expr(below.min(1))).collect();
                format!("{name}({})", args.join(", "))
            }
            _ => a,
        }
    }

    /// A name, which has a size wherever it stands.
    fn sized_leaf(&mut self) -> String {
        let at = self.random.below(self.readable.len());
        self.readable[at].name.clone()
    }

    /// Something that may stand in a concatenation: no unsized literal decides its width.
    fn sized(&mut self, depth: usize) -> String {
        let inner = if depth == 0 { self.sized_leaf() } else { self.expr(depth) };
        match self.random.below(3) {
            0 => self.sized_leaf(),
            1 => format!("(|({inner}))"),
            _ => {
                let name = self.sized_leaf();
                format!("({name} ^ {})", self.sized_leaf())
            }
        }
    }

    /// Something to assign to: the whole, a part, or a bit chosen by a variable that cannot leave the range.
    fn target(&mut self, signal: &Signal) -> String {
        let at = self.random.below(signal.width);
        let count = 1 + self.random.below(signal.width - at);
        match self.random.below(8) {
            0 => format!("{}[{}]", signal.name, signal.low + at),
            1 => signal.part(at, count),
            2 => format!("{}[{} +: {count}]", signal.name, signal.low + at),
            3 if signal.width >= 2 => {
                let index = self.sized_leaf();
                let bits = if signal.width >= 4 { 2 } else { 1 };
                let (low, condition) = (signal.low, format!("({index} ^ ({index} >> 1))"));
                format!("{}[({condition} & {}) + {low}]", signal.name, (1 << bits) - 1)
            }
            4 if signal.width >= 4 && !signal.ascending => {
                let index = self.sized_leaf();
                format!("{}[({index} & 1) + {} +: 2]", signal.name, signal.low + 1)
            }
            _ => signal.name.clone(),
        }
    }

    fn statement(&mut self, targets: &[Signal], assign: &str, depth: usize) -> String {
        let at = self.random.below(targets.len());
        if depth == 0 {
            if targets.len() > 1 && self.chance(6) {
                let names: Vec<&str> = targets.iter().map(|signal| signal.name.as_str()).collect();
                return format!("{{{}}} {assign} {};", names.join(", "), self.expr(2));
            }
            let target = self.target(&targets[at]);
            return format!("{target} {assign} {};", self.expr(2));
        }
        match self.random.below(7) {
            0 | 1 => {
                let mut text = format!("if ({}) {}", self.expr(2), self.block(targets, assign, depth - 1));
                while self.chance(3) {
                    let _ = write!(text, " else if ({}) {}", self.expr(1), self.block(targets, assign, depth - 1));
                }
                if self.chance(2) {
                    let _ = write!(text, " else {}", self.block(targets, assign, depth - 1));
                }
                text
            }
            2..=4 => self.case(targets, assign, depth),
            5 if assign == "=" => {
                self.number += 1;
                let index = format!("i{}", self.number);
                let _ = writeln!(self.text, "  integer {index};");
                let count = 1 + self.random.below(4);
                let signal = &targets[at];
                let count = count.min(signal.width);
                let value = self.expr(1);
                format!(
                    "for ({index} = 0; {index} < {count}; {index} = {index} + 1) {}[{index} + {}] = ({value}) >> {index};",
                    signal.name, signal.low
                )
            }
            _ => self.block(targets, assign, depth - 1),
        }
    }

    fn case(&mut self, targets: &[Signal], assign: &str, depth: usize) -> String {
        let keyword = self.pick(&["case", "case", "casez", "casex"]);
        let reverse = self.chance(5);
        let index = self.random.below(self.readable.len());
        let (name, width) = (self.readable[index].name.clone(), self.readable[index].width.min(4));
        let subject = match self.random.below(3) {
            0 => self.expr(2),
            1 => name,
            _ => {
                let signal = &self.readable[index];
                if width == signal.width { signal.name.clone() } else { signal.part(0, width) }
            }
        };
        let mut text = if reverse { format!("{keyword} (1'b1)") } else { format!("{keyword} ({subject})") };
        let mut values: Vec<usize> = (0..1 << width).collect();
        let distinct = self.chance(2);
        for _ in 0..1 + self.random.below(if distinct { 1 << width } else { 6 }) {
            let mut labels = Vec::new();
            for _ in 0..1 + self.random.below(2) {
                labels.push(if reverse {
                    self.expr(1)
                } else if distinct {
                    if values.is_empty() {
                        continue;
                    }
                    let at = self.random.below(values.len());
                    format!("{width}'d{}", values.swap_remove(at))
                } else if self.chance(6) {
                    self.expr(1)
                } else {
                    let digits = match keyword {
                        "casez" => "01?z",
                        "casex" => "01?x",
                        _ => "0101",
                    };
                    let label: String =
                        (0..width).map(|_| char::from(digits.as_bytes()[self.random.below(4)])).collect();
                    let sign = if self.chance(4) { "s" } else { "" };
                    format!("{width}'{sign}b{label}")
                });
            }
            if labels.is_empty() {
                break;
            }
            let body = self.block(targets, assign, depth - 1);
            let _ = write!(text, " {}: {body}", labels.join(", "));
        }
        if self.chance(2) {
            let body = self.block(targets, assign, depth - 1);
            let _ = write!(text, " default: {body}");
        }
        text + " endcase"
    }

    fn block(&mut self, targets: &[Signal], assign: &str, depth: usize) -> String {
        let count = if self.chance(3) { 2 } else { 1 };
        let statements: Vec<String> = (0..count).map(|_| self.statement(targets, assign, depth)).collect();
        format!("begin {} end", statements.join(" "))
    }

    fn declare(&mut self, keyword: &str, signal: &Signal) {
        let _ = writeln!(self.text, "  {keyword} {} {};", signal.range(), signal.name);
    }

    fn combinational(&mut self) {
        let targets: Vec<Signal> = (0..1 + self.random.below(3)).map(|_| self.signal("c")).collect();
        targets.iter().for_each(|target| self.declare("reg", target));
        let defaults: Vec<String> = targets
            .iter()
            .map(|target| format!("{} = {} ^ {};", target.name, self.expr(2), self.sized_leaf()))
            .collect();
        let body: Vec<String> = (0..1 + self.random.below(3)).map(|_| self.statement(&targets, "=", 2)).collect();
        let _ =
            writeln!(self.text, "  always @* begin\n    {}\n    {}\n  end", defaults.join(" "), body.join("\n    "));
        self.readable.extend(targets);
    }

    fn register(&mut self) {
        let targets: Vec<Signal> = (0..1 + self.random.below(3)).map(|_| self.signal("q")).collect();
        targets.iter().for_each(|target| self.declare("reg", target));
        let load = self.random.below(4);
        let resets: Vec<String> =
            targets.iter().map(|target| format!("{} <= {};", target.name, self.literal())).collect();
        let sets: Vec<String> =
            targets.iter().map(|target| format!("{} <= {};", target.name, self.literal())).collect();
        let body: Vec<String> = (0..1 + self.random.below(2)).map(|_| self.statement(&targets, "<=", 2)).collect();
        let edge = self.pick(&["posedge", "negedge"]);
        let (resets, sets, body) = (resets.join(" "), sets.join(" "), body.join("\n      "));
        let text = match load {
            0 => format!("always @({edge} clk) if (!rst_n) begin {resets} end else begin\n      {body}\n    end"),
            1 => format!(
                "always @({edge} clk or negedge rst_n) if (!rst_n) begin {resets} end else begin\n      {body}\n    end"
            ),
            2 => format!(
                "always @({edge} clk, negedge rst_n, posedge rst2) if (~rst_n) begin {resets} end \
                 else if (rst2) begin {sets} end else begin\n      {body}\n    end"
            ),
            _ => format!(
                "always @({edge} clk or negedge rst_n) begin\n      if (rst_n == 0) begin {resets} end else begin {body} end\n    end"
            ),
        };
        let _ = writeln!(self.text, "  {text}");
        self.readable.extend(targets);
    }

    /// A latch whose enables and resets are inputs that nothing else reads.
    fn latch(&mut self) {
        let target = self.signal("l");
        self.declare("reg", &target);
        let (name, a, b) = (&target.name, self.expr(2), self.expr(2));
        let text = match self.random.below(5) {
            0 => format!("always @* if (en0) {name} = {a};"),
            1 => format!("always @* if (!en0) {name} = {a}; else if (en1) {name} = {a};"),
            2 => format!("always @* if (en2) {name} = 0; else if (en0) {name} = {a};"),
            3 => format!("always @* case ({{en0, en1}}) 2'b01, 2'b11: {name} = {a}; endcase"),
            _ => format!("always @(*) begin if (en0 && en1) begin {name} = {a}; {name} = {name} ^ ({b}); end end"),
        };
        let _ = writeln!(self.text, "  {text}");
        self.readable.push(target);
    }

    fn function(&mut self) {
        let outer = std::mem::take(&mut self.readable);
        let result = self.signal("f");
        let local = self.signal("v");
        let args: Vec<Signal> = (0..1 + self.random.below(3)).map(|_| self.signal("a")).collect();
        let (name, count) = (result.name.clone(), args.len());
        let mut text = format!("  function {} {name};\n", result.range());
        for arg in &args {
            let _ = writeln!(text, "    input {} {};", arg.range(), arg.name);
        }
        let _ = writeln!(text, "    reg {} {};", local.range(), local.name);
        self.readable = args;
        let (first, second) = (self.expr(2), self.expr(2));
        let _ = writeln!(text, "    begin\n      {} = {first};\n      {name} = {second};", local.name);
        let outer_text = std::mem::take(&mut self.text);
        let targets = [local, result];
        let body = self.statement(&targets, "=", 2);
        let [local, result] = targets;
        text += &self.text;
        self.text = outer_text;
        self.readable.push(local);
        let last = self.expr(2);
        // Declarations come first, whatever the body needed.
        let _ = writeln!(text, "      {body}\n      {name} = {} ^ ({last});\n    end\n  endfunction", result.name);
        let (declarations, rest): (Vec<&str>, Vec<&str>) =
            text.lines().partition(|line| line.starts_with("  integer "));
        for line in rest {
            let _ = writeln!(self.text, "{line}");
            if line.contains("    reg ") {
                declarations.iter().for_each(|line| self.text += &format!("  {line}\n"));
            }
        }
        self.readable = outer;
        self.functions.push(Function { name, args: count });
    }

    fn module(seed: u64, name: &str) -> String {
        let mut this = Generator {
            random: Random::new(seed),
            readable: Vec::new(),
            functions: Vec::new(),
            text: String::new(),
            number: 0,
        };
        for _ in 0..3 {
            this.random.next();
        }
        let inputs: Vec<Signal> = (0..3).map(|_| this.signal("i")).collect();
        let mut header: Vec<String> =
            ["clk", "rst_n", "rst2", "en0", "en1", "en2"].map(|port| format!("  input {port}")).into();
        header.extend(inputs.iter().map(|input| format!("  input {} {}", input.range(), input.name)));
        this.readable = inputs;
        if this.chance(2) {
            this.function();
        }
        for _ in 0..3 + this.random.below(4) {
            match this.random.below(7) {
                0 | 1 => {
                    let wire = this.signal("w");
                    let value = this.expr(4);
                    let _ = writeln!(this.text, "  wire {} {} = {value};", wire.range(), wire.name);
                    this.readable.push(wire);
                }
                2..=4 => this.combinational(),
                5 => this.register(),
                _ => this.latch(),
            }
        }
        let mut body = String::new();
        for (at, signal) in this.readable.iter().enumerate().skip(3) {
            header.push(format!("  output {} o{at}", signal.range()));
            let _ = writeln!(body, "  assign o{at} = {};", signal.name);
        }
        format!("module {name} (\n{}\n);\n{}{body}endmodule\n", header.join(",\n"), this.text)
    }
}

#[test]
#[ignore = "outside: run tests/outside/run"]
#[allow(clippy::print_stdout, reason = "how much was compared belongs to the result of an outside check")]
fn random_modules_simulate_like_their_flattened_form() {
    let number =
        |name: &str, default: u64| std::env::var(name).ok().and_then(|text| text.parse().ok()).unwrap_or(default);
    let (first, count) = (number("STILLWIRE_FIRST", 1), number("STILLWIRE_MODULES", 100));
    let folder = tempfile::tempdir().expect("a temporary folder");
    let mut failures = Vec::new();
    let mut compared = 0;
    for seed in first..first + count {
        let top = format!("random{seed}");
        let file = folder.path().join(format!("{top}.v"));
        let text = Generator::module(seed, &top);
        std::fs::write(&file, &text).expect("written");
        let ports = text.lines().filter_map(|line| line.strip_prefix("  output ")?.rsplit(' ').next());
        let quiet: Vec<String> = ports.map(|name| name.trim_end_matches(',').to_string()).collect();
        let trial = Trial {
            paths: vec![file.clone()],
            options: Vec::new(),
            files: vec![file.clone()],
            top: top.clone(),
            cycles: 120,
            reset_every: 20,
            stimuli: Vec::new(),
            quiet: quiet.iter().map(String::as_str).collect(),
            preset: true,
            renamed: Vec::new(),
        };
        match run(&trial) {
            Ok(counts) => compared += counts.compared,
            Err(message) => {
                println!("{top}: {message}\n{text}");
                failures.push(format!("{top}: {message}"));
            }
        }
    }
    println!("{compared} bits compared");
    assert!(failures.is_empty(), "{} of {count}:\n{}", failures.len(), failures.join("\n\n"));
}
