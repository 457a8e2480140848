//! Whether a loop that stores can lose its state. A single input changes, the state is stable before and after, but
//! another state is stable after it as well; if the next-state function of a feedback node shows a static hazard at the
//! node's own value meanwhile, the pulse can travel round the loop and leave it in that other state.
//!
//! The side conditions depend on the held inputs and the state only, not on the changing input, so they are clean
//! constants during the transition: a next-state function that is masked by them shows exactly the hazards that count,
//! and the ordinary decision answers the question, with its own proof and witness.

use super::cut::Cut;
use crate::graph::cone::Cone;
use crate::graph::{GateKind, NodeId};
use crate::hazard::cover::Terms;
use crate::hazard::function::Function;
use crate::hazard::{HazardKind, Options, Pair, StateLoss, Witness, decide};

/// With more feedback nodes the other stable states are too many to list.
const STATES: usize = 4;
/// Terms beyond this are more than anyone would write.
const TERMS: usize = 24;

/// The first loss found, in order of feedback nodes, and whether every question was answered.
pub(super) fn losses(cut: &Cut, options: &Options) -> (Option<StateLoss>, bool) {
    let options = Options { one_per_kind: false, ignore_operators: false, ..*options };
    let mut decided = true;
    for index in 0..cut.states.len() {
        match first(cut, index, &options) {
            Found::Loss { source, value, witness } => {
                let cover = keep(cut, index, value, witness.clone(), &options);
                return (
                    Some(StateLoss {
                        node: cut.originals[&cut.states[index]],
                        source: cut.originals[&source],
                        witness: original(cut, &witness),
                        cover,
                    }),
                    true,
                );
            }
            Found::Open => decided = false,
            Found::None => {}
        }
    }
    (None, decided)
}

enum Found {
    /// In terms of the cut's graph; the state is among what holds.
    Loss {
        source: NodeId,
        value: bool,
        witness: Witness,
    },
    None,
    Open,
}

fn kind_at(value: bool) -> HazardKind {
    if value { HazardKind::Static1 } else { HazardKind::Static0 }
}

/// The first loss at one feedback node.
fn first(cut: &Cut, index: usize, options: &Options) -> Found {
    let mut open = false;
    for value in [true, false] {
        // Most functions have no such hazard at all, whatever the side conditions.
        let mut cone = Cone::of(&cut.graph, &cut.next);
        cone.tie(cut.states[index], value);
        for pair in pairs(cone, cut.next[index], options) {
            if !pair.hazards.iter().any(|(kind, _)| *kind == kind_at(value))
                && !pair.undecided.iter().any(|(kind, _)| *kind == kind_at(value))
                || !cut.inputs.contains(&pair.source)
            {
                continue;
            }
            if cut.states.len() > STATES {
                open = true;
                continue;
            }
            for before in [true, false] {
                match masked(cut, index, value, pair.source, before, options) {
                    Found::None => {}
                    Found::Open => open = true,
                    loss @ Found::Loss { .. } => return loss,
                }
            }
        }
    }
    if open { Found::Open } else { Found::None }
}

/// The pairs of one target of a cone that was copied from a whole graph, ids unchanged.
fn pairs(cone: Cone, target: NodeId, options: &Options) -> Vec<Pair> {
    let frozen = cone.freeze();
    let target = frozen.copy_of(target).unwrap_or(target);
    decide(&frozen.graph, &[target], options).pop().map_or_else(Vec::new, |verdict| verdict.pairs)
}

/// The next-state function masked by the side conditions, for one change.
fn masked(cut: &Cut, index: usize, value: bool, source: NodeId, before: bool, options: &Options) -> Found {
    let mut cone = Cone::of(&cut.graph, &cut.next);
    cone.tie(cut.states[index], value);
    let near = cut.next[index];
    let mut conditions = Vec::new();
    for at in [before, !before] {
        let fixed = cone.constant(at, near);
        let next = cone.repeat(&cut.graph, &cut.next, |node| (node == source).then_some(fixed));
        for (&state, next) in cut.states.iter().zip(next) {
            conditions.push(cone.gate(GateKind::Xnor, &[state, next], near));
        }
    }
    let after = cone.constant(!before, near);
    let mut others = Vec::new();
    for other in 0..1usize << cut.states.len() {
        let constants: Vec<NodeId> =
            (0..cut.states.len()).map(|state| cone.constant(other >> state & 1 == 1, near)).collect();
        let next =
            cone.repeat(&cut.graph, &cut.next, |node| match cut.states.iter().position(|&state| state == node) {
                Some(state) => Some(constants[state]),
                None => (node == source).then_some(after),
            });
        let mut stable = Vec::new();
        let mut differs = Vec::new();
        for ((&state, &constant), next) in cut.states.iter().zip(&constants).zip(next) {
            stable.push(cone.gate(GateKind::Xnor, &[constant, next], near));
            differs.push(cone.gate(GateKind::Xor, &[constant, state], near));
        }
        stable.push(cone.gate(GateKind::Or, &differs, near));
        others.push(cone.gate(GateKind::And, &stable, near));
    }
    conditions.push(cone.gate(GateKind::Or, &others, near));
    let target = if value {
        let broken = cone.gate(GateKind::Nand, &conditions, near);
        cone.gate(GateKind::Or, &[cut.next[index], broken], near)
    } else {
        conditions.push(cut.next[index]);
        cone.gate(GateKind::And, &conditions, near)
    };
    let frozen = cone.freeze();
    let verdict = decide(&frozen.graph, &[target], options).pop();
    let Some(pair) = verdict.and_then(|verdict| verdict.pairs.into_iter().find(|pair| pair.source == source)) else {
        return Found::None;
    };
    match pair.hazards.into_iter().find(|(kind, _)| *kind == kind_at(value)) {
        Some((_, mut witness)) => {
            // A static hazard reads the same backwards in time; the masked one was asked for in one direction.
            witness.changes = vec![(source, before)];
            witness.holds.push((cut.states[index], value));
            witness.holds.sort_unstable();
            witness.target = (value, value);
            Found::Loss { source, value, witness }
        }
        None if pair.undecided.iter().any(|(kind, _)| *kind == kind_at(value)) => Found::Open,
        None => Found::None,
    }
}

fn original(cut: &Cut, witness: &Witness) -> Witness {
    let back = |list: &[(NodeId, bool)]| {
        let mut list: Vec<_> = list.iter().map(|&(node, value)| (cut.originals[&node], value)).collect();
        list.sort_unstable();
        list
    };
    Witness { changes: back(&witness.changes), holds: back(&witness.holds), target: witness.target, launch: None }
}

/// Terms of the next-state function that keep the state, proven by asking again for losses at this node.
fn keep(cut: &Cut, index: usize, value: bool, witness: Witness, options: &Options) -> Option<crate::hazard::Cover> {
    let mut function = Function::new(&cut.graph, cut.next[index], options);
    let mut terms = Terms::default();
    let (mut value, mut witness) = (value, witness);
    loop {
        let new = terms.add(function.span(&witness, value).ok()?, value);
        if !new || terms.len() > TERMS {
            return None;
        }
        let mut cone = Cone::of(&cut.graph, &cut.next);
        let mut next = cut.next.clone();
        next[index] = terms.append(&mut cone, next[index]);
        match first(&cut.extended(cone.freeze().graph, next), index, options) {
            Found::Loss { value: again, witness: other, .. } => (value, witness) = (again, other),
            Found::None => return Some(terms.cover(|node| cut.originals[&node], false)),
            Found::Open => return None,
        }
    }
}
