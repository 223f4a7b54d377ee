// The sentence of each step up to the marks. Each gives {sentence, does, focus} for the slip.
import { axisIds } from "../geometry/panelmap.js";
import { nearestRound } from "../geometry/scale.js";
import { QUANTITY_WORDS, UNITS, needsDensity, written } from "../geometry/units.js";
import { boxOf } from "../geometry/polyline.js";
import { calibrated } from "../state/derive.js";
import { freshId, samePlace } from "../state/doc.js";
import { heldWords } from "../state/words.js";
import { h } from "../view/dom.js";
import { button, choice, numberBlank, textBlank } from "./blank.js";
import { nameBlanks } from "./sentences-end.js";

const t = (words) => h("span", {}, words);
const stop = () => h("span", { class: "stop" }, ".");
const hint = (key, words) => h("span", { class: "hint" }, "hold ", h("kbd", {}, key), ` ${words}`);

export function sheetSentence(desk) {
  const { doc, page } = desk;
  const sheet = doc.sheet ?? {};
  const pages = page?.pages ?? 1;
  const set = (change) => desk.act({ type: "sheet/set", change });
  const pump = doc.pump ?? {};
  const setPump = (change) => desk.act({ type: "pump/set", change });
  return {
    sentence: [
      t("Page"),
      pages > 1 ? numberBlank({ name: "page", label: `Page of this file, 1 to ${pages}`, value: sheet.page ?? 1, width: 40, least: 1, most: pages, whole: true, onValue: (v) => v && set({ page: v }) }) : h("b", {}, "1"),
      t(`of ${pages}, turned`),
      choice({ name: "turn", label: "Turned clockwise by", value: sheet.turn ?? 0, options: [0, 90, 180, 270].map((v) => [v, `${v}°`]), onValue: (v) => set({ turn: v }) }),
      t(". It shows the"),
      nameBlanks(desk),
      t("with"),
      numberBlank({ name: "stages", label: "Number of stages", value: pump.stages ?? 1, width: 34, least: 1, whole: true, onValue: (v) => setPump({ stages: v ?? 1 }) }),
      t((pump.stages ?? 1) === 1 ? "stage at" : "stages at"),
      numberBlank({ name: "speed", label: "Rated speed in revolutions a minute", value: pump.speed_rpm, example: "1450", width: 56, onValue: (v) => setPump({ speed_rpm: v ?? undefined }) }),
      t("1/min, kept at"),
      textBlank({ name: "kept", label: "Where the paper is kept", value: sheet.kept_at, example: "where", width: 120, onValue: (v) => set({ kept_at: v || undefined }) }),
      stop(),
    ],
    does: [button("Mask a stamp or note", { quiet: true, onClick: () => desk.masks.hold(true) }), button("Go on to the panel", { main: true, onClick: () => desk.go("panel") })],
  };
}

const VALUE_QUANTITIES = ["head", "efficiency", "power", "npshr", "suction_lift", "input_power", "overall_efficiency"];
const DEFAULT_UNIT = { head: "m", efficiency: "%", power: "kW", npshr: "m", suction_lift: "m", input_power: "kW", overall_efficiency: "%", flow: "m3/h" };

function axisBlanks(desk, panel, id) {
  const axis = panel.axes[id];
  const set = (change) => desk.act({ type: "axis/set", panel: panel.id, axis: id, change });
  return [
    t("in"),
    choice({ name: `unit-${id}`, label: `Unit of ${QUANTITY_WORDS[axis.quantity]}`, value: axis.unit, options: Object.keys(UNITS[axis.quantity]).map((u) => [u, written(u)]), onValue: (unit) => set({ unit, density_kgm3: needsDensity(unit) ? axis.density_kgm3 ?? 998.2 : undefined }) }),
    needsDensity(axis.unit) ? [t("for"), numberBlank({ name: `density-${id}`, label: "Density of the pressure scale in kg per cubic metre", value: axis.density_kgm3, width: 56, onValue: (v) => set({ density_kgm3: v ?? undefined }) }), t("kg/m³")] : null,
    choice({ name: `scale-${id}`, label: `Scale of ${QUANTITY_WORDS[axis.quantity]}`, value: axis.scale ?? "linear", options: [["linear", "linear"], ["log10", "logarithmic"]], onValue: (scale) => set({ scale }) }),
  ];
}

/** A unit that no scale of this quantity has yet on the panel, or undefined. */
function unitLeft(panel, quantity) {
  const used = Object.values(panel.axes).filter((a) => a.quantity === quantity).map((a) => a.unit);
  return Object.keys(UNITS[quantity]).find((u) => !used.includes(u) && !needsDensity(u));
}

/** The same axis printed in another unit as well: its own marks, checked against the first scale. */
function secondScale(desk, panel, quantity) {
  desk.act({ type: "axis/set", panel: panel.id, axis: freshId(quantity, Object.keys(panel.axes)), change: { quantity, unit: unitLeft(panel, quantity), scale: "linear", marks: [] } });
}

export function panelSentence(desk) {
  const { doc, panel } = desk;
  if (!panel) return { sentence: [t("Draw round the plot: drag from corner to corner, or click one corner and then the other.")], does: [hint("Space", "to move the paper")] };
  const ids = axisIds(panel);
  const names = (doc.panels ?? []).map((p, i) => [p.id, `${i + 1} of ${doc.panels.length}`]);
  const change = (old, quantity) => {
    if (old) desk.act({ type: "axis/remove", panel: panel.id, axis: old });
    if (quantity) desk.act({ type: "axis/set", panel: panel.id, axis: quantity, change: { quantity, unit: DEFAULT_UNIT[quantity], scale: "linear", marks: [] } });
  };
  const taken = ids.value.map((id) => panel.axes[id].quantity);
  const free = VALUE_QUANTITIES.filter((q) => !taken.includes(q));
  const parts = [t("Panel"), choice({ name: "which", label: "Panel", value: panel.id, options: [...names, ["+", "draw another"]], onValue: (v) => desk.choosePanel(v) }), t("shows")];
  ids.value.forEach((id, i) => {
    const q = panel.axes[id].quantity;
    parts.push(i ? t("and") : null, choice({ name: `quantity-${i}`, label: "Quantity on this axis", value: q, options: [...(ids.value.length > 1 ? [["", "(take away)"]] : []), ...VALUE_QUANTITIES.filter((v) => v === q || free.includes(v)).map((v) => [v, QUANTITY_WORDS[v]])], onValue: (v) => change(id, v) }), axisBlanks(desk, panel, id));
  });
  const again = [...new Set(taken)].map((q) => [q, unitLeft(panel, q)]).filter(([, unit]) => unit);
  if (ids.value.length < 4 && (free.length || again.length)) parts.push(t("and"), choice({ name: "another", label: "Another value axis", value: "", options: [["", "nothing more"], ...free.map((v) => [v, QUANTITY_WORDS[v]]), ...again.map(([q]) => [`${q} again`, `${QUANTITY_WORDS[q]}, a second scale`])], onValue: (v) => v && (v.endsWith(" again") ? secondScale(desk, panel, v.slice(0, -6)) : change(null, v)) }));
  parts.push(t("over flow"), ids.flow.map((id, i) => [i ? t("and") : null, axisBlanks(desk, panel, id), i ? button("take away", { quiet: true, onClick: () => desk.act({ type: "axis/remove", panel: panel.id, axis: id }) }) : null]));
  if (ids.flow.length < 3 && unitLeft(panel, "flow")) parts.push(t(","), choice({ name: "flow-again", label: "Another flow scale", value: "", options: [["", ids.flow.length > 1 ? "no more" : "one scale"], ["flow", "another scale"]], onValue: (v) => v && secondScale(desk, panel, "flow") }));
  parts.push(stop());
  return {
    sentence: parts,
    does: [
      desk.drawingPanel ? h("span", { class: "hint" }, "Drag round the next plot.") : button("Remove", { quiet: true, onClick: () => desk.act({ type: "panel/remove", panel: panel.id }) }),
      button("Go on to marks", { main: true, onClick: () => desk.go("marks") }),
    ],
  };
}

/** Which axis a place most likely belongs to: below or above the plot it is flow, at the left the first value axis, at the right the last. */
export function likelyAxes(panel, at) {
  const ids = axisIds(panel);
  if (!panel.outline) return [...ids.flow, ...ids.value];
  const [x0, y0, x1, y1] = boxOf(panel.outline);
  const [w, hgt] = [x1 - x0, y1 - y0];
  const near = (d, span) => Math.abs(d) < 0.06 * span;
  const list = [];
  if (near(at[1] - y1, hgt) || near(at[1] - y0, hgt) || at[1] > y1 || at[1] < y0) list.push(...ids.flow);
  if (near(at[0] - x0, w) || at[0] < x0) list.push(ids.value[0]);
  if ((near(at[0] - x1, w) || at[0] > x1) && ids.value.length > 1) list.push(ids.value[ids.value.length - 1]);
  if (!list.length) list.push(ids.flow[0], ids.value[0]);
  // A scale already marked on this very line is asked last: at the top left corner the flow is known from the foot, the head is not.
  const known = (id) => {
    const k = panel.axes[id].quantity === "flow" ? 0 : 1;
    return (panel.axes[id].marks ?? []).some((m) => Math.abs(m.at[k] - at[k]) < 0.015 * (k ? hgt : w));
  };
  const asked = list.filter(Boolean);
  return [...asked.filter((id) => !known(id)), ...asked.filter(known)];
}

function offered(desk, panel, axis, at) {
  const ids = axisIds(panel);
  const flow = panel.axes[axis].quantity === "flow";
  const map = desk.map(panel, flow ? axis : ids.flow[0], flow ? ids.value[0] : axis);
  const known = (panel.axes[axis].marks ?? []).map((m) => m.value);
  if (map) {
    const v = map.toValues(at)[flow ? 0 : 1];
    if (Number.isFinite(v)) return nearestRound(v, known);
  }
  const others = (desk.doc.panels ?? []).filter((p) => p.id !== panel.id).flatMap((p) => Object.values(p.axes).filter((a) => a.quantity === panel.axes[axis].quantity).flatMap((a) => a.marks ?? []));
  const near = others.sort((a, b) => Math.abs(a.at[flow ? 0 : 1] - at[flow ? 0 : 1]) - Math.abs(b.at[flow ? 0 : 1] - at[flow ? 0 : 1]))[0];
  return near && Math.abs(near.at[flow ? 0 : 1] - at[flow ? 0 : 1]) < 25 && !known.includes(near.value) ? near.value : null;
}

/** Blanks of every scale at a kept mark: those that stand on the same crossing show their value, an empty one adds a mark. */
function chosenBlanks(desk, panel, first, mark) {
  const ids = axisIds(panel);
  const order = [first, ...[...ids.flow, ...ids.value].filter((id) => id !== first)];
  return order.map((id, i) => {
    const axis = panel.axes[id];
    const index = (axis.marks ?? []).findIndex((m) => samePlace(m.at, mark.at));
    const set = (v) => {
      if (v === null) return index >= 0 && desk.act({ type: "mark/remove", panel: panel.id, axis: id, index });
      if (index < 0) return desk.act({ type: "mark/keep", panel: panel.id, at: mark.at, values: { [id]: v } });
      return v !== axis.marks[index].value && desk.act({ type: "mark/set", panel: panel.id, axis: id, index, change: { value: v } });
    };
    const enter = (v) => {
      set(v);
      desk.chooseMark(null);
    };
    return [numberBlank({ name: `mark-${id}`, label: `${QUANTITY_WORDS[axis.quantity]} at this mark, in ${written(axis.unit)}`, value: index >= 0 ? axis.marks[index].value : null, offer: index < 0 ? offered(desk, panel, id, mark.at) : null, width: 56, onValue: set, onEnter: enter }), t(`${written(axis.unit)} ${QUANTITY_WORDS[axis.quantity]}${i < order.length - 1 ? "," : ""}`)];
  });
}

export function marksSentence(desk) {
  const { panel, openMark, doc } = desk;
  if (!panel) return { sentence: [t("There is no panel yet: draw round the plot first.")], does: [button("Go to the panel", { main: true, onClick: () => desk.go("panel") })] };
  if (openMark) {
    const own = (doc.panels ?? []).find((p) => p.id === openMark.panel) ?? panel;
    const ids = axisIds(own);
    const likely = likelyAxes(own, openMark.at);
    const order = [...likely, ...[...ids.flow, ...ids.value].filter((id) => !likely.includes(id))];
    const blanks = {};
    const keep = () => {
      const values = {};
      for (const [id, b] of Object.entries(blanks)) {
        const v = b.read();
        if (v === undefined) return b.input.focus();
        if (v !== null) values[id] = v;
      }
      if (!Object.keys(values).length) {
        blanks[order[0]].input.focus();
        return desk.say("Type what the paper says at this mark.");
      }
      desk.keepMark(own, openMark, values);
    };
    const parts = [t("This mark reads")];
    let offers = false;
    order.forEach((id, i) => {
      const axis = own.axes[id];
      const offer = likely.includes(id) ? offered(desk, own, id, openMark.at) : null;
      offers ||= offer !== null;
      blanks[id] = numberBlank({ name: `mark-${id}`, label: `${QUANTITY_WORDS[axis.quantity]} at this mark, in ${written(axis.unit)}`, value: null, offer, width: 56, onEnter: keep });
      parts.push(blanks[id], t(`${written(axis.unit)} ${QUANTITY_WORDS[axis.quantity]}${i < order.length - 1 ? "," : ""}`));
    });
    parts.push(stop(), openMark.held ? h("small", { class: "held" }, heldWords(openMark.held)) : null, offers ? h("small", { class: "held" }, h("kbd", {}, "Tab"), " takes the value offered.") : null);
    return {
      sentence: parts,
      does: [hint("Z", "magnify"), button("Let go", { quiet: true, onClick: () => desk.act({ type: "mark/drop" }) }), button("Keep mark", { main: true, key: "Enter", onClick: keep })],
      focus: desk.focusBlank === "mark" ? `mark-${order[0]}` : null,
      key: JSON.stringify(openMark),
    };
  }
  if (desk.chosenMark) {
    const { panel: pid, axis: id, index } = desk.chosenMark;
    const own = (doc.panels ?? []).find((p) => p.id === pid);
    const axis = own?.axes[id];
    const mark = axis?.marks[index];
    if (mark) {
      return {
        sentence: [t("This mark reads"), chosenBlanks(desk, own, id, mark), stop()],
        key: JSON.stringify([pid, mark]),
        does: [h("span", { class: "hint" }, h("kbd", {}, "←"), h("kbd", {}, "→"), " 0.1 px"), button("Remove", { quiet: true, onClick: () => desk.removeChosenMark() }), button("Done", { main: true, onClick: () => desk.chooseMark(null) })],
      };
    }
  }
  const many = (doc.panels ?? []).length > 1;
  const ids = axisIds(panel);
  const donor = (doc.panels ?? []).find((p) => p.id !== panel.id && axisIds(p).flow.some((f) => (p.axes[f].marks ?? []).length >= 2));
  const poor = ids.flow.find((f) => (panel.axes[f].marks ?? []).length === 0);
  const all = (doc.panels ?? []).every(calibrated);
  return {
    sentence: [
      many ? [t("On panel"), choice({ name: "which", label: "Panel", value: panel.id, options: doc.panels.map((p, i) => [p.id, `${i + 1} of ${doc.panels.length}`]), onValue: (v) => desk.choosePanel(v) }), t("click")] : t("Click"),
      t("a grid crossing or a tick, anywhere and in any order, then type what it says."),
      donor && poor ? button(`Take the flow marks of panel ${doc.panels.indexOf(donor) + 1}`, { quiet: true, onClick: () => desk.act({ type: "marks/copy", from: donor.id, axisFrom: axisIds(donor).flow[0], panel: panel.id, axis: poor }) }) : null,
    ],
    does: [h("span", { class: "hint" }, h("kbd", {}, "F"), " lines found"), hint("Z", "magnify"), hint("Shift", "no snap"), button("Go on to curves", { main: calibrated(panel), waiting: calibrated(panel) ? null : "needs two marks on each scale", onClick: () => (all ? desk.go("curves") : desk.choosePanel(doc.panels.find((p) => !calibrated(p)).id)) })],
  };
}
