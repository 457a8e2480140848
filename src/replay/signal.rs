//! The waveform of a net in time: where it starts and when it changes. Times are whole units from the stimulus on.
//! Wires are pure delays (IEEE 1364 non-blocking assignments with an intra-assignment delay), gates take no time.

/// See the module documentation. Times ascend strictly.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Signal {
    pub(super) start: bool,
    pub(super) changes: Vec<u64>,
}

impl Signal {
    pub(super) fn constant(value: bool) -> Self {
        Self { start: value, changes: Vec::new() }
    }

    pub(super) fn first(&self) -> u64 {
        self.changes.first().copied().unwrap_or(0)
    }

    pub(super) fn last(&self) -> u64 {
        self.changes.last().copied().unwrap_or(0)
    }

    pub(super) fn end(&self) -> bool {
        self.start ^ (self.changes.len() % 2 == 1)
    }

    pub(super) fn inverted_if(&self, inverted: bool) -> Self {
        Self { start: self.start ^ inverted, changes: self.changes.clone() }
    }

    /// What assignments `(time, value)` leave when they are made in this order: of several at one time the last holds.
    pub(super) fn assigned(start: bool, mut assignments: Vec<(u64, bool)>) -> Self {
        assignments.sort_by_key(|&(time, _)| time);
        let mut signal = Self::constant(start);
        let mut index = 0;
        while index < assignments.len() {
            let time = assignments[index].0;
            while assignments.get(index + 1).is_some_and(|next| next.0 == time) {
                index += 1;
            }
            if assignments[index].1 != signal.end() {
                signal.changes.push(time);
            }
            index += 1;
        }
        signal
    }

    /// The values after each change, with their times.
    pub(super) fn values(&self) -> impl Iterator<Item = (u64, bool)> + '_ {
        self.changes.iter().enumerate().map(|(index, &time)| (time, self.start ^ (index % 2 == 0)))
    }

    /// Every change later by `delay`.
    pub(super) fn delayed(&self, delay: u64) -> Self {
        Self { start: self.start, changes: self.changes.iter().map(|time| time + delay).collect() }
    }

    /// The output of a gate without delay; changes at one time count as one.
    pub(super) fn combined(pins: &[Signal], function: impl Fn(&[bool]) -> bool) -> Self {
        let mut values: Vec<bool> = pins.iter().map(|pin| pin.start).collect();
        let mut result = Self::constant(function(&values));
        let mut events: Vec<(u64, usize)> =
            pins.iter().enumerate().flat_map(|(pin, signal)| signal.changes.iter().map(move |&at| (at, pin))).collect();
        events.sort_unstable();
        for (index, &(time, pin)) in events.iter().enumerate() {
            values[pin] = !values[pin];
            if events.get(index + 1).is_none_or(|next| next.0 != time) && function(&values) != result.end() {
                result.changes.push(time);
            }
        }
        result
    }
}
