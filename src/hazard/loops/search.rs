//! Loops too large to count out are searched with the solver. Whether ternary simulation resolves a loop is one
//! question, because the least fixpoint has an unknown exactly when some ternary fixpoint has one. Two stable states for
//! the same inputs are another. "For some inputs there is no stable state" alternates quantifiers and is settled by
//! counterexamples: each candidate input either has no stable state, or has one that rules out all inputs it is stable
//! for.

use super::cut::Cut;
use super::{Behaviour, BehaviourKind};
use crate::graph::NodeId;
use crate::hazard::Options;
use crate::hazard::clauses::{Clauses, Pair};
use crate::hazard::order::Order;
use crate::hazard::solver::{Answer, Batsat, Literal, Solver};

/// Candidates tried for "no stable state".
const ROUNDS: usize = 256;
/// Candidates times nodes.
const EFFORT: usize = 1_000_000;

/// A question about a loop: yes with the inputs (and states) that show it, no, or open.
enum Outcome {
    Yes(Behaviour),
    No,
    Open,
}

/// The behaviours, as far as the budget reaches.
pub(super) fn behaviours(cut: &Cut, options: &Options) -> Vec<Behaviour> {
    let undecided = Behaviour { kind: BehaviourKind::Undecided, inputs: Vec::new(), states: Vec::new() };
    let order = Order::new(&cut.graph, &cut.next).nodes;
    let unresolved = unresolved(cut, &order, options);
    if matches!(unresolved, Outcome::No) {
        return vec![Behaviour { kind: BehaviourKind::Settles, inputs: Vec::new(), states: Vec::new() }];
    }
    let mut found = Vec::new();
    let mut open = false;
    for outcome in [oscillates(cut, &order, options), stores(cut, &order, options)] {
        match outcome {
            Outcome::Yes(behaviour) => found.push(behaviour),
            Outcome::No => {}
            Outcome::Open => open = true,
        }
    }
    match unresolved {
        _ if open => found.push(undecided),
        Outcome::Yes(behaviour) if found.is_empty() => found.push(behaviour),
        Outcome::Open if found.is_empty() => found.push(undecided),
        _ => {}
    }
    found
}

/// Whether every value of the inputs has a stable state; false when that is open.
pub(super) fn rests(cut: &Cut, options: &Options) -> bool {
    let order = Order::new(&cut.graph, &cut.next).nodes;
    matches!(oscillates(cut, &order, options), Outcome::No)
}

fn unresolved(cut: &Cut, order: &[NodeId], options: &Options) -> Outcome {
    let mut clauses: Clauses<Batsat> = Clauses::new();
    let inputs = variables(&mut clauses, cut.inputs.len());
    let mut unknowns = Vec::new();
    let states: Vec<Pair> = cut
        .states
        .iter()
        .map(|_| {
            let pair = Pair { zero: clauses.solver.variable(), one: clauses.solver.variable() };
            clauses.solver.clause(&[pair.zero, pair.one]);
            unknowns.push(clauses.and(&[pair.zero, pair.one]));
            pair
        })
        .collect();
    let values = clauses.ternary(&cut.graph, order, |node| match position(&cut.states, node) {
        Some(index) => states[index],
        None => {
            let input = position(&cut.inputs, node).map_or(inputs[0], |index| inputs[index]);
            Pair { zero: !input, one: input }
        }
    });
    for (&next, &state) in cut.next.iter().zip(&states) {
        if let Some(next) = values[next.index()] {
            equal(&mut clauses, next.zero, state.zero);
            equal(&mut clauses, next.one, state.one);
        }
    }
    clauses.solver.clause(&unknowns);
    match clauses.solver.solve(&[], options.conflicts) {
        Answer::Satisfiable => Outcome::Yes(Behaviour {
            kind: BehaviourKind::DelayDependent,
            inputs: assigned(cut, &cut.inputs, &model(&clauses, &inputs)),
            states: Vec::new(),
        }),
        Answer::Unsatisfiable => Outcome::No,
        Answer::Open => Outcome::Open,
    }
}

fn stores(cut: &Cut, order: &[NodeId], options: &Options) -> Outcome {
    let mut clauses: Clauses<Batsat> = Clauses::new();
    let inputs = variables(&mut clauses, cut.inputs.len());
    let first = stable(cut, order, &mut clauses, &inputs);
    let second = stable(cut, order, &mut clauses, &inputs);
    let differ: Vec<Literal> = first.iter().zip(&second).map(|(&a, &b)| clauses.xor(a, b)).collect();
    clauses.solver.clause(&differ);
    match clauses.solver.solve(&[], options.conflicts) {
        Answer::Satisfiable => Outcome::Yes(Behaviour {
            kind: BehaviourKind::Stores,
            inputs: assigned(cut, &cut.inputs, &model(&clauses, &inputs)),
            states: [first, second].iter().map(|states| assigned(cut, &cut.states, &model(&clauses, states))).collect(),
        }),
        Answer::Unsatisfiable => Outcome::No,
        Answer::Open => Outcome::Open,
    }
}

fn oscillates(cut: &Cut, order: &[NodeId], options: &Options) -> Outcome {
    let mut settled: Clauses<Batsat> = Clauses::new();
    let inputs = variables(&mut settled, cut.inputs.len());
    let states = stable(cut, order, &mut settled, &inputs);
    let mut candidates: Clauses<Batsat> = Clauses::new();
    let free = variables(&mut candidates, cut.inputs.len());
    for _ in 0..ROUNDS.min(EFFORT / cut.graph.len().max(1)) {
        match candidates.solver.solve(&[], options.conflicts) {
            Answer::Satisfiable => {}
            Answer::Unsatisfiable => return Outcome::No,
            Answer::Open => return Outcome::Open,
        }
        let candidate = model(&candidates, &free);
        let assumptions: Vec<Literal> =
            inputs.iter().zip(&candidate).map(|(&input, &value)| input.inverted_if(!value)).collect();
        match settled.solver.solve(&assumptions, options.conflicts) {
            Answer::Unsatisfiable => {
                return Outcome::Yes(Behaviour {
                    kind: BehaviourKind::Oscillates,
                    inputs: assigned(cut, &cut.inputs, &candidate),
                    states: Vec::new(),
                });
            }
            Answer::Open => return Outcome::Open,
            Answer::Satisfiable => {}
        }
        let state: Vec<Literal> =
            model(&settled, &states).into_iter().map(|value| candidates.constant(value)).collect();
        let values = candidates.copy(&cut.graph, order, |node| leaf(cut, node, &free, &state));
        let moves: Vec<Literal> = cut
            .next
            .iter()
            .zip(&state)
            .filter_map(|(next, &state)| Some(candidates.xor(values[next.index()]?, state)))
            .collect();
        candidates.solver.clause(&moves);
    }
    Outcome::Open
}

/// A copy of the loop in a stable state: its state variables.
fn stable(cut: &Cut, order: &[NodeId], clauses: &mut Clauses<Batsat>, inputs: &[Literal]) -> Vec<Literal> {
    let states = variables(clauses, cut.states.len());
    let values = clauses.copy(&cut.graph, order, |node| leaf(cut, node, inputs, &states));
    for (&next, &state) in cut.next.iter().zip(&states) {
        if let Some(next) = values[next.index()] {
            equal(clauses, next, state);
        }
    }
    states
}

fn leaf(cut: &Cut, node: NodeId, inputs: &[Literal], states: &[Literal]) -> Literal {
    match position(&cut.states, node) {
        Some(index) => states[index],
        None => position(&cut.inputs, node).map_or(states[0], |index| inputs[index]),
    }
}

fn variables(clauses: &mut Clauses<Batsat>, count: usize) -> Vec<Literal> {
    (0..count).map(|_| clauses.solver.variable()).collect()
}

fn equal(clauses: &mut Clauses<Batsat>, a: Literal, b: Literal) {
    clauses.solver.clause(&[!a, b]);
    clauses.solver.clause(&[a, !b]);
}

fn model(clauses: &Clauses<Batsat>, literals: &[Literal]) -> Vec<bool> {
    literals.iter().map(|&literal| clauses.solver.value(literal)).collect()
}

fn position(nodes: &[NodeId], node: NodeId) -> Option<usize> {
    nodes.iter().position(|&other| other == node)
}

fn assigned(cut: &Cut, nodes: &[NodeId], values: &[bool]) -> Vec<(NodeId, bool)> {
    nodes.iter().zip(values).map(|(node, &value)| (cut.originals[node], value)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::graph::{cycles, text};
    use crate::hazard::loops::count;

    /// Counting and searching are two roads to one answer.
    #[test]
    fn the_search_agrees_with_counting() {
        let mut state = 0x77_u64;
        let mut random = |below: usize| {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            (state >> 33) as usize % below
        };
        for _ in 0..400 {
            let (inputs, gates) = (1 + random(4), 3 + random(7));
            let mut text = String::from("t0 = table \"t\" 01?:1 00?:0 1?1:1 1?0:0 ?11:1\n");
            for input in 0..inputs {
                text.push_str(&format!("n{input} = input\n"));
            }
            for gate in 0..gates {
                let kind = ["and", "or", "nand", "nor", "xor", "table t0"][random(6)];
                let before = inputs + (gate + gates - 1) % gates;
                let mut pins = vec![before, random(inputs + gates)];
                if kind == "table t0" {
                    pins.push(random(inputs + gates));
                }
                text.push_str(&format!("n{} = {kind}", inputs + gate));
                for pin in pins {
                    text.push_str(&format!(" n{pin}"));
                }
                text.push('\n');
            }
            let parsed = text::parse(&text).unwrap_or_else(|error| panic!("{error} in\n{text}"));
            let components = cycles::components(&parsed.graph);
            let cut = Cut::new(&parsed.graph, &components, 0, &std::collections::BTreeSet::new()).expect("small");
            let kinds = |found: &[Behaviour]| found.iter().map(|behaviour| behaviour.kind).collect::<Vec<_>>();
            let counted = count::behaviours(&cut).expect("small");
            assert_eq!(kinds(&counted), kinds(&behaviours(&cut, &Options::default())), "{text}");
        }
    }
}
