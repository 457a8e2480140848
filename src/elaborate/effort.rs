//! How much work the text may make. A few characters can ask for millions of gates, and that is seldom meant: `a * b` of
//! two vectors of 65,536 bits, a loop around a wide assignment. Every piece of text (an assignment, a process, a
//! declaration) draws what it makes from one pool, which grows with the length of the text. Copies of a piece, from
//! generate loops and instances, draw a part only, since large designs are made of copies; what bounds those is
//! [`super::declare::NODE_LIMIT`]. What is refused is reported and opaque, and what is small is never refused.
//!
//! Invariant: the pool depends on the sources alone, so the same input is always refused at the same place.

use std::collections::HashSet;

use super::constant::STEP_LIMIT;
use super::context::{Elaborator, Outcome};
use super::hierarchy::Work;
use crate::diagnostic::{Diagnostic, Kind};
use crate::source::Span;
use crate::syntax::ast;

/// What any design may make, in gates and nets. One takes some 5 microseconds on its way through all stages.
const POOL: usize = 1_600_000;
/// What each byte of its text adds.
const BY_BYTE: usize = 16;
/// A copy of a piece draws this part of what it makes.
const COPY_SHARE: usize = 8;
/// A piece may always make so many.
const ALWAYS: usize = 512;
/// Bits of constants that are worked on count like one gate.
const CONSTANT_BITS: usize = 64;

/// The pool, and the piece that draws from it now.
#[derive(Debug, Default)]
pub(super) struct Effort {
    left: usize,
    /// The pieces that have drawn.
    seen: HashSet<Span>,
    current: Option<Piece>,
    /// Work on constants that is not yet drawn.
    constants: usize,
}

#[derive(Clone, Copy, Debug)]
struct Piece {
    /// Nodes of the graph when it began.
    start: usize,
    allowed: usize,
    share: usize,
    exhausted: bool,
}

impl Effort {
    pub fn new(units: &[ast::Unit]) -> Self {
        let modules = units.iter().flat_map(|unit| &unit.modules);
        let bytes: usize = modules.map(|module| module.span.end.saturating_sub(module.span.start) as usize).sum();
        Self { left: POOL.saturating_add(bytes.saturating_mul(BY_BYTE)), ..Self::default() }
    }

    /// What a piece may make, and which part of it is drawn.
    fn allowance(&mut self, at: Option<Span>) -> (usize, usize) {
        let share = if at.is_some_and(|at| !self.seen.insert(at)) { COPY_SHARE } else { 1 };
        (self.left.saturating_mul(share).max(ALWAYS), share)
    }
}

impl<'a> Elaborator<'a> {
    /// Begins a piece of work.
    pub fn begin_piece(&mut self, work: &Work<'a>) {
        let at = match work {
            Work::Assign { target, .. } => Some(target.span),
            Work::NetInit { value, .. } | Work::VariableInit { value, .. } => Some(value.span),
            Work::Process { span, .. } => Some(*span),
            Work::Gate { instance, .. } => Some(instance.span),
            _ => None,
        };
        let (allowed, share) = self.effort.allowance(at);
        self.effort.constants = 0;
        self.effort.current = Some(Piece { start: self.builder.len(), allowed, share, exhausted: false });
    }

    /// Draws what the piece of work has made.
    pub fn end_piece(&mut self) {
        if let Some(piece) = self.effort.current.take() {
            let made = self.builder.len() - piece.start + self.effort.constants / CONSTANT_BITS;
            self.effort.left = self.effort.left.saturating_sub(made / piece.share);
        }
    }

    /// Draws a net or variable of so many bits.
    pub fn draw_net(&mut self, bits: usize, at: Span) -> Outcome<()> {
        let (allowed, share) = self.effort.allowance(Some(at));
        if bits > allowed {
            return Err(too_much(at));
        }
        self.effort.left = self.effort.left.saturating_sub(bits / share);
        Ok(())
    }

    /// An error when the piece would pass what it may make by `ahead` more gates, or by work on a value of `bits` bits.
    pub fn afford(&mut self, bits: usize, ahead: usize, span: Span) -> Outcome<()> {
        // Narrow values are as cheap as the steps that are counted anyway.
        if bits > ALWAYS {
            self.effort.constants += bits;
        }
        let constants = self.effort.constants / CONSTANT_BITS;
        let (made, allowed) = match &self.effort.current {
            Some(piece) => (self.builder.len() - piece.start, piece.allowed),
            None => (0, self.effort.left.max(ALWAYS)),
        };
        if made.saturating_add(constants).saturating_add(ahead) <= allowed {
            return Ok(());
        }
        if let Some(piece) = &mut self.effort.current {
            piece.exhausted = true;
        }
        Err(too_much(span))
    }

    /// Whether the process at hand has gone beyond a limit, so that its other statements cannot be worked on either.
    pub fn is_spent(&self) -> bool {
        self.steps > STEP_LIMIT || self.effort.current.is_some_and(|piece| piece.exhausted)
    }
}

fn too_much(span: Span) -> Box<Diagnostic> {
    let message = "what is written here takes more gates and nets than a design with so little text is given";
    let help = "is it as wide as it was meant to be? Otherwise declare its module as a black box, or split it";
    Box::new(Diagnostic::new(Kind::Incomplete, "size", message, Some(span)).with_help(help))
}
