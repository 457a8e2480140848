//! Small cones: every transition of every source is simulated, so that what was not seen is proven clean.

use super::cone::{Cone, Op};
use super::decide::{Answer, KindSet, Measure};
use super::parity::Region;
use super::simulate::{self, BATCH, Lanes, Response};
use super::witness::{self, Lane};
use super::{Method, Options};

/// Enumerating more words than this, over all nodes and sources, takes longer than proving.
const MOST_WORK: usize = 1 << 27;

/// Whether enumeration is allowed and worth it.
pub(super) fn fits(measure: &Measure, options: &Options) -> bool {
    if measure.frees > options.exhaustive_sources || measure.frees > 24 {
        return false;
    }
    let words = (1usize << measure.frees).div_ceil(64);
    words.saturating_mul(measure.nodes).saturating_mul(measure.frees.max(1)) <= MOST_WORK
}

/// Decides the one root of `cone` against all its sources, and says whether any transition had to be simulated.
pub(super) fn enumerate(cone: &Cone, options: &Options) -> (Method, Vec<Answer>) {
    let mut answers = Vec::new();
    let Some(&root) = cone.roots.first() else { return (Method::Structure, answers) };
    let live = vec![true; cone.len()];
    // Which free node, its region, and the kinds already seen.
    let mut open: Vec<(usize, Region, KindSet)> = Vec::new();
    for (at, &free) in cone.frees.iter().enumerate() {
        if cone.ops[free as usize] == (Op::Free { changes: true }) {
            let region = Region::new(cone, free as usize, &live);
            if region.suspect(root.node()).is_some() {
                open.push((at, region, KindSet::default()));
            }
        }
    }
    let method = if open.is_empty() { Method::Structure } else { Method::Enumeration };
    let mut anywhere = KindSet::default();
    let mut values: Vec<Lanes> = vec![simulate::NONE; cone.len()];
    let mut response = Response::default();
    for batch in 0..(1usize << cone.frees.len()).div_ceil(BATCH) {
        if open.is_empty() {
            break;
        }
        for (at, &free) in cone.frees.iter().enumerate() {
            values[free as usize] = column(at, batch);
        }
        simulate::values(cone, 0..cone.len(), &mut values);
        for (at, region, seen) in &mut open {
            // Each transition is simulated from the side where the source is 0, where that is known for whole batches.
            if *at >= BATCH_BITS && batch >> (*at - BATCH_BITS) & 1 == 1 {
                continue;
            }
            let Some(position) = region.suspect(root.node()) else { continue };
            simulate::respond(cone, region, &values, &mut response);
            let (i, f, h) = (&values[root.node()], &response.f[position], &response.h[position]);
            for (kind, lanes) in witness::shown(root, i, f, h) {
                if seen.contains(kind) || (options.one_per_kind && anywhere.contains(kind)) {
                    continue;
                }
                if let Some(lane) = simulate::first(&lanes) {
                    seen.insert(kind);
                    anywhere.insert(kind);
                    let lane = Lane { cone, region, values: &values, response: &response, lane };
                    let source = cone.origin[region.nodes[0] as usize];
                    answers.push(Answer { root: 0, source, kind, result: Ok(lane.witness(root)) });
                }
            }
        }
        let known = if options.one_per_kind { anywhere } else { KindSet::default() };
        open.retain(|(_, _, seen)| seen.union(known) != KindSet::ALL);
    }
    (method, answers)
}

/// How many free nodes vary within a batch.
const BATCH_BITS: usize = BATCH.trailing_zeros() as usize;

/// The values of the free node number `at` in a batch: bit `at` of each transition's number.
fn column(at: usize, batch: usize) -> Lanes {
    const WITHIN: [u64; 6] = [
        0xaaaa_aaaa_aaaa_aaaa,
        0xcccc_cccc_cccc_cccc,
        0xf0f0_f0f0_f0f0_f0f0,
        0xff00_ff00_ff00_ff00,
        0xffff_0000_ffff_0000,
        0xffff_ffff_0000_0000,
    ];
    std::array::from_fn(|word| match WITHIN.get(at) {
        Some(&pattern) => pattern,
        None => {
            let number = (batch * BATCH + word * 64) >> at & 1;
            (number as u64).wrapping_neg()
        }
    })
}
