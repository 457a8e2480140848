//! What cells do in an event: the rules of flip-flops and latches in the two steps, what makes a state settled, and
//! which moves a root that is itself a cell can make. An end point of a pin decides whether a latch is open and a control
//! active; a hazard on that pin is judged where the pin is a target.

use super::encode::{Encoder, LatchDoes, Layer, Looped, Move, Next};
use super::fabric::{Cell, Role};
use crate::graph;
use crate::hazard::cone::Edge;
use crate::hazard::solver::{Literal, Solver};
use crate::hazard::symbolic::Symbolic;

/// A clean waveform from `i` to `f`.
fn clean(i: Literal, f: Literal) -> Symbolic {
    Symbolic { i, f, h: None }
}

impl Encoder<'_> {
    /// A latch while the root's change travels.
    pub(super) fn latch_first(&mut self, index: usize, enable: Edge, before: Literal) -> Move {
        let cell = &self.fabric.cells[index];
        let data = self.data(index).steps[Layer::First as usize];
        let enable = self.done(Layer::First, enable).wave;
        if !data.may_move() {
            return Move::still(before);
        }
        let mut active: Vec<Literal> = Vec::new();
        for control in &cell.controls {
            let net = self.done(Layer::First, control.net).wave;
            active.extend([net.i, net.f]);
        }
        let free = !self.clauses.or(&active);
        self.settle(index);
        let passing = self.clauses.and(&[free, enable.i, enable.f]);
        let closing = self.clauses.and(&[free, enable.i, !enable.f]);
        let races = self.moves(data);
        let raced = self.clauses.and(&[closing, races]);
        self.latch(Layer::First, index, (before, before), data, LatchDoes { passing, raced }, raced)
    }

    /// A latch while the cells take their next values.
    pub(super) fn latch_second(&mut self, index: usize, enable: Edge, before: Literal) -> Result<Move, Looped> {
        let cell = &self.fabric.cells[index];
        let data = self.data(index).steps[Layer::Second as usize];
        let opens = self.done(Layer::Second, enable).wave;
        let enable = self.step(Layer::First, enable)?.wave;
        let controls = self.controls(cell)?;
        self.settle(index);
        let open = self.clauses.and(&[!controls.after, enable.f]);
        self.data(index).open[1] = Some(open);
        let stays = self.clauses.and(&[open, opens.f]);
        let was_open = self.clauses.and(&[!controls.before, enable.i]);
        let late = self.clauses.and(&[stays, !was_open]);
        let closing = self.clauses.and(&[open, !opens.f]);
        let differs = self.clauses.xor(before, data.i);
        let moves = self.moves(data);
        let torn = self.clauses.or(&[moves, differs]);
        let torn = self.clauses.and(&[closing, torn]);
        let changes = self.clauses.xor(data.i, data.f);
        let overtaken = self.clauses.and(&[late, changes, differs]);
        let does = LatchDoes { passing: stays, raced: self.clauses.or(&[torn, overtaken]) };
        // An active control puts its value in, whatever the data does.
        let held = self.clauses.mux(controls.after, controls.value, before);
        Ok(self.latch(Layer::Second, index, (before, held), data, does, torn))
    }

    /// The waveform of a latch that ends at its data while it passes, anywhere where `free`, else at `held`.
    fn latch(
        &mut self,
        layer: Layer,
        cell: usize,
        (before, held): (Literal, Literal),
        data: Symbolic,
        does: LatchDoes,
        free: Literal,
    ) -> Move {
        let zero = !self.clauses.one;
        if does.passing == zero && does.raced == zero && held == before {
            return Move::still(before);
        }
        let node = self.fabric.cells[cell].node;
        self.latches[layer as usize].insert(node, does);
        let anything = if free == zero { zero } else { self.clauses.solver.variable() };
        let held = self.clauses.mux(does.passing, data.f, held);
        let f = self.clauses.mux(free, anything, held);
        let mut h = None;
        if does.raced != zero || (does.passing != zero && data.h.is_some()) {
            let hazard = self.clauses.solver.variable();
            self.clauses.solver.clause(&[!hazard, does.passing, does.raced]);
            let mut reasons = vec![!hazard, does.raced];
            reasons.extend(data.h);
            self.clauses.solver.clause(&reasons);
            h = Some(hazard);
        }
        Move::any(Symbolic { i: before, f, h })
    }

    /// A literal that implies that a net does something.
    fn moves(&mut self, wave: Symbolic) -> Literal {
        let changes = self.clauses.xor(wave.i, wave.f);
        match wave.h {
            Some(h) => self.clauses.or(&[changes, h]),
            None => changes,
        }
    }

    /// A flip-flop takes its next value.
    pub(super) fn flop_second(&mut self, cell: usize, before: Literal) -> Result<Move, Looped> {
        let fabric = self.fabric;
        let cell = &fabric.cells[cell];
        let controls = self.controls(cell)?;
        let mut edges = Vec::new();
        for &(clock, edge) in &cell.clocks {
            let clock = self.step(Layer::First, clock)?.wave;
            if clock.i != clock.f {
                edges.push(match edge {
                    graph::Edge::Posedge => self.clauses.and(&[!clock.i, clock.f]),
                    graph::Edge::Negedge => self.clauses.and(&[clock.i, !clock.f]),
                    graph::Edge::Both => self.clauses.xor(clock.i, clock.f),
                });
            }
        }
        let fires = self.clauses.or(&edges);
        if !controls.moved && fires == !self.clauses.one {
            return Ok(Move::still(before));
        }
        let data = self.clauses.solver.variable();
        let used = self.clauses.and(&[fires, !controls.after]);
        self.nexts.insert(cell.node, Next { data, used, bound: false });
        // Where a control lets go at the very edge, either value may be kept.
        let either = if controls.before == !self.clauses.one {
            data
        } else {
            let choice = self.clauses.solver.variable();
            let kept = self.clauses.and(&[controls.before, choice]);
            self.clauses.mux(kept, before, data)
        };
        let next = self.clauses.mux(fires, either, before);
        let f = self.clauses.mux(controls.after, controls.value, next);
        Ok(Move::any(clean(before, f)))
    }

    /// The asynchronous controls of a cell around the first step.
    fn controls(&mut self, cell: &Cell) -> Result<Controls, Looped> {
        let zero = !self.clauses.one;
        let mut found = Controls { before: zero, after: zero, value: zero, moved: false };
        let (mut before, mut after) = (Vec::new(), Vec::new());
        for control in cell.controls.iter().rev() {
            let net = self.step(Layer::First, control.net)?.wave;
            let value = self.step(Layer::First, control.value)?.wave;
            found.moved |= net.i != net.f || value.i != value.f;
            before.push(net.i);
            after.push(net.f);
            found.value = self.clauses.mux(net.f, value.f, found.value);
        }
        found.before = self.clauses.or(&before);
        found.after = self.clauses.or(&after);
        Ok(found)
    }

    /// Writes down that a cell is not about to move by itself when the event begins. The root is: see
    /// [`Encoder::root_can_move`].
    pub(super) fn settle(&mut self, cell: usize) {
        if self.fabric.cells[cell].node == self.event.root || !self.settled.insert(cell) {
            return;
        }
        let output = self.value(Edge::new(self.fabric.cells[cell].node, false));
        self.towards(cell, output, true);
    }

    /// Writes down that a root which is a cell makes a move that it can make: to the value of its strongest active
    /// control; else a latch that is open follows its data, and a flip-flop moves just after its edge, while its clock
    /// rests at the level behind it.
    pub(super) fn root_can_move(&mut self) {
        let Role::Cell(index) = self.fabric.role(self.event.root) else { return };
        let cell = &self.fabric.cells[index];
        let output = self.value(Edge::new(cell.node, false));
        self.towards(index, output, false);
        let mut reasons: Vec<Literal> = Vec::new();
        for &(clock, edge) in &cell.clocks {
            match edge {
                graph::Edge::Posedge => reasons.push(self.value(clock)),
                graph::Edge::Negedge => reasons.push(!self.value(clock)),
                graph::Edge::Both => return,
            }
        }
        if cell.enable.is_none() {
            reasons.extend(cell.controls.iter().map(|control| self.value(control.net)));
            self.clauses.solver.clause(&reasons);
        }
    }

    /// The output agrees, or else does not, with what a cell puts there without a clock.
    fn towards(&mut self, index: usize, output: Literal, agrees: bool) {
        let cell = &self.fabric.cells[index];
        let output = output.inverted_if(!agrees);
        let mut premises: Vec<Literal> = Vec::new();
        for control in &cell.controls {
            let net = self.value(control.net);
            let value = self.value(control.value);
            premises.push(!net);
            self.equal_unless(&premises, output, value);
            premises.pop();
            premises.push(net);
        }
        let Some(enable) = cell.enable else { return };
        let enable = self.value(enable);
        let opens: Vec<Literal> = premises.iter().map(|&net| !net).chain([enable]).collect();
        let open = self.clauses.and(&opens);
        let data = self.data(index);
        data.open[0] = Some(open);
        let data = data.before;
        if agrees {
            premises.push(!enable);
        } else {
            let opens: Vec<Literal> = premises.iter().copied().chain([enable]).collect();
            self.clauses.solver.clause(&opens);
        }
        self.equal_unless(&premises, output, data);
    }

    /// Two literals agree unless one of `premises` holds.
    fn equal_unless(&mut self, premises: &[Literal], a: Literal, b: Literal) {
        for (a, b) in [(a, !b), (!a, b)] {
            let clause: Vec<Literal> = premises.iter().copied().chain([a, b]).collect();
            self.clauses.solver.clause(&clause);
        }
    }
}

/// Whether some control is active before and after the first step, and the value that the strongest one gives then.
struct Controls {
    before: Literal,
    after: Literal,
    value: Literal,
    /// Whether any of it can move in the first step.
    moved: bool,
}
