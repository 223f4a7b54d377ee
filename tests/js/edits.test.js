// Masks, found lines, guides and locked stretches: geometry and state without a page.
import assert from "node:assert/strict";
import test from "node:test";
import { covers, dense, erase, maskAt, maskWords, simplify, stroke } from "../../web/curvebank_web/static/js/geometry/brush.js";
import { across, hold, meet } from "../../web/curvebank_web/static/js/geometry/lines.js";
import { liveFindings } from "../../web/curvebank_web/static/js/state/derive.js";
import { apply } from "../../web/curvebank_web/static/js/state/doc.js";
import { clicksWanted, flowRange, lockAt, lockStretch, rangeOf } from "../../web/curvebank_web/static/js/state/stretch.js";
import * as carry from "../../web/curvebank_web/static/js/state/carry.js";
import * as words from "../../web/curvebank_web/static/js/state/words.js";
import { nextWidth } from "../../web/curvebank_web/static/js/pages/desk-masks.js";
import { findHandle, moveAction, removeAction, stops } from "../../web/curvebank_web/static/js/pages/desk-handles.js";

const near = (a, b, tol = 1e-6) => assert.ok(Math.abs(a - b) < tol, `${a} is not ${b}`);
const line = (n, f = (x) => x) => Array.from({ length: n }, (_, i) => [i, f(i)]);

test("a stroke keeps its shape with few points", () => {
  const way = line(200, (x) => (x < 100 ? 0 : (x - 100) * 2));
  const few = simplify(way, 0.5);
  assert.deepEqual(few, [[0, 0], [100, 0], [199, 198]]);
  assert.deepEqual(stroke(way, 20), { brush: [[0, 0], [100, 0], [199, 198]], width_px: 20 });
  assert.deepEqual(stroke([[3, 4]], 8), { brush: [[3, 4]], width_px: 8 });
});

test("a mask covers what lies within half its width, an outline what lies inside", () => {
  const brush = { brush: [[0, 0], [100, 0]], width_px: 10 };
  assert.ok(covers(brush, [50, 4.9]) && covers(brush, [-4.9, 0]) && !covers(brush, [50, 5.1]));
  const outline = { outline: [[0, 0], [10, 0], [10, 10]] };
  assert.ok(covers(outline, [8, 2]) && !covers(outline, [2, 8]));
  assert.equal(maskAt([brush, outline], [200, 200]), -1);
  assert.equal(maskAt([brush, outline], [9, 7]), 1);
});

test("an eraser cuts a stroke in two and clears all it went over", () => {
  const masks = [{ brush: [[0, 0], [100, 0]], width_px: 10 }, { brush: [[0, 60], [100, 60]], width_px: 10 }];
  const rest = erase(masks, [[50, -20], [50, 20]], 20);
  assert.equal(rest.length, 3);
  for (let y = -5; y <= 5; y += 1) for (let x = 40; x <= 60; x += 1) assert.equal(maskAt(rest, [x, y]), -1);
  assert.ok(maskAt(rest, [5, 0]) >= 0 && maskAt(rest, [95, 0]) >= 0 && maskAt(rest, [50, 60]) >= 0);
  assert.equal(erase(masks, [[50, 300]], 20).length, 2);
  assert.deepEqual(erase([{ outline: [[0, 0], [10, 0], [10, 10]] }], [[8, 2]], 2), []);
  assert.ok(dense([[0, 0], [10, 0]], 3).length >= 4);
});

test("masks are part of the document, and taken away leave no trace", () => {
  const doc = { recipe: 1, sheet: { file: "a.png" } };
  const one = apply(doc, { type: "masks/set", masks: [{ brush: [[1, 2]], width_px: 8 }] });
  assert.equal(one.sheet.masks.length, 1);
  assert.ok(!("masks" in apply(one, { type: "masks/set", masks: [] }).sheet));
  assert.equal(words.actionLabel({ type: "masks/set", did: "masked" }, doc), "masked");
  assert.match(maskWords(one.sheet.masks[0]), /8 px wide, 8 px long, at 1, 2/);
});

const level = (y0, slope) => ({ points: line(11, (i) => y0 + slope * i * 10).map(([i, y]) => [i * 10, y]), sigma_px: 0.03 });
const upright = (x0, slope) => ({ points: line(11, (i) => x0 + slope * i * 10).map(([i, x]) => [x, i * 10]), sigma_px: 0.04 });

test("found lines meet where both run, to a thousandth", () => {
  const p = meet(level(40, 0.02), upright(60, -0.03), [55, 45]);
  // x = 60 - 0.03 y and y = 40 + 0.02 x
  const y = (40 + 0.02 * 60) / (1 + 0.02 * 0.03);
  near(p[1], y, 1e-3);
  near(p[0], 60 - 0.03 * y, 1e-3);
  assert.equal(across([[0, 0], [10, 5]], 20, 0), null);
  near(across([[0, 0], [10, 5]], 4, 0), 2);
});

test("a mark holds to the nearest crossing, else to a line, else to nothing", () => {
  const lines = { level: [level(40, 0), level(46, 0)], upright: [upright(60, 0)] };
  const crossing = hold(lines, [58, 41], 5);
  assert.equal(crossing.kind, "crossing");
  assert.deepEqual(crossing.at, [60, 40]);
  near(crossing.moved_px, Math.hypot(2, 1));
  near(crossing.sigma_px, 0.05);
  assert.equal(hold(lines, [20, 42], 5).kind, "level line");
  assert.equal(hold(lines, [62, 80], 5).kind, "upright line");
  assert.equal(hold(lines, [20, 80], 5), null);
  assert.equal(words.heldWords({ kind: "crossing", moved_px: 1.26, sigma_px: 0.05 }), "It holds to the crossing found, moved 1.3 px, ± 0.05 px.");
  assert.equal(words.heldWords(undefined), "");
});

const result = { pixels: line(101, (x) => 50 + 0.1 * x), points: line(101, (x) => 10 - x / 20), sigma_px: Array(101).fill(0.04) };

test("a stretch is locked with its own pixels, and a neighbour that overlaps joins it", () => {
  const first = lockStretch({}, result, 30.4, 10.2);
  assert.equal(first.length, 1);
  assert.deepEqual(first[0].pixels, result.pixels.slice(10, 32));
  assert.equal(first[0].sigma_px, 0.04);
  const second = lockStretch({ locked: first }, result, 25, 60);
  assert.equal(second.length, 1);
  assert.deepEqual(second[0].pixels, result.pixels.slice(10, 61));
  assert.equal(lockStretch({ locked: first }, result, 70, 90).length, 2);
  assert.equal(lockStretch({}, result, 5, 6), null);
  assert.deepEqual(rangeOf(first[0], result.pixels), [10, 31]);
  assert.equal(lockAt({ locked: first }, result.pixels, 20), 0);
  assert.equal(lockAt({ locked: first }, result.pixels, 50), -1);
  assert.equal(rangeOf(first[0], result.pixels.map(([x, y]) => [x, y + 40])), null);
  assert.deepEqual(flowRange({ points: result.points }, [10, 20]), [10, 20]);
});

test("how many clicks a line wants depends on what it is", () => {
  assert.deepEqual([{}, { closed: true }, { kind: "hand" }, { kind: "points" }].map(clicksWanted), [2, 3, 6, 1]);
  assert.equal(words.clicksWords(6), "Six clicks or more");
  assert.equal(words.confidence(0.999), "sure, 0.99");
  assert.equal(words.confidence(0.7), "in doubt, 0.70");
  assert.equal(words.confidence(undefined), "");
});

function deskOf(curve, more = {}) {
  const doc = { panels: [], curves: [curve] };
  const item = { id: curve.id, kept: true, curve, pixels: result.pixels, points: result.points, result: { ...result, ...more.result } };
  return { step: "curves", doc, session: { doc }, view: { scale: 1, turn: 0, x: 0, y: 0 }, loupe: null, items: [item], selected: null, openCurve: null, locking: null, ...more.desk };
}

test("a trace is taken hold of anywhere: dragging makes a guide, a locked stretch does not move", () => {
  const curve = { id: "H-1", clicks: [[0, 50], [100, 60]], locked: [{ pixels: result.pixels.slice(60, 80) }] };
  const desk = deskOf(curve);
  const handle = findHandle(desk, { screen: [30, 53.2] });
  assert.equal(handle.kind, "line");
  const action = moveAction(desk, handle, [30, 58]);
  assert.deepEqual(action.change.guides, [[30, 58]]);
  assert.deepEqual(apply(desk.doc, action).curves[0].guides, [[30, 58]]);
  assert.equal(moveAction(desk, findHandle(desk, { screen: [65, 56.5] }), [65, 60]), null);
  assert.equal(findHandle(desk, { screen: [30, 70] }), null);
  assert.equal(findHandle(deskOf(curve, { desk: { openCurve: {} } }), { screen: [30, 53.2] }), null);
});

test("the ring takes a click where it is put, and it joins the clicks in order", () => {
  const desk = deskOf({ id: "H-1", clicks: [[0, 50], [100, 60]] }, { result: { hint_click: [40, 54] } });
  const handle = findHandle(desk, { screen: [44, 60] });
  assert.equal(handle.kind, "hint");
  assert.deepEqual(moveAction(desk, handle, [44, 60]).change.clicks, [[0, 50], [44, 60], [100, 60]]);
  assert.ok(stops(desk).some((s) => s.handle.kind === "hint"));
});

test("the last guide taken away leaves no empty list; two clicks are the least a line keeps", () => {
  const desk = deskOf({ id: "H-1", clicks: [[0, 50], [100, 60]], guides: [[30, 58]] }, { desk: { selected: "H-1" } });
  const gone = removeAction(desk, { kind: "point", part: "guides", index: 0, curve: "H-1", kept: true });
  assert.ok(!("guides" in apply(desk.doc, gone).curves[0]));
  assert.equal(removeAction(desk, { kind: "point", part: "clicks", index: 0, curve: "H-1", kept: true }).type, "curve/remove");
});

test("a mask over a mark or a click, and a doubtful stretch, are findings with their place", () => {
  const axes = { flow: { quantity: "flow", unit: "m3/h", marks: [{ at: [0, 100], value: 0 }, { at: [100, 100], value: 50 }] }, head: { quantity: "head", unit: "m", marks: [{ at: [0, 0], value: 20 }, { at: [0, 100], value: 0 }] } };
  const curve = { id: "H-1", panel: "p", x: "flow", y: "head", quantity: "head", diameter_mm: 300, clicks: [[10, 50], [90, 60]] };
  const doc = { sheet: { masks: [{ brush: [[100, 100]], width_px: 10 }, { brush: [[90, 58]], width_px: 6 }] }, panels: [{ id: "p", axes }], curves: [curve] };
  const answer = { flagged: true, confidence: 0.6, warnings: [], stretches: [[10, 20, "two lines run together here"]] };
  const found = liveFindings(doc, () => ({}), () => answer, words);
  assert.deepEqual(found.find((f) => f.masked && f.subject === "axis:p/flow").where.at, [100, 100]);
  assert.match(found.find((f) => f.masked && f.subject === "curve:H-1").text, /second click of Ø 300/);
  const doubt = found.find((f) => f.doubt);
  assert.deepEqual(doubt.where.stretch, [10, 20]);
  assert.equal(doubt.text, "Ø 300: two lines run together here.");
  const plain = liveFindings(doc, () => ({}), () => ({ ...answer, stretches: [] }), words).find((f) => f.doubt);
  assert.match(plain.text, /in doubt, 0.60/);
});

test("what a better scan changes is said in words, and the curve that wants a look comes first", () => {
  const base = { quantity: "head", unit: "m", error_before: null, error_now: null, flags_gone: [], flags_new: [], largest: 0.0281, mean: 0.002, largest_u: 0.2, mean_u: 0.01 };
  const moved = { ...base, id: "b", largest_u: 7 };
  const doubtful = { ...base, id: "c", flags_new: ["Two lines run together."] };
  const lost = { ...base, id: "d", error_now: { message: "No line was found." }, largest: null, largest_u: null };
  assert.equal(carry.rowWords({ ...base, id: "a" }), "It stays within its ±.");
  assert.match(carry.rowWords(moved), /more than its ±/);
  assert.equal(carry.rowWords({ ...base, flags_gone: ["x"] }), "One doubt is gone.");
  assert.equal(carry.rowWords(lost), "Not read on the new scan: No line was found.");
  assert.equal(carry.rowWords({ ...base, error_before: { message: "x" } }), "Read now; it was not read before.");
  assert.deepEqual([base, moved, doubtful, lost].map(carry.wantsLook), [false, true, true, true]);
  assert.equal(carry.firstToShow([base, moved, doubtful, lost]).id, "d");
  assert.equal(carry.firstToShow([base, moved]).id, "b");
  assert.equal(carry.amount(0.0281, base), "0.028 m");
  assert.equal(carry.amount(0.0123, { quantity: "efficiency", unit: "1" }), "1.23 %");
  assert.equal(carry.amount(null, base), "?");
  assert.deepEqual([0.2, 0.01, 12.4, null].map(carry.inU), ["0.2 u", "under 0.1 u", "12 u", "?"]);
  assert.equal(carry.registrationWords({ matches: 214, residual_px: 0.213, coverage: 0.97, scale: 2, turn_deg: 0.31 }), "The same paper: 214 places agree to 0.21 px over 97 % of it, 2 times as fine, turned by 0.3°.");
  assert.equal(carry.nameOf({ id: "x", quantity: "head" }, { curves: [{ id: "x", diameter_mm: 320 }] }), "head Ø 320");
});

test("the brush steps through its widths", () => {
  assert.equal(nextWidth(20, true), 28);
  assert.equal(nextWidth(20, false), 14);
  assert.equal(nextWidth(25, true), 28);
  assert.equal(nextWidth(4, false), 4);
});

test("what the calibration says is a finding at the place its sentence names", () => {
  const panel = { id: "p", axes: { flow: { quantity: "flow", unit: "m3/h", marks: [{ at: [0, 100], value: 0 }, { at: [100, 100], value: 50 }] } } };
  const warnings = [
    { code: "grid-one-off", message: "The flow lines can be read in two ways. The line at (412, 88) then is 40 or 50." },
    { code: "calibration-mistyped", message: "said by the suspect mark" },
    { code: "scales-contradict", message: "The two flow scales differ by 1.2009" },
  ];
  const found = liveFindings({ panels: [panel], curves: [] }, () => ({ warnings, suspects: [] }), () => null, words);
  assert.equal(found.length, 2);
  assert.deepEqual([found[0].where.at, found[0].settle], [[412, 88], [412, 88]]);
  assert.equal(found[1].text, "The two flow scales differ by 1.2009.");
  assert.equal(found[1].settle, undefined);
});
