//! Which signals of an edge list are asynchronous controls and which is the clock.
//!
//! First the usual form: the conditions of the leading if-ladder test the controls, what is left is the clock. Each control
//! must decide its condition alone, since its edge alone starts the process. Where the ladder does not settle it
//! (`if (!rst_n || clear)`, `q <= !rst_n ? 0 : d`, a default before the `if`, a `case`), the body is executed with one
//! control after the other at its active level. What it then does must not depend on any signal, and the clock must be the
//! one signal of the list that the body does not read: only then are the cells those that every reading of the text gives.
//!
//! Invariant: anything else is an unsupported construct, never a guess.

use std::collections::{BTreeMap, HashMap, HashSet};

use super::bits::Bit;
use super::context::{Elaborator, Outcome, unsupported};
use super::environment::{Environment, Mode};
use super::process::{Condition, Results, leading_if};
use crate::diagnostic::Diagnostic;
use crate::graph::{Edge, NodeId, NodeKind};
use crate::source::Span;
use crate::syntax::ast::{self, Event, Expr, Stmt};

/// One signal of an edge list.
#[derive(Clone, Copy)]
pub(super) struct Signal<'a> {
    /// Without the inverters in front of it.
    pub net: NodeId,
    /// The edge of `net`.
    pub edge: Edge,
    /// The net and its level behind the edge, unless the signal is an expression or both edges count.
    pub wire: Option<(NodeId, bool)>,
    pub span: Span,
    /// The condition behind `iff`.
    pub guard: Option<&'a Expr>,
}

/// Who does what in an edge list.
pub(super) struct Roles<'a> {
    pub clocks: Vec<Signal<'a>>,
    /// The asynchronous controls, the strongest first.
    pub conditions: Vec<Condition>,
    /// What the body does under each condition when none before it holds.
    pub runs: Vec<Results>,
    /// What it does at an edge of the clock.
    pub main: Results,
}

/// What the leading if-ladder says.
pub(super) struct Ladder<'a> {
    pub conditions: Vec<Condition>,
    /// Signals that no condition tests.
    pub remaining: Vec<Signal<'a>>,
    /// Why the conditions do not mean asynchronous controls.
    pub doubt: Option<Box<Diagnostic>>,
}

impl<'a> Elaborator<'a> {
    pub fn edge_signals(&mut self, events: &'a [Event]) -> Outcome<Vec<Signal<'a>>> {
        self.environment = Environment::new(Mode::Edge);
        let mut signals: Vec<Signal<'a>> = Vec::new();
        for event in events {
            let (bits, _) = self.eval_self(&event.expr)?;
            let site = self.site(event.span);
            let node = self.node(bits.first().copied().unwrap_or(Bit::X), site);
            let (net, active) = self.builder.strip_inverters(node);
            let edge = match (event.edge, active) {
                (Some(ast::Edge::Posedge), true) | (Some(ast::Edge::Negedge), false) => Edge::Posedge,
                (Some(ast::Edge::Both) | None, _) => Edge::Both,
                _ => Edge::Negedge,
            };
            let is_wire = matches!(self.builder.kind(net), NodeKind::Wire) && edge != Edge::Both;
            let wire = is_wire.then_some((net, edge == Edge::Posedge));
            let guard = event.iff.as_ref();
            if guard.is_some() || !signals.iter().any(|other| (other.net, other.edge) == (net, edge)) {
                signals.push(Signal { net, edge, wire, span: event.span, guard });
            }
        }
        Ok(signals)
    }

    pub fn ladder(&mut self, signals: &[Signal<'a>], body: &'a Stmt) -> Outcome<Ladder<'a>> {
        let mut ladder = Ladder { conditions: Vec::new(), remaining: signals.to_vec(), doubt: None };
        let mut inactive: HashMap<NodeId, bool> = HashMap::new();
        let mut at = if signals.len() > 1 { leading_if(body) } else { None };
        while let Some((condition, otherwise)) = at
            && ladder.remaining.len() > 1
        {
            self.environment = Environment::new(Mode::Edge);
            let bit = self.eval_condition(condition)?;
            let Bit::Node(node) = bit else { break };
            let support = self.support(node);
            let tested: Vec<&Signal<'a>> = signals.iter().filter(|signal| support.contains(&signal.net)).collect();
            if support.is_empty() || support.iter().any(|wire| !signals.iter().any(|signal| signal.net == *wire)) {
                break;
            }
            let (net, active) = self.builder.strip_inverters(node);
            if let Some(signal) = signals.iter().find(|signal| signal.net == net)
                && (signal.edge == Edge::Posedge) != active
                && signal.edge != Edge::Both
            {
                let what = "asynchronous control tested against the edge it is listed with";
                ladder.doubt = Some(unsupported(what, signal.span));
                break;
            }
            if let Some(signal) = self.undecided_control(&tested, condition, &inactive)? {
                let what = "asynchronous control that acts only together with another signal";
                ladder.doubt = Some(unsupported(what, signal.span));
                break;
            }
            if let Some(guarded) = tested.iter().find(|signal| signal.guard.is_some()) {
                return Err(unsupported("`iff` at an asynchronous control", guarded.span));
            }
            inactive.extend(tested.iter().filter_map(|signal| signal.wire).map(|(wire, level)| (wire, !level)));
            ladder.remaining.retain(|signal| !support.contains(&signal.net));
            ladder.conditions.push(Condition { node });
            at = otherwise.and_then(leading_if);
        }
        Ok(ladder)
    }

    /// A signal whose active level alone does not make the condition true.
    fn undecided_control(
        &mut self,
        tested: &[&Signal<'a>],
        condition: &'a Expr,
        inactive: &HashMap<NodeId, bool>,
    ) -> Outcome<Option<Signal<'a>>> {
        for signal in tested {
            let Some((wire, level)) = signal.wire else { continue };
            self.forced.clone_from(inactive);
            self.forced.insert(wire, level);
            let decided = self.eval_condition(condition);
            self.forced.clear();
            if decided? != Bit::One {
                return Ok(Some(**signal));
            }
        }
        Ok(None)
    }

    /// Finds the roles by executing the body in each state of the controls; `None` when it reads all signals or leaves
    /// more than one unread.
    pub fn roles_by_state(&mut self, signals: &[Signal<'a>], body: &'a Stmt) -> Outcome<Option<Roles<'a>>> {
        let plain = self.run_body(body, Mode::Edge, HashMap::new())?;
        let read = self.read_by([&plain]);
        let (controls, clocks): (Vec<Signal<'a>>, Vec<Signal<'a>>) =
            signals.iter().partition(|signal| read.contains(&signal.net));
        let [clock] = clocks.as_slice() else { return Ok(None) };
        let mut open = Vec::new();
        for control in controls {
            let Some(wire) = control.wire else { return Ok(None) };
            if control.guard.is_some() {
                return Err(unsupported("`iff` at an asynchronous control", control.span));
            }
            open.push((control, wire));
        }
        let mut inactive: HashMap<NodeId, bool> = HashMap::new();
        let mut conditions = Vec::new();
        let mut runs = Vec::new();
        while let Some(&(first, _)) = open.first() {
            let mut found = None;
            for (index, &(control, (wire, level))) in open.iter().enumerate() {
                let mut forced = inactive.clone();
                forced.insert(wire, level);
                let results = self.run_forced(body, HashMap::new(), forced)?;
                if self.fixed(&results) {
                    found = Some((index, control, results));
                    break;
                }
            }
            let Some((index, control, results)) = found else {
                let what = "asynchronous control that does not settle by itself what it sets";
                return Err(unsupported(what, first.span));
            };
            let (_, (wire, level)) = open.remove(index);
            inactive.insert(wire, !level);
            let site = self.site(control.span);
            let bit = if level { Bit::Node(wire) } else { self.not(Bit::Node(wire), site) };
            conditions.push(Condition { node: self.node(bit, site) });
            runs.push(results);
        }
        inactive.extend(clock.wire);
        let main = self.run_forced(body, HashMap::new(), inactive)?;
        Ok(Some(Roles { clocks, conditions, runs, main }))
    }

    /// Whether every bit is a literal or keeps its value.
    fn fixed(&self, results: &Results) -> bool {
        results.iter().all(|(&id, (bits, _))| {
            let wires = &self.variable(id).wires;
            bits.iter().zip(wires).all(|(bit, &wire)| *bit == Bit::Node(wire) || !matches!(bit, Bit::Node(_)))
        })
    }

    /// Everything that decides the results, nets included.
    pub fn read_by<'r>(&self, results: impl IntoIterator<Item = &'r Results>) -> HashSet<NodeId> {
        let mut seen = HashSet::new();
        for (bits, _) in results.into_iter().flat_map(BTreeMap::values) {
            for &bit in bits {
                if let Bit::Node(node) = bit {
                    self.support_into(node, &mut seen);
                }
            }
        }
        seen
    }
}
