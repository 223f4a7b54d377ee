// A press that stays is a click and places something; a press that moves carries the paper along.
import { panBy } from "../geometry/affine.js";
import { Tool } from "./tool.js";

export class Place extends Tool {
  /** hooks: view, setView, place(point, event) for a click */
  constructor(surface, at, hooks) {
    super(surface, at);
    this.hooks = hooks;
  }

  claims(e) {
    return e.button === 0;
  }

  start(here) {
    this.last = here.screen;
  }

  move(to, gesture) {
    if (!gesture.moved) return;
    this.hooks.setView(panBy(this.hooks.view(), to.screen[0] - this.last[0], to.screen[1] - this.last[1]));
    this.last = to.screen;
  }

  end(to, gesture, e) {
    if (!gesture.moved) this.hooks.place(to, e);
  }
}
