//! `--set`: parameters of the top from the command line. What a value did is read off the widths and cells of the
//! flattened design; mistakes end with exit code 2 before anything is analysed.

use std::process::Command;

use crate::tree::Tree;

const DESIGN: &str = "\
package p;
  typedef enum logic [1:0] {Slow, Fast = 2} speed_e;
  parameter int Wide = 12;
endpackage
module t import p::Wide; #(
  parameter p::speed_e Speed = p::Slow,
  parameter Width = 4,
  parameter string Name = \"a\",
  parameter bit Twice = 0,
  parameter type Data = logic,
  parameter logic [3:0] List[2] = '{1, 2},
  localparam Local = Width
) (input clk, input Data d, input [Local-1:0] e, output logic [Width-1:0] q, output Data r);
  if (Speed == p::Fast) begin : fast
    always_ff @(posedge clk) q <= e;
  end else begin : slow
    always_latch if (clk) q = e;
  end
  if (Name == \"both\" && List[1] == 3 || Twice) begin : more
    always_ff @(negedge clk) r <= d;
  end else begin : less
    assign r = d;
  end
endmodule
module other #(parameter Depth = 2) (input [Depth-1:0] i, output [Depth-1:0] o);
  parameter Inside = 1;
  assign o = i;
endmodule
";

struct Run {
    exit: i32,
    verilog: String,
    error: String,
}

#[track_caller]
fn flatten(tops: &[&str], set: &[&str]) -> Run {
    let tree = Tree::new(&[("t.sv", DESIGN)]);
    let output = Command::new(env!("CARGO_BIN_EXE_stillwire"))
        .arg("flatten")
        .arg(tree.path("t.sv"))
        .args(tops.iter().flat_map(|top| ["--top", top]))
        .args(set.iter().flat_map(|set| ["--set", set]))
        .output()
        .expect("the program starts");
    let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
    let exit = output.status.code().expect("an exit code");
    Run { exit, verilog: text(&output.stdout), error: text(&output.stderr) }
}

/// With these values the flattened top has these lines.
#[track_caller]
fn check_set(set: &[&str], lines: &[&str]) {
    let run = flatten(&["t"], set);
    assert_eq!(run.exit, 0, "{set:?}: {}", run.error);
    for line in lines {
        let found = run.verilog.lines().any(|other| other.trim() == *line);
        assert!(found, "{set:?}: no line `{line}` in\n{}", run.verilog);
    }
}

/// Whether the flattened top is clocked at this edge.
#[track_caller]
fn clocked(set: &[&str], edge: &str) -> bool {
    let run = flatten(&["t"], set);
    assert_eq!(run.exit, 0, "{set:?}: {}", run.error);
    run.verilog.contains(&format!("@({edge} "))
}

#[test]
fn numbers_and_expressions() {
    check_set(&[], &["input d;", "input [3:0] e;", "output [3:0] q;"]);
    for value in ["Width=9", "Width=4'd9", "Width=$clog2(300)", "Width=Wide-3", "Width=p::Wide-3", "Width = 9"] {
        check_set(&[value], &["input [8:0] e;", "output [8:0] q;"]);
    }
    check_set(&["Width=3", "Width=5"], &["input [4:0] e;"]);
}

#[test]
fn members_of_an_enumeration_by_name_and_by_number() {
    assert!(!clocked(&[], "posedge"));
    for value in ["Speed=Fast", "Speed=p::Fast", "Speed=2", "Speed=2'b10"] {
        assert!(clocked(&[value], "posedge"), "{value}");
    }
    assert!(!clocked(&["Speed=Slow"], "posedge"));
}

#[test]
fn texts_patterns_and_types() {
    assert!(!clocked(&["Name=\"both\""], "negedge"));
    assert!(!clocked(&["List='{1, 3}"], "negedge"));
    assert!(clocked(&["Name=\"both\"", "List='{1, 3}"], "negedge"));
    assert!(clocked(&["Twice=1"], "negedge"));
    check_set(&["Data=logic [7:0]"], &["input [7:0] d;", "output [7:0] r;"]);
    check_set(&["Data=p::speed_e"], &["input [1:0] d;"]);
}

#[test]
fn a_parameter_of_one_of_several_tops() {
    let run = flatten(&["t", "other"], &["Depth=3", "Width=2"]);
    assert_eq!(run.exit, 0, "{}", run.error);
    assert!(run.verilog.contains("input [2:0] i;") && run.verilog.contains("input [1:0] e;"), "{}", run.verilog);
}

#[track_caller]
fn check_mistake(tops: &[&str], set: &str, message: &str, help: &str) {
    let run = flatten(tops, &[set]);
    assert_eq!((run.exit, run.verilog.as_str()), (2, ""), "{set}: {}", run.error);
    assert_eq!(run.error, format!("error: {message}\n  help: {help}\n"), "{set}");
}

#[test]
fn mistakes_are_errors_of_usage() {
    let t = &["t"][..];
    check_mistake(t, "Widht=3", "`Widht` is no parameter of the top `t`", "did you mean `Width`?");
    check_mistake(
        t,
        "Q=3",
        "`Q` is no parameter of the top `t`",
        "its parameters are `Data`, `List`, `Name`, `Speed`, `Twice`, `Width`",
    );
    let local = "a local parameter follows from the others; set these instead";
    check_mistake(t, "Local=3", "`Local` is a local parameter of the top `t` and cannot be set", local);
    check_mistake(&["other"], "Inside=3", "`Inside` is a local parameter of the top `other` and cannot be set", local);
    check_mistake(&["t", "other"], "Widht=3", "`Widht` is no parameter of any of the tops", "did you mean `Width`?");
    check_mistake(t, "Speed=Fats", "`--set Speed=Fats`: `Fats` is not known in the top module", "did you mean `Fast`?");
    check_mistake(
        t,
        "Speed=1",
        "`--set Speed=1`: no member of the enumeration has the value 1",
        "the values are `Slow (0)`, `Fast (2)`",
    );
    check_mistake(
        t,
        "Name=both",
        "`--set Name=both`: `both` is not known in the top module",
        "a text stands in double quotes, as in `--set 'Name=\"both\"'`",
    );
    check_mistake(t, "Twice=2", "`--set Twice=2`: 2 does not fit the one bit of the parameter", "give a smaller value");
    check_mistake(
        t,
        "Width=1/0",
        "`--set Width=1/0`: division by zero in a constant expression",
        "the value is worked out inside the top module, from what is imported or declared before",
    );
    check_mistake(
        t,
        "Data=4",
        "`--set Data=4`: this is no data type",
        "it takes a data type, such as `logic [7:0]` or `package::name`",
    );
    check_mistake(
        t,
        "Width=1;",
        "the value in `--set Width=1;` is no expression",
        "the value is an expression as in Verilog; a text stands in double quotes, as in `--set 'NAME=\"text\"'`",
    );
    assert_eq!(flatten(t, &["Width"]).exit, 2);
    assert_eq!(flatten(t, &["1=1"]).exit, 2);
}
