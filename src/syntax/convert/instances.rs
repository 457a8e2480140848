//! Instances and `bind`. The parser takes `a b(...);` for a module whatever `a` is, so modules, interfaces, programs and
//! primitives share one item and elaboration looks the name up.

use sv_parser as sv;

use super::Converter;
use super::ast::{Connection, Dim, Expr, Ident, Instance, Item, ItemKind};
use super::names::Scope;
use crate::source::Span;

impl Converter<'_> {
    pub(super) fn instances(
        &self,
        name: &sv::Identifier,
        params: &Option<sv::ParameterValueAssignment>,
        instances: &sv::List<sv::Symbol, sv::HierarchicalInstance>,
        span: Span,
    ) -> Item {
        let kind = ItemKind::Instances {
            module: self.ident(name),
            params: self.param_overrides(params),
            instances: instances.contents().into_iter().map(|instance| self.instance(instance)).collect(),
        };
        self.item(kind, span)
    }

    fn instance(&self, instance: &sv::HierarchicalInstance) -> Instance {
        let (name, connections) = &instance.nodes;
        let (name, dims) = self.instance_name(name);
        let connections = connections.nodes.1.as_ref().map_or(Vec::new(), |list| self.connections(list));
        Instance { name, dims, connections, span: self.span(instance) }
    }

    pub(super) fn instance_name(&self, name: &sv::NameOfInstance) -> (Ident, Vec<Dim>) {
        let (name, dims) = &name.nodes;
        (self.ident(&name.nodes.0), self.unpacked_dims(dims))
    }

    fn connections(&self, list: &sv::ListOfPortConnections) -> Vec<Connection> {
        match list {
            sv::ListOfPortConnections::Ordered(x) => {
                let connections = x.nodes.0.contents();
                // `m u ();` reaches us as one connection left out.
                if let [only] = connections.as_slice()
                    && only.nodes.1.is_none()
                {
                    return Vec::new();
                }
                let connections = connections.into_iter();
                connections
                    .map(|connection| {
                        let value = connection.nodes.1.as_ref().map(|value| self.expression(value));
                        let span = value.as_ref().map_or_else(|| self.span(connection), |value| value.span);
                        Connection::Ordered(value, span)
                    })
                    .collect()
            }
            sv::ListOfPortConnections::Named(x) => {
                let connections = x.nodes.0.contents().into_iter();
                connections
                    .map(|connection| match connection {
                        sv::NamedPortConnection::Identifier(x) => {
                            let (_, _, name, value) = &x.nodes;
                            let name = self.ident(&name.nodes.0);
                            match value {
                                None => Connection::Implicit(name),
                                Some(value) => Connection::Named {
                                    name,
                                    value: value.nodes.1.as_ref().map(|value| self.expression(value)),
                                },
                            }
                        }
                        sv::NamedPortConnection::Asterisk(x) => Connection::All(self.span(&**x)),
                    })
                    .collect()
            }
        }
    }

    /// One item per bound instance, so that each target is a name of its own.
    pub(super) fn bind(&self, bind: &sv::BindDirective, items: &mut Vec<Item>) {
        let span = self.span(bind);
        let (targets, instantiation) = match bind {
            sv::BindDirective::Scope(x) => {
                let (_, scope, list, instantiation) = &x.nodes;
                let targets: Vec<Expr> = match list {
                    Some((_, list)) => {
                        list.nodes.0.contents().into_iter().map(|target| self.bind_target(target)).collect()
                    }
                    None => vec![match scope {
                        sv::BindTargetScope::ModuleIdentifier(x) => self.name_expr(&x.nodes.0),
                        sv::BindTargetScope::InterfaceIdentifier(x) => self.name_expr(&x.nodes.0),
                    }],
                };
                (targets, instantiation)
            }
            sv::BindDirective::Instance(x) => {
                let (_, target, instantiation) = &x.nodes;
                (vec![self.bind_target(target)], instantiation)
            }
        };
        let place = self.span(instantiation);
        let item = match instantiation {
            sv::BindInstantiation::ProgramInstantiation(x) => {
                let (name, params, instances, _) = &x.nodes;
                self.instances(&name.nodes.0, params, instances, place)
            }
            sv::BindInstantiation::ModuleInstantiation(x) => {
                let (name, params, instances, _) = &x.nodes;
                self.instances(&name.nodes.0, params, instances, place)
            }
            sv::BindInstantiation::InterfaceInstantiation(x) => {
                let (name, params, instances, _) = &x.nodes;
                self.instances(&name.nodes.0, params, instances, place)
            }
            sv::BindInstantiation::CheckerInstantiation(_) => self.skipped("checker", place),
        };
        for target in targets {
            items.push(self.item(ItemKind::Bind { target, item: Box::new(item.clone()) }, span));
        }
    }

    fn bind_target(&self, target: &sv::BindTargetInstance) -> Expr {
        let (name, select) = &target.nodes;
        self.constant_bit_select(self.hierarchical(Scope::None, name), select)
    }
}
