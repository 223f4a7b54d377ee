// One small chart: frame, grid, ticks, lines with their labels at the end, bands, brackets. Draws what it is given; knows no pump.
import { path } from "../geometry/polyline.js";
import { ticks, tickText } from "../geometry/scale.js";
import { s } from "./dom.js";

let clips = 0;

function clipTo(svg, [x0, y0, x1, y1]) {
  const id = `clip-${++clips}`;
  svg.append(s("clipPath", { id }, s("rect", { x: x0 - 2, y: y0 - 2, width: x1 - x0 + 4, height: y1 - y0 + 4 })));
  return `url(#${id})`;
}

function frameAndTicks(svg, { frame: [x0, y0, x1, y1], x, ys }) {
  const g = s("g");
  const xt = x.ticks ?? ticks(x.kind ?? "linear", x.lo, x.hi, x.most ?? Math.max(3, Math.floor((x1 - x0) / 70)));
  const xText = x.text ?? tickText(xt);
  xt.forEach((v, i) => {
    const px = x.map(v);
    if (px < x0 - 2.5 || px > x1 + 2.5) return;
    if (px > x0 + 1 && px < x1 - 1) g.append(s("line", { class: "grid", x1: px, y1: y0, x2: px, y2: y1 }));
    if (x.labels !== false) {
      g.append(s("line", { class: "tickmark", x1: px, y1, x2: px, y2: y1 + 4 }));
      g.append(s("text", { class: "tick", x: px, y: y1 + 17, "text-anchor": "middle" }, xText[i]));
    }
  });
  const drawn = [];
  ys.forEach((y, k) => {
    const yt = y.ticks ?? ticks(y.kind ?? "linear", y.lo, y.hi, y.most ?? Math.max(3, Math.min(10, Math.floor((y1 - y0) / 42))));
    const text = y.text ?? tickText(yt);
    const right = y.side === "right";
    const twin = drawn.filter((d) => d.right === right).find((d) => d.same === text.join() + yt.map((v) => Math.round(y.map(v))).join());
    const aside = right && !twin ? 36 * drawn.filter((d) => d.right && !d.twin).length : 0;
    const level = drawn.filter((d) => d.right === right).length;
    drawn.push({ right, twin: Boolean(twin), same: text.join() + yt.map((v) => Math.round(y.map(v))).join() });
    if (aside) g.append(s("line", { class: "tickmark", x1: x1 + aside, x2: x1 + aside, y1: y0, y2: y1 }));
    if (!twin) yt.forEach((v, i) => {
      const py = y.map(v);
      if (py < y0 - 2.5 || py > y1 + 2.5) return;
      if (k === 0 && py > y0 + 1 && py < y1 - 1) g.append(s("line", { class: "grid", x1: x0, y1: py, x2: x1, y2: py }));
      const at = right ? x1 + aside : x0;
      const out = right ? 4 : -4;
      g.append(s("line", { class: "tickmark", x1: at, y1: py, x2: at + out, y2: py }));
      g.append(s("text", { class: "tick", x: at + 1.8 * out, y: py + 4, "text-anchor": right ? "start" : "end" }, text[i]));
    });
    if (y.title) g.append(s("text", { class: "title halo", x: right ? x1 - 9 : x0 + 9, y: y0 + 17 + 16 * level, "text-anchor": right ? "end" : "start" }, y.title));
  });
  g.append(s("rect", { class: "frame", x: x0, y: y0, width: x1 - x0, height: y1 - y0 }));
  if (x.title) g.append(s("text", { class: "title", x: x.titleAt === "end" ? x1 : (x0 + x1) / 2, y: y1 + 35, "text-anchor": x.titleAt === "end" ? "end" : "middle" }, x.title));
  svg.append(g);
}

function bandPath(upper, lower) {
  return `${path(upper)}${path([...lower].reverse()).replace(/^M/, "L")}Z`;
}

/** Move labels that would lie on each other; gives their y. */
export function settleLabels(labels, gap = 14) {
  const placed = [];
  for (const l of [...labels].sort((a, b) => a.y - b.y)) {
    let y = l.y;
    for (let k = 0; k < placed.length; k++) {
      const o = placed[k];
      const apart = l.x > o.x + o.w || o.x > l.x + l.w;
      // A hair less than the gap, or rounding would move a label to where it stands, for ever.
      if (!apart && Math.abs(o.y - y) < gap - 1e-6) {
        y = o.y + gap;
        k = -1;
      }
    }
    placed.push({ ...l, y });
  }
  return placed;
}

/**
 * chart = {frame: [x0, y0, x1, y1], x: axis, ys: [axis, ...], bands, lines, brackets, notes}
 * axis = {map, kind, lo, hi, title, side, most}; line = {points (values), y (index), tone, form, width, label, arrow, dots}
 * band = {points, low, high (lists of values), y}; bracket = {lo, hi, y (screen), width, label}
 */
export function drawChart(svg, chart) {
  svg.replaceChildren();
  const { frame, x, ys } = chart;
  const [x0, y0, x1, y1] = frame;
  frameAndTicks(svg, chart);
  const clip = clipTo(svg, frame);
  const inside = s("g", { "clip-path": clip });
  svg.append(inside);
  for (const b of chart.bands ?? []) {
    const y = ys[b.y ?? 0];
    const upper = b.flow.map((q, i) => [x.map(q), y.map(b.high[i])]);
    const lower = b.flow.map((q, i) => [x.map(q), y.map(b.low[i])]);
    inside.append(s("path", { d: bandPath(upper, lower), fill: "var(--band)" }));
    if (b.edges !== false) for (const e of [upper, lower]) inside.append(s("path", { d: path(e), class: "k-edge", "stroke-width": 0.8 }));
  }
  const labels = [];
  for (const line of chart.lines ?? []) {
    const y = ys[line.y ?? 0];
    const pts = line.points.map(([q, v]) => [x.map(q), y.map(v)]);
    if (pts.length < 2) continue;
    inside.append(s("path", { d: path(pts), class: `k-${line.tone ?? "ink"} ${line.form ?? ""}`, "stroke-width": line.width ?? 1.6, "stroke-opacity": line.faint ? 0.42 : null, "stroke-linejoin": "round", "data-line": line.id ?? null }));
    if (line.label) {
      const seen = pts.filter(([px, py]) => px >= x0 - 1 && px <= x1 + 1 && py >= y0 - 1 && py <= y1 + 1);
      if (!seen.length) continue;
      const end = line.labelAt === "top" ? seen.reduce((a, b) => (b[1] < a[1] ? b : a)) : seen.reduce((a, b) => (b[0] > a[0] ? b : a));
      const w = line.label.length * 7 + (line.arrow ? 24 : 0);
      const top = line.labelAt === "top";
      const room = x1 + (chart.room ?? 62);
      const inside = !top && end[0] + 7 + w > room;
      labels.push({ x: top ? end[0] - w / 2 : inside ? room - w - 4 : end[0] + 7, y: top ? end[1] - 7 : inside ? end[1] - 8 : end[1] + 4, w, line });
    }
  }
  for (const b of chart.brackets ?? []) {
    const [a, c] = [x.map(b.lo), x.map(b.hi)];
    svg.append(s("path", { d: `M${a} ${b.y - 4}v8M${c} ${b.y - 4}v8`, class: "k-ink", "stroke-width": 1 }));
    svg.append(s("line", { x1: a, x2: c, y1: b.y, y2: b.y, class: "k-ink", "stroke-width": b.width }));
    svg.append(s("text", { class: "note halo", x: (a + c) / 2, y: b.y - 5, "text-anchor": "middle" }, b.label));
  }
  for (const l of settleLabels(labels)) {
    const g = s("g", { "data-label": l.line.id ?? null });
    g.append(s("text", { class: `${l.line.small ? "note" : "endlabel"} halo t-${l.line.labelTone ?? l.line.tone ?? "ink"}`, x: l.x, y: l.y }, l.line.label));
    if (l.line.arrow) {
      const ax = l.x + l.w - 20;
      g.append(s("path", { d: `M${ax} ${l.y - 4}h16m-5 -4l5 4l-5 4`, class: `k-${l.line.labelTone ?? l.line.tone ?? "ink"}`, "stroke-width": 1.3 }));
    }
    svg.append(g);
  }
  for (const n of chart.notes ?? []) svg.append(s("text", { class: `note halo t-${n.tone ?? "edge"}`, x: n.x, y: n.y, "text-anchor": n.anchor ?? "middle" }, n.text));
  return { clip };
}
