//! Elaboration: from the syntax tree to the gate graph. One instance tree with all parameters, generate constructs and
//! types worked out, every bit of every net a wire of the graph, every process executed symbolically.
//! Nothing here stops at bad input: what is not supported or wrong becomes a diagnostic and an opaque part of the graph,
//! never a wrong one.
//!
//! First the instance tree is built and what the modules do is only collected; then, when every hierarchical name can be
//! resolved, the work is done; then the drivers of each wire are resolved and the cells are made.

mod bind;
mod bits;
pub mod blast;
mod calls;
mod case;
mod cells;
mod clashes;
mod constant;
mod context;
mod controls;
mod declare;
mod drivers;
mod effort;
mod environment;
mod expr;
mod gates;
mod generate;
mod given;
mod headers;
mod hierarchy;
mod interfaces;
mod library;
mod methods;
mod pattern;
mod place;
mod ports;
mod process;
mod scope;
mod simulation;
mod statement;
mod types;
pub mod udp;
pub mod value;

use std::collections::BTreeMap;

use crate::cells::Cells;
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{Graph, GraphBuilder};
use crate::source::Given;
use crate::syntax::ast;

pub use given::{Misuse, ParametersInForce};

/// Expressions nest as deep as the source; the stack of the elaborating thread must hold that. The sizes are tried in
/// order, in MiB, because a system with little address space refuses the larger ones.
const STACK_MIB: [usize; 3] = [1024, 512, 256];

/// What to elaborate.
#[derive(Clone, Debug, Default)]
pub struct Request {
    /// What is known about modules beyond their text.
    pub cells: Cells,
    /// Names of the top modules; empty means every module that nobody instantiates.
    pub tops: Vec<String>,
    /// Values for parameters of the tops; of two for one name the later holds.
    pub given: Vec<Given>,
}

/// The elaborated design.
#[derive(Debug)]
pub struct Design {
    pub graph: Graph,
    /// The top modules, in the order asked for or in source order.
    pub tops: Vec<String>,
    /// Parameters of the tops that were elaborated, with the values that hold.
    pub parameters: ParametersInForce,
    /// Distinct modules reached from a top that were elaborated.
    pub modules_elaborated: usize,
    /// Distinct modules reached from a top that became black boxes because they could not be elaborated.
    pub modules_failed: usize,
    /// Modules without ports that nobody instantiates, left out unless named as a top.
    pub benches_left_out: Vec<String>,
    /// How many constructs of each kind were passed over because they concern simulation only.
    pub skipped: BTreeMap<String, usize>,
    /// Hierarchical names of the memories above 65,536 bits that are opaque.
    pub opaque_memories: Vec<String>,
    /// Instances of library cells and of declared selectors and clock gates, by module.
    pub cells: BTreeMap<String, usize>,
    /// Mistakes in [`Request::given`]; the design is not what was asked for then.
    pub misuse: Vec<Misuse>,
}

/// Elaborates what is reached from the tops. See the module documentation.
pub fn elaborate(units: &[ast::Unit], request: &Request) -> (Design, Vec<Diagnostic>) {
    let mut problem = String::new();
    for mib in STACK_MIB {
        let outcome = std::thread::scope(|scope| {
            std::thread::Builder::new()
                .stack_size(mib << 20)
                .spawn_scoped(scope, || context::Elaborator::run(units, request))
                .map(|thread| thread.join())
        });
        match outcome {
            Ok(Ok(result)) => return result,
            Ok(Err(panic)) => std::panic::resume_unwind(panic),
            Err(error) => problem = error.to_string(),
        }
    }
    let message = format!("there is not enough memory for the elaborating thread: {problem}");
    (empty(request), vec![Diagnostic::new(Kind::Incomplete, "elaboration", message, None)])
}

fn empty(request: &Request) -> Design {
    Design {
        graph: GraphBuilder::new().freeze(),
        tops: request.tops.clone(),
        parameters: ParametersInForce::new(),
        modules_elaborated: 0,
        modules_failed: 0,
        benches_left_out: Vec::new(),
        skipped: BTreeMap::new(),
        opaque_memories: Vec::new(),
        cells: BTreeMap::new(),
        misuse: Vec::new(),
    }
}
