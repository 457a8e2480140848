//! Continuous assignments, gate and switch primitives, and user-defined primitives.

use std::rc::Rc;

use super::bits::Bit;
use super::context::{Elaborator, Outcome, Storage, VariableId, unsupported, wrong};
use super::environment::{Environment, Mode};
use super::hierarchy::{Slot, Work};
use super::scope::ScopeId;
use super::udp::UdpModel;
use crate::graph::{GateKind, Site, SourceKind};
use crate::source::Span;
use crate::syntax::ast::{Connection, Expr, GateInstance, GateType, Ident, Instance};

impl<'a> Elaborator<'a> {
    /// Does one piece of collected work.
    pub fn work(&mut self, work: &Work<'a>) {
        self.environment = Environment::default();
        self.steps = 0;
        self.points.clear();
        self.begin_piece(work);
        match work {
            &Work::Assign { scope, target, value } => {
                self.enter(scope);
                let outcome = self.continuous(target, value);
                self.survive(outcome);
            }
            &Work::NetInit { scope, variable, value } => {
                self.enter(scope);
                let ty = Rc::clone(&self.variable(variable).ty);
                let bits = self.value_or_opaque(value, ty.width, |this| this.eval_as(value, &ty));
                let wires = self.variable(variable).wires.clone();
                for (wire, bit) in wires.into_iter().zip(bits) {
                    self.add_driver(wire, bit, Some(value.span));
                }
            }
            &Work::VariableInit { scope, variable, value } => {
                self.enter(scope);
                self.variable_init(variable, value);
            }
            &Work::Alias { scope, nets } => {
                self.enter(scope);
                let outcome = self.alias(nets);
                self.survive(outcome);
            }
            &Work::Process { scope, process, span } => self.process(scope, process, span),
            &Work::Gate { scope, gate, instance, slot } => {
                self.enter(scope);
                let outcome = self.gate_instance(gate, instance, slot);
                self.survive(outcome);
            }
            &Work::Primitive { scope, name, instance, slot } => {
                self.enter(scope);
                let outcome = self.primitive(name, instance, slot);
                self.survive(outcome);
            }
            Work::Connection(connection) => self.connection(connection),
            Work::BlackBox(black_box) => self.black_box(black_box),
            Work::Cell(cell) => self.cell(cell),
        }
        self.end_piece();
        self.check_side_effects();
    }

    /// Outside of processes nothing carries out what a function assigns beside its result.
    fn check_side_effects(&mut self) {
        let layers = std::mem::take(&mut self.environment).layers;
        for &(id, _) in layers.iter().flat_map(|layer| layer.keys()) {
            if self.variable(id).storage != Storage::Local && !self.side_effects.contains(&id) {
                self.side_effects.push(id);
            }
        }
    }

    /// Reports the variables that such functions assign, and those that only what is left out as simulation assigns, unless
    /// nothing reads them, as nothing reads a loop counter.
    pub fn report_left_out(&mut self) {
        let mut left_out: Vec<(VariableId, &str)> = Vec::new();
        left_out.extend(self.side_effects.drain(..).map(|id| (id, "a function called outside of a process")));
        let simulated = std::mem::take(&mut self.simulated);
        left_out.extend(simulated.into_iter().filter(|&(id, _)| !self.is_driven(id)));
        if left_out.is_empty() {
            return;
        }
        let used = self.used_nodes();
        for (id, by) in left_out {
            let variable = self.variable(id);
            if variable.is_port || variable.wires.iter().any(|wire| used.contains(wire)) {
                let what = format!("assignment of `{}` by {by}", variable.name);
                let span = variable.span;
                self.report(*unsupported(what, span));
            }
        }
    }

    /// Whether anything drives a bit of a variable, before the drivers are resolved.
    pub fn is_driven(&self, id: VariableId) -> bool {
        let driven = |wire| self.drivers.contains_key(wire) || self.builder.driver(*wire).is_some();
        self.variable(id).wires.iter().any(driven) || self.pending.iter().any(|pending| pending.variable == id)
    }

    fn enter(&mut self, scope: ScopeId) {
        self.here = scope;
        self.instance = self.scope(scope).instance;
    }

    /// The value, or fresh sources in its place when it could not be worked out, which is reported.
    fn value_or_opaque(
        &mut self,
        value: &'a Expr,
        width: usize,
        eval: impl FnOnce(&mut Self) -> Outcome<Vec<Bit>>,
    ) -> Vec<Bit> {
        match eval(self) {
            Ok(bits) => bits,
            Err(diagnostic) => {
                self.report(*diagnostic);
                let site = self.site(value.span);
                (0..width).map(|_| Bit::Node(self.builder.source(SourceKind::BlackBox, site))).collect()
            }
        }
    }

    fn continuous(&mut self, target: &'a Expr, value: &'a Expr) -> Outcome<()> {
        let places = self.targets(target)?;
        let wires = self.wires_of(&places, target.span)?;
        let bits = match places.as_slice() {
            [place] => {
                let ty = Rc::clone(&place.ty);
                self.value_or_opaque(value, wires.len(), |this| this.eval_as(value, &ty))
            }
            _ => self.value_or_opaque(value, wires.len(), |this| this.eval_assigned(value, wires.len())),
        };
        for (wire, bit) in wires.iter().zip(bits) {
            if let Some(wire) = wire {
                self.add_driver(*wire, bit, Some(target.span.to(value.span)));
            }
        }
        Ok(())
    }

    /// The initial value of a variable. One that is not constant matters only to simulation.
    fn variable_init(&mut self, id: VariableId, value: &'a Expr) {
        self.environment = Environment::new(Mode::Initial);
        let ty = Rc::clone(&self.variable(id).ty);
        let outcome = self.eval_as(value, &ty);
        self.environment = Environment::default();
        match outcome {
            Ok(bits) if bits.iter().all(|bit| bit.is_literal()) => {
                if self.variable(id).init.is_none() {
                    self.variables[id.index()].init = Some(bits);
                }
            }
            Ok(_) => self.skip("variable initialiser that is not constant"),
            Err(diagnostic) => self.report(*diagnostic),
        }
    }

    fn alias(&mut self, nets: &'a [Expr]) -> Outcome<()> {
        let mut first: Option<Vec<Option<crate::graph::NodeId>>> = None;
        for net in nets {
            let places = self.targets(net)?;
            let wires = self.wires_of(&places, net.span)?;
            match &first {
                None => first = Some(wires),
                Some(first) => {
                    for (&a, &b) in first.iter().zip(&wires) {
                        if let (Some(a), Some(b)) = (a, b) {
                            self.aliases.push((a, b));
                        }
                    }
                }
            }
        }
        Ok(())
    }

    /// One bit of a terminal: its own for each element of an array, else shared.
    fn terminal_bit(&mut self, terminal: &'a Expr, slot: Option<Slot>) -> Outcome<Bit> {
        let (bits, _) = self.eval_self(terminal)?;
        Ok(bits.get(offset(bits.len(), slot)).copied().unwrap_or(Bit::X))
    }

    fn terminal_driver(&mut self, terminal: &'a Expr, slot: Option<Slot>, value: Bit, span: Span) -> Outcome<()> {
        let places = self.targets(terminal)?;
        let wires = self.wires_of(&places, terminal.span)?;
        if let Some(&Some(wire)) = wires.get(offset(wires.len(), slot)) {
            self.add_driver(wire, value, Some(span));
        }
        Ok(())
    }

    fn gate_instance(&mut self, gate: GateType, instance: &'a GateInstance, slot: Option<Slot>) -> Outcome<()> {
        let site = self.site(instance.span);
        let span = instance.span;
        let terminals = instance.terminals.as_slice();
        let few = || wrong("a gate with too few terminals", span);
        let kind = match gate {
            GateType::And => GateKind::And,
            GateType::Nand => GateKind::Nand,
            GateType::Or => GateKind::Or,
            GateType::Nor => GateKind::Nor,
            GateType::Xor => GateKind::Xor,
            GateType::Xnor => GateKind::Xnor,
            GateType::Buf | GateType::Not => {
                let (input, outputs) = terminals.split_last().ok_or_else(few)?;
                let input = self.terminal_bit(input, slot)?;
                let kind = if gate == GateType::Buf { GateKind::Buf } else { GateKind::Not };
                let value = if input.is_literal() && kind == GateKind::Buf {
                    if input == Bit::Z { Bit::X } else { input }
                } else {
                    self.gate(kind, &[input], site)
                };
                for output in outputs {
                    self.terminal_driver(output, slot, value, span)?;
                }
                return Ok(());
            }
            GateType::Pullup | GateType::Pulldown => {
                for terminal in terminals {
                    let places = self.targets(terminal)?;
                    let wires = self.wires_of(&places, terminal.span)?;
                    if let Some(&Some(wire)) = wires.get(offset(wires.len(), slot)) {
                        self.pulls.insert(wire, gate == GateType::Pullup);
                    }
                }
                return Ok(());
            }
            GateType::Tran | GateType::Rtran => {
                let [a, b] = terminals else { return Err(few()) };
                let mut ends = Vec::new();
                for terminal in [a, b] {
                    let places = self.targets(terminal)?;
                    let wires = self.wires_of(&places, terminal.span)?;
                    ends.push(wires.get(offset(wires.len(), slot)).copied().flatten());
                }
                if let [Some(a), Some(b)] = ends.as_slice() {
                    self.aliases.push((*a, *b));
                }
                return Ok(());
            }
            GateType::Tranif0 | GateType::Tranif1 | GateType::Rtranif0 | GateType::Rtranif1 => {
                for terminal in terminals.iter().take(2) {
                    let source = self.builder.source(SourceKind::BlackBox, site);
                    self.terminal_driver(terminal, slot, Bit::Node(source), span)?;
                }
                return Err(unsupported("bidirectional switch with a control", span));
            }
            _ => return self.three_state(gate, instance, slot),
        };
        let (output, inputs) = terminals.split_first().ok_or_else(few)?;
        let mut bits = Vec::with_capacity(inputs.len());
        for input in inputs {
            bits.push(self.terminal_bit(input, slot)?);
        }
        if bits.is_empty() {
            return Err(few());
        }
        let value = self.gate(kind, &bits, site);
        self.terminal_driver(output, slot, value, span)
    }

    /// Tri-state buffers and switches: data that is there while enabled.
    fn three_state(&mut self, gate: GateType, instance: &'a GateInstance, slot: Option<Slot>) -> Outcome<()> {
        let site = self.site(instance.span);
        let [output, data, controls @ ..] = instance.terminals.as_slice() else {
            return Err(wrong("a gate with too few terminals", instance.span));
        };
        let mut data = self.terminal_bit(data, slot)?;
        let mut bits = Vec::new();
        for control in controls {
            bits.push(self.terminal_bit(control, slot)?);
        }
        let enable = match (gate, bits.as_slice()) {
            (GateType::Cmos | GateType::Rcmos, &[n, p]) => {
                let p = self.not(p, site);
                self.or(&[n, p], site)
            }
            (GateType::Bufif1 | GateType::Notif1 | GateType::Nmos | GateType::Rnmos, &[control]) => control,
            (GateType::Bufif0 | GateType::Notif0 | GateType::Pmos | GateType::Rpmos, &[control]) => {
                self.not(control, site)
            }
            _ => return Err(wrong("a gate with the wrong number of terminals", instance.span)),
        };
        if matches!(gate, GateType::Notif0 | GateType::Notif1) {
            data = self.not(data, site);
        }
        let value = if enable.is_literal() && !matches!(enable, Bit::Zero | Bit::One) {
            Bit::X
        } else {
            self.guard(enable, data, None, false)
        };
        self.terminal_driver(output, slot, value, instance.span)
    }

    fn primitive(&mut self, name: &'a Ident, instance: &'a Instance, slot: Option<Slot>) -> Outcome<()> {
        let site: Site = self.site(instance.span);
        let Some(&udp) = self.library.udps.get(name.name.as_str()) else {
            return Err(wrong(format!("there is no primitive `{}`", name.name), name.span));
        };
        let mut terminals: Vec<Option<&'a Expr>> = Vec::new();
        for connection in &instance.connections {
            match connection {
                Connection::Ordered(value, _) => terminals.push(value.as_ref()),
                _ => return Err(wrong("the terminals of a primitive are connected by order", instance.span)),
            }
        }
        let Some((output, inputs)) = terminals.split_first() else {
            return Err(wrong("a primitive without terminals", instance.span));
        };
        if inputs.len() != udp.inputs.len() {
            return Err(wrong(format!("`{}` has {} inputs", name.name, udp.inputs.len()), instance.span));
        }
        let model = match self.udps.get(name.name.as_str()) {
            Some(model) => Some(Rc::clone(model)),
            None => match UdpModel::declare(udp, &mut self.builder) {
                Ok(model) => {
                    let model = Rc::new(model);
                    self.udps.insert(name.name.clone(), Rc::clone(&model));
                    Some(model)
                }
                Err(diagnostic) => {
                    self.report(diagnostic);
                    None
                }
            },
        };
        let mut bits = Vec::new();
        for input in inputs {
            bits.push(match input {
                Some(input) => self.terminal_bit(input, slot)?,
                None => Bit::X,
            });
        }
        let nodes = self.nodes(&bits, site);
        self.used.extend(&nodes);
        let node = match model {
            Some(model) => model.instantiate(&mut self.builder, &nodes, site),
            None => self.builder.source(SourceKind::BlackBox, site),
        };
        match output {
            Some(output) => {
                let value = self.lift(node);
                self.terminal_driver(output, slot, value, instance.span)
            }
            None => Ok(()),
        }
    }
}

/// Which bit of a terminal belongs to an element of an instance array.
fn offset(width: usize, slot: Option<Slot>) -> usize {
    match slot {
        Some(slot) if width == slot.count && slot.count > 1 => slot.position,
        _ => 0,
    }
}
