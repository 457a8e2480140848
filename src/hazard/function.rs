//! The Boolean function of a node over its sources, asked for implicants: a truth table while the sources are few, the
//! solver beyond.

use std::collections::BTreeMap;

use super::clauses::Clauses;
use super::cover::Withheld;
use super::order::Order;
use super::points::Points;
use super::rails::{Evaluator, Rails, counting};
use super::solver::{Answer, Batsat, Literal, Solver};
use super::{Options, Witness};
use crate::graph::{Graph, NodeId, NodeKind};

/// Literals: a node and the value it must have.
pub(super) type Cube = Vec<(NodeId, bool)>;

/// See the module documentation.
pub(super) struct Function {
    /// The sources, unknown constants and undriven wires behind the target, sorted.
    pub(super) variables: Vec<NodeId>,
    /// Per variable: whether a literal over it can be written in a design.
    written: Vec<bool>,
    form: Form,
    conflicts: u64,
}

enum Form {
    /// The points where the function is 0, and those where it is 1.
    Table([Points; 2]),
    Clauses {
        clauses: Box<Clauses<Batsat>>,
        variables: Vec<Literal>,
        target: Literal,
    },
}

impl Function {
    pub(super) fn new(graph: &Graph, target: NodeId, options: &Options) -> Self {
        let mut evaluator = Evaluator::new(graph, &[target]);
        let variables = evaluator.leaves();
        let written = variables
            .iter()
            .map(|&node| matches!(graph.kind(node), NodeKind::Source(_)) || graph.is_static(node))
            .collect();
        let count = variables.len();
        let form = if count <= options.exhaustive_sources {
            let (mut zeros, mut ones) = (Vec::new(), Vec::new());
            for block in 0..Points::blocks(count) {
                for (index, &leaf) in variables.iter().enumerate() {
                    evaluator.set(leaf, Rails::definite(counting(index, block)));
                }
                evaluator.run();
                let value = evaluator.get(target);
                zeros.push(!value.one);
                ones.push(!value.zero);
            }
            Form::Table([Points::new(count, zeros), Points::new(count, ones)])
        } else {
            let mut clauses: Box<Clauses<Batsat>> = Box::new(Clauses::new());
            let literals: Vec<Literal> = variables.iter().map(|_| clauses.solver.variable()).collect();
            let known: BTreeMap<NodeId, Literal> = variables.iter().copied().zip(literals.iter().copied()).collect();
            let zero = !clauses.one;
            let nodes = Order::new(graph, &[target]).nodes;
            let values = clauses.copy(graph, &nodes, |leaf| known.get(&leaf).copied().unwrap_or(zero));
            Form::Clauses { target: values[target.index()].unwrap_or(zero), clauses, variables: literals }
        };
        Self { variables, written, form, conflicts: options.conflicts }
    }

    /// The truth table, while there is one: the points where the function has `value`.
    pub(super) fn points(&self, value: bool) -> Option<&Points> {
        match &self.form {
            Form::Table(points) => Some(&points[usize::from(value)]),
            Form::Clauses { .. } => None,
        }
    }

    /// The cube of a point (bit per variable) with the variables of `freed` left out.
    pub(super) fn cube(&self, point: usize, freed: usize) -> Cube {
        let literal = |(index, &node): (usize, &NodeId)| (node, point >> index & 1 == 1);
        self.variables.iter().enumerate().filter(|(index, _)| freed >> index & 1 == 0).map(literal).collect()
    }

    /// Whether every literal can be written in a design.
    pub(super) fn is_written(&self, cube: &Cube) -> bool {
        cube.iter().all(|(node, _)| self.variables.binary_search(node).is_ok_and(|index| self.written[index]))
    }

    /// A prime cube on which the function is constantly `value` and that spans the transition of a static witness:
    /// among the literals of what holds still there, as few as possible.
    pub(super) fn span(&mut self, witness: &Witness, value: bool) -> Result<Cube, Withheld> {
        let held: BTreeMap<NodeId, bool> = witness
            .holds
            .iter()
            .copied()
            .filter(|(node, _)| witness.changes.iter().all(|(change, _)| change != node))
            .collect();
        match &mut self.form {
            Form::Table(points) => {
                let (mut point, mut freed, mut unwritten) = (0, 0, 0);
                for (index, node) in self.variables.iter().enumerate() {
                    match held.get(node) {
                        Some(&value) => point |= usize::from(value) << index,
                        None => freed |= 1 << index,
                    }
                    unwritten |= usize::from(!self.written[index]) << index;
                }
                let points = &points[usize::from(value)];
                match points.largest_cube(point, freed | unwritten) {
                    Some(mask) => Ok(self.cube(point, mask)),
                    None if points.largest_cube(point, freed).is_some() => Err(Withheld::Unknown),
                    None => Err(Withheld::Undecided),
                }
            }
            Form::Clauses { clauses, variables, target } => {
                let mut cube: Vec<(usize, bool)> = Vec::new();
                for (index, node) in self.variables.iter().enumerate() {
                    cube.extend(held.get(node).map(|&value| (index, value)));
                }
                let conflicts = self.conflicts;
                let mut implies = |cube: &[(usize, bool)]| {
                    let mut assumptions: Vec<Literal> =
                        cube.iter().map(|&(index, value)| variables[index].inverted_if(!value)).collect();
                    assumptions.push(target.inverted_if(value));
                    clauses.solver.solve(&assumptions, conflicts) == Answer::Unsatisfiable
                };
                if !implies(&cube) {
                    return Err(Withheld::Undecided);
                }
                let mut at = 0;
                while at < cube.len() {
                    let mut fewer = cube.clone();
                    fewer.remove(at);
                    if implies(&fewer) {
                        cube = fewer;
                    } else {
                        at += 1;
                    }
                }
                if cube.iter().any(|&(index, _)| !self.written[index]) {
                    return Err(Withheld::Unknown);
                }
                Ok(cube.into_iter().map(|(index, value)| (self.variables[index], value)).collect())
            }
        }
    }
}
