// Canonical value = printed value * factor. The same definitions as the library's units (NIST SP 811, appendix B).
const G = 9.80665;
const PRESSURE = { bar: 1e5, kPa: 1e3, psi: (0.45359237 * G) / 0.0254 ** 2, "kgf/cm2": 98066.5 };
const HEAD = { m: 1, ft: 0.3048 };
const POWER = { kW: 1, W: 1e-3, hp: 0.74569987158227022, "hp(metric)": 0.73549875 };
const SHARE = { "%": 0.01, 1: 1 };

export const UNITS = {
  flow: {
    "m3/h": 1, "m3/s": 3600, "m3/min": 60, "m3/d": 1 / 24, "l/s": 3.6, "l/min": 0.06, "Ml/d": 1000 / 24,
    "gal/min(US)": 0.22712470704, "gal/min(imp)": 0.2727654, "Mgal/d(US)": 157.725491, "Mgal/d(imp)": 189.420417,
    "ft3/s": 101.9406477312, "ft3/min": 1.69901079552,
  },
  head: { ...HEAD, ...PRESSURE },
  npshr: { ...HEAD, ...PRESSURE },
  suction_lift: { ...HEAD, ...PRESSURE },
  power: POWER,
  input_power: POWER,
  efficiency: SHARE,
  overall_efficiency: SHARE,
};

export const CANONICAL = { flow: "m3/h", head: "m", npshr: "m", suction_lift: "m", power: "kW", input_power: "kW", efficiency: "1", overall_efficiency: "1" };

const WRITTEN = { "m3/h": "m³/h", "m3/s": "m³/s", "m3/min": "m³/min", "m3/d": "m³/d", "gal/min(US)": "US gal/min", "gal/min(imp)": "imp gal/min",
  "Mgal/d(US)": "US Mgal/d", "Mgal/d(imp)": "imp Mgal/d", "ft3/s": "ft³/s", "ft3/min": "ft³/min", "kgf/cm2": "kgf/cm²", "hp(metric)": "metric hp", 1: "(0 to 1)" };

/** The unit as people write it. */
export function written(unit) {
  return WRITTEN[unit] ?? unit;
}

/** Canonical units per printed unit of an axis; pressure as head needs the axis's density, else NaN. */
export function factor(axis) {
  const f = UNITS[axis.quantity]?.[axis.unit];
  if (f === undefined) return NaN;
  const pressure = axis.unit in PRESSURE;
  return (pressure ? f / ((axis.density_kgm3 ?? NaN) * G) : f) * (axis.multiplier ?? 1);
}

export function needsDensity(unit) {
  return unit in PRESSURE;
}

export const QUANTITY_WORDS = {
  flow: "flow", head: "head", efficiency: "efficiency", power: "shaft power", npshr: "NPSH required", suction_lift: "suction lift",
  input_power: "input power", overall_efficiency: "overall efficiency",
};
export const QUANTITY_SIGNS = { flow: "Q", head: "H", efficiency: "η", power: "P", npshr: "NPSHr", suction_lift: "lift", input_power: "P₁", overall_efficiency: "η₁" };
export const CONTOURS = { efficiency_contour: "efficiency", power_contour: "power", npshr_contour: "npshr" };
export const CONTOUR_WORDS = { efficiency_contour: "a line of constant efficiency", power_contour: "a line of constant power", npshr_contour: "a line of constant NPSHr" };
