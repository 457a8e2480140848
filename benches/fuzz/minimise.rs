//! Makes a failing input small: leaves out files, then ever smaller runs of lines, then of tokens, as long as the same
//! failure remains. After Zeller and Hildebrandt, "Simplifying and Isolating Failure-Inducing Input" (IEEE Trans. Software
//! Engineering 28, 2002), without the test of the complements, which costs more than it finds here.

use std::time::{Duration, Instant};

use crate::child::Handle;
use crate::corpus::Input;
use crate::mutate::tokens;
use crate::outcome::Failure;

/// The smallest input found within `budget`, time on the clock, that still fails like `failure`.
pub fn minimise(mut input: Input, failure: &Failure, budget: Duration, child: &mut Handle) -> Input {
    let end = Instant::now() + budget;
    let mut fails = |candidate: &Input| {
        Instant::now() < end && child.run(candidate).failure.is_some_and(|found| found.key() == failure.key())
    };
    let mut index = 0;
    while input.files.len() > 1 && index < input.files.len() {
        let mut fewer = input.clone();
        fewer.files.remove(index);
        if fails(&fewer) {
            input = fewer;
        } else {
            index += 1;
        }
    }
    for cut in [lines, tokens] {
        for file in 0..input.files.len() {
            // What was left out may allow more to be left out.
            loop {
                let before = input.size();
                shrink(&mut input, file, cut, &mut fails);
                if input.size() == before {
                    break;
                }
            }
        }
    }
    input
}

/// Leaves out runs of pieces of one file, halving their length.
fn shrink(input: &mut Input, file: usize, cut: fn(&[u8]) -> Vec<&[u8]>, fails: &mut impl FnMut(&Input) -> bool) {
    let text = input.files[file].1.clone();
    let mut pieces = cut(&text);
    let mut length = pieces.len().div_ceil(2);
    while length > 0 {
        let mut at = 0;
        while at < pieces.len() {
            let stop = (at + length).min(pieces.len());
            let rest = [&pieces[..at], &pieces[stop..]].concat();
            let mut candidate = input.clone();
            candidate.files[file].1 = rest.concat();
            if fails(&candidate) {
                *input = candidate;
                pieces = rest;
            } else {
                at = stop;
            }
        }
        length /= 2;
    }
}

fn lines(text: &[u8]) -> Vec<&[u8]> {
    text.split_inclusive(|&byte| byte == b'\n').collect()
}
