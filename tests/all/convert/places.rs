//! Places: the text at a node's span is the text of the node, white space and comments around it left out.

use super::convert;
use stillwire::source::Span;
use stillwire::syntax::ast::{ExprKind, ItemKind, StmtKind};

fn text(source: &str, span: Span) -> &str {
    &source[span.start as usize..span.end as usize]
}

#[test]
fn a_module_its_ports_and_its_items() {
    let source = "// head\nmodule m #(parameter W = 2) (\n  input  wire [W-1:0] a , // first\n  output reg q\n);\n\
                  /* c */ foo #(1) u1 (.x(a)) , u2 (a); // end\n  and g1 (q, a , a);\nendmodule // m\n";
    let (unit, _) = convert(source);
    let module = &unit.modules[0];
    assert_eq!(text(source, module.name.span), "m");
    assert!(text(source, module.span).starts_with("module m") && text(source, module.span).ends_with("endmodule"));
    assert_eq!(text(source, module.params[0].span), "W = 2");
    let stillwire::syntax::ast::Ports::Ansi(ports) = &module.ports else { panic!("ANSI ports") };
    assert_eq!(text(source, ports[0].span), "input  wire [W-1:0] a");
    assert_eq!(text(source, module.items[0].span), "foo #(1) u1 (.x(a)) , u2 (a);");
    let ItemKind::Instances { instances, .. } = &module.items[0].kind else { panic!("instances") };
    assert_eq!(text(source, instances[0].span), "u1 (.x(a))");
    assert_eq!(text(source, module.items[1].span), "and g1 (q, a , a);");
}

#[test]
fn expressions_and_their_parts() {
    let source = "module m; assign y = (a | b) & c[3] /* x */ ? {d, e} : ~f; endmodule";
    let (unit, _) = convert(source);
    let ItemKind::Assign(assignments) = &unit.modules[0].items[0].kind else { panic!("an assignment") };
    let value = &assignments[0].1;
    assert_eq!(text(source, value.span), "(a | b) & c[3] /* x */ ? {d, e} : ~f");
    let ExprKind::Cond(cond, then, otherwise) = &value.kind else { panic!("a conditional") };
    assert_eq!(text(source, cond.span), "(a | b) & c[3]");
    assert_eq!(text(source, then.span), "{d, e}");
    assert_eq!(text(source, otherwise.span), "~f");
    let ExprKind::Binary(_, left, right) = &cond.kind else { panic!("an AND") };
    assert_eq!(text(source, left.span), "(a | b)");
    assert_eq!(text(source, right.span), "c[3]");
}

#[test]
fn statements() {
    let source =
        "module m; always @(posedge clk or negedge r) if (!r) q <= 0 ; else if (e) begin q <= d; end // x\nendmodule";
    let (unit, _) = convert(source);
    let ItemKind::Process(process) = &unit.modules[0].items[0].kind else { panic!("a process") };
    let Some(stillwire::syntax::ast::Sensitivity::List(events)) = &process.sensitivity else { panic!("events") };
    assert_eq!(text(source, events[1].span), "negedge r");
    let StmtKind::If { then, otherwise: Some(otherwise), .. } = &process.body.kind else { panic!("an if") };
    assert_eq!(text(source, then.span), "q <= 0 ;");
    assert_eq!(text(source, otherwise.span), "if (e) begin q <= d; end");
}

#[test]
fn an_escaped_name_keeps_its_backslash_in_the_text_only() {
    let source = "module m; wire \\a+b ; endmodule";
    let (unit, _) = convert(source);
    let ItemKind::Net { names, .. } = &unit.modules[0].items[0].kind else { panic!("a net") };
    assert_eq!(names[0].name.name, "a+b");
    assert_eq!(text(source, names[0].name.span), "\\a+b");
}
