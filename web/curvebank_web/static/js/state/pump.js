// Numbers of the pump page: units shown, the flow range, what is read at one flow, CSV. Pure.
import { crossings } from "../geometry/polyline.js";
import { weights } from "../geometry/labels.js";

/** Shown units: factor is shown = canonical * factor. */
export const SYSTEMS = {
  metric: { name: "m³/h, m, kW", flow: ["m³/h", 1], head: ["m", 1], power: ["kW", 1], efficiency: ["%", 100], npshr: ["m", 1] },
  us: { name: "US gal/min, ft, hp", flow: ["US gal/min", 1 / 0.22712470704], head: ["ft", 1 / 0.3048], power: ["hp", 1 / 0.74569987158227022], efficiency: ["%", 100], npshr: ["ft", 1 / 0.3048] },
};

export const SHOWN = ["head", "efficiency", "power", "npshr"];
export const SIGN = { head: "H", efficiency: "η", power: "P", npshr: "NPSHr" };

/** Largest flow of all curves in m3/h, and the same rounded up to a tidy axis end. */
export function flowRange(curves) {
  const all = curves.flatMap((c) => (c.points ?? []).map((p) => p[0])).filter(Number.isFinite);
  if (!all.length) return [0, 1];
  const hi = Math.max(...all);
  const step = 10 ** Math.floor(Math.log10(hi)) / 2;
  return [0, Math.ceil((hi * 1.06) / step) * step];
}

/** Range of a quantity over its curves and bands: head and power from zero, efficiency and NPSHr round what is there. */
export function valueRange(quantity, lists, extra = []) {
  const all = [...lists.flat(), ...extra].filter(Number.isFinite);
  if (!all.length) return [0, 1];
  const [lo, hi] = [Math.min(...all), Math.max(...all)];
  const span = hi - Math.min(lo, quantity === "efficiency" ? lo : 0) || hi || 1;
  const bottom = quantity === "efficiency" ? Math.max(0, lo - 0.12 * span) : 0;
  return [bottom, hi + 0.14 * span];
}

/** A grid of `n` flows over [lo, hi], both ends a hair inside. */
export function grid(lo, hi, n = 61) {
  const e = (hi - lo) * 1e-9;
  return Array.from({ length: n }, (_, i) => lo + e + ((hi - lo - 2 * e) * i) / (n - 1));
}

/** Interpolate {flow_m3h, value, u_print, u_machine} at one flow; null outside. */
export function readAt(values, flow) {
  if (!values) return null;
  const read = (list) => {
    const pts = values.flow_m3h.map((q, i) => [q, list[i]]).filter((p) => p[1] !== null && Number.isFinite(p[1]));
    return pts.length > 1 ? crossings(pts, flow)[0]?.y ?? null : null;
  };
  const value = read(values.value);
  return value === null ? null : { value, print: read(values.u_print), machine: read(values.u_machine) };
}

/** Standard uncertainty of the flow where pump and system meet: that of head over the difference of their slopes. */
export function dutyFlowDoubt(head, flow, friction, which) {
  const d = Math.max(1e-6, (head.flow_m3h[head.flow_m3h.length - 1] - head.flow_m3h[0]) / 200);
  const [a, b, m] = [readAt(head, flow - d), readAt(head, flow + d), readAt(head, flow)];
  if (!m || (!a && !b)) return null;
  const slope = ((b ?? m).value - (a ?? m).value) / ((b ? d : 0) + (a ? d : 0));
  const system = 2 * friction * flow;
  return m[which] === null ? null : Math.abs(m[which] / (slope - system));
}

/** True where the system curve crosses the pump's line somewhere on its grid. */
export function meets(head, { static_head_m, friction_m_per_m3h2 }) {
  const over = head.flow_m3h.map((q, i) => (head.value[i] === null ? null : head.value[i] - static_head_m - friction_m_per_m3h2 * q * q)).filter((v) => v !== null);
  return over.some((v) => v >= 0) && over.some((v) => v <= 0);
}

export function system({ lift, loss, at }) {
  if (lift === null && loss === null) return null;
  if (loss !== null && loss > 0 && !(at > 0)) return null;
  return { static_head_m: lift ?? 0, friction_m_per_m3h2: loss > 0 ? loss / at ** 2 : 0 };
}

export function lineWeights(curves) {
  const out = {};
  for (const q of SHOWN) {
    const ds = [...new Set(curves.filter((c) => c.quantity === q && c.diameter_mm).map((c) => c.diameter_mm))].sort((a, b) => b - a);
    const w = weights(ds.length);
    ds.forEach((d, i) => (out[`${q}/${d}`] = w[i]));
  }
  return out;
}

/** Curves as CSV text: one row a point, canonical units, a header that names them. */
export function csv(detail) {
  const cell = (v) => (v === null || v === undefined ? "" : /[",\n]/.test(String(v)) ? `"${String(v).replaceAll('"', '""')}"` : String(v));
  const rows = [["key", "revision", "curve", "quantity", "diameter_mm", "speed_rpm", "level", "flow_m3h", "value", "standard_uncertainty"]];
  for (const c of detail.curves) c.points.forEach(([q, v], i) => rows.push([detail.key, detail.number, c.id, c.quantity, c.diameter_mm, c.speed_rpm, c.level, q, v, c.sigma?.[i]]));
  return `${rows.map((r) => r.map(cell).join(",")).join("\n")}\n`;
}
