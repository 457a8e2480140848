//! The simulated witness as a value change dump (IEEE 1364-2005, clause 18), which every waveform viewer reads: the nets
//! under the instances they belong to, what has no name of its own under `gates`, and what arrives at each pin under
//! `wires`.

use std::collections::BTreeMap;

use vcd::{IdCode, ReferenceIndex, TimescaleUnit, Value, VarType, Writer};

use super::bench::REST;
use super::circuit::Circuit;
use super::delays::Shown;
use super::signal::Signal;

/// The instances of the nets as they nest.
#[derive(Default)]
struct Scope {
    inner: BTreeMap<String, Scope>,
    nets: Vec<(String, Signals)>,
}

/// Element, and pin of it.
type Signals = (usize, Option<usize>);

/// The dump of all steps; `lengths` are the lengths of the steps.
pub(super) fn dump(circuit: &Circuit, steps: &[Shown], lengths: &[u64]) -> std::io::Result<Vec<u8>> {
    let mut root = Scope::default();
    for (at, element) in circuit.elements.iter().enumerate() {
        match &element.name {
            Some(name) => {
                let (path, net) = name.rsplit_once('.').unwrap_or(("", name));
                let mut scope = &mut root;
                for part in path.split('.').filter(|part| !part.is_empty()) {
                    scope = scope.inner.entry(part.to_string()).or_default();
                }
                scope.nets.push((net.to_string(), (at, None)));
            }
            None => root.inner.entry("gates".to_string()).or_default().nets.push((format!("n{at}"), (at, None))),
        }
        for pin in 0..element.pins.len() {
            let moves = steps.iter().any(|shown| !shown.pins[at][pin].changes.is_empty());
            if moves {
                let wires = root.inner.entry("wires".to_string()).or_default();
                wires.nets.push((format!("w{at}_{pin}"), (at, Some(pin))));
            }
        }
    }
    let mut bytes = Vec::new();
    let mut writer = Writer::new(&mut bytes);
    writer.comment("a hazard found by stillwire, replayed")?;
    writer.timescale(1, TimescaleUnit::NS)?;
    let mut signals: Vec<(IdCode, Signals)> = Vec::new();
    writer.add_module("replay")?;
    declare(&mut writer, &root, &mut signals)?;
    writer.upscope()?;
    writer.enddefinitions()?;
    write(&mut writer, steps, lengths, &signals)?;
    Ok(bytes)
}

fn declare(
    writer: &mut Writer<&mut Vec<u8>>,
    scope: &Scope,
    signals: &mut Vec<(IdCode, Signals)>,
) -> std::io::Result<()> {
    for (name, signal) in &scope.nets {
        let parts = name.strip_suffix(']').and_then(|inner| inner.rsplit_once('['));
        let bit = parts.and_then(|(vector, index)| Some((vector, ReferenceIndex::BitSelect(index.parse().ok()?))));
        let (name, index) = bit.map_or((name.as_str(), None), |(vector, index)| (vector, Some(index)));
        signals.push((writer.add_var(VarType::Wire, 1, name, index)?, *signal));
    }
    for (name, inner) in &scope.inner {
        writer.add_module(name)?;
        declare(writer, inner, signals)?;
        writer.upscope()?;
    }
    Ok(())
}

fn write(
    writer: &mut Writer<&mut Vec<u8>>,
    steps: &[Shown],
    lengths: &[u64],
    signals: &[(IdCode, Signals)],
) -> std::io::Result<()> {
    let of = |shown: &Shown, signal: Signals| -> Signal {
        match signal {
            (at, None) => shown.outputs[at].clone(),
            (at, Some(pin)) => shown.pins[at][pin].clone(),
        }
    };
    writer.timestamp(0)?;
    writer.begin(vcd::SimulationCommand::Dumpvars)?;
    for &(code, signal) in signals {
        if let Some(first) = steps.first() {
            writer.change_scalar(code, level(of(first, signal).start))?;
        }
    }
    writer.end()?;
    let mut start = REST;
    for (shown, length) in steps.iter().zip(lengths) {
        let mut events: Vec<(u64, usize, bool)> = Vec::new();
        for (index, &(_, signal)) in signals.iter().enumerate() {
            events.extend(of(shown, signal).values().map(|(time, value)| (start + time, index, value)));
        }
        events.sort_unstable();
        let mut now = 0;
        for (time, index, value) in events {
            if time != now {
                writer.timestamp(time)?;
                now = time;
            }
            writer.change_scalar(signals[index].0, level(value))?;
        }
        start += length + REST;
    }
    writer.timestamp(start)
}

fn level(value: bool) -> Value {
    if value { Value::V1 } else { Value::V0 }
}
