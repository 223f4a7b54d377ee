"""Pumps: the catalogue, one pump's revisions, readings, duty points, exports, events."""

from typing import Any

from flask import Response
from flask_openapi import APIBlueprint, Tag

from curvebank.bank import catalogue, revision_view
from curvebank.desk import export as exports

from ..bank_access import reading, writing
from ..page_store import described
from ..problems import Problem
from ..services import services
from .models import DutyQuery, ExportQuery, NewEvent, PumpPath, PumpsQuery, RevisionPath, ValuesQuery

blueprint = APIBlueprint("pumps", __name__, url_prefix="/api/pumps", abp_tags=[Tag(name="pumps")])


@blueprint.get("")
def listing(query: PumpsQuery) -> dict[str, Any]:
    """Pumps by key, a page at a time; ``next`` is the cursor of the following page."""
    with reading(services().bank) as bank:
        return catalogue.list_pumps(bank, q=query.q, state=query.state, cursor=query.cursor, limit=query.limit)


@blueprint.get("/<key>")
def pump(path: PumpPath) -> dict[str, Any]:
    """One pump: its revisions and all that happened to them."""
    with reading(services().bank) as bank:
        return catalogue.pump_detail(bank, path.key)


@blueprint.get("/<key>/revisions/<int:number>")
def revision(path: RevisionPath) -> dict[str, Any]:
    """One revision with its curves, findings and sheets."""
    with reading(services().bank) as bank:
        found = revision_view.detail(bank, path.key, path.number)
    return {**found, "sheets": [described(sheet) for sheet in found["sheets"]]}


@blueprint.get("/<key>/revisions/<int:number>/values")
def values(path: RevisionPath, query: ValuesQuery) -> dict[str, Any]:
    """A quantity at many flows, with both uncertainties."""
    with reading(services().bank) as bank:
        return revision_view.values(
            bank,
            path.key,
            path.number,
            query.quantity,
            query.flows,
            diameter_mm=query.diameter_mm,
            speed_rpm=query.speed_rpm,
            outside=query.outside,
        )


@blueprint.get("/<key>/revisions/<int:number>/duty")
def duty(path: RevisionPath, query: DutyQuery) -> dict[str, Any]:
    """Where the pump meets a system H = static + friction x Q^exponent."""
    with reading(services().bank) as bank:
        return revision_view.duty(bank, path.key, path.number, **query.model_dump())


@blueprint.get("/<key>/revisions/<int:number>/export")
def export(path: RevisionPath, query: ExportQuery) -> Response:
    """A revision as a file: its traced points or its fits as CSV (canonical units, named in every row), or all of it as JSON."""
    doc = exports.document(services().bank, path.key, path.number)
    media = "application/json" if query.format == "json" else "text/csv; charset=utf-8; header=present"
    response = Response(exports.text(doc, query.format), content_type=media)
    name = f"{doc['key']}-{doc['number']}{exports.FORMS[query.format]}"
    response.headers["Content-Disposition"] = f'attachment; filename="{name}"'  # a key is capitals, digits and hyphens
    return response


@blueprint.post("/<key>/revisions/<int:number>/events")
def event(path: RevisionPath, body: NewEvent) -> tuple[dict[str, Any], int]:
    """Submit, release, withdraw, comment on a revision, or waive one of its findings."""
    if (body.kind == "waived") != (body.finding is not None):
        raise Problem(
            422, "validation", "The request does not fit", "A waiver names its finding; other events have none.", path="$.finding"
        )
    with writing(services().bank) as store:
        seq = store.event(path.key, path.number, body.kind, who=body.who, why=body.why, finding=body.finding)
        state = catalogue.pinned(store.bank, path.key, path.number).state
    return {"seq": seq, "state": state}, 201
