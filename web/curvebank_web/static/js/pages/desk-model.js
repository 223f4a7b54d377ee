// The desk while one works: the session's document, what is looked at, and everything worked out from both.
import * as api from "../net/api.js";
import { follow } from "../net/jobs.js";
import { FoundLines } from "../net/lines.js";
import { Previews } from "../net/previews.js";
import { axisIds, panelMap } from "../geometry/panelmap.js";
import { desk as deskPart, recipeOf } from "../state/doc.js";
import { calibrated, liveFindings, panelCurves, panelToWorkOn, progress, STEPS } from "../state/derive.js";
import { ghostsOf, runFindings } from "../state/family.js";
import { extents } from "../view/replot.js";
import * as words from "../state/words.js";

export class Desk {
  constructor(session, hooks) {
    this.session = session;
    this.hooks = hooks;
    this.page = session.page;
    this.view = null;
    this.loupe = null;
    this.bare = false;
    this.panelId = null;
    this.selected = null;
    this.focused = null;
    this.locking = null;
    this.lines = new FoundLines(session.id, () => hooks.invalidate("paper"));
    this.chosenMark = null;
    this.chosenFinding = null;
    this.cursor = null;
    this.run = null;
    this.job = null;
    this.saved = null;
    this.box = null;
    this.drag = null;
    this.carry = "all";
    this.over = "both";
    this.focusBlank = null;
    this.previews = new Previews(session.id, (what) => hooks.invalidate(what === "slow" ? "slip" : "doc"));
    const wanted = location.hash.slice(1);
    this.step = STEPS.includes(wanted) ? wanted : this.likelyStep();
  }

  get doc() {
    return this.drag?.doc ?? this.session.doc;
  }

  get panel() {
    const panels = this.doc.panels ?? [];
    return panels.find((p) => p.id === this.panelId) ?? panels[0] ?? null;
  }

  get openMark() {
    return deskPart(this.doc).mark ?? null;
  }

  get openCurve() {
    return deskPart(this.doc).curve ?? null;
  }

  likelyStep() {
    const doc = this.session.doc;
    if (!doc.panels?.length) return "sheet";
    if (!doc.panels.some(calibrated)) return doc.panels.some((p) => Object.values(p.axes).some((a) => a.marks?.length)) ? "marks" : "panel";
    return "curves";
  }

  act(action, label) {
    this.acted = true;
    this.session.act(action, label);
  }

  go(step) {
    if (!STEPS.includes(step)) return;
    if (STEPS.indexOf(step) > STEPS.indexOf(this.step)) this.panelId = panelToWorkOn(step, this.doc, this.panelId, this.run);
    this.step = step;
    history.replaceState(null, "", `#${step}`);
    this.chosenMark = null;
    this.focused = null;
    if (step !== "curves" && step !== "fit") this.selected = null;
    this.hooks.stepped(step);
    this.hooks.invalidate("all");
  }

  panelResult = (panel) => this.previews.panelSoon(panel);

  /** The panel's edge: as drawn, as calibrated, or round its marks. */
  outlineOf(panel) {
    const result = this.panelResult(panel);
    return panel.outline ?? (result?.outline?.length ? result.outline : null) ?? outlineOfMap(result) ?? markBox(panel);
  }

  curveResult = (panel, curve) => this.previews.curveSoon(panel, curve);

  map = (panel, flow, value) => {
    if (!flow || !value) return null;
    const result = this.panelResult(panel);
    const key = `${panel.id}/${flow}/${value}`;
    const known = (this.maps ??= new Map()).get(key);
    const marks = JSON.stringify([panel.axes[flow], panel.axes[value]]);
    if (known && known.result === result && known.marks === marks) return known.map;
    const map = panelMap(panel, result, flow, value);
    this.maps.set(key, { result, marks, map });
    return map;
  };

  /** Work everything out anew; called after a change of the document or an answer. */
  derive() {
    const doc = this.doc;
    const panel = this.panel;
    if (panel && this.panelId !== panel.id) this.panelId = panel.id;
    if (this.shownPanel !== (panel?.id ?? null)) {
      // Undo and redo may bring another panel, or the first one: the paper goes there unless it was moved by hand.
      if (this.shownPanel !== undefined && !this.moved) this.view = null;
      this.shownPanel = panel?.id ?? null;
    }
    this.previews.want(doc, this.openCurve, panel?.id, Boolean(this.drag));
    if (this.step === "marks") this.lines.want(this.page);
    const ids = panel ? axisIds(panel) : { flow: [], value: [] };
    this.axes = [];
    this.items = panelCurves(doc, panel, this.curveResult);
    if (panel) {
      const outline = this.outlineOf(panel);
      for (const id of ids.value) {
        const map = this.map(panel, ids.flow[0], id);
        if (!map || !outline) continue;
        const lines = panel.outline ? [] : this.items.filter((i) => i.curve.y === id).flatMap((i) => i.points);
        const ext = extents(map, panel.outline ?? markBox(panel) ?? outline, (panel.axes[ids.flow[0]].marks ?? []).map((m) => m.value), (panel.axes[id].marks ?? []).map((m) => m.value), lines);
        if ([...ext.flow, ...ext.value].every(Number.isFinite) && ext.flow[1] > ext.flow[0] && ext.value[1] > ext.value[0]) this.axes.push({ id, axis: panel.axes[id], map, ext });
      }
      this.flowAxis = panel.axes[ids.flow[0]] ?? null;
    }
    // Opened straight at a later step, the paper was fitted to the marks alone: fitted again once the axes are placed, but not under a hand
    // that is putting down marks.
    const placed = Boolean(panel && this.axes.length && this.panelResult(panel)?.map);
    if (placed && this.fitted !== panel.id && !this.moved && !this.drag && !(this.acted && this.step === "marks")) this.view = null;
    if (placed) this.fitted = panel.id;
    for (const item of this.items) {
      item.stale = Boolean(item.result && panel && this.previews.curve(panel, item.curve) !== item.result);
      if (this.step === "fit") addFit(item);
    }
    if (this.run) this.run.fresh = JSON.stringify(recipeOf(doc)) === this.run.recipe;
    if (this.saved && this.saved.recipe !== JSON.stringify(recipeOf(doc))) this.saved = null;
    this.ghosts = this.step === "family" && this.run && panel ? ghostsOf(this.run, doc, panel, this.carry) : [];
    const live = liveFindings(doc, this.panelResult, this.curveResult, words);
    this.findings = mergeFindings(live, this.run ? runFindings(this.run, doc) : []).map((f, i) => ({ ...f, number: i + 1, cured: false }));
    const wrong = new Set(this.findings.filter((f) => f.severity === "error" && f.subject?.startsWith("curve:")).map((f) => f.subject.slice(6)));
    for (const item of this.items) item.wrong = wrong.has(item.id);
    this.progress = progress(doc, { page: this.page, panelResultOf: this.panelResult, resultOf: this.curveResult, run: this.run, saved: this.saved });
  }

  /** The page may have changed with the document (page, turn, resolution). */
  async followPage() {
    const sheet = this.doc.sheet ?? {};
    const p = this.page;
    if (!p) return;
    const want = { sha256: sheet.sha256?.toLowerCase() ?? p.sha256, page: sheet.page ?? 1, dpi: sheet.dpi ?? p.dpi, turn: sheet.turn ?? 0 };
    if (p.sha256 === want.sha256 && p.page === want.page && p.turn === want.turn && (p.dpi === want.dpi || p.media !== "application/pdf")) return;
    try {
      this.page = await api.sheetPage(want.sha256, want.page, want);
      this.view = null;
      this.fitted = null;
      this.hooks.invalidate("all");
    } catch (error) {
      this.hooks.problem("page", error);
    }
  }

  /** What still keeps the sheet from being checked, or null. */
  missing() {
    const pump = this.doc.pump ?? {};
    const names = [!pump.maker && "the maker", !pump.model && "the model"].filter(Boolean);
    return names.length ? names.join(" and ") : null;
  }

  /** A scale that was named but not marked, which the check could not use: {panel, axis, quantity}, or null. */
  unmarked() {
    const panels = this.doc.panels ?? [];
    for (const [i, panel] of panels.entries()) {
      for (const [axis, a] of Object.entries(panel.axes)) if ((a.marks ?? []).length < 2) return { panel: panel.id, number: i + 1, axis, quantity: a.quantity };
    }
    return null;
  }

  async startRun() {
    if (this.job && !["done", "failed", "cancelled"].includes(this.job.state)) return null;
    const recipe = JSON.stringify(recipeOf(this.doc));
    this.job = { state: "queued", share: 0, text: "Keeping the last steps" };
    this.hooks.invalidate("slip");
    try {
      if (!(await this.session.settled(15000))) throw Object.assign(new Error("away"), { title: "The check has not begun", detail: "The last steps are not in the file yet. They are kept in this browser; start the check again when the program answers." });
      const step = this.session.step;
      const job = await api.run(this.session.id);
      const end = await follow(job, (state) => {
        this.job = state;
        this.hooks.invalidate("slip");
      });
      if (end.state === "done") await this.fetchResult(recipe, step);
      else if (end.state === "failed") this.hooks.problem("run", { title: end.problem?.title ?? "The check did not finish", detail: end.problem?.detail ?? end.problem?.message ?? end.text ?? "", code: end.problem?.code });
      return end.state;
    } catch (error) {
      this.job = null;
      this.hooks.problem("run", error);
      return "failed";
    } finally {
      if (this.job) this.job = { ...this.job, over: true };
      this.hooks.invalidate("all");
    }
  }

  async stopRun() {
    if (this.job?.id) {
      this.job = { ...this.job, text: "Stopping" };
      this.hooks.invalidate("slip");
      await api.stopJob(this.job.id).catch(() => null);
    }
  }

  async fetchResult(recipe, step) {
    const answer = await api.result(this.session.id, step);
    const doc = this.session.doc;
    this.run = { ...answer, doc, recipe, findings: answer.result.findings ?? [] };
    this.previews.learn(doc, answer.result);
    this.hooks.invalidate("doc");
  }

  async loadResult() {
    const step = this.session.resultStep;
    if (!step) return;
    try {
      const answer = await api.result(this.session.id, step);
      this.run = { ...answer, doc: this.session.doc, recipe: answer.step === this.session.step ? JSON.stringify(recipeOf(this.session.doc)) : "", findings: answer.result.findings ?? [] };
      if (answer.step === this.session.step) this.previews.learn(this.session.doc, answer.result);
      this.hooks.invalidate("doc");
    } catch {
      // The check can be made again; what the draft holds does not depend on it.
    }
  }
}

function addFit(item) {
  const fit = item.result?.fit;
  if (!fit?.scaled?.length) return;
  const [lo, hi] = fit.domain ?? [fit.lo, fit.hi];
  const n = 80;
  const value = (q) => {
    const t = (q - fit.mid) / fit.half;
    return fit.scaled.reduceRight((a, c) => a * t + c, 0);
  };
  const u = (q) => {
    const t = (q - fit.mid) / fit.half;
    const phi = fit.scaled.map((_, k) => t ** k);
    let s = 0;
    for (let i = 0; i < phi.length; i++) for (let j = 0; j < phi.length; j++) s += phi[i] * (fit.covariance?.[i]?.[j] ?? 0) * phi[j];
    return Math.sqrt(Math.max(0, s));
  };
  const flow = Array.from({ length: n + 1 }, (_, i) => lo + ((hi - lo) * i) / n);
  item.fit = { ...fit, lo, hi, value, u };
  item.fitLine = flow.map((q) => [q / item.fx, value(q) / item.fy]);
  item.band = { flow: flow.map((q) => q / item.fx), low: flow.map((q) => (value(q) - 2 * u(q)) / item.fy), high: flow.map((q) => (value(q) + 2 * u(q)) / item.fy) };
}

function outlineOfMap(result) {
  const px = result?.map?.pixels;
  return px?.length === 81 ? [px[0], px[8], px[80], px[72]] : null;
}

function markBox(panel) {
  const at = Object.values(panel.axes).flatMap((a) => (a.marks ?? []).map((m) => m.at));
  if (at.length < 3) return null;
  const [xs, ys] = [at.map((p) => p[0]), at.map((p) => p[1])];
  return [[Math.min(...xs), Math.min(...ys)], [Math.max(...xs), Math.min(...ys)], [Math.max(...xs), Math.max(...ys)], [Math.min(...xs), Math.max(...ys)]];
}

function mergeFindings(live, checked) {
  const rank = { error: 0, warning: 1, note: 2 };
  const seen = new Set();
  // The check repeats what was said while working; the live sentence knows its place, so it stays and the repetition goes.
  const said = live.filter((f) => f.raw && f.where?.at);
  const rest = checked.filter((f) => !said.some((l) => f.subject?.startsWith(l.subject) && f.text.includes(l.raw)));
  const fresh = live.filter((l) => !l.raw || l.where?.at || !rest.some((f) => f.subject === l.subject && f.text.includes(l.raw)));
  return [...rest, ...fresh].filter((f) => {
    const key = `${f.subject}|${f.text}`;
    if (seen.has(key)) return false;
    seen.add(key);
    return true;
  }).sort((a, b) => rank[a.severity] - rank[b.severity]);
}
