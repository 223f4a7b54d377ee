"""Drafts: unsaved work, step by step."""

from typing import Any

from flask_openapi import APIBlueprint, Tag

from curvebank.errors import SheetError

from .. import desk_drafts
from ..page_store import PageKey
from ..problems import Problem
from ..services import desk_db, services
from ..starting import starting_point
from .models import DraftPath, Head, NewDraft, NewStep

blueprint = APIBlueprint("drafts", __name__, url_prefix="/api/drafts", abp_tags=[Tag(name="drafts")])


def page_key(doc: dict[str, Any]) -> PageKey | None:
    """The page a document works on, or None where it does not name one that could exist."""
    sheet = doc.get("sheet")
    sha = desk_drafts.sheet_of(doc)
    if sha is None or not isinstance(sheet, dict):
        return None
    page, dpi, turn = sheet.get("page", 1), sheet.get("dpi", 300), sheet.get("turn", 0)
    if not (isinstance(page, int) and isinstance(dpi, int | float) and turn in (0, 90, 180, 270) and page >= 1 and 36 <= dpi <= 1200):
        return None
    return PageKey(sha, page, float(dpi), int(turn))


def full(draft_id: str) -> dict[str, Any]:
    """DRAFT of the API: the draft and the page it works on (null where that cannot be shown)."""
    draft = desk_drafts.read(desk_db(), draft_id)
    key = page_key(draft["doc"])
    try:
        draft["page"] = services().pages.describe(key) if key else None
    except (SheetError, Problem):
        draft["page"] = None
    return draft


@blueprint.get("")
def listing() -> dict[str, Any]:
    """All drafts on the desk, the last touched first."""
    return {"items": desk_drafts.listing(desk_db())}


@blueprint.post("")
def create(body: NewDraft) -> tuple[dict[str, Any], int]:
    """Start a draft from a sheet, a document, or a stored revision."""
    doc, label, origin = starting_point(body)
    sha = desk_drafts.sheet_of(doc)
    draft_id = desk_drafts.create(desk_db(), doc, label=label, sheet_sha256=sha, create_id=body.action_id, origin=origin)
    return full(draft_id), 201


@blueprint.get("/<draft>")
def read(path: DraftPath) -> dict[str, Any]:
    """A draft at its head."""
    return full(path.draft)


@blueprint.put("/<draft>")
def put(path: DraftPath, body: NewStep) -> dict[str, Any]:
    """Keep one action. The answer goes out when it is on the disk."""
    step = desk_drafts.put(desk_db(), path.draft, doc=body.doc, base_step=body.base_step, action_id=body.action_id, label=body.label)
    return {"step": step}


@blueprint.delete("/<draft>")
def remove(path: DraftPath) -> tuple[str, int]:
    """Throw a draft away. What was saved from it stays in the bank."""
    desk_drafts.remove(desk_db(), path.draft)
    return "", 204


@blueprint.post("/<draft>/head")
def head(path: DraftPath, body: Head) -> dict[str, Any]:
    """Undo, redo, or jump to any step."""
    desk_drafts.move_head(desk_db(), path.draft, body.step)
    return full(path.draft)
