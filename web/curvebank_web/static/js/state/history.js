// The undo tree as the browser knows it. A node is a kept state of the document: {id, parent, label, step, doc}. `step` is the
// server's number, null until it has answered; `doc` is null for old nodes that only the server still has. Pure: each call gives a new history.

export function fromDraft(draft) {
  const nodes = {};
  for (const s of draft.steps ?? []) nodes[`s${s.step}`] = { id: `s${s.step}`, parent: s.parent === null || s.parent === undefined ? null : `s${s.parent}`, label: s.label, at: s.at, step: s.step, doc: null };
  const head = `s${draft.step}`;
  nodes[head] = { ...(nodes[head] ?? { id: head, parent: null, label: "", step: draft.step }), doc: draft.doc };
  return { nodes, head, order: Object.keys(nodes), redo: [] };
}

export function head(history) {
  return history.nodes[history.head];
}

export function push(history, { id, label, doc, at }) {
  const node = { id, parent: history.head, label, at, step: null, doc };
  return { nodes: { ...history.nodes, [id]: node }, head: id, order: [...history.order, id], redo: [] };
}

/** The server has kept node `id` as its step. */
export function acknowledge(history, id, step) {
  const node = history.nodes[id];
  if (!node) return history;
  return { ...history, nodes: { ...history.nodes, [id]: { ...node, step } } };
}

export function undoTarget(history) {
  const node = head(history);
  return node?.parent ? history.nodes[node.parent] ?? null : null;
}

/** Where redo leads: back along the way undone, else to the youngest child of the head. */
export function redoTarget(history) {
  const known = history.redo[history.redo.length - 1];
  if (known && history.nodes[known]?.parent === history.head) return history.nodes[known];
  const children = history.order.filter((id) => history.nodes[id].parent === history.head);
  return children.length ? history.nodes[children[children.length - 1]] : null;
}

export function moveTo(history, id, doc = null) {
  const node = history.nodes[id];
  const back = head(history)?.parent === id;
  const redo = back ? [...history.redo, history.head] : history.redo.filter((r) => r !== id);
  const nodes = doc ? { ...history.nodes, [id]: { ...node, doc } } : history.nodes;
  return { ...history, nodes, head: id, redo };
}

/** Only what is needed to go on after the tab was closed: the nodes that the server has not kept, with their documents. */
export function unkept(history) {
  return Object.values(history.nodes).filter((n) => n.step === null);
}
