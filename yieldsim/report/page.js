"use strict";
// Controls, tables and keyboard of the page. What a chart shows is in charts.js; both see the study as `study`.

const study = JSON.parse(document.getElementById("study-data").textContent);
const choice = {
  place: 0,
  absorbers: new Set(study.absorbers.map((_, i) => i).slice(0, 12)),
  measure: "spectral_factor",
  versus: study.absorbers.findIndex((_, i) => i !== study.reference),
  day: 0,
  hour: 0,
  taker: study.reference,
  quality: 0,
  relative: "no",
  basis: "specific_yield_kwh_kwp",
  chance: 0,
  pairs: 0,
};

// ------------------------------------------------------------------------------------------------ small helpers

function element(tag, attributes = {}, ...children) {
  const made = document.createElement(tag);
  for (const [name, value] of Object.entries(attributes)) {
    if (name === "text") made.textContent = value;
    else if (value !== null && value !== false) made.setAttribute(name, value === true ? "" : value);
  }
  made.append(...children);
  return made;
}

/** Return a number with fixed digits and thousands set apart; a dash for what is missing. */
function figures(value, digits) {
  if (value === null || value === undefined || Number.isNaN(value)) return "–";
  const text = Math.abs(value).toLocaleString("en", { minimumFractionDigits: digits, maximumFractionDigits: digits });
  return value < 0 && /[1-9]/.test(text) ? "−" + text : text; // the sign for minus, none before a zero
}

function signed(value, digits) {
  const text = figures(value, digits);
  return value > 0 && Number(value.toFixed(digits)) !== 0 ? "+" + text : text;
}

function withUnit(value, measure) {
  const { unit, digits } = study.measures[measure];
  return figures(value, digits) + (unit === "1" ? "" : " " + unit);
}

const ruler = document.createElement("canvas").getContext("2d");
function textWidth(text, size = 12) {
  ruler.font = `${size}px ${getComputedStyle(document.body).fontFamily}`;
  return ruler.measureText(text).width;
}

/** Return a text cut with an ellipsis to a width in pixels. */
function fit(text, width, size = 12) {
  if (textWidth(text, size) <= width) return text;
  const signs = Array.from(text);
  while (signs.length > 1 && textWidth(signs.join("") + "…", size) > width) signs.pop();
  return signs.join("").trimEnd() + "…";
}

/** Return places at least a gap apart, as close to the wanted ones as can be, in the same order (pooled violators). */
function spread(wanted, gap, low, high) {
  if (!wanted.length) return [];
  gap = Math.min(gap, (high - low) / Math.max(wanted.length - 1, 1));
  const order = wanted.map((_, i) => i).sort((a, b) => wanted[a] - wanted[b]);
  const pools = [];
  order.forEach((index, rank) => {
    pools.push([wanted[index] - rank * gap, 1]);
    while (pools.length > 1 && pools.at(-2)[0] > pools.at(-1)[0]) {
      const [mean, count] = pools.pop();
      const below = pools.at(-1);
      pools[pools.length - 1] = [(below[0] * below[1] + mean * count) / (below[1] + count), below[1] + count];
    }
  });
  const flat = pools.flatMap(([mean, count]) => Array(count).fill(mean));
  const placed = [];
  order.forEach((index, rank) => {
    placed[index] = Math.min(Math.max(flat[rank], low), high - gap * (order.length - 1)) + rank * gap;
  });
  return placed;
}

// ------------------------------------------------------------------------------------------- what tells series apart

const DASHES = [null, "7 3", "2 2.5", "9 3 2 3"];
const SYMBOLS = ["circle", "square", "triangle", "diamond", "star", "wye", "cross", "hexagon", "square2", "triangle2", "times", "asterisk"];
const HOLLOW = new Set(["square2", "triangle2", "times", "asterisk"]);

function look(number) {
  const symbol = SYMBOLS[number % SYMBOLS.length];
  return {
    colour: `var(--s${number % 7})`,
    dash: DASHES[(Math.floor(number / 7) + ((number % 7) % 3)) % DASHES.length],
    symbol,
    hollow: HOLLOW.has(symbol),
  };
}

/** Return a mark of signs in the look of a series. */
function signs(data, number, options) {
  const { colour, symbol, hollow } = look(number);
  const paint = hollow ? { stroke: colour, strokeWidth: 1.8 } : { fill: colour };
  return Plot.dot(data, { symbol, ...paint, ...options });
}

/** Return a small drawing of a series' line and sign, for legends. */
function swatch(number, withLine = true) {
  const style = look(number);
  const drawn = Plot.plot({
    width: 26, height: 14, margin: 0, x: { domain: [0, 26], axis: null }, y: { domain: [14, 0], axis: null },
    marks: [
      withLine ? Plot.ruleY([7], { x1: 0, x2: 26, stroke: style.colour, strokeWidth: 1.8, strokeDasharray: style.dash }) : null,
      signs([[13, 7]], number, { r: 4 }),
    ],
  });
  drawn.setAttribute("class", "swatch");
  drawn.setAttribute("aria-hidden", "true");
  return drawn;
}

// ------------------------------------------------------------------------------------------------------- controls

/** Return a labelled select over [value, text] pairs that sets a choice and redraws. */
function select(label, key, options, ids) {
  const box = element("select", { id: `choose-${key}` });
  for (const [value, text] of options) {
    box.append(element("option", { value, text, selected: String(choice[key]) === String(value) }));
  }
  box.addEventListener("change", () => {
    choice[key] = typeof choice[key] === "number" ? Number(box.value) : box.value;
    if (key === "day") choice.hour = middleHour();
    draw(ids);
    if (key === "day" || key === "place") controls();
  });
  return element("label", {}, element("span", { text: label }), box);
}

const OF_PLACE = ["monthly", "factors", "ledger", "hours", "spectrum", "gap_sweep", "gap_pairs", "chance-range", "duel", "ranks", "causes", "worth-chart"];
const BY_ABSORBER = ["monthly", "factors", "ledger"];
const bidi = (text) => element("bdi", { text });

/** Fill the form that says which place and absorbers the charts show. */
function placeForm() {
  const form = document.getElementById("choice");
  const several = study.places.length > 1;
  form.replaceChildren();
  if (several) form.append(select("Place", "place", study.places.map((place, i) => [i, place.name]), OF_PLACE));
  const set = element("fieldset", {}, element("legend", { text: "Absorbers" }));
  study.absorbers.forEach((absorber, i) => {
    const box = element("input", { type: "checkbox", id: `absorber-${i}`, checked: choice.absorbers.has(i) });
    box.addEventListener("change", () => {
      if (box.checked) choice.absorbers.add(i);
      else choice.absorbers.delete(i);
      draw(BY_ABSORBER);
    });
    set.append(element("label", {}, box, swatch(i), bidi(absorber.name)));
  });
  form.append(set);
  form.addEventListener("submit", (event) => event.preventDefault());
}

const others = () => study.absorbers.map((absorber, i) => [i, absorber.name]).filter(([i]) => i !== study.reference);
const qualities = () => [...new Set((study.gap_sweep ?? []).map((curve) => curve.quality))];
const pairKinds = () => [...new Set((study.gap_pairs ?? []).map((pairs) => pairs.kind))];
const chanceMeasures = () => [...new Set((study.chance ?? []).map((row) => row.measure))];

/** Fill the controls that belong to single charts. */
function controls() {
  const parts = {
    overview: () => [select("Compared by", "basis", ["specific_yield_kwh_kwp", "energy_kwh_m2"].map((key) => [key, study.measures[key].name]), ["overview"])],
    monthly: () => [select("Measure", "measure", Object.entries(study.measures).map(([key, m]) => [key, m.name]), ["monthly"])],
    hours: () => (others().length < 1 ? [] : [select("Absorber", "versus", others(), ["hours"])]),
    spectrum: spectrumControls,
    gap_sweep: () => [
      select("Quality of the absorbers", "quality", qualities().map((name, i) => [i, name]), ["gap_sweep"]),
      select("Scale", "relative", [["no", "energy"], ["yes", "share of the best"]], ["gap_sweep"]),
    ],
    gap_pairs: () => {
      const kinds = pairKinds();
      return kinds.length < 2 ? [] : [select("Kind of pair", "pairs", kinds.map((kind, i) => [i, kind]), ["gap_pairs"])];
    },
    "chance-range": () => {
      const names = chanceMeasures().map((key, i) => [i, study.measures[key]?.name ?? key]);
      return [select("Measure", "chance", names, ["chance-range"])];
    },
  };
  for (const [id, make] of Object.entries(parts)) {
    const place = document.querySelector(`#${id} .controls`);
    if (!place) continue;
    const held = document.activeElement?.id;
    place.replaceChildren(...make());
    place.hidden = place.childElementCount === 0;
    if (held && place.querySelector(`#${CSS.escape(held)}`)) document.getElementById(held).focus();
  }
}

const spectraHere = () => study.spectra?.find((one) => one.place === choice.place);
const daysHere = () => spectraHere()?.days ?? [];
const dayHere = () => daysHere()[Math.min(choice.day, daysHere().length - 1)];
function middleHour() {
  const day = dayHere();
  return day ? d3.minIndex(day.zenith) : 0;
}

function spectrumControls() {
  const days = daysHere();
  if (!days.length) return [];
  const day = dayHere();
  choice.hour = Math.min(choice.hour, day.hours.length - 1);
  const slider = element("input", { type: "range", id: "choose-hour", min: 0, max: day.hours.length - 1, step: 1, value: choice.hour });
  const shown = element("output", { for: "choose-hour", text: day.hours[choice.hour] });
  const speak = () => slider.setAttribute("aria-valuetext", day.hours[choice.hour]);
  slider.addEventListener("input", () => {
    choice.hour = Number(slider.value);
    shown.textContent = day.hours[choice.hour];
    speak();
    draw(["spectrum"]);
  });
  speak();
  const kinds = { clear: "clearest", median: "middle" };
  return [
    select("Day", "day", days.map((one, i) => [i, `${one.date.slice(5)} · ${kinds[one.kind] ?? one.kind} day of its month`]), ["spectrum"]),
    element("label", {}, element("span", {}, "Hour from ", shown), slider),
    select("Absorber", "taker", study.absorbers.map((absorber, i) => [i, absorber.name]), ["spectrum"]),
  ];
}

// -------------------------------------------------------------------------------------- drawing, tables, keyboard

const PRINT_WIDTH = 680; // pixels; what A4 less its margins holds at the size of the screen's letters
let printing = false;

/** Draw some charts, or all of them. */
function draw(ids = Object.keys(CHARTS)) {
  for (const id of ids) {
    const figure = document.getElementById(id);
    if (figure && CHARTS[id]) drawOne(figure, CHARTS[id]);
  }
}

function drawOne(figure, chart) {
  const place = figure.querySelector(".plot");
  const width = printing ? PRINT_WIDTH : Math.max(240, Math.floor(place.clientWidth || 640));
  const { svg, legend, table, alt, points, note, file } = chart(width);
  for (const part of svg.querySelectorAll("[aria-label]")) {
    part.setAttribute("data-mark", part.getAttribute("aria-label")); // the drawing has one name; its parts have none
    part.removeAttribute("aria-label");
  }
  svg.setAttribute("role", "img");
  svg.setAttribute("aria-label", alt);
  const stage = element("div", { class: "stage", tabindex: 0, role: "group", "aria-label": `${alt} Arrow keys go from value to value.` }, svg);
  place.replaceChildren(...(legend ? [legend, stage] : [stage]));
  const live = figure.querySelector(".live");
  live.textContent = note ?? "";
  keyboard(stage, svg, points ?? [], live, note ?? "");
  const details = figure.querySelector("details");
  const fill = () => details.open && figure.querySelector(".numbers").replaceChildren(tableOf(table(), alt));
  details.ontoggle = fill;
  fill();
  if (file) {
    const link = figure.querySelector(".beside a");
    link.textContent = file;
    link.href = file.split("/").map(encodeURIComponent).join("/");
  }
  figure.querySelector(".save").onclick = () => save(`${figure.id}.csv`, csvOf(table()));
}

/** Return {columns, rows} as CSV; text that a spreadsheet could take for a formula is guarded by an apostrophe. */
function csvOf({ columns, rows }) {
  const cell = (value) => {
    const plain = /^−?[+]?[\d,]*\.?\d+$/.test(value) ? value.replace("−", "-").replaceAll(",", "").replace("+", "") : value;
    const safe = plain === value && /^[=+\-@＝＋－＠\t\r\n']/.test(plain) ? "'" + plain : plain;
    return /[",\n\r]/.test(safe) ? `"${safe.replaceAll('"', '""')}"` : safe;
  };
  return [columns, ...rows].map((row) => row.map((value) => cell(String(value))).join(",")).join("\n") + "\n";
}

function save(name, text) {
  const link = element("a", { href: URL.createObjectURL(new Blob([text], { type: "text/csv" })), download: name });
  link.click();
  setTimeout(() => URL.revokeObjectURL(link.href), 1000);
}

/** Let arrow keys go from point to point: a ring marks it, its numbers are said below the chart. */
function keyboard(stage, svg, points, live, note) {
  const at = (name, value) => {
    const scale = svg.scale?.(name);
    return scale ? scale.apply(value) + (scale.bandwidth ?? 0) / 2 : 0;
  };
  let number = -1;
  let ring = null;
  const leave = () => {
    ring?.remove();
    ring = null;
  };
  stage.addEventListener("blur", () => {
    leave();
    live.textContent = note;
  });
  stage.addEventListener("keydown", (event) => {
    const step = { ArrowRight: 1, ArrowDown: 1, ArrowLeft: -1, ArrowUp: -1 }[event.key];
    if (!step || !points.length) return;
    event.preventDefault();
    number = number < 0 ? (step > 0 ? 0 : points.length - 1) : (number + step + points.length) % points.length;
    const point = points[number];
    leave();
    ring = document.createElementNS("http://www.w3.org/2000/svg", "circle");
    const where = { cx: at("x", point.x), cy: at("y", point.y), r: 8, fill: "none", stroke: "var(--mark)", "stroke-width": 3 };
    for (const [name, value] of Object.entries(where)) ring.setAttribute(name, value);
    svg.append(ring);
    live.textContent = point.text;
  });
}

/** Return a table element from {columns, rows}; the first cell of a row heads it. */
function tableOf({ columns, rows }, title) {
  const head = element("tr", {}, ...columns.map((text) => element("th", { scope: "col" }, bidi(text))));
  const body = rows.map((row) =>
    element("tr", {}, ...row.map((cell, i) => (i ? element("td", { "data-label": columns[i] }, bidi(cell)) : element("th", { scope: "row" }, bidi(cell))))),
  );
  const made = element("table", {}, element("caption", { text: title }), element("thead", {}, head), element("tbody", {}, ...body));
  cards(made);
  return made;
}

/** Make a table fold into cards on narrow screens, its meaning kept for those who do not see it. */
function cards(table) {
  table.classList.add("cards");
  const labels = Array.from(table.querySelectorAll("thead th"), (cell) => cell.textContent);
  const roles = { table: "table", thead: "rowgroup", tbody: "rowgroup", tr: "row", "thead th": "columnheader", "tbody th": "rowheader", td: "cell" };
  for (const [path, role] of Object.entries(roles)) {
    const found = path === "table" ? [table] : table.querySelectorAll(path);
    for (const one of found) one.setAttribute("role", role);
  }
  for (const row of table.querySelectorAll("tbody tr")) {
    Array.from(row.cells).forEach((cell, i) => cell.tagName === "TD" && cell.setAttribute("data-label", labels[i]));
  }
}
