// Numbers as people type and read them.

/** Read "12.5", "12,5", "12 1/2", "1 450". Gives {value} or {error}: a whole sentence. Empty text gives {value: null}. */
export function parseNumber(text) {
  const raw = String(text ?? "").trim();
  if (raw === "") return { value: null };
  const s = raw.replace(/[−–]/g, "-").replace(/[″"]/g, "").trim();
  const sign = s.startsWith("-") ? -1 : 1;
  let body = s.replace(/^[+-]+/, "").trim();
  const m = /^(?:(\d+)[ -]+)?(\d+)\/(\d+)$/.exec(body);
  if (m && Number(m[3]) > 0) return { value: sign * (Number(m[1] ?? 0) + Number(m[2]) / Number(m[3])) };
  if (/^\d{1,3}(?:[ \u00a0\u202f]\d{3})+(?:[.,]\d+)?$/.test(body)) body = body.replace(/[ \u00a0\u202f]/g, "");
  if (/^[1-9]\d{0,2},\d{3}$/.test(body)) {
    const [whole, rest] = body.split(",");
    return { error: `“${raw}” can mean ${whole}.${rest} or ${whole}${rest}. Type it without the comma.` };
  }
  if ((body.match(/,/g) ?? []).length === 1 && !body.includes(".")) body = body.replace(",", ".");
  if (/^(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$/.test(body)) return { value: sign * Number(body) };
  const repaired = body.replace(/[oO]/g, "0").replace(/[lI]/g, "1").replace(/S/g, "5");
  const hint = /^\d+\.?\d*$/.test(repaired) ? ` Did you mean ${repaired}?` : " Type digits, like 120 or 12.5.";
  return { error: `“${raw}” is not a number.${hint}` };
}

/** Plain digits, no more than `digits` after the point, no trailing zeros; a real minus sign. */
export function plain(value, digits = 6) {
  if (value === null || value === undefined || !Number.isFinite(value)) return "";
  return String(Number(value.toFixed(digits))).replace("-", "−");
}

/** For a blank: as plain() but with an ASCII minus, so that it can be typed back. */
export function typed(value) {
  return plain(value, 8).replace("−", "-");
}

/** Decimals so that `u` shows two digits if it begins with 1, else one ... and a value beside it the same. */
export function decimalsFor(u) {
  if (!(u > 0)) return 2;
  const e = Math.floor(Math.log10(u));
  const lead = u / 10 ** e;
  return Math.max(0, Math.min(6, -e + (lead < 2.95 ? 1 : 0)));
}

export function fixed(value, decimals) {
  return value.toFixed(decimals).replace("-", "−");
}

/** {value, u} as text: "42.92" and "0.19". The uncertainty decides the digits. */
export function withDoubt(value, u, fallback = 2) {
  const d = u > 0 ? decimalsFor(u) : fallback;
  return { value: fixed(value, d), u: u > 0 ? fixed(u, d) : null };
}

export function count(n, one, many) {
  return `${n} ${n === 1 ? one : many}`;
}
