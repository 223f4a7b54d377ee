// The desk page: opens the draft, ties model, drawing, tools and keys together.
import * as api from "../net/api.js";
import { Session } from "../net/session.js";
import { toScreen, panBy, zoomAt } from "../geometry/affine.js";
import { curveId } from "../state/doc.js";
import { clicksWanted } from "../state/stretch.js";
import { plain } from "../geometry/number.js";
import * as words from "../state/words.js";
import { button, choice, watchTyping } from "../panels/blank.js";
import { closeProblem, fromError, showProblem } from "../panels/problem.js";
import { keepSetting, setting } from "../panels/keys.js";
import { $, h } from "../view/dom.js";
import { TileLayer } from "../view/tiles.js";
import { placeOf } from "./desk-handles.js";
import { Desk } from "./desk-model.js";
import { DeskDraw, homeView, size } from "./desk-draw.js";
import { DeskTools } from "./desk-tools.js";
import { deskKeys } from "./desk-keys.js";

const draftId = decodeURIComponent(location.pathname.split("/").filter(Boolean).pop());
const problems = $("problems");

function frameLoop(draw, desk) {
  let stale = new Set();
  let asked = false;
  const frame = () => {
    asked = false;
    const now = stale;
    stale = new Set();
    if (now.has("doc") || now.has("all")) {
      desk.derive();
      desk.followPage();
      if (now.has("all") || !desk.view) desk.view ??= homeView(desk);
      return draw.all();
    }
    if (now.has("view") || now.has("paper")) {
      draw.paper();
      if (now.has("view")) draw.plot();
    } else if (now.has("tiles")) {
      const { width, height } = size("paper");
      draw.tiles.draw($("tiles"), desk.view, width, height);
      draw.loupe();
    } else if (now.has("loupe")) draw.loupe();
    if (now.has("view") || now.has("cursor")) draw.cursor();
    if (now.has("slip")) draw.slip();
    if (now.has("below")) draw.below();
    if (now.has("bar")) draw.bar();
    return undefined;
  };
  return (what) => {
    stale.add(what);
    if (!asked) {
      asked = true;
      requestAnimationFrame(frame);
    }
  };
}

function awayProblem(session) {
  const n = session.outbox.size;
  showProblem(problems, {
    id: "away", title: "The program on this computer has stopped answering",
    text: h("span", {}, `${n === 1 ? "Your last step is" : n ? `Your last ${n} steps are` : "Your work is"} safe in this browser. Start it again with `, h("code", {}, "curvebank serve"), "; this page notices by itself and hands them over."),
    ways: [["Try now", () => session.outbox.nudge()], ...(n ? [[`Save the ${n} ${n === 1 ? "step" : "steps"} as a file`, () => saveSteps(session), true]] : [])],
  });
}

function saveSteps(session) {
  const link = h("a", { href: URL.createObjectURL(new Blob([JSON.stringify(session.outbox.entries, null, 1)], { type: "application/json" })), download: `curvebank-${session.id}-steps.json` });
  link.click();
}

function conflictProblem(session) {
  const { entry, theirs } = session.conflict;
  const list = (doc) => h("p", {}, `${(doc?.panels ?? []).length} panels, ${(doc?.curves ?? []).length} curves.`);
  showProblem(problems, {
    id: "conflict", title: "Another window has gone on with this draft", text: "Nothing is lost: both versions are kept in the draft's history. Choose the one to go on with.",
    extra: h("div", { class: "two" }, h("div", {}, h("b", {}, `Yours: ${entry.label ?? "undo"}`), list(session.doc)), h("div", {}, h("b", {}, `Theirs: step ${theirs?.step ?? "?"}`), list(theirs?.doc))),
    ways: [["Lay mine on top", (close) => { close(); session.resolve(true); }], ["Go on with theirs", (close) => { close(); session.resolve(false); }, true]],
  });
}

/** What the panels and tools may ask of the desk, beyond the model itself. */
function abilities(desk, draw, tools, invalidate) {
  const redo = (what = "all") => invalidate(what);
  Object.assign(desk, {
    form: { why: "", who: setting("who", "") },
    set(change) { Object.assign(desk, change); redo("all"); },
    say(text) { $("aloud").textContent = ""; requestAnimationFrame(() => ($("aloud").textContent = text)); flash(text); },
    choosePanel(id) {
      if (id === "+") desk.drawingPanel = true;
      else { desk.drawingPanel = false; desk.panelId = id; desk.chosenMark = null; desk.cursor = null; }
      if (desk.step !== "panel") { desk.view = null; desk.moved = false; }
      tools.stepped(desk.step);
      redo("all");
    },
    select(id, guiding = false) { Object.assign(desk, { selected: id, guiding, touched: null, focused: null, locking: null }); redo("all"); },
    chooseMark(mark) { desk.chosenMark = mark; $("paper").focus({ preventScroll: true }); redo("all"); },
    removeFocused: () => tools.removeFocused(),
    /** Go to another page of the app once every step is in the file. */
    async leaveFor(url) {
      if (await desk.session.settled(8000)) location.assign(url);
      else awayProblem(desk.session);
    },
    toggleFound() {
      desk.showFound = !desk.showFound;
      keepSetting("found", desk.showFound ? "on" : "off");
      desk.say(desk.showFound ? (desk.lines.found ? "The printed lines found are drawn." : "The printed lines are drawn as soon as the sheet is levelled.") : "The printed lines found are hidden.");
      redo("all");
    },
    showFound: setting("found", "on") === "on",
    removeChosenMark() { const { panel, axis, index } = desk.chosenMark; desk.chosenMark = null; desk.act({ type: "mark/remove", panel, axis, index }); },
    keepMark(panel, mark, values) {
      desk.act({ type: "mark/keep", panel: panel.id, at: mark.at, values });
      $("paper").focus({ preventScroll: true });
    },
    keepCurve() {
      const open = desk.openCurve;
      if (!open || open.clicks.length < clicksWanted(open)) return desk.say(`${words.clicksWords(open && clicksWanted(open))} along the line.`);
      if (open.quantity.endsWith("_contour") && open.value === undefined) return desk.say("Give the line its level first.");
      const id = curveId(open, (desk.doc.curves ?? []).map((c) => c.id));
      const known = desk.previews.lastCurve.get(open.id);
      if (known) desk.previews.lastCurve.set(id, known);
      if (open.id !== id) desk.act({ type: "curve/change", change: { id } });
      desk.act({ type: "curve/keep" });
      $("paper").focus({ preventScroll: true });
      return undefined;
    },
    enter() {
      if (desk.step === "curves" && desk.focused?.kind === "hint") { const at = placeOf(desk, desk.focused); const hint = desk.focused; desk.focused = null; return at && tools.acceptHint(hint, at); }
      if (desk.step === "curves" && desk.openCurve) return desk.keepCurve();
      if (desk.step === "curves" && desk.selected) return desk.select(null);
      return desk.step === "submit" ? undefined : $("slip").querySelector(".btn.main")?.click();
    },
    undoOrRedo(which) { const said = desk.session[which](); desk.say(said || `Nothing to ${which}.`); redo("all"); },
    async checkAndGo(step) {
      desk.go(step);
      if (!desk.run?.fresh && !desk.missing() && !desk.unmarked()) await desk.startRun();
      redo("all");
    },
    /** Bring sheet places into view; `near` also zooms so that they fill a third of the paper. */
    travelTo(places, near = false) {
      if (!places.length || !desk.view) return;
      const { width, height } = size("paper");
      const on = places.map((p) => toScreen(desk.view, p));
      const [xs, ys] = [on.map((p) => p[0]), on.map((p) => p[1])];
      const box = [Math.min(...xs), Math.min(...ys), Math.max(...xs), Math.max(...ys)];
      const span = Math.max((box[2] - box[0]) / width, (box[3] - box[1]) / height, 1e-3);
      if (near && (span < 0.2 || span > 0.8)) {
        const scale = Math.min(4, Math.max(homeView(desk)?.scale ?? 0, (desk.view.scale * 0.34) / span));
        const at = [(box[0] + box[2]) / 2, (box[1] + box[3]) / 2];
        desk.view = panBy(zoomAt(desk.view, scale / desk.view.scale, at), width / 2 - at[0], height / 2 - at[1]);
        desk.moved = true;
      } else if (box[0] < 20 || box[1] < 20 || box[2] > width - 20 || box[3] > height - 60) {
        desk.view = panBy(desk.view, width / 2 - (box[0] + box[2]) / 2, height / 2 - (box[1] + box[3]) / 2);
      }
      redo("view");
    },
    chooseFinding(number) {
      desk.chosenFinding = number;
      const f = desk.findings.find((k) => k.number === number);
      if (f) travel(f);
      redo("all");
    },
    nextFinding(by) {
      const n = desk.findings.length;
      if (!n) return desk.say("There is no finding.");
      const at = desk.findings.findIndex((f) => f.number === desk.chosenFinding);
      const next = desk.findings[(((at < 0 && by > 0 ? -1 : at) + by) % n + n) % n];
      desk.chooseFinding(next.number);
      return desk.say(`${next.severity}. ${next.text}`);
    },
    withWays(f) {
      const ways = [];
      const buttons = [];
      if (f.where?.curve || f.where?.at) ways.push(["Show the place", () => desk.chooseFinding(f.number)]);
      if (f.suspect) {
        const axis = desk.doc.panels.find((p) => p.id === f.suspect.panel)?.axes[f.suspect.axis];
        if (axis) {
          const v = words.niceFit(axis, f.suspect);
          const other = axis.marks[f.suspect.swapped_with];
          const set = (index, value) => desk.act({ type: "mark/set", panel: f.suspect.panel, axis: f.suspect.axis, index, change: { value } });
          if (other) ways.unshift(["Exchange them", () => { const mine = axis.marks[f.suspect.index].value; set(f.suspect.index, other.value); set(f.suspect.swapped_with, mine); }]);
          else ways.unshift([`Change it to ${plain(v)}`, () => desk.act({ type: "mark/set", panel: f.suspect.panel, axis: f.suspect.axis, index: f.suspect.index, change: { value: v } })]);
        }
      }
      const curve = f.subject?.startsWith("curve:") && (desk.doc.curves ?? []).find((c) => c.id === f.subject.slice(6));
      const agrees = curve && (f.agrees ?? agreesFromFamily(curve.id));
      if (curve && agrees && desk.step === "family") {
        const v = Number(agrees.toFixed(Math.abs(agrees - Math.round(agrees)) < 0.35 ? 0 : 1));
        buttons.push(button(`File it as ${plain(v)} mm`, { onClick: () => { desk.act({ type: "curve/set", curve: curve.id, change: { diameter_mm: v, label: { by: "diameter", printed: plain(curve.diameter_mm) } } }); desk.checkAndGo("family"); } }));
      }
      if (f.settle) ways.push(["put the mark there that settles it", () => { desk.choosePanel(f.where.panel); desk.go("marks"); desk.travelTo([f.settle]); tools.markHere(f.settle); }]);
      if (f.masked) ways.push(["take the mask away there", () => desk.masks.uncover(f.masked)]);
      const ring = f.doubt && desk.step === "curves" && desk.items.find((i) => i.id === f.where?.curve)?.result?.hint_click;
      if (ring) ways.push(["go to the one click that would settle it", () => { desk.focused = { kind: "hint", curve: f.where.curve, kept: desk.items.find((i) => i.id === f.where.curve).kept }; desk.travelTo([ring]); $("paper").focus(); redo("all"); }]);
      const known = curve && f.where?.stretch && desk.step === "curves" && desk.items.find((i) => i.id === curve.id && i.pixels.length);
      if (known) ways.push(["it is right: lock it", () => desk.locks.lock(known, ...f.where.stretch)]);
      if (curve && desk.step === "curves" && !desk.openCurve) ways.push(["draw a guide", () => { desk.select(curve.id, true); desk.chooseFinding(f.number); $("paper").focus(); }]);
      return { ...f, ways, buttons };
    },
    fillForm(change) { Object.assign(desk.form, change); if (change.who !== undefined) keepSetting("who", change.who); redo("slip"); },
    async save(release) {
      const { who, why } = desk.form;
      if (!who || !why || desk.saving || desk.missing() || desk.unmarked()) return;
      desk.saving = true;
      redo("slip");
      desk.saveKey ??= `${draftId}-${crypto.randomUUID?.() ?? Date.now()}`;
      try {
        if (!(await desk.session.settled(15000))) throw Object.assign(new Error("away"), { title: "Nothing was saved", detail: "The last steps are not in the file yet. They are kept in this browser; save again when the program answers." });
        if (!desk.run?.fresh && (await desk.startRun()) !== "done") { desk.saving = false; return; }
        const pump = desk.doc.pump ?? {};
        desk.saved = await api.save(draftId, { ...(pump.key ? { key: pump.key } : {}), who, why, save_key: desk.saveKey, release, step: desk.run.step });
        desk.saved.recipe = desk.run.recipe;
        desk.saveKey = null;
        closeProblem(problems, "save");
      } catch (error) {
        fromError(problems, "save", error, [["Save again", (close) => { close(); desk.save(release); }]]);
      }
      desk.saving = false;
      redo("all");
    },
  });

  function agreesFromFamily(id) {
    for (const family of Object.values(desk.run?.family ?? {})) {
      const c = family.curves?.find((k) => k.id === id);
      if (c?.agrees_mm) return c.agrees_mm;
    }
    return null;
  }

  function travel(f) {
    if (f.where?.panel && f.where.panel !== desk.panel?.id && desk.doc.panels.some((p) => p.id === f.where.panel)) { desk.panelId = f.where.panel; desk.view = null; return; }
    const item = desk.items.find((i) => i.id === f.where?.curve);
    if (f.where?.at) return desk.travelTo([f.where.at]);
    if (!item?.pixels.length) return undefined;
    const { stretch } = f.where;
    if (!stretch) return desk.travelTo([item.pixels[Math.floor(item.pixels.length * 0.35)]]);
    // A doubtful stretch is shown near, with as much again of the line at either side, and with the click that would settle it.
    const ring = f.doubt && item.result?.hint_click ? [item.result.hint_click] : [];
    return desk.travelTo([...item.pixels.slice(Math.max(0, Math.floor(stretch[0])), Math.ceil(stretch[1]) + 1), ...ring], true);
  }
}

/** The draft's page cannot be shown: say why, and offer its first page. */
async function pageMissing(session) {
  const sheet = session.doc.sheet ?? {};
  try {
    session.page = await api.sheetPage(sheet.sha256, sheet.page ?? 1, { dpi: sheet.dpi ?? 300, turn: sheet.turn ?? 0 });
  } catch (error) {
    const ways = (sheet.page ?? 1) > 1 ? [["Go to page 1", (close) => { close(); session.act({ type: "sheet/set", change: { page: 1 } }); session.settled().then(() => location.reload()); }]] : [];
    fromError(problems, "page", error, ways);
  }
}

let flashTimer = null;
function flash(text) {
  const kept = $("said") ?? $("kept").insertAdjacentElement("beforebegin", h("span", { class: "kept", id: "said", "aria-hidden": "true" }));
  kept.textContent = text.length > 80 ? `${text.slice(0, 78)} …` : text;
  clearTimeout(flashTimer);
  flashTimer = setTimeout(() => (kept.textContent = ""), 6000);
}

function paperStrength(value) {
  $("tiles").style.opacity = String(Number(value) / 100);
  keepSetting("paper", value);
}

async function start() {
  let invalidate = () => {};
  let session;
  try {
    session = await Session.open(draftId, {
      onChange: () => invalidate("all"),
      onNews: (event, entry, detail) => {
        if (event === "away") awayProblem(session);
        if (event === "back" || event === "kept") { closeProblem(problems, "away"); if (event === "back") desk?.previews.again(); }
        if (event === "conflict") conflictProblem(session);
        if (event === "refused") fromError(problems, "refused", detail, [["Go on with what the file has", (close) => { close(); session.resolve(false); }]]);
        if (session?.outbox.away && event !== "away") awayProblem(session);
        invalidate("bar");
      },
    });
  } catch (error) {
    return fromError(problems, "open", error, [["Try again", () => location.reload()]]);
  }
  if (!session.page) await pageMissing(session);
  const desk = new Desk(session, {
    invalidate: (w) => invalidate(w),
    problem: (id, error) => fromError(problems, id, error),
    stepped: (step) => { tools?.stepped(step); if (!desk.moved || ["sheet", "panel"].includes(step) !== ["sheet", "panel"].includes(lastStep)) { desk.view = null; desk.moved = false; } lastStep = step; },
  });
  let lastStep = desk.step;
  const tiles = new TileLayer(() => invalidate("tiles"));
  const draw = new DeskDraw(desk, tiles);
  invalidate = frameLoop(draw, desk);
  desk.derive();
  const tools = new DeskTools(desk, draw, tiles, (w) => invalidate(w));
  abilities(desk, draw, tools, (w) => invalidate(w));
  deskKeys(desk, draw, tools, (w) => invalidate(w), [h("span", {}, "; the paper is shown at"), choice({ name: "paper", label: "Paper strength", value: setting("paper", "100"), options: [["100", "full strength"], ["60", "60 %"], ["30", "30 %"]], onValue: paperStrength })]);
  paperStrength(setting("paper", "100"));
  watchTyping($("slip"));
  $("undo").addEventListener("click", () => desk.undoOrRedo("undo"));
  $("redo").addEventListener("click", () => desk.undoOrRedo("redo"));
  let known = { ...size("paper"), plot: size("replot").width };
  new ResizeObserver(() => {
    const now = { ...size("paper"), plot: size("replot").width };
    // What was brought near by hand stays near when a longer sentence takes a line of the paper.
    if (now.width !== known.width || (now.height !== known.height && !desk.moved)) desk.view = null;
    known = now;
    invalidate("all");
  }).observe($("work"));
  window.addEventListener("curvebank-theme", () => invalidate("all"));
  setInterval(() => session.outbox.away && awayProblem(session), 4000);
  await desk.loadResult();
  invalidate("all");
  return desk;
}

start();
