// The map of keys for the screen one is on, with the few settings that a browser keeps.
import { $, h, put } from "../view/dom.js";
import { storage } from "../net/storage.js";
import { choice } from "./blank.js";

const KEEP = "curvebank.";

export function setting(name, fallback) {
  return storage.getItem(KEEP + name) ?? fallback;
}

export function keepSetting(name, value) {
  storage.setItem(KEEP + name, value);
}

export function setTheme(theme) {
  keepSetting("theme", theme);
  if (theme === "auto") delete document.documentElement.dataset.theme;
  else document.documentElement.dataset.theme = theme;
  window.dispatchEvent(new Event("curvebank-theme"));
}

/** True when a letter key may act: not in a blank, not with a modifier, and not switched off. */
export function letterMayAct(event) {
  if (event.ctrlKey || event.metaKey || event.altKey) return false;
  if (setting("letters", "on") === "off") return false;
  const t = event.target;
  return !(t instanceof HTMLElement && (t.closest("input, select, textarea, [contenteditable]") || t.closest("dialog")));
}

export function keysDialog(rows, more = []) {
  const dialog = $("keys");
  const draw = () =>
    put(dialog,
      h("h2", { id: "keys-title" }, "Keys on this page"),
      h("div", { class: "keymap" }, rows.map(([keys, does]) => h("div", {}, h("span", {}, keys.split(" ").map((k) => [h("kbd", {}, k), " "])), h("span", {}, does)))),
      h("div", { class: "sentence" },
        h("span", {}, "The page is"), choice({ name: "theme", label: "Light or dark", value: setting("theme", "auto"), options: [["auto", "light or dark as the system"], ["light", "light"], ["dark", "dark"]], onValue: setTheme }),
        h("span", {}, "and letters"), choice({ name: "letters", label: "Letters as keys", value: setting("letters", "on"), options: [["on", "act as keys"], ["off", "do nothing"]], onValue: (v) => keepSetting("letters", v) }), more, h("span", { class: "stop" }, ".")),
      h("p", { style: { "margin-top": "16px" } }, h("button", { type: "button", class: "btn main", onclick: () => dialog.close() }, "Close")));
  const open = () => {
    draw();
    dialog.showModal();
  };
  $("keys-button").addEventListener("click", open);
  window.addEventListener("keydown", (e) => e.key === "?" && letterMayAct(e) && !dialog.open && open());
  return open;
}
