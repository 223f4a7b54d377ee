"""Drafts: unsaved work, step by step."""

from typing import Any

from flask import Response
from flask_openapi import APIBlueprint, Tag

from curvebank.errors import SheetError

from .. import desk_drafts, desk_results, documents, found_lines, running, saving
from ..jobs import Job
from ..page_store import PageKey
from ..previews import Question
from ..problems import Problem
from ..services import desk_db, services
from ..starting import starting_point
from .jobs import serialise
from .models import DraftPath, Head, NewDraft, NewStep, PreviewQuestion, ResultQuery, SaveRequest, SnapQuery

blueprint = APIBlueprint("drafts", __name__, url_prefix="/api/drafts", abp_tags=[Tag(name="drafts")])


def full(draft_id: str) -> dict[str, Any]:
    """DRAFT of the API: the draft and the page it works on (null where that cannot be shown)."""
    draft = desk_drafts.read(desk_db(), draft_id)
    key = documents.page_key(draft["doc"], draft["sheet_sha256"])
    draft["result_step"] = desk_results.nearest(desk_db(), draft_id, draft["step"])
    draft["page"] = None
    if key is not None:
        try:
            draft["page"] = services().pages.describe(key)
        except (SheetError, Problem):
            return draft
        if services().prepare_ahead:
            services().previews.ahead(key)
    return draft


@blueprint.get("")
def listing() -> dict[str, Any]:
    """All drafts on the desk, the last touched first."""
    return {"items": desk_drafts.listing(desk_db())}


@blueprint.post("")
def create(body: NewDraft) -> tuple[dict[str, Any], int]:
    """Start a draft from a sheet, a document, or a stored revision."""
    doc, label, origin = starting_point(body)
    draft_id = desk_drafts.create(
        desk_db(), doc, label=label, sheet_sha256=documents.sheet_of(doc), create_id=body.action_id, origin=origin
    )
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


@blueprint.post("/<draft>/preview")
def preview(path: DraftPath, body: PreviewQuestion) -> tuple[dict[str, Any], int]:
    """A quick look at one panel and perhaps one curve; 202 with a job while the sheet is being prepared."""
    doc, key = page_of(path.draft)
    if body.sheet is not None:
        key = PageKey(body.sheet.sha256, body.sheet.page, float(body.sheet.dpi), body.sheet.turn)
        services().pages.info(key)
    subject = (path.draft, str(body.panel.get("id")), str(body.curve.get("id")) if body.curve else "")
    masks = documents.masks_of(doc) if body.masks is None else body.masks
    question = Question(key=key, panel=body.panel, curve=body.curve, pump=documents.pump_facts(doc), masks=masks, live=body.live)
    answer = services().previews.look(subject, question)
    if isinstance(answer, Job):
        return {"seq": body.seq, "pending": True, "job": serialise(answer)}, 202
    return {"seq": body.seq, **answer}, 200


@blueprint.get("/<draft>/lines")
def lines(path: DraftPath) -> tuple[dict[str, Any], int]:
    """The printed lines found on the draft's page [px], level and upright ones; 202 with a job while the sheet is being prepared."""
    _, key = page_of(path.draft)
    prepared = services().previews.ready(key)
    if isinstance(prepared, Job):
        return {"pending": True, "job": serialise(prepared)}, 202
    return found_lines.serialise(prepared), 200


@blueprint.get("/<draft>/snap")
def snap(path: DraftPath, query: SnapQuery) -> tuple[dict[str, Any], int]:
    """What is printed near a place: ``snap`` is {at, kind: crossing | tick | line, sigma_px} or null; 202 while the sheet is prepared."""
    doc, key = page_of(path.draft)
    prepared = services().previews.ready(key)
    if isinstance(prepared, Job):
        return {"pending": True, "job": serialise(prepared)}, 202
    return {"snap": found_lines.snap(prepared, documents.masks_of(doc), (query.x, query.y), query.radius)}, 200


def page_of(draft_id: str) -> tuple[dict[str, Any], PageKey]:
    """The document at the head and the page it works on, which can be read; or a problem."""
    db = desk_db()
    draft = desk_drafts.row_of(db, draft_id)
    doc = desk_drafts.doc_at(db, draft_id, draft["head"])
    key = documents.page_key(doc, draft["sheet_sha256"])
    if key is None:
        raise Problem(422, "no-sheet", "The draft has no sheet", "Lay a sheet on the desk first.", path="$.sheet")
    services().pages.info(key)
    return doc, key


@blueprint.post("/<draft>/run")
def run(path: DraftPath) -> tuple[dict[str, Any], int]:
    """Digitise the draft as it stands at its head."""
    return serialise(running.start(services(), desk_db(), path.draft)), 202


@blueprint.get("/<draft>/result")
def result(path: DraftPath, query: ResultQuery) -> Response:
    """What the run of a step gave: the result document and the family picture."""
    return Response(running.result_text(desk_db(), path.draft, query.step), mimetype="application/json")


@blueprint.post("/<draft>/save")
def save(path: DraftPath, body: SaveRequest) -> tuple[dict[str, Any], int]:
    """Store the result of a step as a revision of its pump; the same save_key again answers what the first did."""
    return saving.save(services(), desk_db(), path.draft, **body.model_dump()), 201
