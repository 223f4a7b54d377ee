// The printed lines found on the page at hand: asked once the marks are worked on, again while the sheet is being levelled.
import * as api from "./api.js";

export class FoundLines {
  constructor(draftId, onNews) {
    Object.assign(this, { id: draftId, onNews, found: null, of: null, busy: false });
  }

  want(page) {
    if (!page || this.busy) return;
    const of = [page.sha256, page.page, page.dpi, page.turn].join("|");
    if (this.of === of) return;
    if (this.asked !== of) this.found = null;
    this.asked = of;
    this.#ask(of);
  }

  async #ask(of) {
    this.busy = true;
    try {
      let answer = await api.lines(this.id);
      while (answer.pending) {
        await new Promise((r) => setTimeout(r, 500));
        answer = await api.lines(this.id);
      }
      this.found = answer;
      this.of = of;
    } catch (error) {
      // Marks can be put down without; asked again at the next change unless the page itself cannot be read.
      if (!error.away) this.of = of;
    }
    this.busy = false;
    this.onNews();
  }
}
