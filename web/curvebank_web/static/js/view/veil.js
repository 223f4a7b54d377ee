// Masks as a hatched veil over the paper: what lies under it is not read. Numbered, so that the list names each.
import { toScreen } from "../geometry/affine.js";
import { path } from "../geometry/polyline.js";
import { s } from "./dom.js";

let made = 0;

function hatch(id) {
  return s("pattern", { id, width: 7, height: 7, patternUnits: "userSpaceOnUse", patternTransform: "rotate(45)" },
    s("rect", { width: 7, height: 7, fill: "var(--sheet)", "fill-opacity": 0.62 }), s("line", { x1: 0, x2: 0, y1: 0, y2: 7, stroke: "var(--ink-2)", "stroke-width": 2.6 }));
}

function shape(mask, view, paint) {
  const pts = (mask.brush ?? mask.outline).map((p) => toScreen(view, p));
  if (mask.outline) return s("path", { d: `${path(pts)}Z`, fill: paint, stroke: "var(--ink-2)", "stroke-width": 1 });
  const d = pts.length === 1 ? `M${pts[0][0]} ${pts[0][1]}h0.01` : path(pts);
  return s("path", { d, fill: "none", stroke: paint, "stroke-width": Math.max(1, mask.width_px * view.scale), "stroke-linecap": "round", "stroke-linejoin": "round" });
}

/** masks of the sheet; `chosen` is an index to point out, `numbered` writes each one's number, `stroke` is the one under the brush. */
export function drawVeil(svg, view, { masks, chosen = null, numbered = false, stroke = null, erasing = false }) {
  if (!masks.length && !stroke) return;
  const id = `veil-${++made}`;
  const g = s("g", { class: "veil" }, s("defs", {}, hatch(id)));
  masks.forEach((mask, i) => {
    const m = shape(mask, view, `url(#${id})`);
    m.setAttribute("data-mask", i);
    g.append(m);
  });
  if (stroke) g.append(erasing ? shape(stroke, view, "var(--casing)") : shape(stroke, view, `url(#${id})`));
  if (numbered) {
    masks.forEach((mask, i) => {
      const points = mask.brush ?? mask.outline;
      const [x, y] = toScreen(view, points[Math.floor(points.length / 2)]);
      const on = i === chosen;
      g.append(s("rect", { x: x - 10, y: y - 9, width: 20, height: 18, fill: on ? "var(--ink)" : "var(--sheet)", stroke: "var(--ink)", "stroke-width": on ? 2 : 1 }),
        s("text", { x, y: y + 4.5, "text-anchor": "middle", style: { fill: on ? "var(--sheet)" : "var(--ink)", font: "700 12px var(--text)" } }, String(i + 1)));
    });
  }
  svg.append(g);
}

/** The round edge of the brush at the pointer. */
export function brushEdge([x, y], width, erasing) {
  const r = Math.max(2, width / 2);
  return [s("circle", { cx: x, cy: y, r, class: "casing", "stroke-width": 3.6 }), s("circle", { cx: x, cy: y, r, class: "k-ink", "stroke-width": 1.4, "stroke-dasharray": erasing ? "4 3" : null })];
}
