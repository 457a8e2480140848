// The drawing of a cone. Places come from the page's data; here is only how each symbol looks. Shapes are the
// distinctive ones of the trade: a flat back and a round nose for AND, a curved back and a point for OR, a second curve
// for XOR, a triangle for a buffer, a bubble for an inversion, a trapezium for a selector.
const SVG = "http://www.w3.org/2000/svg";
const INSET = 9;
const BUBBLE = 4;

function svg(name, attributes, ...children) {
  const element = document.createElementNS(SVG, name);
  for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, value);
  element.append(...children);
  return element;
}

function path(d, kind) {
  return svg("path", { d, class: kind });
}

function words(x, y, text, kind, anchor = "start") {
  const element = svg("text", { x, y, class: kind, "text-anchor": anchor });
  element.textContent = text;
  return element;
}

// "wire way-1": how a way is marked, besides its badge.
function marked(kind, ways) {
  return ways.length ? `${kind} ${ways.map((way) => `way-${way}`).join(" ")}` : kind;
}

const INVERTING = new Set(["not", "nand", "nor", "xnor"]);
const GATES = new Set(["and", "nand", "or", "nor", "xor", "xnor"]);

// The outline of a gate between x and right, around the middle m.
function outline(shape, x, right, m, half) {
  const [top, bottom, width] = [m - half, m + half, right - x];
  switch (shape) {
    case "and":
    case "nand": {
      const nose = Math.min(half, width * 0.6);
      return `M${x},${top} H${right - nose} A${nose},${half} 0 0 1 ${right - nose},${bottom} H${x} Z`;
    }
    case "or":
    case "nor":
    case "xor":
    case "xnor":
      return (
        `M${x},${top} C${x + width * 0.55},${top} ${x + width * 0.8},${m - half * 0.5} ${right},${m} ` +
        `C${x + width * 0.8},${m + half * 0.5} ${x + width * 0.55},${bottom} ${x},${bottom} ` +
        `Q${x + width * 0.28},${m} ${x},${top} Z`
      );
    default:
      return `M${x},${top} L${right},${m} L${x},${bottom} Z`;
  }
}

// From the border to the body, where no wire of a way does it.
function stubs(group, symbol, to) {
  const [x, y] = symbol.at;
  symbol.pins.forEach((pin, index) => {
    if (!symbol.led.has(index)) group.append(path(`M${x},${y + pin[0]} H${to}`, "stub"));
  });
}

function gate(group, symbol) {
  const [x, y, width, height] = symbol.at;
  const m = y + height / 2;
  const left = x + INSET;
  const right = x + width - (INVERTING.has(symbol.shape) ? 2 * BUBBLE : 0);
  const half = Math.min(height / 2 - 1, GATES.has(symbol.shape) ? 19 : 12);
  const heights = symbol.pins.map((pin) => y + pin[0]);
  stubs(group, symbol, left + (GATES.has(symbol.shape) ? 8 : 1));
  // A gate with many pins is a body with a bar for the pins.
  if (heights.length && Math.max(...heights) - Math.min(...heights) > 2 * half) {
    group.append(path(`M${left},${Math.min(...heights) - 6} V${Math.max(...heights) + 6}`, "bar"));
  }
  group.append(path(outline(symbol.shape, left, right, m, half), "body"));
  if (symbol.shape.startsWith("x")) {
    group.append(path(`M${left - 5},${m - half} Q${left - 5 + (right - left) * 0.28},${m} ${left - 5},${m + half}`, "line"));
  }
  if (INVERTING.has(symbol.shape)) {
    group.append(svg("circle", { cx: right + BUBBLE, cy: m, r: BUBBLE, class: "body" }));
  }
  const names = { and: "&", nand: "&", or: "\u22651", nor: "\u22651", xor: "=1", xnor: "=1" };
  if (names[symbol.shape]) {
    const middle = symbol.shape.includes("and") ? left + (right - left) * 0.42 : left + (right - left) * 0.5;
    group.append(words(middle, m + 4, names[symbol.shape], "inside", "middle"));
  }
}

function mux(group, symbol) {
  const [x, y, width, height] = symbol.at;
  const left = x + INSET;
  const right = x + width;
  stubs(group, symbol, left);
  group.append(path(`M${left},${y} L${right},${y + 11} V${y + height - 11} L${left},${y + height} Z`, "body"));
  ["1", "0", "S"].forEach((name, index) => {
    if (symbol.pins[index]) group.append(words(left + 4, y + symbol.pins[index][0] + 4, name, "inside"));
  });
}

// Boxes, flags and rounds with their inscription.
function box(group, symbol) {
  const [x, y, width, height] = symbol.at;
  const m = y + height / 2;
  const text = (at, anchor = "start") => group.append(words(at, m + 4, symbol.label, "inside", anchor));
  switch (symbol.shape) {
    case "flip-flop":
      group.append(path(`M${x},${y} h${width} v${height} h${-width} Z`, "body"));
      group.append(path(`M${x},${y + height - 13} l8,5 l-8,5`, "line"));
      group.append(words(x + 11, m + 4, "FF", "kind"));
      group.append(path(`M${x + 30},${y} v${height}`, "line"));
      return text(x + 36);
    case "latch":
      group.append(path(`M${x},${y} h${width} v${height} h${-width} Z`, "body"));
      group.append(words(x + 4, m + 4, "LAT", "kind"));
      group.append(path(`M${x + 30},${y} v${height} M${x + 33},${y} v${height}`, "line"));
      return text(x + 38);
    case "memory":
      group.append(path(`M${x},${y} h${width} v${height} h${-width} Z`, "body"));
      group.append(words(x + 4, m + 4, "MEM", "kind"));
      group.append(path(`M${x + 31},${y} v${height}`, "line"));
      return text(x + 36);
    case "black-box":
      group.append(path(`M${x},${y} h${width} v${height} h${-width} Z`, "body"));
      group.append(path(`M${x},${y} h28 v${height} h-28 Z`, "solid"));
      return text(x + 36);
    case "constant":
    case "unknown":
      group.append(svg("rect", { x, y, width, height, rx: height / 2, class: "body" }));
      return text(x + width / 2, "middle");
    case "input":
    case "end-net": {
      const point = 9;
      group.append(path(`M${x},${y} H${x + width - point} L${x + width},${m} L${x + width - point},${y + height} H${x} Z`, "body"));
      return text(x + 8);
    }
    case "feedback":
    case "end-feedback":
      group.append(svg("rect", { x, y, width, height, rx: 6, class: "body" }));
      group.append(path(`M${x + 15},${m - 4} a5,5 0 1 0 1,5 m2,-4 l-2,4 l-4,-2`, "line"));
      return text(x + 22);
    case "behind":
    case "gap":
      group.append(svg("rect", { x, y, width, height, rx: 4, class: "body dashed" }));
      return text(x + width / 2, "middle");
    case "bundle":
      group.append(path(`M${x},${y} h${width} v${height} h${-width} Z`, "body dashed"));
      group.append(path(`M${x + width - 12},${y + height - 3} L${x + width - 4},${y + 3}`, "line"));
      return text(x + 8);
    case "end-clock":
    case "end-control":
    case "end-enable": {
      const left = x + INSET;
      stubs(group, symbol, left);
      group.append(path(`M${left},${y} H${x + width} V${y + height} H${left} Z`, "body"));
      if (symbol.shape === "end-clock") group.append(path(`M${left},${m - 7} l10,7 l-10,7`, "line"));
      else group.append(words(left + 4, m + 4, symbol.shape === "end-enable" ? "E" : symbol.label[0].toUpperCase(), "kind"));
      return text(left + 18);
    }
    default: {
      const left = x + INSET;
      stubs(group, symbol, left);
      group.append(svg("rect", { x: left, y, width: width - INSET, height, rx: 2, class: "body" }));
      return text(left + (width - INSET) / 2, "middle");
    }
  }
}

const PLAIN = { "____": "holds 0", "~~~~": "holds 1", "__/~": "rises", "~~\\_": "falls" };

function waveWords(wave) {
  if (!wave) return "any value";
  return PLAIN[wave] ?? "glitches";
}

function symbolGroup(symbol) {
  const [x, y, width, height] = symbol.at;
  const m = y + height / 2;
  const group = svg("g", { class: marked(`symbol ${symbol.shape}`, symbol.ways) });
  const said = [symbol.full || symbol.shape];
  const ends = symbol.shape.startsWith("end-");
  if (GATES.has(symbol.shape) || symbol.shape === "not" || symbol.shape === "buf") gate(group, symbol);
  else if (symbol.shape === "mux") mux(group, symbol);
  else box(group, symbol);
  symbol.pins.forEach((pin) => {
    if (pin[1]) group.append(svg("circle", { cx: x + INSET - BUBBLE, cy: y + pin[0], r: BUBBLE, class: "body" }));
  });
  const inside = !(GATES.has(symbol.shape) || ["not", "buf", "mux"].includes(symbol.shape));
  if (!inside && symbol.label) group.append(words(x + width + 3, m + 14, symbol.label, "name"));
  if (symbol.wave) {
    group.append(levels(symbol.wave, x + width + 3, m - 13, 24, 9, "glyph"));
    said.push(waveWords(symbol.wave));
  } else if (!ends && !["gap", "constant", "bundle"].includes(symbol.shape)) {
    said.push(waveWords(""));
  }
  const title = svg("title", {});
  title.textContent = said.join(", ");
  group.prepend(title);
  return group;
}

// A number in a circle at the longest piece of a way.
function badge(way, wires) {
  let best = null;
  for (const { 4: points } of wires) {
    for (let index = 1; index < points.length; index++) {
      const [[x0, y0], [x1, y1]] = [points[index - 1], points[index]];
      const length = Math.abs(x1 - x0) + Math.abs(y1 - y0);
      if (!best || length > best.length) best = { length, x: (x0 + x1) / 2, y: (y0 + y1) / 2 };
    }
  }
  const group = svg("g", { class: `badge-way way-${way}` });
  group.append(svg("circle", { cx: best.x, cy: best.y, r: 8 }), words(best.x, best.y + 4, way, "number", "middle"));
  return group;
}

function draw(drawing) {
  const [width, height] = drawing.size;
  const picture = svg("svg", {
    viewBox: `0 0 ${width} ${height}`,
    width,
    height,
    role: "img",
    "aria-label": drawing.story,
    class: "drawing",
  });
  for (const symbol of drawing.symbols) symbol.led = new Set();
  const plain = drawing.wires.filter((wire) => !wire[3]);
  const ways = drawing.wires.filter((wire) => wire[3]);
  for (const wire of plain.concat(ways)) {
    // The wire of a way runs up to the body, which covers its end; a bubble stands in between.
    const pin = drawing.symbols[wire[1]].pins[wire[2]];
    const corners = wire[4].slice();
    const [endX, endY] = corners[corners.length - 1];
    if (wire[3] && !pin[1]) {
      const besideBody = Math.abs(pin[0] - drawing.symbols[wire[1]].at[3] / 2) > 17;
      corners.push([endX + INSET + (besideBody ? 0 : 6), endY]);
      drawing.symbols[wire[1]].led.add(wire[2]);
    }
    const line = corners.map(([x, y]) => `${x},${y}`).join(" ");
    picture.append(svg("polyline", { points: line, class: marked("wire", wire[3] ? [wire[3]] : []) }));
  }
  for (const [cx, cy] of drawing.dots) picture.append(svg("circle", { cx, cy, r: 2.6, class: "dot" }));
  for (const symbol of drawing.symbols) picture.append(symbolGroup(symbol));
  for (const way of ["1", "2"]) {
    const own = ways.filter((wire) => wire[3] === way);
    if (own.length) picture.append(badge(way, own));
  }
  return picture;
}
