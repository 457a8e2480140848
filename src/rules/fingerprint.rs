//! Two names for a finding that survive edits elsewhere, 32 hexadecimal digits each. The fingerprint is over the rule, the
//! hierarchical name of the net and the structure of its cone (kinds and connections in pin order, names of the
//! sources). The family is the same without the place in the hierarchy: it says the module and the names within it, so
//! that one mistake in a module has one family however often the module is used. Lines, files, names of inner nets and
//! the cells behind the net enter neither, so that moving code keeps the ledger valid while a change of the logic makes
//! the finding a new one.

use std::collections::HashMap;
use std::collections::hash_map::Entry;

use super::Rule;
use super::names;
use crate::graph::{Graph, InstanceId, NetId, NodeId, NodeKind, SourceKind, Symbol};

/// FNV-1a with 128 bits (Fowler, Noll, Vo; parameters of RFC 9923): small, stable and without a key.
#[derive(Clone, Copy)]
struct Fnv(u128);

impl Fnv {
    const OFFSET: u128 = 0x6c62_272e_07bb_0142_62b8_2175_6295_c58d;
    const PRIME: u128 = 0x0000_0000_0100_0000_0000_0000_0000_013b;

    fn new() -> Self {
        Self(Self::OFFSET)
    }

    fn bytes(mut self, bytes: &[u8]) -> Self {
        for &byte in bytes {
            self.0 = (self.0 ^ u128::from(byte)).wrapping_mul(Self::PRIME);
        }
        self
    }

    /// Text with its length, so that two neighbouring texts cannot run into each other.
    fn text(self, text: &str) -> Self {
        self.bytes(&(text.len() as u64).to_le_bytes()).bytes(text.as_bytes())
    }

    fn number(self, number: u128) -> Self {
        self.bytes(&number.to_le_bytes())
    }

    fn hex(self) -> String {
        format!("{:032x}", self.0)
    }
}

/// What tells one finding from another; see the module documentation.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(crate) struct Identity {
    pub fingerprint: String,
    pub family: String,
}

/// The identity of a finding on the nets driven by `roots`, called `net`.
pub(super) fn of_cone(graph: &Graph, rule: Rule, net: &str, roots: &[NodeId]) -> Identity {
    let fingerprint = Fnv::new().text(rule.name()).text(net);
    let fingerprint = cones(graph, fingerprint, roots, |node, _, _| names::name(graph, node));
    let wire = roots.first().and_then(|&root| names::wire_of(graph, root));
    let family = Fnv::new().text(rule.name()).text(&wire.map_or(String::new(), |wire| within_module(graph, wire)));
    // A source goes by the name that its reader's module has for it, and by a number, because two such names may be one net.
    let family = cones(graph, family, roots, |_, reads, number| format!("{number} {}", within_module(graph, reads)));
    Identity { fingerprint: fingerprint.hex(), family: family.hex() }
}

/// The identity of a finding that is about a text and not about a net.
pub(crate) fn of_text(rule: Rule, texts: &[&str]) -> Identity {
    let hex = texts.iter().fold(Fnv::new().text(rule.name()), |hash, text| hash.text(text)).hex();
    Identity { fingerprint: hex.clone(), family: hex }
}

/// The identity of a finding that is about a declared net called `name`, whatever drives it.
pub(super) fn of_net(graph: &Graph, rule: Rule, net: NetId, name: &str) -> Identity {
    let net = &graph.nets[net.index()];
    let within = format!("{}.{}", module_path(graph, net.instance), net.name);
    let family = Fnv::new().text(rule.name()).text(&within).hex();
    Identity { fingerprint: Fnv::new().text(rule.name()).text(name).hex(), family }
}

/// The name of a node as its module's text has it: the module, the generate blocks without their indices, the net.
fn within_module(graph: &Graph, node: NodeId) -> String {
    let (instance, net) = match graph.node_name(node) {
        Some(name) => {
            let net = &graph.nets[name.net.index()];
            (net.instance, format!("{}{}", net.name, name.suffix))
        }
        None => (graph.site(node).instance, String::new()),
    };
    format!("{}.{net}", module_path(graph, instance))
}

/// The module of an instance and the generate blocks within it, which are written once however often they are repeated.
fn module_path(graph: &Graph, instance: InstanceId) -> String {
    let mut blocks = Vec::new();
    let mut here = &graph.instances[instance.index()];
    while let Some(parent) = here.parent.filter(|_| here.block) {
        let parent = &graph.instances[parent.index()];
        let label = here.path.strip_prefix(parent.path.as_str()).unwrap_or(&here.path);
        blocks.push(label.trim_start_matches('.').split('[').next().unwrap_or_default());
        here = parent;
    }
    blocks.push(&here.module);
    blocks.reverse();
    blocks.join(".")
}

/// Adds the hashes of the cones of `roots`. `source` names a source by itself, by the node through which it is first
/// read, and by the number of sources met before.
fn cones(graph: &Graph, hash: Fnv, roots: &[NodeId], source: impl Fn(NodeId, NodeId, usize) -> String) -> Fnv {
    let mut memo = HashMap::new();
    let mut met = 0;
    let mut source = |node: NodeId, reads: NodeId| {
        met += 1;
        source(node, reads, met)
    };
    roots.iter().fold(hash, |hash, &root| hash.number(cone(graph, root, &mut memo, &mut source)))
}

/// The hash of the cone of `root`: each node's from those of its fan-in. `memo` keeps `None` for a node whose fan-in is
/// still being hashed; meeting such a node again means a loop, which enters as a mark of its own.
fn cone(
    graph: &Graph,
    root: NodeId,
    memo: &mut HashMap<NodeId, Option<u128>>,
    source: &mut impl FnMut(NodeId, NodeId) -> String,
) -> u128 {
    let start = graph.root(root);
    let mut stack = vec![(start, root, false)];
    while let Some((node, reads, ready)) = stack.pop() {
        if ready {
            let mut hash = own(graph, node);
            if let NodeKind::Source(_) = graph.kind(node) {
                hash = hash.text(&source(node, reads));
            }
            for &input in graph.fanin(node) {
                let input = memo.get(&graph.root(input)).copied().flatten();
                hash = hash.number(input.unwrap_or(u128::MAX));
            }
            memo.insert(node, Some(hash.0));
        } else if let Entry::Vacant(slot) = memo.entry(node) {
            slot.insert(None);
            stack.push((node, reads, true));
            let inputs = graph.fanin(node).iter().rev().map(|&input| (graph.root(input), input));
            stack.extend(inputs.filter(|(root, _)| !memo.contains_key(root)).map(|(root, input)| (root, input, false)));
        }
    }
    memo.get(&start).copied().flatten().unwrap_or(u128::MAX)
}

/// The hash of what a node is, without its fan-in and without the name of a source.
fn own(graph: &Graph, node: NodeId) -> Fnv {
    let hash = Fnv::new();
    match graph.kind(node) {
        NodeKind::Const(value) => hash.text(if value { "1" } else { "0" }),
        NodeKind::Unknown => hash.text("unknown"),
        // A wire that is its own root is undriven, or part of a ring of wires.
        NodeKind::Wire => hash.text("undriven"),
        NodeKind::Source(kind) => hash.text(match kind {
            SourceKind::Input => "input",
            SourceKind::FlipFlop => "flip-flop",
            SourceKind::Latch => "latch",
            SourceKind::BlackBox => "black box",
            SourceKind::Memory => "memory",
        }),
        NodeKind::Gate(gate) => hash.text(gate.name()),
        NodeKind::Table(table) => {
            let mut hash = hash.text("table");
            for (inputs, output) in &graph.tables[table.index()].rows {
                let row: Vec<u8> = inputs.iter().chain([output]).map(|&symbol| letter(symbol)).collect();
                hash = hash.number(row.len() as u128).bytes(&row);
            }
            hash
        }
        NodeKind::OpIn(_) => hash.text("operator in"),
        NodeKind::OpOut(_) => hash.text("operator out"),
    }
}

fn letter(symbol: Symbol) -> u8 {
    match symbol {
        Symbol::Zero => b'0',
        Symbol::One => b'1',
        Symbol::X => b'x',
        Symbol::Any => b'?',
        Symbol::Binary => b'b',
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Test vectors for FNV-1a 128 of "" and "foobar": RFC 9923, and the authors' reference page.
    #[test]
    fn fnv_matches_published_vectors() {
        assert_eq!(Fnv::new().hex(), "6c62272e07bb014262b821756295c58d");
        assert_eq!(Fnv::new().bytes(b"foobar").hex(), "343e1662793c64bf6f0d3597ba446f18");
    }
}
