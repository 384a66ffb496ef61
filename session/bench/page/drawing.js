// The burette upright to scale, the deliveries beside it, and on the same vertical scale
// the correction curve, growing sideways. A value stands next to its place on the tube.

import { svg, signed } from "/dom.js";

const width = 430, height = 640, top = 58, bottom = 590;
const tubeX = 46, tubeW = 30;
const lanesX = 104, laneW = 15;
const curveLeft = 206, curveRight = 418;

/** draw gives the drawing of a run. mpe is the limit in mL, or 0 when it is not known. */
export function draw(run, mpe) {
  const capacity = Number(run.run.burette.capacity_mL);
  const y = (mL) => top + (bottom - top) * mL / capacity;
  const node = svg("svg", { class: "drawing", viewBox: `0 0 ${width} ${height}`, role: "img", "aria-label": describe(run) });
  node.append(tube(run, capacity, y), lanes(run, y), curve(run, mpe || run.conformity?.mpe_mL || 0, capacity, y));
  return node;
}

function describe(run) {
  const done = run.deliveries.filter((d) => d.correction_mL !== undefined && !d.void).length;
  const left = run.deliveries.filter((d) => !d.void).length;
  return `Burette ${run.run.burette.burette}: ${done} of ${left} deliveries done.`;
}

/** level is where the meniscus stands by the last reading. */
function level(run) {
  let newest = null;
  for (const d of run.deliveries) {
    for (const r of [d.start_reading, d.end_reading]) if (r && (!newest || r.fact > newest.fact)) newest = r;
  }
  return newest ? Number(newest.reading_mL) : null;
}

function tube(run, capacity, y) {
  const g = svg("g", { class: "tube" });
  const at = level(run);
  g.append(svg("path", { class: "glass", d: `M${tubeX} ${top - 30}V${bottom + 12}q0 8 8 8h4v18h6v-18h4q8 0 8 -8V${top - 30}` }));
  if (at !== null) {
    const h = y(at);
    g.append(svg("path", { class: "water", d: `M${tubeX + 1} ${h}q${tubeW / 2 - 1} 6 ${tubeW - 2} 0V${bottom + 12}q0 7 -7 7h-14q-7 0 -7 -7z` }));
  }
  const steps = Math.round(capacity / Number(run.run.burette.subdivision_mL));
  const coarse = Math.max(1, Math.ceil(steps / 100)); // lines closer than a few pixels would be a grey wall
  for (let i = 0; i <= steps; i += coarse) {
    const mL = capacity * i / steps;
    const tenth = Math.abs(mL / (capacity / 10) - Math.round(mL / (capacity / 10))) < 1e-6;
    const fifth = Math.abs(mL / (capacity / 50) - Math.round(mL / (capacity / 50))) < 1e-6;
    g.append(svg("line", { class: "mark", x1: tubeX, x2: tubeX + (tenth ? tubeW : fifth ? 15 : 9), y1: y(mL), y2: y(mL) }));
    if (tenth) g.append(svg("text", { class: "scale", x: tubeX - 6, y: y(mL) + 4, "text-anchor": "end" }, trim(mL)));
  }
  g.append(svg("text", { class: "caption", x: tubeX - 34, y: 18 }, "mL"));
  return g;
}

const trim = (x) => String(Math.round(x * 1000) / 1000);

/** stateOf says where a delivery stands: the word, and the sign that carries it without colour. */
export function stateOf(d, current, doubtful) {
  if (d.delivery === doubtful) return { word: "in doubt", sign: "?" };
  if (d.void) return { word: "void", sign: "×" };
  if (d.correction_mL !== undefined) return { word: "done", sign: "✓" };
  if (d.delivery === current) return { word: "under way", sign: "▸" };
  return { word: "planned", sign: "" };
}

function lanes(run, y) {
  const g = svg("g", { class: "lanes" });
  const current = run.awaits?.find((a) => a.delivery)?.delivery;
  const replicates = Math.max(...run.deliveries.map((d) => d.replicate));
  const step = Math.min(laneW + 6, (curveLeft - 24 - lanesX) / replicates);
  for (const d of run.deliveries) {
    const state = stateOf(d, current, run.doubt?.delivery);
    const from = Number(d.start_reading?.reading_mL ?? d.from_mL), to = Number(d.end_reading?.reading_mL ?? d.point_mL);
    const x = lanesX + (d.replicate - 1) * step;
    const w = Math.max(3, Math.min(laneW, step - 4));
    if (d.void) continue; // its replacement is drawn; the list keeps it
    g.append(svg("rect", { class: "delivery " + state.word.replace(" ", "-"), x, width: w, y: y(from) + 1.5, height: Math.max(3, y(to) - y(from) - 3), rx: 3 },
      svg("title", {}, `Delivery ${d.delivery}, ${state.word}`)));
    if (w > 9 && y(to) - y(from) > 20) {
      g.append(svg("text", { class: "sign " + state.word.replace(" ", "-"), x: x + w / 2, y: (y(from) + y(to)) / 2 + 4, "text-anchor": "middle" }, state.sign || String(d.delivery)));
    }
  }
  g.append(svg("text", { class: "caption", x: lanesX, y: 18 }, "deliveries"));
  for (let i = 1; i <= replicates && step > 12; i++) g.append(svg("text", { class: "small", x: lanesX + (i - 1) * step + laneW / 2, y: top - 14, "text-anchor": "middle" }, String(i)));
  return g;
}

/** dots are the corrections that single deliveries add up to, replicate by replicate. */
function dots(run) {
  const stepwise = run.plan.reading_pattern === "stepwise";
  const sums = new Map();
  const found = [];
  for (const d of [...run.deliveries].filter((d) => !d.void).sort((a, b) => a.replicate - b.replicate || a.point_mL - b.point_mL)) {
    if (d.correction_mL === undefined) { sums.set(d.replicate, NaN); continue; }
    const sum = stepwise ? (sums.get(d.replicate) ?? 0) + d.correction_mL : d.correction_mL;
    sums.set(d.replicate, sum);
    if (Number.isFinite(sum)) found.push({ mL: Number(d.end_reading.reading_mL), correction: sum, delivery: d.delivery });
  }
  return found;
}

function curve(run, mpe, capacity, y) {
  const g = svg("g", { class: "curve" });
  const points = run.curve?.points ?? [];
  const single = dots(run);
  const reach = 1.15 * Math.max(mpe, 0.01, ...points.map((p) => Math.abs(p.correction_mL) + (p.U_mL || 0)), ...single.map((p) => Math.abs(p.correction)));
  const middle = (curveLeft + curveRight) / 2;
  const x = (mL) => middle + (curveRight - curveLeft) / 2 * mL / reach;
  g.append(svg("text", { class: "caption", x: curveLeft, y: 18 }, "correction, mL (true − indicated)"));
  if (mpe) {
    g.append(svg("rect", { class: "band", x: x(-mpe), width: x(mpe) - x(-mpe), y: top, height: bottom - top }));
    for (const limit of [-mpe, mpe]) {
      g.append(svg("line", { class: "limit", x1: x(limit), x2: x(limit), y1: top, y2: bottom }),
        svg("text", { class: "small", x: x(limit), y: top - 8, "text-anchor": "middle" }, signed(limit, 3)));
    }
    g.append(svg("text", { class: "small", x: middle, y: bottom + 22, "text-anchor": "middle" }, `dashed: limit of class ${run.run.burette.class}, ±${mpe} mL`));
  }
  g.append(svg("line", { class: "zero", x1: middle, x2: middle, y1: top, y2: bottom }), svg("text", { class: "small", x: middle, y: top - 8, "text-anchor": "middle" }, "0"));
  for (let i = 0; i <= 10; i++) g.append(svg("line", { class: "grid", x1: curveLeft, x2: curveRight, y1: y(capacity * i / 10), y2: y(capacity * i / 10) }));
  if (points.length) g.append(shape(run.curve, x, y));
  for (const d of single) g.append(svg("circle", { class: "dot", cx: x(d.correction), cy: y(d.mL), r: 2.6 }, svg("title", {}, `delivery ${d.delivery}: ${signed(d.correction, 4)} mL up to here`)));
  for (const p of points) {
    const bar = x(p.U_mL || 0) - middle;
    g.append(svg("path", { class: "bar", d: `M${x(p.correction_mL) - bar} ${y(p.reading_mL)}h${2 * bar}m0 -4v8m${-2 * bar} 0v-8` }),
      svg("circle", { class: "point", cx: x(p.correction_mL), cy: y(p.reading_mL), r: 4 },
        svg("title", {}, `${p.reading_mL} mL: ${signed(p.correction_mL, 4)} mL, U = ${p.U_mL.toFixed(4)} mL`)));
  }
  return g;
}

/** shape is the curve with the width of its expanded uncertainty. */
function shape(c, x, y) {
  const all = [{ reading_mL: c.first_mL, correction_mL: 0, U_mL: 0 }, ...c.points];
  const side = (sign) => all.map((p) => `${x(p.correction_mL + sign * p.U_mL)} ${y(p.reading_mL)}`);
  return svg("g", {},
    svg("path", { class: "sleeve", d: "M" + [...side(-1), ...side(1).reverse()].join("L") + "Z" }),
    svg("path", { class: "line", d: "M" + all.map((p) => `${x(p.correction_mL)} ${y(p.reading_mL)}`).join("L") }));
}
