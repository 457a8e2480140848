// What unfolds below a finding. Everything that comes from the design is set as text, never as markup.
function el(name, kind = "", text = "") {
  const element = document.createElement(name);
  if (kind) element.className = kind;
  if (text) element.textContent = text;
  return element;
}

// Names between backquotes become code.
function prose(text, name = "p") {
  const element = el(name);
  text.split("`").forEach((part, index) => {
    if (part) element.append(index % 2 ? el("code", "", part) : part);
  });
  return element;
}

function section(title, ...children) {
  const element = el("section");
  element.append(el("h3", "", title), ...children);
  return element;
}

// The pieces of a line between the borders of its marks; where marks overlap, the shortest shows.
function codeLine(text, marks) {
  const letters = [...text];
  const code = el("code");
  const borders = new Set([0, letters.length]);
  for (const mark of marks) borders.add(Math.min(mark[1], letters.length)).add(Math.min(mark[2], letters.length));
  const sorted = [...borders].sort((one, other) => one - other);
  for (let index = 1; index < sorted.length; index++) {
    const [from, to] = [sorted[index - 1], sorted[index]];
    const piece = letters.slice(from, to).join("");
    const over = marks.filter((mark) => mark[1] <= from && mark[2] >= to);
    over.sort((one, other) => one[2] - one[1] - (other[2] - other[1]));
    code.append(over.length ? el("mark", markKind(over[0]), piece) : piece);
  }
  return code;
}

const TAB = 4;

// Where a character stands when tabs are wide.
function column(text, at) {
  return [...text].slice(0, at).reduce((sum, letter) => (letter === "\t" ? sum + TAB - (sum % TAB) : sum + 1), 0);
}

function markKind(mark) {
  return mark[4] ? "primary" : mark[5] ? `way-${mark[5]}` : "plain";
}

function excerptTable(excerpt) {
  const figure = el("figure", "excerpt");
  const table = el("table");
  let before = null;
  for (const [number, text] of excerpt.lines) {
    if (before !== null && number > before + 1) {
      const gap = el("tr", "gap");
      gap.append(el("td", "number", "\u22ee"), el("td"));
      table.append(gap);
    }
    before = number;
    const marks = excerpt.marks.filter((mark) => mark[0] === number);
    const row = el("tr");
    const cell = el("td");
    cell.append(codeLine(text, marks));
    row.append(el("td", "number", String(number)), cell);
    table.append(row);
    for (const mark of [...marks].sort((one, other) => one[1] - other[1])) {
      if (!mark[3]) continue;
      const note = el("tr", `note ${markKind(mark)}`);
      const told = el("td");
      const line = prose(mark[3], "div");
      line.style.marginInlineStart = `${Math.min(column(text, mark[1]), 60)}ch`;
      line.prepend(el("span", "caret", "^ "));
      told.append(line);
      note.append(el("td", "number"), told);
      table.append(note);
    }
  }
  const caption = el("figcaption", "", excerpt.file);
  figure.append(caption, table);
  return figure;
}

function legend(drawing) {
  const list = el("ul", "legend");
  const has = (way) => drawing.wires.some((wire) => wire[3] === way);
  const told = { 1: "path 1", 2: "path 2", pulse: "the pulse", loop: "the loop" };
  for (const way of ["1", "2", "pulse", "loop"].filter(has)) {
    const sample = svg("svg", { width: 40, height: 10, "aria-hidden": "true" });
    sample.append(svg("polyline", { points: "1,5 39,5", class: `wire way-${way}` }));
    const item = el("li");
    item.append(sample, ` ${told[way]}`);
    list.append(item);
  }
  if (drawing.witnessed) list.append(el("li", "", "at an output: what it shows under the witness; none where any value does"));
  return list;
}

function drawingFigure(drawing) {
  const figure = el("figure", "cone");
  const frame = el("div", "frame");
  frame.tabIndex = 0;
  frame.setAttribute("role", "group");
  frame.setAttribute("aria-label", "drawing; scroll with the arrow keys");
  frame.append(draw(drawing));
  const caption = el("figcaption");
  caption.append(legend(drawing));
  if (drawing.leftOut) {
    const count = drawing.leftOut === 1 ? "1 gate" : `${drawing.leftOut} gates`;
    caption.append(el("p", "", `Not drawn: ${count} in front of this net.`));
  }
  figure.append(frame, caption);
  return figure;
}

function facts(pairs) {
  const list = el("dl");
  for (const [name, value] of pairs) {
    if (!value) continue;
    list.append(el("dt", "", name), el("dd", "", value));
  }
  return list;
}

function pinWords(pin) {
  if (!pin) return "";
  const active = pin.active === null ? "" : `, acts at ${pin.active}`;
  const edge = pin.edge ? `, ${pin.edge}` : "";
  const more = pin.count > pin.cells.length ? ` and ${pin.count - pin.cells.length} more` : "";
  const cells = pin.cells.length ? `: ${pin.cells.join(", ")}${more}` : "";
  return `${pin.kind}${active}${edge}${cells}`;
}

function acceptance(data) {
  if (data.signoff) {
    const { reason, by, until } = data.signoff;
    return section("Signed off", facts([["reason", reason], ["by", by ?? "nobody named"], ["until", until ?? "no expiry"]]));
  }
  if (data.known) return section("Known", prose("The ledger has this finding: it was there when the tool was adopted and fails nothing."));
  return null;
}

function coverSection(cover) {
  const block = el("pre");
  block.append(el("code", "", cover.verilog));
  return section("Cover", el("p", cover.proven ? "proof" : "doubt", cover.effect[0].toUpperCase() + cover.effect.slice(1) + "."), block);
}

function othersTable(data) {
  const table = el("table", "others");
  const head = el("tr");
  for (const name of ["net", "place", "fingerprint"]) {
    const cell = el("th", "", name);
    cell.scope = "col";
    head.append(cell);
  }
  table.append(head);
  for (const other of data.others) {
    const row = el("tr");
    for (const text of other) row.append(el("td", "", text));
    table.append(row);
  }
  return section(`The same on ${data.others.length} more`, table);
}

function hazardSections(data) {
  if (!data.hazards.length) return [];
  const [lead, ...rest] = data.hazards;
  const sections = [section("Witness", prose(lead.title), waveTable(lead), el("p", "effect", `Effect: ${lead.harm}`))];
  if (rest.length) {
    const all = el("section");
    all.append(el("h3", "", `And by other changes (${rest.length + data.moreHazards})`));
    for (const hazard of rest) {
      const fold = el("details");
      fold.append(prose(hazard.title, "summary"));
      fold.append(waveTable(hazard), el("p", "effect", `Effect: ${hazard.harm}`));
      all.append(fold);
    }
    if (data.moreHazards) all.append(el("p", "", `${data.moreHazards} more are in the JSON output.`));
    sections.push(all);
  }
  return sections;
}

// Fills the empty element below a head.
function fill(target, data, rule) {
  const short = data.fingerprint.slice(0, 12);
  const place = section("Where", ...data.excerpts.map(excerptTable), ...data.told.map((text) => prose(text)));
  if (data.excerpts.length || data.told.length) target.append(place);
  if (data.drawing) target.append(section("Gates in front of the net", drawingFigure(data.drawing)));
  target.append(...hazardSections(data));
  if (data.cover) target.append(coverSection(data.cover));
  if (data.notes.length) target.append(section("What to know and to do", ...data.notes.map((note) => prose(note))));
  const accepted = acceptance(data);
  if (accepted) target.append(accepted);
  if (data.others.length) target.append(othersTable(data));
  const bits = data.bits ? ` (bits ${data.bits[1]} to ${data.bits[0]})` : "";
  const about = section(
    "About",
    facts([
      ["net", data.net ? data.net + bits : ""],
      ["instance", data.instance],
      ["module", data.module],
      ["pin", pinWords(data.pin)],
      ["loop", data.loop ? `${data.loop.behaviour.join(", ")}; nets ${data.loop.nets.join(", ")}` : ""],
      ["fingerprint", data.fingerprint],
    ]),
  );
  const link = el("a", "", "Link to this finding");
  link.href = `#open=${short}`;
  const line = el("p", "commands");
  line.append(link);
  if (data.hazards.length) {
    line.append("; see it in a simulator with ", el("code", "", `stillwire replay ${short}`));
    if (data.cover) line.append(", get the change with ", el("code", "", `stillwire cure ${short}`));
  }
  const meaning = el("button", "", "What this rule means");
  meaning.type = "button";
  meaning.addEventListener("click", () => {
    const page = document.getElementById(`rule-${rule}`);
    page.open = true;
    page.scrollIntoView();
    page.querySelector("summary").focus();
  });
  about.append(line, meaning);
  target.append(about);
}
