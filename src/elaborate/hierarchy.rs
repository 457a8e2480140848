//! The instance tree: modules with their parameters, generate constructs, instances and instance arrays. What a module
//! does is only collected here, as work to be done when all instances exist, so that hierarchical names can be resolved.

use std::collections::{BTreeMap, BTreeSet, HashMap};
use std::rc::Rc;

use super::bits::to_value;
use super::cells::CellWork;
use super::context::{Elaborator, Outcome, Storage, VariableId, unsupported, wrong};
use super::ports::{Actual, BlackBoxWork, ConnectionWork};
use super::scope::{Constant, Lazy, Scope, ScopeId, Symbol};
use super::value::Value;
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::InstanceId;
use crate::source::Span;
use crate::syntax::ast::{
    Assignment, Connection, DefaultNettype, Dim, Expr, ExprKind, GateInstance, GateType, GenBlock, GenvarInit, Ident,
    Instance, Item, ItemKind, Module, ModuleKind, ParamKind, Process,
};

/// Instances may be nested this deep.
const DEPTH_LIMIT: usize = 200;
/// So many instances, generate blocks included, may exist.
const INSTANCE_LIMIT: usize = 1_000_000;
/// A generate loop may run this often.
const GENERATE_LIMIT: usize = 1 << 17;

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
        match self.module(module, None, instance, &module.name.name, &given, &[]) {
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

    /// Elaborates one instance of a module into a scope of its own.
    fn module(
        &mut self,
        module: &'a Module,
        outer: Option<ScopeId>,
        instance: InstanceId,
        name: &str,
        overrides: &Overrides<'a>,
        connections: &[(usize, Actual<'a>)],
    ) -> Outcome<ScopeId> {
        let scope = self.add_scope(Scope {
            parent: Some(self.unit),
            outer,
            instance,
            name: name.to_string(),
            prefix: String::new(),
            names: HashMap::new(),
            wildcards: Vec::new(),
            nettype: module.default_nettype,
            module: Some(module),
            is_module: true,
        });
        self.import(scope, &module.imports)?;
        self.parameters(scope, module, outer, overrides)?;
        let before = std::mem::replace(&mut self.instance, instance);
        let outcome = self.in_scope(scope, |this| -> Outcome<()> {
            this.declare_ports(scope, module, outer, connections)?;
            this.declare_all(scope, &module.items, Storage::Variable)?;
            this.list_ports(scope, module)?;
            this.items(scope, &module.items)
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
                        overrides.insert(&name.name, value);
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
    fn items(&mut self, scope: ScopeId, items: &'a [Item]) -> Outcome<()> {
        self.defparams(scope, items)?;
        // Interfaces first: the modules that they are connected to need their names.
        for item in items {
            if let ItemKind::Instances { module, params, instances } = &item.kind
                && self.is_interface(module)
            {
                self.instances(scope, module, params, instances)?;
            }
        }
        let mut generates = 0;
        self.remaining_items(scope, items, &mut generates)
    }

    fn is_interface(&self, module: &Ident) -> bool {
        self.library.modules.get(module.name.as_str()).is_some_and(|module| module.kind == ModuleKind::Interface)
    }

    fn remaining_items(&mut self, scope: ScopeId, items: &'a [Item], generates: &mut usize) -> Outcome<()> {
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
                ItemKind::Process(process) => self.works.push(Work::Process { scope, process, span: item.span }),
                ItemKind::Instances { module, params, instances } => {
                    if !self.is_interface(module) {
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
                ItemKind::Module(module) => {
                    if module.kind == ModuleKind::Program {
                        self.skip("program");
                    } else {
                        self.report(*unsupported("module declared inside a module", module.name.span));
                    }
                }
                ItemKind::Bind { .. } => self.report(*unsupported("bind", item.span)),
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
                | ItemKind::Let { .. } => {}
            }
        }
        Ok(())
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

    fn path_text(&mut self, expr: &'a Expr) -> Outcome<String> {
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

    fn instances(
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
            let mut made: BTreeMap<i64, ScopeId> = BTreeMap::new();
            let is_array = !instance.dims.is_empty();
            for (slot, index) in slots {
                let label: String = index.iter().map(|index| format!("[{index}]")).collect();
                let label = format!("{}{label}", instance.name.name);
                let inner = self.instance(scope, name, params, instance, &label, slot)?;
                match (inner, index.as_slice()) {
                    (Some(inner), [index]) => {
                        made.insert(*index, inner);
                    }
                    (Some(inner), []) => {
                        self.declare(scope, &instance.name.name, Symbol::Scope(inner));
                    }
                    (None, []) => {
                        self.declare(scope, &instance.name.name, Symbol::Opaque);
                    }
                    _ => {}
                }
            }
            if is_array {
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
        let module = self.library.modules.get(name.name.as_str()).copied();
        let Some(module) = module else {
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
        let outcome = self.module(module, Some(scope), node, label, &overrides, &actuals);
        self.depth -= 1;
        self.here = scope;
        self.instance = parent;
        match outcome {
            Ok(inner) => {
                self.connect(scope, inner, actuals, slot);
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

/// Generate constructs.
impl<'a> Elaborator<'a> {
    fn block_name(&self, scope: ScopeId, block: &GenBlock, number: Option<usize>) -> String {
        match (&block.label, number) {
            (Some(label), _) => label.name.clone(),
            (None, Some(number)) => {
                // Leading zeros keep the name apart from a declared one.
                let mut digits = number.to_string();
                while self.scope(scope).names.contains_key(&format!("genblk{digits}")) {
                    digits.insert(0, '0');
                }
                format!("genblk{digits}")
            }
            (None, None) => String::new(),
        }
    }

    /// A generate block that stands once.
    fn block(
        &mut self,
        scope: ScopeId,
        block: &'a GenBlock,
        number: Option<usize>,
        generates: &mut usize,
    ) -> Outcome<()> {
        let name = self.block_name(scope, block, number);
        if name.is_empty() {
            self.declare_all(scope, &block.items, Storage::Variable)?;
            return self.remaining_items(scope, &block.items, generates);
        }
        let inner = self.generate_scope(scope, &name, &name, block.span)?;
        self.declare(scope, &name, Symbol::Scope(inner));
        self.block_body(inner, block)
    }

    fn generate_scope(&mut self, scope: ScopeId, name: &str, label: &str, span: Span) -> Outcome<ScopeId> {
        self.instance_count += 1;
        if self.instance_count > INSTANCE_LIMIT {
            self.exhausted = true;
            return Err(wrong(
                format!("the design has more than {INSTANCE_LIMIT} instances and generate blocks"),
                span,
            ));
        }
        let parent = self.scope(scope).instance;
        let instance = self.builder.block(parent, label, Some(span));
        Ok(self.inner_scope(scope, name, instance, String::new()))
    }

    fn block_body(&mut self, inner: ScopeId, block: &'a GenBlock) -> Outcome<()> {
        let (here, instance) = (self.here, self.instance);
        self.here = inner;
        self.instance = self.scope(inner).instance;
        let outcome =
            self.declare_all(inner, &block.items, Storage::Variable).and_then(|()| self.items(inner, &block.items));
        self.here = here;
        self.instance = instance;
        outcome
    }

    /// A generate if or case. One that stands alone in a branch of another is part of that other construct.
    fn conditional(&mut self, scope: ScopeId, item: &'a Item, number: usize) -> Outcome<()> {
        self.here = scope;
        let chosen: Option<&'a GenBlock> = match &item.kind {
            ItemKind::GenIf { cond, then, otherwise } => {
                if self.generate_condition(cond)? {
                    Some(then)
                } else {
                    otherwise.as_ref()
                }
            }
            ItemKind::GenCase { subject, arms, default } => self.generate_case(subject, arms, default.as_ref())?,
            _ => None,
        };
        let Some(block) = chosen else {
            return Ok(());
        };
        if !block.scoped
            && block.label.is_none()
            && let [inner] = block.items.as_slice()
            && matches!(inner.kind, ItemKind::GenIf { .. } | ItemKind::GenCase { .. })
        {
            return self.conditional(scope, inner, number);
        }
        if block.items.is_empty() {
            return Ok(());
        }
        self.block(scope, block, Some(number), &mut 0)
    }

    fn generate_condition(&mut self, cond: &'a Expr) -> Outcome<bool> {
        match self.constant(cond)? {
            Constant::Bits(value, _) => Ok(value.is_true()),
            Constant::Real(real) => Ok(real != 0.0),
        }
    }

    fn generate_case(
        &mut self,
        subject: &'a Expr,
        arms: &'a [(Vec<Expr>, GenBlock)],
        default: Option<&'a GenBlock>,
    ) -> Outcome<Option<&'a GenBlock>> {
        let (mut width, mut signed) = self.size(subject)?;
        for label in arms.iter().flat_map(|(labels, _)| labels) {
            let (label_width, label_signed) = self.size(label)?;
            width = width.max(label_width);
            signed &= label_signed;
        }
        let value = self.eval(subject, width, signed)?;
        let Some(value) = to_value(&value, signed) else {
            return Err(wrong("the subject of a generate case must be constant", subject.span));
        };
        for (labels, block) in arms {
            for label in labels {
                let bits = self.eval(label, width, signed)?;
                if to_value(&bits, signed).is_some_and(|label| label.bits == value.bits) {
                    return Ok(Some(block));
                }
            }
        }
        Ok(default)
    }

    fn generate_for(
        &mut self,
        scope: ScopeId,
        init: &'a GenvarInit,
        cond: &'a Expr,
        step: &'a Assignment,
        body: &'a GenBlock,
        number: usize,
    ) -> Outcome<()> {
        self.here = scope;
        let name = self.block_name(scope, body, Some(number));
        let mut value = self.constant_i64(&init.value)? as i32;
        let control = self.inner_scope(scope, "", self.scope(scope).instance, String::new());
        let lazy = self.add_lazy(control, Lazy::Constant(Constant::integer(value.into())));
        self.declare(control, &init.name.name, Symbol::Lazy(lazy));
        self.declare(scope, &name, Symbol::Scopes(Rc::new(BTreeMap::new())));
        let mut seen = BTreeSet::new();
        loop {
            if !self.in_scope(control, |this| this.generate_condition(cond))? {
                return Ok(());
            }
            if !seen.insert(value) || seen.len() > GENERATE_LIMIT {
                let message = if seen.len() > GENERATE_LIMIT {
                    format!("a generate loop that does not end within {GENERATE_LIMIT} passes")
                } else {
                    format!("a generate loop that does not end: `{}` is {value} again", init.name.name)
                };
                return Err(wrong(message, init.name.span.to(cond.span)));
            }
            let label = format!("{name}[{value}]");
            let inner = self.generate_scope(scope, &name, &label, body.span)?;
            self.declare_constant(inner, &init.name.name, Constant::integer(value.into()));
            if let Some(Symbol::Scopes(scopes)) = self.scopes[scope.index()].names.get_mut(&name) {
                Rc::make_mut(scopes).insert(value.into(), inner);
            }
            self.block_body(inner, body)?;
            self.here = scope;
            value = self.in_scope(control, |this| this.next_genvar(value, step))?;
            self.lazies[lazy.index()].1 = Lazy::Constant(Constant::integer(value.into()));
        }
    }

    fn next_genvar(&mut self, value: i32, step: &'a Assignment) -> Outcome<i32> {
        let operand = self.constant_i64(&step.value)?;
        let next = match step.op {
            None => operand,
            Some(op) => {
                let left = Value::from_i64(value.into(), 32, true);
                let right = Value::from_i64(operand, 32, true);
                Value::binary(op, &left, &right)
                    .to_i64()
                    .ok_or_else(|| wrong("a genvar that becomes unknown", step.span))?
            }
        };
        Ok(next as i32)
    }
}
