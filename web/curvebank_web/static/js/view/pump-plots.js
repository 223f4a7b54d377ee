// The pump page's plots: one flow axis, head above, then efficiency, power and NPSH required.
import { linear } from "../geometry/scale.js";
import { plain } from "../geometry/number.js";
import { CONTOURS } from "../geometry/units.js";
import { curveLabel, speedNamed } from "../state/derive.js";
import { flowRange, lineWeights, SHOWN, SIGN, valueRange } from "../state/pump.js";
import { drawChart } from "./chart.js";
import { h, put, s } from "./dom.js";

const ROW = 106;
const EMPTY = 50;

/** Heights of the four plots: what is not printed takes one line, head takes what the window leaves. */
function heights(root, has) {
  const small = Object.fromEntries(SHOWN.map((q) => [q, has(q) ? (q === "npshr" ? 90 : ROW) : EMPTY]));
  const others = SHOWN.filter((q) => q !== "head").reduce((a, q) => a + small[q] + 8, 0);
  const room = innerHeight - (root.getBoundingClientRect().top + scrollY) - others - 110;
  return { ...small, head: Math.max(300, Math.min(474, room)) };
}

const NOT_PRINTED = { efficiency: "Efficiency is not on any sheet kept here.", power: "Shaft power is not on any sheet kept here. Ask the maker.", npshr: "NPSH required is not on any sheet kept here. Ask the maker." };

/** model = {detail, asked, values: {quantity: values}, duties, system, units, flow} ; onPoint(flow | null) */
export function drawPumpPlots(root, model, onPoint) {
  const figures = SHOWN.map((q) => root.querySelector(`[data-quantity="${q}"]`) ?? makeFigure(root, q));
  const width = figures[0].clientWidth;
  const [, qHi] = flowRange(model.detail.curves);
  const fu = model.units.flow[1];
  const x0 = 52;
  const x1 = width - 70;
  const scaleX = linear(0, qHi * fu, x0, x1);
  const weight = lineWeights(model.detail.curves);
  const printed = (q) => q === "head" || model.detail.curves.some((c) => c.quantity === q && c.points.length) || Boolean(model.values[q]);
  const height = heights(root, printed);
  figures.forEach((figure, k) => drawOne(figure, SHOWN[k], { ...model, scaleX, qHi, fu, x0, x1, width, weight, height: height[SHOWN[k]] }));
  model.invert = (px) => scaleX.invert(Math.min(x1, Math.max(x0, px))) / fu;
  for (const figure of figures) {
    figure.onpointermove = (e) => onPoint(model.invert(e.clientX - figure.getBoundingClientRect().left));
    figure.onpointerleave = () => onPoint(null);
  }
}

function makeFigure(root, q) {
  const figure = h("figure", { class: "sheet", "data-quantity": q });
  root.append(figure);
  return figure;
}

function drawOne(figure, q, m) {
  const { height } = m;
  const [unit, k] = m.units[q];
  const curves = m.detail.curves.filter((c) => c.quantity === q && c.points.length);
  const bySpeed = speedNamed(curves);
  const contours = q === "head" ? m.detail.curves.filter((c) => c.quantity in CONTOURS && c.points.length) : [];
  const values = m.values[q];
  const band = values ? bandOf(values, m.fu, k) : null;
  const has = curves.length || values?.value?.some((v) => v !== null);
  const sys = q === "head" && m.system ? systemLine(m, k) : null;
  const range = valueRange(q, [...curves.map((c) => c.points.map((p) => p[1] * k)), ...contours.map((c) => c.points.map((p) => p[1] * k)), band?.high ?? [], band?.low ?? []], sys ? [m.system.static_head_m * k] : []);
  const frame = [m.x0, q === "head" ? 16 : 9, m.x1, height - (q === "head" ? 40 : 9)];
  const y = { ...linear(range[0], range[1], frame[3], frame[1]), lo: range[0], hi: range[1], title: `${SIGN[q]}, ${unit}`, most: q === "head" ? 8 : Math.max(3, Math.round((frame[3] - frame[1]) / 17)), ticks: has ? undefined : [] };
  const x = { ...m.scaleX, lo: 0, hi: m.qHi * m.fu, labels: q === "head", title: q === "head" ? `flow, ${m.units.flow[0]}` : null, titleAt: "end" };
  const svg = s("svg", { class: "plot", viewBox: `0 0 ${m.width} ${height}`, width: m.width, height, role: "img", "aria-labelledby": `says-${q}` });
  const lines = curves.map((c) => ({ points: c.points.map(([a, b]) => [a * m.fu, b * k]), width: m.weight[`${q}/${c.diameter_mm}`] ?? 1.4, label: q === "head" || curves.length > 1 ? curveLabel(c, false, bySpeed(c)) : "" }));
  for (const c of contours) lines.push({ points: c.points.map(([a, b]) => [a * m.fu, b * k]), tone: "edge", width: 1, label: curveLabel({ ...c, value: c.level }), labelAt: "top", small: true, labelTone: "edge" });
  if (sys) lines.push({ points: sys, tone: "yours", form: "system", width: 1.6, label: "system" });
  const traced = curves.some((c) => c.diameter_mm === m.asked.diameter && (!c.speed_rpm || c.speed_rpm === m.asked.speed));
  if (band) lines.push({ points: values.flow_m3h.map((f, i) => [f * m.fu, values.value[i] === null ? NaN : values.value[i] * k]).filter((p) => Number.isFinite(p[1])), tone: "yours", form: "asked", width: 2.4, id: `asked-${q}` });
  const brackets = q === "head" && m.detail.bep ? [{ lo: m.detail.bep.flow_m3h * 0.7 * m.fu, hi: Math.min(m.qHi, m.detail.bep.flow_m3h * 1.2) * m.fu, y: frame[3] - 12, width: 2.6, label: "70 to 120 % of best-efficiency flow" }] : [];
  drawChart(svg, { frame, x, ys: [y], lines, bands: band ? [band] : [], brackets });
  if (band && q === "head" && m.asked.diameter) askedLabel(svg, values, m, k, y, traced);
  if (m.flow !== null && has) pointer(svg, frame, x, y, m, q, k);
  const says = h("figcaption", { class: "unseen", id: `says-${q}` }, summary(q, curves, unit, k));
  put(figure, svg, has ? null : h("p", { class: "empty" }, missingWords(q, m.detail.curves)), says);
}

/** What stands in an empty plot. A quantity drawn as contours over the head is on the paper, though not as a curve over flow. */
export function missingWords(q, curves) {
  const level = (curves ?? []).some((c) => c.quantity === `${q}_contour`);
  const name = { efficiency: "Efficiency", power: "Shaft power", npshr: "NPSH required" }[q];
  if (level) return `${name} is printed as lines of constant value, drawn over the head above.`;
  return NOT_PRINTED[q] ?? "Not on any sheet kept here.";
}

function bandOf(values, fu, k) {
  const ok = values.value.map((v, i) => v !== null && values.u_machine[i] !== null);
  const pick = (f) => values.flow_m3h.map((q, i) => [q, i]).filter(([, i]) => ok[i]).map(([q, i]) => f(q, i));
  const flow = pick((q) => q * fu);
  if (flow.length < 2) return null;
  return { flow, low: pick((_, i) => (values.value[i] - values.u_machine[i]) * k), high: pick((_, i) => (values.value[i] + values.u_machine[i]) * k) };
}

function systemLine(m, k) {
  return Array.from({ length: 61 }, (_, i) => {
    const q = (m.qHi * i) / 60;
    return [q * m.fu, (m.system.static_head_m + m.system.friction_m_per_m3h2 * q * q) * k];
  });
}

function askedLabel(svg, values, m, k, y, traced) {
  const ok = values.flow_m3h.map((q, i) => [q, values.value[i]]).filter((p) => p[1] !== null);
  const at = ok[Math.floor(ok.length * 0.12)];
  if (!at || traced) return;
  svg.append(s("text", { class: "endlabel t-yours halo", x: m.scaleX.map(at[0] * m.fu) + 12, y: y.map(at[1] * k) + 4 }, `Ø ${plain(m.asked.diameter, 1)} asked`));
}

function pointer(svg, [x0, y0, , y1], x, y, m, q, k) {
  const px = x.map(m.flow * m.fu);
  const duty = m.duty;
  const tone = duty ? "yours" : "ink";
  svg.append(s("line", { x1: px, x2: px, y1: y0, y2: y1, class: `k-${tone}`, "stroke-width": 1 }));
  const v = m.readings[q];
  if (!v) return;
  const py = y.map(v.value * k);
  if (q === "head") svg.append(s("line", { x1: x0, x2: px, y1: py, y2: py, class: `k-${tone}`, "stroke-width": 1 }));
  svg.append(s("circle", { cx: px, cy: py, r: q === "head" ? 6 : 4, fill: "var(--sheet)", class: `dot k-${tone}`, "stroke-width": q === "head" ? 2 : 1.6, style: { fill: "var(--sheet)" } }));
}

function summary(q, curves, unit, k) {
  if (!curves.length) return `${SIGN[q]}: not printed.`;
  const bySpeed = speedNamed(curves);
  return `${SIGN[q]} over flow. ${curves.map((c) => { const [a, b] = [c.points[0], c.points[c.points.length - 1]]; return `${curveLabel(c, false, bySpeed(c))}: ${plain(a[1] * k, 1)} to ${plain(b[1] * k, 1)} ${unit}`; }).join("; ")}. The same numbers stand in the table below.`;
}
