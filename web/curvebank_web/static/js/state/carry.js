// What changes when a draft is carried onto another scan: the report of the server in words. No DOM.
import { plain } from "../geometry/number.js";
import { QUANTITY_WORDS } from "../geometry/units.js";

const UNITS = { m: "m", kW: "kW", "1": "%", "%": "%", "m3/h": "m³/h" };

/** A number of a curve's unit with its unit: efficiencies, which come as fractions, in per cent. */
export function amount(value, curve) {
  if (value === null || value === undefined) return "?";
  const fraction = curve.quantity?.includes("efficiency") && (curve.unit === "1" || !curve.unit);
  const v = fraction ? value * 100 : value;
  const digits = Math.abs(v) >= 10 ? 1 : Math.abs(v) >= 1 ? 2 : 3;
  return `${plain(v, digits)} ${fraction ? "%" : UNITS[curve.unit] ?? curve.unit ?? ""}`.trim();
}

/** A change in units of its own standard uncertainty. */
export function inU(value) {
  if (value === null || value === undefined) return "?";
  return value < 0.05 ? "under 0.1 u" : `${plain(value, value >= 10 ? 0 : 1)} u`;
}

/** Whether a curve wants a look before the scan is taken: it failed, it is newly doubtful, or it moved by more than its own doubt allows. */
export function wantsLook(curve) {
  return Boolean(curve.error_now) || (curve.flags_new ?? []).length > 0 || (curve.largest_u ?? 0) > 3;
}

/** One short sentence for a curve's row. */
export function rowWords(curve) {
  if (curve.error_now) return curve.error_before ? "Not read on either scan." : `Not read on the new scan: ${curve.error_now.message ?? curve.error_now}`;
  if (curve.error_before) return "Read now; it was not read before.";
  const gone = (curve.flags_gone ?? []).length;
  const fresh = curve.flags_new ?? [];
  const parts = [];
  if (fresh.length) parts.push(fresh.join(" "));
  if (gone) parts.push(gone === 1 ? "One doubt is gone." : `${gone} doubts are gone.`);
  if (!parts.length) parts.push((curve.largest_u ?? 0) > 3 ? "It moved by more than its ± allows: look where." : "It stays within its ±.");
  return parts.join(" ");
}

/** The curve to show first: one that wants a look, then the one that moved most. */
export function firstToShow(curves) {
  const rank = (c) => (c.error_now ? 1e9 : 0) + (wantsLook(c) ? 1e6 : 0) + (c.largest_u ?? 0);
  return [...curves].sort((a, b) => rank(b) - rank(a))[0] ?? null;
}

export function nameOf(curve, doc) {
  const own = (doc?.curves ?? []).find((c) => c.id === curve.id);
  const word = QUANTITY_WORDS[curve.quantity] ?? curve.quantity?.replaceAll("_", " ") ?? "";
  const about = own?.diameter_mm ? `Ø ${plain(own.diameter_mm, 1)}` : own?.label?.printed ?? (own?.value !== undefined && own?.value !== null ? plain(own.value < 1 ? own.value * 100 : own.value, 1) : curve.id);
  return `${word} ${about}`.trim();
}

/** "The same paper: 214 places agree to 0.31 px over 98 % of it; turned by 1.2°, 2.0 times as fine." */
export function registrationWords(r) {
  if (!r) return "";
  const finer = r.scale > 1.02 ? `, ${plain(r.scale, 2)} times as fine` : r.scale < 0.98 ? `, ${plain(1 / r.scale, 2)} times as coarse` : "";
  const turned = Math.abs(r.turn_deg ?? 0) > 0.05 ? `, turned by ${plain(r.turn_deg, 1)}°` : "";
  return `The same paper: ${plain(r.matches, 0)} places agree to ${plain(r.residual_px, 2)} px over ${plain(100 * r.coverage, 0)} % of it${finer}${turned}.`;
}
