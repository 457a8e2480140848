//! Generate constructs: blocks, conditions and loops are worked out here, and what is chosen is elaborated like the items
//! around it. Blocks without a label are named by their number among the constructs of their scope, as IEEE 1800-2017
//! clause 27.6 says.

use std::collections::BTreeSet;
use std::rc::Rc;

use super::bits::to_value;
use super::context::{Elaborator, Outcome, Storage, wrong};
use super::hierarchy::INSTANCE_LIMIT;
use super::scope::{Constant, Instances, Lazy, ScopeId, Symbol};
use super::value::Value;
use crate::diagnostic::Diagnostic;
use crate::source::Span;
use crate::syntax::ast::{Assignment, Expr, GenBlock, GenvarInit, Item, ItemKind};

/// A generate loop may run this often.
const GENERATE_LIMIT: usize = 1 << 17;

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
    pub fn block(
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
        if !self.declare(scope, &name, Symbol::Scope(inner)) {
            self.report(taken(&name, block.label.as_ref().map_or(block.span, |label| label.span)));
        }
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
    pub fn conditional(&mut self, scope: ScopeId, item: &'a Item, number: usize) -> Outcome<()> {
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

    pub fn generate_for(
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
        let passes = Symbol::Scopes(Rc::new(Instances { ascending: true, ..Instances::default() }));
        if !self.declare(scope, &name, passes) {
            self.report(taken(&name, body.label.as_ref().map_or(body.span, |label| label.span)));
        }
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
                Rc::make_mut(scopes).elements.insert(value.into(), Symbol::Scope(inner));
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

/// A generate block that cannot be told from something else in its scope.
fn taken(name: &str, span: Span) -> Diagnostic {
    let message = format!("`{name}` is the name of something else in this scope, so names in this block are not found");
    wrong(message, span).with_help("rename one of them")
}
