import { settleLabels } from "../../web/curvebank_web/static/js/view/chart.js";
// Geometry modules: round trips, known figures, and small hand-made cases whose answer can be seen.
import assert from "node:assert/strict";
import test from "node:test";
import { fitBox, nudge, panBy, toScreen, toSheet, zoomAt } from "../../web/curvebank_web/static/js/geometry/affine.js";
import { apply, fit, invert, multiply, solve } from "../../web/curvebank_web/static/js/geometry/homography.js";
import { spread, weights } from "../../web/curvebank_web/static/js/geometry/labels.js";
import { decimalsFor, parseNumber, plain, withDoubt } from "../../web/curvebank_web/static/js/geometry/number.js";
import { fromMarks, fromResult } from "../../web/curvebank_web/static/js/geometry/panelmap.js";
import { atIndex, crossings, endStrokes, insidePolygon, nearest, path, strokes, thin } from "../../web/curvebank_web/static/js/geometry/polyline.js";
import { commonTicks, linear, linearTicks, log10, logTicks, nearestRound, roundStep, tickText } from "../../web/curvebank_web/static/js/geometry/scale.js";
import { dip, snap } from "../../web/curvebank_web/static/js/geometry/snap.js";
import { factor, UNITS } from "../../web/curvebank_web/static/js/geometry/units.js";

const near = (a, b, tol = 1e-9) => assert.ok(Math.abs(a - b) <= tol, `${a} is not ${b} within ${tol}`);
const nearPoint = (a, b, tol = 1e-9) => a.forEach((v, i) => near(v, b[i], tol));

test("a view and its inverse give back the point, also turned", () => {
  const view = { scale: 0.37, turn: -0.021, x: 91.5, y: -14.25 };
  for (const p of [[0, 0], [1654, 2339], [12.5, 7.75]]) nearPoint(toSheet(view, toScreen(view, p)), p);
});

test("zooming at the pointer leaves the pixel under it where it is", () => {
  const view = { scale: 0.5, turn: 0.3, x: 10, y: 20 };
  const at = [333, 222];
  const before = toSheet(view, at);
  nearPoint(toSheet(zoomAt(view, 9, at), at), before);
  assert.equal(zoomAt(view, 1e9, at).scale, 40);
});

test("panning moves the picture by the same amount everywhere", () => {
  const view = { scale: 2, turn: 0.1, x: 0, y: 0 };
  const [a, b] = [toScreen(view, [5, 6]), toScreen(panBy(view, 3, -4), [5, 6])];
  nearPoint(b, [a[0] + 3, a[1] - 4]);
});

test("a fitted box lies inside the margins and touches two of them", () => {
  const view = fitBox([[100, 200], [500, 200], [500, 1000], [100, 1000]], 640, 574, 0.01, { left: 60, right: 60, top: 14, bottom: 44 });
  const pts = [[100, 200], [500, 200], [500, 1000], [100, 1000]].map((p) => toScreen(view, p));
  const ys = pts.map((p) => p[1]);
  near(Math.min(...ys), 14, 1e-6);
  near(Math.max(...ys), 530, 1e-6);
});

test("a nudge goes along the screen, not along a turned sheet", () => {
  const view = { scale: 3, turn: 0.25, x: 7, y: 9 };
  const [a, b] = [toScreen(view, [50, 60]), toScreen(view, nudge(view, [50, 60], 0.1, 0))];
  near(b[0] - a[0], 0.3);
  near(b[1] - a[1], 0);
});

test("a homography is found again from its own points, and inverted", () => {
  const H = [1.2, 0.1, 30, -0.05, 0.9, 12, 1e-4, -2e-5, 1];
  const from = [[0, 0], [800, 0], [800, 600], [0, 600], [400, 300], [123, 456]];
  const got = fit(from, from.map((p) => apply(H, p)));
  for (const p of [[50, 70], [777, 555]]) {
    nearPoint(apply(got, p), apply(H, p), 1e-6);
    nearPoint(apply(invert(got), apply(got, p)), p, 1e-6);
  }
  const one = multiply(H, invert(H));
  near(one[1], 0, 1e-12);
});

test("points on a line carry no map, and a singular system has no answer", () => {
  assert.equal(fit([[0, 0], [1, 1], [2, 2], [3, 3]], [[0, 0], [1, 0], [2, 0], [3, 0]]), null);
  assert.equal(solve([[1, 2], [2, 4]], [1, 2]), null);
});

const straight = {
  axes: {
    flow: { quantity: "flow", unit: "m3/h", scale: "linear", marks: [{ at: [100, 900], value: 0 }, { at: [500, 904], value: 200 }] },
    head: { quantity: "head", unit: "m", scale: "linear", marks: [{ at: [100, 900], value: 0 }, { at: [92, 100], value: 80 }] },
  },
};

test("marks alone give the affine map of a skewed panel", () => {
  const map = fromMarks(straight, "flow", "head");
  nearPoint(map.toValues([100, 900]), [0, 0], 1e-9);
  nearPoint(map.toValues([500, 904]), [200, 0], 1e-9);
  nearPoint(map.toValues([92, 100]), [0, 80], 1e-9);
  nearPoint(map.toPixel([200, 80]), [492, 104], 1e-9);
  near(map.turnAt([100, 900]), Math.atan2(4, 400), 1e-9);
});

test("a logarithmic axis is straight in its logarithm; one mark gives no map", () => {
  const panel = structuredClone(straight);
  panel.axes.head = { quantity: "head", unit: "m", scale: "log10", marks: [{ at: [100, 900], value: 1 }, { at: [100, 100], value: 100 }] };
  const map = fromMarks(panel, "flow", "head");
  near(map.toValues([100, 500])[1], 10, 1e-9);
  panel.axes.head.marks.pop();
  assert.equal(fromMarks(panel, "flow", "head"), null);
});

test("the server's 9 x 9 grid in canonical units comes back in the printed unit", () => {
  const panel = { axes: { flow: { quantity: "flow", unit: "l/s", scale: "linear", marks: [] }, head: { quantity: "head", unit: "ft", scale: "linear", marks: [] } } };
  const pixels = [];
  const values = { flow: [], head: [] };
  for (let j = 0; j < 9; j++) {
    for (let i = 0; i < 9; i++) {
      pixels.push([100 + 50 * i, 800 - 60 * j]);
      values.flow.push(3.6 * 10 * i); // 10 l/s a step
      values.head.push(0.3048 * 5 * j); // 5 ft a step
    }
  }
  const map = fromResult(panel, { map: { pixels, values } }, "flow", "head");
  nearPoint(map.toValues([300, 560]), [40, 20], 1e-6);
  assert.equal(fromResult(panel, { map: null }, "flow", "head"), null);
});

test("scales map both ways; ticks are round and written with the digits they need", () => {
  const x = linear(0, 350, 44, 538);
  near(x.invert(x.map(123.4)), 123.4);
  const y = log10(1, 1000, 500, 0);
  near(y.map(10), 1000 / 3, 1e-9);
  assert.deepEqual(linearTicks(0, 350, 8), [0, 50, 100, 150, 200, 250, 300, 350]);
  assert.equal(roundStep(1500, 8), 200);
  assert.deepEqual(logTicks(1, 100, 4), [1, 10, 100]);
  assert.deepEqual(logTicks(60, 400, 8), [60, 70, 80, 90, 100, 200, 300, 400]);
  assert.deepEqual(tickText([0, 0.5, 1]), ["0.0", "0.5", "1.0"]);
  assert.deepEqual(tickText([0, 5000, 10000]), ["0", "5000", "10\u2009000"]);
  assert.deepEqual(tickText([-2, 0, 2]), ["−2", "0", "2"]);
});

test("a value is offered rounded as the known ones are", () => {
  assert.equal(nearestRound(99.7, [0, 50]), 100);
  assert.equal(nearestRound(0.396, [0, 0.2]), 0.4);
});

test("numbers as people type them", () => {
  for (const [text, value] of [["12.5", 12.5], ["12,5", 12.5], ["12 1/2", 12.5], ["1 450", 1450], ["-3", -3], ["−3", -3], ["1e3", 1000], ["3/4\"", 0.75]]) assert.equal(parseNumber(text).value, value, text);
  assert.equal(parseNumber("").value, null);
  assert.match(parseNumber("12o").error, /“12o” is not a number\. Did you mean 120\?/);
  assert.match(parseNumber("1,450").error, /can mean 1\.450 or 1450/);
  assert.match(parseNumber("abc").error, /Type digits/);
});

test("the uncertainty decides the digits", () => {
  assert.deepEqual(withDoubt(42.918, 0.19), { value: "42.92", u: "0.19" });
  assert.deepEqual(withDoubt(412.3, 17), { value: "412", u: "17" });
  assert.deepEqual(withDoubt(42.918, 0.4), { value: "42.9", u: "0.4" });
  assert.equal(decimalsFor(0), 2);
  assert.equal(plain(1.5e-9), "0");
  assert.equal(plain(-2), "−2");
});

test("a line is crossed where it can be seen to be crossed; a loop twice", () => {
  const line = [[0, 50], [10, 40], [20, 20]];
  assert.deepEqual(crossings(line, 5).map((c) => c.y), [45]);
  assert.deepEqual(crossings(line, 20).map((c) => c.y), [20]);
  assert.deepEqual(crossings(line, 25), []);
  assert.deepEqual(crossings([[0, 0], [2, 2], [0, 4]], 1).map((c) => c.y), [1, 3]);
  assert.equal(atIndex([1, 2, 4], 1.5), 3);
  const hit = nearest(line, [10, 43]);
  assert.ok(hit.distance < 3);
});

test("thinning keeps the ends; strokes stand across the line", () => {
  const line = Array.from({ length: 101 }, (_, i) => [i, 0]);
  const few = thin(line, 10);
  assert.deepEqual(few[0], [0, 0]);
  assert.deepEqual(few.at(-1), [100, 0]);
  assert.ok(few.length < 13);
  const across = strokes(line, 20, 40, { every: 5, half: 7, lean: 0 });
  assert.equal(across.length, 5);
  near(across[0][0][1], -7);
  assert.equal(endStrokes(line).length, 2);
  assert.equal(path([[0, 0], [NaN, 1], [2, 2]]), "M0.0 0.0M2.0 2.0");
  assert.equal(insidePolygon([5, 5], [[0, 0], [10, 0], [10, 10], [0, 10]]), true);
  assert.equal(insidePolygon([15, 5], [[0, 0], [10, 0], [10, 10], [0, 10]]), false);
});

test("labels are pushed apart, keep their order and stay inside", () => {
  const placed = spread([100, 104, 106, 300], 36, 60, 500);
  for (let i = 1; i < placed.length; i++) assert.ok(placed[i] - placed[i - 1] >= 36 - 1e-9);
  near(placed[3], 300);
  const low = spread([495, 498], 36, 60, 500);
  assert.ok(low[1] <= 500 + 1e-9);
  assert.deepEqual(weights(3), [2.3, 1.9, 1.6]);
  assert.equal(weights(7)[0], 2.3);
  assert.equal(weights(7)[6], 1.1);
});

test("the printed crossing near a click is found, and a blank patch holds nothing", () => {
  const [width, height] = [41, 41];
  const grey = new Float64Array(width * height).fill(235);
  for (let i = 0; i < 41; i++) {
    grey[i * width + 24] = 60;
    grey[17 * width + i] = 60;
  }
  const got = snap({ width, height, grey }, [20, 20], 8);
  assert.equal(got.kind, "crossing");
  nearPoint(got.at, [24, 17], 0.05);
  assert.equal(snap({ width, height, grey: new Float64Array(width * height).fill(235) }, [20, 20], 8), null);
  assert.equal(dip([200, 200, 200, 200, 200, 200], 3, 2), null);
});

test("the line under the hand goes before a stronger one at the edge of the reach, on a blueprint too", () => {
  const [width, height] = [41, 41];
  const paper = (ground, faint, strong) => {
    const grey = new Float64Array(width * height).fill(ground);
    for (let i = 0; i < 41; i++) {
      grey[i * width + 21] = faint;
      grey[i * width + 29] = strong;
    }
    return { width, height, grey };
  };
  nearPoint(snap(paper(235, 150, 60), [20, 20], 12).at, [21, 20], 0.05);
  nearPoint(snap(paper(70, 150, 230), [20, 20], 12).at, [21, 20], 0.05);
});

test("units agree with their definitions (NIST SP 811, appendix B)", () => {
  near(UNITS.flow["gal/min(US)"], 3.785411784e-3 * 60, 1e-12);
  near(UNITS.flow["ft3/s"], 0.3048 ** 3 * 3600, 1e-9);
  near(factor({ quantity: "head", unit: "bar", density_kgm3: 1000 }), 10.197162, 1e-6);
  assert.ok(Number.isNaN(factor({ quantity: "head", unit: "bar" })));
  assert.equal(factor({ quantity: "power", unit: "kW", multiplier: 100 }), 100);
});

test("two scales share one division where both come out round", () => {
  assert.deepEqual(commonTicks([[0, 64], [0, 160]], 9), [[0, 8, 16, 24, 32, 40, 48, 56, 64], [0, 20, 40, 60, 80, 100, 120, 140, 160]]);
  assert.equal(commonTicks([[0, 64], [0, 97]], 9), null);
});

test("labels on one another settle whatever the last digits of their places", () => {
  let odd = 0;
  for (let k = 0; k < 400; k++) {
    const y = 1.1 + k * 0.7137;
    odd += y + 14 - y < 14;
    const [a, b] = settleLabels([{ x: 0, w: 40, y }, { x: 0, w: 40, y: y + 0.1 }]);
    assert.ok(b.y - a.y > 13.99);
  }
  assert.ok(odd > 0, "places whose sum rounds down are among them");
});
