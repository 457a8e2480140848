//! Which signals of an edge list are asynchronous controls. That the cells are right is checked by simulation of the fixture
//! `async_controls`; here, that only what acts without a clock is looked at as a pin, and that what is no flip-flop with
//! asynchronous controls is refused.

use crate::pipeline;

fn module(list: &str, body: &str) -> String {
    format!(
        "module m(input clk, rst_n, set_n, s, a, d, output reg q);\n  wire mixed = s ? a : ~d;\n  \
         always @({list}) begin {body} end\nendmodule\n"
    )
}

/// The nets that are looked at as set, reset and load pins.
#[track_caller]
fn check_pins(list: &str, body: &str, set: u64, reset: u64, hazards: usize) {
    let scan = pipeline::scan_text(&module(list, body));
    let nets = |kind: &str| scan.json["coverage"]["pins"][kind]["nets"].as_u64().expect("a number");
    assert_eq!((nets("clock"), nets("set"), nets("reset"), nets("load")), (1, set, reset, 0), "{body}\n{}", scan.text);
    let findings = scan.findings();
    let found = findings.iter().filter(|finding| finding["rule"] == "set-reset-hazard").count();
    assert_eq!(found, hazards, "{body}\n{}", scan.text);
}

#[test]
fn only_listed_signals_are_asynchronous() {
    check_pins("posedge clk or negedge rst_n", "if (!rst_n || mixed) q <= 0; else q <= d;", 0, 1, 0);
    check_pins("posedge clk or negedge rst_n", "if (mixed | ~rst_n) q <= 1; else q <= d;", 1, 0, 0);
    check_pins("posedge clk or posedge mixed", "if (mixed || !rst_n) q <= 0; else q <= d;", 0, 1, 1);
    check_pins("posedge clk or posedge mixed", "q <= mixed ? 1'b1 : d;", 1, 0, 1);
    check_pins(
        "posedge clk or negedge rst_n or posedge mixed",
        "q <= d; if (mixed) q <= 1; if (!rst_n) q <= 0;",
        1,
        1,
        1,
    );
    check_pins(
        "posedge clk or negedge rst_n",
        "case ({rst_n, mixed}) 2'b11: q <= d; 2'b10: q <= a; default: q <= 0; endcase",
        0,
        1,
        0,
    );
}

#[test]
fn what_is_no_such_flip_flop_is_refused() {
    let together = "asynchronous control that acts only together with another signal";
    let unsettled = "asynchronous control that does not settle by itself what it sets";
    for (list, body, construct) in [
        ("posedge clk or negedge rst_n or negedge set_n", "if (!rst_n && !set_n) q <= 0; else q <= d;", together),
        ("posedge clk or negedge rst_n", "if (clk && rst_n) q <= d; else q <= 0;", together),
        ("posedge clk or negedge rst_n", "if (!rst_n && a) q <= 0; else q <= d;", unsettled),
        ("posedge clk or negedge rst_n", "if (a) q <= d; else if (!rst_n) q <= 0;", unsettled),
        ("posedge clk or negedge rst_n", "q <= rst_n ? d : a;", unsettled),
        (
            "posedge clk or negedge rst_n or negedge set_n",
            "if (!rst_n) q <= 0; else if (a) q <= 0; else if (!set_n) q <= 1; else q <= d;",
            unsettled,
        ),
        (
            "posedge clk or negedge rst_n",
            "if (rst_n) q <= 0; else q <= d;",
            "asynchronous control tested against the edge it is listed with",
        ),
        (
            "posedge clk or posedge rst_n",
            "if (!rst_n) q <= 0; else q <= d;",
            "asynchronous control tested against the edge it is listed with",
        ),
        (
            "posedge clk or negedge (rst_n & set_n)",
            "if (!(rst_n & set_n)) q <= 0; else q <= d;",
            "edge of an expression beside other edges",
        ),
        ("posedge clk or negedge rst_n iff a", "if (!rst_n) q <= 0; else q <= d;", "`iff` at an asynchronous control"),
    ] {
        let folder = tempfile::tempdir().expect("a folder");
        let file = folder.path().join("m.sv");
        std::fs::write(&file, module(list, body)).expect("written");
        let scan = pipeline::scan(&[&file], &["--gate", "error"]);
        assert_eq!(scan.json["complete"], false, "{list}: {body}\n{}", scan.text);
        let constructs = scan.json["coverage"]["unsupported"].to_string();
        assert!(constructs.contains(construct), "{list}: {body}\n{constructs}");
    }
}
