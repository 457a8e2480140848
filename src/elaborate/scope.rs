//! Names: scopes of modules, generate blocks, named blocks, functions and packages, and how a name is looked up in them.
//! Parameters, types and enumeration members are worked out when they are first used, so that their order in the source
//! does not matter and a circle is noticed.

use std::collections::{BTreeMap, HashMap, HashSet};
use std::rc::Rc;

use super::context::{Elaborator, Outcome, VariableId, wrong};
use super::types::{Shape, Type};
use super::value::Value;
use crate::define_id;
use crate::graph::InstanceId;
use crate::source::Span;
use crate::syntax::ast::{self, DataType, Declarator, Dim, Expr, Ident};

define_id!(ScopeId, "s", "A scope of names.");

/// See the module documentation.
#[derive(Debug)]
pub(super) struct Scope<'a> {
    /// Where the search for a name goes on; a module's parent is the compilation unit.
    pub parent: Option<ScopeId>,
    /// For a module instance: the scope it stands in, for hierarchical names that go upward.
    pub outer: Option<ScopeId>,
    pub instance: InstanceId,
    /// The module's or generate block's own name, for hierarchical names that start with it.
    pub name: String,
    /// What comes before the names of nets declared here: the labels of named blocks.
    pub prefix: String,
    pub names: HashMap<String, Symbol<'a>>,
    /// Packages imported as a whole.
    pub wildcards: Vec<ScopeId>,
    /// Of a package: names that it imported and does not export.
    pub hidden: HashSet<String>,
    /// Of a package: packages whose names it exports, and whether it exports all that it imported.
    pub exports: Vec<ScopeId>,
    pub exports_all: bool,
    /// A modport: its names are a choice of those of the interface around it.
    pub is_modport: bool,
    pub nettype: ast::DefaultNettype,
    /// For a module: its ports in order.
    pub module: Option<&'a ast::Module>,
    pub is_module: bool,
}

/// What a name stands for.
#[derive(Clone, Debug)]
pub(super) enum Symbol<'a> {
    Lazy(LazyId),
    Variable(VariableId),
    Function(&'a ast::Function, ScopeId),
    Let(&'a ast::Item, ScopeId),
    /// An instance, a generate block, a named block or an interface.
    Scope(ScopeId),
    /// An instance array or the blocks of a generate loop.
    Scopes(Rc<Instances<'a>>),
    /// A name that a modport gives to an expression over the interface.
    Alias(&'a Expr, ScopeId),
    /// A genvar outside its loop.
    Genvar,
    /// A black box or a primitive: there, but nothing in it can be named.
    Opaque,
    /// Something that only simulation uses, in the words of the coverage. To assign it or to call it as a statement does
    /// nothing that synthesises if it is inert.
    Simulation {
        what: &'a str,
        inert: bool,
    },
}

/// The elements of an array of instances or of a generate loop by index; more arrays where there are more dimensions.
#[derive(Clone, Default, Debug)]
pub(super) struct Instances<'a> {
    pub elements: BTreeMap<i64, Symbol<'a>>,
    /// Whether the left bound is the lower one.
    pub ascending: bool,
}

impl<'a> Instances<'a> {
    /// Enters the element with these indices, making the inner arrays as needed. `ascending` says it of each dimension.
    pub fn enter(&mut self, index: &[i64], ascending: &[bool], symbol: Symbol<'a>) {
        self.ascending = ascending.first().copied().unwrap_or(true);
        match index {
            [] => {}
            [at] => {
                self.elements.insert(*at, symbol);
            }
            [at, rest @ ..] => {
                let inner = self.elements.entry(*at).or_insert_with(|| Symbol::Scopes(Rc::default()));
                if let Symbol::Scopes(inner) = inner {
                    Rc::make_mut(inner).enter(rest, ascending.get(1..).unwrap_or_default(), symbol);
                }
            }
        }
    }

    /// The elements from the left bound to the right one.
    pub fn in_order(&self) -> Vec<Symbol<'a>> {
        let mut all: Vec<Symbol<'a>> = self.elements.values().cloned().collect();
        if !self.ascending {
            all.reverse();
        }
        all
    }
}

define_id!(LazyId, "z", "A parameter, type or enumeration member that is worked out on first use.");

#[derive(Clone, Debug)]
pub(super) enum Lazy<'a> {
    /// A parameter with its declared type and the expression of its value in the scope of that expression.
    Value {
        ty: Option<&'a DataType>,
        dims: &'a [Dim],
        value: &'a Expr,
    },
    /// An override of a parameter, worked out where the override stands, converted to the declared type.
    Override {
        ty: Option<&'a DataType>,
        dims: &'a [Dim],
        value: Constant,
    },
    Type {
        ty: &'a DataType,
        dims: &'a [Dim],
    },
    /// A member of an enumeration.
    Member(&'a DataType, String),
    /// A variable of a package or of the compilation unit, laid out when it is first used.
    Variable {
        ty: &'a DataType,
        declarator: &'a Declarator,
    },
    Laid(VariableId),
    Busy,
    Constant(Constant),
    DataType(Rc<Type>),
    /// Something was wrong, which has been reported where it was first used.
    Failed,
}

/// The value of a parameter.
#[derive(Clone, Debug)]
pub(super) enum Constant {
    Bits(Rc<Value>, Rc<Type>),
    Real(f64),
}

impl Constant {
    pub fn of(value: Value) -> Self {
        let ty = Type::vector(value.width(), value.signed);
        Constant::Bits(Rc::new(value), ty)
    }

    pub fn integer(number: i64) -> Self {
        Self::of(Value::integer(number))
    }
}

impl<'a> Elaborator<'a> {
    pub fn scope(&self, id: ScopeId) -> &Scope<'a> {
        &self.scopes[id.index()]
    }

    pub fn add_scope(&mut self, scope: Scope<'a>) -> ScopeId {
        self.scopes.push(scope);
        ScopeId::new(self.scopes.len() - 1)
    }

    /// A scope inside `parent` that belongs to the same module.
    pub fn inner_scope(&mut self, parent: ScopeId, name: &str, instance: InstanceId, prefix: String) -> ScopeId {
        let nettype = self.scope(parent).nettype;
        let scope = Scope {
            parent: Some(parent),
            outer: None,
            instance,
            name: name.to_string(),
            prefix,
            names: HashMap::new(),
            wildcards: Vec::new(),
            hidden: HashSet::new(),
            exports: Vec::new(),
            exports_all: false,
            is_modport: false,
            nettype,
            module: None,
            is_module: false,
        };
        self.add_scope(scope)
    }

    /// Enters a name; the first declaration wins and the result says whether this was it.
    pub fn declare(&mut self, scope: ScopeId, name: &str, symbol: Symbol<'a>) -> bool {
        let names = &mut self.scopes[scope.index()].names;
        if names.contains_key(name) {
            return false;
        }
        names.insert(name.to_string(), symbol);
        true
    }

    pub fn declare_lazy(&mut self, scope: ScopeId, name: &str, lazy: Lazy<'a>) {
        let id = self.add_lazy(scope, lazy);
        self.declare(scope, name, Symbol::Lazy(id));
    }

    pub fn add_lazy(&mut self, scope: ScopeId, lazy: Lazy<'a>) -> LazyId {
        self.lazies.push((scope, lazy));
        LazyId::new(self.lazies.len() - 1)
    }

    /// Enters a constant that is known already.
    pub fn declare_constant(&mut self, scope: ScopeId, name: &str, constant: Constant) {
        self.declare_lazy(scope, name, Lazy::Constant(constant));
    }

    /// The names that an enumeration brings into the scope it stands in, also one nested in another type.
    pub fn declare_enum_members(&mut self, scope: ScopeId, ty: &'a DataType) -> Outcome<()> {
        match &ty.kind {
            ast::DataTypeKind::Enum { members, .. } => {
                for member in members {
                    for name in self.enum_names(member)? {
                        self.declare_lazy(scope, &name, Lazy::Member(ty, name.clone()));
                    }
                }
            }
            ast::DataTypeKind::Struct { members, .. } => {
                for member in members {
                    self.declare_enum_members(scope, &member.ty)?;
                }
            }
            _ => {}
        }
        Ok(())
    }

    /// What a name means in the current scope, if anything.
    pub fn find(&self, name: &str) -> Option<Symbol<'a>> {
        self.find_from(self.here, name)
    }

    fn find_from(&self, scope: ScopeId, name: &str) -> Option<Symbol<'a>> {
        let mut at = Some(scope);
        while let Some(id) = at {
            let scope = self.scope(id);
            if let Some(symbol) = scope.names.get(name) {
                return Some(symbol.clone());
            }
            for &package in &scope.wildcards {
                if let Some(symbol) = self.find_in_package(package, name) {
                    return Some(symbol);
                }
            }
            at = scope.parent;
        }
        None
    }

    /// What a package offers under a name: what it declares, and what it exports of its imports. Packages may export each
    /// other in a circle.
    fn find_in_package(&self, package: ScopeId, name: &str) -> Option<Symbol<'a>> {
        let mut seen = HashSet::new();
        let mut ahead = vec![package];
        while let Some(package) = ahead.pop() {
            if !seen.insert(package) {
                continue;
            }
            let scope = self.scope(package);
            if let Some(symbol) = scope.names.get(name)
                && (scope.exports_all || !scope.hidden.contains(name))
            {
                return Some(symbol.clone());
            }
            let more = if scope.exports_all { scope.wildcards.as_slice() } else { &[] };
            // The first export is looked at first, with all that it leads to.
            ahead.extend(scope.exports.iter().chain(more).rev());
        }
        None
    }

    /// The nearest function or task of that name, looking past the variable that a function's name is inside it.
    pub fn find_function(&self, name: &str) -> Option<(&'a ast::Function, ScopeId)> {
        let mut at = Some(self.here);
        while let Some(id) = at {
            match self.find_from(id, name)? {
                Symbol::Function(function, scope) => return Some((function, scope)),
                Symbol::Variable(_) => at = self.scope(id).parent,
                _ => return None,
            }
        }
        None
    }

    /// The first name of a hierarchical name: also names of enclosing scopes and what their instances are called.
    pub fn find_upward(&self, name: &str) -> Option<Symbol<'a>> {
        if let Some(symbol) = self.find(name) {
            return Some(symbol);
        }
        let mut at = Some(self.here);
        while let Some(id) = at {
            let scope = self.scope(id);
            if scope.name == name || scope.module.is_some_and(|module| module.name.name == name) {
                return Some(Symbol::Scope(id));
            }
            if let Some(symbol) = scope.names.get(name) {
                return Some(symbol.clone());
            }
            at = if scope.is_module { scope.outer } else { scope.parent };
        }
        self.tops.iter().find(|(top, _)| top == name).map(|&(_, scope)| Symbol::Scope(scope))
    }

    pub fn look_up(&mut self, name: &Ident) -> Outcome<Symbol<'a>> {
        self.find(&name.name).ok_or_else(|| wrong(format!("`{}` is not declared", name.name), name.span))
    }

    pub fn look_up_in_package(&mut self, package: &Ident, name: &Ident) -> Outcome<Symbol<'a>> {
        let scope = if package.name == "$unit" { self.unit } else { self.package(package)? };
        self.find_in_package(scope, &name.name)
            .ok_or_else(|| wrong(format!("package `{}` has no `{}`", package.name, name.name), name.span))
    }

    /// Works a lazy entry out, once.
    fn force(&mut self, id: LazyId, span: Span) -> Outcome<Lazy<'a>> {
        let (scope, lazy) = self.lazies[id.index()].clone();
        match lazy {
            Lazy::Constant(_) | Lazy::DataType(_) | Lazy::Variable { .. } | Lazy::Laid(_) => return Ok(lazy),
            Lazy::Busy => return Err(wrong("a parameter or type that depends on itself", span)),
            Lazy::Failed => return Err(wrong("it depends on a parameter or type that has no value", span)),
            _ => {}
        }
        self.lazies[id.index()].1 = Lazy::Busy;
        let result = self.in_scope(scope, |this| this.work_out(lazy, span));
        self.lazies[id.index()].1 = match &result {
            Ok(done) => done.clone(),
            Err(_) => Lazy::Failed,
        };
        result
    }

    fn work_out(&mut self, lazy: Lazy<'a>, span: Span) -> Outcome<Lazy<'a>> {
        Ok(match lazy {
            Lazy::Value { ty, dims, value } => {
                let constant = match ty {
                    Some(ty) if is_typed(ty) || !dims.is_empty() => {
                        let ty = self.declared_type(ty, dims, span)?;
                        self.constant_of_type(value, ty)?
                    }
                    _ => {
                        let constant = self.constant(value)?;
                        with_written_sign(constant, ty)
                    }
                };
                Lazy::Constant(constant)
            }
            Lazy::Override { ty, dims, value } => match ty {
                Some(ty) if is_typed(ty) || !dims.is_empty() => {
                    let ty = self.declared_type(ty, dims, span)?;
                    Lazy::Constant(convert(value, ty))
                }
                _ => Lazy::Constant(with_written_sign(value, ty)),
            },
            Lazy::Type { ty, dims } => Lazy::DataType(self.declared_type(ty, dims, span)?),
            Lazy::Member(ty, name) => {
                let ty = self.data_type(ty)?;
                let Shape::Enum { members, .. } = &ty.shape else {
                    return Err(wrong(format!("`{name}` is not a member of an enumeration"), span));
                };
                let value = members.iter().find(|(member, _)| *member == name).map(|(_, value)| value.clone());
                match value {
                    Some(value) => Lazy::Constant(Constant::Bits(Rc::new(value), Rc::clone(&ty))),
                    None => return Err(wrong(format!("`{name}` is not a member of an enumeration"), span)),
                }
            }
            done => done,
        })
    }

    pub fn declared_type(&mut self, ty: &'a DataType, dims: &'a [Dim], span: Span) -> Outcome<Rc<Type>> {
        let base = self.data_type(ty)?;
        self.with_dims(base, dims, false, span)
    }

    pub fn force_constant(&mut self, id: LazyId, span: Span) -> Outcome<Constant> {
        match self.force(id, span)? {
            Lazy::Constant(constant) => Ok(constant),
            _ => Err(wrong("a type where a value is needed", span)),
        }
    }

    pub fn force_type(&mut self, id: LazyId, span: Span) -> Outcome<Rc<Type>> {
        match self.force(id, span)? {
            Lazy::DataType(ty) => Ok(ty),
            _ => Err(wrong("a value where a type is needed", span)),
        }
    }

    /// Whether a lazy entry is a type, without working it out.
    pub fn is_type(&self, id: LazyId) -> bool {
        matches!(self.lazies[id.index()].1, Lazy::Type { .. } | Lazy::DataType(_))
    }

    /// Whether a lazy entry is a variable of a package.
    pub fn is_variable(&self, id: LazyId) -> bool {
        matches!(self.lazies[id.index()].1, Lazy::Variable { .. } | Lazy::Laid(_))
    }

    /// Runs `work` with another current scope.
    pub fn in_scope<T>(&mut self, scope: ScopeId, work: impl FnOnce(&mut Self) -> T) -> T {
        let before = std::mem::replace(&mut self.here, scope);
        let result = work(self);
        self.here = before;
        result
    }
}

/// Whether a parameter's type says more than a sign.
pub(super) fn is_typed(ty: &DataType) -> bool {
    !matches!(ty.kind, ast::DataTypeKind::Implicit) || !ty.packed.is_empty()
}

fn with_written_sign(constant: Constant, ty: Option<&DataType>) -> Constant {
    match (ty.and_then(|ty| ty.signed), constant) {
        (Some(signed), Constant::Bits(value, _)) => Constant::of(Value::clone(&value).with_sign(signed)),
        (_, constant) => constant,
    }
}

/// A value assigned to a type.
pub(super) fn convert(constant: Constant, ty: Rc<Type>) -> Constant {
    match (constant, &ty.shape) {
        (Constant::Real(real), Shape::Real) => Constant::Real(real),
        (Constant::Real(real), _) => {
            let value = Value::from_i64(real.round() as i64, ty.width, ty.signed);
            Constant::Bits(Rc::new(value), ty)
        }
        (Constant::Bits(value, _), Shape::Real) => Constant::Real(value.to_i64().map_or(0.0, |number| number as f64)),
        (Constant::Bits(value, _), Shape::Text) => Constant::of(Value::clone(&value)),
        (Constant::Bits(value, _), _) => {
            let mut value = value.resize(ty.width).with_sign(ty.signed);
            if ty.two_state {
                value = value.two_state();
            }
            Constant::Bits(Rc::new(value), ty)
        }
    }
}
