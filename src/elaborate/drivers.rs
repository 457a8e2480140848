//! What drives each bit, collected while everything is elaborated and resolved at the end: one driver is a connection,
//! tri-states join by their enables, wired nets by their gate, several plain drivers are a conflict. Cells are made here,
//! because only at the end it is known which variables anything reads: a loop counter that only its own process uses makes
//! no flip-flops.

use std::collections::{BTreeMap, HashMap, HashSet};
use std::rc::Rc;

use super::bits::Bit;
use super::context::{Elaborator, Storage, VariableId};
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{Cell, CellKind, Control, Edge, GateKind, InstanceId, NodeId, NodeKind, Site, SourceKind};
use crate::source::Span;
use crate::syntax::ast::NetKind;

/// What to do about several drivers of a net, and about drivers of an input.
const SEVERAL: &str = "leave one driver, or declare the net as `wand` or `wor` if they are meant to be joined";
const INPUT: &str = "declare the port as `output` or `inout`, or leave the driver inside out";

/// One driver of one wire.
#[derive(Clone, Copy, Debug)]
pub(super) struct Driver {
    pub value: Bit,
    pub span: Option<Span>,
    pub instance: InstanceId,
}

/// An asynchronous control.
#[derive(Clone, Copy, Debug)]
pub(super) struct Rung {
    pub net: NodeId,
    pub active: bool,
    pub value: NodeId,
}

/// What a process does to one bit of a variable.
#[derive(Clone, Debug)]
pub(super) enum PendingKind {
    Value(Bit),
    /// Clocked by the edges of one signal, or of several.
    FlipFlop {
        clocks: Rc<[(NodeId, Edge)]>,
        data: NodeId,
        rungs: Rc<[Rung]>,
    },
    Latch {
        enable: NodeId,
        active: bool,
        data: NodeId,
        rungs: Rc<[Rung]>,
        from: Option<Span>,
    },
}

#[derive(Clone, Debug)]
pub(super) struct Pending {
    pub variable: VariableId,
    pub offset: usize,
    pub kind: PendingKind,
    /// Written by blocking assignments only, as the scratch variables of a process are.
    pub blocking_only: bool,
    pub instance: InstanceId,
}

impl<'a> Elaborator<'a> {
    pub fn add_driver(&mut self, wire: NodeId, value: Bit, span: Option<Span>) {
        let instance = self.instance;
        self.drivers.entry(wire).or_default().push(Driver { value, span, instance });
    }

    /// The nodes that a bit is made of.
    fn parts(&self, bit: Bit, nodes: &mut Vec<NodeId>) {
        match bit {
            Bit::Node(node) => nodes.push(node),
            Bit::Tri(index) | Bit::Partial(index) => {
                let guarded = self.guarded[index as usize];
                self.parts(guarded.enable, nodes);
                self.parts(guarded.data, nodes);
            }
            _ => {}
        }
    }

    fn pending_parts(&self, kind: &PendingKind, nodes: &mut Vec<NodeId>) {
        let rungs = match kind {
            PendingKind::Value(bit) => return self.parts(*bit, nodes),
            PendingKind::FlipFlop { clocks, data, rungs } => {
                nodes.extend(clocks.iter().map(|&(clock, _)| clock));
                nodes.push(*data);
                rungs
            }
            PendingKind::Latch { enable, data, rungs, .. } => {
                nodes.extend([*enable, *data]);
                rungs
            }
        };
        nodes.extend(rungs.iter().flat_map(|rung| [rung.net, rung.value]));
    }

    /// The nodes that others read, or that wires and cells are driven by.
    pub fn used_nodes(&self) -> HashSet<NodeId> {
        let mut nodes: Vec<NodeId> = self.used.clone();
        nodes.extend(self.drivers.values().flatten().flat_map(|driver| {
            let mut parts = Vec::new();
            self.parts(driver.value, &mut parts);
            parts
        }));
        for pending in &self.pending {
            self.pending_parts(&pending.kind, &mut nodes);
        }
        let inner = (0..self.builder.len()).flat_map(|index| self.builder.fanin(NodeId::new(index)));
        nodes.into_iter().chain(inner.copied()).collect()
    }

    /// The variables that processes write with blocking assignments only and that nothing but themselves depends on:
    /// loop counters and scratch values.
    fn scratch_variables(&self) -> HashSet<VariableId> {
        let mut writes: HashMap<VariableId, Vec<&Pending>> = HashMap::new();
        let mut scratch: HashSet<VariableId> = HashSet::new();
        for pending in &self.pending {
            writes.entry(pending.variable).or_default().push(pending);
            scratch.insert(pending.variable);
        }
        for pending in &self.pending {
            if !pending.blocking_only || self.variable(pending.variable).is_port {
                scratch.remove(&pending.variable);
            }
        }
        let mut owners: HashMap<NodeId, VariableId> = HashMap::new();
        for &id in &scratch {
            owners.extend(self.variable(id).wires.iter().map(|&wire| (wire, id)));
        }
        let mut stack: Vec<NodeId> = self.used.clone();
        for driver in self.drivers.values().flatten() {
            self.parts(driver.value, &mut stack);
        }
        for pending in &self.pending {
            if !scratch.contains(&pending.variable) {
                self.pending_parts(&pending.kind, &mut stack);
            }
        }
        stack.extend(self.aliases.iter().flat_map(|&(a, b)| [a, b]));
        let mut seen = vec![false; self.builder.len()];
        while let Some(node) = stack.pop() {
            if std::mem::replace(&mut seen[node.index()], true) {
                continue;
            }
            stack.extend_from_slice(self.builder.fanin(node));
            if let Some(id) = owners.get(&node)
                && scratch.remove(id)
            {
                for pending in writes.get(id).into_iter().flatten() {
                    self.pending_parts(&pending.kind, &mut stack);
                }
            }
        }
        scratch
    }

    /// Turns what processes do into drivers and cells.
    pub fn make_cells(&mut self) {
        let scratch = self.scratch_variables();
        for pending in std::mem::take(&mut self.pending) {
            let variable = &self.variables[pending.variable.index()];
            if scratch.contains(&pending.variable) {
                continue;
            }
            let Some(&wire) = variable.wires.get(pending.offset) else { continue };
            let span = Some(variable.span);
            let init = variable.init.as_ref().and_then(|init| match init.get(pending.offset) {
                Some(Bit::One) => Some(true),
                Some(Bit::Zero) => Some(false),
                _ => None,
            });
            self.instance = pending.instance;
            let site = Site { instance: pending.instance, span };
            let (kinds, source, data, rungs, inferred_from) = match pending.kind {
                PendingKind::Value(value) => {
                    self.add_driver(wire, value, span);
                    continue;
                }
                PendingKind::FlipFlop { clocks, data, rungs } => {
                    let kinds = clocks.iter().map(|&(clock, edge)| CellKind::FlipFlop { clock, edge }).collect();
                    (kinds, SourceKind::FlipFlop, data, rungs, None)
                }
                PendingKind::Latch { enable, active, data, rungs, from } => {
                    (vec![CellKind::Latch { enable, active }], SourceKind::Latch, data, rungs, from)
                }
            };
            let output = self.builder.source(source, site);
            let controls: Vec<Control> =
                rungs.iter().map(|rung| Control { net: rung.net, active: rung.active, value: rung.value }).collect();
            for kind in kinds {
                self.builder.cell(Cell { kind, output, data, controls: controls.clone(), init, inferred_from });
            }
            self.add_driver(wire, Bit::Node(output), span);
        }
    }

    /// Connects every wire.
    pub fn resolve_drivers(&mut self) {
        self.join_aliases();
        for index in 0..self.variables.len() {
            let id = VariableId::new(index);
            let variable = &self.variables[index];
            if matches!(variable.storage, Storage::Local | Storage::Memory) {
                continue;
            }
            self.instance = variable.instance;
            let (storage, span, wires) = (variable.storage, variable.span, variable.wires.clone());
            let mut conflict: Option<Vec<Driver>> = None;
            let mut driven_input: Option<Vec<Driver>> = None;
            for (offset, wire) in wires.into_iter().enumerate() {
                if self.builder.driver(wire).is_some() || self.builder.kind(wire) != NodeKind::Wire {
                    // What drives an input of the top from outside is not alone there.
                    let inside = self.drivers.get(&wire).map_or(&[][..], Vec::as_slice);
                    if inside.iter().any(|driver| driver.value != Bit::Z) {
                        driven_input.get_or_insert(inside.to_vec());
                    }
                    continue;
                }
                let drivers = self.drivers.get(&wire).cloned().unwrap_or_default();
                let site = Site { instance: self.instance, span: Some(span) };
                let idle = self.idle_value(id, offset, storage, wire);
                let Some(node) = self.join_drivers(wire, &drivers, storage, idle, &mut conflict, site) else {
                    continue;
                };
                self.builder.drive(wire, node);
            }
            if let Some(drivers) = conflict {
                self.report_conflict(id, &drivers, "has several drivers that are always on", SEVERAL);
            }
            if let Some(drivers) = driven_input {
                self.report_conflict(id, &drivers, "is an input and also driven from inside", INPUT);
            }
        }
    }

    /// What a bit is when nothing drives it: pulled, initialised, or `None` for unknown.
    fn idle_value(&mut self, id: VariableId, offset: usize, storage: Storage, wire: NodeId) -> Option<NodeId> {
        if let Some(&external) = self.external.get(&wire) {
            return Some(external);
        }
        if let Some(&pull) = self.pulls.get(&wire) {
            return Some(self.builder.constant(pull));
        }
        let level = match storage {
            Storage::Net(NetKind::Supply0 | NetKind::Tri0) => Some(false),
            Storage::Net(NetKind::Supply1 | NetKind::Tri1) => Some(true),
            Storage::Variable => match self.variable(id).init.as_ref().and_then(|init| init.get(offset)) {
                Some(Bit::One) => Some(true),
                Some(Bit::Zero) => Some(false),
                _ => None,
            },
            _ => None,
        };
        level.map(|level| self.builder.constant(level))
    }

    /// The node that drives a wire; `None` leaves it undriven.
    fn join_drivers(
        &mut self,
        wire: NodeId,
        drivers: &[Driver],
        storage: Storage,
        idle: Option<NodeId>,
        conflict: &mut Option<Vec<Driver>>,
        site: Site,
    ) -> Option<NodeId> {
        let drivers = self.reaching(wire, drivers);
        let tri = |driver: &Driver| matches!(driver.value, Bit::Z | Bit::Tri(_));
        if drivers.is_empty() || drivers.iter().all(|driver| driver.value == Bit::Z) {
            return idle;
        }
        if let [only] = drivers.as_slice()
            && !tri(only)
        {
            return Some(self.node(only.value, site));
        }
        if !drivers.iter().any(tri) {
            let gate = match storage {
                Storage::Net(NetKind::Wand | NetKind::Triand) => GateKind::And,
                Storage::Net(NetKind::Wor | NetKind::Trior) => GateKind::Or,
                _ => {
                    conflict.get_or_insert(drivers);
                    return Some(self.builder.unknown(site));
                }
            };
            let values: Vec<Bit> = drivers.iter().map(|driver| driver.value).collect();
            let bit = self.gate(gate, &values, site);
            return Some(self.node(bit, site));
        }
        if !drivers.iter().all(tri) {
            let plain: Vec<Driver> = drivers.iter().filter(|driver| !tri(driver)).copied().collect();
            // A constant that holds a shared net is a bus keeper of sorts; anything else is a conflict.
            conflict.get_or_insert(if plain.len() > 1 { plain } else { drivers });
            return Some(self.builder.unknown(site));
        }
        let mut enables = Vec::new();
        let mut products = Vec::new();
        for driver in &drivers {
            if let (enable, Some(data), _) = self.split(driver.value, false) {
                let site = Site { instance: driver.instance, span: driver.span };
                products.push(self.and(&[enable, data], site));
                enables.push(enable);
            }
        }
        let idle = match idle {
            Some(node) => node,
            None => self.builder.unknown(site),
        };
        let none = self.gate(GateKind::Nor, &enables, site);
        products.push(self.and(&[none, Bit::Node(idle)], site));
        let bit = self.or(&products, site);
        Some(self.node(bit, site))
    }

    /// The drivers of a wire, looking through output ports: when several modules drive a net through ports, their
    /// tri-states act on the net directly.
    fn reaching(&self, wire: NodeId, drivers: &[Driver]) -> Vec<Driver> {
        let mut found = Vec::new();
        let mut stack: Vec<Driver> = drivers.iter().rev().copied().collect();
        let mut steps = 0;
        while let Some(driver) = stack.pop() {
            steps += 1;
            let inner = match driver.value {
                Bit::Node(node) if node != wire && self.port_wires.contains(&node) => self.drivers.get(&node),
                _ => None,
            };
            let tri = |driver: &Driver| {
                matches!(driver.value, Bit::Z | Bit::Tri(_))
                    || matches!(driver.value, Bit::Node(node) if self.port_wires.contains(&node))
            };
            match inner {
                Some(inner) if steps < 10_000 && !inner.is_empty() && inner.iter().all(tri) => {
                    stack.extend(inner.iter().rev().copied());
                }
                _ => found.push(driver),
            }
        }
        // Looking through ports only matters when a tri-state came to light.
        if found.iter().any(|driver| matches!(driver.value, Bit::Z | Bit::Tri(_))) { found } else { drivers.to_vec() }
    }

    /// Wires that are one net: all drivers move to one of them, which drives the others.
    fn join_aliases(&mut self) {
        let mut parents: HashMap<NodeId, NodeId> = HashMap::new();
        fn root(parents: &HashMap<NodeId, NodeId>, mut node: NodeId) -> NodeId {
            while let Some(&parent) = parents.get(&node) {
                node = parent;
            }
            node
        }
        let aliases = std::mem::take(&mut self.aliases);
        for &(a, b) in &aliases {
            let (a, b) = (root(&parents, a), root(&parents, b));
            if a != b {
                // The outer net comes first and stays the root.
                parents.insert(b, a);
            }
        }
        let members: BTreeMap<NodeId, NodeId> = parents.keys().map(|&node| (node, root(&parents, node))).collect();
        for (node, root) in members {
            if let Some(drivers) = self.drivers.remove(&node) {
                self.drivers.entry(root).or_default().extend(drivers);
            }
            if let Some(pull) = self.pulls.remove(&node) {
                self.pulls.entry(root).or_insert(pull);
            }
            self.builder.drive(node, root);
        }
    }

    fn report_conflict(&mut self, id: VariableId, drivers: &[Driver], what: &str, help: &str) {
        let variable = self.variable(id);
        let message = format!("`{}` {what}; its value is unknown", variable.name);
        let mut diagnostic =
            Diagnostic::new(Kind::Incomplete, "multiple drivers", message, Some(variable.span)).with_help(help);
        for span in drivers.iter().filter_map(|driver| driver.span).take(4) {
            diagnostic = diagnostic.with_also(span, "driven here");
        }
        self.report(diagnostic);
    }
}
