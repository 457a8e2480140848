//! User-defined primitives: declarations with their tables, IEEE 1364-2005 clause 8, and the instances whose form (no name,
//! a strength, a delay without parentheses) only a primitive allows.

use sv_parser as sv;

use super::Converter;
use super::ast::{Connection, ExprKind, Ident, Instance, Item, ItemKind, Udp, UdpRow, UdpSymbol};
use crate::source::Span;

/// The ports of a primitive as its header and its declarations give them.
#[derive(Default)]
struct Ports {
    output: Option<Ident>,
    inputs: Vec<Ident>,
    initial: Option<char>,
}

impl Converter<'_> {
    pub(super) fn udp_declaration(&self, declaration: &sv::UdpDeclaration) -> Result<Udp, Box<Item>> {
        let span = self.span(declaration);
        let mut ports = Ports::default();
        let (name, body) = match declaration {
            sv::UdpDeclaration::Nonansi(x) => {
                let (header, first, more, body, _, _) = &x.nodes;
                let (_, _, name, list, _) = &header.nodes;
                for declaration in std::iter::once(first).chain(more) {
                    self.udp_port_declaration(declaration, &mut ports);
                }
                // The header's order is the order of the table's columns.
                let (output, _, inputs) = &list.nodes.1.nodes;
                ports.output = Some(self.ident(&output.nodes.0));
                ports.inputs = inputs.contents().into_iter().map(|input| self.ident(&input.nodes.0)).collect();
                (name, body)
            }
            sv::UdpDeclaration::Ansi(x) => {
                let (header, body, _, _) = &x.nodes;
                let (_, _, name, list, _) = &header.nodes;
                let (output, _, inputs) = &list.nodes.1.nodes;
                self.udp_output(output, &mut ports);
                inputs.contents().into_iter().for_each(|input| self.udp_inputs(input, &mut ports));
                (name, body)
            }
            sv::UdpDeclaration::Wildcard(x) => {
                let (_, _, name, _, _, declarations, body, _, _) = &x.nodes;
                declarations.iter().for_each(|declaration| self.udp_port_declaration(declaration, &mut ports));
                (name, body)
            }
            sv::UdpDeclaration::ExternNonansi(_) | sv::UdpDeclaration::ExternAnsi(_) => {
                return Err(Box::new(self.skipped("extern primitive declaration", span)));
            }
        };
        let Some(output) = ports.output else {
            return Err(Box::new(self.unsupported("primitive without an output", span)));
        };
        let mut initial = ports.initial;
        let (sequential, rows) = match body {
            sv::UdpBody::CombinationalBody(x) => {
                let (_, first, more, _) = &x.nodes;
                (false, std::iter::once(first).chain(more).map(|row| self.combinational_row(row)).collect())
            }
            sv::UdpBody::SequentialBody(x) => {
                let (start, _, first, more, _) = &x.nodes;
                if let Some(start) = start {
                    initial = self.text_of(&start.nodes.3).chars().last().map(|c| c.to_ascii_lowercase());
                }
                (true, std::iter::once(first).chain(more).map(|row| self.sequential_row(row)).collect())
            }
        };
        Ok(Udp { name: self.ident(&name.nodes.0), span, output, inputs: ports.inputs, sequential, initial, rows })
    }

    fn udp_port_declaration(&self, declaration: &sv::UdpPortDeclaration, ports: &mut Ports) {
        match declaration {
            sv::UdpPortDeclaration::UdpOutputDeclaration(x) => self.udp_output(&x.0, ports),
            sv::UdpPortDeclaration::UdpInputDeclaration(x) => self.udp_inputs(&x.0, ports),
            // `reg q;` repeats that the primitive is sequential, which its table says.
            sv::UdpPortDeclaration::UdpRegDeclaration(_) => {}
        }
    }

    fn udp_output(&self, output: &sv::UdpOutputDeclaration, ports: &mut Ports) {
        let name = match output {
            sv::UdpOutputDeclaration::Nonreg(x) => &x.nodes.2,
            sv::UdpOutputDeclaration::Reg(x) => {
                let (_, _, _, name, initial) = &x.nodes;
                if let Some((_, value)) = initial {
                    ports.initial = match self.constant_expression(value).kind {
                        ExprKind::Number(literal) => literal.bits.chars().last(),
                        _ => None,
                    };
                }
                name
            }
        };
        ports.output = Some(self.ident(&name.nodes.0));
    }

    fn udp_inputs(&self, inputs: &sv::UdpInputDeclaration, ports: &mut Ports) {
        ports.inputs.extend(inputs.nodes.2.nodes.0.contents().into_iter().map(|name| self.ident(&name.nodes.0)));
    }

    fn combinational_row(&self, row: &sv::CombinationalEntry) -> UdpRow {
        let (inputs, _, output, _) = &row.nodes;
        UdpRow {
            inputs: self.level_list(inputs),
            state: None,
            output: self.table_char(&output.nodes.0),
            span: self.span(row),
        }
    }

    fn sequential_row(&self, row: &sv::SequentialEntry) -> UdpRow {
        let (inputs, _, state, _, next, _) = &row.nodes;
        let inputs = match inputs {
            sv::SeqInputList::LevelInputList(x) => self.level_list(x),
            sv::SeqInputList::EdgeInputList(x) => {
                let (before, edge, after) = &x.nodes;
                let edge = match edge {
                    sv::EdgeIndicator::Paren(x) => {
                        let (from, to) = &x.nodes.0.nodes.1;
                        UdpSymbol::Edge(self.table_char(&from.nodes.0), self.table_char(&to.nodes.0))
                    }
                    sv::EdgeIndicator::EdgeSymbol(x) => UdpSymbol::EdgeLetter(self.table_char(&x.nodes.0)),
                };
                let level = |symbol: &sv::LevelSymbol| UdpSymbol::Level(self.table_char(&symbol.nodes.0));
                before.iter().map(level).chain(std::iter::once(edge)).chain(after.iter().map(level)).collect()
            }
        };
        let output = match next {
            sv::NextState::OutputSymbol(x) => self.table_char(&x.nodes.0),
            sv::NextState::Minus(_) => '-',
        };
        UdpRow { inputs, state: Some(self.table_char(&state.nodes.0.nodes.0)), output, span: self.span(row) }
    }

    fn level_list(&self, list: &sv::LevelInputList) -> Vec<UdpSymbol> {
        let (first, more) = &list.nodes;
        std::iter::once(first).chain(more).map(|symbol| UdpSymbol::Level(self.table_char(&symbol.nodes.0))).collect()
    }

    fn table_char(&self, symbol: &sv::Symbol) -> char {
        self.symbol(symbol).chars().next().unwrap_or('x').to_ascii_lowercase()
    }

    /// An instance that only a primitive allows. One without a name gets the empty name.
    pub(super) fn udp_instances(&self, instantiation: &sv::UdpInstantiation) -> Item {
        let (name, strength, delay, list, _) = &instantiation.nodes;
        self.drop_timing(strength.as_ref());
        self.drop_timing(delay.as_ref());
        let instances = list.contents().into_iter().map(|instance| self.udp_instance(instance)).collect();
        let kind = ItemKind::Instances { module: self.ident(&name.nodes.0), params: Vec::new(), instances };
        self.item(kind, self.span(instantiation))
    }

    fn udp_instance(&self, instance: &sv::UdpInstance) -> Instance {
        let span: Span = self.span(instance);
        let (name, terminals) = &instance.nodes;
        let (name, dims) = match name {
            Some(name) => self.instance_name(name),
            None => (Ident { name: String::new(), span }, Vec::new()),
        };
        let (output, _, first, more) = &terminals.nodes.1;
        let inputs = std::iter::once(first).chain(more.iter().map(|(_, input)| input));
        let connections = std::iter::once(self.net_lvalue(&output.nodes.0))
            .chain(inputs.map(|input| self.expression(&input.nodes.0)))
            .map(|value| {
                let span = value.span;
                Connection::Ordered(Some(value), span)
            })
            .collect();
        Instance { name, dims, connections, span }
    }
}
