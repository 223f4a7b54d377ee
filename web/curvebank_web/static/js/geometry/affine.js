// Plane similarity views: sheet pixels to screen pixels and back. A view is {scale, turn, x, y}:
// screen = scale * R(turn) * pixel + (x, y). Straightening is a turn of the view; the pixels of the sheet never move.

export function toScreen(view, [px, py]) {
  const c = Math.cos(view.turn) * view.scale;
  const s = Math.sin(view.turn) * view.scale;
  return [c * px - s * py + view.x, s * px + c * py + view.y];
}

export function toSheet(view, [sx, sy]) {
  const c = Math.cos(view.turn) / view.scale;
  const s = Math.sin(view.turn) / view.scale;
  const dx = sx - view.x;
  const dy = sy - view.y;
  return [c * dx + s * dy, -s * dx + c * dy];
}

/** Zoom by `factor` so that the sheet pixel under the screen point stays under it. */
export function zoomAt(view, factor, [sx, sy], { min = 0.02, max = 40 } = {}) {
  const scale = Math.min(max, Math.max(min, view.scale * factor));
  const f = scale / view.scale;
  return { ...view, scale, x: sx - f * (sx - view.x), y: sy - f * (sy - view.y) };
}

export function panBy(view, dx, dy) {
  return { ...view, x: view.x + dx, y: view.y + dy };
}

/** The view that shows the sheet box [[x0,y0],[x1,y1]] inside a screen of the given size, with margins, turned by `turn`. */
export function fitBox(points, width, height, turn = 0, margin = { left: 16, right: 16, top: 16, bottom: 16 }) {
  const unit = { scale: 1, turn, x: 0, y: 0 };
  const turned = points.map((p) => toScreen(unit, p));
  const xs = turned.map((p) => p[0]);
  const ys = turned.map((p) => p[1]);
  const [x0, x1, y0, y1] = [Math.min(...xs), Math.max(...xs), Math.min(...ys), Math.max(...ys)];
  const w = Math.max(1, width - margin.left - margin.right);
  const h = Math.max(1, height - margin.top - margin.bottom);
  const scale = Math.min(w / Math.max(1, x1 - x0), h / Math.max(1, y1 - y0));
  return {
    scale,
    turn,
    x: margin.left + (w - scale * (x1 - x0)) / 2 - scale * x0,
    y: margin.top + (h - scale * (y1 - y0)) / 2 - scale * y0,
  };
}

export function corners(width, height) {
  return [[-0.5, -0.5], [width - 0.5, -0.5], [width - 0.5, height - 0.5], [-0.5, height - 0.5]];
}

/** Move a point by a step given in screen directions, measured in sheet pixels (arrow keys on a turned view). */
export function nudge(view, [px, py], dx, dy) {
  const c = Math.cos(view.turn);
  const s = Math.sin(view.turn);
  return [px + c * dx + s * dy, py - s * dx + c * dy];
}
