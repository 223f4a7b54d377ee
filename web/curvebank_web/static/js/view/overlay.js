// What is drawn over the paper: panels, marks with their residuals, guides, traces, ghosts, numbered places.
import { toScreen } from "../geometry/affine.js";
import { endStrokes, path, strokes, thin } from "../geometry/polyline.js";
import { plain } from "../geometry/number.js";
import { axisIds } from "../geometry/panelmap.js";
import { placeMark, s } from "./dom.js";
import { drawVeil } from "./veil.js";

export const RESIDUAL_TIMES = 20;

const line = (g, d, cls, width, casing = true) => {
  if (casing) g.append(s("path", { d, class: "casing", "stroke-width": width + 2.6 }));
  g.append(s("path", { d, class: cls, "stroke-width": width, "stroke-linejoin": "round", "stroke-linecap": "butt" }));
};

const text = (g, x, y, words, tone, more = {}) =>
  g.append(s("text", { x, y, class: `endlabel t-${tone}`, style: { "paint-order": "stroke", stroke: "var(--casing)", "stroke-width": "4px", "stroke-linejoin": "round" }, ...more }, words));

function drawPanels(svg, view, scene) {
  for (const p of scene.panels) {
    if (!p.outline) continue;
    const pts = p.outline.map((q) => toScreen(view, q));
    const current = p.id === scene.panelId;
    if (scene.step === "panel") {
      line(svg, `${path(pts)}Z`, "k-construct", current ? 1.6 : 1);
      for (const [x, y] of current ? pts : []) svg.append(s("rect", { x: x - 4.5, y: y - 4.5, width: 9, height: 9, fill: "var(--sheet)", stroke: "var(--construct)", "stroke-width": 1.6 }));
      if (scene.panels.length > 1 || current) text(svg, Math.min(...pts.map((q) => q[0])) + 8, Math.min(...pts.map((q) => q[1])) + 18, p.name, "ink");
    } else if (!current) {
      svg.append(s("path", { d: `${path(pts)}Z`, class: "k-construct", "stroke-width": 0.8, "stroke-dasharray": "2 4" }));
    }
  }
  if (scene.box) {
    const pts = scene.box.map((q) => toScreen(view, q));
    line(svg, `${path(pts)}Z`, "k-construct", 1.6);
  }
}

function cross(g, [x, y], tone, { big = 11, gap = 3.5, width = 1.6 } = {}) {
  const d = `M${x - big} ${y}H${x - gap}M${x + gap} ${y}H${x + big}M${x} ${y - big}V${y - gap}M${x} ${y + gap}V${y + big}`;
  line(g, d, `k-${tone}`, width);
}

function drawMarks(svg, view, scene) {
  if (!["marks", "panel", "curves"].includes(scene.step)) return;
  for (const m of scene.marks) {
    const at = toScreen(view, m.at);
    if (scene.step !== "marks") {
      if (m.panel === scene.panelId) {
        const flow = m.flow;
        line(svg, flow ? `M${at[0]} ${at[1] - 6}v12` : `M${at[0] - 6} ${at[1]}h12`, "k-construct", 1.4);
      }
      continue;
    }
    const own = m.panel === scene.panelId;
    cross(svg, at, own ? "trace" : "edge");
    if (m.chosen) svg.append(s("rect", { x: at[0] - 15, y: at[1] - 15, width: 30, height: 30, class: "k-ink", "stroke-width": 2 }));
    if (own && m.residual) {
      const far = toScreen(view, [m.at[0] + RESIDUAL_TIMES * m.residual[0], m.at[1] + RESIDUAL_TIMES * m.residual[1]]);
      const d = Math.hypot(far[0] - at[0], far[1] - at[1]);
      const k = d > 120 ? 120 / d : 1;
      const end = [at[0] + k * (far[0] - at[0]), at[1] + k * (far[1] - at[1])];
      line(svg, path([at, end]), "k-finding", 1.4);
      svg.append(s("circle", { cx: end[0], cy: end[1], r: 2.8, class: "k-finding", "stroke-width": 1.4 }));
    }
    if (own) text(svg, at[0] + (m.flow ? 8 : 10), at[1] + (m.flow ? -9 : 17), m.text, "trace");
  }
  if (scene.openMark) {
    const at = toScreen(view, scene.openMark.at);
    cross(svg, at, "trace");
    svg.append(s("rect", { x: at[0] + 10, y: at[1] - 26, width: 30, height: 17, fill: "none", stroke: "var(--trace)", "stroke-width": 1.2, "stroke-dasharray": "3 2" }));
    svg.append(s("rect", { x: at[0] - 15, y: at[1] - 15, width: 30, height: 30, class: "k-ink", "stroke-width": 2 }));
  }
}

function drawTrace(svg, view, item, scene) {
  const marks = item.curve.kind === "points";
  const shown = item.pixels.length && !marks ? thin(item.pixels.map((p) => toScreen(view, p)), 1.5) : [];
  const chosen = scene.selected === item.id;
  const g = s("g", { "data-curve": item.id });
  svg.append(g);
  if (marks && item.pixels.length) drawPoints(g, view, item);
  if (shown.length > 1) {
    const preview = !item.kept || item.stale;
    line(g, path(shown) + (item.curve.closed ? "Z" : ""), `k-trace ${preview ? "preview" : ""}`, chosen ? 2.4 : 1.7);
    if (item.kept && !item.curve.closed) for (const e of endStrokes(shown)) line(g, path(e), "k-trace", 1.7);
    drawLocks(g, view, item, scene);
    if (item.kept && item.label) {
      const end = item.contour ? shown.reduce((a, b) => (b[1] < a[1] ? b : a)) : shown.reduce((a, b) => (b[0] > a[0] ? b : a));
      text(g, item.contour ? end[0] : end[0] + 7, item.contour ? end[1] - 7 : end[1] + 4, item.label, item.wrong ? "finding" : "trace", item.contour ? { "text-anchor": "middle" } : {});
    }
  } else if (!marks && item.curve.clicks?.length > 1 && (item.failed || !item.result)) {
    const pts = item.curve.clicks.map((p) => toScreen(view, p));
    line(g, path(pts), item.failed ? "k-finding" : "k-construct", 1.2);
    g.lastChild.setAttribute("stroke-dasharray", "2 4");
  }
  const is = (part, i, of) => of?.curve === item.id && of.part === part && of.index === i;
  if (chosen || !item.kept || item.failed) {
    (item.curve.clicks ?? []).forEach((p, i) => {
      const [x, y] = toScreen(view, p);
      g.append(s("rect", { x: x - 5.6, y: y - 5.6, width: 11.2, height: 11.2, class: "casing", "stroke-width": 2.6 }));
      g.append(s("rect", { x: x - 4.5, y: y - 4.5, width: 9, height: 9, fill: is("clicks", i, scene.grabbed) ? "var(--construct)" : "var(--sheet)", stroke: "var(--construct)", "stroke-width": 1.8, "data-part": "click" }));
      if (is("clicks", i, scene.focused)) g.append(focusBox([x, y], 9));
    });
  }
  if (scene.step === "curves") {
    (item.curve.guides ?? []).forEach((p, i) => {
      const at = toScreen(view, p);
      drawGuide(g, at, is("guides", i, scene.grabbed), chosen || !item.kept);
      if (is("guides", i, scene.focused)) g.append(focusBox(at, 10));
    });
    if (item.result?.hint_click) {
      const focused = scene.focused?.kind === "hint" && scene.focused.curve === item.id;
      const rings = scene.curves.filter((c) => c.result?.hint_click).length;
      drawHint(g, toScreen(view, item.result.hint_click), focused, focused || chosen || rings === 1 || scene.doubted === item.id, scene.width);
    }
  }
}

const focusBox = ([x, y], half) => s("rect", { x: x - half, y: y - half, width: 2 * half, height: 2 * half, class: "k-ink", "stroke-width": 2 });

/** A guide is a round handle with a cross in it; a click is a square one. */
function drawGuide(g, [x, y], held, full) {
  const r = full ? 6 : 4.5;
  g.append(s("circle", { cx: x, cy: y, r: r + 1, class: "casing", "stroke-width": 2.6 }), s("circle", { cx: x, cy: y, r, fill: held ? "var(--construct)" : "var(--sheet)", stroke: "var(--construct)", "stroke-width": 1.8, "data-part": "guide" }));
  g.append(s("path", { d: `M${x - r} ${y}H${x + r}M${x} ${y - r}V${y + r}`, stroke: held ? "var(--sheet)" : "var(--construct)", "stroke-width": 1.3 }));
}

/** Where one more click would settle a doubt: a dashed ring with its words. */
function drawHint(g, [x, y], focused, named, width) {
  g.append(s("circle", { cx: x, cy: y, r: 12, class: "casing", "stroke-width": 5 }), s("circle", { cx: x, cy: y, r: 12, class: "k-finding hint-ring", "stroke-width": 2, "stroke-dasharray": "5 3" }), s("circle", { cx: x, cy: y, r: 1.6, fill: "var(--finding)" }));
  if (named) text(g, x > width - 200 ? x - 17 : x + 17, y - 9, "one click here would settle it", "finding", { "text-anchor": x > width - 200 ? "end" : "start" });
  if (focused) g.append(focusBox([x, y], 17));
}

/** Test points: a cross where the symbol's middle was found, joined to the click that pointed at it. */
function drawPoints(g, view, item) {
  item.pixels.forEach((p, i) => {
    const at = toScreen(view, p);
    const click = item.curve.clicks?.[i];
    if (click) line(g, path([toScreen(view, click), at]), "k-construct", 1);
    const [x, y] = at;
    line(g, `M${x - 10} ${y - 10}l20 20M${x - 10} ${y + 10}l20 -20`, "k-trace", 1.6);
  });
  if (item.kept && item.label) {
    const end = item.pixels.map((p) => toScreen(view, p)).reduce((a, b) => (b[0] > a[0] ? b : a));
    text(g, end[0] + 10, end[1] + 4, item.label, "trace");
  }
}

/** Locked stretches: a heavier line with square ends and a padlock at the middle. */
function drawLocks(g, view, item, scene) {
  (item.curve.locked ?? []).forEach((lock, index) => {
    const pts = thin(lock.pixels.map((p) => toScreen(view, p)), 1.5);
    line(g, path(pts), "k-trace", 2.8);
    for (const [x, y] of [pts[0], pts[pts.length - 1]]) g.append(s("rect", { x: x - 4, y: y - 4, width: 8, height: 8, fill: "var(--trace)", stroke: "var(--casing)", "stroke-width": 1.2 }));
    const [x, y] = pts[Math.floor(pts.length / 2)];
    g.append(padlock(x, y - 13));
    if (scene.focused?.kind === "lock" && scene.focused.curve === item.id && scene.focused.index === index) g.append(focusBox([x, y - 12], 12));
  });
}

function padlock(x, y) {
  return s("g", { "data-part": "lock" }, s("path", { d: `M${x - 3.4} ${y - 1}v-3.4a3.4 3.4 0 0 1 6.8 0v3.4`, class: "casing", "stroke-width": 4.4 }), s("path", { d: `M${x - 3.4} ${y - 1}v-3.4a3.4 3.4 0 0 1 6.8 0v3.4`, fill: "none", stroke: "var(--trace)", "stroke-width": 1.8 }),
    s("rect", { x: x - 5.5, y: y - 1, width: 11, height: 8.5, fill: "var(--trace)", stroke: "var(--casing)", "stroke-width": 1.2 }));
}

/** Ends of a stretch that is being locked. */
function drawLocking(svg, view, scene) {
  const item = scene.locking && scene.curves.find((c) => c.id === scene.locking.curve);
  if (!item?.pixels.length || scene.locking.from === null) return;
  const [x, y] = toScreen(view, item.pixels[Math.round(scene.locking.from)]);
  svg.append(s("rect", { x: x - 5, y: y - 5, width: 10, height: 10, fill: "var(--trace)", stroke: "var(--casing)", "stroke-width": 1.4 }));
}

/** The printed lines that were found, over the paper. */
function drawFound(svg, view, found) {
  const d = [...found.level, ...found.upright].map((l) => path(l.points.map((p) => toScreen(view, p)))).join("");
  svg.append(s("path", { d, class: "casing", "stroke-width": 2.6 }), s("path", { d, class: "k-construct found", "stroke-width": 1 }));
}

function drawGhosts(svg, view, scene) {
  for (const ghost of scene.ghosts) {
    const pts = thin(ghost.pixels.map((p) => toScreen(view, p)), 1.5);
    if (pts.length < 2) continue;
    line(svg, path(pts), "k-construct ghost", 1.6);
    if (ghost.gap) for (const [a, b] of ghost.gap) svg.append(s("path", { d: path([toScreen(view, a), toScreen(view, b)]), class: "k-finding", "stroke-width": 1 }));
    if (ghost.words) leader(svg, pts, ghost.words, "construct");
  }
}

export function leader(svg, pts, words, tone) {
  const at = pts[Math.floor(pts.length * 0.4)];
  svg.append(s("path", { d: `M${at[0]} ${at[1] - 3}L${at[0] + 18} ${at[1] - 78}`, class: `k-${tone}`, "stroke-width": 1.2 }));
  svg.append(s("text", { x: at[0] + 21, y: at[1] - 82, class: "title halo" }, words));
}

export function drawPlaces(svg, places, map) {
  const taken = [];
  for (const p of places) {
    if (p.strokes) {
      const pts = p.points.map((point) => map(point, p));
      for (const st of strokes(pts, p.strokes[0], p.strokes[1], { every: 6, half: 7 })) svg.append(s("path", { d: path(st), class: "k-finding", "stroke-width": 1.2 }));
    }
    const at = map(p.at, p);
    const end = [at[0] + (p.side ?? 0), at[1] + (p.drop ?? 46)];
    for (let k = 0; k < places.length && taken.some((q) => Math.abs(q[0] - end[0]) < 25 && Math.abs(q[1] - end[1]) < 25); k++) end[0] += 26;
    taken.push(end);
    svg.append(s("path", { d: path([at, end]), class: p.severity === "note" ? "k-ink" : "k-finding", "stroke-width": 1 }));
    const mark = placeMark(p.severity, p.number, { x: end[0], y: end[1] });
    mark.setAttribute("data-finding", p.number);
    svg.append(mark);
    if (p.chosen) svg.append(s("rect", { x: end[0] - 15, y: end[1] - 15, width: 30, height: 30, class: "k-ink", "stroke-width": 1.5 }));
  }
}

/** Draw the whole static overlay under `view`. `scene` is made by the desk. */
export function drawOverlay(svg, view, scene) {
  svg.replaceChildren();
  if (scene.bare) return;
  drawVeil(svg, view, scene.veil);
  if (scene.found) drawFound(svg, view, scene.found);
  drawPanels(svg, view, scene);
  if (scene.showGhosts) drawGhosts(svg, view, scene);
  for (const item of scene.curves) drawTrace(svg, view, item, scene);
  drawLocking(svg, view, scene);
  drawMarks(svg, view, scene);
  drawPlaces(svg, scene.places, (p) => toScreen(view, p));
}

/** Marks of the document as the overlay wants them; residual: the sheet vector from the mark to where its typed value belongs. */
export function sceneMarks(doc, panelResultOf, maps, chosen) {
  const out = [];
  for (const panel of doc.panels ?? []) {
    const answer = panelResultOf(panel);
    const ids = axisIds(panel);
    for (const [axis, a] of Object.entries(panel.axes)) {
      const flow = a.quantity === "flow";
      const map = maps(panel, flow ? axis : ids.flow[0], flow ? ids.value[0] : axis);
      (a.marks ?? []).forEach((m, index) => {
        const r = answer?.mark_residuals?.[axis]?.[index];
        let residual = null;
        if (typeof r === "number" && map) {
          const read = map.toValues(m.at);
          const belongs = map.toPixel(flow ? [m.value, read[1]] : [read[0], m.value]);
          if (belongs.every(Number.isFinite)) residual = [belongs[0] - m.at[0], belongs[1] - m.at[1]];
        }
        out.push({ panel: panel.id, axis, index, at: m.at, flow, text: plain(m.value), residual, chosen: chosen && chosen.panel === panel.id && chosen.axis === axis && chosen.index === index });
      });
    }
  }
  return out;
}
