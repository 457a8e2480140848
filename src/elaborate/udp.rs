//! User-defined primitives.

use crate::diagnostic::Diagnostic;
use crate::graph::{GraphBuilder, NodeId, Site};
use crate::syntax::ast;

/// What a user-defined primitive is.
#[derive(Clone, Debug)]
pub struct UdpModel {}

impl UdpModel {
    /// Reads the table of `udp`, once per primitive.
    pub fn declare(udp: &ast::Udp, builder: &mut GraphBuilder) -> Result<Self, Diagnostic> {
        let _ = (udp, builder);
        Ok(Self {})
    }

    /// Makes an instance: the gates or the cell, and returns its output. `inputs` in port order (without the output).
    pub fn instantiate(&self, builder: &mut GraphBuilder, inputs: &[NodeId], site: Site) -> NodeId {
        let _ = inputs;
        builder.unknown(site)
    }
}
