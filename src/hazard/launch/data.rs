//! The data of latches. What lies in front of a latch matters only while it is open, and most answers need no more than
//! when that is. So its data is a waveform of free variables at first; whoever finds the latch open in a model binds it.
//! This also keeps designs of two phases apart from loops: their latches feed each other in a ring, but no model has
//! all of them open. Where a model has, the question is left open.

use super::encode::{Encoder, Layer, Looped};
use crate::hazard::cone::Edge;
use crate::hazard::solver::{Literal, Solver};
use crate::hazard::symbolic::Symbolic;

/// The data of one latch.
#[derive(Clone, Debug)]
pub(super) struct Data {
    /// Before the event, and in the two steps.
    pub(super) before: Literal,
    pub(super) steps: [Symbolic; 2],
    /// Whether the latch is open when a step begins.
    pub(super) open: [Option<Literal>; 2],
    /// Whether the value before and the two waveforms are those of the logic.
    pub(super) bound: [bool; 3],
    /// The latches in front of this one, by index.
    feeds: Vec<usize>,
}

impl Encoder<'_> {
    /// The data of a latch, bound or not.
    pub(super) fn data(&mut self, index: usize) -> &mut Data {
        if !self.data.contains_key(&index) {
            let fabric = self.fabric;
            let cell = &fabric.cells[index];
            let before = self.clauses.solver.variable();
            let mut wave =
                |i: Literal| Symbolic { i, f: self.clauses.solver.variable(), h: Some(self.clauses.solver.variable()) };
            // In the first step nothing moves but what the root reaches.
            let reached = fabric.roots_of(cell.data.node()).contains(&self.event.root);
            let first = if reached { wave(before) } else { Symbolic::still(before) };
            let second = wave(first.f);
            let nodes: Vec<usize> = cell.pins().chain([cell.data]).map(Edge::node).collect();
            let feeds = fabric.frees(&nodes).into_iter().filter_map(|node| fabric.latch(node)).collect();
            let data = Data { before, steps: [first, second], open: [None; 2], bound: [false, !reached, false], feeds };
            self.data.insert(index, data);
        }
        self.data.entry(index).or_insert_with(|| unreachable!("it was put there above"))
    }

    /// Binds the value before (0) or the waveform of a step (1, 2) to the logic.
    ///
    /// # Errors
    /// When latches that are bound in this step then depend on each other in a ring.
    pub(super) fn bind(&mut self, index: usize, part: usize) -> Result<(), Looped> {
        let edge = self.fabric.cells[index].data;
        let data = self.data(index);
        data.bound[part] = true;
        let (before, steps) = (data.before, data.steps);
        let layer = match part {
            0 => {
                let value = self.value(edge);
                self.same(before, value);
                return Ok(());
            }
            1 => Layer::First,
            _ => Layer::Second,
        };
        if self.in_ring(index, part) {
            return Err(Looped);
        }
        let real = self.step(layer, edge)?.wave;
        let wave = steps[layer as usize];
        self.same(wave.f, real.f);
        // A hazard is only ever asked to be there.
        if let Some(h) = wave.h {
            let reasons: Vec<Literal> = [!h].into_iter().chain(real.h).collect();
            self.clauses.solver.clause(&reasons);
        }
        Ok(())
    }

    /// Whether a latch is in front of itself, through latches that are bound in a step.
    fn in_ring(&self, index: usize, part: usize) -> bool {
        let mut seen = vec![index];
        let mut at = 0;
        while let Some(data) = seen.get(at).and_then(|latch| self.data.get(latch)) {
            at += 1;
            for &feed in &data.feeds {
                if feed == index {
                    return true;
                }
                // A latch whose data cannot move in this step passes nothing on.
                let moves = |data: &Data| data.bound[part] && data.steps[part - 1].may_move();
                if self.data.get(&feed).is_some_and(moves) && !seen.contains(&feed) {
                    seen.push(feed);
                }
            }
        }
        false
    }
}
