"use strict";
// One function per chart: from the study and the present choice to {svg, table, alt, points, legend, note}.

const MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"];
const FACTORS = ["optical", "spectral", "low_light", "temperature", "mismatch", "system"].map((name) => `${name}_factor`);
const RED_END_NM = 1800;
const names = () => study.absorbers.map((absorber) => absorber.name);
const here = () => study.places[choice.place];
const chosen = () => [...choice.absorbers].sort((a, b) => a - b);

function plot(width, options) {
  return Plot.plot({ width, className: "drawing", style: { fontSize: "12px", background: "none", color: "inherit" }, ...options });
}

/** Return left room and cut names for an axis of names. */
function nameAxis(texts, width) {
  const room = Math.min(0.36 * width, 8 + Math.max(...texts.map((text) => textWidth(text)), 40));
  const cut = texts.map((text) => fit(text, room - 8));
  return { room, ticks: (i) => cut[i] };
}

/**
 * Return marks that label lines at their right end, none over another, a hair line leading to each.
 * `ends` are {y, number, text}; `pixels` is the height of the plot, `perPixel` one pixel in units of x.
 */
function endLabels(ends, x, room, { pixels, domain, perPixel }) {
  const gap = (14 * (domain[1] - domain[0])) / pixels;
  const places = spread(ends.map((end) => end.y), gap, domain[0], domain[1]);
  const aside = x + 10 * perPixel;
  return ends.flatMap((end, i) => {
    const colour = end.standard ? "currentColor" : look(end.number).colour;
    const sign = end.standard ? Plot.dot([[aside, places[i]]], { symbol: "diamond", fill: colour, r: 3.5 }) : signs([[aside, places[i]]], end.number, { r: 3.5 });
    return [
      Plot.link([0], { x1: x, x2: aside, y1: end.y, y2: places[i], stroke: colour, strokeWidth: 0.8 }),
      sign,
      Plot.text([0], { x: aside, y: places[i], text: [fit(end.text, room - 24)], dx: 7, textAnchor: "start", fill: "currentColor" }),
    ];
  });
}

function legendOf(texts, withLine = false, first = 0) {
  const list = element("ul", { class: "legend" });
  texts.forEach((text, i) => list.append(element("li", {}, swatch(first + i, withLine), bidi(text))));
  return list;
}

// ------------------------------------------------------------------------------------------------------ all places

function overview(width) {
  const base = study.reference;
  const energy = study.annual[choice.basis];
  const per = choice.basis === "energy_kwh_m2" ? "energy per area" : "yield per rated power";
  // By datasheet every rated kilowatt yields the same.
  const rated = (a) => (choice.basis === "energy_kwh_m2" ? study.absorbers[a].stc_efficiency : 1);
  const promise = study.absorbers.map((_, a) => 100 * (rated(a) / rated(base) - 1));
  const mean = study.absorbers.map((_, a) => d3.mean(study.places, (_, p) => energy[p][a] / energy[p][base]));
  const order = names().map((_, i) => i).sort((a, b) => promise[b] - promise[a] || mean[b] - mean[a]);
  const axis = nameAxis(names(), width);
  const data = study.places.flatMap((place, p) =>
    order.map((a) => ({ p, a, x: 100 * (energy[p][a] / energy[p][base] - 1), place: place.name })).filter((d) => Number.isFinite(d.x)),
  );
  const text = (d) => `${names()[d.a]} at ${d.place}: ${signed(d.x, 2)} % (datasheet ${signed(promise[d.a], 2)} %)`;
  const few = study.places.length <= 12;
  const svg = plot(width, {
    marginLeft: axis.room, marginRight: 16, marginBottom: 42, height: 70 + 30 * order.length,
    x: { label: `${per} against ${fit(names()[base], 160)} [%]`, grid: true, nice: true, labelAnchor: "center", labelArrow: "none" },
    y: { type: "band", domain: order, label: null, tickFormat: axis.ticks, tickSize: 0 },
    marks: [
      Plot.ruleX([0], { stroke: "currentColor", strokeOpacity: 0.5 }),
      Plot.tickX(order, { x: (a) => promise[a], y: (a) => a, stroke: "currentColor", strokeWidth: 3, inset: 4 }),
      ...study.places.map((_, p) => signs(data.filter((d) => d.p === p), few ? p : 0, { x: "x", y: "a", r: 5, fillOpacity: few ? 1 : 0.4 })),
      Plot.tip(data, Plot.pointer({ x: "x", y: "a", title: text, maxRadius: 30 })),
    ],
  });
  return {
    svg,
    legend: few ? legendOf(study.places.map((place) => place.name)) : null,
    alt: `Each absorber's ${per} against ${names()[base]}, per place, with what the datasheets promise.`,
    points: data.map((d) => ({ x: d.x, y: d.a, text: text(d) })),
    table: () => ({
      columns: ["absorber", "datasheet [%]", ...study.places.map((place) => `${place.name} [%]`)],
      rows: order.map((a) => [
        names()[a], signed(promise[a], 2),
        ...study.places.map((_, p) => signed(100 * (energy[p][a] / energy[p][base] - 1), 2)),
      ]),
    }),
  };
}

// ------------------------------------------------------------------------------------------------------- one place

function monthly(width) {
  const values = study.monthly[choice.measure][choice.place];
  const { name, unit } = study.measures[choice.measure];
  const lines = chosen().map((a) => values[a].map((y, m) => ({ a, m, y })).filter((d) => d.y !== null));
  const data = lines.flat();
  const text = (d) => `${names()[d.a]}, ${MONTHS[d.m]}: ${name} ${withUnit(d.y, choice.measure)}`;
  const labels = width > 560;
  const room = labels ? Math.min(230, 26 + Math.max(40, ...chosen().map((a) => textWidth(names()[a])))) : 14;
  const height = Math.max(300, 60 + 15 * (labels ? chosen().length : 0));
  let domain = d3.extent(data, (d) => d.y);
  if (domain[0] === undefined) domain = [0, 1];
  const pad = 0.05 * (domain[1] - domain[0] || 1);
  domain = [domain[0] - pad, domain[1] + pad];
  const ends = lines.filter((line) => line.length).map((line) => ({ y: line.at(-1).y, number: line[0].a, text: names()[line[0].a] }));
  const last = d3.max(data, (d) => d.m) ?? 11;
  const svg = plot(width, {
    marginLeft: 56, marginRight: room, marginBottom: 34, marginTop: 26, height,
    x: { type: "linear", domain: [-0.2, 11.2], ticks: d3.range(12), tickFormat: (m) => (width > 480 ? MONTHS[m] : MONTHS[m]?.[0]), label: null },
    y: { domain, grid: true, label: unit === "1" ? name : `${name} [${unit}]`, labelArrow: "none", tickFormat: (v) => figures(v, tickDigits(domain)) },
    marks: [
      domain[0] < 1 && domain[1] > 1 && unit === "1" ? Plot.ruleY([1], { stroke: "currentColor", strokeOpacity: 0.6 }) : null,
      ...lines.map((line) => line.length && Plot.line(line, { x: "m", y: "y", stroke: look(line[0].a).colour, strokeWidth: 1.8, strokeDasharray: look(line[0].a).dash })),
      ...lines.map((line) => line.length && signs(line, line[0].a, { x: "m", y: "y", r: 3 })),
      ...(labels ? endLabels(ends, last, room, { pixels: height - 60, domain, perPixel: 11.4 / (width - 56 - room) }) : []),
      Plot.tip(data, Plot.pointer({ x: "m", y: "y", title: text, maxRadius: 30 })),
    ].filter(Boolean),
  });
  return {
    svg,
    alt: `${name} of the chosen absorbers by month at ${here().name}.`,
    points: data.map((d) => ({ x: d.m, y: d.y, text: text(d) })),
    table: () => ({
      columns: ["absorber", ...MONTHS],
      rows: chosen().map((a) => [names()[a], ...values[a].map((y) => figures(y, study.measures[choice.measure].digits))]),
    }),
  };
}

/** Return the digits that tell the ticks of a domain apart. */
function tickDigits([low, high]) {
  return Math.max(0, Math.min(4, Math.ceil(-Math.log10((high - low) / 5 || 1))));
}

/** Return a mark of cells shaded by sign and size, and the numbers in them. */
function shaded(data, biggest, text, x, y) {
  const shade = (d) => 0.06 + 0.44 * Math.min(1, Math.abs(d.v) / (biggest || 1));
  return [
    Plot.cell(data.filter((d) => d.v !== null), { x, y, fill: (d) => (d.v >= 0 ? "var(--s0)" : "var(--s1)"), fillOpacity: shade, inset: 1 }),
    ...(text ? [Plot.text(data, { x, y, text, fill: "currentColor" })] : []),
  ];
}

function factors(width) {
  const rows = chosen();
  const data = rows.flatMap((a) => FACTORS.map((f) => ({ a, f, v: gain(study.annual[f][choice.place][a]) })));
  const biggest = d3.max(data, (d) => Math.abs(d.v)) ?? 1;
  const axis = nameAxis(rows.length ? rows.map((a) => names()[a]) : [""], width);
  const narrow = width < 620;
  const text = (d) => `${names()[d.a]}: ${study.measures[d.f].name} ${figures(1 + d.v / 100, 4)}, ${signed(d.v, 2)} %`;
  const svg = plot(width, {
    marginLeft: axis.room, marginRight: 8, marginTop: narrow ? 74 : 30, marginBottom: 8, height: (narrow ? 90 : 46) + 28 * rows.length,
    x: { type: "band", domain: FACTORS, padding: 0, axis: "top", label: null, tickSize: 0, tickRotate: narrow ? -60 : 0, tickFormat: (f) => f.replace("_factor", "").replace("_", " ") },
    y: { type: "band", domain: rows, padding: 0, label: null, tickSize: 0, tickFormat: (a) => axis.ticks(rows.indexOf(a)) },
    marks: [...shaded(data, biggest, (d) => signed(d.v, narrow ? 1 : 2), "f", "a"), Plot.tip(data, Plot.pointer({ x: "f", y: "a", title: text }))],
  });
  return {
    svg,
    alt: `What each factor does to the yield of the chosen absorbers at ${here().name}, in percent.`,
    points: data.map((d) => ({ x: d.f, y: d.a, text: text(d) })),
    table: () => ({
      columns: ["absorber", ...FACTORS.map((f) => study.measures[f].name), "performance ratio"],
      rows: rows.map((a) => [names()[a], ...[...FACTORS, "performance_ratio"].map((f) => figures(study.annual[f][choice.place][a], 4))]),
    }),
  };
}

const gain = (factor) => (factor === null ? null : 100 * (factor - 1));

function ledger(width) {
  const { fates, values } = study.ledger;
  const rows = chosen();
  const any = (f) => rows.some((a) => (values[f][choice.place][a] ?? 0) > 0.005);
  const order = fates.map((_, i) => i).filter(any).reverse(); // what is delivered starts at zero, so that it can be compared
  const data = rows.flatMap((a) => {
    let sum = 0;
    return order.map((f) => ({ a, f, v: values[f][choice.place][a] ?? 0, x1: sum, x2: (sum += values[f][choice.place][a] ?? 0) }));
  });
  const axis = nameAxis(rows.length ? rows.map((a) => names()[a]) : [""], width);
  const say = (f) => fates[f].replaceAll("_", " ");
  const text = (d) => `${names()[d.a]}, ${say(d.f)}: ${figures(d.v, 1)} kWh/m²`;
  const svg = plot(width, {
    marginLeft: axis.room, marginRight: 16, marginBottom: 38, height: 60 + 30 * rows.length,
    x: { label: "light of the year [kWh/m²]", labelAnchor: "center", labelArrow: "none", grid: true },
    y: { type: "band", domain: rows, label: null, tickSize: 0, padding: 0.2, tickFormat: (a) => axis.ticks(rows.indexOf(a)) },
    marks: [
      Plot.barX(data, { x1: "x1", x2: "x2", y: "a", fill: (d) => fateColour(order.indexOf(d.f)), fillOpacity: (d) => fateShade(order.indexOf(d.f)), stroke: "var(--raised)" }),
      Plot.tip(data, Plot.pointer({ x: (d) => (d.x1 + d.x2) / 2, y: "a", title: text })),
    ],
  });
  const legend = element("ul", { class: "legend" });
  order.forEach((f, i) => legend.append(element("li", {}, element("span", { class: "patch", style: `background:${fateColour(i)};opacity:${fateShade(i)}` }), bidi(say(f)))));
  return {
    svg, legend,
    alt: `Where the year's light goes for the chosen absorbers at ${here().name}.`,
    points: data.map((d) => ({ x: (d.x1 + d.x2) / 2, y: d.a, text: text(d) })),
    table: () => ({
      columns: ["absorber", ...fates.map((_, f) => `${say(f)} [kWh/m²]`)],
      rows: rows.map((a) => [names()[a], ...fates.map((_, f) => figures(values[f][choice.place][a], 2))]),
    }),
  };
}

const fateColour = (i) => `var(--s${[2, 0, 1, 3, 4, 5, 6][i % 7]})`;
const fateShade = (i) => (i < 7 ? 0.9 : 0.5);

function hours(width) {
  if (choice.versus < 0) return nothing(width, "There is no second absorber to compare with.");
  const place = study.by_hour[choice.place];
  if (!place) return nothing(width, "The page holds no hours of this place.");
  const [one, base] = [place[choice.versus], place[study.reference]];
  const data = d3.range(288).map((i) => ({ m: Math.floor(i / 24), h: i % 24, v: one[i] || base[i] ? one[i] - base[i] : null }));
  const lit = data.filter((d) => d.v !== null);
  const biggest = d3.max(lit, (d) => Math.abs(d.v));
  const text = (d) => `${MONTHS[d.m]}, ${d.h}–${d.h + 1} h: ${signed(d.v, 2)} kWh/kWp`;
  const span = d3.extent(lit, (d) => d.h);
  const svg = plot(width, {
    marginLeft: 40, marginRight: 8, marginBottom: 38, height: 320,
    x: { type: "band", padding: 0, domain: d3.range(span[0], span[1] + 1), label: "hour of the day", labelAnchor: "center", labelArrow: "none", tickSize: 0 },
    y: { type: "band", padding: 0, domain: d3.range(12), tickFormat: (m) => MONTHS[m], label: null, tickSize: 0 },
    marks: [...shaded(lit, biggest, null, "h", "m"), Plot.tip(lit, Plot.pointer({ x: "h", y: "m", title: text }))],
  });
  const total = d3.sum(lit, (d) => d.v);
  const won = d3.sum(lit, (d) => Math.max(d.v, 0));
  return {
    svg,
    note: `${names()[choice.versus]} at ${here().name}. Blue: more than ${names()[study.reference]}, orange: less. Won ${figures(won, 1)}, lost ${figures(won - total, 1)}, in all ${signed(total, 1)} kWh/kWp a year.`,
    alt: `Yield of ${names()[choice.versus]} less that of ${names()[study.reference]} by month and hour at ${here().name}.`,
    points: lit.map((d) => ({ x: d.h, y: d.m, text: text(d) })),
    table: () => ({
      columns: ["month", ...d3.range(span[0], span[1] + 1).map((h) => `${h} h`)],
      rows: d3.range(12).map((m) => [MONTHS[m], ...data.filter((d) => d.m === m && d.h >= span[0] && d.h <= span[1]).map((d) => (d.v === null ? "–" : signed(d.v, 2)))]),
    }),
  };
}

function nothing(width, note) {
  return { svg: plot(width, { height: 40, axis: null, marks: [] }), note, alt: note, table: () => ({ columns: ["note"], rows: [[note]] }) };
}

/** Return a day's light of one hour by band [W/m²] from its packed form. */
function unpacked([scale, text]) {
  const bytes = Uint8Array.from(atob(text), (sign) => sign.charCodeAt(0));
  return Array.from({ length: bytes.length / 2 }, (_, i) => scale * (bytes[2 * i] + 256 * bytes[2 * i + 1]));
}

function spectrum(width) {
  const day = dayHere();
  if (!day) return nothing(width, "The page holds no spectra of this place; the folder spectra has them where the study kept them.");
  const edges = study.band_edges_nm;
  const taker = study.absorbers[choice.taker];
  const shares = study.responses?.[choice.taker] ?? taker.edges_nm.map((edge, j) => stepShare(edges, edge, taker.edges_nm[j - 1]));
  const light = unpacked(day.light[choice.hour]);
  const data = light.map((energy, b) => ({ b, x1: edges[b], x2: edges[b + 1], y: energy / (edges[b + 1] - edges[b]), part: shares.map((s) => s[b]) }));
  const shown = data.filter((d) => d.x1 < RED_END_NM);
  const brightest = d3.max(day.light, (packed) => d3.max(unpacked(packed), (e, b) => e / (edges[b + 1] - edges[b])));
  const text = (d) => `${figures(d.x1, 0)}–${figures(d.x2, 0)} nm: ${figures(d.y, 3)} W/(m² nm); ${taker.name} collects ${figures(100 * d3.sum(d.part), 0)} % of the photons`;
  const svg = plot(width, {
    marginLeft: 52, marginRight: 22, marginBottom: 38, marginTop: 26, height: 340,
    x: { domain: [edges[0], RED_END_NM], label: "wavelength [nm]", labelAnchor: "center", labelArrow: "none", tickFormat: "d" },
    y: { domain: [0, brightest || 1], grid: true, label: "light on the plane [W/(m² nm)]", labelArrow: "none" },
    marks: [
      Plot.rectY(shown, { x1: "x1", x2: "x2", y: "y", fill: "currentColor", fillOpacity: 0.12, clip: true }),
      ...shares.map((_, j) => Plot.rectY(shown, { x1: "x1", x2: "x2", y1: (d) => d.y * d3.sum(d.part.slice(0, j)), y2: (d) => d.y * d3.sum(d.part.slice(0, j + 1)), fill: look(choice.taker + j).colour, fillOpacity: j ? 0.5 : 0.8, clip: true })),
      Plot.line(shown.flatMap((d) => [[d.x1, d.y], [d.x2, d.y]]), { stroke: "currentColor", strokeWidth: 1.3, clip: true }),
      Plot.tip(shown, Plot.pointerX({ x: (d) => (d.x1 + d.x2) / 2, y: "y", title: text })),
    ],
  });
  const at = (name, digits, unit) => (day[name] ? `${figures(day[name][choice.hour], digits)}${unit}` : null);
  const state = [
    ["sun", day.zenith ? `${figures(90 - day.zenith[choice.hour], 0)}° up` : null], ["on the plane", `${figures(d3.sum(light), 0)} W/m²`],
    ["beam", at("dni", 0, " W/m²")], ["sky", at("dhi", 0, " W/m²")], ["haze (500 nm)", at("aod500", 2, "")],
    ["water", at("precipitable_water", 1, " cm")], ["cloud depth", at("cloud_optical_depth", 1, "")], ["air", at("temp_air", 0, " °C")],
  ].filter(([, value]) => value);
  return {
    svg,
    file: spectraHere().file,
    note: `${day.date.slice(5)}, ${day.hours[choice.hour]} at ${here().name}: ` + state.map(([name, value]) => `${name} ${value}`).join(" · "),
    alt: `Spectrum on the plane at ${here().name}, ${day.date.slice(5)}, ${day.hours[choice.hour]}, and what ${taker.name} collects of it.`,
    points: shown.map((d) => ({ x: (d.x1 + d.x2) / 2, y: d.y, text: text(d) })),
    table: () => ({
      columns: ["band [nm]", "light [W/m²]", `share of photons ${taker.name} collects [%]`],
      rows: data.map((d) => [`${figures(d.x1, 1)}–${figures(d.x2, 1)}`, figures(light[d.b], 3), figures(100 * d3.sum(d.part), 1)]),
    }),
  };
}

/** Return the share of each band above a gap's edge, below that of the junction before it. */
function stepShare(edges, edge, before = 0) {
  return d3.range(edges.length - 1).map((b) => Math.max(0, Math.min(edges[b + 1], edge) - Math.max(edges[b], before)) / (edges[b + 1] - edges[b]));
}
