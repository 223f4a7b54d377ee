// Masks as a hatched veil over the paper: what lies under it is not read. Numbered, so that the list names each.
import { toScreen } from "../geometry/affine.js";
import { path } from "../geometry/polyline.js";
import { s } from "./dom.js";

let made = 0;

const hatch = (id) => s("pattern", { id, width: 7, height: 7, patternUnits: "userSpaceOnUse", patternTransform: "rotate(45)" }, s("line", { x1: 0, x2: 0, y1: 0, y2: 7, stroke: "var(--ink-2)", "stroke-width": 3 }));

/** The area of a mask in one paint; `more` widens it on all sides. */
function shape(mask, view, paint, more = 0) {
  const pts = (mask.brush ?? mask.outline).map((p) => toScreen(view, p));
  if (mask.outline) return s("path", { d: `${path(pts)}Z`, fill: paint, stroke: paint, "stroke-width": 2 * more, "stroke-linejoin": "round" });
  const d = pts.length === 1 ? `M${pts[0][0]} ${pts[0][1]}h0.01` : path(pts);
  return s("path", { d, fill: "none", stroke: paint, "stroke-width": Math.max(1, mask.width_px * view.scale) + 2 * more, "stroke-linecap": "round", "stroke-linejoin": "round" });
}

/** masks of the sheet; `chosen` is an index to point out, `numbered` writes each one's number, `stroke` is the one under the brush. */
export function drawVeil(svg, view, { masks, chosen = null, numbered = false, stroke = null, erasing = false }) {
  const list = stroke && !erasing ? [...masks, stroke] : masks;
  if (!list.length && !stroke) return;
  const id = `veil-${++made}`;
  const g = s("g", { class: "veil", opacity: 0.8 }, s("defs", {}, hatch(id)));
  // All rims first, then all grounds: overlapping strokes read as one area.
  for (const mask of list) g.append(shape(mask, view, "var(--ink-2)", 1.3));
  for (const mask of list) g.append(shape(mask, view, "var(--sheet)"));
  list.forEach((mask, i) => {
    const m = shape(mask, view, `url(#${id})`);
    m.setAttribute("data-mask", i);
    g.append(m);
  });
  if (stroke && erasing) g.append(shape(stroke, view, "var(--casing)"));
  svg.append(g);
  if (numbered) masks.forEach((mask, i) => svg.append(number(mask, view, i, i === chosen)));
}

/** A mask's number beside where it begins. */
function number(mask, view, index, on) {
  const [x, y] = toScreen(view, (mask.brush ?? mask.outline)[0]);
  const up = y - (mask.width_px ?? 0) * view.scale * 0.5 - 12;
  return s("g", {}, s("rect", { x: x - 9, y: up - 8.5, width: 18, height: 17, fill: on ? "var(--ink)" : "var(--sheet)", stroke: "var(--ink)", "stroke-width": on ? 2 : 1 }),
    s("text", { x, y: up + 4.2, "text-anchor": "middle", style: { fill: on ? "var(--sheet)" : "var(--ink)", font: "700 12px var(--text)" } }, String(index + 1)));
}

/** The round edge of the brush at the pointer. */
export function brushEdge([x, y], width, erasing) {
  const r = Math.max(2, width / 2);
  return [s("circle", { cx: x, cy: y, r, class: "casing", "stroke-width": 3.6 }), s("circle", { cx: x, cy: y, r, class: "k-ink", "stroke-width": 1.4, "stroke-dasharray": erasing ? "4 3" : null })];
}
