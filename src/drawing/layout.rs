//! Coordinates for symbols and wires: layers from left to right (the layered method of Sugiyama, Tagawa and Toda, IEEE
//! Transactions on Systems, Man, and Cybernetics 11, 1981). Each symbol stands as near to the pin as its readers allow;
//! wires that pass a layer keep a place of their own in it; the order within the layers is improved by barycentres; the
//! heights are weighted means under the spacing, solved exactly by pooling neighbours.
//!
//! Invariant: ids of links point at symbols, and links make no cycle.

use std::collections::BTreeMap;

use super::route::{self, Column};
use super::{Drawing, End, Pin, Shape, Symbol, Way, Wire};
use crate::graph::GateKind;

/// Between the borders of two neighbours in a layer.
const GAP: i32 = 18;
/// The same when one of them is a wire that passes.
const WIRE_GAP: i32 = 10;
/// Between two pins.
const PITCH: i32 = 20;
/// Around the drawing.
const MARGIN: i32 = 14;
/// Of one character of a label.
const CHARACTER: i32 = 7;
/// The small waveform at an output.
const GLYPH: i32 = 30;
/// Rounds of improvement.
const ROUNDS: usize = 12;
/// How much more a wire of a way wants to be straight.
const HEAVY: f64 = 12.0;

/// A wire before it has a place.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Link {
    pub(super) from: usize,
    pub(super) to: usize,
    pub(super) pin: usize,
    pub(super) way: Option<Way>,
}

/// What is to be laid out.
#[derive(Clone, Debug)]
pub(super) struct Sheet {
    pub(super) symbols: Vec<Symbol>,
    pub(super) links: Vec<Link>,
    pub(super) left_out: usize,
    pub(super) witnessed: bool,
    pub(super) story: String,
}

/// A symbol or a wire that passes, in a layer.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub(super) enum Place {
    Symbol(usize),
    /// The wire from this symbol passes.
    Pass(usize, usize),
}

/// From the output of a place to a place in the next layer, at so much below the middle of it.
#[derive(Clone, Copy, Debug)]
struct Hop {
    from: usize,
    to: usize,
    offset: i32,
    weight: f64,
}

struct Layout {
    symbols: Vec<Symbol>,
    links: Vec<Link>,
    places: Vec<Place>,
    layers: Vec<Vec<usize>>,
    hops: Vec<Hop>,
    /// The middle of each place.
    middle: Vec<i32>,
}

/// Gives everything its place.
pub(super) fn place(mut sheet: Sheet) -> Drawing {
    for symbol in &mut sheet.symbols {
        size(symbol);
    }
    let mut layout = Layout::new(sheet.symbols, sheet.links);
    layout.order();
    layout.heights();
    let (wires, dots, width, height) = layout.finish();
    Drawing {
        symbols: layout.symbols,
        wires,
        dots,
        width,
        height,
        left_out: sheet.left_out,
        witnessed: sheet.witnessed,
        story: sheet.story,
    }
}

fn text_width(label: &str) -> i32 {
    label.chars().count() as i32 * CHARACTER
}

/// Width, height and the places of the pins.
fn size(symbol: &mut Symbol) {
    let count = symbol.pins.len() as i32;
    let tall = (count * PITCH).max(2 * PITCH);
    let text = text_width(&symbol.label);
    (symbol.width, symbol.height) = match symbol.shape {
        Shape::Gate(GateKind::Not | GateKind::Buf) => (32, 26),
        Shape::Gate(_) => (46, tall),
        Shape::Mux => (34, 3 * PITCH + 4),
        Shape::Table | Shape::Operator => (text + 20, tall),
        Shape::Gap => (text + 20, 26),
        Shape::Constant | Shape::Unknown => (text.max(8) + 14, 20),
        Shape::FlipFlop | Shape::Latch | Shape::Memory | Shape::BlackBox => (text + 42, 26),
        Shape::Input | Shape::Feedback | Shape::Behind | Shape::Bundle => (text + 26, 20),
        Shape::End(End::Clock | End::Control | End::Enable) => (text + 40, 44),
        Shape::End(End::Feedback | End::Net) => (text + 30, 24),
    };
    let middle = symbol.height / 2;
    for (index, pin) in symbol.pins.iter_mut().enumerate() {
        pin.y = middle + (2 * index as i32 - (count - 1)) * PITCH / 2;
    }
}

/// Room to the right of a symbol, for what stands at its output.
fn reserve(symbol: &Symbol) -> i32 {
    match symbol.shape {
        Shape::End(_) => 0,
        Shape::Gate(_) | Shape::Mux => GLYPH.max(text_width(&symbol.label) + 6),
        _ => GLYPH,
    }
}

impl Layout {
    fn new(symbols: Vec<Symbol>, links: Vec<Link>) -> Self {
        let layer_of = layers(symbols.len(), &links);
        let last = layer_of.iter().copied().max().unwrap_or(0);
        let mut layout = Self {
            places: (0..symbols.len()).map(Place::Symbol).collect(),
            layers: vec![Vec::new(); last + 1],
            hops: Vec::new(),
            middle: Vec::new(),
            symbols,
            links,
        };
        for (index, &layer) in layer_of.iter().enumerate() {
            layout.layers[layer].push(index);
        }
        let mut passes: BTreeMap<(usize, usize), usize> = BTreeMap::new();
        let mut joined: BTreeMap<(usize, usize), usize> = BTreeMap::new();
        for link in layout.links.clone() {
            let weight = if link.way.is_some() { HEAVY } else { 1.0 };
            let mut from = link.from;
            for layer in layer_of[link.from] + 1..layer_of[link.to] {
                let pass = *passes.entry((link.from, layer)).or_insert_with(|| {
                    layout.places.push(Place::Pass(link.from, layer));
                    layout.layers[layer].push(layout.places.len() - 1);
                    layout.places.len() - 1
                });
                match joined.get(&(from, pass)) {
                    Some(&hop) => layout.hops[hop].weight = layout.hops[hop].weight.max(weight),
                    None => {
                        joined.insert((from, pass), layout.hops.len());
                        layout.hops.push(Hop { from, to: pass, offset: 0, weight });
                    }
                }
                from = pass;
            }
            let to = &layout.symbols[link.to];
            let offset = to.pins.get(link.pin).map_or(0, |pin| pin.y - to.height / 2);
            layout.hops.push(Hop { from, to: link.to, offset, weight });
        }
        layout
    }

    fn half(&self, place: usize) -> i32 {
        match self.places[place] {
            Place::Symbol(symbol) => self.symbols[symbol].height / 2,
            Place::Pass(..) => 0,
        }
    }

    /// The least distance of the middles of two neighbours.
    fn apart(&self, upper: usize, lower: usize) -> i32 {
        let passes = [upper, lower].iter().filter(|&&place| matches!(self.places[place], Place::Pass(..))).count();
        let gap = if passes > 0 { WIRE_GAP } else { GAP };
        self.half(upper) + gap + self.half(lower)
    }

    /// Few crossings: each layer by the mean place of what it is connected to, back and forth; the best order stays.
    fn order(&mut self) {
        self.initial_order();
        let mut best = (self.crossings(), self.layers.clone());
        for round in 0..ROUNDS {
            let forward = round % 2 == 1;
            let count = self.layers.len();
            for step in 1..count {
                let layer = if forward { step } else { count - 1 - step };
                self.by_barycentre(layer, forward);
            }
            let crossings = self.crossings();
            if crossings < best.0 {
                best = (crossings, self.layers.clone());
            }
        }
        self.layers = best.1;
    }

    /// From the end backwards in the order of the pins.
    fn initial_order(&mut self) {
        for layer in (0..self.layers.len().saturating_sub(1)).rev() {
            self.by_barycentre(layer, false);
        }
    }

    fn positions(&self) -> Vec<f64> {
        let mut positions = vec![0.0; self.places.len()];
        for layer in &self.layers {
            for (index, &place) in layer.iter().enumerate() {
                positions[place] = index as f64;
            }
        }
        positions
    }

    /// Where a hop ends within its layer: pins of one symbol are told apart.
    fn end_of(&self, hop: &Hop, positions: &[f64]) -> f64 {
        let half = f64::from(self.half(hop.to).max(1));
        positions[hop.to] + f64::from(hop.offset) / half * 0.4
    }

    fn by_barycentre(&mut self, layer: usize, forward: bool) {
        let positions = self.positions();
        let mut sums: BTreeMap<usize, (f64, f64)> = BTreeMap::new();
        for hop in &self.hops {
            let (place, at) = match forward {
                true => (hop.to, positions[hop.from]),
                false => (hop.from, self.end_of(hop, &positions)),
            };
            let sum = sums.entry(place).or_insert((0.0, 0.0));
            sum.0 += at;
            sum.1 += 1.0;
        }
        let centre = |place: usize| match sums.get(&place) {
            Some((sum, count)) => sum / count,
            None => positions[place],
        };
        let mut places = std::mem::take(&mut self.layers[layer]);
        places.sort_by(|&one, &other| centre(one).total_cmp(&centre(other)));
        self.layers[layer] = places;
    }

    fn crossings(&self) -> usize {
        let positions = self.positions();
        let mut layer_of = vec![0; self.places.len()];
        for (index, layer) in self.layers.iter().enumerate() {
            layer.iter().for_each(|&place| layer_of[place] = index);
        }
        let mut by_layer: Vec<Vec<(f64, f64)>> = vec![Vec::new(); self.layers.len()];
        for hop in &self.hops {
            by_layer[layer_of[hop.from]].push((positions[hop.from], self.end_of(hop, &positions)));
        }
        let crosses = |one: &(f64, f64), other: &(f64, f64)| (one.0 - other.0) * (one.1 - other.1) < 0.0;
        let count = |hops: &Vec<(f64, f64)>| {
            hops.iter()
                .enumerate()
                .map(|(at, one)| hops[..at].iter().filter(|other| crosses(one, other)).count())
                .sum::<usize>()
        };
        by_layer.iter().map(count).sum()
    }

    /// Heights: every place wants to be where its wires are straight.
    fn heights(&mut self) {
        let mut middle = vec![0.0; self.places.len()];
        for layer in &self.layers {
            let mut at = 0.0;
            for (index, &place) in layer.iter().enumerate() {
                if index > 0 {
                    at += f64::from(self.apart(layer[index - 1], place));
                }
                middle[place] = at;
            }
        }
        let count = self.layers.len();
        for round in 0..ROUNDS {
            let forward = round % 2 == 1;
            // The last rounds weigh both sides, so that no side pulls alone.
            let both = round + 4 >= ROUNDS;
            for step in 0..count {
                let layer = if forward { step } else { count - 1 - step };
                self.settle(layer, &mut middle, both || !forward, both || forward);
            }
        }
        self.middle = middle.iter().map(|middle| middle.round() as i32).collect();
        self.straighten();
        self.keep_apart();
        let top = (0..self.places.len()).map(|place| self.middle[place] - self.half(place)).min().unwrap_or(0);
        self.middle.iter_mut().for_each(|middle| *middle += MARGIN + 8 - top);
    }

    /// The weighted least squares of one layer under the spacing, by pooling adjacent violators.
    fn settle(&self, layer: usize, middle: &mut [f64], from_right: bool, from_left: bool) {
        let places = &self.layers[layer];
        let mut wanted: BTreeMap<usize, (f64, f64)> = BTreeMap::new();
        for hop in &self.hops {
            let mut want = |place: usize, at: f64| {
                let sum = wanted.entry(place).or_insert((0.0, 0.0));
                sum.0 += at * hop.weight;
                sum.1 += hop.weight;
            };
            let offset = f64::from(hop.offset);
            if from_right {
                want(hop.from, middle[hop.to] + offset);
            }
            if from_left {
                want(hop.to, middle[hop.from] - offset);
            }
        }
        let mut base = 0.0;
        let mut bases = Vec::with_capacity(places.len());
        // Blocks of (weighted sum, weight, members).
        let mut blocks: Vec<(f64, f64, usize)> = Vec::new();
        for (index, &place) in places.iter().enumerate() {
            if index > 0 {
                base += f64::from(self.apart(places[index - 1], place));
            }
            bases.push(base);
            let (want, weight) = match wanted.get(&place) {
                Some(&(sum, weight)) => (sum / weight, weight),
                None => (middle[place], 0.01),
            };
            blocks.push(((want - base) * weight, weight, 1));
            while let [.., upper, lower] = blocks.as_slice() {
                if upper.0 / upper.1 <= lower.0 / lower.1 {
                    break;
                }
                let joined = (upper.0 + lower.0, upper.1 + lower.1, upper.2 + lower.2);
                blocks.truncate(blocks.len() - 2);
                blocks.push(joined);
            }
        }
        let mut index = 0;
        for (sum, weight, members) in blocks {
            for _ in 0..members {
                middle[places[index]] = sum / weight + bases[index];
                index += 1;
            }
        }
    }

    /// Wires that are almost straight become straight where the neighbours allow it, those of the ways first.
    fn straighten(&mut self) {
        let mut neighbours: BTreeMap<usize, (Option<usize>, Option<usize>)> = BTreeMap::new();
        for layer in &self.layers {
            for (index, &place) in layer.iter().enumerate() {
                let above = index.checked_sub(1).map(|above| layer[above]);
                neighbours.insert(place, (above, layer.get(index + 1).copied()));
            }
        }
        let mut hops = self.hops.clone();
        hops.sort_by(|one, other| other.weight.total_cmp(&one.weight));
        let mut fixed = vec![false; self.places.len()];
        for hop in &hops {
            let off = self.middle[hop.to] + hop.offset - self.middle[hop.from];
            let moves = [(hop.from, self.middle[hop.from] + off), (hop.to, self.middle[hop.to] - off)];
            for (place, to) in moves {
                if off.abs() > 2 * PITCH || fixed[place] {
                    continue;
                }
                let (above, below) = neighbours.get(&place).copied().unwrap_or((None, None));
                let free_above = above.is_none_or(|above| to - self.middle[above] >= self.apart(above, place));
                let free_below = below.is_none_or(|below| self.middle[below] - to >= self.apart(place, below));
                if free_above && free_below {
                    self.middle[place] = to;
                    break;
                }
            }
            if self.middle[hop.to] + hop.offset == self.middle[hop.from] {
                fixed[hop.from] = true;
                fixed[hop.to] = true;
            }
        }
    }

    /// Rounding may have cost a pixel of the spacing.
    fn keep_apart(&mut self) {
        for layer in &self.layers {
            for pair in layer.windows(2) {
                let least = self.middle[pair[0]] + self.apart(pair[0], pair[1]);
                self.middle[pair[1]] = self.middle[pair[1]].max(least);
            }
        }
    }

    /// Columns, tracks and corners.
    fn finish(&mut self) -> (Vec<Wire>, Vec<(i32, i32)>, i32, i32) {
        let mut lefts: Vec<i32> = Vec::new();
        let mut rights: Vec<i32> = Vec::new();
        let mut columns: Vec<Column> = Vec::new();
        let mut x = MARGIN;
        for (index, layer) in self.layers.iter().enumerate() {
            let symbol = |place: &usize| match self.places[*place] {
                Place::Symbol(symbol) => Some(&self.symbols[symbol]),
                Place::Pass(..) => None,
            };
            let width = layer.iter().filter_map(symbol).map(|symbol| symbol.width).max().unwrap_or(0);
            let room = layer.iter().filter_map(symbol).map(reserve).max().unwrap_or(0);
            let last = index + 1 == self.layers.len();
            let nets: Vec<route::Net> = layer
                .iter()
                .map(|&place| route::Net {
                    from: place,
                    y: self.middle[place],
                    ends: (self.hops.iter().filter(|hop| hop.from == place))
                        .map(|hop| self.middle[hop.to] + hop.offset)
                        .collect(),
                })
                .filter(|net| !net.ends.is_empty())
                .collect();
            lefts.push(x);
            rights.push(x + width);
            let column = route::column(&nets, x + width + room);
            x = if last { x + width } else { column.end };
            columns.push(column);
        }
        let mut layer_of = vec![0; self.places.len()];
        for (index, layer) in self.layers.iter().enumerate() {
            layer.iter().for_each(|&place| layer_of[place] = index);
        }
        for index in 0..self.symbols.len() {
            let symbol = &mut self.symbols[index];
            // What ends the net stands at the left of its column, everything else next to its wire.
            symbol.x = match symbol.shape {
                Shape::End(_) => lefts[layer_of[index]],
                _ => rights[layer_of[index]] - symbol.width,
            };
            symbol.y = self.middle[index] - symbol.height / 2;
        }
        let wires = self.links.iter().map(|link| self.wire(link, &columns, &layer_of)).collect();
        let dots = columns.iter().flat_map(|column| column.dots.iter().copied()).collect();
        let bottom = (0..self.places.len()).map(|place| self.middle[place] + self.half(place)).max().unwrap_or(0);
        (wires, dots, x + MARGIN, bottom + MARGIN + 12)
    }

    fn wire(&self, link: &Link, columns: &[Column], layer_of: &[usize]) -> Wire {
        let from = &self.symbols[link.from];
        let to = &self.symbols[link.to];
        let pin = to.pins.get(link.pin).copied().unwrap_or(Pin { y: to.height / 2, inverted: false });
        let mut points = vec![(from.x + from.width, self.middle[link.from])];
        let mut place = link.from;
        let passed = columns.iter().enumerate().take(layer_of[link.to]).skip(layer_of[link.from]);
        for (layer, column) in passed {
            let next = match layer + 1 == layer_of[link.to] {
                true => link.to,
                false => {
                    let pass = Place::Pass(link.from, layer + 1);
                    self.places.iter().position(|&place| place == pass).unwrap_or(link.to)
                }
            };
            let y = if next == link.to { to.y + pin.y } else { self.middle[next] };
            let here = self.middle[place];
            if let Some(&track) = column.tracks.get(&place).filter(|_| here != y) {
                points.push((track, here));
                points.push((track, y));
            }
            place = next;
        }
        points.push((to.x, to.y + pin.y));
        Wire { from: link.from, to: link.to, pin: link.pin, points, way: link.way }
    }
}

/// The layer of each symbol, 0 at the left: as far from the last as its longest way there.
fn layers(count: usize, links: &[Link]) -> Vec<usize> {
    let mut distance = vec![0usize; count];
    // Links make no cycle, so that as many rounds as there are symbols always suffice.
    for _ in 0..count {
        let mut changed = false;
        for link in links {
            if distance[link.from] < distance[link.to] + 1 {
                distance[link.from] = distance[link.to] + 1;
                changed = true;
            }
        }
        if !changed {
            break;
        }
    }
    let last = distance.iter().copied().max().unwrap_or(0);
    distance.iter().map(|distance| last - distance).collect()
}
