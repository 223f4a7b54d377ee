"""Sheets: add a file, ask about a page, fetch its tiles."""

from pathlib import PurePosixPath
from typing import Any

from flask import Response, request
from flask_openapi import APIBlueprint, Tag

from .. import desk_sheets
from ..page_store import FIRST_DPI, FORM, PageKey, describe
from ..problems import Problem
from ..services import desk_db, services
from .models import PagePath, PageQuery, SheetForm, TilePath

blueprint = APIBlueprint("sheets", __name__, url_prefix="/api/sheets", abp_tags=[Tag(name="sheets")])
UNNAMED = "sheet"


@blueprint.post("")
def add(form: SheetForm) -> tuple[dict[str, Any], int]:
    """Add a scan: it is decoded at once, so that a bad file is refused here and nowhere later."""
    data = form.file.read()
    name = bare_name(form.file.filename or "")
    info = services().pages.first_page(data)
    sha = desk_sheets.add(desk_db(), data, file_name=name, media=info.media, pages=info.pages)
    return {"sha256": sha, "file_name": name, "media": info.media, "pages": info.pages, "page": describe(info, FIRST_DPI)}, 201


@blueprint.get("/<sha256>/<int:page>")
def page(path: PagePath, query: PageQuery) -> dict[str, Any]:
    """What is known of a page: size, resolution, tiles."""
    return services().pages.describe(_key(path, query))


@blueprint.get("/<sha256>/<int:page>/tiles/<int:z>/<int:x>/<int:y>.png")
def tile(path: TilePath, query: PageQuery) -> Response:
    """One tile of 256 x 256 pixels (less at the right and lower edge). z = max_zoom is full size, z = 0 the whole page."""
    key = _key(path, query)
    data = services().pages.tile(key, path.z, path.x, path.y)
    if data is None:
        raise Problem(
            404, "no-such-tile", "There is no such tile", "The page ends before it; width, height and max_zoom of the page tell where."
        )
    response = Response(data, mimetype="image/png")
    response.headers["Cache-Control"] = "private, max-age=31536000, immutable"
    response.set_etag(f"{key.name}-{FORM}-{path.z}-{path.x}-{path.y}")
    response.make_conditional(request)
    return response


def _key(path: PagePath, query: PageQuery) -> PageKey:
    return PageKey(path.sha256, path.page, query.dpi, query.turn)


def bare_name(name: str) -> str:
    """The name of an uploaded file without any folder, as recipes want it."""
    bare = PurePosixPath(name.replace("\\", "/")).name.replace("\x00", "")
    return bare[:255] if bare not in ("", ".", "..") else UNNAMED
