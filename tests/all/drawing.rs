//! Drawings of findings, checked as data: nothing overlaps, wires run forward, ways are connected, and what the symbols
//! show fits the function of the gates, evaluated here anew.

use std::path::{Path, PathBuf};

use stillwire::drawing::{Drawing, Shape, Symbol, Way};
use stillwire::graph::GateKind;
use stillwire::hazard::Wave;
use stillwire::rules::Finding;
use stillwire::{Request, Scan};

use crate::checked::request;

/// A scan with drawings.
#[track_caller]
pub fn drawn(paths: &[PathBuf], top: &[&str]) -> Scan {
    let tops = top.iter().map(|top| (*top).to_string()).collect();
    let request = Request { drawn: true, tops, ..request(paths.to_vec(), 0) };
    let scan = stillwire::scan(&request, &|_| None, &|_| {}).unwrap_or_else(|error| panic!("{error}"));
    assert_eq!(scan.exhibits.len(), scan.report.findings.len());
    scan
}

fn fixtures(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures").join(name)
}

/// A scan of one text.
#[track_caller]
fn drawn_text(verilog: &str) -> Scan {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("t.v");
    std::fs::write(&file, verilog).expect("written");
    drawn(&[file], &[])
}

/// The finding on a net and its drawing.
#[track_caller]
fn on<'a>(scan: &'a Scan, net: &str) -> (&'a Finding, &'a Drawing) {
    let index = scan.report.findings.iter().position(|finding| finding.net == net);
    let index = index.unwrap_or_else(|| panic!("no finding on {net}"));
    let drawing = scan.exhibits[index].drawing.as_ref().unwrap_or_else(|| panic!("no drawing of {net}"));
    (&scan.report.findings[index], drawing)
}

/// All that must hold of any drawing.
#[track_caller]
pub fn check(finding: &Finding, drawing: &Drawing) {
    let net = &finding.net;
    inside_and_apart(net, drawing);
    forward(net, drawing);
    nets_apart(net, drawing);
    connected(net, drawing);
    values_fit(net, drawing);
    // Whoever doubts a way counts its gates in the text.
    let told = finding.trace.iter().find_map(|step| step.text.strip_prefix("paths 1 ("));
    if let Some(told) = told {
        let mux = |symbol: &Symbol| symbol.shape == Shape::Mux || symbol.shape == Shape::Gap;
        if drawing.symbols.iter().any(|symbol| mux(symbol) && !symbol.ways.is_empty()) {
            return;
        }
        let number = |text: &str| text.split(' ').next().and_then(|word| word.parse().ok()).unwrap_or(0usize);
        let second = told.split(" and 2 (").nth(1).map_or(0, number);
        for (way, gates) in [(Way::First, number(told)), (Way::Second, second)] {
            let on = drawing.wires.iter().filter(|wire| wire.way == Some(way)).count();
            assert_eq!(on, gates + 1, "{net}: {told}\n{drawing:#?}");
        }
    }
}

fn inside_and_apart(net: &str, drawing: &Drawing) {
    for (index, one) in drawing.symbols.iter().enumerate() {
        assert!(one.x >= 0 && one.y >= 0 && one.width > 0 && one.height > 0, "{net}: {one:?}");
        assert!(one.x + one.width <= drawing.width && one.y + one.height <= drawing.height, "{net}: {one:?}");
        for other in &drawing.symbols[..index] {
            let apart = one.x + one.width < other.x
                || other.x + other.width < one.x
                || one.y + one.height < other.y
                || other.y + other.height < one.y;
            assert!(apart, "{net}: {one:?} overlaps {other:?}");
        }
    }
}

fn forward(net: &str, drawing: &Drawing) {
    for wire in &drawing.wires {
        let (from, to) = (&drawing.symbols[wire.from], &drawing.symbols[wire.to]);
        assert!(from.x + from.width < to.x, "{net}: {wire:?} runs back");
        assert_eq!(wire.points.first(), Some(&(from.x + from.width, from.y + from.height / 2)), "{net}: {wire:?}");
        assert_eq!(wire.points.last(), Some(&(to.x, to.y + to.pins[wire.pin].y)), "{net}: {wire:?}");
        for pair in wire.points.windows(2) {
            assert!(pair[0].0 <= pair[1].0, "{net}: {wire:?} runs back");
            assert!(pair[0].0 == pair[1].0 || pair[0].1 == pair[1].1, "{net}: {wire:?} is slanted");
        }
        // A wire passes no symbol.
        for symbol in &drawing.symbols {
            for pair in wire.points.windows(2) {
                let ((x0, y0), (x1, y1)) = (pair[0], pair[1]);
                let crosses = x0.max(x1) > symbol.x
                    && x0.min(x1) < symbol.x + symbol.width
                    && y0.max(y1) > symbol.y
                    && y0.min(y1) < symbol.y + symbol.height;
                assert!(!crosses, "{net}: {wire:?} crosses {symbol:?}");
            }
        }
    }
    for (index, symbol) in drawing.symbols.iter().enumerate() {
        for pin in 0..symbol.pins.len() {
            let drivers = drawing.wires.iter().filter(|wire| (wire.to, wire.pin) == (index, pin)).count();
            assert_eq!(drivers, 1, "{net}: pin {pin} of {symbol:?}");
        }
    }
}

/// Wires of two nets lie on each other nowhere; they may cross.
fn nets_apart(net: &str, drawing: &Drawing) {
    let pieces = |wire: &stillwire::drawing::Wire| -> Vec<((i32, i32), (i32, i32))> {
        wire.points.windows(2).map(|pair| (pair[0].min(pair[1]), pair[0].max(pair[1]))).collect()
    };
    for (index, one) in drawing.wires.iter().enumerate() {
        for other in drawing.wires[..index].iter().filter(|other| other.from != one.from) {
            for &((ax0, ay0), (ax1, ay1)) in &pieces(one) {
                for &((bx0, by0), (bx1, by1)) in &pieces(other) {
                    let level = ay0 == ay1 && by0 == by1 && ay0 == by0 && ax0 < bx1 && bx0 < ax1;
                    let upright = ax0 == ax1 && bx0 == bx1 && ax0 == bx0 && ay0 < by1 && by0 < ay1;
                    assert!(!level && !upright, "{net}: {one:?} lies on {other:?}");
                }
            }
        }
    }
}

/// Each way is a chain of wires; one and two end where the pulse begins, and that, or the loop, ends at the pin.
fn connected(net: &str, drawing: &Drawing) {
    let ends: Vec<usize> =
        (0..drawing.symbols.len()).filter(|&at| matches!(drawing.symbols[at].shape, Shape::End(_))).collect();
    assert_eq!(ends.len(), 1, "{net}: one end");
    let chain = |way: Way| -> Option<(usize, usize)> {
        let wires: Vec<_> = drawing.wires.iter().filter(|wire| wire.way == Some(way)).collect();
        let start = wires.iter().find(|wire| wires.iter().all(|other| other.to != wire.from))?.from;
        let mut here = start;
        let mut passed = 0;
        while let Some(wire) = wires.iter().find(|wire| wire.from == here) {
            here = wire.to;
            passed += 1;
        }
        assert_eq!(passed, wires.len(), "{net}: {way:?} is broken");
        Some((start, here))
    };
    let (first, second, pulse) = (chain(Way::First), chain(Way::Second), chain(Way::Pulse));
    if let Some((_, meet)) = first {
        let (from, to) = pulse.unwrap_or_else(|| panic!("{net}: a way without a pulse"));
        assert_eq!((meet, ends[0]), (from, to), "{net}");
    }
    if let (Some((_, one)), Some((_, two))) = (first, second) {
        assert_eq!(one, two, "{net}: the ways meet");
    }
    if let Some((_, end)) = chain(Way::Loop) {
        assert_eq!(end, ends[0], "{net}");
    }
}

/// What a gate shows before and after follows from what its pins show.
fn values_fit(net: &str, drawing: &Drawing) {
    for (index, symbol) in drawing.symbols.iter().enumerate() {
        let [wave] = symbol.waves.as_slice() else { continue };
        let pins: Option<Vec<Wave>> = (0..symbol.pins.len())
            .map(|pin| {
                let wire = drawing.wires.iter().find(|wire| (wire.to, wire.pin) == (index, pin))?;
                let [wave] = drawing.symbols[wire.from].waves.as_slice() else { return None };
                let inverted = symbol.pins[pin].inverted;
                Some(Wave { i: wave.i ^ inverted, f: wave.f ^ inverted, h: wave.h })
            })
            .collect();
        let Some(pins) = pins.filter(|pins| !pins.is_empty()) else { continue };
        for (initial, shown) in [(true, wave.i), (false, wave.f)] {
            let bits: Vec<bool> = pins.iter().map(|pin| if initial { pin.i } else { pin.f }).collect();
            let ones = bits.iter().filter(|&&bit| bit).count();
            let expected = match symbol.shape {
                Shape::Gate(GateKind::Buf) => bits[0],
                Shape::Gate(GateKind::Not) => !bits[0],
                Shape::Gate(GateKind::And) => ones == bits.len(),
                Shape::Gate(GateKind::Nand) => ones < bits.len(),
                Shape::Gate(GateKind::Or) => ones > 0,
                Shape::Gate(GateKind::Nor) => ones == 0,
                Shape::Gate(GateKind::Xor) => ones % 2 == 1,
                Shape::Gate(GateKind::Xnor) => ones % 2 == 0,
                Shape::Mux => {
                    if bits[2] {
                        bits[0]
                    } else {
                        bits[1]
                    }
                }
                _ => continue,
            };
            assert_eq!(shown, expected, "{net}: {symbol:?} of {pins:?}");
        }
    }
}

#[track_caller]
fn check_all(scan: &Scan) -> usize {
    let mut drawings = 0;
    for (finding, exhibit) in scan.report.findings.iter().zip(&scan.exhibits) {
        if let Some(drawing) = &exhibit.drawing {
            check(finding, drawing);
            drawings += 1;
        }
        assert!(finding.hazards.is_empty() || exhibit.drawing.is_some(), "{}", finding.message);
    }
    drawings
}

#[test]
fn every_hazard_of_the_demo_is_drawn() {
    let scan = drawn(&[fixtures("lock")], &[]);
    assert!(check_all(&scan) >= 8);
    // The selector of the stop line, by hand from stop_select.v: `hand` reaches the OR through one AND, and through an
    // inverter and the other AND.
    let (_, stop) = on(&scan, "lock_top.u_stop.stop_n");
    let count = |shape: Shape| stop.symbols.iter().filter(|symbol| symbol.shape == shape).count();
    assert_eq!(
        (
            count(Shape::Gate(GateKind::And)),
            count(Shape::Gate(GateKind::Or)),
            count(Shape::Gate(GateKind::Not)),
            count(Shape::Mux)
        ),
        (2, 1, 1, 0)
    );
    assert_eq!(stop.left_out, 0);
    let hand = stop.symbols.iter().find(|symbol| symbol.full == "lock_top.hand").expect("the stem is named");
    assert_eq!(hand.ways, [Way::First, Way::Second]);
}

#[test]
fn every_finding_of_the_fixtures_is_drawn_well() {
    let mut drawings = 0;
    for folder in ["rules", "catalogue"] {
        let mut files: Vec<PathBuf> = std::fs::read_dir(fixtures(folder))
            .expect("the folder")
            .map(|entry| entry.expect("an entry").path())
            .filter(|path| path.extension().is_some_and(|extension| extension == "v" || extension == "sv"))
            .collect();
        files.sort();
        for file in files {
            drawings += check_all(&drawn(&[file], &[]));
        }
    }
    assert!(drawings > 100, "{drawings}");
}

/// A selector beside the ways is one symbol, one in which the race runs is drawn as gates.
#[test]
fn a_selector_without_a_race_is_one_symbol() {
    let scan = drawn_text(
        "module t(input s, z, a, b, c, clk, output reg q);\n\
         wire x = z ? a : b;\n\
         wire r = s ? x : c;\n\
         always @(posedge clk or posedge r) if (r) q <= 0; else q <= 1;\nendmodule\n",
    );
    let (finding, drawing) = on(&scan, "t.r");
    assert_eq!(finding.hazards[0].changes, ["t.s"]);
    let muxes: Vec<&Symbol> = drawing.symbols.iter().filter(|symbol| symbol.shape == Shape::Mux).collect();
    assert_eq!(muxes.len(), 1, "{drawing:#?}");
    assert_eq!(muxes[0].full, "t.x");
    assert_eq!(drawing.left_out, 0);
    check(finding, drawing);
}

/// A way of 41 gates, each of which inverts, and a comparison of forty bits: the drawing stays small and says what it leaves out.
#[test]
fn long_ways_and_wide_gates_are_bounded() {
    let mut text =
        String::from("module t(input clk, s, input [40:0] a, input [39:0] b, output reg q);\nwire w0 = s;\n");
    for at in 1..=41 {
        text += &format!("wire w{at} = ~(w{} & a[{}]);\n", at - 1, at % 41);
    }
    text += "wire same = b == 40'h123456789a;\nwire r = (w41 & s) | same;\n";
    text += "always @(posedge clk or posedge r) if (r) q <= 0; else q <= 1;\nendmodule\n";
    let scan = drawn_text(&text);
    let (finding, drawing) = on(&scan, "t.r");
    check(finding, drawing);
    assert!(drawing.symbols.len() < 80, "{}", drawing.symbols.len());
    assert!(drawing.left_out > 20, "{}", drawing.left_out);
    let gap = drawing.symbols.iter().find(|symbol| symbol.shape == Shape::Gap).expect("a gap");
    assert!(gap.label.ends_with(" gates"), "{}", gap.label);
    assert!(drawing.symbols.iter().any(|symbol| symbol.shape == Shape::Bundle && symbol.label.contains("bits")));
}

/// A loop is cut at its net and marked all the way around.
#[test]
fn a_loop_is_marked_around() {
    let scan = drawn_text("module t(input a, b, output y); wire n; assign n = ~(n & a) ^ b; assign y = n; endmodule\n");
    let (finding, drawing) = on(&scan, "t.n");
    assert!(finding.loop_.is_some());
    check(finding, drawing);
    let around: Vec<Shape> =
        (drawing.symbols.iter()).filter(|symbol| symbol.ways.contains(&Way::Loop)).map(|symbol| symbol.shape).collect();
    assert!(around.contains(&Shape::Feedback) && around.len() >= 3, "{around:?}");
}

/// Nothing is drawn unless somebody asks.
#[test]
fn other_outputs_pay_nothing() {
    let scan = drawn(&[fixtures("lock")], &[]);
    let again = drawn(&[fixtures("lock")], &[]);
    assert_eq!(scan.exhibits, again.exhibits);
    assert_eq!(scan.exhibits.iter().filter(|exhibit| exhibit.module == "stop_select").count(), 1);
}

/// Cones of a core that nobody here wrote; cores.rs says which findings there are.
#[test]
#[ignore = "outside: run tests/outside/run"]
fn the_outputs_of_a_core_are_drawn_well() {
    let scan = drawn(&[crate::outside::data().join("mor1kx/rtl/verilog")], &["mor1kx"]);
    assert_eq!(check_all(&scan), 2);
    // The comparison behind the cycle type has dozens of gates beside the paths.
    let (_, drawing) = on(&scan, "mor1kx.iwbm_cti_o");
    assert!(drawing.left_out > 0 && drawing.symbols.len() < 80, "{} left out", drawing.left_out);
}
