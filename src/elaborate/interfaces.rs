//! Interfaces at ports: modports, generic ports, arrays of interfaces, and interfaces at the ports of a top, whose
//! signals become ports of the design. A port of an interface is no copy: its name stands for the scope of the
//! interface instance that is connected to it, or for that of one of its modports.

use std::rc::Rc;

use super::context::{Elaborator, Outcome, VariableId, unsupported, wrong};
use super::hierarchy::Overrides;
use super::place::{Resolved, Want};
use super::ports::{Actual, Target};
use super::scope::{Instances, ScopeId, Symbol};
use crate::graph::{InstanceId, PortDirection};
use crate::source::Span;
use crate::syntax::ast::{
    AnsiPort, DataTypeKind, Declarator, Dim, Direction, ExprKind, Ident, ItemKind, ModportPort, Module, ModuleKind,
    Ports,
};

/// A port that is an interface, as its module declares it.
#[derive(Clone, Copy)]
pub(super) struct InterfacePort<'a> {
    pub name: &'a Ident,
    pub dims: &'a [Dim],
    /// `None` for a generic port.
    pub interface: Option<&'a Ident>,
    pub modport: Option<&'a Ident>,
    pub span: Span,
}

impl<'a> InterfacePort<'a> {
    pub fn ansi(port: &'a AnsiPort, interface: Option<&'a Ident>, modport: Option<&'a Ident>) -> Self {
        Self { name: &port.name, dims: &port.dims, interface, modport, span: port.span }
    }
}

impl<'a> Elaborator<'a> {
    pub fn names_interface(&self, name: &Ident) -> bool {
        self.definition(self.here, &name.name).is_some_and(|(module, _)| module.kind == ModuleKind::Interface)
    }

    /// Declares the interface ports of a module whose port list only names them.
    pub fn declare_listed_interfaces(
        &mut self,
        scope: ScopeId,
        module: &'a Module,
        outer: Option<ScopeId>,
        connections: &[(usize, Actual<'a>)],
    ) -> Outcome<()> {
        let Ports::NonAnsi(refs) = &module.ports else { return Ok(()) };
        for (index, port) in refs.iter().enumerate() {
            let Some(ExprKind::Name(name)) = port.expr.as_ref().map(|expr| &expr.kind) else { continue };
            let named = |names: &'a [Declarator]| names.iter().find(|declared| declared.name.name == name.name);
            for item in &module.items {
                let (interface, modport, declared) = match &item.kind {
                    ItemKind::InterfacePort { interface, modport, names } => (interface, Some(modport), named(names)),
                    ItemKind::Var { ty, names } => match &ty.kind {
                        DataTypeKind::Named { package: None, name } if self.names_interface(name) => {
                            (name, None, named(names))
                        }
                        _ => continue,
                    },
                    _ => continue,
                };
                if let Some(Declarator { name, dims, .. }) = declared {
                    let port = InterfacePort { name, dims, interface: Some(interface), modport, span: name.span };
                    self.bind_interface(scope, port, index, outer, connections)?;
                }
            }
        }
        Ok(())
    }

    /// Enters a modport: a scope inside the interface with the names that it lists.
    pub fn declare_modport(&mut self, scope: ScopeId, name: &'a Ident, ports: &'a [ModportPort], imports: &'a [Ident]) {
        let (instance, label) = (self.scope(scope).instance, self.scope(scope).name.clone());
        let prefix = self.scope(scope).prefix.clone();
        let inner = self.inner_scope(scope, &label, instance, prefix);
        self.scopes[inner.index()].is_modport = true;
        for port in ports {
            let symbol = match &port.expr {
                Some(expr) => Some(Symbol::Alias(expr, scope)),
                None => self.scope(scope).names.get(&port.name.name).cloned(),
            };
            if let Some(symbol) = symbol {
                self.declare(inner, &port.name.name, symbol);
            }
        }
        for name in imports {
            if let Some(symbol) = self.scope(scope).names.get(&name.name).cloned() {
                self.declare(inner, &name.name, symbol);
            }
        }
        self.declare(scope, &name.name, Symbol::Scope(inner));
    }

    /// Makes the name of an interface port stand for what is connected to it.
    pub fn bind_interface(
        &mut self,
        scope: ScopeId,
        port: InterfacePort<'a>,
        index: usize,
        outer: Option<ScopeId>,
        connections: &[(usize, Actual<'a>)],
    ) -> Outcome<()> {
        let Some(outer) = outer else { return self.interface_of_top(scope, port) };
        let actual = connections.iter().find(|(at, _)| *at == index).map(|(_, actual)| *actual);
        let resolved = self.in_scope(outer, |this| match actual {
            Some(Actual::Expr(expr)) => this.resolve(expr, Want::Value),
            Some(Actual::Name(name, span)) => match this.find(name) {
                Some(symbol) => this.resolve_symbol(symbol, span),
                None => Err(wrong(format!("`{name}` is not declared"), span)),
            },
            Some(Actual::Open) | None => {
                Err(wrong(format!("nothing is connected to the interface port `{}`", port.name.name), port.span))
            }
        })?;
        let symbol = match resolved {
            Resolved::Scope(interface) if port.dims.is_empty() => Symbol::Scope(interface),
            Resolved::Symbol(symbol @ Symbol::Scopes(_)) => symbol,
            _ => return Err(wrong("something that is no interface connected to an interface port", port.span)),
        };
        let symbol = match (symbol, self.slot) {
            (Symbol::Scopes(all), Some(slot)) if port.dims.is_empty() && all.elements.len() == slot.count => {
                // Each of an array of instances gets its element, counted from the right end.
                let mut elements = all.in_order();
                elements.swap_remove(slot.count - 1 - slot.position)
            }
            (symbol, _) => symbol,
        };
        let symbol = self.interface_symbol(scope, symbol, port, port.dims)?;
        self.declare(scope, &port.name.name, symbol);
        Ok(())
    }

    /// An interface, or an array of interfaces with the indices of the port's own dimensions.
    fn interface_symbol(
        &mut self,
        scope: ScopeId,
        symbol: Symbol<'a>,
        port: InterfacePort<'a>,
        dims: &'a [Dim],
    ) -> Outcome<Symbol<'a>> {
        match (symbol, dims) {
            (Symbol::Scope(interface), []) => Ok(Symbol::Scope(self.modport_of(interface, port)?)),
            (Symbol::Scopes(all), [dim, rest @ ..]) => {
                let range = self.in_scope(scope, |this| this.dimension(dim))?;
                let elements = all.in_order();
                if elements.len() != range.len() {
                    let message = format!("{} interfaces at a port of {}", elements.len(), range.len());
                    return Err(wrong(message, port.span));
                }
                let mut made = Instances { ascending: range.left < range.right, ..Instances::default() };
                for (element, position) in elements.into_iter().zip((0..range.len()).rev()) {
                    let element = self.interface_symbol(scope, element, port, rest)?;
                    made.elements.insert(range.index(position), element);
                }
                Ok(Symbol::Scopes(Rc::new(made)))
            }
            _ => Err(wrong("an interface, or an array of them, at a port of another shape", port.span)),
        }
    }

    /// The scope of the modport that a port names, of an interface of the right kind.
    fn modport_of(&mut self, interface: ScopeId, port: InterfacePort<'a>) -> Outcome<ScopeId> {
        let chosen = self.scope(interface).is_modport;
        let whole = self.scope(interface).parent.filter(|_| chosen).unwrap_or(interface);
        let Some(module) = self.scope(whole).module.filter(|module| module.kind == ModuleKind::Interface) else {
            return Err(wrong("something that is no interface connected to an interface port", port.span));
        };
        if let Some(expected) = port.interface
            && module.name.name != expected.name
        {
            let message = format!("a `{}` connected to a port for a `{}`", module.name.name, expected.name);
            return Err(wrong(message, port.span));
        }
        match port.modport {
            Some(_) if chosen => Ok(interface),
            None => Ok(interface),
            Some(modport) => match self.scope(whole).names.get(&modport.name) {
                Some(&Symbol::Scope(scope)) if self.scope(scope).is_modport => Ok(scope),
                _ => {
                    let message = format!("interface `{}` has no modport `{}`", module.name.name, modport.name);
                    Err(wrong(message, modport.span))
                }
            },
        }
    }
}

/// Interfaces at the ports of a top.
impl<'a> Elaborator<'a> {
    /// Nothing is connected from outside, so the interface is made here, as an instance named like the port.
    fn interface_of_top(&mut self, scope: ScopeId, port: InterfacePort<'a>) -> Outcome<()> {
        let Some(interface) = port.interface else {
            return Err(unsupported("generic interface port of a top module", port.span));
        };
        if !port.dims.is_empty() {
            return Err(unsupported("array of interfaces as a port of a top module", port.span));
        }
        let Some((module, names)) = self.definition(scope, &interface.name) else {
            return Err(wrong(format!("there is no interface `{}`", interface.name), interface.span));
        };
        let parent = self.scope(scope).instance;
        let node = self.builder.instance(Some(parent), &port.name.name, &interface.name, Some(port.span));
        let (here, instance) = (self.here, self.instance);
        let made = self.module(module, Some(scope), names, node, &port.name.name, &Overrides::new(), &[]);
        self.here = here;
        self.instance = instance;
        let inner = self.modport_of(made?, port)?;
        self.declare(scope, &port.name.name, Symbol::Scope(inner));
        Ok(())
    }

    /// Makes the signals of an interface at a top's port the ports of the design, named `port.signal`: those of its
    /// modport with their directions, or all of them, when their drivers are known.
    pub fn interface_ports_of_top(&mut self, scope: ScopeId, instance: InstanceId) -> Outcome<()> {
        let is_modport = self.scope(scope).is_modport;
        let whole = self.scope(scope).parent.filter(|_| is_modport).unwrap_or(scope);
        let Some(module) = self.scope(whole).module else { return Ok(()) };
        let label = self.scope(whole).name.clone();
        let own = self.ports.get(&whole).cloned().unwrap_or_default();
        let mut seen: Vec<VariableId> = Vec::new();
        for port in own.iter() {
            if let Target::Variable(id) = port.target {
                seen.push(id);
                let name = format!("{label}.{}", self.variable(id).name);
                self.top_port(id, instance, direction_of(port.direction), name);
            }
        }
        if !is_modport {
            for item in &module.items {
                let (ItemKind::Var { names, .. } | ItemKind::Net { names, .. }) = &item.kind else { continue };
                for declarator in names {
                    if let Some(&Symbol::Variable(id)) = self.scope(whole).names.get(&declarator.name.name)
                        && !seen.contains(&id)
                    {
                        let name = format!("{label}.{}", declarator.name.name);
                        self.undirected.push((id, instance, name));
                    }
                }
            }
            return Ok(());
        }
        let chosen = module.items.iter().find_map(|item| match &item.kind {
            ItemKind::Modport { name, ports, .. } => match self.scope(whole).names.get(&name.name) {
                Some(&Symbol::Scope(found)) if found == scope => Some(ports),
                _ => None,
            },
            _ => None,
        });
        for port in chosen.into_iter().flatten() {
            match self.scope(scope).names.get(&port.name.name) {
                Some(&Symbol::Variable(id)) if seen.contains(&id) => {}
                Some(&Symbol::Variable(id)) => {
                    let name = format!("{label}.{}", port.name.name);
                    self.top_port(id, instance, direction_of(port.direction), name);
                }
                Some(Symbol::Alias(expr, _)) => {
                    return Err(unsupported("modport expression at a port of a top module", expr.span));
                }
                _ => {
                    let message = format!("the interface has no `{}`", port.name.name);
                    return Err(wrong(message, port.name.span));
                }
            }
        }
        Ok(())
    }

    /// Gives the signals of an interface without a modport their direction: what the design drives is an output.
    pub fn direct_interface_ports(&mut self) {
        for (id, instance, name) in std::mem::take(&mut self.undirected) {
            let direction = if self.is_driven(id) { PortDirection::Output } else { PortDirection::Input };
            self.top_port(id, instance, direction, name);
        }
    }
}

pub(super) fn direction_of(direction: Direction) -> PortDirection {
    match direction {
        Direction::Input => PortDirection::Input,
        Direction::Output => PortDirection::Output,
        Direction::Inout | Direction::Ref => PortDirection::Inout,
    }
}
