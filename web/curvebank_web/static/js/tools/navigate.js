// Look closer and move about: wheel zooms at the pointer, Space or the middle button pans, two fingers do both.
import { panBy, zoomAt } from "../geometry/affine.js";
import { Tool } from "./tool.js";

export class Navigate extends Tool {
  /** hooks: view() -> view, setView(view), spaceHeld() -> bool */
  constructor(surface, at, hooks) {
    super(surface, at);
    this.hooks = hooks;
    this.touches = new Map();
    this.wheel = (e) => {
      if (!hooks.view()) return;
      e.preventDefault();
      if (hooks.wheel?.(e)) return;
      const pinch = e.ctrlKey ? 0.012 : 0.0016;
      const step = e.deltaMode === 1 ? e.deltaY * 16 : e.deltaY;
      hooks.setView(zoomAt(hooks.view(), Math.exp(-step * pinch), this.at(e).screen));
    };
    this.touch = (e) => this.#touch(e);
  }

  enable() {
    if (this.enabled) return this;
    super.enable();
    this.surface.addEventListener("wheel", this.wheel, { passive: false });
    for (const n of ["pointerdown", "pointermove", "pointerup", "pointercancel"]) this.surface.addEventListener(n, this.touch, true);
    return this;
  }

  disable() {
    if (!this.enabled) return;
    super.disable();
    this.surface.removeEventListener("wheel", this.wheel);
    for (const n of ["pointerdown", "pointermove", "pointerup", "pointercancel"]) this.surface.removeEventListener(n, this.touch, true);
  }

  claims(e) {
    return e.button === 1 || (e.button === 0 && this.hooks.spaceHeld());
  }

  start(here) {
    this.last = here.screen;
  }

  move(to) {
    this.hooks.setView(panBy(this.hooks.view(), to.screen[0] - this.last[0], to.screen[1] - this.last[1]));
    this.last = to.screen;
  }

  #touch(e) {
    if (e.pointerType !== "touch") return;
    const { screen } = this.at(e);
    if (e.type === "pointerdown") this.touches.set(e.pointerId, screen);
    else if (e.type !== "pointermove") this.touches.delete(e.pointerId);
    else if (this.touches.has(e.pointerId) && this.touches.size === 2) {
      const [other] = [...this.touches].filter(([id]) => id !== e.pointerId).map(([, p]) => p);
      const was = this.touches.get(e.pointerId);
      const middle = (a) => [(a[0] + other[0]) / 2, (a[1] + other[1]) / 2];
      const [m0, m1] = [middle(was), middle(screen)];
      const d0 = Math.hypot(was[0] - other[0], was[1] - other[1]);
      const d1 = Math.hypot(screen[0] - other[0], screen[1] - other[1]);
      this.hooks.setView(panBy(zoomAt(this.hooks.view(), d0 > 4 ? d1 / d0 : 1, m0), m1[0] - m0[0], m1[1] - m0[1]));
      this.touches.set(e.pointerId, screen);
      e.stopPropagation();
    } else if (this.touches.has(e.pointerId)) this.touches.set(e.pointerId, screen);
    if (this.touches.size === 2 && e.type === "pointerdown") {
      this.hooks.stopOthers();
      e.preventDefault();
    }
  }
}
