// The fold between paper and re-plot: what the straightedge reads, each at its own height.
import { spread } from "../geometry/labels.js";
import { h, put, s } from "./dom.js";

/**
 * reading = {flow: {value, doubt} | null, heading, rows: [{y, value, doubt, name, tone, near}], foot, grey}
 * Rows are pushed apart; the nearest has the box; leaders at both sides tie a row to its own height.
 */
export function drawFold(root, reading, { width, height }) {
  if (width > height * 2) return drawAcross(root, reading);
  const rows = reading.rows;
  const top = 58;
  const bottom = height - 64;
  const gap = Math.max(30, Math.min(38, (bottom - top) / Math.max(1, rows.length)));
  const near = rows.findIndex((r) => r.near);
  const placed = spread(rows.map((r) => r.y), gap, top + 12, bottom);
  if (near >= 0 && rows[near].y > top && rows[near].y < bottom) shiftToNear(rows, placed, near, gap);
  const svg = s("svg", { class: "plot leaders", width, height, viewBox: `0 0 ${width} ${height}`, "aria-hidden": "true", focusable: "false" });
  const items = rows.map((r, i) => {
    const tone = `k-${r.tone === "ink" ? "ink" : r.tone}`;
    const dash = r.dashed ? "3 2" : null;
    if (r.near) svg.append(s("path", { d: `M0 ${r.y}L9 ${placed[i]}M${width} ${r.y}L${width - 9} ${placed[i]}`, class: tone, "stroke-width": 1 }));
    else svg.append(s("path", { d: `M0 ${r.y}L9 ${placed[i]}M${width} ${r.y}L${width - 9} ${placed[i]}`, class: tone, "stroke-width": 1.2, "stroke-dasharray": dash }));
    return h("div", { class: `reading ${r.near ? "near" : ""}`, style: { top: `${placed[i]}px`, color: r.tone === "ink" ? "inherit" : `var(--${r.tone})` } }, h("b", {}, r.value), h("span", {}, [r.doubt, r.name].filter(Boolean).join(" ")));
  });
  put(root, svg,
    h("div", { class: "fold-head" }, h("b", {}, reading.heading), reading.flow?.doubt ? h("span", {}, reading.flow.doubt) : null),
    items,
    h("div", { class: "fold-foot" }, reading.foot));
  root.classList.toggle("grey", Boolean(reading.grey));
}

function shiftToNear(rows, placed, near, gap) {
  placed[near] = rows[near].y;
  const order = rows.map((_, i) => i).sort((a, b) => placed[a] - placed[b]);
  const k = order.indexOf(near);
  for (let j = k - 1; j >= 0; j--) placed[order[j]] = Math.min(placed[order[j]], placed[order[j + 1]] - gap - (order[j + 1] === near ? 6 : 0));
  for (let j = k + 1; j < order.length; j++) placed[order[j]] = Math.max(placed[order[j]], placed[order[j - 1]] + gap + (order[j - 1] === near ? 6 : 0));
}

function drawAcross(root, reading) {
  put(root,
    h("div", { class: "across" },
      h("div", { class: "reading" }, h("b", {}, reading.heading), h("span", {}, reading.flow?.doubt ?? "")),
      reading.rows.map((r) => h("div", { class: `reading ${r.near ? "near" : ""}`, style: { color: r.tone === "ink" ? "inherit" : `var(--${r.tone})` } }, h("b", {}, r.value), h("span", {}, [r.doubt, r.name].filter(Boolean).join(" "))))));
  root.classList.toggle("grey", Boolean(reading.grey));
}
