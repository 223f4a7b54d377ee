// The title block: where it all came from.
import { h, put } from "../view/dom.js";

/** cells = [[caption, text, {grow}], ...] */
export function drawBlock(root, cells) {
  put(root, cells.filter(Boolean).map(([caption, text, more]) => h("div", { class: more?.grow ? "grow" : null }, h("dt", {}, caption), h("dd", { title: typeof text === "string" ? text : null }, text))));
}
