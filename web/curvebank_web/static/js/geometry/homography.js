// Plane projective maps fitted to point pairs, normalised least squares (Hartley 1997, doi:10.1109/34.601246) with the last entry fixed.

function normaliser(points) {
  const n = points.length;
  const mx = points.reduce((a, p) => a + p[0], 0) / n;
  const my = points.reduce((a, p) => a + p[1], 0) / n;
  const d = points.reduce((a, p) => a + Math.hypot(p[0] - mx, p[1] - my), 0) / n || 1;
  const k = Math.SQRT2 / d;
  return [k, 0, -k * mx, 0, k, -k * my, 0, 0, 1];
}

export function multiply(a, b) {
  const m = new Array(9).fill(0);
  for (let i = 0; i < 3; i++) for (let j = 0; j < 3; j++) for (let k = 0; k < 3; k++) m[3 * i + j] += a[3 * i + k] * b[3 * k + j];
  return m;
}

export function invert(m) {
  const [a, b, c, d, e, f, g, h, i] = m;
  const A = e * i - f * h;
  const B = f * g - d * i;
  const C = d * h - e * g;
  const det = a * A + b * B + c * C;
  if (!Number.isFinite(det) || Math.abs(det) < 1e-300) return null;
  return [A, c * h - b * i, b * f - c * e, B, a * i - c * g, c * d - a * f, C, b * g - a * h, a * e - b * d].map((v) => v / det);
}

export function apply(m, [x, y]) {
  const w = m[6] * x + m[7] * y + m[8];
  return [(m[0] * x + m[1] * y + m[2]) / w, (m[3] * x + m[4] * y + m[5]) / w];
}

/** Solve the square system A x = b by elimination with row exchange; null where it is singular. */
export function solve(A, b) {
  const n = b.length;
  const m = A.map((row, i) => [...row, b[i]]);
  for (let k = 0; k < n; k++) {
    let p = k;
    for (let i = k + 1; i < n; i++) if (Math.abs(m[i][k]) > Math.abs(m[p][k])) p = i;
    if (Math.abs(m[p][k]) < 1e-12) return null;
    [m[k], m[p]] = [m[p], m[k]];
    for (let i = k + 1; i < n; i++) {
      const f = m[i][k] / m[k][k];
      for (let j = k; j <= n; j++) m[i][j] -= f * m[k][j];
    }
  }
  const x = new Array(n).fill(0);
  for (let i = n - 1; i >= 0; i--) {
    let s = m[i][n];
    for (let j = i + 1; j < n; j++) s -= m[i][j] * x[j];
    x[i] = s / m[i][i];
  }
  return x;
}

/** Homography from >= 4 pairs; falls back to an affine map where the pairs cannot carry a projective one. */
export function fit(from, to) {
  const usable = from.map((p, i) => [p, to[i]]).filter(([p, q]) => [...p, ...q].every(Number.isFinite));
  if (usable.length < 3) return null;
  const a = usable.map((u) => u[0]);
  const b = usable.map((u) => u[1]);
  const Ta = normaliser(a);
  const Tb = normaliser(b);
  const columns = usable.length > 3 ? 8 : 6;
  const N = Array.from({ length: columns }, () => new Array(columns).fill(0));
  const r = new Array(columns).fill(0);
  const add = (row, value) => {
    for (let i = 0; i < columns; i++) {
      r[i] += row[i] * value;
      for (let j = 0; j < columns; j++) N[i][j] += row[i] * row[j];
    }
  };
  for (let k = 0; k < usable.length; k++) {
    const [x, y] = apply(Ta, a[k]);
    const [u, v] = apply(Tb, b[k]);
    add([x, y, 1, 0, 0, 0, -u * x, -u * y], u);
    add([0, 0, 0, x, y, 1, -v * x, -v * y], v);
  }
  const h = solve(N, r) ?? (columns === 8 ? solve(N.slice(0, 6).map((row) => row.slice(0, 6)), r.slice(0, 6)) : null);
  if (!h) return null;
  const H = [h[0], h[1], h[2], h[3], h[4], h[5], h[6] ?? 0, h[7] ?? 0, 1];
  const back = invert(Tb);
  return back && multiply(multiply(back, H), Ta);
}
