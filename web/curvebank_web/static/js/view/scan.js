// The paper of a stored revision with its curves drawn back over it.
import { corners, fitBox, toScreen, zoomAt } from "../geometry/affine.js";
import { apply, fit, invert } from "../geometry/homography.js";
import { boxOf, path, thin } from "../geometry/polyline.js";
import { Navigate } from "../tools/navigate.js";
import { Place } from "../tools/place.js";
import { h, s } from "./dom.js";
import { TileLayer } from "./tiles.js";

/** Where a (flow, value) lies on a stored panel: a homography on plain or logarithmic values, whichever the stored grid agrees with. */
export function placeOnPanel(panel, xAxis, yAxis, [flow, value]) {
  const q = panel.map.values[xAxis];
  const v = panel.map.values[yAxis];
  if (!q || !v) return null;
  let best = null;
  for (const fx of [(a) => a, Math.log10]) {
    for (const fy of [(a) => a, Math.log10]) {
      const to = q.map((_, i) => [fx(q[i]), fy(v[i])]);
      if (!to.flat().every(Number.isFinite)) continue;
      const H = fit(panel.map.pixels, to);
      const back = H && invert(H);
      if (!back) continue;
      const miss = Math.max(...to.map((t, i) => Math.hypot(...apply(back, t).map((c, k) => c - panel.map.pixels[i][k]))));
      if (!best || miss < best.miss) best = { miss, at: apply(back, [fx(flow), fy(value)]) };
    }
  }
  return best && best.miss < 6 && best.at.every(Number.isFinite) ? best.at : null;
}

export class Scan {
  constructor(root) {
    this.box = h("div", { class: "scan sheet", tabindex: "0", role: "group", "aria-label": "The paper with the stored curves drawn back. Plus and minus zoom." });
    this.canvas = h("canvas", { "aria-hidden": "true" });
    this.svg = s("svg", { class: "plot", "aria-hidden": "true", focusable: "false" });
    this.box.append(this.canvas, this.svg);
    root.append(this.box);
    this.tiles = new TileLayer(() => this.draw());
    const at = (e) => {
      const r = this.box.getBoundingClientRect();
      return { screen: [e.clientX - r.left, e.clientY - r.top] };
    };
    const hooks = { view: () => this.view, setView: (v) => { this.view = v; this.draw(); }, spaceHeld: () => false, stopOthers: () => {}, place: () => {} };
    new Navigate(this.box, at, hooks).enable();
    new Place(this.box, at, hooks).enable();
    this.box.addEventListener("keydown", (e) => {
      const f = { "+": 1.4, "=": 1.4, "-": 1 / 1.4 }[e.key];
      const middle = [this.box.clientWidth / 2, this.box.clientHeight / 2];
      if (f) hooks.setView(zoomAt(this.view, f, middle));
      if (e.key === "0") { this.view = null; this.draw(); }
    });
    new ResizeObserver(() => { this.view = null; this.draw(); }).observe(this.box);
  }

  show(page, detail, ring) {
    const curves = detail.curves.filter((c) => c.trace_pixels?.length && (!c.sheet_sha256 || c.sheet_sha256 === page.sha256) && (c.page === undefined || c.page === null || c.page === page.page));
    if (this.page !== page) this.view = null;
    Object.assign(this, { page, curves, ring, detail });
    this.tiles.setPage(page);
    this.draw();
  }

  draw() {
    if (!this.page) return;
    const [w, t] = [this.box.clientWidth, this.box.clientHeight];
    if (!w) return;
    const outlines = (this.detail.panels ?? []).filter((p) => p.page === this.page.page && (!p.sheet_sha256 || p.sheet_sha256 === this.page.sha256)).map((p) => p.outline);
    const all = [...outlines, ...this.curves.map((c) => c.trace_pixels)].flat();
    if (!this.view) {
      const [a, b, c, d] = all.length ? boxOf(all) : [0, 0, this.page.width, this.page.height];
      this.view = fitBox(all.length ? [[a, b], [c, d]] : corners(this.page.width, this.page.height), w, t, 0, { left: 22, right: 22, top: 10, bottom: 18 });
    }
    this.tiles.draw(this.canvas, this.view, w, t);
    this.svg.setAttribute("viewBox", `0 0 ${w} ${t}`);
    this.svg.replaceChildren();
    for (const c of this.curves) {
      const d = path(thin(c.trace_pixels.map((p) => toScreen(this.view, p)), 1.2)) + (c.closed ? "Z" : "");
      this.svg.append(s("path", { d, class: "casing", "stroke-width": 4.2 }), s("path", { d, class: "k-trace", "stroke-width": 1.6 }));
    }
    if (this.ring) {
      const [x, y] = toScreen(this.view, this.ring);
      this.svg.append(s("circle", { cx: x, cy: y, r: 6, class: "casing", "stroke-width": 5 }), s("circle", { cx: x, cy: y, r: 6, class: "k-yours", "stroke-width": 2.2 }));
    }
  }
}
