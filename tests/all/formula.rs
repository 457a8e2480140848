//! Circuits in the notation of textbooks: `A'C` is an AND with an inverted literal, `+` an OR, `(AB)'` a NAND. One line of
//! it becomes both Verilog for the program and a circuit for the explorer, gate by gate as written, so that a published
//! example stands in the tests as it stands in print.

use std::fmt::Write;

use crate::explorer::{Circuit, Op, Pin};

/// An expression as written.
#[derive(Clone, PartialEq, Eq, Debug)]
enum Formula {
    Name(String),
    Not(Box<Formula>),
    Product(Vec<Formula>),
    Sum(Vec<Formula>),
}

/// A circuit given by definitions `name = formula` in order; the last one is the target.
pub struct Published {
    inputs: Vec<String>,
    definitions: Vec<(String, Formula)>,
}

impl Published {
    /// `inputs` in the order of the published vectors; each definition may use inputs and earlier names. A name is a
    /// letter followed by digits. A definition without `=` defines `f`.
    pub fn new(inputs: &[&str], definitions: &[&str]) -> Self {
        let definitions = definitions
            .iter()
            .map(|text| {
                let (name, formula) = text.split_once('=').unwrap_or(("f", text));
                let mut reader = Reader { text: formula.replace(' ', "").into_bytes(), at: 0 };
                let formula = reader.sum();
                assert_eq!(reader.at, reader.text.len(), "{text} is read to its end");
                (name.trim().to_string(), formula)
            })
            .collect();
        Self { inputs: inputs.iter().map(|input| (*input).to_string()).collect(), definitions }
    }

    pub fn inputs(&self) -> &[String] {
        &self.inputs
    }

    /// The name of the target.
    pub fn target(&self) -> &str {
        &self.definitions[self.definitions.len() - 1].0
    }

    /// For the explorer; `None` when the target is an input.
    pub fn circuit(&self) -> (Circuit, Pin) {
        let mut circuit = Circuit::new(self.inputs.len());
        let mut names: Vec<(&str, Pin)> =
            self.inputs.iter().enumerate().map(|(at, name)| (name.as_str(), Pin::Input(at))).collect();
        for (name, formula) in &self.definitions {
            let pin = formula.build(&mut circuit, &names);
            names.push((name, pin));
        }
        (circuit, names[names.len() - 1].1)
    }

    /// A module that marks the target with `watch`.
    pub fn verilog(&self, module: &str) -> String {
        let mut text = format!("module {module} (input {}, input clk, output reg held);\n", self.inputs.join(", "));
        for (at, (name, formula)) in self.definitions.iter().enumerate() {
            let watch = if at + 1 == self.definitions.len() { " // stillwire: watch \"published\"" } else { "" };
            let _ = writeln!(text, "  wire {name};{watch}\n  assign {name} = {};", formula.verilog());
        }
        let _ = writeln!(text, "  always @(posedge clk) held <= {};\nendmodule", self.target());
        text
    }
}

impl Formula {
    fn build(&self, circuit: &mut Circuit, names: &[(&str, Pin)]) -> Pin {
        let pins = |formulas: &[Formula], circuit: &mut Circuit| -> Vec<Pin> {
            formulas.iter().map(|formula| formula.build(circuit, names)).collect()
        };
        match self {
            Formula::Name(name) => {
                let found = names.iter().find(|(known, _)| known == name);
                found.unwrap_or_else(|| panic!("{name} is not defined")).1
            }
            Formula::Not(inner) => {
                let (op, pins) = match inner.as_ref() {
                    Formula::Product(factors) => (Op::Nand, pins(factors, circuit)),
                    Formula::Sum(terms) => (Op::Nor, pins(terms, circuit)),
                    other => (Op::Not, pins(std::slice::from_ref(other), circuit)),
                };
                circuit.add(op, &pins)
            }
            Formula::Product(factors) => {
                let pins = pins(factors, circuit);
                circuit.add(Op::And, &pins)
            }
            Formula::Sum(terms) => {
                let pins = pins(terms, circuit);
                circuit.add(Op::Or, &pins)
            }
        }
    }

    fn verilog(&self) -> String {
        let join = |formulas: &[Formula], operator: &str| {
            formulas.iter().map(Formula::verilog).collect::<Vec<_>>().join(operator)
        };
        match self {
            Formula::Name(name) => name.clone(),
            Formula::Not(inner) => format!("~{}", inner.verilog()),
            Formula::Product(factors) => format!("({})", join(factors, " & ")),
            Formula::Sum(terms) => format!("({})", join(terms, " | ")),
        }
    }
}

/// A reader of the notation, without white space.
struct Reader {
    text: Vec<u8>,
    at: usize,
}

impl Reader {
    fn peek(&self) -> Option<u8> {
        self.text.get(self.at).copied()
    }

    fn sum(&mut self) -> Formula {
        let mut terms = vec![self.product()];
        while self.peek() == Some(b'+') {
            self.at += 1;
            terms.push(self.product());
        }
        if terms.len() == 1 { terms.remove(0) } else { Formula::Sum(terms) }
    }

    fn product(&mut self) -> Formula {
        let mut factors = Vec::new();
        while matches!(self.peek(), Some(byte) if byte != b'+' && byte != b')') {
            factors.push(self.factor());
        }
        assert!(!factors.is_empty(), "a product has a factor");
        if factors.len() == 1 { factors.remove(0) } else { Formula::Product(factors) }
    }

    fn factor(&mut self) -> Formula {
        let mut formula = match self.peek() {
            Some(b'(') => {
                self.at += 1;
                let inner = self.sum();
                assert_eq!(self.peek(), Some(b')'), "a closing parenthesis");
                self.at += 1;
                inner
            }
            Some(byte) if byte.is_ascii_alphabetic() => {
                let start = self.at;
                self.at += 1;
                while matches!(self.peek(), Some(byte) if byte.is_ascii_digit()) {
                    self.at += 1;
                }
                Formula::Name(String::from_utf8_lossy(&self.text[start..self.at]).into_owned())
            }
            other => panic!("unexpected {other:?}"),
        };
        while self.peek() == Some(b'\'') {
            self.at += 1;
            formula = Formula::Not(Box::new(formula));
        }
        formula
    }
}
