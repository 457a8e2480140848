//! A text form of the graph that prints and parses back, so that passes can be tested without Verilog. One entity per
//! line, fan-in after the kind, names in quotes, `#` starts a comment:
//!
//! ```text
//! i0 = instance "top" of "lock"
//! n0 = input
//! n1 = wire n0
//! n2 = not n1
//! n3 = and n1 n2
//! w0 = net i0 "level" scalar n1 ""
//! ```
//!
//! Labels are free words when parsed (`y = and a b`) and may be used before their line, so that loops can be written;
//! ids follow the order of the lines. A text without instances gets one, named `top`. Nothing is folded or shared: the
//! parsed graph is exactly the text. Places in source files, declared pins of black boxes and the marks of static nodes and
//! clock gates are not part of the form.

use std::collections::HashMap;
use std::fmt::Write;

use super::{
    BlackBox, Cell, CellKind, Control, Edge, GateKind, Graph, Instance, InstanceId, Net, NetId, NodeId, NodeKind,
    NodeName, Operator, OperatorId, Port, PortDirection, Site, SourceKind, Symbol, Table, TableId,
};
use crate::source::{FileId, Span};

/// The whole graph as text, one line per entity.
pub fn print(graph: &Graph) -> String {
    let mut out = String::new();
    for (index, instance) in graph.instances.iter().enumerate() {
        let word = if instance.block { "block" } else { "instance" };
        let _ = write!(out, "i{index} = {word} {} of {}", quoted(&instance.path), quoted(&instance.module));
        if let Some(parent) = instance.parent {
            let _ = write!(out, " in {parent}");
        }
        out.push('\n');
    }
    for (index, table) in graph.tables.iter().enumerate() {
        let _ = write!(out, "t{index} = table {}", quoted(&table.name));
        for (columns, output) in &table.rows {
            out.push(' ');
            out.extend(columns.iter().map(|&symbol| symbol_char(symbol)));
            out.push(':');
            out.push(symbol_char(*output));
        }
        out.push('\n');
    }
    for (index, operator) in graph.operators.iter().enumerate() {
        let _ = writeln!(out, "o{index} = operator {}", quoted(operator.what));
    }
    for node in graph.nodes() {
        let _ = write!(out, "{node} = ");
        match graph.kind(node) {
            NodeKind::Const(value) => out.push_str(if value { "one" } else { "zero" }),
            NodeKind::Unknown => out.push_str("unknown"),
            NodeKind::Source(kind) => out.push_str(source_word(kind)),
            NodeKind::Wire => out.push_str("wire"),
            NodeKind::Gate(kind) => out.push_str(kind.name()),
            NodeKind::Table(table) => {
                let _ = write!(out, "table {table}");
            }
            NodeKind::OpIn(operator) => {
                let _ = write!(out, "op-in {operator}");
            }
            NodeKind::OpOut(operator) => {
                let _ = write!(out, "op-out {operator}");
            }
        }
        push_nodes(&mut out, graph.fanin(node));
        let instance = graph.site(node).instance;
        if instance.index() != 0 {
            let _ = write!(out, " in {instance}");
        }
        out.push('\n');
    }
    for (index, net) in graph.nets.iter().enumerate() {
        let _ = write!(out, "w{index} = net {} {}", net.instance, quoted(&net.name));
        if net.scalar {
            out.push_str(" scalar");
        }
        for &bit in &net.bits {
            let suffix = graph.node_name(bit).map_or("", |name| &name.suffix);
            let _ = write!(out, " {bit} {}", quoted(suffix));
        }
        out.push('\n');
    }
    for (index, cell) in graph.cells.iter().enumerate() {
        let _ = write!(out, "c{index} = cell {} data {}", cell.output, cell.data);
        match cell.kind {
            CellKind::FlipFlop { clock, edge } => {
                let _ = write!(out, " {} {clock}", edge_word(edge));
            }
            CellKind::Latch { enable, active } => {
                let _ = write!(out, " enable {enable} {}", u8::from(active));
            }
        }
        for control in &cell.controls {
            let _ = write!(out, " control {} {} {}", control.net, u8::from(control.active), control.value);
        }
        if let Some(init) = cell.init {
            let _ = write!(out, " init {}", u8::from(init));
        }
        out.push('\n');
    }
    for port in &graph.ports {
        let direction = direction_word(port.direction);
        let _ = write!(out, "port {} {} {direction} {}", port.instance, quoted(&port.name), port.net);
        if let Some((left, right)) = port.range {
            let _ = write!(out, " {left} {right}");
        }
        out.push('\n');
    }
    for black_box in &graph.black_boxes {
        let _ = write!(out, "black-box {} {}", black_box.instance, quoted(&black_box.module));
        for (word, side) in [("input", &black_box.inputs), ("output", &black_box.outputs)] {
            for (name, nodes) in side {
                let _ = write!(out, " {word} {}", quoted(name));
                push_nodes(&mut out, nodes);
            }
        }
        out.push('\n');
    }
    out
}

fn push_nodes(out: &mut String, nodes: &[NodeId]) {
    for node in nodes {
        let _ = write!(out, " {node}");
    }
}

fn quoted(text: &str) -> String {
    format!("\"{}\"", text.replace('\\', "\\\\").replace('"', "\\\"").replace('\n', "\\n"))
}

fn symbol_char(symbol: Symbol) -> char {
    match symbol {
        Symbol::Zero => '0',
        Symbol::One => '1',
        Symbol::X => 'x',
        Symbol::Any => '?',
        Symbol::Binary => 'b',
    }
}

fn source_word(kind: SourceKind) -> &'static str {
    match kind {
        SourceKind::Input => "input",
        SourceKind::FlipFlop => "flip-flop",
        SourceKind::Latch => "latch",
        SourceKind::BlackBox => "black-box-output",
        SourceKind::Memory => "memory",
    }
}

fn edge_word(edge: Edge) -> &'static str {
    match edge {
        Edge::Posedge => "posedge",
        Edge::Negedge => "negedge",
        Edge::Both => "edge",
    }
}

fn direction_word(direction: PortDirection) -> &'static str {
    match direction {
        PortDirection::Input => "input",
        PortDirection::Output => "output",
        PortDirection::Inout => "inout",
    }
}

/// A parsed graph and what its labels stand for.
#[derive(Debug)]
pub struct Parsed {
    pub graph: Graph,
    nodes: HashMap<String, NodeId>,
}

impl Parsed {
    /// The node of a label.
    pub fn node(&self, label: &str) -> Option<NodeId> {
        self.nodes.get(label).copied()
    }
}

/// Parses the text form.
///
/// # Errors
/// One sentence with the number of the line.
pub fn parse(text: &str) -> Result<Parsed, String> {
    let mut lines = Vec::new();
    let mut labels = Labels::default();
    for (index, line) in text.lines().enumerate() {
        let words = words(line).map_err(|error| format!("line {}: {error}", index + 1))?;
        if words.is_empty() {
            continue;
        }
        labels.declare(&words).map_err(|error| format!("line {}: {error}", index + 1))?;
        lines.push((index + 1, words));
    }
    let mut parts = Parts::default();
    if labels.instances == 0 {
        parts.instances.push(Instance {
            parent: None,
            path: "top".into(),
            module: "top".into(),
            block: false,
            span: None,
        });
    }
    for (number, words) in &lines {
        let mut line = Line { words, at: 0, labels: &labels };
        parts.line(&mut line).map_err(|error| format!("line {number}: {error}"))?;
    }
    let mut names: Vec<Option<NodeName>> = vec![None; parts.kinds.len()];
    for (bit, name) in parts.names {
        names[bit.index()] = Some(name);
    }
    let graph = Graph::new(
        parts.kinds,
        parts.fanins,
        parts.sites,
        names,
        parts.instances,
        parts.nets,
        parts.tables,
        parts.operators,
        parts.cells,
        parts.ports,
        parts.black_boxes,
    );
    Ok(Parsed { graph, nodes: labels.nodes })
}

#[derive(Clone, PartialEq, Eq, Debug)]
enum Word {
    Plain(String),
    Quoted(String),
}

impl Word {
    fn is(&self, plain: &str) -> bool {
        matches!(self, Word::Plain(word) if word == plain)
    }
}

fn words(line: &str) -> Result<Vec<Word>, String> {
    let mut words = Vec::new();
    let mut chars = line.chars().peekable();
    while let Some(&first) = chars.peek() {
        match first {
            '#' => break,
            '"' => {
                chars.next();
                let mut word = String::new();
                loop {
                    match chars.next() {
                        None => return Err("a quotation does not end".to_string()),
                        Some('"') => break,
                        Some('\\') => match chars.next() {
                            Some('n') => word.push('\n'),
                            Some(other) => word.push(other),
                            None => return Err("a quotation does not end".to_string()),
                        },
                        Some(other) => word.push(other),
                    }
                }
                words.push(Word::Quoted(word));
            }
            space if space.is_whitespace() => {
                chars.next();
            }
            _ => {
                let mut word = String::new();
                while let Some(next) = chars.next_if(|next| !next.is_whitespace() && *next != '#' && *next != '"') {
                    word.push(next);
                }
                words.push(Word::Plain(word));
            }
        }
    }
    Ok(words)
}

/// What every label stands for; labels of all kinds share one name space.
#[derive(Default)]
struct Labels {
    nodes: HashMap<String, NodeId>,
    others: HashMap<String, usize>,
    instances: usize,
    nets: usize,
    tables: usize,
    operators: usize,
    cells: usize,
}

impl Labels {
    fn declare(&mut self, words: &[Word]) -> Result<(), String> {
        let [Word::Plain(label), equals, Word::Plain(kind), rest @ ..] = words else { return Ok(()) };
        if !equals.is("=") {
            return Ok(());
        }
        if self.nodes.contains_key(label) || self.others.contains_key(label) {
            return Err(format!("{label} is declared twice"));
        }
        let counter = match kind.as_str() {
            "instance" | "block" => &mut self.instances,
            "net" => &mut self.nets,
            "table" if matches!(rest.first(), Some(Word::Quoted(_))) => &mut self.tables,
            "operator" => &mut self.operators,
            "cell" => &mut self.cells,
            _ => {
                let next = NodeId::new(self.nodes.len());
                self.nodes.insert(label.clone(), next);
                return Ok(());
            }
        };
        self.others.insert(label.clone(), *counter);
        *counter += 1;
        Ok(())
    }
}

/// A cursor over the words of a line.
struct Line<'a> {
    words: &'a [Word],
    at: usize,
    labels: &'a Labels,
}

impl<'a> Line<'a> {
    fn done(&self) -> bool {
        self.at == self.words.len()
    }

    fn plain(&mut self) -> Result<&'a str, String> {
        let words: &'a [Word] = self.words;
        match words.get(self.at) {
            Some(Word::Plain(word)) => {
                self.at += 1;
                Ok(word)
            }
            _ => Err("a word is missing".to_string()),
        }
    }

    fn text(&mut self) -> Result<String, String> {
        match self.words.get(self.at) {
            Some(Word::Quoted(word)) => {
                self.at += 1;
                Ok(word.clone())
            }
            _ => Err("a text in quotes is missing".to_string()),
        }
    }

    /// Whether the next word is `word`, which is then passed.
    fn eat(&mut self, word: &str) -> bool {
        let found = self.words.get(self.at).is_some_and(|next| next.is(word));
        self.at += usize::from(found);
        found
    }

    fn node(&mut self) -> Result<NodeId, String> {
        let labels = self.labels;
        let word = self.plain()?;
        labels.nodes.get(word).copied().ok_or_else(|| format!("no node is called {word}"))
    }

    fn nodes(&mut self) -> Result<Vec<NodeId>, String> {
        let mut nodes = Vec::new();
        while let Some(Word::Plain(word)) = self.words.get(self.at) {
            match self.labels.nodes.get(word) {
                Some(&node) => nodes.push(node),
                None => break,
            }
            self.at += 1;
        }
        Ok(nodes)
    }

    fn other(&mut self) -> Result<usize, String> {
        let labels = self.labels;
        let word = self.plain()?;
        labels.others.get(word).copied().ok_or_else(|| format!("nothing is called {word}"))
    }

    /// An instance; the first one of a text without instances is called `i0`.
    fn instance(&mut self) -> Result<InstanceId, String> {
        if self.labels.instances == 0 && self.eat("i0") {
            return Ok(InstanceId::new(0));
        }
        self.other().map(InstanceId::new)
    }

    fn bit(&mut self) -> Result<bool, String> {
        match self.plain()? {
            "0" => Ok(false),
            "1" => Ok(true),
            word => Err(format!("{word} is neither 0 nor 1")),
        }
    }

    fn number(&mut self) -> Result<i64, String> {
        let word = self.plain()?;
        word.parse().map_err(|_| format!("{word} is no number"))
    }
}

/// The tables of the graph under construction.
#[derive(Default)]
struct Parts {
    kinds: Vec<NodeKind>,
    fanins: Vec<Vec<NodeId>>,
    sites: Vec<Site>,
    names: Vec<(NodeId, NodeName)>,
    instances: Vec<Instance>,
    nets: Vec<Net>,
    tables: Vec<Table>,
    operators: Vec<Operator>,
    cells: Vec<Cell>,
    ports: Vec<Port>,
    black_boxes: Vec<BlackBox>,
}

impl Parts {
    fn line(&mut self, line: &mut Line<'_>) -> Result<(), String> {
        if line.eat("port") {
            self.port(line)?;
        } else if line.eat("black-box") {
            self.black_box(line)?;
        } else {
            line.plain()?;
            if !line.eat("=") {
                return Err("\"=\" is missing after the label".to_string());
            }
            if line.eat("instance") {
                self.instance(line, false)?;
            } else if line.eat("block") {
                self.instance(line, true)?;
            } else if line.eat("net") {
                self.net(line)?;
            } else if line.eat("operator") {
                self.operators.push(Operator { what: operator_word(&line.text()?), span: None });
            } else if line.eat("cell") {
                self.cell(line)?;
            } else {
                self.node_or_table(line)?;
            }
        }
        if line.done() { Ok(()) } else { Err("the end of the line was expected".to_string()) }
    }

    fn instance(&mut self, line: &mut Line<'_>, block: bool) -> Result<(), String> {
        let path = line.text()?;
        let module = if line.eat("of") { line.text()? } else { path.clone() };
        let parent = if line.eat("in") { Some(line.instance()?) } else { None };
        self.instances.push(Instance { parent, path, module, block, span: None });
        Ok(())
    }

    fn node_or_table(&mut self, line: &mut Line<'_>) -> Result<(), String> {
        let kind = match line.plain()? {
            "zero" => NodeKind::Const(false),
            "one" => NodeKind::Const(true),
            "unknown" => NodeKind::Unknown,
            "input" => NodeKind::Source(SourceKind::Input),
            "flip-flop" => NodeKind::Source(SourceKind::FlipFlop),
            "latch" => NodeKind::Source(SourceKind::Latch),
            "black-box-output" => NodeKind::Source(SourceKind::BlackBox),
            "memory" => NodeKind::Source(SourceKind::Memory),
            "wire" => NodeKind::Wire,
            "buf" => NodeKind::Gate(GateKind::Buf),
            "not" => NodeKind::Gate(GateKind::Not),
            "and" => NodeKind::Gate(GateKind::And),
            "nand" => NodeKind::Gate(GateKind::Nand),
            "or" => NodeKind::Gate(GateKind::Or),
            "nor" => NodeKind::Gate(GateKind::Nor),
            "xor" => NodeKind::Gate(GateKind::Xor),
            "xnor" => NodeKind::Gate(GateKind::Xnor),
            "op-in" => NodeKind::OpIn(OperatorId::new(line.other()?)),
            "op-out" => NodeKind::OpOut(OperatorId::new(line.other()?)),
            "table" if matches!(line.words.get(line.at), Some(Word::Quoted(_))) => return self.table(line),
            "table" => NodeKind::Table(TableId::new(line.other()?)),
            word => return Err(format!("{word} is no kind of node")),
        };
        self.kinds.push(kind);
        self.fanins.push(line.nodes()?);
        let instance = if line.eat("in") { line.instance()? } else { InstanceId::new(0) };
        self.sites.push(Site { instance, span: None });
        Ok(())
    }

    fn table(&mut self, line: &mut Line<'_>) -> Result<(), String> {
        let name = line.text()?;
        let mut rows = Vec::new();
        while !line.done() {
            let word = line.plain()?;
            let row = word.split_once(':').and_then(|(columns, output)| {
                let columns: Option<Vec<Symbol>> = columns.chars().map(symbol).collect();
                let mut output = output.chars();
                match (columns, output.next().and_then(symbol), output.next()) {
                    (Some(columns), Some(output), None) => Some((columns, output)),
                    _ => None,
                }
            });
            rows.push(row.ok_or_else(|| format!("{word} is no row of a table"))?);
        }
        self.tables.push(Table { name, rows });
        Ok(())
    }

    fn net(&mut self, line: &mut Line<'_>) -> Result<(), String> {
        let net = NetId::new(self.nets.len());
        let instance = line.instance()?;
        let name = line.text()?;
        let scalar = line.eat("scalar");
        let mut bits = Vec::new();
        while !line.done() {
            let bit = line.node()?;
            self.names.push((bit, NodeName { net, suffix: line.text()?.into_boxed_str() }));
            bits.push(bit);
        }
        let span = Span { file: FileId::new(0), start: 0, end: 0 };
        self.nets.push(Net { instance, name, span, bits, scalar });
        Ok(())
    }

    fn cell(&mut self, line: &mut Line<'_>) -> Result<(), String> {
        let output = line.node()?;
        if !line.eat("data") {
            return Err("\"data\" is missing after the output of the cell".to_string());
        }
        let data = line.node()?;
        let kind = match line.plain()? {
            "posedge" => CellKind::FlipFlop { clock: line.node()?, edge: Edge::Posedge },
            "negedge" => CellKind::FlipFlop { clock: line.node()?, edge: Edge::Negedge },
            "edge" => CellKind::FlipFlop { clock: line.node()?, edge: Edge::Both },
            "enable" => CellKind::Latch { enable: line.node()?, active: line.bit()? },
            word => return Err(format!("{word} is no trigger of a cell")),
        };
        let mut controls = Vec::new();
        while line.eat("control") {
            controls.push(Control { net: line.node()?, active: line.bit()?, value: line.node()? });
        }
        let init = if line.eat("init") { Some(line.bit()?) } else { None };
        self.cells.push(Cell { kind, output, data, controls, init, inferred_from: None });
        Ok(())
    }

    fn port(&mut self, line: &mut Line<'_>) -> Result<(), String> {
        let instance = line.instance()?;
        let name = line.text()?;
        let direction = match line.plain()? {
            "input" => PortDirection::Input,
            "output" => PortDirection::Output,
            "inout" => PortDirection::Inout,
            word => return Err(format!("{word} is no direction")),
        };
        let net = NetId::new(line.other()?);
        let range = if line.done() { None } else { Some((line.number()?, line.number()?)) };
        self.ports.push(Port { instance, name, direction, net, range });
        Ok(())
    }

    fn black_box(&mut self, line: &mut Line<'_>) -> Result<(), String> {
        let instance = line.instance()?;
        let module = line.text()?;
        let (mut inputs, mut outputs) = (Vec::new(), Vec::new());
        while !line.done() {
            let side = match line.plain()? {
                "input" => &mut inputs,
                "output" => &mut outputs,
                word => return Err(format!("{word} is no side of a black box")),
            };
            let name = line.text()?;
            side.push((name, line.nodes()?));
        }
        self.black_boxes.push(BlackBox { module, instance, inputs, outputs, pins: Vec::new() });
        Ok(())
    }
}

fn symbol(char: char) -> Option<Symbol> {
    match char {
        '0' => Some(Symbol::Zero),
        '1' => Some(Symbol::One),
        'x' => Some(Symbol::X),
        '?' => Some(Symbol::Any),
        'b' => Some(Symbol::Binary),
        _ => None,
    }
}

/// The words of operators are static; a word that elaboration never writes reads back as "operator".
fn operator_word(word: &str) -> &'static str {
    const KNOWN: [&str; 4] = ["adder", "comparison", "shift", "memory read"];
    KNOWN.into_iter().find(|known| *known == word).unwrap_or("operator")
}
