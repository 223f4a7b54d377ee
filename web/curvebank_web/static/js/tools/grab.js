// Take hold of a handle (guide, mark, corner of a panel) and move it.
import { Tool } from "./tool.js";

export class Grab extends Tool {
  /** hooks: find(point, event) -> handle | null, choose(handle), drag(handle, point, event), drop(handle, point, event), chosen(handle, point, event), back(handle) */
  constructor(surface, at, hooks) {
    super(surface, at);
    this.hooks = hooks;
  }

  claims(e, here) {
    if (e.button !== 0) return false;
    this.handle = this.hooks.find(here, e);
    return Boolean(this.handle);
  }

  start() {
    this.hooks.choose(this.handle);
  }

  move(to, gesture, e) {
    if (gesture.moved) this.hooks.drag(this.handle, to, e);
  }

  end(to, gesture, e) {
    if (gesture.moved) this.hooks.drop(this.handle, to, e);
    else this.hooks.chosen?.(this.handle, to, e);
  }

  cancelled() {
    this.hooks.back(this.handle);
  }
}
