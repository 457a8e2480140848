//! What only simulation uses: variables of classes, coverage groups, events, texts, real numbers and arrays without a size,
//! and the processes that do nothing but use them. All of it is counted and passed over.
//!
//! Invariant: nothing that can reach a net is passed over. A value of such a thing in logic is an unsupported construct, and a
//! statement is left out only when it cannot assign anything else. What an initial block or a program that is left out
//! assigns is reported when nothing else drives it and something reads it.

use super::context::Elaborator;
use super::place::Base;
use super::ports::Target;
use super::scope::{ScopeId, Symbol};
use super::statement::collect_targets;
use crate::syntax::ast::{
    DataType, DataTypeKind, Dim, Direction, Expr, ExprKind, Ident, ItemKind, ModuleKind, Stmt, StmtKind, Unit,
};

impl<'a> Elaborator<'a> {
    /// Counts what stands outside of modules.
    pub fn count_skipped(&mut self, unit: &'a Unit) {
        for item in unit.items.iter().chain(unit.packages.iter().flat_map(|package| &package.items)) {
            if let ItemKind::Skipped(what) | ItemKind::Simulation { what, .. } = &item.kind {
                self.skip(what);
            }
        }
        for _ in unit.modules.iter().filter(|module| module.kind == ModuleKind::Program) {
            self.skip("program");
        }
        for item in &unit.items {
            if let ItemKind::Unsupported(what) = &item.kind {
                self.report(*super::context::unsupported(what, item.span));
            }
        }
    }

    /// What a variable of this type is, if only simulation can use it.
    pub fn simulation_variable(&self, ty: &'a DataType, dims: &[Dim]) -> Option<Symbol<'a>> {
        let symbol = |what, inert| Some(Symbol::Simulation { what, inert });
        match &ty.kind {
            DataTypeKind::Event => return symbol("event", true),
            DataTypeKind::Real => return symbol("real variable", true),
            DataTypeKind::String => return symbol("string variable", true),
            DataTypeKind::Chandle => return symbol("chandle", true),
            DataTypeKind::Unsupported(what) if matches!(what.as_str(), "virtual interface" | "class type") => {
                return symbol(what, false);
            }
            DataTypeKind::Named { package, name } => {
                let found = match package {
                    Some(package) => {
                        let scope = self.packages.get(&package.name).copied();
                        scope.and_then(|scope| self.scope(scope).names.get(&name.name).cloned())
                    }
                    None => self.find(&name.name),
                };
                match found {
                    Some(Symbol::Simulation { what: "class", .. }) => return symbol("class object", false),
                    Some(found @ Symbol::Simulation { .. }) => return Some(found),
                    // The classes that the language itself has (IEEE 1800-2017 clauses 9.7, 15.3 and 15.4).
                    None if matches!(name.name.as_str(), "mailbox" | "semaphore" | "process") => {
                        return symbol("class object", false);
                    }
                    _ => {}
                }
            }
            _ => {}
        }
        dims.iter().find(|dim| matches!(dim, Dim::Dynamic(_))).and_then(|_| symbol("dynamic array", true))
    }

    pub fn declare_simulation(&mut self, scope: ScopeId, name: &Ident, symbol: Symbol<'a>) {
        if let Symbol::Simulation { what, .. } = symbol {
            self.skip(what);
        }
        self.declare(scope, &name.name, symbol);
    }

    /// What `expr` is, when to assign or call it changes nothing that synthesises.
    pub fn inert(&self, expr: &'a Expr) -> Option<&'a str> {
        let mut expr = expr;
        let symbol = loop {
            match &expr.kind {
                ExprKind::Name(name) => break self.find(&name.name),
                ExprKind::Scoped { package, name } => {
                    let scope = self.packages.get(&package.name).copied();
                    break scope.and_then(|scope| self.scope(scope).names.get(&name.name).cloned());
                }
                ExprKind::Member(base, _) | ExprKind::Index(base, _) | ExprKind::Slice { base, .. } => expr = base,
                _ => return None,
            }
        };
        match symbol {
            Some(Symbol::Simulation { what, inert: true }) => Some(what),
            _ => None,
        }
    }
}

/// What is left out and yet gives values: processes that go on after the start, and programs.
impl<'a> Elaborator<'a> {
    /// Takes note of what an initial block assigns that is left out.
    pub fn note_simulated(&mut self, body: &'a Stmt) {
        let mut targets = Vec::new();
        collect_targets(body, &mut targets);
        for (target, _) in targets {
            let places = self.targets(target).unwrap_or_default();
            for place in places {
                if let Base::Variable(id) = place.base {
                    self.simulated.push((id, "an initial block that waits"));
                }
            }
        }
    }

    /// Takes note of the outputs of a program, whose body is left out.
    pub fn note_program_outputs(&mut self, program: ScopeId) {
        for port in self.ports.get(&program).cloned().unwrap_or_default().iter() {
            if let (Target::Variable(id), false) = (port.target, port.direction == Direction::Input) {
                self.simulated.push((id, "a program"));
            }
        }
    }
}

/// Whether a statement waits for an event or a time; without that it is over before anything changes.
pub(super) fn takes_time(statement: &Stmt) -> bool {
    match &statement.kind {
        StmtKind::Timed { .. } => true,
        StmtKind::Block { body, .. } => body.iter().any(takes_time),
        StmtKind::If { then, otherwise, .. } => takes_time(then) || otherwise.as_deref().is_some_and(takes_time),
        StmtKind::Case(case) => {
            case.arms.iter().any(|arm| takes_time(&arm.body)) || case.default.as_deref().is_some_and(takes_time)
        }
        StmtKind::For { body, .. }
        | StmtKind::Foreach { body, .. }
        | StmtKind::While { body, .. }
        | StmtKind::DoWhile { body, .. }
        | StmtKind::Repeat { body, .. }
        | StmtKind::Forever { body } => takes_time(body),
        _ => false,
    }
}

/// Whether a process with this body only prints, checks and waits, whatever it waits for.
pub(super) fn only_simulates(body: &Stmt) -> bool {
    match &body.kind {
        StmtKind::Empty | StmtKind::Skipped(_) => true,
        StmtKind::Block { decls, body, .. } => decls.is_empty() && body.iter().all(only_simulates),
        StmtKind::If { then, otherwise, .. } => only_simulates(then) && otherwise.as_deref().is_none_or(only_simulates),
        StmtKind::Case(case) => {
            case.arms.iter().all(|arm| only_simulates(&arm.body)) && case.default.as_deref().is_none_or(only_simulates)
        }
        StmtKind::Repeat { body, .. }
        | StmtKind::While { body, .. }
        | StmtKind::DoWhile { body, .. }
        | StmtKind::Forever { body }
        | StmtKind::Timed { body, .. } => only_simulates(body),
        _ => false,
    }
}
