//! The satisfiability solver behind one small trait, so that it can be exchanged: whatever implements it must pass the
//! conformance test at the end of this file.

use std::cell::Cell;
use std::ops::Not;

use batsat::{Callbacks, ClauseKind, SolverInterface, SolverOpts, lbool};

/// A variable of a solver or its complement.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Literal(u32);

impl Literal {
    pub(super) fn inverted_if(self, inverted: bool) -> Self {
        Self(self.0 ^ u32::from(inverted))
    }
}

impl Not for Literal {
    type Output = Self;

    fn not(self) -> Self {
        self.inverted_if(true)
    }
}

/// What the solver found out.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Answer {
    Satisfiable,
    Unsatisfiable,
    /// The budget ran out.
    Open,
}

/// An incremental solver.
pub(super) trait Solver: Default {
    /// A fresh variable.
    fn variable(&mut self) -> Literal;

    /// Adds a clause for good.
    fn clause(&mut self, literals: &[Literal]);

    /// Looks for a model in which all assumptions hold, for at most about `conflicts` conflicts.
    fn solve(&mut self, assumptions: &[Literal], conflicts: u64) -> Answer;

    /// The conflicts of all questions so far.
    fn conflicts(&self) -> u64;

    /// The value in the last model; variables that do not matter there are `false`.
    fn value(&self, literal: Literal) -> bool;

    /// A variable that is 1 when all pins are (Tseitin's clauses, 1968).
    fn conjunction(&mut self, pins: &[Literal]) -> Literal {
        let all = self.variable();
        let mut clause = vec![all];
        for &pin in pins {
            self.clause(&[!all, pin]);
            clause.push(!pin);
        }
        self.clause(&clause);
        all
    }

    /// A variable that is 1 when exactly one of the two is.
    fn difference(&mut self, a: Literal, b: Literal) -> Literal {
        let sum = self.variable();
        self.clause(&[!sum, a, b]);
        self.clause(&[!sum, !a, !b]);
        self.clause(&[sum, !a, b]);
        self.clause(&[sum, a, !b]);
        sum
    }
}

/// Counts conflicts by the clauses learnt from them.
#[derive(Default)]
struct Budget {
    conflicts: Cell<u64>,
    limit: Cell<u64>,
}

impl Callbacks for Budget {
    fn on_new_clause(&mut self, _clause: &[batsat::Lit], kind: ClauseKind) {
        if kind == ClauseKind::Learnt {
            self.conflicts.set(self.conflicts.get() + 1);
        }
    }

    fn stop(&self) -> bool {
        self.conflicts.get() >= self.limit.get()
    }
}

/// The `batsat` crate.
pub(super) struct Batsat {
    solver: batsat::Solver<Budget>,
    variables: Vec<batsat::Var>,
}

impl Default for Batsat {
    fn default() -> Self {
        Self { solver: batsat::Solver::new(SolverOpts::default(), Budget::default()), variables: Vec::new() }
    }
}

impl Batsat {
    fn outer(&self, literal: Literal) -> batsat::Lit {
        batsat::Lit::new(self.variables[(literal.0 >> 1) as usize], literal.0 & 1 == 0)
    }
}

impl Solver for Batsat {
    fn variable(&mut self) -> Literal {
        self.variables.push(self.solver.new_var_default());
        Literal((self.variables.len() as u32 - 1) << 1)
    }

    fn clause(&mut self, literals: &[Literal]) {
        // An unsatisfiable clause set is reported by the next `solve`.
        let mut clause: Vec<batsat::Lit> = literals.iter().map(|&literal| self.outer(literal)).collect();
        self.solver.add_clause_reuse(&mut clause);
    }

    fn solve(&mut self, assumptions: &[Literal], conflicts: u64) -> Answer {
        let budget = self.solver.cb();
        budget.limit.set(budget.conflicts.get().saturating_add(conflicts.max(1)));
        let assumptions: Vec<batsat::Lit> = assumptions.iter().map(|&literal| self.outer(literal)).collect();
        let answer = self.solver.solve_limited(&assumptions);
        if answer == lbool::TRUE {
            Answer::Satisfiable
        } else if answer == lbool::FALSE {
            Answer::Unsatisfiable
        } else {
            Answer::Open
        }
    }

    fn conflicts(&self) -> u64 {
        self.solver.cb().conflicts.get()
    }

    fn value(&self, literal: Literal) -> bool {
        self.solver.value_lit(self.outer(literal)) == lbool::TRUE
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What the encoding relies on, for any implementation.
    fn conforms<S: Solver>() {
        let mut solver = S::default();
        let [a, b, c] = std::array::from_fn(|_| solver.variable());
        assert_eq!(solver.solve(&[], 100), Answer::Satisfiable);
        solver.clause(&[a, b]);
        solver.clause(&[!a, c]);
        assert_eq!(solver.solve(&[!b], 100), Answer::Satisfiable);
        assert!(solver.value(a) && !solver.value(b) && solver.value(c) && solver.value(!b));
        assert_eq!(solver.solve(&[!b, !c], 100), Answer::Unsatisfiable);
        assert_eq!(solver.solve(&[!c], 100), Answer::Satisfiable, "assumptions are forgotten");
        let d = solver.variable();
        solver.clause(&[!d]);
        assert_eq!(solver.solve(&[d], 100), Answer::Unsatisfiable);
        assert_eq!(solver.solve(&[d, !d], 100), Answer::Unsatisfiable);
        solver.clause(&[!b]);
        solver.clause(&[!c]);
        assert_eq!(solver.solve(&[], 100), Answer::Unsatisfiable);
        assert_eq!(solver.solve(&[], 100), Answer::Unsatisfiable, "for good");
    }

    /// Eight pigeons in seven holes: far beyond ten conflicts, within reach without a tight limit.
    fn stops_in_time<S: Solver>() {
        let mut solver = S::default();
        let sits: Vec<Vec<Literal>> = (0..8).map(|_| (0..7).map(|_| solver.variable()).collect()).collect();
        for pigeon in &sits {
            solver.clause(pigeon);
        }
        for (index, first) in sits.iter().enumerate() {
            for second in &sits[..index] {
                for (&one, &other) in first.iter().zip(second) {
                    solver.clause(&[!one, !other]);
                }
            }
        }
        assert_eq!(solver.solve(&[], 10), Answer::Open);
        assert_eq!(solver.solve(&[], 10), Answer::Open, "each question has its own budget");
        assert!((20..100).contains(&solver.conflicts()), "conflicts of all questions: {}", solver.conflicts());
        assert_eq!(solver.solve(&[], 1_000_000), Answer::Unsatisfiable);
    }

    #[test]
    fn batsat_conforms() {
        conforms::<Batsat>();
        stops_in_time::<Batsat>();
    }
}
