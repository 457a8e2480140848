//! The question "does this root show a hazard when the source rises" in clauses. Outside the fan-out of the source one
//! variable per node is enough; inside, initial and final value have one each, and the hazard bit has one only where
//! the parity filter leaves a hazard possible. Rising is enough: read backwards in time, a falling change shows the same
//! hazards.

use super::clauses::Clauses;
use super::cone::{Cone, Edge};
use super::parity::Region;
use super::solver::{Literal, Solver};
use super::symbolic::Symbolic;

/// The clauses of a growing part of one region and of what drives it.
pub(super) struct Encoder<'a, S> {
    cone: &'a Cone,
    region: &'a Region,
    pub(super) clauses: Clauses<S>,
    waves: Vec<Option<Symbolic>>,
    /// Nodes encoded so far.
    pub(super) size: usize,
}

impl<'a, S: Solver> Encoder<'a, S> {
    pub(super) fn new(cone: &'a Cone, region: &'a Region) -> Self {
        let clauses: Clauses<S> = Clauses::new();
        let mut waves = vec![None; cone.len()];
        waves[region.nodes[0] as usize] = Some(Symbolic { i: !clauses.one, f: clauses.one, h: None });
        Self { cone, region, clauses, waves, size: 0 }
    }

    /// Encodes the cone of `root` as far as that was not done before.
    pub(super) fn root(&mut self, root: Edge) -> Symbolic {
        let missing = self.cone.closure([root.node()].into_iter(), |node| self.waves[node].is_none());
        for node in missing {
            let wave = self.node(node as usize);
            self.waves[node as usize] = Some(wave);
            self.size += 1;
        }
        self.wave(root)
    }

    /// The variable of a free node, if it was encoded.
    pub(super) fn free(&self, node: usize) -> Option<Literal> {
        self.waves[node].map(|wave| wave.i)
    }

    /// Forbids what was proven impossible, which helps later proofs.
    pub(super) fn forbid(&mut self, literals: &[Literal]) {
        let clause: Vec<Literal> = literals.iter().map(|&literal| !literal).collect();
        self.clauses.solver.clause(&clause);
    }

    fn wave(&self, edge: Edge) -> Symbolic {
        let constant = Symbolic::still(!self.clauses.one);
        self.waves[edge.node()].unwrap_or(constant).inverted_if(edge.inverted())
    }

    fn node(&mut self, node: usize) -> Symbolic {
        let pins: Vec<Symbolic> = self.cone.fanin(node).iter().map(|&edge| self.wave(edge)).collect();
        let initial: Vec<Literal> = pins.iter().map(|pin| pin.i).collect();
        let (op, cone) = (self.cone.ops[node], self.cone);
        let i = self.clauses.value(op, &cone.tables, &initial);
        if self.region.position(node).is_none() {
            return Symbolic::still(i);
        }
        let last: Vec<Literal> = pins.iter().map(|pin| pin.f).collect();
        let f = self.clauses.value(op, &cone.tables, &last);
        let h = self.region.suspect(node).map(|_| self.clauses.hazard(op, &cone.tables, &pins, (i, f)));
        Symbolic { i, f, h }
    }
}
