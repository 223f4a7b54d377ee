// Another scan for a draft: a better one of the same paper, or the second half of the sheet. Chosen, worked on, looked at; then taken or left.
import * as api from "../net/api.js";
import { follow } from "../net/jobs.js";
import { toScreen } from "../geometry/affine.js";
import { path, thin } from "../geometry/polyline.js";
import { plain } from "../geometry/number.js";
import { firstToShow, nameOf, registrationWords } from "../state/carry.js";
import { drawBlock } from "../panels/block.js";
import { button, choice, fillSlip, numberBlank, watchTyping } from "../panels/blank.js";
import { carryReport } from "../panels/carry-report.js";
import { keysDialog, letterMayAct } from "../panels/keys.js";
import { closeProblem, fromError } from "../panels/problem.js";
import { jobSentence } from "../panels/sentences-end.js";
import { $, h, s } from "../view/dom.js";
import { SheetBox } from "../view/sheet-box.js";

const boot = JSON.parse($("boot").textContent || "{}");
const half = location.hash === "#half";
const desk = `/desk/${encodeURIComponent(boot.draft)}`;
const problems = $("problems");
const t = (words) => h("span", {}, words);
const stop = () => h("span", { class: "stop" }, ".");
const now = { draft: null, other: null, job: null, outcome: null, chosen: null, ties: [], open: null, tying: false };
const WORDS = half
  ? { title: "The second half of the sheet", lay: "Lay the other half here", words: "A sheet too large for the scanner, in two scans that overlap or meet: the desk finds where they fit and makes one sheet of both. The first half's pixels, and all that stands on them, stay as they are." }
  : { title: "A better scan of this paper", lay: "Lay the better scan here", words: "The same print, scanned finer, straighter or cleaner. Marks, clicks, guides and masks are carried over by the print itself; you see what each curve changes before anything is taken." };

const one = new SheetBox($("one"), { over: drawOne, place: (p) => tie(0, p) });
const two = new SheetBox($("two"), { over: drawTwo, place: (p) => tie(1, p) });

function say(text) {
  $("aloud").textContent = "";
  requestAnimationFrame(() => ($("aloud").textContent = text));
}

/** The lines of both scans over the new one: dotted ink what was read before, solid violet what is read now. */
function drawTwo(svg, view) {
  if (now.tying) return drawTies(svg, view, 1);
  if (now.outcome && !half) drawLines(svg, view);
  return undefined;
}

function drawOne(svg, view) {
  if (now.tying) return drawTies(svg, view, 0);
  if (now.outcome && !half) drawLines(svg, view);
  return undefined;
}

function drawLines(svg, view) {
  for (const c of now.outcome.report.curves) {
    const on = c.id === now.chosen;
    const line = (pixels, cls, width, dash = null) => {
      if (!pixels?.length) return;
      const d = path(thin(pixels.map((p) => toScreen(view, p)), 1.2), 2);
      if (!dash) svg.append(s("path", { d, class: "casing", "stroke-width": width + 2.6 }));
      svg.append(s("path", { d, class: cls, "stroke-width": width, "stroke-dasharray": dash }));
    };
    line(c.now_pixels, "k-trace", on ? 2.6 : 1.8);
    line(c.before_pixels, "k-ink", on ? 1.8 : 1.2, "2 6");
    if (on && c.at) {
      const [x, y] = toScreen(view, c.at);
      svg.append(s("circle", { cx: x, cy: y, r: 13, class: "casing", "stroke-width": 5 }), s("circle", { cx: x, cy: y, r: 13, class: "k-finding", "stroke-width": 1.8 }));
      svg.append(s("text", { x: x + 18, y: y - 10, class: "endlabel halo t-finding" }, "largest change"));
    }
  }
  const doc = now.outcome.recipe;
  for (const panel of doc.panels ?? []) {
    for (const a of Object.values(panel.axes)) for (const m of a.marks ?? []) cross(svg, toScreen(view, m.at), "trace");
  }
  for (const c of doc.curves ?? []) if (c.id === now.chosen) for (const p of c.clicks ?? []) square(svg, toScreen(view, p));
}

function cross(svg, [x, y], tone) {
  const d = `M${x - 9} ${y}h6m6 0h6M${x} ${y - 9}v6m0 6v6`;
  svg.append(s("path", { d, class: "casing", "stroke-width": 4.2 }), s("path", { d, class: `k-${tone}`, "stroke-width": 1.6 }));
}

const square = (svg, [x, y]) => svg.append(s("rect", { x: x - 4.5, y: y - 4.5, width: 9, height: 9, fill: "var(--sheet)", stroke: "var(--construct)", "stroke-width": 1.8 }));

function drawTies(svg, view, k) {
  const box = k ? two : one;
  if (document.activeElement === box.root) svg.append(s("circle", { cx: box.middle()[0], cy: box.middle()[1], r: 9, class: "casing", "stroke-width": 4 }), s("circle", { cx: box.middle()[0], cy: box.middle()[1], r: 9, class: "k-ink", "stroke-width": 1.6, "stroke-dasharray": "4 3" }));
  const all = now.open ? [...now.ties, now.open] : now.ties;
  all.forEach((pair, i) => {
    if (!pair[k]) return;
    const [x, y] = toScreen(view, pair[k]);
    cross(svg, [x, y], "trace");
    svg.append(s("text", { x: x + 9, y: y - 8, class: "endlabel halo t-trace" }, String(i + 1)));
  });
}

/** One point of a pair: first on the one half, then the same place on the other, in either order. */
function tie(k, place) {
  if (!now.tying) return;
  const at = place.map((v) => Math.round(v * 10) / 10);
  now.open ??= [null, null];
  now.open[k] = at;
  if (now.open[0] && now.open[1]) {
    now.ties.push(now.open);
    now.open = null;
    say(`Pair ${now.ties.length} set.`);
  }
  draw();
}

const whole = () => ({ sha256: now.other.page.sha256, page: now.other.page.page, dpi: now.other.page.dpi, turn: now.other.page.turn, file: now.other.file });

function slip() {
  const { job, other, outcome } = now;
  if (job && !job.over) return fillSlip($("slip"), jobSentence({ job, stopRun }));
  if (outcome) return fillSlip($("slip"), half ? joinedSentence(outcome) : carriedSentence(outcome));
  if (!other) {
    const rest = now.drafts.filter((d) => d.sheet_sha256 && d.sheet_sha256 !== now.draft.page?.sha256);
    return fillSlip($("slip"), {
      sentence: [t(half ? "Lay the other half on the board below" : "Lay the better scan on the board below"), rest.length ? [t(", or take the sheet of"), choice({ name: "draft", label: "A sheet that lies on the desk", value: "", options: [["", "a draft"], ...rest.map((d) => [d.id, d.title || "Untitled sheet"])], onValue: fromDraft })] : null, stop()],
      does: [h("a", { class: "btn quiet", href: desk }, "Leave it")],
    });
  }
  return fillSlip($("slip"), now.tying ? tieSentence() : chosenSentence());
}

function chosenSentence() {
  const { page, file } = now.other;
  const turn = (change) => show({ ...page, ...change });
  return {
    sentence: [
      t(half ? "Join page" : "Carry everything onto page"), page.pages > 1 ? numberBlank({ name: "page", label: `Page of the file, 1 to ${page.pages}`, value: page.page, width: 40, least: 1, most: page.pages, whole: true, onValue: (v) => v && turn({ page: v }) }) : h("b", {}, "1"),
      t(`of ${file}, turned`), choice({ name: "turn", label: "Turned clockwise by", value: page.turn, options: [0, 90, 180, 270].map((v) => [v, `${v}°`]), onValue: (v) => turn({ turn: v }) }), stop(),
    ],
    does: [half ? button("Tie points myself", { quiet: true, onClick: startTying }) : null, button("Another file", { quiet: true, onClick: again }), button(half ? "Join the halves" : "Carry over", { main: true, key: "Enter", onClick: work })],
  };
}

function tieSentence() {
  const n = now.ties.length;
  return {
    sentence: [t(now.open ? "Now click the same place on the other half." : n < 2 ? "Click a place that both halves show, on either one: a crossing, a corner, the end of a letter." : "Two pairs will do; three or more find a slip."), h("small", { class: "held" }, `${n} ${n === 1 ? "pair" : "pairs"}`), n ? button("Take the last away", { quiet: true, onClick: () => { now.ties.pop(); now.open = null; draw(); } }) : null],
    does: [button("Without ties", { quiet: true, onClick: () => { now.tying = false; now.ties = []; now.open = null; draw(); } }), button("Join the halves", { main: n >= 2, waiting: n < 2 ? "needs two pairs" : null, onClick: work })],
    key: `ties-${n}-${Boolean(now.open)}`,
  };
}

function carriedSentence({ report }) {
  return {
    sentence: [t(registrationWords(report.registration))],
    does: [h("a", { class: "btn quiet", href: desk }, "Leave it"), button("Try another scan", { quiet: true, onClick: again }), button("Take this scan", { main: true, key: "Enter", onClick: take })],
  };
}

function joinedSentence({ report }) {
  const how = report.found === "ties" ? "by your ties" : "by the ink of both";
  return {
    sentence: [t(`One sheet of ${plain(report.size[0], 0)} × ${plain(report.size[1], 0)} px, fitted ${how} to ${plain(report.residual_px, 2)} px.`)],
    does: [h("a", { class: "btn quiet", href: desk }, "Leave it"), button("Tie points myself", { quiet: true, onClick: startTying }), button("Take the joined sheet", { main: true, key: "Enter", onClick: take })],
  };
}

function startTying() {
  Object.assign(now, { tying: true, outcome: null, open: null });
  draw();
}

function again() {
  Object.assign(now, { other: null, outcome: null, ties: [], open: null, tying: false });
  draw();
  $("choose").focus();
}

async function show(page) {
  try {
    now.other = { ...now.other, page: await api.sheetPage(page.sha256, page.page, { dpi: page.dpi, turn: page.turn }) };
    draw();
  } catch (error) {
    fromError(problems, "page", error);
  }
}

async function lay(file) {
  const laying = $("laying");
  closeProblem(problems, "lay");
  laying.textContent = `Laying ${file.name} on the desk …`;
  try {
    const sheet = await api.uploadSheet(file, (share) => (laying.textContent = `Laying ${file.name} on the desk … ${Math.round(share * 100)} %`));
    now.other = { file: sheet.file_name ?? file.name, page: sheet.page };
    draw();
  } catch (error) {
    fromError(problems, "lay", error, [["Choose another file", (close) => { close(); $("file").click(); }]]);
  }
  laying.textContent = "";
}

async function fromDraft(id) {
  if (!id) return;
  try {
    const draft = await api.draft(id);
    if (!draft.page) throw Object.assign(new Error(), { title: "That sheet cannot be shown", detail: "Open its draft to see why, or choose a file." });
    now.other = { file: draft.doc.sheet?.file ?? "sheet", page: draft.page };
    draw();
  } catch (error) {
    fromError(problems, "lay", error);
  }
}

async function work() {
  if (now.job && !now.job.over) return;
  for (const id of ["work", "lay"]) closeProblem(problems, id);
  now.outcome = null;
  now.job = { state: "queued", share: 0, text: "Beginning" };
  draw();
  try {
    const job = await (half ? api.join(boot.draft, { sheet: whole(), ...(now.tying && now.ties.length ? { ties: now.ties } : {}) }) : api.carry(boot.draft, { sheet: whole() }));
    const end = await follow(job, (state) => { now.job = state; slip(); });
    now.job = { ...now.job, over: true };
    if (end.state === "failed") throw Object.assign(new Error(), { title: end.problem?.title ?? "This could not be done", detail: end.problem?.detail ?? "", code: end.problem?.code });
    if (end.state === "done") {
      now.outcome = await api.outcome(end.result_url);
      now.tying = false;
      now.chosen = half ? null : firstToShow(now.outcome.report.curves)?.id ?? null;
    }
  } catch (error) {
    now.job = null;
    const ways = half ? [["Tie points myself", (close) => { close(); startTying(); }]] : [["Choose another scan", (close) => { close(); again(); }]];
    fromError(problems, "work", error, ways);
  }
  draw();
  if (now.outcome && !half) showChange();
  else if (now.outcome) $("slip").querySelector(".btn.main")?.focus();
}

async function stopRun() {
  if (!now.job?.id) return;
  now.job = { ...now.job, text: "Stopping" };
  slip();
  await api.stopJob(now.job.id).catch(() => null);
}

/** The accepted scan becomes the next step of the draft: undo brings the old one back. */
async function take() {
  const { outcome } = now;
  const doc = half ? { ...now.draft.doc, sheet: { ...now.draft.doc.sheet, ...outcome.sheet, dpi: undefined, turn: undefined } } : outcome.recipe;
  try {
    await api.keepStep(boot.draft, { doc, base_step: outcome.step, action_id: `scan-${now.job.id}`, label: half ? "second half joined" : "better scan taken" });
    location.assign(`${desk}#${half ? "sheet" : "curves"}`);
  } catch (error) {
    const moved = error.status === 409;
    fromError(problems, "take", moved ? Object.assign(error, { title: "The draft has gone on meanwhile", detail: "It was changed in another window after this was worked out, so nothing was taken. Do it again from its newest step." }) : error, [["Do it again", (close) => { close(); now.draft = null; start().then(work); }]]);
  }
}

function showChange() {
  const curve = now.outcome.report.curves.find((c) => c.id === now.chosen);
  if (curve?.at) one.near(curve.at);
  if (curve) say(`${nameOf(curve, now.outcome.recipe)}.`);
  report();
}

function report() {
  const focused = document.activeElement?.closest?.("#report") ? true : false;
  carryReport($("report"), { report: now.outcome.report, doc: now.outcome.recipe, chosen: now.chosen, onChoose: choose });
  if (focused) $("report").querySelector("tr.chosen button")?.focus();
}

function choose(id) {
  now.chosen = id;
  showChange();
}

function draw() {
  const { other, outcome } = now;
  const carried = Boolean(outcome && !half);
  $("drop").hidden = Boolean(other);
  $("one").hidden = !other;
  $("two").hidden = !other || Boolean(outcome);
  $("report").hidden = !carried;
  $("both").classList.toggle("report-shown", carried);
  $("both").style.gridTemplateColumns = outcome && half ? "1fr" : "";
  for (const id of ["one", "two"]) $(id).classList.toggle("ties", now.tying);
  $("one").setAttribute("aria-label", outcome ? (half ? "The joined sheet" : "The new scan with both readings") : "The sheet of this draft");
  $("two").setAttribute("aria-label", "The other scan");
  if (other) {
    const around = carried ? outcome.report.curves.flatMap((c) => c.now_pixels ?? []).concat((outcome.recipe.panels ?? []).flatMap((p) => Object.values(p.axes).flatMap((a) => (a.marks ?? []).map((m) => m.at)))) : null;
    one.show(outcome ? outcome.page : now.draft.page, around);
    two.show(other.page);
  }
  if (carried) report();
  slip();
  const page = now.draft?.page;
  drawBlock($("block"), [
    page ? [half ? "first half" : "scan now", `${now.draft.doc.sheet?.file ?? "?"}, ${page.width} × ${page.height} px`] : null,
    other ? [half ? "second half" : "other scan", `${other.file}, ${other.page.width} × ${other.page.height} px`] : null,
    outcome?.report.registration ? ["fit of the papers", `${plain(outcome.report.registration.residual_px, 2)} px over ${plain(100 * outcome.report.registration.coverage, 0)} %`] : null,
    ["what is taken", "becomes one step of the draft; undo brings the old scan back", { grow: true }],
  ]);
}

async function start() {
  try {
    const [draft, listed] = await Promise.all([api.draft(boot.draft), api.drafts()]);
    now.draft = draft;
    now.drafts = listed.items.filter((d) => d.id !== boot.draft);
  } catch (error) {
    return fromError(problems, "open", error, [["Try again", () => location.reload()]]);
  }
  $("title").textContent = WORDS.title;
  $("drop-title").textContent = WORDS.lay;
  $("drop-words").textContent = WORDS.words;
  document.title = `${WORDS.title}, curvebank`;
  const pump = now.draft.doc.pump ?? {};
  $("where").textContent = [pump.maker, pump.model].filter(Boolean).join(" ") || now.draft.doc.sheet?.file || "";
  draw();
  return undefined;
}

$("choose").addEventListener("click", () => $("file").click());
$("file").addEventListener("change", (e) => { if (e.target.files[0]) lay(e.target.files[0]); e.target.value = ""; });
for (const name of ["dragenter", "dragover"]) window.addEventListener(name, (e) => { e.preventDefault(); $("drop").classList.add("over"); });
window.addEventListener("dragleave", (e) => e.relatedTarget === null && $("drop").classList.remove("over"));
window.addEventListener("drop", (e) => {
  e.preventDefault();
  $("drop").classList.remove("over");
  if (e.dataTransfer?.files[0] && !now.outcome) lay(e.dataTransfer.files[0]);
});
window.addEventListener("keydown", (e) => {
  if (e.key === "Escape" && now.job && !now.job.over && !$("keys").open) return stopRun();
  if (!letterMayAct(e)) return undefined;
  const key = e.key.toLowerCase();
  if (key === "o" && !now.outcome) return $("file").click();
  if (key === "enter" && !e.target.closest?.("button, a")) return $("slip").querySelector(".btn.main")?.click();
  if (["j", "k"].includes(key) && now.outcome && !half) {
    const list = now.outcome.report.curves;
    const at = list.findIndex((c) => c.id === now.chosen);
    return choose(list[(at + (key === "j" ? 1 : -1) + list.length) % list.length].id);
  }
  return undefined;
});
for (const box of [one, two]) for (const name of ["focus", "blur"]) box.root.addEventListener(name, () => now.tying && box.draw());
window.addEventListener("resize", () => now.draft && draw());
window.addEventListener("curvebank-theme", () => now.draft && draw());
keysDialog([["O", "choose a file"], ["Enter", "carry over, or take the scan"], ["Esc", "stop the work"], ["J K", "next curve, the one before"], ["+ −", "on a scan: closer, further"], ["0", "on a scan: the whole of it"], ["P", "while tying: a point in the middle of the scan in focus"], ["← → ↑ ↓", "on a scan: move it"], ["?", "this map"]]);
watchTyping($("slip"));
start();
