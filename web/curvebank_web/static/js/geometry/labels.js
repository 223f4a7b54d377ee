// Labels that must not lie on each other.

/** Push wanted positions apart to at least `gap`, inside [lo, hi], moving the total as little as a simple sweep can. */
export function spread(wanted, gap, lo, hi) {
  const order = wanted.map((y, i) => ({ y, i })).sort((a, b) => a.y - b.y);
  const groups = [];
  for (const { y, i } of order) {
    groups.push({ members: [i], sum: y, centre: y });
    for (;;) {
      const g = groups[groups.length - 1];
      const half = ((g.members.length - 1) * gap) / 2;
      g.centre = Math.min(Math.max(g.sum / g.members.length, lo + half), Math.max(lo + half, hi - half));
      const before = groups[groups.length - 2];
      if (!before) break;
      const room = g.centre - half - (before.centre + ((before.members.length - 1) * gap) / 2);
      if (room >= gap - 1e-9) break;
      before.members.push(...g.members);
      before.sum += g.sum;
      groups.pop();
    }
  }
  const placed = new Array(wanted.length);
  for (const g of groups) g.members.forEach((i, k) => (placed[i] = g.centre + (k - (g.members.length - 1) / 2) * gap));
  return placed;
}

/** Line weights from the largest diameter down: 2.3 1.9 1.6 1.3 1.1, more than five interpolated. */
export function weights(n) {
  const five = [2.3, 1.9, 1.6, 1.3, 1.1];
  if (n <= 5) return five.slice(0, n);
  return Array.from({ length: n }, (_, i) => {
    const at = (i * 4) / (n - 1);
    const k = Math.min(3, Math.floor(at));
    return Number((five[k] + (at - k) * (five[k + 1] - five[k])).toFixed(2));
  });
}
