//! One change from one stable state of a network with loops, walked through in every order in which the delays of its
//! gates and wires can expire. Each gate output and each wire to a pin is an element with a value; one whose value is
//! not what it hears may move at any time, and takes what it hears at that moment. This is exact and costs the number of
//! states, so it is kept for what the solver left suspect.
//!
//! Elements that the change does not reach are left out: they hold their value. What the moving ones hear from them, and
//! what holds others still, is the signature of the start: starts of one signature have one answer.

use std::collections::{BTreeMap, BTreeSet, HashMap};

use super::network::Network;
use crate::graph::{GateKind, NodeId, NodeKind};
use crate::hazard::HazardKind;
use crate::hazard::rails::is_leaf;

/// States of one walk.
const STATES: usize = 1 << 17;
/// Elements that fit into a state beside the two marks.
const ELEMENTS: u32 = 62;
/// The target has come back to where it began.
const BACK: u64 = 1 << 63;

/// The moving part of a network after one change.
pub(super) struct Walk {
    start: u64,
    /// The driver of each wire and its own bit.
    wires: Vec<(u32, u32)>,
    gates: Vec<Gate>,
    /// Index of the target's gate; `None` when no change reaches it.
    target: Option<usize>,
    /// Nodes that are heard or hold something still, with their values.
    pub(super) signature: Vec<(NodeId, bool)>,
    races: bool,
    /// Per wire: the gate that hears it and the pin.
    pins: Vec<(NodeId, usize)>,
    width: u32,
}

struct Gate {
    node: NodeId,
    pins: u64,
    function: Function,
    inverted: bool,
    output: u32,
}

#[derive(Clone, Copy)]
enum Function {
    All,
    Any,
    Odd,
}

impl Gate {
    fn hears(&self, state: u64) -> bool {
        let plain = match self.function {
            Function::All => state & self.pins == self.pins,
            Function::Any => state & self.pins != 0,
            Function::Odd => (state & self.pins).count_ones() % 2 == 1,
        };
        plain ^ self.inverted
    }
}

/// What a change can show.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub(super) struct Outcome {
    pub(super) kinds: BTreeSet<HazardKind>,
    /// Which state the loops come to rest in, or whether they do, depends on delays.
    pub(super) races: bool,
}

/// An element that moves, and the value that it takes.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Moved {
    /// The wire to this pin of this gate.
    Wire(NodeId, usize, bool),
    /// The output of this gate.
    Gate(NodeId, bool),
}

impl Walk {
    /// The change of `source` from the stable state in which the leaves have `values`. `None` when what moves is too
    /// large, or is no plain gate.
    pub(super) fn new(network: &Network, values: &BTreeMap<NodeId, bool>, source: NodeId) -> Option<Self> {
        let values = settled(network, values);
        let value = |node: NodeId| values[node.index()];
        let moving = moving(network, &values, source);
        let target = network.heard(network.target);
        let relevant = leading(network, target, &moving);
        let mut walk = Self {
            start: u64::from(!value(source)),
            wires: Vec::new(),
            gates: Vec::new(),
            target: None,
            signature: signature(network, &values, &moving, target),
            races: races(network, &values, &moving, source),
            pins: Vec::new(),
            width: 1,
        };
        let mut outputs: BTreeMap<NodeId, u32> = BTreeMap::from([(source, 0)]);
        for &node in &relevant {
            outputs.insert(node, walk.place(value(node))?);
        }
        for &node in &relevant {
            let NodeKind::Gate(kind) = network.graph.kind(node) else { return None };
            let mut pins = 0u64;
            let mut odd = false;
            for (pin, &fanin) in network.graph.fanin(node).iter().enumerate() {
                let driver = network.heard(fanin);
                match outputs.get(&driver) {
                    Some(&bit) => {
                        let own = walk.place(value(driver))?;
                        walk.wires.push((bit, own));
                        walk.pins.push((node, pin));
                        pins |= 1 << own;
                    }
                    // A gate that can move is not held, so a still pin matters to an exclusive-or only.
                    None => odd ^= value(driver),
                }
            }
            let (function, inverted) = match kind {
                GateKind::Buf | GateKind::And => (Function::All, false),
                GateKind::Not | GateKind::Nand => (Function::All, true),
                GateKind::Or => (Function::Any, false),
                GateKind::Nor => (Function::Any, true),
                GateKind::Xor => (Function::Odd, odd),
                GateKind::Xnor => (Function::Odd, !odd),
            };
            if node == target {
                walk.target = Some(walk.gates.len());
            }
            walk.gates.push(Gate { node, pins, function, inverted, output: outputs[&node] });
        }
        Some(walk)
    }

    fn place(&mut self, value: bool) -> Option<u32> {
        let bit = self.width;
        self.width += 1;
        self.start |= u64::from(value) << bit;
        (bit < ELEMENTS).then_some(bit)
    }

    /// Calls `next` with every state that can follow and the element that moves; wires come first. Returns whether the
    /// state is stable.
    fn successors(&self, state: u64, mut next: impl FnMut(u64, usize)) -> bool {
        let mut stable = true;
        for (index, &(driver, own)) in self.wires.iter().enumerate() {
            if (state >> driver ^ state >> own) & 1 == 1 {
                stable = false;
                next(state ^ 1 << own, index);
            }
        }
        for (index, gate) in self.gates.iter().enumerate() {
            if gate.hears(state) != (state >> gate.output & 1 == 1) {
                stable = false;
                let mut state = state ^ 1 << gate.output;
                if self.target == Some(index) && (state ^ self.start) >> gate.output & 1 == 0 {
                    state |= BACK;
                }
                next(state, self.wires.len() + index);
            }
        }
        stable
    }

    /// All that the target can show; `None` when there are too many states.
    pub(super) fn outcome(&self) -> Option<Outcome> {
        let mut outcome = Outcome { kinds: BTreeSet::new(), races: self.races };
        let Some(target) = self.target else { return Some(outcome) };
        self.search(|state| {
            if let Some(kind) = self.kind(target, state) {
                outcome.kinds.insert(kind);
            }
            false
        })?;
        Some(outcome)
    }

    /// The hazard that the target has shown when the network rests in `state`.
    fn kind(&self, target: usize, state: u64) -> Option<HazardKind> {
        let output = self.gates[target].output;
        let (before, after) = (self.start >> output & 1 == 1, state >> output & 1 == 1);
        (state & BACK != 0).then_some(match (before, after) {
            (false, false) => HazardKind::Static0,
            (true, true) => HazardKind::Static1,
            _ => HazardKind::Dynamic,
        })
    }

    /// An order of moves that ends at rest and shows `kind` at the target.
    pub(super) fn order(&self, kind: HazardKind) -> Option<Vec<Moved>> {
        let target = self.target?;
        let (found, ways) = self.search(|state| self.kind(target, state) == Some(kind))?;
        let mut state = found?;
        let mut moved = Vec::new();
        while let Some(&(before, element)) = ways.get(&state).filter(|_| state != self.start) {
            moved.push(match self.pins.get(element) {
                Some(&(node, pin)) => Moved::Wire(node, pin, state >> self.wires[element].1 & 1 == 1),
                None => {
                    let gate = &self.gates[element - self.wires.len()];
                    Moved::Gate(gate.node, state >> gate.output & 1 == 1)
                }
            });
            state = before;
        }
        moved.reverse();
        Some(moved)
    }

    /// Visits the states breadth first until `accepts` takes a stable one: that state, and from where and by which
    /// element each was reached. `None` when there are too many.
    #[allow(clippy::type_complexity, reason = "a state, and where each came from")]
    fn search(&self, mut accepts: impl FnMut(u64) -> bool) -> Option<(Option<u64>, HashMap<u64, (u64, usize)>)> {
        let mut ways: HashMap<u64, (u64, usize)> = HashMap::from([(self.start, (self.start, 0))]);
        let mut open = vec![self.start];
        let mut at = 0;
        while at < open.len() {
            let state = open[at];
            at += 1;
            let stable = self.successors(state, |next, element| {
                if let std::collections::hash_map::Entry::Vacant(free) = ways.entry(next) {
                    free.insert((state, element));
                    open.push(next);
                }
            });
            if stable && accepts(state) {
                return Some((Some(state), ways));
            }
            if open.len() > STATES {
                return None;
            }
        }
        Some((None, ways))
    }
}

/// The value at a pin that alone decides a gate.
fn controlling(kind: GateKind) -> Option<bool> {
    match kind {
        GateKind::And | GateKind::Nand => Some(false),
        GateKind::Or | GateKind::Nor => Some(true),
        GateKind::Buf | GateKind::Not | GateKind::Xor | GateKind::Xnor => None,
    }
}

fn function(kind: GateKind, pins: &[bool]) -> bool {
    let plain = match kind {
        GateKind::Buf | GateKind::Not | GateKind::And | GateKind::Nand => pins.iter().all(|&pin| pin),
        GateKind::Or | GateKind::Nor => pins.iter().any(|&pin| pin),
        GateKind::Xor | GateKind::Xnor => pins.iter().filter(|&&pin| pin).count() % 2 == 1,
    };
    plain ^ kind.inverts()
}

/// The value of every node in the state that the leaves give.
pub(super) fn settled(network: &Network, leaves: &BTreeMap<NodeId, bool>) -> Vec<bool> {
    let mut values = vec![false; network.graph.len()];
    for &node in &network.order {
        let fanin = network.graph.fanin(node);
        let pins: Vec<bool> = fanin.iter().map(|pin| values[pin.index()]).collect();
        values[node.index()] = match network.graph.kind(node) {
            _ if is_leaf(&network.graph, node) => leaves.get(&node).copied().unwrap_or(false),
            NodeKind::Const(value) => value,
            NodeKind::Gate(kind) => function(kind, &pins),
            NodeKind::Table(table) => network.tables[table.index()].value(&pins).unwrap_or(false),
            _ => pins.first().copied().unwrap_or(false),
        };
    }
    values
}

/// The source and every node that its change can reach: some pin of it may move, and no still pin holds it.
fn moving(network: &Network, values: &[bool], source: NodeId) -> BTreeSet<NodeId> {
    let mut moving = BTreeSet::from([source]);
    loop {
        let before = moving.len();
        for &node in &network.order {
            if moving.contains(&node) || is_leaf(&network.graph, node) || network.heard(node) != node {
                continue;
            }
            let drivers = || network.graph.fanin(node).iter().map(|&pin| network.heard(pin));
            let control = match network.graph.kind(node) {
                NodeKind::Gate(kind) => controlling(kind),
                _ => None,
            };
            let held = |driver: NodeId| !moving.contains(&driver) && control == Some(values[driver.index()]);
            if drivers().any(|driver| moving.contains(&driver)) && !drivers().any(held) {
                moving.insert(node);
            }
        }
        if moving.len() == before {
            return moving;
        }
    }
}

/// What the answer about a start depends on: the target's value, the values that the moving nodes
/// hear, and what holds others still. Starts
/// in which these agree have the same moving nodes: the first in which they differed would be held in one start by a node
/// that the other knows to hold it too.
fn signature(network: &Network, values: &[bool], moving: &BTreeSet<NodeId>, target: NodeId) -> Vec<(NodeId, bool)> {
    let mut signature: BTreeMap<NodeId, bool> = BTreeMap::new();
    let mut says = |node: NodeId| signature.insert(node, values[node.index()]);
    says(target);
    for &node in &network.order {
        let drivers = || network.graph.fanin(node).iter().map(|&pin| network.heard(pin));
        if moving.contains(&node) {
            says(node);
            for driver in drivers() {
                says(driver);
            }
        } else if let NodeKind::Gate(kind) = network.graph.kind(node)
            && drivers().any(|driver| moving.contains(&driver))
        {
            let holds = |driver: &NodeId| !moving.contains(driver) && Some(values[driver.index()]) == controlling(kind);
            if let Some(driver) = drivers().find(holds) {
                says(driver);
            }
        }
    }
    signature.into_iter().collect()
}

/// Whether ternary simulation (Eichelberger 1965) leaves a moving node unknown: procedure A spreads the unknown from the
/// source, procedure B the source's new value. By Brzozowski and Seger (Asynchronous Circuits, 1995) what is left unknown
/// is what depends on the delays of gates and wires once the network has had its time.
fn races(network: &Network, values: &[bool], moving: &BTreeSet<NodeId>, source: NodeId) -> bool {
    let mut now: Vec<Option<bool>> = values.iter().copied().map(Some).collect();
    let order: Vec<NodeId> =
        network.order.iter().copied().filter(|node| *node != source && moving.contains(node)).collect();
    for (start, joins) in [(None, true), (Some(!values[source.index()]), false)] {
        now[source.index()] = start;
        let mut changed = true;
        while changed {
            changed = false;
            for &node in &order {
                let heard = ternary(network, node, &now);
                let next = if joins && now[node.index()] != heard { None } else { heard };
                changed |= std::mem::replace(&mut now[node.index()], next) != next;
            }
        }
    }
    order.iter().any(|node| now[node.index()].is_none())
}

/// What a node hears in three values.
fn ternary(network: &Network, node: NodeId, now: &[Option<bool>]) -> Option<bool> {
    let pins: Vec<Option<bool>> =
        network.graph.fanin(node).iter().map(|&pin| now[network.heard(pin).index()]).collect();
    match network.graph.kind(node) {
        NodeKind::Gate(kind) => match controlling(kind) {
            // A 0 makes an AND 0 and a 1 makes an OR 1.
            Some(control) if pins.contains(&Some(control)) => Some(control ^ kind.inverts()),
            _ => Some(function(kind, &pins.into_iter().collect::<Option<Vec<bool>>>()?)),
        },
        NodeKind::Table(table) => {
            let pins = pins.into_iter().collect::<Option<Vec<bool>>>()?;
            Some(network.tables[table.index()].value(&pins).unwrap_or(false))
        }
        _ => pins.first().copied().flatten(),
    }
}

/// The moving nodes, source left out, from which a change can reach the target; sorted.
fn leading(network: &Network, target: NodeId, moving: &BTreeSet<NodeId>) -> Vec<NodeId> {
    let mut seen: BTreeSet<NodeId> = BTreeSet::new();
    let mut open = vec![target];
    while let Some(node) = open.pop() {
        let inner = !network.graph.fanin(node).is_empty();
        if moving.contains(&node) && inner && seen.insert(node) {
            open.extend(network.graph.fanin(node).iter().map(|&pin| network.heard(pin)));
        }
    }
    seen.into_iter().collect()
}
