//! Ports as IEEE 1800-2017 clause 23.2.2 wants them: each listed once, each with one direction, none declared without
//! being listed. What breaks this is reported and never called complete; what is unusual but legal is read.

use stillwire::Scan;

use crate::checked::request;

/// The flattened netlist of a text, and the scan without hazards that comes with it.
fn flatten(text: &str) -> (String, Scan) {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("t.sv");
    std::fs::write(&file, text).expect("written");
    stillwire::flatten(&request(vec![file], 1), None, &|_| None, &|_| {}).expect("something to analyse")
}

/// Reads a text that is incomplete for one reason, which is `message`.
#[track_caller]
fn refused(text: &str, message: &str) {
    let (_, Scan { report, .. }) = flatten(text);
    let findings: Vec<&str> = report.findings.iter().map(|finding| finding.message.as_str()).collect();
    assert!(findings.contains(&message), "{findings:?}");
    assert!(!report.complete());
}

#[test]
fn a_port_listed_twice_is_reported() {
    let message = "`y` is listed twice among the ports";
    refused("module m (input a, output y, output y); assign y = a; endmodule", message);
    refused("module m (a, y, y); input a; output y; assign y = a; endmodule", message);
    refused("module m (a, .y(p), .y(q)); input a; output p, q; assign p = a, q = a; endmodule", message);
    refused("module m (input y, output y); endmodule", message);
}

#[test]
fn a_port_that_is_not_listed_is_reported() {
    let of = |what| format!("`z` is declared as {what}, but is not in the list of ports");
    refused("module m (a, y); input a; output y, z; assign y = a, z = a; endmodule", &of("an output"));
    refused("module m (a, y); input a, z; output y; assign y = a & z; endmodule", &of("an input"));
}

#[test]
fn a_direction_declared_twice_is_reported() {
    let message = "the direction of `a` is declared twice";
    refused("module m (a, y); input a; output a; output y; assign y = a; endmodule", message);
    refused("module m (a, y); input a; input a; output y; assign y = a; endmodule", message);
}

#[test]
fn one_port_of_two_directions_is_reported() {
    refused(
        "module m ({a, y}, b); input a; output y; input b; assign y = a & b; endmodule",
        "`a` and `y` are one port, but differ in direction",
    );
}

/// IEEE 1364-2005 clause 12.3.2 allows the same net behind several ports, and ports made of parts.
#[test]
fn one_net_behind_several_ports_is_one_port() {
    let (netlist, Scan { report, .. }) = flatten(
        "module m (.p(x), .q(x), x, s[0], s[1], {s, y}); input x; output [1:0] s; output y; \
         assign s = {~x, x}, y = x; endmodule",
    );
    assert!(report.complete());
    assert!(netlist.starts_with("module m (x, s, y);"), "{netlist}");
    let (netlist, Scan { report, .. }) =
        flatten("module m (output .b(x), input .a(x), output y); wire x; assign y = x; endmodule");
    assert!(report.complete(), "a net that goes straight through: {:?}", report.findings);
    assert!(netlist.starts_with("module m (x, y);\n  input x;"), "{netlist}");
}
