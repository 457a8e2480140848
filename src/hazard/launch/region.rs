//! The logic in front of a target in one step of a model: its cone, read on through the latches that pass their data in
//! this step. Here the model becomes plain waveforms, which say what matters and what the function does on the way.

use std::collections::BTreeMap;

use super::encode::Layer;
use super::exact::Inquiry;
use crate::hazard::clauses::Clauses;
use crate::hazard::cone::{Cone, Edge, Op};
use crate::hazard::solver::{Answer, Batsat, Literal, Solver};
use crate::hazard::wave::Wave;
use crate::hazard::witness::{STILL, inverted, lifted, members, only};

/// Node evaluations that may be spent on leaving out what does not matter.
const EFFORT: usize = 1 << 17;

/// Conflicts spent on the question whether the function itself moves.
const CONFLICTS: u64 = 10_000;

/// A node of a region.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Member {
    Logic,
    /// Reads this edge.
    Passing(Edge),
    /// Reads this edge once it has opened, and has this value until then.
    Late(Edge, bool),
    Leaf,
}

/// A source in front of the target.
#[derive(Clone, Copy, Debug)]
pub(super) struct Leaf {
    pub(super) node: usize,
    pub(super) wave: Wave,
}

/// See the module documentation.
pub(super) struct Region<'a> {
    cone: &'a Cone,
    root: Edge,
    /// What a node reads stands before it.
    members: Vec<(usize, Member)>,
    places: BTreeMap<usize, usize>,
    /// In order of node.
    pub(super) leaves: Vec<Leaf>,
    /// Latches that pass, as nodes.
    pub(super) passing: Vec<usize>,
    /// Those of them that begin this step with the other value than their data, as nodes and that value.
    pub(super) late: Vec<(usize, bool)>,
}

impl<'a> Region<'a> {
    /// The region of `root` in a step of the inquiry's last model; `through` latches or only up to them.
    pub(super) fn new(inquiry: &'a Inquiry<'_>, layer: Layer, root: Edge, through: bool) -> Self {
        let encoder = &inquiry.encoder;
        let cone = &encoder.fabric.cone;
        let solver = &encoder.clauses.solver;
        let mut region = Self {
            cone,
            root,
            members: Vec::new(),
            places: BTreeMap::new(),
            leaves: Vec::new(),
            passing: Vec::new(),
            late: Vec::new(),
        };
        let mut stack = vec![(root.node(), false)];
        while let Some((node, ready)) = stack.pop() {
            if region.places.contains_key(&node) {
                continue;
            }
            let mut member = Member::Logic;
            if matches!(cone.ops[node], Op::Free { .. }) {
                let does = encoder.latches[layer as usize].get(&node);
                let passes = does.is_some_and(|does| solver.value(does.passing) && !solver.value(does.raced));
                let moves = |latch: &usize| {
                    let wave = encoder.data.get(latch).map(|data| data.steps[layer as usize]);
                    wave.is_some_and(|wave| {
                        solver.value(wave.i) != solver.value(wave.f) || wave.h.is_some_and(|h| solver.value(h))
                    })
                };
                let begins = |edge: Edge| solver.value(encoder.done(layer, edge).wave.i);
                let own = begins(Edge::new(node, false));
                member = match encoder.fabric.latch(node).filter(|latch| through && passes && moves(latch)) {
                    Some(latch) => match encoder.fabric.cells[latch].data {
                        data if begins(data) == own => Member::Passing(data),
                        data => Member::Late(data, own),
                    },
                    None => Member::Leaf,
                };
            }
            let fanin = match &member {
                Member::Logic => cone.fanin(node),
                Member::Passing(data) | Member::Late(data, _) => std::slice::from_ref(data),
                Member::Leaf => &[],
            };
            if !ready {
                stack.push((node, true));
                stack.extend(fanin.iter().rev().map(|pin| (pin.node(), false)));
                continue;
            }
            region.places.insert(node, region.members.len());
            region.members.push((node, member));
            match member {
                Member::Logic => {}
                Member::Passing(_) => region.passing.push(node),
                Member::Late(_, own) => {
                    region.passing.push(node);
                    region.late.push((node, own));
                }
                Member::Leaf => {
                    let wave = encoder.done(layer, Edge::new(node, false)).wave;
                    let raced = encoder.latches[layer as usize].get(&node).is_some_and(|does| solver.value(does.raced));
                    let wave = Wave { i: solver.value(wave.i), f: solver.value(wave.f), h: raced };
                    region.leaves.push(Leaf { node, wave });
                }
            }
        }
        region.leaves.sort_by_key(|leaf| leaf.node);
        region
    }

    fn pins(&self, at: usize) -> &[Edge] {
        match &self.members[at] {
            (node, Member::Logic) => self.cone.fanin(*node),
            (_, Member::Passing(data) | Member::Late(data, _)) => std::slice::from_ref(data),
            (_, Member::Leaf) => &[],
        }
    }

    fn leaf(&self, node: usize) -> Option<&Leaf> {
        let at = self.leaves.binary_search_by_key(&node, |leaf| leaf.node).ok()?;
        Some(&self.leaves[at])
    }

    /// The waveforms that the target can have when the leaves that `dropped` names hold any value.
    fn target_set(&self, dropped: &dyn Fn(usize) -> bool) -> u8 {
        let mut sets: Vec<u8> = Vec::with_capacity(self.members.len());
        for (at, &(node, member)) in self.members.iter().enumerate() {
            let set = |pin: &Edge| {
                let set = self.places.get(&pin.node()).map_or(0, |&place| sets[place]);
                if pin.inverted() { inverted(set) } else { set }
            };
            let mut pins = self.pins(at).iter().map(set);
            let own = match member {
                Member::Passing(_) => pins.next().unwrap_or(0),
                Member::Late(_, own) => opened(pins.next().unwrap_or(0), own),
                Member::Logic => lifted(self.cone.ops[node], &self.cone.tables, pins),
                Member::Leaf if dropped(node) => STILL,
                Member::Leaf => self.leaf(node).map_or(0, |leaf| only(leaf.wave)),
            };
            sets.push(own);
        }
        let set = self.places.get(&self.root.node()).map_or(0, |&place| sets[place]);
        if self.root.inverted() { inverted(set) } else { set }
    }

    /// The target's waveform.
    pub(super) fn wave(&self) -> Wave {
        members(self.target_set(&|_| false)).next().unwrap_or(Wave::constant(false))
    }

    fn effort(&self) -> usize {
        self.members.len().saturating_mul(self.leaves.len())
    }

    /// Whether the function of the target takes the other value on some way of the leaves from their first to their last
    /// values. What races takes any value on the way.
    pub(super) fn function_moves(&self) -> bool {
        let wave = self.wave();
        let mut clauses: Clauses<Batsat> = Clauses::new();
        let early = self.changed(&mut clauses);
        let one = self.between(&mut clauses, &early);
        let mut wanted = vec![one.inverted_if(wave.i)];
        if wave.changes() {
            let late = self.changed(&mut clauses);
            for (&early, &late) in early.iter().zip(&late) {
                clauses.solver.clause(&[!early, late]);
            }
            let other = self.between(&mut clauses, &late);
            wanted.push(other.inverted_if(!wave.i));
        }
        clauses.solver.solve(&wanted, CONFLICTS) == Answer::Satisfiable
    }

    /// Per leaf whether it has changed, then per late latch whether it has opened.
    fn changed(&self, clauses: &mut Clauses<Batsat>) -> Vec<Literal> {
        (0..self.leaves.len() + self.late.len()).map(|_| clauses.solver.variable()).collect()
    }

    /// The target while some leaves have changed.
    fn between(&self, clauses: &mut Clauses<Batsat>, changed: &[Literal]) -> Literal {
        let mut values: Vec<Literal> = Vec::with_capacity(self.members.len());
        for (at, &(node, member)) in self.members.iter().enumerate() {
            let pins: Vec<Literal> = self.pins(at).iter().map(|pin| self.read(&values, clauses, *pin)).collect();
            let own = match member {
                Member::Passing(_) => pins.first().copied().unwrap_or(!clauses.one),
                Member::Late(_, own) => {
                    let at = self.late.iter().position(|&(late, _)| late == node);
                    let opened = at.map_or(clauses.one, |at| changed[self.leaves.len() + at]);
                    let own = clauses.constant(own);
                    clauses.mux(opened, pins.first().copied().unwrap_or(own), own)
                }
                Member::Logic => clauses.value(self.cone.ops[node], &self.cone.tables, &pins),
                Member::Leaf => match self.leaves.binary_search_by_key(&node, |leaf| leaf.node) {
                    Ok(leaf) => match self.leaves[leaf].wave {
                        wave if wave.h => clauses.solver.variable(),
                        wave if wave.changes() => changed[leaf].inverted_if(wave.i),
                        wave => clauses.constant(wave.i),
                    },
                    Err(_) => !clauses.one,
                },
            };
            values.push(own);
        }
        self.read(&values, clauses, self.root)
    }

    fn read(&self, values: &[Literal], clauses: &Clauses<Batsat>, pin: Edge) -> Literal {
        let place = self.places.get(&pin.node());
        place.map_or(!clauses.one, |&place| values[place]).inverted_if(pin.inverted())
    }
}

/// The waveforms of a latch that has the value `own` until it opens, from those of its data. When data of the other value
/// changes, it may do so before or after the latch has opened.
fn opened(data: u8, own: bool) -> u8 {
    let opened = members(data).map(|data| {
        let h = data.h || (data.changes() && data.i != own);
        only(Wave { i: own, h, ..data })
    });
    opened.fold(0, |all, wave| all | wave)
}

/// The leaves that hold still and matter: without any of the others the target still shows the same in every region. Two
/// regions are those of the two steps of one event.
pub(super) fn holding(regions: &[&Region<'_>], ends_only: bool) -> Vec<usize> {
    let moving = |node: usize| regions.iter().any(|region| region.leaf(node).is_some_and(|leaf| leaf.wave.moves()));
    let mut nodes: Vec<usize> = regions.iter().flat_map(|region| region.leaves.iter().map(|leaf| leaf.node)).collect();
    nodes.sort_unstable();
    nodes.dedup();
    nodes.retain(|&node| !moving(node));
    if regions.iter().map(|region| region.effort()).sum::<usize>() > EFFORT {
        return nodes;
    }
    let mut dropped: Vec<usize> = Vec::new();
    for &node in &nodes {
        dropped.push(node);
        let determined = regions.iter().all(|region| {
            let set = region.target_set(&|node| dropped.contains(&node));
            if ends_only {
                let ends: Vec<(bool, bool)> = members(set).map(|wave| (wave.i, wave.f)).collect();
                ends.windows(2).all(|pair| pair[0] == pair[1])
            } else {
                set.count_ones() == 1
            }
        });
        if !determined {
            dropped.pop();
        }
    }
    nodes.retain(|node| !dropped.contains(node));
    nodes
}
