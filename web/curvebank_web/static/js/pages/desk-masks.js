// Masking at the desk: the brush in the hand, its width, the eraser, and the list of what is masked. Only doc.sheet.masks is kept.
import { toScreen, toSheet } from "../geometry/affine.js";
import { erase, stroke } from "../geometry/brush.js";
import { Brush } from "../tools/brush.js";
import { $ } from "../view/dom.js";

const STEPS_WITH_BRUSH = ["sheet", "marks", "curves"];
const WIDTHS = [4, 6, 8, 10, 14, 20, 28, 40, 56, 80, 110, 160, 220, 320, 450, 640, 900];

/** The next width of the brush up or down from `now`, in sheet pixels. */
export function nextWidth(now, up) {
  if (up) return WIDTHS.find((w) => w > now + 0.01) ?? WIDTHS[WIDTHS.length - 1];
  return [...WIDTHS].reverse().find((w) => w < now - 0.01) ?? WIDTHS[0];
}

export class Masks {
  constructor(desk, surface, at, invalidate) {
    Object.assign(this, { desk, invalidate, on: false, erasing: false, width: null, way: null, hover: null, chosen: null, penDown: false });
    this.brush = new Brush(surface, at, {
      show: (way) => { this.way = way; invalidate("paper"); },
      done: (way) => this.paint(way),
      hover: (screen) => { this.hover = screen; invalidate("cursor"); },
    });
  }

  get list() {
    return this.desk.doc.sheet?.masks ?? [];
  }

  /** The brush's width in sheet pixels: at first an eightieth of the sheet. */
  get px() {
    this.width ??= WIDTHS.reduce((a, w) => (Math.abs(w - this.desk.page.width / 60) < Math.abs(a - this.desk.page.width / 60) ? w : a));
    return this.width;
  }

  get offered() {
    return STEPS_WITH_BRUSH.includes(this.desk.step) && Boolean(this.desk.page);
  }

  /** Take the brush or lay it down. */
  hold(on) {
    if (on && !this.offered) return;
    this.on = on;
    this.penDown = false;
    this.chosen = null;
    if (on) this.brush.enable();
    else {
      this.brush.disable();
      this.erasing = false;
      this.way = null;
    }
    this.desk.retool();
    this.invalidate("all");
  }

  resize(up) {
    this.width = nextWidth(this.px, up);
    this.desk.say(`Brush ${this.width} px wide.`);
    this.invalidate("all");
  }

  paint(way) {
    const { list } = this;
    const masks = this.erasing ? erase(list, way, this.px) : [...list, stroke(way, this.px)];
    if (this.erasing && JSON.stringify(masks) === JSON.stringify(list)) return;
    this.chosen = null;
    this.desk.act({ type: "masks/set", masks, did: this.erasing ? "masks erased" : "masked" });
  }

  remove(index) {
    this.chosen = null;
    this.desk.act({ type: "masks/set", masks: this.list.filter((_, i) => i !== index), did: `mask ${index + 1} removed` });
  }

  /** Take the masks away round one place, as wide as the brush. */
  uncover(at) {
    this.desk.act({ type: "masks/set", masks: erase(this.list, [at], this.px), did: "mask erased" });
  }

  /** By keyboard: the first press puts the brush down at `screen`, arrows paint, the next press lifts it. */
  press(screen) {
    const sheet = toSheet(this.desk.view, screen);
    if (!this.penDown) {
      this.penDown = true;
      this.way = [sheet];
      this.desk.say(this.erasing ? "Eraser down: arrow keys erase, P lifts it." : "Brush down: arrow keys paint, P lifts it.");
      this.invalidate("paper");
      return;
    }
    const way = [...this.way, sheet];
    this.lift();
    this.paint(way);
  }

  moved(screen) {
    this.hover = screen;
    if (!this.penDown) return;
    this.way.push(toSheet(this.desk.view, screen));
    this.invalidate("paper");
  }

  /** Give the stroke up. False when there was none. */
  lift() {
    const was = this.penDown;
    this.penDown = false;
    this.way = null;
    this.invalidate("paper");
    return was;
  }

  show(index) {
    this.chosen = index;
    const points = this.list[index].brush ?? this.list[index].outline;
    this.desk.travelTo([points[Math.floor(points.length / 2)]]);
    $("paper").focus({ preventScroll: true });
  }

  /** What the overlay draws. */
  scene() {
    return { masks: this.list, chosen: this.chosen, numbered: this.on || this.desk.step === "sheet", erasing: this.erasing, stroke: this.way ? { brush: this.way, width_px: this.px } : null };
  }

  edge() {
    const at = this.desk.hand ?? this.hover;
    return this.on && at && this.desk.view ? { at, width: this.px * this.desk.view.scale } : null;
  }

  placeOf(index) {
    const points = this.list[index].brush ?? this.list[index].outline;
    return toScreen(this.desk.view, points[0]);
  }
}
