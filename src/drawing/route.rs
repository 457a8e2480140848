//! The wires between two layers: each net that has to go up or down gets a vertical track of its own, and the tracks are
//! ordered so that no horizontal piece of one net lies on that of another (the constraints of channel routing: Hashimoto
//! and Stevens, Design Automation Workshop 1971).

use std::collections::BTreeMap;

/// Between two tracks.
const TRACK: i32 = 9;

/// A net between two layers.
#[derive(Clone, Debug)]
pub(super) struct Net {
    pub(super) from: usize,
    /// Where it leaves the left layer.
    pub(super) y: i32,
    /// Where it enters the right one.
    pub(super) ends: Vec<i32>,
}

impl Net {
    fn turns(&self) -> bool {
        self.ends.iter().any(|&end| end != self.y)
    }

    /// Whether the two would lie on each other with the track of `self` at the left of `other`'s: at the height at which
    /// `other` comes to its track, `self` leaves its own for the right layer.
    fn must_not_be_left_of(&self, other: &Net) -> bool {
        self.ends.contains(&other.y) && self.y != other.y
    }
}

/// The space between two layers.
#[derive(Clone, Debug)]
pub(super) struct Column {
    /// The x of each net's track, by its place.
    pub(super) tracks: BTreeMap<usize, i32>,
    /// Where the nets branch.
    pub(super) dots: Vec<(i32, i32)>,
    /// The left border of the right layer.
    pub(super) end: i32,
}

/// Tracks from `start` on.
pub(super) fn column(nets: &[Net], start: i32) -> Column {
    let mut turning: Vec<&Net> = nets.iter().filter(|net| net.turns()).collect();
    // Those that go down from the lowest on, then those that go up from the highest on: so they do not cross each other.
    turning.sort_by_key(|net| {
        let down = net.ends.iter().sum::<i32>() >= net.y * net.ends.len() as i32;
        if down { (0, -net.y) } else { (1, net.y) }
    });
    let mut ordered: Vec<&Net> = Vec::with_capacity(turning.len());
    while !turning.is_empty() {
        let free = |candidate: &Net| {
            turning.iter().all(|other| std::ptr::eq(*other, candidate) || !candidate.must_not_be_left_of(other))
        };
        let next = turning.iter().position(|candidate| free(candidate)).unwrap_or(0);
        ordered.push(turning.remove(next));
    }
    let mut tracks = BTreeMap::new();
    let mut dots = Vec::new();
    let mut x = start;
    for net in &ordered {
        x += TRACK;
        tracks.insert(net.from, x);
        let heights: Vec<i32> = net.ends.iter().copied().chain([net.y]).collect();
        let (top, bottom) = (heights.iter().min().copied(), heights.iter().max().copied());
        let mut branches: Vec<i32> = heights.clone();
        branches.sort_unstable();
        branches.dedup();
        for y in branches {
            let sides = usize::from(net.y == y) + usize::from(net.ends.contains(&y));
            let verticals =
                usize::from(top.is_some_and(|top| y > top)) + usize::from(bottom.is_some_and(|low| y < low));
            if sides + verticals > 2 {
                dots.push((x, y));
            }
        }
    }
    Column { tracks, dots, end: x + TRACK + 8 }
}
