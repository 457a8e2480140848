//! Tokens and places. The parser keeps a `Locate` (offset and length in the preprocessed text) per token and hangs white
//! space, comments and compiler directives on the token before them. A node's place runs from its first token to the
//! end of its last one, white space left out. It is found by walking down the two edges of the node instead of over
//! all of it, so that spans of nested nodes do not make the conversion quadratic.

use sv_parser as sv;

use super::children::children;
use super::{Converter, ast};
use crate::source::Span;

/// The first token of the nodes, if they have any.
fn first_token(nodes: sv::RefNodes<'_>) -> Option<sv::Locate> {
    let mut stack = nodes.0;
    stack.reverse();
    while let Some(node) = stack.pop() {
        match node {
            sv::RefNode::Locate(locate) => return Some(*locate),
            sv::RefNode::WhiteSpace(_) => {}
            other => stack.extend(children(other).into_iter().rev()),
        }
    }
    None
}

/// The last token of the nodes that is not white space.
fn last_token(nodes: sv::RefNodes<'_>) -> Option<sv::Locate> {
    let mut stack = nodes.0;
    while let Some(node) = stack.pop() {
        match node {
            sv::RefNode::Locate(locate) => return Some(*locate),
            sv::RefNode::WhiteSpace(_) => {}
            other => stack.extend(children(other)),
        }
    }
    None
}

impl Converter<'_> {
    /// The place of a node in the user's files.
    pub(super) fn span<'n>(&self, node: impl Into<sv::RefNodes<'n>>) -> Span {
        let nodes: sv::RefNodes<'n> = node.into();
        self.span_between(sv::RefNodes(nodes.0.clone()), nodes)
    }

    /// The place from the first token of one node to the last token of another.
    pub(super) fn span_between<'n, 'm>(
        &self,
        from: impl Into<sv::RefNodes<'n>>,
        to: impl Into<sv::RefNodes<'m>>,
    ) -> Span {
        match (first_token(from.into()), last_token(to.into())) {
            (Some(first), Some(last)) => {
                let end = (last.offset + last.len).max(first.offset);
                self.places.place(first.offset, end - first.offset)
            }
            (Some(only), None) | (None, Some(only)) => self.places.place(only.offset, only.len),
            (None, None) => self.nowhere(),
        }
    }

    /// The place of a node without a token of its own.
    pub(super) fn nowhere(&self) -> Span {
        Span { file: self.file, start: 0, end: 0 }
    }

    /// The place of a node's first token in the preprocessed text.
    pub(super) fn offset<'n>(&self, node: impl Into<sv::RefNodes<'n>>) -> usize {
        first_token(node.into()).map_or(0, |locate| locate.offset)
    }

    /// The text of one token.
    pub(super) fn token(&self, locate: &sv::Locate) -> &str {
        self.tree.get_str(locate).unwrap_or_default()
    }

    /// The text of a keyword or a symbol.
    pub(super) fn symbol(&self, symbol: &sv::Symbol) -> &str {
        self.token(&symbol.nodes.0)
    }

    pub(super) fn keyword(&self, keyword: &sv::Keyword) -> &str {
        self.token(&keyword.nodes.0)
    }

    /// The text of the first token of a node; for nodes that are one token by their grammar.
    pub(super) fn text_of<'n>(&self, node: impl Into<sv::RefNodes<'n>>) -> &str {
        match first_token(node.into()) {
            Some(locate) => self.token(&locate),
            None => "",
        }
    }

    /// Every change of `` `default_nettype `` in the file, with its offset. The directives hang on the tokens before
    /// them as white space, which the walk over the whole tree visits in the order of the text.
    pub(super) fn default_nettypes(&self) -> Vec<(usize, ast::DefaultNettype)> {
        let mut changes = Vec::new();
        for node in self.tree {
            match node {
                sv::RefNode::DefaultNettypeCompilerDirective(directive) => {
                    let (symbol, _, value) = &directive.nodes;
                    let kind = match self.keyword(&value.nodes.0) {
                        "none" => ast::DefaultNettype::None,
                        name => ast::DefaultNettype::Net(net_kind(name).unwrap_or(ast::NetKind::Wire)),
                    };
                    changes.push((symbol.nodes.0.offset, kind));
                }
                sv::RefNode::ResetallCompilerDirective(directive) => {
                    changes.push((directive.nodes.0.nodes.0.offset, ast::DefaultNettype::Net(ast::NetKind::Wire)));
                }
                _ => {}
            }
        }
        changes
    }

    /// The default net type in force at an offset of the preprocessed text.
    pub(super) fn default_nettype_at(&self, offset: usize) -> ast::DefaultNettype {
        let before = self.nettypes.partition_point(|(at, _)| *at < offset);
        match before.checked_sub(1) {
            Some(last) => self.nettypes[last].1,
            None => ast::DefaultNettype::Net(ast::NetKind::Wire),
        }
    }
}

/// The net type of a keyword of IEEE 1800-2017 clause 6.7.
pub(super) fn net_kind(name: &str) -> Option<ast::NetKind> {
    Some(match name {
        "wire" => ast::NetKind::Wire,
        "tri" => ast::NetKind::Tri,
        "wand" => ast::NetKind::Wand,
        "triand" => ast::NetKind::Triand,
        "wor" => ast::NetKind::Wor,
        "trior" => ast::NetKind::Trior,
        "tri0" => ast::NetKind::Tri0,
        "tri1" => ast::NetKind::Tri1,
        "trireg" => ast::NetKind::Trireg,
        "supply0" => ast::NetKind::Supply0,
        "supply1" => ast::NetKind::Supply1,
        "uwire" => ast::NetKind::Uwire,
        _ => return None,
    })
}
