"""Fixtures of the web tests: an app on a fresh bank, its client, sheets to lay on the desk, and the one check of an error's shape."""

import io
import json
import shutil
import uuid

import numpy as np
import pytest
from PIL import Image

from curvebank_web import create_app


@pytest.fixture(scope="session")
def empty(tmp_path_factory):
    """A folder with an empty bank and desk, made once and copied by every test."""
    folder = tmp_path_factory.mktemp("empty")
    create_app({"BANK": str(folder / "bank.db"), "CACHE": str(folder / "cache")}).extensions["curvebank"].close()
    return folder


@pytest.fixture
def app(tmp_path, empty):
    """The app on a fresh bank; nothing is prepared ahead, so that no worker starts unless a test asks for work."""
    for name in ("bank.db", "bank.db.desk"):
        shutil.copy(empty / name, tmp_path / name)
    app = create_app({"BANK": str(tmp_path / "bank.db"), "CACHE": str(tmp_path / "cache"), "TESTING": True, "PREPARE_AHEAD": False})
    yield app
    app.extensions["curvebank"].close()


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
        return client.post("/api/sheets", data=head.encode() + data + b"\r\n--edge--\r\n", content_type="multipart/form-data; boundary=edge")

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
