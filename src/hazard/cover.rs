//! Covers: the product and sum terms that remove the hazards of a target.
//!
//! A static hazard goes away when one term holds the target still during the whole transition: a product term that is a
//! prime implicant spanning it, ORed to the target, for static-1; the dual sum term for static-0 (Huffman 1957; Unger
//! 1969). A term added behind the target cannot cure a dynamic hazard. Then the logic is replaced by a sum of prime
//! implicants in which every pair of neighbouring points of the on-set lies in one product: such a form has no
//! static-1 hazard under single changes, and a sum of products without a term that holds a variable and its complement
//! is then free of all hazards under single changes (McCluskey 1965; Unger 1969). Nothing is taken on trust: the
//! decision runs again on the target's cone with the terms added, and a cover is only returned when it finds nothing.

use std::collections::BTreeSet;

use serde::{Deserialize, Serialize};

use super::function::{Cube, Function};
use super::launch::{Launcher, Unproven};
use super::order::Order;
use super::{Cause, Cover, HazardKind, Launch, Options, TargetVerdict, Undecided, Witness, decide};
use crate::graph::cone::{Cone, FrozenCone};
use crate::graph::{GateKind, Graph, NodeId, NodeKind};

/// Terms beyond this are more than anyone would write.
const TERMS: usize = 24;
/// Sources beyond this are too many for a replacing form.
const REPLACED_SOURCES: usize = 10;

/// Why no cover is offered.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Serialize, Deserialize)]
pub enum Withheld {
    /// Nothing to remove.
    Clean,
    /// Some question about the target, or about its cured form, stayed open.
    Undecided,
    /// The target depends on a combinational loop.
    Loop,
    /// The hazard arises inside an arithmetic operator.
    Operator,
    /// A term would need the value of an undriven net or of an `x` literal.
    Unknown,
    /// The target depends on more sources than the method can enumerate.
    TooManySources,
    /// The terms would be more than anyone would write.
    TooManyTerms,
    /// Sources that change together take the function itself through the other value.
    Function,
    /// Every form that was tried glitches when several sources change together.
    Together,
    /// The hazard is made by a latch in front of the target's logic, or comes through it.
    Latch,
}

impl Withheld {
    /// The reason, to follow "no cover is offered because".
    pub fn words(self) -> &'static str {
        match self {
            Withheld::Clean => "there is no hazard",
            Withheld::Undecided => "a question about it stayed undecided",
            Withheld::Loop => "it depends on a combinational loop",
            Withheld::Operator => "the hazard arises inside an arithmetic operator",
            Withheld::Unknown => "a term would need the value of an undriven net",
            Withheld::TooManySources => "it depends on too many sources",
            Withheld::TooManyTerms => "it would take too many terms",
            Withheld::Function => {
                "signals that change together take the net itself through the other value, which no arrangement of \
                 gates removes"
            }
            Withheld::Together => "every form that was tried can still glitch when several signals change together",
            Withheld::Latch => "the pulse comes through a latch, not from the gates behind it",
        }
    }
}

/// The terms that remove every hazard that `verdict` found at its target; literals are over sources. A cover that is
/// returned is proven: for changes of any one source, or with `launcher`, which must be the one that made the verdict, for
/// every event that the target can see.
///
/// # Errors
/// The reason when no proven cover was found.
pub fn cover(
    graph: &Graph,
    verdict: &TargetVerdict,
    launcher: Option<&Launcher<'_>>,
    options: &Options,
) -> Result<Cover, Withheld> {
    if verdict.is_clean() {
        return Err(Withheld::Clean);
    }
    refuse_open(verdict)?;
    // A cover is proven on feed-forward logic; terms in front of a loop move its states as well.
    if Order::new(graph, &[verdict.target]).has_loop(graph) {
        return Err(Withheld::Loop);
    }
    let launched = || verdict.launches.iter().filter_map(|found| found.witness.launch.as_ref());
    if launched().any(|launch| launch.cause == Cause::Function) {
        return Err(Withheld::Function);
    }
    let witnesses = verdict.pairs.iter().flat_map(|pair| &pair.hazards).map(|(_, witness)| witness);
    if witnesses.filter_map(|witness| witness.launch.as_ref()).chain(launched()).any(Launch::is_of_latches) {
        return Err(Withheld::Latch);
    }
    let options = Options { one_per_kind: false, ..*options };
    let mut cure = Cure::new(graph, verdict, launcher.is_some(), &options);
    let cover = if shows(verdict, HazardKind::Dynamic) { cure.replace()? } else { cure.amend(verdict)? };
    match launcher.map_or(Ok(()), |launcher| launcher.proves(verdict, &cover)) {
        Ok(()) => Ok(cover),
        Err(Unproven::Shows(Cause::Function)) => Err(Withheld::Function),
        Err(Unproven::Shows(Cause::Logic)) => Err(Withheld::Together),
        Err(Unproven::Open) => Err(Withheld::Undecided),
    }
}

fn shows(verdict: &TargetVerdict, kind: HazardKind) -> bool {
    found(verdict).any(|(found, _)| found == kind)
}

/// All hazards of a verdict, those of launches last.
fn found(verdict: &TargetVerdict) -> impl Iterator<Item = (HazardKind, &Witness)> {
    let pairs = verdict.pairs.iter().flat_map(|pair| &pair.hazards).map(|(kind, witness)| (*kind, witness));
    pairs.chain(verdict.launches.iter().map(|found| (found.kind, &found.witness)))
}

/// A verdict with open questions cannot be cured with proof.
fn refuse_open(verdict: &TargetVerdict) -> Result<(), Withheld> {
    let launches = verdict.open_launches.iter().map(|open| open.reason);
    let mut reasons = verdict.pairs.iter().flat_map(|pair| &pair.undecided).map(|(_, reason)| *reason).chain(launches);
    match reasons.next() {
        None => Ok(()),
        Some(Undecided::Loop | Undecided::Race) => Err(Withheld::Loop),
        Some(Undecided::Budget) if reasons.any(|reason| reason == Undecided::Loop) => Err(Withheld::Loop),
        Some(Undecided::Budget | Undecided::Undriven) => Err(Withheld::Undecided),
    }
}

/// Terms over the nodes of some graph: products to OR to a target, then sums to AND.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub(super) struct Terms {
    pub(super) products: Vec<Cube>,
    /// As cubes on which the target is 0; the sum term has the complemented literals.
    pub(super) zeros: Vec<Cube>,
}

impl Terms {
    pub(super) fn len(&self) -> usize {
        self.products.len() + self.zeros.len()
    }

    /// Adds the cube of a hazard; false when it is there already.
    pub(super) fn add(&mut self, cube: Cube, value: bool) -> bool {
        let list = if value { &mut self.products } else { &mut self.zeros };
        let new = !list.contains(&cube);
        if new {
            list.push(cube);
        }
        new
    }

    /// The same without one term, counted through products and then zeros.
    fn without(&self, index: usize) -> Self {
        let mut fewer = self.clone();
        if index < fewer.products.len() {
            fewer.products.remove(index);
        } else {
            fewer.zeros.remove(index - self.products.len());
        }
        fewer
    }

    /// Appends the terms to a node of a cone whose graph they are over; returns the cured node.
    pub(super) fn append(&self, cone: &mut Cone, target: NodeId) -> NodeId {
        let mut cured = target;
        if !self.products.is_empty() {
            let mut inputs = vec![cured];
            inputs.extend(self.products.iter().map(|cube| product(cone, cube, target)));
            cured = cone.gate(GateKind::Or, &inputs, target);
        }
        if !self.zeros.is_empty() {
            let mut inputs = vec![cured];
            for cube in &self.zeros {
                let product = product(cone, cube, target);
                inputs.push(cone.gate(GateKind::Not, &[product], target));
            }
            cured = cone.gate(GateKind::And, &inputs, target);
        }
        cured
    }

    /// The terms over other nodes, sums with their own literals, in a fixed order.
    pub(super) fn cover(&self, original: impl Fn(NodeId) -> NodeId, replaces: bool) -> Cover {
        let literals = |cube: &Cube, flip: bool| {
            let mut literals: Vec<(NodeId, bool)> =
                cube.iter().map(|&(node, value)| (original(node), value ^ flip)).collect();
            literals.sort_unstable();
            literals
        };
        let mut products: Vec<_> = self.products.iter().map(|cube| literals(cube, false)).collect();
        let mut sums: Vec<_> = self.zeros.iter().map(|cube| literals(cube, true)).collect();
        products.sort_unstable();
        sums.sort_unstable();
        Cover { products, sums, replaces, proven: true }
    }
}

fn product(cone: &mut Cone, cube: &Cube, near: NodeId) -> NodeId {
    let mut inputs = Vec::with_capacity(cube.len());
    for &(node, value) in cube {
        inputs.push(if value { node } else { cone.gate(GateKind::Not, &[node], near) });
    }
    if inputs.is_empty() { cone.constant(true, near) } else { cone.gate(GateKind::And, &inputs, near) }
}

/// The cone of one target and the search for its terms.
struct Cure<'a> {
    cone: FrozenCone,
    target: NodeId,
    /// The sources whose changes are to be cured, when others are known not to change alone.
    only: Option<BTreeSet<NodeId>>,
    options: &'a Options,
}

impl<'a> Cure<'a> {
    fn new(graph: &Graph, verdict: &TargetVerdict, selects: bool, options: &'a Options) -> Self {
        let target = verdict.target;
        let cone = Cone::of(graph, &[target]).freeze();
        let target = cone.copy_of(target).unwrap_or(target);
        let sources = || verdict.pairs.iter().filter_map(|pair| cone.copy_of(pair.source)).collect();
        let only = selects.then(sources);
        Self { cone, target, only, options }
    }

    fn original(&self, node: NodeId) -> NodeId {
        self.cone.original(node).unwrap_or(node)
    }

    /// Terms for static hazards, found round by round until the decision is satisfied.
    fn amend(&mut self, verdict: &TargetVerdict) -> Result<Cover, Withheld> {
        let mut function = Function::new(&self.cone.graph, self.target, self.options);
        let mut terms = Terms::default();
        let mut open = self.localised(verdict);
        loop {
            let mut grown = false;
            for (kind, witness) in self::found(&open) {
                match kind {
                    HazardKind::Dynamic => return self.replace(),
                    HazardKind::Static0 => grown |= terms.add(function.span(witness, false)?, false),
                    HazardKind::Static1 => grown |= terms.add(function.span(witness, true)?, true),
                }
                if terms.len() > TERMS {
                    return Err(Withheld::TooManyTerms);
                }
            }
            if !grown {
                return Err(Withheld::Undecided);
            }
            open = self.decided(&terms)?;
            if open.is_clean() {
                break;
            }
        }
        let mut index = 0;
        // The decision asked below knows nothing of the terms that launches need.
        while verdict.launches.is_empty() && terms.len() > 1 && index < terms.len() {
            let fewer = terms.without(index);
            if self.decided(&fewer)?.is_clean() {
                terms = fewer;
            } else {
                index += 1;
            }
        }
        Ok(terms.cover(|node| self.original(node), false))
    }

    /// The verdict in terms of the cone's own nodes.
    fn localised(&self, verdict: &TargetVerdict) -> TargetVerdict {
        let mut verdict = verdict.clone();
        let local = |node: &mut NodeId| *node = self.cone.copy_of(*node).unwrap_or(*node);
        let pairs = verdict.pairs.iter_mut().flat_map(|pair| &mut pair.hazards).map(|(_, witness)| witness);
        for witness in pairs.chain(verdict.launches.iter_mut().map(|found| &mut found.witness)) {
            witness.changes.iter_mut().for_each(|(node, _)| local(node));
            witness.holds.iter_mut().for_each(|(node, _)| local(node));
        }
        verdict
    }

    /// The decision with the terms added.
    fn decided(&self, terms: &Terms) -> Result<TargetVerdict, Withheld> {
        let mut cone = Cone::of(&self.cone.graph, &[self.target]);
        let cured = terms.append(&mut cone, self.target);
        let mut verdict = decided(&cone.freeze().graph, cured, self.options)?;
        if let Some(only) = &self.only {
            verdict.pairs.retain(|pair| only.contains(&pair.source));
        }
        Ok(verdict)
    }

    /// Prime implicants in place of the logic.
    fn replace(&mut self) -> Result<Cover, Withheld> {
        if self.operators_at_fault() {
            return Err(Withheld::Operator);
        }
        let options = Options { exhaustive_sources: REPLACED_SOURCES, ..*self.options };
        if super::rails::Evaluator::new(&self.cone.graph, &[self.target]).leaves().len() > REPLACED_SOURCES {
            return Err(Withheld::TooManySources);
        }
        let function = Function::new(&self.cone.graph, self.target, &options);
        let products = hazard_free(&function).ok_or(Withheld::TooManySources)?;
        if products.len() > TERMS {
            return Err(Withheld::TooManyTerms);
        }
        if products.iter().any(|cube| !function.is_written(cube)) {
            return Err(Withheld::Unknown);
        }
        let terms = Terms { products, zeros: Vec::new() };
        let mut cone = Cone::of(&self.cone.graph, &[self.target]);
        let inputs: Vec<NodeId> = terms.products.iter().map(|cube| product(&mut cone, cube, self.target)).collect();
        let replaced = match inputs.as_slice() {
            [] => cone.constant(false, self.target),
            inputs => cone.gate(GateKind::Or, inputs, self.target),
        };
        match decided(&cone.freeze().graph, replaced, self.options)?.is_clean() {
            true => Ok(terms.cover(|node| self.original(node), true)),
            false => Err(Withheld::Undecided),
        }
    }

    /// Whether the written logic alone, without what operators do inside, has fewer hazards.
    fn operators_at_fault(&self) -> bool {
        let graph = &self.cone.graph;
        if !graph.nodes().any(|node| matches!(graph.kind(node), NodeKind::OpOut(_))) {
            return false;
        }
        let calm = Options { ignore_operators: true, ..*self.options };
        let kinds = |options: &Options| -> BTreeSet<(NodeId, HazardKind)> {
            let verdicts = decide(graph, &[self.target], options);
            let pairs = verdicts.iter().flat_map(|verdict| &verdict.pairs);
            pairs.flat_map(|pair| pair.hazards.iter().map(|(kind, _)| (pair.source, *kind))).collect()
        };
        kinds(&calm) != kinds(self.options)
    }
}

/// One target decided, nothing left open.
fn decided(graph: &Graph, target: NodeId, options: &Options) -> Result<TargetVerdict, Withheld> {
    let verdict = decide(graph, &[target], options).pop().ok_or(Withheld::Undecided)?;
    refuse_open(&verdict)?;
    Ok(verdict)
}

/// Prime implicants such that every on-point and every pair of neighbouring on-points lies in one of them, chosen
/// greedily and then thinned out. `None` without a truth table.
fn hazard_free(function: &Function) -> Option<Vec<Cube>> {
    let ones = function.points(true)?;
    let variables = function.variables.len();
    let inside =
        |cube: &(usize, usize), point: usize, freed: usize| (point ^ cube.0) & !cube.1 == 0 && freed & !cube.1 == 0;
    // What must be covered: (point, freed variable or none).
    let mut needs: Vec<(usize, usize)> = Vec::new();
    let mut primes: BTreeSet<(usize, usize)> = BTreeSet::new();
    for point in ones.iter() {
        needs.push((point, 0));
        for bit in (0..variables).map(|variable| 1usize << variable) {
            if point & bit == 0 && ones.contains(point | bit) {
                needs.push((point, bit));
            }
        }
    }
    for &(point, freed) in &needs {
        primes.extend(ones.largest_cube(point, freed).map(|mask| (point & !mask, mask)));
    }
    let mut open = needs.clone();
    let mut chosen: Vec<(usize, usize)> = Vec::new();
    while !open.is_empty() {
        let gain = |prime: &(usize, usize)| open.iter().filter(|&&(point, freed)| inside(prime, point, freed)).count();
        let mut best: Option<(usize, (usize, usize))> = None;
        for prime in &primes {
            let gain = gain(prime);
            if best.is_none_or(|(most, _)| gain > most) {
                best = Some((gain, *prime));
            }
        }
        let (_, prime) = best.filter(|(gain, _)| *gain > 0)?;
        open.retain(|&(point, freed)| !inside(&prime, point, freed));
        chosen.push(prime);
    }
    let mut index = 0;
    while index < chosen.len() {
        let others = |need: &(usize, usize)| {
            chosen.iter().enumerate().any(|(other, prime)| other != index && inside(prime, need.0, need.1))
        };
        if needs.iter().all(others) {
            chosen.remove(index);
        } else {
            index += 1;
        }
    }
    Some(chosen.into_iter().map(|(point, freed)| function.cube(point, freed)).collect())
}
