// A press that stays is a click and places something; a press that moves carries the paper along. On a touch screen a press that
// stays for 300 ms magnifies, and the finger then moves the point geared down, so that it need not cover it.
import { panBy } from "../geometry/affine.js";
import { Tool } from "./tool.js";

const HOLD_MS = 300;

export class Place extends Tool {
  /** hooks: view, setView, place(point, event) for a click; magnify(screen | null) -> times, aim(screen) -> point for touch */
  constructor(surface, at, hooks) {
    super(surface, at);
    this.hooks = hooks;
  }

  claims(e) {
    return e.button === 0;
  }

  start(here, gesture, e) {
    this.last = here.screen;
    this.geared = 0;
    if (e.pointerType !== "touch" || !this.hooks.magnify) return;
    this.timer = setTimeout(() => {
      if (!gesture.moved) this.geared = this.hooks.magnify(here.screen);
    }, HOLD_MS);
  }

  move(to, gesture) {
    if (this.geared) {
      this.point = this.#aimed(to, gesture);
      return;
    }
    if (!gesture.moved) return;
    this.hooks.setView(panBy(this.hooks.view(), to.screen[0] - this.last[0], to.screen[1] - this.last[1]));
    this.last = to.screen;
  }

  end(to, gesture, e) {
    clearTimeout(this.timer);
    if (this.geared) {
      const point = this.#aimed(to, gesture);
      this.hooks.magnify(null);
      this.hooks.place(point, e);
    } else if (!gesture.moved) this.hooks.place(to, e);
  }

  cancelled() {
    clearTimeout(this.timer);
    if (this.geared) this.hooks.magnify(null);
    this.geared = 0;
  }

  #aimed(to, gesture) {
    const [x, y] = gesture.from.screen;
    return this.hooks.aim([x + (to.screen[0] - x) / this.geared, y + (to.screen[1] - y) / this.geared]);
  }
}
