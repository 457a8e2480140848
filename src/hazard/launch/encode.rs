//! One event in clauses: the values of the design before it, and the waveforms of its two steps, each node on demand.
//! What the change does not reach keeps its literal, so that a step costs only what moves in it. The next value that a
//! flip-flop's own logic gives it, and the data of a latch, are variables at first and bound to the logic only when an
//! answer depends on it; see [`super::exact`].

use std::collections::{BTreeMap, BTreeSet, HashMap};

use super::data::Data;
use super::fabric::{Fabric, Role};
use crate::hazard::clauses::Clauses;
use crate::hazard::cone::{Cone, Edge, Op};
use crate::hazard::solver::{Batsat, Literal};
use crate::hazard::symbolic::Symbolic;

/// A root and the direction of its change.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub(super) struct Event {
    /// A free node.
    pub(super) root: usize,
    pub(super) rises: bool,
}

/// A step needs the value of a combinational loop, or of a loop through latches, that the event may move.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Looped;

/// A waveform and the directions in which the net may go.
#[derive(Clone, Copy, Debug)]
pub(super) struct Move {
    pub(super) wave: Symbolic,
    pub(super) rise: bool,
    pub(super) fall: bool,
}

impl Move {
    pub(super) fn still(value: Literal) -> Self {
        Self { wave: Symbolic::still(value), rise: false, fall: false }
    }

    /// A move in any direction.
    pub(super) fn any(wave: Symbolic) -> Self {
        let changes = wave.i != wave.f;
        Self { wave, rise: changes, fall: changes }
    }

    pub(super) fn inverted_if(self, inverted: bool) -> Self {
        let (rise, fall) = if inverted { (self.fall, self.rise) } else { (self.rise, self.fall) };
        Self { wave: self.wave.inverted_if(inverted), rise, fall }
    }
}

/// The two steps.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Layer {
    First,
    Second,
}

/// What a latch does in a step, where it does anything.
#[derive(Clone, Copy, Debug)]
pub(super) struct LatchDoes {
    /// Acts as a buffer of its data.
    pub(super) passing: Literal,
    /// Anything may happen between its end points.
    pub(super) raced: Literal,
}

/// The next value of a flip-flop.
#[derive(Clone, Copy, Debug)]
pub(super) struct Next {
    /// Stands for its data before the edge.
    pub(super) data: Literal,
    /// Whether the data matters.
    pub(super) used: Literal,
    /// Whether `data` was bound to the logic.
    pub(super) bound: bool,
}

/// See the module documentation.
pub(super) struct Encoder<'a> {
    pub(super) fabric: &'a Fabric<'a>,
    pub(super) event: Event,
    pub(super) clauses: Clauses<Batsat>,
    pub(super) values: Values,
    /// `None` marks a node whose waveform is being worked out.
    steps: [HashMap<usize, Option<Move>>; 2],
    /// By free node.
    pub(super) latches: [BTreeMap<usize, LatchDoes>; 2],
    pub(super) nexts: BTreeMap<usize, Next>,
    /// By index of the cell.
    pub(super) data: BTreeMap<usize, Data>,
    /// Whether a free node changes in a step, where that was asked.
    changes: [HashMap<usize, Literal>; 2],
    /// Cells whose settledness was written down, by index.
    pub(super) settled: BTreeSet<usize>,
}

/// The values of nodes at one moment, each worked out when it is asked for.
#[derive(Default)]
pub(super) struct Values {
    known: HashMap<usize, Literal>,
    /// The free nodes that have a literal.
    pub(super) frees: BTreeSet<usize>,
}

impl Values {
    pub(super) fn known(&self, node: usize) -> Option<Literal> {
        self.known.get(&node).copied()
    }

    /// Gives a free node a literal.
    fn set(&mut self, node: usize, value: Literal) {
        self.known.insert(node, value);
        self.frees.insert(node);
    }

    pub(super) fn get(&mut self, clauses: &mut Clauses<Batsat>, cone: &Cone, edge: Edge) -> Literal {
        let mut stack = vec![(edge.node(), 0)];
        while let Some((node, pin)) = stack.pop() {
            if self.known.contains_key(&node) {
                continue;
            }
            let fanin = cone.fanin(node);
            if let Some(next) = fanin.get(pin) {
                stack.push((node, pin + 1));
                if !self.known.contains_key(&next.node()) {
                    stack.push((next.node(), 0));
                }
                continue;
            }
            let pins: Vec<Literal> = fanin.iter().map(|&pin| self.ready(clauses, pin)).collect();
            let op = cone.ops[node];
            if matches!(op, Op::Free { .. }) {
                self.frees.insert(node);
            }
            let value = clauses.value(op, &cone.tables, &pins);
            self.known.insert(node, value);
        }
        self.ready(clauses, edge)
    }

    fn ready(&self, clauses: &Clauses<Batsat>, edge: Edge) -> Literal {
        self.known(edge.node()).unwrap_or(!clauses.one).inverted_if(edge.inverted())
    }
}

impl<'a> Encoder<'a> {
    pub(super) fn new(fabric: &'a Fabric<'a>, event: Event) -> Self {
        let mut encoder = Self {
            fabric,
            event,
            clauses: Clauses::new(),
            values: Values::default(),
            steps: [HashMap::new(), HashMap::new()],
            latches: [BTreeMap::new(), BTreeMap::new()],
            nexts: BTreeMap::new(),
            data: BTreeMap::new(),
            changes: [HashMap::new(), HashMap::new()],
            settled: BTreeSet::new(),
        };
        let before = encoder.clauses.constant(!event.rises);
        encoder.values.set(event.root, before);
        encoder.root_can_move();
        encoder
    }

    /// How many literals and waveforms were worked out, as a measure of effort.
    pub(super) fn size(&self) -> usize {
        self.values.known.len() + self.steps[0].len() + self.steps[1].len()
    }

    /// The value before the event.
    pub(super) fn value(&mut self, edge: Edge) -> Literal {
        self.values.get(&mut self.clauses, &self.fabric.cone, edge)
    }

    /// The waveform in a step.
    ///
    /// # Errors
    /// When it depends on itself; the encoder then is good for nothing more.
    pub(super) fn step(&mut self, layer: Layer, edge: Edge) -> Result<Move, Looped> {
        struct Visit {
            node: usize,
            needs: Option<Vec<usize>>,
            at: usize,
        }
        let mut stack = vec![Visit { node: edge.node(), needs: None, at: 0 }];
        while let Some(mut visit) = stack.pop() {
            let node = visit.node;
            if visit.needs.is_none() {
                match self.steps[layer as usize].get(&node) {
                    Some(Some(_)) => continue,
                    Some(None) => return Err(Looped),
                    None => {}
                }
                self.steps[layer as usize].insert(node, None);
            }
            let needs = visit.needs.get_or_insert_with(|| self.needs(layer, node));
            if let Some(&next) = needs.get(visit.at) {
                visit.at += 1;
                stack.push(visit);
                match self.steps[layer as usize].get(&next) {
                    Some(Some(_)) => {}
                    Some(None) => return Err(Looped),
                    None => stack.push(Visit { node: next, needs: None, at: 0 }),
                }
                continue;
            }
            let moved = self.work_out(layer, node)?;
            self.steps[layer as usize].insert(node, Some(moved));
        }
        Ok(self.done(layer, edge))
    }

    /// The waveform in a step, which was worked out before; a constant 0 otherwise.
    pub(super) fn done(&self, layer: Layer, edge: Edge) -> Move {
        let found = self.steps[layer as usize].get(&edge.node()).copied().flatten();
        found.unwrap_or(Move::still(!self.clauses.one)).inverted_if(edge.inverted())
    }

    /// Whether a free node, whose waveform was worked out, ends a step with another value; `None` when it cannot.
    pub(super) fn changes(&mut self, layer: Layer, node: usize) -> Option<Literal> {
        let wave = self.done(layer, Edge::new(node, false)).wave;
        if wave.i == wave.f {
            return None;
        }
        if let Some(&known) = self.changes[layer as usize].get(&node) {
            return Some(known);
        }
        let changes = self.clauses.xor(wave.i, wave.f);
        self.changes[layer as usize].insert(node, changes);
        Some(changes)
    }

    /// The nodes whose waveforms in the same step that of `node` is made of.
    fn needs(&self, layer: Layer, node: usize) -> Vec<usize> {
        let fabric = self.fabric;
        if !matches!(fabric.cone.ops[node], Op::Free { .. }) {
            return fabric.cone.fanin(node).iter().map(|pin| pin.node()).collect();
        }
        match (fabric.role(node), layer) {
            (Role::Looped(behind), _) => fabric.behind[behind].clone(),
            (Role::Cell(_), Layer::First) if node == self.event.root => Vec::new(),
            (Role::Cell(cell), _) => {
                let cell = &fabric.cells[cell];
                // The data of a latch is bound when an answer depends on it.
                let Some(enable) = cell.enable else { return Vec::new() };
                let mut needs = vec![enable.node()];
                if layer == Layer::First {
                    needs.extend(cell.controls.iter().map(|control| control.net.node()));
                }
                needs
            }
            _ => Vec::new(),
        }
    }

    /// A waveform from those that it needs.
    fn work_out(&mut self, layer: Layer, node: usize) -> Result<Move, Looped> {
        let fabric = self.fabric;
        let op = fabric.cone.ops[node];
        if !matches!(op, Op::Free { .. }) {
            let pins: Vec<Move> = fabric.cone.fanin(node).iter().map(|&pin| self.done(layer, pin)).collect();
            let before = self.before(layer, node)?;
            return Ok(self.combine(op, &pins, before));
        }
        let before = self.before(layer, node)?;
        match (fabric.role(node), layer) {
            (_, Layer::First) if node == self.event.root => {
                let wave = Symbolic { i: before, f: !before, h: None };
                Ok(Move { wave, rise: self.event.rises, fall: !self.event.rises })
            }
            (Role::Outside | Role::Still, _) => Ok(Move::still(before)),
            (Role::Looped(behind), _) => {
                let still = |&node: &usize| !self.done(layer, Edge::new(node, false)).wave.may_move();
                if fabric.behind[behind].iter().all(still) { Ok(Move::still(before)) } else { Err(Looped) }
            }
            (Role::Cell(cell), layer) => match (fabric.cells[cell].enable, layer) {
                (Some(enable), Layer::First) => Ok(self.latch_first(cell, enable, before)),
                (Some(enable), Layer::Second) => self.latch_second(cell, enable, before),
                (None, Layer::First) => Ok(Move::still(before)),
                (None, Layer::Second) => self.flop_second(cell, before),
            },
        }
    }

    /// The value that a node has when a step begins.
    fn before(&mut self, layer: Layer, node: usize) -> Result<Literal, Looped> {
        let edge = Edge::new(node, false);
        match layer {
            Layer::First => Ok(self.value(edge)),
            Layer::Second => Ok(self.step(Layer::First, edge)?.wave.f),
        }
    }

    /// The algebra: the waveform of a node from those of its pins; `i` is the value it begins with.
    pub(super) fn combine(&mut self, op: Op, pins: &[Move], i: Literal) -> Move {
        if !pins.iter().any(|pin| pin.wave.may_move()) {
            return Move::still(i);
        }
        let tables = &self.fabric.cone.tables;
        let last: Vec<Literal> = pins.iter().map(|pin| pin.wave.f).collect();
        let f = self.clauses.value(op, tables, &last);
        let waves: Vec<Symbolic> = pins.iter().map(|pin| pin.wave).collect();
        let h = suspect(op, pins).then(|| self.clauses.hazard(op, tables, &waves, (i, f)));
        let unate = matches!(op, Op::And | Op::Enter | Op::Calm);
        let rise = pins.iter().any(|pin| pin.rise || (!unate && pin.fall));
        let fall = pins.iter().any(|pin| pin.fall || (!unate && pin.rise));
        let moves = i != f;
        Move { wave: Symbolic { i, f, h }, rise: rise && moves, fall: fall && moves }
    }
}

/// Whether a hazard is possible at all.
fn suspect(op: Op, pins: &[Move]) -> bool {
    if pins.iter().any(|pin| pin.wave.h.is_some()) {
        return true;
    }
    let changing = pins.iter().filter(|pin| pin.rise || pin.fall);
    match op {
        Op::And => {
            let rising = pins.iter().enumerate().filter(|(_, pin)| pin.rise);
            rising.into_iter().any(|(at, _)| pins.iter().enumerate().any(|(other, pin)| other != at && pin.fall))
        }
        Op::Xor => changing.count() >= 2,
        Op::Table(_) | Op::Enter => changing.count() >= 1,
        Op::Zero | Op::Free { .. } | Op::Calm => false,
    }
}
