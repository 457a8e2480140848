//! The gate graph as structural Verilog (IEEE 1364-2005), for people who want to see what was analysed and for
//! simulation beside the original, which is how elaboration is checked.
//!
//! One module per top, with the top's ports; one line per node. Nets keep their hierarchical names as escaped
//! identifiers, other nodes are `n` and their id. Nothing is simplified or merged. A pin that is computed by gates
//! reaches its flip-flop or latch through a copy that is taken when the gates have settled (`#0`): a simulator without
//! delays evaluates the gates one after the other, and would show hazards that the original, evaluated as a whole, does
//! not show.

use std::collections::HashSet;

use crate::graph::{
    BlackBox, Cell, CellKind, Edge, GateKind, Graph, InstanceId, NetId, NodeId, NodeKind, Port, PortDirection,
    SourceKind, Symbol, Table, TableId,
};

/// The whole graph: the primitives it uses, then one module per top in order of instances.
pub fn flatten(graph: &Graph) -> String {
    let mut writer = Writer::new(graph);
    let tops: Vec<InstanceId> = roots(graph);
    let all: Vec<NodeId> = graph.nodes().collect();
    writer.primitives(&all);
    for (index, instance) in graph.instances.iter().enumerate() {
        if instance.parent.is_none() {
            let top = InstanceId::new(index);
            let nodes: Vec<NodeId> =
                all.iter().copied().filter(|&node| tops[graph.site(node).instance.index()] == top).collect();
            writer.top(top, &tops, &nodes);
        }
    }
    writer.text
}

/// The combinational fan-in of a net or of one bit of it, down to the sources, as a module `cone` whose inputs are the
/// sources. `name` is the full name, `top.u_core.en` or `top.u_core.en[3]`; `Err` is a sentence.
pub fn flatten_cone(graph: &Graph, name: &str) -> Result<String, String> {
    let whole =
        graph.nets.iter().find(|net| format!("{}.{}", graph.instances[net.instance.index()].path, net.name) == name);
    let targets = match whole {
        Some(net) => net.bits.clone(),
        None => graph.nodes().filter(|&node| graph.name(node).as_deref() == Some(name)).take(1).collect(),
    };
    if targets.is_empty() {
        return Err(format!("no net is named `{name}`; names start with the top module, as in `top.u_core.en[3]`"));
    }
    let mut writer = Writer::new(graph);
    writer.cone(&targets);
    Ok(writer.text)
}

/// For each instance the top it lies under.
fn roots(graph: &Graph) -> Vec<InstanceId> {
    let mut roots: Vec<InstanceId> = Vec::with_capacity(graph.instances.len());
    for (index, instance) in graph.instances.iter().enumerate() {
        // Parents are made before their children, so that theirs is known already.
        let root = instance.parent.and_then(|parent| roots.get(parent.index()).copied());
        roots.push(root.unwrap_or(InstanceId::new(index)));
    }
    roots
}

struct Writer<'g> {
    graph: &'g Graph,
    /// What each node is called where it is read: a name or a constant.
    names: Vec<String>,
    /// The hierarchical names among them.
    taken: HashSet<String>,
    text: String,
}

impl<'g> Writer<'g> {
    fn new(graph: &'g Graph) -> Self {
        let prefix = anonymous_prefix(graph);
        let mut taken = HashSet::new();
        let mut names = Vec::with_capacity(graph.len());
        for node in graph.nodes() {
            let anonymous = || format!("{prefix}{}", node.index());
            let name = match graph.kind(node) {
                NodeKind::Const(value) => format!("1'b{}", u8::from(value)),
                // An escaped name that contains dots can coincide with a hierarchical one; the first keeps it.
                _ => match graph.name(node) {
                    Some(name) if taken.insert(name.clone()) => format!("\\{name} "),
                    _ => anonymous(),
                },
            };
            names.push(name);
        }
        Self { graph, names, taken, text: String::new() }
    }

    fn name(&self, node: NodeId) -> &str {
        &self.names[node.index()]
    }

    fn line(&mut self, line: String) {
        self.text.push_str(&line);
        self.text.push('\n');
    }

    fn list(&self, nodes: &[NodeId]) -> String {
        nodes.iter().map(|&node| self.name(node)).collect::<Vec<_>>().join(", ")
    }

    /// Bits least significant first as one expression.
    fn vector(&self, bits: &[NodeId]) -> String {
        match bits {
            [one] => self.name(*one).to_string(),
            _ => {
                let reversed: Vec<NodeId> = bits.iter().rev().copied().collect();
                format!("{{{}}}", self.list(&reversed))
            }
        }
    }

    fn top(&mut self, top: InstanceId, tops: &[InstanceId], nodes: &[NodeId]) {
        let graph = self.graph;
        let instance = &graph.instances[top.index()];
        let ports: Vec<&Port> = graph.ports.iter().filter(|port| port.instance == top).collect();
        let names: Vec<String> = ports.iter().map(|port| identifier(&port.name)).collect();
        self.line(format!("module {} ({});", identifier(&instance.module), names.join(", ")));
        for port in &ports {
            let direction = match port.direction {
                PortDirection::Input => "input",
                PortDirection::Output => "output",
                PortDirection::Inout => "inout",
            };
            let range = port_range(graph, port).map_or(String::new(), |(left, right)| format!(" [{left}:{right}]"));
            self.line(format!("  {direction}{range} {};", identifier(&port.name)));
        }
        let cells: Vec<&Cell> =
            graph.cells.iter().filter(|cell| tops[graph.site(cell.output).instance.index()] == top).collect();
        let boxes: Vec<&BlackBox> =
            graph.black_boxes.iter().filter(|item| tops[item.instance.index()] == top).collect();
        let registers: HashSet<NodeId> = cells.iter().map(|cell| cell.output).collect();
        for &node in nodes {
            if !matches!(graph.kind(node), NodeKind::Const(_)) {
                let kind = if registers.contains(&node) { "reg" } else { "wire" };
                self.line(format!("  {kind} {};", self.names[node.index()]));
            }
        }
        let mut explained: HashSet<NodeId> = registers;
        for port in &ports {
            self.port(port, &mut explained);
        }
        explained.extend(boxes.iter().flat_map(|item| item.outputs.iter().flat_map(|(_, bits)| bits)));
        for &node in nodes {
            self.node(node, &explained);
        }
        self.cells(&cells);
        for item in boxes {
            self.black_box(item);
        }
        self.line(String::from("endmodule\n"));
    }

    /// Connects a port with the wires of its net. Input sources that are found this way go into `explained`.
    fn port(&mut self, port: &Port, explained: &mut HashSet<NodeId>) {
        let graph = self.graph;
        let range = port_range(graph, port);
        let port_name = identifier(&port.name);
        for (at, &bit) in net_bits(graph, port.net).iter().enumerate() {
            let offset = i64::try_from(at).unwrap_or(i64::MAX);
            let outside = match range {
                None => port_name.clone(),
                Some((left, right)) if left >= right => format!("{port_name}[{}]", right + offset),
                Some((_, right)) => format!("{port_name}[{}]", right - offset),
            };
            let root = graph.root(bit);
            if graph.kind(root) == NodeKind::Source(SourceKind::Input) && port.direction != PortDirection::Output {
                if explained.insert(root) {
                    self.line(format!("  assign {} = {outside};", self.names[root.index()]));
                }
            } else if let Some((idle, external)) = tri_state(graph, root)
                && port.direction == PortDirection::Inout
                && explained.insert(external)
            {
                let (idle, external, value) = (self.name(idle), self.name(external), self.name(bit));
                let both = format!("  assign {outside} = {idle} ? 1'bz : {value};\n  assign {external} = {outside};");
                self.line(both);
            } else if port.direction != PortDirection::Input {
                self.line(format!("  assign {outside} = {};", self.names[bit.index()]));
            }
        }
    }

    /// What drives one node. Sources in `explained` are driven elsewhere.
    fn node(&mut self, node: NodeId, explained: &HashSet<NodeId>) {
        let fanin = self.graph.fanin(node);
        let name = self.name(node).to_string();
        match self.graph.kind(node) {
            NodeKind::Const(_) => {}
            NodeKind::Unknown => self.line(format!("  assign {name} = 1'bx;")),
            NodeKind::Source(kind) => {
                if !explained.contains(&node) {
                    let what = match kind {
                        SourceKind::Input => "free input",
                        SourceKind::FlipFlop | SourceKind::Latch => "storage of unknown behaviour",
                        SourceKind::BlackBox => "output of a black box",
                        SourceKind::Memory => "read port of a memory that is too large to flatten",
                    };
                    self.line(format!("  // {name} is left undriven: {what}"));
                }
            }
            NodeKind::Wire | NodeKind::OpIn(_) | NodeKind::OpOut(_) => {
                if let Some(&driver) = fanin.first() {
                    self.line(format!("  assign {name} = {};", self.names[driver.index()]));
                }
            }
            NodeKind::Gate(gate) => {
                let inputs = self.list(fanin);
                self.line(format!("  {} ({name}, {inputs});", gate.name()));
            }
            NodeKind::Table(table) => {
                let inputs = self.list(fanin);
                let primitive = primitive_name(self.graph, table);
                self.line(format!("  {primitive} ({name}, {inputs});"));
            }
        }
    }

    /// The flip-flops and latches, and before them the settled copies of pins that are computed by gates.
    fn cells(&mut self, cells: &[&Cell]) {
        let graph = self.graph;
        let mut pins: Vec<NodeId> = Vec::new();
        for cell in cells {
            if let CellKind::FlipFlop { clock, .. } = cell.kind {
                pins.extend(cell.controls.iter().map(|control| control.net).chain([clock]));
            }
        }
        pins.retain(|&pin| is_computed(graph, pin));
        pins.sort_unstable();
        pins.dedup();
        for &pin in &pins {
            let (name, copy) = (self.name(pin).to_string(), self.settled(pin));
            self.line(format!("  reg {copy};"));
            self.line(format!("  always @({name}) begin #0; {copy} = {name}; end"));
        }
        for cell in cells {
            self.cell(cell);
        }
    }

    /// The copy of a computed pin that changes only when the gates have settled.
    fn settled(&self, pin: NodeId) -> String {
        let mut name = format!("{}$settled", self.name(pin).trim_start_matches('\\').trim_end());
        while self.taken.contains(&name) {
            name.push('$');
        }
        format!("\\{name} ")
    }

    fn cell(&mut self, cell: &Cell) {
        let graph = self.graph;
        let output = self.name(cell.output).to_string();
        if let Some(value) = cell.init {
            self.line(format!("  initial {output} = 1'b{};", u8::from(value)));
        }
        let is_latch = matches!(cell.kind, CellKind::Latch { .. });
        let pin_name = |writer: &Self, pin: NodeId| {
            if !is_latch && is_computed(graph, pin) { writer.settled(pin) } else { writer.name(pin).to_string() }
        };
        let assign = if is_latch { "=" } else { "<=" };
        let mut body = String::new();
        for control in &cell.controls {
            let condition = condition(&pin_name(self, control.net), control.active);
            body += &format!("if ({condition}) {output} {assign} {}; else ", self.name(control.value));
        }
        match cell.kind {
            CellKind::FlipFlop { clock, edge } => {
                let clock = pin_name(self, clock);
                let mut events = vec![match edge {
                    Edge::Posedge => format!("posedge {clock}"),
                    Edge::Negedge => format!("negedge {clock}"),
                    Edge::Both => clock,
                }];
                for control in &cell.controls {
                    let edge = if control.active { "posedge" } else { "negedge" };
                    let event = format!("{edge} {}", pin_name(self, control.net));
                    if !events.contains(&event) {
                        events.push(event);
                    }
                }
                body += &format!("{output} <= {};", self.name(cell.data));
                self.line(format!("  always @({}) {body}", events.join(" or ")));
            }
            CellKind::Latch { enable, active } => {
                let condition = condition(self.name(enable), active);
                body += &format!("if ({condition}) {output} = {};", self.name(cell.data));
                let mut events: Vec<NodeId> = vec![enable, cell.data];
                events.extend(cell.controls.iter().flat_map(|control| [control.net, control.value]));
                events.retain(|&node| !matches!(graph.kind(node), NodeKind::Const(_)));
                events.sort_unstable();
                events.dedup();
                let events: Vec<&str> = events.iter().map(|&node| self.name(node)).collect();
                if events.is_empty() {
                    self.line(format!("  initial {body}"));
                } else {
                    let events = events.join(" or ");
                    self.line(format!("  always @({events}) begin #0; {body} end"));
                }
            }
        }
    }

    fn black_box(&mut self, item: &BlackBox) {
        let ports: Vec<&(String, Vec<NodeId>)> = item.inputs.iter().chain(&item.outputs).collect();
        let by_order = ports.iter().all(|(name, _)| name.parse::<usize>().is_ok());
        let mut connections: Vec<(usize, String)> = Vec::with_capacity(ports.len());
        for (index, (name, bits)) in ports.into_iter().enumerate() {
            let bits = if bits.is_empty() { String::new() } else { self.vector(bits) };
            if by_order {
                connections.push((name.parse().unwrap_or(index), bits));
            } else {
                connections.push((index, format!(".{}({bits})", identifier(name))));
            }
        }
        connections.sort();
        let connections: Vec<String> = connections.into_iter().map(|(_, text)| text).collect();
        // Instances need no name in some texts, and two of them then have the same.
        let mut name = self.graph.instances[item.instance.index()].path.clone();
        while !self.taken.insert(name.clone()) {
            name.push('$');
        }
        let module = identifier(&item.module);
        self.line(format!("  {module} \\{name}  ({});", connections.join(", ")));
    }

    /// The tables that some node of `nodes` uses, as primitive declarations.
    fn primitives(&mut self, nodes: &[NodeId]) {
        let mut used: Vec<TableId> = nodes
            .iter()
            .filter_map(|&node| match self.graph.kind(node) {
                NodeKind::Table(table) => Some(table),
                _ => None,
            })
            .collect();
        used.sort_unstable();
        used.dedup();
        for table in used {
            let name = primitive_name(self.graph, table);
            self.primitive(&name, &self.graph.tables[table.index()]);
        }
    }

    fn primitive(&mut self, name: &str, table: &Table) {
        let width = table.rows.iter().map(|(inputs, _)| inputs.len()).max().unwrap_or(1);
        let inputs: Vec<String> = (0..width).map(|input| format!("i{input}")).collect();
        let inputs = inputs.join(", ");
        self.line(format!("primitive {name} (y, {inputs});\n  output y;\n  input {inputs};\n  table"));
        for (inputs, output) in &table.rows {
            let inputs: Vec<&str> = inputs.iter().map(|&symbol| symbol_text(symbol)).collect();
            self.line(format!("    {} : {};", inputs.join(" "), symbol_text(*output)));
        }
        self.line(String::from("  endtable\nendprimitive\n"));
    }

    fn cone(&mut self, targets: &[NodeId]) {
        let graph = self.graph;
        let mut seen: HashSet<NodeId> = HashSet::new();
        let mut stack = targets.to_vec();
        while let Some(node) = stack.pop() {
            if seen.insert(node) {
                stack.extend(graph.fanin(node));
            }
        }
        let nodes: Vec<NodeId> = graph.nodes().filter(|node| seen.contains(node)).collect();
        self.primitives(&nodes);
        let mut header: Vec<String> = Vec::new();
        let mut inputs: HashSet<NodeId> = HashSet::new();
        for &node in &nodes {
            if !matches!(graph.kind(node), NodeKind::Source(_)) {
                continue;
            }
            // A source is known by the net that it drives.
            let known = graph
                .fanout(node)
                .iter()
                .copied()
                .find(|wire| seen.contains(wire) && graph.kind(*wire) == NodeKind::Wire && !targets.contains(wire));
            if let Some(wire) = known {
                self.names.swap(node.index(), wire.index());
            }
            inputs.insert(node);
            header.push(format!("  input {}", self.name(node)));
        }
        header.extend(targets.iter().map(|&target| format!("  output {}", self.name(target))));
        self.line(format!("module cone (\n{}\n);", header.join(",\n")));
        for &node in &nodes {
            let is_port = inputs.contains(&node) || targets.contains(&node);
            if !is_port && !matches!(graph.kind(node), NodeKind::Const(_)) {
                self.line(format!("  wire {};", self.names[node.index()]));
            }
        }
        for &node in &nodes {
            self.node(node, &inputs);
        }
        self.line(String::from("endmodule"));
    }
}

fn net_bits(graph: &Graph, net: NetId) -> &[NodeId] {
    &graph.nets[net.index()].bits
}

/// The declared range, or one from the number of bits for a port of another shape.
fn port_range(graph: &Graph, port: &Port) -> Option<(i64, i64)> {
    let width = net_bits(graph, port.net).len();
    match port.range {
        Some((left, right)) if usize::try_from(left.abs_diff(right)).is_ok_and(|span| span + 1 == width) => {
            Some((left, right))
        }
        _ if width == 1 => None,
        _ => Some((i64::try_from(width).unwrap_or(i64::MAX) - 1, 0)),
    }
}

/// The form of a net with tri-state drivers, the OR of the enabled ones and of what drives it from outside while none is
/// enabled: the condition "none is enabled" and the source outside.
fn tri_state(graph: &Graph, root: NodeId) -> Option<(NodeId, NodeId)> {
    if graph.kind(root) != NodeKind::Gate(GateKind::Or) {
        return None;
    }
    graph.fanin(root).iter().find_map(|&product| match (graph.kind(product), graph.fanin(product)) {
        (NodeKind::Gate(GateKind::And), &[idle, external])
            if graph.kind(external) == NodeKind::Source(SourceKind::Input) =>
        {
            Some((idle, external))
        }
        _ => None,
    })
}

/// Whether a pin is driven by gates, hence can show the order in which a simulator evaluates them.
fn is_computed(graph: &Graph, pin: NodeId) -> bool {
    matches!(
        graph.kind(graph.root(pin)),
        NodeKind::Gate(_) | NodeKind::Table(_) | NodeKind::OpIn(_) | NodeKind::OpOut(_)
    )
}

fn condition(pin: &str, active: bool) -> String {
    if active { pin.to_string() } else { format!("!{pin}") }
}

fn symbol_text(symbol: Symbol) -> &'static str {
    match symbol {
        Symbol::Zero => "0",
        Symbol::One => "1",
        Symbol::X => "x",
        Symbol::Any => "?",
        Symbol::Binary => "b",
    }
}

/// Tables of one name can come from several files; the id keeps them apart.
fn primitive_name(graph: &Graph, table: TableId) -> String {
    let name = &graph.tables[table.index()].name;
    let same = graph.tables.iter().filter(|other| other.name == *name).count();
    if same == 1 { identifier(name) } else { identifier(&format!("{name}${}", table.index())) }
}

/// A prefix for anonymous nodes that no port name and no primitive can collide with.
fn anonymous_prefix(graph: &Graph) -> String {
    let collides = |prefix: &str| {
        graph.ports.iter().any(|port| {
            port.name.strip_prefix(prefix).is_some_and(|rest| rest.starts_with(|first: char| first.is_ascii_digit()))
        })
    };
    let mut prefix = String::from("n");
    while collides(&prefix) {
        prefix.push('_');
    }
    prefix
}

/// The name as Verilog source: escaped when it is a keyword or not a simple identifier.
fn identifier(name: &str) -> String {
    let simple = name.starts_with(|first: char| first.is_ascii_alphabetic() || first == '_')
        && name.chars().all(|c| c.is_ascii_alphanumeric() || c == '_' || c == '$')
        && KEYWORDS.binary_search(&name).is_err();
    if simple { name.to_string() } else { format!("\\{name} ") }
}

/// IEEE 1364-2005 annex B, in order.
const KEYWORDS: [&str; 124] = [
    "always",
    "and",
    "assign",
    "automatic",
    "begin",
    "buf",
    "bufif0",
    "bufif1",
    "case",
    "casex",
    "casez",
    "cell",
    "cmos",
    "config",
    "deassign",
    "default",
    "defparam",
    "design",
    "disable",
    "edge",
    "else",
    "end",
    "endcase",
    "endconfig",
    "endfunction",
    "endgenerate",
    "endmodule",
    "endprimitive",
    "endspecify",
    "endtable",
    "endtask",
    "event",
    "for",
    "force",
    "forever",
    "fork",
    "function",
    "generate",
    "genvar",
    "highz0",
    "highz1",
    "if",
    "ifnone",
    "incdir",
    "include",
    "initial",
    "inout",
    "input",
    "instance",
    "integer",
    "join",
    "large",
    "liblist",
    "library",
    "localparam",
    "macromodule",
    "medium",
    "module",
    "nand",
    "negedge",
    "nmos",
    "nor",
    "noshowcancelled",
    "not",
    "notif0",
    "notif1",
    "or",
    "output",
    "parameter",
    "pmos",
    "posedge",
    "primitive",
    "pull0",
    "pull1",
    "pulldown",
    "pullup",
    "pulsestyle_ondetect",
    "pulsestyle_onevent",
    "rcmos",
    "real",
    "realtime",
    "reg",
    "release",
    "repeat",
    "rnmos",
    "rpmos",
    "rtran",
    "rtranif0",
    "rtranif1",
    "scalared",
    "showcancelled",
    "signed",
    "small",
    "specify",
    "specparam",
    "strong0",
    "strong1",
    "supply0",
    "supply1",
    "table",
    "task",
    "time",
    "tran",
    "tranif0",
    "tranif1",
    "tri",
    "tri0",
    "tri1",
    "triand",
    "trior",
    "trireg",
    "unsigned",
    "use",
    "uwire",
    "vectored",
    "wait",
    "wand",
    "weak0",
    "weak1",
    "while",
    "wire",
    "wor",
    "xnor",
    "xor",
];
