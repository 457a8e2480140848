//! Whether each name is declared once in its scope, as IEEE 1800-2017 clause 3.13 wants. Elaboration takes the first
//! declaration of a name, so a second one would be text that nobody reads; it is reported and the run is incomplete.
//! Nets and variables of one name are not looked at here: [`super::declare`] joins them with their ports, or refuses
//! them.

use std::collections::HashMap;
use std::collections::hash_map::Entry;

use super::context::Elaborator;
use crate::diagnostic::{Diagnostic, Kind};
use crate::syntax::ast::{AnsiPortKind, DataType, DataTypeKind, Function, Ident, Item, ItemKind, Module, Param, Ports};

/// Declarations of one sort may share a name with each other where [`Sort::joins`] says so.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Sort {
    /// A net, variable or port.
    Value,
    /// An import of a name, which may be repeated.
    Import,
    Other,
}

impl Sort {
    fn joins(self, other: Self) -> bool {
        self == other && self != Self::Other
    }
}

type Declared<'a> = Vec<(&'a Ident, Sort)>;

impl<'a> Elaborator<'a> {
    /// Reports names that a module declares twice, in its own scope and in those inside it.
    pub fn check_module_names(&mut self, module: &'a Module) {
        let mut declared = Declared::new();
        declared.extend(module.params.iter().map(|param| (&param.name, Sort::Other)));
        if let Ports::Ansi(ports) = &module.ports {
            let plain = ports.iter().filter(|port| !matches!(port.kind, AnsiPortKind::Explicit { .. }));
            declared.extend(plain.map(|port| (&port.name, Sort::Value)));
        }
        self.check_items(declared, &module.items);
    }

    /// The same for the items of a package.
    pub fn check_package_names(&mut self, items: &'a [Item]) {
        self.check_items(Declared::new(), items);
    }

    fn check_items(&mut self, mut declared: Declared<'a>, items: &'a [Item]) {
        self.collect(items, &mut declared);
        self.check_once(declared);
    }

    fn check_once(&mut self, declared: Declared<'a>) {
        let mut known: HashMap<&str, (&Ident, Sort)> = HashMap::new();
        for (name, sort) in declared {
            match known.entry(&name.name) {
                Entry::Vacant(entry) => {
                    entry.insert((name, sort));
                }
                Entry::Occupied(entry) if entry.get().1.joins(sort) => {}
                Entry::Occupied(entry) => {
                    let message = format!("`{}` is declared twice, and only the first is read", name.name);
                    let diagnostic = Diagnostic::new(Kind::Incomplete, "declaration", message, Some(name.span))
                        .with_also(entry.get().0.span, "first declared here")
                        .with_help("rename one of them, or leave one out");
                    self.report(diagnostic);
                }
            }
        }
    }

    fn collect(&mut self, items: &'a [Item], declared: &mut Declared<'a>) {
        for item in items {
            match &item.kind {
                ItemKind::Function(function) | ItemKind::Task(function) => {
                    declared.push((&function.name, Sort::Other));
                    self.check_function(function);
                }
                ItemKind::Let { name, .. } | ItemKind::Modport { name, .. } => declared.push((name, Sort::Other)),
                ItemKind::Genvar(names) => declared.extend(names.iter().map(|name| (name, Sort::Other))),
                ItemKind::Param(Param { name, .. }) => declared.push((name, Sort::Other)),
                ItemKind::Typedef { name, ty: Some(ty), .. } => {
                    declared.push((name, Sort::Other));
                    enumeration_members(ty, declared);
                }
                ItemKind::Var { ty, names }
                | ItemKind::Net { ty, names, .. }
                | ItemKind::PortDecl { ty, names, .. } => {
                    declared.extend(names.iter().map(|declarator| (&declarator.name, Sort::Value)));
                    enumeration_members(ty, declared);
                }
                ItemKind::InterfacePort { names, .. } => {
                    declared.extend(names.iter().map(|declarator| (&declarator.name, Sort::Value)));
                }
                ItemKind::Import(imports) => {
                    let names = imports.iter().filter_map(|import| import.name.as_ref());
                    declared.extend(names.map(|name| (name, Sort::Import)));
                }
                ItemKind::Instances { instances, .. } => {
                    // Those of user-defined primitives need no name.
                    let named = instances.iter().filter(|instance| !instance.name.name.is_empty());
                    declared.extend(named.map(|instance| (&instance.name, Sort::Other)));
                }
                ItemKind::GenBlock(block) if !block.scoped => self.collect(&block.items, declared),
                ItemKind::GenBlock(block) | ItemKind::GenFor { body: block, .. } => {
                    self.check_items(Declared::new(), &block.items);
                }
                ItemKind::GenIf { then, otherwise, .. } => {
                    for block in [Some(then), otherwise.as_ref()].into_iter().flatten() {
                        self.check_items(Declared::new(), &block.items);
                    }
                }
                ItemKind::GenCase { arms, default, .. } => {
                    for block in arms.iter().map(|(_, block)| block).chain(default) {
                        self.check_items(Declared::new(), &block.items);
                    }
                }
                _ => {}
            }
        }
    }

    fn check_function(&mut self, function: &'a Function) {
        self.check_once(function.args.iter().map(|arg| (&arg.name, Sort::Other)).collect());
    }
}

/// The members that an enumeration brings into the scope it stands in. Those of a range of names are not spelled out.
fn enumeration_members<'a>(ty: &'a DataType, declared: &mut Declared<'a>) {
    match &ty.kind {
        DataTypeKind::Enum { members, .. } => {
            let plain = members.iter().filter(|member| member.range.is_none());
            declared.extend(plain.map(|member| (&member.name, Sort::Other)));
        }
        DataTypeKind::Struct { members, .. } => {
            for member in members {
                enumeration_members(&member.ty, declared);
            }
        }
        _ => {}
    }
}
