// The only caller of the server. Every answer is JSON; every error becomes a Problem with words that can be shown.

export class Problem extends Error {
  constructor({ title, detail, status = 0, code = "", ...rest }) {
    super(detail || title);
    this.title = title;
    this.detail = detail ?? "";
    this.status = status;
    this.code = code;
    this.rest = rest;
  }

  /** True when the program did not answer at all: the request may be sent again. */
  get away() {
    return this.status === 0 || this.status === 502 || this.status === 503;
  }
}

async function call(method, path, { json, body, signal, keepalive } = {}) {
  let response;
  try {
    response = await fetch(path, {
      method,
      signal,
      keepalive,
      headers: json === undefined ? { Accept: "application/json" } : { "Content-Type": "application/json", Accept: "application/json" },
      body: json === undefined ? body : JSON.stringify(json),
      cache: "no-store",
    });
  } catch (error) {
    if (error.name === "AbortError") throw error;
    throw new Problem({ title: "The program on this computer has stopped answering", detail: "Start it again with curvebank serve; this page notices by itself.", code: "away" });
  }
  if (response.status === 204) return null;
  let answer = null;
  try {
    answer = await response.json();
  } catch {
    if (response.ok) return null;
  }
  if (response.ok) return answer;
  throw new Problem({ title: "This could not be done", detail: `The program answered ${response.status}.`, ...(answer ?? {}), status: response.status });
}

const enc = encodeURIComponent;
const query = (values) => {
  const pairs = Object.entries(values).filter(([, v]) => v !== null && v !== undefined && v !== "");
  return pairs.length ? `?${pairs.map(([k, v]) => `${enc(k)}=${enc(v)}`).join("&")}` : "";
};

export function uploadSheet(file, onShare) {
  return new Promise((resolve, reject) => {
    const form = new FormData();
    form.append("file", file, file.name);
    const request = new XMLHttpRequest();
    request.open("POST", "/api/sheets");
    request.responseType = "json";
    request.upload.onprogress = (e) => e.lengthComputable && onShare?.(e.loaded / e.total);
    request.onerror = () => reject(new Problem({ title: "The program on this computer has stopped answering", detail: "Nothing was laid on the desk. Start it again with curvebank serve, then drop the file again.", code: "away" }));
    request.onload = () => {
      if (request.status < 300) resolve(request.response);
      else reject(new Problem({ title: "This file cannot be laid on the desk", detail: `The program answered ${request.status}.`, ...(request.response ?? {}), status: request.status }));
    };
    request.send(form);
  });
}

export const sheetPage = (sha, page, { dpi, turn }) => call("GET", `/api/sheets/${sha}/${page}${query({ dpi, turn })}`);
export const tileUrl = (page, z, x, y) => `/api/sheets/${page.sha256}/${page.page}/tiles/${z}/${x}/${y}.png${query({ dpi: page.dpi, turn: page.turn })}`;

export const drafts = () => call("GET", "/api/drafts");
export const newDraft = (json) => call("POST", "/api/drafts", { json });
export const draft = (id) => call("GET", `/api/drafts/${enc(id)}`);
export const keepStep = (id, json) => call("PUT", `/api/drafts/${enc(id)}`, { json });
export const dropDraft = (id) => call("DELETE", `/api/drafts/${enc(id)}`);
export const moveHead = (id, step) => call("POST", `/api/drafts/${enc(id)}/head`, { json: { step } });
export const preview = (id, json, signal) => call("POST", `/api/drafts/${enc(id)}/preview`, { json, signal });
export const lines = (id) => call("GET", `/api/drafts/${enc(id)}/lines`);
export const snap = (id, [x, y], radius, signal) => call("GET", `/api/drafts/${enc(id)}/snap${query({ x, y, radius })}`, { signal });
export const carry = (id, json) => call("POST", `/api/drafts/${enc(id)}/carry`, { json });
export const join = (id, json) => call("POST", `/api/drafts/${enc(id)}/join`, { json });
export const outcome = (url) => call("GET", url);
export const run = (id) => call("POST", `/api/drafts/${enc(id)}/run`, { json: {} });
export const result = (id, step) => call("GET", `/api/drafts/${enc(id)}/result${query({ step })}`);
export const save = (id, json) => call("POST", `/api/drafts/${enc(id)}/save`, { json });
export const job = (id) => call("GET", `/api/jobs/${enc(id)}`);
export const stopJob = (id) => call("DELETE", `/api/jobs/${enc(id)}`);
export const pumps = (q = {}) => call("GET", `/api/pumps${query(q)}`);
export const pump = (key) => call("GET", `/api/pumps/${enc(key)}`);
export const revision = (key, n) => call("GET", `/api/pumps/${enc(key)}/revisions/${n}`);
export const values = (key, n, q, signal) => call("GET", `/api/pumps/${enc(key)}/revisions/${n}/values${query(q)}`, { signal });
export const duty = (key, n, q, signal) => call("GET", `/api/pumps/${enc(key)}/revisions/${n}/duty${query(q)}`, { signal });
export const revisionEvent = (key, n, json) => call("POST", `/api/pumps/${enc(key)}/revisions/${n}/events`, { json });
export const health = () => call("GET", "/healthz");
