// One draft at work: the document, its history, and the steps on their way to the server.
import * as api from "./api.js";
import { Outbox } from "./outbox.js";
import { storage } from "./storage.js";
import * as tree from "../state/history.js";
import { apply } from "../state/doc.js";
import { actionLabel } from "../state/words.js";

const uid = () => (crypto.randomUUID ? crypto.randomUUID() : `${Date.now().toString(16)}-${Math.random().toString(16).slice(2)}`);
const clock = (at = new Date()) => new Date(at).toTimeString().slice(0, 5);

function entriesToNodes(history, entries) {
  let next = history;
  for (const e of entries) {
    if (e.type === "put") {
      if (e.base !== undefined && next.head !== `s${e.base}` && next.nodes[`s${e.base}`]) next = tree.moveTo(next, `s${e.base}`);
      next = tree.push(next, { id: e.id, label: e.label, doc: e.doc, at: e.at });
    }
  }
  return next;
}

export class Session {
  constructor(draft, { onChange, onNews }) {
    this.id = draft.id;
    this.page = draft.page;
    this.resultStep = draft.result_step ?? null;
    this.onChange = onChange;
    this.onNews = onNews;
    const newest = (draft.steps ?? []).find((s) => s.step === draft.step);
    this.keptAt = newest?.at ? clock(newest.at) : null;
    this.conflict = null;
    this.refused = null;
    this.outbox = new Outbox({ key: `curvebank.outbox.${draft.id}`, send: (e) => this.#send(e), storage, on: (...a) => this.#hear(...a) });
    this.history = entriesToNodes(tree.fromDraft(draft), this.outbox.entries);
    if (this.outbox.size) this.outbox.flush();
  }

  static async open(id, hooks) {
    return new Session(await api.draft(id), hooks);
  }

  get doc() {
    return tree.head(this.history).doc;
  }

  /** The server's number of the newest acknowledged step. */
  get step() {
    return tree.head(this.history).step;
  }

  status() {
    const step = this.step ?? Math.max(...Object.values(this.history.nodes).map((n) => n.step ?? 0));
    return { at: this.keptAt, step, waiting: this.outbox.size, away: this.outbox.away, conflict: Boolean(this.conflict), full: this.full };
  }

  /** Do one action: at once here, and soon in the file. */
  act(action, label = null) {
    const before = this.doc;
    const doc = apply(before, action);
    if (doc === before) return;
    const parent = tree.head(this.history);
    const entry = { type: "put", id: uid(), parent: parent.id, base: parent.step ?? undefined, label: label ?? actionLabel(action, before), doc, at: new Date().toISOString() };
    this.history = tree.push(this.history, entry);
    this.onChange("doc");
    this.outbox.add(entry);
  }

  undo() {
    return this.#jump(tree.undoTarget(this.history), `Undone: ${tree.head(this.history).label}.`);
  }

  redo() {
    const target = tree.redoTarget(this.history);
    return this.#jump(target, target ? `Done again: ${target.label}.` : "");
  }

  undoLabel() {
    return tree.undoTarget(this.history) ? tree.head(this.history).label : null;
  }

  redoLabel() {
    return tree.redoTarget(this.history)?.label ?? null;
  }

  #jump(node, said) {
    if (!node) return null;
    if (node.doc) {
      this.history = tree.moveTo(this.history, node.id);
      this.onChange("doc");
    }
    this.outbox.add({ type: "head", id: uid(), node: node.id, step: node.step ?? undefined });
    return said;
  }

  async #send(entry) {
    if (entry.type === "put") {
      const base = entry.base ?? this.history.nodes[entry.parent]?.step;
      return api.keepStep(this.id, { doc: entry.doc, base_step: base, action_id: entry.id, label: entry.label });
    }
    const step = entry.step ?? this.history.nodes[entry.node]?.step;
    return api.moveHead(this.id, step);
  }

  #hear(event, entry, detail) {
    if (event === "kept") {
      this.keptAt = clock();
      if (entry.type === "put") {
        this.history = tree.acknowledge(this.history, entry.id, detail.step);
        for (const e of this.outbox.entries) {
          if (e.parent === entry.id) e.base = detail.step;
          if (e.node === entry.id) e.step = detail.step;
        }
      } else if (!this.history.nodes[entry.node]?.doc) {
        this.history = tree.moveTo(this.history, entry.node, detail.doc);
        this.onChange("doc");
      }
      if (detail?.page) this.page = detail.page;
    } else if (event === "conflict") {
      this.conflict = { entry, theirs: detail.rest };
    } else if (event === "refused") {
      this.refused = { entry, problem: detail };
    } else if (event === "full") {
      this.full = true;
    }
    this.onNews(event, entry, detail);
  }

  /** Answer a conflict: lay my newest state on top of theirs, or go on with theirs. */
  async resolve(keepMine) {
    const mine = this.doc;
    const fresh = await api.draft(this.id);
    this.conflict = null;
    this.refused = null;
    this.history = tree.fromDraft(fresh);
    this.page = fresh.page;
    this.outbox.replace([]);
    if (keepMine) {
      const parent = tree.head(this.history);
      const entry = { type: "put", id: uid(), parent: parent.id, base: parent.step, label: "my version laid on top", doc: mine, at: new Date().toISOString() };
      this.history = tree.push(this.history, entry);
      this.outbox.add(entry);
    }
    this.onChange("doc");
  }

  /** Wait until every step is in the file, or say no after `ms`. */
  async settled(ms = 8000) {
    const until = Date.now() + ms;
    while (this.outbox.size) {
      if (Date.now() > until || this.outbox.stopped) return false;
      await new Promise((r) => setTimeout(r, 40));
    }
    return true;
  }
}
