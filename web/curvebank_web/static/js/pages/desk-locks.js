// Locked stretches at the desk: two points on a trace lock what lies between; a lock sign unlocks it.
import { toScreen } from "../geometry/affine.js";
import { nearest } from "../geometry/polyline.js";
import { lockStretch } from "../state/stretch.js";
import { change, lineUnder } from "./desk-handles.js";
import { $ } from "../view/dom.js";

export class Locks {
  constructor(desk, invalidate) {
    Object.assign(this, { desk, invalidate });
  }

  /** Begin: the next two presses on the trace of this curve are the ends. */
  start(id) {
    const { desk } = this;
    Object.assign(desk, { selected: id, guiding: false, focused: null, locking: { curve: id, from: null } });
    desk.say("Where does the locked stretch begin? Click on the trace.");
    $("paper").focus({ preventScroll: true });
    this.invalidate("all");
  }

  all(id) {
    const item = this.desk.items.find((i) => i.id === id);
    return item?.pixels.length ? this.lock(item, 0, item.pixels.length - 1) : undefined;
  }

  /** Lock by two points on the trace: the first press notes one end, the second locks. */
  at(screen) {
    const { desk } = this;
    const item = desk.items.find((i) => i.id === desk.locking.curve);
    const hit = item?.pixels.length ? nearest(item.pixels.map((p) => toScreen(desk.view, p)), screen) : null;
    if (!hit || hit.distance > 14) return desk.say("Click on the trace of this curve.");
    if (desk.locking.from === null) {
      desk.locking = { ...desk.locking, from: hit.at };
      desk.say("And where does it end?");
      return this.invalidate("all");
    }
    return this.lock(item, desk.locking.from, hit.at);
  }

  lock(item, i0, i1) {
    const { desk } = this;
    const locked = lockStretch(item.curve, item.result, i0, i1);
    if (!locked) return desk.say("That stretch is too short to lock.");
    desk.locking = null;
    desk.act({ ...change({ curve: item.id, kept: true }, { locked }), did: "stretch locked" });
    desk.say("Locked: this stretch stays as it is.");
    return this.invalidate("all");
  }

  unlock(id, index) {
    const { desk } = this;
    const curve = (desk.doc.curves ?? []).find((c) => c.id === id);
    const locked = (curve?.locked ?? []).filter((_, i) => i !== index);
    desk.focused = null;
    desk.act({ ...change({ curve: id, kept: true }, { locked: locked.length ? locked : undefined }), did: "stretch unlocked" });
    desk.say("Unlocked.");
  }

  /** L: unlock the stretch under the pointer or in focus, lock the doubtful stretch one stands at, else begin or end a lock by two points. */
  key() {
    const { desk } = this;
    if (desk.step !== "curves" || desk.openCurve) return undefined;
    if (desk.focused?.kind === "lock") return this.unlock(desk.focused.curve, desk.focused.index);
    const screen = desk.hand ?? (desk.pointer?.surface === "paper" ? desk.pointer.screen : null);
    if (desk.locking) return screen ? this.at(screen) : undefined;
    const under = screen && lineUnder(desk, screen, 10);
    if (under?.kept && under.locked >= 0) return this.unlock(under.curve, under.locked);
    const finding = desk.findings.find((f) => f.number === desk.chosenFinding);
    const item = finding?.where?.stretch && desk.items.find((i) => i.id === finding.where.curve);
    if (item?.kept && item.pixels.length) return this.lock(item, ...finding.where.stretch);
    const id = under?.kept ? under.curve : desk.selected;
    if (!id) return desk.say("Choose a curve first, then lock a stretch of it.");
    this.start(id);
    return under?.kept && screen ? this.at(screen) : undefined;
  }
}
