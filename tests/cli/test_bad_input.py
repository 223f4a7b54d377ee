"""Every kind of bad input at the command line: one clear sentence, the exit code, no traceback, a result that says why, nothing lost."""

import errno
import io
import json
import os
import signal
import sqlite3
import struct
import subprocess
import sys
import threading
import zlib
from pathlib import Path

import chart
import contract_check
import pytest
from click.testing import CliRunner
from PIL import Image

from curvebank import digitise, sheet
from curvebank.cli import main

WHO = ("--save", "--who", "R. Hale", "--why", "first reading")


def run(*arguments):
    """A command in this process; an exception other than leaving is a traceback at the user's screen."""
    done = CliRunner().invoke(main, [str(a) for a in arguments])
    assert done.exception is None or isinstance(done.exception, SystemExit), repr(done.exception)
    assert "Traceback" not in done.output
    return done


def encoded(form):
    out = io.BytesIO()
    Image.open(io.BytesIO(chart.png())).convert("L").save(out, form)
    return out.getvalue()


def bomb(width, height):
    """A valid PNG of a few hundred kB that would unpack to a page far beyond the limit."""

    def chunk(kind, data):
        return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))

    packer, row = zlib.compressobj(1), b"\0" + b"\xff" * ((width + 7) // 8)
    packed = b"".join(packer.compress(row * 100) for _ in range(height // 100)) + packer.flush()
    head = struct.pack(">IIBBBBB", width, height, 1, 0, 0, 0, 0)
    return b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", head) + chunk(b"IDAT", packed) + chunk(b"IEND", b"")


def locked_pdf():
    """A one-page PDF under the standard security handler whose password nobody knows (ISO 32000-1, 7.6.3)."""
    bodies = [
        b"<</Type/Catalog/Pages 2 0 R>>",
        b"<</Type/Pages/Kids[3 0 R]/Count 1>>",
        b"<</Type/Page/Parent 2 0 R/MediaBox[0 0 300 300]>>",
        b"<</Filter/Standard/V 1/R 2/P -44/O<" + b"1f" * 32 + b">/U<" + b"2e" * 32 + b">>>",
    ]
    out, places = b"%PDF-1.4\n", []
    for i, body in enumerate(bodies, 1):
        places.append(len(out))
        out += b"%d 0 obj" % i + body + b"endobj\n"
    table = b"xref\n0 5\n0000000000 65535 f \n" + b"".join(b"%010d 00000 n \n" % p for p in places)
    trailer = b"trailer<</Size 5/Root 1 0 R/Encrypt 4 0 R/ID[<00><00>]>>\nstartxref\n%d\n%%%%EOF" % len(out)
    return out + table + trailer


SCANS = {
    "text.png": (lambda: b"not an image at all", "not-an-image", "PNG, TIFF, JPEG or PDF"),
    "empty.png": (lambda: b"", "not-an-image", "empty"),
    "half.png": (lambda: chart.png()[:40_000], "truncated", "scan it again"),
    "half.jpg": (lambda: encoded("JPEG")[:20_000], "truncated", "scan it again"),
    "half.tif": (lambda: encoded("TIFF")[:9_000], "truncated", "scan it again"),
    "half.pdf": (lambda: encoded("PDF")[:9_000], "truncated", "PDF is damaged"),
    "bomb.png": (lambda: bomb(30_000, 30_000), "too-large", "crop to the chart"),
    "locked.pdf": (locked_pdf, "encrypted", "password"),
}


@pytest.mark.parametrize("name", SCANS)
def test_scans(name, tmp_path):
    make, code, words = SCANS[name]
    data = make()
    assert len(data) < 1_000_000
    (tmp_path / name).write_bytes(data)
    doc = chart.document()
    doc["sheet"]["file"] = name
    (tmp_path / "a.recipe.json").write_text(json.dumps(doc))
    done = run("digitise", tmp_path / "a.recipe.json", "--out", tmp_path)
    result = json.loads((tmp_path / "a.result.json").read_text())
    assert done.exit_code == 1 and words in done.output
    assert result["error"]["code"] == code and result["error"]["path"] == "$.sheet"
    assert contract_check.faults(result, doc) == []
    assert {c["error"]["code"] for c in result["curves"]} == {code}
    assert (tmp_path / name).read_bytes() == data


@pytest.mark.parametrize(
    ("make", "code"),
    [
        (lambda d: (d / "chart.png").mkdir(), "no-such-file"),
        (lambda d: (d / "chart.png").symlink_to(d / "nowhere.png"), "no-such-file"),
        (lambda d: None, "no-such-file"),
    ],
    ids=["folder", "dangling link", "missing"],
)
def test_scan_that_cannot_be_read(make, code, tmp_path):
    make(tmp_path)
    (tmp_path / "a.recipe.json").write_text(json.dumps(chart.document()))
    done = run("digitise", tmp_path / "a.recipe.json", "--out", tmp_path / "out")
    result = json.loads((tmp_path / "out" / "a.result.json").read_text())
    assert done.exit_code == 1 and "chart.png" in done.output
    told = {"code": code, "message": result["error"]["message"], "path": "$.sheet.file"}
    assert result["error"] == told and [c["error"] for c in result["curves"]] == [told] * 3


def at(doc, *keys):
    for k in keys:
        doc = doc[k]
    return doc


HEAD = ("panels", 0, "axes", "head")
WHOLE = {
    "page 2 of one": (("sheet",), {"page": 2}, "no-such-page", "$.sheet"),
    "wrong turn": (("sheet",), {"turn": 45}, "recipe", "$.sheet.turn"),
    "false turn": (("sheet",), {"turn": False}, "recipe", "$.sheet.turn"),
    "another scan": (("sheet",), {"sha256": "0" * 64}, "sha256-mismatch", "$.sheet.sha256"),
    "file elsewhere": (("sheet",), {"file": "../chart.png"}, "recipe", "$.sheet.file"),
    "one mark": (HEAD, {"marks": [{"at": [100, 600], "value": 0}]}, "too-few-marks", "$.panels[0].axes.head.marks"),
    "marks at one place": (
        HEAD,
        {"marks": [{"at": [9, 9], "value": v} for v in (0, 60)]},
        "same-place",
        "$.panels[0].axes.head.marks[1].at",
    ),
    "equal values": (
        HEAD,
        {"marks": [{"at": [9, y], "value": 7} for y in (9, 90)]},
        "equal-values",
        "$.panels[0].axes.head.marks[1].value",
    ),
    "log of zero": (HEAD, {"scale": "log10"}, "log-value", "$.panels[0].axes.head.marks[0].value"),
    "log of minus": ((*HEAD, "marks", 0), {"value": -1}, None, None),
    "huge value": ((*HEAD, "marks", 0), {"value": 1e300}, "recipe", "$.panels[0].axes.head.marks[0].value"),
    "not finite": ((*HEAD, "marks", 0), {"value": float("inf")}, "recipe-json", "$"),
    "huge integer": ((*HEAD, "marks", 0), {"value": 10**4000}, "recipe-json", "$"),
    "three numbers": ((*HEAD, "marks", 0), {"at": [1, 2, 3]}, "recipe", "$.panels[0].axes.head.marks[0].at"),
    "unknown unit": (HEAD, {"unit": "furlong"}, "recipe", "$.panels[0].axes.head.unit"),
    "bar, no density": (HEAD, {"unit": "bar"}, "recipe", "$.panels[0].axes.head.density_kgm3"),
    "missing axis": (("curves", 0), {"y": "nope"}, "recipe", "$.curves[0].y"),
    "missing panel": (("curves", 0), {"panel": "nope"}, "recipe", "$.curves[0].panel"),
    "unknown key": (("curves", 0), {"colour": "red"}, "recipe", "$.curves[0].colour"),
    "id twice": (("curves", 1), {"id": "H-320"}, "recipe", "$.curves[1].id"),
    "order 9": (("curves", 0), {"fit": {"order": 9}}, "recipe", "$.curves[0].fit.order"),
    "blank maker": (("pump",), {"maker": "  "}, "recipe", "$.pump.maker"),
    "half a character": (("pump",), {"maker": "\ud800"}, "recipe-json", "$"),
    "newer version": ((), {"recipe": 2}, "recipe-version", "$.recipe"),
}
WHOLE["log of minus"] = (
    HEAD,
    {"scale": "log10", "marks": [{"at": [9, 9], "value": -3}, {"at": [9, 90], "value": 9}]},
    *WHOLE["log of zero"][2:],
)


@pytest.fixture(scope="module")
def prepared(chart_png):
    loaded = sheet.load(chart_png)
    return {"prepared": sheet.prepare(loaded), "page": loaded.info}


@pytest.mark.parametrize("name", WHOLE)
def test_recipes_that_cannot_be_used(name, chart_png, tmp_path):
    keys, change, code, path = WHOLE[name]
    doc = chart.document()
    at(doc, *keys).update(change)
    raw = json.dumps(doc)
    (tmp_path / "chart.png").write_bytes(chart_png)
    (tmp_path / "a.recipe.json").write_text(raw)
    done = run("digitise", tmp_path / "a.recipe.json", "--out", tmp_path)
    result = json.loads((tmp_path / "a.result.json").read_text())
    assert done.exit_code == 1 and len(done.output.strip().splitlines()) == 1
    assert (result["error"]["code"], result["error"]["path"]) == (code, path), result["error"]
    assert contract_check.faults(result) == []
    assert (tmp_path / "a.recipe.json").read_text() == raw


FILES = {
    "cut": b'{"recipe": 1,',
    "empty": b"",
    "a list": b"[]",
    "two documents": b"{}{}",
    "no text": bytes(range(128, 256)),
    "deep": b"[" * 200_000,
    "a key twice": b'{"recipe": 1, "recipe": 1}',
    "21 MB": b'{"x-big": "' + b"a" * 21_000_000 + b'"}',
}


@pytest.mark.parametrize("name", FILES)
def test_files_that_are_no_recipe(name, tmp_path):
    (tmp_path / "a.recipe.json").write_bytes(FILES[name])
    done = run("digitise", tmp_path / "a.recipe.json", "--out", tmp_path)
    result = json.loads((tmp_path / "a.result.json").read_text())
    assert done.exit_code == 1 and "not digitised." in done.output
    assert result["error"]["path"] == "$" and contract_check.faults(result) == []


BLANK = [[150.0, 590.0], [400.0, 585.0]]
LINE = chart.document()["curves"][0]["clicks"]
CURVES = {
    "one click": ({"clicks": LINE[:1]}, "too-few-clicks"),
    "no clicks": ({"clicks": []}, "too-few-clicks"),
    "one place": ({"clicks": [LINE[0]] * 3}, "coincident-clicks"),
    "off the panel": ({"clicks": [[5, 5], [10, 20]]}, "off-panel"),
    "off the page": ({"clicks": [[-500, 5], [1e6, 1e6]]}, "off-panel"),
    "off the ink": ({"clicks": BLANK}, "off-ink"),
    "closed with two": ({"closed": True, "clicks": LINE[:2]}, "too-few-clicks"),
    "by hand with three": ({"kind": "hand"}, "too-few-clicks"),
    "symbols, none": ({"kind": "points", "clicks": []}, "too-few-clicks"),
    "symbols on blank": ({"kind": "points", "clicks": BLANK}, "off-ink"),
}


@pytest.mark.parametrize("name", CURVES)
def test_one_bad_curve_never_sinks_its_sheet(name, prepared):
    change, code = CURVES[name]
    doc = chart.document()
    doc["curves"] = [doc["curves"][0] | change, doc["curves"][2]]
    result = digitise.result_json(digitise.run(doc, None, **prepared))
    bad, good = result["curves"]
    assert result["error"] is None and contract_check.faults(result, doc) == []
    assert bad["error"]["code"] == code and bad["error"]["path"] == "$.curves[0].clicks"
    assert good["error"] is None and good["fit"]


def table_recipe(**change):
    curve = {"id": "t", "quantity": "head", "kind": "table", "rows": [[0, 50], [50, 47], [100, 38]], "x_unit": "m3/h", "y_unit": "m"}
    return {"recipe": 1, "pump": {"maker": "Fenwright", "model": "T", "stages": 3}, "curves": [curve | change]}


def test_a_typed_table_keeps_what_was_typed():
    """Per stage: the points are of the whole pump, the pixels stay the rows as typed."""
    curve = digitise.result_json(digitise.run(table_recipe(head_is="per stage", factor=2.0), None))["curves"][0]
    assert curve["pixels"] == [[0, 50], [50, 47], [100, 38]] and curve["points"][1] == [50, 70.5]


@pytest.fixture
def tables(tmp_path):
    """Recipes that need no scan, so that what happens around them is quick to try."""
    for name in ("a", "b"):
        (tmp_path / f"{name}.recipe.json").write_text(json.dumps(table_recipe()))
    return [tmp_path / "a.recipe.json", tmp_path / "b.recipe.json"]


def test_names_that_are_odd_but_right(tmp_path):
    path = tmp_path / "Kreiselpumpe ü\n (2).recipe.json"
    path.write_bytes(b"\xef\xbb\xbf" + json.dumps(table_recipe(id="H ⌀320"), ensure_ascii=False).encode())
    done = run("digitise", path, "--out", tmp_path / "out folder")
    assert done.exit_code == 0 and len(done.output.strip().splitlines()) == 1
    assert (tmp_path / "out folder" / "Kreiselpumpe ü\n (2).result.json").exists()


def test_out_that_is_no_folder_is_wrong_use(tables, tmp_path):
    (tmp_path / "taken").write_text("mine")
    for out in (tmp_path / "taken", tmp_path / "taken" / "below"):
        assert run("digitise", *tables, "--out", out).exit_code == 2
    assert (tmp_path / "taken").read_text() == "mine"


def test_two_recipes_of_one_name_are_refused(tables, tmp_path):
    (tmp_path / "other").mkdir()
    (tmp_path / "other" / "a.recipe.json").write_text(tables[0].read_text())
    done = run("digitise", tables[0], tmp_path / "other" / "a.recipe.json", "--out", tmp_path / "out")
    assert done.exit_code == 2 and "a.result.json" in done.output and not (tmp_path / "out").exists()


def test_a_full_disk_stops_one_result_not_the_next(tables, tmp_path, monkeypatch):
    out, write = tmp_path / "out", Path.write_bytes

    def full(self, data):
        write(self, data[:10])
        if self.name.startswith("a."):
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        return write(self, data)

    out.mkdir()
    (out / "a.result.json").write_text("the older result")
    monkeypatch.setattr(Path, "write_bytes", full)
    done = run("digitise", *tables, "--out", out)
    assert done.exit_code == 1 and os.strerror(errno.ENOSPC) in done.output
    assert sorted(p.name for p in out.iterdir()) == ["a.result.json", "b.result.json"]
    assert (out / "a.result.json").read_text() == "the older result" and json.loads((out / "b.result.json").read_text())["error"] is None


def newer(path):
    run("digitise", path.parent / "a.recipe.json", "--out", path.parent / "first", "--bank", path, *WHO)
    with sqlite3.connect(path) as db:
        db.execute("PRAGMA user_version = 999")
    db.close()


BANKS = {
    "text": lambda p: p.write_text("not a bank, only words " * 100),
    "another database": lambda p: sqlite3.connect(p).executescript("CREATE TABLE t (a); INSERT INTO t VALUES (1);").connection.close(),
    "below a file": lambda p: p.parent.write_text("x"),
    "newer": newer,
}


@pytest.mark.parametrize("name", BANKS)
def test_banks_that_cannot_take_a_save(name, tables, tmp_path):
    bank = tmp_path / "sub" / "bank.db" if name == "below a file" else tmp_path / "bank.db"
    BANKS[name](bank)
    before = bank.read_bytes() if bank.exists() else None
    done = run("digitise", *tables, "--out", tmp_path / "out", "--bank", bank, *WHO)
    assert done.exit_code == 1 and done.output.count("curvebank: ") == 2
    assert [json.loads((tmp_path / "out" / f"{n}.result.json").read_text())["error"] for n in "ab"] == [None, None]
    assert (bank.read_bytes() if bank.exists() else None) == before
    assert run("verify", "--bank", bank).exit_code == 1 and run("show", "--bank", bank).exit_code == 1


def test_a_blank_name_is_wrong_use(tables, tmp_path):
    done = run("digitise", tables[0], "--out", tmp_path, "--save", "--who", " ", "--why", "x", "--bank", tmp_path / "b.db")
    assert done.exit_code == 2 and not (tmp_path / "b.db").exists()


def test_reading_what_is_not_there(tables, tmp_path):
    bank = tmp_path / "bank.db"
    assert run("digitise", tables[0], "--out", tmp_path, "--bank", bank, *WHO).exit_code == 0
    (tmp_path / "empty.db").touch()
    for arguments in (
        ("show", "NO-SUCH", "--bank", bank),
        ("show", "FENWRIGHT-T", "--revision", "9" * 30, "--bank", bank),
        ("show", "--bank", tmp_path / "empty.db"),
        ("export", "FENWRIGHT-T", "--revision", "1", "--bank", bank, "--out", bank.parent / "a.recipe.json" / "below"),
        ("check", tmp_path / "gone.json"),
    ):
        done = run(*arguments)
        assert done.exit_code == 1 and done.output.startswith("curvebank: "), arguments
    assert run("show", "--bank", tmp_path).exit_code == 2


def test_ctrl_c_leaves_whole_results_only(chart_png, tmp_path):
    """Interrupted between the first result and the last: what is there is whole, no traceback, exit code 130."""
    (tmp_path / "chart.png").write_bytes(chart_png)
    recipes = [tmp_path / f"{i}.recipe.json" for i in range(9)]
    for path in recipes:
        path.write_text(json.dumps(chart.document()))
    command = [sys.executable, "-m", "curvebank.cli", "digitise", *map(str, recipes), "--out", str(tmp_path / "out")]
    process = subprocess.Popen(
        command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, env=os.environ | {"PYTHONUNBUFFERED": "1"}
    )
    timer = threading.Timer(60, process.kill)
    timer.start()
    assert process.stdout.readline().startswith("0.recipe.json: 3 of 3")
    process.send_signal(signal.SIGINT)
    _, said = process.communicate()
    timer.cancel()
    written = sorted((tmp_path / "out").iterdir())
    assert process.returncode == 130 and "stopped" in said and "Traceback" not in said
    assert 1 <= len(written) < 9 and all(json.loads(p.read_text())["error"] is None for p in written)
