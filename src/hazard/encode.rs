//! The question "does this root show a hazard when the source rises" in clauses. Outside the fan-out of the source one
//! variable per node is enough; inside, initial and final value have one each, and the hazard bit has one only where
//! the parity filter leaves a hazard possible. A hazard bit is only ever asked to be 1 and occurs without complement in
//! the conditions of others, so only the implications from it to its conditions are written down. Rising is enough:
//! read backwards in time, a falling change shows the same hazards.

use super::cone::{Cone, Edge, Op};
use super::parity::Region;
use super::solver::{Literal, Solver};
use super::tables::{Need, Promises};

/// A waveform in variables; `h` is `None` where no hazard is possible.
#[derive(Clone, Copy)]
pub(super) struct Symbolic {
    pub(super) i: Literal,
    pub(super) f: Literal,
    pub(super) h: Option<Literal>,
}

/// The clauses of a growing part of one region and of what drives it.
pub(super) struct Encoder<'a, S> {
    cone: &'a Cone,
    region: &'a Region,
    pub(super) solver: S,
    one: Literal,
    waves: Vec<Option<Symbolic>>,
    /// Nodes encoded so far.
    pub(super) size: usize,
}

impl<'a, S: Solver> Encoder<'a, S> {
    pub(super) fn new(cone: &'a Cone, region: &'a Region) -> Self {
        let mut solver = S::default();
        let one = solver.variable();
        solver.clause(&[one]);
        let mut waves = vec![None; cone.len()];
        waves[region.nodes[0] as usize] = Some(Symbolic { i: !one, f: one, h: None });
        Self { cone, region, solver, one, waves, size: 0 }
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
        self.solver.clause(&clause);
    }

    fn wave(&self, edge: Edge) -> Symbolic {
        let constant = Symbolic { i: !self.one, f: !self.one, h: None };
        let wave = self.waves[edge.node()].unwrap_or(constant);
        Symbolic { i: wave.i.inverted_if(edge.inverted()), f: wave.f.inverted_if(edge.inverted()), h: wave.h }
    }

    fn node(&mut self, node: usize) -> Symbolic {
        let pins: Vec<Symbolic> = self.cone.fanin(node).iter().map(|&edge| self.wave(edge)).collect();
        let initial: Vec<Literal> = pins.iter().map(|pin| pin.i).collect();
        let i = self.value(node, &initial);
        if self.region.position(node).is_none() {
            return Symbolic { i, f: i, h: None };
        }
        let last: Vec<Literal> = pins.iter().map(|pin| pin.f).collect();
        let f = self.value(node, &last);
        let h = self.region.suspect(node).map(|_| self.hazard(node, &pins, i, f));
        Symbolic { i, f, h }
    }

    /// The function of a node.
    fn value(&mut self, node: usize, pins: &[Literal]) -> Literal {
        match self.cone.ops[node] {
            Op::Zero => !self.one,
            Op::Free { .. } => self.solver.variable(),
            Op::And => self.and(pins),
            Op::Xor | Op::Enter | Op::Calm => {
                let mut sum = None;
                for &pin in pins {
                    sum = Some(match sum {
                        None => pin,
                        Some(sum) => self.solver.difference(sum, pin),
                    });
                }
                sum.unwrap_or(!self.one)
            }
            Op::Table(table) => {
                let cone = self.cone;
                self.first_fit(&cone.tables[table as usize], pins).0
            }
        }
    }

    fn and(&mut self, pins: &[Literal]) -> Literal {
        match pins {
            &[pin] => pin,
            pins => self.solver.conjunction(pins),
        }
    }

    /// A table's value, and whether no row gives it.
    fn first_fit(&mut self, table: &Promises, pins: &[Literal]) -> (Literal, Literal) {
        let mut open = self.one;
        let mut ones = Vec::new();
        for (needs, value) in &table.function {
            let mut fits = vec![open];
            fits.extend(needs.iter().zip(pins).filter_map(|(need, &pin)| match need {
                Need::Value(value) => Some(pin.inverted_if(!value)),
                Need::Still | Need::Nothing => None,
            }));
            let fits = self.and(&fits);
            if *value {
                ones.push(!fits);
            }
            open = self.and(&[open, !fits]);
        }
        (!self.and(&ones), open)
    }

    /// A variable that implies the conditions of a hazard at `node`.
    fn hazard(&mut self, node: usize, pins: &[Symbolic], i: Literal, f: Literal) -> Literal {
        let h = self.solver.variable();
        let hazards: Vec<Literal> = pins.iter().filter_map(|pin| pin.h).collect();
        let with = |first: &[Literal], rest: &[Literal]| -> Vec<Literal> { [first, rest].concat() };
        match self.cone.ops[node] {
            Op::And => {
                for pin in pins {
                    let mut lively = vec![!h, pin.i];
                    lively.extend((pin.f != pin.i).then_some(pin.f));
                    lively.extend(pin.h);
                    self.solver.clause(&lively);
                }
                self.solver.clause(&with(&[!h, !i], &hazards));
                self.solver.clause(&with(&[!h, !f], &hazards));
            }
            Op::Xor => {
                let changes = self.changes(pins);
                self.several(h, &changes, &hazards);
            }
            Op::Enter => {
                let changes = self.changes(pins);
                self.solver.clause(&with(&with(&[!h], &hazards), &changes));
            }
            Op::Table(table) => {
                let cone = self.cone;
                self.table_hazard(&cone.tables[table as usize], h, pins, (i, f), &hazards);
            }
            Op::Zero | Op::Free { .. } | Op::Calm => self.solver.clause(&[!h]),
        }
        h
    }

    /// Variables that imply a change of each pin that can change.
    fn changes(&mut self, pins: &[Symbolic]) -> Vec<Literal> {
        pins.iter()
            .filter(|pin| pin.i != pin.f)
            .map(|pin| {
                let change = self.solver.variable();
                self.solver.clause(&[!change, pin.i, pin.f]);
                self.solver.clause(&[!change, !pin.i, !pin.f]);
                change
            })
            .collect()
    }

    /// `premise` implies two changes, or one of `otherwise`.
    fn several(&mut self, premise: Literal, changes: &[Literal], otherwise: &[Literal]) {
        for spared in 0..changes.len().max(1) {
            let mut clause = vec![!premise];
            clause.extend_from_slice(otherwise);
            clause.extend(changes.iter().enumerate().filter(|&(at, _)| at != spared).map(|(_, &change)| change));
            self.solver.clause(&clause);
        }
    }

    fn table_hazard(
        &mut self,
        table: &Promises,
        h: Literal,
        pins: &[Symbolic],
        (i, f): (Literal, Literal),
        hazards: &[Literal],
    ) {
        let changes: Vec<Option<Literal>> =
            pins.iter().map(|pin| self.changes(std::slice::from_ref(pin)).first().copied()).collect();
        let moving: Vec<Literal> = changes.iter().flatten().copied().collect();
        let initial: Vec<Literal> = pins.iter().map(|pin| pin.i).collect();
        let last: Vec<Literal> = pins.iter().map(|pin| pin.f).collect();
        // Something moves.
        self.solver.clause(&[&[!h], hazards, &moving].concat());
        // No row promises the result.
        for (needs, _) in &table.rows {
            let mut broken = vec![!h];
            for ((need, pin), change) in needs.iter().zip(pins).zip(&changes) {
                match *need {
                    Need::Value(value) => {
                        broken.extend([pin.i.inverted_if(value), pin.f.inverted_if(value)]);
                        broken.extend(pin.h);
                    }
                    Need::Still => {
                        broken.extend(*change);
                        broken.extend(pin.h);
                    }
                    Need::Nothing => {}
                }
            }
            self.solver.clause(&broken);
        }
        // Not the clean change of a single pin with a clean change of the result.
        let differs = self.solver.difference(i, f);
        let (_, ungiven_before) = self.first_fit(table, &initial);
        let (_, ungiven_after) = self.first_fit(table, &last);
        let otherwise = [hazards, &[!differs, ungiven_before, ungiven_after]].concat();
        self.several(h, &moving, &otherwise);
    }
}
