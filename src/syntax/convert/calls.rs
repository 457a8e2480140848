//! Calls of functions, tasks, methods and system functions. The parser takes any constant name for a call without
//! arguments, so a call without parentheses stays a name; elaboration knows whether it is a function.

use sv_parser as sv;

use super::Converter;
use super::ast::{CallArg, Expr, ExprKind};
use super::names::{Scope, member};

impl Converter<'_> {
    pub(super) fn function_call(&self, call: &sv::FunctionSubroutineCall) -> Expr {
        self.subroutine_call(&call.nodes.0)
    }

    pub(super) fn subroutine_call(&self, call: &sv::SubroutineCall) -> Expr {
        match call {
            sv::SubroutineCall::TfCall(x) => {
                let (name, _, arguments) = &x.nodes;
                let callee = match name {
                    sv::PsOrHierarchicalTfIdentifier::PackageScope(x) => {
                        let (scope, name) = &x.nodes;
                        self.scoped_expr(self.any_scope(scope), &name.nodes.0)
                    }
                    sv::PsOrHierarchicalTfIdentifier::HierarchicalTfIdentifier(x) => {
                        self.hierarchical(Scope::None, &x.nodes.0)
                    }
                };
                self.call(callee, arguments)
            }
            sv::SubroutineCall::SystemTfCall(x) => self.system_call(x),
            sv::SubroutineCall::MethodCall(x) => self.method_call(x),
            sv::SubroutineCall::Randomize(x) => self.unsupported_expr("randomize", self.span(&**x)),
        }
    }

    fn call(&self, callee: Expr, arguments: &Option<sv::Paren<sv::ListOfArguments>>) -> Expr {
        let Some(arguments) = arguments else { return callee };
        let span = callee.span.to(self.span(arguments));
        let args = self.arguments(&arguments.nodes.1);
        Expr { kind: ExprKind::Call { callee: Box::new(callee), args }, span }
    }

    fn arguments(&self, list: &sv::ListOfArguments) -> Vec<CallArg> {
        let mut args = Vec::new();
        let named = match list {
            sv::ListOfArguments::Ordered(x) => {
                let (ordered, named) = &x.nodes;
                let ordered = ordered.contents();
                // The parser sees one missing argument in `f()`, and before the named ones of `f(.a(1))`.
                if ordered.len() > 1 || ordered[0].is_some() {
                    for value in ordered {
                        args.push(CallArg { name: None, value: value.as_ref().map(|value| self.expression(value)) });
                    }
                }
                named
            }
            sv::ListOfArguments::Named(x) => {
                let (_, name, value, named) = &x.nodes;
                args.push(self.named_argument(name, value));
                named
            }
        };
        args.extend(named.iter().map(|(_, _, name, value)| self.named_argument(name, value)));
        args
    }

    fn named_argument(&self, name: &sv::Identifier, value: &sv::Paren<Option<sv::Expression>>) -> CallArg {
        CallArg { name: Some(self.ident(name)), value: value.nodes.1.as_ref().map(|value| self.expression(value)) }
    }

    fn system_call(&self, call: &sv::SystemTfCall) -> Expr {
        let span = self.span(call);
        let (name, args) = match call {
            sv::SystemTfCall::ArgOptionl(x) => {
                let (name, arguments) = &x.nodes;
                let args = arguments.as_ref().map_or(Vec::new(), |arguments| self.arguments(&arguments.nodes.1));
                if args.iter().any(|arg| arg.name.is_some()) {
                    return self.unsupported_expr("named argument of a system function", span);
                }
                (name, args.into_iter().map(|arg| arg.value).collect())
            }
            sv::SystemTfCall::ArgDataType(x) => {
                let (name, arguments) = &x.nodes;
                let (ty, more) = &arguments.nodes.1;
                let mut args = vec![Some(self.name_or_type(self.data_type(ty)))];
                args.extend(more.as_ref().map(|(_, value)| Some(self.expression(value))));
                (name, args)
            }
            sv::SystemTfCall::ArgExpression(x) => {
                let (name, arguments) = &x.nodes;
                let (values, clock) = &arguments.nodes.1;
                if matches!(clock, Some((_, Some(_)))) {
                    return self.unsupported_expr("clocked system function", span);
                }
                let mut args: Vec<_> =
                    values.contents().into_iter().map(|v| v.as_ref().map(|v| self.expression(v))).collect();
                if args.len() == 1 && args[0].is_none() {
                    args.clear();
                }
                (name, args)
            }
        };
        Expr { kind: ExprKind::SystemCall { name: self.token(&name.nodes.0).to_string(), args }, span }
    }

    fn method_call(&self, call: &sv::MethodCall) -> Expr {
        let (root, _, body) = &call.nodes;
        let span = self.span(call);
        let root = match root {
            sv::MethodCallRoot::Primary(x) => self.primary(x),
            sv::MethodCallRoot::ImplicitClassHandle(_) => return self.unsupported_expr("class handle", span),
        };
        match body {
            sv::MethodCallBody::User(x) => {
                let (name, _, arguments) = &x.nodes;
                self.call(member(root, self.ident(&name.nodes.0)), arguments)
            }
            sv::MethodCallBody::BuiltInMethodCall(x) => match &**x {
                sv::BuiltInMethodCall::ArrayManipulationCall(x) => {
                    let (name, _, arguments, with) = &x.nodes;
                    let (name, keyword) = match name {
                        sv::ArrayMethodName::MethodIdentifier(x) => (self.ident(&x.nodes.0), false),
                        sv::ArrayMethodName::Unique(x)
                        | sv::ArrayMethodName::And(x)
                        | sv::ArrayMethodName::Or(x)
                        | sv::ArrayMethodName::Xor(x) => (self.keyword_ident(x), true),
                    };
                    if let Some((_, with)) = with {
                        let arguments = arguments.as_ref().map(|arguments| self.arguments(&arguments.nodes.1));
                        let iterator = match arguments.as_deref() {
                            None | Some([]) => None,
                            Some([CallArg { value: Some(Expr { kind: ExprKind::Name(name), .. }), .. }]) => {
                                Some(name.clone())
                            }
                            Some(_) => return self.unsupported_expr("argument of an array method", span),
                        };
                        let with = Box::new(self.expression(&with.nodes.1));
                        let kind = ExprKind::Reduce { array: Box::new(root), method: name, iterator, with };
                        return Expr { kind, span };
                    }
                    let callee = member(root, name);
                    match arguments {
                        // A keyword cannot be a member, so `a.and` is a call; `G.H` in a constant expression is not.
                        None if keyword => {
                            Expr { span, kind: ExprKind::Call { callee: Box::new(callee), args: Vec::new() } }
                        }
                        _ => self.call(callee, arguments),
                    }
                }
                sv::BuiltInMethodCall::RandomizeCall(_) => self.unsupported_expr("randomize", span),
            },
        }
    }

    pub(super) fn let_expression(&self, expression: &sv::LetExpression) -> Expr {
        let (scope, name, arguments) = &expression.nodes;
        let callee = self.scoped_expr(self.optional_package(scope), &name.nodes.0);
        let Some(arguments) = arguments else { return callee };
        let mut args = Vec::new();
        let value = |arg: &Option<sv::LetActualArg>| arg.as_ref().map(|arg| self.expression(&arg.nodes.0));
        match &arguments.nodes.1 {
            None => {}
            Some(sv::LetListOfArguments::Ordered(x)) => {
                let (ordered, named) = &x.nodes;
                let ordered = ordered.contents();
                if ordered.len() > 1 || ordered[0].is_some() {
                    args.extend(ordered.into_iter().map(|arg| CallArg { name: None, value: value(arg) }));
                }
                args.extend(
                    named
                        .iter()
                        .map(|(_, _, name, arg)| CallArg { name: Some(self.ident(name)), value: value(&arg.nodes.1) }),
                );
            }
            Some(sv::LetListOfArguments::Named(x)) => {
                args.extend(
                    x.nodes
                        .0
                        .contents()
                        .into_iter()
                        .map(|(_, name, arg)| CallArg { name: Some(self.ident(name)), value: value(&arg.nodes.1) }),
                );
            }
        }
        Expr { kind: ExprKind::Call { callee: Box::new(callee), args }, span: self.span(expression) }
    }
}
