// The pump page: what was stored, read where the sentence asks.
import * as api from "../net/api.js";
import { parseNumber, plain } from "../geometry/number.js";
import { csv, dutyFlowDoubt, grid, meets, readAt, SHOWN, system, SYSTEMS } from "../state/pump.js";
import { drawBlock } from "../panels/block.js";
import { button, choice, fillSlip, numberBlank, textBlank, watchTyping } from "../panels/blank.js";
import { keepSetting, keysDialog, letterMayAct, setting } from "../panels/keys.js";
import { drawAnswer, drawCautions, drawHistory, drawImpellers, when } from "../panels/pump-answer.js";
import { closeProblem, fromError } from "../panels/problem.js";
import { $, h, put } from "../view/dom.js";
import { drawPumpPlots } from "../view/pump-plots.js";
import { placeOnPanel, Scan } from "../view/scan.js";

const key = decodeURIComponent(location.pathname.split("/").filter(Boolean).pop());
const asked = { diameter: null, speed: null, lift: null, loss: null, at: null, revision: null };
let pump = null;
let detail = null;
let values = {};
let duties = [];
let pointer = null;
let note = "";
let scan = null;
let sheet = 0;
let units = SYSTEMS[setting("units", "metric")] ?? SYSTEMS.metric;
let asking = null;
const release = { why: "", who: setting("who", "") };

function readAddress() {
  const p = new URLSearchParams(location.search);
  for (const k of Object.keys(asked)) asked[k] = parseNumber(p.get(k) ?? "").value ?? null;
}

function writeAddress() {
  const p = new URLSearchParams();
  for (const [k, v] of Object.entries(asked)) if (v !== null) p.set(k, v);
  history.replaceState(null, "", p.size ? `?${p}` : location.pathname);
}

function set(change) {
  Object.assign(asked, change);
  writeAddress();
  slip();
  ask();
}

function slip() {
  const t = (w) => h("span", {}, w);
  const many = detail.diameters_mm.length > 0;
  fillSlip($("slip"), {
    sentence: [
      many ? [t("At impeller"), numberBlank({ name: "diameter", label: "Impeller diameter in mm", value: asked.diameter, example: "mm", least: 1, onValue: (v) => set({ diameter: v }) }), t("mm and")] : t("At"),
      numberBlank({ name: "speed", label: "Speed in revolutions a minute", value: asked.speed, example: "printed", least: 1, onValue: (v) => set({ speed: v }) }), t("1/min, in a system with"),
      numberBlank({ name: "lift", label: "Static lift in metres", value: asked.lift, example: "lift", onValue: (v) => set({ lift: v }) }), t("m lift and"),
      numberBlank({ name: "loss", label: "Friction loss in metres", value: asked.loss, example: "loss", least: 0, onValue: (v) => set({ loss: v }) }), t("m friction at"),
      numberBlank({ name: "at", label: "Flow in cubic metres an hour at which the friction holds", value: asked.at, example: "flow", least: 0, onValue: (v) => set({ at: v }) }), t("m³/h"), h("span", { class: "stop" }, "."),
    ],
  });
}

/** Ask the server for the asked wheel: each quantity over its own domain, then the duty. */
async function ask() {
  asking?.abort();
  asking = new AbortController();
  const { signal } = asking;
  const common = { diameter_mm: asked.diameter, speed_rpm: asked.speed };
  const next = {};
  note = "";
  try {
    const hi = Math.max(1, ...detail.curves.flatMap((c) => c.points.map((p) => p[0])));
    await Promise.all(SHOWN.filter((q) => detail.quantities.includes(q)).map(async (q) => {
      try {
        const wide = await api.values(key, detail.number, { quantity: q, flow_m3h: hi / 2, ...common }, signal);
        const [lo, end] = wide.domain ?? [0, hi];
        next[q] = await api.values(key, detail.number, { quantity: q, flow_m3h: grid(lo, end).map((v) => v.toPrecision(8)).join(","), ...common }, signal);
      } catch (error) {
        if (error.name === "AbortError" || error.away) throw error;
        if (q === "head") note = error.detail;
      }
    }));
    const sys = system(asked);
    duties = [];
    if (sys && next.head && !meets(next.head, sys)) note = "This pump and this system do not meet within what was traced.";
    else if (sys && next.head) {
      try {
        duties = (await api.duty(key, detail.number, { ...sys, ...common }, signal)).duties;
        if (!duties.length) note = "This pump and this system do not meet within what was traced.";
      } catch (error) {
        if (error.name === "AbortError" || error.away) throw error;
        note = error.detail;
      }
    }
    values = next;
    closeProblem($("problems"), "ask");
    draw();
  } catch (error) {
    if (error.name !== "AbortError") fromError($("problems"), "ask", error, [["Try again", (close) => { close(); ask(); }]]);
  }
}

function model() {
  const sys = system(asked);
  const duty = duties.find((d) => d.stable !== false) ?? duties[0] ?? null;
  const head = values.head;
  const middle = head ? (head.flow_m3h[0] + head.flow_m3h[head.flow_m3h.length - 1]) / 2 : null;
  const flow = pointer ?? duty?.flow_m3h ?? (head && detail.bep && readAt(head, detail.bep.flow_m3h) ? detail.bep.flow_m3h : middle);
  const readings = Object.fromEntries(SHOWN.map((q) => [q, flow === null ? null : readAt(values[q], flow)]));
  const atDuty = duty && pointer === null;
  if (atDuty && !readings.power && duty.power_kw !== null && duty.power_kw !== undefined) readings.power = { value: duty.power_kw, machine: null, print: null };
  const flowDoubt = atDuty && head ? { machine: dutyFlowDoubt(head, flow, sys.friction_m_per_m3h2, "machine"), print: dutyFlowDoubt(head, flow, sys.friction_m_per_m3h2, "print") } : null;
  const basis = [...new Set(detail.curves.map((c) => c.basis).filter(Boolean))].join(", ") || "catalogue";
  return { detail, asked, values, duties, duty: atDuty ? duty : null, system: sys, units, flow, readings, flowDoubt: flowDoubt?.machine ? flowDoubt : null, basis: `${basis} curve`, note };
}

function draw() {
  const m = model();
  drawPumpPlots($("plots"), m, (flow) => { pointer = flow; requestAnimationFrame(drawSoon); });
  drawAnswer($("answer"), m);
  if (m.duties.length > 1) $("answer").append(h("p", { class: "band-note" }, `The system meets this pump ${m.duties.length} times: at ${m.duties.map((d) => plain(d.flow_m3h, 0)).join(" and ")} m³/h. The table is for the stable one.`));
  drawImpellers($("scale"), detail.diameters_mm, asked.diameter);
  drawCautions($("cautions"), detail, m.duty, waive);
  drawScan(m);
}

let soon = false;
function drawSoon() {
  if (soon) return;
  soon = true;
  requestAnimationFrame(() => {
    soon = false;
    const m = model();
    drawPumpPlots($("plots"), m, (flow) => { pointer = flow; drawSoon(); });
    drawAnswer($("answer"), m);
  });
}

function drawScan(m) {
  const pages = (detail.sheets ?? []).filter((p) => p.sha256 && p.width);
  if (!pages.length) return put($("scan"), h("h2", {}, "No paper is kept for this revision"));
  if (!scan) {
    put($("scan"), h("h2", {}, "The paper, with the stored curves drawn back"), h("div", { class: "tabs", role: "group", "aria-label": "Sheets" }));
    scan = new Scan($("scan"));
    $("scan").append(h("p", { class: "acts" }, button("Use a better scan of this paper", { quiet: true, onClick: () => toDesk("/scan", (detail.sheets ?? []).filter((p) => p.sha256 && p.width)[sheet]?.sha256) })));
  }
  sheet = Math.min(sheet, pages.length - 1);
  const tabs = $("scan").querySelector(".tabs");
  put(tabs, pages.length > 1 ? pages.map((p, i) => h("button", { type: "button", "aria-pressed": String(i === sheet), onclick: () => { sheet = i; drawScan(model()); } }, `${p.file_name ?? `sheet ${i + 1}`}, page ${p.page}`)) : null);
  let ring = null;
  const curve = detail.curves.find((c) => c.quantity === "head" && c.panel && c.page === pages[sheet].page);
  const panel = curve && (detail.panels ?? []).find((p) => p.id === curve.panel && p.page === curve.page);
  if (m.duty && panel) ring = placeOnPanel(panel, curve.x_axis, curve.y_axis, [m.duty.flow_m3h, m.duty.head_m]);
  return scan.show(pages[sheet], detail, ring);
}

function table() {
  const rows = detail.curves.flatMap((c) => c.points.filter((_, i) => i % Math.max(1, Math.floor(c.points.length / 12)) === 0).map(([q, v]) => h("tr", {}, h("td", {}, c.id), h("td", {}, c.quantity.replaceAll("_", " ")), h("td", { class: "num" }, c.diameter_mm ? plain(c.diameter_mm, 1) : ""), h("td", { class: "num" }, plain(q, 2)), h("td", { class: "num" }, plain(v, 4)))));
  const th = (w, cls) => h("th", { scope: "col", class: cls }, w);
  $("plots").append(h("details", { class: "table sheet" }, h("summary", {}, "The plots as a table"), h("div", { class: "roll", tabindex: "0", role: "region", "aria-label": "The plots as a table" }, h("table", {}, h("thead", {}, h("tr", {}, th("curve"), th("quantity"), th("impeller, mm", "num"), th("flow, m³/h", "num"), th("value", "num"))), h("tbody", {}, rows)))));
}

function save(name, type, text) {
  h("a", { href: URL.createObjectURL(new Blob([text], { type })), download: name }).click();
}

async function toDesk(where = "", sheet_sha256 = undefined) {
  try {
    const draft = await api.newDraft({ from_pump: key, revision: detail.number, ...(sheet_sha256 ? { sheet_sha256 } : {}) });
    location.assign(`/desk/${encodeURIComponent(draft.id)}${where}`);
  } catch (error) {
    fromError($("problems"), "desk", error);
  }
}

/** Ask for the reason in place, then note the waiver with its name. */
function waive(f, li) {
  const say = async () => {
    if (!release.why || !release.who) return;
    keepSetting("who", release.who);
    try {
      await api.revisionEvent(key, detail.number, { kind: "waived", who: release.who, why: release.why, finding: f.key });
      release.why = "";
      await start();
    } catch (error) {
      fromError($("problems"), "waive", error);
    }
  };
  li.querySelector(".link")?.remove();
  li.lastElementChild.append(h("div", { class: "sentence" }, h("span", {}, "It is right, because"), textBlank({ name: "wwhy", label: "Why it is right", value: "", example: "why", width: 150, onValue: (v) => { release.why = v; } }), h("span", {}, ", signed"), textBlank({ name: "wwho", label: "Your name", value: release.who, example: "your name", width: 100, onValue: (v) => { release.who = v; } }), button("Waive", { onClick: say })));
  li.querySelector("input").focus();
}

async function releaseNow() {
  if (!release.who || !release.why) return;
  keepSetting("who", release.who);
  try {
    await api.revisionEvent(key, detail.number, { kind: "released", who: release.who, why: release.why });
    location.reload();
  } catch (error) {
    fromError($("problems"), "release", error);
  }
}

function history_() {
  const acts = [
    h("button", { type: "button", class: "btn quiet", onclick: () => save(`${key}-${detail.number}.csv`, "text/csv", csv(detail)) }, "Curves as CSV"),
    h("a", { class: "btn quiet", href: `/api/pumps/${encodeURIComponent(key)}/revisions/${detail.number}`, download: `${key}-${detail.number}.json` }, "Revision as JSON"),
    button("Lay it on the desk again", { quiet: true, onClick: () => toDesk() }),
  ];
  drawHistory($("history"), pump, acts);
  if (["draft", "saved", "submitted"].includes(detail.state)) {
    const draw_ = () => history_();
    $("history").append(h("div", { class: "sentence" }, h("span", {}, "Release it, because"), textBlank({ name: "rwhy", label: "Why it is released", value: release.why, example: "why", width: 130, onValue: (v) => { release.why = v; draw_(); } }), h("span", {}, ", signed"), textBlank({ name: "rwho", label: "Your name", value: release.who, example: "your name", width: 100, onValue: (v) => { release.who = v; draw_(); } }), h("span", { class: "stop" }, ".")),
      h("div", { class: "acts" }, button(`Release revision ${detail.number}`, { main: Boolean(release.who && release.why), waiting: release.who && release.why ? null : "needs why and who", onClick: releaseNow })));
  }
}

function header() {
  $("name").textContent = `${detail.maker} ${detail.model}`;
  document.title = `${detail.maker} ${detail.model}, curvebank`;
  const many = pump.revisions.length > 1;
  put($("chip"), h("span", { class: `chip ${detail.state}` }, `revision ${detail.number}, ${detail.state}`), many ? choice({ name: "revision", label: "Revision shown", value: detail.number, options: pump.revisions.map((r) => [r.number, r.number === detail.number ? `${r.number} of ${pump.revisions.length}` : `revision ${r.number}, ${r.state}`]), onValue: (v) => { asked.revision = v; writeAddress(); start(); } }) : null);
  const n = detail.diameters_mm.length;
  $("about").textContent = `${[...new Set(detail.curves.map((c) => c.basis))].join(", ")} curve · ${n} ${n === 1 ? "diameter" : "diameters"} · ${detail.stages} ${detail.stages === 1 ? "stage" : "stages"}`;
  $("where").textContent = `${detail.maker} ${detail.model}${detail.rated_rpm ? `, ${plain(detail.rated_rpm, 0)} 1/min` : ""}`;
  $("units").firstChild.textContent = `${units.name} `;
  const s0 = (detail.sheets ?? []).find((p) => p.sha256);
  const released = pump.events?.filter((e) => e.kind === "released" && e.revision === detail.number).pop();
  drawBlock($("block"), [
    ["revision", `${detail.number} of ${pump.revisions.length}, ${detail.state}${released ? ` ${released.at.slice(0, 10)}` : ""}`],
    ["by", [detail.who, released && released.who !== detail.who ? `released by ${released.who}` : ""].filter(Boolean).join("; ")],
    ["why", detail.why], s0 ? ["sheet", `${s0.file_name}, page ${s0.page}, sha-256 ${s0.sha256.slice(0, 4)} ${s0.sha256.slice(4, 8)} …`, { grow: true }] : ["sheet", "none", { grow: true }],
    ["saved", when(detail.saved_at)], ["history", `${pump.revisions.length} ${pump.revisions.length === 1 ? "revision" : "revisions"}, ${(pump.events ?? []).length} events`],
  ]);
}

async function start() {
  try {
    pump = await api.pump(key);
    const number = asked.revision ?? pump.released ?? pump.revisions[pump.revisions.length - 1].number;
    detail = await api.revision(key, number);
  } catch (error) {
    $("name").textContent = key;
    return fromError($("problems"), "open", error, [["Open the catalogue", () => location.assign("/pumps")]]);
  }
  if (asked.diameter === null && detail.diameters_mm.length) asked.diameter = Math.max(...detail.diameters_mm);
  if (asked.speed === null && detail.rated_rpm) asked.speed = detail.rated_rpm;
  header();
  slip();
  put($("plots"));
  draw();
  table();
  history_();
  return ask();
}

function switchUnits() {
  const next = units === SYSTEMS.metric ? "us" : "metric";
  units = SYSTEMS[next];
  keepSetting("units", next);
  if (!detail) return;
  header();
  draw();
}

$("units").addEventListener("click", switchUnits);
window.addEventListener("keydown", (e) => {
  if (!letterMayAct(e)) return;
  if (e.key.toLowerCase() === "m") switchUnits();
  else if (e.key === "/") { e.preventDefault(); $("slip").querySelector("input")?.focus(); }
});
window.addEventListener("resize", () => detail && draw());
window.addEventListener("curvebank-theme", () => detail && draw());
keysDialog([["M", "metric or US units"], ["/", "first blank of the sentence"], ["+ −", "on the paper: closer, further"], ["0", "on the paper: whole panel"], ["?", "this map"]]);
watchTyping($("slip"));
readAddress();
start();
