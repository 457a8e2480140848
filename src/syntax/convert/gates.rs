//! Gate and switch primitives, IEEE 1364-2005 clause 7, with their terminals in the order of the text. Strengths and delays
//! are left out and counted.

use sv_parser as sv;

use super::Converter;
use super::ast::{Dim, Expr, GateInstance, GateType, Ident, ItemKind};
use crate::source::Span;

/// Output terminals are targets to the parser and inputs are expressions; we keep both as expressions.
macro_rules! gate_instances {
    ($self:ident, $list:expr, |$terminals:ident| $convert:expr) => {
        $list
            .contents()
            .into_iter()
            .map(|instance| {
                let (name, paren) = &instance.nodes;
                let $terminals = &paren.nodes.1;
                let terminals: Vec<Expr> = $convert;
                $self.gate_instance(name, terminals, $self.span(instance))
            })
            .collect()
    };
}

impl Converter<'_> {
    pub(super) fn gates(&self, gates: &sv::GateInstantiation) -> ItemKind {
        let output = |terminal: &sv::OutputTerminal| self.net_lvalue(&terminal.nodes.0);
        let inout = |terminal: &sv::InoutTerminal| self.net_lvalue(&terminal.nodes.0);
        let input = |terminal: &sv::InputTerminal| self.expression(&terminal.nodes.0);
        let enable = |terminal: &sv::EnableTerminal| self.expression(&terminal.nodes.0);
        let instances: Vec<GateInstance> = match gates {
            sv::GateInstantiation::Cmos(x) => {
                let (_, delay, list, _) = &x.nodes;
                self.drop_timing(delay.as_ref());
                gate_instances!(self, list, |t| vec![
                    output(&t.0),
                    input(&t.2),
                    self.expression(&t.4.nodes.0),
                    self.expression(&t.6.nodes.0),
                ])
            }
            sv::GateInstantiation::Enable(x) => {
                let (_, strength, delay, list, _) = &x.nodes;
                self.drop_timing(strength.as_ref());
                self.drop_timing(delay.as_ref());
                gate_instances!(self, list, |t| vec![output(&t.0), input(&t.2), enable(&t.4)])
            }
            sv::GateInstantiation::Mos(x) => {
                let (_, delay, list, _) = &x.nodes;
                self.drop_timing(delay.as_ref());
                gate_instances!(self, list, |t| vec![output(&t.0), input(&t.2), enable(&t.4)])
            }
            sv::GateInstantiation::NInput(x) => {
                let (_, strength, delay, list, _) = &x.nodes;
                self.drop_timing(strength.as_ref());
                self.drop_timing(delay.as_ref());
                gate_instances!(self, list, |t| {
                    let inputs = t.2.contents().into_iter().map(input);
                    std::iter::once(output(&t.0)).chain(inputs).collect()
                })
            }
            sv::GateInstantiation::NOutput(x) => {
                let (_, strength, delay, list, _) = &x.nodes;
                self.drop_timing(strength.as_ref());
                self.drop_timing(delay.as_ref());
                gate_instances!(self, list, |t| {
                    let outputs = t.0.contents().into_iter().map(output);
                    outputs.chain(std::iter::once(input(&t.2))).collect()
                })
            }
            sv::GateInstantiation::PassEn(x) => {
                let (_, delay, list, _) = &x.nodes;
                self.drop_timing(delay.as_ref());
                gate_instances!(self, list, |t| vec![inout(&t.0), inout(&t.2), enable(&t.4)])
            }
            sv::GateInstantiation::Pass(x) => {
                gate_instances!(self, x.nodes.1, |t| vec![inout(&t.0), inout(&t.2)])
            }
            sv::GateInstantiation::Pulldown(x) => {
                let (_, strength, list, _) = &x.nodes;
                self.drop_timing(strength.as_ref());
                gate_instances!(self, list, |t| vec![output(t)])
            }
            sv::GateInstantiation::Pullup(x) => {
                let (_, strength, list, _) = &x.nodes;
                self.drop_timing(strength.as_ref());
                gate_instances!(self, list, |t| vec![output(t)])
            }
        };
        match gate_type(self.text_of(gates)) {
            Some(gate) => ItemKind::Gates { gate, instances },
            None => ItemKind::Unsupported("gate type".to_string()),
        }
    }

    fn gate_instance(&self, name: &Option<sv::NameOfInstance>, terminals: Vec<Expr>, span: Span) -> GateInstance {
        let (name, dims): (Option<Ident>, Vec<Dim>) = match name {
            Some(name) => {
                let (name, dims) = self.instance_name(name);
                (Some(name), dims)
            }
            None => (None, Vec::new()),
        };
        GateInstance { name, dims, terminals, span }
    }
}

fn gate_type(keyword: &str) -> Option<GateType> {
    Some(match keyword {
        "and" => GateType::And,
        "nand" => GateType::Nand,
        "or" => GateType::Or,
        "nor" => GateType::Nor,
        "xor" => GateType::Xor,
        "xnor" => GateType::Xnor,
        "buf" => GateType::Buf,
        "not" => GateType::Not,
        "bufif0" => GateType::Bufif0,
        "bufif1" => GateType::Bufif1,
        "notif0" => GateType::Notif0,
        "notif1" => GateType::Notif1,
        "nmos" => GateType::Nmos,
        "pmos" => GateType::Pmos,
        "rnmos" => GateType::Rnmos,
        "rpmos" => GateType::Rpmos,
        "cmos" => GateType::Cmos,
        "rcmos" => GateType::Rcmos,
        "tran" => GateType::Tran,
        "rtran" => GateType::Rtran,
        "tranif0" => GateType::Tranif0,
        "tranif1" => GateType::Tranif1,
        "rtranif0" => GateType::Rtranif0,
        "rtranif1" => GateType::Rtranif1,
        "pullup" => GateType::Pullup,
        "pulldown" => GateType::Pulldown,
        _ => return None,
    })
}
