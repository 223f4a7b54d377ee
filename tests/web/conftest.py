"""Fixtures of the web tests: an app on a fresh bank, its client, sheets to lay on the desk, and the one check of an error's shape."""

import io
import json
import shutil
import time
import uuid

import numpy as np
import pytest
from PIL import Image

from curvebank_web import create_app
from curvebank_web.jobs import Registry


@pytest.fixture(scope="session")
def empty(tmp_path_factory):
    """A folder with an empty bank and desk, made once and copied by every test."""
    folder = tmp_path_factory.mktemp("empty")
    create_app({"BANK": str(folder / "bank.db"), "CACHE": str(folder / "cache")}).extensions["curvebank"].close()
    return folder


@pytest.fixture(scope="session")
def jobs():
    """One worker process for all tests: starting one costs seconds."""
    foreman = Registry(1)
    yield foreman
    foreman.close()


@pytest.fixture
def app(tmp_path, empty, jobs):
    """The app on a fresh bank; nothing is prepared ahead, so that no worker starts unless a test asks for work."""
    for name in ("bank.db", "bank.db.desk"):
        shutil.copy(empty / name, tmp_path / name)
    app = create_app({"BANK": str(tmp_path / "bank.db"), "CACHE": str(tmp_path / "cache"), "TESTING": True, "PREPARE_AHEAD": False})
    app.extensions["curvebank"].jobs = jobs
    return app


@pytest.fixture
def client(app):
    """A browser's stand-in at localhost."""
    return app.test_client()


@pytest.fixture
def is_problem():
    """Checks that a response is the one error shape, of this status and code, and gives its body."""

    def check(response, status, code):
        assert response.status_code == status, response.get_data(as_text=True)
        assert response.mimetype == "application/problem+json"
        body = json.loads(response.get_data())
        assert body["status"] == status and body["code"] == code, body
        for name in ("type", "title", "detail", "code"):
            assert isinstance(body[name], str) and body[name].strip(), name
        assert body["type"] == f"urn:curvebank:problem:{code}"
        assert "Traceback" not in body["detail"]
        assert response.headers["Cache-Control"] == "no-store"
        return body

    return check


def png(pixels, **options):
    """An array as PNG bytes."""
    out = io.BytesIO()
    Image.fromarray(pixels).save(out, "PNG", **options)
    return out.getvalue()


@pytest.fixture
def gradient():
    """600 x 700 grey pixels whose value tells their place."""
    y, x = np.mgrid[0:700, 0:600]
    return ((x * 7 + y * 3) % 251).astype(np.uint8)


@pytest.fixture
def upload(client):
    """Upload bytes as a sheet."""

    def send(data, name="chart.png"):
        head = f'--edge\r\nContent-Disposition: form-data; name="file"; filename="{name}"\r\nContent-Type: application/octet-stream\r\n\r\n'
        return client.post(
            "/api/sheets", data=head.encode() + data + b"\r\n--edge--\r\n", content_type="multipart/form-data; boundary=edge"
        )

    return send


@pytest.fixture
def sheet(upload, gradient):
    """A sheet on the desk: the answer of the upload."""
    response = upload(png(gradient, dpi=(300, 300)))
    assert response.status_code == 201, response.get_data(as_text=True)
    return response.json


@pytest.fixture
def draft(client, sheet):
    """A draft on that sheet."""
    response = client.post("/api/drafts", json={"sheet": {"sha256": sheet["sha256"]}})
    assert response.status_code == 201, response.get_data(as_text=True)
    return response.json


@pytest.fixture
def put(client):
    """Put one step on a draft; a fresh action id unless one is given."""

    def send(draft_id, doc, base, label="Step", action_id=None):
        body = {"doc": doc, "base_step": base, "action_id": action_id or uuid.uuid4().hex, "label": label}
        return client.put(f"/api/drafts/{draft_id}", json=body)

    return send


DIAMETERS = (320.0, 298.0, 276.0)
BEST = {"flow": 62.0, "efficiency": 0.76}


def head_of(flow, diameter_mm):
    """Head [m] of the drawn pump: one shape for Ø 320, carried by the simple trim law (a, b = 1, 2)."""
    r = diameter_mm / 320.0
    return r**2 * (40.0 + 0.02 * (flow / r) - 0.0022 * (flow / r) ** 2)


@pytest.fixture(scope="session")
def chart():
    """A clean invented chart, three head curves and one of efficiency over 0..100 m3/h: (PNG bytes, recipe document without sha256)."""
    from PIL import ImageDraw

    scale = 4  # drawn large and shrunk, so that lines have soft edges like a scan's
    width, height, left, right, low, top = 900, 700, 100.0, 800.0, 600.0, 60.0
    picture = Image.new("L", (width * scale, height * scale), 245)
    draw = ImageDraw.Draw(picture)

    def at(x, y):
        return ((x + 0.5) * scale, (y + 0.5) * scale)

    def px(flow, share):
        return left + (right - left) * flow / 100.0, low - (low - top) * share

    for k in range(11):
        draw.line([at(*px(10 * k, 0)), at(*px(10 * k, 1))], fill=150, width=scale)
        draw.line([at(*px(0, k / 10)), at(*px(100, k / 10))], fill=150, width=scale)
    ends = {320.0: 95.0, 298.0: 88.0, 276.0: 80.0}
    flows = {d: np.linspace(4.0, ends[d], 400) for d in DIAMETERS}
    lines = {f"H-{d:.0f}": (flows[d], head_of(flows[d], d) / 50.0) for d in DIAMETERS}
    q = np.linspace(6.0, 95.0, 400)
    eta = BEST["efficiency"] * (1 - ((q - BEST["flow"]) / 75.0) ** 2)
    lines["E-320"] = (q, eta / 1.0 * 0.55)
    for x, share in lines.values():
        draw.line([at(*px(a, b)) for a, b in zip(x, share, strict=True)], fill=20, width=3 * scale, joint="curve")
    picture = picture.resize((width, height), Image.Resampling.BOX)

    def clicks(name):
        x, share = lines[name]
        return [[round(c, 1) for c in px(x[i], share[i])] for i in (15, 130, 270, 385)]

    def mark(flow, share, value):
        return {"at": [round(c, 2) for c in px(flow, share)], "value": value}

    axes = {
        "flow": {"quantity": "flow", "unit": "m3/h", "scale": "linear", "marks": [mark(0, 0, 0), mark(50, 0, 50), mark(100, 0, 100)]},
        "head": {"quantity": "head", "unit": "m", "scale": "linear", "marks": [mark(0, 0, 0), mark(0, 0.5, 25), mark(0, 1, 50)]},
        "eta": {"quantity": "efficiency", "unit": "%", "scale": "linear", "marks": [mark(100, 0, 0), mark(100, 0.55, 100)]},
    }
    shared = {"panel": "main", "x": "flow", "speed_rpm": 1450, "closed": False}
    curves = [
        {"id": f"H-{d:.0f}", "y": "head", "quantity": "head", "diameter_mm": d, "clicks": clicks(f"H-{d:.0f}"), **shared} for d in DIAMETERS
    ]
    curves.append({"id": "E-320", "y": "eta", "quantity": "efficiency", "diameter_mm": 320.0, "clicks": clicks("E-320"), **shared})
    doc = {
        "recipe": 1,
        "sheet": {"file": "chart.png", "page": 1},
        "pump": {"maker": "Lark", "model": "WM 320", "stages": 1, "speed_rpm": 1450},
        "panels": [{"id": "main", "axes": axes, "grid": "auto"}],
        "curves": curves,
    }
    return png(np.asarray(picture), dpi=(150, 150)), doc


@pytest.fixture
def chart_draft(client, upload, chart):
    """A draft with that chart's whole recipe."""
    data, doc = chart
    sha = upload(data).json["sha256"]
    return client.post("/api/drafts", json={"doc": doc, "sheet_sha256": sha}).json


def poll(client, job, seconds=120):
    """Follow a job to its end, as the browser does."""
    until = time.monotonic() + seconds
    while job["state"] in ("queued", "running"):
        assert time.monotonic() < until, job
        time.sleep(0.02)
        job = client.get(f"/api/jobs/{job['id']}").json
    return job


@pytest.fixture
def finish(client):
    """Follow a job to its end."""
    return lambda job: poll(client, job)


@pytest.fixture(scope="session")
def worked(tmp_path_factory, jobs, chart):
    """A folder whose desk holds one draft of the chart, run at its first step: (folder, draft)."""
    folder = tmp_path_factory.mktemp("worked")
    app = create_app({"BANK": str(folder / "bank.db"), "CACHE": str(folder / "cache"), "PREPARE_AHEAD": False})
    app.extensions["curvebank"].jobs = jobs
    client = app.test_client()
    sent = client.post("/api/sheets", data={"file": (io.BytesIO(chart[0]), "chart.png")}, content_type="multipart/form-data")
    draft = client.post("/api/drafts", json={"doc": chart[1], "sheet_sha256": sent.json["sha256"]}).json
    started = client.post(f"/api/drafts/{draft['id']}/run")
    assert started.status_code == 202
    job = poll(client, started.json)
    assert job["state"] == "done" and job["share"] == 1 and job["problem"] is None, job
    assert job["result_url"] == f"/api/drafts/{draft['id']}/result?step=1"
    return folder, draft


@pytest.fixture
def ran(app, client, worked, tmp_path):
    """That draft on this test's own desk, with its result."""
    folder, draft = worked
    shutil.copy(folder / "bank.db.desk", tmp_path / "bank.db.desk")
    shutil.copytree(folder / "cache", tmp_path / "cache", dirs_exist_ok=True)
    return draft | {"result": client.get(f"/api/drafts/{draft['id']}/result").json}


@pytest.fixture
def save(client):
    """Save a draft's result."""

    def send(draft_id, **how):
        body = {"who": "A. Reader", "why": "First issue", "save_key": uuid.uuid4().hex, "release": False} | how
        return client.post(f"/api/drafts/{draft_id}/save", json=body)

    return send
