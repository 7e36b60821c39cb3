"use strict";
// Charts of the decision: how sure a ranking is, what it hangs on, what it gives away, and what it is worth.

const hereRows = (table) => table.filter((row) => row.place === choice.place);

function chanceRange(width) {
  const measure = chanceMeasures()[choice.chance];
  const { name, unit } = study.measures[measure] ?? { name: measure, unit: "1" };
  const rows = hereRows(study.chance).filter((row) => row.measure === measure).sort((a, b) => b.p50 - a.p50).map((row, i) => ({ ...row, i }));
  const text = (d) => `${names()[d.absorber]}: P90 ${figures(d.p90, 1)}, P50 ${figures(d.p50, 1)}, P10 ${figures(d.p10, 1)} ${unit}`;
  const svg = rowsChart(width, rows, rows.map((row) => names()[row.absorber]), `${name} [${unit}], P90 to P10`, [
    ...rows.map((row) => Plot.link([row], { x1: "p90", x2: "p10", y1: "i", y2: "i", stroke: look(row.absorber).colour, strokeWidth: 5, strokeOpacity: 0.5 })),
    ...rows.map((row) => signs([row], row.absorber, { x: "p50", y: "i", r: 5 })),
    Plot.tip(rows, Plot.pointer({ x: "p50", y: "i", title: text, maxRadius: 60 })),
  ]);
  return {
    svg,
    alt: `${name} of each absorber at ${here().name}: the range from P90, exceeded with 90 % probability, to P10.`,
    points: rows.map((row) => ({ x: row.p50, y: row.i, text: text(row) })),
    table: () => ({ columns: ["absorber", ...["P90", "P50", "P10"].map((p) => `${p} [${unit}]`)], rows: rows.map((row) => [names()[row.absorber], ...[row.p90, row.p50, row.p10].map((v) => figures(v, 1))]) }),
  };
}

function duel(width) {
  const rows = hereRows(study.head_to_head).sort((a, b) => b.probability - a.probability).map((row, i) => ({ ...row, i }));
  const title = (d) => `${names()[d.absorber]} over ${names()[d.other]}`;
  const share = (v) => `${signed(100 * v, 1)} %`;
  const said = (d) => (d.verdict ? `${names()[d.absorber]} ahead of ${names()[d.other]}: ${d.verdict}` : title(d));
  const over = (d) => (d.probability_above === undefined || d.probability_above === null ? "" : `; by more than ${figures(100 * d.above, 1)} % with ${figures(100 * d.probability_above, 0)} %`);
  const text = (d) => `${said(d)}; probability ${figures(100 * d.probability, 0)} %${over(d)}; margin P50 ${share(d.margin_p50)} (P90 ${share(d.margin_p90)}, P10 ${share(d.margin_p10)})`;
  const sure = (d) => d.probability >= 0.9 || d.probability <= 0.1;
  const svg = rowsChart(width, rows, rows.map(title), "margin [%], P90 to P10, with the probability of a lead", [
    Plot.ruleX([0], { stroke: "currentColor", strokeOpacity: 0.6 }),
    Plot.link(rows, { x1: (d) => 100 * d.margin_p90, x2: (d) => 100 * d.margin_p10, y1: "i", y2: "i", stroke: (d) => (sure(d) ? "var(--s0)" : "var(--s1)"), strokeWidth: 6, strokeOpacity: 0.5 }),
    Plot.dot(rows, { x: (d) => 100 * d.margin_p50, y: "i", r: 4.5, symbol: (d) => (sure(d) ? "circle" : "diamond"), fill: (d) => (sure(d) ? "var(--s0)" : "var(--s1)") }),
    Plot.text(rows, { x: (d) => 100 * d.margin_p10, y: "i", text: (d) => `${figures(100 * d.probability, 0)} %`, dx: 8, textAnchor: "start", fill: "currentColor" }),
    Plot.tip(rows, Plot.pointer({ x: (d) => 100 * d.margin_p50, y: "i", title: text, maxRadius: 80 })),
  ], { insetRight: 34 });
  return {
    svg,
    note: rows.length ? `${text(rows[0])}.` : "",
    alt: `Margin of energy per area between absorbers at ${here().name}, with the probability that it is above zero.`,
    points: rows.map((row) => ({ x: 100 * row.margin_p50, y: row.i, text: text(row) })),
    table: () => ({
      columns: ["in words", "probability [%]", "margin P90 [%]", "margin P50 [%]", "margin P10 [%]"],
      rows: rows.map((row) => [said(row), figures(100 * row.probability, 1), ...[row.margin_p90, row.margin_p50, row.margin_p10].map((v) => signed(100 * v, 2))]),
    }),
  };
}

/** Draw a table of shaded cells with a number in each. */
function cellChart(width, { across, down, data, text, tip, alt, columns }) {
  const axis = nameAxis(down.length ? down : [""], width);
  const narrow = width < 620;
  const tilt = across.some((name) => textWidth(name) > (width - axis.room) / across.length - 6);
  const longest = Math.max(20, ...across.map((name) => textWidth(name)));
  const svg = plot(width, {
    marginLeft: axis.room, marginRight: tilt ? 30 : 8, marginTop: tilt ? Math.min(150, 20 + 0.8 * longest) : 28, marginBottom: 8, height: (tilt ? Math.min(150, 20 + 0.8 * longest) : 28) + 12 + 28 * down.length,
    x: { type: "band", domain: d3.range(across.length), padding: 0, axis: "top", label: null, tickSize: 0, tickRotate: tilt ? -50 : 0, tickFormat: (i) => fit(across[i], 170) },
    y: { type: "band", domain: d3.range(down.length), padding: 0, label: null, tickSize: 0, tickFormat: axis.ticks },
    marks: [
      Plot.cell(data, { x: "x", y: "y", fill: "var(--s1)", fillOpacity: (d) => 0.03 + 0.5 * Math.min(1, d.shade), inset: 1 }),
      Plot.text(data, { x: "x", y: "y", text: (d) => (narrow && across.length > 6 ? "" : text(d)), fill: "currentColor", fontWeight: (d) => (d.best ? "bold" : "normal") }),
      Plot.tip(data, Plot.pointer({ x: "x", y: "y", title: tip })),
    ],
  });
  return {
    svg,
    alt,
    points: data.map((d) => ({ x: d.x, y: d.y, text: tip(d) })),
    table: () => ({ columns, rows: down.map((name, y) => [name, ...across.map((_, x) => { const cell = data.find((d) => d.x === x && d.y === y); return cell ? text(cell) : "–"; })]) }),
  };
}

function ranks(width) {
  const rows = hereRows(study.rank_chance);
  const last = d3.max(rows, (row) => row.rank) ?? 1;
  const mean = (a) => d3.sum(rows.filter((row) => row.absorber === a), (row) => row.rank * row.probability);
  const order = [...new Set(rows.map((row) => row.absorber))].sort((a, b) => mean(a) - mean(b));
  const data = rows.map((row) => ({ x: row.rank - 1, y: order.indexOf(row.absorber), v: row.probability, shade: row.probability, best: row.probability >= 0.5, rank: row.rank, absorber: row.absorber }));
  return cellChart(width, {
    across: d3.range(1, last + 1).map((rank) => `rank ${rank}`), down: order.map((a) => names()[a]), data,
    text: (d) => (d.v < 0.005 ? "" : `${figures(100 * d.v, 0)} %`),
    tip: (d) => `${names()[d.absorber]} comes out at rank ${d.rank} with ${figures(100 * d.v, 0)} % probability`,
    alt: `Probability of each rank by energy per area at ${here().name}.`,
    columns: ["absorber", ...d3.range(1, last + 1).map((rank) => `rank ${rank}`)],
  });
}

function causes(width) {
  const rows = hereRows(study.causes).sort((a, b) => b.total - a.total).slice(0, 10).map((row, i) => ({ ...row, i, name: row.input }));
  const pair = rows.length ? `${names()[rows[0].absorber]} over ${names()[rows[0].other]}` : "";
  const percent = (v) => figures(100 * Math.max(v, 0), 0);
  const text = (d) => (d.note ? `${d.name}: ${d.note}` : `${d.name}: ${percent(d.total)} % of the variance (${percent(d.total_low)} to ${percent(d.total_high)} %)`);
  const svg = rowsChart(width, rows, rows.map((row) => row.name), "share of the margin's variance [%]", [
    Plot.barX(rows, { x: (d) => 100 * Math.max(d.total, 0), y: "i", inset: 6, fill: "var(--s0)", fillOpacity: (d) => (d.note ? 0.25 : 0.75) }),
    Plot.link(rows, { x1: (d) => 100 * d.total_low, x2: (d) => 100 * d.total_high, y1: "i", y2: "i", stroke: "currentColor", strokeWidth: 1.5 }),
    Plot.tip(rows, Plot.pointer({ x: (d) => 100 * d.total, y: "i", title: text, maxRadius: 80 })),
  ], { domain: [0, 100] });
  return {
    svg,
    note: `${pair}, energy per area.`,
    alt: `What the margin of ${pair} hangs on at ${here().name}.`,
    points: rows.map((row) => ({ x: 100 * row.total, y: row.i, text: text(row) })),
    table: () => ({ columns: ["unknown", "share [%]", "from [%]", "to [%]", "remark"], rows: rows.map((row) => [row.name, percent(row.total), percent(row.total_low), percent(row.total_high), row.note ?? ""]) }),
  };
}

function regret(width) {
  const all = study.regret;
  const worst = (a) => d3.max(all.filter((row) => row.absorber === a), (row) => row.regret);
  const order = [...new Set(all.map((row) => row.absorber))].sort((a, b) => worst(a) - worst(b));
  const most = d3.max(all, (row) => row.regret) || 1;
  const data = all.map((row) => ({ x: row.place, y: order.indexOf(row.absorber), v: row.regret, shade: row.regret / most, best: row.regret === 0, row }));
  return cellChart(width, {
    across: study.places.map((place) => place.name), down: order.map((a) => names()[a]), data,
    text: (d) => (d.best ? "best" : figures(100 * d.v, 1)),
    tip: (d) => `${names()[d.row.absorber]} at ${study.places[d.x].name}: ${d.best ? "the best there" : `${figures(100 * d.v, 2)} % less energy per area than the best there`}`,
    alt: "Energy per area that each absorber gives away against the best at each place, in percent.",
    columns: ["absorber", ...study.places.map((place) => `${place.name} [%]`)],
  });
}

function worth(width) {
  const rows = hereRows(study.worth).filter((row) => row.absorber !== study.reference).sort((a, b) => b.break_even_per_m2 - a.break_even_per_m2).map((row, i) => ({ ...row, i }));
  const currency = rows[0]?.currency ?? "";
  const drawn = rows.length > 0 && rows[0].break_even_per_m2_p50 !== undefined;
  const range = (d) => (drawn ? ` (P90 ${signed(d.break_even_per_m2_p90, 1)}, P10 ${signed(d.break_even_per_m2_p10, 1)})` : "");
  const text = (d) => `${names()[d.absorber]} may cost ${signed(d.break_even_per_m2, 1)} ${currency}/m²${range(d)} against ${names()[study.reference]}; cost of energy ${figures(d.cost_of_energy_per_kwh, 4)} ${currency}/kWh`;
  const svg = rowsChart(width, rows, rows.map((row) => names()[row.absorber]), `break-even price difference [${currency}/m²]`, [
    Plot.ruleX([0], { stroke: "currentColor", strokeOpacity: 0.6 }),
    Plot.barX(rows, { x: "break_even_per_m2", y: "i", inset: 6, fill: (d) => (d.break_even_per_m2 >= 0 ? "var(--s0)" : "var(--s1)"), fillOpacity: 0.75 }),
    ...(drawn ? [Plot.link(rows, { x1: "break_even_per_m2_p90", x2: "break_even_per_m2_p10", y1: "i", y2: "i", stroke: "currentColor", strokeWidth: 1.5 })] : []),
    Plot.tip(rows, Plot.pointer({ x: "break_even_per_m2", y: "i", title: text, maxRadius: 80 })),
  ]);
  return {
    svg,
    alt: `Break-even price difference of each absorber against ${names()[study.reference]} at ${here().name}.`,
    points: rows.map((row) => ({ x: row.break_even_per_m2, y: row.i, text: text(row) })),
    table: () => ({
      columns: ["absorber", `break-even difference [${currency}/m²]`, `cost of energy [${currency}/kWh]`, ...(drawn ? [`P90 [${currency}/m²]`, `P10 [${currency}/m²]`] : [])],
      rows: rows.map((row) => [names()[row.absorber], signed(row.break_even_per_m2, 2), figures(row.cost_of_energy_per_kwh, 4), ...(drawn ? [signed(row.break_even_per_m2_p90, 2), signed(row.break_even_per_m2_p10, 2)] : [])]),
    }),
  };
}
