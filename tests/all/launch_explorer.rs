//! The independent opponent of the launch analysis: sequential circuits of a few flip-flops and latches, explored in two
//! steps from every settled state. It has its own circuit type and uses nothing of the product; in each step it walks
//! through every order in which the delays of gates and wires can expire ([`crate::launch_delays`]).
//!
//! The model. A *source* is an input or the output of a cell. An event starts in a settled state: a cell with an active
//! asynchronous control has the value of that control, an open latch has the value of its data. One root changes; in the
//! first step this change travels while all flip-flops hold, and latches that are open pass it on; a latch that closes
//! while its data moves may do anything. In the second step the flip-flops whose clock pin saw its edge take the data from
//! before the edge, cells under an active control take its value, and latches that the first step opened let their data
//! through, at a moment of their own. A target glitches when one of the steps shows more changes than its end points need,
//! or when the second step takes back what the first did.
//!
//! The root may itself be a cell's output that reaches a clock, an enable or a control. Its own step from its old value is
//! judged in the launch that moves it, so here only the second step and both together are. If its cell is open or under an
//! active control, the root moves to what the cell wants; a flip-flop moves while its clock rests behind its edge, a closed
//! latch not at all.
//!
//! Invariant: latches read inputs, flip-flops and latches with a lower number only, so no loop runs through open latches.

use std::collections::{BTreeSet, HashMap};

use crate::explorer::{Glitch, Op, Seen};
use crate::launch_delays::{Delays, Role, Step};

/// What drives a pin.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Net {
    Input(usize),
    /// The output of a flip-flop or latch.
    Cell(usize),
    Gate(usize),
    Constant(bool),
}

/// A gate; it reads inputs, cells, constants and earlier gates.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Gate {
    pub op: Op,
    pub pins: Vec<Net>,
}

/// An asynchronous control: while `net` is `active` the cell takes the value of `value`.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Control {
    pub net: Net,
    pub active: bool,
    pub value: Net,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Trigger {
    /// A flip-flop, and whether it samples the rising edge.
    Clock { net: Net, rising: bool },
    /// A latch, open while the net has the value `active`.
    Enable { net: Net, active: bool },
}

#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Cell {
    pub trigger: Trigger,
    pub data: Net,
    /// The strongest first.
    pub controls: Vec<Control>,
    /// The first value, where one is given.
    pub init: Option<bool>,
}

/// A circuit of at most 16 sources and 64 gates. Sources are numbered: the inputs, then the cells.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct Machine {
    pub inputs: usize,
    pub gates: Vec<Gate>,
    pub cells: Vec<Cell>,
}

impl Machine {
    pub fn new(inputs: usize) -> Self {
        Self { inputs, ..Self::default() }
    }

    pub fn gate(&mut self, op: Op, pins: &[Net]) -> Net {
        self.gates.push(Gate { op, pins: pins.to_vec() });
        Net::Gate(self.gates.len() - 1)
    }

    pub fn cell(&mut self, trigger: Trigger, data: Net) -> Net {
        self.cells.push(Cell { trigger, data, controls: Vec::new(), init: None });
        Net::Cell(self.cells.len() - 1)
    }

    pub fn sources(&self) -> usize {
        self.inputs + self.cells.len()
    }

    /// The number of the source, if the net is one.
    pub fn source(&self, net: Net) -> Option<usize> {
        match net {
            Net::Input(input) => Some(input),
            Net::Cell(cell) => Some(self.inputs + cell),
            Net::Gate(_) | Net::Constant(_) => None,
        }
    }

    fn value(&self, net: Net, state: u32, gates: &[bool]) -> bool {
        match net {
            Net::Input(input) => state >> input & 1 == 1,
            Net::Cell(cell) => state >> (self.inputs + cell) & 1 == 1,
            Net::Gate(gate) => gates[gate],
            Net::Constant(value) => value,
        }
    }

    /// The values of all gates when the sources have these values.
    fn gates(&self, state: u32) -> Vec<bool> {
        let mut values = Vec::with_capacity(self.gates.len());
        for gate in &self.gates {
            let value = gate.op.value(gate.pins.iter().map(|&pin| self.value(pin, state, &values)));
            values.push(value);
        }
        values
    }

    pub fn at(&self, net: Net, state: u32) -> bool {
        self.value(net, state, &self.gates(state))
    }

    /// The sources in front of a net, up to the outputs of cells; bit by source.
    pub fn cone(&self, net: Net) -> u32 {
        match net {
            Net::Gate(gate) => self.gates[gate].pins.iter().fold(0, |cone, &pin| cone | self.cone(pin)),
            _ => self.source(net).map_or(0, |source| 1 << source),
        }
    }

    /// The value that the strongest active control gives to a cell.
    fn controlled(&self, cell: usize, state: u32) -> Option<bool> {
        let mut controls = self.cells[cell].controls.iter();
        let control = controls.find(|control| self.at(control.net, state) == control.active)?;
        Some(self.at(control.value, state))
    }

    /// Whether the cell is a latch whose enable is active, whatever its controls say.
    fn is_open(&self, cell: usize, state: u32) -> bool {
        match self.cells[cell].trigger {
            Trigger::Clock { .. } => false,
            Trigger::Enable { net, active } => self.at(net, state) == active,
        }
    }

    /// The value that a cell takes by itself in this state.
    fn wanted(&self, cell: usize, state: u32) -> Option<bool> {
        let passed = || self.is_open(cell, state).then(|| self.at(self.cells[cell].data, state));
        self.controlled(cell, state).or_else(passed)
    }

    fn holds(&self, cell: usize, state: u32) -> bool {
        let present = state >> (self.inputs + cell) & 1 == 1;
        self.wanted(cell, state).is_none_or(|wanted| wanted == present)
    }

    /// Whether an event of this root can start here.
    fn can_start(&self, state: u32, root: usize) -> bool {
        (0..self.cells.len())
            .all(|cell| if self.inputs + cell == root { self.can_move(cell, state) } else { self.holds(cell, state) })
    }

    /// Whether the output of a cell can be about to change: to what the cell wants; a flip-flop that nothing controls just
    /// after its edge, while its clock rests at the level behind it; a closed latch never. (One that raced as it closed in a
    /// second step is a hazard on whatever it drives in that step already.)
    fn can_move(&self, cell: usize, state: u32) -> bool {
        let present = state >> (self.inputs + cell) & 1 == 1;
        match (self.wanted(cell, state), self.cells[cell].trigger) {
            (Some(wanted), _) => wanted != present,
            (None, Trigger::Clock { net, rising }) => self.at(net, state) == rising,
            (None, Trigger::Enable { .. }) => false,
        }
    }

    /// The sources whose changes are events.
    pub fn roots(&self) -> Vec<usize> {
        let mut reached = 0u32;
        for cell in &self.cells {
            let (Trigger::Clock { net, .. } | Trigger::Enable { net, .. }) = cell.trigger;
            reached |= self.cone(net);
            for control in &cell.controls {
                reached |= self.cone(control.net);
            }
        }
        (0..self.sources()).filter(|&source| source < self.inputs || reached >> source & 1 == 1).collect()
    }

    /// The nets that drive pins, each once; inputs and constants are left out, they are clean.
    pub fn pins(&self) -> BTreeSet<Net> {
        let mut nets = BTreeSet::new();
        for cell in &self.cells {
            let (Trigger::Clock { net, .. } | Trigger::Enable { net, .. }) = cell.trigger;
            nets.insert(net);
            nets.extend(cell.controls.iter().map(|control| control.net));
        }
        nets.retain(|net| !matches!(net, Net::Input(_) | Net::Constant(_)));
        nets
    }

    fn is_latch(&self, cell: usize) -> bool {
        matches!(self.cells[cell].trigger, Trigger::Enable { .. })
    }
}

/// When a target glitches.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum When {
    First,
    Second,
    Both,
}

/// A glitch and the event that shows it.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Shown {
    pub kind: Glitch,
    pub when: When,
    pub root: usize,
    /// Whether the root rises.
    pub rises: bool,
    /// The one source in front of the target that changes.
    pub alone: Option<usize>,
    /// Whether that is a clean change of its own, while all others rest.
    pub clean: bool,
    /// The one source that changes when one looks through latches that pass.
    pub behind: Option<usize>,
    /// Whether the target's function leaves the way from its first to its last value; `None` where a latch that does not
    /// simply hold or pass is part of it.
    pub function: Option<bool>,
}

/// Explores a machine; keeps what it learnt about a step of a net.
pub struct Explorer<'a> {
    machine: &'a Machine,
    seen: Seen,
    known: HashMap<(Net, Step), bool>,
}

impl<'a> Explorer<'a> {
    pub fn new(machine: &'a Machine) -> Self {
        Self { machine, seen: Seen::default(), known: HashMap::new() }
    }

    /// Everything that `target` can show from the settled states that `occurs` admits for the event of a root.
    pub fn shown(&mut self, target: Net, occurs: impl Fn(u32, usize) -> bool) -> BTreeSet<Shown> {
        let mut shown = BTreeSet::new();
        for state in 0..1 << self.machine.sources() {
            for root in self.machine.roots() {
                if occurs(state, root) && self.machine.can_start(state, root) {
                    self.event(target, state, root, &mut shown);
                }
            }
        }
        shown
    }

    fn event(&mut self, target: Net, state: u32, root: usize, shown: &mut BTreeSet<Shown>) {
        let machine = self.machine;
        let value = |state: u32| machine.at(target, state);
        let rises = state >> root & 1 == 0;
        for first in self.first(state, root) {
            if root < machine.inputs && self.glitches(target, &first) {
                let kind = Glitch::of(value(state), value(first.after));
                shown.insert(self.one_step(target, &first, (kind, When::First), (root, rises)));
            }
            for second in self.second(state, &first) {
                let [before, between, after] = [state, first.after, second.after].map(value);
                if self.glitches(target, &second) {
                    let kind = Glitch::of(between, after);
                    shown.insert(self.one_step(target, &second, (kind, When::Second), (root, rises)));
                }
                if before != between && between != after {
                    let kind = Glitch::of(before, after);
                    let (when, function) = (When::Both, Some(true));
                    shown.insert(Shown { kind, when, root, rises, alone: None, clean: false, behind: None, function });
                }
            }
        }
    }

    fn one_step(
        &mut self,
        target: Net,
        step: &Step,
        (kind, when): (Glitch, When),
        (root, rises): (usize, bool),
    ) -> Shown {
        let cone = self.machine.cone(target);
        let alone = only(cone & step.moved());
        let own = alone.is_some_and(|source| matches!(step.roles[source], Role::Moves | Role::Opens));
        let clean = own && self.are_clean(cone, step);
        let passing = (0..step.roles.len()).filter(|&source| self.passes(source, step));
        let through = passing.fold(self.reaching(target, step), |through, source| through & !(1 << source));
        let behind = only(through & step.moved());
        Shown { kind, when, root, rises, alone, clean, behind, function: self.leaves(target, step) }
    }

    /// Whether a source is a latch that is open all the time, or whose value as it opens is that of its data: then it does
    /// what its data does, and nobody can tell the moment.
    fn passes(&self, source: usize, step: &Step) -> bool {
        let own = step.before >> source & 1 == 1;
        let data = |source: usize| self.machine.cells[source - self.machine.inputs].data;
        match step.roles[source] {
            Role::Passes => true,
            Role::Opens => self.machine.at(data(source), step.before) == own,
            Role::Holds | Role::Moves | Role::Races => false,
        }
    }

    /// Whether none of these sources does more than its two values need.
    fn are_clean(&mut self, sources: u32, step: &Step) -> bool {
        let cells = bits(sources).into_iter().filter_map(|source| source.checked_sub(self.machine.inputs));
        cells.map(Net::Cell).all(|cell| !self.glitches(cell, step))
    }

    /// The first step of an event in every outcome.
    fn first(&mut self, state: u32, root: usize) -> Vec<Step> {
        let machine = self.machine;
        let mut step = Step::new(machine, state);
        step.set(root, Role::Moves, state >> root & 1 == 0);
        let mut steps = vec![step];
        for cell in (0..machine.cells.len()).filter(|&cell| machine.is_latch(cell)) {
            let source = machine.inputs + cell;
            if source == root {
                continue;
            }
            for mut step in std::mem::take(&mut steps) {
                let controlled = machine.controlled(cell, step.before).or(machine.controlled(cell, step.after));
                let open = (machine.is_open(cell, step.before), machine.is_open(cell, step.after));
                match open {
                    _ if controlled.is_some() => steps.push(step),
                    (false, _) => steps.push(step),
                    (true, true) => {
                        step.set(source, Role::Passes, machine.at(machine.cells[cell].data, step.after));
                        steps.push(step);
                    }
                    (true, false) if self.rests(machine.cells[cell].data, &step) => steps.push(step),
                    (true, false) => steps.extend(races(&step, source)),
                }
            }
        }
        steps
    }

    /// The second step of an event in every outcome, after `first` from `state`.
    fn second(&mut self, state: u32, first: &Step) -> Vec<Step> {
        let machine = self.machine;
        let mut steps = vec![Step::new(machine, first.after)];
        for cell in (0..machine.cells.len()).filter(|&cell| !machine.is_latch(cell)) {
            let source = machine.inputs + cell;
            let old = first.after >> source & 1 == 1;
            let next = self.next_values(cell, state, first, old);
            for step in std::mem::take(&mut steps) {
                for &value in &next {
                    let mut step = step.clone();
                    step.set(source, if value == old { Role::Holds } else { Role::Moves }, value);
                    steps.push(step);
                }
            }
        }
        for cell in (0..machine.cells.len()).filter(|&cell| machine.is_latch(cell)) {
            let source = machine.inputs + cell;
            let data = machine.cells[cell].data;
            let was_open = machine.is_open(cell, state) && machine.controlled(cell, state).is_none();
            for mut step in std::mem::take(&mut steps) {
                let old = step.before >> source & 1 == 1;
                let open = (machine.is_open(cell, step.before), machine.is_open(cell, step.after));
                match (machine.controlled(cell, step.before), open) {
                    (Some(value), _) => {
                        step.set(source, Role::Moves, value);
                        steps.push(step);
                    }
                    (None, (false, _)) => steps.push(step),
                    (None, (true, true)) => {
                        let role = if was_open { Role::Passes } else { Role::Opens };
                        step.set(source, role, machine.at(data, step.after));
                        steps.push(step);
                    }
                    (None, (true, false)) => {
                        if self.rests(data, &step) && machine.at(data, step.before) == old {
                            steps.push(step);
                        } else {
                            steps.extend(races(&step, source));
                        }
                    }
                }
            }
        }
        steps
    }

    /// The values that a flip-flop may take in the second step.
    fn next_values(&self, cell: usize, state: u32, first: &Step, old: bool) -> Vec<bool> {
        let machine = self.machine;
        if let Some(value) = machine.controlled(cell, first.after) {
            return vec![value];
        }
        let Trigger::Clock { net, rising } = machine.cells[cell].trigger else { return vec![old] };
        let clock = (machine.at(net, state), machine.at(net, first.after));
        if clock != (!rising, rising) {
            return vec![old];
        }
        let sampled = machine.at(machine.cells[cell].data, state);
        // Released and clocked at the same time: either may win.
        let released = machine.controlled(cell, state).is_some();
        if released && sampled != old { vec![old, sampled] } else { vec![sampled] }
    }

    /// Whether the net is a clean constant in this step.
    fn rests(&mut self, net: Net, step: &Step) -> bool {
        self.machine.at(net, step.before) == self.machine.at(net, step.after) && !self.glitches(net, step)
    }

    /// Whether some order of delays shows more changes of the net than its two values need.
    fn glitches(&mut self, net: Net, step: &Step) -> bool {
        let relevant = self.reaching(net, step);
        let mut key = Step { before: step.before & relevant, after: step.after & relevant, roles: step.roles.clone() };
        for (source, role) in key.roles.iter_mut().enumerate() {
            if relevant >> source & 1 == 0 {
                *role = Role::Holds;
            }
        }
        if let Some(&known) = self.known.get(&(net, key.clone())) {
            return known;
        }
        let glitches = Delays::new(self.machine, net, step).is_some_and(|delays| delays.glitches(&mut self.seen));
        self.known.insert((net, key), glitches);
        glitches
    }

    /// The sources that decide about a net in this step: those of its cone, and behind latches that let something through
    /// those of their data.
    fn reaching(&self, net: Net, step: &Step) -> u32 {
        let machine = self.machine;
        let mut reaching = machine.cone(net);
        for cell in (0..machine.cells.len()).rev() {
            let source = machine.inputs + cell;
            if reaching >> source & 1 == 1 && matches!(step.roles[source], Role::Passes | Role::Opens) {
                reaching |= machine.cone(machine.cells[cell].data);
            }
        }
        reaching
    }

    /// Whether the function of the net, with the sources moving one after another, shows more changes than its end points.
    fn leaves(&self, net: Net, step: &Step) -> Option<bool> {
        let machine = self.machine;
        let reaching = self.reaching(net, step);
        if bits(reaching).into_iter().any(|source| matches!(step.roles[source], Role::Opens | Role::Races)) {
            return None;
        }
        let moves: Vec<usize> =
            bits(reaching & step.moved()).into_iter().filter(|&source| step.roles[source] == Role::Moves).collect();
        let value = |taken: usize| {
            let moved = moves.iter().enumerate().filter(|(at, _)| taken >> at & 1 == 1);
            let mut state = moved.fold(step.before, |state, (_, source)| state ^ 1 << source);
            for cell in 0..machine.cells.len() {
                if step.roles[machine.inputs + cell] == Role::Passes {
                    let passed = machine.at(machine.cells[cell].data, state);
                    state = state & !(1 << (machine.inputs + cell)) | u32::from(passed) << (machine.inputs + cell);
                }
            }
            machine.at(net, state)
        };
        let all = 0..1usize << moves.len();
        let (before, after) = (value(0), value((1 << moves.len()) - 1));
        if before == after {
            return Some(all.into_iter().any(|taken| value(taken) != before));
        }
        // Back to the first value after some subset had brought the last one.
        let returns =
            |taken: usize| (0..1usize << moves.len()).any(|more| more & taken == taken && value(more) == before);
        Some(all.into_iter().any(|taken| value(taken) == after && returns(taken)))
    }
}

fn bits(mask: u32) -> BTreeSet<usize> {
    (0..32).filter(|&bit| mask >> bit & 1 == 1).collect()
}

fn only(mask: u32) -> Option<usize> {
    (mask.count_ones() == 1).then(|| mask.trailing_zeros() as usize)
}

fn races(step: &Step, source: usize) -> [Step; 2] {
    [false, true].map(|value| {
        let mut step = step.clone();
        step.set(source, Role::Races, value);
        step
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    const CLK: Net = Net::Input(0);
    const A: Net = Net::Input(1);
    const B: Net = Net::Input(2);

    fn rises(net: Net) -> Trigger {
        Trigger::Clock { net, rising: true }
    }

    fn falls(net: Net) -> Trigger {
        Trigger::Clock { net, rising: false }
    }

    fn open(net: Net, active: bool) -> Trigger {
        Trigger::Enable { net, active }
    }

    /// Makes the target the clock of one more flip-flop, and requires exactly these glitches: kinds, steps and whether
    /// the function itself leaves its way.
    #[track_caller]
    fn check(mut machine: Machine, target: Net, expected: &[(Glitch, When, Option<bool>)]) {
        machine.cell(rises(target), A);
        check_as_it_is(&machine, target, expected);
    }

    #[track_caller]
    fn check_as_it_is(machine: &Machine, target: Net, expected: &[(Glitch, When, Option<bool>)]) {
        let shown = Explorer::new(machine).shown(target, |_, _| true);
        let found: BTreeSet<_> = shown.iter().map(|one| (one.kind, one.when, one.function)).collect();
        assert_eq!(found, expected.iter().copied().collect(), "{shown:#?}");
    }

    // The cases below are derived by hand.

    /// An enable that moves after the rising edge cuts the pulse of an AND; after the falling edge it cannot.
    #[test]
    fn and_gate_with_enables_of_both_edges() {
        let mut machine = Machine::new(2);
        let enable = machine.cell(rises(CLK), A);
        let gated = machine.gate(Op::And, &[CLK, enable]);
        check(machine, gated, &[(Glitch::Static0, When::Both, Some(true))]);
        let mut machine = Machine::new(2);
        let enable = machine.cell(falls(CLK), A);
        let gated = machine.gate(Op::And, &[CLK, enable]);
        check(machine, gated, &[]);
    }

    /// The latch of a clock gate lets nothing through while the gate is open; in the wrong phase it passes the change of the
    /// register behind it, and when it held another value than that register it shows two changes.
    #[test]
    fn latch_gate_in_both_phases() {
        for (phase, expected) in [
            (false, &[][..]),
            (
                true,
                &[
                    (Glitch::Static0, When::Both, Some(true)),
                    (Glitch::Static0, When::Second, None),
                    (Glitch::Static1, When::Second, None),
                ],
            ),
        ] {
            let mut machine = Machine::new(2);
            let enable = machine.cell(rises(CLK), A);
            let held = machine.cell(open(CLK, phase), enable);
            let gated = machine.gate(Op::And, &[CLK, held]);
            check(machine, gated, expected);
        }
    }

    /// Two bits that count 0 1 2 3: the AND that decodes 2 is passed on the way from 3 to 0.
    #[test]
    fn binary_counter_passes_values_it_never_takes() {
        let mut machine = Machine::new(1);
        let (low, high) = (Net::Cell(0), Net::Cell(1));
        let not_low = machine.gate(Op::Not, &[low]);
        let carry = machine.gate(Op::Xor, &[low, high]);
        machine.cell(rises(CLK), not_low);
        machine.cell(rises(CLK), carry);
        let two = machine.gate(Op::And, &[high, not_low]);
        machine.cell(rises(two), CLK);
        check_as_it_is(&machine, two, &[(Glitch::Static0, When::Second, Some(true))]);
    }

    /// Two bits in Gray code move one at a time, and the same decode is clean.
    #[test]
    fn gray_counter_moves_one_bit() {
        let mut machine = Machine::new(1);
        let (low, high) = (Net::Cell(0), Net::Cell(1));
        let not_high = machine.gate(Op::Not, &[high]);
        machine.cell(rises(CLK), not_high);
        machine.cell(rises(CLK), low);
        let not_low = machine.gate(Op::Not, &[low]);
        let decode = machine.gate(Op::And, &[high, not_low]);
        machine.cell(rises(decode), CLK);
        check_as_it_is(&machine, decode, &[]);
    }

    /// The reset of that counter moves both bits at once: from 11 to 00 the decode of `high` without `low` is passed.
    #[test]
    fn reset_launches_all_bits() {
        let mut machine = Machine::new(2);
        let (low, high) = (Net::Cell(0), Net::Cell(1));
        let not_high = machine.gate(Op::Not, &[high]);
        machine.cell(rises(CLK), not_high);
        machine.cell(rises(CLK), low);
        for cell in &mut machine.cells {
            cell.controls.push(Control { net: A, active: true, value: Net::Constant(false) });
        }
        let not_low = machine.gate(Op::Not, &[low]);
        let decode = machine.gate(Op::And, &[high, not_low]);
        machine.cell(rises(decode), CLK);
        check_as_it_is(&machine, decode, &[(Glitch::Static0, When::Second, Some(true))]);
    }

    /// A divided clock with a reset: while reset holds the divider, it does not move, so nothing takes a move back.
    #[test]
    fn reset_divider_is_a_clean_clock() {
        let mut machine = Machine::new(2);
        let half = Net::Cell(0);
        let other = machine.gate(Op::Not, &[half]);
        machine.cell(rises(CLK), other);
        machine.cells[0].controls.push(Control { net: A, active: false, value: Net::Constant(false) });
        check(machine, half, &[]);
    }

    /// The output of a flip-flop is its own clear: the event that sets it clears it again.
    #[test]
    fn self_clearing_flop_pulses() {
        let mut machine = Machine::new(1);
        let pulse = machine.cell(rises(CLK), Net::Constant(true));
        machine.cells[0].controls.push(Control { net: pulse, active: true, value: Net::Constant(false) });
        check_as_it_is(&machine, pulse, &[(Glitch::Static0, When::Both, Some(true))]);
    }

    /// A ripple counter, the second bit clocked by the fall of the first: the decode of 00 is passed from 01 to 10.
    #[test]
    fn ripple_counter_shows_the_values_in_between() {
        let mut machine = Machine::new(1);
        let (low, high) = (Net::Cell(0), Net::Cell(1));
        let not_low = machine.gate(Op::Not, &[low]);
        let not_high = machine.gate(Op::Not, &[high]);
        machine.cell(falls(CLK), not_low);
        machine.cell(falls(low), not_high);
        let zero = machine.gate(Op::Nor, &[low, high]);
        machine.cell(rises(zero), CLK);
        check_as_it_is(&machine, zero, &[(Glitch::Static0, When::Both, Some(true))]);
    }

    /// A selector of two inputs steered by a register: the register alone moves, and both products may be off.
    #[test]
    fn single_change_of_a_register_names_it() {
        let mut machine = Machine::new(3);
        let select = machine.cell(rises(CLK), A);
        let not_select = machine.gate(Op::Not, &[select]);
        let upper = machine.gate(Op::And, &[select, A]);
        let lower = machine.gate(Op::And, &[not_select, B]);
        let chosen = machine.gate(Op::Or, &[upper, lower]);
        machine.cell(rises(chosen), A);
        let shown = Explorer::new(&machine).shown(chosen, |_, _| true);
        let select = machine.source(select);
        assert!(!shown.is_empty());
        for one in &shown {
            assert_eq!((one.kind, one.alone, one.function), (Glitch::Static1, select, Some(false)));
            assert_eq!((one.when, one.root), (When::Second, 0));
        }
    }

    /// An input that gates a latch and is its data too: as it closes the latch, anything may be stored.
    #[test]
    fn latch_closed_by_its_own_data_races() {
        let mut machine = Machine::new(2);
        let held = machine.cell(open(CLK, true), CLK);
        let expected = [(Glitch::Dynamic, When::First, None), (Glitch::Static1, When::First, None)];
        check(machine, held, &expected);
    }

    /// An open latch passes the hazard of its data in the first step.
    #[test]
    fn open_latch_passes_a_hazard() {
        let mut machine = Machine::new(3);
        let inverted = machine.gate(Op::Not, &[A]);
        let pulse = machine.gate(Op::And, &[A, inverted]);
        let held = machine.cell(open(B, true), pulse);
        machine.cell(rises(held), CLK);
        check_as_it_is(&machine, held, &[(Glitch::Static0, When::First, Some(false))]);
    }

    /// Registers of two unrelated clocks never move together.
    #[test]
    fn unrelated_clocks_move_one_at_a_time() {
        let mut machine = Machine::new(3);
        let left = machine.cell(rises(CLK), A);
        let right = machine.cell(rises(B), A);
        let not_right = machine.gate(Op::Not, &[right]);
        let both = machine.gate(Op::And, &[left, not_right]);
        check(machine, both, &[]);
        let mut machine = Machine::new(3);
        let left = machine.cell(rises(CLK), A);
        let right = machine.cell(rises(CLK), A);
        let not_right = machine.gate(Op::Not, &[right]);
        let both = machine.gate(Op::And, &[left, not_right]);
        check(machine, both, &[(Glitch::Static0, When::Second, Some(true))]);
    }

    /// A register behind a clock gate and the enable of that gate, which moves on the other edge: the enable never opens the
    /// gate in the middle of a pulse, so it never launches the register. Of the same edge it does, and when the gate is open
    /// already both fall in one launch.
    #[test]
    fn enable_of_a_gate_launches_nothing_by_itself() {
        for (enabled_by, expected) in [
            (falls(CLK), &[][..]),
            (rises(CLK), &[(Glitch::Static0, When::Both, Some(true)), (Glitch::Static0, When::Second, Some(true))]),
        ] {
            let mut machine = Machine::new(2);
            let enable = machine.cell(enabled_by, A);
            let gated = machine.gate(Op::And, &[CLK, enable]);
            let kept = machine.cell(rises(gated), A);
            let inverted = machine.gate(Op::Not, &[kept]);
            let decode = machine.gate(Op::And, &[enable, inverted]);
            check(machine, decode, expected);
        }
    }

    /// With an enable as data feedback, both registers move or none does; from 01 they cannot come to 10 while the enable is off.
    #[test]
    fn flip_flop_that_keeps_its_value_does_not_move() {
        let mut machine = Machine::new(2);
        let kept = machine.cell(rises(CLK), Net::Cell(0));
        let free = machine.cell(rises(CLK), A);
        let inverted = machine.gate(Op::Not, &[free]);
        let both = machine.gate(Op::And, &[kept, inverted]);
        check(machine, both, &[]);
    }
}
