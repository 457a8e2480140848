//! The modules, packages and primitives of all compilation units by name, and which modules are tops. Of several with
//! one name the first in the order of the units is used; the others are named in a note.

use std::collections::{BTreeMap, BTreeSet, HashMap};

use crate::diagnostic::{Diagnostic, Kind, Missing};
use crate::source::Span;
use crate::syntax::ast::{Expr, ExprKind, Item, ItemKind, Module, ModuleKind, Package, Ports, Udp, Unit};

#[derive(Default)]
pub(super) struct Library<'a> {
    pub modules: HashMap<&'a str, &'a Module>,
    pub packages: HashMap<&'a str, &'a Package>,
    pub udps: HashMap<&'a str, &'a Udp>,
    /// Modules in source order, without the duplicates.
    pub order: Vec<&'a Module>,
    /// `bind` outside of modules: the target and what is bound.
    binds: Vec<(&'a Expr, &'a Item)>,
}

/// The tops, and what was left out.
pub(super) struct Tops {
    pub tops: Vec<String>,
    pub benches: Vec<String>,
}

impl<'a> Library<'a> {
    pub fn new(units: &'a [Unit], diagnostics: &mut Vec<Diagnostic>) -> Self {
        let mut library = Self::default();
        let mut duplicate = |what: &str, name: &str, at: Span, first: Span| {
            let message = format!("{what} `{name}` is declared more than once; the first one in path order is used");
            diagnostics
                .push(Diagnostic::new(Kind::Note, "duplicate declaration", message, Some(at)).with_also(first, "used"));
        };
        for unit in units {
            for item in &unit.items {
                if let ItemKind::Bind { target, item } = &item.kind {
                    library.binds.push((target, item));
                }
            }
            for module in &unit.modules {
                let name = module.name.name.as_str();
                match library.modules.get(name) {
                    Some(first) => duplicate("module", name, module.name.span, first.name.span),
                    None => {
                        library.modules.insert(name, module);
                        library.order.push(module);
                    }
                }
            }
            for package in &unit.packages {
                let name = package.name.name.as_str();
                match library.packages.get(name) {
                    Some(first) => duplicate("package", name, package.name.span, first.name.span),
                    None => {
                        library.packages.insert(name, package);
                    }
                }
            }
            for udp in &unit.udps {
                let name = udp.name.name.as_str();
                match library.udps.get(name) {
                    Some(first) => duplicate("primitive", name, udp.name.span, first.name.span),
                    None => {
                        library.udps.insert(name, udp);
                    }
                }
            }
        }
        library
    }

    /// The tops asked for, or every module that no other one instantiates. A module without ports that nobody
    /// instantiates is a bench: it is left out, and what only benches instantiate counts as not instantiated.
    pub fn tops(&self, asked: &[String], diagnostics: &mut Vec<Diagnostic>) -> Tops {
        if !asked.is_empty() {
            let mut tops = Vec::new();
            for name in asked {
                if self.modules.contains_key(name.as_str()) {
                    if !tops.contains(name) {
                        tops.push(name.clone());
                    }
                } else {
                    let message = format!("there is no module `{name}` to be the top");
                    let diagnostic = Diagnostic::new(Kind::Incomplete, "top module", message, None);
                    diagnostics.push(diagnostic.about_missing(Missing::Module(name.clone())));
                }
            }
            return Tops { tops, benches: Vec::new() };
        }
        let mut parents: BTreeMap<&str, BTreeSet<&str>> = BTreeMap::new();
        for module in &self.order {
            let name = module.name.name.as_str();
            let mut children = BTreeSet::new();
            instantiated(&module.items, &mut children);
            for child in children {
                if child != name && self.modules.contains_key(child) {
                    parents.entry(child).or_default().insert(name);
                }
            }
        }
        for (target, item) in &self.binds {
            let mut children = BTreeSet::new();
            instantiated(std::slice::from_ref(*item), &mut children);
            let name = first_name(target);
            for child in children {
                if child != name && self.modules.contains_key(child) {
                    parents.entry(child).or_default().insert(name);
                }
            }
        }
        let candidates = || self.order.iter().filter(|module| module.kind == ModuleKind::Module);
        let mut benches: BTreeSet<&str> = BTreeSet::new();
        let free = |name: &str, benches: &BTreeSet<&str>| {
            parents.get(name).is_none_or(|parents| parents.iter().all(|parent| benches.contains(parent)))
        };
        loop {
            let before = benches.len();
            for module in candidates() {
                let name = module.name.name.as_str();
                if without_ports(module) && free(name, &benches) {
                    benches.insert(name);
                }
            }
            if benches.len() == before {
                break;
            }
        }
        let tops: Vec<String> = candidates()
            .map(|module| module.name.name.as_str())
            .filter(|name| !benches.contains(name) && free(name, &benches))
            .map(str::to_string)
            .collect();
        if tops.is_empty() && candidates().any(|module| !benches.contains(module.name.name.as_str())) {
            let message = "no top module: every module is instantiated by another one";
            diagnostics.push(
                Diagnostic::new(Kind::Incomplete, "top module", message, None)
                    .with_help("name the top with `--top NAME`"),
            );
        }
        let benches = candidates().map(|module| &module.name.name).filter(|name| benches.contains(name.as_str()));
        Tops { tops, benches: benches.cloned().collect() }
    }
}

/// The first name of a path.
fn first_name(expr: &Expr) -> &str {
    match &expr.kind {
        ExprKind::Name(name) => &name.name,
        ExprKind::Member(base, _) | ExprKind::Index(base, _) => first_name(base),
        _ => "",
    }
}

pub(super) fn without_ports(module: &Module) -> bool {
    match &module.ports {
        Ports::Ansi(ports) => ports.is_empty(),
        Ports::NonAnsi(ports) => ports.is_empty(),
        Ports::Wildcard => false,
        Ports::None => true,
    }
}

/// The names of all modules that `items` instantiate, those declared among them left out.
pub(super) fn instantiated<'a>(items: &'a [Item], names: &mut BTreeSet<&'a str>) {
    let mut found = BTreeSet::new();
    let mut nested = BTreeSet::new();
    for item in items {
        if let ItemKind::Module(module) = &item.kind {
            nested.insert(module.name.name.as_str());
            instantiated(&module.items, &mut found);
        }
    }
    instantiated_here(items, &mut found);
    names.extend(found.difference(&nested));
}

/// Likewise, without what nested modules instantiate.
pub(super) fn instantiated_here<'a>(items: &'a [Item], names: &mut BTreeSet<&'a str>) {
    for item in items {
        match &item.kind {
            ItemKind::Bind { item, .. } => instantiated_here(std::slice::from_ref(item), names),
            ItemKind::Instances { module, .. } => {
                names.insert(&module.name);
            }
            ItemKind::GenBlock(block) | ItemKind::GenFor { body: block, .. } => instantiated_here(&block.items, names),
            ItemKind::GenIf { then, otherwise, .. } => {
                instantiated_here(&then.items, names);
                if let Some(otherwise) = otherwise {
                    instantiated_here(&otherwise.items, names);
                }
            }
            ItemKind::GenCase { arms, default, .. } => {
                arms.iter().for_each(|(_, block)| instantiated_here(&block.items, names));
                if let Some(default) = default {
                    instantiated_here(&default.items, names);
                }
            }
            _ => {}
        }
    }
}
