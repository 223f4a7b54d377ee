// Findings and ghosts of a run, in the form the desk draws them. Pure.
import { crossings } from "../geometry/polyline.js";
import { factor } from "../geometry/units.js";
import { plain } from "../geometry/number.js";

/** Run findings as desk findings; the place comes from `where` or, failing that, from the subject. */
export function runFindings(run, doc = null) {
  const here = (kind, name) => !doc || (kind === "curve" ? doc.curves : kind === "panel" || kind === "axis" ? doc.panels : null)?.some((k) => k.id === name.split("/")[0]) !== false;
  const gone = (f) => {
    const [kind, name = ""] = (f.subject ?? "").split(/:(.*)/s);
    return !here(kind, name) || (doc && !doc.curves?.length);
  };
  return (run.findings ?? []).filter((f) => !gone(f)).map((f) => {
    const where = { ...(f.where ?? {}) };
    const [kind, name = ""] = (f.subject ?? "").split(/:(.*)/s);
    if (kind === "curve") where.curve ??= name;
    if (kind === "panel") where.panel ??= name;
    if (kind === "axis") [where.panel, where.axis] = name.split("/");
    if (!where.curve && where.curves?.length) where.curve = where.curves[0];
    const text = [f.message, f.action && !f.message.includes(f.action) ? f.action : ""].filter(Boolean).join(" ");
    return { severity: f.severity, text, where, subject: f.subject, rule: f.rule, agrees: agreesWith(f), source: f.source, ways: [], stale: !run.fresh };
  });
}

/** The agreeing diameter that a family finding names, in mm, or null. */
export function agreesWith(f) {
  if (!/^family-/.test(f.rule ?? "")) return null;
  if (f.where?.agrees_mm) return f.where.agrees_mm;
  const m = /behaves like (?:Ø ?)?([\d.,]+) ?mm/.exec(f.message ?? "");
  return m ? Number(m[1].replace(",", ".")) : null;
}

/**
 * Ghost curves of one panel: each diameter's curve carried to its neighbours.
 * carry: "all" or "FROM>TO" (curve ids). A gap is drawn where the ghost misses the curve it should meet. With "all", a curve whose
 * label is doubted is not carried itself (it would accuse its neighbours), and the first ghost that misses it carries the words.
 */
export function ghostsOf(run, doc, panel, carry) {
  const out = [];
  for (const family of Object.values(run.family ?? {})) {
    const doubted = new Set((family.curves ?? []).filter((c) => c.agrees_mm).map((c) => c.id));
    const hatched = new Set();
    for (const c of family.curves ?? []) {
      const own = doc.curves.find((k) => k.id === c.id);
      if (!own || own.panel !== panel.id) continue;
      for (const g of c.ghosts ?? []) {
        const id = `${c.id}>${g.to_id}`;
        if (carry === "all" ? doubted.has(c.id) : carry !== id) continue;
        const target = doc.curves.find((k) => k.id === g.to_id);
        const [kx, ky] = [factor(panel.axes[own.x]), factor(panel.axes[own.y])];
        const result = run.result.curves.find((k) => k.id === g.to_id);
        const accused = doubted.has(g.to_id) && !hatched.has(g.to_id);
        if (accused) hatched.add(g.to_id);
        const gap = carry !== "all" || accused ? gapOf(g, result) : null;
        out.push({
          id, y: own.y, pixels: g.pixels ?? [], points: (g.points ?? []).map(([q, v]) => [q / kx, v / ky]),
          words: carry === "all" && !accused ? null : `dashed: ${plain(c.diameter_mm, 1)} carried to ${plain(g.to_diameter_mm ?? target?.diameter_mm, 1)}`,
          short: `carried ${plain(c.diameter_mm, 1)}→${plain(g.to_diameter_mm, 1)}`,
          gap: gap?.pixels ?? null,
          gapPoints: gap?.points.map((pair) => pair.map(([q, v]) => [q / kx, v / ky])) ?? null,
        });
      }
    }
  }
  return out;
}

/** Strokes between a ghost and the curve it should meet, where they differ by more than the doubt of both (k = 2). */
export function gapOf(ghost, target) {
  if (!ghost.points?.length || !target?.points?.length) return null;
  const mean = target.sigma?.length ? target.sigma.reduce((a, b) => a + b, 0) / target.sigma.length : 0;
  const doubt = 2 * (ghost.doubt ?? Math.SQRT2 * mean);
  const n = 26;
  const points = [];
  const pixels = [];
  let beyond = 0;
  for (let i = 1; i < n; i++) {
    const k = Math.floor((i * (ghost.points.length - 1)) / n);
    const [q, v] = ghost.points[k];
    const hit = crossings(target.points, q)[0];
    if (!hit) continue;
    if (Math.abs(hit.y - v) <= doubt) continue;
    beyond++;
    points.push([[q, v], [q, hit.y]]);
    const j = Math.min(target.pixels.length - 1, Math.round(hit.at));
    if (ghost.pixels?.[k]) pixels.push([ghost.pixels[k], target.pixels[j]]);
  }
  return beyond > 3 ? { points, pixels } : null;
}

/** Pairs that can be carried: [["H-247>H-242", "247 to 242"], ...]. */
export function pairsOf(run, panel, doc) {
  const out = [];
  for (const family of Object.values(run?.family ?? {})) {
    for (const c of family.curves ?? []) {
      const own = doc.curves.find((k) => k.id === c.id);
      if (!own || own.panel !== panel?.id) continue;
      for (const g of c.ghosts ?? []) out.push([`${c.id}>${g.to_id}`, `${plain(c.diameter_mm, 1)} to ${plain(g.to_diameter_mm, 1)} mm`]);
    }
  }
  return out;
}
