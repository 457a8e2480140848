//! A finding as a picture: the gates in front of its net, with the ways of the change, as plain data with coordinates.
//! It is taken while the graph is there and knows no output format. What is drawn is bounded: the ways and what stands
//! beside them; how many gates were left out is part of the drawing.
//!
//! Invariants: no two symbols overlap, every wire runs from left to right, and every way is connected from its first
//! symbol to the pin.

mod choose;
mod label;
mod layout;
mod logic;
mod route;

use std::collections::BTreeMap;

use rayon::prelude::*;

use crate::graph::{GateKind, Graph, InstanceId, NodeId};
use crate::hazard::Wave;
use crate::replay::Cut;
use crate::rules::{Finding, Transition};

/// What only the graph can tell of a finding.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Exhibit {
    /// The module that the finding's instance is of; empty when the finding is about no instance.
    pub module: String,
    /// `None` for a finding about no net, and for a net without logic in front of it.
    pub drawing: Option<Drawing>,
}

/// Symbols and wires in pixels; x grows to the right, y downwards.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Drawing {
    pub symbols: Vec<Symbol>,
    pub wires: Vec<Wire>,
    /// Where wires of one net branch.
    pub dots: Vec<(i32, i32)>,
    pub width: i32,
    pub height: i32,
    /// Gates in front of the net that are not drawn.
    pub left_out: usize,
    /// Whether the values are those of a witness.
    pub witnessed: bool,
    /// The ways in words.
    pub story: String,
}

/// One symbol. Its output leaves at the middle of its right edge.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Symbol {
    pub shape: Shape,
    /// The upper left corner.
    pub x: i32,
    pub y: i32,
    pub width: i32,
    pub height: i32,
    /// What is written in it or at its output, shortened; may be empty.
    pub label: String,
    /// The full name, or all that a bundle stands for.
    pub full: String,
    pub pins: Vec<Pin>,
    /// What its output does in each step of the witness; empty when any value does.
    pub waves: Vec<Wave>,
    /// The ways that it lies on, by number.
    pub ways: Vec<Way>,
}

/// An input at the left edge.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Pin {
    /// Below the upper edge of the symbol.
    pub y: i32,
    /// Whether an inverter is drawn as a bubble here.
    pub inverted: bool,
}

/// A wire between two symbols.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Wire {
    pub from: usize,
    pub to: usize,
    pub pin: usize,
    /// Corners, both ends included.
    pub points: Vec<(i32, i32)>,
    pub way: Option<Way>,
}

/// What is marked.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Way {
    First,
    Second,
    /// From where both meet to the pin.
    Pulse,
    /// Around a loop.
    Loop,
}

impl Way {
    pub fn name(self) -> &'static str {
        match self {
            Way::First => "1",
            Way::Second => "2",
            Way::Pulse => "pulse",
            Way::Loop => "loop",
        }
    }
}

/// What a symbol stands for.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Shape {
    Gate(GateKind),
    /// A two-way selector through which no race runs; pins are the value for 1, the value for 0, the select.
    Mux,
    /// A user-defined primitive.
    Table,
    /// An arithmetic operator, for one bit of its result.
    Operator,
    Input,
    FlipFlop,
    Latch,
    BlackBox,
    Memory,
    Constant,
    /// Nobody knows its value.
    Unknown,
    /// A net of a loop, where the loop is cut.
    Feedback,
    /// Gates that are not drawn.
    Behind,
    /// Several signals.
    Bundle,
    /// A stretch of a way that is not drawn.
    Gap,
    /// The pin at which the net ends.
    End(End),
}

impl Shape {
    /// The name in the output.
    pub fn name(self) -> &'static str {
        match self {
            Shape::Gate(kind) => kind.name(),
            Shape::Mux => "mux",
            Shape::Table => "table",
            Shape::Operator => "operator",
            Shape::Input => "input",
            Shape::FlipFlop => "flip-flop",
            Shape::Latch => "latch",
            Shape::BlackBox => "black-box",
            Shape::Memory => "memory",
            Shape::Constant => "constant",
            Shape::Unknown => "unknown",
            Shape::Feedback => "feedback",
            Shape::Behind => "behind",
            Shape::Bundle => "bundle",
            Shape::Gap => "gap",
            Shape::End(End::Clock) => "end-clock",
            Shape::End(End::Control) => "end-control",
            Shape::End(End::Enable) => "end-enable",
            Shape::End(End::Feedback) => "end-feedback",
            Shape::End(End::Net) => "end-net",
        }
    }
}

/// What a net ends at.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum End {
    Clock,
    /// A set, reset or load.
    Control,
    Enable,
    /// Itself.
    Feedback,
    /// An output, a watched net.
    Net,
}

/// What belongs to each of the findings, in their order.
pub fn exhibits(graph: &Graph, findings: &[Finding]) -> Vec<Exhibit> {
    let modules: BTreeMap<&str, &str> =
        graph.instances.iter().map(|instance| (instance.path.as_str(), module(graph, instance))).collect();
    let instances: BTreeMap<&str, InstanceId> = (graph.instances.iter().enumerate())
        .map(|(index, instance)| (instance.path.as_str(), InstanceId::new(index)))
        .collect();
    let mut nets: BTreeMap<InstanceId, Vec<usize>> =
        findings.iter().filter_map(|finding| Some((*instances.get(finding.instance.as_str())?, Vec::new()))).collect();
    for (index, net) in graph.nets.iter().enumerate() {
        if let Some(nets) = nets.get_mut(&net.instance) {
            nets.push(index);
        }
    }
    let target = |finding: &Finding| {
        let nets = nets.get(instances.get(finding.instance.as_str())?)?;
        let bits = nets.iter().flat_map(|&net| graph.nets[net].bits.iter().copied());
        bits.into_iter().find(|&bit| graph.name(bit).is_some_and(|name| name == finding.net))
    };
    findings
        .par_iter()
        .map(|finding| Exhibit {
            module: modules.get(finding.instance.as_str()).map_or(String::new(), |module| (*module).to_string()),
            drawing: match finding.hazards.first() {
                Some(lead) => of_transition(graph, finding, &lead.transition),
                None => target(finding).and_then(|net| draw(graph, finding, &Cut::of_net(graph, net), None)),
            },
        })
        .collect()
}

/// The module around an instance or generate block.
fn module<'a>(graph: &'a Graph, mut instance: &'a crate::graph::Instance) -> &'a str {
    while let Some(parent) = instance.parent.filter(|_| instance.block) {
        instance = &graph.instances[parent.index()];
    }
    &instance.module
}

fn of_transition(graph: &Graph, finding: &Finding, transition: &Transition) -> Option<Drawing> {
    let cut = Cut::new(graph, transition, &[], &[]).ok()?;
    draw(graph, finding, &cut, Some(transition))
}

fn draw(graph: &Graph, finding: &Finding, cut: &Cut, transition: Option<&Transition>) -> Option<Drawing> {
    let logic = logic::Logic::new(graph, cut, transition);
    let ways = logic.ways(transition);
    let chosen = choose::choose(&logic, &ways, finding)?;
    Some(layout::place(chosen))
}

/// The original of a node of the copy.
fn original(cut: &Cut, node: NodeId) -> NodeId {
    cut.frozen.original(node).unwrap_or(node)
}
