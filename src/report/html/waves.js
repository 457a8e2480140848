// Waveforms, from the five characters that the text uses: `_` low, `~` high, `/` rises, `\` falls, `=` both.
function levels(text, x, y, width, height, kind) {
  const unit = width / text.length;
  const level = (high) => (high ? y : y + height);
  let d = "";
  let second = "";
  [...text].forEach((letter, index) => {
    const [left, right] = [x + index * unit, x + (index + 1) * unit];
    const move = index ? "L" : "M";
    if (letter === "=") {
      d += `${move}${left},${level(true)} H${right}`;
      second += `${move}${left},${level(false)} H${right}`;
      return;
    }
    const [from, to] = { _: [false, false], "~": [true, true], "/": [false, true], "\\": [true, false] }[letter];
    d += `${move}${left},${level(from)} L${right},${level(to)}`;
  });
  return path(d + second, kind);
}

const LONGEST_WAVE = 11;

// All rows end at the same time: what is shorter stays as it is.
function filled(text) {
  const last = text[text.length - 1];
  const stays = last === "/" ? "~" : last === "\\" ? "_" : last;
  return text + stays.repeat(Math.max(0, LONGEST_WAVE - text.length));
}

// A table, so that it is read well without being seen: signal, waveform, words.
function waveTable(hazard) {
  const table = el("table", "waves");
  table.append(el("caption", "", "Witness; every signal not named may have any value"));
  hazard.rows.forEach(([name, drawn, said], index) => {
    const last = index === hazard.rows.length - 1;
    if (last && hazard.more) {
      const row = el("tr", "more");
      const cell = el("td", "", `and ${hazard.more} more that hold, all in the JSON output`);
      cell.colSpan = 3;
      row.append(cell);
      table.append(row);
    }
    const row = el("tr", last ? "pin" : /^(holds|is fed back)/.test(said) ? "held" : "moves");
    const head = el("th", "", name);
    head.scope = "row";
    const picture = svg("svg", { width: 160, height: 24, viewBox: "0 0 160 24", "aria-hidden": "true" });
    picture.append(levels(filled(drawn), 2, 5, 156, 14, "level"));
    const cell = el("td");
    cell.append(picture);
    row.append(head, cell, el("td", "said", said));
    table.append(row);
  });
  return table;
}
