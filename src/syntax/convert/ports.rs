//! Ports. What an ANSI port leaves out comes from the port before it or from the defaults of IEEE 1800-2017 clause
//! 23.2.2.3, and is filled in here:
//! - a port with neither direction, net type nor data type takes all of the port before it;
//! - otherwise a missing direction is inherited, and a missing net type means: a net of the default type for `input` and
//!   `inout`, for `output` a variable exactly when a data type is written, for `ref` a variable.
//!
//! The parser tries the ANSI form first, so `module m (a, b);` may reach us as an ANSI list without directions.

use sv_parser as sv;

use super::Converter;
use super::ast::{
    AnsiPort, AnsiPortKind, Attributes, DataType, DataTypeKind, Declarator, DefaultNettype, Direction, Expr, ExprKind,
    ItemKind, NetKind, PortRef, Ports,
};
use super::names::Scope;
use super::tokens::net_kind;

/// What the next port of an ANSI list inherits.
#[derive(Clone)]
struct Before {
    direction: Direction,
    kind: AnsiPortKind,
}

/// The parts of one port's header as written.
struct Header {
    direction: Option<Direction>,
    /// A net type, `Some(None)` for the keyword `var`.
    net: Option<Option<NetKind>>,
    ty: DataType,
}

impl Converter<'_> {
    pub(super) fn ansi_ports(&self, list: &Option<sv::ListOfPortDeclarations>, default: DefaultNettype) -> Ports {
        let Some(ports) = list.as_ref().and_then(|list| list.nodes.0.nodes.1.as_ref()) else {
            return Ports::None;
        };
        let ports = ports.contents();
        if let Some(refs) = self.bare_names(&ports) {
            return Ports::NonAnsi(refs);
        }
        let default = match default {
            DefaultNettype::Net(kind) => kind,
            // `default_nettype none` forbids implicit nets only; a port is still a wire.
            DefaultNettype::None => NetKind::Wire,
        };
        let mut before = None;
        Ports::Ansi(ports.into_iter().map(|(attrs, port)| self.ansi_port(attrs, port, default, &mut before)).collect())
    }

    /// A list in which no port has a header can only be a non-ANSI one.
    fn bare_names(&self, ports: &[&(Vec<sv::AttributeInstance>, sv::AnsiPortDeclaration)]) -> Option<Vec<PortRef>> {
        let mut refs = Vec::with_capacity(ports.len());
        for (_, port) in ports {
            let (bare, name) = match port {
                sv::AnsiPortDeclaration::Net(x) => {
                    let (header, name, dims, default) = &x.nodes;
                    (header.as_ref().is_none_or(is_empty) && dims.is_empty() && default.is_none(), name)
                }
                sv::AnsiPortDeclaration::Variable(x) => {
                    let (header, name, dims, default) = &x.nodes;
                    (header.is_none() && dims.is_empty() && default.is_none(), name)
                }
                sv::AnsiPortDeclaration::Paren(x) => (x.nodes.0.is_none(), &x.nodes.2),
            };
            if !bare {
                return None;
            }
            let expr = match port {
                sv::AnsiPortDeclaration::Paren(x) => x.nodes.3.nodes.1.as_ref().map(|expr| self.expression(expr)),
                _ => Some(self.name_expr(&name.nodes.0)),
            };
            refs.push(PortRef { name: Some(self.ident(&name.nodes.0)), expr, span: self.span(port) });
        }
        Some(refs)
    }

    fn ansi_port(
        &self,
        attributes: &[sv::AttributeInstance],
        port: &sv::AnsiPortDeclaration,
        default_net: NetKind,
        before: &mut Option<Before>,
    ) -> AnsiPort {
        let inherited = before.as_ref().map_or(Direction::Inout, |before| before.direction);
        let (kind, direction, name, dims, default) = match port {
            sv::AnsiPortDeclaration::Net(x) => {
                let (header, name, dims, default) = &x.nodes;
                let (kind, direction) = match header.as_ref().filter(|header| !is_empty(header)) {
                    None => self.inherited_kind(before, default_net, &name.nodes.0),
                    Some(sv::NetPortHeaderOrInterfacePortHeader::InterfacePortHeader(x)) => {
                        (self.interface_kind(x, inherited), inherited)
                    }
                    Some(sv::NetPortHeaderOrInterfacePortHeader::NetPortHeader(x)) => {
                        let (direction, ty) = &x.nodes;
                        let (net, ty) = self.net_port_type(ty);
                        let direction = direction.as_ref().map(direction_of);
                        complete(Header { direction, net: net.map(Some), ty }, inherited, default_net)
                    }
                };
                (kind, direction, name, self.unpacked_dims(dims), default)
            }
            sv::AnsiPortDeclaration::Variable(x) => {
                let (header, name, dims, default) = &x.nodes;
                let (kind, direction) = match header {
                    None => self.inherited_kind(before, default_net, &name.nodes.0),
                    Some(header) => {
                        let (direction, ty) = &header.nodes;
                        let (var, ty) = self.variable_port_type(ty);
                        let direction = direction.as_ref().map(direction_of);
                        complete(Header { direction, net: var.then_some(None), ty }, inherited, default_net)
                    }
                };
                (kind, direction, name, self.variable_dims(dims), default)
            }
            sv::AnsiPortDeclaration::Paren(x) => {
                let (direction, _, name, expr) = &x.nodes;
                let direction = direction.as_ref().map_or(inherited, direction_of);
                let expr = expr.nodes.1.as_ref().map(|expr| self.expression(expr));
                (AnsiPortKind::Explicit { direction, expr }, direction, name, Vec::new(), &None)
            }
        };
        if !matches!(kind, AnsiPortKind::Explicit { .. }) {
            *before = Some(Before { direction, kind: kind.clone() });
        }
        AnsiPort {
            attributes: self.attributes(attributes),
            kind,
            name: self.ident(&name.nodes.0),
            dims,
            default: default.as_ref().map(|(_, value)| self.constant_expression(value)),
            span: self.span(port),
        }
    }

    /// A port without any header: everything from the port before.
    fn inherited_kind(
        &self,
        before: &Option<Before>,
        default_net: NetKind,
        name: &sv::Identifier,
    ) -> (AnsiPortKind, Direction) {
        match before {
            Some(before) => (before.kind.clone(), before.direction),
            None => {
                let ty = self.plain_type(DataTypeKind::Implicit, self.span(name));
                complete(Header { direction: None, net: None, ty }, Direction::Inout, default_net)
            }
        }
    }

    fn interface_kind(&self, header: &sv::InterfacePortHeader, direction: Direction) -> AnsiPortKind {
        match header {
            sv::InterfacePortHeader::Identifier(x) => {
                let (name, modport) = &x.nodes;
                AnsiPortKind::Interface {
                    interface: Some(self.ident(&name.nodes.0)),
                    modport: modport.as_ref().map(|(_, name)| self.ident(&name.nodes.0)),
                    direction,
                }
            }
            sv::InterfacePortHeader::Interface(x) => AnsiPortKind::Interface {
                interface: None,
                modport: x.nodes.1.as_ref().map(|(_, name)| self.ident(&name.nodes.0)),
                direction,
            },
        }
    }

    fn net_port_type(&self, ty: &sv::NetPortType) -> (Option<NetKind>, DataType) {
        match ty {
            sv::NetPortType::DataType(x) => {
                let (net, ty) = &x.nodes;
                (net.as_ref().map(|net| self.net_type(net)), self.data_type_or_implicit(ty))
            }
            sv::NetPortType::NetTypeIdentifier(x) => (None, self.named_type(Scope::None, &x.nodes.0)),
            sv::NetPortType::Interconnect(x) => {
                let kind = DataTypeKind::Unsupported("interconnect".to_string());
                (Some(NetKind::Wire), self.plain_type(kind, self.span(&**x)))
            }
        }
    }

    /// The type of a variable port, and whether the keyword `var` was written.
    fn variable_port_type(&self, ty: &sv::VariablePortType) -> (bool, DataType) {
        match &ty.nodes.0 {
            sv::VarDataType::DataType(x) => (false, self.data_type(x)),
            sv::VarDataType::Var(x) => (true, self.data_type_or_implicit(&x.nodes.1)),
        }
    }

    pub(super) fn net_type(&self, net: &sv::NetType) -> NetKind {
        net_kind(self.text_of(net)).unwrap_or(NetKind::Wire)
    }

    pub(super) fn nonansi_ports(&self, list: &sv::ListOfPorts) -> Ports {
        let ports = list.nodes.0.nodes.1.contents();
        if let [sv::Port::NonNamed(only)] = ports.as_slice()
            && only.nodes.0.is_none()
        {
            return Ports::None;
        }
        Ports::NonAnsi(ports.into_iter().map(|port| self.port_ref(port)).collect())
    }

    fn port_ref(&self, port: &sv::Port) -> PortRef {
        let span = self.span(port);
        match port {
            sv::Port::NonNamed(x) => {
                let expr = x.nodes.0.as_ref().map(|expr| self.port_expression(expr));
                let name = match expr.as_ref().map(|expr| &expr.kind) {
                    Some(ExprKind::Name(name)) => Some(name.clone()),
                    _ => None,
                };
                PortRef { name, expr, span }
            }
            sv::Port::Named(x) => {
                let (_, name, expr) = &x.nodes;
                let expr = expr.nodes.1.as_ref().map(|expr| self.port_expression(expr));
                PortRef { name: Some(self.ident(&name.nodes.0)), expr, span }
            }
        }
    }

    fn port_expression(&self, expression: &sv::PortExpression) -> Expr {
        let reference = |reference: &sv::PortReference| {
            let (name, select) = &reference.nodes;
            self.constant_select(self.name_expr(&name.nodes.0), select)
        };
        match expression {
            sv::PortExpression::PortReference(x) => reference(x),
            sv::PortExpression::Brace(x) => {
                let parts = x.nodes.0.nodes.1.contents().into_iter().map(reference).collect();
                Expr { kind: ExprKind::Concat(parts), span: self.span(&**x) }
            }
        }
    }

    /// The declaration of a non-ANSI port in the module's body.
    pub(super) fn port_declaration(&self, declaration: &sv::PortDeclaration) -> (Attributes, ItemKind) {
        match declaration {
            sv::PortDeclaration::Inout(x) => {
                let (attributes, declaration) = &x.nodes;
                let (_, ty, names) = &declaration.nodes;
                (self.attributes(attributes), self.net_port(Direction::Inout, ty, names))
            }
            sv::PortDeclaration::Input(x) => {
                let (attributes, declaration) = &x.nodes;
                let kind = match declaration {
                    sv::InputDeclaration::Net(x) => self.net_port(Direction::Input, &x.nodes.1, &x.nodes.2),
                    sv::InputDeclaration::Variable(x) => {
                        self.variable_port(Direction::Input, &x.nodes.1, self.variable_names(&x.nodes.2))
                    }
                };
                (self.attributes(attributes), kind)
            }
            sv::PortDeclaration::Output(x) => {
                let (attributes, declaration) = &x.nodes;
                let kind = match declaration {
                    sv::OutputDeclaration::Net(x) => self.net_port(Direction::Output, &x.nodes.1, &x.nodes.2),
                    sv::OutputDeclaration::Variable(x) => {
                        self.variable_port(Direction::Output, &x.nodes.1, self.variable_port_names(&x.nodes.2))
                    }
                };
                (self.attributes(attributes), kind)
            }
            sv::PortDeclaration::Ref(x) => {
                let (attributes, declaration) = &x.nodes;
                let (_, ty, names) = &declaration.nodes;
                let kind = self.variable_port(Direction::Ref, ty, self.variable_names(names));
                (self.attributes(attributes), kind)
            }
            sv::PortDeclaration::Interface(x) => {
                let (attributes, declaration) = &x.nodes;
                let (interface, modport, names) = &declaration.nodes;
                // The parser takes the declaration of a variable of a named type, `state_t s;`, for an interface port.
                let names = names.nodes.0.contents().into_iter();
                let names =
                    names.map(|(name, dims)| self.declarator(&name.nodes.0, self.unpacked_dims(dims))).collect();
                let kind = match modport {
                    Some((_, modport)) => ItemKind::InterfacePort {
                        interface: self.ident(&interface.nodes.0),
                        modport: self.ident(&modport.nodes.0),
                        names,
                    },
                    None => ItemKind::Var { ty: self.named_type(Scope::None, &interface.nodes.0), names },
                };
                (self.attributes(attributes), kind)
            }
        }
    }

    fn net_port(&self, direction: Direction, ty: &sv::NetPortType, names: &sv::ListOfPortIdentifiers) -> ItemKind {
        let (net, ty) = self.net_port_type(ty);
        let is_var = net.is_none() && direction == Direction::Output && !matches!(ty.kind, DataTypeKind::Implicit);
        let names = names.nodes.0.contents().into_iter();
        let names = names.map(|(name, dims)| self.declarator(&name.nodes.0, self.unpacked_dims(dims))).collect();
        ItemKind::PortDecl { direction, net, ty, names, is_var }
    }

    fn variable_port(&self, direction: Direction, ty: &sv::VariablePortType, names: Vec<Declarator>) -> ItemKind {
        let (var, ty) = self.variable_port_type(ty);
        let is_var = var || matches!(direction, Direction::Output | Direction::Ref);
        ItemKind::PortDecl { direction, net: None, ty, names, is_var }
    }

    fn variable_names(&self, names: &sv::ListOfVariableIdentifiers) -> Vec<Declarator> {
        let names = names.nodes.0.contents().into_iter();
        names.map(|(name, dims)| self.declarator(&name.nodes.0, self.variable_dims(dims))).collect()
    }

    fn variable_port_names(&self, names: &sv::ListOfVariablePortIdentifiers) -> Vec<Declarator> {
        let declarator = |(name, dims, init): &(sv::PortIdentifier, Vec<sv::VariableDimension>, _)| {
            let init: &Option<(sv::Symbol, sv::ConstantExpression)> = init;
            Declarator {
                init: init.as_ref().map(|(_, value)| self.constant_expression(value)),
                ..self.declarator(&name.nodes.0, self.variable_dims(dims))
            }
        };
        names.nodes.0.contents().into_iter().map(declarator).collect()
    }
}

/// Whether the parser reports a header with nothing in it.
fn is_empty(header: &sv::NetPortHeaderOrInterfacePortHeader) -> bool {
    let sv::NetPortHeaderOrInterfacePortHeader::NetPortHeader(header) = header else { return false };
    let (None, sv::NetPortType::DataType(ty)) = &header.nodes else { return false };
    let (None, sv::DataTypeOrImplicit::ImplicitDataType(ty)) = &ty.nodes else { return false };
    ty.nodes.0.is_none() && ty.nodes.1.is_empty()
}

/// Fills in what a header leaves out.
fn complete(header: Header, inherited: Direction, default_net: NetKind) -> (AnsiPortKind, Direction) {
    let direction = header.direction.unwrap_or(inherited);
    let net = header.net.unwrap_or_else(|| match direction {
        Direction::Input | Direction::Inout => Some(default_net),
        Direction::Output => matches!(header.ty.kind, DataTypeKind::Implicit).then_some(default_net),
        Direction::Ref => None,
    });
    (AnsiPortKind::Data { direction, net, ty: header.ty }, direction)
}

pub(super) fn direction_of(direction: &sv::PortDirection) -> Direction {
    match direction {
        sv::PortDirection::Input(_) => Direction::Input,
        sv::PortDirection::Output(_) => Direction::Output,
        sv::PortDirection::Inout(_) => Direction::Inout,
        sv::PortDirection::Ref(_) => Direction::Ref,
    }
}
