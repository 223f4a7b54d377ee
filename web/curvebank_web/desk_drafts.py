"""Drafts: a tree of steps, each the whole recipe document, and a head that undo and redo move.

A step is never changed or removed while its draft lives. ``tip`` is the step that redo leads to: the last one written or
jumped to, so that redo after undo goes back the way it came even where the tree has branches.
"""

import json
import secrets
import sqlite3
from typing import Any

from .desk_file import now, transaction
from .documents import sheet_of, title_of
from .problems import Problem


class Conflict(Problem):
    """The base of a write is not the head: someone else, or another window, was faster."""

    def __init__(self, step: int, doc: dict[str, Any]) -> None:
        detail = "Another window has gone on with this draft. Your step is kept in this browser. Look at both, then keep one."
        super().__init__(409, "conflict", "The draft has moved on", detail, step=step, doc=doc)


def _missing(draft_id: str) -> Problem:
    return Problem(404, "no-such-draft", "There is no such draft", f"No draft {draft_id} is on this desk. The start page lists them.")


def create(
    db: sqlite3.Connection,
    doc: dict[str, Any],
    *,
    label: str,
    sheet_sha256: str | None,
    create_id: str | None = None,
    origin: tuple[str, int] | None = None,
) -> str:
    """Start a draft from a document; the same ``create_id`` again returns the draft it made. ``origin`` is (key, revision)."""
    draft_id, at = secrets.token_hex(6), now()
    key, revision = origin or (None, None)
    with transaction(db):
        if create_id is not None:
            row = db.execute("SELECT id FROM draft WHERE create_id = ?", (create_id,)).fetchone()
            if row:
                return row["id"]
        db.execute(
            "INSERT INTO draft (id, title, sheet_sha256, head, tip, created_at, updated_at, create_id, from_key, from_revision)"
            " VALUES (?, ?, ?, 1, 1, ?, ?, ?, ?, ?)",
            (draft_id, title_of(doc), sheet_sha256, at, at, create_id, key, revision),
        )
        db.execute(
            "INSERT INTO step (draft_id, step, parent, label, action_id, doc, at) VALUES (?, 1, NULL, ?, ?, ?, ?)",
            (draft_id, label, f"create-{draft_id}", json.dumps(doc, allow_nan=False), at),
        )
    return draft_id


def listing(db: sqlite3.Connection) -> list[dict[str, Any]]:
    """All drafts, the last touched first."""
    rows = db.execute("SELECT id, title, head AS step, updated_at, sheet_sha256 FROM draft ORDER BY updated_at DESC, id")
    return [dict(row) for row in rows]


def row_of(db: sqlite3.Connection, draft_id: str) -> sqlite3.Row:
    """The draft's row, or a 404 problem."""
    row = db.execute("SELECT * FROM draft WHERE id = ?", (draft_id,)).fetchone()
    if row is None:
        raise _missing(draft_id)
    return row


def doc_at(db: sqlite3.Connection, draft_id: str, step: int) -> dict[str, Any]:
    """The document as it stood at a step, or a 404 problem."""
    row = db.execute("SELECT doc FROM step WHERE draft_id = ? AND step = ?", (draft_id, step)).fetchone()
    if row is None:
        row_of(db, draft_id)
        raise Problem(404, "no-such-step", "There is no such step", f"The draft {draft_id} has no step {step}.")
    return json.loads(row["doc"])


def read(db: sqlite3.Connection, draft_id: str) -> dict[str, Any]:
    """One draft as the API shows it, without its page: head, document, steps, and where undo and redo lead."""
    db.execute("BEGIN")  # one snapshot for the rows below
    try:
        draft = row_of(db, draft_id)
        steps = [dict(r) for r in db.execute("SELECT step, parent, label, at FROM step WHERE draft_id = ? ORDER BY step", (draft_id,))]
        doc = doc_at(db, draft_id, draft["head"])
    finally:
        db.execute("COMMIT")
    by_number = {s["step"]: s for s in steps}
    head = by_number[draft["head"]]
    undo = {"step": head["parent"], "label": head["label"]} if head["parent"] is not None else None
    ahead = _redo(by_number, draft["head"], draft["tip"])
    redo = {"step": ahead, "label": by_number[ahead]["label"]} if ahead is not None else None
    origin = {"key": draft["from_key"], "revision": draft["from_revision"]} if draft["from_key"] else None
    return {
        "id": draft_id,
        "title": draft["title"],
        "step": draft["head"],
        "doc": doc,
        "steps": steps,
        "undo": undo,
        "redo": redo,
        "updated_at": draft["updated_at"],
        "sheet_sha256": draft["sheet_sha256"],
        "from_pump": origin,
    }


def _redo(steps: dict[int, dict[str, Any]], head: int, tip: int) -> int | None:
    """The child of ``head`` on the way to ``tip``; where tip is elsewhere, the newest child; None at a leaf."""
    at: int | None = tip
    while at is not None and at > head:  # a parent's number is always below its child's
        if steps[at]["parent"] == head:
            return at
        at = steps[at]["parent"]
    return max((n for n, s in steps.items() if s["parent"] == head), default=None)


def put(db: sqlite3.Connection, draft_id: str, *, doc: dict[str, Any], base_step: int, action_id: str, label: str) -> int:
    """Append a step on top of ``base_step`` and move the head there.

    The same ``action_id`` again returns the step it made the first time. Raises ``Conflict`` where base is not the head.
    """
    with transaction(db):
        draft = row_of(db, draft_id)
        done = db.execute("SELECT step FROM step WHERE draft_id = ? AND action_id = ?", (draft_id, action_id)).fetchone()
        if done:
            return done["step"]
        if base_step != draft["head"]:
            raise Conflict(draft["head"], doc_at(db, draft_id, draft["head"]))
        step = db.execute("SELECT max(step) + 1 FROM step WHERE draft_id = ?", (draft_id,)).fetchone()[0]
        db.execute(
            "INSERT INTO step (draft_id, step, parent, label, action_id, doc, at) VALUES (?, ?, ?, ?, ?, ?, ?)",
            (draft_id, step, base_step, label, action_id, json.dumps(doc, allow_nan=False), now()),
        )
        _point(db, draft_id, step, step, doc)
    return step


def move_head(db: sqlite3.Connection, draft_id: str, step: int) -> None:
    """Undo, redo or jump: point the head at an existing step."""
    with transaction(db):
        draft = row_of(db, draft_id)
        doc = doc_at(db, draft_id, step)
        parents = dict(db.execute("SELECT step, parent FROM step WHERE draft_id = ?", (draft_id,)).fetchall())
        at: int | None = draft["tip"]
        while at is not None and at != step:
            at = parents[at]
        _point(db, draft_id, step, draft["tip"] if at == step else step, doc)


def _point(db: sqlite3.Connection, draft_id: str, head: int, tip: int, doc: dict[str, Any]) -> None:
    db.execute(
        "UPDATE draft SET head = ?, tip = ?, title = ?, sheet_sha256 = coalesce(?, sheet_sha256), updated_at = ? WHERE id = ?",
        (head, tip, title_of(doc), sheet_of(doc), now(), draft_id),
    )


def remove(db: sqlite3.Connection, draft_id: str) -> None:
    """Throw a draft away with its steps and results, and its sheet where no other draft uses it."""
    with transaction(db):
        row_of(db, draft_id)
        used = "SELECT 1 FROM step WHERE instr(step.doc, sheet.sha256)"
        mine = [r[0] for r in db.execute(f"SELECT sha256 FROM sheet WHERE EXISTS ({used} AND draft_id = ?)", (draft_id,))]
        db.execute("DELETE FROM draft WHERE id = ?", (draft_id,))
        db.executemany(f"DELETE FROM sheet WHERE sha256 = ? AND NOT EXISTS ({used})", [(sha,) for sha in mine])
