// Find the printed line or crossing near a point in a small grey patch. The server finds the grid again with more care;
// this only helps the hand that places a mark.

function profile(patch, along) {
  const { width, height, grey } = patch;
  const n = along === "x" ? width : height;
  const out = new Float64Array(n);
  for (let y = 0; y < height; y++) for (let x = 0; x < width; x++) out[along === "x" ? x : y] += grey[y * width + x];
  const other = along === "x" ? height : width;
  return Array.from(out, (v) => v / other);
}

/** The darkest narrow dip of a profile near `centre`: {at, depth} or null where nothing stands out. */
export function dip(values, centre, reach, least = 6) {
  const sorted = [...values].sort((a, b) => a - b);
  const ground = sorted[Math.floor(sorted.length * 0.6)];
  let best = -1;
  let score = 0;
  for (let i = Math.max(1, Math.ceil(centre - reach)); i <= Math.min(values.length - 2, Math.floor(centre + reach)); i++) {
    const depth = ground - values[i];
    // The line under the hand goes before a stronger one at the edge of the reach: there it must be several times as strong.
    const worth = depth / (1 + (3 * Math.abs(i - centre)) / Math.max(reach, 1));
    if (depth > least && worth > score && values[i] <= values[i - 1] && values[i] <= values[i + 1]) {
      best = i;
      score = worth;
    }
  }
  if (best < 0) return null;
  let sum = 0;
  let moment = 0;
  for (let i = Math.max(0, best - 3); i <= Math.min(values.length - 1, best + 3); i++) {
    const w = Math.max(0, ground - values[i] - 0.25 * (ground - values[best]));
    sum += w;
    moment += w * i;
  }
  return sum > 0 ? { at: moment / sum, depth: ground - values[best] } : null;
}

/** The patch with dark lines on a light ground: where the few pixels that stand out are the light ones (a blueprint), turned over. */
export function darkOnLight(patch) {
  const sorted = Uint8Array.from(patch.grey).sort();
  const at = (share) => sorted[Math.floor(share * (sorted.length - 1))];
  return at(0.98) - at(0.5) > at(0.5) - at(0.02) ? { ...patch, grey: patch.grey.map((v) => 255 - v) } : patch;
}

/**
 * patch: {width, height, grey (row by row, 0 black .. 255 white)}; centre in patch pixels; reach in patch pixels.
 * Gives {at: [x, y], kind: "crossing" | "upright line" | "level line"} or null.
 */
export function snap(print, [cx, cy], reach) {
  const patch = darkOnLight(print);
  const x = dip(profile(patch, "x"), cx, reach);
  const y = dip(profile(patch, "y"), cy, reach);
  if (x && y) return { at: [x.at, y.at], kind: "crossing" };
  if (x) return { at: [x.at, cy], kind: "upright line" };
  if (y) return { at: [cx, y.at], kind: "level line" };
  return null;
}
