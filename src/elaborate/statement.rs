//! Symbolic execution of statements. Every statement is executed once for all values of its inputs: branches run in
//! layers of their own that are merged under their condition, loops with known bounds are unrolled, and `break`, `return`
//! and the like leave a condition under which the rest is not executed.

use std::collections::BTreeMap;

use super::bits::{self, Bit, extend};
use super::context::{Elaborator, Outcome, Storage, VariableId, unsupported, wrong};
use super::environment::{Layer, Mode};
use super::place::{Base, Place, Want};
use super::scope::ScopeId;
use super::types::Type;
use crate::graph::{Site, SourceKind};
use crate::source::Span;
use crate::syntax::ast::{
    Assignment, BinaryOp, Declarator, Expr, ExprKind, ForInit, Item, ItemKind, Stmt, StmtKind, Unique,
};

/// How many passes a loop may take whose end depends on signals.
const VARIABLE_PASSES: usize = 1_024;

/// Something that a jump can leave.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) enum Point {
    Loop,
    /// One pass of a loop, which `continue` leaves.
    Pass,
    Block(String),
    Call(String),
}

/// The conditions under which control leaves each enclosing point, by its depth.
pub(super) type Exits = BTreeMap<usize, Bit>;

/// Statements one after the other: the rest is executed in a layer of its own where an earlier one may have jumped.
struct Sequence {
    jumps: Vec<(Bit, Exits, Site)>,
}

impl Sequence {
    fn new() -> Self {
        Self { jumps: Vec::new() }
    }

    /// Takes note of the jumps of one statement; whether the next one can be reached.
    fn after(&mut self, elaborator: &mut Elaborator<'_>, exits: Exits, site: Site) -> bool {
        if exits.is_empty() {
            return true;
        }
        let conditions: Vec<Bit> = exits.values().copied().collect();
        let left = elaborator.or(&conditions, site);
        if left == Bit::Zero {
            return true;
        }
        elaborator.environment.push();
        self.jumps.push((left, exits, site));
        left != Bit::One
    }

    /// Joins all layers; the jumps of the whole sequence.
    fn finish(self, elaborator: &mut Elaborator<'_>) -> Exits {
        let mut rest = Exits::new();
        for (left, exits, site) in self.jumps.into_iter().rev() {
            let layer = elaborator.environment.pop();
            elaborator.merge(left, Layer::new(), layer, false, site);
            rest = elaborator.join_exits(left, exits, rest, site);
        }
        rest
    }
}

fn declarators(item: &Item) -> Option<&Vec<Declarator>> {
    match &item.kind {
        ItemKind::Var { names, .. } => Some(names),
        _ => None,
    }
}

/// Whether an expression that is looked at more than once would step a variable more than once.
pub(super) fn has_step(expr: &Expr) -> bool {
    match &expr.kind {
        ExprKind::Assign(_) | ExprKind::Postfix(_) => true,
        ExprKind::Member(base, _) | ExprKind::Unary(_, base) | ExprKind::Cast(_, base) => has_step(base),
        ExprKind::Index(base, index) => has_step(base) || has_step(index),
        ExprKind::Slice { base, left, right, .. } => has_step(base) || has_step(left) || has_step(right),
        ExprKind::Binary(_, left, right) => has_step(left) || has_step(right),
        ExprKind::Cond(condition, then, otherwise) => [condition, then, otherwise].iter().any(|part| has_step(part)),
        ExprKind::Concat(parts) => parts.iter().any(has_step),
        _ => false,
    }
}

/// The head of a statement: from its keyword to the end of its condition.
pub(super) fn head(statement: Span, condition: Span) -> Span {
    if statement.file == condition.file && statement.start <= condition.end {
        Span { file: statement.file, start: statement.start, end: condition.end }
    } else {
        statement
    }
}

impl<'a> Elaborator<'a> {
    pub fn join_exits(&mut self, condition: Bit, then: Exits, otherwise: Exits, site: Site) -> Exits {
        let mut joined = Exits::new();
        for &target in then.keys().chain(otherwise.keys()) {
            let a = then.get(&target).copied().unwrap_or(Bit::Zero);
            let b = otherwise.get(&target).copied().unwrap_or(Bit::Zero);
            let exit = self.select(condition, a, b, site);
            joined.insert(target, exit);
        }
        joined.retain(|_, exit| *exit != Bit::Zero);
        joined
    }

    pub fn execute_all(&mut self, statements: &'a [Stmt]) -> Outcome<Exits> {
        let mut sequence = Sequence::new();
        self.execute_into(statements, &mut sequence)?;
        Ok(sequence.finish(self))
    }

    /// Executes statements as a part of a sequence; whether what follows can be reached. A block without a name is no more
    /// than its statements. A jump out of it leads out of the sequence too, so that what it leaves behind is joined
    /// where it leads to and not earlier: the counter of a loop stays a constant behind a `break` that was not taken.
    fn execute_into(&mut self, statements: &'a [Stmt], sequence: &mut Sequence) -> Outcome<bool> {
        for statement in statements {
            let goes_on = match &statement.kind {
                StmtKind::Block { label: None, decls, body } if decls.is_empty() => {
                    self.step(statement.span)?;
                    self.execute_into(body, sequence)?
                }
                StmtKind::Block { label: None, decls, body } => {
                    self.step(statement.span)?;
                    let scope = self.block_scope(statement, None, decls)?;
                    self.in_scope(scope, |this| {
                        this.initialise_locals(scope, decls)?;
                        this.execute_into(body, sequence)
                    })?
                }
                _ => {
                    let exits = self.execute(statement)?;
                    let site = self.site(statement.span);
                    sequence.after(self, exits, site)
                }
            };
            if !goes_on {
                return Ok(false);
            }
        }
        Ok(true)
    }

    /// Executes a statement. In a process, one that fails makes what it assigns opaque.
    pub fn execute(&mut self, statement: &'a Stmt) -> Outcome<Exits> {
        self.step(statement.span)?;
        let layers = self.environment.layers.len();
        let (scope, points, calls) = (self.here, self.points.len(), self.call_depth);
        let diagnostic = match self.execute_strictly(statement) {
            Ok(exits) => return Ok(exits),
            Err(diagnostic) => diagnostic,
        };
        if self.strict || self.is_spent() {
            return Err(diagnostic);
        }
        self.report(*diagnostic);
        self.environment.layers.truncate(layers);
        self.here = scope;
        self.points.truncate(points);
        self.call_depth = calls;
        self.poison(statement);
        Ok(Exits::new())
    }

    fn execute_strictly(&mut self, statement: &'a Stmt) -> Outcome<Exits> {
        match &statement.kind {
            StmtKind::Empty => {}
            StmtKind::Skipped(what) => {
                if self.counted.insert(std::ptr::from_ref(statement)) {
                    self.skip(what);
                }
            }
            StmtKind::Block { label, decls, body } => {
                let label = label.as_ref().map(|label| label.name.as_str());
                return self.execute_block(statement, label, decls, body);
            }
            StmtKind::Assign(assignment) => self.assign(assignment)?,
            StmtKind::If { cond, then, otherwise, unique } => {
                let condition = self.eval_condition(cond)?;
                let site = self.site(head(statement.span, cond.span));
                let full = otherwise.is_none() && matches!(unique, Some(Unique::Unique | Unique::Priority));
                return match self.assume(condition) {
                    Bit::One => self.execute(then),
                    Bit::Zero | Bit::X | Bit::Z => match otherwise {
                        Some(otherwise) => self.execute(otherwise),
                        None => Ok(Exits::new()),
                    },
                    condition => {
                        self.environment.push();
                        let then_exits = self.execute(then)?;
                        let then = self.environment.pop();
                        self.environment.push();
                        let else_exits = match otherwise {
                            Some(otherwise) => self.execute(otherwise)?,
                            None => Exits::new(),
                        };
                        let otherwise = self.environment.pop();
                        self.merge(condition, then, otherwise, full, site);
                        Ok(self.join_exits(condition, then_exits, else_exits, site))
                    }
                };
            }
            StmtKind::Case(case) => return self.execute_case(statement, case),
            StmtKind::For { init, cond, step, body } => {
                return self.execute_for(statement, init, cond.as_ref(), step, body);
            }
            StmtKind::Foreach { array, vars, body } => {
                let ty = self.type_of(array)?;
                let scope = self.block_scope(statement, None, &[])?;
                let mut locals = Vec::new();
                for name in vars {
                    locals.push(
                        name.as_ref()
                            .map(|name| self.loop_variable(scope, &name.name, Type::vector(32, true), name.span)),
                    );
                }
                let exits = self.in_scope(scope, |this| -> Outcome<Exits> {
                    let mut sequence = Sequence::new();
                    this.execute_foreach(&locals, Some(ty), body, statement.span, &mut sequence)?;
                    Ok(sequence.finish(this))
                })?;
                for local in locals.into_iter().flatten() {
                    self.environment.forget(local);
                }
                return Ok(exits);
            }
            StmtKind::While { cond, body } => return self.execute_loop(Some(cond), true, &[], body),
            StmtKind::DoWhile { cond, body } => return self.execute_loop(Some(cond), false, &[], body),
            StmtKind::Forever { body } => return self.execute_loop(None, true, &[], body),
            StmtKind::Repeat { count, body } => {
                let count = self.constant_i64(count)?;
                self.points.push(Point::Loop);
                let depth = self.points.len() - 1;
                let mut sequence = Sequence::new();
                for _ in 0..count {
                    if !self.execute_pass(body, &mut sequence)? {
                        break;
                    }
                }
                let mut exits = sequence.finish(self);
                self.points.pop();
                exits.remove(&depth);
                return Ok(exits);
            }
            StmtKind::Call(call) => match &call.kind {
                ExprKind::SystemCall { name, args } if name == "$cast" => {
                    let [Some(target), Some(value)] = args.as_slice() else {
                        return Err(wrong("$cast needs a target and a value", call.span));
                    };
                    let targets = self.targets(target)?;
                    let width: usize = targets.iter().map(|place| place.ty.width).sum();
                    let bits = self.eval_assigned(value, width)?;
                    let site = self.site(call.span);
                    self.store(&targets, &bits, false, site)?;
                }
                ExprKind::SystemCall { name, .. } => return Err(unsupported(format!("system task {name}"), call.span)),
                ExprKind::Call { callee, args } => match self.inert(callee) {
                    Some(what) => self.skip(what),
                    None => {
                        self.call(callee, args, call.span)?;
                    }
                },
                ExprKind::Cast(_, inner) => {
                    self.eval_self(inner)?;
                }
                _ => return Err(unsupported("this kind of call statement", statement.span)),
            },
            StmtKind::Return(value) => {
                let Some(depth) = self.points.iter().rposition(|point| matches!(point, Point::Call(_))) else {
                    return Err(wrong("`return` outside of a function or task", statement.span));
                };
                if let (Some(value), Some(Some(result))) = (value, self.results.last().copied()) {
                    let ty = std::rc::Rc::clone(&self.variable(result).ty);
                    let bits = self.eval_as(value, &ty)?;
                    self.environment.set((result, false), bits);
                }
                return Ok(Exits::from([(depth, Bit::One)]));
            }
            StmtKind::Break => return self.jump(|point| *point == Point::Loop, "break", statement.span),
            StmtKind::Continue => return self.jump(|point| *point == Point::Pass, "continue", statement.span),
            StmtKind::Disable(target) => {
                let (ExprKind::Name(name) | ExprKind::Member(_, name)) = &target.kind else {
                    return Err(unsupported("disable of something that has no name", statement.span));
                };
                let named =
                    |point: &Point| matches!(point, Point::Block(label) | Point::Call(label) if *label == name.name);
                return self.jump(named, "disable", statement.span);
            }
            StmtKind::Timed { what, .. } => {
                return Err(unsupported(format!("{what} inside a process"), statement.span));
            }
            StmtKind::Unsupported(what) => return Err(unsupported(what, statement.span)),
        }
        Ok(Exits::new())
    }

    fn jump(&mut self, to: impl Fn(&Point) -> bool, what: &str, span: Span) -> Outcome<Exits> {
        match self.points.iter().rposition(to) {
            Some(depth) => Ok(Exits::from([(depth, Bit::One)])),
            None => Err(unsupported(format!("`{what}` of something that does not enclose it"), span)),
        }
    }

    /// The condition, or the value assumed for it while asynchronous controls are told apart.
    pub fn assume(&self, condition: Bit) -> Bit {
        let Bit::Node(node) = condition else {
            return condition;
        };
        if let Some(&value) = self.assumed.get(&node) {
            return value.into();
        }
        let (net, active) = self.builder.strip_inverters(node);
        match self.assumed.get(&net) {
            Some(&value) => Bit::from(value == active),
            None => condition,
        }
    }

    fn execute_block(
        &mut self,
        statement: &'a Stmt,
        label: Option<&str>,
        decls: &'a [Item],
        body: &'a [Stmt],
    ) -> Outcome<Exits> {
        if let Some(label) = label {
            self.points.push(Point::Block(label.to_string()));
        }
        let depth = self.points.len();
        let outcome = if decls.is_empty() {
            self.execute_all(body)
        } else {
            let scope = self.block_scope(statement, label, decls)?;
            self.in_scope(scope, |this| {
                this.initialise_locals(scope, decls)?;
                this.execute_all(body)
            })
        };
        let mut exits = outcome?;
        if label.is_some() {
            self.points.pop();
            exits.remove(&(depth - 1));
        }
        Ok(exits)
    }

    /// The scope of a block with declarations, made when it is first executed.
    fn block_scope(&mut self, statement: &'a Stmt, label: Option<&str>, decls: &'a [Item]) -> Outcome<ScopeId> {
        let key = (std::ptr::from_ref(statement), self.here);
        if let Some(&scope) = self.named_blocks.get(&key).or_else(|| self.block_scopes.get(&key)) {
            return Ok(scope);
        }
        let scope = self.make_block_scope(label, decls)?;
        self.block_scopes.insert(key, scope);
        Ok(scope)
    }

    fn make_block_scope(&mut self, label: Option<&str>, decls: &'a [Item]) -> Outcome<ScopeId> {
        let (instance, outer) = (self.scope(self.here).instance, &self.scope(self.here).prefix);
        let prefix = match label {
            Some(label) => format!("{outer}{label}."),
            None => outer.clone(),
        };
        let scope = self.inner_scope(self.here, label.unwrap_or(""), instance, prefix);
        let home = if self.call_depth > 0 { Storage::Local } else { Storage::Variable };
        self.declare_all(scope, decls, home)?;
        for declarator in decls.iter().filter_map(declarators).flatten() {
            let symbol = self.scope(scope).names.get(&declarator.name.name).cloned();
            let Some(super::scope::Symbol::Variable(id)) = symbol else { continue };
            if self.variable(id).storage != Storage::Variable {
                continue;
            }
            let ty = std::rc::Rc::clone(&self.variable(id).ty);
            self.variables[id.index()].init = match &declarator.init {
                Some(init) if declarator.once => {
                    let value = self.in_scope(scope, |this| this.constant_for(init, &ty))?;
                    Some(bits::from_value(&value))
                }
                _ => ty.defaults(),
            };
        }
        Ok(scope)
    }

    /// Makes the scopes of the labelled blocks of a process before it is executed, so that other places can name what is
    /// declared in them. One that fails is made, and fails, again when it is executed.
    pub fn name_blocks(&mut self, scope: ScopeId, statement: &'a Stmt) {
        match &statement.kind {
            StmtKind::Block { label: Some(label), decls, body } if !decls.is_empty() => {
                let made = self.in_scope(scope, |this| this.make_block_scope(Some(&label.name), decls));
                let Ok(inner) = made else { return };
                self.named_blocks.insert((std::ptr::from_ref(statement), scope), inner);
                self.declare(scope, &label.name, super::scope::Symbol::Scope(inner));
                body.iter().for_each(|statement| self.name_blocks(inner, statement));
            }
            StmtKind::Block { decls, body, .. } if decls.is_empty() => {
                body.iter().for_each(|statement| self.name_blocks(scope, statement));
            }
            StmtKind::If { then, otherwise, .. } => {
                self.name_blocks(scope, then);
                if let Some(otherwise) = otherwise {
                    self.name_blocks(scope, otherwise);
                }
            }
            StmtKind::Case(case) => {
                case.arms.iter().for_each(|arm| self.name_blocks(scope, &arm.body));
                if let Some(default) = &case.default {
                    self.name_blocks(scope, default);
                }
            }
            _ => {}
        }
    }

    /// Executes the initialisers of variables declared in a block.
    pub fn initialise_locals(&mut self, scope: ScopeId, decls: &'a [Item]) -> Outcome<()> {
        for declarator in decls.iter().filter_map(declarators).flatten() {
            let symbol = self.scope(scope).names.get(&declarator.name.name).cloned();
            let Some(super::scope::Symbol::Variable(id)) = symbol else { continue };
            let local = self.variable(id).storage == Storage::Local;
            match &declarator.init {
                Some(_) if declarator.once && local => {
                    let what = "static variable with an initial value in a function or task";
                    return Err(unsupported(what, declarator.name.span));
                }
                Some(init) if !declarator.once => {
                    let ty = std::rc::Rc::clone(&self.variable(id).ty);
                    let bits = self.eval_as(init, &ty)?;
                    self.environment.set((id, false), bits);
                }
                None if local => {
                    if let Some(bits) = self.variable(id).ty.defaults() {
                        self.environment.set((id, false), bits);
                    }
                }
                _ => {}
            }
        }
        Ok(())
    }

    fn loop_variable(&mut self, scope: ScopeId, name: &str, ty: std::rc::Rc<Type>, span: Span) -> VariableId {
        if let Some(&super::scope::Symbol::Variable(id)) = self.scope(scope).names.get(name) {
            return id;
        }
        let id = self.add_local(name, ty, span, Storage::Local);
        self.declare(scope, name, super::scope::Symbol::Variable(id));
        id
    }

    fn execute_for(
        &mut self,
        statement: &'a Stmt,
        init: &'a [ForInit],
        cond: Option<&'a Expr>,
        step: &'a [Assignment],
        body: &'a Stmt,
    ) -> Outcome<Exits> {
        let declares = init.iter().any(|init| matches!(init, ForInit::Declare { .. }));
        let scope = if declares { self.block_scope(statement, None, &[])? } else { self.here };
        let mut locals = Vec::new();
        let outcome = self.in_scope(scope, |this| {
            for init in init {
                match init {
                    ForInit::Assign(assignment) => this.assign(assignment)?,
                    ForInit::Declare { ty, name, value } => {
                        let ty = this.data_type(ty)?;
                        let bits = this.eval_as(value, &ty)?;
                        let local = this.loop_variable(scope, &name.name, ty, name.span);
                        this.environment.set((local, false), bits);
                        locals.push(local);
                    }
                }
            }
            this.execute_loop(cond, true, step, body)
        });
        for local in locals {
            self.environment.forget(local);
        }
        outcome
    }

    /// A loop that goes on while its condition holds; `check_first` unless it is a do-while loop.
    fn execute_loop(
        &mut self,
        cond: Option<&'a Expr>,
        check_first: bool,
        step: &'a [Assignment],
        body: &'a Stmt,
    ) -> Outcome<Exits> {
        let site = self.site(cond.map_or(body.span, |cond| cond.span));
        self.points.push(Point::Loop);
        let depth = self.points.len() - 1;
        let mut sequence = Sequence::new();
        let mut variable_passes = 0;
        let mut first = true;
        loop {
            self.step(body.span)?;
            if let Some(cond) = cond
                && (check_first || !first)
            {
                let condition = self.eval_condition(cond)?;
                match condition {
                    Bit::One => {}
                    Bit::Zero | Bit::X | Bit::Z => break,
                    condition => {
                        variable_passes += 1;
                        if variable_passes > VARIABLE_PASSES {
                            return Err(wrong(
                                format!("a loop whose end depends on signals takes more than {VARIABLE_PASSES} passes"),
                                cond.span,
                            ));
                        }
                        let ends = self.not(condition, site);
                        if !sequence.after(self, Exits::from([(depth, ends)]), site) {
                            break;
                        }
                    }
                }
            }
            first = false;
            let before = sequence.jumps.len();
            if !self.execute_pass(body, &mut sequence)? {
                break;
            }
            variable_passes += usize::from(sequence.jumps.len() > before);
            if variable_passes > VARIABLE_PASSES {
                return Err(wrong("a loop whose end depends on signals takes too many passes", body.span));
            }
            for assignment in step {
                self.assign(assignment)?;
            }
        }
        let mut exits = sequence.finish(self);
        self.points.truncate(depth);
        exits.remove(&depth);
        Ok(exits)
    }

    /// One pass of a loop, as a part of the sequence of all passes; whether another one can follow.
    fn execute_pass(&mut self, body: &'a Stmt, sequence: &mut Sequence) -> Outcome<bool> {
        self.points.push(Point::Pass);
        let depth = self.points.len() - 1;
        let mut pass = Sequence::new();
        let goes_on = self.execute_into(std::slice::from_ref(body), &mut pass)?;
        self.points.truncate(depth);
        if !pass.jumps.iter().any(|(_, exits, _)| exits.contains_key(&depth)) {
            sequence.jumps.extend(pass.jumps);
            return Ok(goes_on);
        }
        // A `continue` leads to the end of the pass.
        let mut exits = pass.finish(self);
        exits.remove(&depth);
        let site = self.site(body.span);
        Ok(sequence.after(self, exits, site))
    }

    fn execute_foreach(
        &mut self,
        variables: &[Option<VariableId>],
        ty: Option<std::rc::Rc<Type>>,
        body: &'a Stmt,
        span: Span,
        outer: &mut Sequence,
    ) -> Outcome<bool> {
        let Some((&variable, rest)) = variables.split_first() else {
            return self.execute_pass(body, outer);
        };
        let Some((range, element)) = ty.and_then(|ty| Some((ty.range()?, ty.element()))) else {
            return Err(wrong("foreach over something that is no array", span));
        };
        self.points.push(Point::Loop);
        let depth = self.points.len() - 1;
        let mut sequence = Sequence::new();
        let passes = if variable.is_some() { range.len() } else { 1 };
        for position in (0..passes).rev() {
            if let Some(variable) = variable {
                let number = super::value::Value::from_i64(range.index(position), 32, true);
                self.environment.set((variable, false), bits::from_value(&number));
            }
            if !self.execute_foreach(rest, element.clone(), body, span, &mut sequence)? {
                break;
            }
        }
        let mut exits = sequence.finish(self);
        self.points.truncate(depth);
        exits.remove(&depth);
        let site = self.site(span);
        Ok(outer.after(self, exits, site))
    }
}

/// Assignments.
impl<'a> Elaborator<'a> {
    pub fn assign(&mut self, assignment: &'a Assignment) -> Outcome<()> {
        if let Some(what) = self.inert(&assignment.target) {
            self.skip(what);
            return Ok(());
        }
        if assignment.op.is_some() && has_step(&assignment.target) {
            let what = "assignment or increment in an index of what a compound assignment changes";
            return Err(unsupported(what, assignment.target.span));
        }
        if matches!(assignment.target.kind, ExprKind::Stream { .. }) {
            let (places, bits) = self.unpack_stream(&assignment.target, &assignment.value)?;
            let nonblocking = assignment.nonblocking && self.environment.mode != Mode::Initial;
            let site = self.site(assignment.span);
            return self.store(&places, &bits, nonblocking, site);
        }
        let targets = self.targets(&assignment.target)?;
        let width: usize = targets.iter().map(|place| place.ty.width).sum();
        let site = self.site(assignment.span);
        let value = match assignment.op {
            None => match targets.as_slice() {
                [place] => {
                    let ty = std::rc::Rc::clone(&place.ty);
                    self.eval_as(&assignment.value, &ty)
                }
                _ => self.eval_assigned(&assignment.value, width),
            },
            Some(op) => self.eval_compound(op, &assignment.target, &assignment.value, width),
        };
        let value = match value {
            Ok(value) => value,
            Err(diagnostic) if self.strict || self.is_spent() => return Err(diagnostic),
            Err(diagnostic) => {
                self.report(*diagnostic);
                (0..width).map(|_| Bit::Node(self.builder.source(SourceKind::BlackBox, site))).collect()
            }
        };
        let nonblocking = assignment.nonblocking && self.environment.mode != Mode::Initial;
        self.store(&targets, &value, nonblocking, site)
    }

    /// Puts a value into places, the last of which takes the low bits.
    pub fn store(&mut self, targets: &[Place], value: &[Bit], nonblocking: bool, site: Site) -> Outcome<()> {
        let mut low = 0;
        for place in targets.iter().rev() {
            let part = &value[low.min(value.len())..(low + place.ty.width).min(value.len())];
            low += place.ty.width;
            if let Base::Variable(id) = place.base
                && self.variable(id).storage != Storage::Memory
            {
                self.update((id, nonblocking), |this, bits| this.write_steps(bits, &place.steps, part, site));
            }
        }
        Ok(())
    }

    /// The places on the left side, the most significant first.
    pub fn targets(&mut self, target: &'a Expr) -> Outcome<Vec<Place>> {
        let parts: &'a [Expr] = match &target.kind {
            ExprKind::Concat(parts) => parts,
            ExprKind::Pattern { items, .. } => {
                let mut places = Vec::new();
                for item in items {
                    places.extend(self.targets(&item.value)?);
                }
                return Ok(places);
            }
            // Only reached by what asks which variables a statement assigns, or by a connection.
            ExprKind::Stream { parts, left: false, .. } => parts,
            ExprKind::Stream { .. } => return Err(unsupported("streaming in this place", target.span)),
            _ => {
                let place = self.place(target, Want::Value)?;
                if !matches!(place.base, Base::Variable(_)) {
                    return Err(wrong("an assignment to something that is no net or variable", target.span));
                }
                return Ok(vec![place]);
            }
        };
        let mut places = Vec::new();
        for part in parts {
            places.extend(self.targets(part)?);
        }
        Ok(places)
    }

    /// The right side of an assignment to `width` bits.
    pub fn eval_assigned(&mut self, value: &'a Expr, width: usize) -> Outcome<Vec<Bit>> {
        if matches!(value.kind, ExprKind::Stream { .. }) {
            return self.eval_stream_into(value, width);
        }
        let (own, signed) = self.size(value)?;
        let bits = self.eval(value, own.max(width), signed)?;
        Ok(extend(bits, width, signed))
    }

    fn eval_compound(&mut self, op: BinaryOp, target: &'a Expr, value: &'a Expr, width: usize) -> Outcome<Vec<Bit>> {
        let site = self.site(target.span.to(value.span));
        let (target_width, target_signed) = self.size(target)?;
        let (value_width, value_signed) = self.size(value)?;
        let shift =
            matches!(op, BinaryOp::Shl | BinaryOp::Shr | BinaryOp::ArithShl | BinaryOp::ArithShr | BinaryOp::Pow);
        let (context, signed) = if shift {
            (target_width, target_signed)
        } else {
            (target_width.max(value_width), target_signed && value_signed)
        };
        let a = self.eval(target, context, signed)?;
        let b = if shift { self.eval_self(value)?.0 } else { self.eval(value, context, signed)? };
        let result = self.operate(op, &a, &b, signed, value_signed, site)?;
        Ok(extend(result, width, signed))
    }

    /// Makes everything that a statement assigns opaque.
    pub fn poison(&mut self, statement: &'a Stmt) {
        let mut targets = Vec::new();
        collect_targets(statement, &mut targets);
        let parts = targets.into_iter().flat_map(|(target, nonblocking)| {
            let parts: &'a [Expr] = match &target.kind {
                ExprKind::Stream { parts, .. } => parts,
                _ => std::slice::from_ref(target),
            };
            parts.iter().map(move |part| (part, nonblocking))
        });
        for (target, nonblocking) in parts {
            let places = match self.targets(target) {
                Ok(places) => places,
                Err(_) => continue,
            };
            let site = self.site(target.span);
            for place in places {
                let Base::Variable(id) = place.base else { continue };
                if self.variable(id).storage == Storage::Memory {
                    continue;
                }
                let nonblocking = nonblocking && self.environment.mode != Mode::Initial;
                let fixed = place.steps.iter().all(|step| matches!(step, super::place::Step::Fixed { .. }));
                let width = if fixed { place.ty.width } else { self.variable(id).ty.width };
                let fresh: Vec<Bit> =
                    (0..width).map(|_| Bit::Node(self.builder.source(SourceKind::BlackBox, site))).collect();
                let steps = if fixed { place.steps } else { Vec::new() };
                self.update((id, nonblocking), |this, bits| this.write_steps(bits, &steps, &fresh, site));
            }
        }
    }
}

/// All left sides in a statement, and whether they are assigned by nonblocking assignments.
pub(super) fn collect_targets<'s>(statement: &'s Stmt, targets: &mut Vec<(&'s Expr, bool)>) {
    match &statement.kind {
        StmtKind::Assign(assignment) => targets.push((&assignment.target, assignment.nonblocking)),
        StmtKind::Block { body, .. } => body.iter().for_each(|inner| collect_targets(inner, targets)),
        StmtKind::If { then, otherwise, .. } => {
            collect_targets(then, targets);
            if let Some(otherwise) = otherwise {
                collect_targets(otherwise, targets);
            }
        }
        StmtKind::Case(case) => {
            case.arms.iter().for_each(|arm| collect_targets(&arm.body, targets));
            if let Some(default) = &case.default {
                collect_targets(default, targets);
            }
        }
        StmtKind::For { body, .. }
        | StmtKind::Foreach { body, .. }
        | StmtKind::While { body, .. }
        | StmtKind::DoWhile { body, .. }
        | StmtKind::Repeat { body, .. }
        | StmtKind::Forever { body }
        | StmtKind::Timed { body, .. } => collect_targets(body, targets),
        _ => {}
    }
}
