//! Declarations of nets, variables, types, imports and the other things a package may hold. `name x;` may be a net of a
//! user-defined net type or a variable of a named type; user-defined net types are not supported, so it is a variable.

use sv_parser as sv;

use super::Converter;
use super::ast::{DataTypeKind, Declarator, Dim, Expr, Ident, Import, Item, ItemKind, NetKind};
use super::names::Scope;
use crate::source::Span;

impl Converter<'_> {
    pub(super) fn package_item(&self, item: &sv::PackageItem, items: &mut Vec<Item>) {
        let span = self.span(item);
        match item {
            sv::PackageItem::PackageOrGenerateItemDeclaration(x) => self.package_or_generate_item(x, items),
            sv::PackageItem::AnonymousProgram(_) => items.push(self.skipped("program", span)),
            sv::PackageItem::PackageExportDeclaration(x) => {
                let exports = match &**x {
                    sv::PackageExportDeclaration::Asterisk(x) => {
                        let star = Ident { name: "*".to_string(), span: self.span(&**x) };
                        vec![Import { package: star, name: None }]
                    }
                    sv::PackageExportDeclaration::Item(x) => {
                        x.nodes.1.contents().into_iter().map(|item| self.import_item(item)).collect()
                    }
                };
                items.push(self.item(ItemKind::Export(exports), span));
            }
            sv::PackageItem::TimeunitsDeclaration(_) => items.push(self.skipped("time unit", span)),
        }
    }

    pub(super) fn package_or_generate_item(&self, item: &sv::PackageOrGenerateItemDeclaration, items: &mut Vec<Item>) {
        let span = self.span(item);
        match item {
            sv::PackageOrGenerateItemDeclaration::NetDeclaration(x) => items.push(self.net_declaration(x)),
            sv::PackageOrGenerateItemDeclaration::DataDeclaration(x) => self.data_declaration(x, items),
            sv::PackageOrGenerateItemDeclaration::TaskDeclaration(x) => items.push(self.task(x)),
            sv::PackageOrGenerateItemDeclaration::FunctionDeclaration(x) => items.push(self.function(x)),
            sv::PackageOrGenerateItemDeclaration::CheckerDeclaration(x) => {
                items.push(self.simulation("checker", &x.nodes.1.nodes.0, true, span));
            }
            sv::PackageOrGenerateItemDeclaration::DpiImportExport(x) => items.push(self.dpi(x, span)),
            sv::PackageOrGenerateItemDeclaration::ClassDeclaration(x) => {
                items.push(self.simulation("class", &x.nodes.3.nodes.0, false, span));
            }
            sv::PackageOrGenerateItemDeclaration::InterfaceClassDeclaration(x) => {
                items.push(self.simulation("class", &x.nodes.2.nodes.0, false, span));
            }
            sv::PackageOrGenerateItemDeclaration::ExternConstraintDeclaration(_)
            | sv::PackageOrGenerateItemDeclaration::ClassConstructorDeclaration(_) => {
                items.push(self.skipped("class", span));
            }
            sv::PackageOrGenerateItemDeclaration::LocalParameterDeclaration(x) => {
                for param in self.local_parameter_declaration(&x.0) {
                    let span = param.span;
                    items.push(self.item(ItemKind::Param(param), span));
                }
            }
            sv::PackageOrGenerateItemDeclaration::ParameterDeclaration(x) => {
                for param in self.parameter_declaration(&x.0) {
                    let span = param.span;
                    items.push(self.item(ItemKind::Param(param), span));
                }
            }
            sv::PackageOrGenerateItemDeclaration::CovergroupDeclaration(x) => {
                items.push(self.simulation("covergroup", &x.nodes.1.nodes.0, true, span));
            }
            sv::PackageOrGenerateItemDeclaration::AssertionItemDeclaration(x) => {
                items.push(self.assertion_declaration(x));
            }
            sv::PackageOrGenerateItemDeclaration::Empty(_) => {}
        }
    }

    /// A DPI import, which declares a name, or an export, which declares none.
    fn dpi(&self, declaration: &sv::DpiImportExport, span: Span) -> Item {
        let (name, ports) = match declaration {
            sv::DpiImportExport::ImportFunction(x) => {
                let (_, _, name, ports) = &x.nodes.4.nodes.0.nodes;
                (&name.nodes.0, ports)
            }
            sv::DpiImportExport::ImportTask(x) => {
                let (_, name, ports) = &x.nodes.4.nodes.0.nodes;
                (&name.nodes.0, ports)
            }
            sv::DpiImportExport::ExportFunction(_) | sv::DpiImportExport::ExportTask(_) => {
                return self.skipped("DPI export", span);
            }
        };
        let ports = ports.as_ref().and_then(|ports| ports.nodes.1.as_ref());
        let ports = ports.map_or(Vec::new(), |ports| ports.nodes.0.contents());
        let reads = |direction: &Option<sv::TfPortDirection>| match direction {
            None => true,
            Some(sv::TfPortDirection::PortDirection(x)) => matches!(**x, sv::PortDirection::Input(_)),
            Some(sv::TfPortDirection::ConstRef(_)) => true,
        };
        let inert = ports.iter().all(|port| reads(&port.nodes.1));
        self.simulation("DPI import", name, inert, span)
    }

    pub(super) fn simulation(&self, what: &str, name: &sv::Identifier, inert: bool, span: Span) -> Item {
        self.item(ItemKind::Simulation { what: what.to_string(), name: self.ident(name), inert }, span)
    }

    pub(super) fn assertion_declaration(&self, declaration: &sv::AssertionItemDeclaration) -> Item {
        match declaration {
            sv::AssertionItemDeclaration::LetDeclaration(x) => self.let_declaration(x),
            sv::AssertionItemDeclaration::PropertyDeclaration(_)
            | sv::AssertionItemDeclaration::SequenceDeclaration(_) => self.skipped("assertion", self.span(declaration)),
        }
    }

    pub(super) fn let_declaration(&self, declaration: &sv::LetDeclaration) -> Item {
        let (_, name, ports, _, body, _) = &declaration.nodes;
        let ports = ports.as_ref().and_then(|ports| ports.nodes.1.as_ref());
        let args = ports.map_or(Vec::new(), |ports| {
            let ports = ports.nodes.0.contents().into_iter();
            ports
                .map(|port| {
                    let (_, _, name, _, default) = &port.nodes;
                    (self.ident(&name.nodes.0), default.as_ref().map(|(_, value)| self.expression(value)))
                })
                .collect()
        });
        let kind = ItemKind::Let { name: self.ident(&name.nodes.0), args, body: self.expression(body) };
        self.item(kind, self.span(declaration))
    }

    fn net_declaration(&self, declaration: &sv::NetDeclaration) -> Item {
        let span = self.span(declaration);
        let kind = match declaration {
            sv::NetDeclaration::NetType(x) => {
                let (net, strength, _, ty, delay, names, _) = &x.nodes;
                self.drop_timing(strength.as_ref());
                self.drop_timing(delay.as_ref());
                let ty = self.data_type_or_implicit(ty);
                ItemKind::Net { net: self.net_type(net), ty, names: self.net_declarators(names) }
            }
            sv::NetDeclaration::NetTypeIdentifier(x) => {
                let (ty, delay, names, _) = &x.nodes;
                self.drop_timing(delay.as_ref());
                ItemKind::Var { ty: self.named_type(Scope::None, &ty.nodes.0), names: self.net_declarators(names) }
            }
            sv::NetDeclaration::Interconnect(x) => {
                let (_, ty, _, first, dims, second, _) = &x.nodes;
                let mut names = vec![self.declarator(&first.nodes.0, self.unpacked_dims(dims))];
                names.extend(
                    second.iter().map(|(_, name, dims)| self.declarator(&name.nodes.0, self.unpacked_dims(dims))),
                );
                let mut ty = self.implicit_type(ty);
                ty.kind = DataTypeKind::Unsupported("interconnect".to_string());
                ItemKind::Net { net: NetKind::Wire, ty, names }
            }
        };
        self.item(kind, span)
    }

    fn net_declarators(&self, names: &sv::ListOfNetDeclAssignments) -> Vec<Declarator> {
        let declarator = |assignment: &sv::NetDeclAssignment| {
            let (name, dims, init) = &assignment.nodes;
            Declarator {
                init: init.as_ref().map(|(_, value)| self.expression(value)),
                ..self.declarator(&name.nodes.0, self.unpacked_dims(dims))
            }
        };
        names.nodes.0.contents().into_iter().map(declarator).collect()
    }

    pub(super) fn declarator(&self, name: &sv::Identifier, dims: Vec<Dim>) -> Declarator {
        Declarator { name: self.ident(name), dims, init: None, once: false }
    }

    pub(super) fn variable_declarators(&self, names: &sv::ListOfVariableDeclAssignments) -> Vec<Declarator> {
        names.nodes.0.contents().into_iter().map(|name| self.variable_declarator(name)).collect()
    }

    fn variable_declarator(&self, assignment: &sv::VariableDeclAssignment) -> Declarator {
        let unsupported = |what: &str, span: Span| -> Option<Expr> { Some(self.unsupported_expr(what, span)) };
        match assignment {
            sv::VariableDeclAssignment::Variable(x) => {
                let (name, dims, init) = &x.nodes;
                Declarator {
                    init: init.as_ref().map(|(_, value)| self.expression(value)),
                    ..self.declarator(&name.nodes.0, self.variable_dims(dims))
                }
            }
            sv::VariableDeclAssignment::DynamicArray(x) => {
                let (name, unsized_dim, dims, init) = &x.nodes;
                let mut all = vec![Dim::Dynamic(self.span(unsized_dim))];
                all.extend(self.variable_dims(dims));
                Declarator {
                    init: init.as_ref().and_then(|(_, new)| unsupported("dynamic array", self.span(new))),
                    ..self.declarator(&name.nodes.0.nodes.0, all)
                }
            }
            sv::VariableDeclAssignment::Class(x) => {
                let (name, (_, new)) = &x.nodes;
                Declarator {
                    init: unsupported("class object", self.span(new)),
                    ..self.declarator(&name.nodes.0.nodes.0, Vec::new())
                }
            }
        }
    }

    pub(super) fn data_declaration(&self, declaration: &sv::DataDeclaration, items: &mut Vec<Item>) {
        let span = self.span(declaration);
        let kind = match declaration {
            sv::DataDeclaration::Variable(x) => {
                let (_, _, _, ty, names, _) = &x.nodes;
                ItemKind::Var { ty: self.data_type_or_implicit(ty), names: self.variable_declarators(names) }
            }
            sv::DataDeclaration::TypeDeclaration(x) => self.typedef(x),
            sv::DataDeclaration::PackageImportDeclaration(x) => ItemKind::Import(self.imports(x)),
            sv::DataDeclaration::NetTypeDeclaration(x) => self.net_type_declaration(x),
        };
        items.push(self.item(kind, span));
    }

    /// A user-defined net type. Without a resolution function it is nothing but its data type, with at most one driver.
    fn net_type_declaration(&self, declaration: &sv::NetTypeDeclaration) -> ItemKind {
        match declaration {
            sv::NetTypeDeclaration::DataType(x) => {
                let (_, ty, name, resolution, _) = &x.nodes;
                if resolution.is_some() {
                    return ItemKind::Unsupported("net type with a resolution function".to_string());
                }
                let name = self.ident(&name.nodes.0);
                ItemKind::Typedef { name, ty: Some(self.data_type(ty)), dims: Vec::new() }
            }
            sv::NetTypeDeclaration::NetType(x) => {
                let (_, scope, known, name, _) = &x.nodes;
                let ty = self.named_type(self.package_or_class(scope), &known.nodes.0);
                ItemKind::Typedef { name: self.ident(&name.nodes.0), ty: Some(ty), dims: Vec::new() }
            }
        }
    }

    fn typedef(&self, declaration: &sv::TypeDeclaration) -> ItemKind {
        match declaration {
            sv::TypeDeclaration::DataType(x) => {
                let (_, ty, name, dims, _) = &x.nodes;
                let dims = self.variable_dims(dims);
                ItemKind::Typedef { name: self.ident(&name.nodes.0), ty: Some(self.data_type(ty)), dims }
            }
            sv::TypeDeclaration::Interface(x) => {
                let (_, port, select, _, ty, name, _) = &x.nodes;
                let base = self.constant_bit_select(self.name_expr(&port.nodes.0), select);
                let named = super::names::member(base, self.ident(&ty.nodes.0));
                let span = named.span;
                let ty = self.plain_type(DataTypeKind::TypeOf(Box::new(named)), span);
                ItemKind::Typedef { name: self.ident(&name.nodes.0), ty: Some(ty), dims: Vec::new() }
            }
            sv::TypeDeclaration::Reserved(x) => {
                ItemKind::Typedef { name: self.ident(&x.nodes.2.nodes.0), ty: None, dims: Vec::new() }
            }
        }
    }

    pub(super) fn imports(&self, declaration: &sv::PackageImportDeclaration) -> Vec<Import> {
        declaration.nodes.1.contents().into_iter().map(|item| self.import_item(item)).collect()
    }

    fn import_item(&self, item: &sv::PackageImportItem) -> Import {
        match item {
            sv::PackageImportItem::Identifier(x) => {
                let (package, _, name) = &x.nodes;
                Import { package: self.ident(&package.nodes.0), name: Some(self.ident(name)) }
            }
            sv::PackageImportItem::Asterisk(x) => Import { package: self.ident(&x.nodes.0.nodes.0), name: None },
        }
    }

    /// Declarations at the head of a block, a task or a function.
    pub(super) fn block_item(&self, declaration: &sv::BlockItemDeclaration, items: &mut Vec<Item>) {
        let start = items.len();
        let attributes = match declaration {
            sv::BlockItemDeclaration::Data(x) => {
                let (attributes, declaration) = &x.nodes;
                self.data_declaration(declaration, items);
                if self.initialised_once(declaration) {
                    for item in &mut items[start..] {
                        if let ItemKind::Var { names, .. } = &mut item.kind {
                            names.iter_mut().for_each(|declarator| declarator.once = true);
                        }
                    }
                }
                attributes
            }
            sv::BlockItemDeclaration::LocalParameter(x) => {
                for param in self.local_parameter_declaration(&x.nodes.1) {
                    let span = param.span;
                    items.push(self.item(ItemKind::Param(param), span));
                }
                &x.nodes.0
            }
            sv::BlockItemDeclaration::Parameter(x) => {
                for param in self.parameter_declaration(&x.nodes.1) {
                    let span = param.span;
                    items.push(self.item(ItemKind::Param(param), span));
                }
                &x.nodes.0
            }
            sv::BlockItemDeclaration::Let(x) => {
                items.push(self.let_declaration(&x.nodes.1));
                &x.nodes.0
            }
        };
        self.attach(attributes, &mut items[start..]);
    }

    /// Whether a variable of a block takes its initial value once, before time zero, and not each time the block runs
    /// (IEEE 1800-2017 clause 6.21).
    fn initialised_once(&self, declaration: &sv::DataDeclaration) -> bool {
        let sv::DataDeclaration::Variable(x) = declaration else { return false };
        let (_, _, lifetime, _, names, _) = &x.nodes;
        let automatic = match lifetime {
            Some(sv::Lifetime::Automatic(_)) => true,
            Some(sv::Lifetime::Static(_)) => false,
            None => self.automatic.get(),
        };
        let initialised = |name: &&sv::VariableDeclAssignment| match name {
            sv::VariableDeclAssignment::Variable(x) => x.nodes.2.is_some(),
            sv::VariableDeclAssignment::DynamicArray(_) | sv::VariableDeclAssignment::Class(_) => true,
        };
        !automatic && names.nodes.0.contents().iter().any(initialised)
    }
}
