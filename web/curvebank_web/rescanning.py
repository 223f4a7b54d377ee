"""Jobs that bring another scan to a draft. Their outcomes are shown first; the browser makes a step of the one that is accepted."""

import sqlite3
from contextlib import closing
from dataclasses import asdict
from pathlib import PurePath
from typing import Any

from curvebank import recipe

from . import desk_drafts, desk_file, desk_sheets, documents, sources
from .api.models import SheetChoice
from .bank_access import settings_of
from .jobs import Job
from .page_store import FIRST_DPI, PageKey, describe
from .problems import Problem
from .services import Services


def _head(db: sqlite3.Connection, draft_id: str) -> tuple[dict[str, Any], int, PageKey]:
    draft = desk_drafts.row_of(db, draft_id)
    doc = desk_drafts.doc_at(db, draft_id, draft["head"])
    key = documents.page_key(doc, draft["sheet_sha256"])
    if key is None:
        raise Problem(422, "no-sheet", "The draft has no sheet", "Lay a sheet on the desk first.", path="$.sheet")
    return doc, draft["head"], key


def _known(services: Services, db: sqlite3.Connection, choice: SheetChoice) -> tuple[PageKey, str]:
    known = desk_sheets.describe(db, choice.sha256) or sources.describe_in_bank(services.bank, choice.sha256)
    if known is None:
        raise Problem(404, "no-such-sheet", "The sheet is not here", "Neither the desk nor the bank holds this sheet. Add its file first.")
    return PageKey(choice.sha256, choice.page, float(choice.dpi), choice.turn), choice.file or known["file_name"]


def carry(services: Services, db: sqlite3.Connection, draft_id: str, choice: SheetChoice) -> Job:
    """Queue the carrying of the draft's head onto another scan. Its outcome: ``{draft, step, recipe, report, page}``."""
    doc, step, old = _head(db, draft_id)
    new, file = _known(services, db, choice)
    if new == old:
        detail = "This is the very page the draft works on. Choose the other scan, or another page or turn of it."
        raise Problem(422, "same-sheet", "Nothing to carry", detail, path="$.sheet")
    arguments = {
        "desk": str(services.desk),
        "bank": str(services.bank),
        "cache": str(services.cache),
        "doc": recipe.to_bytes({k: v for k, v in doc.items() if not k.startswith("x-")}),
        "old": tuple(old),
        "old_info": asdict(services.pages.info(old)),
        "new": tuple(new),
        "new_info": asdict(services.pages.info(new)),
        "file": file,
        "settings": settings_of(services.bank),
    }

    def keep(job: Job, value: dict[str, Any]) -> None:
        page = describe(services.pages.info(new), new.dpi)
        _done(services, job, {"draft": draft_id, "step": step, **value, "page": page})

    return services.jobs.submit("carry", f"carry:{draft_id}:{step}:{new.name}", arguments, on_done=keep)


def join(services: Services, db: sqlite3.Connection, draft_id: str, choice: SheetChoice, ties: list[Any] | None) -> Job:
    """Queue the joining of the draft's page and its second half. Its outcome: ``{draft, step, sheet, report, page}``."""
    doc, step, first = _head(db, draft_id)
    second, file = _known(services, db, choice)
    own = documents.text(documents.part(doc, "sheet").get("file")) or "sheet"
    name = f"{PurePath(own).stem[:100]} + {PurePath(file).stem[:100]}.png"
    arguments = {
        "desk": str(services.desk),
        "bank": str(services.bank),
        "first": tuple(first),
        "second": tuple(second),
        "ties": ties,
    }

    def keep(job: Job, value: dict[str, Any]) -> None:
        info = services.pages.first_page(value["png"])
        with closing(desk_file.connect(services.desk)) as own_db:
            sha = desk_sheets.add(own_db, value["png"], file_name=name, media=info.media, pages=1)
        sheet = {"file": name, "sha256": sha, "page": 1}
        _done(
            services, job, {"draft": draft_id, "step": step, "sheet": sheet, "report": value["report"], "page": describe(info, FIRST_DPI)}
        )

    return services.jobs.submit("join", f"join:{draft_id}:{step}:{second.name}:{ties}", arguments, on_done=keep)


KEPT = 6
"""Outcomes remembered: each may hold a few hundred kilobytes of traces."""


def _done(services: Services, job: Job, outcome: dict[str, Any]) -> None:
    services.outcomes[job.id] = outcome
    while len(services.outcomes) > KEPT:
        services.outcomes.pop(next(iter(services.outcomes)))
    job.result_url = f"/api/drafts/{outcome['draft']}/outcomes/{job.id}"
