"""Every way the API can refuse ends in one shape; outside /api the same problem is a page."""

import json
import sqlite3

import pytest
from flask import abort

from curvebank import errors

SHA = "0" * 64

REFUSED = [
    ("GET", "/api/nothing", None, 404, "no-such-address"),
    ("PATCH", "/api/drafts", None, 405, "method"),
    ("GET", "/api/drafts/abc", None, 404, "no-such-draft"),
    ("GET", f"/api/sheets/{SHA}/1", None, 404, "no-such-sheet"),
    ("GET", f"/api/sheets/{SHA[1:]}/1", None, 422, "validation"),
    ("GET", f"/api/sheets/{SHA}/1?turn=45", None, 422, "validation"),
    ("GET", f"/api/sheets/{SHA}/1?dpi=4000", None, 422, "validation"),
    ("GET", f"/api/sheets/{SHA}/1?dpi=nan", None, 422, "validation"),
    ("GET", f"/api/sheets/{SHA}/1/tiles/0/0/0.png", None, 404, "no-such-sheet"),
    ("GET", f"/api/sheets/{SHA}/1/tiles/99/0/0.png", None, 422, "validation"),
    ("POST", "/api/sheets", None, 422, "validation"),
    ("POST", "/api/drafts", {}, 422, "validation"),
    ("POST", "/api/drafts", {"sheet": {"sha256": SHA}}, 404, "no-such-sheet"),
    ("POST", "/api/drafts", {"sheet": {"sha256": SHA}, "doc": {}}, 422, "validation"),
    ("POST", "/api/drafts", {"doc": {}, "sheet_sha256": SHA}, 404, "no-such-sheet"),
    ("POST", "/api/drafts", {"doc": []}, 422, "validation"),
    ("PUT", "/api/drafts/abc", {"doc": {}, "base_step": 1, "action_id": "a", "label": ""}, 404, "no-such-draft"),
    ("PUT", "/api/drafts/abc", {"doc": {}, "base_step": 10**30, "action_id": "a", "label": ""}, 422, "validation"),
    ("PUT", "/api/drafts/abc", {"doc": {}, "base_step": 1, "action_id": "a b", "label": ""}, 422, "validation"),
    ("PUT", "/api/drafts/abc", {"doc": {}, "base_step": 1, "action_id": "a", "lable": ""}, 422, "validation"),
    ("DELETE", "/api/drafts/abc", None, 404, "no-such-draft"),
    ("POST", "/api/drafts/abc/head", {"step": 0}, 422, "validation"),
    ("POST", "/api/drafts/abc/head", {"step": 1}, 404, "no-such-draft"),
    ("POST", "/api/drafts/abc/preview", {"panel": {}}, 404, "no-such-draft"),
    ("POST", "/api/drafts/abc/run", None, 404, "no-such-draft"),
    ("GET", "/api/drafts/abc/result", None, 404, "no-such-draft"),
    ("GET", "/api/drafts/abc/result?step=x", None, 422, "validation"),
    ("POST", "/api/drafts/abc/save", {"who": "A", "why": "b", "save_key": "k"}, 404, "no-such-draft"),
    ("POST", "/api/drafts/abc/save", {"who": " ", "why": "b", "save_key": "k"}, 422, "validation"),
    ("GET", "/api/jobs/abc", None, 404, "no-such-job"),
    ("DELETE", "/api/jobs/abc", None, 404, "no-such-job"),
]


@pytest.mark.parametrize(("method", "url", "body", "status", "code"), REFUSED)
def test_each_refusal_has_the_one_shape(client, is_problem, method, url, body, status, code):
    is_problem(client.open(url, method=method, json=body), status, code)


def test_a_wrong_method_names_the_right_ones(client, is_problem):
    response = client.patch("/api/drafts")
    is_problem(response, 405, "method")
    assert "POST" in response.headers["Allow"]


def test_validation_names_the_place_and_every_fault(client, is_problem):
    body = {"doc": 5, "base_step": "x", "action_id": "a"}
    problem = is_problem(client.put("/api/drafts/abc", json=body), 422, "validation")
    assert problem["path"] == "$.doc"
    assert {e["path"] for e in problem["errors"]} == {"$.doc", "$.base_step"}


@pytest.mark.parametrize(
    ("raw", "words"),
    [
        (b'{"doc": NaN}', "NaN"),
        (b'{"doc": Infinity}', "Infinity"),
        (b'{"doc": 1e999}', "1e999"),
        (b'{"doc": ', "line 1"),
        (b"\xff\xfe", ""),
        (b"[1, 2]", "object"),
        (b"5", "object"),
        (b"[" * 100_000, "deep"),
        (b'{"doc": ' + b"9" * 5000 + b"}", ""),
    ],
)
def test_what_is_not_strict_json_is_refused(client, is_problem, raw, words):
    problem = is_problem(client.post("/api/drafts", data=raw, content_type="application/json"), 400, "json")
    assert words in problem["detail"] + problem["title"]


def test_another_content_type_is_refused(client, is_problem):
    is_problem(client.post("/api/drafts", data='{"doc": {}}', content_type="text/plain"), 415, "media-type")


def test_a_document_beyond_the_limit_is_refused_with_the_limit(client, is_problem):
    raw = b'{"doc": {"x-note": "' + b"a" * (16 * 1024 * 1024) + b'"}}'
    problem = is_problem(client.post("/api/drafts", data=raw, content_type="application/json"), 413, "too-large")
    assert "16 MB" in problem["detail"]


def test_an_upload_beyond_the_limit_is_refused_with_the_limit(client, app, upload, is_problem):
    app.config["MAX_CONTENT_LENGTH"] = 2_000_000
    problem = is_problem(upload(b"x" * 2_100_000), 413, "too-large")
    assert "2 MB" in problem["detail"]


RAISED = [
    (errors.SheetError("Bad.", code="truncated"), 422, "truncated"),
    (errors.SheetError("Big.", code="too-large"), 413, "too-large"),
    (errors.SheetError("No page 9.", code="no-such-page"), 404, "no-such-page"),
    (errors.RecipeError("Bad.", path="$.panels[0]"), 422, "recipe"),
    (errors.CalibrationError("Bad."), 422, "calibration"),
    (errors.NotFound("None."), 404, "not-found"),
    (errors.OutsideDomain("Beyond."), 422, "outside-domain"),
    (errors.BankError("Held.", code="locked"), 503, "locked"),
    (errors.BankError("Kept.", code="read-only"), 503, "read-only"),
    (errors.CurvebankError("Other.", code="other"), 422, "other"),
    (sqlite3.OperationalError("database is locked"), 503, "locked"),
    (sqlite3.OperationalError("database or disk is full"), 503, "cannot-write"),
    (OSError(28, "No space left on device"), 503, "cannot-write"),
    (MemoryError(), 503, "memory"),
    (ZeroDivisionError("secret detail"), 500, "internal"),
]


@pytest.mark.parametrize(("error", "status", "code"), RAISED, ids=lambda v: type(v).__name__ if isinstance(v, Exception) else str(v))
def test_what_a_view_raises_becomes_a_problem(app, client, is_problem, error, status, code):
    def view():
        raise error

    app.add_url_rule("/api/raise", "raise_api", view)
    app.add_url_rule("/raise", "raise_page", view)
    problem = is_problem(client.get("/api/raise"), status, code)
    assert "secret detail" not in json.dumps(problem)
    if isinstance(error, errors.CurvebankError):
        assert problem["detail"] == error.message and problem.get("path") == error.path
    page = client.get("/raise")
    assert page.status_code == status and page.mimetype == "text/html"
    assert problem["title"] in page.get_data(as_text=True)


def test_any_http_error_has_the_shape(app, client, is_problem):
    app.add_url_rule("/api/teapot", "teapot", lambda: abort(418))
    is_problem(client.get("/api/teapot"), 418, "http-418")


def test_a_page_that_is_not_there_is_a_page(client):
    response = client.get("/nowhere")
    assert response.status_code == 404 and response.mimetype == "text/html"
    assert "There is nothing at this address" in response.get_data(as_text=True)


def test_a_problem_page_escapes_what_it_shows(app, client, monkeypatch):
    def view():
        raise errors.CurvebankError("<script>alert(1)</script>")

    app.add_url_rule("/raise", "raise_page", view)
    assert "<script>alert" not in client.get("/raise").get_data(as_text=True)
