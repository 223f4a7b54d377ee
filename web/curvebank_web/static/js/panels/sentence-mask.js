// The sentence of the mask brush, and the list of what is masked.
import { maskWords } from "../geometry/brush.js";
import { h, put } from "../view/dom.js";
import { button, choice, numberBlank } from "./blank.js";

const t = (words) => h("span", {}, words);

export function maskSentence(desk) {
  const { masks } = desk;
  const n = masks.list.length;
  return {
    sentence: [
      choice({ name: "brush", label: "What the brush does", value: masks.erasing ? "erase" : "mask", options: [["mask", "Brush over"], ["erase", "Erase the mask from"]], onValue: (v) => { masks.erasing = v === "erase"; desk.set({}); } }),
      t(masks.erasing ? "what is to be read again, with an eraser" : "stamps, notes and stains that are not the chart, with a brush"),
      numberBlank({ name: "width", label: "Width of the brush in sheet pixels", value: masks.px, width: 48, least: 2, most: 2000, onValue: (v) => { if (v) masks.width = v; desk.set({}); } }),
      t("px wide"), h("span", { class: "stop" }, "."),
      h("small", { class: "held wide" }, masks.erasing ? "" : "What lies under a mask is not read; it is never taken for blank paper."),
    ],
    does: [h("span", { class: "hint" }, h("kbd", {}, "["), " ", h("kbd", {}, "]"), " width"), h("span", { class: "hint" }, h("kbd", {}, "P"), " brush by keyboard"), button(n ? `Done, ${n} ${n === 1 ? "mask" : "masks"}` : "Done", { main: true, key: "Esc", onClick: () => masks.hold(false) })],
    key: `mask-${masks.erasing}-${masks.px}`,
  };
}

/** The masks of the sheet as a short table, each with its two ways. */
export function maskList(root, desk) {
  const { masks } = desk;
  const { list } = masks;
  put(root, h("h2", {}, list.length ? `${list.length} ${list.length === 1 ? "mask" : "masks"} on this sheet` : "No mask on this sheet"),
    list.length
      ? h("ol", { class: "masks" }, list.map((mask, i) => h("li", { class: i === masks.chosen ? "chosen" : null }, h("b", {}, String(i + 1)), h("span", {}, maskWords(mask)),
        h("button", { type: "button", class: "link", onclick: () => masks.show(i), "aria-label": `Show mask ${i + 1}` }, "show"),
        h("button", { type: "button", class: "link", onclick: () => masks.remove(i), "aria-label": `Remove mask ${i + 1}` }, "remove"))))
      : h("p", { class: "small" }, "A stamp, a note or a stain over a curve: brush over it, and the trace goes straight on beneath instead of following it."));
}
