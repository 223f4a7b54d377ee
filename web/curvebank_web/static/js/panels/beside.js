// Right of the findings: what stands behind the numbers of this step.
import { axisIds } from "../geometry/panelmap.js";
import { linear } from "../geometry/scale.js";
import { thin } from "../geometry/polyline.js";
import { fixed, plain, withDoubt } from "../geometry/number.js";
import { QUANTITY_WORDS, written } from "../geometry/units.js";
import { drawChart } from "../view/chart.js";
import { sentence } from "../state/derive.js";
import { confidence } from "../state/words.js";
import { h, put, s } from "../view/dom.js";
import { maskList } from "./sentence-mask.js";

export function drawBeside(root, desk) {
  if (desk.masks?.on) return maskList(root, desk);
  if (desk.step === "sheet") return otherScans(root, desk);
  if (desk.step === "marks" || desk.step === "panel") return marksTable(root, desk);
  if (desk.step === "family") return exponents(root, desk);
  if (desk.step === "fit") return residuals(root, desk);
  if (desk.step === "curves" || desk.step === "submit") return doubt(root, desk);
  put(root);
}

/** Ways to another scan of the same paper, and what is masked. */
function otherScans(root, desk) {
  const n = desk.masks?.list.length ?? 0;
  const at = `/desk/${encodeURIComponent(desk.session.id)}/scan`;
  const away = (hash) => (e) => { e.preventDefault(); desk.leaveFor(`${at}${hash}`); };
  put(root, h("h2", {}, "This paper, scanned again"),
    h("p", { class: "ways-on" }, h("a", { href: at, id: "better-scan", onclick: away("") }, "Use a better scan of this paper"), h("span", {}, "carries marks and clicks over, shows what changes.")),
    h("p", { class: "ways-on" }, h("a", { href: `${at}#half`, id: "second-half", onclick: away("#half") }, "Add the second half of the sheet"), h("span", {}, "makes one sheet of two scans.")),
    n ? h("p", { class: "ways-on" }, h("button", { type: "button", class: "link", onclick: () => desk.masks.hold(true) }, `${n} ${n === 1 ? "mask" : "masks"} on this sheet`), h("span", {}, "hide what is not the chart.")) : null);
}

function marksTable(root, desk) {
  const { panel } = desk;
  if (!panel) return put(root);
  const answer = desk.panelResult(panel);
  const ids = axisIds(panel);
  const rows = [...ids.flow, ...ids.value].map((id) => {
    const axis = panel.axes[id];
    const n = (axis.marks ?? []).length;
    const res = answer?.mark_residuals?.[id];
    const most = res?.length && n > 0 ? Math.max(...res.map(Math.abs)) : null;
    const span = spanOf(axis.marks ?? []);
    const worst = most === null ? "" : `${plain(most, 1)} px${span > 0 ? `, ${plain((100 * most) / span, 2)} %` : ""}`;
    return h("tr", {}, h("td", {}, `${QUANTITY_WORDS[axis.quantity]}, ${written(axis.unit)}`), h("td", { class: "num" }, String(n)), h("td", { class: "num" }, worst), h("td", {}, n < 2 ? `wants ${2 - n} more` : n === 2 ? "a third would find a slip" : axis.scale === "log10" ? "logarithmic" : "linear"));
  });
  const shown = desk.showFound ?? false;
  const n = desk.lines?.found ? desk.lines.found.level.length + desk.lines.found.upright.length : 0;
  const toggle = desk.step === "marks" && n ? h("button", { type: "button", class: "link", "aria-pressed": String(shown), onclick: () => desk.toggleFound() }, shown ? `Hide the ${n} printed lines found` : `Show the ${n} printed lines found`) : null;
  const grid = answer?.grid;
  const residual = grid && Number.isFinite(answer.residual_px) ? `The marks stand off the map by ${plain(answer.residual_px, 2)} px rms, worst ${plain(answer.worst_px, 2)} px. ` : "";
  const head = grid ? h("b", {}, grid.used ? "The printed grid is used. " : "The printed grid is not used. ") : null;
  put(root, grid ? h("p", { class: "small first" }, head, sentence(capital(grid.why))) : null,
    h("table", {}, h("thead", {}, h("tr", {}, h("th", { scope: "col" }, "axis"), h("th", { scope: "col", class: "num" }, "marks"), h("th", { scope: "col", class: "num" }, "worst, of the axis"), h("th", { scope: "col" }, "what they say"))), h("tbody", {}, rows)),
    toggle || grid ? h("p", { class: "small" }, residual, toggle, toggle && grid ? ". " : null, grid ? gridChoice(desk, panel) : null) : null);
}

const capital = (text) => `${text ?? ""}`.replace(/^./, (c) => c.toUpperCase());

/** Length of an axis in sheet pixels: between the two marks furthest apart. */
function spanOf(marks) {
  let most = 0;
  for (const a of marks) for (const b of marks) most = Math.max(most, Math.hypot(a.at[0] - b.at[0], a.at[1] - b.at[1]));
  return most;
}

/** Whether the printed grid may be used on this panel. */
function gridChoice(desk, panel) {
  const off = panel.grid === "off";
  return h("button", { type: "button", class: "link", onclick: () => desk.act({ type: "panel/set", panel: panel.id, change: { grid: off ? "auto" : "off" } }) }, off ? "Use the printed grid where it helps" : "Place the axes by the marks alone");
}

const FILL = { drawing: "hatched", reading: "solid", calibration: "ruled", fit: "dotted" };

function doubt(root, desk) {
  const item = desk.items.find((i) => i.id === (desk.selected ?? desk.openCurve?.id)) ?? desk.nearItem ?? desk.items.find((i) => i.result?.spread && Object.keys(i.result.spread).length);
  const spread = item?.result?.spread;
  const parts = Object.entries(spread ?? {}).filter(([, v]) => v > 0);
  if (!parts.length) return put(root);
  const total = parts.reduce((a, [, v]) => a + v * v, 0);
  const u = Math.sqrt(total) / item.fy;
  const unit = written(desk.panel.axes[item.curve.y].unit);
  const shares = parts.map(([name, v]) => [name, (v * v) / total]).sort((a, b) => b[1] - a[1]);
  const bar = h("div", { class: "doubt", role: "img", "aria-label": shares.map(([n, v]) => `${n} ${Math.round(v * 100)} per cent`).join(", ") }, shares.filter(([, v]) => v > 0.005).map(([n, v]) => h("i", { class: FILL[n] ?? "ruled", style: { flex: String(v) } })));
  put(root, h("h2", {}, `Where the ± ${withDoubt(0, u).u} ${unit} of ${item.label} comes from`), bar,
    h("p", { class: "shares" }, shares.map(([n, v]) => h("span", {}, `${n} ${Math.round(v * 100)} %`))),
    h("p", { class: "small" }, item.result.confidence !== undefined ? `That the trace keeps to this line: ${confidence(item.result.confidence)}. ` : null, "A delivered pump may differ far more; the pump page shows that band first."));
}

function exponents(root, desk) {
  const families = Object.entries(desk.run?.family ?? {}).filter(([, f]) => f.exponents);
  if (!families.length) return put(root);
  const quantity = families.find(([q]) => desk.panel && Object.values(desk.panel.axes).some((a) => a.quantity === q)) ?? families[0];
  const rows = exponentRows(quantity[1].exponents);
  const measured = quantity[1].exponents.measured;
  put(root, h("h2", {}, `${measured ? "Exponents" : "Published exponents"} of the ${QUANTITY_WORDS[quantity[0]] ?? quantity[0]} curves`), rows.map((r) => h("div", { class: "exponent" }, h("span", {}, r.words), scaleOf(r), h("b", {}, r.u ? `${fixed(r.value, 2)} ± ${fixed(r.u, 2)}` : fixed(r.value, 2)))));
}

const EXPONENT_WORDS = { flow: "flow over diameter", value: "value over diameter" };

/** Exponents come as {name: [value, standard uncertainty]}. */
export function exponentRows(exponents) {
  return Object.entries(exponents).map(([name, e]) => {
    if (!Array.isArray(e) || !Number.isFinite(e[0])) return null;
    return { words: EXPONENT_WORDS[name] ?? name, value: e[0], u: e[1] ?? null, lo: e[2], hi: e[3] };
  }).filter(Boolean);
}

function scaleOf({ value, u, lo, hi }) {
  const w = 290;
  const [a, b] = [Math.min(lo ?? value - 0.5, value - 0.1), Math.max(hi ?? value + 0.5, value + 0.1)];
  const pad = (b - a) * 0.45;
  const x = linear(a - pad, b + pad, 0, w);
  const g = s("svg", { class: "plot", viewBox: `0 0 ${w} 30`, width: w, height: 30, "aria-hidden": "true", focusable: "false" });
  if (lo !== undefined && hi !== undefined) {
    g.append(s("rect", { x: x.map(lo), y: 4, width: x.map(hi) - x.map(lo), height: 10, fill: "var(--band)" }));
    for (const v of [lo, hi]) g.append(s("line", { x1: x.map(v), x2: x.map(v), y1: 3, y2: 15, class: "k-ink", "stroke-width": 1 }), s("text", { class: "tick", x: x.map(v), y: 28, "text-anchor": "middle", style: { "font-size": "11px" } }, plain(v, 2)));
  }
  g.append(s("line", { x1: 0, x2: w, y1: 9, y2: 9, class: "k-edge", "stroke-width": 1 }));
  if (u) g.append(s("line", { x1: x.map(value - 2 * u), x2: x.map(value + 2 * u), y1: 9, y2: 9, class: "k-ink", "stroke-width": 3 }));
  g.append(s("circle", { cx: x.map(value), cy: 9, r: 4.5, fill: "var(--sheet)", class: "dot k-ink", "stroke-width": 1.8 }));
  return g;
}

function residuals(root, desk) {
  const item = desk.items.find((i) => i.id === desk.selected && i.fit) ?? desk.items.find((i) => i.fit);
  if (!item) return put(root);
  const unit = written(desk.panel.axes[item.curve.y].unit);
  const points = thin(item.points.map(([q, v]) => [q, v - item.fit.value(q * item.fx) / item.fy]), 0);
  const inside = points.filter((_, i) => i % Math.max(1, Math.floor(points.length / 300)) === 0);
  const big = Math.max(...inside.map((p) => Math.abs(p[1])), 1e-9);
  const width = root.clientWidth || 540;
  const svg = s("svg", { class: "plot", viewBox: `0 0 ${width} 74`, width, height: 74, role: "img", "aria-label": `Trace minus fit, largest ${plain(big, 3)} ${unit}` });
  const frame = [52, 4, width - 10, 66];
  const x = { ...linear(points[0][0], points[points.length - 1][0], frame[0], frame[2]), lo: Math.min(points[0][0], points[points.length - 1][0]), hi: Math.max(points[0][0], points[points.length - 1][0]), labels: false };
  const y = { ...linear(-1.2 * big, 1.2 * big, frame[3], frame[1]), lo: -1.2 * big, hi: 1.2 * big, most: 4 };
  const miss = item.fit.max_miss / item.fy;
  drawChart(svg, { frame, x, ys: [y], lines: [{ points: inside, tone: "trace", width: 1.3 }] });
  put(root, h("h2", {}, `${item.label}: trace less fit, ${unit}`), svg, h("p", { class: "small" }, `Order ${item.fit.order}. Largest miss ${plain(miss, 3)} ${unit} (${plain(item.fit.max_miss_pct, 2)} %); the band drawn is k = 2.`));
}

