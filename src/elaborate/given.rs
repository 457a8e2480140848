//! Parameters of the top modules that the user sets. A value is worked out inside the top module, so that it may use
//! what is imported there, the parameters before it and, by name alone, the members of the parameter's enumeration. It
//! is checked more strictly than an override in the text: nobody meant a value that the parameter cannot hold.
//!
//! A mistake here is one of usage, not of the design: nothing is analysed then.
//!
//! At the end all values that hold are listed, whoever set them: they are what the verdicts are about.

use std::collections::{BTreeMap, BTreeSet};
use std::rc::Rc;

use super::context::{Elaborator, Outcome, wrong};
use super::hierarchy::Overrides;
use super::scope::{Constant, ScopeId, Symbol, is_typed};
use super::types::{Shape, Type};
use super::value::{Logic, Value};
use crate::diagnostic::Diagnostic;
use crate::source::Given;
use crate::spelling::nearest;
use crate::syntax::ast::{DataTypeKind, Expr, ExprKind, ItemKind, Module, Param, ParamKind};

/// A mistake in what the user set.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Misuse {
    pub message: String,
    pub help: String,
}

/// What is wrong with a value, and what to do.
type Mistake = (String, String);

impl<'a> Elaborator<'a> {
    /// Complains about values for parameters that no top has.
    pub fn check_given(&mut self, given: &'a [Given], tops: &[String]) {
        let modules: Vec<&Module> =
            tops.iter().filter_map(|name| self.library.modules.get(name.as_str()).copied()).collect();
        for given in given {
            let declared = modules.iter().flat_map(|module| parameters(module));
            let of_name: Vec<(&Param, bool)> =
                declared.clone().filter(|(param, _)| param.name.name == given.name).collect();
            if modules.is_empty() || of_name.iter().any(|&(_, settable)| settable) {
                continue;
            }
            let whose = match modules.as_slice() {
                [module] => format!("the top `{}`", module.name.name),
                _ => "any of the tops".to_string(),
            };
            let names: BTreeSet<&str> =
                declared.filter(|&(_, settable)| settable).map(|(param, _)| param.name.name.as_str()).collect();
            let help = match nearest(&given.name, names.iter().copied()) {
                _ if !of_name.is_empty() => "a local parameter follows from the others; set these instead".to_string(),
                Some(nearest) => format!("did you mean `{nearest}`?"),
                None if names.is_empty() => "it has no parameters at all".to_string(),
                None => format!("its parameters are {}", listed(names)),
            };
            let message = match of_name.is_empty() {
                true => format!("`{}` is no parameter of {whose}", given.name),
                false => format!("`{}` is a local parameter of {whose} and cannot be set", given.name),
            };
            self.misuse.push(Misuse { message, help });
        }
    }

    /// What the user set of a top's parameters.
    pub fn given_for(&self, module: &Module) -> Overrides<'a> {
        let settable = |name: &str| parameters(module).any(|(param, settable)| settable && param.name.name == name);
        let given = self.given.iter().filter(|given| settable(&given.name));
        given.map(|given| (given.name.as_str(), &given.value)).collect()
    }

    /// Works a value out in the top module `scope` and checks that `param` can hold it.
    ///
    /// # Errors
    /// A mistake, which is noted as one of usage too.
    pub fn given_value(&mut self, scope: ScopeId, param: &'a Param, given: &'a Expr) -> Outcome<Constant> {
        let ty = match &param.kind {
            ParamKind::Value { ty: Some(ty), dims, .. } if is_typed(ty) || !dims.is_empty() => {
                Some(self.in_scope(scope, |this| this.declared_type(ty, dims, param.span))?)
            }
            _ => None,
        };
        let result = self.in_scope(scope, |this| this.given_constant(&param.name.name, given, ty.as_ref()));
        result.map_err(|mistake| self.misused(&param.name.name, given, mistake))
    }

    /// The type given for a type parameter.
    ///
    /// # Errors
    /// As [`Self::given_value`].
    pub fn given_type(&mut self, scope: ScopeId, name: &str, given: &'a Expr) -> Outcome<Rc<Type>> {
        let help = "it takes a data type, such as `logic [7:0]` or `package::name`".to_string();
        match self.in_scope(scope, |this| this.named_type(given)) {
            Ok(Some(ty)) => Ok(ty),
            Ok(None) => Err(self.misused(name, given, ("this is no data type".to_string(), help))),
            Err(problem) => Err(self.misused(name, given, (problem.message, help))),
        }
    }

    /// All parameters of each top with the values that hold, local ones included. One that is used nowhere and cannot be
    /// worked out is left out.
    pub fn parameters_in_force(&mut self) -> ParametersInForce {
        let mut all = ParametersInForce::new();
        for (top, scope) in self.tops.clone() {
            let module = self.library.modules.get(top.as_str()).copied();
            let declared: Vec<&Param> = module.into_iter().flat_map(parameters).map(|(param, _)| param).collect();
            let value = |param: &&Param| Some((param.name.name.clone(), self.value_in_force(scope, param)?));
            all.insert(top, declared.iter().filter_map(value).collect());
        }
        all
    }

    fn value_in_force(&mut self, scope: ScopeId, param: &Param) -> Option<String> {
        let Symbol::Lazy(id) = self.scope(scope).names.get(&param.name.name)?.clone() else { return None };
        match &param.kind {
            ParamKind::Value { ty, .. } => {
                let is_text = ty.as_ref().is_some_and(|ty| matches!(ty.kind, DataTypeKind::String));
                self.force_constant(id, param.span).ok().map(|constant| told(&constant, is_text))
            }
            ParamKind::Type { .. } => match self.force_type(id, param.span).ok()?.width {
                1 => Some("a type of 1 bit".to_string()),
                width => Some(format!("a type of {width} bits")),
            },
        }
    }

    fn misused(&mut self, name: &str, given: &Expr, (problem, help): Mistake) -> Box<Diagnostic> {
        let text = self.given.iter().rev().find(|given| given.name == name).map_or("", |given| &given.text);
        let message = format!("`--set {name}={text}`: {problem}");
        self.misuse.push(Misuse { message: message.clone(), help });
        wrong(message, given.span)
    }

    fn given_constant(&mut self, parameter: &str, given: &'a Expr, ty: Option<&Rc<Type>>) -> Result<Constant, Mistake> {
        let help =
            || "the value is worked out inside the top module, from what is imported or declared before".to_string();
        let members = ty.map_or(&[][..], |ty| members(ty));
        if let ExprKind::Name(name) = &given.kind
            && self.find(&name.name).is_none()
        {
            if let (Some((_, value)), Some(ty)) = (members.iter().find(|(member, _)| *member == name.name), ty) {
                return Ok(Constant::Bits(Rc::new(value.clone()), Rc::clone(ty)));
            }
            let help = match nearest(&name.name, members.iter().map(|(member, _)| member.as_str())) {
                Some(nearest) => format!("did you mean `{nearest}`?"),
                None if !members.is_empty() => format!("the values are {}", values(members)),
                None if ty.is_none_or(|ty| matches!(ty.shape, Shape::Text)) => {
                    format!("a text stands in double quotes, as in `--set '{parameter}=\"{}\"'`", name.name)
                }
                None => help(),
            };
            return Err((format!("`{}` is not known in the top module", name.name), help));
        }
        let constant = match (ty, &given.kind) {
            (Some(ty), ExprKind::Pattern { .. }) => self.constant_of_type(given, Rc::clone(ty)),
            _ => self.constant(given),
        };
        let constant = constant.map_err(|problem| (problem.message, help()))?;
        match (&constant, ty) {
            (Constant::Bits(value, _), Some(ty)) => holds(value, ty).map(|()| constant),
            _ => Ok(constant),
        }
    }
}

/// By top, then by name.
pub type ParametersInForce = BTreeMap<String, BTreeMap<String, String>>;

/// A decimal where that is readable, else hexadecimal, or binary with bits that are not known.
fn told(constant: &Constant, is_text: bool) -> String {
    const MOST_DECIMAL: usize = 64;
    match constant {
        Constant::Real(number) => number.to_string(),
        Constant::Bits(value, _) if is_text => format!("\"{}\"", value.to_text()),
        Constant::Bits(value, _) => match value.to_bigint() {
            Some(_) if value.width() > MOST_DECIMAL => {
                let unsigned = value.as_ref().clone().with_sign(false).to_bigint().unwrap_or_default();
                format!("{}'h{}", value.width(), unsigned.to_str_radix(16))
            }
            _ => value.to_string(),
        },
    }
}

/// Every parameter of a module, and whether it can be set from outside.
fn parameters(module: &Module) -> impl Iterator<Item = (&Param, bool)> + Clone {
    let body = module.items.iter().filter_map(|item| match &item.kind {
        ItemKind::Param(param) => Some(param),
        _ => None,
    });
    // Parameters in the body are local as soon as the header has a list.
    let body_is_local = !module.params.is_empty();
    let header = module.params.iter().map(|param| (param, !param.local));
    header.chain(body.map(move |param| (param, !param.local && !body_is_local)))
}

fn members(ty: &Type) -> &[(String, Value)] {
    match &ty.shape {
        Shape::Enum { members, .. } => members,
        _ => &[],
    }
}

/// Whether a type holds a value as it is: a member of an enumeration; for others, no bit that says something is cut off.
fn holds(value: &Value, ty: &Type) -> Result<(), Mistake> {
    if matches!(ty.shape, Shape::Real | Shape::Text) {
        return Ok(());
    }
    let members = members(ty);
    if !members.is_empty() {
        if members.iter().any(|(_, member)| member.bits == value.resize(ty.width).bits) {
            return Ok(());
        }
        return Err((
            format!("no member of the enumeration has the value {value}"),
            format!("the values are {}", values(members)),
        ));
    }
    let kept = &value.bits[..ty.width.min(value.width())];
    let cut = &value.bits[kept.len()..];
    let repeats_sign = value.signed && kept.last() == Some(&Logic::One) && cut.iter().all(|&bit| bit == Logic::One);
    if repeats_sign || cut.iter().all(|&bit| bit == Logic::Zero) {
        return Ok(());
    }
    let bits = if ty.width == 1 { "the one bit".to_string() } else { format!("the {} bits", ty.width) };
    Err((format!("{value} does not fit {bits} of the parameter"), "give a smaller value".to_string()))
}

fn values(members: &[(String, Value)]) -> String {
    listed(members.iter().map(|(member, value)| format!("{member} ({value})")))
}

/// At most a line of names.
fn listed<T: AsRef<str>>(names: impl IntoIterator<Item = T>) -> String {
    const MOST: usize = 12;
    let names: Vec<String> = names.into_iter().map(|name| format!("`{}`", name.as_ref())).collect();
    match names.len() {
        0..=MOST => names.join(", "),
        more => format!("{} and {} more", names[..MOST].join(", "), more - MOST),
    }
}
