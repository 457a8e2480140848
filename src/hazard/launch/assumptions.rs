//! What the designer declares about signals, as plain data over nodes: by settings or by comments in the design. Each
//! assumption leaves out states or moves and so can turn a hazard into "clean"; who declared it, and whether it was
//! checked or taken on trust, is the business of whoever reads the declarations.

use crate::graph::NodeId;

/// See the module documentation. Nodes may be sources, gates or the wires of declared nets.
#[derive(Clone, PartialEq, Eq, Default, Debug)]
pub struct Assumptions {
    /// Never change; their values are arbitrary.
    pub fixed: Vec<NodeId>,
    /// Of each group exactly one node is 1 in every settled state.
    pub one_hot: Vec<Vec<NodeId>>,
    /// Of each group at most one node is 1 in every settled state.
    pub exclusive: Vec<Vec<NodeId>>,
    /// Of each group at most one node changes in a launch.
    pub one_bit: Vec<Vec<NodeId>>,
}

impl Assumptions {
    pub fn is_empty(&self) -> bool {
        self.fixed.is_empty() && self.one_hot.is_empty() && self.exclusive.is_empty() && self.one_bit.is_empty()
    }
}
