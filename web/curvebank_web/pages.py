"""The HTML pages. Each is a template and a small JSON island; the browser asks the API for the rest."""

from flask import Blueprint, render_template

from curvebank import __version__

from . import desk_drafts
from .services import desk_db, services

blueprint = Blueprint("pages", __name__)


def _render(template: str, **boot: object) -> str:
    return render_template(template, boot={"version": __version__, "bank": services().bank.name, **boot})


@blueprint.get("/")
def home() -> str:
    """First run, and the drafts on the desk."""
    return _render("home.html")


@blueprint.get("/desk/<draft>")
def desk(draft: str) -> str:
    """Where a sheet is worked on."""
    desk_drafts.row_of(desk_db(), draft)
    return _render("desk.html", draft=draft)


@blueprint.get("/desk/<draft>/scan")
def scan(draft: str) -> str:
    """A better scan of the same paper, or the second half of the sheet: chosen, looked at, taken or left."""
    desk_drafts.row_of(desk_db(), draft)
    return _render("scan.html", draft=draft)


@blueprint.get("/pumps")
def pumps() -> str:
    """The catalogue."""
    return _render("pumps.html")


@blueprint.get("/pumps/<key>")
def pump(key: str) -> str:
    """One pump: its curves, drawn back over the scan."""
    return _render("pump.html", key=key)
