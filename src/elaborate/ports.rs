//! Ports and their connections, in all forms: ANSI and old style, by order, by name, `.name` and `.*`, to expressions,
//! concatenations and slices of instance arrays. Widths adapt by the rules of assignment. Instances of missing modules
//! become black boxes, whose directions are guessed last of all.

use std::collections::HashSet;
use std::rc::Rc;

use super::bits::{Bit, extend};
use super::context::{Elaborator, Outcome, Storage, VariableId, unsupported, wrong};
use super::hierarchy::{Slot, Work};
use super::interfaces::InterfacePort;
use super::place::{Base, Place, Resolved};
use super::scope::{ScopeId, Symbol};
use super::types::{Shape, Type};
use crate::cells::{Declaration, PinRole};
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{BlackBox, BoxPin, BoxRole, Edge, InstanceId, NodeId, Port, PortDirection, Site, SourceKind};
use crate::source::Span;
use crate::spelling::nearest;
use crate::syntax::ast::{
    AnsiPortKind, Connection, Direction, Expr, ExprKind, Ident, Instance, ItemKind, Module, Ports,
};

/// A port of an elaborated module.
#[derive(Clone, Debug)]
pub(super) struct PortInfo<'a> {
    pub direction: Direction,
    pub target: Target<'a>,
}

/// What a port is inside the module.
#[derive(Clone, Copy, Debug)]
pub(super) enum Target<'a> {
    Variable(VariableId),
    /// A port expression such as a concatenation.
    Expr(&'a Expr),
    /// An interface, or one of its modports; `None` for an array of interfaces.
    Interface(Option<ScopeId>),
    Nothing,
}

/// What is connected to a port.
#[derive(Clone, Copy, Debug)]
pub(super) enum Actual<'a> {
    Expr(&'a Expr),
    /// `.name` or `.*`
    Name(&'a str, Span),
    Open,
}

#[derive(Clone, Debug)]
pub(super) struct ConnectionWork<'a> {
    outer: ScopeId,
    inner: ScopeId,
    port: usize,
    actual: Actual<'a>,
    slot: Option<Slot>,
}

impl ConnectionWork<'_> {
    pub fn span(&self) -> Option<Span> {
        match self.actual {
            Actual::Expr(expr) => Some(expr.span),
            Actual::Name(_, span) => Some(span),
            Actual::Open => None,
        }
    }
}

#[derive(Clone, Debug)]
pub(super) struct BlackBoxWork<'a> {
    scope: ScopeId,
    node: InstanceId,
    /// The module's text, when there is one that could not be elaborated.
    module: Option<&'a Module>,
    name: &'a Ident,
    instance: &'a Instance,
    slot: Option<Slot>,
}

impl<'a> BlackBoxWork<'a> {
    pub fn span(&self) -> Span {
        self.instance.span
    }

    pub fn missing(
        scope: ScopeId,
        node: InstanceId,
        name: &'a Ident,
        instance: &'a Instance,
        slot: Option<Slot>,
    ) -> Self {
        Self { scope, node, module: None, name, instance, slot }
    }

    pub fn failed(
        scope: ScopeId,
        node: InstanceId,
        module: &'a Module,
        name: &'a Ident,
        instance: &'a Instance,
        slot: Option<Slot>,
    ) -> Self {
        Self { scope, node, module: Some(module), name, instance, slot }
    }
}

/// The outside name of each port in order.
fn port_names(module: &Module) -> Vec<Option<&str>> {
    match &module.ports {
        Ports::Ansi(ports) => ports.iter().map(|port| Some(port.name.name.as_str())).collect(),
        Ports::NonAnsi(ports) => ports.iter().map(|port| port.name.as_ref().map(|name| name.name.as_str())).collect(),
        Ports::None | Ports::Wildcard => Vec::new(),
    }
}

/// The default value of a port.
fn default_of(module: &Module, port: usize) -> Option<&Expr> {
    match &module.ports {
        Ports::Ansi(ports) => ports.get(port)?.default.as_ref(),
        _ => None,
    }
}

/// The directions that old-style declarations give to a name.
fn declared_direction(module: &Module, name: &str) -> Option<Direction> {
    module.items.iter().find_map(|item| match &item.kind {
        ItemKind::PortDecl { direction, names, .. } if names.iter().any(|declared| declared.name.name == name) => {
            Some(*direction)
        }
        _ => None,
    })
}

/// The first name in a port expression, which stands for the direction of all.
fn first_name(expr: &Expr) -> Option<&Ident> {
    match &expr.kind {
        ExprKind::Name(name) => Some(name),
        ExprKind::Index(base, _) | ExprKind::Slice { base, .. } | ExprKind::Member(base, _) => first_name(base),
        ExprKind::Concat(parts) => parts.iter().find_map(first_name),
        _ => None,
    }
}

/// The direction of a port by its place in the list; for a port expression that of its first name.
pub(super) fn direction_of(module: &Module, port: usize) -> Option<Direction> {
    match &module.ports {
        Ports::Ansi(ports) => match &ports.get(port)?.kind {
            AnsiPortKind::Data { direction, .. }
            | AnsiPortKind::Explicit { direction, .. }
            | AnsiPortKind::Interface { direction, .. } => Some(*direction),
        },
        Ports::NonAnsi(ports) => {
            let name = first_name(ports.get(port)?.expr.as_ref()?)?;
            declared_direction(module, &name.name)
        }
        Ports::None | Ports::Wildcard => None,
    }
}

/// Declaring.
impl<'a> Elaborator<'a> {
    /// Declares the ports of an ANSI header. Interfaces are bound to what is connected to them.
    pub fn declare_ports(
        &mut self,
        scope: ScopeId,
        module: &'a Module,
        outer: Option<ScopeId>,
        connections: &[(usize, Actual<'a>)],
    ) -> Outcome<()> {
        let Ports::Ansi(ports) = &module.ports else {
            return self.declare_listed_interfaces(scope, module, outer, connections);
        };
        for (index, port) in ports.iter().enumerate() {
            match &port.kind {
                AnsiPortKind::Data { direction, net, ty } => {
                    self.declare_enum_members(scope, ty)?;
                    let ty = self.declared_type(ty, &port.dims, port.name.span)?;
                    let storage = net.map_or(Storage::Variable, Storage::Net);
                    let variable = self.declare_variable(scope, &port.name, ty, storage)?;
                    if let (Some(value), Direction::Output) = (&port.default, direction) {
                        self.works.push(match storage {
                            Storage::Net(_) => Work::NetInit { scope, variable, value },
                            _ => Work::VariableInit { scope, variable, value },
                        });
                    }
                }
                AnsiPortKind::Interface { interface, modport, .. } => {
                    if let Some(name) = interface
                        && !self.names_interface(name)
                    {
                        let symbol = self.look_up(name)?;
                        let Symbol::Lazy(lazy) = symbol else {
                            return Err(wrong(format!("`{}` is no type or interface", name.name), name.span));
                        };
                        let ty = self.force_type(lazy, name.span)?;
                        let ty = self.with_dims(ty, &port.dims, false, port.name.span)?;
                        self.declare_variable(scope, &port.name, ty, Storage::Variable)?;
                        continue;
                    }
                    let port = InterfacePort::ansi(port, interface.as_ref(), modport.as_ref());
                    self.bind_interface(scope, port, index, outer, connections)?;
                }
                AnsiPortKind::Explicit { .. } => {}
            }
        }
        Ok(())
    }

    /// Notes what each port of a module is inside.
    pub fn list_ports(&mut self, scope: ScopeId, module: &'a Module) -> Outcome<()> {
        let names = port_names(module);
        // Only the first of several ports of one name is one.
        let mut seen = HashSet::new();
        let repeated: Vec<bool> = names.iter().map(|name| name.is_some_and(|name| !seen.insert(name))).collect();
        let mut list = Vec::new();
        let named = |this: &mut Self, name: &str| match this.scope(scope).names.get(name) {
            Some(&Symbol::Variable(id)) => {
                this.variables[id.index()].is_port = true;
                Some(Target::Variable(id))
            }
            Some(&Symbol::Scope(scope)) => Some(Target::Interface(Some(scope))),
            Some(Symbol::Scopes(_)) => Some(Target::Interface(None)),
            _ => None,
        };
        match &module.ports {
            Ports::Ansi(ports) => {
                for (index, port) in ports.iter().enumerate() {
                    let direction = direction_of(module, index).unwrap_or(Direction::Inout);
                    let target = match &port.kind {
                        _ if repeated[index] => Target::Nothing,
                        AnsiPortKind::Explicit { expr: Some(expr), .. } => Target::Expr(expr),
                        AnsiPortKind::Explicit { expr: None, .. } => Target::Nothing,
                        _ => named(self, &port.name.name).unwrap_or(Target::Nothing),
                    };
                    list.push(PortInfo { direction, target });
                }
            }
            Ports::NonAnsi(ports) => {
                for (index, port) in ports.iter().enumerate() {
                    let Some(expr) = port.expr.as_ref().filter(|_| !repeated[index]) else {
                        list.push(PortInfo { direction: Direction::Inout, target: Target::Nothing });
                        continue;
                    };
                    let target = match &expr.kind {
                        ExprKind::Name(name) => named(self, &name.name),
                        _ => None,
                    };
                    if let Some(target @ Target::Interface(_)) = target {
                        list.push(PortInfo { direction: Direction::Inout, target });
                        continue;
                    }
                    let Some(direction) = direction_of(module, index) else {
                        return Err(wrong("a port without a direction", port.span));
                    };
                    list.push(PortInfo { direction, target: target.unwrap_or(Target::Expr(expr)) });
                }
            }
            Ports::None | Ports::Wildcard => {}
        }
        self.ports.insert(scope, Rc::new(list));
        Ok(())
    }

    /// Which expression is connected to which port.
    pub fn actuals_of(
        &mut self,
        scope: ScopeId,
        module: &'a Module,
        instance: &'a Instance,
    ) -> Vec<(usize, Actual<'a>)> {
        let names = port_names(module);
        let mut actuals: Vec<(usize, Actual<'a>)> = Vec::new();
        let mut position = 0;
        let mut all = None;
        for connection in &instance.connections {
            let (place, actual, span) = match connection {
                Connection::Ordered(value, span) => {
                    position += 1;
                    let actual = value.as_ref().map_or(Actual::Open, Actual::Expr);
                    // An empty place is no connection; `.name()` says that there shall be none, not even the default.
                    if value.is_none() && (position > names.len() || default_of(module, position - 1).is_some()) {
                        continue;
                    }
                    (Some(position - 1).filter(|&at| at < names.len()), actual, *span)
                }
                Connection::Named { name, value } => {
                    let actual = value.as_ref().map_or(Actual::Open, Actual::Expr);
                    (names.iter().position(|port| *port == Some(name.name.as_str())), actual, name.span)
                }
                Connection::Implicit(name) => (
                    names.iter().position(|port| *port == Some(name.name.as_str())),
                    Actual::Name(&name.name, name.span),
                    name.span,
                ),
                Connection::All(span) => {
                    all = Some(*span);
                    continue;
                }
            };
            match place {
                Some(place) if actuals.iter().any(|&(taken, _)| taken == place) => self.report(Diagnostic::new(
                    Kind::Incomplete,
                    "port connection",
                    format!("a second connection to the same port of `{}`, which is not taken", module.name.name),
                    Some(span),
                )),
                Some(place) => actuals.push((place, actual)),
                None => self.report(Diagnostic::new(
                    Kind::Incomplete,
                    "port connection",
                    format!("a connection to a port that `{}` does not have", module.name.name),
                    Some(span),
                )),
            }
        }
        if let Some(span) = all {
            for (index, name) in names.iter().enumerate() {
                if let Some(name) = name
                    && !actuals.iter().any(|(at, _)| *at == index)
                    && self.in_scope(scope, |this| this.find(name)).is_some()
                {
                    actuals.push((index, Actual::Name(name, span)));
                }
            }
        }
        actuals
    }

    /// Leaves the connections of an instance for when all instances exist. An input without one takes its default value.
    pub fn connect(
        &mut self,
        module: &'a Module,
        outer: ScopeId,
        inner: ScopeId,
        actuals: Vec<(usize, Actual<'a>)>,
        slot: Option<Slot>,
    ) {
        let ports = self.ports.get(&inner).cloned().unwrap_or_default();
        for (index, port) in ports.iter().enumerate() {
            if let (Some(value), Direction::Input, Target::Variable(variable)) =
                (default_of(module, index), port.direction, port.target)
                && !actuals.iter().any(|(at, _)| *at == index)
            {
                self.works.push(Work::NetInit { scope: inner, variable, value });
            }
        }
        for (port, actual) in actuals {
            let work = ConnectionWork { outer, inner, port, actual, slot };
            self.works.push(super::hierarchy::Work::Connection(work));
        }
    }
}

/// Connecting.
impl<'a> Elaborator<'a> {
    pub fn connection(&mut self, work: &ConnectionWork<'a>) {
        let Some(port) = self.ports.get(&work.inner).and_then(|ports| ports.get(work.port).cloned()) else { return };
        if matches!(port.target, Target::Interface(_) | Target::Nothing) || matches!(work.actual, Actual::Open) {
            return;
        }
        let inside = match self.inner_wires(work.inner, port.target) {
            Ok(inside) => inside,
            Err(diagnostic) => return self.report(*diagnostic),
        };
        self.here = work.outer;
        self.instance = self.scope(work.outer).instance;
        let outcome = match port.direction {
            Direction::Input => self.connect_input(work, &inside),
            Direction::Output => self.connect_output(work, &inside),
            Direction::Inout | Direction::Ref => self.connect_inout(work, &inside),
        };
        if let Err(diagnostic) = outcome {
            let span = diagnostic.at;
            self.report(*diagnostic);
            // Whatever the connection was, the module no longer sees it.
            let instance = self.instance;
            let site = Site { instance, span };
            if port.direction != Direction::Output {
                for &wire in inside.1.iter().flatten() {
                    let source = self.builder.source(SourceKind::BlackBox, site);
                    self.add_driver(wire, Bit::Node(source), span);
                }
            }
        }
    }

    /// The wires of a port inside its module, and their type.
    fn inner_wires(&mut self, scope: ScopeId, target: Target<'a>) -> Outcome<(Rc<Type>, Vec<Option<NodeId>>)> {
        match target {
            Target::Variable(id) => {
                let variable = self.variable(id);
                if variable.storage == Storage::Memory {
                    return Err(unsupported("port above 65,536 bits", variable.span));
                }
                Ok((Rc::clone(&variable.ty), variable.wires.iter().copied().map(Some).collect()))
            }
            Target::Expr(expr) => {
                let wires = self.in_scope(scope, |this| -> Outcome<_> {
                    let places = this.targets(expr)?;
                    this.wires_of(&places, expr.span)
                })?;
                Ok((Type::vector(wires.len(), false), wires))
            }
            Target::Interface(_) | Target::Nothing => Ok((Type::vector(1, false), Vec::new())),
        }
    }

    /// The wires of places on the left side, least significant first.
    pub fn wires_of(&mut self, places: &[Place], span: Span) -> Outcome<Vec<Option<NodeId>>> {
        let mut wires = Vec::new();
        for place in places.iter().rev() {
            wires.extend(self.wires(place, span)?.1);
        }
        Ok(wires)
    }

    fn actual_span(&self, actual: Actual<'a>) -> Option<Span> {
        match actual {
            Actual::Expr(expr) => Some(expr.span),
            Actual::Name(_, span) => Some(span),
            Actual::Open => None,
        }
    }

    pub fn actual_places(&mut self, actual: Actual<'a>) -> Outcome<(Vec<Place>, Span)> {
        match actual {
            Actual::Expr(expr) => Ok((self.targets(expr)?, expr.span)),
            Actual::Name(name, span) => {
                let symbol = self.find(name).ok_or_else(|| wrong(format!("`{name}` is not declared"), span))?;
                match self.resolve_symbol(symbol, span)? {
                    Resolved::Place(place) => Ok((vec![place], span)),
                    _ => Err(wrong(format!("`{name}` is not a value"), span)),
                }
            }
            Actual::Open => Ok((Vec::new(), Span { file: crate::source::FileId::new(0), start: 0, end: 0 })),
        }
    }

    fn connect_input(&mut self, work: &ConnectionWork<'a>, inside: &(Rc<Type>, Vec<Option<NodeId>>)) -> Outcome<()> {
        let (ty, wires) = inside;
        let width = wires.len();
        let span = self.actual_span(work.actual);
        let bits = match work.actual {
            Actual::Expr(expr) => match work.slot {
                Some(slot) if self.size(expr)?.0 == width.saturating_mul(slot.count) && slot.count > 1 => {
                    let (bits, _) = self.eval_self(expr)?;
                    bits[slot.position * width..(slot.position + 1) * width].to_vec()
                }
                _ => self.eval_as(expr, ty)?,
            },
            actual => {
                let (places, span) = self.actual_places(actual)?;
                let site = self.site(span);
                let mut bits = Vec::new();
                for place in &places {
                    bits.extend(extend(self.read_place(place, site)?, width, place.ty.signed));
                }
                bits
            }
        };
        for (wire, bit) in wires.iter().zip(bits) {
            if let Some(wire) = wire {
                self.add_driver(*wire, bit, span);
            }
        }
        Ok(())
    }

    /// The outer wires at a port, cut to the slice of an instance array.
    fn outer_wires(&mut self, work: &ConnectionWork<'a>, width: usize) -> Outcome<(Vec<Option<NodeId>>, Span)> {
        let (places, span) = self.actual_places(work.actual)?;
        let wires = self.wires_of(&places, span)?;
        Ok(match work.slot {
            Some(slot) if slot.count > 1 && wires.len() == width.saturating_mul(slot.count) => {
                (wires[slot.position * width..(slot.position + 1) * width].to_vec(), span)
            }
            _ => (wires, span),
        })
    }

    fn connect_output(&mut self, work: &ConnectionWork<'a>, inside: &(Rc<Type>, Vec<Option<NodeId>>)) -> Outcome<()> {
        let (ty, wires) = inside;
        let (outer, span) = self.outer_wires(work, wires.len())?;
        let top = wires.last().copied().flatten();
        for (at, wire) in outer.into_iter().enumerate() {
            let Some(wire) = wire else { continue };
            let value = match (wires.get(at), top) {
                (Some(Some(inner)), _) => {
                    self.port_wires.insert(*inner);
                    Bit::Node(*inner)
                }
                (Some(None), _) => Bit::X,
                // A narrower output is extended as in an assignment.
                (None, Some(top)) if ty.signed => Bit::Node(top),
                (None, _) => Bit::Zero,
            };
            self.add_driver(wire, value, Some(span));
        }
        Ok(())
    }

    fn connect_inout(&mut self, work: &ConnectionWork<'a>, inside: &(Rc<Type>, Vec<Option<NodeId>>)) -> Outcome<()> {
        let (outer, _) = self.outer_wires(work, inside.1.len())?;
        for (outer, inner) in outer.into_iter().zip(&inside.1) {
            if let (Some(outer), Some(inner)) = (outer, *inner) {
                self.aliases.push((outer, inner));
            }
        }
        Ok(())
    }
}

/// Tops.
impl<'a> Elaborator<'a> {
    /// Makes the ports of a top the sources and outputs of the graph.
    pub fn top_ports(&mut self, scope: ScopeId, instance: InstanceId) {
        self.here = scope;
        self.instance = instance;
        let ports = self.ports.get(&scope).cloned().unwrap_or_default();
        for port in ports.iter() {
            let direction = super::interfaces::direction_of(port.direction);
            let outcome = match port.target {
                Target::Variable(id) => Ok(vec![id]),
                Target::Expr(expr) => self.targets(expr).map(|places| {
                    places
                        .iter()
                        .filter_map(|place| if let Base::Variable(id) = place.base { Some(id) } else { None })
                        .collect()
                }),
                Target::Interface(None) | Target::Nothing => Ok(Vec::new()),
                Target::Interface(Some(interface)) => {
                    self.interface_ports_of_top(interface, instance).map(|()| Vec::new())
                }
            };
            for id in self.survive(outcome).unwrap_or_default() {
                let name = self.variable(id).name.clone();
                self.top_port(id, instance, direction, name);
            }
        }
    }

    /// One net behind several ports is one port, an output only when it is nothing else.
    pub fn top_port(&mut self, id: VariableId, instance: InstanceId, direction: PortDirection, name: String) {
        self.variables[id.index()].is_port = true;
        let variable = self.variable(id);
        let (wires, span) = (variable.wires.clone(), variable.span);
        let range = match &variable.ty.shape {
            Shape::Array { range, element, .. } if matches!(element.shape, Shape::Scalar) => {
                Some((range.left, range.right))
            }
            _ => None,
        };
        let Some(net) = variable.net else { return };
        if let Some(&known) = self.port_nets.get(&net) {
            let known = self.builder.port_direction(known);
            if direction == PortDirection::Output || *known != PortDirection::Output {
                return;
            }
            *known = direction;
        } else {
            let port = self.builder.port(Port { instance, name, direction, net, range });
            self.port_nets.insert(net, port);
        }
        let site = Site { instance, span: Some(span) };
        for wire in wires {
            match direction {
                PortDirection::Output => {}
                PortDirection::Input => {
                    if self.builder.driver(wire).is_none() {
                        let source = self.builder.source(SourceKind::Input, site);
                        self.builder.drive(wire, source);
                    }
                }
                PortDirection::Inout => {
                    let source = self.builder.source(SourceKind::Input, site);
                    self.external.insert(wire, source);
                }
            }
        }
    }
}

/// Black boxes.
impl<'a> Elaborator<'a> {
    /// An instance of which only the connections are known.
    pub fn black_box(&mut self, work: &BlackBoxWork<'a>) {
        self.here = work.scope;
        self.instance = self.scope(work.scope).instance;
        let mut inputs: Vec<(String, Vec<NodeId>)> = Vec::new();
        let mut outputs = Vec::new();
        let declared = self.cells.pins(&work.name.name).filter(|_| work.module.is_none());
        for (index, connection) in work.instance.connections.iter().enumerate() {
            let (actual, label) = match connection {
                Connection::Ordered(value, _) => (value.as_ref().map(Actual::Expr), index.to_string()),
                Connection::Named { name, value } => (value.as_ref().map(Actual::Expr), name.name.clone()),
                Connection::Implicit(name) => (Some(Actual::Name(&name.name, name.span)), name.name.clone()),
                Connection::All(span) => {
                    if work.module.is_none() {
                        self.report(connects_unknown(&work.name.name, *span));
                    }
                    (None, String::new())
                }
            };
            let Some(actual) = actual else { continue };
            let known = work.module.and_then(|module| {
                let names = port_names(module);
                let port = match connection {
                    Connection::Ordered(..) => Some(index),
                    _ => names.iter().position(|name| *name == Some(label.as_str())),
                };
                port.and_then(|port| direction_of(module, port))
            });
            let known = known.or_else(|| declared.and_then(|declared| declared.direction(&label)));
            let outcome = match known {
                Some(Direction::Input) => self.black_box_input(actual).map(|bits| inputs.push((label, bits))),
                Some(_) => self.black_box_output(actual, work).map(|bits| outputs.push((label, bits))),
                None if self.looks_like_output(actual) => {
                    self.black_box_output(actual, work).map(|bits| outputs.push((label, bits)))
                }
                None => self.black_box_input(actual).map(|bits| inputs.push((label, bits))),
            };
            self.survive(outcome);
        }
        let pins = declared.map_or(Vec::new(), |declared| self.declared_pins(declared, &inputs, work));
        self.builder.black_box(BlackBox { module: work.name.name.clone(), instance: work.node, inputs, outputs, pins });
    }

    /// The nets at the declared pins of a module without text.
    fn declared_pins(
        &mut self,
        declared: &Declaration,
        inputs: &[(String, Vec<NodeId>)],
        work: &BlackBoxWork<'a>,
    ) -> Vec<BoxPin> {
        let mut found = Vec::new();
        for (pin, role) in declared.pins() {
            let Some((_, nodes)) = inputs.iter().find(|(label, _)| *label == pin.name) else {
                let help = match nearest(&pin.name, inputs.iter().map(|(label, _)| label.as_str())) {
                    Some(nearest) => format!("did you mean `{nearest}` in {}:{}?", declared.file, declared.line),
                    None => "connect the pin by its name, or take it out of the declaration".to_string(),
                };
                let message = format!(
                    "the instance `{}` of `{}` does not connect the declared pin `{}`, so that pin is not checked",
                    work.instance.name.name, work.name.name, pin.name
                );
                let at = Some(work.instance.span);
                self.report(Diagnostic::new(Kind::Incomplete, "declared pin", message, at).with_help(help));
                continue;
            };
            for &node in nodes {
                let (net, plain) = self.builder.strip_inverters(node);
                let active = plain != pin.inverted;
                let role = match role {
                    PinRole::Clock => BoxRole::Clock(if active { Edge::Posedge } else { Edge::Negedge }),
                    PinRole::Set => BoxRole::Set(active),
                    PinRole::Reset => BoxRole::Reset(active),
                    PinRole::Enable => BoxRole::Enable(active),
                };
                found.push(BoxPin { net, role });
            }
        }
        found
    }

    /// The value of what is connected to an input, in its own width.
    pub fn actual_bits(&mut self, actual: Actual<'a>) -> Outcome<Vec<Bit>> {
        if let Actual::Expr(expr) = actual {
            return Ok(self.eval_self(expr)?.0);
        }
        let (places, span) = self.actual_places(actual)?;
        let site = self.site(span);
        let mut bits = Vec::new();
        for place in &places {
            bits.extend(self.read_place(place, site)?);
        }
        Ok(bits)
    }

    fn black_box_input(&mut self, actual: Actual<'a>) -> Outcome<Vec<NodeId>> {
        let bits = self.actual_bits(actual)?;
        let site = Site { instance: self.instance, span: self.actual_span(actual) };
        let nodes = self.nodes(&bits, site);
        self.used.extend(&nodes);
        Ok(nodes)
    }

    fn black_box_output(&mut self, actual: Actual<'a>, work: &BlackBoxWork<'a>) -> Outcome<Vec<NodeId>> {
        let (places, span) = self.actual_places(actual)?;
        let mut wires = self.wires_of(&places, span)?;
        if let Some(slot) = work.slot
            && slot.count > 1
            && wires.len() % slot.count == 0
        {
            // How wide the port is nobody knows; a slice each is the likeliest.
            let width = wires.len() / slot.count;
            wires = wires[slot.position * width..(slot.position + 1) * width].to_vec();
        }
        let site = self.site(span);
        let mut sources = Vec::new();
        for wire in wires.into_iter().flatten() {
            let source = self.builder.source(SourceKind::BlackBox, site);
            self.add_driver(wire, Bit::Node(source), Some(span));
            sources.push(source);
        }
        Ok(sources)
    }

    /// Without a declaration, a connection to nets that nothing else drives is an output.
    fn looks_like_output(&mut self, actual: Actual<'a>) -> bool {
        let Ok((places, span)) = self.actual_places(actual) else { return false };
        let Ok(wires) = self.wires_of(&places, span) else { return false };
        let variables: Vec<VariableId> = places
            .iter()
            .filter_map(|place| if let Base::Variable(id) = place.base { Some(id) } else { None })
            .collect();
        !variables.is_empty()
            && !variables.iter().any(|&id| self.variable(id).storage == Storage::Memory)
            && !wires.iter().flatten().any(|wire| {
                self.builder.driver(*wire).is_some()
                    || self.drivers.contains_key(wire)
                    || self.external.contains_key(wire)
                    || self.pending_wires.contains(wire)
            })
    }
}

/// `.*` at an instance whose ports nobody knows.
fn connects_unknown(module: &str, span: Span) -> Diagnostic {
    let message = format!("there is no text of module `{module}`, so which nets `.*` connects is unknown");
    let help = "add the text of the module to the scan, or name the ports that are connected";
    Diagnostic::new(Kind::Incomplete, "port connection", message, Some(span)).with_help(help)
}
