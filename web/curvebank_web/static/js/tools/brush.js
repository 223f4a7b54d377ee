// The brush that masks: a press paints, a drag paints along the way, Escape gives the stroke up.
import { Tool } from "./tool.js";

export class Brush extends Tool {
  /** hooks: show(way | null), done(way), hover(screen | null); ways are sheet pixels. */
  constructor(surface, at, hooks) {
    super(surface, at);
    this.hooks = hooks;
    this.over = (e) => !this.gesture && hooks.hover(this.at(e).screen);
    this.off = () => hooks.hover(null);
  }

  enable() {
    if (this.enabled) return this;
    super.enable();
    this.surface.addEventListener("pointermove", this.over);
    this.surface.addEventListener("pointerleave", this.off);
    return this;
  }

  disable() {
    if (!this.enabled) return;
    super.disable();
    this.surface.removeEventListener("pointermove", this.over);
    this.surface.removeEventListener("pointerleave", this.off);
    this.hooks.hover(null);
  }

  claims(e) {
    return e.button === 0;
  }

  start(here) {
    this.way = [here.sheet];
    this.hooks.show(this.way);
  }

  move(to) {
    this.way.push(to.sheet);
    this.hooks.hover(to.screen);
    this.hooks.show(this.way);
  }

  end(to) {
    const way = this.way;
    const last = way[way.length - 1];
    if (to.sheet[0] !== last[0] || to.sheet[1] !== last[1]) way.push(to.sheet);
    this.way = null;
    this.hooks.show(null);
    this.hooks.done(way);
  }

  cancelled() {
    this.way = null;
    this.hooks.show(null);
  }
}
