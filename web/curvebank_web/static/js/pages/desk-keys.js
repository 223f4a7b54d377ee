// The keys of the desk. Letters act only outside blanks and can be switched off.
import { toScreen } from "../geometry/affine.js";
import { STEPS } from "../state/derive.js";
import { keysDialog, letterMayAct } from "../panels/keys.js";
import { $ } from "../view/dom.js";
import { homeView } from "./desk-draw.js";
import { placeOf } from "./desk-handles.js";
import { zoomAt } from "../geometry/affine.js";

export const ROWS = [
  ["hold Z", "magnify in place, 9 times; the wheel changes it"], ["← → ↑ ↓", "nudge by 0.1 px, or move the straightedge; Shift for more"],
  ["hold Space", "move the paper; the wheel zooms at the pointer"], ["hold Shift", "no snap while placing or dragging; Alt does the same"],
  ["+ −", "closer, further"], ["0 9", "whole panel, whole sheet"],
  ["P", "put a corner, mark or guide where the hand is; arrows move it"], ["Enter", "keep: mark, curve"], ["Esc", "one level back; then stop the check"],
  ["U R", "undo, redo, through the whole history"], ["N", "next finding; with Shift the last"],
  ["1 … 7", "go to a step"], ["Del", "take away the mark, click, guide, lock or mask in focus"],
  ["X", "mask brush in the hand, or laid down"], ["[ ]", "narrower and wider brush; E turns it into the eraser"],
  ["L", "lock a stretch of a trace, or unlock it"], ["F", "printed lines found, on and off"],
  ["hold B", "bare paper, nothing drawn over it"], ["G", "carried curves on and off"],
  ["I", "say the reading aloud"], ["/", "first blank of the sentence"],
  ["Tab", "on the paper: walk marks and guides"], ["?", "this map"],
];

export function deskKeys(desk, draw, tools, invalidate, more) {
  keysDialog(ROWS, more);
  const paper = $("paper");
  const surfaces = [paper, $("replot")];
  const zoom = (f) => {
    const at = desk.pointer?.surface === "paper" ? desk.pointer.screen : [paper.clientWidth / 2, paper.clientHeight / 2];
    desk.view = zoomAt(desk.view, f, at);
    desk.moved = true;
    invalidate("view");
  };
  const focusPoint = () => {
    const mark = desk.chosenMark && desk.doc.panels.find((p) => p.id === desk.chosenMark.panel)?.axes[desk.chosenMark.axis]?.marks[desk.chosenMark.index]?.at;
    const guide = placeOf(desk, desk.focused);
    const sheet = mark || guide || null;
    return sheet ? toScreen(desk.view, sheet) : desk.pointer?.surface === "paper" ? desk.pointer.screen : [paper.clientWidth / 2, paper.clientHeight / 2];
  };

  window.addEventListener("keydown", (e) => {
    if ((e.ctrlKey || e.metaKey) && !e.altKey && e.key.toLowerCase() === "z" && !e.target.closest?.("input")) {
      e.preventDefault();
      return desk.undoOrRedo(e.shiftKey ? "redo" : "undo");
    }
    if (e.key === "Escape" && !$("keys").open) return back(e);
    const onSurface = surfaces.includes(document.activeElement);
    if (onSurface && e.key === "Tab" && document.activeElement === paper && ["marks", "curves"].includes(desk.step)) {
      if (tools.walk(e.shiftKey)) e.preventDefault();
      return undefined;
    }
    if (!letterMayAct(e)) return undefined;
    const editing = e.target.closest?.("button, a") && ["Enter", " "].includes(e.key);
    if (editing) return undefined;
    const key = e.key.length === 1 ? e.key.toLowerCase() : e.key;
    if (key === " ") {
      tools.space = true;
      paper.classList.add("panning");
      if (onSurface || document.activeElement === document.body) e.preventDefault();
      return undefined;
    }
    if (key.startsWith("Arrow") && onSurface) {
      e.preventDefault();
      return tools.arrow(e);
    }
    if (e.repeat && !["[", "]"].includes(key)) return undefined;
    const acts = {
      z: () => !desk.loupe && tools.openLoupe(focusPoint()),
      b: () => { desk.bare = true; invalidate("paper"); },
      "+": () => zoom(1.4), "=": () => zoom(1.4), "-": () => zoom(1 / 1.4), "−": () => zoom(1 / 1.4),
      0: () => { desk.moved = false; desk.view = homeView(desk); invalidate("view"); },
      9: () => { desk.moved = true; desk.view = homeView(desk, true); invalidate("view"); },
      u: () => desk.undoOrRedo("undo"), r: () => desk.undoOrRedo("redo"),
      p: () => tools.putDown(e),
      x: () => desk.masks.hold(!desk.masks.on),
      "[": () => desk.masks.on && desk.masks.resize(false), "]": () => desk.masks.on && desk.masks.resize(true),
      e: () => { if (desk.masks.on) { desk.masks.erasing = !desk.masks.erasing; invalidate("all"); } },
      l: () => desk.locks.key(),
      f: () => desk.toggleFound(),
      n: () => desk.nextFinding(e.shiftKey ? -1 : 1),
      g: () => desk.set({ over: desk.over === "none" ? "both" : "none" }),
      i: () => desk.say(draw.read ? `At ${$("fold").querySelector(".fold-head b")?.textContent.replace("at ", "")}: ${draw.read.rows.map((r) => `${r.name} ${r.value} ${r.doubt}`).join("; ")}` : "No reading here."),
      "/": () => { e.preventDefault(); $("slip").querySelector("input, select")?.focus(); },
      Delete: () => tools.removeFocused(), Backspace: () => tools.removeFocused(),
      Enter: () => desk.enter(),
      ...Object.fromEntries(STEPS.map((s, i) => [String(i + 1), () => desk.go(s)])),
    };
    acts[key]?.();
    return undefined;
  });

  window.addEventListener("keyup", (e) => {
    const key = e.key.toLowerCase();
    if (key === "z") tools.closeLoupe();
    if (key === "b" && desk.bare) { desk.bare = false; invalidate("paper"); }
    if (key === " ") { tools.space = false; paper.classList.remove("panning"); }
  });
  window.addEventListener("blur", () => {
    tools.space = false;
    paper.classList.remove("panning");
    tools.closeLoupe();
    if (desk.bare) { desk.bare = false; invalidate("paper"); }
  });

  function back(e) {
    if (desk.loupe) return tools.closeLoupe();
    if (desk.masks.on && !$("slip").contains(document.activeElement)) return desk.masks.lift() || desk.masks.hold(false);
    if ($("slip").contains(document.activeElement)) return paper.focus();
    if (desk.drawingPanel) return desk.choosePanel(desk.panel?.id);
    if (desk.openMark && desk.step === "marks") return desk.act({ type: "mark/drop" });
    if (desk.chosenMark) return desk.chooseMark(null);
    if (desk.locking) { desk.locking = null; return invalidate("all"); }
    if (desk.focused) { desk.focused = null; return invalidate("all"); }
    if (desk.selected) return desk.select(null);
    if (desk.chosenFinding) return desk.chooseFinding(null);
    if (desk.job && !desk.job.over) { e.preventDefault(); return desk.stopRun(); }
    return undefined;
  }
}
