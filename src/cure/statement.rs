//! The statement that drives a net, if it is one that can be changed in place: a plain `assign` to a scalar net, or the
//! initialiser of a wire. Anything else (a process, an instance, a part of a vector, a macro) is left to its author.

use crate::graph::{Graph, InstanceId, Net, NodeId, NodeKind};
use crate::source::{SourceSet, Span};
use crate::syntax::ast::{Expr, ExprKind, GenBlock, Item, ItemKind, Module, NetKind, Unit};

/// How the net is driven.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Form {
    /// `assign y = ...;`
    Assign,
    /// `wire y = ...;`
    Initialiser,
}

/// See the module documentation.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Statement {
    pub(super) form: Form,
    /// The whole statement with its semicolon, attributes left out.
    pub(super) at: Span,
    /// The expression.
    pub(super) value: Span,
    /// The net as the graph knows it: the wire, and the instance whose names the expression may use.
    pub(super) wire: NodeId,
    pub(super) scope: InstanceId,
    pub(super) net: String,
}

/// The statement that computes `root`, looked for at every net that takes its value straight from there.
pub(super) fn find(graph: &Graph, units: &[Unit], sources: &SourceSet, root: NodeId) -> Option<Statement> {
    let site = graph.span(root)?;
    let mut wires = vec![root];
    let mut next = 0;
    while let Some(&node) = wires.get(next) {
        next += 1;
        let readers = graph.fanout(node).iter().copied().filter(|&reader| graph.kind(reader) == NodeKind::Wire);
        let new: Vec<NodeId> = readers.filter(|reader| !wires.contains(reader)).collect();
        wires.extend(new);
    }
    wires.into_iter().filter(|&node| graph.kind(node) == NodeKind::Wire).find_map(|wire| {
        let name = graph.node_name(wire)?;
        let net = &graph.nets[name.net.index()];
        if !net.scalar || net.bits.len() != 1 {
            return None;
        }
        let mut module = &graph.instances[net.instance.index()];
        while let Some(parent) = module.parent.filter(|_| module.block) {
            module = &graph.instances[parent.index()];
        }
        let modules = units.iter().flat_map(|unit| &unit.modules);
        let mut found = Vec::new();
        for module in modules.filter(|candidate| candidate.name.name == module.module) {
            collect(module, net, sources, &mut found);
        }
        found.retain(|(_, _, value)| value.file == site.file && value.start <= site.start && site.end <= value.end);
        match found.as_slice() {
            &[(form, at, value)] => {
                Some(Statement { form, at, value, wire, scope: net.instance, net: net.name.clone() })
            }
            _ => None,
        }
    })
}

type Found = Vec<(Form, Span, Span)>;

fn collect(module: &Module, net: &Net, sources: &SourceSet, found: &mut Found) {
    items(&module.items, net, sources, found);
}

fn items(items: &[Item], net: &Net, sources: &SourceSet, found: &mut Found) {
    let mut blocks: Vec<&GenBlock> = Vec::new();
    for item in items {
        match &item.kind {
            ItemKind::Assign(pairs) => {
                if let [(target, value)] = pairs.as_slice() {
                    let plain = matches!(&target.kind, ExprKind::Name(name) if name.name == net.name);
                    let at = plain.then(|| whole(sources, "assign", target.span, value)).flatten();
                    found.extend(at.map(|at| (Form::Assign, at, value.span)));
                }
            }
            ItemKind::Net { net: NetKind::Wire, names, .. } => {
                if let [one] = names.as_slice()
                    && one.name.name == net.name
                    && one.name.span == net.span
                    && let Some(value) = &one.init
                {
                    let at = whole(sources, "wire", one.name.span, value);
                    found.extend(at.map(|at| (Form::Initialiser, at, value.span)));
                }
            }
            ItemKind::GenBlock(block) => blocks.push(block),
            ItemKind::GenFor { body, .. } => blocks.push(body),
            ItemKind::GenIf { then, otherwise, .. } => blocks.extend(std::iter::once(then).chain(otherwise)),
            ItemKind::GenCase { arms, default, .. } => {
                blocks.extend(arms.iter().map(|(_, block)| block).chain(default));
            }
            _ => {}
        }
    }
    for block in blocks {
        self::items(&block.items, net, sources, found);
    }
}

/// From the keyword to the semicolon, when there is nothing between keyword, name, `=` and expression that would be
/// lost: no delay, no strength, no type. `None` as well where a macro wrote a part of it.
fn whole(sources: &SourceSet, keyword: &str, name: Span, value: &Expr) -> Option<Span> {
    let text = &sources.file(name.file).text;
    let (start, end) = (name.start as usize, name.end as usize);
    let head = text.get(..start)?.trim_end().strip_suffix(keyword)?;
    let before = head.chars().next_back();
    if before.is_some_and(|c| c.is_alphanumeric() || matches!(c, '_' | '$' | '`')) || value.span.file != name.file {
        return None;
    }
    let between = text.get(end..value.span.start as usize)?;
    let tail = text.get(value.span.end as usize..)?;
    let rest = tail.trim_start();
    if between.trim() != "=" || !rest.starts_with(';') || head.len() >= start {
        return None;
    }
    let length = tail.len() - rest.len() + 1;
    Some(Span { file: name.file, start: head.len() as u32, end: value.span.end + length as u32 })
}
