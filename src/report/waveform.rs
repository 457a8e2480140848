//! The witness as a small waveform: the signal that changes, those that hold, and what the net shows for some order of
//! delays. Four characters are enough: `_` low, `~` high, `/` rises, `\` falls.

use crate::rules::Hazard;

/// The most held signals drawn.
const SHOWN_HELD: usize = 8;

/// The drawing, one line per signal, names aligned, under a line that says what it is.
pub(super) fn render(hazard: &Hazard) -> String {
    let mut rows: Vec<(&str, &str, String)> = Vec::new();
    for (name, before) in hazard.before.iter().filter(|(name, _)| hazard.changes.contains(name)) {
        let (drawn, word) = if *before { ("~~~\\______", "falls") } else { ("___/~~~~~~", "rises") };
        rows.push((name, drawn, word.to_string()));
    }
    let held: Vec<_> = hazard.before.iter().filter(|(name, _)| !hazard.changes.contains(name)).collect();
    for (name, value) in held.iter().take(SHOWN_HELD) {
        let drawn = if *value { "~~~~~~~~~~" } else { "__________" };
        // A net of a loop stands for what is fed back from it, and for what is made of that.
        let word = if *name == hazard.net { "is fed back as" } else { "holds" };
        rows.push((name, drawn, format!("{word} {}", u8::from(*value))));
    }
    let (drawn, word) = match (hazard.pin, hazard.kind) {
        ((false, false), _) => ("____/~\\___", "should hold 0, pulses"),
        ((true, true), _) => ("~~~~\\_/~~~", "should hold 1, pulses"),
        ((false, true), _) => ("___/~\\_/~~", "should rise once, bounces"),
        ((true, false), _) => ("~~~\\_/~\\__", "should fall once, bounces"),
    };
    rows.push((&hazard.net, drawn, word.to_string()));
    let width = rows.iter().map(|(name, _, _)| name.chars().count()).max().unwrap_or(0);
    let mut lines = vec!["witness (every signal not named may have any value):".to_string()];
    lines.extend(rows.iter().map(|(name, drawn, word)| format!("  {name:<width$}  {drawn}  {word}")));
    if held.len() > SHOWN_HELD {
        let left_out = held.len() - SHOWN_HELD;
        lines.insert(lines.len() - 1, format!("  and {left_out} more that hold, all in the JSON output"));
    }
    lines.join("\n")
}
