"""What a new draft begins with."""

from typing import Any

from . import catalogue, desk_sheets, sources
from .api.models import NewDraft
from .bank_access import reading
from .problems import Problem
from .services import desk_db, services

Origin = tuple[str, int] | None


def starting_point(body: NewDraft) -> tuple[dict[str, Any], str, Origin]:
    """Document, label of the first step, and the (key, revision) it came from, if any."""
    if body.sheet is not None:
        return _from_sheet(body), "Laid the sheet on the desk", None
    if body.from_pump is not None:
        return _from_pump(body)
    return _from_doc(body), "Opened a recipe", None


def _known_sheet(sha256: str) -> dict[str, Any]:
    known = desk_sheets.describe(desk_db(), sha256) or sources.describe_in_bank(services().bank, sha256)
    if known is None:
        raise Problem(404, "no-such-sheet", "The sheet is not here", "Neither the desk nor the bank holds this sheet. Add its file first.")
    return known


def _from_sheet(body: NewDraft) -> dict[str, Any]:
    assert body.sheet is not None
    known = _known_sheet(body.sheet.sha256)
    sheet = {
        "file": body.sheet.file or known["file_name"],
        "page": body.sheet.page,
        "dpi": body.sheet.dpi,
        "turn": body.sheet.turn,
        "sha256": body.sheet.sha256,
    }
    return {"recipe": 1, "sheet": sheet, "pump": {"maker": "", "model": "", "stages": 1}, "panels": [], "curves": []}


def _from_pump(body: NewDraft) -> tuple[dict[str, Any], str, Origin]:
    from . import revisions

    assert body.from_pump is not None
    with reading(services().bank) as bank:
        key = bank.resolve(body.from_pump)[1]
        number = body.revision or catalogue.history(bank, key)["revisions"][-1]["number"]
        return revisions.recipe_of(bank, key, number, body.sheet_sha256), f"Took revision {number} of {key} back to the desk", (key, number)


def _from_doc(body: NewDraft) -> dict[str, Any]:
    doc = dict(body.doc or {})
    if body.sheet_sha256 is not None:
        known = _known_sheet(body.sheet_sha256)
        stated = doc.get("sheet") if isinstance(doc.get("sheet"), dict) else {}
        doc["sheet"] = {"file": known["file_name"], "page": 1, **(stated or {}), "sha256": body.sheet_sha256}
    return doc
