// The printed lines that were found, as polylines in sheet pixels: what a mark holds to, and the crossing of two of them.
// lines: {level: [{points: [[x, y], ...], sigma_px}], upright: [...]}; level ones run left to right, upright ones downwards.
import { nearest } from "./polyline.js";

/** Where a level and an upright line meet near `from`, or null: each line is straight between two of its points. */
export function meet(level, upright, from) {
  let p = from;
  for (let i = 0; i < 4; i++) {
    const y = across(level.points, p[0], 0);
    const x = y === null ? null : across(upright.points, y, 1);
    if (x === null) return null;
    p = [x, y];
  }
  const y = across(level.points, p[0], 0);
  return y === null || Math.hypot(p[0] - from[0], y - from[1]) > 400 ? null : [p[0], y];
}

/** The other coordinate of a line where its running coordinate (0: x, 1: y) is `at`; null beyond its ends. */
export function across(points, at, run) {
  const last = points.length - 1;
  if (last < 1 || at < points[0][run] - 0.5 || at > points[last][run] + 0.5) return null;
  let [lo, hi] = [0, last];
  while (hi - lo > 1) {
    const mid = (lo + hi) >> 1;
    if (points[mid][run] <= at) lo = mid;
    else hi = mid;
  }
  const [a, b] = [points[lo], points[hi]];
  const t = b[run] === a[run] ? 0 : (at - a[run]) / (b[run] - a[run]);
  return a[1 - run] + t * (b[1 - run] - a[1 - run]);
}

const close = (list, at, run, reach) => list
  .map((line) => ({ line, hit: nearest(line.points, at) }))
  .filter(({ hit }) => hit && hit.distance <= reach)
  .sort((a, b) => a.hit.distance - b.hit.distance);

/**
 * What a mark put down at `at` holds to within `reach` sheet px: the nearest crossing of two found lines, else the nearest line.
 * Gives {at, kind: "crossing" | "level line" | "upright line", moved_px, sigma_px} or null.
 */
export function hold(lines, at, reach) {
  const level = close(lines.level, at, 0, reach);
  const upright = close(lines.upright, at, 1, reach);
  const give = (place, kind, ...held) => ({ at: place, kind, moved_px: Math.hypot(place[0] - at[0], place[1] - at[1]), sigma_px: Math.hypot(...held.map((l) => l.sigma_px ?? 0)) });
  let best = null;
  for (const { line: l } of level.slice(0, 4)) {
    for (const { line: u } of upright.slice(0, 4)) {
      const place = meet(l, u, at);
      if (!place) continue;
      const got = give(place, "crossing", l, u);
      if (got.moved_px <= 1.5 * reach && (!best || got.moved_px < best.moved_px)) best = got;
    }
  }
  if (best) return best;
  if (level.length && (!upright.length || level[0].hit.distance <= upright[0].hit.distance)) return give(level[0].hit.point, "level line", level[0].line);
  return upright.length ? give(upright[0].hit.point, "upright line", upright[0].line) : null;
}
