//! Declarations: enters the names of a scope and lays out its nets and variables. Names that are worked out on first use
//! come first, so that a net may use a function or parameter that stands below it.

use std::collections::{HashMap, HashSet};
use std::rc::Rc;

use super::bits::Bit;
use super::context::{Elaborator, Outcome, Storage, Variable, VariableId, unsupported, wrong};
use super::place::MAX_MEMORY;
use super::scope::{Lazy, LazyId, ScopeId, Symbol};
use super::types::Type;
use crate::diagnostic::{Diagnostic, Kind, Missing};
use crate::graph::{InstanceId, NetId};
use crate::source::Span;
use crate::syntax::ast::{
    DataType, DataTypeKind, Declarator, Dim, Ident, Import, Item, ItemKind, NetKind, Package, Param, ParamKind,
};

/// The widest net or variable that is laid out bit by bit. IEEE 1800-2017, 6.9.1, asks for 65,536 at least; a bit takes
/// some 250 bytes, and one of an adder 20 microseconds.
const MAX_LAID_OUT: usize = 1 << 18;

/// The graph is not built beyond this many nodes.
pub(super) const NODE_LIMIT: usize = 60_000_000;

/// The declaration of a variable beside that of the port of the same name.
struct Body<'a> {
    ty: &'a DataType,
    declarator: &'a Declarator,
    net: Option<NetKind>,
}

impl<'a> Elaborator<'a> {
    pub fn import(&mut self, scope: ScopeId, imports: &'a [Import]) -> Outcome<()> {
        for import in imports {
            let package = self.package(&import.package)?;
            match &import.name {
                None => {
                    if !self.scope(scope).wildcards.contains(&package) {
                        self.scopes[scope.index()].wildcards.push(package);
                    }
                }
                Some(name) => {
                    let symbol = self.look_up_in_package(&import.package, name)?;
                    if self.declare(scope, &name.name, symbol) {
                        self.scopes[scope.index()].hidden.insert(name.name.clone());
                    }
                }
            }
        }
        Ok(())
    }

    /// The scope of a package, made when it is first used.
    pub fn package(&mut self, name: &Ident) -> Outcome<ScopeId> {
        if let Some(&scope) = self.packages.get(&name.name) {
            return Ok(scope);
        }
        let Some(&package) = self.library.packages.get(name.name.as_str()) else {
            let missing = wrong(format!("there is no package `{}`", name.name), name.span);
            return Err(Box::new(missing.about_missing(Missing::Package(name.name.clone()))));
        };
        let package: &'a Package = package;
        let scope = self.inner_scope(self.unit, &name.name, self.instance, format!("{}::", name.name));
        self.packages.insert(name.name.clone(), scope);
        self.check_package_names(&package.items);
        self.declare_all(scope, &package.items, Storage::Package)?;
        Ok(scope)
    }

    /// Enters everything that `items` declare. `home` is the storage of their variables; only [`Storage::Variable`] has wires.
    pub fn declare_all(&mut self, scope: ScopeId, items: &'a [Item], home: Storage) -> Outcome<()> {
        for item in items {
            match &item.kind {
                ItemKind::Import(imports) => self.import(scope, imports)?,
                ItemKind::Export(exports) => self.export(scope, exports)?,
                ItemKind::Function(function) | ItemKind::Task(function) => {
                    self.declare(scope, &function.name.name, Symbol::Function(function, scope));
                }
                ItemKind::Let { name, .. } => {
                    self.declare(scope, &name.name, Symbol::Let(item, scope));
                }
                ItemKind::Genvar(names) => {
                    for name in names {
                        self.declare(scope, &name.name, Symbol::Genvar);
                    }
                }
                ItemKind::Param(param) => self.declare_parameter(scope, param)?,
                ItemKind::Typedef { name, ty: Some(ty), dims } => {
                    self.declare_lazy(scope, &name.name, Lazy::Type { ty, dims });
                    self.in_scope(scope, |this| this.declare_enum_members(scope, ty))?;
                }
                ItemKind::Var { ty, .. } | ItemKind::Net { ty, .. } | ItemKind::PortDecl { ty, .. } => {
                    self.in_scope(scope, |this| this.declare_enum_members(scope, ty))?;
                }
                ItemKind::GenBlock(block) if !block.scoped => self.declare_all(scope, &block.items, home)?,
                ItemKind::Module(module) => {
                    self.nested.entry(scope).or_default().insert(&module.name.name, module);
                }
                ItemKind::Simulation { what, name, inert } => {
                    self.declare(scope, &name.name, Symbol::Simulation { what, inert: *inert });
                }
                _ => {}
            }
        }
        self.in_scope(scope, |this| this.declare_variables(scope, items, home))?;
        for item in items {
            if let ItemKind::Modport { name, ports, imports } = &item.kind {
                self.declare_modport(scope, name, ports, imports);
            }
        }
        Ok(())
    }

    /// Makes a package offer names that it imported.
    fn export(&mut self, scope: ScopeId, exports: &'a [Import]) -> Outcome<()> {
        for export in exports {
            if export.package.name == "*" {
                self.scopes[scope.index()].exports_all = true;
                continue;
            }
            let package = self.package(&export.package)?;
            match &export.name {
                None => self.scopes[scope.index()].exports.push(package),
                Some(name) => {
                    let symbol = self.look_up_in_package(&export.package, name)?;
                    self.declare(scope, &name.name, symbol);
                    self.scopes[scope.index()].hidden.remove(&name.name);
                }
            }
        }
        Ok(())
    }

    fn declare_parameter(&mut self, scope: ScopeId, param: &'a Param) -> Outcome<()> {
        match &param.kind {
            ParamKind::Value { ty, dims, default } => {
                if let Some(ty) = ty {
                    self.in_scope(scope, |this| this.declare_enum_members(scope, ty))?;
                }
                if let Some(value) = default {
                    self.declare_lazy(scope, &param.name.name, Lazy::Value { ty: ty.as_ref(), dims, value });
                }
            }
            ParamKind::Type { default: Some(ty) } => {
                self.declare_lazy(scope, &param.name.name, Lazy::Type { ty, dims: &[] });
            }
            ParamKind::Type { default: None } => {}
        }
        Ok(())
    }

    fn declare_variables(&mut self, scope: ScopeId, items: &'a [Item], home: Storage) -> Outcome<()> {
        let has_ports = items.iter().any(|item| matches!(item.kind, ItemKind::PortDecl { .. }));
        let mut bodies: HashMap<&str, Body<'a>> = HashMap::new();
        if has_ports {
            for item in items {
                let (ty, names, net) = match &item.kind {
                    ItemKind::Var { ty, names } => (ty, names, None),
                    ItemKind::Net { net, ty, names } => (ty, names, Some(*net)),
                    _ => continue,
                };
                for declarator in names {
                    bodies.entry(&declarator.name.name).or_insert(Body { ty, declarator, net });
                }
            }
        }
        let mut ports: HashSet<&str> = HashSet::new();
        for item in items {
            if let ItemKind::PortDecl { names, .. } = &item.kind {
                ports.extend(names.iter().map(|declarator| declarator.name.name.as_str()));
            }
        }
        for item in items {
            match &item.kind {
                ItemKind::PortDecl { net, ty, names, is_var, .. } => {
                    for declarator in names {
                        let body = bodies.get(declarator.name.name.as_str());
                        self.declare_port(scope, ty, declarator, *net, *is_var, body)?;
                    }
                }
                ItemKind::Net { net, ty, names } => {
                    for declarator in names {
                        let ty = self.declared_type(ty, &declarator.dims, declarator.name.span)?;
                        // Outside of modules there is no instance that a wire could belong to.
                        if home == Storage::Package {
                            self.add_named_local(scope, &declarator.name, ty, home);
                        } else {
                            self.declare_body_variable(scope, &mut ports, &declarator.name, ty, Storage::Net(*net))?;
                        }
                    }
                }
                ItemKind::Var { ty, .. } if matches!(&ty.kind, DataTypeKind::Named { package: None, name } if self.names_interface(name)) =>
                    {}
                ItemKind::Var { ty, names } if home == Storage::Package => {
                    for declarator in names {
                        self.declare_lazy(scope, &declarator.name.name, Lazy::Variable { ty, declarator });
                    }
                }
                ItemKind::Var { ty, names } => {
                    for declarator in names {
                        if home == Storage::Variable
                            && let Some(symbol) = self.simulation_variable(ty, &declarator.dims)
                        {
                            self.declare_simulation(scope, &declarator.name, symbol);
                            continue;
                        }
                        let ty = self.declared_type(ty, &declarator.dims, declarator.name.span)?;
                        if home == Storage::Variable {
                            self.declare_body_variable(scope, &mut ports, &declarator.name, ty, home)?;
                        } else {
                            self.add_named_local(scope, &declarator.name, ty, home);
                        }
                    }
                }
                _ => {}
            }
        }
        Ok(())
    }

    fn add_named_local(&mut self, scope: ScopeId, name: &'a Ident, ty: Rc<Type>, home: Storage) {
        let id = self.add_local(&name.name, ty, name.span, home);
        self.declare(scope, &name.name, Symbol::Variable(id));
    }

    /// A non-ANSI port: its own declaration and that of the net or variable of the same name together.
    fn declare_port(
        &mut self,
        scope: ScopeId,
        ty: &'a DataType,
        declarator: &'a Declarator,
        net: Option<NetKind>,
        is_var: bool,
        body: Option<&Body<'a>>,
    ) -> Outcome<()> {
        let plain = |ty: &DataType, dims: &[Dim]| {
            matches!(ty.kind, DataTypeKind::Implicit | DataTypeKind::Logic) && ty.packed.is_empty() && dims.is_empty()
        };
        let name = &declarator.name;
        let (shape, dims): (&'a DataType, &'a [Dim]) = match body {
            Some(body) if plain(ty, &declarator.dims) => (body.ty, &body.declarator.dims),
            _ => (ty, &declarator.dims),
        };
        let mut full = self.declared_type(shape, dims, name.span)?;
        if ty.signed == Some(true) || body.is_some_and(|body| body.ty.signed == Some(true)) {
            full = full.with_sign(true);
        }
        let storage = match (body, net) {
            (Some(&Body { net: Some(net), .. }), _) | (_, Some(net)) => Storage::Net(net),
            (Some(Body { net: None, .. }), None) => Storage::Variable,
            (None, None) if is_var => Storage::Variable,
            (None, None) => Storage::Net(NetKind::Wire),
        };
        self.declare_variable(scope, name, full, storage)?;
        Ok(())
    }

    /// A net or variable of a body. One declaration may repeat the name of a non-ANSI port (`ports` holds those not yet
    /// repeated); any other repetition is an error in the source. What is declared the same is taken as one.
    fn declare_body_variable(
        &mut self,
        scope: ScopeId,
        ports: &mut HashSet<&str>,
        name: &Ident,
        ty: Rc<Type>,
        storage: Storage,
    ) -> Outcome<()> {
        let known = match self.scope(scope).names.get(&name.name) {
            Some(&Symbol::Variable(id)) if !ports.remove(name.name.as_str()) => Some(id),
            _ => None,
        };
        if let Some(id) = known {
            let (first, same) = (self.variable(id).span, self.variable(id).ty.width == ty.width);
            let message = format!("`{}` is declared twice", name.name);
            if !same {
                let message = format!("{message} and with different widths");
                let twice = Diagnostic::new(Kind::Incomplete, "declaration", message, Some(name.span));
                return Err(Box::new(twice.with_also(first, "first declared here")));
            }
            let twice = Diagnostic::new(Kind::Note, "declaration", message, Some(name.span));
            self.report(twice.with_also(first, "first declared here").with_help("both are taken as one"));
        }
        self.declare_variable(scope, name, ty, storage)?;
        Ok(())
    }

    /// Lays out a net or variable, unless the scope has one of that name already.
    pub fn declare_variable(
        &mut self,
        scope: ScopeId,
        name: &Ident,
        ty: Rc<Type>,
        storage: Storage,
    ) -> Outcome<VariableId> {
        if let Some(Symbol::Variable(id)) = self.scope(scope).names.get(&name.name) {
            return Ok(*id);
        }
        if self.scope(scope).names.contains_key(&name.name) {
            return Err(wrong(format!("`{}` is declared twice", name.name), name.span));
        }
        if ty.width == 0 || !ty.has_bits() {
            return Err(unsupported("net or variable of this type", name.span));
        }
        let (instance, label) = (self.scope(scope).instance, format!("{}{}", self.scope(scope).prefix, name.name));
        let memory = ty.unpacked_array() && ty.width > MAX_MEMORY;
        let (net, wires) = if memory {
            let path = self.scope_path(scope);
            self.opaque_memories.push(format!("{path}.{label}"));
            (None, Vec::new())
        } else {
            let net = self.lay_out(instance, &label, &ty, name.span)?;
            (Some(net), self.builder.net_bits(net).to_vec())
        };
        let id = self.add_variable(Variable {
            name: label,
            ty,
            instance,
            span: name.span,
            storage: if memory { Storage::Memory } else { storage },
            net,
            wires,
            is_port: false,
            init: None,
        });
        self.declare(scope, &name.name, Symbol::Variable(id));
        Ok(id)
    }

    fn lay_out(&mut self, instance: InstanceId, label: &str, ty: &Type, span: Span) -> Outcome<NetId> {
        if ty.width > MAX_LAID_OUT {
            let message = format!("a net or variable of {} bits, above the limit of {MAX_LAID_OUT}", ty.width);
            return Err(wrong(message, span));
        }
        self.check_size(ty.width, span)?;
        self.draw_net(ty.width, span)?;
        let suffixes = ty.suffixes();
        let scalar = suffixes.first().is_some_and(String::is_empty);
        let label = self.unique_label(instance, label);
        Ok(self.builder.net(instance, &label, span, suffixes, scalar))
    }

    /// A variable of a package or of the compilation unit, which all modules share. It belongs to no module, so its nets
    /// stand in the first top that uses it, named `package::variable`.
    pub fn shared_variable(&mut self, lazy: LazyId, span: Span) -> Outcome<VariableId> {
        let (scope, ty, declarator) = match self.lazies[lazy.index()] {
            (_, Lazy::Laid(id)) => return Ok(id),
            (scope, Lazy::Variable { ty, declarator }) => (scope, ty, declarator),
            _ => return Err(wrong("a variable that depends on itself", span)),
        };
        let name = &declarator.name;
        let (label, instance) =
            (format!("{}::{}", self.scope(scope).name, name.name), self.builder.root(self.instance));
        self.lazies[lazy.index()].1 = Lazy::Busy;
        let made = self.in_scope(scope, |this| -> Outcome<(Rc<Type>, Option<Vec<Bit>>)> {
            let ty = this.declared_type(ty, &declarator.dims, name.span)?;
            if ty.width == 0 || ty.unpacked_array() && ty.width > MAX_MEMORY {
                return Err(unsupported("variable of this type outside of a module", name.span));
            }
            let init = match &declarator.init {
                Some(init) => Some(super::bits::from_value(&this.constant_for(init, &ty)?)),
                None => ty.defaults(),
            };
            Ok((ty, init))
        });
        let (ty, init) = match made {
            Ok(made) => made,
            Err(diagnostic) => {
                self.lazies[lazy.index()].1 = Lazy::Failed;
                return Err(diagnostic);
            }
        };
        let net = self.lay_out(instance, &label, &ty, name.span)?;
        let wires = self.builder.net_bits(net).to_vec();
        let id = self.add_variable(Variable {
            name: label,
            ty,
            instance,
            span: name.span,
            storage: Storage::Variable,
            net: Some(net),
            wires,
            is_port: false,
            init,
        });
        self.lazies[lazy.index()].1 = Lazy::Laid(id);
        Ok(id)
    }

    /// An error when the graph would grow beyond its limit.
    pub fn check_size(&mut self, more: usize, span: Span) -> Outcome<()> {
        if self.builder.len().saturating_add(more) > NODE_LIMIT {
            self.exhausted = true;
            return Err(wrong(format!("the design has more than {NODE_LIMIT} gates and nets"), span));
        }
        Ok(())
    }

    /// The hierarchical name of the instance a scope belongs to.
    pub fn scope_path(&self, scope: ScopeId) -> String {
        self.builder.instance_path(self.scope(scope).instance).to_string()
    }
}
