// One panel's map between sheet pixels and values for the eye: a homography fitted to the server's 9 x 9 grid, or, before
// the server has answered, an affine map from the marks alone. Readings come from the curves' own points, never from here.
import { apply, fit, invert } from "./homography.js";
import { factor } from "./units.js";

const bend = (kind, v) => (kind === "log10" ? Math.log10(v) : v);
const unbend = (kind, v) => (kind === "log10" ? 10 ** v : v);

class PairMap {
  constructor(forward, kinds) {
    this.forward = forward;
    this.back = invert(forward);
    this.kinds = kinds;
  }

  /** Printed values (flow, value) at a sheet pixel. */
  toValues(pixel) {
    const [u, v] = apply(this.forward, pixel);
    return [unbend(this.kinds[0], u), unbend(this.kinds[1], v)];
  }

  toPixel([flow, value]) {
    return apply(this.back, [bend(this.kinds[0], flow), bend(this.kinds[1], value)]);
  }

  /** Angle on the sheet of the line of constant value at a pixel, in radians; 0 for a straight sheet. */
  turnAt(pixel) {
    const [u, v] = apply(this.forward, pixel);
    const d = 1e-3 * (Math.abs(u) + 1);
    const a = apply(this.back, [u - d, v]);
    const b = apply(this.back, [u + d, v]);
    return Math.atan2(b[1] - a[1], b[0] - a[0]);
  }
}

/** From the server's panel result (canonical values turned into the printed unit of each axis); null when it has no map. */
export function fromResult(panel, result, flowAxis, valueAxis) {
  const f = panel.axes[flowAxis];
  const v = panel.axes[valueAxis];
  const map = result?.map;
  if (!f || !v || !map?.pixels?.length || !map.values?.[flowAxis] || !map.values?.[valueAxis]) return null;
  const kinds = [f.scale ?? "linear", v.scale ?? "linear"];
  const [kf, kv] = [factor(f), factor(v)];
  const to = map.pixels.map((_, i) => [bend(kinds[0], map.values[flowAxis][i] / kf), bend(kinds[1], map.values[valueAxis][i] / kv)]);
  const h = fit(map.pixels, to);
  return h && invert(h) ? new PairMap(h, kinds) : null;
}

function axisLine(axis) {
  const marks = axis.marks ?? [];
  if (marks.length < 2) return null;
  const kind = axis.scale ?? "linear";
  const values = marks.map((m) => bend(kind, m.value));
  if (!values.every(Number.isFinite)) return null;
  const n = marks.length;
  const mean = (list) => list.reduce((a, b) => a + b, 0) / n;
  const [mv, mx, my] = [mean(values), mean(marks.map((m) => m.at[0])), mean(marks.map((m) => m.at[1]))];
  let vv = 0;
  let vx = 0;
  let vy = 0;
  for (let i = 0; i < n; i++) {
    vv += (values[i] - mv) ** 2;
    vx += (values[i] - mv) * (marks[i].at[0] - mx);
    vy += (values[i] - mv) * (marks[i].at[1] - my);
  }
  if (!(vv > 0)) return null;
  return { kind, at: [mx, my], value: mv, step: [vx / vv, vy / vv] };
}

/** Affine map from the marks alone: each axis moves along its own marks, the other axis gives the direction of its isolines. */
export function fromMarks(panel, flowAxis, valueAxis) {
  const f = panel.axes[flowAxis] && axisLine(panel.axes[flowAxis]);
  const v = panel.axes[valueAxis] && axisLine(panel.axes[valueAxis]);
  if (!f || !v) return null;
  const [a, c] = f.step;
  const [b, d] = v.step;
  const det = a * d - b * c;
  if (Math.abs(det) < 1e-12 * (Math.hypot(a, c) * Math.hypot(b, d) + 1e-300)) return null;
  // pixel = P + (q - q0) f.step + (v - v0) v.step; P is where the flow isoline q0 meets the value isoline v0
  const dx = v.at[0] - f.at[0];
  const dy = v.at[1] - f.at[1];
  const t = (a * dy - c * dx) / det;
  const P = [f.at[0] + t * b, f.at[1] + t * d];
  const back = [a, b, P[0] - f.value * a - v.value * b, c, d, P[1] - f.value * c - v.value * d, 0, 0, 1];
  const forward = invert(back);
  return forward && new PairMap(forward, [f.kind, v.kind]);
}

export function panelMap(panel, result, flowAxis, valueAxis) {
  return fromResult(panel, result, flowAxis, valueAxis) ?? fromMarks(panel, flowAxis, valueAxis);
}

/** Ids of the panel's flow axes and value axes, in their order. */
export function axisIds(panel) {
  const ids = Object.keys(panel?.axes ?? {});
  return {
    flow: ids.filter((id) => panel.axes[id].quantity === "flow"),
    value: ids.filter((id) => panel.axes[id].quantity !== "flow"),
  };
}
