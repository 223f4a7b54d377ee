// The front page: lay a sheet on the desk, or go on with one that lies there.
import * as api from "../net/api.js";
import { plain } from "../geometry/number.js";
import { drawBlock } from "../panels/block.js";
import { keysDialog, letterMayAct } from "../panels/keys.js";
import { fromError } from "../panels/problem.js";
import { $, h, put, s } from "../view/dom.js";

const boot = JSON.parse($("boot").textContent || "{}");
const problems = $("problems");
const drop = $("drop");

async function lay(file) {
  const laying = $("laying");
  laying.textContent = `Laying ${file.name} on the desk …`;
  try {
    const sheet = await api.uploadSheet(file, (share) => (laying.textContent = `Laying ${file.name} on the desk … ${Math.round(share * 100)} %`));
    const draft = await api.newDraft({ sheet: { sha256: sheet.sha256, page: 1, file: sheet.file_name ?? file.name } });
    location.assign(`/desk/${encodeURIComponent(draft.id)}`);
  } catch (error) {
    laying.textContent = "";
    fromError(problems, "lay", error, [["Choose another file", (close) => { close(); $("file").click(); }]]);
  }
}

function corners() {
  const svg = drop.querySelector(".corners");
  const { clientWidth: w, clientHeight: t } = svg.parentElement;
  const [x, y] = [w - 36, t - 36];
  put(svg, s("path", { d: `M0.5 26V0.5H26M${x - 26} 0.5H${x - 0.5}V26M${x - 0.5} ${y - 26}V${y - 0.5}H${x - 26}M26 ${y - 0.5}H0.5V${y - 26}`, fill: "none", stroke: "var(--edge)", "stroke-width": 1.5 }));
}

function draftRow(d, refresh) {
  const when = d.updated_at ? new Date(d.updated_at) : null;
  const text = when && !Number.isNaN(when.valueOf()) ? when.toLocaleString("en-GB", { day: "numeric", month: "short", hour: "2-digit", minute: "2-digit" }) : "";
  return h("li", {}, h("a", { href: `/desk/${encodeURIComponent(d.id)}` }, d.title || "Untitled sheet"), h("small", {}, `step ${d.step}, ${text}`),
    h("button", { type: "button", class: "btn quiet", "aria-label": `Clear ${d.title || "this draft"} away`, onclick: (e) => clear(e.currentTarget, d, refresh) }, "Clear away"));
}

/** A second press confirms: a draft holds work that exists nowhere else. */
async function clear(button, d, refresh) {
  if (button.dataset.sure !== "yes") {
    button.dataset.sure = "yes";
    button.textContent = "Clear away for good?";
    return;
  }
  try {
    await api.dropDraft(d.id);
  } catch (error) {
    fromError(problems, "clear", error);
  }
  refresh();
}

async function refresh() {
  try {
    const [{ items }, pumps] = await Promise.all([api.drafts(), api.pumps({ limit: 200 })]);
    $("drafts").hidden = !items.length;
    put($("draft-list"), items.map((d) => draftRow(d, refresh)));
    $("drop-title").textContent = items.length || pumps.items.length ? "Lay a sheet here" : "Lay the first sheet here";
    const bank = String(boot.bank ?? "").split(/[\\/]/).pop();
    $("where").textContent = bank ? `Bank: ${bank}${pumps.items.length ? "" : ", empty"}` : "";
    drawBlock($("block"), [
      ["bank", boot.bank ?? "?"], ["holds", `${plain(pumps.items.length)}${pumps.next ? " or more" : ""} ${pumps.items.length === 1 ? "pump" : "pumps"}, ${items.length} ${items.length === 1 ? "draft" : "drafts"} on the desk`],
      ["reachable from", `this computer only, ${location.hostname}`, { grow: true }], ["nothing leaves this machine", `curvebank ${boot.version ?? ""}`],
    ]);
  } catch (error) {
    fromError(problems, "list", error, [["Try again", (close) => { close(); refresh(); }]]);
  }
}

$("choose").addEventListener("click", () => $("file").click());
$("file").addEventListener("change", (e) => e.target.files[0] && lay(e.target.files[0]));
window.addEventListener("keydown", (e) => e.key.toLowerCase() === "o" && letterMayAct(e) && $("file").click());
for (const name of ["dragenter", "dragover"]) {
  window.addEventListener(name, (e) => {
    e.preventDefault();
    drop.classList.add("over");
  });
}
window.addEventListener("dragleave", (e) => e.relatedTarget === null && drop.classList.remove("over"));
window.addEventListener("drop", (e) => {
  e.preventDefault();
  drop.classList.remove("over");
  if (e.dataTransfer?.files[0]) lay(e.dataTransfer.files[0]);
});
window.addEventListener("resize", corners);
keysDialog([["O", "choose a file"], ["Tab", "to the drafts on the desk"], ["?", "this map"]]);
corners();
refresh();
