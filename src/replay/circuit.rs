//! The logic behind one net in the form that a replay needs: elements in topological order, each pin a wire of its own.
//! Declared nets are names of what drives them and no elements; a loop is cut at the nets that the witness gives
//! values, an open latch passes its data like a buffer, and an arithmetic operator that the finding takes as clean is a
//! source that changes once.
//!
//! Invariant: the elements that an element reads stand before it.

use std::collections::{BTreeMap, BTreeSet};

use super::Refusal;
use crate::graph::cone::{Cone, FrozenCone};
use crate::graph::{GateKind, Graph, NodeId, NodeKind};
use crate::hazard::{self, Cover, Order, Promises, Wave, Witness, gate};
use crate::rules::Transition;
use crate::rules::names;

/// Elements beyond this make no test bench that anyone would read.
const MOST: usize = 200_000;

/// What an element does.
#[derive(Clone, Debug)]
pub(super) enum Op {
    /// A source, or a net whose value the witness gives: driven by the stimulus.
    Given,
    Const(bool),
    Gate(GateKind),
    /// The function of a user-defined primitive.
    Table(Promises),
    /// A latch that holds the other value than its data until the step begins, and passes its data from then on.
    Late,
    /// The entry of an arithmetic operator: since no implementation is fixed, a change of its one pin may bounce.
    Entry,
}

#[derive(Clone, Debug)]
pub(super) struct Element {
    pub(super) op: Op,
    pub(super) pins: Vec<usize>,
    /// The full name of the net that it drives, if it drives one.
    pub(super) name: Option<String>,
    /// One waveform per step of the stimulus.
    pub(super) waves: Vec<Wave>,
}

/// See the module documentation.
#[derive(Clone, Debug)]
pub(super) struct Circuit {
    pub(super) elements: Vec<Element>,
    pub(super) target: usize,
    /// What the stimulus does, in steps; every step begins when the one before has settled.
    pub(super) steps: usize,
    /// The most changes of the target that the end points of the whole stimulus call for.
    pub(super) needed: usize,
    /// The target before the first step and after the last.
    pub(super) ends: (bool, bool),
    of_node: BTreeMap<NodeId, usize>,
}

/// What the sources do in one step: their values before it, those that move, and those that do anything at all on the
/// way.
struct Step {
    values: BTreeMap<NodeId, bool>,
    moves: BTreeSet<NodeId>,
    raced: BTreeSet<NodeId>,
}

impl Step {
    /// The steps of a witness: one, or both of a launch that shows its hazard only by both together.
    fn all(witness: &Witness, guesses: &[(NodeId, bool)]) -> Vec<Step> {
        let known = guesses.iter().chain(&witness.holds).chain(&witness.changes);
        let values: BTreeMap<NodeId, bool> = known.copied().collect();
        let nodes = |pairs: &[(NodeId, bool)]| pairs.iter().map(|&(node, _)| node).collect();
        let Some(launch) = &witness.launch else {
            return vec![Step { values, moves: nodes(&witness.changes), raced: BTreeSet::new() }];
        };
        let raced: BTreeSet<NodeId> = launch.raced.iter().copied().collect();
        let with = |pairs: &[(NodeId, bool)], flip: bool| {
            pairs.iter().map(move |&(node, value)| (node, value ^ flip)).collect::<Vec<_>>()
        };
        let mut first = values.clone();
        first.extend(with(&launch.second, false));
        first.extend(with(&launch.first, false));
        let mut second = values;
        second.extend(with(&launch.first, true));
        second.extend(with(&launch.second, false));
        let first = Step { values: first, moves: nodes(&launch.first), raced: raced.clone() };
        let second = Step { values: second, moves: nodes(&launch.second), raced };
        match launch.step {
            hazard::Step::First => vec![first],
            hazard::Step::Second => vec![second],
            hazard::Step::Both => vec![first, second],
        }
    }

    fn wave(&self, node: NodeId) -> Wave {
        let i = self.values.get(&node).copied().unwrap_or(false);
        Wave { i, f: i ^ self.moves.contains(&node), h: self.raced.contains(&node) }
    }
}

/// Latches that do anything at all on the way and end where they began: a witness does not say where that is.
pub(super) fn unsaid(witness: &Witness) -> Vec<NodeId> {
    let Some(launch) = &witness.launch else { return Vec::new() };
    let said: BTreeSet<NodeId> = (witness.holds.iter().chain(&witness.changes))
        .chain(launch.first.iter().chain(&launch.second))
        .map(|&(node, _)| node)
        .collect();
    launch.raced.iter().copied().filter(|latch| !said.contains(latch)).collect()
}

/// The logic behind the target of a transition as a graph of its own: loops are cut at the nets that the witness gives
/// values, open latches pass their data like buffers.
pub(crate) struct Cut {
    pub(crate) frozen: FrozenCone,
    /// The target in the copy.
    pub(crate) target: NodeId,
    /// The target and what else was asked for, in the copy.
    ends: Vec<NodeId>,
    /// Nodes of the copy that the witness speaks about, and the originals; what else was asked for is among them.
    readers: BTreeMap<NodeId, NodeId>,
    steps: Vec<Step>,
}

impl Cut {
    /// The logic behind the target of `transition`, and behind `also`; `guesses` are values that the witness does not say.
    pub(crate) fn new(
        graph: &Graph,
        transition: &Transition,
        also: &[NodeId],
        guesses: &[(NodeId, bool)],
    ) -> Result<Self, Refusal> {
        let steps = Step::all(&transition.witness, guesses);
        let given: BTreeSet<NodeId> =
            steps.iter().flat_map(|step| step.values.keys().chain(&step.raced).copied()).collect();
        // A loop's feedback net is both given and asked for: whoever reads it reads the given value.
        let looped: Vec<NodeId> = given.iter().copied().filter(|&node| !graph.fanin(node).is_empty()).collect();
        let passing = transition.witness.launch.as_ref().map_or(&[][..], |launch| &launch.passing);
        let passed: Vec<(NodeId, NodeId)> = passing
            .iter()
            .filter_map(|&latch| Some((latch, graph.cells.iter().find(|cell| cell.output == latch)?.data)))
            .collect();
        let mut roots = vec![transition.target];
        roots.extend(also.iter().copied().filter(|node| !looped.contains(node)));
        roots.extend(passed.iter().map(|&(_, data)| data));
        let mut cone = Cone::cut(graph, &roots, &looped);
        for &(latch, data) in &passed {
            cone.follow(latch, data);
        }
        let known = given.iter().chain(also);
        let readers: BTreeMap<NodeId, NodeId> = known.filter_map(|&node| Some((cone.read_of(node)?, node))).collect();
        let target = cone.copy_of(transition.target).ok_or(Refusal::Foreign)?;
        let mut ends = vec![target];
        ends.extend(also.iter().filter_map(|&node| cone.read_of(node)));
        Ok(Self { frozen: cone.freeze(), target, ends, readers, steps })
    }

    /// The logic behind a net that no witness speaks about; if the net depends on itself, it is cut there.
    pub(crate) fn of_net(graph: &Graph, net: NodeId) -> Self {
        let cone = Cone::cut(graph, &[net], &[net]);
        let target = cone.copy_of(net).unwrap_or(net);
        Self { frozen: cone.freeze(), target, ends: vec![target], readers: BTreeMap::new(), steps: Vec::new() }
    }

    /// What the witness says that a node of the copy does, one waveform per step; `None` when it says nothing of it.
    pub(crate) fn given(&self, copy: NodeId) -> Option<Vec<Wave>> {
        let node = *self.readers.get(&copy)?;
        Some(self.steps.iter().map(|step| step.wave(node)).collect())
    }

    /// What the stimulus does, in steps.
    pub(crate) fn steps(&self) -> usize {
        self.steps.len()
    }
}

impl Circuit {
    /// Elements that may read each other in loops; one step, at the end of which the target has the second of `ends`.
    pub(super) fn closed(elements: Vec<Element>, target: usize, ends: (bool, bool)) -> Self {
        let needed = usize::from(ends.0 != ends.1);
        Self { elements, target, steps: 1, needed, ends, of_node: BTreeMap::new() }
    }

    /// The logic behind the target of `transition`, and behind `also`; `guesses` are values that the witness does not say.
    pub(super) fn new(
        graph: &Graph,
        transition: &Transition,
        also: &[NodeId],
        guesses: &[(NodeId, bool)],
    ) -> Result<Self, Refusal> {
        let cut = Cut::new(graph, transition, also, guesses)?;
        let late = transition.witness.launch.as_ref().map_or(&[][..], |launch| &launch.late);
        let still = || vec![Wave::constant(false); cut.steps()];
        let mut whole = Self::whole(graph, &cut.frozen, &cut.ends, late, transition.calm, |copy| {
            cut.given(copy).unwrap_or_else(still)
        })?;
        whole.of_node =
            cut.readers.iter().filter_map(|(copy, &node)| Some((node, *whole.of_node.get(copy)?))).collect();
        whole.steps = cut.steps();
        whole.prune(also);
        let waves = &whole.elements[whole.target].waves;
        whole.ends = match (waves.first(), waves.last()) {
            (Some(first), Some(last)) => (first.i, last.f),
            _ => (false, false),
        };
        whole.needed = usize::from(whole.ends.0 != whole.ends.1);
        whole.name_apart();
        Ok(whole)
    }

    /// Every node behind `ends`, the first of which is the target; `of_node` says where the nodes of the cone went.
    fn whole(
        graph: &Graph,
        frozen: &FrozenCone,
        ends: &[NodeId],
        late: &[NodeId],
        calm: bool,
        given: impl Fn(NodeId) -> Vec<Wave>,
    ) -> Result<Self, Refusal> {
        let order = Order::new(&frozen.graph, ends);
        let mut elements: Vec<Element> = Vec::new();
        let mut of_node: BTreeMap<NodeId, usize> = BTreeMap::new();
        for (at, &node) in order.nodes.iter().enumerate() {
            let fanin = if order.looped[at] { &[] } else { frozen.graph.fanin(node) };
            let pins: Vec<usize> = fanin.iter().filter_map(|pin| of_node.get(pin)).copied().collect();
            let op = match frozen.graph.kind(node) {
                _ if order.looped[at] => Op::Given,
                NodeKind::Const(value) => Op::Const(value),
                _ if frozen.original(node).is_some_and(|latch| late.contains(&latch)) => Op::Late,
                NodeKind::Gate(kind) => Op::Gate(kind),
                NodeKind::Table(table) => Op::Table(Promises::new(&frozen.graph.tables[table.index()])),
                NodeKind::OpIn(_) => Op::Entry,
                NodeKind::OpOut(_) if calm => Op::Given,
                NodeKind::Wire | NodeKind::OpOut(_) if pins.len() == 1 => {
                    of_node.insert(node, pins[0]);
                    continue;
                }
                _ => Op::Given,
            };
            if elements.len() >= MOST {
                return Err(Refusal::TooLarge);
            }
            let waves = match (&op, pins.first()) {
                // The result of an operator that is taken as clean.
                (Op::Given, Some(&result)) => {
                    elements[result].waves.iter().map(|wave| Wave { h: false, ..*wave }).collect()
                }
                (Op::Given, None) => given(node),
                _ => {
                    let steps = given(node).len();
                    let seen = |step: usize| pins.iter().map(|&pin| elements[pin].waves[step]).collect::<Vec<_>>();
                    (0..steps).map(|step| wave(&op, &seen(step))).collect()
                }
            };
            let original = frozen.original(node).unwrap_or(node);
            let name = names::wire_of(graph, original).and_then(|wire| graph.name(wire));
            of_node.insert(node, elements.len());
            let pins = if matches!(op, Op::Given) { Vec::new() } else { pins };
            elements.push(Element { op, pins, name, waves });
        }
        let target = *ends.first().and_then(|end| of_node.get(end)).ok_or(Refusal::Foreign)?;
        Ok(Self { elements, target, steps: 0, needed: 0, ends: (false, false), of_node })
    }

    /// Leaves out what neither the target nor one of `also` depends on: the inner parts of clean operators.
    fn prune(&mut self, also: &[NodeId]) {
        let mut needed = vec![false; self.elements.len()];
        let mut open = vec![self.target];
        open.extend(also.iter().filter_map(|node| self.of_node.get(node)).copied());
        while let Some(at) = open.pop() {
            if !std::mem::replace(&mut needed[at], true) {
                open.extend_from_slice(&self.elements[at].pins);
            }
        }
        let mut places = Vec::with_capacity(needed.len());
        let mut kept = 0;
        for &needed in &needed {
            places.push(kept);
            kept += usize::from(needed);
        }
        let mut index = 0;
        self.elements.retain(|_| {
            index += 1;
            needed[index - 1]
        });
        for pin in self.elements.iter_mut().flat_map(|element| &mut element.pins) {
            *pin = places[*pin];
        }
        self.of_node.retain(|_, at| needed[*at]);
        self.of_node.values_mut().for_each(|at| *at = places[*at]);
        self.target = places[self.target];
    }

    /// The cut of a loop has the name of the net that it is cut from; the logic keeps it, since it is what is watched.
    fn name_apart(&mut self) {
        let mut taken: BTreeMap<String, usize> = BTreeMap::new();
        if let Some(name) = self.elements[self.target].name.clone() {
            taken.insert(name, self.target);
        }
        for at in 0..self.elements.len() {
            let Some(name) = self.elements[at].name.clone() else { continue };
            if *taken.entry(name.clone()).or_insert(at) != at {
                let given = matches!(self.elements[at].op, Op::Given);
                self.elements[at].name = given.then(|| format!("{name}$given"));
            }
        }
    }

    /// The circuit with the terms of a cover behind the target, which becomes the last element.
    pub(super) fn covered(&self, cover: &Cover) -> Option<Self> {
        let mut circuit = self.clone();
        let old = circuit.target;
        let mut whole = if cover.replaces { Vec::new() } else { vec![old] };
        for product in &cover.products {
            let pins = circuit.literals(product)?;
            let term = circuit.gate(GateKind::And, pins, true);
            whole.push(term);
        }
        let mut joined = circuit.gate(GateKind::Or, whole, false);
        if !cover.sums.is_empty() {
            let mut factors = vec![joined];
            for sum in &cover.sums {
                let pins = circuit.literals(sum)?;
                let term = circuit.gate(GateKind::Or, pins, false);
                factors.push(term);
            }
            joined = circuit.gate(GateKind::And, factors, true);
        }
        circuit.target = joined;
        Some(circuit)
    }

    fn literals(&mut self, literals: &[(NodeId, bool)]) -> Option<Vec<usize>> {
        let mut pins = Vec::with_capacity(literals.len());
        for &(node, positive) in literals {
            let source = *self.of_node.get(&node)?;
            pins.push(if positive { source } else { self.push(Op::Gate(GateKind::Not), vec![source]) });
        }
        Some(pins)
    }

    /// A gate of any number of pins, `neutral` without any.
    fn gate(&mut self, kind: GateKind, pins: Vec<usize>, neutral: bool) -> usize {
        match pins.as_slice() {
            [] => self.push(Op::Const(neutral), pins),
            &[pin] => pin,
            _ => self.push(Op::Gate(kind), pins),
        }
    }

    fn push(&mut self, op: Op, pins: Vec<usize>) -> usize {
        // What the terms show is not needed: they are only simulated by others.
        self.elements.push(Element { op, pins, name: None, waves: Vec::new() });
        self.elements.len() - 1
    }
}

/// The waveform of an element from those of its pins.
fn wave(op: &Op, pins: &[Wave]) -> Wave {
    match op {
        Op::Const(value) => Wave::constant(*value),
        Op::Gate(kind) => gate(*kind, pins),
        Op::Table(table) => table.wave(pins),
        Op::Entry | Op::Given => {
            let driver = pins.first().copied().unwrap_or(Wave::constant(false));
            Wave { h: driver.moves(), ..driver }
        }
        Op::Late => {
            let data = pins.first().copied().unwrap_or(Wave::constant(false));
            Wave { i: !data.i, ..data }
        }
    }
}
