//! Boolean and three-valued copies of loop-free logic in clauses, for questions about functions: implicants beyond
//! truth tables, stable states of large loops.

use super::rails::is_leaf;
use super::solver::{Literal, Solver};
use super::tables::{Need, Promises};
use crate::graph::{GateKind, Graph, NodeId, NodeKind};

/// A solver with gates; every value is a literal, constants included.
pub(super) struct Clauses<S> {
    pub(super) solver: S,
    pub(super) one: Literal,
}

/// A three-valued literal: "may be 0", "may be 1".
#[derive(Clone, Copy)]
pub(super) struct Pair {
    pub(super) zero: Literal,
    pub(super) one: Literal,
}

impl<S: Solver> Clauses<S> {
    pub(super) fn new() -> Self {
        let mut solver = S::default();
        let one = solver.variable();
        solver.clause(&[one]);
        Self { solver, one }
    }

    pub(super) fn constant(&self, value: bool) -> Literal {
        if value { self.one } else { !self.one }
    }

    pub(super) fn and(&mut self, pins: &[Literal]) -> Literal {
        if pins.contains(&!self.one) {
            return !self.one;
        }
        let live: Vec<Literal> = pins.iter().copied().filter(|&pin| pin != self.one).collect();
        match live.as_slice() {
            [] => self.one,
            &[pin] => pin,
            live => self.solver.conjunction(live),
        }
    }

    pub(super) fn or(&mut self, pins: &[Literal]) -> Literal {
        let inverted: Vec<Literal> = pins.iter().map(|&pin| !pin).collect();
        !self.and(&inverted)
    }

    pub(super) fn xor(&mut self, a: Literal, b: Literal) -> Literal {
        for (x, y) in [(a, b), (b, a)] {
            if x == self.one || x == !self.one {
                return y.inverted_if(x == self.one);
            }
        }
        self.solver.difference(a, b)
    }

    /// `a` where `select`, else `b`.
    pub(super) fn mux(&mut self, select: Literal, a: Literal, b: Literal) -> Literal {
        if a == b {
            return a;
        }
        let upper = self.and(&[select, a]);
        let lower = self.and(&[!select, b]);
        self.or(&[upper, lower])
    }

    /// The logic of `nodes`, which stand in topological order; `leaf` gives the values of leaves. Combinations without
    /// a row in a table count as 0.
    pub(super) fn copy(
        &mut self,
        graph: &Graph,
        nodes: &[NodeId],
        leaf: impl Fn(NodeId) -> Literal,
    ) -> Vec<Option<Literal>> {
        let mut values: Vec<Option<Literal>> = vec![None; graph.len()];
        for &node in nodes {
            let pins: Vec<Literal> = graph.fanin(node).iter().filter_map(|pin| values[pin.index()]).collect();
            values[node.index()] = Some(match graph.kind(node) {
                _ if is_leaf(graph, node) => leaf(node),
                NodeKind::Const(value) => self.constant(value),
                NodeKind::Gate(kind) => self.gate(kind, &pins),
                NodeKind::Table(table) => {
                    let promises = Promises::new(&graph.tables[table.index()]);
                    self.first_fit(&promises, &pins).0
                }
                _ => pins.first().copied().unwrap_or(!self.one),
            });
        }
        values
    }

    pub(super) fn gate(&mut self, kind: GateKind, pins: &[Literal]) -> Literal {
        let plain = match kind {
            GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => self.and(pins),
            GateKind::Or | GateKind::Nor => self.or(pins),
            GateKind::Xor | GateKind::Xnor => {
                let zero = !self.one;
                pins.iter().fold(zero, |sum, &pin| self.xor(sum, pin))
            }
        };
        plain.inverted_if(kind.inverts())
    }

    /// The same in three values. A table answers as [`super::rails`] does.
    pub(super) fn ternary(
        &mut self,
        graph: &Graph,
        nodes: &[NodeId],
        leaf: impl Fn(NodeId) -> Pair,
    ) -> Vec<Option<Pair>> {
        let mut values: Vec<Option<Pair>> = vec![None; graph.len()];
        for &node in nodes {
            let pins: Vec<Pair> = graph.fanin(node).iter().filter_map(|pin| values[pin.index()]).collect();
            values[node.index()] = Some(match graph.kind(node) {
                _ if is_leaf(graph, node) => leaf(node),
                NodeKind::Const(value) => Pair { zero: self.constant(!value), one: self.constant(value) },
                NodeKind::Gate(kind) => self.ternary_gate(kind, &pins),
                NodeKind::Table(table) => {
                    let promises = Promises::new(&graph.tables[table.index()]);
                    self.ternary_table(&promises, &pins)
                }
                _ => pins.first().copied().unwrap_or(Pair { zero: self.one, one: self.one }),
            });
        }
        values
    }

    fn ternary_gate(&mut self, kind: GateKind, pins: &[Pair]) -> Pair {
        let zeros: Vec<Literal> = pins.iter().map(|pin| pin.zero).collect();
        let ones: Vec<Literal> = pins.iter().map(|pin| pin.one).collect();
        let plain = match kind {
            GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => {
                Pair { zero: self.or(&zeros), one: self.and(&ones) }
            }
            GateKind::Or | GateKind::Nor => Pair { zero: self.and(&zeros), one: self.or(&ones) },
            GateKind::Xor | GateKind::Xnor => {
                let mut sum = Pair { zero: self.one, one: !self.one };
                for &pin in pins {
                    let same = [self.and(&[sum.zero, pin.zero]), self.and(&[sum.one, pin.one])];
                    let other = [self.and(&[sum.zero, pin.one]), self.and(&[sum.one, pin.zero])];
                    sum = Pair { zero: self.or(&same), one: self.or(&other) };
                }
                sum
            }
        };
        if kind.inverts() { Pair { zero: plain.one, one: plain.zero } } else { plain }
    }

    fn ternary_table(&mut self, promises: &Promises, pins: &[Pair]) -> Pair {
        let mut promised = [Vec::new(), Vec::new()];
        let known: Vec<Literal> =
            pins.iter().map(|pin| self.and(&[pin.zero, pin.one])).map(|unknown| !unknown).collect();
        for (needs, value) in &promises.rows {
            let fits: Vec<Literal> = needs
                .iter()
                .zip(pins)
                .zip(&known)
                .filter_map(|((need, pin), &known)| match need {
                    Need::Value(true) => Some(!pin.zero),
                    Need::Value(false) => Some(!pin.one),
                    Need::Still => Some(known),
                    Need::Nothing => None,
                })
                .collect();
            promised[usize::from(*value)].push(self.and(&fits));
        }
        let mut open = self.and(&known);
        for (needs, value) in &promises.function {
            let mut fits = vec![open];
            fits.extend(needs.iter().zip(pins).filter_map(|(need, pin)| match need {
                Need::Value(true) => Some(pin.one),
                Need::Value(false) => Some(pin.zero),
                Need::Still | Need::Nothing => None,
            }));
            let fits = self.and(&fits);
            promised[usize::from(*value)].push(fits);
            open = self.and(&[open, !fits]);
        }
        promised[0].push(open);
        let [zero, one] = promised;
        Pair { zero: !self.or(&one), one: !self.or(&zero) }
    }
}
