// Steps not yet acknowledged by the server: sent one after the other, kept in the browser's storage, sent again until they are
// answered. A step keeps its action id, so a step that arrived twice counts once.

export class Outbox {
  /**
   * send(entry) -> Promise of the answer; it throws {away: true} when the server is not there and {status: 409} on a conflict.
   * storage has getItem/setItem/removeItem. on(event, entry, detail): "kept", "away", "back", "conflict", "refused".
   */
  constructor({ key, send, storage, on, wait = (ms) => new Promise((r) => setTimeout(r, ms)) }) {
    Object.assign(this, { key, send, storage, on, wait });
    this.entries = this.#load();
    this.away = false;
    this.stopped = false;
    this.busy = false;
    this.pause = 400;
  }

  #load() {
    try {
      return JSON.parse(this.storage.getItem(this.key) ?? "[]");
    } catch {
      return [];
    }
  }

  #store() {
    try {
      if (this.entries.length) this.storage.setItem(this.key, JSON.stringify(this.entries));
      else this.storage.removeItem(this.key);
      return true;
    } catch {
      this.on("full");
      return false;
    }
  }

  get size() {
    return this.entries.length;
  }

  add(entry) {
    this.entries.push(entry);
    this.#store();
    this.flush();
  }

  /** Replace all waiting entries (after a conflict has been answered). */
  replace(entries) {
    this.entries = entries;
    this.stopped = false;
    this.#store();
    this.flush();
  }

  /** Try at once instead of after the pause. */
  nudge() {
    this.pause = 0;
    this.wake?.();
    this.flush();
  }

  async flush() {
    if (this.busy || this.stopped) return;
    this.busy = true;
    while (this.entries.length && !this.stopped) {
      const entry = this.entries[0];
      try {
        const answer = await this.send(entry);
        this.entries.shift();
        this.#store();
        this.pause = 400;
        if (this.away) {
          this.away = false;
          this.on("back", entry);
        }
        this.on("kept", entry, answer);
      } catch (problem) {
        if (problem.away) {
          if (!this.away) {
            this.away = true;
            this.on("away", entry, problem);
          }
          await Promise.race([this.wait(this.pause), new Promise((r) => (this.wake = r))]);
          this.pause = Math.min(4000, this.pause * 1.6 + 100);
          continue;
        }
        this.stopped = true;
        this.on(problem.status === 409 ? "conflict" : "refused", entry, problem);
      }
    }
    this.busy = false;
  }
}
