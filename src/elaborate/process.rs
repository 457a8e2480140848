//! Processes: which always blocks make flip-flops, which latches, which plain logic. A process with an edge list is
//! executed once for each state of its asynchronous controls ([`super::controls`] finds them) and once for the clock;
//! every other process is executed once, and what it does not assign on every path is a latch.

use std::collections::{BTreeMap, BTreeSet, HashMap, HashSet};
use std::rc::Rc;

use super::bits::{Bit, Preset};
use super::context::{Elaborator, Outcome, Storage, VariableId, unsupported};
use super::controls::{Roles, Signal};
use super::drivers::{Pending, PendingKind, Rung};
use super::environment::{Environment, Mode};
use super::scope::ScopeId;
use super::simulation::{only_simulates, takes_time};
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{Edge, NodeId, NodeKind, SourceKind};
use crate::source::Span;
use crate::syntax::ast::{self, Event, Process, ProcessKind, Sensitivity, Stmt, StmtKind};

/// What a process leaves in each variable, and whether only blocking assignments wrote it.
pub(super) type Results = BTreeMap<VariableId, (Vec<Bit>, bool)>;

/// One condition that asynchronous controls decide.
#[derive(Clone, Copy)]
pub(super) struct Condition {
    pub node: NodeId,
}

impl<'a> Elaborator<'a> {
    pub fn process(&mut self, scope: ScopeId, process: &'a Process, span: Span) {
        self.here = scope;
        self.instance = self.scope(scope).instance;
        self.steps = 0;
        self.block_scopes.clear();
        let events: &'a [Event] = match &process.sensitivity {
            Some(Sensitivity::List(events)) => events,
            _ => &[],
        };
        let edges = events.iter().filter(|event| event.edge.is_some()).count();
        let outcome = match process.kind {
            ProcessKind::Initial => return self.initial(process),
            ProcessKind::Always | ProcessKind::AlwaysFf if edges > 0 && edges == events.len() => {
                self.edge_process(events, &process.body)
            }
            _ if edges > 0 => Err(unsupported("sensitivity list that mixes edges and levels", span)),
            ProcessKind::AlwaysFf => Err(unsupported("always_ff without an edge", span)),
            ProcessKind::Always if process.sensitivity.is_none() => {
                Err(unsupported("always without an event control at its head", span))
            }
            _ => self.check_levels(events).and_then(|()| self.level_process(&process.body)),
        };
        if let Err(diagnostic) = outcome {
            if only_simulates(&process.body) {
                self.skip("process for simulation");
                return;
            }
            self.report(*diagnostic);
            self.opaque_process(&process.body);
        }
    }

    /// A process whose list names only levels is plain logic or a latch of what it reads. Waiting for a named event or
    /// guarding the wake-up makes it something else.
    fn check_levels(&mut self, events: &'a [Event]) -> Outcome<()> {
        for event in events {
            if event.iff.is_some() {
                return Err(unsupported("`iff` in an event control", event.span));
            }
            if self.size(&event.expr).is_err() {
                return Err(unsupported("event control with something that is no net or variable", event.span));
            }
        }
        Ok(())
    }

    /// Executes a body under assumptions about its conditions; what it leaves in each variable.
    pub fn run_body(&mut self, body: &'a Stmt, mode: Mode, assumed: HashMap<NodeId, bool>) -> Outcome<Results> {
        self.environment = Environment::new(mode);
        self.assumed = assumed;
        self.strict = false;
        let outcome = self.execute(body);
        self.strict = true;
        self.assumed.clear();
        self.points.clear();
        let mut environment = std::mem::take(&mut self.environment);
        outcome?;
        environment.layers.truncate(1);
        let layer = environment.pop();
        let mut results = Results::new();
        for ((id, nonblocking), bits) in layer {
            if self.variable(id).storage == Storage::Local {
                continue;
            }
            if !nonblocking {
                results.insert(id, (bits, true));
                continue;
            }
            self.environment.mode = mode;
            let base = self.base_value(id);
            let entry = results.entry(id).or_insert_with(|| (base.clone(), false));
            entry.1 = false;
            for ((old, new), base) in entry.0.iter_mut().zip(bits).zip(base) {
                if new != base {
                    *old = new;
                }
            }
        }
        self.environment = Environment::default();
        Ok(results)
    }

    fn initial(&mut self, process: &'a Process) {
        let before = self.diagnostics.len();
        self.environment = Environment::new(Mode::Initial);
        let outcome = self.execute(&process.body);
        self.points.clear();
        let layer = std::mem::take(&mut self.environment).layers.into_iter().next().unwrap_or_default();
        if outcome.is_err() {
            if takes_time(&process.body) {
                self.note_simulated(&process.body);
            }
            self.diagnostics.truncate(before);
            self.skip("initial block that is not constant");
            return;
        }
        for ((id, _), bits) in layer {
            if matches!(self.variable(id).storage, Storage::Variable) {
                self.variables[id.index()].init = Some(bits);
            }
        }
    }

    fn level_process(&mut self, body: &'a Stmt) -> Outcome<()> {
        let results = self.run_body(body, Mode::Level, HashMap::new())?;
        for (id, (bits, blocking_only)) in results {
            for (offset, &bit) in bits.iter().enumerate() {
                let kind = match bit {
                    Bit::Held => continue,
                    Bit::Partial(_) => self.latch(id, bit),
                    bit => PendingKind::Value(bit),
                };
                self.pend(id, offset, kind, blocking_only);
            }
        }
        Ok(())
    }

    /// A latch bit: conditions that make it a constant whatever else holds become controls, as long as something is left to
    /// be latched.
    fn latch(&mut self, id: VariableId, mut bit: Bit) -> PendingKind {
        let mut rungs = Vec::new();
        while let Bit::Partial(index) = bit
            && let Some(Preset { condition, when, value, rest }) = self.guarded[index as usize].preset
        {
            let (net, level) = self.pin(condition, id, if value == Bit::One { "set" } else { "reset" });
            let site = self.site(self.variable(id).span);
            let value = self.node(value, site);
            rungs.push(Rung { net, active: level == when, value });
            bit = rest;
        }
        let (enable, data, from) = self.split(bit, true);
        let site = self.site(from.unwrap_or(self.variable(id).span));
        let data = data.unwrap_or(Bit::X);
        let data = self.node(data, site);
        let enable = self.node(enable, site);
        let (enable, active) = self.pin(enable, id, "enable");
        PendingKind::Latch { enable, active, data, rungs: rungs.into(), from }
    }

    fn edge_process(&mut self, events: &'a [Event], body: &'a Stmt) -> Outcome<()> {
        let signals = self.edge_signals(events)?;
        let span = events.iter().map(|event| event.span).reduce(Span::to).unwrap_or(body.span);
        let ladder = self.ladder(&signals, body)?;
        let roles = if signals.len() > 1 && (ladder.doubt.is_some() || ladder.remaining.len() != 1) {
            match (self.roles_by_state(&signals, body), ladder.doubt) {
                (Ok(Some(roles)), _) => Some(roles),
                (Ok(None), None) => None,
                (Ok(None), Some(doubt)) | (Err(_), Some(doubt)) => return Err(doubt),
                (Err(problem), None) => return Err(problem),
            }
        } else {
            None
        };
        let Roles { clocks, conditions, runs, main } = match roles {
            Some(roles) => roles,
            None => self.roles_of_ladder(ladder.conditions, ladder.remaining, body, span)?,
        };
        if clocks.len() > 1 {
            self.several_clocks(&clocks, &runs, &main, span)?;
        }
        let main = self.guarded(main, &clocks)?;
        let clocks: Vec<(NodeId, Edge)> = clocks.iter().map(|signal| (signal.net, signal.edge)).collect();
        self.flip_flops(&clocks, &conditions, &runs, &main, body.span);
        Ok(())
    }

    /// What the body does in each rung of its leading if-ladder, and when none is taken.
    fn roles_of_ladder(
        &mut self,
        conditions: Vec<Condition>,
        clocks: Vec<Signal<'a>>,
        body: &'a Stmt,
        span: Span,
    ) -> Outcome<Roles<'a>> {
        if clocks.is_empty() {
            return Err(unsupported("edge list that leaves no clock beside the asynchronous controls", span));
        }
        let mut assumed = HashMap::new();
        let mut runs = Vec::new();
        for condition in &conditions {
            runs.push(self.run_body(body, Mode::Edge, self.with_condition(&assumed, condition.node, true))?);
            assumed = self.with_condition(&assumed, condition.node, false);
        }
        let forced = match clocks.as_slice() {
            [clock] => clock.wire.into_iter().collect(),
            _ => HashMap::new(),
        };
        let main = self.run_forced(body, assumed, forced)?;
        Ok(Roles { clocks, conditions, runs, main })
    }

    /// Executes a clocked body while the nets in `forced` have known values.
    pub fn run_forced(
        &mut self,
        body: &'a Stmt,
        assumed: HashMap<NodeId, bool>,
        forced: HashMap<NodeId, bool>,
    ) -> Outcome<Results> {
        self.forced = forced;
        let results = self.run_body(body, Mode::Edge, assumed);
        self.forced.clear();
        results
    }

    /// The clocked branch under the `iff` of its clock: without it the flip-flops hold.
    fn guarded(&mut self, mut main: Results, clocks: &[Signal<'a>]) -> Outcome<Results> {
        let Some(guard) = clocks.iter().find_map(|clock| clock.guard) else { return Ok(main) };
        if clocks.len() > 1 {
            return Err(unsupported("`iff` at one of several clocks", guard.span));
        }
        self.environment = Environment::new(Mode::Edge);
        let condition = self.eval_condition(guard)?;
        let site = self.site(guard.span);
        for (&id, (bits, _)) in &mut main {
            for (offset, bit) in bits.iter_mut().enumerate() {
                let held = self.variable(id).wires.get(offset).map_or(Bit::X, |&wire| Bit::Node(wire));
                if *bit != held {
                    *bit = self.select(condition, *bit, held, site);
                }
            }
        }
        Ok(main)
    }

    /// Assumes a condition, and the signal itself when the condition is nothing but that signal or its inverse.
    fn with_condition(&self, assumed: &HashMap<NodeId, bool>, node: NodeId, value: bool) -> HashMap<NodeId, bool> {
        let (net, active) = self.builder.strip_inverters(node);
        with_assumption(&with_assumption(assumed, node, value), net, value == active)
    }

    /// Edges that the body never tests all clock the flip-flops, as the standard says; the reader is told, since one of them
    /// may have been meant as a control. A body that reads such a signal would see it change with its own edge, which
    /// is neither a clock nor a control.
    fn several_clocks(&mut self, clocks: &[Signal<'a>], runs: &[Results], main: &Results, span: Span) -> Outcome<()> {
        let seen = self.read_by(runs.iter().chain([main]));
        if clocks.iter().any(|signal| seen.contains(&signal.net)) {
            return Err(unsupported("edge list with more than one signal that could be the clock", span));
        }
        if let Some(expression) = clocks.iter().find(|signal| self.inner(signal.net)) {
            return Err(unsupported("edge of an expression beside other edges", expression.span));
        }
        let message = format!("{} signals clock these flip-flops: none of them is tested as a control", clocks.len());
        self.report(Diagnostic::new(Kind::Note, "several clocks", message, Some(span)));
        Ok(())
    }

    fn flip_flops(
        &mut self,
        clocks: &[(NodeId, Edge)],
        conditions: &[Condition],
        runs: &[Results],
        main: &Results,
        span: Span,
    ) {
        let ids: BTreeSet<VariableId> = main.keys().chain(runs.iter().flat_map(|run| run.keys())).copied().collect();
        for id in ids {
            let wires = self.variable(id).wires.clone();
            let blocking_only =
                runs.iter().chain([main]).filter_map(|run| run.get(&id)).all(|&(_, blocking_only)| blocking_only);
            // The inverters in front of a clock are gone already; only a clock without a name gets one here.
            let clocks: Rc<[(NodeId, Edge)]> =
                clocks.iter().map(|&(clock, edge)| (self.pin(clock, id, "clock").0, edge)).collect();
            let mut known: BTreeMap<Vec<Bit>, Rc<[Rung]>> = BTreeMap::new();
            for (offset, &wire) in wires.iter().enumerate() {
                let held = Bit::Node(wire);
                let at = |results: &Results| results.get(&id).map_or(held, |(bits, _)| bits[offset]);
                let values: Vec<Bit> = runs.iter().map(at).collect();
                let mut data = at(main);
                if data == held && values.iter().all(|&value| value == held) {
                    continue;
                }
                let site = self.site(span);
                let mut holding: Vec<Bit> = Vec::new();
                let shape: Vec<Bit> =
                    values.iter().map(|&value| if value == held { Bit::Held } else { value }).collect();
                for (condition, value) in conditions.iter().zip(&values) {
                    if *value == held {
                        holding.push(Bit::Node(condition.node));
                    }
                }
                let rungs = match known.get(&shape) {
                    Some(rungs) => Rc::clone(rungs),
                    None => {
                        let rungs: Rc<[Rung]> = self.rungs(id, conditions, &shape, span).into();
                        known.insert(shape, Rc::clone(&rungs));
                        rungs
                    }
                };
                // While a condition holds that leaves this bit alone, the clocked branch is not executed.
                for condition in holding.into_iter().rev() {
                    data = self.select(condition, held, data, site);
                }
                let data = self.node(data, site);
                self.pend(id, offset, PendingKind::FlipFlop { clocks: Rc::clone(&clocks), data, rungs }, blocking_only);
            }
        }
    }

    /// The asynchronous controls of a bit, the strongest first; `Held` is a rung that leaves it alone.
    fn rungs(&mut self, id: VariableId, conditions: &[Condition], values: &[Bit], span: Span) -> Vec<Rung> {
        let site = self.site(span);
        let mut holding: Vec<Bit> = Vec::new();
        let mut rungs = Vec::new();
        for (condition, &value) in conditions.iter().zip(values) {
            if value == Bit::Held {
                holding.push(Bit::Node(condition.node));
                continue;
            }
            let mut node = condition.node;
            if !holding.is_empty() {
                let mut terms: Vec<Bit> = Vec::new();
                for &earlier in &holding {
                    terms.push(self.not(earlier, site));
                }
                terms.push(Bit::Node(condition.node));
                let gated = self.and(&terms, site);
                node = self.node(gated, site);
            }
            let label = match value {
                Bit::Zero => "reset",
                Bit::One => "set",
                _ => "load",
            };
            let (net, active) = self.pin(node, id, label);
            let value = self.node(value, site);
            rungs.push(Rung { net, active, value });
        }
        rungs
    }

    /// The nets that a condition depends on.
    pub fn support(&self, node: NodeId) -> BTreeSet<NodeId> {
        let mut seen = HashSet::new();
        self.support_into(node, &mut seen);
        seen.retain(|&node| !self.inner(node) && !matches!(self.builder.kind(node), NodeKind::Const(_)));
        seen.into_iter().collect()
    }

    /// Whether a node is logic, not a net or source.
    pub fn inner(&self, node: NodeId) -> bool {
        matches!(
            self.builder.kind(node),
            NodeKind::Gate(_) | NodeKind::Table(_) | NodeKind::OpIn(_) | NodeKind::OpOut(_)
        )
    }

    /// Collects all nodes of the logic in front of a node, up to and including nets and sources.
    pub fn support_into(&self, node: NodeId, seen: &mut HashSet<NodeId>) {
        let mut stack = vec![node];
        while let Some(node) = stack.pop() {
            if seen.insert(node) && self.inner(node) {
                stack.extend_from_slice(self.builder.fanin(node));
            }
        }
    }

    /// The net at a pin and the level at which it acts; a condition that has no name gets one after the variable.
    fn pin(&mut self, node: NodeId, id: VariableId, label: &str) -> (NodeId, bool) {
        let (net, active) = self.builder.strip_inverters(node);
        if matches!(self.builder.kind(net), NodeKind::Wire | NodeKind::Const(_)) {
            return (net, active);
        }
        if let Some(&wire) = self.pin_names.get(&net) {
            return (wire, active);
        }
        let variable = self.variable(id);
        let (instance, name) = (variable.instance, format!("{}.{label}", variable.name));
        let span = self.builder.site(net).span.unwrap_or(variable.span);
        let name = self.unique_label(instance, &name);
        let made = self.builder.net(instance, &name, span, vec![String::new()], true);
        let wire = self.builder.net_bits(made)[0];
        self.builder.drive(wire, net);
        self.pin_names.insert(net, wire);
        (wire, active)
    }

    /// A name for a net of our own making that no other such net of the instance has.
    pub fn unique_label(&mut self, instance: crate::graph::InstanceId, name: &str) -> String {
        let mut label = name.to_string();
        let mut number = 1;
        while !self.pin_labels.insert((instance, label.clone())) {
            number += 1;
            label = format!("{name}{number}");
        }
        label
    }

    fn pend(&mut self, id: VariableId, offset: usize, kind: PendingKind, blocking_only: bool) {
        let instance = self.instance;
        self.pending.push(Pending { variable: id, offset, kind, blocking_only, instance });
    }

    /// A process that could not be executed: everything it assigns is opaque.
    fn opaque_process(&mut self, body: &'a Stmt) {
        self.environment = Environment::new(Mode::Level);
        self.steps = 0;
        self.strict = true;
        self.points.clear();
        self.poison(body);
        let layer = self.environment.pop();
        self.environment = Environment::default();
        for ((id, _), bits) in layer {
            if self.variable(id).storage == Storage::Local {
                continue;
            }
            for (offset, bit) in bits.into_iter().enumerate() {
                if bit != Bit::Held {
                    let bit = match bit {
                        Bit::Node(_) => bit,
                        _ => {
                            let site = self.site(body.span);
                            Bit::Node(self.builder.source(SourceKind::BlackBox, site))
                        }
                    };
                    self.pend(id, offset, PendingKind::Value(bit), false);
                }
            }
        }
    }
}

fn with_assumption(assumed: &HashMap<NodeId, bool>, node: NodeId, value: bool) -> HashMap<NodeId, bool> {
    let mut assumed = assumed.clone();
    assumed.insert(node, value);
    assumed
}

/// The first if of a body, behind leading assignments: its condition and its else branch.
pub(super) fn leading_if(body: &Stmt) -> Option<(&ast::Expr, Option<&Stmt>)> {
    match &body.kind {
        StmtKind::If { cond, otherwise, .. } => Some((cond, otherwise.as_deref())),
        StmtKind::Block { body, .. } => {
            let mut statements = body
                .iter()
                .skip_while(|stmt| matches!(stmt.kind, StmtKind::Empty | StmtKind::Skipped(_) | StmtKind::Assign(_)));
            statements.next().and_then(leading_if)
        }
        _ => None,
    }
}
