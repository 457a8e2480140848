//! The state that all parts of elaboration share, and the words they use to say that something failed.
//! An [`Outcome`] that is an error has not been reported yet: whoever handles it decides what becomes opaque, and
//! reports it once.

use std::collections::{BTreeMap, HashMap, HashSet};
use std::rc::Rc;

use super::bind::Bind;
use super::bits::{Bit, Guarded};
use super::drivers::{Driver, Pending};
use super::effort::Effort;
use super::environment::Environment;
use super::hierarchy::Work;
use super::library::Library;
use super::ports::PortInfo;
use super::scope::{Lazy, Scope, ScopeId};
use super::statement::Point;
use super::types::Type;
use super::{Design, Misuse, Request};
use crate::cells::Cells;
use crate::define_id;
use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{GraphBuilder, InstanceId, NetId, NodeId, PortId, Site};
use crate::source::{Given, Span};
use crate::syntax::ast::{self, NetKind};

/// A result whose error nobody has reported yet.
pub(super) type Outcome<T> = Result<T, Box<Diagnostic>>;

/// The text is wrong, or exceeds a limit: that part of the design could not be elaborated.
pub(super) fn wrong(message: impl Into<String>, at: Span) -> Box<Diagnostic> {
    Box::new(Diagnostic::new(Kind::Incomplete, "elaboration", message, Some(at)))
}

/// The text may be right, but we do not support it.
pub(super) fn unsupported(construct: impl Into<String>, at: Span) -> Box<Diagnostic> {
    let construct = construct.into();
    let message = format!("not supported: {construct}");
    Box::new(Diagnostic::new(Kind::Unsupported, construct, message, Some(at)))
}

define_id!(VariableId, "v", "A declared net or variable, or a local variable of a function.");

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Storage {
    Net(NetKind),
    Variable,
    /// Lives only in the process or function that is being executed.
    Local,
    /// A variable of a package or of the compilation unit, which has no wires.
    Package,
    /// Too large to be laid out bit by bit.
    Memory,
}

/// A declared net or variable.
#[derive(Debug)]
pub(super) struct Variable {
    /// With the labels of the named blocks it stands in.
    pub name: String,
    pub ty: Rc<Type>,
    pub instance: InstanceId,
    pub span: Span,
    pub storage: Storage,
    pub net: Option<NetId>,
    /// The wire of each bit, least significant first; empty for locals and memories.
    pub wires: Vec<NodeId>,
    pub is_port: bool,
    /// The values of an initialiser or of `initial` blocks.
    pub init: Option<Vec<Bit>>,
}

/// Everything that elaboration knows.
pub(super) struct Elaborator<'a> {
    pub builder: GraphBuilder,
    pub guarded: Vec<Guarded>,
    pub library: Library<'a>,
    pub cells: &'a Cells,
    /// Instances of modelled cells so far, by module.
    pub cells_used: BTreeMap<String, usize>,
    pub scopes: Vec<Scope<'a>>,
    pub lazies: Vec<(ScopeId, Lazy<'a>)>,
    pub variables: Vec<Variable>,
    /// The scope of all compilation units.
    pub unit: ScopeId,
    pub packages: HashMap<String, ScopeId>,
    /// Top modules by name.
    pub tops: Vec<(String, ScopeId)>,
    /// What is left to do once all instances exist.
    pub works: Vec<Work<'a>>,
    /// The scope in which names are looked up.
    pub here: ScopeId,
    /// The instance to which new nodes belong.
    pub instance: InstanceId,
    pub environment: Environment,
    /// Conditions whose value is assumed while a process is executed for one state of its asynchronous controls.
    pub assumed: HashMap<NodeId, bool>,
    /// Nets whose value is known while a process is executed for one state of the signals in its edge list.
    pub forced: HashMap<NodeId, bool>,
    pub drivers: HashMap<NodeId, Vec<Driver>>,
    pub pending: Vec<Pending>,
    /// Pairs of wires that are one net: inout ports and bidirectional switches.
    pub aliases: Vec<(NodeId, NodeId)>,
    /// External pulses of top-level inout ports.
    pub external: HashMap<NodeId, NodeId>,
    pub pulls: HashMap<NodeId, bool>,
    pub diagnostics: Vec<Diagnostic>,
    /// Values that the user set for parameters of the tops.
    pub given: &'a [Given],
    pub misuse: Vec<Misuse>,
    pub skipped: BTreeMap<String, usize>,
    /// `defparam` values by full hierarchical name.
    pub overrides: HashMap<String, super::scope::Constant>,
    /// Named nets made for pins that have no name of their own.
    pub pin_names: HashMap<NodeId, NodeId>,
    pub pin_labels: HashSet<(InstanceId, String)>,
    /// Scopes of the blocks with declarations in the process that is being executed.
    pub block_scopes: HashMap<(*const ast::Stmt, ScopeId), ScopeId>,
    pub functions: HashMap<(*const ast::Function, ScopeId), Rc<super::calls::Frame>>,
    pub udps: HashMap<String, Rc<super::udp::UdpModel>>,
    pub opaque_memories: Vec<String>,
    pub modules_elaborated: HashSet<String>,
    pub modules_failed: HashSet<String>,
    pub instance_count: usize,
    pub depth: usize,
    /// Set once a limit on the size of the design was hit; nothing more is built then.
    pub exhausted: bool,
    /// Statements and loop passes executed since the last process or constant began.
    pub steps: usize,
    /// How much the text may still make.
    pub effort: Effort,
    pub call_depth: usize,
    /// What jumps can leave, the innermost last.
    pub points: Vec<Point>,
    /// The result variables of the functions that are being executed.
    pub results: Vec<Option<VariableId>>,
    /// Whether a failing statement ends the execution instead of making what it assigns opaque.
    pub strict: bool,
    /// Statements that have been counted as skipped.
    pub counted: HashSet<*const ast::Stmt>,
    /// The ports of each module instance.
    pub ports: HashMap<ScopeId, Rc<Vec<PortInfo<'a>>>>,
    /// Wires inside modules that drive the outside through output ports.
    pub port_wires: HashSet<NodeId>,
    /// Wires that processes drive.
    pub pending_wires: HashSet<NodeId>,
    /// Nodes that black boxes and primitives use, beside what drives wires and cells.
    pub used: Vec<NodeId>,
    /// Modules declared inside others, by the scope of the instance they stand in.
    pub nested: HashMap<ScopeId, HashMap<&'a str, &'a ast::Module>>,
    pub binds: Vec<Bind<'a>>,
    /// The scopes of labelled blocks of processes, made before anything is executed so that they can be named.
    pub named_blocks: HashMap<(*const ast::Stmt, ScopeId), ScopeId>,
    /// The iterators of array methods that are being worked out, with the index of the element.
    pub iterators: HashMap<VariableId, i64>,
    /// Which of an array of instances is being elaborated.
    pub slot: Option<super::hierarchy::Slot>,
    /// Variables that functions assign which are called outside of processes.
    pub side_effects: Vec<VariableId>,
    /// Variables that get values from what is left out as simulation, each with what that is.
    pub simulated: Vec<(VariableId, &'static str)>,
    /// The nets that are ports of the tops.
    pub port_nets: HashMap<NetId, PortId>,
    /// Variables of interfaces at the top whose direction shows only when all drivers are known.
    pub undirected: Vec<(VariableId, InstanceId, String)>,
}

impl<'a> Elaborator<'a> {
    /// Elaborates everything. See [`super::elaborate`].
    pub fn run(units: &'a [ast::Unit], request: &'a Request) -> (Design, Vec<Diagnostic>) {
        let mut diagnostics = Vec::new();
        let library = Library::new(units, &mut diagnostics);
        let tops = library.tops(&request.tops, &mut diagnostics);
        let mut this = Self::new(library, diagnostics, request);
        this.effort = Effort::new(units);
        this.check_given(&request.given, &tops.tops);
        for unit in units {
            let outcome = this.declare_all(this.unit, &unit.items, Storage::Package);
            this.survive(outcome);
            this.count_skipped(unit);
        }
        this.outer_items(units, &tops.tops);
        for name in &tops.tops {
            if let Some(&module) = this.library.modules.get(name.as_str()) {
                this.top(module);
            }
        }
        this.unused_binds();
        this.do_works();
        this.direct_interface_ports();
        this.report_left_out();
        this.make_cells();
        this.resolve_drivers();
        let parameters = this.parameters_in_force();
        let mut diagnostics = this.diagnostics;
        let mut seen = HashSet::new();
        diagnostics.retain(|diagnostic| seen.insert(diagnostic.clone()));
        let failed = this.modules_failed;
        let design = Design {
            graph: this.builder.freeze(),
            tops: tops.tops,
            parameters,
            modules_elaborated: this.modules_elaborated.difference(&failed).count(),
            modules_failed: failed.len(),
            benches_left_out: tops.benches,
            skipped: this.skipped,
            opaque_memories: this.opaque_memories,
            cells: this.cells_used,
            misuse: this.misuse,
        };
        (design, diagnostics)
    }

    fn new(library: Library<'a>, diagnostics: Vec<Diagnostic>, request: &'a Request) -> Self {
        let unit = Scope {
            parent: None,
            outer: None,
            instance: InstanceId::new(0),
            name: "$unit".to_string(),
            prefix: String::new(),
            names: HashMap::new(),
            wildcards: Vec::new(),
            hidden: HashSet::new(),
            exports: Vec::new(),
            exports_all: false,
            is_modport: false,
            nettype: ast::DefaultNettype::None,
            module: None,
            is_module: false,
        };
        Self {
            builder: GraphBuilder::new(),
            guarded: Vec::new(),
            library,
            cells: &request.cells,
            cells_used: BTreeMap::new(),
            scopes: vec![unit],
            lazies: Vec::new(),
            variables: Vec::new(),
            unit: ScopeId::new(0),
            packages: HashMap::new(),
            tops: Vec::new(),
            works: Vec::new(),
            here: ScopeId::new(0),
            instance: InstanceId::new(0),
            environment: Environment::default(),
            assumed: HashMap::new(),
            forced: HashMap::new(),
            drivers: HashMap::new(),
            pending: Vec::new(),
            aliases: Vec::new(),
            external: HashMap::new(),
            pulls: HashMap::new(),
            diagnostics,
            given: &request.given,
            misuse: Vec::new(),
            skipped: BTreeMap::new(),
            overrides: HashMap::new(),
            pin_names: HashMap::new(),
            pin_labels: HashSet::new(),
            block_scopes: HashMap::new(),
            functions: HashMap::new(),
            udps: HashMap::new(),
            opaque_memories: Vec::new(),
            modules_elaborated: HashSet::new(),
            modules_failed: HashSet::new(),
            instance_count: 0,
            depth: 0,
            exhausted: false,
            steps: 0,
            effort: Effort::default(),
            call_depth: 0,
            points: Vec::new(),
            results: Vec::new(),
            strict: true,
            counted: HashSet::new(),
            ports: HashMap::new(),
            port_wires: HashSet::new(),
            pending_wires: HashSet::new(),
            used: Vec::new(),
            nested: HashMap::new(),
            binds: Vec::new(),
            named_blocks: HashMap::new(),
            iterators: HashMap::new(),
            slot: None,
            side_effects: Vec::new(),
            simulated: Vec::new(),
            port_nets: HashMap::new(),
            undirected: Vec::new(),
        }
    }

    /// Does the collected work; black boxes last, when it is known what else drives their nets.
    fn do_works(&mut self) {
        let works = std::mem::take(&mut self.works);
        let (boxes, works): (Vec<Work<'a>>, Vec<Work<'a>>) =
            works.into_iter().partition(|work| matches!(work, Work::BlackBox(_)));
        for work in &works {
            if self.exhausted {
                return;
            }
            self.work(work);
        }
        for pending in &self.pending {
            if let Some(&wire) = self.variables[pending.variable.index()].wires.get(pending.offset) {
                self.pending_wires.insert(wire);
            }
        }
        for work in &boxes {
            self.work(work);
        }
    }

    pub fn variable(&self, id: VariableId) -> &Variable {
        &self.variables[id.index()]
    }

    pub fn add_variable(&mut self, variable: Variable) -> VariableId {
        self.variables.push(variable);
        VariableId::new(self.variables.len() - 1)
    }

    /// A variable of a function or of a loop header.
    pub fn add_local(&mut self, name: &str, ty: Rc<Type>, span: Span, storage: Storage) -> VariableId {
        let instance = self.instance;
        self.add_variable(Variable {
            name: name.to_string(),
            ty,
            instance,
            span,
            storage,
            net: None,
            wires: Vec::new(),
            is_port: false,
            init: None,
        })
    }

    pub fn site(&self, span: Span) -> Site {
        Site { instance: self.instance, span: Some(span) }
    }

    pub fn report(&mut self, diagnostic: Diagnostic) {
        self.diagnostics.push(diagnostic);
    }

    /// Reports a failure and goes on without the result.
    pub fn survive<T>(&mut self, outcome: Outcome<T>) -> Option<T> {
        match outcome {
            Ok(value) => Some(value),
            Err(diagnostic) => {
                self.report(*diagnostic);
                None
            }
        }
    }

    pub fn skip(&mut self, what: &str) {
        *self.skipped.entry(what.to_string()).or_insert(0) += 1;
    }
}
