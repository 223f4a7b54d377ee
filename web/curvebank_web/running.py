"""A full run of a draft: as a job, its result kept with the step it was run at."""

import json
import sqlite3
from contextlib import closing
from dataclasses import asdict
from typing import Any

from curvebank import recipe
from curvebank.errors import SheetError

from . import desk_drafts, desk_file, desk_results, documents
from .bank_access import settings_of
from .jobs import Job
from .problems import Problem
from .services import Services


def start(services: Services, db: sqlite3.Connection, draft_id: str) -> Job:
    """Queue a run of the draft's head. A run of that step that is under way is returned as it is."""
    draft = desk_drafts.row_of(db, draft_id)
    step = draft["head"]
    doc = desk_drafts.doc_at(db, draft_id, step)
    recipe_bytes = recipe.to_bytes(doc)
    key = documents.page_key(doc, draft["sheet_sha256"])
    try:
        page_info = asdict(services.pages.info(key)) if key else None
    except (SheetError, Problem):
        page_info = None  # the result will say what is wrong with the sheet
    arguments = {
        "desk": str(services.desk),
        "bank": str(services.bank),
        "cache": str(services.cache),
        "doc": recipe_bytes,
        "page": tuple(key) if key else None,
        "page_info": page_info,
        "settings": settings_of(services.bank),
    }

    def keep(job: Job, value: dict[str, Any]) -> None:
        with closing(desk_file.connect(services.desk)) as own:
            desk_results.put(own, draft_id, step, recipe=recipe_bytes, **value)
        job.result_url = f"/api/drafts/{draft_id}/result?step={step}"

    return services.jobs.submit("run", f"run:{draft_id}:{step}", arguments, on_done=keep)


def result_text(db: sqlite3.Connection, draft_id: str, step: int | None) -> str:
    """The result document of a step (default: the head) as JSON text, or a 404 that names the nearest earlier result."""
    draft = desk_drafts.row_of(db, draft_id)
    wanted = draft["head"] if step is None else step
    desk_drafts.doc_at(db, draft_id, wanted)
    row = desk_results.get(db, draft_id, wanted)
    if row is None:
        nearest = desk_results.nearest(db, draft_id, wanted)
        detail = "This step was not run yet. Run the sheet to see its curves and findings."
        raise Problem(404, "not-run", "Not run yet", detail, step=wanted, nearest=nearest)
    saved = [s for s in desk_results.saved(db, draft_id) if s["step"] == wanted]
    head = json.dumps({"step": wanted, "at": row["at"], "saved": saved})
    return f'{head[:-1]}, "result": {row["result"]}, "family": {row["family"]}}}'
