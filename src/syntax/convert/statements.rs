//! Procedural statements. What only a simulator needs (`$display`, assertions) is `Skipped`; what would change the meaning
//! of the hardware and has no place in the tree is `Unsupported`.

use sv_parser as sv;

use super::Converter;
use super::ast::{Assignment, Case, CaseArm, CaseKind, Expr, ExprKind, ForInit, Stmt, StmtKind, Unique};
use super::names::Scope;
use crate::source::Span;

/// System tasks without any effect on the values of variables (IEEE 1800-2017 clauses 20 and 21).
const SIMULATION_TASKS: &[&str] = &[
    "$display",
    "$displayb",
    "$displayh",
    "$displayo",
    "$write",
    "$writeb",
    "$writeh",
    "$writeo",
    "$strobe",
    "$strobeb",
    "$strobeh",
    "$strobeo",
    "$monitor",
    "$monitorb",
    "$monitorh",
    "$monitoro",
    "$monitoron",
    "$monitoroff",
    "$fdisplay",
    "$fdisplayb",
    "$fdisplayh",
    "$fdisplayo",
    "$fwrite",
    "$fwriteb",
    "$fwriteh",
    "$fwriteo",
    "$fstrobe",
    "$fstrobeb",
    "$fstrobeh",
    "$fstrobeo",
    "$fmonitor",
    "$fmonitorb",
    "$fmonitorh",
    "$fmonitoro",
    "$fopen",
    "$fclose",
    "$fflush",
    "$finish",
    "$stop",
    "$exit",
    "$fatal",
    "$error",
    "$warning",
    "$info",
    "$timeformat",
    "$printtimescale",
    "$dumpfile",
    "$dumpvars",
    "$dumpon",
    "$dumpoff",
    "$dumpall",
    "$dumplimit",
    "$dumpflush",
    "$dumpports",
    "$dumpportson",
    "$dumpportsoff",
    "$dumpportsall",
    "$dumpportslimit",
    "$dumpportsflush",
    "$asserton",
    "$assertoff",
    "$assertkill",
    "$assertcontrol",
    "$assertpasson",
    "$assertpassoff",
    "$assertfailon",
    "$assertfailoff",
    "$assertnonvacuouson",
    "$assertvacuousoff",
    "$writememb",
    "$writememh",
    "$system",
    "$srandom",
];

impl Converter<'_> {
    pub(super) fn statements(&self, list: &[sv::StatementOrNull]) -> Vec<Stmt> {
        list.iter().map(|statement| self.statement_or_null(statement)).collect()
    }

    pub(super) fn function_statements(&self, list: &[sv::FunctionStatementOrNull]) -> Vec<Stmt> {
        let statement = |statement: &sv::FunctionStatementOrNull| match statement {
            sv::FunctionStatementOrNull::Statement(x) => self.statement(&x.nodes.0),
            sv::FunctionStatementOrNull::Attribute(x) => self.null_statement(&x.nodes.0, self.span(&**x)),
        };
        list.iter().map(statement).collect()
    }

    pub(super) fn statement_or_null(&self, statement: &sv::StatementOrNull) -> Stmt {
        match statement {
            sv::StatementOrNull::Statement(x) => self.statement(x),
            sv::StatementOrNull::Attribute(x) => self.null_statement(&x.nodes.0, self.span(&**x)),
        }
    }

    fn null_statement(&self, attributes: &[sv::AttributeInstance], span: Span) -> Stmt {
        Stmt { kind: StmtKind::Empty, attributes: self.attributes(attributes), span }
    }

    pub(super) fn statement(&self, statement: &sv::Statement) -> Stmt {
        let (label, attributes, item) = &statement.nodes;
        let span = self.span(item);
        let attributes = self.attributes(attributes);
        let mut stmt = Stmt { kind: self.statement_item(item), attributes, span };
        if let Some((name, _)) = label {
            let name = self.ident(&name.nodes.0);
            match &mut stmt.kind {
                StmtKind::Block { label, .. } => *label = label.take().or(Some(name)),
                StmtKind::Skipped(_) => {}
                // A label on any other statement names a scope around it (clause 9.3.5).
                _ => {
                    let kind = StmtKind::Block { label: Some(name), decls: Vec::new(), body: vec![stmt] };
                    stmt = Stmt { kind, attributes: Vec::new(), span: self.span(statement) };
                }
            }
        }
        stmt
    }

    fn statement_item(&self, item: &sv::StatementItem) -> StmtKind {
        let unsupported = |what: &str| StmtKind::Unsupported(what.to_string());
        match item {
            sv::StatementItem::BlockingAssignment(x) => self.blocking_assignment(&x.0),
            sv::StatementItem::NonblockingAssignment(x) => {
                let (target, _, control, value) = &x.0.nodes;
                if let Some((what, _)) = control.as_ref().and_then(|control| self.intra_assignment(control)) {
                    return unsupported(what);
                }
                let (target, value) = (self.variable_lvalue(target), self.expression(value));
                let span = target.span.to(value.span);
                StmtKind::Assign(Assignment { target, op: None, value, nonblocking: true, span })
            }
            sv::StatementItem::ProceduralContinuousAssignment(x) => unsupported(match x.0 {
                sv::ProceduralContinuousAssignment::Assign(_) | sv::ProceduralContinuousAssignment::Deassign(_) => {
                    "procedural continuous assignment"
                }
                _ => "force or release",
            }),
            sv::StatementItem::CaseStatement(x) => self.case(x),
            sv::StatementItem::ConditionalStatement(x) => self.conditional(x),
            sv::StatementItem::IncOrDecExpression(x) => StmtKind::Assign(self.increment(&x.0)),
            sv::StatementItem::SubroutineCallStatement(x) => match &**x {
                sv::SubroutineCallStatement::SubroutineCall(x) => self.call_statement(&x.0),
                sv::SubroutineCallStatement::Function(x) => {
                    StmtKind::Call(as_call(self.function_call(&x.nodes.2.nodes.1)))
                }
            },
            sv::StatementItem::DisableStatement(x) => match &**x {
                sv::DisableStatement::Task(x) => StmtKind::Disable(self.hierarchical(Scope::None, &x.nodes.1.nodes.0)),
                sv::DisableStatement::Block(x) => StmtKind::Disable(self.hierarchical(Scope::None, &x.nodes.1.nodes.0)),
                sv::DisableStatement::Fork(_) => unsupported("disable fork"),
            },
            // A process that waits for the event says so itself.
            sv::StatementItem::EventTrigger(_) => StmtKind::Skipped("event trigger".to_string()),
            sv::StatementItem::LoopStatement(x) => self.loop_statement(x),
            sv::StatementItem::JumpStatement(x) => match &**x {
                sv::JumpStatement::Return(x) => {
                    StmtKind::Return(x.nodes.1.as_ref().map(|value| self.expression(value)))
                }
                sv::JumpStatement::Break(_) => StmtKind::Break,
                sv::JumpStatement::Continue(_) => StmtKind::Continue,
            },
            sv::StatementItem::ParBlock(_) => unsupported("fork"),
            sv::StatementItem::ProceduralTimingControlStatement(x) => self.timed_statement(x),
            sv::StatementItem::SeqBlock(x) => {
                let (_, label, declarations, body, _, _) = &x.nodes;
                let mut decls = Vec::new();
                declarations.iter().for_each(|declaration| self.block_item(declaration, &mut decls));
                let label = label.as_ref().map(|(_, name)| self.ident(&name.nodes.0));
                StmtKind::Block { label, decls, body: self.statements(body) }
            }
            sv::StatementItem::WaitStatement(x) => match &**x {
                sv::WaitStatement::Wait(x) => {
                    let body = Box::new(self.statement_or_null(&x.nodes.2));
                    StmtKind::Timed { what: "wait".to_string(), body }
                }
                sv::WaitStatement::Fork(_) => unsupported("wait fork"),
                sv::WaitStatement::Order(_) => unsupported("wait_order"),
            },
            sv::StatementItem::ProceduralAssertionStatement(x) => {
                let what = match **x {
                    sv::ProceduralAssertionStatement::Checker(_) => "checker",
                    _ => "assertion",
                };
                StmtKind::Skipped(what.to_string())
            }
            sv::StatementItem::ClockingDrive(_) => unsupported("clocking drive"),
            sv::StatementItem::RandsequenceStatement(_) => unsupported("randsequence"),
            sv::StatementItem::RandcaseStatement(_) => unsupported("randcase"),
            sv::StatementItem::ExpectPropertyStatement(_) => StmtKind::Skipped("assertion".to_string()),
        }
    }

    fn blocking_assignment(&self, assignment: &sv::BlockingAssignment) -> StmtKind {
        match assignment {
            sv::BlockingAssignment::Variable(x) => {
                let (target, _, control, value) = &x.nodes;
                if let Some((what, _)) = self.intra_assignment(control) {
                    return StmtKind::Unsupported(what.to_string());
                }
                let (target, value) = (self.variable_lvalue(target), self.expression(value));
                let span = target.span.to(value.span);
                StmtKind::Assign(Assignment { target, op: None, value, nonblocking: false, span })
            }
            sv::BlockingAssignment::NonrangeVariable(_) => StmtKind::Unsupported("dynamic array".to_string()),
            sv::BlockingAssignment::HierarchicalVariable(_) => StmtKind::Unsupported("class object".to_string()),
            sv::BlockingAssignment::OperatorAssignment(x) => StmtKind::Assign(self.operator_assignment(x)),
        }
    }

    /// A call as a statement. System tasks that only print or control the simulator are left out.
    fn call_statement(&self, call: &sv::SubroutineCall) -> StmtKind {
        let expr = self.subroutine_call(call);
        match &expr.kind {
            ExprKind::SystemCall { name, .. } if SIMULATION_TASKS.contains(&name.as_str()) => {
                StmtKind::Skipped(name.clone())
            }
            _ => StmtKind::Call(as_call(expr)),
        }
    }

    fn conditional(&self, statement: &sv::ConditionalStatement) -> StmtKind {
        let (unique, _, cond, then, middle, last) = &statement.nodes;
        let mut otherwise = last.as_ref().map(|(_, statement)| Box::new(self.statement_or_null(statement)));
        // `else if` is kept flat by the parser; it is a nested `if`, whose place ends where the whole does.
        for (_, keyword, cond, then) in middle.iter().rev() {
            let then = self.statement_or_null(then);
            let end = otherwise.as_ref().map_or(then.span, |stmt| stmt.span);
            let span = self.span(keyword).to(end);
            let kind = StmtKind::If { cond: self.head_condition(cond), then: Box::new(then), otherwise, unique: None };
            otherwise = Some(Box::new(Stmt { kind, attributes: Vec::new(), span }));
        }
        StmtKind::If {
            cond: self.head_condition(cond),
            then: Box::new(self.statement_or_null(then)),
            otherwise,
            unique: unique.as_ref().map(unique_of),
        }
    }

    /// The condition of an `if`; its place includes the parentheses, so that the head of the statement ends behind them.
    fn head_condition(&self, cond: &sv::Paren<sv::CondPredicate>) -> Expr {
        Expr { span: self.span(cond), ..self.condition(&cond.nodes.1) }
    }

    /// The subject of a `case`, with the parentheses likewise.
    fn subject(&self, subject: &sv::Paren<sv::CaseExpression>) -> Expr {
        Expr { span: self.span(subject), ..self.expression(&subject.nodes.1.nodes.0) }
    }

    fn case(&self, statement: &sv::CaseStatement) -> StmtKind {
        let mut arms = Vec::new();
        let mut default = None;
        let mut defaults = 0;
        let case = match statement {
            sv::CaseStatement::Normal(x) => {
                let (unique, keyword, subject, first, more, _) = &x.nodes;
                for item in std::iter::once(first).chain(more) {
                    match item {
                        sv::CaseItem::NonDefault(x) => {
                            let (labels, _, body) = &x.nodes;
                            let labels = labels.contents().into_iter().map(|label| self.expression(&label.nodes.0));
                            arms.push(CaseArm {
                                labels: labels.collect(),
                                body: self.statement_or_null(body),
                                span: self.span(&**x),
                            });
                        }
                        sv::CaseItem::Default(x) => {
                            default = Some(Box::new(self.statement_or_null(&x.nodes.2)));
                            defaults += 1;
                        }
                    }
                }
                let kind = match keyword {
                    sv::CaseKeyword::Case(_) => CaseKind::Case,
                    sv::CaseKeyword::Casez(_) => CaseKind::Casez,
                    sv::CaseKeyword::Casex(_) => CaseKind::Casex,
                };
                let subject = self.subject(subject);
                Case { kind, unique: unique.as_ref().map(unique_of), subject, arms, default }
            }
            sv::CaseStatement::Inside(x) => {
                let (unique, _, subject, _, first, more, _) = &x.nodes;
                for item in std::iter::once(first).chain(more) {
                    match item {
                        sv::CaseInsideItem::NonDefault(x) => {
                            let (labels, _, body) = &x.nodes;
                            arms.push(CaseArm {
                                labels: self.open_ranges(labels),
                                body: self.statement_or_null(body),
                                span: self.span(&**x),
                            });
                        }
                        sv::CaseInsideItem::Default(x) => {
                            default = Some(Box::new(self.statement_or_null(&x.nodes.2)));
                            defaults += 1;
                        }
                    }
                }
                let subject = self.subject(subject);
                Case { kind: CaseKind::Inside, unique: unique.as_ref().map(unique_of), subject, arms, default }
            }
            sv::CaseStatement::Matches(_) => return StmtKind::Unsupported("case matches".to_string()),
        };
        match defaults {
            0 | 1 => StmtKind::Case(case),
            _ => StmtKind::Unsupported("case with more than one default".to_string()),
        }
    }

    fn loop_statement(&self, statement: &sv::LoopStatement) -> StmtKind {
        match statement {
            sv::LoopStatement::Forever(x) => StmtKind::Forever { body: Box::new(self.statement_or_null(&x.nodes.1)) },
            sv::LoopStatement::Repeat(x) => {
                let (_, count, body) = &x.nodes;
                let count = self.expression(&count.nodes.1);
                StmtKind::Repeat { count, body: Box::new(self.statement_or_null(body)) }
            }
            sv::LoopStatement::While(x) => {
                let (_, cond, body) = &x.nodes;
                let cond = self.expression(&cond.nodes.1);
                StmtKind::While { cond, body: Box::new(self.statement_or_null(body)) }
            }
            sv::LoopStatement::DoWhile(x) => {
                let (_, body, _, cond, _) = &x.nodes;
                let cond = self.expression(&cond.nodes.1);
                StmtKind::DoWhile { cond, body: Box::new(self.statement_or_null(body)) }
            }
            sv::LoopStatement::For(x) => self.for_loop(x),
            sv::LoopStatement::Foreach(x) => {
                let (_, header, body) = &x.nodes;
                let (array, vars) = &header.nodes.1;
                let (scope, name) = &array.nodes;
                let vars = vars.nodes.1.nodes.0.contents().into_iter();
                StmtKind::Foreach {
                    array: self.hierarchical(self.any_scope(scope), &name.nodes.0),
                    vars: vars.map(|var| var.as_ref().map(|var| self.ident(&var.nodes.0))).collect(),
                    body: Box::new(self.statement(body)),
                }
            }
        }
    }

    fn for_loop(&self, statement: &sv::LoopStatementFor) -> StmtKind {
        let (_, header, body) = &statement.nodes;
        let (init, _, cond, _, step) = &header.nodes.1;
        let mut inits = Vec::new();
        match init {
            None => {}
            Some(sv::ForInitialization::ListOfVariableAssignments(x)) => {
                let assignments = x.nodes.0.contents().into_iter();
                inits.extend(assignments.map(|assignment| ForInit::Assign(self.variable_assignment(assignment))));
            }
            Some(sv::ForInitialization::Declaration(x)) => {
                for declaration in x.nodes.0.contents() {
                    let (_, ty, names) = &declaration.nodes;
                    let ty = self.data_type(ty);
                    inits.extend(names.contents().into_iter().map(|(name, _, value)| ForInit::Declare {
                        ty: ty.clone(),
                        name: self.ident(&name.nodes.0),
                        value: self.expression(value),
                    }));
                }
            }
        }
        let mut steps = Vec::new();
        for step in step.iter().flat_map(|step| step.nodes.0.contents()) {
            match step {
                sv::ForStepAssignment::OperatorAssignment(x) => steps.push(self.operator_assignment(x)),
                sv::ForStepAssignment::IncOrDecExpression(x) => steps.push(self.increment(x)),
                sv::ForStepAssignment::FunctionSubroutineCall(_) => {
                    return StmtKind::Unsupported("function call as the step of a for loop".to_string());
                }
            }
        }
        StmtKind::For {
            init: inits,
            cond: cond.as_ref().map(|cond| self.expression(cond)),
            step: steps,
            body: Box::new(self.statement_or_null(body)),
        }
    }
}

/// A call statement without parentheses is a call all the same.
fn as_call(expr: Expr) -> Expr {
    match expr.kind {
        ExprKind::Name(_) | ExprKind::Scoped { .. } | ExprKind::Member(..) => {
            let span = expr.span;
            Expr { kind: ExprKind::Call { callee: Box::new(expr), args: Vec::new() }, span }
        }
        _ => expr,
    }
}

fn unique_of(unique: &sv::UniquePriority) -> Unique {
    match unique {
        sv::UniquePriority::Unique(_) => Unique::Unique,
        sv::UniquePriority::Unique0(_) => Unique::Unique0,
        sv::UniquePriority::Priority(_) => Unique::Priority,
    }
}
