// The sentence of a curve: what the line is, what it belongs to, where it is read and where it ends.
import { axisIds } from "../geometry/panelmap.js";
import { CONTOURS, CONTOUR_WORDS, QUANTITY_SIGNS, QUANTITY_WORDS, written } from "../geometry/units.js";
import { calibrated } from "../state/derive.js";
import { clicksWanted, flowRange, rangeOf } from "../state/stretch.js";
import { clicksWords, confidence, KIND_WORDS, sideOf } from "../state/words.js";
import { plain } from "../geometry/number.js";
import { h } from "../view/dom.js";
import { button, choice, numberBlank } from "./blank.js";

const t = (words) => h("span", {}, words);
const stop = () => h("span", { class: "stop" }, ".");
const said = (words) => (words ? h("small", { class: "held" }, words) : null);
const hint = (key, words) => h("span", { class: "hint" }, "hold ", h("kbd", {}, key), ` ${words}`);

/** Quantities that a line on this panel can be, as choices. */
export function quantitiesOf(panel) {
  const ids = axisIds(panel);
  const onAxes = [...new Set(ids.value.map((id) => panel.axes[id].quantity))];
  const contours = onAxes.includes("head") ? Object.keys(CONTOURS) : [];
  return [...onAxes.map((q) => [q, QUANTITY_WORDS[q]]), ...contours.map((q) => [q, CONTOUR_WORDS[q]])];
}

/** The axis a quantity is read on: its own, or head for a contour. */
export function axisFor(panel, quantity) {
  const wanted = CONTOURS[quantity] ? "head" : quantity;
  return axisIds(panel).value.find((id) => panel.axes[id].quantity === wanted) ?? axisIds(panel).value[0];
}

const ENDINGS = [
  ["ink", "where the ink ends"],
  ["click", "at the outer clicks"],
  ["hand", "with my clicks: they are the curve"],
  ["points", "with test points: I click each"],
];

const endingOf = (c) => (c.kind === "hand" || c.kind === "points" ? c.kind : c.ends ?? "ink");
const endingChange = (v) => (v === "hand" || v === "points" ? { kind: v, ends: undefined } : { kind: undefined, ends: v === "ink" ? undefined : v });

function curveParts(panel, curve, set, onEnter, offer) {
  const contour = curve.quantity in CONTOURS;
  const parts = [t("This line is"), choice({ name: "quantity", label: "Quantity of this line", value: curve.quantity, options: quantitiesOf(panel), onValue: (q) => set({ quantity: q, y: axisFor(panel, q), ...(q in CONTOURS ? { diameter_mm: undefined, ...(curve["x-clicked"] ? { clicks: curve["x-clicked"] } : {}) } : { value: undefined, closed: undefined }) }) })];
  const blanks = [];
  if (contour) {
    const percent = curve.quantity === "efficiency_contour";
    const unit = percent ? "%" : curve.quantity === "power_contour" ? "kW" : "m";
    const b = numberBlank({ name: "level", label: `Level of this line in ${unit}`, value: curve.value === undefined ? null : percent ? Math.round(curve.value * 1e6) / 1e4 : curve.value, example: "level", offer: offer === undefined ? null : percent ? Math.round(offer * 1e6) / 1e4 : offer, width: 48, onValue: (v) => set({ value: v === null ? undefined : percent ? v / 100 : v }), onEnter: (v) => onEnter({ value: v === null ? undefined : percent ? v / 100 : v }) });
    blanks.push(b);
    parts.push(t("of"), b, t(`${unit},`), choice({ name: "closed", label: "Open or closed line", value: curve.closed ? "closed" : "open", options: [["open", "an open line"], ["closed", "a closed loop"]], onValue: (v) => set({ closed: v === "closed" ? true : undefined }) }), t("at"));
  } else {
    const change = (v) => (typeof v === "string" ? { diameter_mm: undefined, label: { by: "letter", printed: v } } : { diameter_mm: v ?? undefined, label: curve.label?.by === "letter" ? undefined : curve.label });
    const letter = (text) => (/^[A-Z]{1,3}\d?$/.test(text) ? text : null);
    const b = numberBlank({ name: "diameter", label: "Impeller diameter in mm, or its letter", value: curve.diameter_mm ?? (curve.label?.by === "letter" ? curve.label.printed : null), example: "all", width: 48, least: 1, words: letter, onValue: (v) => set(change(v)), onEnter: (v) => onEnter(change(v)) });
    blanks.push(b);
    parts.push(t("for impeller"), b, t("mm at"));
  }
  const speed = numberBlank({ name: "rpm", label: "Speed in revolutions a minute", value: curve.speed_rpm, example: "1450", width: 52, least: 1, onValue: (v) => set({ speed_rpm: v ?? undefined }), onEnter: (v) => onEnter({ speed_rpm: v ?? undefined }) });
  parts.push(speed, t("1/min,"), h("span", { class: "wide" }, "read"), t("on"));
  const ids = axisIds(panel);
  parts.push(choice({ name: "axis", label: "Axis this line is read on", value: curve.y, options: ids.value.map((id) => [id, [QUANTITY_SIGNS[panel.axes[id].quantity], sideOf(panel, id, panel.outline), innerWidth < 1200 ? "" : written(panel.axes[id].unit)].filter(Boolean).join(", ")]), onValue: (y) => set({ y }) }));
  if (!curve.closed) parts.push(h("span", { class: "wide" }, ". It ends"), choice({ name: "ends", label: "Where this line ends", value: endingOf(curve), options: ENDINGS, onValue: (v) => set(endingChange(v)) }));
  parts.push(stop());
  return parts;
}

export function curvesSentence(desk) {
  const { doc, panel, openCurve } = desk;
  if (!panel || !calibrated(panel)) {
    return { sentence: [t("This panel has no scales yet: two marks on each will do.")], does: [button("Go to the marks", { main: true, onClick: () => desk.go("marks") })] };
  }
  if (openCurve) {
    const own = doc.panels.find((p) => p.id === openCurve.panel) ?? panel;
    const set = (change) => desk.act({ type: "curve/change", change });
    const keep = (change = null) => {
      if (change) set(change);
      desk.keepCurve();
    };
    const want = clicksWanted(openCurve);
    const few = openCurve.clicks.length < want;
    const item = desk.items.find((i) => i.id === openCurve.id);
    const looking = !few && !item?.result;
    const levels = (doc.curves ?? []).filter((c) => c.quantity === openCurve.quantity && c.value !== undefined).map((c) => c.value);
    const more = want - openCurve.clicks.length;
    const wanting = openCurve.kind === "points" ? "Click each point." : more === 1 ? "Click once more along the line." : `${clicksWords(want)} along the line.`;
    return {
      sentence: [curveParts(own, openCurve, set, keep, levels[levels.length - 1]), said(KIND_WORDS[openCurve.kind]), item?.failed ? null : looking ? said("Following the ink …") : said(sureness(item))],
      does: [few ? h("span", { class: "hint" }, wanting) : null, h("span", { class: "wide" }, button("Let go", { quiet: true, onClick: () => desk.act({ type: "curve/drop" }) })), button("Keep curve", { main: !few, key: few ? null : "Enter", waiting: few ? "" : null, onClick: () => keep() })],
      key: JSON.stringify(openCurve),
      focus: desk.focusBlank === "curve" ? (openCurve.quantity in CONTOURS ? "level" : "diameter") : null,
    };
  }
  const chosen = (doc.curves ?? []).find((c) => c.id === desk.selected);
  if (chosen) return chosenSentence(desk, chosen);
  const n = (doc.curves ?? []).length;
  const many = doc.panels.length > 1;
  return {
    sentence: [many ? [t("On panel"), choice({ name: "which", label: "Panel", value: panel.id, options: doc.panels.map((p, i) => [p.id, `${i + 1} of ${doc.panels.length}`]), onValue: (v) => desk.choosePanel(v) }), t("click")] : t("Click"), t(n ? "along the next line, or on a trace to change it." : "twice or more along a printed line; the desk follows the ink between.")],
    does: [hint("Z", "magnify"), n ? button(desk.run?.fresh ? "Go on to the family" : "Check the curves", { main: true, onClick: () => desk.checkAndGo("family") }) : null],
  };
}

/** "The trace is sure, 0.98." */
function sureness(item) {
  const words = item?.result && !item.failed && item.curve.kind !== "points" && item.curve.kind !== "hand" ? confidence(item.result.confidence) : "";
  return words ? `The trace is ${words}.` : "";
}

const ORDINALS = ["first", "second", "third", "fourth", "fifth", "sixth", "seventh", "eighth"];
const ordinal = (i) => ORDINALS[i] ?? `${i + 1}th`;

function chosenSentence(desk, chosen) {
  const { doc, panel } = desk;
  const own = doc.panels.find((p) => p.id === chosen.panel) ?? panel;
  const item = desk.items.find((i) => i.id === chosen.id);
  const label = item?.label || "this line";
  const done = button("Done", { main: true, key: "Enter", onClick: () => desk.select(null) });
  const focused = desk.focused?.curve === chosen.id ? desk.focused : null;
  const back = () => { desk.focused = null; desk.set({}); };
  if (desk.locking) {
    return {
      sentence: [t(desk.locking.from === null ? `Click on the trace of ${label} where the locked stretch begins.` : "Now click where it ends."), said("A locked stretch stays exactly as it is, whatever changes round it.")],
      does: [button("Lock the whole trace", { quiet: true, onClick: () => desk.locks.all(chosen.id) }), button("Leave it", { key: "Esc", onClick: () => desk.set({ locking: null }) })],
      key: `lock-${desk.locking.from}`,
    };
  }
  if (focused?.kind === "point") {
    const word = focused.part === "guides" ? "guide" : "click";
    return {
      sentence: [t(`This is the ${ordinal(focused.index)} ${word} of ${label}.`), said(word === "guide" ? "The line passes near it; drag it, and only what it touches is followed again." : "Drag it, and only what it touches is followed again.")],
      does: [h("span", { class: "hint" }, h("kbd", {}, "←"), h("kbd", {}, "→"), " 0.1 px"), button(`Remove the ${word}`, { quiet: true, key: "Del", onClick: () => desk.removeFocused() }), button("Done", { main: true, onClick: back })],
      key: JSON.stringify(focused),
    };
  }
  if (focused?.kind === "lock") {
    const range = item && chosen.locked?.[focused.index] ? rangeOf(chosen.locked[focused.index], item.pixels) : null;
    const flow = range ? flowRange(item, range) : null;
    const unit = own.axes[chosen.x] ? written(own.axes[chosen.x].unit) : "";
    return {
      sentence: [t(`This stretch of ${label}${flow ? `, from ${plain(flow[0], 1)} to ${plain(flow[1], 1)} ${unit},` : ""} is locked: it stays as it is.`)],
      does: [button("Unlock", { key: "L", onClick: () => desk.locks.unlock(chosen.id, focused.index) }), button("Done", { main: true, onClick: back })],
      key: JSON.stringify(focused),
    };
  }
  const set = (change) => desk.act({ type: "curve/set", curve: chosen.id, change });
  const locked = (chosen.locked ?? []).length;
  const want = clicksWanted(chosen);
  const few = (chosen.clicks ?? []).length < want;
  const adding = chosen.kind === "points" ? "Add a point" : chosen.kind === "hand" ? "Add a click" : "Draw a guide";
  const can = item?.pixels.length > 2 && chosen.kind !== "points";
  return {
    key: JSON.stringify(chosen),
    sentence: [curveParts(own, chosen, set, (change) => { set(change); desk.select(null); }), said(KIND_WORDS[chosen.kind]), said(few ? `${chosen.clicks.length} of ${want} clicks are set.` : ""), said(`${sureness(item)}${locked ? ` ${locked} ${locked === 1 ? "stretch is" : "stretches are"} locked.` : ""}`)],
    does: [
      desk.guiding ? h("span", { class: "hint" }, chosen.kind === "points" ? "Click the next point." : chosen.kind === "hand" ? "Click along the line." : "Click the ink beside the trace.") : button(adding, { quiet: true, onClick: () => desk.select(chosen.id, true) }),
      can && !desk.guiding ? button("Lock a stretch", { quiet: true, onClick: () => desk.locks.start(chosen.id) }) : null,
      button("Remove", { quiet: true, onClick: () => { desk.act({ type: "curve/remove", curve: chosen.id }); desk.select(null); } }), done,
    ],
  };
}
