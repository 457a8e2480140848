//! Small loops are counted out: every input value against every state, 64 points at a time, and ternary simulation
//! (Eichelberger 1965) from the all-unknown state for every input value.

use super::cut::Cut;
use super::{Behaviour, BehaviourKind};
use crate::graph::NodeId;
use crate::hazard::points::Points;
use crate::hazard::rails::{Evaluator, Rails, counting};

/// Inputs and feedback nodes together; beyond, the solver is asked.
const VARIABLES: usize = 20;
/// Words of 64 points times nodes.
const EFFORT: usize = 200_000_000;

/// The behaviours, `None` when there are too many points to count.
pub(super) fn behaviours(cut: &Cut) -> Option<Vec<Behaviour>> {
    let variables = cut.inputs.len() + cut.states.len();
    if variables > VARIABLES || Points::blocks(variables).saturating_mul(cut.graph.len()) > EFFORT {
        return None;
    }
    let stable = stable(cut);
    let states = cut.states.len();
    let count = |input: usize| (0..1usize << states).filter(|state| stable.contains(input << states | state)).count();
    let counts: Vec<usize> = (0..1usize << cut.inputs.len()).map(count).collect();
    let mut found = Vec::new();
    if let Some(input) = counts.iter().position(|&count| count == 0) {
        let none = Points::from_fn(cut.inputs.len(), |input| counts[input] == 0);
        let inputs = relevant(cut, &none, input);
        found.push(Behaviour { kind: BehaviourKind::Oscillates, inputs, states: Vec::new() });
    }
    if let Some(input) = counts.iter().position(|&count| count > 1) {
        let pair: Vec<usize> =
            (0..1usize << states).filter(|state| stable.contains(input << states | state)).take(2).collect();
        let both = Points::from_fn(cut.inputs.len(), |input| {
            pair.iter().all(|state| stable.contains(input << states | state))
        });
        found.push(Behaviour {
            kind: BehaviourKind::Stores,
            inputs: relevant(cut, &both, input),
            states: pair.into_iter().map(|state| assigned(cut, &cut.states, state)).collect(),
        });
    }
    if found.is_empty() {
        found.push(match unresolved(cut) {
            None => Behaviour { kind: BehaviourKind::Settles, inputs: Vec::new(), states: Vec::new() },
            Some(input) => Behaviour {
                kind: BehaviourKind::DelayDependent,
                inputs: assigned(cut, &cut.inputs, input),
                states: Vec::new(),
            },
        });
    }
    Some(found)
}

/// The stable points, states in the low bits.
fn stable(cut: &Cut) -> Points {
    let variables = cut.inputs.len() + cut.states.len();
    let mut evaluator = Evaluator::new(&cut.graph, &cut.next);
    let words = (0..Points::blocks(variables))
        .map(|block| {
            for (index, &leaf) in cut.states.iter().chain(&cut.inputs).enumerate() {
                evaluator.set(leaf, Rails::definite(counting(index, block)));
            }
            evaluator.run();
            let mut word = !0;
            for (&state, &next) in cut.states.iter().zip(&cut.next) {
                word &= !(evaluator.get(state).one ^ evaluator.get(next).one);
            }
            word
        })
        .collect();
    Points::new(variables, words)
}

/// An input value for which ternary simulation leaves a node of the loop unknown.
fn unresolved(cut: &Cut) -> Option<usize> {
    let mut evaluator = Evaluator::new(&cut.graph, &cut.next);
    for block in 0..Points::blocks(cut.inputs.len()) {
        for (index, &leaf) in cut.inputs.iter().enumerate() {
            evaluator.set(leaf, Rails::definite(counting(index, block)));
        }
        for &state in &cut.states {
            evaluator.set(state, Rails::UNKNOWN);
        }
        // Each round resolves one more state somewhere, or nothing ever again.
        let mut before = usize::MAX;
        loop {
            evaluator.run();
            for (&state, &next) in cut.states.iter().zip(&cut.next) {
                let known = evaluator.get(next);
                evaluator.set(state, known);
            }
            let open: u32 = cut.states.iter().map(|&state| evaluator.get(state).unknown().count_ones()).sum();
            if open as usize >= before {
                break;
            }
            before = open as usize;
        }
        evaluator.run();
        let open = evaluator.nodes().iter().fold(0, |open, &node| open | evaluator.get(node).unknown());
        let open = Points::new(cut.inputs.len().min(6), vec![open]);
        if let Some(lane) = open.iter().next() {
            return Some(block << 6 | lane);
        }
    }
    None
}

/// The assignment without the inputs that do not matter for membership in `set`.
fn relevant(cut: &Cut, set: &Points, input: usize) -> Vec<(NodeId, bool)> {
    let freed = set.largest_cube(input, 0).unwrap_or(0);
    let all = assigned(cut, &cut.inputs, input);
    all.into_iter().enumerate().filter(|(index, _)| freed >> index & 1 == 0).map(|(_, pair)| pair).collect()
}

/// A point as values of the original nodes.
fn assigned(cut: &Cut, nodes: &[NodeId], point: usize) -> Vec<(NodeId, bool)> {
    nodes.iter().enumerate().map(|(index, node)| (cut.originals[node], point >> index & 1 == 1)).collect()
}
