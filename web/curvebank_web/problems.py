"""Every error of the API in one shape: RFC 9457 problem details, made in one place.

``{type, title, status, detail, code, path?}`` and perhaps more members. The title says what happened, the detail what
follows and what to do. Outside ``/api`` the same problem is an HTML page.
"""

import errno
import json
import logging
import sqlite3
from typing import Any

from flask import Flask, Response, current_app, render_template, request
from jinja2 import TemplateNotFound
from markupsafe import escape
from pydantic import ValidationError
from werkzeug.exceptions import HTTPException

from curvebank import errors

log = logging.getLogger("curvebank_web")
MEDIA_TYPE = "application/problem+json"

STATUS_BY_CODE = {
    "no-such-page": 404,
    "too-large": 413,
    "not-found": 404,
    "locked": 503,
    "read-only": 503,
    "state": 409,
    "conflict": 409,
    "save-key": 409,
    "cancelled": 409,
}
STATUS_BY_CLASS: tuple[tuple[type[errors.CurvebankError], int], ...] = (
    (errors.NotFound, 404),
    (errors.BankError, 503),
    (errors.CurvebankError, 422),
)
TITLES_BY_CLASS: tuple[tuple[type[Exception], str], ...] = (
    (errors.SheetError, "The sheet cannot be used"),
    (errors.RecipeError, "The recipe is not valid"),
    (errors.UnitError, "The unit or number cannot be read"),
    (errors.CalibrationError, "The marks cannot place the axes"),
    (errors.TraceError, "The curve cannot be followed"),
    (errors.FitError, "The curve cannot be fitted"),
    (errors.NotFound, "Not in the bank"),
    (errors.BankError, "The bank cannot be used"),
    (errors.OutsideDomain, "Beyond what was traced"),
    (errors.Cancelled, "Stopped"),
)
HTTP_WORDS: dict[int, tuple[str, str, str]] = {
    400: ("bad-request", "The request cannot be read", "Nothing was changed."),
    404: ("no-such-address", "There is nothing at this address", "Go back to the start page and choose from there."),
    405: ("method", "This address does not take that method", "The Allow header lists the ones it takes."),
    413: ("too-large", "The file is too large", "Scan at 300 dpi in grey, or send one page alone."),
    415: ("media-type", "The request is not JSON", "Send it with Content-Type: application/json."),
}


class Problem(Exception):
    """An error with a status that a view raises on purpose; ``more`` are further members of the problem."""

    def __init__(self, status: int, code: str, title: str, detail: str, *, path: str | None = None, **more: Any) -> None:
        super().__init__(f"{title}: {detail}")
        self.status, self.code, self.title, self.detail, self.path, self.more = status, code, title, detail, path, more
        self.headers: list[tuple[str, str]] = []

    def to_dict(self) -> dict[str, Any]:
        """The members of the problem document."""
        body = {
            "type": f"urn:curvebank:problem:{self.code}",
            "title": self.title,
            "status": self.status,
            "detail": self.detail,
            "code": self.code,
        }
        if self.path is not None:
            body["path"] = self.path
        return {**self.more, **body}


def from_library(error: errors.CurvebankError) -> Problem:
    """A library error as a problem: its code, message and JSON path are kept."""
    status = STATUS_BY_CODE.get(error.code) or next(s for kind, s in STATUS_BY_CLASS if isinstance(error, kind))
    title = next((t for kind, t in TITLES_BY_CLASS if isinstance(error, kind)), "It cannot be done")
    more = {"errors": error.details["errors"]} if "errors" in error.details else {}
    return Problem(status, error.code, title, error.message, path=error.path, **more)


def from_validation(error: ValidationError) -> Problem:
    """What pydantic found in a request, first fault first, each with its JSON path."""
    faults = []
    for item in error.errors(include_url=False, include_context=False, include_input=False):
        path = "$" + "".join(f"[{p}]" if isinstance(p, int) else f".{p}" for p in item["loc"])
        faults.append({"path": path, "message": item["msg"].removeprefix("Value error, ")})
    first = faults[0]
    detail = f"{first['path']}: {first['message']}. Nothing was changed."
    return Problem(422, "validation", "The request does not fit", detail, path=first["path"], errors=faults)


def refuse_invalid(error: ValidationError) -> Response:
    """Hook for flask-openapi: it wants a response, the handler below makes it."""
    raise from_validation(error) from None


def from_http(error: HTTPException) -> Problem:
    """Flask's own refusals (404, 405, 413, ...) in our words."""
    status = error.code or 500
    code, title, advice = HTTP_WORDS.get(status, (f"http-{status}", error.name, "Nothing was changed."))
    if status == 413:
        limit = (request.max_content_length or current_app.config["MAX_CONTENT_LENGTH"]) // 1_000_000
        advice = f"The limit is {limit} MB. {advice}"
    elif status == 404 and request.path.startswith("/api"):
        advice = "GET /api/openapi.json lists the addresses."
    elif status == 400 and error.description and request.path.startswith("/api"):
        advice = f"{error.description} Nothing was changed."
    problem = Problem(status, code, title, advice)
    problem.headers = [(k, v) for k, v in error.get_headers() if k.lower() == "allow"]
    return problem


def from_unexpected(error: Exception) -> Problem:
    """A fault of the program: logged in full, told in short. A held desk file is not one."""
    if isinstance(error, sqlite3.OperationalError) and "locked" in str(error):
        detail = "Nothing was saved: another program has held the file for 30 s. Close that program, then do it again."
        return Problem(503, "locked", "The file is held by another program", detail)
    if isinstance(error, sqlite3.OperationalError) and ("readonly" in str(error) or "full" in str(error)):
        detail = "Nothing was saved: the disk is full or the file cannot be written. Make room, then do it again."
        return Problem(503, "cannot-write", "The file cannot be written", detail)
    if isinstance(error, OSError) and error.errno in (errno.ENOSPC, errno.EROFS):
        detail = "Nothing was saved: the disk is full or cannot be written. Make room, then do it again."
        return Problem(503, "cannot-write", "The file cannot be written", detail)
    if isinstance(error, MemoryError):
        detail = "What was kept before is safe. Close other programs, or scan at a lower resolution."
        return Problem(503, "memory", "There is not enough memory", detail)
    log.error("unexpected error at %s %s", request.method, request.path, exc_info=error)
    detail = "This is a fault of the program, not of your sheet. What was kept before is safe. The server's output has the details."
    return Problem(500, "internal", "Something went wrong inside", detail)


def respond(error: Exception) -> Response:
    """The one error handler: any exception to a problem, as JSON under /api and as a page elsewhere."""
    if isinstance(error, Problem):
        problem = error
    elif isinstance(error, errors.CurvebankError):
        problem = from_library(error)
    elif isinstance(error, HTTPException):
        if error.code is not None and error.code < 400:  # a redirect is no problem
            return Response(error.get_body(), error.code, error.get_headers())
        problem = from_http(error)
    else:
        problem = from_unexpected(error)
    body = problem.to_dict()
    if request.path.startswith("/api"):
        response = Response(json.dumps(body, allow_nan=False), problem.status, mimetype=MEDIA_TYPE)
    else:
        response = Response(problem_page(body), problem.status, mimetype="text/html")
    response.headers.extend(problem.headers)
    response.headers["Cache-Control"] = "no-store"
    return response


def problem_page(body: dict[str, Any]) -> str:
    """The HTML page of a problem; it must come out even where the template is broken or missing."""
    try:
        return render_template("problem.html", problem=body, boot={})
    except TemplateNotFound:
        title, detail = escape(body["title"]), escape(body["detail"])
        return f'<!doctype html><html lang="en"><title>{title}</title><h1>{title}</h1><p>{detail}</p></html>'


def register(app: Flask) -> None:
    """Route every exception of the app through ``respond``."""
    app.register_error_handler(Exception, respond)
