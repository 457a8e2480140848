//! The graph checker: collects every violation of what the other stages rely on. The pipeline runs it in debug builds,
//! the tests after every pass. The checklist:
//!
//! - fan-in counts: constants, unknowns and sources none, a wire at most one, BUF, NOT, operator entries and exits
//!   exactly one, every other gate at least two, a table as many as its rows have columns;
//! - every id in fan-ins, sites, names, nets, cells, ports, black boxes and instances is in range;
//! - the fan-out is the transpose of the fan-in;
//! - a name and the bit of a net point at each other, only wires are named, no two bits of a net share a suffix;
//! - tables have rows, all of one width, and only 0, 1 or x as output;
//! - each cell's output is a source of the kind that fits the cell, and of one cell only, unless the cells are one
//!   flip-flop with several clocks;
//! - a port of a top belongs to an instance without a parent, and its net stands in that instance or below;
//! - instances come after their parent and extend its path;
//! - outputs of black boxes are sources of that kind.

use std::collections::HashSet;

use super::{Cell, CellKind, GateKind, Graph, InstanceId, NetId, NodeId, NodeKind, SourceKind, Symbol};

/// All violations, in order of the tables; empty for a sound graph.
pub fn check(graph: &Graph) -> Vec<String> {
    let mut checker = Checker { graph, found: Vec::new() };
    checker.nodes();
    checker.fanout();
    checker.names();
    checker.tables();
    checker.cells();
    checker.ports();
    checker.instances();
    checker.black_boxes();
    checker.found
}

struct Checker<'a> {
    graph: &'a Graph,
    found: Vec<String>,
}

impl Checker<'_> {
    fn report(&mut self, message: String) {
        self.found.push(message);
    }

    /// Whether `node` exists; reports it otherwise.
    fn node_exists(&mut self, node: NodeId, role: &str) -> bool {
        let exists = node.index() < self.graph.len();
        if !exists {
            self.report(format!("{role} is {node}, which does not exist"));
        }
        exists
    }

    fn instance_exists(&mut self, instance: InstanceId, role: &str) -> bool {
        let exists = instance.index() < self.graph.instances.len();
        if !exists {
            self.report(format!("{role} is {instance}, which does not exist"));
        }
        exists
    }

    fn net_exists(&mut self, net: NetId, role: &str) -> bool {
        let exists = net.index() < self.graph.nets.len();
        if !exists {
            self.report(format!("{role} is {net}, which does not exist"));
        }
        exists
    }

    fn nodes(&mut self) {
        let graph = self.graph;
        for node in graph.nodes() {
            let pins = graph.fanin(node).len();
            let (fits, wanted) = match graph.kind(node) {
                NodeKind::Const(_) | NodeKind::Unknown | NodeKind::Source(_) => (pins == 0, "no".to_string()),
                NodeKind::Wire => (pins <= 1, "at most one".to_string()),
                NodeKind::Gate(GateKind::Buf | GateKind::Not) => (pins == 1, "one".to_string()),
                NodeKind::Gate(_) => (pins >= 2, "two or more".to_string()),
                NodeKind::OpIn(operator) | NodeKind::OpOut(operator) => {
                    if operator.index() >= graph.operators.len() {
                        self.report(format!("{node} belongs to {operator}, which does not exist"));
                    }
                    (pins == 1, "one".to_string())
                }
                NodeKind::Table(table) => match graph.tables.get(table.index()) {
                    Some(table) => {
                        let width = table.rows.first().map_or(0, |(columns, _)| columns.len());
                        (pins == width, width.to_string())
                    }
                    None => {
                        self.report(format!("{node} uses {table}, which does not exist"));
                        (true, String::new())
                    }
                },
            };
            if !fits {
                self.report(format!("{node} has {pins} fan-in, not {wanted}"));
            }
            for &driver in graph.fanin(node) {
                self.node_exists(driver, &format!("a fan-in of {node}"));
            }
            self.instance_exists(graph.site(node).instance, &format!("the instance of {node}"));
        }
    }

    fn fanout(&mut self) {
        let graph = self.graph;
        let mut forward: Vec<(NodeId, NodeId)> = Vec::new();
        let mut backward = Vec::new();
        for node in graph.nodes() {
            forward.extend(graph.fanin(node).iter().map(|&driver| (driver, node)));
            backward.extend(graph.fanout(node).iter().map(|&reader| (node, reader)));
        }
        forward.sort_unstable();
        if forward != backward {
            self.report("the fan-out is not the transpose of the fan-in, in order of node id".to_string());
        }
    }

    fn names(&mut self) {
        let graph = self.graph;
        // One set for all: a net may have a million bits.
        let listed: HashSet<(NetId, NodeId)> = (graph.nets.iter().enumerate())
            .flat_map(|(index, net)| net.bits.iter().map(move |&bit| (NetId::new(index), bit)))
            .collect();
        for node in graph.nodes() {
            let Some(name) = graph.node_name(node) else { continue };
            if graph.kind(node) != NodeKind::Wire {
                self.report(format!("{node} is named but no wire"));
            }
            if self.net_exists(name.net, &format!("the net of {node}")) && !listed.contains(&(name.net, node)) {
                self.report(format!("{node} is named after {}, which does not list it", name.net));
            }
        }
        for (index, net) in graph.nets.iter().enumerate() {
            let id = NetId::new(index);
            self.instance_exists(net.instance, &format!("the instance of {id}"));
            let mut suffixes = Vec::new();
            for &bit in &net.bits {
                if !self.node_exists(bit, &format!("a bit of {id}")) {
                    continue;
                }
                match graph.node_name(bit) {
                    Some(name) if name.net == id => suffixes.push(&name.suffix),
                    _ => self.report(format!("{bit} is a bit of {id} but not named after it")),
                }
            }
            suffixes.sort_unstable();
            if let Some(pair) = suffixes.windows(2).find(|pair| pair[0] == pair[1]) {
                self.report(format!("two bits of {id} have the suffix \"{}\"", pair[0]));
            }
            if net.scalar && net.bits.len() > 1 {
                self.report(format!("{id} is scalar but has {} bits", net.bits.len()));
            }
        }
    }

    fn tables(&mut self) {
        for (index, table) in self.graph.tables.iter().enumerate() {
            let width = table.rows.first().map_or(0, |(columns, _)| columns.len());
            if width == 0 {
                self.report(format!("t{index} has no rows or no columns"));
            }
            for (row, (columns, output)) in table.rows.iter().enumerate() {
                if columns.len() != width {
                    self.report(format!("row {row} of t{index} has {} columns, not {width}", columns.len()));
                }
                if matches!(output, Symbol::Any | Symbol::Binary) {
                    self.report(format!("row {row} of t{index} has no value as output"));
                }
            }
        }
    }

    fn cells(&mut self) {
        let graph = self.graph;
        let mut outputs = Vec::new();
        for (index, cell) in graph.cells.iter().enumerate() {
            let (pin, role, kind) = match cell.kind {
                CellKind::FlipFlop { clock, .. } => (clock, "clock", SourceKind::FlipFlop),
                CellKind::Latch { enable, .. } => (enable, "enable", SourceKind::Latch),
            };
            self.node_exists(pin, &format!("the {role} of c{index}"));
            self.node_exists(cell.data, &format!("the data of c{index}"));
            for control in &cell.controls {
                self.node_exists(control.net, &format!("a control of c{index}"));
                self.node_exists(control.value, &format!("the value of a control of c{index}"));
            }
            if self.node_exists(cell.output, &format!("the output of c{index}")) {
                outputs.push((cell.output, index));
                if graph.kind(cell.output) != NodeKind::Source(kind) {
                    self.report(format!("the output of c{index}, {}, is no source of its kind", cell.output));
                }
            }
        }
        outputs.sort_unstable();
        for pair in outputs.windows(2) {
            let [one, other] = [pair[0], pair[1]].map(|(_, index)| &graph.cells[index]);
            let clocked = |cell: &Cell| matches!(cell.kind, CellKind::FlipFlop { .. });
            let same = one.data == other.data && one.controls == other.controls && one.kind != other.kind;
            if pair[0].0 == pair[1].0 && !(same && clocked(one) && clocked(other)) {
                self.report(format!("{} is the output of c{} and of c{}", pair[0].0, pair[0].1, pair[1].1));
            }
        }
    }

    fn ports(&mut self) {
        let graph = self.graph;
        for port in &graph.ports {
            if self.instance_exists(port.instance, &format!("the instance of port {}", port.name))
                && graph.instances[port.instance.index()].parent.is_some()
            {
                self.report(format!("port {} belongs to {}, which is no top", port.name, port.instance));
            }
            if self.net_exists(port.net, &format!("the net of port {}", port.name))
                && !self.stands_in(graph.nets[port.net.index()].instance, port.instance)
            {
                self.report(format!("the net {} of port {} stands in another top", port.net, port.name));
            }
        }
    }

    /// Whether an instance is `top` or lies below it, as an interface at a port of a top does.
    fn stands_in(&self, instance: InstanceId, top: InstanceId) -> bool {
        let mut at = Some(instance);
        while let Some(id) = at {
            if id == top {
                return true;
            }
            at = self.graph.instances.get(id.index()).and_then(|instance| instance.parent);
        }
        false
    }

    fn instances(&mut self) {
        let graph = self.graph;
        for (index, instance) in graph.instances.iter().enumerate() {
            let Some(parent) = instance.parent else { continue };
            if parent.index() >= index {
                self.report(format!("i{index} does not come after its parent {parent}"));
            } else if !instance
                .path
                .strip_prefix(graph.instances[parent.index()].path.as_str())
                .is_some_and(|rest| rest.starts_with('.'))
            {
                self.report(format!("the path of i{index} does not extend that of its parent {parent}"));
            }
        }
    }

    fn black_boxes(&mut self) {
        let graph = self.graph;
        for black_box in &graph.black_boxes {
            let role = format!("a connection of a black box of {}", black_box.module);
            self.instance_exists(black_box.instance, &role);
            for &node in black_box.inputs.iter().flat_map(|(_, nodes)| nodes) {
                self.node_exists(node, &role);
            }
            for &node in black_box.outputs.iter().flat_map(|(_, nodes)| nodes) {
                if self.node_exists(node, &role) && graph.kind(node) != NodeKind::Source(SourceKind::BlackBox) {
                    self.report(format!("{node}, output of a black box of {}, is no source of one", black_box.module));
                }
            }
        }
    }
}
