"use strict";
// Charts of gaps and films; the list of all charts; and the start of the page.

const STANDARD = "standard spectrum";
const placeName = (p) => (p < 0 ? STANDARD : study.places[p].name);

/** Return the best point of a curve and the ends of the stretch within a share of it. */
function plateau(gap, energy, within = 0.01) {
  const best = d3.maxIndex(energy);
  const limit = energy[best] * (1 - within);
  const edge = (step) => {
    let at = best;
    while (energy[at + step] >= limit) at += step;
    if (energy[at + step] === undefined) return gap[at];
    return gap[at] + ((energy[at] - limit) / (energy[at] - energy[at + step])) * (gap[at + step] - gap[at]);
  };
  return { best, low: edge(-1), high: edge(1) };
}

function gap_sweep(width) {
  const quality = qualities()[choice.quality];
  const relative = choice.relative === "yes";
  const few = study.places.length <= 16; // more curves are a thicket: then the chosen place's only
  const curves = study.gap_sweep.filter((one) => one.quality === quality && (few || one.place < 0 || one.place === choice.place)).map((one) => {
    const top = d3.max(one.energy_kwh_m2);
    const y = one.energy_kwh_m2.map((e) => (relative ? (100 * e) / top : e));
    return { ...one, y, ...plateau(one.gap_ev, one.energy_kwh_m2), number: one.place < 0 ? 6 : one.place };
  });
  const unit = relative ? "%" : "kWh/m²";
  const data = curves.flatMap((one) => one.y.map((y, i) => ({ one, y, x: one.gap_ev[i] })));
  const text = (d) => `${placeName(d.one.place)}: ${figures(d.y, 1)} ${unit} at ${figures(d.x, 2)} eV; best ${figures(d.one.gap_ev[d.one.best], 2)} eV, within 1 % from ${figures(d.one.low, 2)} to ${figures(d.one.high, 2)} eV`;
  const style = (one) => (one.place < 0 ? { stroke: "currentColor", strokeDasharray: "6 4" } : { stroke: look(one.number).colour, strokeDasharray: look(one.number).dash });
  const labels = width > 560 && curves.length <= 16;
  const room = labels ? Math.min(240, 26 + Math.max(40, ...curves.map((one) => textWidth(placeName(one.place))))) : 14;
  const height = Math.max(360, 60 + 15 * (labels ? curves.length : 0));
  const domain = relative ? [d3.min(data, (d) => d.y), 101] : [0, 1.04 * d3.max(data, (d) => d.y)];
  const span = d3.extent(data, (d) => d.x);
  const ends = curves.map((one) => ({ y: one.y.at(-1), number: one.number, text: placeName(one.place), standard: one.place < 0 }));
  const thick = (one) => [[one.low, at(one, one.low)], ...one.gap_ev.map((g, i) => [g, one.y[i]]).filter(([g]) => g > one.low && g < one.high), [one.high, at(one, one.high)]];
  const at = (one, gap) => d3.scaleLinear(one.gap_ev, one.y)(gap);
  const svg = plot(width, {
    marginLeft: 52, marginRight: room, marginBottom: 38, marginTop: 26, height,
    x: { domain: span, label: "gap [eV]", labelAnchor: "center", labelArrow: "none" },
    y: { domain, grid: true, label: relative ? "share of the best [%]" : "energy [kWh/m² a year]", labelArrow: "none" },
    marks: [
      ...curves.map((one) => Plot.line(one.gap_ev.map((g, i) => [g, one.y[i]]), { strokeWidth: 1.6, ...style(one) })),
      ...curves.map((one) => Plot.line(thick(one), { stroke: style(one).stroke, strokeWidth: 6, strokeOpacity: 0.35 })),
      ...curves.map((one) => (one.place < 0 ? Plot.dot([[one.gap_ev[one.best], one.y[one.best]]], { fill: "currentColor", symbol: "diamond", r: 5 }) : signs([[one.gap_ev[one.best], one.y[one.best]]], one.number, { r: 5 }))),
      ...(labels ? endLabels(ends, span[1], room, { pixels: height - 64, domain, perPixel: (span[1] - span[0]) / (width - 52 - room) }) : []),
      Plot.tip(data, Plot.pointer({ x: "x", y: "y", title: text, maxRadius: 40 })),
    ],
  });
  return {
    svg,
    legend: labels ? null : legendOf(study.places.slice(0, 16).map((place) => place.name), true),
    alt: `Energy a year over the gap for absorbers of quality ${quality}, per place and under the standard spectrum.`,
    points: data.map((d) => ({ x: d.x, y: d.y, text: text(d) })),
    table: () => ({
      columns: ["gap [eV]", ...curves.map((one) => `${placeName(one.place)} [${unit}]`)],
      rows: curves[0].gap_ev.map((gap, i) => [figures(gap, 2), ...curves.map((one) => figures(one.y[i], 1))]),
    }),
  };
}

function gap_pairs(width) {
  const alike = study.gap_pairs.filter((pairs) => pairs.kind === pairKinds()[choice.pairs]);
  const one = alike.find((pairs) => pairs.place === choice.place) ?? alike[0];
  const data = one.energy_kwh_m2.map((e, i) => ({ e, x: one.top_gap_ev[i], y: one.bottom_gap_ev[i] }));
  const best = data[d3.maxIndex(data, (d) => d.e)];
  const floor = d3.quantile(data, 0.1, (d) => d.e);
  const shade = (d) => 0.04 + 0.8 * Math.max(0, (d.e - floor) / (best.e - floor || 1)) ** 2;
  const text = (d) => `${figures(d.x, 2)} over ${figures(d.y, 2)} eV: ${figures(d.e, 1)} kWh/m², ${signed(100 * (d.e / best.e - 1), 2)} % of the best`;
  const gaps = (key) => [...new Set(data.map((d) => d[key]))].sort(d3.ascending);
  const sparse = (list, most) => list.filter((_, i) => i % Math.ceil(list.length / most) === 0);
  const [tops, bottoms] = [gaps("x"), gaps("y")];
  const flat = data.filter((d) => d.e >= 0.99 * best.e);
  const nearest = (list, v) => d3.least(list, (g) => Math.abs(g - v));
  const today = one.materials.map((m) => ({ ...m, x: nearest(tops, m.top_gap_ev), y: nearest(bottoms, m.bottom_gap_ev) }));
  const ofToday = (m) => `${m.name}, ${figures(m.top_gap_ev, 2)} over ${figures(m.bottom_gap_ev, 2)} eV: ${signed(-100 * m.behind_best, 1)} % of the best`;
  const svg = plot(width, {
    marginLeft: 52, marginRight: 12, marginBottom: 38, marginTop: 26, height: 380,
    x: { type: "band", padding: 0, domain: tops, ticks: sparse(tops, 8), tickFormat: (v) => figures(v, 2), label: "gap on top [eV]", labelAnchor: "center", labelArrow: "none", tickSize: 0 },
    y: { type: "band", padding: 0, domain: bottoms.slice().reverse(), ticks: sparse(bottoms, 10), tickFormat: (v) => figures(v, 2), label: "gap below [eV]", labelArrow: "none", tickSize: 0 },
    marks: [
      Plot.cell(data, { x: "x", y: "y", fill: "var(--s0)", fillOpacity: shade, inset: 0 }),
      Plot.cell(flat, { x: "x", y: "y", fill: "none", stroke: "currentColor", strokeWidth: 1.2, inset: 0.5 }),
      Plot.dot(today, { x: "x", y: "y", r: 4, symbol: "square", fill: "var(--s1)", stroke: "var(--paper)", strokeWidth: 1 }),
      Plot.dot([best], { x: "x", y: "y", r: 8, stroke: "currentColor", strokeWidth: 2.5 }),
      Plot.tip(data, Plot.pointer({ x: "x", y: "y", title: text })),
    ],
  });
  return {
    svg,
    note: `Best at ${placeName(one.place)}: ${figures(best.x, 2)} over ${figures(best.y, 2)} eV with ${figures(best.e, 1)} kWh/m².` + (today.length ? ` Gaps of today, at the same quality: ${today.map(ofToday).join("; ")}.` : ""),
    alt: `Energy a year over the gaps of two junctions at ${placeName(one.place)}.`,
    points: data.map((d) => ({ x: d.x, y: d.y, text: text(d) })),
    table: () => ({ columns: ["gap on top [eV]", "gap below [eV]", "energy [kWh/m²]"], rows: data.map((d) => [figures(d.x, 2), figures(d.y, 2), figures(d.e, 1)]) }),
  };
}

function generation(width) {
  const films = study.generation.map((film, number) => ({ ...film, number, name: film.junctions > 1 ? `${names()[film.absorber]}, junction ${film.junction}` : names()[film.absorber] }));
  const least = 1e-3; // um, where the logarithm of the depth begins
  const data = films.flatMap((film) => film.depth_um.map((x, i) => ({ film, x: Math.max(x, least), y: 100 * film.share_above[i], rate: film.generation_ma_cm2_um[i] })));
  const text = (d) => `${d.film.name}: ${figures(d.y, 1)} % of all pairs are made within ${d.x.toPrecision(3)} µm of its front; there ${d.rate.toPrecision(3)} mA/cm² per µm`;
  const svg = plot(width, {
    marginLeft: 48, marginRight: 14, marginBottom: 38, marginTop: 26, height: 320,
    x: { type: "log", domain: [least, d3.max(data, (d) => d.x)], grid: true, ticks: 6, tickFormat: (v) => (Math.log10(v) % 1 === 0 ? `${+v.toPrecision(1)}` : ""), label: "depth below the front of the film [µm]", labelAnchor: "center", labelArrow: "none" },
    y: { domain: [0, 100], grid: true, label: "share of pairs made above [%]", labelArrow: "none" },
    marks: [
      ...films.map((film) => Plot.line(data.filter((d) => d.film === film), { x: "x", y: "y", stroke: look(film.number).colour, strokeDasharray: look(film.number).dash, strokeWidth: 1.8 })),
      Plot.tip(data, Plot.pointer({ x: "x", y: "y", title: text, maxRadius: 40 })),
    ],
  });
  return {
    svg,
    legend: legendOf(films.map((film) => film.name), true),
    alt: "Share of pairs made above each depth, per film, under the standard spectrum.",
    points: data.map((d) => ({ x: d.x, y: d.y, text: text(d) })),
    table: () => ({ columns: ["film", "depth [µm]", "charge made [mA/cm² per µm]", "share above [%]"], rows: data.filter((_, i) => i % 8 === 0).map((d) => [d.film.name, d.x.toPrecision(3), d.rate.toPrecision(3), figures(d.y, 1)]) }),
  };
}

/** Draw rows of names with marks on one axis of numbers. */
function rowsChart(width, rows, texts, label, marks, more = {}) {
  const axis = nameAxis(texts.length ? texts : [""], width);
  return plot(width, {
    marginLeft: axis.room, marginRight: 20, marginBottom: 42, height: 64 + 30 * rows.length,
    x: { label, labelAnchor: "center", labelArrow: "none", grid: true, ...more },
    y: { type: "band", domain: d3.range(rows.length), label: null, tickSize: 0, tickFormat: axis.ticks },
    marks,
  });
}

const CHARTS = { overview, monthly, factors, ledger, hours, spectrum, gap_sweep, gap_pairs, generation, "chance-range": chanceRange, duel, ranks, causes, regret, "worth-chart": worth };

// ---------------------------------------------------------------------------------------------------------- start

document.querySelectorAll("main table").forEach(cards);
choice.hour = middleHour();
placeForm();
controls();
draw();

window.addEventListener("beforeprint", () => {
  printing = true;
  for (const one of document.querySelectorAll("details.site")) one.open = true;
  draw();
});
window.addEventListener("afterprint", () => {
  printing = false;
  draw();
});

let drawnFor = document.body.clientWidth;
let waiting = 0;
window.addEventListener("resize", () => {
  if (document.body.clientWidth === drawnFor) return;
  clearTimeout(waiting);
  waiting = setTimeout(() => {
    drawnFor = document.body.clientWidth;
    draw();
  }, 120);
});
