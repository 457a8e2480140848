// The page: filter, unfolding, keyboard, theme, printing. Its whole state but the theme stands in the address behind #,
// so that a view can be sent to a colleague.
const lines = document.getElementById("details").textContent.split("\n").filter((line) => line);
const FIELDS = ["rule", "severity", "module", "verdict", "state"];
const byId = (id) => document.getElementById(id);

const findings = [...document.querySelectorAll("article.finding")].map((article, index) => ({
  article,
  index,
  head: article.querySelector("button.head"),
  detail: article.querySelector(".detail"),
  count: Number(article.dataset.count),
  text: `${article.textContent} ${article.dataset.fingerprint} ${article.dataset.module}`.toLowerCase(),
  filled: false,
}));
const visible = () => findings.filter((one) => !one.article.hidden);

function open(one, wanted) {
  if (wanted && !one.filled) {
    fill(one.detail, JSON.parse(lines[one.index]), one.article.dataset.rule);
    one.filled = true;
  }
  one.detail.hidden = !wanted;
  one.head.setAttribute("aria-expanded", String(wanted));
}

const isOpen = (one) => !one.detail.hidden;

// Every word must occur; the choices must all fit.
function filter() {
  const words = byId("text").value.toLowerCase().split(/\s+/).filter((word) => word);
  const wanted = FIELDS.map((field) => [field, byId(field).value]).filter(([, value]) => value);
  let [shown, groups, all] = [0, 0, 0];
  for (const one of findings) {
    const data = one.article.dataset;
    const fits =
      wanted.every(([field, value]) => data[field] === (value === "-" ? "" : value)) &&
      words.every((word) => one.text.includes(word));
    if (one.article.hidden === fits) one.article.hidden = !fits;
    all += one.count;
    if (fits) {
      shown += one.count;
      groups += 1;
    }
  }
  const heads = groups === shown ? "" : ` under ${groups} heads`;
  byId("status").textContent = `${shown} of ${all} ${all === 1 ? "finding" : "findings"}${heads}`;
  byId("nothing").hidden = groups > 0;
}

// How many open findings the address names.
const NAMED = 8;

function remember() {
  const state = new URLSearchParams();
  for (const id of ["text", ...FIELDS]) if (byId(id).value) state.set(id, byId(id).value);
  const opened = findings.filter(isOpen).slice(0, NAMED);
  if (opened.length) state.set("open", opened.map((one) => one.article.dataset.fingerprint.slice(0, 12)).join(","));
  const address = state.toString();
  // Some viewers refuse to change the address; the page works without.
  try {
    history.replaceState(null, "", address ? `#${address}` : "#");
  } catch {
    return;
  }
}

function recall() {
  const state = new URLSearchParams(location.hash.slice(1));
  for (const id of ["text", ...FIELDS]) byId(id).value = state.get(id) ?? "";
  filter();
  let first = null;
  for (const prefix of (state.get("open") ?? "").split(",").filter((part) => part)) {
    const one = findings.find(({ article }) => article.dataset.fingerprint.startsWith(prefix));
    if (!one) continue;
    one.article.hidden = false;
    open(one, true);
    first ??= one;
  }
  if (first) {
    first.article.scrollIntoView();
    first.head.focus({ preventScroll: true });
  }
}

function step(by) {
  const all = visible();
  if (!all.length) return;
  const here = all.findIndex((one) => one.article.contains(document.activeElement));
  const next = here < 0 ? (by > 0 ? 0 : all.length - 1) : Math.min(Math.max(here + by, 0), all.length - 1);
  all[next].head.focus();
  all[next].article.scrollIntoView({ block: "nearest" });
}

function key(event) {
  if (event.ctrlKey || event.metaKey || event.altKey) return;
  const target = event.target;
  const typing = target.matches("input, select, textarea");
  if (event.key === "Escape" && target.id === "text") {
    target.value = "";
    target.blur();
    filter();
    return remember();
  }
  if (typing) return;
  if (event.key === "/") {
    event.preventDefault();
    byId("text").focus();
    return;
  }
  // Arrows scroll where something scrolls, and step elsewhere.
  const arrows = target === document.body || target.matches("button.head");
  const by = { j: 1, k: -1, ...(arrows ? { ArrowDown: 1, ArrowUp: -1 } : {}) }[event.key];
  if (by) {
    event.preventDefault();
    step(by);
  }
}

// Many at once are made in pieces, so that the page stays alive.
const PIECE = 40;

function foldAll() {
  const wanted = visible().some((one) => !isOpen(one));
  const all = visible().filter((one) => isOpen(one) !== wanted);
  byId("fold").textContent = wanted ? "Fold all" : "Expand all";
  const piece = () => {
    for (const one of all.splice(0, PIECE)) open(one, wanted);
    if (all.length) requestAnimationFrame(piece);
    else remember();
  };
  piece();
}

function theme(name) {
  if (name) document.documentElement.dataset.theme = name;
  else delete document.documentElement.dataset.theme;
}

// Storage is refused in some viewers.
function stored(value) {
  try {
    if (value === undefined) return localStorage.getItem("stillwire-theme") ?? "";
    localStorage.setItem("stillwire-theme", value);
  } catch {
    return "";
  }
  return value;
}

let openedForPrint = [];

function start() {
  byId("controls").hidden = false;
  for (const one of findings) {
    one.head.addEventListener("click", () => {
      open(one, !isOpen(one));
      remember();
    });
  }
  for (const id of ["text", ...FIELDS]) {
    byId(id).addEventListener("input", () => {
      filter();
      remember();
    });
  }
  byId("controls").addEventListener("submit", (event) => event.preventDefault());
  byId("reset").addEventListener("click", () => {
    for (const id of ["text", ...FIELDS]) byId(id).value = "";
    filter();
    remember();
  });
  byId("fold").addEventListener("click", foldAll);
  byId("theme").addEventListener("input", () => {
    theme(byId("theme").value);
    stored(byId("theme").value);
  });
  byId("theme").value = stored();
  theme(byId("theme").value);
  document.addEventListener("keydown", key);
  window.addEventListener("hashchange", recall);
  // On paper everything that fits the filter is expanded.
  window.addEventListener("beforeprint", () => {
    openedForPrint = visible().filter((one) => !isOpen(one));
    for (const one of openedForPrint) open(one, true);
  });
  window.addEventListener("afterprint", () => {
    for (const one of openedForPrint) open(one, false);
    openedForPrint = [];
  });
  recall();
}

start();
