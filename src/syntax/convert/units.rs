//! Design units: modules, interfaces, programs, packages, and what stands beside them in a file. The body of a program is
//! for simulation only.

use sv_parser as sv;

use super::Converter;
use super::ast::{Attributes, DefaultNettype, Ident, Item, ItemKind, Module, ModuleKind, Package, Ports, Unit};
use crate::source::Span;

/// The parts that the headers of modules, interfaces and programs share.
struct Header {
    kind: ModuleKind,
    attributes: Attributes,
    name: Ident,
    default_nettype: DefaultNettype,
    imports: Vec<super::ast::Import>,
    params: Vec<super::ast::Param>,
    ports: Ports,
}

/// Builds a [`Header`] from the fields that the ANSI headers have in common.
macro_rules! ansi_header {
    ($self:ident, $kind:expr, $header:expr) => {{
        let (attributes, keyword, _, name, imports, params, ports, _) = &$header.nodes;
        let default_nettype = $self.default_nettype_at($self.offset(keyword));
        Header {
            kind: $kind,
            attributes: $self.attributes(attributes),
            name: $self.ident(&name.nodes.0),
            default_nettype,
            imports: imports.iter().flat_map(|import| $self.imports(import)).collect(),
            params: $self.header_params(params),
            ports: $self.ansi_ports(ports, default_nettype),
        }
    }};
}

macro_rules! nonansi_header {
    ($self:ident, $kind:expr, $header:expr) => {{
        let (attributes, keyword, _, name, imports, params, ports, _) = &$header.nodes;
        Header {
            kind: $kind,
            attributes: $self.attributes(attributes),
            name: $self.ident(&name.nodes.0),
            default_nettype: $self.default_nettype_at($self.offset(keyword)),
            imports: imports.iter().flat_map(|import| $self.imports(import)).collect(),
            params: $self.header_params(params),
            ports: $self.nonansi_ports(ports),
        }
    }};
}

impl Converter<'_> {
    pub(super) fn source_text(&self, source: &sv::SourceText, unit: &mut Unit) {
        let (_, timeunits, descriptions) = &source.nodes;
        if let Some(timeunits) = timeunits {
            unit.items.push(self.skipped("time unit", self.span(timeunits)));
        }
        for description in descriptions {
            self.description(description, unit);
        }
    }

    fn description(&self, description: &sv::Description, unit: &mut Unit) {
        let span = self.span(description);
        match description {
            // Directives are read from the tokens, wherever they stand.
            sv::Description::ResetallCompilerDirective(_) => {}
            sv::Description::ModuleDeclaration(x) => match self.module_declaration(x) {
                Ok(module) => unit.modules.push(module),
                Err(item) => unit.items.push(*item),
            },
            sv::Description::InterfaceDeclaration(x) => match self.interface_declaration(x) {
                Ok(module) => unit.modules.push(module),
                Err(item) => unit.items.push(*item),
            },
            sv::Description::ProgramDeclaration(x) => match self.program_declaration(x) {
                Ok(module) => unit.modules.push(module),
                Err(item) => unit.items.push(*item),
            },
            sv::Description::UdpDeclaration(x) => match self.udp_declaration(x) {
                Ok(udp) => unit.udps.push(udp),
                Err(item) => unit.items.push(*item),
            },
            sv::Description::InterfaceClassDeclaration(x) => {
                unit.items.push(self.simulation("class", &x.nodes.2.nodes.0, false, span));
            }
            sv::Description::PackageDeclaration(x) => unit.packages.push(self.package(x)),
            sv::Description::PackageItem(x) => {
                let (attributes, item) = &x.nodes;
                let start = unit.items.len();
                self.package_item(item, &mut unit.items);
                self.attach(attributes, &mut unit.items[start..]);
            }
            sv::Description::BindDirective(x) => {
                let (attributes, bind) = &x.nodes;
                let start = unit.items.len();
                self.bind(bind, &mut unit.items);
                self.attach(attributes, &mut unit.items[start..]);
            }
            sv::Description::ConfigDeclaration(_) => unit.items.push(self.unsupported("configuration", span)),
        }
    }

    /// A module, or the item that says why it is none (`extern module`).
    pub(super) fn module_declaration(&self, declaration: &sv::ModuleDeclaration) -> Result<Module, Box<Item>> {
        let span = self.span(declaration);
        let mut items = Vec::new();
        let header = match declaration {
            sv::ModuleDeclaration::Ansi(x) => {
                let (header, timeunits, body, _, _) = &x.nodes;
                self.timeunits(timeunits, &mut items);
                body.iter().for_each(|item| self.non_port_module_item(item, &mut items));
                ansi_header!(self, ModuleKind::Module, header)
            }
            sv::ModuleDeclaration::Nonansi(x) => {
                let (header, timeunits, body, _, _) = &x.nodes;
                self.timeunits(timeunits, &mut items);
                body.iter().for_each(|item| self.module_item(item, &mut items));
                nonansi_header!(self, ModuleKind::Module, header)
            }
            sv::ModuleDeclaration::Wildcard(x) => {
                let (attributes, _, _, name, _, _, timeunits, body, _, _) = &x.nodes;
                self.timeunits(timeunits, &mut items);
                body.iter().for_each(|item| self.module_item(item, &mut items));
                self.wildcard_header(ModuleKind::Module, attributes, &name.nodes.0)
            }
            sv::ModuleDeclaration::ExternAnsi(x) => {
                return Err(self.declared_outside(ansi_header!(self, ModuleKind::Module, x.nodes.1), span));
            }
            sv::ModuleDeclaration::ExternNonansi(x) => {
                return Err(self.declared_outside(nonansi_header!(self, ModuleKind::Module, x.nodes.1), span));
            }
        };
        Ok(assemble(header, items, span))
    }

    pub(super) fn interface_declaration(&self, declaration: &sv::InterfaceDeclaration) -> Result<Module, Box<Item>> {
        let span = self.span(declaration);
        let mut items = Vec::new();
        let header = match declaration {
            sv::InterfaceDeclaration::Ansi(x) => {
                let (header, timeunits, body, _, _) = &x.nodes;
                self.timeunits(timeunits, &mut items);
                body.iter().for_each(|item| self.non_port_interface_item(item, &mut items));
                ansi_header!(self, ModuleKind::Interface, header)
            }
            sv::InterfaceDeclaration::Nonansi(x) => {
                let (header, timeunits, body, _, _) = &x.nodes;
                self.timeunits(timeunits, &mut items);
                body.iter().for_each(|item| self.interface_item(item, &mut items));
                nonansi_header!(self, ModuleKind::Interface, header)
            }
            sv::InterfaceDeclaration::Wildcard(x) => {
                let (attributes, _, _, name, _, _, timeunits, body, _, _) = &x.nodes;
                self.timeunits(timeunits, &mut items);
                body.iter().for_each(|item| self.interface_item(item, &mut items));
                self.wildcard_header(ModuleKind::Interface, attributes, &name.nodes.0)
            }
            sv::InterfaceDeclaration::ExternAnsi(x) => {
                return Err(self.declared_outside(ansi_header!(self, ModuleKind::Interface, x.nodes.1), span));
            }
            sv::InterfaceDeclaration::ExternNonansi(x) => {
                return Err(self.declared_outside(nonansi_header!(self, ModuleKind::Interface, x.nodes.1), span));
            }
        };
        Ok(assemble(header, items, span))
    }

    pub(super) fn program_declaration(&self, declaration: &sv::ProgramDeclaration) -> Result<Module, Box<Item>> {
        let span = self.span(declaration);
        let mut items = vec![self.skipped("program", span)];
        let header = match declaration {
            sv::ProgramDeclaration::Ansi(x) => ansi_header!(self, ModuleKind::Program, x.nodes.0),
            sv::ProgramDeclaration::Nonansi(x) => {
                for item in &x.nodes.2 {
                    if let sv::ProgramItem::PortDeclaration(port) = item {
                        items.push(self.port_item(&port.0));
                    }
                }
                nonansi_header!(self, ModuleKind::Program, x.nodes.0)
            }
            sv::ProgramDeclaration::Wildcard(x) => {
                let (attributes, _, name, ..) = &x.nodes;
                self.wildcard_header(ModuleKind::Program, attributes, &name.nodes.0)
            }
            sv::ProgramDeclaration::ExternAnsi(_) | sv::ProgramDeclaration::ExternNonansi(_) => {
                return Err(Box::new(self.skipped("extern program declaration", span)));
            }
        };
        Ok(assemble(header, items, span))
    }

    /// Keeps the header of an `extern` declaration. The item says only that it was there.
    fn declared_outside(&self, header: Header, span: Span) -> Box<Item> {
        self.externs.borrow_mut().push(assemble(header, Vec::new(), span));
        Box::new(self.skipped("extern declaration", span))
    }

    /// `module m (.*);`, whose ports an extern declaration of the same file gives; that may be in another part of it.
    fn wildcard_header(&self, kind: ModuleKind, attributes: &[sv::AttributeInstance], name: &sv::Identifier) -> Header {
        Header {
            kind,
            attributes: self.attributes(attributes),
            name: self.ident(name),
            default_nettype: self.default_nettype_at(self.offset(name)),
            imports: Vec::new(),
            params: Vec::new(),
            ports: Ports::Wildcard,
        }
    }

    fn timeunits(&self, timeunits: &Option<sv::TimeunitsDeclaration>, items: &mut Vec<Item>) {
        if let Some(timeunits) = timeunits {
            items.push(self.skipped("time unit", self.span(timeunits)));
        }
    }

    fn package(&self, package: &sv::PackageDeclaration) -> Package {
        let (_, _, _, name, _, timeunits, body, _, _) = &package.nodes;
        let mut items = Vec::new();
        self.timeunits(timeunits, &mut items);
        for (attributes, item) in body {
            let start = items.len();
            self.package_item(item, &mut items);
            self.attach(attributes, &mut items[start..]);
        }
        Package { name: self.ident(&name.nodes.0), span: self.span(package), items }
    }

    /// A port declaration of a body.
    pub(super) fn port_item(&self, declaration: &sv::PortDeclaration) -> Item {
        let (attributes, kind) = self.port_declaration(declaration);
        Item { kind, attributes, span: self.span(declaration) }
    }

    pub(super) fn skipped(&self, what: &str, span: Span) -> Item {
        Item { kind: ItemKind::Skipped(what.to_string()), attributes: Vec::new(), span }
    }

    pub(super) fn unsupported(&self, what: &str, span: Span) -> Item {
        Item { kind: ItemKind::Unsupported(what.to_string()), attributes: Vec::new(), span }
    }
}

fn assemble(header: Header, items: Vec<Item>, span: Span) -> Module {
    let Header { kind, attributes, name, default_nettype, imports, params, ports } = header;
    Module { kind, name, span, attributes, default_nettype, imports, params, ports, items }
}
