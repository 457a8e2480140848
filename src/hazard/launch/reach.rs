//! The states that flip-flops can come to from their reset values, for small groups. A group is made of the flip-flops in
//! front of a target and of those that feed their data, while there are few; whatever else their data depends on is free.
//! The fixpoint is explicit: from each state the solver lists the next ones.
//!
//! A step here can do more than an event: any of the clocks may fire, and any of the asynchronous controls may act,
//! together or alone. So what is not reached here is not reached by the design, once it was reset.
//!
//! Flip-flops that one edge moves together are followed one at a time where their outputs start events of their own: the
//! others may have moved already or not. So such an event begins anywhere between a state and the next.

use std::collections::{BTreeMap, BTreeSet};

use super::encode::Values;
use super::fabric::{Cell, Fabric, Role};
use crate::hazard::clauses::Clauses;
use crate::hazard::cone::Edge;
use crate::hazard::solver::{Answer, Batsat, Literal, Solver};

/// The most flip-flops of a group.
const BITS: usize = 20;
/// Reached states and steps between them beyond which a group says nothing.
const STATES: usize = 1 << 13;
const STEPS: usize = 1 << 15;
/// States looked up on the way from a state to the next, in all.
const MIXES: usize = 1 << 20;
/// Conflicts per step, and sources tried as a synchronous reset.
const CONFLICTS: u64 = 2_000;
const RESETS: usize = 64;

/// See the module documentation.
#[derive(Clone, Debug)]
pub(super) struct Reachable {
    /// The flip-flops as free nodes; bit `n` of a state is the value of the one at position `n`.
    pub(super) group: Vec<usize>,
    states: BTreeSet<u32>,
    /// Those and all on the way from one to the next, each flip-flop having moved or not.
    between: BTreeSet<u32>,
}

/// When a state is looked at.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Moment {
    /// No flip-flop is about to move.
    Rest,
    /// A flip-flop moves, perhaps as one of several.
    Launch,
}

impl Moment {
    /// When the event of a root begins.
    pub(super) fn of(fabric: &Fabric<'_>, root: usize) -> Self {
        if matches!(fabric.role(root), Role::Cell(_)) { Moment::Launch } else { Moment::Rest }
    }
}

impl Reachable {
    /// Of the group in front of a target whose sources are `frees`; `None` when it has no reset value, every state is
    /// reachable, or the states are too many to list.
    pub(super) fn of(fabric: &Fabric<'_>, frees: &[usize]) -> Option<Self> {
        let group = group(fabric, frees)?;
        Search::new(fabric, &group).run()
    }

    pub(super) fn contains(&self, state: u32, moment: Moment) -> bool {
        self.at(moment).contains(&state)
    }

    fn at(&self, moment: Moment) -> &BTreeSet<u32> {
        match moment {
            Moment::Rest => &self.states,
            Moment::Launch => &self.between,
        }
    }

    /// The bits of an unreachable state that already tell that it is one, as a mask: as few as a greedy choice finds.
    pub(super) fn reason(&self, state: u32, moment: Moment) -> u32 {
        let mut mask = low_bits(self.group.len());
        for bit in (0..self.group.len()).map(|bit| 1u32 << bit) {
            let fewer = mask & !bit;
            if self.at(moment).iter().all(|reached| (reached ^ state) & fewer != 0) {
                mask = fewer;
            }
        }
        mask
    }
}

fn low_bits(count: usize) -> u32 {
    (1u32 << count) - 1
}

fn flop<'a>(fabric: &'a Fabric<'_>, node: usize) -> Option<&'a Cell> {
    fabric.cell(node).filter(|cell| cell.enable.is_none())
}

/// The flip-flops among `frees`, and level by level those that feed them, as long as all of a level fit; ascending.
fn group(fabric: &Fabric<'_>, frees: &[usize]) -> Option<Vec<usize>> {
    let mut group: BTreeSet<usize> = frees.iter().copied().filter(|&node| flop(fabric, node).is_some()).collect();
    if group.is_empty() || group.len() > BITS {
        return None;
    }
    loop {
        let data: Vec<usize> =
            group.iter().filter_map(|&node| flop(fabric, node)).map(|cell| cell.data.node()).collect();
        let feeding = fabric.frees(&data);
        let level: BTreeSet<usize> =
            feeding.into_iter().filter(|node| flop(fabric, *node).is_some() && !group.contains(node)).collect();
        if level.is_empty() || group.len() + level.len() > BITS {
            break;
        }
        group.extend(level);
    }
    // A flip-flop that clocks another one of the group moves before it: the steps below know no such order.
    let clocked_within = group.iter().filter_map(|&node| flop(fabric, node)).flat_map(|cell| &cell.clocks);
    let mut roots = clocked_within.flat_map(|(clock, _)| fabric.roots_of(clock.node()));
    if roots.any(|root| group.contains(root)) {
        return None;
    }
    Some(group.into_iter().collect())
}

struct Search<'a> {
    fabric: &'a Fabric<'a>,
    group: &'a [usize],
    clauses: Clauses<Batsat>,
    values: Values,
    now: Vec<Literal>,
    next: Vec<Literal>,
    data: Vec<Literal>,
}

impl<'a> Search<'a> {
    fn new(fabric: &'a Fabric<'a>, group: &'a [usize]) -> Self {
        let mut clauses: Clauses<Batsat> = Clauses::new();
        let mut values = Values::default();
        let now: Vec<Literal> =
            group.iter().map(|&node| values.get(&mut clauses, &fabric.cone, Edge::new(node, false))).collect();
        let mut search = Self { fabric, group, clauses, values, now, next: Vec::new(), data: Vec::new() };
        search.step();
        search
    }

    /// One literal for each clock that may fire and each control that may act, whatever drives them.
    fn step(&mut self) {
        let mut fires: BTreeMap<Vec<(Edge, u8)>, Literal> = BTreeMap::new();
        let mut acts: BTreeMap<Edge, Literal> = BTreeMap::new();
        for (&node, &now) in self.group.iter().zip(&self.now) {
            let Some(cell) = flop(self.fabric, node) else { continue };
            let data = self.values.get(&mut self.clauses, &self.fabric.cone, cell.data);
            let clocks: Vec<(Edge, u8)> = cell.clocks.iter().map(|&(clock, edge)| (clock, edge as u8)).collect();
            let fire = *fires.entry(clocks).or_insert_with(|| self.clauses.solver.variable());
            // Where a control is let go by what also clocks the cell, it may keep its value.
            let clock_roots: BTreeSet<usize> =
                cell.clocks.iter().flat_map(|(clock, _)| self.fabric.roots_of(clock.node())).copied().collect();
            let mut controls = cell.controls.iter().flat_map(|control| self.fabric.roots_of(control.net.node()));
            let fire = if controls.any(|root| clock_roots.contains(root)) {
                let free = self.clauses.solver.variable();
                self.clauses.and(&[fire, free])
            } else {
                fire
            };
            let mut next = self.clauses.mux(fire, data, now);
            for control in cell.controls.iter().rev() {
                let act = *acts.entry(control.net).or_insert_with(|| self.clauses.solver.variable());
                let value = match self.constant(control.value) {
                    Some(value) => self.clauses.constant(value),
                    None => self.clauses.solver.variable(),
                };
                next = self.clauses.mux(act, value, next);
            }
            self.next.push(next);
            self.data.push(data);
        }
    }

    fn constant(&self, edge: Edge) -> Option<bool> {
        let zero = self.fabric.cone.ops[edge.node()] == crate::hazard::cone::Op::Zero;
        zero.then(|| edge.inverted())
    }

    fn run(mut self) -> Option<Reachable> {
        let mut open: Vec<u32> = self.starts()?;
        let mut states: BTreeSet<u32> = open.iter().copied().collect();
        let mut between: BTreeSet<u32> = BTreeSet::new();
        let (mut steps, mut mixes) = (0, 0);
        while let Some(state) = open.pop() {
            // Found successors are ruled out while this state is looked at.
            let guard = self.clauses.solver.variable();
            let mut assumptions = self.is(&self.now, state);
            assumptions.push(guard);
            loop {
                match self.clauses.solver.solve(&assumptions, CONFLICTS) {
                    Answer::Unsatisfiable => break,
                    Answer::Open => return None,
                    Answer::Satisfiable => {}
                }
                steps += 1;
                let next = self.read(&self.next);
                if states.insert(next) {
                    open.push(next);
                }
                let moving = state ^ next;
                mixes += 1usize << moving.count_ones();
                if states.len() > STATES || steps > STEPS || mixes > MIXES {
                    return None;
                }
                // All subsets of the bits that move, from all of them down to none.
                let mut moved = moving;
                loop {
                    between.insert(state ^ moved);
                    if moved == 0 {
                        break;
                    }
                    moved = (moved - 1) & moving;
                }
                let mut other: Vec<Literal> = self.is(&self.next, next).into_iter().map(|literal| !literal).collect();
                other.push(!guard);
                self.clauses.solver.clause(&other);
            }
            self.clauses.solver.clause(&[!guard]);
        }
        let all = states.len() == 1usize << self.group.len();
        (!all).then(|| Reachable { group: self.group.to_vec(), states, between })
    }

    /// The states right after reset: each flip-flop has the value of an asynchronous control, or of its initialiser; one
    /// without may have any. Where no flip-flop has one, a source may reset them all by the clock.
    fn starts(&mut self) -> Option<Vec<u32>> {
        let mut given: Vec<BTreeSet<bool>> = Vec::new();
        for &node in self.group {
            let cell = flop(self.fabric, node)?;
            let controls = cell.controls.iter().filter_map(|control| self.constant(control.value));
            given.push(controls.chain(cell.init).collect());
        }
        if given.iter().all(BTreeSet::is_empty) {
            return Some(vec![self.synchronous_reset()?]);
        }
        let mut starts: Vec<u32> = vec![0];
        for (bit, values) in given.iter().enumerate() {
            let values: Vec<bool> =
                if values.is_empty() { vec![false, true] } else { values.iter().copied().collect() };
            starts = starts
                .iter()
                .flat_map(|start| values.iter().map(move |&value| start | u32::from(value) << bit))
                .collect();
            if starts.len() > STATES {
                return None;
            }
        }
        Some(starts)
    }

    /// The state that some value of one source outside the group gives to all data, whatever else holds.
    fn synchronous_reset(&mut self) -> Option<u32> {
        let outside = |node: &usize| !self.group.contains(node) && self.fabric.role(*node) == Role::Outside;
        let sources: Vec<usize> = self.values.frees.iter().copied().filter(outside).take(RESETS).collect();
        for source in sources {
            let source = self.values.get(&mut self.clauses, &self.fabric.cone, Edge::new(source, false));
            for active in [source, !source] {
                if self.clauses.solver.solve(&[active], CONFLICTS) != Answer::Satisfiable {
                    continue;
                }
                let state = self.read(&self.data);
                let fixed = self
                    .is(&self.data, state)
                    .into_iter()
                    .all(|literal| self.clauses.solver.solve(&[active, !literal], CONFLICTS) == Answer::Unsatisfiable);
                if fixed {
                    return Some(state);
                }
            }
        }
        None
    }

    /// Literals that say that some bits are those of a state.
    fn is(&self, bits: &[Literal], state: u32) -> Vec<Literal> {
        bits.iter().enumerate().map(|(at, literal)| literal.inverted_if(state >> at & 1 == 0)).collect()
    }

    /// The state that some bits have in the last model.
    fn read(&self, bits: &[Literal]) -> u32 {
        let values = bits.iter().enumerate().map(|(at, &literal)| u32::from(self.clauses.solver.value(literal)) << at);
        values.fold(0, |state, bit| state | bit)
    }
}
