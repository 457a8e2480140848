//! The logic in front of a net as a reader sees it: wires are names and no symbols, an arithmetic operator is one symbol,
//! and each gate has the waveform that the witness gives it. A value is only given where it follows from the witness;
//! where any value does, there is none.

use std::collections::{BTreeMap, BTreeSet};

use super::{Way, original};
use crate::graph::{GateKind, Graph, NodeId, NodeKind};
use crate::hazard::{self, Order, Promises, Wave, Witness};
use crate::replay::Cut;
use crate::rules::Transition;

/// What a node shows in one step.
#[derive(Clone, Copy)]
struct Value {
    /// `None` where it does not follow from the witness.
    sure: Option<Wave>,
    /// The same if everything that the witness does not name holds 0.
    assumed: Wave,
}

/// See the module documentation. All node ids are those of the cut.
pub(super) struct Logic<'a> {
    /// The graph that the cut was taken from, for names.
    pub(super) graph: &'a Graph,
    pub(super) cut: &'a Cut,
    /// Position in topological order.
    rank: BTreeMap<NodeId, usize>,
    looped: BTreeSet<NodeId>,
    values: Vec<BTreeMap<NodeId, Value>>,
    /// Gates, tables and operators in front of the target.
    pub(super) gates: usize,
}

/// What is to be marked: the symbols on each way in order, ends included.
pub(super) type Ways = Vec<(Way, Vec<NodeId>)>;

impl<'a> Logic<'a> {
    pub(super) fn new(graph: &'a Graph, cut: &'a Cut, transition: Option<&Transition>) -> Self {
        let order = Order::new(&cut.frozen.graph, &[cut.target]);
        let rank = order.nodes.iter().enumerate().map(|(at, &node)| (node, at)).collect();
        let looped = order.nodes.iter().zip(&order.looped).filter(|&(_, &looped)| looped).map(|(&node, _)| node);
        let mut logic =
            Self { graph, cut, rank, looped: looped.collect(), values: vec![BTreeMap::new(); cut.steps()], gates: 0 };
        let mut inner: BTreeSet<NodeId> = BTreeSet::new();
        for &node in &order.nodes {
            let kind = cut.frozen.graph.kind(node);
            if !matches!(kind, NodeKind::OpOut(_)) {
                let within = cut.frozen.graph.fanin(node).iter().any(|pin| inner.contains(pin));
                if within || matches!(kind, NodeKind::OpIn(_)) {
                    inner.insert(node);
                }
            }
            let counts = matches!(kind, NodeKind::Gate(_) | NodeKind::Table(_) | NodeKind::OpOut(_));
            logic.gates += usize::from(counts && !inner.contains(&node) && !logic.looped.contains(&node));
            for step in 0..cut.steps() {
                let value = logic.evaluate(node, step, transition);
                logic.values[step].insert(node, value);
            }
        }
        logic
    }

    fn evaluate(&self, node: NodeId, step: usize, transition: Option<&Transition>) -> Value {
        let same = |wave: Wave| Value { sure: Some(wave), assumed: wave };
        if let Some(given) = self.cut.given(node).and_then(|waves| waves.get(step).copied()) {
            return same(given);
        }
        let kind = self.kind(node);
        let pins = if self.looped.contains(&node) { &[][..] } else { self.cut.frozen.graph.fanin(node) };
        let free = Value { sure: None, assumed: Wave::constant(false) };
        let pins: Vec<Value> = pins.iter().map(|pin| self.values[step].get(pin).copied().unwrap_or(free)).collect();
        let through = |change: &dyn Fn(Wave) -> Wave| match pins.first() {
            Some(pin) => Value { sure: pin.sure.map(change), assumed: change(pin.assumed) },
            None => free,
        };
        let calm = transition.is_some_and(|transition| transition.calm);
        let late = transition.and_then(|transition| transition.witness.launch.as_ref());
        if late.is_some_and(|launch| launch.late.contains(&original(self.cut, node))) {
            return through(&|data| Wave { i: !data.i, ..data });
        }
        match kind {
            _ if self.looped.contains(&node) => free,
            NodeKind::Const(value) => same(Wave::constant(value)),
            NodeKind::Unknown | NodeKind::Source(_) => free,
            NodeKind::OpOut(_) if calm => through(&|result| Wave { h: false, ..result }),
            NodeKind::Wire | NodeKind::OpOut(_) => through(&|driver| driver),
            NodeKind::OpIn(_) => through(&|driver| Wave { h: driver.moves(), ..driver }),
            NodeKind::Gate(gate) => Value {
                sure: sure(gate, &pins),
                assumed: hazard::gate(gate, &pins.iter().map(|pin| pin.assumed).collect::<Vec<_>>()),
            },
            NodeKind::Table(table) => {
                let table = Promises::new(&self.cut.frozen.graph.tables[table.index()]);
                let sure: Option<Vec<Wave>> = pins.iter().map(|pin| pin.sure).collect();
                let assumed: Vec<Wave> = pins.iter().map(|pin| pin.assumed).collect();
                Value { sure: sure.map(|pins| table.wave(&pins)), assumed: table.wave(&assumed) }
            }
        }
    }

    pub(super) fn kind(&self, node: NodeId) -> NodeKind {
        self.cut.frozen.graph.kind(node)
    }

    pub(super) fn is_looped(&self, node: NodeId) -> bool {
        self.looped.contains(&node)
    }

    /// What drives `node` when wires are followed.
    pub(super) fn driver(&self, mut node: NodeId) -> NodeId {
        while self.kind(node) == NodeKind::Wire && !self.is_looped(node) {
            match self.cut.frozen.graph.fanin(node) {
                [driver] => node = *driver,
                _ => break,
            }
        }
        node
    }

    /// What drives each pin of a gate; of an operator what enters it, each once.
    pub(super) fn pins(&self, node: NodeId) -> Vec<NodeId> {
        let graph = &self.cut.frozen.graph;
        match self.kind(node) {
            _ if self.is_looped(node) => Vec::new(),
            NodeKind::Gate(_) | NodeKind::Table(_) => graph.fanin(node).iter().map(|&pin| self.driver(pin)).collect(),
            NodeKind::OpOut(_) => {
                let mut entered: BTreeSet<NodeId> = BTreeSet::new();
                let mut seen: BTreeSet<NodeId> = BTreeSet::new();
                let mut open = vec![node];
                while let Some(here) = open.pop() {
                    if !seen.insert(here) {
                        continue;
                    }
                    for &pin in graph.fanin(here) {
                        match self.kind(pin) {
                            NodeKind::OpIn(_) => {
                                entered.extend(graph.fanin(pin).iter().map(|&pin| self.driver(pin)));
                            }
                            NodeKind::Const(_) => {}
                            _ => open.push(pin),
                        }
                    }
                }
                entered.into_iter().collect()
            }
            _ => Vec::new(),
        }
    }

    /// How many gates of the cut read it.
    pub(super) fn readers(&self, node: NodeId) -> usize {
        let graph = &self.cut.frozen.graph;
        let mut open = vec![node];
        let mut readers = 0;
        while let Some(here) = open.pop() {
            for &reader in graph.fanout(here) {
                match self.kind(reader) {
                    NodeKind::Wire => open.push(reader),
                    _ => readers += 1,
                }
            }
        }
        readers
    }

    /// What it shows in each step; empty where that does not follow from the witness and nobody insists.
    pub(super) fn waves(&self, node: NodeId, insist: bool) -> Vec<Wave> {
        let values = self.values.iter().map(|values| values.get(&node).copied());
        let shown: Option<Vec<Wave>> = values
            .map(|value| value.and_then(|value| value.sure.or_else(|| insist.then_some(value.assumed))))
            .collect();
        shown.unwrap_or_default()
    }

    /// The ways of the change, or the way around a loop.
    pub(super) fn ways(&self, transition: Option<&Transition>) -> Ways {
        let Some(transition) = transition else { return self.around() };
        let mut ways = self.of_witness(transition);
        if ways.is_empty() {
            // An event of which each step is clean, or a latch that does anything at all: what moves is followed back.
            for (step, way) in (0..self.values.len()).zip([Way::First, Way::Second]) {
                let back = self.back(self.driver(self.cut.target), |node| {
                    self.values[step].get(&node).is_some_and(|value| value.assumed.moves())
                });
                if back.len() > 1 {
                    ways.push((way, back));
                }
            }
            join(&mut ways);
        }
        ways
    }

    fn of_witness(&self, transition: &Transition) -> Ways {
        // Only one step can show the hazard by itself.
        let step = (0..self.values.len())
            .find(|&step| self.values[step].get(&self.cut.target).is_some_and(|value| value.assumed.h));
        let Some(step) = step else { return Vec::new() };
        let mut witness = Witness { changes: Vec::new(), holds: Vec::new(), ..transition.witness.clone() };
        for &node in self.rank.keys() {
            let Some(wave) = self.cut.given(node).and_then(|waves| waves.get(step).copied()) else { continue };
            let list = if wave.changes() { &mut witness.changes } else { &mut witness.holds };
            list.push((node, wave.i));
        }
        let paths = hazard::paths(&self.cut.frozen.graph, self.cut.target, &witness);
        if paths.ways.is_empty() {
            return Vec::new();
        }
        let symbols = |nodes: &mut dyn Iterator<Item = NodeId>| {
            let mut symbols: Vec<NodeId> = nodes.map(|node| self.driver(node)).collect();
            symbols.dedup();
            symbols
        };
        let mut ways: Ways = Vec::new();
        for (path, way) in paths.ways.iter().zip([Way::First, Way::Second]) {
            ways.push((way, symbols(&mut path.steps.iter().map(|step| step.node))));
        }
        ways.push((Way::Pulse, symbols(&mut paths.tail.iter().copied())));
        ways
    }

    /// A shortest way back from `start` over nodes that `follow` accepts to one without such pins, in forward order.
    fn back(&self, start: NodeId, follow: impl Fn(NodeId) -> bool) -> Vec<NodeId> {
        let mut toward: BTreeMap<NodeId, NodeId> = BTreeMap::new();
        let mut queue = std::collections::VecDeque::from([start]);
        while let Some(node) = queue.pop_front() {
            let pins: Vec<NodeId> = self.pins(node).into_iter().filter(|&pin| follow(pin)).collect();
            if pins.is_empty() {
                let mut way = vec![node];
                let mut here = node;
                while let Some(&next) = toward.get(&here).filter(|_| here != start) {
                    way.push(next);
                    here = next;
                }
                return way;
            }
            for pin in pins {
                if pin != start && !toward.contains_key(&pin) {
                    toward.insert(pin, node);
                    queue.push_back(pin);
                }
            }
        }
        vec![start]
    }

    /// From where a loop is cut back to there.
    fn around(&self) -> Ways {
        let target = original(self.cut, self.cut.target);
        let is_cut = |node: NodeId| original(self.cut, node) == target && node != self.cut.target;
        let mut reaches: BTreeSet<NodeId> = BTreeSet::new();
        let mut nodes: Vec<(usize, NodeId)> = self.rank.iter().map(|(&node, &rank)| (rank, node)).collect();
        nodes.sort_unstable();
        for (_, node) in nodes {
            if is_cut(node) || self.pins(self.driver(node)).iter().any(|pin| reaches.contains(pin)) {
                reaches.insert(self.driver(node));
            }
        }
        let start = self.driver(self.cut.target);
        if !reaches.contains(&start) {
            return Vec::new();
        }
        let way = self.back(start, |node| reaches.contains(&node));
        if way.len() > 1 { vec![(Way::Loop, way)] } else { Vec::new() }
    }
}

/// Ends ways where they become one; the rest is that of the pulse.
fn join(ways: &mut Ways) {
    let Some((_, first)) = ways.first() else { return };
    let mut common = first.len();
    for (_, way) in ways.iter() {
        common = common.min(first.iter().rev().zip(way.iter().rev()).take_while(|(one, other)| one == other).count());
    }
    // One way alone ends at its last gate.
    let common = if ways.len() == 1 { 1 } else { common };
    let pulse = first[first.len() - common..].to_vec();
    for (_, way) in ways.iter_mut() {
        way.truncate(way.len() + 1 - common);
    }
    ways.push((Way::Pulse, pulse));
}

/// The waveform of a gate when it follows from those of its pins that are known.
fn sure(gate: GateKind, pins: &[Value]) -> Option<Wave> {
    let known: Option<Vec<Wave>> = pins.iter().map(|pin| pin.sure).collect();
    if let Some(known) = known {
        return Some(hazard::gate(gate, &known));
    }
    let forcing = match gate {
        GateKind::And | GateKind::Nand => false,
        GateKind::Or | GateKind::Nor => true,
        GateKind::Buf | GateKind::Not | GateKind::Xor | GateKind::Xnor => return None,
    };
    let forced = pins.iter().any(|pin| pin.sure.is_some_and(|wave| wave.holds(forcing)));
    forced.then(|| Wave::constant(forcing ^ gate.inverts()))
}
