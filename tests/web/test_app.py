"""The app as a whole: pages, the OpenAPI document, configuration, the packed records."""

import dataclasses
import json
import re
from pathlib import Path

import jinja2
import numpy as np
import pytest

from curvebank import records
from curvebank.errors import CurvebankError
from curvebank_web import create_app, record_pack
from curvebank_web.previews import Previews
from curvebank_web.problems import Problem

PAGES = {"/": "home.html", "/pumps": "pumps.html", "/pumps/LARK-WM-150": "pump.html"}


def island(response):
    """The JSON in the page."""
    text = response.get_data(as_text=True)
    (found,) = re.findall(r'<script type="application/json"[^>]*>(.*?)</script>', text, re.DOTALL)
    return json.loads(found)


class TestPages:
    """Routes render their template with a JSON island."""

    @pytest.mark.parametrize("url", PAGES)
    def test_each_page_comes_out(self, client, url):
        response = client.get(url)
        assert response.status_code == 200 and response.mimetype == "text/html"
        assert island(response)["bank"] == "bank.db"

    def test_the_desk_page_names_its_draft(self, client, draft):
        assert island(client.get(f"/desk/{draft['id']}"))["draft"] == draft["id"]

    def test_the_pump_page_names_its_pump(self, client):
        assert island(client.get("/pumps/LARK-WM-150"))["key"] == "LARK-WM-150"

    def test_a_draft_that_is_gone_is_a_page_that_says_so(self, client):
        response = client.get("/desk/abcdef")
        assert response.status_code == 404 and "There is no such draft" in response.get_data(as_text=True)

    def test_the_island_cannot_break_out(self, client):
        response = client.get("/pumps/%3C%2Fscript%3E%3Cscript%3Ealert(1)%3C%2Fscript%3E")
        assert "<script>alert" not in response.get_data(as_text=True)

    def test_no_page_has_a_script_of_its_own(self, client, draft):
        for url in (*PAGES, f"/desk/{draft['id']}", "/nowhere"):
            text = client.get(url).get_data(as_text=True)
            for attributes, body in re.findall(r"<script([^>]*)>(.*?)</script>", text, re.DOTALL):
                assert "application/json" in attributes or ("src=" in attributes and not body.strip())
            assert not re.search(r'\son\w+="', text)

    def test_a_problem_page_comes_out_even_without_its_template(self, app, client):
        app.jinja_loader = jinja2.DictLoader({})
        response = client.get("/nowhere")
        assert response.status_code == 404 and "There is nothing at this address" in response.get_data(as_text=True)


class TestOpenAPI:
    """The document describes what is served."""

    def test_every_api_route_is_described_and_every_description_is_served(self, app, client):
        document = client.get("/api/openapi.json").json
        described = {(path, method.upper()) for path, item in document["paths"].items() for method in item}
        served = set()
        for rule in app.url_map.iter_rules():
            if rule.rule.startswith("/api/") and rule.rule != "/api/openapi.json":
                path = re.sub(r"<(?:\w+:)?(\w+)>", r"{\1}", rule.rule)
                served |= {(path, method) for method in rule.methods - {"HEAD", "OPTIONS"}}
        assert described == served and len(served) > 20

    def test_errors_are_declared_as_problems(self, client):
        document = client.get("/api/openapi.json").json
        for item in document["paths"].values():
            for operation in item.values():
                (media,) = operation["responses"]["default"]["content"]
                assert media == "application/problem+json" and operation["summary"]
        assert set(document["components"]["schemas"]["ProblemModel"]["required"]) == {"type", "title", "status", "detail", "code"}

    def test_it_is_no_user_interface_from_elsewhere(self, client):
        assert client.get("/openapi").status_code == 404


class TestConfig:
    """What an app needs."""

    def test_a_bank_must_be_named(self):
        with pytest.raises(CurvebankError, match="BANK"):
            create_app({})

    def test_the_desk_lies_beside_the_bank_unless_named(self, tmp_path):
        create_app({"BANK": str(tmp_path / "a.db"), "CACHE": str(tmp_path)}).extensions["curvebank"].close()
        create_app({"BANK": str(tmp_path / "a.db"), "DESK": str(tmp_path / "d" / "my.desk"), "CACHE": str(tmp_path)})
        assert (tmp_path / "a.db.desk").exists() and (tmp_path / "d" / "my.desk").exists()

    def test_the_cache_goes_to_the_platforms_place(self, tmp_path, monkeypatch):
        import platformdirs

        monkeypatch.setattr(platformdirs, "user_cache_path", lambda *a, **k: tmp_path / "place")
        assert create_app({"BANK": str(tmp_path / "a.db")}).extensions["curvebank"].cache == tmp_path / "place"

    def test_an_overfull_cache_drops_what_was_not_used(self, tmp_path):
        import os

        from curvebank_web.page_store import prune

        for n, name in enumerate(("old", "middle", "new")):
            (tmp_path / name).mkdir()
            (tmp_path / name / "0.npy").write_bytes(b"x" * 1000)
            os.utime(tmp_path / name / "0.npy", (n, n))
        prune(tmp_path, 2000)
        assert sorted(p.name for p in tmp_path.iterdir()) == ["middle", "new"]
        prune(tmp_path / "nowhere", 1)

    @pytest.mark.parametrize(
        ("code", "unwanted"),
        [
            ("import curvebank_web.worker, curvebank_web.work", {"flask", "waitress"}),
            ("from curvebank_web import create_app; create_app({'BANK': 'a.db', 'CACHE': 'c'}).test_client().get('/')", {"cv2", "scipy"}),
        ],
        ids=["worker", "first page"],
    )
    def test_nothing_waits_for_what_it_does_not_need(self, tmp_path, code, unwanted):
        import subprocess
        import sys

        import curvebank

        root = Path(curvebank.__file__).parents[1]
        code = f"import sys; sys.path[:0] = [{str(root)!r}, {str(root / 'web')!r}]; {code}; print(*sys.modules)"
        done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=tmp_path)
        assert done.returncode == 0, done.stderr
        assert not unwanted & set(done.stdout.split())


class TestRecordPack:
    """What was seen is what is saved, to the bit."""

    def test_a_whole_result_survives_unchanged(self, worked):
        import sqlite3

        from curvebank import digitise

        db = sqlite3.connect(worked[0] / "bank.db.desk")
        packed, result = db.execute("SELECT digitised, result FROM result").fetchone()
        db.close()
        made = record_pack.unpack(packed)
        assert json.dumps(digitise.result_json(made)) == result
        again = record_pack.unpack(record_pack.pack(made))
        assert _same(made, again)
        assert not made.curves[0].points.flags.writeable

    def test_odd_numbers_and_texts_survive(self):
        notice = records.Notice(code="a", message="Ø “x” \U0001f4a7", stretch=None)
        fit = records.frozen([np.pi, -0.0, 1e-300, 5e300])
        curve = records.Curve(id="c", quantity="head", spread={"fit": 0.1 + 0.2}, warnings=(notice,), sigma=fit)
        assert _same(curve, record_pack.unpack(record_pack.pack(curve)))

    @pytest.mark.parametrize("data", [b"", b"rubbish", b"PK\x03\x04rubbish"])
    def test_rubbish_is_refused_in_words(self, data):
        with pytest.raises(record_pack.PackError, match="Run the sheet again"):
            record_pack.unpack(data)

    def test_nothing_but_records_is_made(self, tmp_path):
        import io

        tree = {"form": record_pack.FORM, "root": {"record": "Path", "fields": {}}}
        out = io.BytesIO()
        np.savez(out, tree=np.frombuffer(json.dumps(tree).encode(), np.uint8))
        with pytest.raises(record_pack.PackError):
            record_pack.unpack(out.getvalue())


def _same(a, b):
    if isinstance(a, np.ndarray):
        return a.dtype == b.dtype and a.shape == b.shape and a.tobytes() == b.tobytes()
    if dataclasses.is_dataclass(a):
        return type(a) is type(b) and all(_same(getattr(a, f.name), getattr(b, f.name)) for f in dataclasses.fields(a))
    if isinstance(a, tuple | list):
        return type(a) is type(b) and len(a) == len(b) and all(_same(x, y) for x, y in zip(a, b, strict=True))
    if isinstance(a, dict):
        return list(a) == list(b) and all(_same(a[k], b[k]) for k in a)
    return a == b and type(a) is type(b)


def test_of_waiting_previews_of_one_curve_only_the_newest_is_worked_on(app):
    import threading

    previews = Previews(app.extensions["curvebank"])
    gate, started, done = threading.Event(), threading.Event(), []

    def first():
        started.set()
        gate.wait(10)
        done.append("first")

    def ask(name):
        try:
            previews._in_turn(("draft", "main", "H"), lambda: done.append(name))
        except Problem as problem:
            done.append(f"{name} {problem.code}")

    threads = [threading.Thread(target=lambda: previews._in_turn(("draft", "main", "H"), first))]
    threads[0].start()
    assert started.wait(10)
    for name in ("second", "third"):
        threads.append(threading.Thread(target=ask, args=(name,)))
        threads[-1].start()
        while len(previews._newest) == 0 or previews._newest[("draft", "main", "H")] != len(threads) - 1:
            pass
    gate.set()
    for thread in threads:
        thread.join(10)
    assert done[0] == "first" and sorted(done[1:]) == ["second superseded", "third"]
    assert previews._newest == {}
