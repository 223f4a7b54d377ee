// A problem says what happened, what is safe and what to do; it stays until it is answered.
import { h } from "../view/dom.js";

/** Show a problem in `root`; the same `id` replaces its older self. ways = [[words, fn, quiet]]. Gives a function that takes it away. */
export function showProblem(root, { id, title, text, ways = [], details = null, extra = null }) {
  const old = root.querySelector(`[data-problem="${id}"]`);
  const close = () => root.querySelector(`[data-problem="${id}"]`)?.remove();
  const box = h("section", { class: "problem", "data-problem": id, role: "alert" }, h("h2", {}, title), h("p", {}, text), extra,
    h("div", { class: "ways" }, ways.map(([words, fn, quiet]) => h("button", { type: "button", class: `btn ${quiet ? "quiet" : ""}`, onclick: () => fn(close) }, words))),
    details ? h("details", {}, h("summary", {}, "Details"), h("p", {}, h("code", {}, details))) : null);
  if (old) old.replaceWith(box);
  else root.append(box);
  return close;
}

export function closeProblem(root, id) {
  root.querySelector(`[data-problem="${id}"]`)?.remove();
}

/** A refused or failed call as a problem message. */
export function fromError(root, id, error, ways = []) {
  return showProblem(root, { id, title: error.title ?? "This could not be done", text: error.detail || error.message, ways: [...ways, ["Close", (close) => close(), true]], details: [error.status || "", error.code || "", error.rest?.path || ""].filter(Boolean).join(" ") || null });
}
