// The straightedge follows the pointer over paper and re-plot, or the arrow keys on either.

export class Straightedge {
  /** hooks: moved({surface, screen}), left() */
  constructor(surfaces, hooks) {
    this.surfaces = surfaces;
    this.hooks = hooks;
    this.move = (e) => {
      const box = e.currentTarget.getBoundingClientRect();
      hooks.moved({ surface: e.currentTarget.id, screen: [e.clientX - box.left, e.clientY - box.top] });
    };
    this.leave = () => hooks.left();
  }

  enable() {
    for (const el of this.surfaces) {
      el.addEventListener("pointermove", this.move);
      el.addEventListener("pointerleave", this.leave);
    }
    return this;
  }

  disable() {
    for (const el of this.surfaces) {
      el.removeEventListener("pointermove", this.move);
      el.removeEventListener("pointerleave", this.leave);
    }
  }
}
