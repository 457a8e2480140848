//! Which values the flip-flops of a machine can have after a reset, for the [`crate::launch_explorer`]: those with a reset
//! value (an initial value, an asynchronous control to a constant, or inputs that force their data) start there together, all other sources are free.
//!
//! From each state every clock net may fire or not, and every control act or not, in all combinations: more than can
//! really happen, but what is left out then never happens. The event of a cell may be one of several that a clock starts,
//! with the others before or behind it: it begins anywhere between a state and the next.

use std::collections::BTreeSet;

use crate::launch_explorer::{Machine, Net, Trigger};

/// Sources that start from a reset value, and the values that they can come to; bits as in a state of the machine.
pub struct Reach {
    pub group: u32,
    inputs: usize,
    values: BTreeSet<u32>,
    /// Each value, and each made of bits of a value and of one that follows it.
    between: BTreeSet<u32>,
}

impl Reach {
    pub fn of(machine: &Machine) -> Self {
        let mut group = 0;
        let mut start = 0;
        for cell in 0..machine.cells.len() {
            if let Some(value) = reset_value(machine, cell) {
                group |= 1 << (machine.inputs + cell);
                start |= u32::from(value) << (machine.inputs + cell);
            }
        }
        let values = BTreeSet::from([start]);
        let mut reach = Self { group, inputs: machine.inputs, between: values.clone(), values };
        let mut open = vec![start];
        while let Some(value) = open.pop() {
            for next in successors(machine, group, value) {
                if reach.values.insert(next) {
                    open.push(next);
                }
                let agree = !(value ^ next);
                reach.between.extend((0..=group).filter(|mix| mix & !group == 0 && (mix ^ value) & agree == 0));
            }
        }
        reach
    }

    /// Whether the event of a root can begin in a state.
    pub fn occurs(&self, state: u32, root: usize) -> bool {
        let values = if root < self.inputs { &self.values } else { &self.between };
        values.contains(&(state & self.group))
    }
}

fn reset_value(machine: &Machine, cell: usize) -> Option<bool> {
    let cell = &machine.cells[cell];
    // A synchronous reset: with some values of the inputs the data is one constant, whatever the cells store.
    let forced = |inputs: u32| {
        let mut values =
            (0..1 << machine.cells.len()).map(|cells: u32| machine.at(cell.data, cells << machine.inputs | inputs));
        let first = values.next()?;
        values.all(|value| value == first).then_some(first)
    };
    if !matches!(cell.trigger, Trigger::Clock { .. }) {
        return None;
    }
    let constants = cell.controls.iter().find_map(|control| match control.value {
        Net::Constant(value) => Some(value),
        _ => None,
    });
    cell.init.or(constants).or_else(|| (0..1 << machine.inputs).find_map(forced))
}

/// What may happen to a cell, apart from holding.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Cause {
    Clock(Net, bool),
    Control(Net, bool),
}

fn successors(machine: &Machine, group: u32, value: u32) -> BTreeSet<u32> {
    let members = (0..machine.cells.len()).filter(|cell| group >> (machine.inputs + cell) & 1 == 1);
    let members: Vec<usize> = members.collect();
    let mut causes = BTreeSet::new();
    for &cell in &members {
        let cell = &machine.cells[cell];
        if let Trigger::Clock { net, rising } = cell.trigger {
            causes.insert(Cause::Clock(net, rising));
        }
        causes.extend(cell.controls.iter().map(|control| Cause::Control(control.net, control.active)));
    }
    let causes: Vec<Cause> = causes.into_iter().collect();
    let mut next = BTreeSet::new();
    for state in (0..1 << machine.sources()).filter(|state| state & group == value) {
        for acting in 0..1usize << causes.len() {
            let acts = |cause| causes.iter().position(|&one| one == cause).is_some_and(|at| acting >> at & 1 == 1);
            let mut after = value;
            for &cell in &members {
                let source = machine.inputs + cell;
                let cell = &machine.cells[cell];
                let control = cell.controls.iter().find(|control| acts(Cause::Control(control.net, control.active)));
                let clocked = matches!(cell.trigger, Trigger::Clock { net, rising } if acts(Cause::Clock(net, rising)));
                let taken = match control {
                    Some(control) => machine.at(control.value, state),
                    None if clocked => machine.at(cell.data, state),
                    None => continue,
                };
                after = after & !(1 << source) | u32::from(taken) << source;
            }
            next.insert(after);
        }
    }
    next
}
