//! User-defined primitives (IEEE 1364-2005 clause 8). A combinational table goes into the graph as it is. A sequential table
//! is recognised as a flip-flop or latch by what it does: every change of one input between 0 and 1, in every state, is
//! looked up by the rules of the standard (level-sensitive rows before edge-sensitive ones), and a model is accepted
//! only when it agrees with all of them. Where the table gives x the model may give anything, because x says "unknown".
//! A table that no model explains is unsupported; a wrong recognition is impossible.

use crate::diagnostic::{Diagnostic, Kind};
use crate::graph::{Cell, CellKind, Control, Edge, GraphBuilder, NodeId, Site, SourceKind, Symbol, Table, TableId};
use crate::syntax::ast::{Udp, UdpRow, UdpSymbol};

/// Sequential tables with more inputs are not enumerated; the standard asks tools for nine.
const MAX_SEQUENTIAL_INPUTS: usize = 10;

/// What a user-defined primitive is.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum UdpModel {
    Combinational(TableId),
    Sequential(Storage),
}

/// A flip-flop or latch. Inputs are positions in the port list, the output not counted.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Storage {
    load: Load,
    /// What is loaded, as a sum of products; the state itself counts as one more input behind the last.
    data: Vec<Cube>,
    /// Set and reset, the strongest first.
    controls: Vec<SetReset>,
    initial: Option<bool>,
}

/// When the data is loaded.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Load {
    /// Set and reset are all there is.
    Never,
    Clock {
        input: usize,
        edge: Edge,
    },
    Enable {
        input: usize,
        active: bool,
    },
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
struct SetReset {
    input: usize,
    active: bool,
    value: bool,
}

/// A product term: the variables in `care` must have the values in `value`.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
struct Cube {
    care: u32,
    value: u32,
}

impl Cube {
    fn contains(self, minterm: u32) -> bool {
        (minterm ^ self.value) & self.care == 0
    }
}

impl UdpModel {
    /// Reads the table of `udp`; once per primitive, since a combinational table is stored in the graph.
    pub fn declare(udp: &Udp, builder: &mut GraphBuilder) -> Result<Self, Diagnostic> {
        let unsupported = |message: String| {
            Diagnostic::new(Kind::Unsupported, "user-defined primitive", message, Some(udp.name.span))
        };
        let name = &udp.name.name;
        if let Some(row) = udp.rows.iter().find(|row| row.inputs.len() != udp.inputs.len()) {
            let message = format!("a row of primitive `{name}` does not have one symbol for each of its inputs");
            return Err(unsupported(message).with_also(row.span, "this row"));
        }
        if !udp.sequential {
            return Ok(Self::Combinational(builder.table(combinational(udp))));
        }
        if udp.inputs.len() > MAX_SEQUENTIAL_INPUTS {
            let message = format!("primitive `{name}` has more than {MAX_SEQUENTIAL_INPUTS} inputs and a state");
            return Err(unsupported(message));
        }
        match Behaviour::of(udp).recognise() {
            Some(storage) => Ok(Self::Sequential(Storage { initial: initial_value(udp), ..storage })),
            None => Err(unsupported(format!("primitive `{name}` behaves neither like a flip-flop nor like a latch"))
                .with_help("its instances are opaque: their outputs count as free inputs")),
        }
    }

    /// Makes an instance, the table node or the cell, and returns its output. `inputs` in port order, without the output;
    /// a missing one is unknown.
    pub fn instantiate(&self, builder: &mut GraphBuilder, inputs: &[NodeId], site: Site) -> NodeId {
        match self {
            Self::Combinational(table) => builder.table_node(*table, inputs, site),
            Self::Sequential(storage) => storage.instantiate(builder, inputs, site),
        }
    }
}

impl Storage {
    fn instantiate(&self, builder: &mut GraphBuilder, inputs: &[NodeId], site: Site) -> NodeId {
        let source = if matches!(self.load, Load::Clock { .. }) { SourceKind::FlipFlop } else { SourceKind::Latch };
        let output = builder.source(source, site);
        let mut pins = inputs.to_vec();
        pins.push(output);
        let pin = |builder: &mut GraphBuilder, at: usize| match pins.get(at) {
            Some(&pin) => pin,
            None => builder.unknown(site),
        };
        let mut terms = Vec::with_capacity(self.data.len());
        for cube in &self.data {
            let mut factors = Vec::new();
            for at in (0..=inputs.len()).filter(|&at| cube.care >> at & 1 == 1) {
                let literal = pin(builder, at);
                let positive = cube.value >> at & 1 == 1;
                factors.push(if positive { literal } else { builder.not(literal, site) });
            }
            terms.push(builder.and(&factors, site));
        }
        let data = builder.or(&terms, site);
        let kind = match self.load {
            Load::Never => CellKind::Latch { enable: builder.constant(false), active: true },
            Load::Clock { input, edge } => CellKind::FlipFlop { clock: pin(builder, input), edge },
            Load::Enable { input, active } => CellKind::Latch { enable: pin(builder, input), active },
        };
        let mut controls = Vec::with_capacity(self.controls.len());
        for control in &self.controls {
            let net = pin(builder, control.input);
            controls.push(Control { net, active: control.active, value: builder.constant(control.value) });
        }
        builder.cell(Cell { kind, output, data, controls, init: self.initial, inferred_from: None });
        output
    }
}

fn combinational(udp: &Udp) -> Table {
    let symbol = |symbol: char| match symbol {
        '0' => Symbol::Zero,
        '1' => Symbol::One,
        '?' => Symbol::Any,
        'b' => Symbol::Binary,
        _ => Symbol::X,
    };
    let rows = udp.rows.iter().filter_map(|row| {
        let inputs: Option<Vec<Symbol>> = row
            .inputs
            .iter()
            .map(|input| match *input {
                UdpSymbol::Level(level) => Some(symbol(level)),
                UdpSymbol::Edge(..) | UdpSymbol::EdgeLetter(_) => None,
            })
            .collect();
        Some((inputs?, symbol(row.output)))
    });
    Table { name: udp.name.name.clone(), rows: rows.collect() }
}

fn initial_value(udp: &Udp) -> Option<bool> {
    match udp.initial {
        Some('0') => Some(false),
        Some('1') => Some(true),
        _ => None,
    }
}

/// One change of one input, all values known.
#[derive(Clone, Copy)]
struct Change {
    /// The inputs after the change, bit `k` for input `k`.
    after: u32,
    changed: usize,
    state: bool,
}

impl Change {
    fn input(self, at: usize) -> bool {
        self.after >> at & 1 == 1
    }

    /// Inputs and state as one minterm.
    fn minterm(self, inputs: usize) -> u32 {
        self.after | u32::from(self.state) << inputs
    }
}

/// The whole behaviour of a sequential table on known values: every change and the state it leads to, `None` for x.
struct Behaviour {
    inputs: usize,
    steps: Vec<(Change, Option<bool>)>,
}

impl Behaviour {
    fn of(udp: &Udp) -> Self {
        let inputs = udp.inputs.len();
        let mut steps = Vec::with_capacity((inputs << inputs) * 2);
        for after in 0..1u32 << inputs {
            for changed in 0..inputs {
                for state in [false, true] {
                    let change = Change { after, changed, state };
                    steps.push((change, next_state(&udp.rows, change)));
                }
            }
        }
        Self { inputs, steps }
    }

    fn recognise(&self) -> Option<Storage> {
        let mut loads = vec![Load::Never];
        for edge in [Edge::Posedge, Edge::Negedge, Edge::Both] {
            loads.extend((0..self.inputs).map(|input| Load::Clock { input, edge }));
        }
        for active in [true, false] {
            loads.extend((0..self.inputs).map(|input| Load::Enable { input, active }));
        }
        loads.into_iter().find_map(|load| self.explain(load))
    }

    /// The storage that loads at `load` and agrees with every step, if there is one.
    fn explain(&self, load: Load) -> Option<Storage> {
        let mut rest: Vec<(Change, Option<bool>)> = self.steps.clone();
        let mut controls = Vec::new();
        while let Some(control) = self.strongest_control(load, &rest) {
            rest.retain(|(change, _)| change.input(control.input) != control.active);
            controls.push(control);
        }
        let mut on = Vec::new();
        let mut off = Vec::new();
        for &(change, next) in &rest {
            let loads = match load {
                Load::Never => false,
                Load::Enable { input, active } => change.input(input) == active,
                Load::Clock { input, edge } => {
                    change.changed == input
                        && match edge {
                            Edge::Posedge => change.input(input),
                            Edge::Negedge => !change.input(input),
                            Edge::Both => true,
                        }
                }
            };
            match next {
                None => {}
                Some(next) if loads => {
                    let own = match load {
                        Load::Clock { input, .. } | Load::Enable { input, .. } => 1u32 << input,
                        Load::Never => 0,
                    };
                    let minterms = if next { &mut on } else { &mut off };
                    minterms.push(change.minterm(self.inputs) & !own);
                }
                Some(next) if next != change.state => return None,
                Some(_) => {}
            }
        }
        for minterms in [&mut on, &mut off] {
            minterms.sort_unstable();
            minterms.dedup();
        }
        let stores = match load {
            Load::Never => !controls.is_empty(),
            Load::Clock { .. } | Load::Enable { .. } => !on.is_empty() || !off.is_empty(),
        };
        if !stores || on.iter().any(|minterm| off.binary_search(minterm).is_ok()) {
            return None;
        }
        let data = cover(&on, &off, self.inputs + 1);
        // A latch that loads its own state while it is transparent has a second enable: not a form that we have.
        let reads_state = data.iter().any(|cube| cube.care >> self.inputs & 1 == 1);
        if reads_state && matches!(load, Load::Enable { .. }) {
            return None;
        }
        Some(Storage { load, data, controls, initial: None })
    }

    /// An input and a value that force the state whatever else happens, among the steps that no stronger control forces.
    fn strongest_control(&self, load: Load, rest: &[(Change, Option<bool>)]) -> Option<SetReset> {
        let candidates = (0..self.inputs).flat_map(|input| [(input, false), (input, true)]);
        for (input, active) in candidates {
            if matches!(load, Load::Clock { input: own, .. } | Load::Enable { input: own, .. } if own == input) {
                continue;
            }
            let mut forced = rest.iter().filter(|(change, _)| change.input(input) == active).filter_map(|step| step.1);
            if let Some(value) = forced.next()
                && forced.all(|next| next == value)
            {
                return Some(SetReset { input, active, value });
            }
        }
        None
    }
}

/// Terms that cover `on` and touch nothing of `off`, each as large as it gets by dropping the last variables first.
fn cover(on: &[u32], off: &[u32], variables: usize) -> Vec<Cube> {
    let mut cubes: Vec<Cube> = Vec::new();
    for &minterm in on {
        if cubes.iter().any(|cube| cube.contains(minterm)) {
            continue;
        }
        let mut cube = Cube { care: (1 << variables) - 1, value: minterm };
        for variable in (0..variables).rev() {
            let larger = Cube { care: cube.care & !(1 << variable), ..cube };
            if !off.iter().any(|&minterm| larger.contains(minterm)) {
                cube = larger;
            }
        }
        cubes.push(cube);
    }
    cubes
}

fn level_matches(symbol: char, bit: bool) -> bool {
    match symbol {
        '0' => !bit,
        '1' => bit,
        '?' | 'b' => true,
        _ => false,
    }
}

/// Whether a row applies; `edges` is whether it must be an edge-sensitive one.
fn row_matches(row: &UdpRow, change: Change, edges: bool) -> bool {
    let mut has_edge = false;
    let inputs = row.inputs.iter().enumerate().all(|(at, &symbol)| {
        let after = change.input(at);
        let (from, to) = match symbol {
            UdpSymbol::Level(level) => return level_matches(level, after),
            UdpSymbol::Edge(from, to) => (from, to),
            UdpSymbol::EdgeLetter('r' | 'p') => ('0', '1'),
            UdpSymbol::EdgeLetter('f' | 'n') => ('1', '0'),
            UdpSymbol::EdgeLetter(_) => ('?', '?'),
        };
        has_edge = true;
        at == change.changed && level_matches(from, !after) && level_matches(to, after)
    });
    inputs && has_edge == edges && row.state.is_none_or(|state| level_matches(state, change.state))
}

/// The state after a change: level-sensitive rows come first (IEEE 1364-2005, 8.8); no row means x.
fn next_state(rows: &[UdpRow], change: Change) -> Option<bool> {
    let level = rows.iter().find(|row| row_matches(row, change, false));
    let row = level.or_else(|| rows.iter().find(|row| row_matches(row, change, true)))?;
    match row.output {
        '0' => Some(false),
        '1' => Some(true),
        '-' => Some(change.state),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::source::{FileId, Span};
    use crate::syntax::ast::Ident;

    /// A sequential primitive from rows such as `1 r 0 : ? : 1`; edges are written `(01)` or by their letter.
    fn udp(inputs: &[&str], rows: &[&str]) -> Udp {
        let span = Span { file: FileId::new(0), start: 0, end: 0 };
        let ident = |name: &str| Ident { name: name.to_string(), span };
        let symbol = |text: &str| match text.chars().collect::<Vec<char>>()[..] {
            ['(', from, to, ')'] => UdpSymbol::Edge(from, to),
            [letter @ ('r' | 'f' | 'p' | 'n' | '*')] => UdpSymbol::EdgeLetter(letter),
            [level] => UdpSymbol::Level(level),
            _ => panic!("{text}"),
        };
        let row = |text: &&str| {
            let parts: Vec<&str> = text.split(':').map(str::trim).collect();
            let inputs = parts[0].split_whitespace().map(symbol).collect();
            let single = |text: &str| text.chars().next();
            let state = if parts.len() == 3 { single(parts[1]) } else { None };
            UdpRow { inputs, state, output: single(parts[parts.len() - 1]).unwrap_or('x'), span }
        };
        Udp {
            name: ident("p"),
            span,
            output: ident("q"),
            inputs: inputs.iter().map(|name| ident(name)).collect(),
            sequential: true,
            initial: None,
            rows: rows.iter().map(row).collect(),
        }
    }

    #[track_caller]
    fn storage(inputs: &[&str], rows: &[&str]) -> Storage {
        match UdpModel::declare(&udp(inputs, rows), &mut GraphBuilder::new()) {
            Ok(UdpModel::Sequential(storage)) => storage,
            other => panic!("{other:?}"),
        }
    }

    fn set_reset(input: usize, active: bool, value: bool) -> SetReset {
        SetReset { input, active, value }
    }

    #[test]
    fn a_flip_flop_with_asynchronous_reset_and_set() {
        let rows = [
            "? ? 0 1 : ? : 0",
            "? ? ? 0 : ? : 1",
            "0 (01) 1 1 : ? : 0",
            "1 (01) 1 1 : ? : 1",
            "? n ? 1 : ? : -",
            "* ? ? 1 : ? : -",
            "? ? (?1) 1 : ? : -",
            "? ? ? (?1) : ? : -",
        ];
        let found = storage(&["d", "clk", "rn", "sn"], &rows);
        assert_eq!(found.load, Load::Clock { input: 1, edge: Edge::Posedge });
        assert_eq!(found.data, [Cube { care: 1, value: 1 | 4 | 8 }]);
        // The set row of the table wins when both are active, so it is the stronger.
        assert_eq!(found.controls, [set_reset(3, false, true), set_reset(2, false, false)]);
    }

    #[test]
    fn a_transparent_latch() {
        let found = storage(&["g", "d"], &["1 0 : ? : 0", "1 1 : ? : 1", "0 ? : ? : -"]);
        assert_eq!(found.load, Load::Enable { input: 0, active: true });
        assert_eq!(found.data.iter().map(|cube| cube.care).collect::<Vec<u32>>(), [2]);
        assert!(found.controls.is_empty());
    }

    #[test]
    fn a_latch_open_at_zero_with_a_clear() {
        let found = storage(&["d", "gn", "clr"], &["? ? 1 : ? : 0", "0 0 0 : ? : 0", "1 0 0 : ? : 1", "? 1 0 : ? : -"]);
        assert_eq!(found.load, Load::Enable { input: 1, active: false });
        assert_eq!(found.controls, [set_reset(2, true, false)]);
    }

    #[test]
    fn a_set_reset_latch_has_no_enable() {
        let found = storage(&["s", "r"], &["1 0 : ? : 1", "? 1 : ? : 0", "0 0 : ? : -"]);
        assert_eq!(found.load, Load::Never);
        assert_eq!(found.controls, [set_reset(1, true, false), set_reset(0, true, true)]);
    }

    #[test]
    fn a_jk_flip_flop_on_the_falling_edge_reads_its_state() {
        let rows = [
            "f 0 0 : ? : -",
            "f 0 1 : ? : 0",
            "f 1 0 : ? : 1",
            "f 1 1 : 0 : 1",
            "f 1 1 : 1 : 0",
            "r ? ? : ? : -",
            "? * ? : ? : -",
            "? ? * : ? : -",
        ];
        let found = storage(&["ck", "j", "k"], &rows);
        assert_eq!(found.load, Load::Clock { input: 0, edge: Edge::Negedge });
        // j q' + k' q, with the state as variable 3, on all eight minterms.
        for minterm in 0..8u32 {
            let (j, k, q) = (minterm & 1 == 1, minterm & 2 == 2, minterm & 4 == 4);
            let point = u32::from(j) << 1 | u32::from(k) << 2 | u32::from(q) << 3;
            assert_eq!(found.data.iter().any(|cube| cube.contains(point)), j && !q || !k && q);
        }
    }

    #[test]
    fn two_clocks_are_unsupported() {
        let rows =
            ["r ? 0 : ? : 0", "r ? 1 : ? : 1", "? r ? : ? : 0", "f ? ? : ? : -", "? f ? : ? : -", "? ? * : ? : -"];
        let result = UdpModel::declare(&udp(&["a", "b", "d"], &rows), &mut GraphBuilder::new());
        assert_eq!(result.map_err(|diagnostic| diagnostic.kind), Err(Kind::Unsupported));
    }

    #[test]
    fn a_latch_with_two_enables_is_unsupported() {
        let rows = ["1 1 0 : ? : 0", "1 1 1 : ? : 1", "0 ? ? : ? : -", "? 0 ? : ? : -"];
        let result = UdpModel::declare(&udp(&["a", "b", "d"], &rows), &mut GraphBuilder::new());
        assert_eq!(result.map_err(|diagnostic| diagnostic.kind), Err(Kind::Unsupported));
    }

    #[test]
    fn a_row_of_the_wrong_length_is_refused() {
        let result = UdpModel::declare(&udp(&["g", "d"], &["1 0 1 : ? : 0"]), &mut GraphBuilder::new());
        assert!(result.is_err());
    }
}
