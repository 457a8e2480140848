//! Instances of modelled cells: those of Liberty libraries, declared selectors and declared clock gates. Their gates stand
//! where the instance stands, and drive the nets of the netlist directly, so that findings speak of the nets that the
//! reader knows.

use std::collections::BTreeMap;

use super::bits::{Bit, Guarded};
use super::context::{Elaborator, Outcome};
use super::hierarchy::Slot;
use super::ports::Actual;
use super::scope::ScopeId;
use crate::cells::{Both, Direction, Function, Known, Model, State, StateKind};
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{Cell, CellKind, Control, Edge, GateKind, InstanceId, NodeId, Site, SourceKind};
use crate::source::Span;
use crate::spelling::nearest;
use crate::syntax::ast::{Connection, Ident, Instance};

#[derive(Clone, Debug)]
pub(super) struct CellWork<'a> {
    scope: ScopeId,
    node: InstanceId,
    model: &'a Model,
    instance: &'a Instance,
    slot: Option<Slot>,
}

impl<'a> CellWork<'a> {
    pub fn span(&self) -> Span {
        self.instance.span
    }

    pub fn new(scope: ScopeId, node: InstanceId, model: &'a Model, instance: &'a Instance, slot: Option<Slot>) -> Self {
        Self { scope, node, model, instance, slot }
    }
}

/// The values of pins and state by name.
type Values<'m> = BTreeMap<&'m str, NodeId>;

impl<'a> Elaborator<'a> {
    /// What a library says about a module without text. A cell that the library describes in a way that is not understood is
    /// reported, and stays without text; pins that are declared go before what a library says.
    pub fn library_cell(&mut self, name: &'a Ident) -> Option<&'a Model> {
        if self.cells.pins(&name.name).is_some() {
            return None;
        }
        match self.cells.library(&name.name)? {
            Known::Model(model) => Some(model),
            Known::Refused { why, place } => {
                let message = format!(
                    "the library cell `{}` ({place}) is taken as a module without text, because {why}",
                    name.name
                );
                let help = "its pins are not checked; declare them with `[[cell]]` in stillwire.toml";
                let diagnostic = Diagnostic::new(Kind::Unsupported, "library cell", message, Some(name.span));
                // One message per cell is enough.
                let known = |other: &Diagnostic| other.message == diagnostic.message;
                if !self.diagnostics.iter().any(known) {
                    self.report(diagnostic.with_help(help));
                }
                None
            }
        }
    }

    pub fn cell(&mut self, work: &CellWork<'a>) {
        *self.cells_used.entry(work.model.name.clone()).or_default() += 1;
        self.here = work.scope;
        self.instance = self.scope(work.scope).instance;
        let site = Site { instance: work.node, span: Some(work.instance.span) };
        let actuals = self.cell_actuals(work);
        let mut values = Values::new();
        for pin in &work.model.pins {
            if !matches!(pin.direction, Direction::Input | Direction::Inout) {
                continue;
            }
            let actual = actuals.get(pin.name.as_str()).copied();
            let outcome = actual.map(|actual| self.pin_value(actual, work.slot, site)).transpose();
            let bound = self.survive(outcome).flatten();
            if bound.is_none() && work.model.declared {
                self.missing_pin(work, &pin.name);
            }
            let value = bound.unwrap_or_else(|| self.builder.unknown(site));
            values.insert(&pin.name, value);
        }
        let sources: Vec<NodeId> =
            work.model.states.iter().map(|state| self.state_source(state, &mut values, site)).collect();
        for (state, output) in work.model.states.iter().zip(sources) {
            self.state(state, output, &mut values, site);
        }
        for output in &work.model.outputs {
            let Some(&actual) = actuals.get(output.pin.as_str()) else { continue };
            let function = self.function(&output.function, &values, site);
            let mut bit = self.bit(function);
            if let Some(floats) = &output.three_state {
                let floats = self.function(floats, &values, site);
                let enable = self.builder.not(floats, site);
                let enable = self.bit(enable);
                bit = self.floating(enable, bit);
            }
            let outcome = self.drive_pin(actual, bit, work.slot);
            self.survive(outcome);
        }
    }

    /// What is connected to each pin. Pins that the cell does not have are reported.
    fn cell_actuals(&mut self, work: &CellWork<'a>) -> BTreeMap<&'a str, Actual<'a>> {
        let model = work.model;
        let mut actuals = BTreeMap::new();
        for (index, connection) in work.instance.connections.iter().enumerate() {
            let (name, actual) = match connection {
                Connection::Ordered(value, _) => {
                    let Some(pin) = model.pins.get(index) else {
                        self.unknown_pin(work, &index.to_string());
                        continue;
                    };
                    (pin.name.as_str(), value.as_ref().map(Actual::Expr))
                }
                Connection::Named { name, value } => (name.name.as_str(), value.as_ref().map(Actual::Expr)),
                Connection::Implicit(name) => (name.name.as_str(), Some(Actual::Name(&name.name, name.span))),
                Connection::All(span) => {
                    for pin in &model.pins {
                        if self.in_scope(work.scope, |this| this.find(&pin.name)).is_some() {
                            actuals.entry(pin.name.as_str()).or_insert(Actual::Name(&pin.name, *span));
                        }
                    }
                    continue;
                }
            };
            if model.pin(name).is_none_or(|pin| pin.direction == Direction::Internal) {
                self.unknown_pin(work, name);
            } else if let Some(actual) = actual {
                actuals.insert(name, actual);
            }
        }
        actuals
    }

    fn unknown_pin(&mut self, work: &CellWork<'a>, name: &str) {
        let model = work.model;
        let message = format!(
            "the instance `{}` of the cell `{}` ({}) connects a pin `{name}` that the cell does not have",
            work.instance.name.name, model.name, model.place
        );
        let help = match nearest(name, model.pins.iter().map(|pin| pin.name.as_str())) {
            Some(nearest) => format!("did you mean `{nearest}`?"),
            None => {
                let pins: Vec<&str> = model.pins.iter().map(|pin| pin.name.as_str()).collect();
                format!("its pins are {}", pins.join(", "))
            }
        };
        let at = Some(work.instance.span);
        self.report(Diagnostic::new(Kind::Incomplete, "cell pin", message, at).with_help(help));
    }

    fn missing_pin(&mut self, work: &CellWork<'a>, name: &str) {
        let model = work.model;
        let message = format!(
            "the instance `{}` does not connect the pin `{name}` that `{}` is declared to have ({})",
            work.instance.name.name, model.name, model.place
        );
        let at = Some(work.instance.span);
        self.report(
            Diagnostic::new(Kind::Incomplete, "cell pin", message, at)
                .with_help("connect it, or mend the `[[cell]]` in stillwire.toml"),
        );
    }

    /// The one bit at an input pin.
    fn pin_value(&mut self, actual: Actual<'a>, slot: Option<Slot>, site: Site) -> Outcome<NodeId> {
        let bits = self.actual_bits(actual)?;
        let bit = bits.get(position(slot, bits.len())).copied().unwrap_or(Bit::X);
        let node = self.node(bit, site);
        self.used.push(node);
        Ok(node)
    }

    fn drive_pin(&mut self, actual: Actual<'a>, bit: Bit, slot: Option<Slot>) -> Outcome<()> {
        let (places, span) = self.actual_places(actual)?;
        let wires = self.wires_of(&places, span)?;
        if let Some(&Some(wire)) = wires.get(position(slot, wires.len())) {
            self.add_driver(wire, bit, Some(span));
        }
        Ok(())
    }

    fn state_source<'m>(&mut self, state: &'m State, values: &mut Values<'m>, site: Site) -> NodeId {
        let kind = match state.kind {
            StateKind::FlipFlop { .. } => SourceKind::FlipFlop,
            StateKind::Latch { .. } => SourceKind::Latch,
        };
        let output = self.builder.source(kind, site);
        values.insert(&state.name, output);
        if let Some(complement) = &state.complement {
            // Only while clear and preset are both active may the two outputs be equal.
            let node = if state.opposite() { self.builder.not(output, site) } else { self.builder.source(kind, site) };
            values.insert(complement, node);
        }
        output
    }

    /// The flip-flop or latch, and a second one for a complement that is not always one.
    fn state(&mut self, state: &State, output: NodeId, values: &mut Values<'_>, site: Site) {
        let (kind, data) = match &state.kind {
            StateKind::FlipFlop { clock, next } => {
                let clock = self.function(clock, values, site);
                let (clock, rising) = self.builder.strip_inverters(clock);
                let edge = if rising { Edge::Posedge } else { Edge::Negedge };
                (CellKind::FlipFlop { clock, edge }, self.function(next, values, site))
            }
            StateKind::Latch { enable, data } => {
                let enable = self.function(enable, values, site);
                let (enable, active) = self.builder.strip_inverters(enable);
                (CellKind::Latch { enable, active }, self.function(data, values, site))
            }
        };
        let clear = state.clear.as_ref().map(|clear| self.function(clear, values, site));
        let preset = state.preset.as_ref().map(|preset| self.function(preset, values, site));
        let controls = self.controls(clear, preset, false, state.both[0], site);
        let cell = self.builder.cell(Cell { kind, output, data, controls, init: None, inferred_from: None });
        if state.gates_clock {
            self.builder.clock_gate(cell);
        }
        if let Some(&complement) = state.complement.as_deref().and_then(|name| values.get(name))
            && !state.opposite()
        {
            let data = self.builder.not(data, site);
            let controls = self.controls(clear, preset, true, state.both[1], site);
            self.builder.cell(Cell { kind, output: complement, data, controls, init: None, inferred_from: None });
        }
    }

    /// The asynchronous controls, the one that wins first. What is undefined while both are active is a value that nobody
    /// knows.
    fn controls(
        &mut self,
        clear: Option<NodeId>,
        preset: Option<NodeId>,
        complement: bool,
        both: Both,
        site: Site,
    ) -> Vec<Control> {
        let control = |this: &mut Self, node: NodeId, value: NodeId| {
            let (net, active) = this.builder.strip_inverters(node);
            Control { net, active, value }
        };
        let low = self.builder.constant(complement);
        let high = self.builder.constant(!complement);
        let (Some(clear_node), Some(preset_node)) = (clear, preset) else {
            let clear = clear.map(|node| control(self, node, low));
            let preset = preset.map(|node| control(self, node, high));
            return clear.into_iter().chain(preset).collect();
        };
        let wins = match both {
            Both::Zero => complement,
            Both::One => !complement,
            Both::Unknown => {
                let unknown = self.builder.unknown(site);
                let value = self.builder.select(preset_node, unknown, low, site);
                return vec![control(self, clear_node, value), control(self, preset_node, high)];
            }
        };
        let (clear, preset) = (control(self, clear_node, low), control(self, preset_node, high));
        if wins { vec![preset, clear] } else { vec![clear, preset] }
    }

    fn function(&mut self, function: &Function, values: &Values<'_>, site: Site) -> NodeId {
        match function {
            Function::Constant(value) => self.builder.constant(*value),
            Function::Name(name) => match values.get(name.as_str()) {
                Some(&node) => node,
                None => self.builder.unknown(site),
            },
            Function::Not(inner) => {
                let inner = self.function(inner, values, site);
                self.builder.not(inner, site)
            }
            Function::And(parts) | Function::Or(parts) => {
                let parts: Vec<NodeId> = parts.iter().map(|part| self.function(part, values, site)).collect();
                let kind = if matches!(function, Function::And(_)) { GateKind::And } else { GateKind::Or };
                self.builder.gate(kind, &parts, site)
            }
            Function::Xor(left, right) => {
                let parts = [self.function(left, values, site), self.function(right, values, site)];
                self.builder.xor(&parts, site)
            }
        }
    }

    fn bit(&self, node: NodeId) -> Bit {
        match self.builder.as_constant(node) {
            Some(true) => Bit::One,
            Some(false) => Bit::Zero,
            None => Bit::Node(node),
        }
    }

    /// A bit that floats while `enable` is 0.
    fn floating(&mut self, enable: Bit, data: Bit) -> Bit {
        match enable {
            Bit::One => data,
            Bit::Zero => Bit::Z,
            _ => {
                self.guarded.push(Guarded { enable, data, from: None, preset: None });
                Bit::Tri(self.guarded.len() as u32 - 1)
            }
        }
    }
}

/// Which bit of what is connected belongs to this instance of an array.
fn position(slot: Option<Slot>, width: usize) -> usize {
    slot.filter(|slot| slot.count > 1 && slot.count == width).map_or(0, |slot| slot.position)
}
