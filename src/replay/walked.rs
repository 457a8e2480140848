//! The replay of a hazard for which the feedback of a loop has to move: the gates that move as a circuit with its loop
//! closed, and the order in which delays let them and their wires move, one move each unit of time. Each element takes
//! what it hears at that moment, which is all that a delay can do; the bench checks that it hears what the analysis says,
//! and that nothing is left to move at the end.

use std::collections::BTreeMap;
use std::fmt::Write;

use super::bench::{Head, REST};
use super::circuit::{Circuit, Element, Op};
use super::delays::Shown;
use super::signal::Signal;
use crate::graph::{Graph, NodeId, NodeKind};
use crate::hazard::{Move, Walked, Wave, Witness};
use crate::rules::names;

/// The moving part: elements by the node that drives them.
pub(super) struct Walk<'a> {
    graph: &'a Graph,
    moves: &'a [Move],
    source: NodeId,
    nodes: Vec<NodeId>,
    pub(super) circuit: Circuit,
}

impl<'a> Walk<'a> {
    /// `None` when the order speaks of anything but gates.
    pub(super) fn new(graph: &'a Graph, target: NodeId, witness: &Witness, walked: &'a Walked) -> Option<Self> {
        let &[(source, _)] = witness.changes.as_slice() else { return None };
        let before: BTreeMap<NodeId, bool> = walked.before.iter().copied().collect();
        let mut nodes: Vec<NodeId> = vec![source];
        let mut gates: Vec<NodeId> = walked.moves.iter().map(|one| one.gate).chain([target]).collect();
        gates.sort_unstable();
        gates.dedup();
        nodes.extend(&gates);
        for &gate in &gates {
            for &pin in graph.fanin(gate) {
                let driver = graph.root(pin);
                if !nodes.contains(&driver) {
                    nodes.push(driver);
                }
            }
        }
        let mut elements = Vec::new();
        for &node in &nodes {
            let value = match graph.kind(node) {
                NodeKind::Const(value) => value,
                _ => *before.get(&node)?,
            };
            let (op, pins) = match graph.kind(node) {
                NodeKind::Gate(kind) if gates.contains(&node) => {
                    let place = |&pin: &NodeId| nodes.iter().position(|&one| one == graph.root(pin));
                    (Op::Gate(kind), graph.fanin(node).iter().map(place).collect::<Option<Vec<usize>>>()?)
                }
                NodeKind::Const(value) => (Op::Const(value), Vec::new()),
                _ if gates.contains(&node) => return None,
                _ => (Op::Given, Vec::new()),
            };
            let name = names::wire_of(graph, node).and_then(|wire| graph.name(wire));
            elements.push(Element { op, pins, name, waves: vec![Wave::constant(value)] });
        }
        let at = nodes.iter().position(|&node| node == target)?;
        let circuit = Circuit::closed(elements, at, witness.target);
        Some(Self { graph, moves: &walked.moves, source, nodes, circuit })
    }

    fn before(&self, element: usize) -> bool {
        self.circuit.elements[element].waves.first().is_some_and(|wave| wave.i)
    }

    fn place(&self, node: NodeId) -> usize {
        self.nodes.iter().position(|&one| one == self.graph.root(node)).unwrap_or(0)
    }

    /// What every element shows, the change of the source at time 0 and one move each unit after it.
    pub(super) fn shown(&self) -> Shown {
        let elements = &self.circuit.elements;
        let still = |at: usize| Signal::constant(self.before(at));
        let mut outputs: Vec<Signal> = (0..elements.len()).map(still).collect();
        let mut pins: Vec<Vec<Signal>> =
            elements.iter().map(|element| element.pins.iter().map(|&pin| still(pin)).collect()).collect();
        outputs[self.place(self.source)].changes.push(0);
        for (time, one) in self.moves.iter().enumerate() {
            let gate = self.place(one.gate);
            let signal = match one.pin {
                Some(pin) => pins[gate].get_mut(pin),
                None => outputs.get_mut(gate),
            };
            if let Some(signal) = signal {
                signal.changes.push(time as u64 + 1);
            }
        }
        Shown { outputs, pins }
    }

    fn name(&self, element: usize) -> String {
        match &self.circuit.elements[element].name {
            // An escaped name ends at a blank.
            Some(name) => format!("\\{name} "),
            None => format!("n{element}"),
        }
    }

    fn is_gate(&self, element: usize) -> bool {
        matches!(self.circuit.elements[element].op, Op::Gate(_))
    }

    /// The bench; see the module documentation.
    pub(super) fn bench(&self, head: &Head<'_>) -> String {
        let mut text = String::new();
        for line in head.story {
            let _ = writeln!(text, "// {line}");
        }
        let _ = writeln!(
            text,
            "//\n// Run it in any simulator of IEEE 1364, for example: iverilog -o replay {} && vvp replay\n\
             `timescale 1ns / 1ns\nmodule {};\n  integer changes, wrong;",
            head.file, head.module
        );
        let elements = &self.circuit.elements;
        for at in 0..elements.len() {
            let _ = writeln!(text, "  reg {} = 1'b{};", self.name(at), u8::from(self.before(at)));
        }
        let mut rests: Vec<String> = Vec::new();
        for (at, element) in elements.iter().enumerate() {
            let Op::Gate(kind) = element.op else { continue };
            let mut pins = vec![format!("f{at}")];
            for (pin, &driver) in element.pins.iter().enumerate() {
                let value = u8::from(self.before(driver));
                let _ = writeln!(text, "  reg w{at}_{pin} = 1'b{value};");
                rests.push(format!("w{at}_{pin} !== {}", self.name(driver)));
                pins.push(format!("w{at}_{pin}"));
            }
            let _ = writeln!(text, "  wire f{at}; {} g{at} ({});", kind.name(), pins.join(", "));
            rests.push(format!("{} !== f{at}", self.name(at)));
        }
        let target = self.name(self.circuit.target);
        let _ = writeln!(text, "  always @({target}) changes = changes + 1;");
        let check = format!("if ({}) wrong = wrong + 1;", rests.join(" || "));
        let _ = writeln!(text, "  initial begin\n    wrong = 0;\n    #{REST}; changes = 0; {check}");
        let source = self.place(self.source);
        let _ = writeln!(text, "    {} = 1'b{};", self.name(source), u8::from(!self.before(source)));
        for one in self.moves {
            let gate = self.place(one.gate);
            let (to, hears) = match one.pin {
                Some(pin) => {
                    let driver = elements[gate].pins.get(pin).copied().unwrap_or(gate);
                    (format!("w{gate}_{pin}"), self.name(driver))
                }
                None => (self.name(gate), format!("f{gate}")),
            };
            let value = u8::from(one.value);
            let _ = writeln!(text, "    #1 {to} = {hears}; if ({to} !== 1'b{value}) wrong = wrong + 1;");
        }
        let needed = self.circuit.needed;
        let shown = target.trim_start_matches('\\').trim_end().replace('%', "%%").replace('"', "'");
        let _ = writeln!(text, "    #{REST}; {check}");
        let _ = writeln!(
            text,
            "    if (wrong == 0 && changes > {needed})\n      \
             $display(\"PULSE {0}: %0d changes of {shown} where {needed} would do\", changes);\n    else\n      \
             $display(\"NO PULSE {0}: %0d changes of {shown}, %0d moves that no delay allows\", changes, wrong);\n  end",
            head.module
        );
        let _ = writeln!(
            text,
            "  initial if ($test$plusargs(\"dump\")) begin\n    $dumpfile(\"{0}.dump.vcd\"); $dumpvars(0, {0});\n  \
             end\nendmodule",
            head.module
        );
        text
    }

    /// Whether the order is one that delays allow, ends at rest and shows more changes of the target than needed.
    pub(super) fn is_seen(&self, shown: &Shown) -> bool {
        let elements = &self.circuit.elements;
        let at_rest = |end: bool| {
            let value = |signal: &Signal| if end { signal.end() } else { signal.start };
            elements.iter().enumerate().all(|(at, element)| {
                let heard = element.pins.iter().zip(&shown.pins[at]);
                heard.clone().all(|(&driver, pin)| value(pin) == value(&shown.outputs[driver]))
                    && (!self.is_gate(at)
                        || super::delays::settled(&element.op, &heard.map(|(_, pin)| value(pin)).collect::<Vec<_>>())
                            == value(&shown.outputs[at]))
            })
        };
        let target = &shown.outputs[self.circuit.target];
        at_rest(false)
            && at_rest(true)
            && target.changes.len() > self.circuit.needed
            && (target.start, target.end()) == self.circuit.ends
    }
}
