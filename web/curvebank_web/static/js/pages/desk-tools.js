// The tools on the paper, and which of them is in the hand at each step.
import * as api from "../net/api.js";
import { nudge, toScreen, toSheet, zoomAt } from "../geometry/affine.js";
import { hold } from "../geometry/lines.js";
import { nearest } from "../geometry/polyline.js";
import { snap } from "../geometry/snap.js";
import { clickChange, newPanel, apply } from "../state/doc.js";
import { axisIds } from "../geometry/panelmap.js";
import { heldWords } from "../state/words.js";
import { axisFor } from "../panels/sentences-curves.js";
import { calibrated } from "../state/derive.js";
import { insidePolygon } from "../geometry/polyline.js";
import { Box } from "../tools/box.js";
import { Grab } from "../tools/grab.js";
import { Navigate } from "../tools/navigate.js";
import { Place } from "../tools/place.js";
import { Straightedge } from "../tools/straightedge.js";
import { $ } from "../view/dom.js";
import { curveOf, findHandle, moveAction, placeOf, removeAction, round, stops } from "./desk-handles.js";
import { Locks } from "./desk-locks.js";
import { Masks } from "./desk-masks.js";

const inside = (desk, panel, sheet) => insidePolygon(sheet, desk.outlineOf(panel) ?? []);

export class DeskTools {
  constructor(desk, draw, tiles, invalidate) {
    Object.assign(this, { desk, draw, tiles, invalidate, space: false });
    const paper = $("paper");
    const at = (e) => this.at(e);
    const view = { view: () => desk.view, setView: (v) => { desk.view = v; desk.moved = true; invalidate("view"); } };
    this.navigate = new Navigate(paper, at, { ...view, spaceHeld: () => this.space, stopOthers: () => this.cancel(), wheel: (e) => this.#wheel(e) }).enable();
    this.grab = new Grab(paper, at, { find: (p, e) => (desk.masks?.on || this.box.enabled ? null : findHandle(desk, p, e.shiftKey)), choose: (hd) => this.choose(hd), drag: (hd, p, e) => this.drag(hd, p, e), drop: (hd) => this.drop(hd), chosen: (hd, p, e) => this.chosen(hd, p, e), back: () => this.back() }).enable();
    this.box = new Box(paper, at, { show: (o) => { desk.box = o; invalidate("paper"); }, done: (o) => this.addPanel(o) });
    this.place = new Place(paper, at, { ...view, place: (p, e) => this.click(p, e), magnify: (screen) => this.#magnify(screen), aim: (screen) => this.#aim(screen) });
    this.edge = new Straightedge([paper, $("replot")], { moved: (m) => this.moved(m), left: () => this.left() }).enable();
    this.plotNavigate = new Navigate($("replot"), (e) => this.#plotAt(e), { view: () => desk.view, setView: view.setView, spaceHeld: () => true, stopOthers: () => {} }).enable();
    desk.masks = new Masks(desk, paper, at, invalidate);
    desk.locks = new Locks(desk, invalidate);
    desk.retool = () => this.retool();
    this.stepped(desk.step);
  }

  at(e) {
    const box = $("paper").getBoundingClientRect();
    const screen = [e.clientX - box.left, e.clientY - box.top];
    return { screen, sheet: this.toSheet(screen) };
  }

  /** A wheel or drag on the re-plot acts on the paper at the same place in engineering units. */
  #plotAt(e) {
    const box = $("replot").getBoundingClientRect();
    const [sx, sy] = [e.clientX - box.left, e.clientY - box.top];
    const { scales } = this.draw;
    const { desk } = this;
    if (!scales || !desk.axes.length) return { screen: [sx, sy] };
    const q = scales.x.invert(sx);
    const x = toScreen(desk.view, desk.axes[0].map.toPixel([q, scales.ys[0].invert(sy)]))[0];
    return { screen: [x, sy] };
  }

  toSheet(screen) {
    const l = this.desk.loupe;
    const inside = l && Math.abs(screen[0] - l.at[0]) < l.side / 2 && Math.abs(screen[1] - l.at[1]) < l.side / 2;
    return toSheet(inside ? l.view : this.desk.view, screen);
  }

  #wheel(e) {
    const l = this.desk.loupe;
    if (!l) return false;
    l.times = Math.min(16, Math.max(2, l.times * Math.exp(-e.deltaY * 0.0016)));
    this.openLoupe(l.at, l.times);
    return true;
  }

  openLoupe(at, times = 9) {
    const { desk } = this;
    const side = innerWidth < 1100 ? 240 : 300;
    desk.loupe = { at, side, times, view: zoomAt(desk.view, times, at, { max: 400 }) };
    this.invalidate("loupe");
  }

  /** Touch: magnify round a held finger, or stop; gives the gearing. */
  #magnify(screen) {
    if (!screen || !["marks", "curves"].includes(this.desk.step)) {
      this.desk.hand = null;
      this.closeLoupe();
      return 0;
    }
    this.openLoupe(screen);
    return this.desk.loupe.times;
  }

  /** Touch: the point a geared finger aims at, in the plain view; the square follows it. */
  #aim(screen) {
    this.desk.hand = screen;
    this.openLoupe(screen, this.desk.loupe?.times);
    this.invalidate("cursor");
    return { screen, sheet: toSheet(this.desk.view, screen) };
  }

  closeLoupe() {
    if (!this.desk.loupe) return;
    this.desk.loupe = null;
    this.invalidate("loupe");
  }

  stepped() {
    this.desk.locking = null;
    if (this.desk.masks.on) this.desk.masks.hold(false);
    else this.retool();
  }

  /** Put into the hand what this step and what is under way want. */
  retool() {
    const { desk } = this;
    this.box.disable();
    this.place.disable();
    const drawing = desk.step === "panel" && (!desk.panel || desk.drawingPanel);
    if (drawing) this.box.enable();
    else if (!desk.masks.on) this.place.enable();
    $("paper").dataset.tool = desk.masks.on ? "brush" : drawing ? "box" : desk.step === "marks" || desk.step === "curves" ? "point" : "hand";
  }

  cancel() {
    for (const t of [this.grab, this.box, this.place, this.desk.masks.brush]) t.cancel();
  }

  moved({ surface, screen }) {
    const { desk, draw } = this;
    desk.pointer = { surface, screen };
    desk.hand = null;
    if (desk.loupe && surface === "paper") {
      const l = desk.loupe;
      if (Math.abs(screen[0] - l.at[0]) > l.side / 2 || Math.abs(screen[1] - l.at[1]) > l.side / 2) this.openLoupe(screen, l.times);
    }
    if (!draw.scales || !desk.axes.length) return;
    if (surface === "paper") {
      const q = desk.axes[0].map.toValues(this.toSheet(screen))[0];
      const [lo, hi] = desk.axes[0].ext.flow;
      const sy = draw.scales.stacked ? draw.scales.ys[0].map(desk.axes[0].map.toValues(this.toSheet(screen))[1]) : screen[1];
      desk.cursor = { q: Math.min(hi, Math.max(lo, q)), sy };
    } else {
      desk.cursor = { q: draw.scales.x.invert(Math.min(Math.max(screen[0], draw.scales.frame[0]), draw.scales.frame[2])), sy: screen[1] };
    }
    this.invalidate("cursor");
  }

  left() {
    if (this.desk.cursor) this.desk.cursor = { ...this.desk.cursor, left: true };
    this.invalidate("cursor");
  }

  addPanel(outline) {
    const { desk } = this;
    const [[x0, y0], , [x1, y1]] = outline;
    const within = (v, hi) => Math.min(hi - 0.5, Math.max(-0.5, v));
    const box = [[x0, y0], [x1, y0], [x1, y1], [x0, y1]].map(([x, y]) => round([within(x, desk.page.width), within(y, desk.page.height)]));
    const panel = newPanel(desk.session.doc, box);
    desk.drawingPanel = false;
    desk.panelId = panel.id;
    desk.act({ type: "panel/add", panel });
    this.stepped("panel");
  }

  choose(handle) {
    const { desk } = this;
    if (handle.kind === "mark") {
      desk.panelId = handle.panel;
      desk.chosenMark = { panel: handle.panel, axis: handle.axis, index: handle.index };
    }
    if (handle.kind === "point") desk.focused = { kind: "point", curve: handle.curve, part: handle.part, index: handle.index, kept: handle.kept };
    desk.grabbed = handle.kind === "point" ? desk.focused : null;
    this.invalidate("doc");
  }

  /** A press that did not move: a trace takes it as a click there, the ring is accepted, a lock sign chooses its stretch. */
  chosen(handle, point, e) {
    const { desk } = this;
    desk.grabbed = null;
    if (handle.kind === "line") return this.click(point, e);
    if (handle.kind === "hint") return this.acceptHint(handle, point.sheet);
    if (handle.kind === "lock") {
      desk.select(handle.curve);
      desk.focused = { kind: "lock", curve: handle.curve, index: handle.index, kept: true };
    } else if (handle.kind === "point" && handle.kept && desk.selected !== handle.curve) desk.selected = handle.curve;
    return this.invalidate("all");
  }

  /** The one extra click that settles a doubt, where the user put it. */
  acceptHint(handle, at) {
    const { desk } = this;
    const action = moveAction(desk, handle, round(at));
    if (action) desk.act(action);
    desk.say("The line is followed again through that click.");
  }

  drag(handle, { sheet, screen }, e) {
    const { desk } = this;
    const mark = handle.kind === "mark" || handle.kind === "open";
    const held = mark ? this.snapped(sheet, e) : null;
    const action = moveAction(desk, handle, held ? held.at : round(sheet));
    if (!action) {
      if (handle.kind === "line" && !this.told) desk.say("This stretch is locked. Unlock it first: choose its lock sign.");
      this.told = true;
      return;
    }
    this.last = handle.kind === "open" ? { ...action, held: held.held } : action;
    this.marked = mark ? { sheet, e: { shiftKey: e.shiftKey, altKey: e.altKey } } : null;
    if (handle.kind === "line") desk.grabbed = { curve: handle.curve, part: "guides", index: (curveOf(desk.session.doc, handle).guides ?? []).length, kept: handle.kept };
    desk.drag = { doc: apply(desk.session.doc, this.last) };
    this.moved({ surface: "paper", screen });
    this.invalidate("doc");
  }

  drop(handle) {
    const { desk } = this;
    const { last, marked } = this;
    const made = desk.grabbed;
    this.last = null;
    this.marked = null;
    this.told = false;
    const settle = (action, held) => {
      desk.drag = null;
      desk.grabbed = null;
      if (action) desk.act(action);
      if (action && held) desk.say(heldWords(held));
      if (action && handle.kind === "line") {
        if (handle.kept) desk.selected = handle.curve;
        desk.focused = { kind: "point", ...made };
      }
      this.invalidate("all");
    };
    if (!last || !marked) return settle(last);
    return this.land(marked.sheet, marked.e, ({ at, held }) => settle({ ...last, at, ...(handle.kind === "open" ? { held } : {}) }, held));
  }

  back() {
    this.desk.drag = null;
    this.desk.grabbed = null;
    this.last = null;
    this.marked = null;
    this.told = false;
    this.invalidate("doc");
  }

  /**
   * Where a mark lands: measured in the ink by the server, which knows ticks too, or as this page sees it where no answer comes in a
   * moment or nothing is found. `then(landed)` is called once.
   */
  async land(sheet, e, then) {
    const { desk } = this;
    const here = this.snapped(sheet, e);
    if (e?.shiftKey || e?.altKey || desk.session.outbox.away) return then(here);
    const scale = desk.loupe ? desk.loupe.view.scale : desk.view.scale;
    const patience = new AbortController();
    const timer = setTimeout(() => patience.abort(), 400);
    let got = null;
    try {
      got = (await api.snap(desk.session.id, sheet, Math.max(2.5, Math.min(14, 8 / scale)), patience.signal)).snap;
    } catch {
      // The page's own look is good enough to go on with.
    }
    clearTimeout(timer);
    const far = got ? Math.hypot(got.at[0] - sheet[0], got.at[1] - sheet[1]) : 0;
    return then(got && !(got.kind === "line" && here.held?.kind === "crossing") ? { at: round(got.at), held: { kind: got.kind, moved_px: far, sigma_px: got.sigma_px } } : here);
  }

  /** A place held to the printed crossing, line or tick within 8 screen px, unless Shift or Alt is down. {at, held: {kind, moved_px, sigma_px} | undefined} */
  snapped(sheet, e) {
    const { desk } = this;
    if (e?.shiftKey || e?.altKey) return { at: round(sheet), held: undefined };
    const scale = desk.loupe ? desk.loupe.view.scale : desk.view.scale;
    const reach = Math.max(2.5, Math.min(14, 8 / scale));
    const lines = desk.lines?.found;
    const found = lines ? hold(lines, sheet, reach) : null;
    if (found?.kind === "crossing") return { at: round(found.at), held: { kind: found.kind, moved_px: found.moved_px, sigma_px: found.sigma_px } };
    const patch = this.tiles.patch(sheet, Math.ceil(reach) + 12);
    const got = patch && snap(patch, [sheet[0] - patch.origin[0], sheet[1] - patch.origin[1]], reach);
    if (got && (got.kind === "crossing" || !found)) {
      const at = round([got.at[0] + patch.origin[0], got.at[1] + patch.origin[1]]);
      return { at, held: { kind: got.kind, moved_px: Math.hypot(at[0] - sheet[0], at[1] - sheet[1]) } };
    }
    return found ? { at: round(found.at), held: { kind: found.kind, moved_px: found.moved_px, sigma_px: found.sigma_px } } : { at: round(sheet), held: undefined };
  }

  click({ sheet, screen }, e) {
    const { desk } = this;
    const { width, height } = desk.page;
    if (sheet[0] < -0.5 || sheet[1] < -0.5 || sheet[0] > width - 0.5 || sheet[1] > height - 0.5) return;
    const number = e.target.closest?.("[data-finding]")?.dataset.finding;
    if (number) return desk.chooseFinding(Number(number));
    if (desk.step === "marks") return this.#markAt(sheet, e);
    if (desk.step === "curves") return this.#curveAt(sheet, screen, e);
    const other = (desk.doc.panels ?? []).find((p) => inside(desk, p, sheet));
    if (other && other.id !== desk.panel?.id) return desk.choosePanel(other.id);
    const trace = this.traceAt(screen);
    if (trace && desk.step === "fit") desk.select(trace.id);
    return undefined;
  }

  /** Screen distance to a curve's trace; 0 where it has none yet, so that a guide can still be added. */
  #awayFrom(id, screen) {
    const item = this.desk.items.find((i) => i.id === id);
    if (!item?.pixels.length) return 0;
    return nearest(item.pixels.map((p) => toScreen(this.desk.view, p)), screen).distance;
  }

  traceAt(screen, reach = 4.5) {
    const { desk } = this;
    let best = null;
    for (const item of desk.items) {
      if (!item.kept || !item.pixels.length) continue;
      const hit = nearest(item.pixels.map((p) => toScreen(desk.view, p)), screen);
      if (hit && hit.distance < reach && (!best || hit.distance < best.d)) best = { id: item.id, d: hit.distance };
    }
    return best;
  }

  /** Open a mark at a sheet place that a finding names, held to the printed line there. */
  markHere(sheet) {
    this.#open(sheet);
  }

  #markAt(sheet, e) {
    const { desk } = this;
    if (!desk.panel) return;
    const inOther = (desk.doc.panels ?? []).find((p) => p.id !== desk.panel.id && inside(desk, p, sheet) && !inside(desk, desk.panel, sheet));
    if (inOther && !desk.openMark) desk.panelId = inOther.id;
    desk.chosenMark = null;
    this.#open(sheet, e);
  }

  #open(sheet, e) {
    const { desk } = this;
    const panel = desk.panel.id;
    this.land(sheet, e, ({ at, held }) => {
      if (held) desk.say(heldWords(held));
      desk.focusBlank = "mark";
      desk.act({ type: "mark/open", panel, at, held });
    });
  }

  #curveAt(sheet, screen, e) {
    const { desk } = this;
    const at = round(sheet);
    if (desk.locking) return desk.locks.at(screen);
    if (desk.openCurve) {
      const open = desk.openCurve;
      const [x, y] = toScreen(desk.view, open.clicks[0]);
      if (open.quantity.endsWith("_contour") && open.clicks.length >= 3 && !open.closed && Math.hypot(x - screen[0], y - screen[1]) < 9) {
        desk.say("The line is closed.");
        return desk.act({ type: "curve/change", change: { closed: true } });
      }
      const more = clickChange(open, at);
      if (more.clicks.length >= 2) desk.focusBlank = "curve";
      return desk.act({ type: "curve/change", change: more });
    }
    const chosen = (desk.doc.curves ?? []).find((c) => c.id === desk.selected);
    const trace = this.traceAt(screen);
    const off = !(trace && trace.id !== chosen?.id);
    const free = chosen?.kind === "hand" || chosen?.kind === "points";
    if (chosen && desk.guiding && !e.shiftKey && off && (free || this.#awayFrom(chosen.id, screen) < 40)) {
      const handle = { kind: "line", curve: chosen.id, kept: true, locked: -1 };
      desk.act(free ? { ...moveAction(desk, { ...handle, kind: "hint" }, at), did: "click set" } : moveAction(desk, handle, at));
      return undefined;
    }
    // A line that begins on a kept trace: that click chose the trace, this one leaves it. A kept curve is never bent by the way.
    const begun = chosen && !trace && desk.touched?.curve === chosen.id && !e.shiftKey ? desk.touched.at : null;
    if (trace && !e.shiftKey) {
      desk.select(trace.id);
      desk.touched = { curve: trace.id, at };
      return undefined;
    }
    const here = (desk.doc.panels ?? []).filter((p) => calibrated(p) && inside(desk, p, sheet));
    const panel = here.find((p) => p.id === desk.panel?.id) ?? here[0] ?? desk.panel;
    if (!panel || !calibrated(panel)) return desk.say("This panel has no scales yet: give each two marks.");
    desk.selected = null;
    desk.panelId = panel.id;
    if (begun) desk.focusBlank = "curve";
    return desk.act({ type: "curve/open", curve: this.fresh(panel, begun ? [begun, at] : [at]) });
  }

  /** A new curve that carries over what the last one on this panel was. */
  fresh(panel, clicks) {
    const { desk } = this;
    const ids = axisIds(panel);
    const last = [...(desk.doc.curves ?? [])].reverse().find((c) => c.panel === panel.id);
    const quantity = last?.quantity ?? panel.axes[ids.value[0]].quantity;
    const any = [...(desk.doc.curves ?? [])].reverse()[0];
    const kind = last?.kind === "points" ? "points" : undefined;
    const curve = { id: `open-${Date.now().toString(36)}`, panel: panel.id, x: ids.flow[0], y: last?.y && panel.axes[last.y] ? last.y : axisFor(panel, quantity), quantity, clicks, ...(kind ? { kind } : {}) };
    const speed = last?.speed_rpm ?? any?.speed_rpm ?? desk.doc.pump?.speed_rpm;
    if (speed) curve.speed_rpm = speed;
    return curve;
  }

  /** Arrow keys: the focused guide or chosen mark by 0.1 px (1 px with Shift), else the straightedge. */
  arrow(e) {
    const { desk } = this;
    const [dx, dy] = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] }[e.key];
    const step = e.shiftKey ? 1 : 0.1;
    const handle = desk.focused ?? (desk.chosenMark ? { kind: "mark", ...desk.chosenMark } : desk.step === "marks" && desk.openMark ? { kind: "open" } : null);
    if (handle && document.activeElement === $("paper") && !desk.masks.on && handle.kind !== "lock") {
      const at = placeOf(desk, handle);
      if (at) {
        const action = moveAction(desk, handle, nudge(desk.view, at, dx * step, dy * step));
        if (handle.kind === "hint") desk.focused = { kind: "point", part: "clicks", curve: handle.curve, kept: handle.kept, index: action.change.clicks.findIndex((p) => Math.hypot(p[0] - at[0], p[1] - at[1]) < 2) };
        desk.act(action);
        return undefined;
      }
    }
    if (document.activeElement === $("paper") && (desk.masks.on || ["panel", "marks", "curves"].includes(desk.step))) return this.moveHand(dx, dy, e.shiftKey ? 1 : 8);
    const { scales } = this.draw;
    if (!scales) return;
    const [x0, y0, x1, y1] = scales.frame;
    const c = desk.cursor ?? { q: scales.x.invert((x0 + x1) / 2), sy: (y0 + y1) / 2 };
    const px = Math.min(x1, Math.max(x0, scales.x.map(c.q) + dx * (e.shiftKey ? 10 : 1)));
    desk.cursor = { q: scales.x.invert(px), sy: Math.min(y1, Math.max(y0, c.sy + dy * (e.shiftKey ? 24 : 8))) };
    this.invalidate("cursor");
  }

  /** The hand: a cross on the paper that arrow keys move and P puts down; it starts where the pointer is. */
  moveHand(dx, dy, step) {
    const { desk } = this;
    const paper = $("paper");
    const from = desk.hand ?? (desk.pointer?.surface === "paper" ? desk.pointer.screen : [paper.clientWidth / 2, paper.clientHeight / 2]);
    const within = (v, hi) => Math.min(hi - 1, Math.max(1, v));
    desk.hand = [within(from[0] + dx * step, paper.clientWidth), within(from[1] + dy * step, paper.clientHeight)];
    this.moved({ surface: "paper", screen: desk.hand });
    desk.hand = desk.pointer.screen;
    if (this.box.enabled) this.box.hoverAt(this.#handPoint());
    desk.masks.moved(desk.hand);
    this.invalidate("cursor");
  }

  #handPoint() {
    const { desk } = this;
    const screen = desk.hand ?? (desk.pointer?.surface === "paper" ? desk.pointer.screen : null);
    return screen && { screen, sheet: this.toSheet(screen) };
  }

  /** Put a corner, a mark or a guide where the hand is: what a click there would do. */
  putDown(e) {
    const { desk } = this;
    const here = this.#handPoint();
    if (!here) return desk.say("Arrow keys move the hand first; P then puts a point down.");
    if (desk.masks.on) return desk.masks.press(here.screen);
    if (this.box.enabled) return this.box.corner(here);
    if (["marks", "curves"].includes(desk.step)) return this.click(here, { target: $("paper"), shiftKey: e.shiftKey });
    return undefined;
  }

  removeFocused() {
    const { desk } = this;
    const g = desk.focused;
    if (desk.masks.on && desk.masks.chosen !== null) desk.masks.remove(desk.masks.chosen);
    else if (g?.kind === "point") {
      const action = removeAction(desk, g);
      desk.focused = null;
      if (action) desk.act(action);
    } else if (g?.kind === "lock") desk.locks.unlock(g.curve, g.index);
    else if (desk.chosenMark) desk.removeChosenMark();
  }

  /** Tab inside the paper walks marks, clicks, guides, lock signs and hint rings; gives false when there is nothing further. */
  walk(back) {
    const { desk } = this;
    const list = stops(desk);
    const now = JSON.stringify(desk.chosenMark ?? desk.focused);
    const at = list.findIndex((s) => JSON.stringify(s.mark ?? s.handle) === now);
    const next = at < 0 ? (back ? -1 : 0) : at + (back ? -1 : 1);
    desk.chosenMark = list[next]?.mark ?? null;
    desk.focused = list[next]?.handle ?? null;
    if (desk.focused?.kept) desk.selected = desk.focused.curve;
    if (desk.focused) desk.say(this.#stopWords(desk.focused));
    this.invalidate("doc");
    return next >= 0 && next < list.length;
  }

  #stopWords(stop) {
    const label = this.desk.items.find((i) => i.id === stop.curve)?.label || "this line";
    if (stop.kind === "hint") return `Ring on ${label}: one click here would settle it. Enter puts it there, arrow keys move it.`;
    if (stop.kind === "lock") return `Locked stretch of ${label}. Delete unlocks it.`;
    return `${stop.part === "guides" ? "Guide" : "Click"} ${stop.index + 1} of ${label}.`;
  }
}
