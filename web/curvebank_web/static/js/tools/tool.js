// One gesture each: enable() listens on the surface, disable() lets go of everything, Escape cancels what is under way.

export class Tool {
  /** surface: the element; at(event) -> {screen, sheet} of a pointer event. */
  constructor(surface, at) {
    this.surface = surface;
    this.at = at;
    this.enabled = false;
    this.gesture = null;
    this.down = (e) => this.#down(e);
  }

  enable() {
    if (this.enabled) return this;
    this.enabled = true;
    this.surface.addEventListener("pointerdown", this.down);
    return this;
  }

  disable() {
    if (!this.enabled) return;
    this.enabled = false;
    this.cancel();
    this.surface.removeEventListener("pointerdown", this.down);
  }

  /** Say whether this press is ours. */
  claims() {
    return false;
  }

  start() {}
  move() {}
  end() {}
  cancelled() {}

  #down(e) {
    if (e.defaultPrevented || this.gesture || !this.claims(e, this.at(e))) return;
    e.preventDefault();
    this.surface.focus({ preventScroll: true });
    this.surface.setPointerCapture?.(e.pointerId);
    const here = this.at(e);
    const gesture = { id: e.pointerId, from: here, moved: false };
    const move = (ev) => {
      if (ev.pointerId !== gesture.id) return;
      const to = this.at(ev);
      if (Math.hypot(to.screen[0] - here.screen[0], to.screen[1] - here.screen[1]) > 4) gesture.moved = true;
      this.move(to, gesture, ev);
    };
    const up = (ev) => {
      if (ev.pointerId !== gesture.id) return;
      const to = this.at(ev);
      this.#release();
      this.end(to, gesture, ev);
    };
    const lost = (ev) => ev.pointerId === gesture.id && this.cancel();
    const key = (ev) => {
      if (ev.key !== "Escape") return;
      ev.preventDefault();
      ev.stopImmediatePropagation();
      this.cancel();
    };
    const listeners = [["pointermove", move], ["pointerup", up], ["pointercancel", lost]];
    for (const [n, f] of listeners) this.surface.addEventListener(n, f);
    window.addEventListener("keydown", key, true);
    this.gesture = { ...gesture, off: () => {
      for (const [n, f] of listeners) this.surface.removeEventListener(n, f);
      window.removeEventListener("keydown", key, true);
    } };
    this.start(here, gesture, e);
  }

  #release() {
    this.gesture?.off();
    this.gesture = null;
  }

  cancel() {
    if (!this.gesture) return;
    const gesture = this.gesture;
    this.#release();
    this.cancelled(gesture);
  }
}
