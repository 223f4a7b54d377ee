// Measures on polylines [[x, y], ...]; nothing here knows pixels from values.

/** Values of y where the line crosses x (a loop may cross more than once). */
export function crossings(points, x) {
  const hits = [];
  for (let i = 0; i + 1 < points.length; i++) {
    const [x0, y0] = points[i];
    const [x1, y1] = points[i + 1];
    if ((x0 <= x && x < x1) || (x1 <= x && x < x0)) {
      const t = (x - x0) / (x1 - x0);
      hits.push({ y: y0 + t * (y1 - y0), at: i + t });
    }
  }
  const last = points[points.length - 1];
  if (!hits.length && last && last[0] === x) hits.push({ y: last[1], at: points.length - 1 });
  return hits;
}

/** Linear interpolation in a plain list at a fractional index. */
export function atIndex(list, index) {
  const i = Math.max(0, Math.min(list.length - 2, Math.floor(index)));
  const t = index - i;
  if (list.length < 2) return list[0];
  const a = list[i];
  const b = list[i + 1];
  return Array.isArray(a) ? a.map((v, k) => v + t * (b[k] - v)) : a + t * (b - a);
}

/** Nearest point of the line: {at (fractional index), point, distance}. */
export function nearest(points, [x, y]) {
  let best = null;
  for (let i = 0; i < points.length; i++) {
    const [x0, y0] = points[i];
    const [x1, y1] = points[Math.min(i + 1, points.length - 1)];
    const dx = x1 - x0;
    const dy = y1 - y0;
    const l2 = dx * dx + dy * dy;
    const t = l2 > 0 ? Math.max(0, Math.min(1, ((x - x0) * dx + (y - y0) * dy) / l2)) : 0;
    const px = x0 + t * dx;
    const py = y0 + t * dy;
    const d = Math.hypot(x - px, y - py);
    if (!best || d < best.distance) best = { at: i + t, point: [px, py], distance: d };
  }
  return best;
}

/** Drop points closer than `step` to the last kept one; the ends stay. */
export function thin(points, step) {
  if (points.length < 3) return points;
  const kept = [points[0]];
  for (let i = 1; i < points.length - 1; i++) {
    const [x, y] = kept[kept.length - 1];
    if (Math.hypot(points[i][0] - x, points[i][1] - y) >= step) kept.push(points[i]);
  }
  kept.push(points[points.length - 1]);
  return kept;
}

export function path(points, decimals = 1) {
  let d = "";
  let pen = "M";
  for (const [x, y] of points) {
    if (!Number.isFinite(x) || !Number.isFinite(y)) {
      pen = "M";
      continue;
    }
    d += `${pen}${x.toFixed(decimals)} ${y.toFixed(decimals)}`;
    pen = "L";
  }
  return d;
}

function unitNormal(points, i) {
  const a = points[Math.max(0, i - 2)];
  const b = points[Math.min(points.length - 1, i + 2)];
  const l = Math.hypot(b[0] - a[0], b[1] - a[1]) || 1;
  return [-(b[1] - a[1]) / l, (b[0] - a[0]) / l];
}

/** Short strokes across the line from index i0 to i1, `every` apart, `half` long to each side, leaning by `lean` radians. */
export function strokes(points, i0, i1, { every = 5, half = 7, lean = 0.6 } = {}) {
  const out = [];
  let walked = every;
  for (let i = Math.max(0, Math.ceil(i0)); i <= Math.min(points.length - 1, Math.floor(i1)); i++) {
    if (i > 0) walked += Math.hypot(points[i][0] - points[i - 1][0], points[i][1] - points[i - 1][1]);
    if (walked < every) continue;
    walked = 0;
    const [nx, ny] = unitNormal(points, i);
    const [c, s] = [Math.cos(lean), Math.sin(lean)];
    const [ux, uy] = [c * nx - s * ny, s * nx + c * ny];
    const [x, y] = points[i];
    out.push([[x - half * ux, y - half * uy], [x + half * ux, y + half * uy]]);
  }
  return out;
}

/** The strokes that close a settled trace at both ends. */
export function endStrokes(points, half = 6) {
  if (points.length < 2) return [];
  return [0, points.length - 1].map((i) => {
    const [nx, ny] = unitNormal(points, i);
    const [x, y] = points[i];
    return [[x - half * nx, y - half * ny], [x + half * nx, y + half * ny]];
  });
}

export function boxOf(points) {
  const xs = points.map((p) => p[0]);
  const ys = points.map((p) => p[1]);
  return [Math.min(...xs), Math.min(...ys), Math.max(...xs), Math.max(...ys)];
}

export function insidePolygon([x, y], polygon) {
  let inside = false;
  for (let i = 0, j = polygon.length - 1; i < polygon.length; j = i++) {
    const [xi, yi] = polygon[i];
    const [xj, yj] = polygon[j];
    if (yi > y !== yj > y && x < ((xj - xi) * (y - yi)) / (yj - yi) + xi) inside = !inside;
  }
  return inside;
}
