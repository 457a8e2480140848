//! Questions about settled states, those in which no cell is about to move by itself: a cell with an active asynchronous
//! control has the value of the strongest, an open latch that of its data. What can hold together in such a state, and
//! what one change can do to it, is asked of the solver. Cells far behind the nets in question are left free, which
//! only makes more states possible.

use std::collections::{BTreeMap, BTreeSet};

use super::clauses::Clauses;
use super::order::Order;
use super::solver::{Answer, Batsat, Literal, Solver};
use crate::graph::cone::{Cone, FrozenCone};
use crate::graph::{Cell, CellKind, Edge, Graph, NodeId, NodeKind, SourceKind};

/// Cells whose settled values are demanded per question.
const CELLS: usize = 256;

/// A net and the value that is asked for.
pub type Demand = (NodeId, bool);

/// What happens between the two states of a question.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Happening {
    /// This source changes, and nothing else.
    Change(NodeId),
    /// The flip-flops that this net clocks with this edge take their next values.
    Clock(NodeId, Edge),
}

/// The cells of a graph by their outputs.
pub struct Cells<'g> {
    graph: &'g Graph,
    of: BTreeMap<NodeId, Vec<usize>>,
}

impl<'g> Cells<'g> {
    pub fn new(graph: &'g Graph) -> Self {
        let mut of: BTreeMap<NodeId, Vec<usize>> = BTreeMap::new();
        for (index, cell) in graph.cells.iter().enumerate() {
            of.entry(cell.output).or_default().push(index);
        }
        Self { graph, of }
    }

    /// The cells with this output; several when the edges of several signals clock it.
    pub fn of(&self, output: NodeId) -> impl Iterator<Item = &'g Cell> + '_ {
        self.of.get(&output).into_iter().flatten().map(|&cell| &self.graph.cells[cell])
    }

    /// The sources behind some nets that can change, sorted.
    pub fn sources(&self, nets: &[NodeId]) -> Vec<NodeId> {
        let mut seen: BTreeSet<NodeId> = BTreeSet::new();
        let mut open = nets.to_vec();
        while let Some(node) = open.pop() {
            if !self.graph.is_static(node) && seen.insert(node) {
                open.extend_from_slice(self.graph.fanin(node));
            }
        }
        seen.into_iter().filter(|&node| matches!(self.graph.kind(node), NodeKind::Source(_))).collect()
    }

    /// A settled state in which all demands hold, as the values of the sources behind them; `None` when there is none or
    /// the question stayed open.
    pub fn together(&self, demands: &[Demand], conflicts: u64) -> Option<Vec<Demand>> {
        let mut question = Question::new(self, demands, &[])?;
        let now: Vec<Literal> = question.literals(demands)?;
        question.ask(&now, conflicts)
    }

    /// Whether it is proven that no settled state has all demands.
    pub fn excludes(&self, demands: &[Demand], conflicts: u64) -> bool {
        let Some(mut question) = Question::new(self, demands, &[]) else { return false };
        let Some(now) = question.literals(demands) else { return false };
        question.clauses.solver.solve(&now, conflicts) == Answer::Unsatisfiable
    }

    /// A settled state in which `before` holds and from which `happening` leads to `after`.
    pub fn leads(
        &self,
        before: &[Demand],
        happening: Happening,
        after: &[Demand],
        conflicts: u64,
    ) -> Option<Vec<Demand>> {
        let moved = match happening {
            Happening::Change(source) => vec![source],
            Happening::Clock(..) => Vec::new(),
        };
        let demands: Vec<Demand> = before.iter().chain(after).copied().collect();
        let clocked = match happening {
            Happening::Change(_) => Vec::new(),
            Happening::Clock(clock, edge) => self.clocked(&self.sources(&nets(&demands)), clock, edge),
        };
        let also: Vec<NodeId> = moved.iter().copied().chain(clocked.iter().map(|cell| cell.data)).collect();
        let mut question = Question::new(self, &demands, &also)?;
        let mut asked = question.literals(before)?;
        if let Happening::Change(source) = happening {
            // A cell under an active control does not move by itself.
            for cell in self.of(source) {
                for control in &cell.controls {
                    asked.push(question.literal(control.net)?.inverted_if(control.active));
                }
            }
        }
        let next = question.after(happening, &clocked, after)?;
        asked.extend(next);
        question.ask(&asked, conflicts)
    }

    fn clocked(&self, sources: &[NodeId], clock: NodeId, edge: Edge) -> Vec<&'g Cell> {
        let fires = |cell: &&Cell| match cell.kind {
            CellKind::FlipFlop { clock: pin, edge: own } => self.graph.root(pin) == clock && own == edge,
            CellKind::Latch { .. } => false,
        };
        sources.iter().flat_map(|&source| self.of(source)).filter(fires).collect()
    }
}

fn nets(demands: &[Demand]) -> Vec<NodeId> {
    demands.iter().map(|&(net, _)| net).collect()
}

/// One set of clauses: the state before.
struct Question<'q, 'g> {
    cells: &'q Cells<'g>,
    cone: FrozenCone,
    order: Vec<NodeId>,
    clauses: Clauses<Batsat>,
    /// By node of the cone.
    values: Vec<Option<Literal>>,
    leaves: BTreeMap<NodeId, Literal>,
    /// The nets whose sources the answer names.
    named: Vec<NodeId>,
}

impl<'q, 'g> Question<'q, 'g> {
    /// `None` when a loop lies behind the nets.
    fn new(cells: &'q Cells<'g>, demands: &[Demand], also: &[NodeId]) -> Option<Self> {
        let graph = cells.graph;
        let mut roots: Vec<NodeId> = nets(demands).into_iter().chain(also.iter().copied()).collect();
        let mut seen: BTreeSet<NodeId> = BTreeSet::new();
        let mut bound: BTreeSet<NodeId> = BTreeSet::new();
        let mut open = roots.clone();
        let mut later: Vec<NodeId> = Vec::new();
        loop {
            while let Some(node) = open.pop() {
                if seen.insert(node) {
                    open.extend_from_slice(graph.fanin(node));
                    later.extend(cells.of.contains_key(&node).then_some(node));
                }
            }
            // Nearest first: the cells met so far, then those that their pins lead to.
            if later.is_empty() {
                break;
            }
            for output in std::mem::take(&mut later) {
                if bound.len() < CELLS && bound.insert(output) {
                    for cell in cells.of(output) {
                        let mut pins: Vec<NodeId> =
                            cell.controls.iter().flat_map(|control| [control.net, control.value]).collect();
                        if let CellKind::Latch { enable, .. } = cell.kind {
                            pins.extend([enable, cell.data]);
                        }
                        roots.extend(&pins);
                        open.extend(pins);
                    }
                }
            }
        }
        let cone = Cone::of(graph, &roots).freeze();
        let copies: Vec<NodeId> = roots.iter().filter_map(|&root| cone.copy_of(root)).collect();
        let order = Order::new(&cone.graph, &copies);
        if order.has_loop(&cone.graph) {
            return None;
        }
        let mut clauses: Clauses<Batsat> = Clauses::new();
        let leaves: BTreeMap<NodeId, Literal> = (order.nodes.iter())
            .filter(|&&node| super::rails::is_leaf(&cone.graph, node))
            .map(|&node| (node, clauses.solver.variable()))
            .collect();
        let zero = !clauses.one;
        let values = clauses.copy(&cone.graph, &order.nodes, |leaf| leaves.get(&leaf).copied().unwrap_or(zero));
        let named = nets(demands);
        let mut question = Self { cells, cone, order: order.nodes, clauses, values, leaves, named };
        for output in bound {
            question.settle(output);
        }
        Some(question)
    }

    fn literal(&self, node: NodeId) -> Option<Literal> {
        self.values[self.cone.copy_of(node)?.index()]
    }

    fn literals(&self, demands: &[Demand]) -> Option<Vec<Literal>> {
        demands.iter().map(|&(net, value)| Some(self.literal(net)?.inverted_if(!value))).collect()
    }

    /// The clauses that make a cell rest.
    fn settle(&mut self, output: NodeId) {
        let cells: Vec<&Cell> = self.cells.of(output).collect();
        let Some(q) = self.literal(output) else { return };
        for cell in cells {
            let mut idle: Vec<Literal> = Vec::new();
            for control in &cell.controls {
                let (Some(net), Some(value)) = (self.literal(control.net), self.literal(control.value)) else { return };
                let active = net.inverted_if(!control.active);
                self.agree(&idle, active, q, value);
                idle.push(active);
            }
            if let CellKind::Latch { enable, active } = cell.kind
                && let (Some(enable), Some(data)) = (self.literal(enable), self.literal(cell.data))
            {
                self.agree(&idle, enable.inverted_if(!active), q, data);
            }
        }
    }

    /// `q` is `value` while `active` and none of `stronger` is.
    fn agree(&mut self, stronger: &[Literal], active: Literal, q: Literal, value: Literal) {
        for (one, other) in [(q, !value), (!q, value)] {
            let mut clause = stronger.to_vec();
            clause.extend([!active, one, other]);
            self.clauses.solver.clause(&clause);
        }
    }

    /// What `after` means in the state that follows.
    fn after(&mut self, happening: Happening, clocked: &[&Cell], after: &[Demand]) -> Option<Vec<Literal>> {
        let mut next = self.leaves.clone();
        match happening {
            Happening::Change(source) => {
                let copy = self.cone.copy_of(source)?;
                let literal = next.get_mut(&copy)?;
                *literal = !*literal;
            }
            Happening::Clock(..) => {
                for cell in clocked {
                    let data = self.literal(cell.data)?;
                    let (copy, q) = (self.cone.copy_of(cell.output)?, self.literal(cell.output)?);
                    // A cell under an active control keeps what the control gives it.
                    let mut idle = Vec::new();
                    for control in &cell.controls {
                        idle.push(self.literal(control.net)?.inverted_if(control.active));
                    }
                    let free = self.clauses.and(&idle);
                    let taken = self.clauses.and(&[free, data]);
                    let kept = self.clauses.and(&[!free, q]);
                    next.insert(copy, self.clauses.or(&[taken, kept]));
                }
            }
        }
        let zero = !self.clauses.one;
        let values = self.clauses.copy(&self.cone.graph, &self.order, |leaf| next.get(&leaf).copied().unwrap_or(zero));
        after.iter().map(|&(net, value)| Some(values[self.cone.copy_of(net)?.index()]?.inverted_if(!value))).collect()
    }

    fn ask(&mut self, asked: &[Literal], conflicts: u64) -> Option<Vec<Demand>> {
        match self.clauses.solver.solve(asked, conflicts) {
            Answer::Satisfiable => {
                let sources = self.cells.sources(&self.named).into_iter();
                Some(sources.filter_map(|node| Some((node, self.clauses.solver.value(self.literal(node)?)))).collect())
            }
            Answer::Unsatisfiable | Answer::Open => None,
        }
    }
}

/// Whether a source can change at any time, whatever the clocks do.
pub fn is_free(graph: &Graph, source: NodeId) -> bool {
    matches!(
        graph.kind(source),
        NodeKind::Source(SourceKind::Input | SourceKind::BlackBox | SourceKind::Memory | SourceKind::Latch)
    )
}
