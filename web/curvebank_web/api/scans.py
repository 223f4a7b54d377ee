"""Another scan for a draft: the same paper scanned better, or the second half of a sheet. Both are jobs, looked at first."""

from typing import Any

from flask_openapi import APIBlueprint, Tag

from .. import rescanning
from ..problems import Problem
from ..services import desk_db, services
from .jobs import serialise
from .models import CarryRequest, DraftPath, JoinRequest, OutcomePath

blueprint = APIBlueprint("scans", __name__, url_prefix="/api/drafts", abp_tags=[Tag(name="drafts")])


@blueprint.post("/<draft>/carry")
def carry(path: DraftPath, body: CarryRequest) -> tuple[dict[str, Any], int]:
    """Carry the draft's marks, clicks and masks onto another scan of the same paper and trace there; nothing of the draft changes."""
    return serialise(rescanning.carry(services(), desk_db(), path.draft, body.sheet)), 202


@blueprint.post("/<draft>/join")
def join(path: DraftPath, body: JoinRequest) -> tuple[dict[str, Any], int]:
    """Join the draft's sheet and another file, its second half, to one new sheet on the desk; nothing of the draft changes."""
    return serialise(rescanning.join(services(), desk_db(), path.draft, body.sheet, body.ties)), 202


@blueprint.get("/<draft>/outcomes/<job>")
def outcome(path: OutcomePath) -> dict[str, Any]:
    """What a finished carry ({step, recipe, report, page}) or join ({step, sheet, report, page}) gave."""
    found = services().outcomes.get(path.job)
    if found is None or found["draft"] != path.draft:
        detail = "Outcomes are forgotten when the server restarts or much else was tried since. Nothing that was kept is lost; do it again."
        raise Problem(404, "no-such-outcome", "That outcome is not here", detail)
    return found
