"""What a new draft begins with."""

import json
from typing import Any

from curvebank.bank import catalogue, revision_view
from curvebank.errors import NotFound

from . import desk_sheets, sources
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
    assert body.from_pump is not None
    with reading(services().bank) as bank:
        key = bank.resolve(body.from_pump)[1]
        number = body.revision or catalogue.pump_detail(bank, key)["revisions"][-1]["number"]
        made_from = revision_view.recipes(bank, key, number)
    doc = _recipe_of(made_from, body.sheet_sha256)
    if doc is None:
        raise NotFound(f"Revision {number} of {key} was not made from that sheet.", code="not-found")
    return doc, f"Took revision {number} of {key} back to the desk", (key, number)


def _recipe_of(made_from: list[dict[str, Any]], sheet_sha256: str | None) -> dict[str, Any] | None:
    """The recipe document of the sheet named, else of the first; it names its sheet by SHA-256. None where no recipe is of that sheet."""
    for source in made_from:
        if sheet_sha256 is None or source["sheet_sha256"] == sheet_sha256:
            doc: dict[str, Any] = json.loads(source["recipe"])
            if source["sheet_sha256"]:
                doc["sheet"] = {**doc.get("sheet", {}), "sha256": source["sheet_sha256"]}
            return doc
    return None


def _from_doc(body: NewDraft) -> dict[str, Any]:
    doc = dict(body.doc or {})
    if body.sheet_sha256 is not None:
        known = _known_sheet(body.sheet_sha256)
        stated = doc.get("sheet") if isinstance(doc.get("sheet"), dict) else {}
        doc["sheet"] = {"file": known["file_name"], "page": 1, **(stated or {}), "sha256": body.sheet_sha256}
    return doc
