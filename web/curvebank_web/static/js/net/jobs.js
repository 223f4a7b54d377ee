// Long work on the server, watched until it ends.
import * as api from "./api.js";

const ENDED = ["done", "failed", "cancelled"];

/** Follow a job; onState(job) at each change. Resolves with the last state; waits through a server that is away. */
export async function follow(job, onState, { pause = 250 } = {}) {
  let state = job;
  onState(state);
  while (!ENDED.includes(state.state)) {
    await new Promise((r) => setTimeout(r, pause));
    try {
      state = await api.job(job.id);
    } catch (problem) {
      if (problem.away) continue;
      state = { ...state, state: "failed", problem: { title: problem.title, detail: problem.detail } };
    }
    onState(state);
  }
  return state;
}
