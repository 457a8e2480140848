//! How many nets were looked at, by kind of pin. Each net that was asked about falls into exactly one of the three
//! verdicts, so the three always add up to the number of nets: an undecided net can never pass as a clean one.

use std::collections::BTreeSet;

use serde::{Deserialize, Serialize};

use super::PinKind;
use super::checked::{CheckedNet, Ground, NetState};
use crate::graph::{CellKind, Graph, NodeId};

/// How many bits are stored, by kind of cell. A bit that several clocks load is one bit.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
pub struct CellCount {
    pub flip_flops: usize,
    pub latches: usize,
}

impl CellCount {
    pub(super) fn of(graph: &Graph) -> Self {
        let bits = |wanted: fn(CellKind) -> bool| {
            let outputs = graph.cells.iter().filter(|cell| wanted(cell.kind)).map(|cell| cell.output);
            outputs.collect::<BTreeSet<NodeId>>().len()
        };
        Self {
            flip_flops: bits(|kind| matches!(kind, CellKind::FlipFlop { .. })),
            latches: bits(|kind| matches!(kind, CellKind::Latch { .. })),
        }
    }
}

/// The verdicts on the nets of one kind of pin.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
pub struct NetCount {
    pub nets: usize,
    pub clean: usize,
    /// At least one proven hazard, whatever else stayed open.
    pub hazard: usize,
    /// No proven hazard, but at least one open question.
    pub undecided: usize,
}

/// One [`NetCount`] per [`PinKind`].
#[derive(Clone, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
pub struct PinCoverage {
    counts: [NetCount; PinKind::ALL.len()],
    /// Questions (source against net, per kind of hazard) that nobody answered, also on nets with a proven hazard.
    pub open_questions: usize,
    /// Clean nets whose proof needs that only the states reachable from reset occur.
    pub clean_if_reached: usize,
}

impl PinCoverage {
    pub fn get(&self, kind: PinKind) -> NetCount {
        self.counts[kind as usize]
    }

    /// The counts in the order of [`PinKind::ALL`].
    pub fn values(&self) -> impl Iterator<Item = NetCount> + '_ {
        self.counts.iter().copied()
    }

    /// Everything together.
    pub fn total(&self) -> NetCount {
        self.values().fold(NetCount::default(), |sum, count| NetCount {
            nets: sum.nets + count.nets,
            clean: sum.clean + count.clean,
            hazard: sum.hazard + count.hazard,
            undecided: sum.undecided + count.undecided,
        })
    }

    /// Counts one net.
    pub(super) fn count(&mut self, net: &CheckedNet) {
        let count = &mut self.counts[net.pin.kind as usize];
        count.nets += 1;
        match net.state {
            NetState::Hazard => count.hazard += 1,
            NetState::Undecided(_) => count.undecided += 1,
            NetState::Clean(ground) => {
                count.clean += 1;
                self.clean_if_reached += usize::from(matches!(ground, Ground::Decided { reachable: true, .. }));
            }
        }
    }
}
