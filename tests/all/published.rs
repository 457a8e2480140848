//! Published examples of hazards under single-input changes. Each goes as Verilog text through the whole program; the
//! hazardous transitions must be exactly the published ones, in both directions, and so must the terms that cure them.
//! The explorer, which shares nothing with the product, is asked the same, so that a slip in copying an example shows up
//! as a disagreement of the two.
//!
//! "memory" in a source means that the text could not be seen; "computed" that the answer (not the circuit) was found by
//! exhaustive exploration of all delay orders, independent of any product code.

use std::collections::{BTreeMap, BTreeSet};

use stillwire::graph::NodeId;
use stillwire::hazard::waveform;

use crate::explorer::{Pin, Seen, transition};
use crate::formula::Published;
use crate::pipeline::{driver, graph, hazards, pairs, scan_text};

/// A hazardous transition: "before-after" in the order of the inputs, and the kind.
type Place = (String, &'static str);

/// Reads `S1 011-111` (static-1), `S0 ...` (static-0) or `D ...` (dynamic) as transitions in both directions.
fn places(published: &[&str]) -> BTreeSet<Place> {
    let mut places = BTreeSet::new();
    for text in published {
        let (kind, vectors) = text.split_once(' ').expect("a kind and two vectors");
        let (one, other) = vectors.split_once('-').expect("two vectors");
        let kind = match kind {
            "S0" => "static-0",
            "S1" => "static-1",
            "D" => "dynamic",
            _ => panic!("{kind} is no kind"),
        };
        places.insert((format!("{one}-{other}"), kind));
        places.insert((format!("{other}-{one}"), kind));
    }
    places
}

/// The one input in which the two vectors of a place differ.
fn source<'a>(circuit: &'a Published, place: &str) -> &'a str {
    let (one, other) = place.split_once('-').expect("two vectors");
    let changed: Vec<usize> = (0..one.len()).filter(|&at| one.as_bytes()[at] != other.as_bytes()[at]).collect();
    let [at] = changed[..] else { panic!("{place} changes {} inputs", changed.len()) };
    &circuit.inputs()[at]
}

/// What the explorer says of every transition.
fn explored(circuit: &Published) -> BTreeSet<Place> {
    let (gates, target) = circuit.circuit();
    let Pin::Gate(target) = target else { panic!("the target is a gate") };
    let mut seen = Seen::default();
    let mut found = BTreeSet::new();
    for vector in 0..1u32 << gates.inputs {
        for source in 0..gates.inputs {
            if let Some(glitch) = transition(&gates, target, vector, source, &mut seen) {
                let other = vector ^ 1 << source;
                found.insert((format!("{}-{}", bits(vector, gates.inputs), bits(other, gates.inputs)), glitch.name()));
            }
        }
    }
    found
}

/// What the graph of the elaborated Verilog says of every transition.
fn analysed(circuit: &Published, verilog: &str) -> BTreeSet<Place> {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let file = folder.path().join("design.v");
    std::fs::write(&file, verilog).expect("the file is written");
    let graph = graph(&file, "t");
    let target = driver(&graph, &format!("t.{}", circuit.target()));
    let inputs: Vec<NodeId> = circuit.inputs().iter().map(|input| driver(&graph, &format!("t.{input}"))).collect();
    let values = |vector: u32| -> BTreeMap<NodeId, bool> {
        inputs.iter().enumerate().map(|(at, &input)| (input, vector >> at & 1 == 1)).collect()
    };
    let mut found = BTreeSet::new();
    for vector in 0..1u32 << inputs.len() {
        for source in 0..inputs.len() {
            let other = vector ^ 1 << source;
            if let Some(kind) = waveform(&graph, &values(vector), &values(other), target).hazard() {
                found.insert((format!("{}-{}", bits(vector, inputs.len()), bits(other, inputs.len())), kind.name()));
            }
        }
    }
    found
}

/// A vector as published: the first input first.
fn bits(vector: u32, inputs: usize) -> String {
    (0..inputs).map(|at| if vector >> at & 1 == 1 { '1' } else { '0' }).collect()
}

/// Requires exactly the published transitions, and the published terms of the cure when there are any.
#[track_caller]
fn check(inputs: &[&str], definitions: &[&str], published: &[&str], cover: &[&str]) {
    let circuit = Published::new(inputs, definitions);
    let expected = places(published);
    assert_eq!(explored(&circuit), expected, "the explorer disagrees with {definitions:?}");

    let verilog = circuit.verilog("t");
    assert_eq!(analysed(&circuit, &verilog), expected, "{verilog}");
    let scan = scan_text(&verilog);
    assert_eq!(scan.pins("watch", "nets"), 1, "{verilog}");
    let findings = scan.findings_in("t");
    let found: Vec<_> = findings.iter().flat_map(|finding| hazards(finding, "t")).collect();
    let wanted: BTreeSet<(String, String)> =
        expected.iter().map(|(place, kind)| (source(&circuit, place).to_string(), (*kind).to_string())).collect();
    assert_eq!(pairs(&found), wanted, "{verilog}");
    assert!(found.iter().all(|hazard| hazard.cause == "logic"), "a single-input change has no function hazard");
    assert_eq!(findings.len(), usize::from(!expected.is_empty()), "{verilog}");

    if !cover.is_empty() {
        let cure = &findings[0]["cover"];
        let terms: BTreeSet<BTreeSet<String>> = cure["terms"]
            .as_array()
            .expect("terms")
            .iter()
            .map(|term| literals(term.as_str().expect("a term")))
            .collect();
        let wanted: BTreeSet<BTreeSet<String>> = cover.iter().map(|term| literals(term)).collect();
        assert_eq!(terms, wanted, "{verilog}");
        assert_eq!(cure["proven"], true);
    }
}

/// The literals of a term as Verilog writes it, `b & ~c` or `b | ~c`; the operator stays in the set when there is one.
fn literals(term: &str) -> BTreeSet<String> {
    let term = term.replace(['(', ')', ' '], "").replace('!', "~");
    let operator = if term.contains('|') { "|" } else { "&" };
    term.split(['&', '|']).chain([operator]).map(str::to_string).collect()
}

const ABC: [&str; 3] = ["A", "B", "C"];
const ABCD: [&str; 4] = ["A", "B", "C", "D"];
const WXYZ: [&str; 4] = ["W", "X", "Y", "Z"];

/// Source: classic example, also in encyclopedic articles on static hazards.
#[test]
fn e1_the_multiplexer() {
    check(&ABC, &["AB + A'C"], &["S1 011-111"], &["B & C"]);
    check(&ABC, &["AB + A'C + BC"], &[], &[]);
}

/// Source: dual of E1, computed.
#[test]
fn e1b_the_dual_of_the_multiplexer() {
    check(&["A", "C", "D"], &["(A+D)(A'+C)"], &["S0 000-100"], &["C | D"]);
}

/// Source: Katz, Contemporary Logic Design; memory.
#[test]
fn e2a_katz() {
    check(&ABCD, &["A'D + AC'"], &["S1 0001-1001", "S1 0101-1101"], &["~C & D"]);
}

/// Source: Katz, course slides (CS150, hazards).
#[test]
fn e2b_katz_slides() {
    check(&ABCD, &["(A'+B+C')D + A(B+C')"], &[], &[]);
}

/// Source: Kinney, EE2301 discussion 7 (2009), answer seen.
#[test]
fn e3_kinney_product_of_sums() {
    check(&ABCD, &["(B+D)(B'+C)(A'+C'+D)"], &["S0 0000-0100", "S0 1000-1100", "S0 1100-1110"], &[]);
    check(&ABCD, &["(B+D)(B'+C)(C+D)(A'+D)"], &[], &[]);
}

/// Source: Kinney, EE2301 discussion 7 (2009), answer seen.
#[test]
fn e4_kinney_mixed() {
    check(&ABCD, &["(BC+B'D)(A'+C'+D)"], &["S1 0011-0111", "S1 1011-1111", "S0 1100-1110"], &[]);
}

/// F = sum of minterms (0,2,3,5,6,7,8,9,13,15). Source: Roth and Kinney style exercise: counts seen, places computed.
#[test]
fn e5_minimal_forms_of_one_function() {
    check(&ABCD, &["BD+B'C'D'+A'C+AC'D"], &["S1 0000-0010", "S1 1000-1001"], &[]);
    check(&ABCD, &["BD+B'C'D'+A'C+AB'C'"], &["S1 0000-0010", "S1 1001-1101"], &[]);
    check(&ABCD, &["BD+A'C+A'B'D'+AB'C'"], &["S1 0000-1000", "S1 1001-1101"], &[]);
    check(&ABCD, &["BD+B'C'D'+A'C+AC'D+A'B'D'+AB'C'"], &[], &[]);
    check(&ABCD, &["(B'+C+D)(A'+C'+D)(A'+B+C')(A+B+C+D')"], &["S0 1100-1110"], &[]);
    check(&ABCD, &["(B'+C+D)(A'+B'+D)(A'+B+C')(A+B+C+D')"], &["S0 1010-1110"], &[]);
}

/// Source: textbook exercise 8.11, computed.
#[test]
fn e6_all_three_kinds() {
    check(&ABCD, &["(A+B)(B'C+BD')"], &["S1 1010-1110", "S0 0011-0111", "D 0010-0110"], &[]);
    check(&ABCD, &["(A+B)(B+C)(B'+D')(A+D')(C+D')"], &[], &[]);
}

/// Source: exercise with answer seen.
#[test]
fn e8_two_missing_terms() {
    check(&WXYZ, &["W'Z' + XYZ + WX'Z"], &["S1 0110-0111", "S1 1011-1111"], &["~W & X & Y", "W & Y & Z"]);
}

/// Source: as listed, Wakerly style exercises, computed.
#[test]
fn e9_wakerly_style() {
    check(&["W", "X", "Y"], &["WX+W'Y'"], &["S1 010-110"], &[]);
    check(&WXYZ, &["WX'Y'+XY'Z+XY"], &["S1 0101-0111", "S1 1001-1101", "S1 1101-1111"], &[]);
    check(&WXYZ, &["W'X'+Y'Z+W'XYZ+WXYZ'"], &["S1 0011-0111", "S1 0101-0111"], &[]);
    check(&WXYZ, &["(W'+X+Y')(X'+Z')"], &["S0 1011-1111"], &[]);
}

/// Source: exercise, computed (a negative control).
#[test]
fn e10_looks_hazardous_and_is_not() {
    check(&WXYZ, &["(W'+Y)(W+X'+Y'+Z')(W+X+Y'+Z)"], &[], &[]);
}

/// Source: four-NAND exclusive-or, textbook; computed.
#[test]
fn e11_the_four_nand_exclusive_or() {
    check(&["a", "b"], &["m=(ab)'", "p=(am)'", "q=(bm)'", "f=(pq)'"], &["D 01-11", "D 10-11"], &[]);
}

/// Source: computed.
#[test]
fn e12_clean_functions() {
    check(&ABC, &["AB+BC+AC"], &[], &[]);
    check(&["A", "B"], &["AB'+A'B"], &[], &[]);
    let scan = scan_text(
        "module t (input a, b, clk, output reg q);\n  wire f; // stillwire: watch \"published\"\n  xor (f, a, b);\n  \
         always @(posedge clk) q <= f;\nendmodule\n",
    );
    assert_eq!((scan.pins("watch", "nets"), scan.pins("watch", "clean")), (1, 1));
    assert!(scan.findings().is_empty(), "{}", scan.text);
}

/// c17. Source: ISCAS-85 (Brglez, Fujiwara 1985); computed.
#[test]
fn e13_c17() {
    let inputs = ["N1", "N2", "N3", "N6", "N7"];
    let shared = ["N10=(N1N3)'", "N11=(N3N6)'", "N16=(N2N11)'", "N19=(N11N7)'"];
    let mut n22 = shared.to_vec();
    n22.push("N22=(N10N16)'");
    check(&inputs, &n22, &["S1 11010-11110", "S1 11011-11111"], &["N1 & N2"]);
    let mut n23 = shared.to_vec();
    n23.push("N23=(N16N19)'");
    check(&inputs, &n23, &[], &[]);
}

/// Every term (as care mask and values) that implies the function.
fn implicants(function: u32, inputs: u32) -> Vec<(u32, u32)> {
    let vectors = 1u32 << inputs;
    let mut terms = Vec::new();
    for care in 0..vectors {
        for values in (0..vectors).filter(|values| values & !care == 0) {
            if (0..vectors).filter(|vector| vector & care == values).all(|vector| function >> vector & 1 == 1) {
                terms.push((care, values));
            }
        }
    }
    terms
}

/// The terms as a sum of products in textbook notation.
fn sum_of_products(terms: &[(u32, u32)], inputs: &[&str]) -> String {
    let product = |&(care, values): &(u32, u32)| -> String {
        let literal = |at: usize| format!("{}{}", inputs[at], if values >> at & 1 == 1 { "" } else { "'" });
        (0..inputs.len()).filter(|at| care >> at & 1 == 1).map(literal).collect()
    };
    terms.iter().map(product).collect::<Vec<_>>().join("+")
}

/// E18: the sum of all prime implicants has no static logic hazard; with single-input changes, none at all by E19.
/// Source: Eichelberger 1965 theorem; checked on all 3-variable functions.
#[test]
fn e18_all_prime_implicants_are_clean() {
    let mut text = String::new();
    let mut modules = 0;
    for function in 1..255u32 {
        let terms = implicants(function, 3);
        let primes: Vec<(u32, u32)> = terms
            .iter()
            .copied()
            .filter(|&(care, values)| {
                !terms.iter().any(|&(wider, other)| wider != care && wider & !care == 0 && values & wider == other)
            })
            .collect();
        text += &Published::new(&ABC, &[&sum_of_products(&primes, &ABC)]).verilog(&format!("t{function}"));
        modules += 1;
    }
    let scan = scan_text(&text);
    assert_eq!((scan.pins("watch", "nets"), scan.pins("watch", "clean")), (modules, modules));
    // The prime implicants that are not essential are redundant, and nothing protects them here.
    assert!(scan.findings().iter().all(|finding| finding["rule"] == "cover-unprotected"), "{}", scan.text);
}

/// E19: a sum of products without static-1 hazards under single-input changes, no term with x and x', has no hazard under
/// single-input changes. Source: McCluskey, Unger; memory; checked on 3,785 covers.
#[test]
fn e19_static_one_decides_a_sum_of_products() {
    let mut random = crate::random_circuits::Random::new(19);
    let mut text = String::new();
    let mut hazardous = Vec::new();
    for number in 0..400 {
        // A random set of terms over four variables; a static-1 hazard by the textbook: two neighbouring vectors of value 1
        // that no single term covers.
        let terms: Vec<(u32, u32)> = (0..2 + random.below(5))
            .map(|_| {
                let care = 1 + random.below(15) as u32;
                (care, random.below(16) as u32 & care)
            })
            .collect();
        let covers = |vector: u32, &(care, values): &(u32, u32)| vector & care == values;
        let is_one = |vector: u32| terms.iter().any(|term| covers(vector, term));
        let uncovered = (0..16u32)
            .flat_map(|vector| (0..4).map(move |at| (vector, vector ^ 1 << at)))
            .any(|(a, b)| is_one(a) && is_one(b) && !terms.iter().any(|term| covers(a, term) && covers(b, term)));
        hazardous.push(uncovered);
        text += &Published::new(&ABCD, &[&sum_of_products(&terms, &ABCD)]).verilog(&format!("t{number}"));
    }
    let scan = scan_text(&text);
    for (number, &uncovered) in hazardous.iter().enumerate() {
        let instance = format!("t{number}");
        let findings = scan.findings_in(&instance);
        let found: Vec<_> = findings.iter().flat_map(|finding| hazards(finding, &instance)).collect();
        let static_one = found.iter().any(|hazard| hazard.kind == "static-1");
        assert_eq!(static_one, uncovered, "{instance}: {found:?}");
        assert!(static_one || found.is_empty(), "{instance}: {found:?}");
    }
    let count = hazardous.iter().filter(|&&uncovered| uncovered).count();
    assert!(count > 50 && count < 350, "{count} hazardous covers");
}

/// The decodes of a ring whose neighbouring states differ in one bit are clean, state by state: each is one AND of
/// literals. Source: the ten-state ring of Maxfield 2007.
#[test]
fn one_bit_change_ring_decodes_cleanly() {
    let ring = ["0010", "0110", "0111", "0101", "0100", "1100", "1101", "1111", "1110", "1010"];
    let mut text = String::from("module t (input [3:0] s, input clk, output reg [9:0] q);\n");
    for (at, state) in ring.iter().enumerate() {
        text += &format!("  wire d{at}; // stillwire: watch \"published\"\n  assign d{at} = s == 4'b{state};\n");
        text += &format!("  always @(posedge clk) q[{at}] <= d{at};\n");
    }
    let scan = scan_text(&(text + "endmodule\n"));
    assert_eq!((scan.pins("watch", "nets"), scan.pins("watch", "clean")), (10, 10));
    assert!(scan.findings().is_empty(), "{}", scan.text);
    for (at, state) in ring.iter().enumerate() {
        let next = ring[(at + 1) % ring.len()];
        let changed = state.bytes().zip(next.bytes()).filter(|(one, other)| one != other).count();
        assert_eq!(changed, 1, "{state} to {next}");
    }
}
