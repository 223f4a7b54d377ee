// Live answers of the engine for panels and curves: asked one at a time, newest question first, kept by what was asked.
import * as api from "./api.js";
import { calibrated, usablePanel } from "../state/derive.js";
import { clicksWanted } from "../state/stretch.js";

const ENGINE_KEYS = ["id", "quantity", "kind", "panel", "x", "y", "value", "clicks", "closed", "ends", "guides", "locked", "factor", "rows", "x_unit", "y_unit", "fit", "diameter_mm", "speed_rpm", "head_is"];

function curveAsked(curve) {
  const out = {};
  for (const k of ENGINE_KEYS) if (curve[k] !== undefined && curve[k] !== null) out[k] = curve[k];
  if (curve.quantity.endsWith("_contour") && out.value === undefined) out.value = 0.5;
  return out;
}

const lineText = (panel, curve) => JSON.stringify([usablePanel(panel), curve.kind, curve.clicks, curve.guides, curve.locked, curve.closed, curve.ends, curve.x, curve.y, curve.factor, curve.fit, curve.quantity]);
const panelText = (panel) => JSON.stringify(usablePanel(panel));
const masksOf = (doc) => doc.sheet?.masks ?? [];

/** The page a document works on, as the server names it; null where the document leaves it to the draft. */
function sheetOf(doc) {
  const { sha256, page = 1, dpi = 300, turn = 0 } = doc.sheet ?? {};
  return sha256 ? { sha256: sha256.toLowerCase(), page, dpi, turn } : null;
}

export class Previews {
  constructor(draftId, onAnswer) {
    this.id = draftId;
    this.onAnswer = onAnswer;
    this.panels = new Map();
    this.curves = new Map();
    this.lastPanel = new Map();
    this.lastCurve = new Map();
    this.seq = 0;
    this.wanted = [];
    this.busy = null;
    this.state = "idle";
    this.masks = [];
    this.sheet = null;
    this.live = false;
  }

  /** What an answer belongs to: the page and its masks change what every line and scale is read from. */
  #under(text) {
    return `${JSON.stringify([this.sheet, this.masks])}|${text}`;
  }

  /** The document whose lines are looked at from now on. */
  #of(doc) {
    this.masks = masksOf(doc);
    const sheet = sheetOf(doc);
    if (JSON.stringify(sheet) !== JSON.stringify(this.sheet)) {
      // Another page: an older answer belongs to other pixels and must not be shown while the new one is awaited.
      this.lastPanel.clear();
      this.lastCurve.clear();
    }
    this.sheet = sheet;
  }

  #panelKey(panel) {
    return this.#under(panelText(panel));
  }

  #lineKey(panel, curve) {
    return this.#under(lineText(panel, curve));
  }

  panel(panel) {
    return this.panels.get(this.#panelKey(panel)) ?? null;
  }

  /** The newest answer for this panel even if marks have moved since: an old picture stays until the new one is there. */
  panelSoon(panel) {
    return this.panel(panel) ?? this.lastPanel.get(panel.id) ?? null;
  }

  curve(panel, curve) {
    return this.curves.get(this.#lineKey(panel, curve)) ?? null;
  }

  curveSoon(panel, curve) {
    return this.curve(panel, curve) ?? (curve.clicks.length >= clicksWanted(curve) ? this.lastCurve.get(curve.id) ?? null : null);
  }

  /** Fill the cache from a finished run. */
  learn(doc, result) {
    this.#of(doc);
    for (const panel of doc.panels ?? []) {
      const known = result.panels?.find((p) => p.id === panel.id);
      if (known && !this.panel(panel)) this.lastPanel.set(panel.id, known);
    }
    for (const curve of doc.curves ?? []) {
      const panel = doc.panels.find((p) => p.id === curve.panel);
      const known = result.curves?.find((c) => c.id === curve.id);
      if (panel && known) {
        this.curves.set(this.#lineKey(panel, curve), known);
        this.lastCurve.set(curve.id, known);
      }
    }
  }

  /**
   * Say what is on the desk now; what is not known yet is asked, the open curve first. `live`: a click or guide is under the hand, so
   * the question under way is let finish and shown, and the newest place is asked right after it.
   */
  want(doc, open, panelId, live = false) {
    this.#of(doc);
    this.live = live;
    const list = [];
    const panels = [...(doc.panels ?? [])].sort((a, b) => (b.id === panelId) - (a.id === panelId));
    for (const panel of panels) {
      if (!calibrated(panel)) continue;
      const usable = usablePanel(panel);
      if (open?.panel === panel.id && open.clicks.length >= clicksWanted(open) && usable.axes[open.x] && usable.axes[open.y] && !this.curve(panel, open)) list.unshift({ panel, curve: open });
      if (!this.panel(panel)) list.push({ panel, curve: null });
      for (const curve of (doc.curves ?? []).filter((c) => c.panel === panel.id)) {
        if (curve.clicks?.length >= clicksWanted(curve) && usable.axes[curve.x] && usable.axes[curve.y] && !this.curve(panel, curve)) list.push({ panel, curve });
      }
    }
    this.wanted = list;
    if (live) {
      this.wanted = list.slice(0, 1);
      if (!this.busy) this.#next();
      return;
    }
    if (this.busy && !list.some((q) => this.#key(q) === this.busy.key)) this.busy.abort.abort();
    clearTimeout(this.timer);
    if (list.length) this.timer = setTimeout(() => this.#next(), 60);
  }

  /** Ask again after the server has come back. */
  again() {
    this.#next();
  }

  #key(q) {
    return q.curve ? this.#lineKey(q.panel, q.curve) : this.#panelKey(q.panel);
  }

  async #next() {
    if (this.busy || !this.wanted.length) return;
    const q = this.wanted[0];
    const key = this.#key(q);
    const abort = new AbortController();
    const seq = ++this.seq;
    const { live, masks, sheet } = this;
    const at = this.#panelKey(q.panel);
    this.busy = { key, abort };
    const slow = setTimeout(() => {
      this.state = "asking";
      this.onAnswer("slow");
    }, 500);
    let retry = false;
    try {
      const answer = await api.preview(this.id, { panel: usablePanel(q.panel), curve: q.curve ? curveAsked(q.curve) : null, seq, masks, live: live && Boolean(q.curve), ...(sheet ? { sheet } : {}) }, abort.signal);
      if (answer.pending) {
        this.state = "preparing";
        this.onAnswer("slow");
        retry = true;
        await new Promise((r) => setTimeout(r, 300));
      } else {
        this.state = "idle";
        this.#store(q, { key, at }, answer.panel, answer.curve, live);
      }
    } catch (problem) {
      if (problem.name === "AbortError" || problem.code === "superseded") retry = true;
      else if (problem.away) {
        retry = true;
        await new Promise((r) => setTimeout(r, 1500));
      } else {
        const error = { code: problem.code || "preview", message: problem.detail || problem.title, path: null };
        if (q.curve) this.#store(q, { key, at }, null, { id: q.curve.id, pixels: [], points: [], sigma: [], warnings: [], error });
        else this.#store(q, { key, at }, { id: q.panel.id, error, warnings: [], suspects: [] }, null);
      }
    }
    clearTimeout(slow);
    if (this.state === "asking") this.state = "idle";
    this.busy = null;
    if (!retry) this.wanted = this.wanted.filter((w) => this.#key(w) !== key);
    this.onAnswer("answer");
    if (this.wanted.length) setTimeout(() => this.#next(), 0);
  }

  /** Keep an answer under what was asked. A live one is only shown: when the hand lets go the line is followed once more as a whole. */
  #store(q, { key, at }, panel, curve, live = false) {
    if (panel) {
      this.panels.set(at, panel);
      this.lastPanel.set(q.panel.id, panel);
    }
    if (q.curve && curve) {
      if (!live) this.curves.set(key, curve);
      this.lastCurve.set(q.curve.id, curve);
    }
  }
}
