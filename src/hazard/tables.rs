//! User-defined primitives in the form the algebra needs: the function, and the promises. A row promises its result
//! when the table gives that result for every combination of 0 and 1 that fits the row, `x` and `?` standing for
//! either: then no change among the entries it leaves open can show at the output. Combinations without a row count as
//! 0 and promise nothing.

use super::wave::Wave;
use crate::graph::{Symbol, Table};

/// Tables wider than this promise nothing beyond rows that are free of `x`; the standard demands ten inputs.
const WIDEST: usize = 16;

/// What a promising row asks of one input.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(crate) enum Need {
    /// A clean constant of this value.
    Value(bool),
    /// A clean constant.
    Still,
    Nothing,
}

/// See the module documentation.
#[derive(Clone, Debug)]
pub(crate) struct Promises {
    /// Rows that give a value for combinations of 0 and 1, first match first.
    pub(crate) function: Vec<(Vec<Need>, bool)>,
    /// Rows that promise.
    pub(super) rows: Vec<(Vec<Need>, bool)>,
}

impl Promises {
    pub(crate) fn new(table: &Table) -> Self {
        let result = |symbol: Symbol| match symbol {
            Symbol::Zero => Some(false),
            Symbol::One => Some(true),
            _ => None,
        };
        let needs = |row: &[Symbol]| -> Vec<Need> {
            row.iter()
                .map(|symbol| match symbol {
                    Symbol::Zero => Need::Value(false),
                    Symbol::One => Need::Value(true),
                    Symbol::Binary => Need::Still,
                    Symbol::X | Symbol::Any => Need::Nothing,
                })
                .collect()
        };
        let mut promises = Self { function: Vec::new(), rows: Vec::new() };
        for (row, output) in &table.rows {
            if let (Some(value), false) = (result(*output), row.contains(&Symbol::X)) {
                promises.function.push((needs(row), value));
            }
        }
        for (row, output) in &table.rows {
            if let Some(value) = result(*output) {
                let needs = needs(row);
                if promises.keeps(&needs, value) {
                    promises.rows.push((needs, value));
                }
            }
        }
        promises
    }

    /// Whether every combination that fits gives `value`.
    fn keeps(&self, needs: &[Need], value: bool) -> bool {
        let open: Vec<usize> = (0..needs.len()).filter(|&at| !matches!(needs[at], Need::Value(_))).collect();
        if open.len() > WIDEST {
            return false;
        }
        let mut point: Vec<bool> = needs.iter().map(|need| *need == Need::Value(true)).collect();
        (0..1usize << open.len()).all(|combination| {
            for (bit, &at) in open.iter().enumerate() {
                point[at] = combination >> bit & 1 == 1;
            }
            self.value(&point) == Some(value)
        })
    }

    /// Whether every combination of 0 and 1 has a row.
    pub(super) fn is_total(&self) -> bool {
        let width = self.function.first().map_or(0, |(needs, _)| needs.len());
        (1..=WIDEST).contains(&width)
            && (0..1usize << width).all(|combination| {
                let point: Vec<bool> = (0..width).map(|at| combination >> at & 1 == 1).collect();
                self.value(&point).is_some()
            })
    }

    /// The function; `None` for a combination without a row.
    pub(crate) fn value(&self, point: &[bool]) -> Option<bool> {
        let fits = |needs: &[Need]| {
            needs.len() == point.len()
                && needs.iter().zip(point).all(|(need, &bit)| !matches!(need, Need::Value(value) if *value != bit))
        };
        self.function.iter().find(|(needs, _)| fits(needs)).map(|&(_, value)| value)
    }

    pub(crate) fn wave(&self, inputs: &[Wave]) -> Wave {
        let point = |of: fn(&Wave) -> bool| -> Vec<bool> { inputs.iter().map(of).collect() };
        let (before, after) = (self.value(&point(|wave| wave.i)), self.value(&point(|wave| wave.f)));
        let (i, f) = (before.unwrap_or(false), after.unwrap_or(false));
        let promised = self.rows.iter().any(|(needs, _)| {
            needs.iter().zip(inputs).all(|(need, wave)| match need {
                Need::Value(value) => wave.holds(*value),
                Need::Still => !wave.moves(),
                Need::Nothing => true,
            })
        });
        let moving = inputs.iter().filter(|wave| wave.moves()).count();
        let clean = inputs.iter().all(|wave| !wave.h);
        let single = moving == 1 && clean && i != f && before.is_some() && after.is_some();
        Wave { i, f, h: moving > 0 && !promised && !single }
    }
}
