"""Results of runs, kept with the step they were run at, and what was saved from them."""

import sqlite3
from typing import Any

from .desk_file import now, transaction


def put(db: sqlite3.Connection, draft_id: str, step: int, *, recipe: bytes, result: str, family: str, digitised: bytes) -> None:
    """Keep the result of a run; running the same step again replaces it. A draft thrown away meanwhile keeps nothing."""
    with transaction(db):
        if not db.execute("SELECT 1 FROM step WHERE draft_id = ? AND step = ?", (draft_id, step)).fetchone():
            return
        db.execute(
            "INSERT OR REPLACE INTO result (draft_id, step, recipe, result, family, digitised, at) VALUES (?, ?, ?, ?, ?, ?, ?)",
            (draft_id, step, recipe, result, family, digitised, now()),
        )


def get(db: sqlite3.Connection, draft_id: str, step: int) -> sqlite3.Row | None:
    """The result at a step: recipe, result, family, digitised, at. None where that step was not run."""
    return db.execute("SELECT * FROM result WHERE draft_id = ? AND step = ?", (draft_id, step)).fetchone()


def nearest(db: sqlite3.Connection, draft_id: str, step: int) -> int | None:
    """The last step with a result on the way from the first step to this one."""
    row = db.execute(
        "WITH RECURSIVE way (step, parent) AS (SELECT step, parent FROM step WHERE draft_id = :d AND step = :s"
        " UNION ALL SELECT step.step, step.parent FROM step JOIN way ON step.step = way.parent WHERE step.draft_id = :d)"
        " SELECT max(way.step) FROM way JOIN result ON result.step = way.step AND result.draft_id = :d",
        {"d": draft_id, "s": step},
    ).fetchone()
    return row[0]


def put_saved(db: sqlite3.Connection, draft_id: str, step: int, *, save_key: str, key: str, revision: int) -> None:
    """Note that a step was saved as a revision."""
    with transaction(db):
        db.execute(
            "INSERT INTO saved (save_key, draft_id, step, key, revision, at) VALUES (?, ?, ?, ?, ?, ?) ON CONFLICT DO NOTHING",
            (save_key, draft_id, step, key, revision, now()),
        )


def saved(db: sqlite3.Connection, draft_id: str) -> list[dict[str, Any]]:
    """What was saved from a draft, oldest first."""
    rows = db.execute("SELECT step, key, revision, at FROM saved WHERE draft_id = ? ORDER BY at, revision", (draft_id,))
    return [dict(r) for r in rows]


def saved_as(db: sqlite3.Connection, save_key: str) -> dict[str, Any] | None:
    """What this save key made the first time, or None."""
    row = db.execute("SELECT draft_id, step, key, revision FROM saved WHERE save_key = ?", (save_key,)).fetchone()
    return dict(row) if row else None
