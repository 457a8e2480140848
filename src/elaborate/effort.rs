//! How much work the text may make. A few characters can ask for millions of gates, and that is seldom meant: `a * b` of
//! two vectors of 65,536 bits, a loop around a wide assignment. Every piece of text (an assignment, a process, a
//! declaration, a copy of one by a generate loop or an instance) draws what it makes from one pool, which grows with the
//! length of the text. What is refused is reported and opaque; nothing small that stands in the text once is refused.
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
const POOL: usize = 1_000_000;
/// What each byte of its text adds.
const BY_BYTE: usize = 32;
/// A piece that is no copy may always make so many.
const ALWAYS: usize = 512;
/// Inputs of gates that take as much work as one more gate.
const INPUTS: usize = 8;
/// Bits of constants that are worked on count like one gate.
const CONSTANT_BITS: usize = 64;

/// What is left of the pool, and the piece that draws from it now.
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
    /// The work in the graph when it began.
    start: usize,
    allowed: usize,
    exhausted: bool,
}

impl Effort {
    pub fn new(units: &[ast::Unit]) -> Self {
        let modules = units.iter().flat_map(|unit| &unit.modules);
        let bytes: usize = modules.map(|module| module.span.end.saturating_sub(module.span.start) as usize).sum();
        Self { left: POOL.saturating_add(bytes.saturating_mul(BY_BYTE)), ..Self::default() }
    }

    /// What a piece may make.
    fn allowance(&mut self, at: Option<Span>) -> usize {
        let is_copy = at.is_some_and(|at| !self.seen.insert(at));
        if is_copy { self.left } else { self.left.max(ALWAYS) }
    }
}

impl<'a> Elaborator<'a> {
    /// Begins a piece of work.
    pub fn begin_piece(&mut self, work: &Work<'a>) {
        let allowed = self.effort.allowance(work.span());
        self.effort.constants = 0;
        self.effort.current = Some(Piece { start: self.made(), allowed, exhausted: false });
    }

    /// Draws what the piece of work has made.
    pub fn end_piece(&mut self) {
        if let Some(piece) = self.effort.current.take() {
            let made = self.made() - piece.start + self.effort.constants / CONSTANT_BITS;
            self.effort.left = self.effort.left.saturating_sub(made);
        }
    }

    /// The work that is in the graph.
    fn made(&self) -> usize {
        self.builder.len() + self.builder.links() / INPUTS
    }

    /// Draws a net or variable of so many bits.
    pub fn draw_net(&mut self, bits: usize, at: Span) -> Outcome<()> {
        let allowed = self.effort.allowance(Some(at));
        if bits > allowed {
            return Err(too_much(at));
        }
        self.effort.left = self.effort.left.saturating_sub(bits);
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
            Some(piece) => (self.made() - piece.start, piece.allowed),
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
