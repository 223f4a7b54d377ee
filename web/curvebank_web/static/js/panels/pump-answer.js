// Right side of the pump page: the answer as a table, the impeller scale, cautions, history.
import { fixed, decimalsFor, plain } from "../geometry/number.js";
import { linear, linearTicks, roundStep } from "../geometry/scale.js";
import { cautionText } from "../state/catalogue.js";
import { SHOWN } from "../state/pump.js";
import { finding } from "./findings.js";
import { h, put, s } from "../view/dom.js";

const WORDS = { head: "head", efficiency: "efficiency", power: "shaft power", npshr: "NPSH required" };

function row(words, unit, value, machine, print, unknown = null) {
  if (value === null || value === undefined) return h("tr", {}, h("th", { scope: "row" }, words), h("td", { class: "num print-note", colspan: 3 }, unknown ?? "not known"));
  const d = decimalsFor(machine || print || Math.abs(value) / 200);
  const show = (u) => (u === null || u === undefined ? "?" : `± ${fixed(u, decimalsFor(u))}`);
  return h("tr", {}, h("th", { scope: "row" }, words), h("td", { class: "num" }, h("b", {}, `${fixed(value, d)} ${unit}`)), h("td", { class: "num" }, h("b", {}, show(machine))), h("td", { class: "num print" }, show(print)));
}

/** model as in pump-plots, with flow, readings {quantity: {value, machine, print}}, flowDoubt {machine, print}, note */
export function drawAnswer(root, m) {
  const [fUnit, fk] = m.units.flow;
  const head = m.duty ? "What a delivered pump will do here" : m.flow !== null ? "What a delivered pump does at this flow" : "What a delivered pump does";
  const th = (words, cls = "num") => h("th", { scope: "col", class: cls }, words);
  const scaled = (q) => {
    const r = m.readings[q];
    const k = m.units[q][1];
    return r ? [r.value * k, r.machine === null ? null : r.machine * k, r.print === null ? null : r.print * k] : [null, null, null];
  };
  const known = new Set(m.detail.quantities);
  put(root, h("h2", {}, head), h("table", {}, h("caption", { class: "unseen" }, head),
    h("thead", {}, h("tr", {}, th(h("span", { class: "unseen" }, "what"), ""), th("value"), th("± machine"), th("± print", "num print"))),
    h("tbody", {}, m.flow === null ? null : flowRow(m, fUnit, fk),
      SHOWN.map((q) => row(WORDS[q], m.units[q][0], ...scaled(q), known.has(q) ? "outside what was traced" : "not known")))),
  h("p", { class: "band-note" }, `k = 1. The machine band follows from “${m.basis}”. `, m.note));
}

function flowRow(m, unit, k) {
  if (m.flowDoubt) return row("flow", unit, m.flow * k, m.flowDoubt.machine * k, m.flowDoubt.print * k);
  return h("tr", {}, h("th", { scope: "row" }, "flow"), h("td", { class: "num" }, h("b", {}, `${plain(m.flow * k, 1)} ${unit}`)), h("td", { class: "num" }, "asked"), h("td", { class: "num print" }));
}

export function drawImpellers(root, diameters, asked) {
  if (!diameters.length) return put(root);
  const w = Math.max(240, root.clientWidth || 460);
  const all = asked ? [...diameters, asked] : diameters;
  const [lo, hi] = [Math.min(...all), Math.max(...all)];
  const pad = Math.max((hi - lo) * 0.06, hi * 0.01);
  const x = linear(lo - pad, hi + pad, 14, w - 14);
  const svg = s("svg", { class: "plot", viewBox: `0 0 ${w} 70`, width: w, height: 70, role: "img", "aria-label": `Impeller diameters traced: ${diameters.map((d) => plain(d, 1)).join(", ")} mm${asked ? `; asked ${plain(asked, 1)} mm` : ""}` });
  svg.append(s("line", { x1: 4, x2: w - 4, y1: 40, y2: 40, class: "k-ink", "stroke-width": 1 }));
  for (const v of linearTicks(lo - pad, hi + pad, 60, roundStep(hi - lo + 2 * pad, 60))) svg.append(s("line", { x1: x.map(v), x2: x.map(v), y1: 35, y2: 40, class: "k-edge", "stroke-width": 1 }));
  let last = -99;
  for (const d of [...diameters].sort((a, b) => a - b)) {
    svg.append(s("line", { x1: x.map(d), x2: x.map(d), y1: 22, y2: 40, class: "k-ink", "stroke-width": 2 }));
    if (x.map(d) - last > 34) {
      svg.append(s("text", { class: "title", x: x.map(d), y: 16, "text-anchor": "middle" }, plain(d, 1)));
      last = x.map(d);
    }
  }
  if (asked) {
    const px = x.map(asked);
    const right = px < w - 110;
    svg.append(s("path", { d: `M${px} 43l6 11h-12z`, style: { fill: "var(--yours)" } }), s("text", { class: "endlabel t-yours", x: right ? px + 11 : px - 11, y: 56, "text-anchor": right ? "start" : "end" }, `${plain(asked, 1)} asked`));
  }
  return put(root, h("h3", {}, "Impeller, mm; long strokes are traced curves"), svg);
}

export function drawCautions(root, detail, duty, onWaive) {
  const findings = (detail.findings ?? []).map((f) => ({ severity: f.severity, key: f.key, text: f.message, waived: waiverOf(detail, f) }));
  const grave = findings.filter((f) => f.severity !== "note");
  const notes = findings.filter((f) => f.severity === "note");
  const said = [...new Set([...(duty?.cautions ?? []), ...(detail.cautions ?? [])].map(cautionText))].filter((text) => !grave.some((f) => text.includes(f.text)));
  const list = [...grave, ...said.map((text) => ({ severity: "warning", caution: true, text }))];
  if (!list.length && !notes.length) return put(root);
  return put(root, h("h2", {}, "Before you rely on it"), items(list, 0, onWaive), notes.length ? h("details", { class: "notes" }, h("summary", {}, `${notes.length} ${notes.length === 1 ? "note" : "notes"} of the check`), items(notes, list.length, null)) : null);
}

function items(list, from, onWaive) {
  return h("ol", { class: "findings" }, list.map((f, i) => {
    const li = finding({ number: from + i + 1, severity: f.severity, text: f.waived ? `${f.text} “${f.waived.why}” ${f.waived.who}.` : f.text });
    if (f.caution) li.querySelector("strong").textContent = "Caution. ";
    else if (f.waived) li.querySelector("strong").textContent = `${f.severity === "error" ? "Error" : f.severity === "warning" ? "Warning" : "Note"}, waived. `;
    else if (onWaive && f.severity !== "note") li.lastElementChild.append(" ", h("button", { type: "button", class: "link", onclick: () => onWaive(f, li) }, "Waive it, with the reason"), ".");
    return li;
  }));
}

function waiverOf(detail, f) {
  return (detail.waivers ?? []).find((w) => w.finding === f.key || w.key === f.key) ?? null;
}

const KIND = { saved: "saved", submitted: "submitted", released: "released", superseded: "was followed by a newer one:", withdrawn: "withdrew", renamed: "renamed", merged: "merged", commented: "wrote on", waived: "waived a finding of", tagged: "tagged" };

export function when(text) {
  const d = new Date(text);
  return Number.isNaN(d.valueOf()) ? String(text ?? "") : d.toLocaleString("en-GB", { day: "numeric", month: "short", year: "numeric", hour: "2-digit", minute: "2-digit" });
}

export function drawHistory(root, pump, acts) {
  const events = [...(pump.events ?? [])].reverse().slice(0, 8);
  put(root, h("h2", {}, "What happened so far"), h("ol", { class: "history" }, events.map((e) => h("li", {}, h("span", {}, when(e.at)), h("span", {}, `${e.who ?? "?"} ${KIND[e.kind] ?? e.kind} ${e.revision ? `revision ${e.revision}` : ""}${e.why ? `: “${e.why}”` : ""}`)))), h("div", { class: "acts" }, acts));
}
