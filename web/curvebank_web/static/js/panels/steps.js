// The step line: a ruler whose heavy stroke is what is done; the current step's stroke hangs down to the slip.
import { STEPS, STEP_WORDS } from "../state/derive.js";
import { h, put, s } from "../view/dom.js";

export function drawSteps(root, { current, progress, onStep }) {
  const width = root.clientWidth;
  const seg = width / STEPS.length;
  const svg = s("svg", { class: "ruler", width, height: 50, "aria-hidden": "true", focusable: "false" });
  const y = 20.5;
  svg.append(s("line", { x1: 0, x2: width, y1: y, y2: y, class: "k-edge", "stroke-width": 1 }));
  STEPS.forEach((id, i) => {
    const p = progress[id];
    for (let k = 1; k < 8; k++) svg.append(s("line", { x1: i * seg + (k * seg) / 8, x2: i * seg + (k * seg) / 8, y1: k === 4 ? y - 5 : y - 3, y2: y, class: "k-edge", "stroke-width": 1 }));
    svg.append(s("line", { x1: i * seg + 0.5, x2: i * seg + 0.5, y1: y - 10, y2: y, class: "k-ink", "stroke-width": 1.6 }));
    if (p.stale) for (let x = 0; x < seg - 6; x += 9) svg.append(s("line", { x1: i * seg + x, x2: i * seg + x + 4, y1: y, y2: y, class: "k-ink", "stroke-width": 4 }));
    else if (p.share > 0) svg.append(s("line", { x1: i * seg, x2: (i + Math.min(1, p.share)) * seg, y1: y, y2: y, class: "k-ink", "stroke-width": 4 }));
    if (id === current) svg.append(s("line", { x1: i * seg + 0.5, x2: i * seg + 0.5, y1: y, y2: 50, class: "k-ink", "stroke-width": 1.6 }));
  });
  svg.append(s("line", { x1: width - 0.8, x2: width - 0.8, y1: y - 10, y2: y, class: "k-ink", "stroke-width": 1.6 }));
  const focused = root.contains(document.activeElement) ? document.activeElement.dataset.step : null;
  const list = h("ol", {}, STEPS.map((id) =>
    h("li", {}, h("button", { type: "button", "data-step": id, "aria-current": id === current ? "step" : null, onclick: () => onStep(id) }, h("span", {}, STEP_WORDS[id]), progress[id].word ? h("small", {}, progress[id].word) : null))));
  put(root, svg, list);
  if (focused) root.querySelector(`[data-step="${focused}"]`)?.focus();
}
