//! Whether the ports of a module are declared as IEEE 1800-2017 clause 23.2.2 wants: each name once in the list, each
//! direction once, nothing declared as a port that the list does not have. What is wrong is reported and the run is
//! incomplete; the first declaration holds, so that the rest of the module is still analysed.
//!
//! Invariant: what is not reported here has one direction and one place in the list.

use std::collections::BTreeMap;

use super::context::Elaborator;
use super::ports::direction_of;
use crate::diagnostic::{Diagnostic, Kind};
use crate::syntax::ast::{AnsiPortKind, Direction, Expr, ExprKind, Ident, ItemKind, Module, Ports};

impl<'a> Elaborator<'a> {
    /// Reports ports that are listed or declared twice, or declared without being listed.
    pub fn check_header(&mut self, module: &'a Module) {
        let mut listed: BTreeMap<&str, &Ident> = BTreeMap::new();
        for name in outside_names(module) {
            if let Some(first) = listed.insert(&name.name, name) {
                self.wrong_port(format!("`{}` is listed twice among the ports", name.name), name, Some(first));
                listed.insert(&name.name, first);
            }
        }
        let mut known: BTreeMap<&str, Option<(&Ident, Direction)>> = BTreeMap::new();
        match &module.ports {
            Ports::Ansi(ports) => {
                for (index, port) in ports.iter().enumerate() {
                    match &port.kind {
                        AnsiPortKind::Explicit { expr: Some(expr), .. } => {
                            known.extend(names(expr).map(|name| (name.name.as_str(), None)));
                        }
                        _ => {
                            let direction = direction_of(module, index).map(|direction| (&port.name, direction));
                            known.insert(&port.name.name, direction);
                        }
                    }
                }
            }
            Ports::NonAnsi(ports) => {
                let inside = ports.iter().filter_map(|port| port.expr.as_ref()).flat_map(names);
                known.extend(inside.map(|name| (name.name.as_str(), None)));
            }
            Ports::None | Ports::Wildcard => {}
        }
        for item in &module.items {
            let ItemKind::PortDecl { direction, names, .. } = &item.kind else { continue };
            for declared in names {
                let name = &declared.name;
                match known.get_mut(name.name.as_str()) {
                    None => {
                        let message = format!(
                            "`{}` is declared as {}, but is not in the list of ports",
                            name.name,
                            article(*direction)
                        );
                        self.wrong_port(message, name, None);
                    }
                    Some(Some((first, _))) => {
                        let first = *first;
                        self.wrong_port(
                            format!("the direction of `{}` is declared twice", name.name),
                            name,
                            Some(first),
                        );
                    }
                    Some(unknown) => *unknown = Some((name, *direction)),
                }
            }
        }
        self.check_mixed(module, &known);
    }

    /// The parts of one port go through it in one direction.
    fn check_mixed(&mut self, module: &'a Module, known: &BTreeMap<&str, Option<(&Ident, Direction)>>) {
        let Ports::NonAnsi(ports) = &module.ports else { return };
        for port in ports {
            let mut parts = port.expr.iter().flat_map(names).filter_map(|name| *known.get(name.name.as_str())?);
            let Some((first, direction)) = parts.next() else { continue };
            if let Some((other, _)) = parts.find(|&(_, other)| other != direction) {
                let message = format!("`{}` and `{}` are one port, but differ in direction", first.name, other.name);
                self.wrong_port(message, other, Some(first));
            }
        }
    }

    fn wrong_port(&mut self, message: String, at: &Ident, first: Option<&Ident>) {
        let help = match first {
            Some(_) => "what the first one says is taken; leave one of them",
            None => "nothing outside is connected to it: add it to the list, or declare it as a net",
        };
        let mut diagnostic = Diagnostic::new(Kind::Incomplete, "port", message, Some(at.span)).with_help(help);
        if let Some(first) = first {
            diagnostic = diagnostic.with_also(first.span, "first here");
        }
        self.report(diagnostic);
    }
}

/// The names by which instances can connect the ports.
fn outside_names(module: &Module) -> Vec<&Ident> {
    match &module.ports {
        Ports::Ansi(ports) => ports.iter().map(|port| &port.name).collect(),
        Ports::NonAnsi(ports) => ports.iter().filter_map(|port| port.name.as_ref()).collect(),
        Ports::None | Ports::Wildcard => Vec::new(),
    }
}

/// The nets and variables in a port expression.
fn names(expr: &Expr) -> Box<dyn Iterator<Item = &Ident> + '_> {
    match &expr.kind {
        ExprKind::Name(name) => Box::new(std::iter::once(name)),
        ExprKind::Index(base, _) | ExprKind::Slice { base, .. } | ExprKind::Member(base, _) => names(base),
        ExprKind::Concat(parts) => Box::new(parts.iter().flat_map(names)),
        _ => Box::new(std::iter::empty()),
    }
}

fn article(direction: Direction) -> &'static str {
    match direction {
        Direction::Input => "an input",
        Direction::Output => "an output",
        Direction::Inout => "an inout",
        Direction::Ref => "a reference",
    }
}
