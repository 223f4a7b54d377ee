// Stretches of a trace: doubtful ones to look at, locked ones that stay, and how many clicks a line wants.
import { nearest } from "../geometry/polyline.js";

/** Clicks that a line needs before it can be traced. */
export function clicksWanted(curve) {
  if (curve.kind === "points") return 1;
  if (curve.kind === "hand") return curve.closed ? 3 : 6;
  return curve.closed ? 3 : 2;
}

/** The flow range of a stretch in the printed unit, from low to high: [lo, hi] or null. */
export function flowRange(item, [i0, i1]) {
  const part = item.points.slice(Math.max(0, Math.floor(i0)), Math.ceil(i1) + 1).map((p) => p[0]).filter(Number.isFinite);
  return part.length ? [Math.min(...part), Math.max(...part)] : null;
}

const middle = (list) => [...list].sort((a, b) => a - b)[Math.floor(list.length / 2)];

/** The curve with the trace's pixels from index i0 to i1 locked; a stretch that overlaps an older lock takes it in. */
export function lockStretch(curve, result, i0, i1) {
  const [a, b] = [Math.max(0, Math.floor(Math.min(i0, i1))), Math.min(result.pixels.length - 1, Math.ceil(Math.max(i0, i1)))];
  if (b - a < 2) return null;
  const ranges = [[a, b]];
  const rest = [];
  for (const lock of curve.locked ?? []) {
    const range = rangeOf(lock, result.pixels);
    if (range && range[0] <= ranges[0][1] && range[1] >= ranges[0][0]) ranges[0] = [Math.min(range[0], ranges[0][0]), Math.max(range[1], ranges[0][1])];
    else rest.push(lock);
  }
  const [from, to] = ranges[0];
  const sigma = middle((result.sigma_px ?? []).slice(from, to + 1));
  return [...rest, { pixels: result.pixels.slice(from, to + 1), ...(sigma > 0 ? { sigma_px: Math.round(sigma * 1e4) / 1e4 } : {}) }];
}

/** Indices of a trace that a locked stretch covers, or null where the trace is elsewhere now. */
export function rangeOf(lock, pixels) {
  if (!pixels.length) return null;
  const ends = [lock.pixels[0], lock.pixels[lock.pixels.length - 1]].map((p) => nearest(pixels, p));
  if (ends.some((e) => e.distance > 3)) return null;
  const [a, b] = ends.map((e) => Math.round(e.at)).sort((x, y) => x - y);
  return [a, b];
}

/** Index of the locked stretch that a trace index lies in, or -1. */
export function lockAt(curve, pixels, at) {
  return (curve.locked ?? []).findIndex((lock) => {
    const range = rangeOf(lock, pixels);
    return range && at >= range[0] - 0.5 && at <= range[1] + 0.5;
  });
}
