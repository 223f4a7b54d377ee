// Sentences of the desk. Say what is, then what follows, then what to do.
import { plain, withDoubt } from "../geometry/number.js";
import { QUANTITY_WORDS, factor, written } from "../geometry/units.js";

export function axisWords(axis) {
  return `${QUANTITY_WORDS[axis.quantity] ?? axis.quantity}, ${written(axis.unit)}`;
}

export function suspect(axis, s) {
  const word = QUANTITY_WORDS[axis.quantity] ?? axis.quantity;
  const unit = written(axis.unit);
  if (Number.isInteger(s.swapped_with)) return `The ${word} marks typed ${plain(s.typed)} and ${plain(axis.marks[s.swapped_with]?.value)} stand the wrong way round.`;
  if (s.sure === false) return `Perhaps the ${word} mark typed ${plain(s.typed)} is the wrong one: it sits where ${plain(s.fits, 3)} ${unit} would fit the others. Look which of the marks is right.`;
  return `The ${word} mark typed ${plain(s.typed)} sits where ${plain(s.fits, 3)} ${unit} belongs.`;
}

export function namesake(curve, label) {
  const name = [label, curve.speed_rpm ? `at ${plain(curve.speed_rpm)} 1/min` : ""].filter(Boolean).join(" ");
  return `Another ${QUANTITY_WORDS[curve.quantity] ?? curve.quantity} curve of this panel is already called ${name}. Look at the paper, then give one of them its own diameter or speed, or remove it.`;
}

const ORDINALS = ["first", "second", "third", "fourth", "fifth", "sixth", "seventh", "eighth"];

export function maskedMark(axis, mark) {
  return `A mask lies over the ${QUANTITY_WORDS[axis.quantity] ?? axis.quantity} mark ${plain(mark.value)}. The printed line there is not read, so the mark stands as you put it. Take the mask away there, or move the mark.`;
}

export function maskedClick(label, word, index) {
  return `A mask lies over the ${ORDINALS[index] ?? `${index + 1}th`} ${word} of ${label}. No ink is read there. Take the mask away there, or move the ${word}.`;
}

/** The value to offer instead of the typed one: the roundest number within 0.4 % of the axis's range of what would fit. */
export function niceFit(axis, s) {
  const values = [...axis.marks.map((m) => m.value).filter((v) => v !== s.typed), s.fits];
  const reach = 0.004 * (Math.max(...values) - Math.min(...values)) || Math.abs(s.fits) * 0.004;
  for (let e = Math.ceil(Math.log10(Math.abs(s.fits) || 1)); e > -6; e--) {
    for (const k of [1, 0.5, 0.2]) {
      const step = k * 10 ** e;
      const near = Math.round(s.fits / step) * step;
      if (Math.abs(near - s.fits) <= reach) return Number(near.toPrecision(8));
    }
  }
  return Number(s.fits.toPrecision(4));
}

/** "42.92 m" and "± 0.19": a reading in the printed unit of its axis. */
export function reading(axis, value, u) {
  const text = withDoubt(value, u);
  return { value: `${text.value} ${written(axis.unit)}`, doubt: text.u ? `± ${text.u}` : "" };
}

export function kept(status) {
  if (status.conflict) return "Another window has gone on with this draft";
  if (status.away || status.waiting > 0) {
    const n = status.waiting;
    if (!status.away && n < 2) return "Keeping …";
    return n ? `Kept in this browser, ${n} ${n === 1 ? "step" : "steps"} not yet in the file` : "Kept in this browser";
  }
  if (status.full) return "This browser has no room left to keep steps";
  return status.at ? `Kept ${status.at}, step ${status.step}` : `Step ${status.step}`;
}

/** What an action is called in undo, redo and the history. */
export function actionLabel(action, doc) {
  const at = action.at ? ` at ${Math.round(action.at[0])}, ${Math.round(action.at[1])}` : "";
  const axis = action.axis && doc.panels?.find((p) => p.id === action.panel)?.axes[action.axis];
  const axisName = axis ? QUANTITY_WORDS[axis.quantity] : action.axis;
  switch (action.type) {
    case "sheet/set": return "sheet";
    case "masks/set": return action.did ?? "masks";
    case "pump/set": return "pump's name";
    case "panel/add": return "panel drawn";
    case "panel/set": return "panel changed";
    case "panel/remove": return "panel removed";
    case "axis/set": return `${axisName ?? "axis"} axis`;
    case "axis/remove": return `${axisName ?? "axis"} axis removed`;
    case "mark/open": return `mark placed${at}`;
    case "mark/drop": return "mark let go";
    case "mark/keep": return `mark kept: ${Object.entries(action.values).map(([id, v]) => `${id} ${plain(v)}`).join(", ")}`;
    case "mark/set": return `${axisName} mark changed`;
    case "marks/move": return `mark moved${at}`;
    case "mark/remove": return `${axisName} mark removed`;
    case "marks/copy": return `${axisName} marks taken over`;
    case "curve/open": return "curve begun";
    case "curve/change": return curveChange(action.change, "click set");
    case "curve/drop": return "curve let go";
    case "curve/keep": return "curve kept";
    case "curve/set": return action.did ?? curveChange(action.change, "click moved");
    case "curves/set": return "fit chosen";
    case "curve/remove": return "curve removed";
    default: return action.type;
  }
}

const curveChange = (change, clicks) => (change.clicks ? clicks : "guides" in change ? "guide moved" : "locked" in change ? "locked stretches" : "curve's sentence");

/** The estimated chance that a trace follows its line throughout, in words and as a number: "sure, 0.98". */
export function confidence(value) {
  if (typeof value !== "number" || !Number.isFinite(value)) return "";
  const word = value >= 0.95 ? "sure" : value >= 0.85 ? "fairly sure" : value >= 0.6 ? "in doubt" : "very doubtful";
  return `${word}, ${(Math.floor(value * 100) / 100).toFixed(2)}`;
}

/** "It holds to the crossing found; moved 1.3 px, ± 0.04 px." */
export function heldWords(held) {
  if (!held) return "";
  if (typeof held === "string") return `It holds to the ${held} found.`;
  const sigma = held.sigma_px > 0 ? `, ± ${held.sigma_px < 0.095 ? held.sigma_px.toFixed(2) : held.sigma_px.toFixed(1)} px` : "";
  return `It holds to the ${held.kind} found, moved ${held.moved_px.toFixed(1)} px${sigma}.`;
}

const COUNTS = ["No click", "One click", "Two clicks", "Three clicks", "Four clicks", "Five clicks", "Six clicks"];

/** "Two clicks or more". */
export const clicksWords = (n) => `${COUNTS[n] ?? `${n} clicks`} or more`;

/** What a kind of line means, where it is not the ink that is followed. */
export const KIND_WORDS = {
  hand: "The clicks are the curve: six or more along it. Between them the ± grows, for no ink is read.",
  points: "Click each test point; it moves to the middle of its symbol, where the cross stands.",
};

/** "head and efficiency over flow". */
export function panelWords(panel) {
  const names = Object.values(panel.axes).filter((a) => a.quantity !== "flow").map((a) => QUANTITY_WORDS[a.quantity] ?? a.quantity);
  const list = names.length > 1 ? `${names.slice(0, -1).join(", ")} and ${names[names.length - 1]}` : names[0] ?? "nothing yet";
  return `${list} over flow`;
}

export function sideOf(panel, axisId, outline) {
  const marks = panel.axes[axisId]?.marks ?? [];
  if (!marks.length || !outline) return "";
  const x = marks.reduce((a, m) => a + m.at[0], 0) / marks.length;
  const xs = outline.map((p) => p[0]);
  const middle = (Math.min(...xs) + Math.max(...xs)) / 2;
  return x < middle ? "left" : "right";
}

export function canonicalSentence(axis, value) {
  return `${plain(value * factor(axis), 4)}`;
}
