//! Sets of points of a Boolean space, one bit each: truth tables, and the sets of input values that show a behaviour.
//! Point `p` gives variable `v` the value of bit `v` of `p`. A cube is a point and a mask of freed variables.

/// See the module documentation.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Points {
    variables: usize,
    words: Vec<u64>,
}

impl Points {
    /// From words of 64 points each; superfluous bits of a small space are cleared.
    pub(super) fn new(variables: usize, mut words: Vec<u64>) -> Self {
        if variables < 6 {
            for word in &mut words {
                *word &= (1u64 << (1usize << variables)) - 1;
            }
        }
        Self { variables, words }
    }

    /// The number of words that a space of this many variables takes.
    pub(super) fn blocks(variables: usize) -> usize {
        1usize << variables.saturating_sub(6)
    }

    pub(super) fn from_fn(variables: usize, contains: impl Fn(usize) -> bool) -> Self {
        let mut words = vec![0u64; Self::blocks(variables)];
        for point in 0..1usize << variables {
            words[point >> 6] |= u64::from(contains(point)) << (point & 63);
        }
        Self { variables, words }
    }

    pub(super) fn contains(&self, point: usize) -> bool {
        self.words[point >> 6] >> (point & 63) & 1 == 1
    }

    /// The members in order.
    pub(super) fn iter(&self) -> impl Iterator<Item = usize> {
        (0..1usize << self.variables).filter(|&point| self.contains(point))
    }

    /// The largest cube inside the set that holds `point` and frees at least `freed`, as the mask of its freed
    /// variables; of equally large ones the smallest mask. `None` when not even `freed` can be freed.
    pub(super) fn largest_cube(&self, point: usize, freed: usize) -> Option<usize> {
        // Entry m starts as "point ^ m is inside" and ends as "so is every point ^ s for s within m".
        let mut inside = Self::from_fn(self.variables, |mask| self.contains(point ^ mask)).words;
        for variable in 0..self.variables {
            if variable < 6 {
                let upper = super::rails::counting(variable, 0);
                for word in &mut inside {
                    *word &= *word << (1usize << variable) | !upper;
                }
            } else {
                let bit = 1usize << (variable - 6);
                for index in (0..inside.len()).filter(|index| index & bit != 0) {
                    inside[index] &= inside[index ^ bit];
                }
            }
        }
        let cubes = Self { variables: self.variables, words: inside };
        let mut best: Option<usize> = None;
        for mask in cubes.iter().filter(|mask| mask & freed == freed) {
            if best.is_none_or(|best| mask.count_ones() > best.count_ones()) {
                best = Some(mask);
            }
        }
        best
    }
}

#[cfg(test)]
mod tests {
    use super::Points;

    /// Against a plain enumeration of all cubes, on pseudo-random sets of up to eight variables.
    #[test]
    fn the_largest_cube_is_the_largest() {
        let mut state = 7u64;
        for round in 0..200 {
            let variables = 1 + round % 8;
            let points = Points::from_fn(variables, |point| {
                let mixed = (point as u64 + 1).wrapping_mul(state.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1);
                mixed >> 61 > 1
            });
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1);
            let point = (state >> 33) as usize % (1 << variables);
            let freed = (state >> 20) as usize % variables;
            let cube = |mask: usize| {
                (0..1usize << variables).all(|other| (other ^ point) & !mask != 0 || points.contains(other))
            };
            let widest = (0..1usize << variables)
                .filter(|mask| mask >> freed & 1 == 1 && cube(*mask))
                .map(usize::count_ones)
                .max();
            let found = points.largest_cube(point, 1 << freed);
            assert_eq!(found.map(usize::count_ones), widest);
            assert!(found.is_none_or(|mask| cube(mask) && mask >> freed & 1 == 1));
        }
    }
}
