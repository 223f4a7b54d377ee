// The document, its history, what is worked out from it, and the outbox.
import assert from "node:assert/strict";
import test from "node:test";
import { Outbox } from "../../web/curvebank_web/static/js/net/outbox.js";
import { missingWords } from "../../web/curvebank_web/static/js/view/pump-plots.js";
import { rank, unknowns } from "../../web/curvebank_web/static/js/state/catalogue.js";
import { calibrated, curveLabel, liveFindings, panelCurves, panelToWorkOn, progress, usablePanel } from "../../web/curvebank_web/static/js/state/derive.js";
import { likelyAxes } from "../../web/curvebank_web/static/js/panels/sentences.js";
import { apply, curveId, desk, freshId, insertClick, newPanel, recipeOf } from "../../web/curvebank_web/static/js/state/doc.js";
import { gapOf, ghostsOf, runFindings } from "../../web/curvebank_web/static/js/state/family.js";
import { acknowledge, fromDraft, head, moveTo, push, redoTarget, undoTarget, unkept } from "../../web/curvebank_web/static/js/state/history.js";
import { csv, dutyFlowDoubt, flowRange, grid, readAt, system } from "../../web/curvebank_web/static/js/state/pump.js";
import * as words from "../../web/curvebank_web/static/js/state/words.js";

const frozen = (o) => {
  Object.values(o).forEach((v) => v && typeof v === "object" && frozen(v));
  return Object.freeze(o);
};
const empty = () => frozen({ recipe: 1, sheet: { file: "a.png" }, pump: { maker: "", model: "" }, panels: [], curves: [] });
const box = [[0, 0], [100, 0], [100, 100], [0, 100]];

function withPanel() {
  const doc = empty();
  return frozen(apply(doc, { type: "panel/add", panel: newPanel(doc, box) }));
}

function withMarks() {
  let doc = withPanel();
  for (const [at, values] of [[[0, 100], { flow: 0, head: 0 }], [[100, 100], { flow: 50 }], [[0, 0], { head: 20 }]]) doc = frozen(apply(doc, { type: "mark/keep", panel: "main", at, values }));
  return doc;
}

test("apply never changes the old document", () => {
  const doc = withMarks();
  const text = JSON.stringify(doc);
  const next = apply(doc, { type: "mark/set", panel: "main", axis: "flow", index: 1, change: { value: 60 } });
  assert.equal(next.panels[0].axes.flow.marks[1].value, 60);
  assert.equal(JSON.stringify(doc), text);
  assert.throws(() => apply(doc, { type: "no/such" }), /no such action/);
});

test("a crossing makes one mark on each scale it was given a value for, and closes the open mark", () => {
  let doc = apply(withPanel(), { type: "mark/open", panel: "main", at: [3, 4], held: "crossing" });
  assert.deepEqual(desk(doc).mark.at, [3, 4]);
  doc = apply(doc, { type: "mark/keep", panel: "main", at: [3, 4], values: { flow: 10, head: 2 } });
  assert.equal(desk(doc).mark, undefined);
  assert.deepEqual(doc.panels[0].axes.head.marks, [{ at: [3, 4], value: 2 }]);
  assert.deepEqual(doc.panels[0].axes.flow.marks, [{ at: [3, 4], value: 10 }]);
});

test("marks on one crossing move together", () => {
  const doc = apply(withMarks(), { type: "marks/move", panel: "main", from: [0, 100], at: [1, 99] });
  assert.deepEqual(doc.panels[0].axes.flow.marks.map((m) => m.at), [[1, 99], [100, 100]]);
  assert.deepEqual(doc.panels[0].axes.head.marks[0].at, [1, 99]);
});

test("an open curve lives under x-desk until it is kept; changes to none are no change", () => {
  const doc = withMarks();
  assert.equal(apply(doc, { type: "curve/change", change: { diameter_mm: 1 } }), doc);
  assert.equal(apply(doc, { type: "curve/keep" }), doc);
  const curve = { id: "open", panel: "main", x: "flow", y: "head", quantity: "head", clicks: [[1, 1]] };
  let next = apply(doc, { type: "curve/open", curve });
  next = apply(next, { type: "curve/change", change: { clicks: [[1, 1], [50, 20]], diameter_mm: 320 } });
  assert.deepEqual(recipeOf(next), recipeOf(doc));
  next = apply(next, { type: "curve/keep" });
  assert.equal(next.curves[0].diameter_mm, 320);
  assert.equal(desk(next).curve, undefined);
  assert.equal("x-desk" in recipeOf(next), false);
});

test("removing a panel or an axis removes what was read there", () => {
  let doc = withMarks();
  doc = apply(doc, { type: "curve/open", curve: { id: "H-1", panel: "main", x: "flow", y: "head", quantity: "head", clicks: [] } });
  doc = apply(doc, { type: "curve/keep" });
  assert.equal(apply(doc, { type: "axis/remove", panel: "main", axis: "head" }).curves.length, 0);
  const gone = apply(doc, { type: "panel/remove", panel: "main" });
  assert.deepEqual([gone.panels.length, gone.curves.length], [0, 0]);
});

test("a click goes between the two it lies between, or to an end", () => {
  assert.deepEqual(insertClick([[10, 0]], [5, 0]), [[5, 0], [10, 0]]);
  assert.deepEqual(insertClick([[0, 0], [10, 0]], [5, 1]), [[0, 0], [5, 1], [10, 0]]);
  assert.deepEqual(insertClick([[0, 0], [10, 0]], [14, 0]), [[0, 0], [10, 0], [14, 0]]);
  assert.deepEqual(insertClick([[0, 0], [10, 0]], [-3, 0]), [[-3, 0], [0, 0], [10, 0]]);
});

test("ids are plain and never twice", () => {
  assert.equal(curveId({ quantity: "head", diameter_mm: 320 }, []), "H-320");
  assert.equal(curveId({ quantity: "head", diameter_mm: 320 }, ["H-320"]), "H-320-2");
  assert.equal(curveId({ quantity: "efficiency_contour", value: 0.75 }, []), "efficiency_contour-75");
  assert.equal(freshId("a", ["a", "a-2"]), "a-3");
});

test("a second panel takes the next quantity and the flow unit of the first", () => {
  let doc = withPanel();
  doc = apply(doc, { type: "axis/set", panel: "main", axis: "flow", change: { unit: "l/s" } });
  const second = newPanel(doc, box);
  assert.deepEqual(Object.keys(second.axes), ["flow", "power"]);
  assert.equal(second.axes.flow.unit, "l/s");
});

test("only axes with two marks go to the engine", () => {
  assert.equal(calibrated(withPanel().panels[0]), false);
  const panel = withMarks().panels[0];
  assert.equal(calibrated(panel), true);
  const more = apply(withMarks(), { type: "axis/set", panel: "main", axis: "efficiency", change: { quantity: "efficiency", unit: "%", marks: [] } }).panels[0];
  assert.deepEqual(Object.keys(usablePanel(more).axes), ["flow", "head"]);
});

test("curves come in printed units with weight by diameter and the label at the end", () => {
  let doc = withMarks();
  doc = apply(doc, { type: "axis/set", panel: "main", axis: "head", change: { unit: "ft" } });
  for (const d of [300, 340]) {
    doc = apply(doc, { type: "curve/open", curve: { id: `H-${d}`, panel: "main", x: "flow", y: "head", quantity: "head", diameter_mm: d, clicks: [[0, 0], [1, 1]] } });
    doc = apply(doc, { type: "curve/keep" });
  }
  const items = panelCurves(doc, doc.panels[0], (_, c) => (c.id === "H-300" ? { points: [[3.6, 3.048]], pixels: [[1, 1]], sigma: [0.3048], warnings: [] } : { error: { message: "no ink" } }));
  assert.deepEqual(items[0].points.map((p) => p.map((v) => Number(v.toFixed(9)))), [[3.6, 10]]);
  assert.ok(Math.abs(items[0].sigma[0] - 1) < 1e-12);
  assert.deepEqual(items.map((i) => i.weight), [1.9, 2.3]);
  assert.deepEqual([items[1].failed, items[0].label], [true, "Ø 300"]);
  assert.equal(curveLabel({ quantity: "efficiency_contour", value: 0.755 }), "75.5 %");
  assert.equal(curveLabel({ quantity: "efficiency", diameter_mm: 345 }, true), "η Ø 345");
});

test("live findings name the mistyped mark and the value that would fit", () => {
  let doc = withMarks();
  doc = apply(doc, { type: "mark/keep", panel: "main", at: [50, 100], values: { flow: 52 } });
  const list = liveFindings(doc, () => ({ suspects: [{ axis: "flow", mark: 2, typed: 52, fits: 25.02, sure: true }] }), () => null, words);
  assert.equal(list.length, 1);
  assert.equal(list[0].severity, "error");
  assert.match(list[0].text, /^The flow mark typed 52 sits where 25\.02 m³\/h belongs\.$/);
  assert.equal(words.niceFit(doc.panels[0].axes.flow, list[0].suspect), 25);
  assert.deepEqual(list[0].where.at, [50, 100]);
});

test("progress counts what is done and says when a check is out of date", () => {
  const doc = withMarks();
  const p = progress(doc, { page: {}, panelResultOf: () => null, resultOf: () => null, run: { fresh: false, findings: [] }, saved: null });
  assert.deepEqual([p.sheet.share, p.panel.word, p.marks.word, p.marks.share, p.family.word], [1, "1", "4", 1, "out of date"]);
});

test("the undo tree goes back along the way and redo returns it", () => {
  let t = fromDraft({ step: 3, doc: { n: 3 }, steps: [{ step: 1, parent: null, label: "a" }, { step: 2, parent: 1, label: "b" }, { step: 3, parent: 2, label: "c" }] });
  t = push(t, { id: "x", label: "d", doc: { n: 4 } });
  assert.equal(undoTarget(t).id, "s3");
  assert.equal(unkept(t).length, 1);
  t = acknowledge(t, "x", 4);
  assert.equal(head(t).step, 4);
  t = moveTo(moveTo(t, "s3"), "s2");
  assert.equal(redoTarget(t).id, "s3");
  t = moveTo(t, "s3");
  assert.equal(redoTarget(t).id, "x");
  const branch = push(t, { id: "y", label: "e", doc: {} });
  assert.equal(redoTarget(branch), null);
  assert.equal(redoTarget(moveTo(branch, "s3")).id, "y");
});

function memory() {
  const kept = new Map();
  return { getItem: (k) => kept.get(k) ?? null, setItem: (k, v) => kept.set(k, v), removeItem: (k) => kept.delete(k), kept };
}

test("the outbox keeps order, sends again while the server is away, and forgets nothing over a reload", async () => {
  const storage = memory();
  const sent = [];
  const heard = [];
  let away = true;
  const send = async (e) => {
    if (away) throw Object.assign(new Error("away"), { away: true });
    sent.push(e.id);
    return { step: sent.length };
  };
  const make = () => new Outbox({ key: "k", send, storage, on: (event, e) => heard.push([event, e?.id]), wait: () => new Promise((r) => setTimeout(r, 5)) });
  const first = make();
  first.add({ id: "a" });
  first.add({ id: "b" });
  await new Promise((r) => setTimeout(r, 20));
  assert.equal(first.size, 2);
  first.stopped = true;
  const second = make();
  assert.deepEqual(second.entries.map((e) => e.id), ["a", "b"]);
  away = false;
  await second.flush();
  assert.deepEqual(sent, ["a", "b"]);
  assert.equal(storage.kept.size, 0);
  assert.ok(heard.some(([e]) => e === "away"));
});

test("a conflict stops the outbox until it is answered", async () => {
  const heard = [];
  const box_ = new Outbox({ key: "k", storage: memory(), on: (event) => heard.push(event), send: async () => { throw Object.assign(new Error("409"), { status: 409 }); } });
  box_.add({ id: "a" });
  await new Promise((r) => setTimeout(r, 5));
  assert.deepEqual(heard, ["conflict"]);
  assert.equal(box_.size, 1);
  box_.replace([]);
  assert.equal(box_.size, 0);
});

const line = (v) => Array.from({ length: 50 }, (_, i) => [i, v]);

test("a ghost's gap is drawn only where it exceeds the doubt of both", () => {
  const target = { points: line(10), pixels: line(10), sigma: line(0).map(() => 0.1) };
  assert.equal(gapOf({ points: line(10.1), pixels: line(11) }, target), null);
  const gap = gapOf({ points: line(12), pixels: line(12) }, target);
  assert.ok(gap.points.length > 10);
  assert.equal(gapOf({ points: line(12), pixels: line(12), doubt: 5 }, target), null);
});

test("with a doubted label the neighbours accuse it and it accuses no one", () => {
  const doc = { curves: ["a", "b", "c"].map((id) => ({ id, panel: "main", x: "flow", y: "head", quantity: "head" })) };
  const panel = withMarks().panels[0];
  const ghost = (to) => ({ to_id: to, to_diameter_mm: 242, points: line(12), pixels: line(12) });
  const run = {
    result: { curves: ["a", "b", "c"].map((id) => ({ id, points: line(10), pixels: line(10), sigma: [0.01] })) },
    family: { head: { curves: [{ id: "a", diameter_mm: 247, ghosts: [ghost("b")] }, { id: "b", diameter_mm: 242, agrees_mm: 234, ghosts: [ghost("a"), ghost("c")] }, { id: "c", diameter_mm: 221, ghosts: [ghost("b")] }] } },
  };
  const all = ghostsOf(run, doc, panel, "all");
  assert.deepEqual(all.map((g) => g.id), ["a>b", "c>b"]);
  assert.deepEqual(all.map((g) => Boolean(g.gap)), [true, false]);
  assert.equal(all[0].words, "dashed: 247 carried to 242");
  assert.deepEqual(ghostsOf(run, doc, panel, "b>c").map((g) => g.id), ["b>c"]);
});

test("a family finding carries the diameter it would agree with", () => {
  const [f] = runFindings({ fresh: true, findings: [{ rule: "family-label", severity: "error", subject: "curve:b", message: "The head curve printed 242 mm behaves like 234 mm (233 to 235)." }] });
  assert.deepEqual([f.agrees, f.where.curve], [234, "b"]);
});

test("the pump page reads between grid points and knows the doubt of a duty's flow", () => {
  const flow_m3h = grid(0, 100, 11);
  const values = { flow_m3h, value: flow_m3h.map((q) => 50 - 0.2 * q), u_print: flow_m3h.map(() => 0.1), u_machine: flow_m3h.map(() => 1) };
  const r = readAt(values, 35);
  assert.ok(Math.abs(r.value - 43) < 1e-6);
  assert.equal(readAt(values, 150), null);
  // slopes -0.2 and 2 x 0.005 x 50 = 0.5: one metre of doubt is 1 / 0.7 m3/h
  assert.ok(Math.abs(dutyFlowDoubt(values, 50, 0.005, "machine") - 1 / 0.7) < 1e-6);
  assert.deepEqual(system({ lift: 14, loss: 24, at: 420 }), { static_head_m: 14, friction_m_per_m3h2: 24 / 420 ** 2 });
  assert.equal(system({ lift: 14, loss: 24, at: null }), null);
  assert.deepEqual(flowRange([{ points: [[0, 1], [298, 1]] }]), [0, 350]);
  assert.equal(csv({ key: "K", number: 1, curves: [{ id: 'a"b', quantity: "head", diameter_mm: 1, speed_rpm: 2, level: null, points: [[3, 4]], sigma: [5] }] }).split("\n")[1], 'K,1,"a""b",head,1,2,,3,4,5');
});

test("the catalogue puts the nearest to the duty first and names what is not known", () => {
  const p = (model, q, h) => ({ maker: "M", model, bep: q ? { flow_m3h: q, head_m: h } : null, quantities: ["head"] });
  assert.deepEqual(rank([p("b", 300, 30), p("a", 150, 32), p("c", null)], { flow: 150, head: 32 }).map((x) => x.model), ["a", "b", "c"]);
  assert.deepEqual(rank([p("b"), p("a")], { flow: null, head: null }).map((x) => x.model), ["a", "b"]);
  assert.equal(unknowns(p("a")), "everything but head");
  assert.equal(unknowns({ quantities: ["head", "efficiency", "power", "npshr"] }), "nothing missing");
});

test("the bar says where the work is kept", () => {
  assert.equal(words.kept({ at: "13:42", step: 47, waiting: 0 }), "Kept 13:42, step 47");
  assert.equal(words.kept({ away: true, waiting: 4 }), "Kept in this browser, 4 steps not yet in the file");
});

test("a step forward lands on the first panel that wants it", () => {
  const marks = (n) => Array.from({ length: n }, (_, k) => ({ at: [k, k], value: k }));
  const panel = (id, n) => ({ id, axes: { flow: { quantity: "flow", unit: "m3/h", marks: marks(n) }, head: { quantity: "head", unit: "m", marks: marks(n) } } });
  const doc = frozen({ panels: [panel("a", 2), panel("b", 0), panel("c", 2)], curves: [{ id: "H1", panel: "a" }, { id: "H2", panel: "a" }] });
  assert.equal(panelToWorkOn("marks", doc, "c"), "b");
  assert.equal(panelToWorkOn("curves", doc, "a"), "c");
  assert.equal(panelToWorkOn("fit", doc, "b"), "b");
  const run = { family: { head: { curves: [{ id: "H1", ghosts: [{ to_id: "H2" }] }, { id: "H2", ghosts: [] }] } } };
  assert.equal(panelToWorkOn("family", doc, "c", run), "a");
  assert.equal(panelToWorkOn("family", doc, "c"), "c");
  assert.equal(panelToWorkOn("marks", { panels: [] }, null), null);
});

test("a mark asks first for the scale that does not know its line yet", () => {
  const outline = [[100, 100], [900, 100], [900, 700], [100, 700]];
  const axis = (quantity, marks) => ({ quantity, marks });
  const panel = (flow, head) => ({ id: "p", outline, axes: { flow: axis("flow", flow), head: axis("head", head) } });
  const foot = [{ at: [100, 700], value: 0 }, { at: [900, 700], value: 400 }];
  assert.deepEqual(likelyAxes(panel([], []), [100, 700]), ["flow", "head"]);
  assert.deepEqual(likelyAxes(panel(foot, [{ at: [100, 700], value: 0 }]), [101, 100]), ["head", "flow"]);
  assert.deepEqual(likelyAxes(panel(foot.slice(0, 1), [{ at: [100, 700], value: 0 }]), [900, 700]), ["flow"]);
});

test("findings leave with the curves and panels they speak of", () => {
  const run = { findings: [{ severity: "error", message: "One.", subject: "curve:H1" }, { severity: "note", message: "Two.", subject: "curve:H2" }, { severity: "warning", message: "Three.", subject: "axis:p/flow" }, { severity: "note", message: "Four.", subject: "sheet" }] };
  const doc = { panels: [{ id: "p" }], curves: [{ id: "H1" }] };
  assert.deepEqual(runFindings(run, doc).map((f) => f.text), ["One.", "Three.", "Four."]);
  assert.deepEqual(runFindings(run, { panels: [], curves: [] }), []);
  assert.equal(runFindings(run).length, 4);
});

test("one diameter at several speeds is named by speed; two lines of one name are told apart by a warning", () => {
  const panel = { id: "p", axes: { flow: { quantity: "flow", unit: "m3/h", marks: [] }, head: { quantity: "head", unit: "m", marks: [] } } };
  const curve = (id, speed) => ({ id, panel: "p", x: "flow", y: "head", quantity: "head", diameter_mm: 480, speed_rpm: speed, clicks: [] });
  const bySpeed = { panels: [panel], curves: [curve("a", 585), curve("b", 485)] };
  assert.deepEqual(panelCurves(bySpeed, panel, () => null).map((i) => i.label), ["585 1/min", "485 1/min"]);
  const said = (curves) => liveFindings({ panels: [panel], curves }, () => null, () => null, words);
  assert.deepEqual(said(bySpeed.curves), []);
  const [twin, ...rest] = said([curve("a", 585), curve("b", 585)]);
  assert.equal(rest.length, 0);
  assert.equal(twin.severity, "warning");
  assert.equal(twin.where.curve, "b");
  assert.match(twin.text, /already called Ø 480 at 585 1\/min/);
});

test("an empty plot does not deny what the paper shows as contours", () => {
  assert.match(missingWords("efficiency", []), /not on any sheet/);
  assert.match(missingWords("efficiency", [{ quantity: "efficiency_contour" }]), /lines of constant value/);
  assert.match(missingWords("power", [{ quantity: "efficiency_contour" }]), /not on any sheet/);
});
