//! Identifiers, scopes and hierarchical names. A hierarchical name and a selection of structure members look the same
//! to the parser, so both become a chain of `Member` and `Index`; only elaboration can tell them apart. A scope
//! `a::` may reach us as a package scope or as a class scope, and counts as a package unless it has class parameters.

use sv_parser as sv;

use super::Converter;
use super::ast::{Expr, ExprKind, Ident};
use crate::source::Span;

impl Converter<'_> {
    pub(super) fn ident(&self, identifier: &sv::Identifier) -> Ident {
        let (locate, escaped) = match identifier {
            sv::Identifier::SimpleIdentifier(x) => (&x.nodes.0, false),
            sv::Identifier::EscapedIdentifier(x) => (&x.nodes.0, true),
        };
        let text = self.token(locate).trim_end();
        let span = self.places.place(locate.offset, text.len());
        let name = if escaped { text.trim_start_matches('\\') } else { text };
        Ident { name: name.to_string(), span }
    }

    /// The name of a keyword that stands where a name is expected (`$root`, `$unit`).
    pub(super) fn keyword_ident(&self, keyword: &sv::Keyword) -> Ident {
        Ident { name: self.keyword(keyword).to_string(), span: self.span(keyword) }
    }

    pub(super) fn name_expr(&self, identifier: &sv::Identifier) -> Expr {
        let ident = self.ident(identifier);
        Expr { span: ident.span, kind: ExprKind::Name(ident) }
    }

    pub(super) fn unsupported_expr(&self, what: impl Into<String>, span: Span) -> Expr {
        Expr { kind: ExprKind::Unsupported(what.into()), span }
    }

    /// A name in an optional scope.
    pub(super) fn scoped_expr(&self, scope: Scope, identifier: &sv::Identifier) -> Expr {
        let name = self.ident(identifier);
        match scope {
            Scope::None => Expr { span: name.span, kind: ExprKind::Name(name) },
            Scope::Package(package) => {
                Expr { span: package.span.to(name.span), kind: ExprKind::Scoped { package, name } }
            }
            Scope::Unsupported(what, span) => self.unsupported_expr(what, span.to(name.span)),
        }
    }

    pub(super) fn hierarchical(&self, scope: Scope, name: &sv::HierarchicalIdentifier) -> Expr {
        let (root, levels, last) = &name.nodes;
        let mut expr = root.as_ref().map(|root| {
            let ident = self.keyword_ident(&root.nodes.0);
            Expr { span: ident.span, kind: ExprKind::Name(ident) }
        });
        let mut scope = scope;
        let mut step = |base: Option<Expr>, identifier: &sv::Identifier| match base {
            None => self.scoped_expr(std::mem::replace(&mut scope, Scope::None), identifier),
            Some(base) => member(base, self.ident(identifier)),
        };
        for (identifier, select, _) in levels {
            let base = step(expr, identifier);
            expr = Some(self.constant_bit_select(base, select));
        }
        step(expr, last)
    }

    pub(super) fn package_scope(&self, scope: &sv::PackageScope) -> Scope {
        match scope {
            sv::PackageScope::Package(x) => Scope::Package(self.ident(&x.nodes.0.nodes.0)),
            sv::PackageScope::Unit(x) => Scope::Package(self.keyword_ident(&x.nodes.0)),
        }
    }

    pub(super) fn class_scope(&self, scope: &sv::ClassScope) -> Scope {
        let (class, parameters, nested) = &scope.nodes.0.nodes;
        let (package, identifier) = &class.nodes;
        if package.is_none() && parameters.is_none() && nested.is_empty() {
            Scope::Package(self.ident(&identifier.nodes.0))
        } else {
            Scope::Unsupported("class scope", self.span(scope))
        }
    }

    pub(super) fn optional_package(&self, scope: &Option<sv::PackageScope>) -> Scope {
        scope.as_ref().map_or(Scope::None, |scope| self.package_scope(scope))
    }

    pub(super) fn package_or_class(&self, scope: &Option<sv::PackageScopeOrClassScope>) -> Scope {
        match scope {
            None => Scope::None,
            Some(sv::PackageScopeOrClassScope::PackageScope(x)) => self.package_scope(x),
            Some(sv::PackageScopeOrClassScope::ClassScope(x)) => self.class_scope(x),
        }
    }

    pub(super) fn local_or_scope(&self, scope: &Option<sv::LocalOrPackageScopeOrClassScope>) -> Scope {
        match scope {
            None => Scope::None,
            Some(sv::LocalOrPackageScopeOrClassScope::Local(x)) => Scope::Unsupported("local scope", self.span(&**x)),
            Some(sv::LocalOrPackageScopeOrClassScope::PackageScope(x)) => self.package_scope(x),
            Some(sv::LocalOrPackageScopeOrClassScope::ClassScope(x)) => self.class_scope(x),
        }
    }

    pub(super) fn handle_or_package(&self, scope: &Option<sv::ImplicitClassHandleOrPackageScope>) -> Scope {
        match scope {
            None => Scope::None,
            Some(sv::ImplicitClassHandleOrPackageScope::ImplicitClassHandle(x)) => {
                Scope::Unsupported("class handle", self.span(&**x))
            }
            Some(sv::ImplicitClassHandleOrPackageScope::PackageScope(x)) => self.package_scope(x),
        }
    }

    pub(super) fn any_scope(&self, scope: &Option<sv::ImplicitClassHandleOrClassScopeOrPackageScope>) -> Scope {
        match scope {
            None => Scope::None,
            Some(sv::ImplicitClassHandleOrClassScopeOrPackageScope::ImplicitClassHandle(x)) => {
                Scope::Unsupported("class handle", self.span(&**x))
            }
            Some(sv::ImplicitClassHandleOrClassScopeOrPackageScope::ClassScope(x)) => self.class_scope(x),
            Some(sv::ImplicitClassHandleOrClassScopeOrPackageScope::PackageScope(x)) => self.package_scope(x),
        }
    }

    /// The scope of a primary; the parser also reports an empty class qualifier, which is no scope at all.
    pub(super) fn qualifier(&self, scope: &Option<sv::ClassQualifierOrPackageScope>) -> Scope {
        match scope {
            None => Scope::None,
            Some(sv::ClassQualifierOrPackageScope::PackageScope(x)) => self.package_scope(x),
            Some(sv::ClassQualifierOrPackageScope::ClassQualifier(x)) => {
                let (local, handle) = &x.nodes;
                if let Some(local) = local {
                    return Scope::Unsupported("local scope", self.span(local));
                }
                match handle {
                    None => Scope::None,
                    Some(sv::ImplicitClassHandleOrClassScope::ImplicitClassHandle(x)) => {
                        Scope::Unsupported("class handle", self.span(&**x))
                    }
                    Some(sv::ImplicitClassHandleOrClassScope::ClassScope(x)) => self.class_scope(x),
                }
            }
        }
    }
}

/// What stands before `::` or the first dot of a name.
pub(super) enum Scope {
    None,
    Package(Ident),
    Unsupported(&'static str, Span),
}

/// `base.name`
pub(super) fn member(base: Expr, name: Ident) -> Expr {
    Expr { span: base.span.to(name.span), kind: ExprKind::Member(Box::new(base), name) }
}
