//! What is drawn of a cone: the ways of the change, shortened where they are long, and the logic beside them as far as it
//! fits. Inverters beside the ways become bubbles, selectors through which no race runs become one symbol, wide gates
//! get their further pins as one bundle, and what would not fit stands as one stub per pin.

use std::collections::{BTreeMap, BTreeSet, VecDeque};

use super::label;
use super::layout::{Link, Sheet};
use super::logic::{Logic, Ways};
use super::{Pin, Shape, Symbol, Way};
use crate::graph::{GateKind, NodeId, NodeKind};
use crate::rules::Finding;

/// The most gates drawn beside the ways.
const BESIDE: usize = 16;
/// How far from the ways logic is drawn.
const DEPTH: usize = 3;
/// The most gates drawn of one way: so many at either end.
const ENDS: usize = 7;
/// Pins beside the ways beyond this are one bundle.
const PINS: usize = 4;

/// Something drawn.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
enum Item {
    Node(NodeId),
    /// The stretch of a way that is not drawn.
    Gap(Way),
}

/// A selector: what it selects, and the gates that it is made of.
struct Mux {
    /// The value for 1, the value for 0, the select.
    pins: [NodeId; 3],
    parts: [NodeId; 3],
}

/// A way as it is drawn.
struct Drawn {
    way: Way,
    items: Vec<Item>,
    /// What drives the item behind the gap, and how many gates the gap stands for.
    gap: Option<(NodeId, usize)>,
}

struct Choice<'a> {
    logic: &'a Logic<'a>,
    instance: &'a str,
    marked: BTreeSet<NodeId>,
    stems: BTreeSet<NodeId>,
    meets: BTreeSet<NodeId>,
    muxes: BTreeMap<NodeId, Mux>,
    symbols: Vec<Symbol>,
    links: Vec<Link>,
    places: BTreeMap<Item, usize>,
    /// Gates that the symbols stand for.
    shown: BTreeSet<NodeId>,
}

/// `None` when neither logic nor a hazard is in front of the net.
pub(super) fn choose(logic: &Logic<'_>, ways: &Ways, finding: &Finding) -> Option<Sheet> {
    let target = logic.driver(logic.cut.target);
    if logic.pins(target).is_empty() && finding.hazards.is_empty() {
        return None;
    }
    let racing = || ways.iter().filter(|(way, _)| matches!(way, Way::First | Way::Second)).map(|(_, nodes)| nodes);
    let mut choice = Choice {
        logic,
        instance: &finding.instance,
        marked: ways.iter().flat_map(|(_, nodes)| nodes).copied().collect(),
        stems: racing().filter_map(|nodes| nodes.first().copied()).collect(),
        meets: racing().filter_map(|nodes| nodes.last().copied()).collect(),
        muxes: BTreeMap::new(),
        symbols: Vec::new(),
        links: Vec::new(),
        places: BTreeMap::new(),
        shown: BTreeSet::new(),
    };
    let drawn = choice.marked_symbols(ways, target);
    choice.around(&drawn);
    choice.mark(&drawn);
    let story = choice.story(&drawn, finding);
    choice.end(target, finding, !ways.is_empty());
    Some(Sheet {
        left_out: logic.gates.saturating_sub(choice.shown.len()),
        symbols: choice.symbols,
        links: choice.links,
        witnessed: logic.cut.steps() > 0,
        story,
    })
}

impl Choice<'_> {
    /// The symbols of the ways; without ways the gate that drives the target.
    fn marked_symbols(&mut self, ways: &Ways, target: NodeId) -> Vec<Drawn> {
        let mut nodes: Vec<NodeId> = ways.iter().flat_map(|(_, nodes)| nodes).copied().collect();
        nodes.push(target);
        for &node in &nodes {
            self.find_mux(node);
        }
        let parts: BTreeSet<NodeId> = self.muxes.values().flat_map(|mux| mux.parts).collect();
        self.marked.retain(|node| !parts.contains(node));
        let mut drawn = Vec::new();
        for (way, nodes) in ways {
            let nodes: Vec<NodeId> = nodes.iter().copied().filter(|node| !parts.contains(node)).collect();
            drawn.push(shortened(*way, &nodes));
        }
        let items: Vec<(Item, usize)> = drawn
            .iter()
            .flat_map(|way| way.items.iter().map(|&item| (item, way.gap.map_or(0, |(_, count)| count))))
            .collect();
        for (item, count) in items {
            self.add(item, count);
        }
        self.add(Item::Node(target), 0);
        drawn
    }

    /// Takes note when `node` is a selector that can be one symbol: no race starts or ends within it.
    fn find_mux(&mut self, node: NodeId) {
        let logic = self.logic;
        if self.muxes.contains_key(&node) || self.meets.contains(&node) {
            return;
        }
        if logic.kind(node) != NodeKind::Gate(GateKind::Or) {
            return;
        }
        let &[left, right] = logic.pins(node).as_slice() else { return };
        let arm = |arm: NodeId| match (logic.kind(arm), logic.pins(arm).as_slice()) {
            (NodeKind::Gate(GateKind::And), &[first, second]) => Some([first, second]),
            _ => None,
        };
        let (Some(upper), Some(lower)) = (arm(left), arm(right)) else { return };
        let inverted = |node: NodeId| match (logic.kind(node), logic.pins(node).as_slice()) {
            (NodeKind::Gate(GateKind::Not), &[driver]) => Some(driver),
            _ => None,
        };
        let arms = [(left, upper, right, lower), (right, lower, left, upper)];
        for (then_arm, then, other_arm, otherwise) in arms {
            for (select, value) in [(then[0], then[1]), (then[1], then[0])] {
                for (not, other) in [(otherwise[0], otherwise[1]), (otherwise[1], otherwise[0])] {
                    let parts = [then_arm, other_arm, not];
                    let apart = |part: &NodeId| {
                        !self.stems.contains(part) && !self.meets.contains(part) && label::name(logic, *part).is_none()
                    };
                    let alone = [then_arm, other_arm].iter().all(|&arm| logic.readers(arm) == 1);
                    if inverted(not) == Some(select) && alone && parts.iter().all(apart) {
                        self.muxes.insert(node, Mux { pins: [value, other, select], parts });
                        return;
                    }
                }
            }
        }
    }

    /// The place of an item, which gets its symbol when it has none; `count` is for gaps.
    fn add(&mut self, item: Item, count: usize) -> usize {
        if let Some(&place) = self.places.get(&item) {
            return place;
        }
        let symbol = match item {
            Item::Gap(_) => Symbol {
                label: if count == 1 { "1 gate".to_string() } else { format!("{count} gates") },
                ..blank(Shape::Gap, "a stretch of the way that is not drawn")
            },
            Item::Node(node) => self.symbol(node),
        };
        self.symbols.push(symbol);
        let place = self.symbols.len() - 1;
        self.places.insert(item, place);
        place
    }

    fn symbol(&mut self, node: NodeId) -> Symbol {
        let logic = self.logic;
        let shape = if self.muxes.contains_key(&node) { Shape::Mux } else { label::shape(logic, node) };
        let waves = logic.waves(node, self.marked.contains(&node));
        if logic.pins(node).is_empty() || matches!(shape, Shape::Table | Shape::Operator) {
            let (label, full) = label::inscription(logic, node, self.instance);
            return Symbol { label, waves, ..blank(shape, &full) };
        }
        let name = label::name(logic, node).unwrap_or_default();
        Symbol { label: label::short(&name, self.instance), waves, ..blank(shape, &name) }
    }

    /// Draws what the symbols read, from the ways outwards.
    fn around(&mut self, drawn: &[Drawn]) {
        let mut queue: VecDeque<(NodeId, usize)> = self
            .places
            .iter()
            .filter_map(|(item, &place)| match item {
                Item::Node(node) => Some((place, *node)),
                Item::Gap(_) => None,
            })
            .collect::<BTreeMap<_, _>>()
            .into_values()
            .map(|node| (node, 0))
            .collect();
        let mut beside = 0;
        while let Some((node, depth)) = queue.pop_front() {
            let Some(&place) = self.places.get(&Item::Node(node)) else { continue };
            let pins = match self.muxes.get(&node) {
                Some(mux) => {
                    self.shown.extend(mux.parts);
                    mux.pins.to_vec()
                }
                None => self.logic.pins(node),
            };
            if pins.is_empty() {
                continue;
            }
            self.shown.insert(node);
            let behind_gap = |driver: NodeId| {
                drawn.iter().find(|way| {
                    way.gap.is_some_and(|(last, _)| last == driver)
                        && way.items.iter().skip_while(|item| !matches!(item, Item::Gap(_))).nth(1)
                            == Some(&Item::Node(node))
                })
            };
            let mut taken: Vec<(Option<usize>, bool)> = Vec::new();
            let mut bundled: Vec<NodeId> = Vec::new();
            let own = |choice: &Self, driver: NodeId| {
                choice.marked.contains(&driver) && choice.places.contains_key(&Item::Node(driver))
            };
            let others = pins.iter().filter(|&&pin| !own(self, pin)).count();
            // Which pin of an operator a signal is at says nothing to a reader.
            let single = if matches!(self.logic.kind(node), NodeKind::OpOut(_)) { 1 } else { PINS };
            let mut plain = 0;
            for &driver in &pins {
                if let Some(way) = behind_gap(driver) {
                    taken.push((self.places.get(&Item::Gap(way.way)).copied(), false));
                    continue;
                }
                if own(self, driver) {
                    taken.push((self.places.get(&Item::Node(driver)).copied(), false));
                    continue;
                }
                let (driver, inverters) = self.without_inverters(driver);
                let inverted = inverters.len() % 2 == 1;
                self.shown.extend(inverters);
                plain += 1;
                if others > single && plain >= single {
                    bundled.push(driver);
                    continue;
                }
                let known = self.places.get(&Item::Node(driver)).copied();
                if let Some(known) =
                    known.filter(|_| !self.logic.pins(driver).is_empty() || self.marked.contains(&driver))
                {
                    taken.push((Some(known), inverted));
                } else if self.logic.pins(driver).is_empty() {
                    // A source beside the ways is drawn where it is read.
                    let symbol = self.symbol(driver);
                    self.symbols.push(symbol);
                    taken.push((Some(self.symbols.len() - 1), inverted));
                } else if beside < BESIDE && depth < DEPTH {
                    beside += 1;
                    self.find_mux(driver);
                    let place = self.add(Item::Node(driver), 0);
                    queue.push_back((driver, depth + 1));
                    taken.push((Some(place), inverted));
                } else {
                    let name = label::source_name(self.logic, driver);
                    let named = label::name(self.logic, driver).is_some();
                    let label = if named { label::short(&name, self.instance) } else { "more logic".to_string() };
                    let waves = self.logic.waves(driver, false);
                    self.symbols.push(Symbol { label, waves, ..blank(Shape::Behind, &name) });
                    taken.push((Some(self.symbols.len() - 1), inverted));
                }
            }
            if !bundled.is_empty() {
                let (label, full) = label::bundle(self.logic, &bundled, self.instance);
                self.symbols.push(Symbol { label, ..blank(Shape::Bundle, &full) });
                taken.push((Some(self.symbols.len() - 1), false));
            }
            for (pin, (from, inverted)) in taken.into_iter().enumerate() {
                self.symbols[place].pins.push(Pin { y: 0, inverted });
                if let Some(from) = from {
                    self.links.push(Link { from, to: place, pin, way: None });
                }
            }
        }
        // What enters the gaps.
        for way in drawn {
            let Some(gap) = self.places.get(&Item::Gap(way.way)).copied() else { continue };
            let before = way.items.iter().take_while(|item| !matches!(item, Item::Gap(_))).last();
            if let Some(from) = before.and_then(|item| self.places.get(item)).copied() {
                self.symbols[gap].pins.push(Pin { y: 0, inverted: false });
                self.links.push(Link { from, to: gap, pin: 0, way: None });
            }
        }
    }

    /// What drives a pin beside the ways behind inverters that nobody named, which become a bubble.
    fn without_inverters(&self, mut driver: NodeId) -> (NodeId, BTreeSet<NodeId>) {
        let mut passed = BTreeSet::new();
        while self.logic.kind(driver) == NodeKind::Gate(GateKind::Not)
            && !self.marked.contains(&driver)
            && label::name(self.logic, driver).is_none()
        {
            let Some(&next) = self.logic.pins(driver).first() else { break };
            if !passed.insert(driver) {
                break;
            }
            driver = next;
        }
        (driver, passed)
    }

    /// Marks the links and symbols of the ways. Two ways never share a pin.
    fn mark(&mut self, drawn: &[Drawn]) {
        for way in drawn {
            for item in &way.items {
                if let Some(&place) = self.places.get(item) {
                    self.symbols[place].ways.push(way.way);
                }
            }
            for pair in way.items.windows(2) {
                let (Some(&from), Some(&to)) = (self.places.get(&pair[0]), self.places.get(&pair[1])) else { continue };
                let link = self.links.iter_mut().find(|link| (link.from, link.to, link.way) == (from, to, None));
                if let Some(link) = link {
                    link.way = Some(way.way);
                }
            }
        }
    }

    /// The pin at the end, and the wire to it.
    fn end(&mut self, target: NodeId, finding: &Finding, marked: bool) {
        let Some(&from) = self.places.get(&Item::Node(target)) else { return };
        let (shape, label, full, inverted) = label::end(finding);
        let last = self.symbols[from].ways.last().copied();
        let way = last.map(|way| if way == Way::Loop { Way::Loop } else { Way::Pulse }).filter(|_| marked);
        let symbol = Symbol {
            label,
            pins: vec![Pin { y: 0, inverted }],
            ways: way.into_iter().collect(),
            ..blank(shape, &full)
        };
        self.symbols.push(symbol);
        self.links.push(Link { from, to: self.symbols.len() - 1, pin: 0, way });
        // The net itself is named at the end, whatever it is called inside.
        if self.symbols[from].label.is_empty() {
            self.symbols[from].label = label::short(&finding.net, &finding.instance);
            self.symbols[from].full = finding.net.clone();
        }
    }

    /// The ways in words, for those who do not see the drawing.
    fn story(&self, drawn: &[Drawn], finding: &Finding) -> String {
        let mut sentences: Vec<String> = Vec::new();
        for way in drawn {
            let words = way.items.iter().filter_map(|item| self.places.get(item)).map(|&place| {
                let symbol = &self.symbols[place];
                let name = if symbol.full.is_empty() { String::new() } else { format!(" {}", symbol.full) };
                match symbol.shape {
                    Shape::Gap => symbol.label.clone(),
                    shape => format!("{}{name}", shape.name()),
                }
            });
            let stations = words.collect::<Vec<_>>().join(", then ");
            sentences.push(match way.way {
                Way::First => format!("Path 1: {stations}."),
                Way::Second => format!("Path 2: {stations}."),
                Way::Pulse => format!("The pulse: {stations}."),
                Way::Loop => format!("The loop: {stations}."),
            });
        }
        sentences.push(format!("The net ends at: {}.", label::end(finding).1));
        sentences.join(" ")
    }
}

/// A way with its middle left out when it is long.
fn shortened(way: Way, nodes: &[NodeId]) -> Drawn {
    let whole = || nodes.iter().map(|&node| Item::Node(node)).collect();
    if nodes.len() <= 2 * ENDS + 1 {
        return Drawn { way, items: whole(), gap: None };
    }
    let (head, tail) = (&nodes[..ENDS], &nodes[nodes.len() - ENDS..]);
    let left_out = &nodes[ENDS..nodes.len() - ENDS];
    let items = head.iter().map(|&node| Item::Node(node)).chain([Item::Gap(way)]);
    let items = items.chain(tail.iter().map(|&node| Item::Node(node))).collect();
    Drawn { way, items, gap: left_out.last().map(|&last| (last, left_out.len())) }
}

/// A symbol that has no place yet.
fn blank(shape: Shape, full: &str) -> Symbol {
    Symbol {
        shape,
        x: 0,
        y: 0,
        width: 0,
        height: 0,
        label: String::new(),
        full: full.to_string(),
        pins: Vec::new(),
        waves: Vec::new(),
        ways: Vec::new(),
    }
}
