//! The witness as a small waveform: the signal that changes, those that hold, and what the net shows for some order of
//! delays. Five characters are enough: `_` low, `~` high, `/` rises, `\` falls, `=` a vector with bits of both values.

use super::held::held;
use crate::rules::Hazard;

/// The most held signals drawn.
const SHOWN_HELD: usize = 8;

/// The drawing, one line per signal, names aligned, under a line that says what it is.
pub(super) fn render(hazard: &Hazard) -> String {
    let mut rows: Vec<(String, &str, String)> = Vec::new();
    for (name, before) in hazard.before.iter().filter(|(name, _)| hazard.changes.contains(name)) {
        let (drawn, word) = if *before { ("~~~\\______", "falls") } else { ("___/~~~~~~", "rises") };
        rows.push((name.clone(), drawn, word.to_string()));
    }
    let held = held(hazard);
    for signal in held.iter().take(SHOWN_HELD) {
        let drawn = match (signal.bits.contains(&false), signal.bits.contains(&true)) {
            (true, true) => "==========",
            (false, _) => "~~~~~~~~~~",
            (true, false) => "__________",
        };
        // A net of a loop stands for what is fed back from it, and for what is made of that.
        let word = if signal.name == hazard.net { "is fed back as" } else { "holds" };
        rows.push((signal.name.clone(), drawn, format!("{word} {}", signal.value())));
    }
    let (drawn, word) = match (hazard.pin, hazard.kind) {
        ((false, false), _) => ("____/~\\___", "should hold 0, pulses"),
        ((true, true), _) => ("~~~~\\_/~~~", "should hold 1, pulses"),
        ((false, true), _) => ("___/~\\_/~~", "should rise once, bounces"),
        ((true, false), _) => ("~~~\\_/~\\__", "should fall once, bounces"),
    };
    rows.push((hazard.net.clone(), drawn, word.to_string()));
    let width = rows.iter().map(|(name, _, _)| name.chars().count()).max().unwrap_or(0);
    let mut lines = vec!["witness (every signal not named may have any value):".to_string()];
    lines.extend(rows.iter().map(|(name, drawn, word)| format!("  {name:<width$}  {drawn}  {word}")));
    if held.len() > SHOWN_HELD {
        let left_out = held.len() - SHOWN_HELD;
        lines.insert(lines.len() - 1, format!("  and {left_out} more that hold, all in the JSON output"));
    }
    lines.join("\n")
}
