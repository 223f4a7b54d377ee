// A sentence with blanks. Blanks are real inputs whose label is read out; what is typed stays typed.
import { parseNumber, typed } from "../geometry/number.js";
import { h, s } from "../view/dom.js";

const arrow = () => s("svg", { width: 9, height: 6, viewBox: "0 0 9 6", "aria-hidden": "true", focusable: "false" }, s("path", { d: "M0 0h9L4.5 6z", fill: "currentColor" }));

/**
 * A blank that takes a number. onValue(number | null); `offer` is a value that Tab takes when the blank is empty; `words(text)` may
 * accept a text in place of a number (a letter for a diameter).
 */
export function numberBlank({ name, label, value, example = "", offer = null, width = 52, onValue, onEnter, least = null, most = null, whole = false, words = null }) {
  const shown = value === null || value === undefined ? "" : typeof value === "string" ? value : typed(value);
  const input = h("input", { name, type: "text", inputmode: "decimal", autocomplete: "off", spellcheck: "false", "aria-label": label, value: shown, placeholder: offer !== null ? `${typed(offer)}` : example, style: { width: `${Math.max(width, 16 + 9 * shown.length)}px` } });
  const wrap = h("span", { class: "blank" }, input);
  const commit = () => {
    const said = words?.(input.value.trim());
    const got = said ? { value: said } : parseNumber(input.value);
    let error = got.error ?? null;
    if (!error && !said && got.value !== null && least !== null && !(got.value >= least)) error = `“${input.value}” is too small here. Type ${typed(least)} or more.`;
    if (!error && !said && got.value !== null && most !== null && !(got.value <= most)) error = `“${input.value}” is too large here. Type ${typed(most)} or less.`;
    if (!error && got.value !== null && whole && got.value !== Math.round(got.value)) error = `“${input.value}” is not a whole number.`;
    wrap.classList.toggle("wrong", Boolean(error));
    input.toggleAttribute("aria-invalid", Boolean(error));
    sayUnder(wrap, name, error);
    if (error) return undefined;
    return got.value;
  };
  let done = false;
  const settle = () => {
    if (done) return true;
    if (input.value === shown) {
      wrap.classList.remove("wrong");
      sayUnder(wrap, name, null);
      return true;
    }
    const v = commit();
    if (v === undefined) return false;
    onValue?.(v);
    return true;
  };
  input.addEventListener("change", settle);
  input.addEventListener("keydown", (e) => {
    if (e.key === "Tab" && !e.shiftKey && offer !== null && input.value.trim() === "") {
      input.value = typed(offer);
      if (onEnter) e.preventDefault();
      settle();
    } else if (e.key === "Enter") {
      e.preventDefault();
      if (!onEnter && input.value === shown && settle()) return goOn(input);
      const v = commit();
      if (v === undefined) return undefined;
      if (!onEnter) return settle();
      done = true;
      onEnter(v);
      setTimeout(() => (done = false), 0);
    }
    return undefined;
  });
  wrap.read = () => commit();
  wrap.input = input;
  return wrap;
}

/** Enter in a blank that stays as it is: on to the next one, and from the last to what the sentence leads to. */
function goOn(input) {
  const slip = input.closest(".slip");
  const blanks = [...(slip?.querySelectorAll(".sentence input, .sentence select") ?? [])];
  const next = blanks[blanks.indexOf(input) + 1];
  if (next) {
    next.focus();
    next.select?.();
  } else slip?.querySelector(".btn.main")?.click();
}

function sayUnder(wrap, name, error) {
  const sentence = wrap.closest(".slip");
  if (!sentence) return;
  const id = `under-${name}`;
  sentence.querySelector(`#${id}`)?.remove();
  if (!error) return wrap.input?.removeAttribute("aria-describedby");
  sentence.append(h("p", { class: "under", id, role: "alert" }, error));
  wrap.querySelector("input").setAttribute("aria-describedby", id);
}

/** A blank grows with its text, up to a third of a small window. */
const roomFor = (text, least) => Math.max(least, Math.min(300, 18 + 8 * text.length));

export function textBlank({ name, label, value, example = "", width = 120, onValue, list = null }) {
  const input = h("input", { name, type: "text", autocomplete: "off", spellcheck: "false", "aria-label": label, value: value ?? "", placeholder: example, list: list ? `${name}-list` : null, style: { width: `${roomFor(value ?? "", width)}px` } });
  input.addEventListener("input", () => (input.style.width = `${roomFor(input.value, width)}px`));
  input.addEventListener("change", () => input.value !== (value ?? "") && onValue?.(input.value.trim()));
  input.addEventListener("keydown", (e) => {
    if (e.key !== "Enter") return;
    e.preventDefault();
    if (input.value !== (value ?? "")) onValue?.(input.value.trim());
    else goOn(input);
  });
  return h("span", { class: "blank" }, input, list ? h("datalist", { id: `${name}-list` }, list.map((v) => h("option", { value: v }))) : null);
}

/** A blank with a choice; options = [[value, words], ...]. */
export function choice({ name, label, value, options, onValue }) {
  const select = h("select", { name, "aria-label": label }, options.map(([v, words]) => h("option", { value: String(v), selected: String(v) === String(value) }, words)));
  select.addEventListener("change", () => onValue(options.find(([v]) => String(v) === select.value)[0]));
  return h("span", { class: "blank" }, select, arrow());
}

export function button(words, { main = false, quiet = false, key = null, onClick, waiting = null, name = null }) {
  const b = h("button", { type: "button", class: `btn ${main ? "main" : ""} ${quiet ? "quiet" : ""}`, "aria-disabled": waiting ? "true" : null, name, title: null }, words, key ? h("kbd", { "aria-hidden": "true" }, key) : null);
  b.addEventListener("click", () => !waiting && onClick());
  return waiting ? [b, h("span", { class: "hint" }, waiting)] : b;
}

const shownNow = new WeakMap();

/**
 * Fill the slip. The same sentence is not laid again, so that what is half typed, and what was said of it, stays; `key` tells sentences
 * apart that read alike but speak of another mark or curve. Focus, caret and half-typed text survive a change around them.
 */
export function fillSlip(slip, { sentence, does = [], focus = null, key = "" }) {
  const parts = [h("div", { class: "sentence" }, sentence, h("div", { class: "does" }, does))];
  const written = key + parts.map((p) => p.outerHTML + [...p.querySelectorAll("input, select")].map((i) => i.value).join("|")).join("");
  if (shownNow.get(slip) === written && !focus) return;
  shownNow.set(slip, written);
  const active = slip.contains(document.activeElement) ? document.activeElement : null;
  const was = active?.name ? { name: active.name, value: active.value, from: active.selectionStart, initial: active.defaultValue, tag: active.tagName } : null;
  const dirty = active && slip.dataset.typed === active.name ? active.value : null;
  slip.replaceChildren(...parts);
  const wanted = focus ?? was?.name;
  if (!wanted) return;
  const next = slip.querySelector(`[name="${CSS.escape(wanted)}"]`);
  if (!next) return;
  if (!focus && dirty !== null && next.tagName === was.tag) next.value = dirty;
  next.focus({ preventScroll: true });
  if (next.select && focus) next.select();
  else if (was?.from !== null && next.setSelectionRange && next.type === "text") next.setSelectionRange(was.from, was.from);
}

/** Remember which blank is being typed in, so that a redraw keeps the text. */
export function watchTyping(slip) {
  slip.addEventListener("input", (e) => (slip.dataset.typed = e.target.name));
  slip.addEventListener("change", () => delete slip.dataset.typed);
  slip.addEventListener("keydown", (e) => {
    if (e.key !== "Enter" || e.target.tagName !== "SELECT") return;
    e.preventDefault();
    slip.querySelector(".btn.main")?.click();
  });
}
