// The re-plot: the same window as the paper, in engineering units, at the same heights.
import { toScreen, toSheet } from "../geometry/affine.js";
import { commonTicks, linear, log10 } from "../geometry/scale.js";
import { QUANTITY_SIGNS, written } from "../geometry/units.js";
import { drawChart } from "./chart.js";
import { drawPlaces, leader } from "./overlay.js";
import { path } from "../geometry/polyline.js";
import { s } from "./dom.js";

export const EDGE = { left: 44, right: 46, top: 14, bottom: 44 };

const clampRange = (a, b, lo, hi) => [Math.max(Math.min(a, b), lo), Math.min(Math.max(a, b), hi)];

/** Values at the panel's outline for one map: [lo, hi] of flow and of value, widened by `lines` and rounded to marks that lie within 3 % of an end. */
export function extents(map, outline, flowMarks, valueMarks, lines = []) {
  const at = [...outline.map((p) => map.toValues(p)), ...lines].filter((v) => v.every(Number.isFinite));
  const tidy = (values, marks) => {
    let [lo, hi] = [Math.min(...values), Math.max(...values)];
    const span = hi - lo;
    for (const m of marks) {
      if (Math.abs(m - lo) < 0.03 * span) lo = m;
      if (Math.abs(m - hi) < 0.03 * span) hi = m;
    }
    return [lo, hi];
  };
  return { flow: tidy(at.map((v) => v[0]), flowMarks), value: tidy(at.map((v) => v[1]), valueMarks) };
}

/**
 * Scales of the re-plot for the current view of the paper.
 * window: {width, height} of the re-plot, paper: {width, height}; axes: [{id, axis, map, ext}], the first one leads.
 */
export function alignedScales({ view, paper, plot, axes, flow }) {
  const lead = axes[0];
  const { map, ext } = lead;
  const kind = map.kinds[0];
  const mid = toSheet(view, [paper.width / 2, paper.height / 2]);
  const midV = map.toValues(mid);
  const vMid = Number.isFinite(midV[1]) ? Math.min(Math.max(midV[1], ext.value[0]), ext.value[1]) : ext.value[0];
  // flow seen at the left and right edge of the paper along the line of the middle value
  const qAt = (sx) => {
    const [, sy] = toScreen(view, map.toPixel([ext.flow[1], vMid]));
    return map.toValues(toSheet(view, [sx, sy]))[0];
  };
  let [q0, q1] = clampRange(qAt(2), qAt(paper.width - 2), ext.flow[0], ext.flow[1]);
  if (!(q1 > q0)) [q0, q1] = ext.flow;
  const x0 = EDGE.left;
  const x1 = plot.width - (axes.length > 1 ? EDGE.right + 36 * (axes.length - 2) : 62);
  const x = { ...(kind === "log10" ? log10(q0, q1, x0, x1) : linear(q0, q1, x0, x1)), lo: q0, hi: q1, title: `flow, ${written(flow.unit)}` };
  const qRef = kind === "log10" ? Math.sqrt(q0 * q1) : (q0 + q1) / 2;
  const at = (m, v) => toScreen(view, m.toPixel([qRef, v]))[1];
  const edges = [at(map, ext.value[0]), at(map, ext.value[1])];
  const y0 = Math.max(EDGE.top, Math.min(...edges));
  const y1 = Math.min(plot.height - EDGE.bottom, Math.max(...edges));
  if (!(y1 - y0 > 20)) return null;
  const ys = axes.map(({ axis, map: m, ext: e }, i) => {
    const middle = m.kinds[1] === "log10" ? Math.sqrt(e.value[0] * e.value[1]) : (e.value[0] + e.value[1]) / 2;
    const invert = (sy) => {
      const p = toScreen(view, m.toPixel([qRef, middle]));
      return m.toValues(toSheet(view, [p[0], sy]))[1];
    };
    const ends = [invert(y0), invert(y1)];
    return { map: (v) => at(m, v), invert, kind: m.kinds[1], lo: Math.min(...ends), hi: Math.max(...ends), side: i === 0 ? "left" : "right", title: `${QUANTITY_SIGNS[axis.quantity] ?? axis.quantity}, ${written(axis.unit)}` };
  });
  if (axes.length > 1 && ys.every((y) => y.kind === "linear")) {
    const common = commonTicks(axes.map((a) => a.ext.value), Math.max(4, Math.floor((y1 - y0) / 52)));
    common?.forEach((t, i) => (ys[i].ticks = t));
  }
  return { x, ys, frame: [x0, y0, x1, y1], qRef };
}

/** Draw curves, ghosts, bands and numbered places into the aligned frame. */
export function drawReplot(svg, scales, scene) {
  const lines = [];
  const bands = [];
  for (const item of scene.curves) {
    const y = scene.axes.findIndex((a) => a.id === item.curve.y);
    if (y < 0 || item.points.length < 2) continue;
    const preview = !item.kept;
    lines.push({
      id: item.id, y, points: item.points, tone: preview || item.fitLine ? "trace" : "ink", form: preview ? "preview" : "", faint: Boolean(item.fitLine), width: preview ? 1.8 : item.fitLine ? 4 : scene.selected === item.id ? item.weight + 0.9 : item.weight,
      label: item.label, labelTone: item.wrong ? "finding" : preview ? "trace" : "ink", arrow: y > 0, labelAt: item.contour ? "top" : undefined, small: item.contour,
    });
    if (item.band) bands.push({ ...item.band, y, edges: true });
    if (item.fitLine) lines.push({ id: `${item.id}-fit`, y, points: item.fitLine, tone: "ink", width: 1.2 });
  }
  if (scene.showGhosts) for (const g of scene.ghosts) lines.push({ points: g.points, tone: "construct", form: "ghost", width: 1.6, y: Math.max(0, scene.axes.findIndex((a) => a.id === g.y)) });
  const { clip } = drawChart(svg, { frame: scales.frame, x: scales.x, ys: scales.ys, lines, bands, room: scales.ys.length > 1 ? 0 : 62 });
  const toPlot = (y) => ([q, v]) => [scales.x.map(q), scales.ys[y].map(v)];
  for (const item of scene.curves.filter((c) => c.curve.kind === "points")) {
    const y = scene.axes.findIndex((a) => a.id === item.curve.y);
    if (y < 0) continue;
    for (const p of item.points) {
      const [px, py] = toPlot(y)(p);
      svg.append(s("path", { d: `M${px - 5} ${py - 5}l10 10M${px - 5} ${py + 5}l10 -10`, class: item.kept ? "k-ink" : "k-trace", "stroke-width": 1.5, "clip-path": clip }));
    }
  }
  if (scene.showGhosts) {
    for (const g of scene.ghosts) {
      const to = toPlot(Math.max(0, scene.axes.findIndex((a) => a.id === g.y)));
      if (g.gapPoints) for (const [a, b] of g.gapPoints) svg.append(s("path", { d: path([to(a), to(b)]), class: "k-finding", "stroke-width": 1, "clip-path": clip }));
      if (g.words) leader(svg, g.points.map(to), g.words, "construct");
    }
  }
  drawPlaces(svg, scene.plotPlaces, (at, p) => toPlot(Math.max(0, scene.axes.findIndex((a) => a.id === p.y)))(at));
  if (scene.step === "marks") {
    for (const m of scene.marks.filter((k) => k.panel === scene.panelId)) {
      const y = m.flow ? 0 : Math.max(0, scene.axes.findIndex((a) => a.id === m.axis));
      const v = scene.axes[y].map.toValues(m.at);
      const [px, py] = toPlot(y)(v);
      const [x0, y0, x1, y1] = scales.frame;
      if (px < x0 - 8 || px > x1 + 8 || py < y0 - 8 || py > y1 + 8) continue;
      svg.append(s("path", { d: `M${px - 9} ${py}h6m6 0h6M${px} ${py - 9}v6m0 6v6`, class: "k-trace", "stroke-width": 1.4 }));
    }
  }
}
