// Small makers of elements. Text always goes in as text, never as markup.

const SVG = "http://www.w3.org/2000/svg";

function fill(element, props, children) {
  for (const [name, value] of Object.entries(props ?? {})) {
    if (value === null || value === undefined || value === false) continue;
    if (name.startsWith("on")) element.addEventListener(name.slice(2), value);
    else if (name === "class") element.setAttribute("class", value);
    else if (name === "style" && typeof value === "object") for (const [k, v] of Object.entries(value)) element.style.setProperty(k, v);
    else if (["value", "checked", "disabled", "selected"].includes(name)) element[name] = value;
    else element.setAttribute(name, value === true ? "" : value);
  }
  for (const child of children.flat(Infinity)) if (child !== null && child !== undefined && child !== false) element.append(child);
  return element;
}

export function h(tag, props, ...children) {
  return fill(document.createElement(tag), props, children);
}

export function s(tag, props, ...children) {
  return fill(document.createElementNS(SVG, tag), props, children);
}

export function put(parent, ...children) {
  parent.replaceChildren(...children.flat(Infinity).filter((c) => c !== null && c !== undefined && c !== false));
}

export const $ = (id) => document.getElementById(id);

/** The numbered place of a finding: square for an error, diamond for a warning, circle for a note. */
export function placeMark(severity, number, { size = 24, x = 0, y = 0 } = {}) {
  const r = size / 2;
  const shape =
    severity === "error"
      ? s("rect", { x: -r + 3, y: -r + 3, width: size - 6, height: size - 6, fill: "var(--finding)" })
      : severity === "warning"
        ? s("path", { d: `M0 ${-r + 0.8}L${r - 0.8} 0L0 ${r - 0.8}L${-r + 0.8} 0Z`, fill: "var(--sheet)", stroke: "var(--finding)", "stroke-width": 1.6 })
        : s("circle", { r: r - 3.2, fill: "var(--sheet)", stroke: "var(--ink)", "stroke-width": 1.2 });
  const colour = severity === "error" ? "var(--sheet)" : severity === "warning" ? "var(--finding)" : "var(--ink)";
  const text = s("text", { "text-anchor": "middle", y: 4.2, style: { fill: colour, font: "700 12px var(--text)" } }, String(number));
  return s("g", { transform: `translate(${x} ${y})` }, shape, text);
}

export function placeIcon(severity, number) {
  return s("svg", { viewBox: "-12 -12 24 24", width: 24, height: 24, "aria-hidden": "true", focusable: "false" }, placeMark(severity, number));
}

export const SEVERITY_WORDS = { error: "Error", warning: "Warning", note: "Note", caution: "Caution" };
