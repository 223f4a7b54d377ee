// The scan as tiles on a canvas, under any similarity view. Draws what it has, coarse first, and asks for what is missing.
import { tileUrl } from "../net/api.js";
import { toSheet } from "../geometry/affine.js";

const MOST = 500;

export class TileLayer {
  constructor(onLoad) {
    this.onLoad = onLoad;
    this.cache = new Map();
    this.page = null;
  }

  setPage(page) {
    if (this.page && page && ["sha256", "page", "dpi", "turn"].every((k) => this.page[k] === page[k])) return;
    this.page = page;
    this.cache.clear();
  }

  #tile(z, x, y) {
    const key = `${z}/${x}/${y}`;
    let tile = this.cache.get(key);
    if (!tile) {
      tile = new Image();
      tile.decoding = "async";
      tile.onload = () => this.onLoad();
      tile.onerror = () => setTimeout(() => this.cache.delete(key), 2000);
      tile.src = tileUrl(this.page, z, x, y);
      this.cache.set(key, tile);
      if (this.cache.size > MOST) this.cache.delete(this.cache.keys().next().value);
    } else {
      this.cache.delete(key);
      this.cache.set(key, tile);
    }
    return tile.complete && tile.naturalWidth ? tile : null;
  }

  /** Draw the part of the page that `view` shows on the canvas (CSS size w x h). */
  draw(canvas, view, w, h) {
    const ratio = window.devicePixelRatio || 1;
    if (canvas.width !== Math.round(w * ratio) || canvas.height !== Math.round(h * ratio)) {
      canvas.width = Math.round(w * ratio);
      canvas.height = Math.round(h * ratio);
    }
    const g = canvas.getContext("2d", { alpha: true });
    g.setTransform(1, 0, 0, 1, 0, 0);
    g.clearRect(0, 0, canvas.width, canvas.height);
    if (!this.page || !view) return;
    const { max_zoom: top, tile_size: size, width, height } = this.page;
    const want = Math.max(0, Math.min(top, top + Math.ceil(Math.log2(Math.max(view.scale * ratio, 1e-6)) - 0.15)));
    const seen = [[0, 0], [w, 0], [w, h], [0, h]].map((p) => toSheet(view, p));
    const x0 = Math.max(-0.5, Math.min(...seen.map((p) => p[0])));
    const x1 = Math.min(width - 0.5, Math.max(...seen.map((p) => p[0])));
    const y0 = Math.max(-0.5, Math.min(...seen.map((p) => p[1])));
    const y1 = Math.min(height - 0.5, Math.max(...seen.map((p) => p[1])));
    if (x1 <= x0 || y1 <= y0) return;
    const c = Math.cos(view.turn) * view.scale * ratio;
    const s = Math.sin(view.turn) * view.scale * ratio;
    g.setTransform(c, s, -s, c, view.x * ratio, view.y * ratio);
    g.imageSmoothingEnabled = view.scale * ratio < 3;
    g.imageSmoothingQuality = "high";
    for (const z of new Set([0, Math.max(0, want - 2), want])) {
      const k = 2 ** (top - z);
      const span = size * k;
      for (let ty = Math.floor((y0 + 0.5) / span); ty <= Math.floor((y1 + 0.49) / span); ty++) {
        for (let tx = Math.floor((x0 + 0.5) / span); tx <= Math.floor((x1 + 0.49) / span); tx++) {
          const tile = this.#tile(z, tx, ty);
          if (tile) g.drawImage(tile, tx * span - 0.5, ty * span - 0.5, tile.naturalWidth * k, tile.naturalHeight * k);
        }
      }
    }
  }

  /** A grey patch of the full-size page round a sheet pixel: {width, height, grey, origin} or null while tiles are missing. */
  patch([cx, cy], half) {
    if (!this.page) return null;
    const { max_zoom: top, tile_size: size, width, height } = this.page;
    const x0 = Math.max(0, Math.round(cx) - half);
    const y0 = Math.max(0, Math.round(cy) - half);
    const x1 = Math.min(width - 1, Math.round(cx) + half);
    const y1 = Math.min(height - 1, Math.round(cy) + half);
    if (x1 - x0 < 4 || y1 - y0 < 4) return null;
    const canvas = new OffscreenCanvas(x1 - x0 + 1, y1 - y0 + 1);
    const g = canvas.getContext("2d", { willReadFrequently: true });
    for (let ty = Math.floor(y0 / size); ty <= Math.floor(y1 / size); ty++) {
      for (let tx = Math.floor(x0 / size); tx <= Math.floor(x1 / size); tx++) {
        const tile = this.#tile(top, tx, ty);
        if (!tile) return null;
        g.drawImage(tile, tx * size - x0, ty * size - y0);
      }
    }
    const { data } = g.getImageData(0, 0, canvas.width, canvas.height);
    const grey = new Float64Array(canvas.width * canvas.height);
    for (let i = 0; i < grey.length; i++) grey[i] = 0.299 * data[4 * i] + 0.587 * data[4 * i + 1] + 0.114 * data[4 * i + 2];
    return { width: canvas.width, height: canvas.height, grey, origin: [x0, y0] };
  }
}
