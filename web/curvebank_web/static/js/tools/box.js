// Draw round a plot: drag from corner to corner, or click one corner and then the other.
import { Tool } from "./tool.js";

export const boxOutline = ([x0, y0], [x1, y1]) => {
  const [a, b] = [Math.min(x0, x1), Math.max(x0, x1)];
  const [c, d] = [Math.min(y0, y1), Math.max(y0, y1)];
  return [[a, c], [b, c], [b, d], [a, d]];
};

export class Box extends Tool {
  /** hooks: show(outline | null), done(outline), least: smallest side in screen px */
  constructor(surface, at, hooks) {
    super(surface, at);
    this.hooks = hooks;
    this.first = null;
    this.hover = (e) => !this.gesture && this.hoverAt(this.at(e));
    this.key = (e) => {
      if (e.key === "Escape" && this.first) {
        e.stopImmediatePropagation();
        this.cancelled();
      }
    };
  }

  enable() {
    if (this.enabled) return this;
    super.enable();
    this.surface.addEventListener("pointermove", this.hover);
    window.addEventListener("keydown", this.key, true);
    return this;
  }

  disable() {
    if (!this.enabled) return;
    super.disable();
    this.cancelled();
    this.surface.removeEventListener("pointermove", this.hover);
    window.removeEventListener("keydown", this.key, true);
  }

  claims(e) {
    return e.button === 0;
  }

  move(to, gesture) {
    if (gesture.moved) this.hooks.show(boxOutline(gesture.from.sheet, to.sheet));
  }

  hoverAt(point) {
    if (this.first) this.hooks.show(boxOutline(this.first.sheet, point.sheet));
  }

  end(to, gesture) {
    if (gesture.moved) this.first = gesture.from;
    this.corner(gesture.moved ? to : gesture.from);
  }

  /** The first corner, or the one that finishes the box. */
  corner(to) {
    const from = this.first;
    if (!from) {
      this.first = to;
      return;
    }
    const [w, h] = [Math.abs(to.screen[0] - from.screen[0]), Math.abs(to.screen[1] - from.screen[1])];
    this.first = null;
    this.hooks.show(null);
    if (w > 24 && h > 24) this.hooks.done(boxOutline(from.sheet, to.sheet));
  }

  cancelled() {
    this.first = null;
    this.hooks.show(null);
  }
}
