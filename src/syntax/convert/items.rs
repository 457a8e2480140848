//! Items of modules, interfaces, packages and generate blocks, and the attributes on them. Everything appends to a list,
//! since one construct of the parser may be several items of ours (`parameter A = 1, B = 2;`) or none (`;`).

use sv_parser as sv;

use super::Converter;
use super::ast::{Attribute, Attributes, Expr, Ident, Item, ItemKind, ModportPort, Process, ProcessKind};
use super::names::Scope;
use super::ports::direction_of;
use crate::source::Span;

impl Converter<'_> {
    pub(super) fn attributes(&self, instances: &[sv::AttributeInstance]) -> Attributes {
        let specs = instances.iter().flat_map(|instance| instance.nodes.1.contents());
        specs
            .map(|spec| {
                let (name, value) = &spec.nodes;
                let value = value.as_ref().map(|(_, value)| self.constant_expression(value));
                Attribute { name: self.ident(name), value }
            })
            .collect()
    }

    /// Puts attributes that stand before a construct on the items it became.
    pub(super) fn attach(&self, instances: &[sv::AttributeInstance], items: &mut [Item]) {
        if instances.is_empty() {
            return;
        }
        let attributes = self.attributes(instances);
        for item in items {
            item.attributes.splice(0..0, attributes.iter().cloned());
        }
    }

    pub(super) fn item(&self, kind: ItemKind, span: Span) -> Item {
        Item { kind, attributes: Vec::new(), span }
    }

    pub(super) fn module_item(&self, item: &sv::ModuleItem, items: &mut Vec<Item>) {
        match item {
            sv::ModuleItem::PortDeclaration(x) => items.push(self.port_item(&x.0)),
            sv::ModuleItem::NonPortModuleItem(x) => self.non_port_module_item(x, items),
        }
    }

    pub(super) fn non_port_module_item(&self, item: &sv::NonPortModuleItem, items: &mut Vec<Item>) {
        match item {
            sv::NonPortModuleItem::GenerateRegion(x) => items.push(self.generate_region(x)),
            sv::NonPortModuleItem::ModuleOrGenerateItem(x) => self.module_or_generate_item(x, items),
            sv::NonPortModuleItem::SpecifyBlock(x) => items.push(self.skipped("specify block", self.span(&**x))),
            sv::NonPortModuleItem::Specparam(x) => items.push(self.skipped("specparam", self.span(&**x))),
            sv::NonPortModuleItem::ProgramDeclaration(x) => {
                items.push(self.nested(self.program_declaration(x), self.span(&**x)));
            }
            sv::NonPortModuleItem::ModuleDeclaration(x) => {
                items.push(self.nested(self.module_declaration(x), self.span(&**x)));
            }
            sv::NonPortModuleItem::InterfaceDeclaration(x) => {
                items.push(self.nested(self.interface_declaration(x), self.span(&**x)));
            }
            sv::NonPortModuleItem::TimeunitsDeclaration(x) => items.push(self.skipped("time unit", self.span(&**x))),
        }
    }

    fn nested(&self, module: Result<super::ast::Module, Box<Item>>, span: Span) -> Item {
        match module {
            Ok(module) => self.item(ItemKind::Module(Box::new(module)), span),
            Err(item) => *item,
        }
    }

    pub(super) fn interface_item(&self, item: &sv::InterfaceItem, items: &mut Vec<Item>) {
        match item {
            sv::InterfaceItem::PortDeclaration(x) => items.push(self.port_item(&x.0)),
            sv::InterfaceItem::NonPortInterfaceItem(x) => self.non_port_interface_item(x, items),
        }
    }

    pub(super) fn non_port_interface_item(&self, item: &sv::NonPortInterfaceItem, items: &mut Vec<Item>) {
        match item {
            sv::NonPortInterfaceItem::GenerateRegion(x) => items.push(self.generate_region(x)),
            sv::NonPortInterfaceItem::InterfaceOrGenerateItem(x) => self.interface_or_generate_item(x, items),
            sv::NonPortInterfaceItem::ProgramDeclaration(x) => {
                items.push(self.nested(self.program_declaration(x), self.span(&**x)));
            }
            sv::NonPortInterfaceItem::ModportDeclaration(x) => self.modports(x, items),
            sv::NonPortInterfaceItem::InterfaceDeclaration(x) => {
                items.push(self.nested(self.interface_declaration(x), self.span(&**x)));
            }
            sv::NonPortInterfaceItem::TimeunitsDeclaration(x) => {
                items.push(self.skipped("time unit", self.span(&**x)));
            }
        }
    }

    pub(super) fn interface_or_generate_item(&self, item: &sv::InterfaceOrGenerateItem, items: &mut Vec<Item>) {
        match item {
            sv::InterfaceOrGenerateItem::Module(x) => {
                let (attributes, item) = &x.nodes;
                let start = items.len();
                self.module_common_item(item, items);
                self.attach(attributes, &mut items[start..]);
            }
            sv::InterfaceOrGenerateItem::Extern(x) => {
                items.push(self.unsupported("extern method", self.span(&**x)));
            }
        }
    }

    fn modports(&self, declaration: &sv::ModportDeclaration, items: &mut Vec<Item>) {
        for modport in declaration.nodes.1.contents() {
            let span = self.span(modport);
            let (name, list) = &modport.nodes;
            let mut ports = Vec::new();
            let mut imports = Vec::new();
            for port in list.nodes.1.contents() {
                match port {
                    sv::ModportPortsDeclaration::Simple(x) => {
                        let (direction, names) = &x.nodes.1.nodes;
                        let direction = direction_of(direction);
                        ports.extend(names.contents().into_iter().map(|port| {
                            let (name, expr) = match port {
                                sv::ModportSimplePort::Ordered(x) => (&x.nodes.0, None),
                                sv::ModportSimplePort::Named(x) => (&x.nodes.1, x.nodes.2.nodes.1.as_ref()),
                            };
                            let expr = expr.map(|expr| self.expression(expr));
                            ModportPort { direction, name: self.ident(&name.nodes.0), expr }
                        }));
                    }
                    sv::ModportPortsDeclaration::Tf(x) => {
                        let (_, declaration) = &x.nodes;
                        let (direction, subroutines) = &declaration.nodes;
                        if matches!(direction, sv::ImportExport::Export(_)) {
                            items.push(self.unsupported("task or function exported by a modport", self.span(&**x)));
                            continue;
                        }
                        imports.extend(subroutines.contents().into_iter().map(|subroutine| match subroutine {
                            sv::ModportTfPort::TfIdentifier(x) => self.ident(&x.nodes.0),
                            sv::ModportTfPort::MethodPrototype(x) => match &**x {
                                sv::MethodPrototype::TaskPrototype(x) => self.ident(&x.nodes.1.nodes.0),
                                sv::MethodPrototype::FunctionPrototype(x) => self.ident(&x.nodes.2.nodes.0),
                            },
                        }));
                    }
                    sv::ModportPortsDeclaration::Clocking(x) => {
                        items.push(self.skipped("clocking block", self.span(&**x)));
                    }
                }
            }
            items.push(self.item(ItemKind::Modport { name: self.ident(&name.nodes.0), ports, imports }, span));
        }
    }

    pub(super) fn module_or_generate_item(&self, item: &sv::ModuleOrGenerateItem, items: &mut Vec<Item>) {
        let start = items.len();
        let attributes = match item {
            sv::ModuleOrGenerateItem::Parameter(x) => {
                let (attributes, defparam) = &x.nodes;
                let assignments = defparam.nodes.1.nodes.0.contents().into_iter();
                let assignments = assignments
                    .map(|assignment| {
                        let (name, _, value) = &assignment.nodes;
                        (self.hierarchical(Scope::None, &name.nodes.0), self.constant_mintypmax(value))
                    })
                    .collect();
                items.push(self.item(ItemKind::Defparam(assignments), self.span(defparam)));
                attributes
            }
            sv::ModuleOrGenerateItem::Gate(x) => {
                items.push(self.item(self.gates(&x.nodes.1), self.span(&x.nodes.1)));
                &x.nodes.0
            }
            sv::ModuleOrGenerateItem::Udp(x) => {
                items.push(self.udp_instances(&x.nodes.1));
                &x.nodes.0
            }
            sv::ModuleOrGenerateItem::Module(x) => {
                let (name, params, instances, _) = &x.nodes.1.nodes;
                items.push(self.instances(&name.nodes.0, params, instances, self.span(&x.nodes.1)));
                &x.nodes.0
            }
            sv::ModuleOrGenerateItem::ModuleItem(x) => {
                self.module_common_item(&x.nodes.1, items);
                &x.nodes.0
            }
        };
        self.attach(attributes, &mut items[start..]);
    }

    fn module_common_item(&self, item: &sv::ModuleCommonItem, items: &mut Vec<Item>) {
        let span = self.span(item);
        match item {
            sv::ModuleCommonItem::ModuleOrGenerateItemDeclaration(x) => {
                self.module_or_generate_item_declaration(x, items);
            }
            sv::ModuleCommonItem::InterfaceInstantiation(x) => {
                let (name, params, instances, _) = &x.nodes;
                items.push(self.instances(&name.nodes.0, params, instances, span));
            }
            sv::ModuleCommonItem::ProgramInstantiation(x) => {
                let (name, params, instances, _) = &x.nodes;
                items.push(self.instances(&name.nodes.0, params, instances, span));
            }
            sv::ModuleCommonItem::AssertionItem(_) => items.push(self.skipped("assertion", span)),
            sv::ModuleCommonItem::BindDirective(x) => self.bind(x, items),
            sv::ModuleCommonItem::ContinuousAssign(x) => items.push(self.continuous_assign(x)),
            sv::ModuleCommonItem::NetAlias(x) => {
                let (_, first, _, more, _) = &x.nodes;
                let nets = std::iter::once(first).chain(more.contents()).map(|net| self.net_lvalue(net)).collect();
                items.push(self.item(ItemKind::Alias(nets), span));
            }
            sv::ModuleCommonItem::InitialConstruct(x) => items.push(self.initial(x)),
            sv::ModuleCommonItem::FinalConstruct(_) => items.push(self.skipped("final procedure", span)),
            sv::ModuleCommonItem::AlwaysConstruct(x) => items.push(self.always(x)),
            sv::ModuleCommonItem::LoopGenerateConstruct(x) => items.push(self.generate_for(x)),
            sv::ModuleCommonItem::ConditionalGenerateConstruct(x) => items.push(self.generate_conditional(x)),
            sv::ModuleCommonItem::ElaborationSystemTask(x) => {
                let name = self.text_of(&**x).to_string();
                items.push(self.item(ItemKind::ElabTask { name }, span));
            }
        }
    }

    fn module_or_generate_item_declaration(&self, item: &sv::ModuleOrGenerateItemDeclaration, items: &mut Vec<Item>) {
        let span = self.span(item);
        match item {
            sv::ModuleOrGenerateItemDeclaration::PackageOrGenerateItemDeclaration(x) => {
                self.package_or_generate_item(x, items);
            }
            sv::ModuleOrGenerateItemDeclaration::GenvarDeclaration(x) => items.push(self.genvars(x)),
            sv::ModuleOrGenerateItemDeclaration::ClockingDeclaration(_)
            | sv::ModuleOrGenerateItemDeclaration::Clocking(_) => items.push(self.skipped("clocking block", span)),
            sv::ModuleOrGenerateItemDeclaration::Disable(_) => items.push(self.skipped("assertion", span)),
        }
    }

    pub(super) fn checker_or_generate_item(&self, item: &sv::CheckerOrGenerateItem, items: &mut Vec<Item>) {
        let span = self.span(item);
        match item {
            sv::CheckerOrGenerateItem::CheckerOrGenerateItemDeclaration(x) => match &**x {
                sv::CheckerOrGenerateItemDeclaration::Data(x) => self.data_declaration(&x.nodes.1, items),
                sv::CheckerOrGenerateItemDeclaration::FunctionDeclaration(x) => items.push(self.function(x)),
                sv::CheckerOrGenerateItemDeclaration::CheckerDeclaration(x) => {
                    items.push(self.simulation("checker", &x.nodes.1.nodes.0, true, span));
                }
                sv::CheckerOrGenerateItemDeclaration::AssertionItemDeclaration(x) => {
                    items.push(self.assertion_declaration(x));
                }
                sv::CheckerOrGenerateItemDeclaration::CovergroupDeclaration(x) => {
                    items.push(self.simulation("covergroup", &x.nodes.1.nodes.0, true, span));
                }
                sv::CheckerOrGenerateItemDeclaration::GenvarDeclaration(x) => items.push(self.genvars(x)),
                sv::CheckerOrGenerateItemDeclaration::ClockingDeclaration(_)
                | sv::CheckerOrGenerateItemDeclaration::Clocking(_) => {
                    items.push(self.skipped("clocking block", span));
                }
                sv::CheckerOrGenerateItemDeclaration::Disable(_) => items.push(self.skipped("assertion", span)),
                sv::CheckerOrGenerateItemDeclaration::Empty(_) => {}
            },
            sv::CheckerOrGenerateItem::InitialConstruct(x) => items.push(self.initial(x)),
            sv::CheckerOrGenerateItem::AlwaysConstruct(x) => items.push(self.always(x)),
            sv::CheckerOrGenerateItem::FinalConstruct(_) => items.push(self.skipped("final procedure", span)),
            sv::CheckerOrGenerateItem::AssertionItem(_) => items.push(self.skipped("assertion", span)),
            sv::CheckerOrGenerateItem::ContinuousAssign(x) => items.push(self.continuous_assign(x)),
            sv::CheckerOrGenerateItem::CheckerGenerateItem(x) => match &**x {
                sv::CheckerGenerateItem::LoopGenerateConstruct(x) => items.push(self.generate_for(x)),
                sv::CheckerGenerateItem::ConditionalGenerateConstruct(x) => items.push(self.generate_conditional(x)),
                sv::CheckerGenerateItem::GenerateRegion(x) => items.push(self.generate_region(x)),
                sv::CheckerGenerateItem::ElaborationSystemTask(x) => {
                    let name = self.text_of(&**x).to_string();
                    items.push(self.item(ItemKind::ElabTask { name }, span));
                }
            },
        }
    }

    fn genvars(&self, declaration: &sv::GenvarDeclaration) -> Item {
        let names = declaration.nodes.1.nodes.0.contents();
        let names: Vec<Ident> = names.into_iter().map(|name| self.ident(&name.nodes.0)).collect();
        self.item(ItemKind::Genvar(names), self.span(declaration))
    }

    fn continuous_assign(&self, assign: &sv::ContinuousAssign) -> Item {
        let assignments: Vec<(Expr, Expr)> = match assign {
            sv::ContinuousAssign::Net(x) => {
                let (_, strength, delay, list, _) = &x.nodes;
                self.drop_timing(strength.as_ref());
                self.drop_timing(delay.as_ref());
                list.nodes.0.contents().into_iter().map(|assignment| self.net_assignment(assignment)).collect()
            }
            sv::ContinuousAssign::Variable(x) => {
                let (_, delay, list, _) = &x.nodes;
                self.drop_timing(delay.as_ref());
                let list = list.nodes.0.contents().into_iter();
                list.map(|assignment| self.variable_assignment(assignment)).map(|a| (a.target, a.value)).collect()
            }
        };
        self.item(ItemKind::Assign(assignments), self.span(assign))
    }

    fn initial(&self, initial: &sv::InitialConstruct) -> Item {
        let body = self.statement_or_null(&initial.nodes.1);
        let process = Process { kind: ProcessKind::Initial, sensitivity: None, body };
        self.item(ItemKind::Process(process), self.span(initial))
    }

    fn always(&self, always: &sv::AlwaysConstruct) -> Item {
        let (keyword, statement) = &always.nodes;
        let kind = match keyword {
            sv::AlwaysKeyword::Always(_) => ProcessKind::Always,
            sv::AlwaysKeyword::AlwaysComb(_) => ProcessKind::AlwaysComb,
            sv::AlwaysKeyword::AlwaysFf(_) => ProcessKind::AlwaysFf,
            sv::AlwaysKeyword::AlwaysLatch(_) => ProcessKind::AlwaysLatch,
        };
        let (sensitivity, body) = self.process_body(statement);
        self.item(ItemKind::Process(Process { kind, sensitivity, body }), self.span(always))
    }
}
