"""Saving a step of a draft as a revision: exactly the result the person saw, once, however often the browser asks."""

import sqlite3
from typing import Any

from . import desk_drafts, desk_results, record_pack
from .bank_access import writing
from .problems import Problem
from .services import Services


def save(
    services: Services,
    db: sqlite3.Connection,
    draft_id: str,
    *,
    key: str | None,
    who: str,
    why: str,
    save_key: str,
    release: bool,
    step: int | None = None,
) -> dict[str, Any]:
    """Store the result of a step (default: the head), and release it if asked. The same ``save_key`` stores once."""
    draft = desk_drafts.row_of(db, draft_id)
    wanted = draft["head"] if step is None else step
    done = desk_results.saved_as(db, save_key)
    if done is not None and done["draft_id"] != draft_id:
        raise Problem(
            409, "save-key", "This save was made before, from another draft", "Nothing was saved. Load the page again, then save."
        )
    if done is not None:
        wanted = done["step"]
    desk_drafts.doc_at(db, draft_id, wanted)  # a step that is not there is named as such
    row = desk_results.get(db, draft_id, wanted)
    if row is None:
        raise Problem(
            409, "not-run", "Not run yet", "Nothing was saved: this step was not run yet. Run the sheet, look at its findings, then save."
        )
    made = record_pack.unpack(row["digitised"])
    if made.error is not None or made.pump is None:
        error = made.error or {"code": "recipe", "message": "The recipe names no pump.", "path": "$.pump"}
        raise Problem(422, error["code"], "Nothing to save: the run failed", error["message"], path=error.get("path"))
    sheet_bytes = services.sheet_bytes(made.page.sha256) if made.page is not None else None
    with writing(services.bank) as store:
        saved_key, revision = store.save(
            made, row["recipe"], sheet_bytes, key=key or made.pump.key, who=who, why=why, save_key=save_key, release=release
        )
    desk_results.put_saved(db, draft_id, wanted, save_key=save_key, key=saved_key, revision=revision)
    return {"key": saved_key, "revision": revision, "url": f"/pumps/{saved_key}", "step": wanted, "released": release}
