"""Pumps: the catalogue, one pump's revisions, readings, duty points, events.

``revisions`` is imported where it is used: it brings the engine along, which the first page need not wait for.
"""

from typing import Any

from flask_openapi import APIBlueprint, Tag

from .. import catalogue
from ..bank_access import reading, writing
from ..problems import Problem
from ..services import services
from .models import DutyQuery, NewEvent, PumpPath, PumpsQuery, RevisionPath, ValuesQuery

blueprint = APIBlueprint("pumps", __name__, url_prefix="/api/pumps", abp_tags=[Tag(name="pumps")])


@blueprint.get("")
def listing(query: PumpsQuery) -> dict[str, Any]:
    """Pumps by key, a page at a time; ``next`` is the cursor of the following page."""
    with reading(services().bank) as bank:
        return catalogue.listing(bank, q=query.q, state=query.state, after=query.cursor, limit=query.limit)


@blueprint.get("/<key>")
def pump(path: PumpPath) -> dict[str, Any]:
    """One pump: its revisions and all that happened to them."""
    with reading(services().bank) as bank:
        return catalogue.history(bank, path.key)


@blueprint.get("/<key>/revisions/<int:number>")
def revision(path: RevisionPath) -> dict[str, Any]:
    """One revision with its curves, findings and sheets."""
    from .. import revisions

    with reading(services().bank) as bank:
        return revisions.detail(bank, path.key, path.number)


@blueprint.get("/<key>/revisions/<int:number>/values")
def values(path: RevisionPath, query: ValuesQuery) -> dict[str, Any]:
    """A quantity at many flows, with both uncertainties."""
    from .. import revisions

    with reading(services().bank) as bank:
        return revisions.values(
            bank,
            path.key,
            path.number,
            quantity=query.quantity,
            flow_m3h=query.flows,
            diameter_mm=query.diameter_mm,
            speed_rpm=query.speed_rpm,
            outside=query.outside,
        )


@blueprint.get("/<key>/revisions/<int:number>/duty")
def duty(path: RevisionPath, query: DutyQuery) -> dict[str, Any]:
    """Where the pump meets a system H = static + friction x Q^exponent."""
    with reading(services().bank) as bank:
        pump = catalogue.open_pump(bank, path.key, path.number)
        found = pump.duty(query.static_head_m, query.friction_m_per_m3h2, query.diameter_mm, query.speed_rpm, exponent=query.exponent)
        return {"duties": [{**d._asdict(), "cautions": list(d.cautions)} for d in found]}


@blueprint.post("/<key>/revisions/<int:number>/events")
def event(path: RevisionPath, body: NewEvent) -> tuple[dict[str, Any], int]:
    """Submit, release, withdraw, comment on a revision, or waive one of its findings."""
    if (body.kind == "waived") != (body.finding is not None):
        raise Problem(
            422, "validation", "The request does not fit", "A waiver names its finding; other events have none.", path="$.finding"
        )
    with writing(services().bank) as bank:
        seq = bank.event(path.key, path.number, body.kind, who=body.who, why=body.why, finding=body.finding)
        state = catalogue.open_pump(bank, path.key, path.number).state
    return {"seq": seq, "state": state}, 201
