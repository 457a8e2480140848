//! The solver's part of the decision for one source: whatever simulation did not show is either proven impossible or
//! found by a model, and every model is simulated again, slightly perturbed, because a transition that is hazardous to
//! one root tends to be near one that is hazardous to another.

use super::HazardKind;
use super::Undecided;
use super::cone::{Cone, Op};
use super::decide::KindSet;
use super::encode::Encoder;
use super::parity::Region;
use super::search::{Found, Search, Subject, noise};
use super::simulate::{self, Lanes, Response};
use super::solver::{Answer, Batsat, Literal, Solver};
use super::symbolic::Symbolic;

/// Each kind by the values of the root before and after; the source rises.
const ENDS: [(HazardKind, &[(bool, bool)]); 3] = [
    (HazardKind::Static0, &[(false, false)]),
    (HazardKind::Static1, &[(true, true)]),
    (HazardKind::Dynamic, &[(false, true), (true, false)]),
];

/// Effort that all sources of one decision share, in conflicts times the nodes encoded when they happen; a conflict in
/// a large cone costs as many steps. About half a minute of one core.
const EFFORT: u64 = 400_000_000;

/// What a source may spend at least, so that small cones get their full budget among however many sources.
const LEAST_EFFORT: u64 = 4_000_000;

/// What is tried for each question even when the effort of its source is spent.
const LEAST_CONFLICTS: u64 = 20;

/// What one of `subjects` sources may spend. It depends on nothing that happens meanwhile, for the sake of equal results
/// on any number of threads.
pub(super) fn effort(subjects: usize) -> u64 {
    (EFFORT / subjects.max(1) as u64).max(LEAST_EFFORT)
}

/// Asks the solver every open question of a source, for at most about `effort`; see [`effort`].
pub(super) fn prove(search: &Search, subject: &mut Subject, mut effort: u64) -> Vec<Found> {
    let cone = search.cone;
    let region = Region::new(cone, subject.source, &search.live);
    let mut found = Vec::new();
    let mut open: Vec<(usize, HazardKind)> = Vec::new();
    let mut replay: Option<Replay> = None;
    let mut encoder: Option<Encoder<Batsat>> = None;
    for index in 0..subject.questions.len() {
        let root = subject.questions[index].root;
        let edge = cone.roots[root];
        if search.settled(&subject.questions[index]) == KindSet::ALL || region.suspect(edge.node()).is_none() {
            continue;
        }
        // Clauses of other cones slow the solver down: it starts afresh when most of what it holds is foreign.
        let mut current = match encoder.take() {
            Some(encoder) if encoder.size <= 2 * search.measures[root].nodes => encoder,
            _ => Encoder::new(cone, &region),
        };
        let wave = current.root(edge);
        let encoder = encoder.insert(current);
        let Some(hazard) = wave.h else { continue };

        let mut ask = |encoder: &mut Encoder<Batsat>, assumptions: &[Literal], subject: &mut Subject| {
            let size = encoder.size.max(1) as u64;
            let before = encoder.clauses.solver.conflicts();
            let most = (effort / size).max(LEAST_CONFLICTS).min(search.options.conflicts);
            let answer = encoder.clauses.solver.solve(assumptions, most);
            effort = effort.saturating_sub((encoder.clauses.solver.conflicts() - before).saturating_mul(size));
            match answer {
                Answer::Unsatisfiable => encoder.forbid(assumptions),
                Answer::Open => {}
                Answer::Satisfiable => {
                    let replay = replay.get_or_insert_with(|| Replay::new(search, subject));
                    replay.model(cone, &region, encoder);
                    search.harvest(&region, &replay.values, &replay.response, &mut subject.questions, &mut found);
                }
            }
            answer
        };
        if search.settled(&subject.questions[index]).is_empty() {
            match ask(encoder, &[hazard], subject) {
                Answer::Unsatisfiable => continue,
                Answer::Satisfiable => {}
                Answer::Open => {
                    open.extend(ENDS.iter().map(|&(kind, _)| (index, kind)));
                    continue;
                }
            }
        }
        for (kind, ends) in ENDS {
            for &(before, after) in ends {
                if search.settled(&subject.questions[index]).contains(kind) {
                    break;
                }
                // A model that the simulation does not confirm would be a defect of the encoding; it decides nothing.
                if ask(encoder, &assumptions(wave, hazard, before, after), subject) != Answer::Unsatisfiable {
                    open.push((index, kind));
                }
            }
        }
    }
    open.sort_unstable();
    open.dedup();
    for (index, kind) in open {
        let question = &subject.questions[index];
        if !search.settled(question).contains(kind) {
            found.push((question.root, kind, Err(Undecided::Budget)));
        }
    }
    found
}

fn assumptions(wave: Symbolic, hazard: Literal, before: bool, after: bool) -> [Literal; 3] {
    [hazard, wave.i.inverted_if(!before), wave.f.inverted_if(!after)]
}

/// Models of the solver, simulated.
struct Replay {
    /// Everything the roots in question depend on, ascending.
    members: Vec<u32>,
    values: Vec<Lanes>,
    response: Response,
    source: usize,
    models: u64,
}

impl Replay {
    fn new(search: &Search, subject: &Subject) -> Self {
        let cone = search.cone;
        let roots = subject.questions.iter().map(|question| cone.roots[question.root].node());
        Self {
            members: cone.closure(roots, |_| true),
            values: vec![simulate::NONE; cone.len()],
            response: Response::default(),
            source: subject.source,
            models: 0,
        }
    }

    /// Lane 0 is the model itself; the others differ in one of eight free nodes.
    fn model(&mut self, cone: &Cone, region: &Region, encoder: &Encoder<Batsat>) {
        self.models += 1;
        for &member in &self.members {
            let node = member as usize;
            if !matches!(cone.ops[node], Op::Free { .. }) {
                continue;
            }
            let seed = u64::from(member) << 24 | self.models << 2;
            let [a, b, c] = [1, 2, 3].map(|part| noise(!(seed | part)));
            let model = encoder.free(node).map(|literal| encoder.clauses.solver.value(literal));
            self.values[node] = match model {
                _ if node == self.source => simulate::NONE,
                None => a,
                Some(value) => {
                    let mut flips: Lanes = std::array::from_fn(|word| a[word] & b[word] & c[word]);
                    flips[0] &= !1;
                    flips.map(|flip| flip ^ (value as u64).wrapping_neg())
                }
            };
        }
        simulate::values(cone, self.members.iter().map(|&member| member as usize), &mut self.values);
        simulate::respond(cone, region, &self.values, &mut self.response);
    }
}
