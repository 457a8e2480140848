//! From the names of a declaration to groups of nodes. A name means every net it fits, all its bits; without a wildcard
//! all nets of a declaration are one group, with one they are grouped by instance, so that a pattern speaks about each
//! instance by itself.

use std::collections::{BTreeMap, BTreeSet};

use super::{Declaration, Origin};
use crate::graph::{Graph, InstanceId, NetId, NodeId};
use crate::hazard::{Assumption, AssumptionKind};
use crate::source::PathError;
use crate::spelling::nearest;

/// A declaration about one group of nets.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Resolved {
    pub assumption: Assumption,
    pub nets: Vec<String>,
    /// Where the first of them is declared.
    pub first: NetId,
    pub reason: String,
    pub origin: Origin,
}

/// The groups that declarations with names speak about.
///
/// # Errors
/// A name that fits no net, with the nearest one that there is; a group of one net where one alone makes no sense.
pub fn resolve(graph: &Graph, declarations: &[Declaration]) -> Result<Vec<Resolved>, PathError> {
    let mut resolved = Vec::new();
    if declarations.is_empty() {
        return Ok(resolved);
    }
    let nets = Nets::new(graph);
    for declaration in declarations {
        let mut groups: BTreeMap<Option<InstanceId>, Vec<Bit>> = BTreeMap::new();
        let wild = declaration.nets.iter().any(|name| is_pattern(name));
        let place = match &declaration.origin {
            Origin::Settings { file, line } => format!("{file}:{line}"),
            Origin::Comment(_) => String::new(),
        };
        for name in &declaration.nets {
            let found = nets.find(name);
            if found.is_empty() {
                let help = match nets.nearest(name) {
                    Some(nearest) => format!("did you mean `{nearest}`?"),
                    None => "give the full name, from the top module down, such as `top.u_core.mode`".to_string(),
                };
                let message = format!("{place}: no net fits `{name}` of this `{}` assumption", declaration.kind.name());
                return Err(PathError::new(message, help));
            }
            for bit in found {
                let instance = wild.then(|| graph.nets[bit.net.index()].instance);
                groups.entry(instance).or_default().push(bit);
            }
        }
        for bits in groups.into_values() {
            let Some(group) = group(graph, declaration, &bits) else {
                let message =
                    format!("{place}: `{}` speaks about one bit, `{}`", declaration.kind.name(), bits[0].name(graph));
                return Err(PathError::new(message, "name all nets of the group in one declaration"));
            };
            resolved.push(group);
        }
    }
    Ok(resolved)
}

/// The group of all bits of some nets; `None` when the kind needs more than one bit.
pub(super) fn group_of_nets(graph: &Graph, declaration: &Declaration, nets: &[NetId]) -> Option<Resolved> {
    let bits: Vec<Bit> =
        nets.iter().flat_map(|&net| (0..graph.nets[net.index()].bits.len()).map(move |bit| Bit { net, bit })).collect();
    group(graph, declaration, &bits)
}

fn group(graph: &Graph, declaration: &Declaration, bits: &[Bit]) -> Option<Resolved> {
    let mut nodes: Vec<NodeId> = Vec::new();
    let mut seen = BTreeSet::new();
    for bit in bits {
        let root = graph.root(bit.node(graph));
        if seen.insert(root) {
            nodes.push(root);
        }
    }
    if nodes.is_empty() || (nodes.len() < 2 && declaration.kind != AssumptionKind::Static) {
        return None;
    }
    Some(Resolved {
        assumption: Assumption { kind: declaration.kind, nodes },
        nets: names(graph, bits),
        first: bits.first()?.net,
        reason: declaration.reason.clone(),
        origin: declaration.origin.clone(),
    })
}

/// One bit of a net.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
struct Bit {
    net: NetId,
    bit: usize,
}

impl Bit {
    fn node(self, graph: &Graph) -> NodeId {
        graph.nets[self.net.index()].bits[self.bit]
    }

    fn name(self, graph: &Graph) -> String {
        graph.name(self.node(graph)).unwrap_or_default()
    }
}

/// Nets of which all bits are meant by their name, other bits one by one.
fn names(graph: &Graph, bits: &[Bit]) -> Vec<String> {
    let mut by_net: BTreeMap<NetId, BTreeSet<usize>> = BTreeMap::new();
    let mut order: Vec<NetId> = Vec::new();
    for bit in bits {
        let known = by_net.entry(bit.net).or_default();
        if known.is_empty() {
            order.push(bit.net);
        }
        known.insert(bit.bit);
    }
    let mut names = Vec::new();
    for id in order {
        let net = &graph.nets[id.index()];
        if by_net[&id].len() == net.bits.len() {
            names.push(full_name(graph, id));
        } else {
            names.extend(by_net[&id].iter().map(|&bit| Bit { net: id, bit }.name(graph)));
        }
    }
    names
}

fn full_name(graph: &Graph, net: NetId) -> String {
    let net = &graph.nets[net.index()];
    format!("{}.{}", graph.instances[net.instance.index()].path, net.name)
}

/// All nets by full name.
struct Nets<'a> {
    graph: &'a Graph,
    by_name: BTreeMap<String, NetId>,
}

impl<'a> Nets<'a> {
    fn new(graph: &'a Graph) -> Self {
        let by_name = (0..graph.nets.len()).map(NetId::new).map(|net| (full_name(graph, net), net)).collect();
        Self { graph, by_name }
    }

    /// The bits that a name or pattern fits, in order of name and bit.
    fn find(&self, name: &str) -> Vec<Bit> {
        let whole = |net: NetId| (0..self.graph.nets[net.index()].bits.len()).map(move |bit| Bit { net, bit });
        if !is_pattern(name) {
            if let Some(&net) = self.by_name.get(name) {
                return whole(net).collect();
            }
            // A bit or a part of the net: its name begins with the net's.
            let of_net = |(net, at): (NetId, usize)| {
                let rest = &name[at..];
                let fits = move |bit: &Bit| {
                    let suffix = self.graph.node_name(bit.node(self.graph)).map_or("", |name| &name.suffix);
                    suffix.strip_prefix(rest).is_some_and(|more| more.is_empty() || more.starts_with(['[', '.']))
                };
                whole(net).filter(fits).collect::<Vec<Bit>>()
            };
            let cuts = name.char_indices().filter(|(_, letter)| matches!(letter, '[' | '.')).map(|(at, _)| at);
            let candidates = cuts.filter_map(|at| Some((*self.by_name.get(&name[..at])?, at)));
            return candidates.map(of_net).find(|bits| !bits.is_empty()).unwrap_or_default();
        }
        let mut found = Vec::new();
        for (full, &net) in &self.by_name {
            if fits(name.as_bytes(), full.as_bytes()) {
                found.extend(whole(net));
            } else if name.ends_with(']') {
                let bits = whole(net).filter(|bit| fits(name.as_bytes(), bit.name(self.graph).as_bytes()));
                found.extend(bits);
            }
        }
        found
    }

    fn nearest(&self, name: &str) -> Option<&str> {
        // Only names of about the same length can be near.
        let near = |known: &&str| known.len().abs_diff(name.len()) <= 3;
        nearest(name, self.by_name.keys().map(String::as_str).filter(near))
    }
}

fn is_pattern(name: &str) -> bool {
    name.contains(['*', '?'])
}

/// Whether a pattern fits a whole name; see [`Declaration::nets`].
fn fits(pattern: &[u8], name: &[u8]) -> bool {
    // Which prefixes of the name the pattern so far fits.
    let mut reached = vec![false; name.len() + 1];
    reached[0] = true;
    let mut rest = pattern;
    while let Some((&symbol, more)) = rest.split_first() {
        let deep = symbol == b'*' && more.first() == Some(&b'*');
        rest = if deep { &more[1..] } else { more };
        if symbol == b'*' {
            for at in 0..name.len() {
                reached[at + 1] |= reached[at] && (deep || name[at] != b'.');
            }
        } else {
            for at in (0..name.len()).rev() {
                reached[at + 1] = reached[at] && (symbol == b'?' && name[at] != b'.' || symbol == name[at]);
            }
            reached[0] = false;
        }
    }
    reached[name.len()]
}

#[cfg(test)]
mod tests {
    use super::fits;

    #[test]
    fn patterns() {
        let fits = |pattern: &str, name: &str| fits(pattern.as_bytes(), name.as_bytes());
        assert!(fits("top.u*.mode", "top.u_core.mode") && !fits("top.*.mode", "top.a.b.mode"));
        assert!(fits("top.**.mode", "top.a.b.mode") && fits("**", "top.a") && fits("a?c", "abc"));
        assert!(!fits("a?c", "a.c") && !fits("a?c", "ac") && fits("a*", "a") && !fits("", "a") && fits("", ""));
        assert!(fits("top.g[*].q", "top.g[12].q") && !fits("top.g[*].q", "top.g[1].u.q"));
    }
}
