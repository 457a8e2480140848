//! The expectations of the catalogue against the [`crate::launch_explorer`]: the product only reads and elaborates each
//! module; what its pins can show is then found by exhaustive exploration. So the catalogue says what is so, not what the
//! program happens to say.

use std::collections::{BTreeMap, BTreeSet};

use stillwire::graph::{self, CellKind, Edge, GateKind, Graph, NodeId, NodeKind, SourceKind};

use crate::catalogue::{Module, constructs, folder};
use crate::explorer::Op;
use crate::launch_explorer::{Cell, Control, Explorer, Machine, Net, Trigger};
use crate::launch_reach::Reach;
use crate::pipeline;

/// A gate graph as a machine.
struct Reader<'a> {
    graph: &'a Graph,
    machine: Machine,
    inputs: BTreeMap<NodeId, usize>,
    cells: BTreeMap<NodeId, usize>,
    known: BTreeMap<NodeId, Net>,
}

impl Reader<'_> {
    fn net(&mut self, node: NodeId) -> Net {
        if let Some(&known) = self.known.get(&node) {
            return known;
        }
        let pins: Vec<NodeId> = self.graph.fanin(node).to_vec();
        let net = match self.graph.kind(node) {
            NodeKind::Const(value) => Net::Constant(value),
            NodeKind::Source(SourceKind::Input) => Net::Input(self.inputs[&node]),
            NodeKind::Source(_) => Net::Cell(self.cells[&node]),
            NodeKind::Wire => self.net(pins[0]),
            // Operators occur in front of flip-flops only, where the function alone counts.
            NodeKind::OpIn(_) | NodeKind::OpOut(_) => self.net(pins[0]),
            NodeKind::Gate(kind) => {
                let pins: Vec<Net> = pins.into_iter().map(|pin| self.net(pin)).collect();
                self.machine.gate(op(kind), &pins)
            }
            kind => panic!("{kind:?} in the catalogue"),
        };
        self.known.insert(node, net);
        net
    }

    fn cell(&mut self, cell: &graph::Cell) -> Cell {
        let trigger = match cell.kind {
            CellKind::FlipFlop { clock, edge } => {
                assert_ne!(edge, Edge::Both, "no flip-flop of both edges in the catalogue");
                Trigger::Clock { net: self.net(clock), rising: edge == Edge::Posedge }
            }
            CellKind::Latch { enable, active } => Trigger::Enable { net: self.net(enable), active },
        };
        let controls = cell.controls.iter().map(|control| Control {
            net: self.net(control.net),
            active: control.active,
            value: self.net(control.value),
        });
        let controls = controls.collect();
        Cell { trigger, data: self.net(cell.data), controls, init: cell.init }
    }
}

fn op(kind: GateKind) -> Op {
    match kind {
        GateKind::Buf => Op::Buf,
        GateKind::Not => Op::Not,
        GateKind::And => Op::And,
        GateKind::Nand => Op::Nand,
        GateKind::Or => Op::Or,
        GateKind::Nor => Op::Nor,
        GateKind::Xor => Op::Xor,
        GateKind::Xnor => Op::Xnor,
    }
}

fn machine(graph: &Graph) -> Machine {
    let is_input = |node: &NodeId| graph.kind(*node) == NodeKind::Source(SourceKind::Input);
    let inputs: BTreeMap<NodeId, usize> = graph.nodes().filter(is_input).zip(0..).collect();
    let outputs = graph.cells.iter().map(|cell| cell.output);
    let cells: BTreeMap<NodeId, usize> = outputs.zip(0..).collect();
    assert_eq!(cells.len(), graph.cells.len(), "each cell has an output of its own");
    let machine = Machine::new(inputs.len());
    let mut reader = Reader { graph, machine, inputs, cells, known: BTreeMap::new() };
    for cell in &graph.cells {
        let cell = reader.cell(cell);
        reader.machine.cells.push(cell);
    }
    reader.machine
}

/// Every kind that some pin of the module shows, with the causes seen for it.
fn shown(machine: &Machine) -> BTreeMap<String, BTreeSet<&'static str>> {
    let reach = Reach::of(machine);
    let mut explorer = Explorer::new(machine);
    let mut found: BTreeMap<String, BTreeSet<&'static str>> = BTreeMap::new();
    for net in machine.pins() {
        for one in explorer.shown(net, |state, root| reach.occurs(state, root)) {
            let cause = if one.function == Some(false) { "logic" } else { "function" };
            found.entry(one.kind.name().to_string()).or_default().insert(cause);
        }
    }
    found
}

/// What the exploration says against the module's expectations.
fn difference(module: &Module, found: &BTreeMap<String, BTreeSet<&'static str>>) -> Option<String> {
    let mut expected: BTreeMap<&str, Option<&str>> = BTreeMap::new();
    for (_, one) in &module.expected {
        expected.extend(one.kinds.iter().map(|(kind, cause)| (kind.as_str(), cause.as_deref())));
    }
    let same = expected.keys().copied().eq(found.keys().map(String::as_str));
    let caused = expected.iter().all(|(&kind, cause)| cause.is_none_or(|cause| found[kind].contains(cause)));
    (!same || !caused).then(|| format!("{}: expected {expected:?}, explored {found:?}", module.name))
}

#[test]
fn the_exploration_agrees_with_the_catalogue() {
    let mut wrong = Vec::new();
    let mut explored = 0;
    for construct in constructs() {
        let path = folder().join(format!("{}.v", construct.name));
        for module in &construct.modules {
            // Loops of gates have an opponent of their own; what is declared static the explorer does not know.
            if module.has_loop() || module.is_static {
                continue;
            }
            let machine = machine(&pipeline::graph(&path, &module.name));
            wrong.extend(difference(module, &shown(&machine)));
            explored += 1;
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    assert!(explored >= 80, "{explored} modules");
}
