//! What the designer's assumptions leave out of an event, in clauses. An assumption is written down where the event met a
//! source that it speaks about; elsewhere it could not change an answer.

use super::encode::{Encoder, Layer, Looped, Move};
use super::exact::Target;
use super::fabric::Role;
use crate::graph::NodeId;
use crate::hazard::cone::Edge;
use crate::hazard::solver::{Literal, Solver};

impl Encoder<'_> {
    /// Writes down every assumption that matters to a target whose waveforms were worked out.
    pub(super) fn assume(&mut self, target: &Target) -> Result<(), Looped> {
        let assumptions = self.fabric.assumptions;
        if assumptions.is_empty() {
            return Ok(());
        }
        let behind = self.fabric.frees(&target.nodes());
        self.values.frees.extend(behind);
        for &node in &assumptions.fixed {
            let Some(edge) = self.relevant(&[node]).pop() else { continue };
            let (first, second) = (self.step(Layer::First, edge)?, self.step(Layer::Second, edge)?);
            self.same(first.wave.i, first.wave.f);
            self.same(second.wave.i, second.wave.f);
        }
        for (groups, one) in [(&assumptions.one_hot, true), (&assumptions.exclusive, false)] {
            for group in groups {
                let edges = self.relevant(group);
                // Where the root is one of several flip-flops that an edge moves together, the others may have moved
                // already or not, so the group need not hold in between.
                let nodes: Vec<usize> = edges.iter().map(|edge| edge.node()).collect();
                let root = self.event.root;
                if matches!(self.fabric.role(root), Role::Cell(_)) && self.fabric.expanded(&nodes).contains(&root) {
                    continue;
                }
                let values: Vec<Literal> = edges.iter().map(|&edge| self.value(edge)).collect();
                self.at_most_one(&values);
                if one && !values.is_empty() {
                    self.clauses.solver.clause(&values);
                }
                let flops = edges.iter().all(|edge| matches!(self.fabric.role(edge.node()), Role::Cell(cell) if self.fabric.cells[cell].enable.is_none()));
                if flops {
                    let moves = edges.iter().map(|&edge| self.step(Layer::Second, edge));
                    let moves = moves.collect::<Result<Vec<Move>, Looped>>()?;
                    let values: Vec<Literal> = moves.iter().map(|one| one.wave.f).collect();
                    self.at_most_one(&values);
                    if one && !values.is_empty() {
                        self.clauses.solver.clause(&values);
                    }
                }
            }
        }
        for group in &assumptions.one_bit {
            let edges = self.relevant(group);
            let mut changes = Vec::new();
            for edge in edges {
                let (first, second) = (self.step(Layer::First, edge)?.wave, self.step(Layer::Second, edge)?.wave);
                let steps = [self.clauses.xor(first.i, first.f), self.clauses.xor(second.i, second.f)];
                changes.push(self.clauses.or(&steps));
            }
            self.at_most_one(&changes);
        }
        Ok(())
    }

    /// The nodes of a group, when some source behind one of them was met.
    fn relevant(&self, group: &[NodeId]) -> Vec<Edge> {
        let edges: Vec<Edge> = group.iter().filter_map(|&node| self.fabric.place(node)).collect();
        let nodes: Vec<usize> = edges.iter().map(|edge| edge.node()).collect();
        let met = self.fabric.frees(&nodes).iter().any(|free| self.values.frees.contains(free));
        if met { edges } else { Vec::new() }
    }

    pub(super) fn same(&mut self, a: Literal, b: Literal) {
        self.clauses.solver.clause(&[!a, b]);
        self.clauses.solver.clause(&[a, !b]);
    }

    fn at_most_one(&mut self, literals: &[Literal]) {
        for (at, &one) in literals.iter().enumerate() {
            for &other in &literals[at + 1..] {
                self.clauses.solver.clause(&[!one, !other]);
            }
        }
    }
}
