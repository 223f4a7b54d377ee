// The recipe document. apply(doc, action) is pure: it gives a new document and never changes the old one.
// Things that only the desk needs stand under "x-desk" and are ignored by the engine.

const map = (list, id, change) => (list ?? []).map((item) => (item.id === id ? change(item) : item));
const clean = (object) => Object.fromEntries(Object.entries(object).filter(([, v]) => v !== undefined));

/** Marks of several scales may stand on one crossing; they move together. */
export function samePlace(a, b) {
  return Math.hypot(a[0] - b[0], a[1] - b[1]) < 0.02;
}

/** An id like "head-2" that no one in `taken` has. */
export function freshId(stem, taken) {
  if (!taken.includes(stem)) return stem;
  let n = 2;
  while (taken.includes(`${stem}-${n}`)) n++;
  return `${stem}-${n}`;
}

export function desk(doc) {
  return doc["x-desk"] ?? {};
}

function withDesk(doc, change) {
  const next = clean({ ...desk(doc), ...change });
  return { ...doc, "x-desk": next };
}

function inPanel(doc, id, change) {
  return { ...doc, panels: map(doc.panels, id, change) };
}

function inAxis(doc, { panel, axis }, change) {
  return inPanel(doc, panel, (p) => ({ ...p, axes: { ...p.axes, [axis]: change(p.axes[axis] ?? { marks: [] }) } }));
}

const HANDLERS = {
  "sheet/set": (doc, a) => ({ ...doc, sheet: clean({ ...doc.sheet, ...a.change }) }),
  "masks/set": (doc, a) => ({ ...doc, sheet: clean({ ...doc.sheet, masks: a.masks.length ? a.masks : undefined }) }),
  "pump/set": (doc, a) => ({ ...doc, pump: clean({ ...doc.pump, ...a.change }) }),
  "desk/set": (doc, a) => withDesk(doc, a.change),

  "panel/add": (doc, a) => ({ ...doc, panels: [...(doc.panels ?? []), a.panel] }),
  "panel/set": (doc, a) => inPanel(doc, a.panel, (p) => clean({ ...p, ...a.change })),
  "panel/remove": (doc, a) => {
    const next = { ...doc, panels: (doc.panels ?? []).filter((p) => p.id !== a.panel), curves: (doc.curves ?? []).filter((c) => c.panel !== a.panel) };
    const open = desk(doc);
    return withDesk(next, { mark: open.mark?.panel === a.panel ? undefined : open.mark, curve: open.curve?.panel === a.panel ? undefined : open.curve });
  },

  "axis/set": (doc, a) => inAxis(doc, a, (axis) => clean({ ...axis, ...a.change })),
  "axis/remove": (doc, a) => {
    const next = inPanel(doc, a.panel, (p) => ({ ...p, axes: Object.fromEntries(Object.entries(p.axes).filter(([id]) => id !== a.axis)) }));
    return { ...next, curves: (doc.curves ?? []).filter((c) => c.panel !== a.panel || (c.y !== a.axis && c.x !== a.axis)) };
  },

  "mark/open": (doc, a) => withDesk(doc, { mark: { panel: a.panel, at: a.at, held: a.held } }),
  "mark/drop": (doc) => withDesk(doc, { mark: undefined }),
  "mark/keep": (doc, a) => {
    let next = withDesk(doc, { mark: undefined });
    for (const [axis, value] of Object.entries(a.values)) {
      next = inAxis(next, { panel: a.panel, axis }, (x) => ({ ...x, marks: [...(x.marks ?? []), { at: a.at, value }] }));
    }
    return next;
  },
  "mark/set": (doc, a) => inAxis(doc, a, (axis) => ({ ...axis, marks: axis.marks.map((m, i) => (i === a.index ? { ...m, ...a.change } : m)) })),
  "marks/move": (doc, a) =>
    inPanel(doc, a.panel, (p) => ({
      ...p,
      axes: Object.fromEntries(Object.entries(p.axes).map(([id, x]) => [id, { ...x, marks: (x.marks ?? []).map((m) => (samePlace(m.at, a.from) ? { ...m, at: a.at } : m)) }])),
    })),
  "mark/remove": (doc, a) => inAxis(doc, a, (axis) => ({ ...axis, marks: axis.marks.filter((_, i) => i !== a.index) })),
  "marks/copy": (doc, a) => {
    const from = doc.panels.find((p) => p.id === a.from).axes[a.axisFrom];
    return inAxis(doc, { panel: a.panel, axis: a.axis }, (axis) => ({ ...axis, unit: from.unit, scale: from.scale, marks: from.marks.map((m) => ({ ...m })) }));
  },

  "curve/open": (doc, a) => withDesk(doc, { curve: a.curve }),
  "curve/change": (doc, a) => !desk(doc).curve ? doc : withDesk(doc, { curve: clean({ ...desk(doc).curve, ...a.change }) }),
  "curve/drop": (doc) => withDesk(doc, { curve: undefined }),
  "curve/keep": (doc) => {
    if (!desk(doc).curve) return doc;
    const { "x-clicked": _, ...curve } = desk(doc).curve;
    return { ...withDesk(doc, { curve: undefined }), curves: [...(doc.curves ?? []), curve] };
  },
  "curve/set": (doc, a) => ({ ...doc, curves: map(doc.curves, a.curve, (c) => clean({ ...c, ...a.change })) }),
  "curves/set": (doc, a) => ({ ...doc, curves: (doc.curves ?? []).map((c) => (a.curves.includes(c.id) ? clean({ ...c, ...a.change }) : c)) }),
  "curve/remove": (doc, a) => ({ ...doc, curves: (doc.curves ?? []).filter((c) => c.id !== a.curve) }),
};

/** The document after one action; an unknown action is a programming error. */
export function apply(doc, action) {
  const handler = HANDLERS[action.type];
  if (!handler) throw new Error(`no such action: ${action.type}`);
  return handler(doc, action);
}

/** The change that one more click makes to an open curve; the order of clicking is kept aside for contours, which may turn back. */
export function clickChange(curve, point) {
  const clicked = [...(curve["x-clicked"] ?? curve.clicks), point];
  return { clicks: curve.quantity.endsWith("_contour") ? clicked : insertClick(curve.clicks, point), "x-clicked": clicked };
}

/** Put a click where it belongs along a line of clicks: between the two it shortens, or at an end. */
export function insertClick(clicks, point) {
  if (clicks.length < 2) return orderAlong([...clicks, point]);
  const d = (a, b) => Math.hypot(a[0] - b[0], a[1] - b[1]);
  let best = { cost: d(point, clicks[0]), at: 0 };
  const end = d(point, clicks[clicks.length - 1]);
  if (end < best.cost) best = { cost: end, at: clicks.length };
  for (let i = 0; i + 1 < clicks.length; i++) {
    const cost = d(clicks[i], point) + d(point, clicks[i + 1]) - d(clicks[i], clicks[i + 1]);
    if (cost < best.cost) best = { cost, at: i + 1 };
  }
  return [...clicks.slice(0, best.at), point, ...clicks.slice(best.at)];
}

function orderAlong(clicks) {
  return clicks.length === 2 && clicks[0][0] > clicks[1][0] ? [clicks[1], clicks[0]] : clicks;
}

/** The document as the engine reads it: no open mark, no open curve, no desk-only keys. */
export function recipeOf(doc) {
  const { "x-desk": _, ...recipe } = doc;
  return recipe;
}

export function newPanel(doc, outline) {
  const taken = (doc.panels ?? []).map((p) => p.id);
  const id = freshId(taken.length ? `panel-${taken.length + 1}` : "main", taken);
  const used = (doc.panels ?? []).flatMap((p) => Object.values(p.axes).map((a) => a.quantity));
  const first = (doc.panels ?? [])[0];
  const quantity = ["head", "power", "efficiency", "npshr"].find((q) => !used.includes(q)) ?? "head";
  const unit = { head: "m", power: "kW", efficiency: "%", npshr: "m" }[quantity];
  const flowUnit = first ? Object.values(first.axes).find((a) => a.quantity === "flow")?.unit ?? "m3/h" : "m3/h";
  return {
    id,
    axes: {
      flow: { quantity: "flow", unit: flowUnit, scale: "linear", marks: [] },
      [quantity]: { quantity, unit, scale: "linear", marks: [] },
    },
    grid: "auto",
    outline,
  };
}

/** A short id for a curve: sign of the quantity, then what the line belongs to. */
export function curveId(curve, taken) {
  const stem = { head: "H", efficiency: "eta", power: "P", npshr: "NPSHr" }[curve.quantity] ?? curve.quantity;
  const about = curve.value !== undefined && curve.value !== null ? Math.round(curve.value * 1000) / 10 : curve.diameter_mm ?? curve.label?.printed ?? "all";
  return freshId(`${stem}-${about}`.replace(/[^A-Za-z0-9._-]+/g, "-"), taken);
}
