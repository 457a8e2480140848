//! Tries assumptions against the design: by the logic alone, by induction over steps (the reset state satisfies the
//! assumption and a step from any state that satisfies all assumptions preserves it), and, where that fails, by following
//! the registers from reset for a few clock edges in search of a state that breaks it (Biere and others, Symbolic Model
//! Checking without BDDs, 1999).
//!
//! A step here can do more than the design can: inputs take any values, and the registers of each clock move or rest as
//! the solver likes. What is preserved by all such steps is preserved by the real ones. For the search the steps must not
//! do more than the design, so it speaks only about registers of one edge of one clock that have reset values and whose
//! asynchronous controls depend on no register.

use std::collections::{BTreeMap, BTreeSet};

use super::Options;
use super::assumption::{Assumption, AssumptionKind, Counterexample, Doubt, Proof, Standing};
use super::clauses::Clauses;
use super::order::Order;
use super::solver::{Answer, Batsat, Literal, Solver};
use crate::graph::{CellKind, Control, Edge, Graph, NodeId, NodeKind, SourceKind};

/// The search from reset follows so many clock edges.
const DEPTH: usize = 12;
/// The search from reset follows at most so many registers, and so many nodes per step.
const REGISTERS: usize = 256;
const NODES: usize = 50_000;

/// Tries every assumption; the answers are in the same order. `graph` must not have static nodes yet.
pub fn try_assumptions(graph: &Graph, assumptions: &[Assumption], options: &Options) -> Vec<Standing> {
    if assumptions.is_empty() {
        return Vec::new();
    }
    let mut design = Design::new(graph, assumptions, options);
    let mut standings: Vec<Option<Standing>> = design.impossible();
    // What is contradicted must not serve as a premise for the others.
    design.drop_contradicted(&standings);
    for (index, standing) in standings.iter_mut().enumerate() {
        if standing.is_none() {
            *standing = if design.groups[index].looped {
                Some(Standing::Trusted(Doubt::Loop))
            } else {
                design.search(index).map(Standing::Contradicted).or_else(|| design.at_start(index))
            };
        }
    }
    design.drop_contradicted(&standings);
    let rest = standings.into_iter().enumerate();
    rest.map(|(index, standing)| standing.unwrap_or_else(|| design.induction(index))).collect()
}

/// A register as the steps see it.
struct Register {
    /// The nets whose edges clock it.
    clocks: Vec<(NodeId, Edge)>,
    data: NodeId,
    controls: Vec<Control>,
    /// Its value in the reset state.
    start: Option<bool>,
}

/// An assumption with what it depends on.
struct Group<'a> {
    assumption: &'a Assumption,
    /// The sources in front of the nets.
    sources: Vec<NodeId>,
    looped: bool,
    /// Whether it may serve as a premise.
    usable: bool,
}

struct Design<'a> {
    graph: &'a Graph,
    registers: BTreeMap<NodeId, Register>,
    groups: Vec<Group<'a>>,
    /// Sources and other nodes that are declared static.
    statics: BTreeSet<NodeId>,
    conflicts: u64,
}

/// The value of every node of one copy of the logic.
type Values = Vec<Option<Literal>>;
/// The values of the sources of a copy.
type State = BTreeMap<NodeId, Literal>;

impl<'a> Design<'a> {
    fn new(graph: &'a Graph, assumptions: &'a [Assumption], options: &Options) -> Self {
        let mut registers: BTreeMap<NodeId, Register> = BTreeMap::new();
        for cell in &graph.cells {
            let CellKind::FlipFlop { clock, edge } = cell.kind else { continue };
            let clock = (graph.root(clock), edge);
            let register = registers.entry(cell.output).or_insert_with(|| Register {
                clocks: Vec::new(),
                data: cell.data,
                controls: cell.controls.clone(),
                start: start(graph, &cell.controls, cell.init),
            });
            register.clocks.push(clock);
        }
        let groups = assumptions
            .iter()
            .map(|assumption| {
                let order = Order::new(graph, &assumption.nodes);
                let is_source = |node: &&NodeId| matches!(graph.kind(**node), NodeKind::Source(_));
                let sources = order.nodes.iter().filter(is_source).copied().collect();
                let looped = order.looped.contains(&true);
                Group { assumption, sources, looped, usable: !looped }
            })
            .collect();
        let of_kind = |assumption: &&Assumption| assumption.kind == AssumptionKind::Static;
        let statics = assumptions.iter().filter(of_kind).flat_map(|one| one.nodes.iter().copied()).collect();
        Self { graph, registers, groups, statics, conflicts: options.conflicts }
    }

    fn drop_contradicted(&mut self, standings: &[Option<Standing>]) {
        for (group, standing) in self.groups.iter_mut().zip(standings) {
            group.usable &= !matches!(standing, Some(Standing::Contradicted(_)));
        }
    }

    fn kind(&self, node: NodeId) -> Option<SourceKind> {
        match self.graph.kind(node) {
            NodeKind::Source(kind) => Some(kind),
            _ => None,
        }
    }

    /// The assumptions that no values of the sources satisfy, alone or together with those before.
    fn impossible(&self) -> Vec<Option<Standing>> {
        let mut solver = Frames::new(self);
        let nodes: Vec<NodeId> = self.groups.iter().flat_map(|group| group.assumption.nodes.clone()).collect();
        let values = solver.copy(&nodes, &mut State::new());
        let mut standings = Vec::new();
        for group in &self.groups {
            let holds = solver.holds(group.assumption, &values);
            let contradicted = if group.looped || solver.solve(&[holds]) != Answer::Unsatisfiable {
                None
            } else {
                let mut fresh = Frames::new(self);
                let values = fresh.copy(&group.assumption.nodes, &mut State::new());
                let holds = fresh.holds(group.assumption, &values);
                let alone = fresh.solve(&[holds]) == Answer::Unsatisfiable;
                Some(Standing::Contradicted(Counterexample::Impossible { alone }))
            };
            if contradicted.is_none() && !group.looped {
                solver.clauses.solver.clause(&[holds]);
            }
            standings.push(contradicted);
        }
        standings
    }

    /// Looks for a state that can be reached from reset and breaks the assumption; only where the steps are exact.
    fn search(&self, index: usize) -> Option<Counterexample> {
        let group = &self.groups[index];
        let kinds: Vec<Option<SourceKind>> = group.sources.iter().map(|&source| self.kind(source)).collect();
        if kinds.is_empty() || kinds.iter().any(|kind| *kind != Some(SourceKind::FlipFlop)) {
            return None;
        }
        let closed = self.closed(&group.sources)?;
        let mut frames = Frames::new(self);
        let mut state: State = State::new();
        for (&output, register) in &closed {
            state.insert(output, frames.clauses.constant(register.start?));
        }
        let first = group.assumption;
        // The copy before, and whether no control acted in the step from there.
        let mut before: Option<(Values, Literal)> = None;
        let mut start: Option<Values> = None;
        let mut targets: Vec<NodeId> = first.nodes.clone();
        for register in closed.values() {
            targets.extend(register.controls.iter().flat_map(|control| [control.net, control.value]));
            targets.push(register.data);
        }
        let outside = self.environment(&targets);
        targets.extend(outside.iter().flat_map(|group| group.assumption.nodes.iter().copied()));
        for steps in 0..=DEPTH {
            let values = frames.copy(&targets, &mut state);
            for group in &outside {
                let holds = frames.holds(group.assumption, &values);
                frames.clauses.solver.clause(&[holds]);
            }
            let (broken, changes) = match (first.kind, &before, &start) {
                (AssumptionKind::OneHot | AssumptionKind::MutuallyExclusive, _, _) => {
                    (!frames.holds(first, &values), Vec::new())
                }
                (_, None, _) | (_, _, None) => (!frames.clauses.one, Vec::new()),
                (AssumptionKind::Static, Some(_), Some(start)) => {
                    let changes = frames.changes(first, start, &values);
                    (frames.clauses.or(&changes), changes)
                }
                (AssumptionKind::OneBitChanging, Some((before, quiet)), _) => {
                    let changes = frames.changes(first, before, &values);
                    let most_one = frames.count(&changes, false);
                    (frames.clauses.and(&[!most_one, *quiet]), changes)
                }
            };
            match frames.solve(&[broken]) {
                Answer::Satisfiable => {
                    let found = frames.model(first, &values);
                    if changes.is_empty() {
                        return Some(Counterexample::State { steps, values: found });
                    }
                    let changed = found.into_iter().zip(&changes);
                    let changed = changed.filter(|&(_, &change)| frames.clauses.solver.value(change));
                    let changes = changed.map(|((node, value), _)| (node, !value)).collect();
                    return Some(Counterexample::Step { steps: steps.saturating_sub(1), changes });
                }
                Answer::Unsatisfiable => frames.clauses.solver.clause(&[!broken]),
                Answer::Open => return None,
            }
            let registers: Vec<NodeId> = closed.keys().copied().collect();
            let (next, quiet) = frames.step(&registers, &state, &values);
            state = next;
            start.get_or_insert_with(|| values.clone());
            before = Some((values, quiet));
        }
        None
    }

    /// The assumptions about states that share a source with `targets`; the others say nothing about them.
    fn touching(&self, targets: &[NodeId]) -> Vec<&Group<'a>> {
        let order = Order::new(self.graph, targets);
        let sources: BTreeSet<NodeId> = order.nodes.into_iter().filter(|&node| self.kind(node).is_some()).collect();
        let of_states = |group: &&Group<'a>| {
            group.usable
                && matches!(group.assumption.kind, AssumptionKind::OneHot | AssumptionKind::MutuallyExclusive)
                && group.sources.iter().any(|source| sources.contains(source))
        };
        self.groups.iter().filter(of_states).collect()
    }

    /// Those among them that depend on inputs alone: what the surroundings guarantee.
    fn environment(&self, targets: &[NodeId]) -> Vec<&Group<'a>> {
        let mut groups = self.touching(targets);
        groups.retain(|group| group.sources.iter().all(|source| self.kind(*source) == Some(SourceKind::Input)));
        groups
    }

    /// All registers that the sources depend on, as far as the search may speak about them.
    fn closed(&self, sources: &[NodeId]) -> Option<BTreeMap<NodeId, &Register>> {
        let mut closed: BTreeMap<NodeId, &Register> = BTreeMap::new();
        let mut open: Vec<NodeId> = sources.to_vec();
        let mut clocks: BTreeSet<(NodeId, Edge)> = BTreeSet::new();
        let mut met = 0;
        while let Some(source) = open.pop() {
            match self.kind(source) {
                Some(SourceKind::FlipFlop) if !closed.contains_key(&source) => {}
                Some(SourceKind::FlipFlop | SourceKind::Input) => continue,
                _ => return None,
            }
            let register = self.registers.get(&source)?;
            closed.insert(source, register);
            clocks.extend(&register.clocks);
            register.start?;
            let order = Order::new(self.graph, &[register.data]);
            met += order.nodes.len();
            let of_inputs = |control: &Control| {
                let order = Order::new(self.graph, &[control.net, control.value]);
                let from_outside =
                    order.nodes.iter().all(|&node| self.kind(node).is_none_or(|kind| kind == SourceKind::Input));
                from_outside && !order.looped.contains(&true)
            };
            if closed.len() > REGISTERS
                || met > NODES
                || clocks.len() > 1
                || order.looped.contains(&true)
                || !register.controls.iter().all(of_inputs)
            {
                return None;
            }
            // What an undriven net shows is not in the design.
            let floats = |node: &NodeId| super::rails::is_leaf(self.graph, *node) && self.kind(*node).is_none();
            if order.nodes.iter().any(floats) {
                return None;
            }
            open.extend(order.nodes.iter().copied().filter(|&node| self.kind(node).is_some()));
        }
        // An edge of a gated clock comes only when the gate lets it.
        let from_outside = |&(clock, edge): &(NodeId, Edge)| {
            edge != Edge::Both && matches!(self.kind(clock), Some(SourceKind::Input | SourceKind::BlackBox))
        };
        clocks.iter().all(from_outside).then_some(closed)
    }

    /// Tries the logic alone, then induction.
    fn induction(&self, index: usize) -> Standing {
        let group = &self.groups[index];
        let assumption = group.assumption;
        let mut frames = Frames::new(self);
        if matches!(assumption.kind, AssumptionKind::OneHot | AssumptionKind::MutuallyExclusive) {
            let values = frames.copy(&assumption.nodes, &mut State::new());
            let holds = frames.holds(assumption, &values);
            if frames.solve(&[!holds]) == Answer::Unsatisfiable {
                return Standing::Checked(Proof::Logic);
            }
        }
        let flops: Vec<NodeId> =
            group.sources.iter().copied().filter(|source| self.registers.contains_key(source)).collect();
        let others = |kind: SourceKind| group.sources.iter().any(|&source| self.kind(source) == Some(kind));
        if others(SourceKind::Latch) {
            return Standing::Trusted(Doubt::Latches);
        }
        if flops.is_empty() {
            return Standing::Trusted(Doubt::Environment);
        }
        let mut targets: Vec<NodeId> = Vec::new();
        for flop in &flops {
            let register = &self.registers[flop];
            targets.extend(register.controls.iter().flat_map(|control| [control.net, control.value]));
            targets.push(register.data);
        }
        let order = Order::new(self.graph, &targets);
        if order.looped.contains(&true) {
            return Standing::Trusted(Doubt::Loop);
        }
        targets.extend_from_slice(&assumption.nodes);
        let premises = self.touching(&targets);
        targets.extend(premises.iter().flat_map(|group| group.assumption.nodes.iter().copied()));
        let mut state = State::new();
        let values = frames.copy(&targets, &mut state);
        for group in premises {
            let holds = frames.holds(group.assumption, &values);
            frames.clauses.solver.clause(&[holds]);
        }
        if assumption.kind == AssumptionKind::Static {
            for flop in &flops {
                if let (Some(start), Some(&value)) = (self.registers[flop].start, state.get(flop)) {
                    frames.clauses.solver.clause(&[value.inverted_if(!start)]);
                }
            }
        }
        let (mut next, quiet) = frames.step(&flops, &state, &values);
        let after = frames.copy(&assumption.nodes, &mut next);
        let broken = match assumption.kind {
            AssumptionKind::OneHot | AssumptionKind::MutuallyExclusive => !frames.holds(assumption, &after),
            AssumptionKind::Static => {
                let changes = frames.changes(assumption, &values, &after);
                frames.clauses.or(&changes)
            }
            AssumptionKind::OneBitChanging => {
                let changes = frames.changes(assumption, &values, &after);
                let most_one = frames.count(&changes, false);
                frames.clauses.and(&[!most_one, quiet])
            }
        };
        match frames.solve(&[broken]) {
            Answer::Unsatisfiable => Standing::Checked(Proof::Induction),
            Answer::Satisfiable => Standing::Trusted(Doubt::NotInductive),
            Answer::Open => Standing::Trusted(Doubt::Budget),
        }
    }

    /// What the reset state says about an assumption about states; `None` when it satisfies it, or for the other kinds.
    fn at_start(&self, index: usize) -> Option<Standing> {
        let group = &self.groups[index];
        let assumption = group.assumption;
        if !matches!(assumption.kind, AssumptionKind::OneHot | AssumptionKind::MutuallyExclusive) {
            return None;
        }
        let flops: Vec<&Register> = group.sources.iter().filter_map(|source| self.registers.get(source)).collect();
        if flops.is_empty() {
            return None;
        }
        let mut frames = Frames::new(self);
        let mut state = State::new();
        for source in &group.sources {
            if let Some(start) = self.registers.get(source).and_then(|register| register.start) {
                state.insert(*source, frames.clauses.constant(start));
            }
        }
        let mut targets = assumption.nodes.clone();
        let outside = self.environment(&targets);
        targets.extend(outside.iter().flat_map(|group| group.assumption.nodes.iter().copied()));
        let values = frames.copy(&targets, &mut state);
        for group in outside {
            let holds = frames.holds(group.assumption, &values);
            frames.clauses.solver.clause(&[holds]);
        }
        let holds = frames.holds(assumption, &values);
        match frames.solve(&[!holds]) {
            Answer::Unsatisfiable => None,
            Answer::Open => Some(Standing::Trusted(Doubt::Budget)),
            Answer::Satisfiable if flops.iter().any(|flop| flop.start.is_none()) => {
                Some(Standing::Trusted(Doubt::NoReset))
            }
            Answer::Satisfiable if flops.len() == group.sources.len() => {
                let values = frames.model(assumption, &values);
                Some(Standing::Contradicted(Counterexample::State { steps: 0, values }))
            }
            Answer::Satisfiable => Some(Standing::Trusted(Doubt::Environment)),
        }
    }
}

/// The value that the asynchronous controls of a register agree on, or its initial value without any.
fn start(graph: &Graph, controls: &[Control], init: Option<bool>) -> Option<bool> {
    let value = |control: &Control| match graph.kind(graph.root(control.value)) {
        NodeKind::Const(value) => Some(value),
        _ => None,
    };
    match controls {
        [] => init,
        [first, rest @ ..] => {
            let agreed = value(first)?;
            rest.iter().all(|control| value(control) == Some(agreed)).then_some(agreed)
        }
    }
}

/// Copies of the logic in one solver, one per state.
struct Frames<'a> {
    design: &'a Design<'a>,
    clauses: Clauses<Batsat>,
    /// Static sources have one value in all copies.
    statics: State,
}

impl<'a> Frames<'a> {
    fn new(design: &'a Design<'a>) -> Self {
        Self { design, clauses: Clauses::new(), statics: State::new() }
    }

    fn solve(&mut self, assumptions: &[Literal]) -> Answer {
        self.clauses.solver.solve(assumptions, self.design.conflicts)
    }

    /// The logic of `targets`; sources that `state` does not know yet get fresh values there.
    fn copy(&mut self, targets: &[NodeId], state: &mut State) -> Values {
        let graph = self.design.graph;
        let order = Order::new(graph, targets);
        for &node in &order.nodes {
            if super::rails::is_leaf(graph, node) && !state.contains_key(&node) {
                let literal = if self.design.statics.contains(&node) || graph.kind(node) == NodeKind::Unknown {
                    *self.statics.entry(node).or_insert_with(|| self.clauses.solver.variable())
                } else {
                    self.clauses.solver.variable()
                };
                state.insert(node, literal);
            }
        }
        let zero = !self.clauses.one;
        self.clauses.copy(graph, &order.nodes, |leaf| state.get(&leaf).copied().unwrap_or(zero))
    }

    /// Whether a state satisfies an assumption about states; true for the others.
    fn holds(&mut self, assumption: &Assumption, values: &Values) -> Literal {
        let literals: Vec<Literal> = assumption.nodes.iter().filter_map(|node| values[node.index()]).collect();
        match assumption.kind {
            AssumptionKind::OneHot => self.count(&literals, true),
            AssumptionKind::MutuallyExclusive => self.count(&literals, false),
            AssumptionKind::Static | AssumptionKind::OneBitChanging => self.clauses.one,
        }
    }

    /// Whether at most one of the literals is 1, and, if asked, at least one.
    fn count(&mut self, literals: &[Literal], at_least: bool) -> Literal {
        let mut seen = !self.clauses.one;
        let mut twice = !self.clauses.one;
        for &literal in literals {
            let again = self.clauses.and(&[seen, literal]);
            twice = self.clauses.or(&[twice, again]);
            seen = self.clauses.or(&[seen, literal]);
        }
        if at_least { self.clauses.and(&[seen, !twice]) } else { !twice }
    }

    /// The values of the assumption's nodes in the last model.
    fn model(&self, assumption: &Assumption, values: &Values) -> Vec<(NodeId, bool)> {
        let value = |node: &NodeId| values[node.index()].is_some_and(|literal| self.clauses.solver.value(literal));
        assumption.nodes.iter().map(|node| (*node, value(node))).collect()
    }

    /// Per node of the assumption, whether it differs between two copies.
    fn changes(&mut self, assumption: &Assumption, before: &Values, after: &Values) -> Vec<Literal> {
        let pairs = assumption.nodes.iter().filter_map(|node| before[node.index()].zip(after[node.index()]));
        let pairs: Vec<_> = pairs.collect();
        pairs.into_iter().map(|(before, after)| self.clauses.xor(before, after)).collect()
    }

    /// The state after one step of `registers`: those of one clock move together or rest together, a register whose
    /// control acts takes the control's value, and everything else is free. The literal says that no control acts, before
    /// or meanwhile.
    fn step(&mut self, registers: &[NodeId], state: &State, values: &Values) -> (State, Literal) {
        let graph = self.design.graph;
        let mut moved: State = registers.iter().filter_map(|flop| Some((*flop, *state.get(flop)?))).collect();
        let of = |flop: &NodeId| &self.design.registers[flop];
        let controls: Vec<NodeId> = registers
            .iter()
            .flat_map(|flop| of(flop).controls.iter().flat_map(|control| [control.net, control.value]))
            .collect();
        // Other registers that a control depends on hold while the inputs move.
        for &node in &Order::new(graph, &controls).nodes {
            if graph.kind(node) == NodeKind::Source(SourceKind::FlipFlop)
                && let Some(&value) = state.get(&node)
            {
                moved.insert(node, value);
            }
        }
        let acting = self.copy(&controls, &mut moved);
        let mut fires: BTreeMap<(NodeId, Edge), Literal> = BTreeMap::new();
        let mut next = State::new();
        let mut idle = Vec::new();
        for flop in registers {
            let register = &self.design.registers[flop];
            let zero = !self.clauses.one;
            let mut fire = zero;
            for clock in &register.clocks {
                let edge = *fires.entry(*clock).or_insert_with(|| self.clauses.solver.variable());
                fire = self.clauses.or(&[fire, edge]);
            }
            let held = state.get(flop).copied().unwrap_or(zero);
            let data = values[register.data.index()].unwrap_or(zero);
            let mut value = self.choose(fire, data, held);
            for control in register.controls.iter().rev() {
                let acts = |values: &Values| values[control.net.index()].unwrap_or(zero).inverted_if(!control.active);
                let net = acts(&acting);
                idle.extend([!net, !acts(values)]);
                let taken = acting[control.value.index()].unwrap_or(zero);
                value = self.choose(net, taken, value);
            }
            next.insert(*flop, value);
        }
        let quiet = self.clauses.and(&idle);
        (next, quiet)
    }

    fn choose(&mut self, condition: Literal, then: Literal, otherwise: Literal) -> Literal {
        let upper = self.clauses.and(&[condition, then]);
        let lower = self.clauses.and(&[!condition, otherwise]);
        self.clauses.or(&[upper, lower])
    }
}
