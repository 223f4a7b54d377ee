// The sentences of family, fit and submit, and the strip of a running job.
import { pairsOf } from "../state/family.js";
import { plain } from "../geometry/number.js";
import { QUANTITY_WORDS, CONTOURS, written } from "../geometry/units.js";
import { curveLabel } from "../state/derive.js";
import { h, s } from "../view/dom.js";
import { button, choice, numberBlank, textBlank } from "./blank.js";

const t = (words) => h("span", {}, words);
const stop = () => h("span", { class: "stop" }, ".");

/** The blanks that name the pump: the check needs them. */
export function nameBlanks(desk) {
  const pump = desk.doc.pump ?? {};
  const set = (change) => desk.act({ type: "pump/set", change });
  return [
    textBlank({ name: "maker", label: "Maker of the pump", value: pump.maker, example: "maker", width: 110, onValue: (v) => set({ maker: v }) }),
    textBlank({ name: "model", label: "Model of the pump", value: pump.model, example: "model", width: 120, onValue: (v) => set({ model: v }) }),
  ];
}

function needsRun(desk, next) {
  if (desk.run?.fresh && !desk.unmarked()) return null;
  if (desk.missing() && (desk.doc.curves ?? []).length) {
    return {
      sentence: [t("The check needs a name: this is the pump"), nameBlanks(desk), stop()],
      does: [button("Check the curves", { waiting: `needs ${desk.missing()}`, onClick: () => {} })],
    };
  }
  const none = !(desk.doc.curves ?? []).length;
  const bare = desk.unmarked();
  if (bare && !none) {
    return {
      sentence: [t(`The ${QUANTITY_WORDS[bare.quantity]} scale of panel ${bare.number} has no two marks yet. Mark it, or take it away in the panel's sentence.`)],
      does: [button("Go to the panel", { quiet: true, onClick: () => { desk.choosePanel(bare.panel); desk.go("panel"); } }), button("Go to the marks", { main: true, onClick: () => { desk.choosePanel(bare.panel); desk.go("marks"); } })],
    };
  }
  return {
    sentence: [t(none ? "There is no curve to check yet." : desk.run ? "The curves have changed since the last check." : "The curves have not been checked yet.")],
    does: [none ? button("Go to the curves", { main: true, onClick: () => desk.go("curves") }) : button(desk.run ? "Check again" : "Check the curves", { main: true, onClick: () => desk.checkAndGo(next) })],
  };
}

export function familySentence(desk) {
  const wait = needsRun(desk, "family");
  if (wait && (!desk.run || !(desk.doc.curves ?? []).length)) return wait;
  const pairs = pairsOf(desk.run, desk.panel, desk.doc);
  const many = (desk.doc.panels ?? []).length > 1;
  return {
    sentence: [
      many ? [t("On panel"), choice({ name: "which", label: "Panel", value: desk.panel.id, options: desk.doc.panels.map((p, i) => [p.id, `${i + 1}`]), onValue: (v) => desk.choosePanel(v) }), t("carry")] : t("Carry"),
      pairs.length ? choice({ name: "carry", label: "Which diameter is carried", value: desk.carry, options: [["all", "each diameter to its neighbours"], ...pairs], onValue: (v) => desk.set({ carry: v }) }) : h("b", {}, "nothing: one diameter has no neighbours here"),
      pairs.length ? [t("by this family's own exponents, and draw it over"), choice({ name: "over", label: "Where the carried curves are drawn", value: desk.over, options: [["both", "paper and plot"], ["paper", "the paper"], ["plot", "the plot"], ["none", "nothing"]], onValue: (v) => desk.set({ over: v }) })] : null,
      stop(),
    ],
    does: [h("span", { class: "hint" }, "hold ", h("kbd", {}, "B"), " bare paper"), wait ? wait.does : button("Go on to fit", { main: true, onClick: () => desk.go("fit") })],
  };
}

const name = (c) => `${CONTOURS[c.quantity] ? "" : `${QUANTITY_WORDS[c.quantity]} `}${curveLabel(c)}`.trim();

export function fitSentence(desk) {
  const wait = needsRun(desk, "fit");
  if (wait && (!desk.run || !(desk.doc.curves ?? []).length)) return wait;
  const curves = (desk.doc.curves ?? []).filter((c) => !(c.quantity in CONTOURS));
  if (!curves.length) return { sentence: [t("Contours carry no fit. There is nothing to choose here.")], does: [button("Go on to submit", { main: true, onClick: () => desk.go("submit") })] };
  const chosen = curves.find((c) => c.id === desk.selected) ?? null;
  const which = chosen ? [chosen.id] : curves.map((c) => c.id);
  const order = (chosen ?? curves[0]).fit?.order ?? "auto";
  const item = desk.items.find((i) => i.id === (chosen ?? curves[0]).id);
  const fit = item?.fit;
  const flow = desk.flowAxis;
  const zero = (chosen ?? curves[0]).quantity === "efficiency";
  const set = (change) => desk.act({ type: "curves/set", curves: which, change: { fit: { ...((chosen ?? curves[0]).fit ?? { order: "auto" }), ...change } } });
  const found = fit ? `auto: ${fit.order}` : "auto";
  return {
    sentence: [
      t("Fit"), choice({ name: "fit-curve", label: "Curve to fit", value: desk.selected ?? "", options: [["", "every curve"], ...curves.map((c) => [c.id, name(c)])], onValue: (v) => desk.select(v || null) }),
      t("with order"), choice({ name: "order", label: "Order of the polynomial", value: order, options: [["auto", order === "auto" && chosen ? found : "auto"], ...[1, 2, 3, 4, 5, 6, 7, 8].map((k) => [k, String(k)])], onValue: (v) => set({ order: v }) }),
      zero ? choice({ name: "zero", label: "At zero flow", value: (chosen ?? curves[0]).fit?.through_zero ? "yes" : "no", options: [["no", "free at zero flow"], ["yes", "through zero"]], onValue: (v) => set({ through_zero: v === "yes" }) }) : null,
      fit && flow && chosen ? t(`between ${plain(fit.lo / item.fx, 1)} and ${plain(fit.hi / item.fx, 1)} ${written(flow.unit)}`) : null, stop(),
    ],
    does: [wait ? wait.does : button("Go on to submit", { main: true, onClick: () => desk.go("submit") })],
  };
}

export function submitSentence(desk) {
  if (desk.saved) {
    return {
      sentence: [t(`Saved as ${desk.saved.key}, revision ${desk.saved.revision}${desk.saved.released ? ", released" : ", not released yet"}. A script can read it now.`)],
      does: [h("a", { class: "btn main", href: desk.saved.url, id: "pump-link" }, "Open the pump's page")],
    };
  }
  if (!(desk.doc.curves ?? []).length || desk.unmarked()) return needsRun(desk, "submit");
  const pump = desk.doc.pump ?? {};
  const setPump = (change) => desk.act({ type: "pump/set", change });
  const form = desk.form;
  const all = (desk.doc.curves ?? []).map((c) => c.id);
  const first = desk.doc.curves[0];
  const missing = [!pump.maker && "the maker", !pump.model && "the model", !form.why && "why", !form.who && "who"].filter(Boolean);
  const errors = (desk.run?.findings ?? []).filter((f) => f.severity === "error").length;
  return {
    sentence: [
      t("Submit the"), choice({ name: "basis", label: "What the curves claim to be", value: first.basis ?? "catalogue", options: ["catalogue", "quotation", "guaranteed", "works test", "field test"].map((b) => [b, b]), onValue: (v) => desk.act({ type: "curves/set", curves: all, change: { basis: v === "catalogue" ? undefined : v } }) }), t("curves of"), nameBlanks(desk),
      t("with"), numberBlank({ name: "stages", label: "Number of stages", value: pump.stages ?? 1, width: 34, least: 1, whole: true, onValue: (v) => setPump({ stages: v ?? 1 }) }), t((pump.stages ?? 1) === 1 ? "stage," : "stages, heads"),
      (pump.stages ?? 1) > 1 ? [choice({ name: "headis", label: "What the printed heads are", value: first.head_is ?? "total", options: [["total", "of the whole pump"], ["per stage", "per stage"]], onValue: (v) => desk.act({ type: "curves/set", curves: all, change: { head_is: v === "total" ? undefined : v } }) }), t(",")] : null, t("because"),
      textBlank({ name: "why", label: "Why this revision is made", value: form.why, example: "why", width: 150, onValue: (v) => desk.fillForm({ why: v }) }),
      t(", signed"), textBlank({ name: "who", label: "Your name", value: form.who, example: "your name", width: 120, onValue: (v) => desk.fillForm({ who: v }) }), stop(),
    ],
    does: [
      errors ? h("span", { class: "hint" }, `${errors} ${errors === 1 ? "error stands" : "errors stand"}`) : null,
      button("Save only", { quiet: true, onClick: () => desk.save(false) }),
      button(desk.saving ? "Saving …" : "Save and release", { main: !missing.length && !desk.saving, waiting: desk.saving ? "" : missing.length ? `needs ${missing.join(", ")}` : null, onClick: () => desk.save(true) }),
    ],
  };
}

/** The strip of a running job, in the place of the sentence. */
export function jobSentence(desk) {
  const job = desk.job;
  const share = Math.max(0, Math.min(1, job.share ?? 0));
  const w = 420;
  const ruler = s("svg", { class: "ruler", width: w, height: 18, viewBox: `0 0 ${w} 18`, role: "img", "aria-label": `${Math.round(share * 100)} per cent done` });
  for (let k = 0; k <= 80; k++) ruler.append(s("line", { x1: (k * w) / 80 + 0.5, x2: (k * w) / 80 + 0.5, y1: k % 8 ? 8 : 2, y2: 13, class: "k-edge", "stroke-width": 1 }));
  ruler.append(s("line", { x1: 0, x2: w, y1: 14, y2: 14, class: "k-edge", "stroke-width": 1 }), s("line", { x1: 0, x2: share * w, y1: 15, y2: 15, class: "k-ink", "stroke-width": 4 }));
  const words = job.state === "queued" && !job.id ? job.text : job.state === "queued" ? "Waiting for its turn; you can go on working" : `${job.text || "Working"}; you can go on working`;
  const said = words.charAt(0).toUpperCase() + words.slice(1);
  return {
    sentence: [h("span", { role: "status" }, `${said}.`)],
    does: [ruler, h("span", { class: "hint" }, `${Math.round(share * 100)} %`), button("Stop", { key: "Esc", onClick: () => desk.stopRun() })],
  };
}
