// Brush strokes of masks: kept short, tested for what they cover, cut by an eraser. A mask is {brush: [[x, y], ...], width_px} or {outline: [[x, y], ...]}.
import { insidePolygon, nearest } from "./polyline.js";

const gap = (a, b) => Math.hypot(a[0] - b[0], a[1] - b[1]);

/** Fewest points within `tol` of the drawn way (Douglas and Peucker 1973), both ends kept. */
export function simplify(points, tol) {
  if (points.length < 3) return points.map((p) => [...p]);
  const keep = new Set([0, points.length - 1]);
  const work = [[0, points.length - 1]];
  while (work.length) {
    const [a, b] = work.pop();
    let far = -1;
    let most = tol;
    for (let i = a + 1; i < b; i++) {
      const d = nearest([points[a], points[b]], points[i]).distance;
      if (d > most) [far, most] = [i, d];
    }
    if (far > 0) {
      keep.add(far);
      work.push([a, far], [far, b]);
    }
  }
  return points.filter((_, i) => keep.has(i)).map((p) => [...p]);
}

/** The way with a point at least every `step`, so that it can be cut anywhere. */
export function dense(points, step) {
  const out = [points[0]];
  for (let i = 1; i < points.length; i++) {
    const n = Math.max(1, Math.ceil(gap(points[i - 1], points[i]) / step));
    for (let k = 1; k <= n; k++) out.push([points[i - 1][0] + ((points[i][0] - points[i - 1][0]) * k) / n, points[i - 1][1] + ((points[i][1] - points[i - 1][1]) * k) / n]);
  }
  return out;
}

/** Whether a mask covers a place. */
export function covers(mask, place) {
  if (mask.outline) return insidePolygon(place, mask.outline);
  return nearest(mask.brush, place).distance <= mask.width_px / 2;
}

/** Index of the first mask over a place, or -1. */
export const maskAt = (masks, place) => (masks ?? []).findIndex((m) => covers(m, place));

/** What is left of the masks after an eraser of `width` went along `way`: strokes are cut in pieces, an outline it touches goes as a whole. */
export function erase(masks, way, width) {
  const reach = width / 2;
  return masks.flatMap((mask) => {
    if (mask.outline) return dense(way, Math.max(1, reach / 2)).some((p) => insidePolygon(p, mask.outline)) ? [] : [mask];
    const near = reach + mask.width_px / 2;
    const points = dense(mask.brush, Math.max(1, Math.min(reach, mask.width_px) / 4));
    const stays = points.map((p) => nearest(way, p).distance > near);
    if (stays.every(Boolean)) return [mask];
    const pieces = [];
    let piece = [];
    points.forEach((p, i) => {
      if (stays[i]) piece.push(p);
      else if (piece.length) {
        pieces.push(piece);
        piece = [];
      }
    });
    if (piece.length) pieces.push(piece);
    return pieces.map((p) => ({ ...mask, brush: simplify(p, 0.5).map(([x, y]) => [round2(x), round2(y)]) }));
  });
}

const round2 = (v) => Math.round(v * 100) / 100;

/** The mask a stroke of the brush makes, with few points. */
export function stroke(way, width) {
  return { brush: simplify(way, Math.max(0.5, width / 20)).map(([x, y]) => [round2(x), round2(y)]), width_px: round2(width) };
}

/** What a mask is called in a list: its kind, its size and where it lies, in sheet pixels. */
export function maskWords(mask) {
  const points = mask.brush ?? mask.outline;
  const [x, y] = [0, 1].map((k) => Math.round(points.reduce((a, p) => a + p[k], 0) / points.length));
  if (mask.outline) return `outline at ${x}, ${y}`;
  const long = points.slice(1).reduce((a, p, i) => a + gap(p, points[i]), 0);
  return `${Math.round(mask.width_px)} px wide, ${Math.round(long + mask.width_px)} px long, at ${x}, ${y}`;
}
