// The catalogue: best-efficiency points on one head-flow map, and a quiet table beside it.
import * as api from "../net/api.js";
import { log10, logTicks } from "../geometry/scale.js";
import { parseNumber, plain } from "../geometry/number.js";
import { rank, unknowns } from "../state/catalogue.js";
import { drawBlock } from "../panels/block.js";
import { choice, fillSlip, numberBlank, textBlank, watchTyping } from "../panels/blank.js";
import { keysDialog, letterMayAct } from "../panels/keys.js";
import { fromError } from "../panels/problem.js";
import { $, h, put, s } from "../view/dom.js";
import { drawChart } from "../view/chart.js";

const boot = JSON.parse($("boot").textContent || "{}");
const asked = { flow: null, head: null, state: "", q: "" };
let pumps = [];
let shown = [];
let chosen = null;
let more = null;

function readAddress() {
  const p = new URLSearchParams(location.search);
  for (const k of ["flow", "head"]) asked[k] = parseNumber(p.get(k) ?? "").value ?? null;
  asked.state = p.get("state") ?? "";
  asked.q = p.get("q") ?? "";
}

function writeAddress() {
  const p = new URLSearchParams();
  for (const [k, v] of Object.entries(asked)) if (v !== null && v !== "") p.set(k, v);
  history.replaceState(null, "", p.size ? `?${p}` : location.pathname);
}

function slip() {
  const t = (w) => h("span", {}, w);
  const set = (change, reload = false) => {
    Object.assign(asked, change);
    writeAddress();
    if (reload) load();
    else draw();
  };
  fillSlip($("slip"), {
    sentence: [
      t("Pumps that give"), numberBlank({ name: "flow", label: "Flow asked, in cubic metres an hour", value: asked.flow, example: "any", onValue: (v) => set({ flow: v }) }), t("m³/h at"),
      numberBlank({ name: "head", label: "Head asked, in metres", value: asked.head, example: "any", onValue: (v) => set({ head: v }) }), t("m,"),
      choice({ name: "state", label: "State", value: asked.state, options: [["", "in any state"], ["released", "released"], ["submitted", "submitted"], ["draft", "draft"], ["superseded", "superseded"], ["withdrawn", "withdrawn"]], onValue: (v) => set({ state: v }, true) }),
      t(", named like"), textBlank({ name: "q", label: "Part of maker, model or key", value: asked.q, example: "any", width: 120, onValue: (v) => set({ q: v }, true) }), h("span", { class: "stop" }, "."),
    ],
    does: [h("span", { class: "hint", role: "status" }, `${pumps.length}${more ? " or more" : ""} found`)],
  });
}

function drawMap() {
  const svg = $("plot");
  const { clientWidth: w, clientHeight: t } = $("map");
  svg.setAttribute("viewBox", `0 0 ${w} ${t}`);
  const points = shown.filter((p) => p.bep);
  const qs = [...points.map((p) => p.bep.flow_m3h), asked.flow].filter((v) => v > 0);
  const hs = [...points.map((p) => p.bep.head_m), asked.head].filter((v) => v > 0);
  if (!qs.length || !hs.length) {
    svg.replaceChildren(s("text", { class: "note", x: w / 2, y: t / 2, "text-anchor": "middle" }, pumps.length ? "No pump here has a best-efficiency point." : "No pump yet."));
    $("map-says").textContent = "An empty map.";
    return;
  }
  const around = (list) => {
    const [lo, hi] = [Math.min(...list), Math.max(...list)];
    const pad = Math.max(1.3, (hi / lo) ** 0.12, Math.sqrt(5 / (hi / lo)));
    return [lo / pad, hi * pad];
  };
  const [q0, q1] = around(qs);
  const [h0, h1] = around(hs);
  const frame = [50, 16, w - 18, t - 44];
  const x = { ...log10(q0, q1, frame[0], frame[2]), lo: q0, hi: q1, ticks: logTicks(q0, q1, 8), title: "best-efficiency flow, m³/h (log)" };
  const y = { ...log10(h0, h1, frame[3], frame[1]), lo: h0, hi: h1, ticks: logTicks(h0, h1, 8), title: "best-efficiency head, m (log)" };
  drawChart(svg, { frame, x, ys: [y] });
  for (const p of shown) cutLine(svg, x, y, p);
  askedLines(svg, frame, x, y);
  shown.forEach((p, i) => {
    if (!p.bep) return;
    const [px, py] = [x.map(p.bep.flow_m3h), y.map(p.bep.head_m)];
    const on = p.key === chosen;
    const g = s("g", { class: "hit", "data-key": p.key }, s("circle", { cx: px, cy: py, r: 14, fill: "transparent" }), s("circle", { cx: px, cy: py, r: on ? 11 : 9.5, fill: on ? "var(--ink)" : "var(--sheet)", class: "k-ink", "stroke-width": 1.2, style: { fill: on ? "var(--ink)" : "var(--sheet)" } }), s("text", { x: px, y: py + 4, "text-anchor": "middle", style: { font: "700 11px var(--text)", fill: on ? "var(--sheet)" : "var(--ink)" } }, String(i + 1)));
    g.addEventListener("click", () => choose(p.key));
    g.addEventListener("dblclick", () => location.assign(`/pumps/${p.key}`));
    svg.append(g);
  });
  $("map-says").textContent = `${points.length} pumps by their best-efficiency point, flow ${plain(Math.min(...qs), 0)} to ${plain(Math.max(...qs), 0)} m³/h, head ${plain(Math.min(...hs), 0)} to ${plain(Math.max(...hs), 0)} m. The table holds the same numbers.`;
}

/** From the best-efficiency point down to where the affinity laws put it for the smallest impeller traced. */
function cutLine(svg, x, y, p) {
  const ds = p.diameters_mm ?? [];
  if (!p.bep || ds.length < 2) return;
  const r = Math.min(...ds) / Math.max(...ds);
  const a = [x.map(p.bep.flow_m3h), y.map(p.bep.head_m)];
  const b = [x.map(p.bep.flow_m3h * r), y.map(p.bep.head_m * r * r)];
  const l = Math.hypot(b[0] - a[0], b[1] - a[1]) || 1;
  const [nx, ny] = [(-4 * (b[1] - a[1])) / l, (4 * (b[0] - a[0])) / l];
  svg.append(s("path", { d: `M${a[0]} ${a[1]}L${b[0]} ${b[1]}M${b[0] - nx} ${b[1] - ny}L${b[0] + nx} ${b[1] + ny}`, class: "k-ink", "stroke-width": 1.2 }));
}

function askedLines(svg, [x0, y0, x1, y1], x, y) {
  if (asked.flow > 0) {
    const px = x.map(asked.flow);
    svg.append(s("line", { x1: px, x2: px, y1: y0, y2: y1, class: "k-yours system", "stroke-width": 1.2 }), s("text", { class: "endlabel t-yours halo", x: px - 6, y: y1 - 12, "text-anchor": "end" }, `${plain(asked.flow)} m³/h asked`));
  }
  if (asked.head > 0) {
    const py = y.map(asked.head);
    svg.append(s("line", { x1: x0, x2: x1, y1: py, y2: py, class: "k-yours system", "stroke-width": 1.2 }), s("text", { class: "endlabel t-yours halo", x: x0 + 12, y: py + 16 }, `${plain(asked.head)} m asked`));
  }
  if (asked.flow > 0 && asked.head > 0) svg.append(s("circle", { cx: x.map(asked.flow), cy: y.map(asked.head), r: 5, fill: "var(--sheet)", class: "dot k-yours", "stroke-width": 1.8 }));
}

function table() {
  if (!shown.length) {
    put($("hits"), h("p", { class: "nothing" }, pumps.length || asked.q || asked.state ? "No pump fits the sentence above. Empty a blank to see more." : ["Nothing is filed yet. Lay a sheet on the ", h("a", { href: "/" }, "desk"), ", follow its curves, and save: the pump then stands here."]));
    return;
  }
  const num = (v, d = 0) => (Number.isFinite(v) ? plain(v, d) : "?");
  const rows = shown.map((p, i) => {
    const row = h("tr", { class: `row ${p.key === chosen ? "chosen" : ""}`, "data-key": p.key },
      h("td", { class: "num" }, String(i + 1)), h("td", { class: "name" }, h("a", { href: `/pumps/${p.key}` }, `${p.maker} ${p.model}`)), h("td", { class: "wide" }, p.state),
      h("td", { class: "num" }, num(p.bep?.flow_m3h)), h("td", { class: "num" }, num(p.bep?.head_m, 1)), h("td", { class: "num" }, diameters(p)),
      h("td", { class: "num wide" }, num(p.rated_rpm)), h("td", { class: "missing" }, unknowns(p)), h("td", { class: "num" }, String(p.revision)));
    row.addEventListener("click", (e) => e.target.closest("a") || choose(p.key));
    return row;
  });
  const th = (words, cls) => h("th", { scope: "col", class: cls }, words);
  put($("hits"), h("table", {}, h("caption", { class: "unseen" }, "Pumps of the bank"), h("thead", {}, h("tr", {}, th("no.", "num"), th("pump"), th("state", "wide"), th(["best flow", h("br"), "m³/h"], "num"), th(["head there", h("br"), "m"], "num"), th(["impeller", h("br"), "mm"], "num"), th(["speed", h("br"), "1/min"], "num wide"), th("what we do not know"), th("rev.", "num"))), h("tbody", {}, rows)),
    more ? h("p", {}, h("button", { type: "button", class: "btn", onclick: () => load(more) }, "Show more")) : null);
}

function diameters(p) {
  const ds = p.diameters_mm ?? [];
  if (!ds.length) return "?";
  const [lo, hi] = [Math.min(...ds), Math.max(...ds)];
  return lo === hi ? plain(lo, 0) : `${plain(lo, 0)} to ${plain(hi, 0)}`;
}

function choose(key) {
  chosen = key;
  draw();
}

function card() {
  const i = shown.findIndex((p) => p.key === chosen);
  const p = shown[i];
  if (!p) return put($("chosen"));
  const f = p.findings ?? {};
  const count = [["error", "errors"], ["warning", "warnings"], ["note", "notes"]].map(([k, w]) => (f[k] ? `${f[k]} ${f[k] === 1 ? k : w}` : null)).filter(Boolean).join(", ");
  const bep = p.bep ? `Its best efficiency lies at ${plain(p.bep.flow_m3h, 0)} m³/h and ${plain(p.bep.head_m, 1)} m with the largest wheel.` : "Its best-efficiency point is not known.";
  return put($("chosen"), h("div", { class: "head" }, h("h2", {}, `${i + 1}  ${p.maker} ${p.model}`), h("span", { class: `chip ${p.state}` }, `revision ${p.revision}, ${p.state}`), h("a", { href: `/pumps/${p.key}` }, "open the pump page")),
    h("p", {}, `${bep} ${p.stages} ${p.stages === 1 ? "stage" : "stages"}${p.rated_rpm ? ` at ${plain(p.rated_rpm, 0)} 1/min` : ""}. ${count ? `Its check left ${count}.` : "Its check left nothing open."}`));
}

function draw() {
  shown = rank(pumps, asked);
  if (chosen && !shown.some((p) => p.key === chosen)) chosen = null;
  chosen ??= shown[0]?.key ?? null;
  slip();
  drawMap();
  $("hits-title").textContent = shown.length === 1 ? "1 pump" : `${shown.length} pumps`;
  $("hits-note").textContent = asked.flow > 0 || asked.head > 0 ? "nearest to the duty first" : "by name";
  table();
  card();
  const bank = String(boot.bank ?? "").split(/[\\/]/).pop();
  $("where").textContent = bank ? `Bank: ${bank}` : "";
  drawBlock($("block"), [["view", `${shown.length}${more ? " or more" : ""} ${shown.length === 1 ? "pump" : "pumps"}, ${asked.state || "any state"}`], ["points", "best efficiency of the largest wheel"], ["cut ends", "smallest impeller traced, by the affinity laws"], ["not on the map", `${shown.filter((p) => !p.bep).length} without a best-efficiency point`, { grow: true }], ["bank", bank || "?"]]);
}

async function load(cursor = null) {
  try {
    const answer = await api.pumps({ q: asked.q, state: asked.state || null, cursor, limit: 200 });
    pumps = cursor ? [...pumps, ...answer.items] : answer.items;
    more = answer.next ?? null;
    draw();
  } catch (error) {
    draw();
    fromError($("problems"), "list", error, [["Try again", (close) => { close(); load(); }]]);
  }
}

window.addEventListener("keydown", (e) => {
  if (!letterMayAct(e)) return;
  const k = e.key.toLowerCase();
  const i = shown.findIndex((p) => p.key === chosen);
  if (k === "j" || (e.key === "ArrowDown" && document.activeElement === $("map"))) choose(shown[Math.min(shown.length - 1, i + 1)]?.key);
  else if (k === "k" || (e.key === "ArrowUp" && document.activeElement === $("map"))) choose(shown[Math.max(0, i - 1)]?.key);
  else if (e.key === "Enter" && chosen && !e.target.closest("a, button")) location.assign(`/pumps/${chosen}`);
  else if (e.key === "/") $("slip").querySelector("input")?.focus();
  else return;
  e.preventDefault();
});
window.addEventListener("resize", drawMap);
keysDialog([["J K", "next and previous pump"], ["Enter", "open the pump's page"], ["/", "first blank of the sentence"], ["?", "this map"]]);
watchTyping($("slip"));
readAddress();
load();

