//! Timing controls. Only the event control that heads an `always` body means something to synthesis; it becomes the
//! process's sensitivity. Any other one stays in the body as `Timed`, and elaboration decides.

use sv_parser as sv;

use super::Converter;
use super::ast::{Edge, Event, Expr, Sensitivity, Stmt, StmtKind};
use super::names::Scope;
use crate::source::Span;

impl Converter<'_> {
    /// Splits the statement of an `always` construct into its head and its body.
    pub(super) fn process_body(&self, statement: &sv::Statement) -> (Option<Sensitivity>, Stmt) {
        let (label, attributes, item) = &statement.nodes;
        if let (None, sv::StatementItem::ProceduralTimingControlStatement(x)) = (label, item) {
            let (control, body) = &x.nodes;
            if let sv::ProceduralTimingControl::EventControl(control) = control {
                let mut body = self.statement_or_null(body);
                body.attributes.splice(0..0, self.attributes(attributes));
                return (Some(self.sensitivity(control)), body);
            }
        }
        (None, self.statement(statement))
    }

    fn sensitivity(&self, control: &sv::EventControl) -> Sensitivity {
        match control {
            sv::EventControl::Asterisk(_) | sv::EventControl::ParenAsterisk(_) => Sensitivity::Star,
            sv::EventControl::EventIdentifier(x) => {
                Sensitivity::List(vec![plain_event(self.hierarchical(Scope::None, &x.nodes.1.nodes.0))])
            }
            sv::EventControl::EventExpression(x) => {
                let mut events = Vec::new();
                self.events(&x.nodes.1.nodes.1, &mut events);
                Sensitivity::List(events)
            }
            sv::EventControl::SequenceIdentifier(x) => {
                Sensitivity::List(vec![plain_event(self.unsupported_expr("sequence event", self.span(&**x)))])
            }
        }
    }

    /// The parser nests `or` and `,` to the right; their order is all that matters.
    fn events(&self, expression: &sv::EventExpression, events: &mut Vec<Event>) {
        let mut pending = vec![expression];
        while let Some(next) = pending.pop() {
            match next {
                sv::EventExpression::Or(x) => pending.extend([&x.nodes.2, &x.nodes.0]),
                sv::EventExpression::Comma(x) => pending.extend([&x.nodes.2, &x.nodes.0]),
                sv::EventExpression::Paren(x) => pending.push(&x.nodes.0.nodes.1),
                sv::EventExpression::Expression(x) => {
                    let (edge, expr, iff) = &x.nodes;
                    let edge = edge.as_ref().map(|edge| match edge {
                        sv::EdgeIdentifier::Posedge(_) => Edge::Posedge,
                        sv::EdgeIdentifier::Negedge(_) => Edge::Negedge,
                        sv::EdgeIdentifier::Edge(_) => Edge::Both,
                    });
                    events.push(Event {
                        edge,
                        expr: self.expression(expr),
                        iff: iff.as_ref().map(|(_, condition)| self.expression(condition)),
                        span: self.span(&**x),
                    });
                }
                sv::EventExpression::Sequence(x) => {
                    events.push(plain_event(self.unsupported_expr("sequence event", self.span(&**x))));
                }
            }
        }
    }

    pub(super) fn timed_statement(&self, statement: &sv::ProceduralTimingControlStatement) -> StmtKind {
        let (control, body) = &statement.nodes;
        let what = match control {
            sv::ProceduralTimingControl::DelayControl(_) => "delay control",
            sv::ProceduralTimingControl::EventControl(_) => "event control",
            sv::ProceduralTimingControl::CycleDelay(_) => "cycle delay",
        };
        StmtKind::Timed { what: what.to_string(), body: Box::new(self.statement_or_null(body)) }
    }

    /// The timing control inside an assignment. A delay is left out and counted; waiting for an event is not, and its
    /// name is returned.
    pub(super) fn intra_assignment(&self, control: &sv::DelayOrEventControl) -> Option<(&'static str, Span)> {
        match control {
            sv::DelayOrEventControl::Delay(x) => {
                self.drop_timing(Some(&**x));
                None
            }
            sv::DelayOrEventControl::Event(x) => Some(("event control inside an assignment", self.span(&**x))),
            sv::DelayOrEventControl::Repeat(x) => Some(("repeat control inside an assignment", self.span(&**x))),
        }
    }
}

fn plain_event(expr: Expr) -> Event {
    Event { edge: None, span: expr.span, expr, iff: None }
}
