//! From the groups of a Liberty file to models of cells. What is not understood is said per cell and becomes a module
//! without text where it is used; only a file that is no Liberty at all is refused as a whole.

use std::collections::BTreeMap;
use std::path::Path;

use super::function::Function;
use super::liberty::{self, Attribute, Group};
use super::model::{Both, Direction, Model, Output, Pin, State, StateKind, any, clock_gate};
use crate::source::PathError;

/// A cell of a library.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Known {
    Model(Box<Model>),
    /// Not understood; why, to follow "because", and where.
    Refused {
        why: String,
        place: String,
    },
}

/// The cells of a library by name. Of two with one name the first holds.
///
/// # Errors
/// A text that is no Liberty library, with the line.
pub fn read_library(text: &str, path: &Path) -> Result<BTreeMap<String, Known>, PathError> {
    let library = liberty::parse(text, path)?;
    let mut cells = BTreeMap::new();
    for group in library.groups("cell") {
        let Some(name) = group.arguments.first() else { continue };
        let known = match cell(group, name, path) {
            Ok(model) => Known::Model(Box::new(model)),
            Err((why, line)) => Known::Refused { why, place: place(path, line) },
        };
        cells.entry(name.clone()).or_insert(known);
    }
    Ok(cells)
}

fn place(path: &Path, line: usize) -> String {
    format!("{}:{line}", path.file_name().unwrap_or_default().to_string_lossy())
}

/// Why a cell is not understood, and the line.
type Refusal = (String, usize);

fn cell(group: &Group, name: &str, path: &Path) -> Result<Model, Refusal> {
    for (kind, what) in [
        ("bus", "buses"),
        ("bundle", "bundles"),
        ("ff_bank", "banks of flip-flops"),
        ("latch_bank", "banks of latches"),
    ] {
        if let Some(inner) = group.groups(kind).next() {
            return Err((format!("{what} are not supported"), inner.line));
        }
    }
    let mut model = Model {
        name: name.to_string(),
        place: place(path, group.line),
        pins: Vec::new(),
        states: Vec::new(),
        outputs: Vec::new(),
        declared: false,
    };
    for pin in group.groups("pin") {
        for name in pin.arguments.iter().flat_map(|names| names.split([' ', ','])).filter(|name| !name.is_empty()) {
            model.pins.push(Pin { name: name.to_string(), direction: direction(pin)? });
        }
    }
    for pin in group.groups("pg_pin") {
        model.pins.extend(pin.arguments.iter().map(|name| Pin { name: name.clone(), direction: Direction::Power }));
    }
    let gate = group.attribute("clock_gating_integrated_cell");
    let styled = match gate {
        Some(style) => integrated_gate(group, style, &mut model)?,
        None => false,
    };
    if !styled {
        if let Some(table) = group.groups("statetable").next() {
            return Err(("state tables are not supported".to_string(), table.line));
        }
        for inner in group.groups("ff") {
            model.states.push(flip_flop(inner)?);
        }
        for inner in group.groups("latch") {
            model.states.push(latch(inner)?);
        }
        for pin in group.groups("pin") {
            output(pin, &mut model)?;
        }
    }
    check_names(&model, group)?;
    Ok(model)
}

fn direction(pin: &Group) -> Result<Direction, Refusal> {
    match pin.value("direction") {
        Some("input") => Ok(Direction::Input),
        Some("output") => Ok(Direction::Output),
        Some("inout") => Ok(Direction::Inout),
        Some("internal") => Ok(Direction::Internal),
        Some(other) => Err((format!("the direction `{other}` is not known"), pin.line)),
        None => Err((format!("the pin `{}` has no direction", pin.arguments.join(", ")), pin.line)),
    }
}

fn parsed(attribute: &Attribute) -> Result<Function, Refusal> {
    let text = attribute.values.first().map_or("", String::as_str);
    Function::parse(text)
        .map_err(|why| (format!("the {} \"{text}\" is not understood: {why}", attribute.name), attribute.line))
}

fn optional(group: &Group, name: &str) -> Result<Option<Function>, Refusal> {
    group.attribute(name).map(parsed).transpose()
}

fn required(group: &Group, name: &str) -> Result<Function, Refusal> {
    optional(group, name)?.ok_or_else(|| (format!("its `{}` has no `{name}`", group.name), group.line))
}

fn output(pin: &Group, model: &mut Model) -> Result<(), Refusal> {
    let direction = direction(pin)?;
    if matches!(direction, Direction::Input | Direction::Internal | Direction::Power) {
        return Ok(());
    }
    let Some(function) = optional(pin, "function")? else {
        if let Some(state) = pin.attribute("state_function").or(pin.attribute("internal_node")) {
            return Err((format!("the attribute `{}` is not supported", state.name), state.line));
        }
        return match direction {
            // An inout pin may be a mere input.
            Direction::Inout => Ok(()),
            _ => Err((format!("the output `{}` has no function", pin.arguments.join(", ")), pin.line)),
        };
    };
    let three_state = optional(pin, "three_state")?;
    for name in pin.arguments.iter().flat_map(|names| names.split([' ', ','])).filter(|name| !name.is_empty()) {
        let (function, three_state) = (function.clone(), three_state.clone());
        model.outputs.push(Output { pin: name.to_string(), function, three_state });
    }
    Ok(())
}

fn flip_flop(group: &Group) -> Result<State, Refusal> {
    if let Some(second) = group.attribute("clocked_on_also") {
        return Err(("flip-flops of two clock phases (`clocked_on_also`) are not supported".to_string(), second.line));
    }
    let kind = StateKind::FlipFlop { clock: required(group, "clocked_on")?, next: required(group, "next_state")? };
    state(group, kind)
}

fn latch(group: &Group) -> Result<State, Refusal> {
    let kind = match (optional(group, "enable")?, optional(group, "data_in")?) {
        (Some(enable), Some(data)) => StateKind::Latch { enable, data },
        // A latch that is only set and reset.
        (None, None) => StateKind::Latch { enable: Function::Constant(false), data: Function::Constant(false) },
        (None, Some(_)) => return Err(("its `latch` has no `enable`".to_string(), group.line)),
        (Some(_), None) => return Err(("its `latch` has no `data_in`".to_string(), group.line)),
    };
    state(group, kind)
}

fn state(group: &Group, kind: StateKind) -> Result<State, Refusal> {
    let names: Vec<&str> = group.arguments.iter().flat_map(|names| names.split([' ', ','])).collect();
    let [name, rest @ ..] = names.as_slice() else {
        return Err((format!("its `{}` has no names", group.name), group.line));
    };
    let both = |name: &str| match group.value(name) {
        Some("L") => Both::Zero,
        Some("H") => Both::One,
        _ => Both::Unknown,
    };
    Ok(State {
        name: name.to_string(),
        complement: rest.first().map(|name| name.to_string()),
        kind,
        clear: optional(group, "clear")?,
        preset: optional(group, "preset")?,
        both: [both("clear_preset_var1"), both("clear_preset_var2")],
        gates_clock: false,
    })
}

/// A cell whose style of clock gating is named by an attribute; false when the attribute says nothing about its logic, so
/// that its other groups must.
fn integrated_gate(group: &Group, style: &Attribute, model: &mut Model) -> Result<bool, Refusal> {
    let text = style.values.first().map_or("", String::as_str);
    let words: Vec<&str> = text.split('_').collect();
    let (kind, edge, rest) = match words.as_slice() {
        ["generic"] => return Ok(false),
        [kind @ ("latch" | "none"), edge @ ("posedge" | "negedge"), rest @ ..] => (*kind, *edge, rest),
        _ => return Err((format!("the style of clock gating `{text}` is not supported"), style.line)),
    };
    if rest.iter().any(|word| !["precontrol", "postcontrol", "obs"].contains(word)) {
        return Err((format!("the style of clock gating `{text}` is not supported"), style.line));
    }
    let pins = |attribute: &str| -> Vec<Function> {
        let marked = group.groups("pin").filter(|pin| pin.says(attribute));
        marked.flat_map(|pin| pin.arguments.iter().map(|name| Function::name(name))).collect()
    };
    let names = |attribute: &str| -> Vec<String> {
        let marked = group.groups("pin").filter(|pin| pin.says(attribute));
        marked.flat_map(|pin| pin.arguments.iter().cloned()).collect()
    };
    let (clocks, enables, tests, outputs) = (
        names("clock_gate_clock_pin"),
        pins("clock_gate_enable_pin"),
        pins("clock_gate_test_pin"),
        names("clock_gate_out_pin"),
    );
    let ([clock], [output]) = (clocks.as_slice(), outputs.as_slice()) else {
        let why = "a clock gate needs one pin marked `clock_gate_clock_pin` and one marked `clock_gate_out_pin`";
        return Err((why.to_string(), group.line));
    };
    if enables.is_empty() {
        return Err(("a clock gate needs a pin marked `clock_gate_enable_pin`".to_string(), group.line));
    }
    let active_low = edge == "negedge";
    let late_test = rest.contains(&"postcontrol") && !tests.is_empty();
    let mut early = enables;
    if !late_test {
        early.extend(tests.iter().cloned());
    }
    let late = late_test.then(|| any(tests));
    let function = if kind == "latch" {
        let (state, function) = clock_gate(clock, active_low, any(early), late);
        model.states.push(state);
        function
    } else {
        early.extend(late);
        let (pin, enable) = (Function::name(clock), any(early));
        if active_low { Function::Or(vec![pin, enable.negated()]) } else { Function::And(vec![pin, enable]) }
    };
    model.outputs.push(Output { pin: output.clone(), function, three_state: None });
    for pin in group.groups("pin") {
        let is_out = pin.arguments.iter().any(|name| name == output);
        if !is_out && direction(pin)? == Direction::Output {
            if pin.says("clock_gate_obs_pin") {
                continue;
            }
            return Err((
                format!("the output `{}` of a clock gate has no function", pin.arguments.join(", ")),
                pin.line,
            ));
        }
    }
    Ok(true)
}

/// Every name in a function must mean something.
fn check_names(model: &Model, group: &Group) -> Result<(), Refusal> {
    let functions = model.outputs.iter().flat_map(|output| [Some(&output.function), output.three_state.as_ref()]);
    let states = model.states.iter().flat_map(|state| {
        let (first, second) = match &state.kind {
            StateKind::FlipFlop { clock, next } => (clock, next),
            StateKind::Latch { enable, data } => (enable, data),
        };
        [Some(first), Some(second), state.clear.as_ref(), state.preset.as_ref()]
    });
    for function in functions.chain(states).flatten() {
        for name in function.names() {
            let is_state =
                model.states.iter().any(|state| state.name == name || state.complement.as_deref() == Some(name));
            let is_pin =
                model.pin(name).is_some_and(|pin| matches!(pin.direction, Direction::Input | Direction::Inout));
            if !is_state && !is_pin {
                return Err((format!("a function uses `{name}`, which is neither an input nor its state"), group.line));
            }
        }
    }
    Ok(())
}
