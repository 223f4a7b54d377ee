// The tools on the paper, and which of them is in the hand at each step.
import { nudge, toScreen, toSheet, zoomAt } from "../geometry/affine.js";
import { nearest } from "../geometry/polyline.js";
import { snap } from "../geometry/snap.js";
import { clickChange, desk as deskPart, insertClick, newPanel, apply } from "../state/doc.js";
import { axisIds } from "../geometry/panelmap.js";
import { axisFor } from "../panels/sentences-curves.js";
import { calibrated } from "../state/derive.js";
import { insidePolygon } from "../geometry/polyline.js";
import { Box } from "../tools/box.js";
import { Grab } from "../tools/grab.js";
import { Navigate } from "../tools/navigate.js";
import { Place } from "../tools/place.js";
import { Straightedge } from "../tools/straightedge.js";
import { $ } from "../view/dom.js";

const inside = (desk, panel, sheet) => insidePolygon(sheet, desk.outlineOf(panel) ?? []);
const round = (p) => p.map((v) => Math.round(v * 100) / 100);

export class DeskTools {
  constructor(desk, draw, tiles, invalidate) {
    Object.assign(this, { desk, draw, tiles, invalidate, space: false });
    const paper = $("paper");
    const at = (e) => this.at(e);
    const view = { view: () => desk.view, setView: (v) => { desk.view = v; desk.moved = true; invalidate("view"); } };
    this.navigate = new Navigate(paper, at, { ...view, spaceHeld: () => this.space, stopOthers: () => this.cancel(), wheel: (e) => this.#wheel(e) }).enable();
    this.grab = new Grab(paper, at, { find: (p) => this.find(p), choose: (hd) => this.choose(hd), drag: (hd, p, e) => this.drag(hd, p, e), drop: () => this.drop(), chosen: (hd) => this.chosen(hd), back: () => this.back() }).enable();
    this.box = new Box(paper, at, { show: (o) => { desk.box = o; invalidate("paper"); }, done: (o) => this.addPanel(o) });
    this.place = new Place(paper, at, { ...view, place: (p, e) => this.click(p, e), magnify: (screen) => this.#magnify(screen), aim: (screen) => this.#aim(screen) });
    this.edge = new Straightedge([paper, $("replot")], { moved: (m) => this.moved(m), left: () => this.left() }).enable();
    this.plotNavigate = new Navigate($("replot"), (e) => this.#plotAt(e), { view: () => desk.view, setView: view.setView, spaceHeld: () => true, stopOthers: () => {} }).enable();
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

  stepped(step) {
    this.box.disable();
    this.place.disable();
    const drawing = step === "panel" && (!this.desk.panel || this.desk.drawingPanel);
    if (drawing) this.box.enable();
    else this.place.enable();
    $("paper").dataset.tool = drawing ? "box" : step === "marks" || step === "curves" ? "point" : "hand";
  }

  cancel() {
    for (const t of [this.grab, this.box, this.place]) t.cancel();
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

  /** The nearest handle within 12 screen px. */
  find({ screen }) {
    const { desk } = this;
    const near = (p) => Math.hypot(...toScreen(desk.loupe ? desk.loupe.view : desk.view, p).map((v, i) => v - screen[i]));
    const list = [];
    if (desk.step === "panel" && desk.panel?.outline && !desk.drawingPanel) desk.panel.outline.forEach((p, i) => list.push({ kind: "corner", index: i, d: near(p) }));
    if (desk.step === "marks") {
      if (desk.openMark) list.push({ kind: "open", d: near(desk.openMark.at) });
      for (const panel of desk.doc.panels ?? []) for (const [axis, a] of Object.entries(panel.axes)) (a.marks ?? []).forEach((m, index) => list.push({ kind: "mark", panel: panel.id, axis, index, d: near(m.at) + (panel.id === desk.panel?.id ? 0 : 6) }));
    }
    if (desk.step === "curves") {
      for (const item of desk.items) if (item.id === desk.selected || !item.kept) (item.curve.clicks ?? []).forEach((p, index) => list.push({ kind: "guide", curve: item.id, kept: item.kept, index, d: near(p) }));
    }
    const best = list.sort((a, b) => a.d - b.d)[0];
    return best && best.d < 12 ? best : null;
  }

  choose(handle) {
    const { desk } = this;
    if (handle.kind === "mark") {
      desk.panelId = handle.panel;
      desk.chosenMark = { panel: handle.panel, axis: handle.axis, index: handle.index };
    }
    if (handle.kind === "guide") desk.focusedGuide = { curve: handle.curve, index: handle.index, kept: handle.kept };
    desk.grabbed = handle.kind === "guide" ? { curve: handle.curve, index: handle.index } : null;
    this.invalidate("doc");
  }

  chosen() {
    this.desk.grabbed = null;
    this.invalidate("all");
  }

  action(handle, sheet) {
    const { desk } = this;
    const at = round(sheet);
    if (handle.kind === "mark") return { type: "marks/move", panel: handle.panel, from: desk.session.doc.panels.find((p) => p.id === handle.panel).axes[handle.axis].marks[handle.index].at, at };
    if (handle.kind === "open") return { type: "mark/open", panel: desk.openMark.panel, at };
    if (handle.kind === "corner") {
      const outline = desk.session.doc.panels.find((p) => p.id === desk.panel.id).outline.map((p) => [...p]);
      const o = (handle.index + 2) % 4;
      const [ox, oy] = outline[o];
      const box = [[Math.min(at[0], ox), Math.min(at[1], oy)], [Math.max(at[0], ox), Math.max(at[1], oy)]];
      return { type: "panel/set", panel: desk.panel.id, change: { outline: [box[0], [box[1][0], box[0][1]], box[1], [box[0][0], box[1][1]]] } };
    }
    const curve = handle.kept ? desk.session.doc.curves.find((c) => c.id === handle.curve) : deskPart(desk.session.doc).curve;
    const clicks = curve.clicks.map((p, i) => (i === handle.index ? at : p));
    return handle.kept ? { type: "curve/set", curve: handle.curve, change: { clicks } } : { type: "curve/change", change: { clicks } };
  }

  drag(handle, { sheet, screen }, e) {
    const { desk } = this;
    const to = handle.kind === "mark" || handle.kind === "open" ? this.snapped(sheet, e).at : sheet;
    this.last = this.action(handle, to);
    desk.drag = { doc: apply(desk.session.doc, this.last) };
    this.moved({ surface: "paper", screen });
    this.invalidate("doc");
  }

  drop() {
    const { desk } = this;
    desk.drag = null;
    desk.grabbed = null;
    if (this.last) desk.act(this.last);
    this.last = null;
  }

  back() {
    this.desk.drag = null;
    this.desk.grabbed = null;
    this.last = null;
    this.invalidate("doc");
  }

  /** A place held to the printed crossing, line or tick within 8 screen px, unless Shift is down. */
  snapped(sheet, e) {
    const { desk } = this;
    if (e?.shiftKey) return { at: round(sheet), held: undefined };
    const scale = desk.loupe ? desk.loupe.view.scale : desk.view.scale;
    const reach = Math.max(2.5, Math.min(14, 8 / scale));
    const patch = this.tiles.patch(sheet, Math.ceil(reach) + 12);
    const got = patch && snap(patch, [sheet[0] - patch.origin[0], sheet[1] - patch.origin[1]], reach);
    return got ? { at: round([got.at[0] + patch.origin[0], got.at[1] + patch.origin[1]]), held: got.kind } : { at: round(sheet), held: undefined };
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

  #markAt(sheet, e) {
    const { desk } = this;
    if (!desk.panel) return;
    const { at, held } = this.snapped(sheet, e);
    const inOther = (desk.doc.panels ?? []).find((p) => p.id !== desk.panel.id && inside(desk, p, sheet) && !inside(desk, desk.panel, sheet));
    if (inOther && !desk.openMark) desk.panelId = inOther.id;
    desk.chosenMark = null;
    desk.focusBlank = "mark";
    desk.act({ type: "mark/open", panel: desk.panel.id, at, held });
  }

  #curveAt(sheet, screen, e) {
    const { desk } = this;
    const at = round(sheet);
    if (desk.openCurve) {
      const change = clickChange(desk.openCurve, at);
      if (change.clicks.length >= 2) desk.focusBlank = "curve";
      return desk.act({ type: "curve/change", change });
    }
    const chosen = (desk.doc.curves ?? []).find((c) => c.id === desk.selected);
    const trace = this.traceAt(screen);
    const off = !(trace && trace.id !== chosen?.id);
    if (chosen && desk.guiding && !e.shiftKey && off && this.#awayFrom(chosen.id, screen) < 40) {
      return desk.act({ type: "curve/set", curve: chosen.id, change: { clicks: insertClick(chosen.clicks, at) } });
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
    const curve = { id: `open-${Date.now().toString(36)}`, panel: panel.id, x: ids.flow[0], y: last?.y && panel.axes[last.y] ? last.y : axisFor(panel, quantity), quantity, clicks };
    const speed = last?.speed_rpm ?? any?.speed_rpm ?? desk.doc.pump?.speed_rpm;
    if (speed) curve.speed_rpm = speed;
    return curve;
  }

  /** Arrow keys: the focused guide or chosen mark by 0.1 px (1 px with Shift), else the straightedge. */
  arrow(e) {
    const { desk } = this;
    const [dx, dy] = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] }[e.key];
    const step = e.shiftKey ? 1 : 0.1;
    const handle = desk.focusedGuide ? { kind: "guide", ...desk.focusedGuide } : desk.chosenMark ? { kind: "mark", ...desk.chosenMark } : desk.step === "marks" && desk.openMark ? { kind: "open" } : null;
    if (handle && document.activeElement === $("paper")) {
      const at = handle.kind === "mark" ? desk.doc.panels.find((p) => p.id === handle.panel)?.axes[handle.axis]?.marks[handle.index]?.at : handle.kind === "open" ? desk.openMark.at : (handle.kept ? desk.doc.curves.find((c) => c.id === handle.curve) : desk.openCurve)?.clicks[handle.index];
      if (at) {
        desk.act(this.action(handle, nudge(desk.view, at, dx * step, dy * step)));
        return;
      }
    }
    if (document.activeElement === $("paper") && ["panel", "marks", "curves"].includes(desk.step)) return this.moveHand(dx, dy, e.shiftKey ? 1 : 8);
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
    if (this.box.enabled) return this.box.corner(here);
    if (["marks", "curves"].includes(desk.step)) return this.click(here, { target: $("paper"), shiftKey: e.shiftKey });
    return undefined;
  }

  removeFocused() {
    const { desk } = this;
    const g = desk.focusedGuide;
    if (g) {
      const curve = g.kept ? desk.doc.curves.find((c) => c.id === g.curve) : desk.openCurve;
      if (!curve) return;
      const clicks = curve.clicks.filter((_, i) => i !== g.index);
      desk.focusedGuide = null;
      if (g.kept) desk.act(clicks.length < 2 ? { type: "curve/remove", curve: curve.id } : { type: "curve/set", curve: curve.id, change: { clicks } });
      else desk.act(clicks.length ? { type: "curve/change", change: { clicks } } : { type: "curve/drop" });
    } else if (desk.chosenMark) desk.removeChosenMark();
  }

  /** Tab inside the paper walks marks or guides; gives false when there is nothing further. */
  walk(back) {
    const { desk } = this;
    const stops = [];
    if (desk.step === "marks" && desk.panel) for (const [axis, a] of Object.entries(desk.panel.axes)) (a.marks ?? []).forEach((_, index) => stops.push({ mark: { panel: desk.panel.id, axis, index } }));
    if (desk.step === "curves") for (const item of desk.items) (item.curve.clicks ?? []).forEach((_, index) => stops.push({ guide: { curve: item.id, index, kept: item.kept } }));
    const now = JSON.stringify(desk.chosenMark ?? desk.focusedGuide);
    const at = stops.findIndex((s) => JSON.stringify(s.mark ?? s.guide) === now);
    const next = at < 0 ? (back ? -1 : 0) : at + (back ? -1 : 1);
    desk.chosenMark = stops[next]?.mark ?? null;
    desk.focusedGuide = stops[next]?.guide ?? null;
    if (desk.focusedGuide?.kept) desk.selected = desk.focusedGuide.curve;
    this.invalidate("doc");
    return next >= 0 && next < stops.length;
  }
}
