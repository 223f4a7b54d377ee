// Findings as sentences, each with its number, which also stands at its place on paper and plot.
import { h, placeIcon, put, SEVERITY_WORDS } from "../view/dom.js";

/** list = [{number, severity, text, waysInline: [[words, fn]], buttons: [[words, fn]], chosen, cured}] */
export function drawFindings(root, { title, list, most = 3, chosen, onChoose, hint = true, none = "none" }) {
  const head = h("div", { class: "below-head" }, h("h2", {}, title),
    list.length ? h("span", { class: "count" }, `${list.length}${hint ? " · step through with " : ""}`, hint ? h("kbd", {}, "N") : null) : h("span", { class: "count" }, none));
  const at = Math.max(0, list.findIndex((f) => f.number === chosen));
  const from = Math.min(Math.max(0, at - most + 1), Math.max(0, list.length - most));
  const shown = list.slice(from, from + most);
  const items = shown.map((f) => finding(f, { chosen: f.number === chosen, onChoose }));
  const rest = list.length - shown.length;
  if (rest > 0) head.append(h("button", { type: "button", class: "btn quiet more", onclick: () => onChoose(list[(from + most) % list.length]) }, `show ${rest} more`));
  put(root, head, h("ol", { class: "findings" }, items));
}

export function finding(f, { chosen = false, onChoose = null } = {}) {
  const icon = onChoose
    ? h("button", { type: "button", class: "place", "aria-label": `Show the place of finding ${f.number}`, onclick: () => onChoose(f) }, placeIcon(f.severity, f.number))
    : h("span", { class: "place" }, placeIcon(f.severity, f.number));
  const ways = (f.ways ?? []).map(([words, fn], i, all) => [i === 0 ? " " : i === all.length - 1 ? " or " : ", ", h("button", { type: "button", class: "link", onclick: fn }, i ? words.charAt(0).toLowerCase() + words.slice(1) : words)]);
  return h("li", { class: `finding ${chosen ? "chosen" : ""} ${f.cured ? "cured" : ""}`, "data-number": f.number }, icon,
    h("div", {}, h("strong", {}, `${SEVERITY_WORDS[f.severity] ?? f.severity}. `), f.text, ways, ways.length ? "." : null,
      f.buttons?.length ? h("div", { class: "ways" }, f.buttons) : null));
}
