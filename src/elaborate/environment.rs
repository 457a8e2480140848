//! The values of variables while a process or function is executed symbolically: a stack of layers, one more for each
//! branch whose condition is not known. Leaving a branch merges its layer into the one below. Only variables that a branch
//! assigned are in its layer, so that no selector is made for what it left alone.

use std::collections::{BTreeMap, BTreeSet};

use super::bits::Bit;
use super::context::{Elaborator, Storage, VariableId};
use crate::graph::{NodeId, Site};

/// A variable and whether the value is that of nonblocking assignments, which is seen by nobody until the end.
pub(super) type Key = (VariableId, bool);

pub(super) type Layer = BTreeMap<Key, Vec<Bit>>;

/// What a variable is before the process assigns it.
#[derive(Clone, Copy, PartialEq, Eq, Default, Debug)]
pub(super) enum Mode {
    /// Not assigned yet; reading sees the net.
    #[default]
    Level,
    /// The value of the flip-flop.
    Edge,
    /// An `initial` block: unknown.
    Initial,
}

#[derive(Default, Debug)]
pub(super) struct Environment {
    pub layers: Vec<Layer>,
    pub mode: Mode,
}

impl Environment {
    pub fn new(mode: Mode) -> Self {
        Self { layers: vec![Layer::new()], mode }
    }

    pub fn find(&self, key: Key) -> Option<&Vec<Bit>> {
        self.layers.iter().rev().find_map(|layer| layer.get(&key))
    }

    pub fn push(&mut self) {
        self.layers.push(Layer::new());
    }

    pub fn pop(&mut self) -> Layer {
        self.layers.pop().unwrap_or_default()
    }

    fn top(&mut self) -> &mut Layer {
        if self.layers.is_empty() {
            self.layers.push(Layer::new());
        }
        let last = self.layers.len() - 1;
        &mut self.layers[last]
    }

    pub fn set(&mut self, key: Key, bits: Vec<Bit>) {
        self.top().insert(key, bits);
    }

    /// Forgets a local variable whose block or function has ended.
    pub fn forget(&mut self, variable: VariableId) {
        self.top().remove(&(variable, false));
    }
}

impl Elaborator<'_> {
    /// The value of a variable before anything assigned it.
    pub fn base_value(&self, id: VariableId) -> Vec<Bit> {
        let variable = self.variable(id);
        let width = variable.ty.width;
        let start = if variable.ty.two_state { Bit::Zero } else { Bit::X };
        match (variable.storage, self.environment.mode) {
            (Storage::Local, _) => vec![start; width],
            (Storage::Memory, _) => Vec::new(),
            (_, Mode::Initial) => variable.init.clone().unwrap_or_else(|| vec![start; width]),
            (_, Mode::Edge) => variable.wires.iter().map(|&wire| Bit::Node(wire)).collect(),
            (_, Mode::Level) => vec![Bit::Held; width],
        }
    }

    /// Changes the value of a variable in the current layer.
    pub fn update<T>(&mut self, key: Key, change: impl FnOnce(&mut Self, &mut Vec<Bit>) -> T) -> T {
        let mut bits = match self.environment.top().remove(&key) {
            Some(bits) => bits,
            None => match self.environment.find(key) {
                Some(bits) => bits.clone(),
                None => self.base_value(key.0),
            },
        };
        let result = change(self, &mut bits);
        self.environment.set(key, bits);
        result
    }

    /// `width` bits of a variable from offset `low` on, as seen by an expression.
    pub fn read_variable(&mut self, id: VariableId, low: usize, width: usize, site: Site) -> Vec<Bit> {
        let variable = &self.variables[id.index()];
        if let Some(bits) = self.environment.find((id, false)) {
            let bits = bits[low..low + width].to_vec();
            if !bits.iter().any(|bit| matches!(bit, Bit::Held | Bit::Partial(_))) {
                return bits;
            }
            return bits.iter().enumerate().map(|(at, &bit)| self.seen(id, low + at, bit, site)).collect();
        }
        match variable.storage {
            Storage::Local => self.base_value(id)[low..low + width].to_vec(),
            Storage::Variable if self.environment.mode == Mode::Initial => {
                self.base_value(id)[low..low + width].to_vec()
            }
            _ => variable.wires[low..low + width].iter().map(|&wire| self.net_bit(wire)).collect(),
        }
    }

    /// A net as an expression reads it.
    fn net_bit(&self, wire: NodeId) -> Bit {
        self.forced.get(&wire).map_or(Bit::Node(wire), |&value| value.into())
    }

    /// A bit as an expression sees it: where the process has not assigned it, the net itself.
    fn seen(&mut self, id: VariableId, at: usize, bit: Bit, site: Site) -> Bit {
        let (enable, data, _) = self.split(bit, true);
        if enable == Bit::One {
            return bit;
        }
        let wire = self.variable(id).wires.get(at).map_or(Bit::X, |&wire| self.net_bit(wire));
        match data {
            Some(data) => self.select(enable, data, wire, site),
            None => wire,
        }
    }

    /// Joins two branches under a condition into the current layer. With `full`, the condition is promised to hold
    /// whenever what it leaves unassigned matters.
    pub fn merge(&mut self, condition: Bit, then: Layer, otherwise: Layer, full: bool, site: Site) {
        let keys: BTreeSet<Key> = then.keys().chain(otherwise.keys()).copied().collect();
        for key in keys {
            let old = match self.environment.find(key) {
                Some(bits) => bits.clone(),
                None => self.base_value(key.0),
            };
            let a = then.get(&key).unwrap_or(&old);
            let b = otherwise.get(&key).unwrap_or(&old);
            let mut merged = Vec::with_capacity(old.len());
            for ((&a, &b), &old) in a.iter().zip(b).zip(&old) {
                merged.push(if a == old && b == old {
                    old
                } else if full && b == Bit::Held {
                    a
                } else {
                    self.select(condition, a, b, site)
                });
            }
            self.environment.set(key, merged);
        }
    }

    /// Joins mutually exclusive branches by one AND-OR level. `matches` are their conditions, which cover everything;
    /// with `full` the last branch is the missing default, whose unassigned bits do not matter.
    pub fn merge_exclusive(&mut self, matches: &[Bit], branches: &[Layer], full: bool, site: Site) {
        let keys: BTreeSet<Key> = branches.iter().flat_map(|branch| branch.keys()).copied().collect();
        for key in keys {
            let old = match self.environment.find(key) {
                Some(bits) => bits.clone(),
                None => self.base_value(key.0),
            };
            let values: Vec<&Vec<Bit>> = branches.iter().map(|branch| branch.get(&key).unwrap_or(&old)).collect();
            let mut merged = Vec::with_capacity(old.len());
            for (at, &old) in old.iter().enumerate() {
                if values.iter().all(|bits| bits[at] == old) {
                    merged.push(old);
                    continue;
                }
                let count = if full && old == Bit::Held { values.len() - 1 } else { values.len() };
                let terms: Vec<(Bit, Bit)> =
                    matches.iter().zip(&values).take(count).map(|(&condition, bits)| (condition, bits[at])).collect();
                merged.push(self.choose(&terms, site));
            }
            self.environment.set(key, merged);
        }
    }

    /// One AND-OR level: the OR of (condition AND value), the conditions being mutually exclusive and complete.
    pub fn choose(&mut self, terms: &[(Bit, Bit)], site: Site) -> Bit {
        if let Some(&(_, first)) = terms.first()
            && !matches!(first, Bit::Node(_))
            && terms.iter().all(|&(_, value)| value == first)
        {
            return first;
        }
        let held = terms.iter().any(|(_, value)| matches!(value, Bit::Held | Bit::Partial(_)));
        let undriven = terms.iter().any(|(_, value)| matches!(value, Bit::Z | Bit::Tri(_)));
        if !held && !undriven {
            return self.and_or(terms, site);
        }
        let mut enables = Vec::new();
        let mut data_terms = Vec::new();
        let mut from = None;
        for &(condition, value) in terms {
            let (enable, data, place) = self.split(value, held);
            from = from.or(place);
            enables.push(self.and(&[condition, enable], site));
            data_terms.extend(data.map(|data| (condition, data)));
        }
        let enable = self.or(&enables, site);
        let data = self.and_or(&data_terms, site);
        self.guard(enable, data, from.or(site.span), held)
    }

    fn and_or(&mut self, terms: &[(Bit, Bit)], site: Site) -> Bit {
        let products: Vec<Bit> = terms.iter().map(|&(condition, value)| self.and(&[condition, value], site)).collect();
        self.or(&products, site)
    }
}
