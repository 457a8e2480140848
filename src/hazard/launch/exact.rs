//! Exact answers about one event. The clauses hold only what every answer needs; each model is checked against the rest,
//! and what it violates is written down before the solver is asked again: the logic that gives a flip-flop its next
//! value, and the settledness of cells. What is left out can only make more possible, so "impossible" is final at once.
//!
//! In a design of few cells every cell behind the target is checked; in a large one those whose outputs the answer
//! depends on, the rest being free to fit.

use std::collections::HashMap;

use super::encode::{Encoder, Event, Layer, Looped, Move};
use super::fabric::{Fabric, Role};
use super::reach::{Moment, Reachable};
use crate::hazard::Undecided;
use crate::hazard::cone::{Edge, Op};
use crate::hazard::solver::{Answer, Literal, Solver};

/// Designs with at most so many cells behind a target are checked as a whole.
pub(super) const WHOLE: usize = 64;

/// Models looked at per question.
const ROUNDS: usize = 400;

/// Literals and waveforms per event.
const SIZE: usize = 400_000;

/// What is asked about: a net, or a net with a cover.
#[derive(Clone, Debug)]
pub(super) struct Target {
    /// The present logic; absent where a cover replaces it.
    pub(super) net: Option<Edge>,
    /// Products over free nodes that are ORed to it.
    pub(super) products: Vec<Vec<Edge>>,
    /// Sums that are ANDed to it thereafter.
    pub(super) sums: Vec<Vec<Edge>>,
}

impl Target {
    pub(super) fn plain(net: Edge) -> Self {
        Self { net: Some(net), products: Vec::new(), sums: Vec::new() }
    }

    /// The node of a net as it stands, without a cover.
    pub(super) fn plain_node(&self) -> Option<usize> {
        self.net.filter(|_| self.products.is_empty() && self.sums.is_empty()).map(Edge::node)
    }

    /// The nodes that it is made of.
    pub(super) fn nodes(&self) -> Vec<usize> {
        let terms = self.products.iter().chain(&self.sums).flatten();
        let mut nodes: Vec<usize> = self.net.iter().chain(terms).map(|edge| edge.node()).collect();
        nodes.sort_unstable();
        nodes.dedup();
        nodes
    }
}

/// One event and one target.
pub(super) struct Inquiry<'a> {
    pub(super) encoder: Encoder<'a>,
    pub(super) first: Move,
    pub(super) second: Move,
    bounds: Bounds<'a>,
    conflicts: u64,
    /// What may still be spent: each look at a model costs what the encoder holds, and so does each conflict.
    pub(super) effort: u64,
    /// Whether a ring of open latches was met: its data is bound to nothing, so no model tells anything any more.
    looped: bool,
    /// Whether an answer leans on the reachable states.
    pub(super) leans: bool,
}

/// Which states an event may begin in.
#[derive(Clone, Copy, Default)]
pub(super) struct Bounds<'a> {
    /// Cells to be settled, all of them; without a list, those that were met.
    pub(super) whole: Option<&'a [usize]>,
    pub(super) reachable: Option<&'a Reachable>,
}

impl<'a> Inquiry<'a> {
    /// # Errors
    /// When a step needs a loop that the event may move.
    pub(super) fn new(
        fabric: &'a Fabric<'a>,
        event: Event,
        target: &Target,
        bounds: Bounds<'a>,
        conflicts: u64,
    ) -> Result<Self, Looped> {
        if matches!(fabric.role(event.root), Role::Looped(_)) {
            return Err(Looped);
        }
        let mut encoder = Encoder::new(fabric, event);
        let first = encoder.target(Layer::First, target)?;
        let second = encoder.target(Layer::Second, target)?;
        encoder.assume(target)?;
        Ok(Self { encoder, first, second, bounds, conflicts, effort: u64::MAX, looped: false, leans: false })
    }

    /// Asks about another target from here on. What was written down for the ones before stays, so that an event which is
    /// found is one, but "impossible" may be due to a cell that only they depend on.
    ///
    /// # Errors
    /// As [`Self::new`]; the inquiry then is good for nothing more.
    pub(super) fn aim(&mut self, target: &Target, bounds: Bounds<'a>, conflicts: u64) -> Result<(), Looped> {
        self.first = self.encoder.target(Layer::First, target)?;
        self.second = self.encoder.target(Layer::Second, target)?;
        self.encoder.assume(target)?;
        (self.bounds, self.conflicts) = (bounds, conflicts);
        Ok(())
    }

    /// Whether the target can do more in either step than hold still or change cleanly once.
    pub(super) fn is_suspect(&self) -> bool {
        let [first, second] = [self.first.wave, self.second.wave];
        first.h.is_some() || second.h.is_some() || (first.i != first.f && second.i != second.f)
    }

    /// Whether an event exists in which all of `wanted` hold.
    pub(super) fn ask(&mut self, wanted: &[Literal]) -> Result<bool, Undecided> {
        if self.looped {
            return Err(Undecided::Loop);
        }
        for _ in 0..ROUNDS {
            let size = self.encoder.size();
            if size > SIZE || self.effort == 0 {
                return Err(Undecided::Budget);
            }
            let solver = &mut self.encoder.clauses.solver;
            let before = solver.conflicts();
            let answer = solver.solve(wanted, self.conflicts);
            let conflicts = solver.conflicts() - before;
            self.conflicts = self.conflicts.saturating_sub(conflicts);
            self.effort = self.effort.saturating_sub((conflicts + 1).saturating_mul(size as u64));
            match answer {
                Answer::Unsatisfiable => return Ok(false),
                Answer::Open => return Err(Undecided::Budget),
                Answer::Satisfiable => match self.refine() {
                    Ok(true) => {}
                    Ok(false) => return Ok(true),
                    Err(Looped) => {
                        self.looped = true;
                        return Err(Undecided::Loop);
                    }
                },
            }
        }
        Err(Undecided::Budget)
    }

    /// Writes down what the model violates; false when that is nothing.
    ///
    /// # Errors
    /// When latches that are open in the model feed each other in a ring.
    fn refine(&mut self) -> Result<bool, Looped> {
        let fabric = self.encoder.fabric;
        let mut snapshot = Snapshot { encoder: &self.encoder, values: HashMap::new() };
        let solver = &self.encoder.clauses.solver;
        let mut unbound = Vec::new();
        for (&node, next) in &self.encoder.nexts {
            let Role::Cell(cell) = fabric.role(node) else { continue };
            if !next.bound
                && solver.value(next.used)
                && snapshot.value(fabric.cells[cell].data) != solver.value(next.data)
            {
                unbound.push((node, fabric.cells[cell].data));
            }
        }
        let cells: Vec<usize> = match self.bounds.whole {
            Some(cells) => cells.to_vec(),
            None => {
                let met = self.encoder.values.frees.iter();
                met.filter_map(|&node| if let Role::Cell(cell) = fabric.role(node) { Some(cell) } else { None })
                    .collect()
            }
        };
        let mut unsettled = Vec::new();
        for index in cells {
            let open = fabric.cells[index].node != self.encoder.event.root && !self.encoder.settled.contains(&index);
            if open && !snapshot.is_settled(index) {
                unsettled.push(index);
            }
        }
        let unreached = self.bounds.reachable.and_then(|reachable| {
            let bits = reachable.group.iter().enumerate();
            let state =
                bits.fold(0, |state, (at, &node)| state | u32::from(snapshot.value(Edge::new(node, false))) << at);
            let moment = Moment::of(fabric, self.encoder.event.root);
            (!reachable.contains(state, moment)).then(|| (reachable, state, reachable.reason(state, moment)))
        });
        let mut unread = Vec::new();
        for (&index, data) in &self.encoder.data {
            let open = data.open.map(|open| open.is_some_and(|open| solver.value(open)));
            let holds = || solver.value(data.before);
            if open[0] && !data.bound[0] && snapshot.value(fabric.cells[index].data) != holds() {
                unread.push((index, 0));
            }
            for part in [1, 2] {
                if open[part - 1] && !data.bound[part] {
                    unread.push((index, part));
                }
            }
        }
        let found = !unbound.is_empty() || !unsettled.is_empty() || unreached.is_some() || !unread.is_empty();
        for (node, data) in unbound {
            let value = self.encoder.value(data);
            if let Some(next) = self.encoder.nexts.get_mut(&node) {
                next.bound = true;
                let data = next.data;
                self.encoder.clauses.solver.clause(&[!data, value]);
                self.encoder.clauses.solver.clause(&[data, !value]);
            }
        }
        for cell in unsettled {
            self.encoder.settle(cell);
        }
        if let Some((reachable, state, reason)) = unreached {
            self.leans = true;
            let bits = reachable.group.iter().enumerate().filter(|(at, _)| reason >> at & 1 == 1);
            let other: Vec<Literal> = bits
                .map(|(at, &node)| self.encoder.value(Edge::new(node, false)).inverted_if(state >> at & 1 == 1))
                .collect();
            self.encoder.clauses.solver.clause(&other);
        }
        for (index, part) in unread {
            // A waveform begins with the value before it.
            for part in 0..=part {
                if !self.encoder.data(index).bound[part] {
                    self.encoder.bind(index, part)?;
                }
            }
        }
        Ok(found)
    }
}

impl Encoder<'_> {
    /// The waveform of a target.
    pub(super) fn target(&mut self, layer: Layer, target: &Target) -> Result<Move, Looped> {
        let mut alternatives = Vec::new();
        if let Some(net) = target.net {
            alternatives.push(self.step(layer, net)?);
        }
        for product in &target.products {
            let pins =
                product.iter().map(|&literal| self.step(layer, literal)).collect::<Result<Vec<Move>, Looped>>()?;
            alternatives.push(self.gate(Op::And, &pins));
        }
        // OR is AND of the complements.
        let inverted: Vec<Move> = alternatives.iter().map(|pin| pin.inverted_if(true)).collect();
        let mut factors = vec![self.gate(Op::And, &inverted).inverted_if(true)];
        for sum in &target.sums {
            let pins = sum.iter().map(|&literal| Ok(self.step(layer, literal)?.inverted_if(true)));
            let pins = pins.collect::<Result<Vec<Move>, Looped>>()?;
            factors.push(self.gate(Op::And, &pins).inverted_if(true));
        }
        Ok(self.gate(Op::And, &factors))
    }

    fn gate(&mut self, op: Op, pins: &[Move]) -> Move {
        match pins {
            &[pin] => pin,
            pins => {
                let initial: Vec<Literal> = pins.iter().map(|pin| pin.wave.i).collect();
                let i = self.clauses.and(&initial);
                self.combine(op, pins, i)
            }
        }
    }
}

/// The values before the event in a model, worked out where the clauses do not have them. Free nodes without a variable
/// are 0.
struct Snapshot<'a, 'b> {
    encoder: &'b Encoder<'a>,
    values: HashMap<usize, bool>,
}

impl Snapshot<'_, '_> {
    fn value(&mut self, edge: Edge) -> bool {
        let fabric = self.encoder.fabric;
        let mut stack = vec![(edge.node(), 0)];
        while let Some((node, pin)) = stack.pop() {
            if self.values.contains_key(&node) {
                continue;
            }
            if let Some(literal) = self.encoder.values.known(node) {
                self.values.insert(node, self.encoder.clauses.solver.value(literal));
                continue;
            }
            let fanin = fabric.cone.fanin(node);
            if let Some(next) = fanin.get(pin) {
                stack.push((node, pin + 1));
                if !self.values.contains_key(&next.node()) {
                    stack.push((next.node(), 0));
                }
                continue;
            }
            let mut pins = fanin.iter().map(|&pin| self.ready(pin));
            let value = match fabric.cone.ops[node] {
                Op::Zero | Op::Free { .. } => false,
                Op::And => pins.all(|pin| pin),
                Op::Xor | Op::Enter | Op::Calm => pins.fold(false, |sum, pin| sum ^ pin),
                Op::Table(table) => {
                    let point: Vec<bool> = pins.collect();
                    fabric.cone.tables[table as usize].value(&point).unwrap_or(false)
                }
            };
            self.values.insert(node, value);
        }
        self.ready(edge)
    }

    fn ready(&self, edge: Edge) -> bool {
        self.values.get(&edge.node()).copied().unwrap_or(false) ^ edge.inverted()
    }

    /// Whether a cell is not about to move by itself.
    fn is_settled(&mut self, cell: usize) -> bool {
        let cell = &self.encoder.fabric.cells[cell];
        let output = self.value(Edge::new(cell.node, false));
        for control in &cell.controls {
            if self.value(control.net) {
                return self.value(control.value) == output;
            }
        }
        match cell.enable {
            Some(enable) if self.value(enable) => self.value(cell.data) == output,
            _ => true,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::Assumptions;
    use super::*;
    use crate::graph::text;

    /// The bound is on what is done, not on time, so that every run gives the same answers.
    #[test]
    fn an_inquiry_stops_when_its_effort_is_spent() {
        let design = "
s = input
a = input
b = input
ns = not s
u = and s a
v = and ns b
t = or u v
";
        let parsed = text::parse(design).unwrap_or_else(|error| panic!("{error}"));
        let node = |label: &str| parsed.node(label).unwrap_or_else(|| panic!("no {label}"));
        let assumptions = Assumptions::default();
        let fabric = Fabric::new(&parsed.graph, &[node("t")], &assumptions, false);
        let place = |label: &str| fabric.place(node(label)).unwrap_or_else(|| panic!("no place"));
        let event = Event { root: place("s").node(), rises: true };
        let target = Target::plain(place("t"));
        let inquiry = Inquiry::new(&fabric, event, &target, Bounds::default(), 100);
        let Ok(mut inquiry) = inquiry else { panic!("there is no loop") };
        let hazard = inquiry.first.wave.h.unwrap_or_else(|| panic!("it is suspect"));
        inquiry.effort = 1;
        assert_eq!(inquiry.ask(&[hazard]), Ok(true), "what was begun is finished");
        assert_eq!(inquiry.ask(&[hazard]), Err(Undecided::Budget));
        inquiry.effort = u64::MAX;
        assert_eq!(inquiry.ask(&[hazard]), Ok(true));
    }
}
