// Scales and their ticks. A scale maps a value to a screen coordinate; log scales have base 10.

export function linear(v0, v1, p0, p1) {
  const k = (p1 - p0) / (v1 - v0);
  return { kind: "linear", v0, v1, p0, p1, map: (v) => p0 + (v - v0) * k, invert: (p) => v0 + (p - p0) / k };
}

export function log10(v0, v1, p0, p1) {
  const inner = linear(Math.log10(v0), Math.log10(v1), p0, p1);
  return { kind: "log10", v0, v1, p0, p1, map: (v) => inner.map(Math.log10(v)), invert: (p) => 10 ** inner.invert(p) };
}

/** A round step (1, 2 or 5 times a power of ten) so that `span` holds at most `most` of them. */
export function roundStep(span, most) {
  const raw = span / Math.max(1, most);
  const e = 10 ** Math.floor(Math.log10(raw));
  for (const m of [1, 2, 5, 10]) if (m * e >= raw * (1 - 1e-9)) return m * e;
  return 10 * e;
}

export function linearTicks(lo, hi, most = 8, step = roundStep(hi - lo, most)) {
  if (!(hi > lo)) return [];
  const ticks = [];
  for (let k = Math.ceil(lo / step - 1e-6); k <= Math.floor(hi / step + 1e-6); k++) ticks.push(Number((k * step).toPrecision(12)));
  return ticks;
}

export function logTicks(lo, hi, most = 8) {
  if (!(lo > 0 && hi > lo)) return [];
  for (const digits of [[1, 2, 3, 4, 5, 6, 7, 8, 9], [1, 2, 3, 5, 7], [1, 2, 3, 5], [1, 2, 5], [1, 3], [1]]) {
    const ticks = [];
    for (let e = Math.floor(Math.log10(lo)); e <= Math.ceil(Math.log10(hi)); e++) {
      for (const d of digits) {
        const v = Number((d * 10 ** e).toPrecision(12));
        if (v >= lo * (1 - 1e-9) && v <= hi * (1 + 1e-9)) ticks.push(v);
      }
    }
    if (ticks.length <= most) return ticks;
  }
  return [];
}

export function ticks(kind, lo, hi, most) {
  return kind === "log10" ? logTicks(lo, hi, most) : linearTicks(lo, hi, most);
}

const NICE = [1, 2, 2.5, 4, 5, 8];
const nice = (step) => NICE.some((m) => Math.abs(step / (m * 10 ** Math.floor(Math.log10(step) + 1e-9)) - 1) < 1e-6);

/** One division of several linear ranges [[lo, hi], ...] that gives each of them round steps from its low end; null where there is none. */
export function commonTicks(ranges, most = 9) {
  for (let n = most; n >= 4; n--) {
    const steps = ranges.map(([lo, hi]) => (hi - lo) / n);
    const round = (v, step) => Math.abs(v / step - Math.round(v / step)) < 1e-6;
    if (steps.every(nice) && ranges.every(([lo], i) => round(lo, steps[i]))) return ranges.map(([lo], i) => Array.from({ length: n + 1 }, (_, k) => Number((lo + k * steps[i]).toPrecision(10))));
  }
  return null;
}

/** Written form of ticks: the decimals that the closest pair needs, a thin space between thousands above 9999. */
export function tickText(values) {
  const gaps = values.slice(1).map((v, i) => Math.abs(v - values[i]));
  const gap = Math.min(...gaps, Infinity);
  const d = Number.isFinite(gap) && gap > 0 ? Math.max(0, Math.min(6, -Math.floor(Math.log10(gap) + 1e-9))) : 0;
  return values.map((v) => {
    const decimals = values.length > 1 && values.every((x) => Math.abs(x * 10 ** (d - 1) - Math.round(x * 10 ** (d - 1))) < 1e-6) && d > 0 ? d - 1 : d;
    const t = v.toFixed(decimals).replace("-", "−");
    return Math.abs(v) >= 10000 ? t.replace(/\B(?=(\d{3})+(?!\d))/g, "\u2009") : t;
  });
}

/** The nearest value that the step of the known values makes likely (values offered again). */
export function nearestRound(value, known = []) {
  const sorted = [...new Set(known)].sort((a, b) => a - b);
  const gaps = sorted.slice(1).map((v, i) => v - sorted[i]).filter((g) => g > 0);
  const step = gaps.length ? roundStep(Math.min(...gaps), 2) / 2 : roundStep(Math.max(Math.abs(value), 1e-9), 20);
  return Number((Math.round(value / step) * step).toPrecision(10));
}
