//! `bind`: instances that stand elsewhere in the text than in the hierarchy. A bind to a module adds its instances to
//! every instance of that module, a bind to a path to that one. They are elaborated last in their target, and their
//! connections name what the target sees. A bind that met no instance is reported, since what it would have added is
//! missing then.

use std::collections::BTreeSet;

use super::context::{Elaborator, unsupported, wrong};
use super::library;
use super::scope::ScopeId;
use crate::diagnostic::{Diagnostic, Kind};
use crate::source::Span;
use crate::syntax::ast::{Expr, ExprKind, Item, ItemKind, Module, Unit};

/// See the module documentation.
pub(super) struct Bind<'a> {
    target: Target,
    item: &'a Item,
    at: Span,
    met: bool,
}

enum Target {
    Module(String),
    /// Hierarchical names that it may mean, seen from the places where it stands.
    Paths(Vec<String>),
}

impl<'a> Elaborator<'a> {
    /// What stands outside of modules and is no declaration, and the binds to modules in modules that are reached.
    pub fn outer_items(&mut self, units: &'a [Unit], tops: &[String]) {
        for item in units.iter().flat_map(|unit| &unit.items) {
            match &item.kind {
                ItemKind::Bind { target, item: bound } => self.note_bind(target, bound, item.span, ""),
                ItemKind::Skipped(what) => self.skip(what),
                ItemKind::Unsupported(what) => self.report(*unsupported(what, item.span)),
                _ => {}
            }
        }
        let mut reached: BTreeSet<&'a str> = BTreeSet::new();
        let mut stack: Vec<&'a str> = tops
            .iter()
            .filter_map(|name| self.library.modules.get(name.as_str()))
            .map(|m| m.name.name.as_str())
            .collect();
        while let Some(name) = stack.pop() {
            if !reached.insert(name) {
                continue;
            }
            if let Some(&module) = self.library.modules.get(name) {
                let mut names = BTreeSet::new();
                library::instantiated(&module.items, &mut names);
                stack.extend(names);
            }
        }
        for module in self.library.order.clone() {
            if !reached.contains(module.name.name.as_str()) {
                continue;
            }
            for item in &module.items {
                if let ItemKind::Bind { target, item: bound } = &item.kind
                    && self.names_module(target)
                {
                    self.note_bind(target, bound, item.span, "");
                }
            }
        }
    }

    fn names_module(&self, target: &Expr) -> bool {
        matches!(&target.kind, ExprKind::Name(name) if self.library.modules.contains_key(name.name.as_str()))
    }

    /// Takes note of the binds to instances that a module holds; `path` is where it stands.
    pub fn note_inner_binds(&mut self, module: &'a Module, path: &str) {
        for item in &module.items {
            if let ItemKind::Bind { target, item: bound } = &item.kind
                && !self.names_module(target)
            {
                self.note_bind(target, bound, item.span, path);
            }
        }
    }

    fn note_bind(&mut self, target: &'a Expr, item: &'a Item, at: Span, from: &str) {
        let target = match &target.kind {
            ExprKind::Name(name) if self.names_module(target) => Target::Module(name.name.clone()),
            _ => match self.path_text(target) {
                Ok(text) => {
                    let text = text.strip_prefix("$root.").unwrap_or(&text).to_string();
                    let mut paths = vec![text.clone()];
                    if !from.is_empty() {
                        paths.push(format!("{from}.{text}"));
                    }
                    Target::Paths(paths)
                }
                Err(diagnostic) => return self.report(*diagnostic),
            },
        };
        self.binds.push(Bind { target, item, at, met: false });
    }

    /// Whether the bind at this place was found before its targets were elaborated; later it would come too late for them.
    pub fn is_noted(&self, at: Span) -> bool {
        self.binds.iter().any(|bind| bind.at == at)
    }

    /// Elaborates what is bound to an instance, which `scope` is that of.
    pub fn bound_instances(&mut self, scope: ScopeId, module: &'a Module) {
        if self.binds.is_empty() {
            return;
        }
        let path = self.scope_path(scope);
        for index in 0..self.binds.len() {
            let bind = &mut self.binds[index];
            let meets = match &bind.target {
                Target::Module(name) => *name == module.name.name,
                Target::Paths(paths) => paths.contains(&path),
            };
            if !meets {
                continue;
            }
            bind.met = true;
            match &bind.item.kind {
                ItemKind::Instances { module, params, instances } => {
                    let outcome = self.instances(scope, module, params, instances);
                    self.survive(outcome);
                }
                ItemKind::Skipped(what) => self.skip(what),
                _ => {
                    let at = bind.at;
                    self.report(*unsupported("this form of bind", at));
                }
            }
        }
    }

    /// Reports the binds that met no instance.
    pub fn unused_binds(&mut self) {
        let mut reports = Vec::new();
        for bind in self.binds.iter().filter(|bind| !bind.met) {
            match &bind.target {
                Target::Module(name) => {
                    let message = format!("no instance of `{name}` was reached, so what is bound to it is left out");
                    reports.push(Diagnostic::new(Kind::Note, "bind", message, Some(bind.at)));
                }
                Target::Paths(paths) => {
                    let path = paths.last().map_or("", String::as_str);
                    let message = format!("`bind` to `{path}`: there is neither a module nor an instance of that name");
                    reports.push(*wrong(message, bind.at));
                }
            }
        }
        self.diagnostics.extend(reports);
    }
}
