//! The instance tree: modules with their parameters, instances and instance arrays. What a module
//! does is only collected here, as work to be done when all instances exist, so that hierarchical names can be resolved.

use std::collections::{BTreeSet, HashMap, HashSet};
use std::rc::Rc;

use super::cells::CellWork;
use super::context::{Elaborator, Outcome, Storage, VariableId, unsupported, wrong};
use super::library;
use super::ports::{Actual, BlackBoxWork, ConnectionWork};
use super::scope::{Instances, Lazy, Scope, ScopeId, Symbol};
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::InstanceId;
use crate::source::Span;
use crate::syntax::ast::{
    Connection, DefaultNettype, Dim, Expr, ExprKind, GateInstance, GateType, Ident, Instance, Item, ItemKind, Module,
    ModuleKind, ParamKind, Ports, Process, ProcessKind,
};

/// Instances may be nested this deep.
const DEPTH_LIMIT: usize = 200;
/// So many instances, generate blocks included, may exist.
pub(super) const INSTANCE_LIMIT: usize = 1_000_000;

/// Something a module does.
pub(super) enum Work<'a> {
    Assign {
        scope: ScopeId,
        target: &'a Expr,
        value: &'a Expr,
    },
    /// The initialiser of a net declaration.
    NetInit {
        scope: ScopeId,
        variable: VariableId,
        value: &'a Expr,
    },
    /// The initialiser of a variable declaration.
    VariableInit {
        scope: ScopeId,
        variable: VariableId,
        value: &'a Expr,
    },
    Alias {
        scope: ScopeId,
        nets: &'a [Expr],
    },
    Process {
        scope: ScopeId,
        process: &'a Process,
        span: Span,
    },
    Gate {
        scope: ScopeId,
        gate: GateType,
        instance: &'a GateInstance,
        slot: Option<Slot>,
    },
    Primitive {
        scope: ScopeId,
        name: &'a Ident,
        instance: &'a Instance,
        slot: Option<Slot>,
    },
    Connection(ConnectionWork<'a>),
    BlackBox(BlackBoxWork<'a>),
    Cell(CellWork<'a>),
}

impl Work<'_> {
    /// The text that asks for this work; copies of it have the same.
    pub fn span(&self) -> Option<Span> {
        match self {
            Work::Assign { target, .. } => Some(target.span),
            Work::NetInit { value, .. } | Work::VariableInit { value, .. } => Some(value.span),
            Work::Alias { nets, .. } => nets.first().map(|net| net.span),
            Work::Process { span, .. } => Some(*span),
            Work::Gate { instance, .. } => Some(instance.span),
            Work::Primitive { instance, .. } => Some(instance.span),
            Work::Connection(connection) => connection.span(),
            Work::BlackBox(black_box) => Some(black_box.span()),
            Work::Cell(cell) => Some(cell.span()),
        }
    }
}

/// Which of an array of instances: its position from the right end, and how many there are.
#[derive(Clone, Copy, Debug)]
pub(super) struct Slot {
    pub position: usize,
    pub count: usize,
}

/// Parameter overrides of an instance, worked out where the instance stands.
pub(super) type Overrides<'a> = HashMap<&'a str, &'a Expr>;

impl<'a> Elaborator<'a> {
    /// Elaborates a top module.
    pub fn top(&mut self, module: &'a Module) {
        let instance = self.builder.instance(None, &module.name.name, &module.name.name, Some(module.name.span));
        let works = self.works.len();
        self.here = self.unit;
        self.depth = 0;
        let given = self.given_for(module);
        match self.module(module, None, self.unit, instance, &module.name.name, &given, &[]) {
            Ok(scope) => {
                self.tops.push((module.name.name.clone(), scope));
                self.top_ports(scope, instance);
            }
            Err(diagnostic) => {
                self.works.truncate(works);
                self.failed(module, *diagnostic);
            }
        }
    }

    /// Reports that a module could not be elaborated.
    fn failed(&mut self, module: &'a Module, mut diagnostic: Diagnostic) {
        let name = &module.name.name;
        if self.modules_failed.insert(name.clone()) {
            diagnostic.kind = Kind::Incomplete;
            diagnostic.message = format!("module `{name}` cannot be elaborated: {}", diagnostic.message);
            self.report(diagnostic);
        }
    }

    /// The module or interface of a name, and the scope that its declaration stands in: one declared in an enclosing
    /// module comes before those of all files.
    pub fn definition(&self, from: ScopeId, name: &str) -> Option<(&'a Module, ScopeId)> {
        let mut at = Some(from);
        while let Some(scope) = at {
            if let Some(&module) = self.nested.get(&scope).and_then(|nested| nested.get(name)) {
                return Some((module, scope));
            }
            at = self.scope(scope).parent;
        }
        self.library.modules.get(name).map(|&module| (module, self.unit))
    }

    /// Elaborates one instance of a module into a scope of its own. `around` is where the module is declared: the
    /// compilation unit, or the instance of the module that it is nested in.
    #[allow(clippy::too_many_arguments, reason = "what an instance is made of; a structure would only rename it")]
    pub fn module(
        &mut self,
        module: &'a Module,
        outer: Option<ScopeId>,
        around: ScopeId,
        instance: InstanceId,
        name: &str,
        overrides: &Overrides<'a>,
        connections: &[(usize, Actual<'a>)],
    ) -> Outcome<ScopeId> {
        let scope = self.add_scope(Scope {
            parent: Some(around),
            outer,
            instance,
            name: name.to_string(),
            prefix: String::new(),
            names: HashMap::new(),
            wildcards: Vec::new(),
            hidden: HashSet::new(),
            exports: Vec::new(),
            exports_all: false,
            is_modport: false,
            nettype: module.default_nettype,
            module: Some(module),
            is_module: true,
        });
        if matches!(module.ports, Ports::Wildcard) {
            return Err(unsupported("port list (.*) without an extern declaration in the same file", module.name.span));
        }
        if !self.modules_elaborated.contains(&module.name.name) {
            self.check_header(module);
            self.check_module_names(module);
        }
        self.import(scope, &module.imports)?;
        self.parameters(scope, module, outer, overrides)?;
        let before = std::mem::replace(&mut self.instance, instance);
        let outcome = self.in_scope(scope, |this| -> Outcome<()> {
            this.declare_ports(scope, module, outer, connections)?;
            this.declare_all(scope, &module.items, Storage::Variable)?;
            this.list_ports(scope, module)?;
            let path = this.scope_path(scope);
            this.note_inner_binds(module, &path);
            this.items(scope, &module.items)?;
            this.bound_instances(scope, module);
            Ok(())
        });
        self.instance = before;
        outcome?;
        self.modules_elaborated.insert(module.name.name.clone());
        Ok(scope)
    }

    /// Declares the parameters that are overridden by the instance or by `defparam`, and those of the header.
    fn parameters(
        &mut self,
        scope: ScopeId,
        module: &'a Module,
        outer: Option<ScopeId>,
        overrides: &Overrides<'a>,
    ) -> Outcome<()> {
        let path = self.scope_path(scope);
        let body = module.items.iter().filter_map(|item| match &item.kind {
            ItemKind::Param(param) => Some(param),
            _ => None,
        });
        for (param, in_header) in
            module.params.iter().map(|param| (param, true)).chain(body.map(|param| (param, false)))
        {
            let name = param.name.name.as_str();
            match &param.kind {
                ParamKind::Value { ty, dims, default } => {
                    let ty = ty.as_ref();
                    if let Some(ty) = ty {
                        self.in_scope(scope, |this| this.declare_enum_members(scope, ty))?;
                    }
                    let given = overrides.get(name).filter(|_| !param.local).copied();
                    let forced = self.overrides.get(&format!("{path}.{name}")).cloned();
                    if let Some(value) = forced {
                        self.declare_lazy(scope, name, Lazy::Override { ty, dims, value });
                    } else if let (Some(given), Some(outer)) = (given, outer) {
                        let value = if matches!(given.kind, ExprKind::Pattern { .. })
                            && let Some(ty) = ty
                        {
                            let ty = self.in_scope(scope, |this| this.declared_type(ty, dims, param.span))?;
                            self.in_scope(outer, |this| this.constant_of_type(given, ty))?
                        } else {
                            self.in_scope(outer, |this| this.constant(given))?
                        };
                        self.declare_lazy(scope, name, Lazy::Override { ty, dims, value });
                    } else if let Some(given) = given {
                        let value = self.given_value(scope, param, given)?;
                        self.declare_lazy(scope, name, Lazy::Override { ty, dims, value });
                    } else if let Some(value) = default {
                        if in_header {
                            self.declare_lazy(scope, name, Lazy::Value { ty, dims, value });
                        }
                    } else {
                        return Err(wrong(format!("parameter `{name}` has no value"), param.span));
                    }
                }
                ParamKind::Type { default } => {
                    let given = overrides.get(name).filter(|_| !param.local).copied();
                    if let (Some(given), None) = (given, outer) {
                        let ty = self.given_type(scope, name, given)?;
                        self.declare_lazy(scope, name, Lazy::DataType(ty));
                    } else if let (Some(given), Some(outer)) = (given, outer) {
                        match self.in_scope(outer, |this| this.named_type(given))? {
                            Some(ty) => self.declare_lazy(scope, name, Lazy::DataType(ty)),
                            None => return Err(wrong(format!("parameter `{name}` needs a type"), given.span)),
                        }
                    } else if let Some(ty) = default {
                        if in_header {
                            self.declare_lazy(scope, name, Lazy::Type { ty, dims: &[] });
                        }
                    } else {
                        return Err(wrong(format!("type parameter `{name}` has no type"), param.span));
                    }
                }
            }
        }
        Ok(())
    }

    /// Which expression overrides which parameter.
    fn match_overrides(&mut self, module: &'a Module, params: &'a [Connection]) -> Overrides<'a> {
        let body = module.items.iter().filter_map(|item| match &item.kind {
            ItemKind::Param(param) => Some(param),
            _ => None,
        });
        // Parameters in the body are local as soon as the header has a list.
        let all: Vec<_> = if module.params.is_empty() { body.collect() } else { module.params.iter().collect() };
        let open: Vec<&str> = all.iter().filter(|param| !param.local).map(|param| param.name.name.as_str()).collect();
        let body_names: BTreeSet<&str> = all.iter().map(|param| param.name.name.as_str()).collect();
        let mut overrides = Overrides::new();
        let mut position = 0;
        for param in params {
            match param {
                Connection::Ordered(value, span) => {
                    match (open.get(position), value) {
                        (Some(name), Some(value)) => {
                            overrides.insert(name, value);
                        }
                        (None, Some(_)) => self.report(Diagnostic::new(
                            Kind::Note,
                            "parameter override",
                            format!("`{}` has no parameter number {}", module.name.name, position + 1),
                            Some(*span),
                        )),
                        _ => {}
                    }
                    position += 1;
                }
                Connection::Named { name, value: Some(value) } => {
                    if body_names.contains(name.name.as_str()) || self.has_parameter(module, &name.name) {
                        if overrides.insert(&name.name, value).is_some() {
                            let message = format!("parameter `{}` is overridden twice here", name.name);
                            self.report(*wrong(message, name.span));
                        }
                    } else {
                        self.report(Diagnostic::new(
                            Kind::Note,
                            "parameter override",
                            format!("`{}` has no parameter `{}`", module.name.name, name.name),
                            Some(name.span),
                        ));
                    }
                }
                _ => {}
            }
        }
        overrides
    }

    fn has_parameter(&self, module: &Module, name: &str) -> bool {
        module.items.iter().any(|item| matches!(&item.kind, ItemKind::Param(param) if param.name.name == name))
    }

    /// Goes through the items of a module or generate block.
    pub fn items(&mut self, scope: ScopeId, items: &'a [Item]) -> Outcome<()> {
        self.defparams(scope, items)?;
        self.interface_instances(scope, items)?;
        let mut generates = 0;
        self.remaining_items(scope, items, &mut generates)
    }

    /// Interfaces come first: the modules that they are connected to need their names.
    fn interface_instances(&mut self, scope: ScopeId, items: &'a [Item]) -> Outcome<()> {
        for item in items {
            match &item.kind {
                ItemKind::Instances { module, params, instances } if self.is_interface(scope, module) => {
                    self.instances(scope, module, params, instances)?;
                }
                ItemKind::GenBlock(block) if !block.scoped && block.label.is_none() => {
                    self.interface_instances(scope, &block.items)?;
                }
                _ => {}
            }
        }
        Ok(())
    }

    fn is_interface(&self, scope: ScopeId, module: &Ident) -> bool {
        self.definition(scope, &module.name).is_some_and(|(module, _)| module.kind == ModuleKind::Interface)
    }

    pub fn remaining_items(&mut self, scope: ScopeId, items: &'a [Item], generates: &mut usize) -> Outcome<()> {
        for item in items {
            self.here = scope;
            self.instance = self.scope(scope).instance;
            match &item.kind {
                ItemKind::Net { names, .. } => {
                    for declarator in names {
                        if let (Some(value), Some(variable)) = (&declarator.init, self.own(scope, &declarator.name)) {
                            self.works.push(Work::NetInit { scope, variable, value });
                        }
                    }
                }
                ItemKind::Var { names, .. } | ItemKind::PortDecl { names, .. } => {
                    for declarator in names {
                        if let (Some(value), Some(variable)) = (&declarator.init, self.own(scope, &declarator.name)) {
                            self.works.push(match self.variable(variable).storage {
                                Storage::Net(_) => Work::NetInit { scope, variable, value },
                                _ => Work::VariableInit { scope, variable, value },
                            });
                        } else if let Some(variable) = self.own(scope, &declarator.name)
                            && self.variable(variable).storage == Storage::Variable
                            && self.variable(variable).init.is_none()
                        {
                            self.variables[variable.index()].init = self.variable(variable).ty.defaults();
                        }
                    }
                }
                ItemKind::Assign(assignments) => {
                    for (target, value) in assignments {
                        self.implicit_nets(scope, target)?;
                        self.works.push(Work::Assign { scope, target, value });
                    }
                }
                ItemKind::Alias(nets) => self.works.push(Work::Alias { scope, nets }),
                ItemKind::Process(process) => {
                    if process.kind != ProcessKind::Initial {
                        self.name_blocks(scope, &process.body);
                    }
                    self.works.push(Work::Process { scope, process, span: item.span });
                }
                ItemKind::Instances { module, params, instances } => {
                    if !self.is_interface(scope, module) {
                        self.instances(scope, module, params, instances)?;
                    }
                }
                ItemKind::Gates { gate, instances } => {
                    for instance in instances {
                        for terminal in &instance.terminals {
                            self.implicit_nets(scope, terminal)?;
                        }
                        for (slot, _) in self.slots(&instance.dims)? {
                            self.works.push(Work::Gate { scope, gate: *gate, instance, slot });
                        }
                    }
                }
                ItemKind::GenBlock(block) => {
                    if block.scoped {
                        self.block(scope, block, None, generates)?;
                    } else {
                        self.defparams(scope, &block.items)?;
                        self.remaining_items(scope, &block.items, generates)?;
                    }
                }
                ItemKind::GenFor { init, cond, step, body } => {
                    *generates += 1;
                    self.generate_for(scope, init, cond, step, body, *generates)?;
                }
                ItemKind::GenIf { .. } | ItemKind::GenCase { .. } => {
                    *generates += 1;
                    self.conditional(scope, item, *generates)?;
                }
                ItemKind::Module(module) if module.kind == ModuleKind::Program => self.skip("program"),
                ItemKind::Module(module) => self.implicit_instance(scope, module, items)?,
                ItemKind::Bind { .. } if self.is_noted(item.span) => {}
                ItemKind::Bind { .. } => {
                    let what = "bind in a generate region, a nested module or a module that is bound itself";
                    self.report(*unsupported(what, item.span));
                }
                ItemKind::ElabTask { name } => {
                    if matches!(name.as_str(), "$fatal" | "$error") {
                        return Err(wrong(format!("the design itself reports {name} here"), item.span));
                    }
                    self.skip(name);
                }
                // A program is counted where it is declared.
                ItemKind::Skipped(_)
                    if self.scope(scope).module.is_some_and(|module| module.kind == ModuleKind::Program) => {}
                ItemKind::Skipped(what) | ItemKind::Simulation { what, .. } => self.skip(what),
                ItemKind::Unsupported(what) => self.report(*unsupported(what, item.span)),
                ItemKind::Param(_)
                | ItemKind::Typedef { .. }
                | ItemKind::Import(_)
                | ItemKind::Export(_)
                | ItemKind::Genvar(_)
                | ItemKind::Function(_)
                | ItemKind::Task(_)
                | ItemKind::Defparam(_)
                | ItemKind::Modport { .. }
                | ItemKind::InterfacePort { .. }
                | ItemKind::Let { .. } => {}
            }
        }
        Ok(())
    }

    /// A nested module without ports that nobody instantiates stands once where it is declared (IEEE 1800-2017 clause 23.4).
    fn implicit_instance(&mut self, scope: ScopeId, module: &'a Module, items: &'a [Item]) -> Outcome<()> {
        let mut named = BTreeSet::new();
        library::instantiated_here(items, &mut named);
        let name = module.name.name.as_str();
        if module.kind != ModuleKind::Module || !library::without_ports(module) || named.contains(name) {
            return Ok(());
        }
        self.count_instance(module.name.span)?;
        let parent = self.scope(scope).instance;
        let node = self.builder.instance(Some(parent), name, name, Some(module.name.span));
        self.depth += 1;
        let outcome = self.module(module, Some(scope), scope, node, name, &Overrides::new(), &[]);
        self.depth -= 1;
        self.here = scope;
        self.instance = parent;
        let inner = outcome?;
        self.declare(scope, name, Symbol::Scope(inner));
        Ok(())
    }

    fn count_instance(&mut self, span: Span) -> Outcome<()> {
        self.instance_count += 1;
        if self.depth < DEPTH_LIMIT && self.instance_count <= INSTANCE_LIMIT {
            return Ok(());
        }
        self.exhausted = true;
        Err(wrong(format!("more than {INSTANCE_LIMIT} instances, or nested more than {DEPTH_LIMIT} deep"), span))
    }

    fn own(&self, scope: ScopeId, name: &Ident) -> Option<VariableId> {
        match self.scope(scope).names.get(&name.name) {
            Some(&Symbol::Variable(id)) => Some(id),
            _ => None,
        }
    }

    /// Undeclared names in a connection or on the left of a continuous assignment are nets of one bit.
    pub fn implicit_nets(&mut self, scope: ScopeId, expr: &'a Expr) -> Outcome<()> {
        match &expr.kind {
            ExprKind::Name(name) => {
                if self.in_scope(scope, |this| this.find(&name.name)).is_none()
                    && let DefaultNettype::Net(kind) = self.scope(scope).nettype
                {
                    self.declare_variable(scope, name, super::types::Type::scalar(), Storage::Net(kind))?;
                }
            }
            ExprKind::Concat(parts) | ExprKind::Replicate(_, parts) => {
                for part in parts {
                    self.implicit_nets(scope, part)?;
                }
            }
            ExprKind::Unary(_, operand) => self.implicit_nets(scope, operand)?,
            ExprKind::Binary(_, left, right) => {
                self.implicit_nets(scope, left)?;
                self.implicit_nets(scope, right)?;
            }
            ExprKind::Cond(condition, then, otherwise) => {
                for part in [condition, then, otherwise] {
                    self.implicit_nets(scope, part)?;
                }
            }
            _ => {}
        }
        Ok(())
    }

    /// Notes `defparam` values under the full names they may mean, seen from each enclosing scope.
    fn defparams(&mut self, scope: ScopeId, items: &'a [Item]) -> Outcome<()> {
        for item in items {
            let ItemKind::Defparam(assignments) = &item.kind else { continue };
            for (target, value) in assignments {
                let value = self.in_scope(scope, |this| this.constant(value))?;
                let path = self.in_scope(scope, |this| this.path_text(target))?;
                let mut at = Some(scope);
                while let Some(id) = at {
                    let full = format!("{}.{path}", self.scope_path(id));
                    self.overrides.insert(full, value.clone());
                    at = if self.scope(id).is_module { None } else { self.scope(id).parent };
                }
                self.overrides.insert(path, value);
            }
        }
        Ok(())
    }

    pub fn path_text(&mut self, expr: &'a Expr) -> Outcome<String> {
        match &expr.kind {
            ExprKind::Name(name) => Ok(name.name.clone()),
            ExprKind::Member(base, name) => Ok(format!("{}.{}", self.path_text(base)?, name.name)),
            ExprKind::Index(base, index) => Ok(format!("{}[{}]", self.path_text(base)?, self.constant_i64(index)?)),
            _ => Err(unsupported("this form of defparam", expr.span)),
        }
    }

    /// The elements of an instance array, the rightmost first, each with its index; one without index for no array.
    pub fn slots(&mut self, dims: &'a [Dim]) -> Outcome<Vec<(Option<Slot>, Vec<i64>)>> {
        let mut indices: Vec<Vec<i64>> = vec![Vec::new()];
        for dim in dims {
            let range = self.dimension(dim)?;
            if range.len().saturating_mul(indices.len()) > INSTANCE_LIMIT {
                let span = match dim {
                    Dim::Range(left, right) => left.span.to(right.span),
                    Dim::Size(size) => size.span,
                    Dim::Dynamic(span) => *span,
                };
                return Err(wrong(format!("an array of more than {INSTANCE_LIMIT} instances"), span));
            }
            let mut longer = Vec::new();
            for outer in &indices {
                for position in (0..range.len()).rev() {
                    let mut index = outer.clone();
                    index.push(range.index(position));
                    longer.push(index);
                }
            }
            indices = longer;
        }
        indices.reverse();
        if dims.is_empty() {
            return Ok(vec![(None, Vec::new())]);
        }
        let count = indices.len();
        Ok(indices.into_iter().enumerate().map(|(position, index)| (Some(Slot { position, count }), index)).collect())
    }

    pub fn instances(
        &mut self,
        scope: ScopeId,
        name: &'a Ident,
        params: &'a [Connection],
        instances: &'a [Instance],
    ) -> Outcome<()> {
        if let Some(Symbol::Simulation { what, .. }) = self.in_scope(scope, |this| this.find(&name.name)) {
            self.skip(what);
            return Ok(());
        }
        for instance in instances {
            for connection in &instance.connections {
                let (Connection::Ordered(Some(value), _) | Connection::Named { value: Some(value), .. }) = connection
                else {
                    continue;
                };
                self.implicit_nets(scope, value)?;
            }
            let slots = self.in_scope(scope, |this| this.slots(&instance.dims))?;
            if self.library.udps.contains_key(name.name.as_str()) {
                for (slot, _) in slots {
                    self.works.push(Work::Primitive { scope, name, instance, slot });
                }
                continue;
            }
            let mut made = Instances::default();
            let mut ascending = Vec::new();
            for dim in &instance.dims {
                ascending.push(self.in_scope(scope, |this| this.dimension(dim))?.ascending());
            }
            for (slot, index) in slots {
                let label: String = index.iter().map(|index| format!("[{index}]")).collect();
                let label = format!("{}{label}", instance.name.name);
                let inner = self.instance(scope, name, params, instance, &label, slot)?;
                let symbol = inner.map_or(Symbol::Opaque, Symbol::Scope);
                match index.as_slice() {
                    [] => {
                        self.declare(scope, &instance.name.name, symbol);
                    }
                    index => made.enter(index, &ascending, symbol),
                }
            }
            if !ascending.is_empty() {
                self.declare(scope, &instance.name.name, Symbol::Scopes(Rc::new(made)));
            }
        }
        Ok(())
    }

    /// One instance; `None` when it becomes a black box.
    fn instance(
        &mut self,
        scope: ScopeId,
        name: &'a Ident,
        params: &'a [Connection],
        instance: &'a Instance,
        label: &str,
        slot: Option<Slot>,
    ) -> Outcome<Option<ScopeId>> {
        self.instance_count += 1;
        if self.exhausted {
            return Ok(None);
        }
        let parent = self.scope(scope).instance;
        let node = self.builder.instance(Some(parent), label, &name.name, Some(instance.span));
        if let Some(model) = self.cells.declared(&name.name) {
            self.works.push(Work::Cell(CellWork::new(scope, node, model, instance, slot)));
            return Ok(None);
        }
        let Some((module, around)) = self.definition(scope, &name.name) else {
            if let Some(model) = self.library_cell(name) {
                self.works.push(Work::Cell(CellWork::new(scope, node, model, instance, slot)));
                return Ok(None);
            }
            self.works.push(Work::BlackBox(BlackBoxWork::missing(scope, node, name, instance, slot)));
            return Ok(None);
        };
        if self.depth >= DEPTH_LIMIT || self.instance_count > INSTANCE_LIMIT {
            self.exhausted = true;
            let message = if self.depth >= DEPTH_LIMIT {
                format!("instances nested more than {DEPTH_LIMIT} deep: `{}` instantiates itself", name.name)
            } else {
                format!("the design has more than {INSTANCE_LIMIT} instances")
            };
            return Err(wrong(message, instance.span));
        }
        let works = self.works.len();
        self.depth += 1;
        let actuals = self.actuals_of(scope, module, instance);
        let overrides = self.match_overrides(module, params);
        self.slot = slot;
        let outcome = self.module(module, Some(scope), around, node, label, &overrides, &actuals);
        self.depth -= 1;
        self.here = scope;
        self.instance = parent;
        match outcome {
            Ok(inner) => {
                if module.kind == ModuleKind::Program {
                    self.note_program_outputs(inner);
                }
                self.connect(module, scope, inner, actuals, slot);
                Ok(Some(inner))
            }
            // A limit ends everything; one message is enough.
            Err(diagnostic) if self.exhausted => Err(diagnostic),
            Err(diagnostic) => {
                self.works.truncate(works);
                self.failed(module, *diagnostic);
                self.works.push(Work::BlackBox(BlackBoxWork::failed(scope, node, module, name, instance, slot)));
                Ok(None)
            }
        }
    }
}
