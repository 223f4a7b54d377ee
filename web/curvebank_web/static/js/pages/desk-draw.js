// Puts the desk on the screen: called once a frame with what has become out of date.
import { corners, fitBox, toScreen, toSheet } from "../geometry/affine.js";
import { atIndex, crossings, path } from "../geometry/polyline.js";
import { plain } from "../geometry/number.js";
import { QUANTITY_WORDS, written } from "../geometry/units.js";
import * as words from "../state/words.js";
import { drawBlock } from "../panels/block.js";
import { drawFindings } from "../panels/findings.js";
import { fillSlip } from "../panels/blank.js";
import { drawSteps } from "../panels/steps.js";
import { marksSentence, panelSentence, sheetSentence } from "../panels/sentences.js";
import { maskSentence } from "../panels/sentence-mask.js";
import { curvesSentence } from "../panels/sentences-curves.js";
import { familySentence, fitSentence, jobSentence, submitSentence } from "../panels/sentences-end.js";
import { drawBeside } from "../panels/beside.js";
import { $, h, put, s } from "../view/dom.js";
import { drawFold } from "../view/fold.js";
import { drawOverlay, sceneMarks } from "../view/overlay.js";
import { brushEdge } from "../view/veil.js";
import { alignedScales, drawReplot, EDGE } from "../view/replot.js";

const SENTENCES = { sheet: sheetSentence, panel: panelSentence, marks: marksSentence, curves: curvesSentence, family: familySentence, fit: fitSentence, submit: submitSentence };

export function size(id) {
  const el = $(id);
  return { width: el.clientWidth, height: el.clientHeight };
}

/** The view that shows the current panel, straightened, or the whole sheet. */
export function homeView(desk, whole = false) {
  const { page, panel } = desk;
  if (!page) return null;
  const { width, height } = size("paper");
  const outline = panel && desk.outlineOf(panel);
  if (whole || !outline || ["sheet", "panel"].includes(desk.step)) return fitBox(corners(page.width, page.height), width, height, 0, { left: 14, right: 14, top: 14, bottom: 14 });
  const lead = desk.axes?.[0];
  const frame = lead ? frameOf(lead) : outline;
  const middle = [(frame[0][0] + frame[2][0]) / 2, (frame[0][1] + frame[2][1]) / 2];
  const tilt = lead ? lead.map.turnAt(middle) : 0;
  const turn = Math.abs(tilt) < 0.3 ? -tilt : 0;
  const side = Math.max(46, Math.min(90, width * 0.13));
  return fitBox(frame, width, height, turn, { left: side, right: side, top: EDGE.top, bottom: EDGE.bottom });
}

/** Sheet pixels of the four corners of a calibrated panel. */
function frameOf({ map, ext }) {
  const [[q0, q1], [v0, v1]] = [ext.flow, ext.value];
  return [[q0, v1], [q1, v1], [q1, v0], [q0, v0]].map((p) => map.toPixel(p));
}

function curvePlace(desk, f) {
  const item = desk.items.find((i) => i.id === f.where.curve);
  if (!item?.pixels.length) return null;
  const n = item.pixels.length;
  const box = f.where.stretch ?? (f.where.flow_m3h ? rangeOf(item, f.where.flow_m3h) : null);
  const [i0, i1] = box ?? [Math.floor(n * 0.35), Math.floor(n * 0.35)];
  const mid = Math.min(n - 1, Math.floor((i0 + i1) / 2));
  return { item, at: item.pixels[mid], point: item.points[mid], strokes: box ? [i0, i1] : null };
}

function rangeOf(item, [lo, hi]) {
  const q = item.points.map((p) => p[0] * item.fx);
  const inside = q.map((v, i) => (v >= lo && v <= hi ? i : -1)).filter((i) => i >= 0);
  return inside.length ? [inside[0], inside[inside.length - 1]] : null;
}

/** Numbered places on paper and plot. */
function placesOf(desk) {
  const paper = [];
  const plot = [];
  desk.findings.forEach((f, k) => {
    const chosen = desk.chosenFinding === f.number;
    if (f.severity === "note" && !chosen) return;
    const base = { severity: f.severity, number: f.number, chosen, drop: 44 + (k % 3) * 14, side: (k % 2) * 10 };
    if (f.where?.curve) {
      const p = curvePlace(desk, f);
      if (!p) return;
      paper.push({ ...base, at: p.at, points: p.item.pixels, strokes: p.strokes });
      plot.push({ ...base, at: p.point, points: p.item.points, strokes: p.strokes, y: p.item.curve.y });
    } else if (f.where?.at && f.where.panel === desk.panel?.id) {
      paper.push({ ...base, at: f.where.at, drop: 30, side: -26 });
    } else if (f.where?.axis && f.where.panel === desk.panel?.id) {
      const mark = desk.panel.axes[f.where.axis]?.marks?.[0];
      if (mark) paper.push({ ...base, at: mark.at, drop: 30, side: -26 });
    }
  });
  return { paper, plot };
}

export function sceneOf(desk) {
  const doc = desk.doc;
  const places = placesOf(desk);
  return {
    step: desk.step, bare: desk.bare, panelId: desk.panel?.id ?? null, panels: (doc.panels ?? []).map((p, i) => ({ ...p, outline: desk.outlineOf(p), name: `Panel ${i + 1}` })),
    box: desk.box, marks: sceneMarks(doc, desk.panelResult, desk.map, desk.chosenMark), openMark: desk.step === "marks" ? desk.openMark : null,
    curves: ["curves", "family", "fit", "submit"].includes(desk.step) ? desk.items : [], selected: desk.selected ?? (desk.step === "curves" ? desk.openCurve?.id : null), focused: desk.focused, grabbed: desk.grabbed, locking: desk.locking, doubted: desk.findings.find((f) => f.number === desk.chosenFinding)?.where?.curve ?? null, width: size("paper").width, veil: desk.masks?.scene() ?? { masks: [] }, found: desk.step === "marks" && desk.showFound ? desk.lines.found : null,
    ghosts: desk.ghosts, showGhosts: desk.step === "family" && ["both", "paper"].includes(desk.over), places: desk.step === "sheet" ? [] : places.paper, plotPlaces: places.plot, axes: desk.axes,
  };
}

export class DeskDraw {
  constructor(desk, tiles) {
    this.desk = desk;
    this.tiles = tiles;
  }

  all() {
    const { desk } = this;
    if (!desk.view) desk.view = homeView(desk);
    this.paper();
    this.plot();
    this.cursor();
    this.steps();
    this.slip();
    this.below();
    this.bar();
  }

  paper() {
    const { desk } = this;
    const { width, height } = size("paper");
    if (!desk.view) return;
    $("paper").dataset.view = [desk.view.scale, desk.view.turn, desk.view.x, desk.view.y].join(" ");
    this.tiles.setPage(desk.page);
    this.tiles.draw($("tiles"), desk.view, width, height);
    this.scene = sceneOf(desk);
    const svg = $("over");
    svg.setAttribute("viewBox", `0 0 ${width} ${height}`);
    drawOverlay(svg, desk.view, this.scene);
    $("paper").classList.toggle("bare", desk.bare);
    $("paper-says").textContent = this.#paperWords();
    this.loupe();
  }

  #paperWords() {
    const { desk } = this;
    const marks = this.scene.marks.length;
    return `Page ${desk.page?.page ?? 1} of ${desk.doc.sheet?.file ?? "the file"}. ${this.scene.panels.length} panels, ${marks} marks, ${(desk.doc.curves ?? []).length} curves kept. Arrow keys move the straightedge; Tab walks marks and guides.`;
  }

  loupe() {
    const { desk } = this;
    const box = $("loupe");
    box.hidden = !desk.loupe;
    if (!desk.loupe) return;
    const { at, side, view } = desk.loupe;
    box.style.left = `${at[0] - side / 2}px`;
    box.style.top = `${at[1] - side / 2}px`;
    box.style.width = box.style.height = `${side}px`;
    if (!box.firstChild) put(box, h("canvas"), s("svg", { class: "plot over" }), s("svg", { class: "plot over rim" }));
    const inner = { ...view, x: view.x - (at[0] - side / 2), y: view.y - (at[1] - side / 2) };
    this.tiles.draw(box.children[0], inner, side, side);
    drawOverlay(box.children[1], inner, { ...this.scene, places: [] });
    put(box.children[2], rim(inner, side));
  }

  plot() {
    const { desk } = this;
    const plot = size("replot");
    const paper = size("paper");
    const svg = $("plot");
    svg.setAttribute("viewBox", `0 0 ${plot.width} ${plot.height}`);
    const stacked = matchMedia("(max-width: 900px)").matches;
    this.scales = desk.axes.length && desk.view && desk.flowAxis ? alignedScales({ view: desk.view, paper, plot, axes: desk.axes, flow: desk.flowAxis }) : null;
    if (this.scales && stacked) this.scales = stackedScales(desk, plot, paper, this.scales);
    const empty = $("plot-empty");
    const nothing = !this.scales || !desk.items.some((i) => i.points.length);
    empty.hidden = !nothing;
    // Over a low plot the words would lie on its numbers: there they stand below it.
    const low = this.scales && this.scales.frame[3] - this.scales.frame[1] < 170 && this.scales.frame[3] + 110 < plot.height;
    empty.style.top = low ? `${this.scales.frame[3] + 48}px` : "";
    if (nothing) put(empty, ...this.#emptyWords());
    if (!this.scales) svg.replaceChildren();
    else drawReplot(svg, this.scales, { ...this.scene, showGhosts: desk.step === "family" && ["both", "plot"].includes(desk.over), curves: desk.items });
    this.#plotWords();
  }

  #emptyWords() {
    const { desk } = this;
    const say = (title, text) => [h("b", {}, title), h("span", {}, text)];
    if (!desk.panel) return say("Nothing to redraw yet.", "Draw round the plot, then give each scale two marks.");
    if (!this.scales && desk.axes.length) return say("The panel is out of sight.", "Press 0 to see it whole.");
    if (!this.scales) return say("Nothing to redraw yet.", "Two marks on each scale, and the grid stands here.");
    if (desk.items.some((i) => i.curve.clicks?.length > 1 && !i.result)) return say("Following the ink …", desk.previews.state === "preparing" ? "The sheet is being levelled first; you can go on working." : "The lines stand here in a moment.");
    if (desk.items.some((i) => i.failed)) return say("No line was found here.", "The finding says why. Set the clicks on the ink, or draw the line with your clicks.");
    return say("No curves yet.", desk.step === "marks" ? "A stroke ending in a ring: how far the mark stands off the axis, 20 times." : "Click twice along a printed line.");
  }

  #plotWords() {
    const { desk } = this;
    const said = desk.items.filter((i) => i.points.length && !i.contour).map((i) => {
      const [q0, v0] = i.points[0];
      const [q1, v1] = i.points[i.points.length - 1];
      return `${QUANTITY_WORDS[i.curve.quantity]} ${i.label}: from ${plain(v0, 2)} at ${plain(q0, 1)} to ${plain(v1, 2)} at ${plain(q1, 1)}`;
    });
    $("replot-says").textContent = said.length ? `${said.join("; ")}.` : "No curves yet.";
  }

  /** The straightedge on both sides and the readings in the fold. */
  cursor() {
    const { desk, scales } = this;
    const paperSize = size("paper");
    const plotSize = size("replot");
    const [over, plot] = [$("over-cursor"), $("plot-cursor")];
    over.setAttribute("viewBox", `0 0 ${paperSize.width} ${paperSize.height}`);
    plot.setAttribute("viewBox", `0 0 ${plotSize.width} ${plotSize.height}`);
    over.replaceChildren();
    plot.replaceChildren();
    if (desk.hand) over.append(...handMark(desk.hand));
    const edge = desk.masks?.edge();
    if (edge) over.append(...brushEdge(edge.at, edge.width, desk.masks.erasing));
    const fold = size("fold");
    const c = desk.cursor;
    if (!scales || !c || !Number.isFinite(c.q)) {
      drawFold($("fold"), { heading: scales ? "no pointer" : desk.panel ? "no scale yet" : "", rows: [], foot: "", grey: true }, fold);
      return;
    }
    const lead = desk.axes[0];
    const rows = [];
    for (const item of desk.items) {
      if (item.contour || item.points.length < 2) continue;
      const y = desk.axes.findIndex((a) => a.id === item.curve.y);
      if (y < 0) continue;
      const hit = crossings(item.points, c.q)[0];
      if (!hit) continue;
      const u = item.sigma.length ? atIndex(item.sigma, hit.at) : 0;
      const text = words.reading(desk.axes[y].axis, hit.y, u);
      rows.push({ y: scales.ys[y].map(hit.y), v: hit.y, axis: y, ...text, name: item.label, tone: item.kept ? "ink" : "trace", item });
    }
    for (const g of desk.ghosts.filter((k) => k.words)) {
      const y = Math.max(0, desk.axes.findIndex((a) => a.id === g.y));
      const hit = crossings(g.points, c.q)[0];
      if (hit) rows.push({ y: scales.ys[y].map(hit.y), v: hit.y, axis: y, ...words.reading(desk.axes[y].axis, hit.y, 0), doubt: "", name: g.short, tone: "ink", dashed: true });
    }
    const near = rows.length ? rows.reduce((a, b) => (Math.abs(b.y - c.sy) < Math.abs(a.y - c.sy) ? b : a)) : null;
    if (near) near.near = true;
    let sy = near ? near.y : c.sy;
    if (!near && lead) {
      const v = scales.ys[0].invert(c.sy);
      rows.push({ y: sy, value: `${plain(v, 2)} ${written(lead.axis.unit)}`, doubt: "", name: "at the pointer", tone: "ink", near: true });
    }
    const v = near ? near.v : scales.ys[0].invert(sy);
    const axis = desk.axes[near?.axis ?? 0];
    this.#edges(over, axis, c.q, v, paperSize);
    const [x0, y0, x1, y1] = scales.frame;
    const px = scales.x.map(c.q);
    if (px >= x0 - 1 && px <= x1 + 1) plot.append(s("line", { x1: px, x2: px, y1: 0, y2: y1, class: "k-ink edge1" }));
    if (sy >= y0 - 1 && sy <= y1 + 1) plot.append(s("line", { x1: 0, x2: plotSize.width, y1: sy, y2: sy, class: "k-ink edge1" }));
    for (const r of rows.filter((k) => k.item || k.dashed)) {
      if (r.y < y0 || r.y > y1) continue;
      plot.append(s(r.dashed ? "rect" : "circle", r.dashed ? { x: px - 3.5, y: r.y - 3.5, width: 7, height: 7, fill: "var(--sheet)", stroke: "var(--construct)", "stroke-width": 1.5 } : { cx: px, cy: r.y, r: r.near ? 5.5 : 3.2, fill: "var(--sheet)", class: `dot k-${r.tone}`, "stroke-width": 1.5 }));
    }
    const uq = desk.flowDoubt?.(near) ?? null;
    drawFold($("fold"), { heading: `at ${plain(c.q, c.q < 10 ? 2 : c.q < 100 ? 1 : 0)} ${written(desk.flowAxis.unit)}`, flow: { doubt: uq ? `± ${uq}` : null }, rows: rows.filter((r) => scales.stacked || (r.y > -40 && r.y < fold.height + 40)), foot: rows.some((r) => r.doubt) ? "± is what the print allows, k\u00a0=\u00a01" : "", grey: c.left }, fold);
    this.read = { q: c.q, rows };
  }

  #edges(svg, axis, q, v, { width, height }) {
    const { desk } = this;
    const through = (a, b) => [toScreen(desk.view, axis.map.toPixel(a)), toScreen(desk.view, axis.map.toPixel(b))];
    const [q0, q1] = axis.ext.flow;
    const [v0, v1] = axis.ext.value;
    const [a, b] = through([q, v0], [q, v1]);
    const xAt = (y) => a[0] + ((y - a[1]) * (b[0] - a[0])) / (b[1] - a[1] || 1);
    const [c, d] = through([q0, v], [q1, v]);
    const yAt = (x) => c[1] + ((x - c[0]) * (d[1] - c[1])) / (d[0] - c[0] || 1);
    for (const p of [[[xAt(0), 0], [xAt(height), height]], [[0, yAt(0)], [width, yAt(width)]]]) {
      svg.append(s("path", { d: path(p), class: "casing", "stroke-width": 3 }), s("path", { d: path(p), class: "k-ink edge1" }));
    }
    const at = toScreen(desk.view, axis.map.toPixel([q, v]));
    svg.append(s("circle", { cx: at[0], cy: at[1], r: 5.5, class: "k-ink", "stroke-width": 1.5 }));
  }

  steps() {
    drawSteps($("steps"), { current: this.desk.step, progress: this.desk.progress, onStep: (id) => this.desk.go(id) });
  }

  slip() {
    const { desk } = this;
    const running = desk.job && !desk.job.over && !["done", "failed", "cancelled"].includes(desk.job.state);
    const content = running ? jobSentence(desk) : desk.masks?.on ? maskSentence(desk) : SENTENCES[desk.step](desk);
    fillSlip($("slip"), content);
    desk.focusBlank = null;
  }

  below() {
    const { desk } = this;
    const list = desk.findings.map((f) => desk.withWays(f));
    const small = innerWidth < 1200 || innerHeight < 860;
    const none = desk.run?.fresh || !desk.doc.curves?.length ? "none" : "none so far; the curves are not checked yet";
    const say = (most) => drawFindings($("findings"), { title: desk.step === "family" ? "Findings on this family" : "Findings on this sheet", list, most, none, chosen: desk.chosenFinding, onChoose: (f) => desk.chooseFinding(f.number) });
    say(small ? 1 : 2);
    // A finding stands there whole or not at all: half a sentence helps no one.
    if (!small && list.length > 1 && $("findings").scrollHeight > $("findings").clientHeight + 1) say(1);
    drawBeside($("beside"), desk, this.scales);
    const { doc, page } = desk;
    const marks = this.scene?.marks.filter((m) => m.panel === desk.panel?.id) ?? [];
    const answer = desk.panel && desk.panelResult(desk.panel);
    const worst = answer && Number.isFinite(answer.worst_px) ? `, worst ${plain(answer.worst_px, 1)} px` : "";
    const grid = answer?.grid ? (answer.grid.used ? `${answer.grid.lines} printed lines, ${plain(answer.grid.residual_px, 2)} px` : answer.grid.why || "not used") : "not looked for yet";
    drawBlock($("block"), [
      ["sheet", `${doc.sheet?.file ?? "?"}, page ${doc.sheet?.page ?? 1}`],
      doc.sheet?.kept_at ? ["paper register", doc.sheet.kept_at] : null,
      desk.panel ? ["panel", words.panelWords(desk.panel)] : null,
      marks.length ? ["marks", `${marks.length}${worst}`] : null,
      desk.panel ? ["grid", grid, { grow: true }] : ["panel", "none drawn yet", { grow: true }],
      page ? ["size", `${page.width} × ${page.height} px`] : null,
      page ? ["file", `sha-256 ${page.sha256.slice(0, 4)} ${page.sha256.slice(4, 8)} …`] : null,
    ]);
  }

  bar() {
    const { desk } = this;
    const status = desk.session.status();
    const kept = $("kept");
    const text = words.kept(status);
    if (kept.textContent !== text) kept.textContent = text;
    kept.classList.toggle("away", status.away);
    const pump = desk.doc.pump ?? {};
    const title = pump.model ? [pump.maker, pump.model].filter(Boolean).join(" ") : desk.doc.sheet?.file ?? "Untitled sheet";
    $("where").textContent = `${title}, page ${desk.page?.page ?? 1} of ${desk.page?.pages ?? 1}`;
    $("desk-title").textContent = `Desk: ${title}`;
    document.title = `${title}, curvebank`;
    for (const [id, label, verb] of [["undo", desk.session.undoLabel(), "Undo"], ["redo", desk.session.redoLabel(), "Redo"]]) {
      $(id).setAttribute("aria-label", label ? `${verb}: ${label}` : `Nothing to ${verb.toLowerCase()}`);
      $(id).title = label ? `${verb}: ${label}` : "";
      $(id).setAttribute("aria-disabled", label ? "false" : "true");
    }
  }
}

/** The hand of the keyboard: an open cross. */
function handMark([x, y]) {
  const d = `M${x - 16} ${y}h11m10 0h11M${x} ${y - 16}v11m0 10v11`;
  return [s("path", { d, class: "casing", "stroke-width": 4.6 }), s("path", { d, class: "k-ink", "stroke-width": 2 })];
}

/** A rim ruled in sheet pixels. */
function rim(view, side) {
  const out = [s("rect", { x: 0.75, y: 0.75, width: side - 1.5, height: side - 1.5, class: "k-ink", "stroke-width": 1.5 })];
  const step = view.scale >= 8 ? 1 : view.scale >= 2 ? 5 : 10;
  const [a] = [toSheet(view, [0, 0])];
  for (let k = Math.ceil(a[0] / step); ; k++) {
    const x = view.x + k * step * view.scale;
    if (x > side) break;
    if (x < 0) continue;
    const l = k % 5 === 0 ? 7 : 4;
    out.push(s("path", { d: `M${x} 1v${l}M${x} ${side - 1}v${-l}`, class: "k-ink", "stroke-width": 1 }));
  }
  for (let k = Math.ceil(a[1] / step); ; k++) {
    const y = view.y + k * step * view.scale;
    if (y > side) break;
    if (y < 0) continue;
    const l = k % 5 === 0 ? 7 : 4;
    out.push(s("path", { d: `M1 ${y}h${l}M${side - 1} ${y}h${-l}`, class: "k-ink", "stroke-width": 1 }));
  }
  return out;
}

/** In a narrow window paper lies over re-plot: they share the vertical rule instead of the level one. */
function stackedScales(desk, plot, paper, scales) {
  const { map, ext } = desk.axes[0];
  const v = (ext.value[0] + ext.value[1]) / 2;
  const at = (q) => toScreen(desk.view, map.toPixel([q, v]))[0];
  const [a, b] = [Math.max(30, at(scales.x.lo)), Math.min(plot.width - 30, at(scales.x.hi))];
  const frame = [a, EDGE.top, b, plot.height - EDGE.bottom];
  const x = { ...scales.x, p0: a, p1: b, map: at, invert: (px) => map.toValues(toSheet(desk.view, [px, paper.height / 2]))[0] };
  const ys = scales.ys.map((y, i) => {
    const [lo, hi] = desk.axes[i].ext.value;
    const log = y.kind === "log10";
    const f = (w) => (log ? (Math.log10(w) - Math.log10(lo)) / (Math.log10(hi) - Math.log10(lo)) : (w - lo) / (hi - lo));
    return { ...y, lo, hi, map: (w) => frame[3] - f(w) * (frame[3] - frame[1]), invert: (p) => (log ? 10 ** (Math.log10(lo) + ((frame[3] - p) / (frame[3] - frame[1])) * (Math.log10(hi) - Math.log10(lo))) : lo + ((frame[3] - p) / (frame[3] - frame[1])) * (hi - lo)) };
  });
  return { ...scales, x, ys, frame, stacked: true };
}
