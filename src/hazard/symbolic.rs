//! The waveform algebra in clauses. Values are exact in both directions; a hazard bit is only ever asked to be 1 and
//! occurs without complement in the conditions of others, so only the implications from it to its conditions are written
//! down.

use super::clauses::Clauses;
use super::cone::Op;
use super::solver::{Literal, Solver};
use super::tables::{Need, Promises};

/// A waveform in variables; `h` is `None` where no hazard is possible.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Symbolic {
    pub(super) i: Literal,
    pub(super) f: Literal,
    pub(super) h: Option<Literal>,
}

impl Symbolic {
    /// A net that holds the value of a literal.
    pub(super) fn still(value: Literal) -> Self {
        Self { i: value, f: value, h: None }
    }

    /// Whether the net can do anything at all.
    pub(super) fn may_move(self) -> bool {
        self.i != self.f || self.h.is_some()
    }

    pub(super) fn inverted_if(self, inverted: bool) -> Self {
        Self { i: self.i.inverted_if(inverted), f: self.f.inverted_if(inverted), h: self.h }
    }
}

impl<S: Solver> Clauses<S> {
    /// The function of a node; a free node has a variable of its own.
    pub(super) fn value(&mut self, op: Op, tables: &[Promises], pins: &[Literal]) -> Literal {
        match op {
            Op::Zero => !self.one,
            Op::Free { .. } => self.solver.variable(),
            Op::And => self.and(pins),
            Op::Xor | Op::Enter | Op::Calm => {
                let zero = !self.one;
                pins.iter().fold(zero, |sum, &pin| self.xor(sum, pin))
            }
            Op::Table(table) => self.first_fit(&tables[table as usize], pins).0,
        }
    }

    /// A table's value, and whether no row gives it.
    pub(super) fn first_fit(&mut self, table: &Promises, pins: &[Literal]) -> (Literal, Literal) {
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
                ones.push(fits);
            }
            open = self.and(&[open, !fits]);
        }
        (self.or(&ones), open)
    }

    /// A variable that implies the conditions of a hazard at a node, whose values are `i` and `f`.
    pub(super) fn hazard(
        &mut self,
        op: Op,
        tables: &[Promises],
        pins: &[Symbolic],
        (i, f): (Literal, Literal),
    ) -> Literal {
        let h = self.solver.variable();
        let hazards: Vec<Literal> = pins.iter().filter_map(|pin| pin.h).collect();
        let with = |first: &[Literal], rest: &[Literal]| -> Vec<Literal> { [first, rest].concat() };
        match op {
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
            Op::Table(table) => self.table_hazard(&tables[table as usize], h, pins, (i, f), &hazards),
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
        let differs = self.xor(i, f);
        let (_, ungiven_before) = self.first_fit(table, &initial);
        let (_, ungiven_after) = self.first_fit(table, &last);
        let otherwise = [hazards, &[!differs, ungiven_before, ungiven_after]].concat();
        self.several(h, &moving, &otherwise);
    }
}
