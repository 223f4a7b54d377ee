// What the desk shows, worked out from the document and the answers so far. No DOM, nothing kept: call it again after a change.
import { axisIds, panelMap } from "../geometry/panelmap.js";
import { CONTOURS, QUANTITY_SIGNS, factor } from "../geometry/units.js";
import { weights } from "../geometry/labels.js";
import { plain } from "../geometry/number.js";
import { maskAt } from "../geometry/brush.js";
import { desk as deskPart } from "./doc.js";

export const STEPS = ["sheet", "panel", "marks", "curves", "family", "fit", "submit"];
export const STEP_WORDS = { sheet: "Sheet", panel: "Panel", marks: "Marks", curves: "Curves", family: "Family", fit: "Fit", submit: "Submit" };

/** Axes that can carry a calibration: two marks or more. A panel goes to the engine with these alone. */
export function usablePanel(panel) {
  const axes = Object.fromEntries(Object.entries(panel.axes).filter(([, a]) => (a.marks ?? []).length >= 2).map(([id, a]) => [id, { ...a }]));
  const { id, grid, outline, limits } = panel;
  return { id, axes, grid: grid ?? "auto", ...(outline ? { outline } : {}), ...(limits ? { limits } : {}) };
}

export function calibrated(panel) {
  const usable = usablePanel(panel);
  const ids = axisIds(usable);
  return ids.flow.length > 0 && ids.value.length > 0;
}

/** The panel a step forward lands on: the first that still wants what the step does, else the one at hand. */
export function panelToWorkOn(step, doc, at, run = null) {
  const panels = doc.panels ?? [];
  const curvesOf = (p) => (doc.curves ?? []).filter((c) => c.panel === p.id);
  const carried = new Set(Object.values(run?.family ?? {}).flatMap((f) => (f.curves ?? []).filter((c) => c.ghosts?.length).map((c) => c.id)));
  const wants = {
    marks: (p) => Object.values(p.axes).some((a) => (a.marks ?? []).length < 2),
    curves: (p) => calibrated(p) && !curvesOf(p).length,
    family: (p) => curvesOf(p).some((c) => carried.has(c.id)),
  }[step];
  const here = panels.find((p) => p.id === at);
  if (!wants || (here && step === "family" && wants(here))) return at;
  return panels.find(wants)?.id ?? at;
}

/** What a curve is called at its end: "Ø 345", "η Ø 345", "75 %", "all"; "585 1/min" where one diameter is drawn at several speeds. */
export function curveLabel(curve, mixed = false, bySpeed = false) {
  if (CONTOURS[curve.quantity]) {
    const v = curve.value;
    if (v === undefined || v === null) return "level ?";
    return curve.quantity === "efficiency_contour" ? `${plain(v * 100, 1)} %` : `${plain(v, 2)} ${curve.quantity === "power_contour" ? "kW" : "m"}`;
  }
  const about = bySpeed && curve.speed_rpm ? `${plain(curve.speed_rpm, 0)} 1/min` : curve.diameter_mm ? `Ø ${plain(curve.diameter_mm, 1)}` : curve.label?.printed ?? "";
  const sign = QUANTITY_SIGNS[curve.quantity] ?? curve.quantity;
  if (mixed || !about) return `${sign} ${about}`.trim();
  return about;
}

/** Which curves only their speed tells apart: (curve) => boolean. */
export function speedNamed(curves) {
  const speeds = {};
  const key = (c) => `${c.quantity}/${c.diameter_mm}`;
  for (const c of curves) if (c.speed_rpm) (speeds[key(c)] ??= new Set()).add(c.speed_rpm);
  return (c) => (speeds[key(c)]?.size ?? 0) > 1;
}

/** Maps of every value axis of a panel, with the flow axis each goes with. */
export function panelMaps(panel, panelResult) {
  const ids = axisIds(panel);
  const maps = {};
  for (const value of ids.value) {
    for (const flow of ids.flow) {
      const map = panelMap(panel, panelResult, flow, value);
      if (map) maps[`${flow}/${value}`] = map;
    }
  }
  return maps;
}

/** Index ranges that the trace or a finding marks as doubtful: [[i0, i1, reason]]. */
export function stretchesOf(result) {
  const out = [];
  for (const w of result?.warnings ?? []) if (w.stretch) out.push([w.stretch[0], w.stretch[1], w.message]);
  for (const s of result?.stretches ?? []) if (!out.some(([a, b]) => a === s[0] && b === s[1])) out.push(s);
  return out;
}

/**
 * The curves of one panel with all that views need.
 * resultOf(panel, curve) gives the newest answer for exactly this curve, or null.
 */
export function panelCurves(doc, panel, resultOf, { open = true } = {}) {
  if (!panel) return [];
  const kept = (doc.curves ?? []).filter((c) => c.panel === panel.id).map((curve) => ({ curve, kept: true }));
  const draft = deskPart(doc).curve;
  const all = open && draft?.panel === panel.id ? [...kept, { curve: draft, kept: false }] : kept;
  const byQuantity = {};
  for (const { curve } of all) if (curve.diameter_mm) (byQuantity[curve.quantity] ??= new Set()).add(curve.diameter_mm);
  const bySpeed = speedNamed(all.map((c) => c.curve));
  const mixed = new Set(all.map((c) => CONTOURS[c.curve.quantity] ?? c.curve.quantity)).size > 1;
  return all.map(({ curve, kept: isKept }) => {
    const result = resultOf(panel, curve);
    const x = panel.axes[curve.x];
    const y = panel.axes[curve.y];
    const [kx, ky] = [x ? factor(x) : NaN, y ? factor(y) : NaN];
    const contour = curve.quantity in CONTOURS;
    const points = result?.points?.length ? result.points.map(([q, v]) => [q / kx, v / ky]) : [];
    const order = [...(byQuantity[curve.quantity] ?? [])].sort((a, b) => b - a);
    const w = weights(Math.max(1, order.length));
    const at = order.indexOf(curve.diameter_mm);
    return {
      id: curve.id,
      curve,
      kept: isKept,
      contour,
      result,
      failed: Boolean(result?.error),
      pixels: result?.error ? [] : result?.pixels ?? [],
      points: result?.error ? [] : points,
      sigma: (result?.sigma ?? []).map((s) => s / ky),
      stretches: stretchesOf(result),
      weight: contour ? 1 : at >= 0 ? w[at] : 1.6,
      label: curveLabel(curve, mixed && curve.quantity !== "head", bySpeed(curve)),
      fx: kx,
      fy: ky,
    };
  });
}

/** A message as a whole sentence. */
export function sentence(text) {
  const t = String(text ?? "").trim();
  return /[.!?…”]$/.test(t) ? t : `${t}.`;
}

const place = (severity, text, more = {}) => ({ severity, text, ways: [], ...more });

/** Findings that need no run: mistyped marks, panels and curves that failed, doubtful stretches. */
export function liveFindings(doc, panelResultOf, resultOf, words) {
  const out = [];
  for (const panel of doc.panels ?? []) {
    const answer = panelResultOf(panel);
    if (!answer) continue;
    if (answer.error && calibrated(panel)) out.push(place("error", answer.error.message, { where: { panel: panel.id }, subject: `panel:${panel.id}` }));
    for (const s of answer.suspects ?? []) {
      const axis = panel.axes[s.axis];
      if (!axis) continue;
      const index = s.mark ?? s.mark_index ?? s.index;
      const mark = axis.marks[index];
      if (Number.isInteger(s.swapped_with) && s.swapped_with < index) continue;
      out.push(place(s.sure === false ? "warning" : "error", words.suspect(axis, s), { where: { panel: panel.id, axis: s.axis, mark: index, at: mark?.at }, suspect: { ...s, index, panel: panel.id }, subject: `axis:${panel.id}/${s.axis}` }));
    }
  }
  for (const panel of doc.panels ?? []) out.push(...panelNotices(panel, panelResultOf(panel)));
  const open = deskPart(doc).curve;
  for (const curve of [...(doc.curves ?? []), ...(open ? [open] : [])]) {
    const panel = (doc.panels ?? []).find((p) => p.id === curve.panel);
    const result = panel && resultOf(panel, curve);
    if (!result) continue;
    if (result.error) {
      out.push(place("error", `${curveLabel(curve) || "This line"}: ${sentence(result.error.message)}`, { where: { panel: curve.panel, curve: curve.id }, subject: `curve:${curve.id}`, code: result.error.code }));
      continue;
    }
    out.push(...doubts(curve, result, words));
  }
  out.push(...namesakes(doc, words), ...underMasks(doc, open, words));
  return out;
}

/** Said at its own place already: as a suspect mark, or as a mark under a mask. */
const SAID_ELSEWHERE = ["calibration-mistyped", "calibration-swapped", "mask-over-mark", "mark-masked"];

/** The sheet place a sentence names in brackets, "(412, 88)", or null. */
export function placeIn(text) {
  const found = /\((-?\d+(?:\.\d+)?), (-?\d+(?:\.\d+)?)\)/.exec(text ?? "");
  return found ? [Number(found[1]), Number(found[2])] : null;
}

/** What the calibration says of a panel: scales that contradict, lines that can be read in two ways, marks off their line. */
function panelNotices(panel, answer) {
  return (answer?.warnings ?? []).filter((w) => !SAID_ELSEWHERE.includes(w.code)).map((w) => {
    const at = placeIn(w.message);
    return place("warning", sentence(w.message), { where: { panel: panel.id, ...(at ? { at } : {}) }, subject: `panel:${panel.id}`, code: w.code, raw: w.message, ...(w.code === "grid-one-off" && at ? { settle: at } : {}) });
  });
}

/** What the trace itself says of a curve: its warnings, doubtful stretches that no warning names, and a flag that neither explains. */
function doubts(curve, result, words) {
  const name = curveLabel(curve) || "This line";
  const say = (text, stretch, code) => place("warning", `${name}: ${sentence(text)}`, { where: { panel: curve.panel, curve: curve.id, stretch }, subject: `curve:${curve.id}`, code, raw: text, doubt: Boolean(result.flagged) });
  const list = (result.warnings ?? []).filter((w) => w.code !== "mask-over-click").map((w) => say(w.message, w.stretch ?? null, w.code));
  for (const [i0, i1, reason] of result.stretches ?? []) {
    if (!(result.warnings ?? []).some((w) => w.stretch && w.stretch[0] <= i1 && w.stretch[1] >= i0)) list.push(say(reason, [i0, i1], "stretch"));
  }
  if (result.flagged && !list.length) list.push(say(`the trace is ${words.confidence(result.confidence)}. Look along it, then add a guide where it strays`, null, "flagged"));
  return list;
}

/** Marks, clicks and guides that a mask lies over: what is under it is not read. */
function underMasks(doc, open, words) {
  const masks = doc.sheet?.masks ?? [];
  if (!masks.length) return [];
  const out = [];
  const look = (at, subject, panel, text) => maskAt(masks, at) >= 0 && out.push(place("warning", text, { where: { panel, at }, subject, masked: at }));
  for (const panel of doc.panels ?? []) {
    for (const [id, axis] of Object.entries(panel.axes)) for (const m of axis.marks ?? []) look(m.at, `axis:${panel.id}/${id}`, panel.id, words.maskedMark(axis, m));
  }
  for (const curve of [...(doc.curves ?? []), ...(open ? [open] : [])]) {
    for (const [part, word] of [["clicks", "click"], ["guides", "guide"]]) {
      (curve[part] ?? []).forEach((at, i) => look(at, `curve:${curve.id}`, curve.panel, words.maskedClick(curveLabel(curve) || "this line", word, i)));
    }
  }
  return out;
}

/** Two curves of one panel that claim to be the same line: whoever reads them later could not tell which is meant. */
function namesakes(doc, words) {
  const first = new Map();
  const out = [];
  for (const c of doc.curves ?? []) {
    if (CONTOURS[c.quantity]) continue;
    const key = [c.panel, c.quantity, c.diameter_mm, c.diameter_mm ? "" : c.label?.printed, c.speed_rpm].join("|");
    if (first.has(key)) out.push(place("warning", words.namesake(c, curveLabel(c)), { where: { panel: c.panel, curve: c.id }, subject: `curve:${c.id}` }));
    else first.set(key, c);
  }
  return out;
}

/** Share of the work done in each step, 0 to 1, and the short word beside its name. */
export function progress(doc, { page, panelResultOf, resultOf, run, saved }) {
  const panels = doc.panels ?? [];
  const curves = doc.curves ?? [];
  const marks = panels.flatMap((p) => Object.values(p.axes).flatMap((a) => a.marks ?? []));
  const ready = panels.filter(calibrated).length;
  const traced = curves.filter((c) => {
    const panel = panels.find((p) => p.id === c.panel);
    const r = panel && resultOf(panel, c);
    return r && !r.error;
  }).length;
  const fresh = run && run.fresh;
  const bad = run ? run.findings.filter((f) => f.severity !== "note").length : 0;
  const straight = panels.map(panelResultOf).filter(Boolean).length ? "straightened" : "";
  return {
    sheet: { share: page ? 1 : 0, word: doc.sheet?.turn ? `turned ${doc.sheet.turn}°` : straight },
    panel: { share: panels.length ? 1 : 0, word: panels.length ? String(panels.length) : "" },
    marks: { share: panels.length ? ready / panels.length : 0, word: marks.length ? String(marks.length) : "" },
    curves: { share: curves.length ? (traced / curves.length) * (deskPart(doc).curve ? 0.75 : 1) : 0, word: curves.length ? `${traced} of ${curves.length + (deskPart(doc).curve ? 1 : 0)}` : "" },
    family: { share: fresh ? 1 : run ? 0.5 : 0, word: run ? (fresh ? (bad ? `${bad} ${bad === 1 ? "finding" : "findings"}` : "checked") : "out of date") : "", stale: Boolean(run && !fresh) },
    fit: { share: fresh ? 1 : 0, word: "", stale: Boolean(run && !fresh) },
    submit: { share: saved ? 1 : 0, word: saved ? `revision ${saved.revision}` : "" },
  };
}
