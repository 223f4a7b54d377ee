"""What keeps other sites and other machines out: hosts, cross-site writes, response headers, strict JSON."""

import json
import math
import re
from typing import Any

from flask import Flask, Response, current_app, request
from flask.json.provider import DefaultJSONProvider

from .problems import Problem

CSP = (
    "default-src 'none'; script-src 'self'; style-src 'self' 'unsafe-inline'; img-src 'self' data: blob:; connect-src 'self'; "
    "font-src 'self'; base-uri 'none'; form-action 'self'; frame-ancestors 'none'"
)
HEADERS = {
    "Content-Security-Policy": CSP,
    "X-Content-Type-Options": "nosniff",
    "Referrer-Policy": "no-referrer",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
}
HOST = re.compile(r"(127\.0\.0\.1|localhost|\[::1\])(:\d{1,5})?", re.IGNORECASE)
UNSAFE = {"POST", "PUT", "PATCH", "DELETE"}
JSON_LIMIT = 16 * 1024 * 1024


class StrictJSON(DefaultJSONProvider):
    """JSON as the standard has it: no NaN or Infinity in or out, no number that turns into one, keys in their own order."""

    sort_keys = False

    def loads(self, s: str | bytes, **kwargs: Any) -> Any:
        try:
            return json.loads(s, parse_constant=_no_constant, parse_float=_finite)
        except RecursionError:
            raise ValueError("The JSON is nested too deeply.") from None

    def dumps(self, obj: Any, **kwargs: Any) -> str:
        return super().dumps(obj, allow_nan=False, **kwargs)


def _no_constant(name: str) -> float:
    raise ValueError(f"{name} is not JSON.")


def _finite(text: str) -> float:
    value = float(text)
    if not math.isfinite(value):
        raise ValueError(f"{text} is too large for a number.")
    return value


def check_host() -> None:
    """Refuse a foreign Host header: a page of another site that points its name at this machine reads nothing."""
    if not HOST.fullmatch(request.environ.get("HTTP_HOST", "")):
        detail = "This server answers to 127.0.0.1 and localhost only. Open the address it printed when it started."
        raise Problem(400, "host", "This host name is not served", detail)


def check_origin() -> None:
    """Refuse writes that another site's page asks the browser for.

    Browsers send Sec-Fetch-Site or Origin with every such request; a script that sends neither is no browser.
    """
    if request.method not in UNSAFE:
        return
    site = request.headers.get("Sec-Fetch-Site")
    origin = request.headers.get("Origin")
    own = f"{request.scheme}://{request.environ.get('HTTP_HOST', '')}".lower()
    if (site is not None and site not in ("same-origin", "none")) or (origin is not None and origin.lower() != own):
        raise Problem(
            403, "cross-site", "Refused: the request comes from another site", "Nothing was changed. Work from curvebank's own pages."
        )


def check_body() -> None:
    """Writes under /api carry one JSON object; a file upload is the exception and is checked by its view."""
    if request.method not in UNSAFE or not request.path.startswith("/api") or request.path.rstrip("/") == "/api/sheets":
        return
    request.max_content_length = JSON_LIMIT
    if not request.content_length and "Transfer-Encoding" not in request.headers:
        return
    if not request.is_json:
        raise Problem(415, "media-type", "The request is not JSON", "Send it with Content-Type: application/json. Nothing was changed.")
    try:
        body = current_app.json.loads(request.get_data())
    except ValueError as error:
        raise Problem(400, "json", "The request is not valid JSON", f"{error} Nothing was changed.") from None
    if not isinstance(body, dict):
        raise Problem(400, "json", "The request is not a JSON object", "Send one object in braces. Nothing was changed.")


def add_headers(response: Response) -> Response:
    """The security headers, on every response."""
    for name, value in HEADERS.items():
        response.headers[name] = value
    if request.path.startswith("/api"):
        response.headers.setdefault("Cache-Control", "no-store")
    return response


def register(app: Flask) -> None:
    """Put the checks in front of every view and the headers on every response."""
    app.json = StrictJSON(app)
    app.before_request(check_host)
    app.before_request(check_origin)
    app.before_request(check_body)
    app.after_request(add_headers)
