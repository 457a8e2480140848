//! Functions and tasks. Arguments come in two forms, in parentheses or as declarations in the body; both end up in one
//! list. IEEE 1800-2017 clause 13.3: a direction left out is that of the argument before (`input` at first), a type left
//! out is `logic` where a direction is written and that of the argument before otherwise. The parser takes a lone name
//! in the parentheses for a type.

use sv_parser as sv;

use super::Converter;
use super::ast::{DataType, DataTypeKind, Dim, Direction, Expr, Function, FunctionArg, Ident, Item, ItemKind, Stmt};
use super::ports::direction_of;
use crate::source::Span;

/// The parts that tasks and functions share.
struct Body {
    name: Ident,
    ret: DataType,
    args: Vec<FunctionArg>,
    locals: Vec<Item>,
    body: Vec<Stmt>,
}

impl Converter<'_> {
    pub(super) fn function(&self, function: &sv::FunctionDeclaration) -> Item {
        self.automatic.set(is_automatic(&function.nodes.1));
        let item = self.function_item(function);
        self.automatic.set(false);
        item
    }

    pub(super) fn task(&self, task: &sv::TaskDeclaration) -> Item {
        self.automatic.set(is_automatic(&task.nodes.1));
        let item = self.task_item(task);
        self.automatic.set(false);
        item
    }

    fn function_item(&self, function: &sv::FunctionDeclaration) -> Item {
        let span = self.span(function);
        let (_, lifetime, body) = &function.nodes;
        let body = match body {
            sv::FunctionBodyDeclaration::WithoutPort(x) => {
                let (ret, scope, name, _, items, statements, _, _) = &x.nodes;
                if scope.is_some() {
                    return self.skipped("class", span);
                }
                let (args, locals) = self.tf_items(items);
                Body {
                    name: self.ident(&name.nodes.0),
                    ret: self.return_type(ret),
                    args,
                    locals,
                    body: self.function_statements(statements),
                }
            }
            sv::FunctionBodyDeclaration::WithPort(x) => {
                let (ret, scope, name, ports, _, items, statements, _, _) = &x.nodes;
                if scope.is_some() {
                    return self.skipped("class", span);
                }
                Body {
                    name: self.ident(&name.nodes.0),
                    ret: self.return_type(ret),
                    args: self.tf_ports(&ports.nodes.1),
                    locals: self.block_items(items),
                    body: self.function_statements(statements),
                }
            }
        };
        self.item(ItemKind::Function(assemble(body, lifetime, span)), span)
    }

    fn task_item(&self, task: &sv::TaskDeclaration) -> Item {
        let span = self.span(task);
        let (_, lifetime, body) = &task.nodes;
        let ret = self.plain_type(DataTypeKind::Void, span);
        let body = match body {
            sv::TaskBodyDeclaration::WithoutPort(x) => {
                let (scope, name, _, items, statements, _, _) = &x.nodes;
                if scope.is_some() {
                    return self.skipped("class", span);
                }
                let (args, locals) = self.tf_items(items);
                Body { name: self.ident(&name.nodes.0), ret, args, locals, body: self.statements(statements) }
            }
            sv::TaskBodyDeclaration::WithPort(x) => {
                let (scope, name, ports, _, items, statements, _, _) = &x.nodes;
                if scope.is_some() {
                    return self.skipped("class", span);
                }
                Body {
                    name: self.ident(&name.nodes.0),
                    ret,
                    args: self.tf_ports(&ports.nodes.1),
                    locals: self.block_items(items),
                    body: self.statements(statements),
                }
            }
        };
        self.item(ItemKind::Task(assemble(body, lifetime, span)), span)
    }

    fn return_type(&self, ty: &sv::FunctionDataTypeOrImplicit) -> DataType {
        match ty {
            sv::FunctionDataTypeOrImplicit::DataTypeOrVoid(x) => self.data_type_or_void(x),
            sv::FunctionDataTypeOrImplicit::ImplicitDataType(x) => self.implicit_type(x),
        }
    }

    fn block_items(&self, declarations: &[sv::BlockItemDeclaration]) -> Vec<Item> {
        let mut items = Vec::new();
        declarations.iter().for_each(|declaration| self.block_item(declaration, &mut items));
        items
    }

    fn tf_ports(&self, list: &Option<sv::TfPortList>) -> Vec<FunctionArg> {
        let mut args: Vec<FunctionArg> = Vec::new();
        let Some(list) = list else { return args };
        for port in list.nodes.0.contents() {
            let (_, direction, _, ty, declared) = &port.nodes;
            let mut ty = self.data_type_or_implicit(ty);
            let (name, dims, default) = match declared {
                Some((name, dims, default)) => {
                    let default = default.as_ref().map(|(_, value)| self.expression(value));
                    (self.ident(&name.nodes.0), self.variable_dims(dims), default)
                }
                None => match lone_name(&mut ty) {
                    Some((name, dims)) => (name, dims, None),
                    // `f()` reaches us as one argument with nothing in it.
                    None => continue,
                },
            };
            let before = args.last();
            let direction_written = direction.is_some();
            let direction = match direction {
                Some(direction) => tf_direction(direction),
                None => before.map_or(Direction::Input, |before| before.direction),
            };
            if !direction_written
                && is_bare(&ty)
                && let Some(before) = before
            {
                ty = before.ty.clone();
            }
            if is_bare(&ty) {
                ty.span = name.span;
            }
            args.push(FunctionArg { direction, name, ty, dims, default });
        }
        args
    }

    /// The declarations before the first statement: arguments and locals. `input a; reg [3:0] a;` declares one argument,
    /// whose type is that of the second declaration.
    fn tf_items(&self, items: &[sv::TfItemDeclaration]) -> (Vec<FunctionArg>, Vec<Item>) {
        let mut args: Vec<FunctionArg> = Vec::new();
        let mut locals = Vec::new();
        for item in items {
            match item {
                sv::TfItemDeclaration::TfPortDeclaration(x) => {
                    let (_, direction, _, ty, names, _) = &x.nodes;
                    let direction = tf_direction(direction);
                    let ty = self.data_type_or_implicit(ty);
                    for (name, dims, default) in names.nodes.0.contents() {
                        let name = self.ident(&name.nodes.0);
                        let mut ty = ty.clone();
                        if is_bare(&ty) {
                            ty.span = name.span;
                        }
                        let default: Option<Expr> = default.as_ref().map(|(_, value)| self.expression(value));
                        let dims = self.variable_dims(dims);
                        args.push(FunctionArg { direction, name, ty, dims, default });
                    }
                }
                sv::TfItemDeclaration::BlockItemDeclaration(x) => self.block_item(x, &mut locals),
            }
        }
        for item in &mut locals {
            if let ItemKind::Var { ty, names } = &mut item.kind {
                names.retain(|declared| match args.iter_mut().find(|arg| arg.name.name == declared.name.name) {
                    Some(arg) => {
                        arg.ty = ty.clone();
                        arg.dims.clone_from(&declared.dims);
                        false
                    }
                    None => true,
                });
            }
        }
        locals.retain(|item| !matches!(&item.kind, ItemKind::Var { names, .. } if names.is_empty()));
        (args, locals)
    }
}

fn assemble(body: Body, lifetime: &Option<sv::Lifetime>, span: Span) -> Function {
    let Body { name, ret, args, locals, body } = body;
    Function { name, automatic: is_automatic(lifetime), ret, args, locals, body, span }
}

fn is_automatic(lifetime: &Option<sv::Lifetime>) -> bool {
    matches!(lifetime, Some(sv::Lifetime::Automatic(_)))
}

fn tf_direction(direction: &sv::TfPortDirection) -> Direction {
    match direction {
        sv::TfPortDirection::PortDirection(x) => direction_of(x),
        sv::TfPortDirection::ConstRef(_) => Direction::Ref,
    }
}

/// No type, sign or range written.
fn is_bare(ty: &DataType) -> bool {
    matches!(ty.kind, DataTypeKind::Implicit) && ty.packed.is_empty() && ty.signed.is_none()
}

/// Takes the argument's name back out of what the parser thought to be its type.
fn lone_name(ty: &mut DataType) -> Option<(Ident, Vec<Dim>)> {
    match std::mem::replace(&mut ty.kind, DataTypeKind::Implicit) {
        DataTypeKind::Named { package: None, name } => Some((name, std::mem::take(&mut ty.packed))),
        other => {
            ty.kind = other;
            None
        }
    }
}
