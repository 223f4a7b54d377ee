// What can be taken hold of on the paper: corners, marks, clicks and guides, the traces themselves, lock signs and the hint ring.
// A handle says what it is; action(handle, at) is the change that moving it to `at` would make to the document.
import { toScreen } from "../geometry/affine.js";
import { nearest } from "../geometry/polyline.js";
import { desk as deskPart, insertClick } from "../state/doc.js";
import { lockAt, rangeOf } from "../state/stretch.js";

export const round = (p) => p.map((v) => Math.round(v * 100) / 100);
const REACH = 12;
const ON_TRACE = 5;
export const HINT_REACH = 16;

/** The curve a handle belongs to, in a document. */
export const curveOf = (doc, handle) => (handle.kept ? (doc.curves ?? []).find((c) => c.id === handle.curve) : deskPart(doc).curve) ?? null;

/** The action that changes a curve, whether it is kept or still open. */
export const change = (handle, what) => (handle.kept ? { type: "curve/set", curve: handle.curve, change: what } : { type: "curve/change", change: what });

/** Where a handle stands, in sheet pixels; null where it has no one place. */
export function placeOf(desk, handle) {
  if (!handle) return null;
  if (handle.kind === "mark") return desk.doc.panels.find((p) => p.id === handle.panel)?.axes[handle.axis]?.marks[handle.index]?.at ?? null;
  if (handle.kind === "open") return desk.openMark?.at ?? null;
  if (handle.kind === "point") return curveOf(desk.doc, handle)?.[handle.part]?.[handle.index] ?? null;
  if (handle.kind === "hint") return desk.items.find((i) => i.id === handle.curve)?.result?.hint_click ?? null;
  return null;
}

/** Where the lock sign of a stretch stands: its middle. */
export function lockPlace(item, index) {
  const lock = item.curve.locked?.[index];
  const range = lock && rangeOf(lock, item.pixels);
  return range ? item.pixels[Math.round((range[0] + range[1]) / 2)] : lock ? lock.pixels[Math.floor(lock.pixels.length / 2)] : null;
}

function curveHandles(desk, near) {
  const list = [];
  for (const item of desk.items) {
    const of = { curve: item.id, kept: item.kept };
    if (item.id === desk.selected || !item.kept || item.failed) for (const part of ["clicks", "guides"]) (item.curve[part] ?? []).forEach((p, index) => list.push({ kind: "point", part, index, ...of, d: near(p) }));
    else (item.curve.guides ?? []).forEach((p, index) => list.push({ kind: "point", part: "guides", index, ...of, d: near(p) + 1 }));
    const hint = item.result?.hint_click;
    if (hint) list.push({ kind: "hint", ...of, d: near(hint) - (HINT_REACH - REACH) });
    (item.curve.locked ?? []).forEach((_, index) => {
      const p = lockPlace(item, index);
      if (p && item.kept) list.push({ kind: "lock", index, ...of, d: near(p) + 2 });
    });
  }
  return list;
}

/** The trace under a point: {kind: "line", curve, kept, at (index), locked}. */
export function lineUnder(desk, screen, reach = ON_TRACE) {
  let best = null;
  for (const item of desk.items) {
    if (item.pixels.length < 2 || item.curve.kind === "points") continue;
    const hit = nearest(item.pixels.map((p) => toScreen(desk.view, p)), screen);
    if (hit && hit.distance < reach && (!best || hit.distance < best.d)) best = { kind: "line", curve: item.id, kept: item.kept, at: hit.at, locked: lockAt(item.curve, item.pixels, hit.at), d: hit.distance };
  }
  return best;
}

/** The nearest handle within reach of the pointer, or null. With a line being clicked or locked, kept traces are not taken hold of. */
export function findHandle(desk, { screen }, shift = false) {
  const view = desk.loupe ? desk.loupe.view : desk.view;
  const near = (p) => Math.hypot(...toScreen(view, p).map((v, i) => v - screen[i]));
  const list = [];
  if (desk.step === "panel" && desk.panel?.outline && !desk.drawingPanel) desk.panel.outline.forEach((p, i) => list.push({ kind: "corner", index: i, d: near(p) }));
  if (desk.step === "marks") {
    if (desk.openMark) list.push({ kind: "open", d: near(desk.openMark.at) });
    for (const panel of desk.doc.panels ?? []) for (const [axis, a] of Object.entries(panel.axes)) (a.marks ?? []).forEach((m, index) => list.push({ kind: "mark", panel: panel.id, axis, index, d: near(m.at) + (panel.id === desk.panel?.id ? 0 : 6) }));
  }
  if (desk.step === "curves" && !desk.locking) list.push(...curveHandles(desk, near));
  const best = list.sort((a, b) => a.d - b.d)[0];
  if (best && best.d < REACH) return best;
  if (desk.step !== "curves" || desk.locking || desk.loupe || shift) return null;
  const line = lineUnder(desk, screen);
  return line && (line.kept ? !desk.openCurve : true) ? line : null;
}

/** The change that moving a handle to `at` (sheet pixels) makes. */
export function moveAction(desk, handle, at) {
  const doc = desk.session.doc;
  if (handle.kind === "mark") return { type: "marks/move", panel: handle.panel, from: doc.panels.find((p) => p.id === handle.panel).axes[handle.axis].marks[handle.index].at, at };
  if (handle.kind === "open") return { type: "mark/open", panel: desk.openMark.panel, at };
  if (handle.kind === "corner") {
    const outline = doc.panels.find((p) => p.id === desk.panel.id).outline.map((p) => [...p]);
    const [ox, oy] = outline[(handle.index + 2) % 4];
    const box = [[Math.min(at[0], ox), Math.min(at[1], oy)], [Math.max(at[0], ox), Math.max(at[1], oy)]];
    return { type: "panel/set", panel: desk.panel.id, change: { outline: [box[0], [box[1][0], box[0][1]], box[1], [box[0][0], box[1][1]]] } };
  }
  const curve = curveOf(doc, handle);
  if (!curve) return null;
  if (handle.kind === "hint") return { ...change(handle, { clicks: insertClick(curve.clicks, at) }), did: "click at the ring" };
  if (handle.kind === "line") return handle.locked >= 0 ? null : { ...change(handle, { guides: [...(curve.guides ?? []), at] }), did: "guide drawn" };
  if (handle.kind === "point") return change(handle, { [handle.part]: curve[handle.part].map((p, i) => (i === handle.index ? at : p)) });
  return null;
}

/** The change that takes a click or guide away; a kept line without two clicks goes as a whole. */
export function removeAction(desk, handle) {
  const curve = curveOf(desk.doc, handle);
  const rest = curve?.[handle.part]?.filter((_, i) => i !== handle.index);
  if (!rest) return null;
  if (handle.part === "guides") return { ...change(handle, { guides: rest.length ? rest : undefined }), did: "guide removed" };
  if (handle.kept) return rest.length < (curve.kind === "points" ? 1 : 2) ? { type: "curve/remove", curve: curve.id } : { ...change(handle, { clicks: rest }), did: "click removed" };
  return rest.length ? change(handle, { clicks: rest }) : { type: "curve/drop" };
}

/** Stops of Tab on the paper, in order. */
export function stops(desk) {
  const list = [];
  if (desk.step === "marks" && desk.panel) for (const [axis, a] of Object.entries(desk.panel.axes)) (a.marks ?? []).forEach((_, index) => list.push({ mark: { panel: desk.panel.id, axis, index } }));
  if (desk.step === "curves") {
    for (const item of desk.items) {
      const of = { curve: item.id, kept: item.kept };
      for (const part of ["clicks", "guides"]) (item.curve[part] ?? []).forEach((_, index) => list.push({ handle: { kind: "point", part, index, ...of } }));
      if (item.result?.hint_click) list.push({ handle: { kind: "hint", ...of } });
      if (item.kept) (item.curve.locked ?? []).forEach((_, index) => list.push({ handle: { kind: "lock", index, ...of } }));
    }
  }
  return list;
}
