//! Large cones, one source at a time over all roots it reaches: random simulation first, which finds most hazards and
//! proves nothing, then the solver. One incremental solver serves a source; its roots come by increasing size of their
//! cones, and every model is simulated again, slightly perturbed, over all roots that are still open.

use std::collections::{BTreeMap, BTreeSet};

use rayon::prelude::*;

use super::cone::{Cone, Op};
use super::decide::{Answer, KindSet, Measure};
use super::parity::Region;
use super::simulate::{self, BATCH, Lanes, Response};
use super::witness::{self, Lane};
use super::{HazardKind, Options, Undecided, Witness, prove};

/// How much memory the initial values of one pass over the patterns may take.
const PASS_BYTES: usize = 128 << 20;

/// How many sources are worked on between two looks at what was found, when one witness per kind is enough.
const ROUND: usize = 32;

/// A root a source may be hazardous to.
pub(super) struct Question {
    pub(super) root: usize,
    pub(super) seen: KindSet,
}

/// A source with open questions.
pub(super) struct Subject {
    pub(super) source: usize,
    pub(super) questions: Vec<Question>,
}

/// Root, kind, and what is known about it.
pub(super) type Found = (usize, HazardKind, Result<Witness, Undecided>);

/// Decides all roots of `cone` against all their sources. The roots that the parity filter did not settle come first.
pub(super) fn search(cone: &Cone, measures: &[Measure], options: &Options) -> (BTreeSet<usize>, Vec<Answer>) {
    let mut search = Search {
        cone,
        measures,
        options,
        roots_at: roots_at(cone),
        live: vec![true; cone.len()],
        known: vec![KindSet::default(); cone.roots.len()],
        answers: Vec::new(),
    };
    let sources = cone.frees.iter().map(|&free| free as usize);
    let sources: Vec<usize> = sources.filter(|&free| cone.ops[free] == Op::Free { changes: true }).collect();
    let mut subjects: Vec<Subject> = sources.par_iter().filter_map(|&source| search.subject(source)).collect();
    let suspect = subjects.iter().flat_map(|subject| subject.questions.iter().map(|question| question.root)).collect();
    search.simulate(&mut subjects);
    search.prove(&mut subjects);
    (suspect, search.answers)
}

fn roots_at(cone: &Cone) -> BTreeMap<usize, Vec<usize>> {
    let mut roots_at: BTreeMap<usize, Vec<usize>> = BTreeMap::new();
    for (index, root) in cone.roots.iter().enumerate() {
        roots_at.entry(root.node()).or_default().push(index);
    }
    roots_at
}

pub(super) struct Search<'a> {
    pub(super) cone: &'a Cone,
    pub(super) measures: &'a [Measure],
    pub(super) options: &'a Options,
    /// Root indices by node.
    roots_at: BTreeMap<usize, Vec<usize>>,
    /// Nodes that some root still of interest depends on.
    pub(super) live: Vec<bool>,
    /// Per root, with one witness per kind: the kinds that need no further witness.
    known: Vec<KindSet>,
    answers: Vec<Answer>,
}

impl Search<'_> {
    /// The parity filter.
    fn subject(&self, source: usize) -> Option<Subject> {
        let region = Region::new(self.cone, source, &self.live);
        let suspects = region.nodes.iter().zip(&region.may).filter(|&(_, &may)| may);
        let mut questions = Vec::new();
        for (&node, _) in suspects {
            for &root in self.roots_at.get(&(node as usize)).into_iter().flatten() {
                questions.push(Question { root, seen: KindSet::default() });
            }
        }
        (!questions.is_empty()).then_some(Subject { source, questions })
    }

    /// Runs `work` on all subjects and takes over what it found, in an order that does not depend on threads.
    fn each(&mut self, subjects: &mut [Subject], work: impl Fn(&Self, &mut Subject) -> Vec<Found> + Sync) {
        let round = if self.options.one_per_kind { ROUND } else { usize::MAX };
        for subjects in subjects.chunks_mut(round.min(subjects.len()).max(1)) {
            let this = &*self;
            let found: Vec<Vec<Found>> = subjects.par_iter_mut().map(|subject| work(this, subject)).collect();
            let mut closed = false;
            for (subject, found) in subjects.iter().zip(found) {
                for (root, kind, result) in found {
                    if self.options.one_per_kind {
                        if self.known[root].contains(kind) {
                            continue;
                        }
                        if result.is_ok() {
                            self.known[root].insert(kind);
                            closed |= self.known[root] == KindSet::ALL;
                        }
                    }
                    let source = self.cone.origin[subject.source];
                    self.answers.push(Answer { root, source, kind, result });
                }
            }
            if closed {
                self.revive();
            }
        }
    }

    /// Marks what the roots still of interest depend on.
    fn revive(&mut self) {
        self.live = vec![false; self.cone.len()];
        let roots = self.cone.roots.iter().zip(&self.known).filter(|&(_, &known)| known != KindSet::ALL);
        for node in self.cone.closure(roots.map(|(root, _)| root.node()), |_| true) {
            self.live[node as usize] = true;
        }
    }

    /// Random patterns, as many batches at a time as memory allows.
    fn simulate(&mut self, subjects: &mut Vec<Subject>) {
        let cone = self.cone;
        let batches = self.options.patterns.div_ceil(BATCH);
        let most = (PASS_BYTES / (cone.len().max(1) * size_of::<Lanes>())).max(1);
        let mut done = 0;
        while done < batches && !subjects.is_empty() {
            // The first batch finds most of what there is.
            let pass = if done == 0 && self.options.one_per_kind { 1 } else { most.min(batches - done) };
            let values: Vec<Vec<Lanes>> = (done..done + pass)
                .into_par_iter()
                .map(|batch| {
                    let mut values = vec![simulate::NONE; cone.len()];
                    for &free in &cone.frees {
                        // By place in the cone, so that logic elsewhere in the design does not change the witnesses.
                        let seed = u64::from(free) << 24 | batch as u64;
                        values[free as usize] = noise(seed);
                    }
                    simulate::values(cone, 0..cone.len(), &mut values);
                    values
                })
                .collect();
            self.each(subjects, |search, subject| search.simulate_one(subject, &values));
            self.drop_settled(subjects);
            done += pass;
        }
    }

    /// The kinds that need not be asked any more.
    pub(super) fn settled(&self, question: &Question) -> KindSet {
        question.seen.union(self.known[question.root])
    }

    fn drop_settled(&self, subjects: &mut Vec<Subject>) {
        for subject in subjects.iter_mut() {
            subject.questions.retain(|question| self.settled(question) != KindSet::ALL);
        }
        subjects.retain(|subject| !subject.questions.is_empty());
    }

    fn simulate_one(&self, subject: &mut Subject, batches: &[Vec<Lanes>]) -> Vec<Found> {
        let mut found = Vec::new();
        let region = Region::new(self.cone, subject.source, &self.live);
        let mut response = Response::default();
        for values in batches {
            let open = |question: &Question| self.settled(question) != KindSet::ALL;
            if !subject.questions.iter().any(open) {
                break;
            }
            simulate::respond(self.cone, &region, values, &mut response);
            self.harvest(&region, values, &response, &mut subject.questions, &mut found);
        }
        found
    }

    /// Takes every kind of hazard that a batch shows at a root where it was not seen before.
    pub(super) fn harvest(
        &self,
        region: &Region,
        values: &[Lanes],
        response: &Response,
        questions: &mut [Question],
        found: &mut Vec<Found>,
    ) {
        for question in questions {
            let root = self.cone.roots[question.root];
            let Some(position) = region.suspect(root.node()) else { continue };
            let h = &response.h[position];
            if simulate::first(h).is_none() {
                continue;
            }
            for (kind, lanes) in witness::shown(root, &values[root.node()], &response.f[position], h) {
                if self.settled(question).contains(kind) {
                    continue;
                }
                if let Some(lane) = simulate::first(&lanes) {
                    question.seen.insert(kind);
                    let lane = Lane { cone: self.cone, region, values, response, lane };
                    found.push((question.root, kind, Ok(lane.witness(root))));
                }
            }
        }
    }

    fn prove(&mut self, subjects: &mut Vec<Subject>) {
        self.drop_settled(subjects);
        let measures = self.measures;
        for subject in subjects.iter_mut() {
            subject.questions.sort_by_key(|question| (measures[question.root].nodes, question.root));
        }
        let effort = prove::effort(subjects.len());
        self.each(subjects, |search, subject| prove::prove(search, subject, effort));
        // What one source left open is settled when another has shown it.
        if self.options.one_per_kind {
            let known = std::mem::take(&mut self.known);
            self.answers.retain(|answer| answer.result.is_ok() || !known[answer.root].contains(answer.kind));
        }
    }
}

/// Reproducible noise (the finalizer of SplitMix64: Steele, Lea and Flood, OOPSLA 2014).
pub(super) fn noise(seed: u64) -> Lanes {
    let mut state = seed.wrapping_mul(0x2545_f491_4f6c_dd1d);
    std::array::from_fn(|_| {
        state = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut mixed = state;
        mixed = (mixed ^ (mixed >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        mixed = (mixed ^ (mixed >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        mixed ^ (mixed >> 31)
    })
}
