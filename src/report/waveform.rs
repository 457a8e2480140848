//! The witness as a small waveform: the signal that changes, those that hold, and what the net shows for some order of
//! delays. Five characters are enough: `_` low, `~` high, `/` rises, `\` falls, `=` a vector with bits of both values.

use super::held::held;
use crate::rules::Hazard;

/// The most held signals drawn.
const SHOWN_HELD: usize = 8;

/// One signal: its name, what it does in the five characters, and the same in words.
pub(super) type Row = (String, &'static str, String);

/// The drawing, one line per signal, names aligned, under a line that says what it is.
pub(super) fn render(hazard: &Hazard) -> String {
    let (rows, left_out) = rows(hazard, SHOWN_HELD);
    let width = rows.iter().map(|(name, _, _)| name.chars().count()).max().unwrap_or(0);
    let mut lines = vec!["witness (every signal not named may have any value):".to_string()];
    lines.extend(rows.iter().map(|(name, drawn, word)| format!("  {name:<width$}  {drawn}  {word}")));
    if left_out > 0 {
        lines.insert(lines.len() - 1, format!("  and {left_out} more that hold, all in the JSON output"));
    }
    lines.join("\n")
}

/// What changes, up to `most` of the signals that hold, and the net; and how many more hold.
pub(super) fn rows(hazard: &Hazard, most: usize) -> (Vec<Row>, usize) {
    let mut rows: Vec<Row> = changes(hazard);
    let moved = hazard.before.iter().filter(|(name, _)| hazard.moved.contains(name) && *name != hazard.net);
    for (name, before) in moved {
        let drawn = if *before { "~~~=======" } else { "___=======" };
        rows.push((name.clone(), drawn, format!("begins at {} and moves", u8::from(*before))));
    }
    let held = held(hazard);
    for signal in held.iter().take(most) {
        let drawn = match (signal.bits.contains(&false), signal.bits.contains(&true)) {
            (true, true) => "==========",
            (false, _) => "~~~~~~~~~~",
            (true, false) => "__________",
        };
        // A net of a loop stands for what is fed back from it, and for what is made of that.
        let word = if signal.name == hazard.net { "is fed back as" } else { "holds" };
        rows.push((signal.name.clone(), drawn, format!("{word} {}", signal.value())));
    }
    let late = hazard.launch.as_ref().is_some_and(|launch| launch.step == "second");
    let both = hazard.launch.as_ref().is_some_and(|launch| launch.step == "both");
    let (drawn, word) = match hazard.pin {
        (false, false) if both => ("___/~~\\____", "rises with the edge and is taken back"),
        (true, true) if both => ("~~~\\__/~~~~", "falls with the edge and is taken back"),
        (false, false) if late => ("______/~\\_", "should hold 0, pulses"),
        (true, true) if late => ("~~~~~~\\_/~", "should hold 1, pulses"),
        (false, true) if late => ("_____/~\\_/", "should rise once, bounces"),
        (true, false) if late => ("~~~~~\\_/~\\", "should fall once, bounces"),
        (false, false) => ("____/~\\___", "should hold 0, pulses"),
        (true, true) => ("~~~~\\_/~~~", "should hold 1, pulses"),
        (false, true) => ("___/~\\_/~~", "should rise once, bounces"),
        (true, false) => ("~~~\\_/~\\__", "should fall once, bounces"),
    };
    rows.push((hazard.net.clone(), drawn, word.to_string()));
    (rows, held.len().saturating_sub(most))
}

/// What changes, in order of time: in an event the root, then what it moves.
fn changes(hazard: &Hazard) -> Vec<Row> {
    let row = |name: &str, before: bool, late: bool| {
        let (drawn, word) = match (before, late) {
            (false, false) => ("___/~~~~~~", "rises"),
            (true, false) => ("~~~\\______", "falls"),
            (false, true) => ("_____/~~~~", "then rises"),
            (true, true) => ("~~~~~\\____", "then falls"),
        };
        (name.to_string(), drawn, word.to_string())
    };
    let Some(launch) = &hazard.launch else {
        let changing = hazard.before.iter().filter(|(name, _)| hazard.changes.contains(name));
        return changing.map(|(name, before)| row(name, *before, false)).collect();
    };
    let mut rows = vec![row(&launch.root, !launch.rises, false)];
    let first = launch.first.iter().filter(|(name, _)| *name != launch.root && launch.step != "second");
    rows.extend(first.map(|(name, before)| row(name, *before, false)));
    rows.extend(launch.second.iter().map(|(name, before)| row(name, *before, true)));
    rows.extend(launch.raced.iter().map(|name| (name.clone(), "==========", "opens or closes".to_string())));
    rows
}
