// The token file: contrast by WCAG 2.x relative luminance, the same tokens in both dark blocks, modules small enough.
import assert from "node:assert/strict";
import { readdirSync, readFileSync } from "node:fs";
import { dirname, join } from "node:path";
import test from "node:test";
import { fileURLToPath } from "node:url";

const STATIC = join(dirname(fileURLToPath(import.meta.url)), "../../web/curvebank_web/static");
const css = readFileSync(join(STATIC, "css/tokens.css"), "utf8");

function tokens(block) {
  return Object.fromEntries([...block.matchAll(/--([a-z0-9-]+):\s*(#[0-9A-Fa-f]{6})/g)].map((m) => [m[1], m[2]]));
}

const light = tokens(css.slice(0, css.indexOf("@media")));
const system = tokens(css.slice(css.indexOf("prefers-color-scheme"), css.indexOf(':root[data-theme="dark"]')));
const dark = tokens(css.slice(css.indexOf(':root[data-theme="dark"]'), css.indexOf("prefers-contrast")));

const channels = (hex) => [1, 3, 5].map((i) => parseInt(hex.slice(i, i + 2), 16) / 255).map((c) => (c <= 0.04045 ? c / 12.92 : ((c + 0.055) / 1.055) ** 2.4));
const luminance = (hex) => channels(hex).reduce((a, c, i) => a + c * [0.2126, 0.7152, 0.0722][i], 0);
const contrast = (a, b) => {
  const [x, y] = [luminance(a), luminance(b)].sort((p, q) => q - p);
  return (x + 0.05) / (y + 0.05);
};

test("the contrast formula gives the known ends", () => {
  assert.equal(Number(contrast("#000000", "#FFFFFF").toFixed(2)), 21);
  assert.equal(Number(contrast("#767676", "#FFFFFF").toFixed(2)), 4.54);
});

for (const [name, t] of [["light", light], ["dark", dark]]) {
  test(`${name}: text reaches 4.5 and lines and control edges 3 on the grounds they stand on`, () => {
    for (const ground of ["board", "sheet", "blank"]) {
      for (const text of ["ink", "ink-2", "trace", "finding", "yours"]) assert.ok(contrast(t[text], t[ground]) >= 4.5, `${text} on ${ground}`);
      assert.ok(contrast(t.edge, t[ground]) >= 3, `edge on ${ground}`);
    }
    assert.ok(contrast(t.construct, t.sheet) >= 3);
  });
}

test("dark by the system and dark by choice are the same", () => assert.deepEqual(system, dark));

/** CIE L*a*b* (D65) and CIEDE2000 (Sharma, Wu, Dalal 2005, doi:10.1002/col.20070), kL = kC = kH = 1. */
function lab([r, g, b]) {
  const xyz = [0.4124564 * r + 0.3575761 * g + 0.1804375 * b, 0.2126729 * r + 0.7151522 * g + 0.072175 * b, 0.0193339 * r + 0.119192 * g + 0.9503041 * b];
  const f = xyz.map((v, i) => v / [0.95047, 1, 1.08883][i]).map((v) => (v > 216 / 24389 ? Math.cbrt(v) : ((24389 / 27) * v + 16) / 116));
  return [116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])];
}

export function ciede2000([L1, a1, b1], [L2, a2, b2]) {
  const rad = Math.PI / 180;
  const Cm = (Math.hypot(a1, b1) + Math.hypot(a2, b2)) / 2;
  const G = 0.5 * (1 - Math.sqrt(Cm ** 7 / (Cm ** 7 + 25 ** 7)));
  const [p1, p2] = [(1 + G) * a1, (1 + G) * a2];
  const [C1, C2] = [Math.hypot(p1, b1), Math.hypot(p2, b2)];
  const hue = (b, a) => (a === 0 && b === 0 ? 0 : (Math.atan2(b, a) / rad + 360) % 360);
  const [h1, h2] = [hue(b1, p1), hue(b2, p2)];
  let dh = h2 - h1;
  if (C1 * C2 === 0) dh = 0;
  else if (dh > 180) dh -= 360;
  else if (dh < -180) dh += 360;
  const dH = 2 * Math.sqrt(C1 * C2) * Math.sin((dh / 2) * rad);
  const [Lm, Cp] = [(L1 + L2) / 2, (C1 + C2) / 2];
  let hm = (h1 + h2) / 2;
  if (C1 * C2 === 0) hm = h1 + h2;
  else if (Math.abs(h1 - h2) > 180) hm += h1 + h2 < 360 ? 180 : -180;
  const T = 1 - 0.17 * Math.cos((hm - 30) * rad) + 0.24 * Math.cos(2 * hm * rad) + 0.32 * Math.cos((3 * hm + 6) * rad) - 0.2 * Math.cos((4 * hm - 63) * rad);
  const SL = 1 + (0.015 * (Lm - 50) ** 2) / Math.sqrt(20 + (Lm - 50) ** 2);
  const SC = 1 + 0.045 * Cp;
  const SH = 1 + 0.015 * Cp * T;
  const RT = -2 * Math.sqrt(Cp ** 7 / (Cp ** 7 + 25 ** 7)) * Math.sin(60 * Math.exp(-(((hm - 275) / 25) ** 2)) * rad);
  return Math.sqrt(((L2 - L1) / SL) ** 2 + ((C2 - C1) / SC) ** 2 + (dH / SH) ** 2 + RT * ((C2 - C1) / SC) * (dH / SH));
}

test("the colour difference agrees with a published pair (Sharma 2005, table 1, pair 1; from memory)", () => {
  assert.ok(Math.abs(ciede2000([50, 2.6772, -79.7751], [50, 0, -82.7485]) - 2.0425) < 1e-4);
});

// Machado, Oliveira, Fernandes 2009 (doi:10.1109/TVCG.2009.113), severity 1, matrices from memory; on linear RGB.
const SIGHT = {
  normal: [1, 0, 0, 0, 1, 0, 0, 0, 1],
  protanopia: [0.152286, 1.052583, -0.204868, 0.114503, 0.786281, 0.099216, -0.003882, -0.048116, 1.051998],
  deuteranopia: [0.367322, 0.860646, -0.227968, 0.280085, 0.672501, 0.047413, -0.01182, 0.04294, 0.968881],
  tritanopia: [1.255528, -0.076749, -0.178779, -0.078411, 0.930809, 0.147602, 0.004733, 0.691367, 0.3039],
};
const seen = (m, c) => [0, 1, 2].map((i) => Math.min(1, Math.max(0, m[3 * i] * c[0] + m[3 * i + 1] * c[1] + m[3 * i + 2] * c[2])));

test("the five drawing colours stay apart for every kind of colour sight", () => {
  for (const [theme, t] of [["light", light], ["dark", dark]]) {
    for (const [sight, m] of Object.entries(SIGHT)) {
      const names = ["ink", "trace", "construct", "finding", "yours"];
      names.forEach((a, i) => names.slice(i + 1).forEach((b) => {
        const d = ciede2000(lab(seen(m, channels(t[a]))), lab(seen(m, channels(t[b]))));
        assert.ok(d > 15, `${theme}, ${sight}: ${a} and ${b} differ by ${d.toFixed(1)}`);
      }));
    }
  }
});

test("no module is longer than 500 lines, and the pure folders know no page", () => {
  for (const folder of readdirSync(join(STATIC, "js"), { withFileTypes: true }).filter((d) => d.isDirectory()).map((d) => d.name)) {
    for (const name of readdirSync(join(STATIC, "js", folder))) {
      const text = readFileSync(join(STATIC, "js", folder, name), "utf8");
      assert.ok(text.split("\n").length <= 500, `${folder}/${name}`);
      if (["geometry", "state"].includes(folder)) assert.doesNotMatch(text, /\b(document\.(get|create|query)|window\.|localStorage\.)/, `${folder}/${name}`);
      if (folder !== "net") assert.doesNotMatch(text, /\bfetch\(|XMLHttpRequest/, `${folder}/${name}`);
      assert.doesNotMatch(text, /innerHTML/, `${folder}/${name}`);
    }
  }
});
