// Order and gaps of the catalogue. Pure.

/** Pumps by name, or, when a duty is asked, nearest on the log-log map first; pumps without a point come last. */
export function rank(pumps, asked) {
  const byName = (a, b) => `${a.maker} ${a.model}`.localeCompare(`${b.maker} ${b.model}`);
  if (!(asked.flow > 0) && !(asked.head > 0)) return [...pumps].sort(byName);
  const far = (p) => {
    if (!p.bep) return Infinity;
    const dq = asked.flow > 0 ? Math.log(p.bep.flow_m3h / asked.flow) : 0;
    const dh = asked.head > 0 ? Math.log(p.bep.head_m / asked.head) : 0;
    return Math.hypot(dq, dh);
  };
  return [...pumps].sort((a, b) => (far(a) - far(b) || 0) || byName(a, b));
}

const WANTED = [["efficiency", "efficiency"], ["power", "power"], ["npshr", "NPSHr"]];

/** What is not known of a pump, in words. */
export function unknowns(pump) {
  const has = new Set(pump.quantities ?? []);
  if (has.has("head") && WANTED.every(([q]) => !has.has(q))) return "everything but head";
  const missing = [...(has.has("head") ? [] : ["head"]), ...WANTED.filter(([q]) => !has.has(q)).map(([, w]) => w)];
  return missing.length ? missing.join(", ") : "nothing missing";
}

/** Cautions of a pump as sentences: text, or {message}. */
export function cautionText(caution) {
  return typeof caution === "string" ? caution : caution?.message ?? caution?.text ?? "";
}
