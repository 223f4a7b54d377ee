// What a better scan changes, curve by curve: a table whose rows lead to the place of the largest change.
import { amount, firstToShow, inU, nameOf, rowWords, wantsLook } from "../state/carry.js";
import { plain } from "../geometry/number.js";
import { h, put, s } from "../view/dom.js";

const sample = (cls, dash) => s("svg", { viewBox: "0 0 46 10", "aria-hidden": "true", focusable: "false" }, s("line", { x1: 1, x2: 45, y1: 5, y2: 5, class: cls, "stroke-width": 2, "stroke-dasharray": dash }));

export function carryReport(root, { report, doc, chosen, onChoose }) {
  const th = (words, cls) => h("th", { scope: "col", class: cls }, words);
  const rows = report.curves.map((c) =>
    h("tr", { class: `row ${c.id === chosen ? "chosen" : ""}`, "aria-selected": String(c.id === chosen), onclick: () => onChoose(c.id) },
      h("td", {}, h("button", { type: "button", class: "link name", "aria-pressed": String(c.id === chosen) }, nameOf(c, doc)), h("small", {}, wantsLook(c) ? h("b", {}, "Look. ") : null, rowWords(c))),
      h("td", { class: "num" }, amount(c.largest, c), h("small", {}, inU(c.largest_u))),
      h("td", { class: "num" }, amount(c.mean, c), h("small", {}, inU(c.mean_u)))));
  const panels = (report.panels ?? []).map((p) => (p.error_now ? `Panel ${p.id}: ${p.error_now.message ?? p.error_now}` : `${report.panels.length > 1 ? `${p.id}: m` : "M"}arks stand off by ${plain(p.residual_now_px, 2)} px now, ${plain(p.residual_before_px, 2)} px before.`));
  put(root, h("h2", {}, "What changes"), h("p", { class: "said" }, report.message),
    h("table", {}, h("thead", {}, h("tr", {}, th("curve"), th("largest change", "num"), th("mean change", "num"))), h("tbody", {}, rows)),
    h("p", { class: "key" }, h("span", {}, sample("k-ink", "2 6"), "read on the scan before"), h("span", {}, sample("k-trace", null), "read on this scan"), h("span", {}, "u: the standard ± of both readings")),
    panels.length ? h("p", { class: "key" }, panels.join(" ")) : null);
  return firstToShow(report.curves);
}
