// A scan in a box of its own: tiles, what is drawn over them, wheel and drag to move about.
import { corners, fitBox, toScreen, toSheet, zoomAt, panBy } from "../geometry/affine.js";
import { boxOf } from "../geometry/polyline.js";
import { Navigate } from "../tools/navigate.js";
import { Place } from "../tools/place.js";
import { TileLayer } from "./tiles.js";

export class SheetBox {
  /** root holds a canvas and an svg; over(svg, view) draws on top; place(sheet pixel) is told of a click, and of P for the middle of the box. */
  constructor(root, { over = () => {}, place = null } = {}) {
    Object.assign(this, { root, over, view: null, page: null, home: null });
    this.canvas = root.querySelector("canvas");
    this.svg = root.querySelector("svg");
    this.tiles = new TileLayer(() => this.draw());
    const at = (e) => {
      const r = root.getBoundingClientRect();
      const screen = [e.clientX - r.left, e.clientY - r.top];
      return { screen, sheet: this.view ? toSheet(this.view, screen) : null };
    };
    const hooks = { view: () => this.view, setView: (v) => { this.view = v; this.draw(); }, spaceHeld: () => false, stopOthers: () => {}, place: (p) => place?.(toSheet(this.view, p.screen)) };
    new Navigate(root, at, hooks).enable();
    new Place(root, at, hooks).enable();
    root.addEventListener("keydown", (e) => {
      const f = { "+": 1.4, "=": 1.4, "-": 1 / 1.4 }[e.key];
      const step = { ArrowLeft: [40, 0], ArrowRight: [-40, 0], ArrowUp: [0, 40], ArrowDown: [0, -40] }[e.key];
      if (!this.view) return;
      if (f) hooks.setView(zoomAt(this.view, f, this.middle()));
      else if (step) hooks.setView(panBy(this.view, ...step));
      else if (place && e.key.toLowerCase() === "p" && !e.ctrlKey && !e.metaKey && !e.altKey) place(toSheet(this.view, this.middle()));
      else if (e.key === "0") { this.view = null; this.aim = null; this.draw(); }
      else return;
      e.preventDefault();
    });
    new ResizeObserver(() => { this.view = null; this.draw(); }).observe(root);
  }

  middle() {
    return [this.root.clientWidth / 2, this.root.clientHeight / 2];
  }

  show(page, home = null) {
    if (this.page !== page || JSON.stringify(home?.length) !== JSON.stringify(this.home?.length)) {
      this.view = null;
      this.aim = null;
    }
    Object.assign(this, { page, home });
    this.tiles.setPage(page);
    this.draw();
  }

  /** Bring a place near: `times` the scale at which the whole fits. It stays so when the box changes its size. */
  near(place, times = 5) {
    this.aim = { place, times };
    this.view = null;
    this.draw();
  }

  draw() {
    const [w, t] = [this.root.clientWidth, this.root.clientHeight];
    if (!this.page || !w || this.root.hidden) return;
    if (!this.view) {
      const box = this.home?.length ? boxOf(this.home) : null;
      this.view = fitBox(box ? [[box[0], box[1]], [box[2], box[3]]] : corners(this.page.width, this.page.height), w, t, 0, { left: 20, right: 20, top: 16, bottom: 16 });
      if (this.aim) {
        const at = toScreen(this.view, this.aim.place);
        this.view = panBy(zoomAt(this.view, this.aim.times, at), w / 2 - at[0], t / 2 - at[1]);
      }
    }
    this.tiles.draw(this.canvas, this.view, w, t);
    this.svg.setAttribute("viewBox", `0 0 ${w} ${t}`);
    this.svg.replaceChildren();
    this.over(this.svg, this.view);
    this.root.dataset.view = [this.view.scale, this.view.turn, this.view.x, this.view.y].join(" ");
  }
}
