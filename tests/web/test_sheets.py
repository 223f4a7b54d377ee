"""Sheets: what is taken, what is refused, and that tiles are the page's own pixels."""

import io
import sqlite3
import struct
import zlib
from contextlib import closing
from datetime import UTC, datetime, timedelta

import numpy as np
import pypdfium2
import pytest
from PIL import Image

from curvebank_web import create_app
from curvebank_web.api.sheets import bare_name
from curvebank_web.desk_file import written
from curvebank_web.page_store import PageKey, halve, max_zoom


def png(pixels):
    out = io.BytesIO()
    Image.fromarray(pixels).save(out, "PNG")
    return out.getvalue()


def pixels_of(response):
    assert response.status_code == 200, response.get_data(as_text=True)
    return np.asarray(Image.open(io.BytesIO(response.data)))


def assemble(client, page, zoom):
    """The whole level from its tiles."""
    step = 2 ** (page["max_zoom"] - zoom)
    width, height = -(-page["width"] // step), -(-page["height"] // step)
    url = f"/api/sheets/{page['sha256']}/{page['page']}/tiles/{zoom}/{{}}/{{}}.png?dpi={page['dpi']}&turn={page['turn']}"
    rows = []
    for y in range(-(-height // 256)):
        rows.append(np.concatenate([pixels_of(client.get(url.format(x, y))) for x in range(-(-width // 256))], axis=1))
    return np.concatenate(rows, axis=0)


def test_an_upload_tells_what_was_read(sheet):
    assert sheet["media"] == "image/png" and sheet["pages"] == 1 and sheet["file_name"] == "chart.png"
    page = sheet["page"]
    assert (page["width"], page["height"], page["turn"], page["dpi"], page["tile_size"]) == (600, 700, 0, 300, 256)
    assert page["dpi_x"] == pytest.approx(300, abs=0.05)
    assert page["max_zoom"] == 2  # 700 px needs two halvings to fit 256


def test_full_size_tiles_are_the_page_pixel_by_pixel(client, sheet, gradient):
    assert np.array_equal(assemble(client, sheet["page"], 2), gradient)


def test_each_lower_zoom_is_the_mean_of_four(client, sheet, gradient):
    half = gradient.astype(float).reshape(350, 2, 300, 2).mean(axis=(1, 3))
    assert np.abs(assemble(client, sheet["page"], 1) - half).max() <= 0.5
    whole = assemble(client, sheet["page"], 0)
    assert whole.shape == (175, 150)


def test_colour_stays_red_green_blue(client, upload):
    pixels = np.zeros((40, 60, 3), np.uint8)
    pixels[:, :20], pixels[:, 20:40], pixels[:, 40:] = (200, 10, 20), (10, 190, 30), (5, 15, 180)
    page = upload(png(pixels)).json["page"]
    assert page["max_zoom"] == 0 and np.array_equal(assemble(client, page, 0), pixels)


def test_a_turned_page_is_turned_clockwise(client, sheet, gradient):
    page = client.get(f"/api/sheets/{sheet['sha256']}/1?turn=90").json
    assert (page["width"], page["height"], page["turn"]) == (700, 600, 90)
    assert np.array_equal(assemble(client, page, page["max_zoom"]), np.rot90(gradient, -1))


def test_tiles_may_be_kept_for_ever_and_are_not_sent_twice(client, sheet):
    url = f"/api/sheets/{sheet['sha256']}/1/tiles/2/0/0.png"
    first = client.get(url)
    assert first.mimetype == "image/png" and "immutable" in first.headers["Cache-Control"]
    again = client.get(url, headers={"If-None-Match": first.headers["ETag"]})
    assert again.status_code == 304 and not again.data
    other = client.get(f"/api/sheets/{sheet['sha256']}/1/tiles/2/1/0.png")
    assert other.headers["ETag"] != first.headers["ETag"]


def test_tiles_come_from_the_disk_the_second_time(app, client, sheet, monkeypatch):
    url = f"/api/sheets/{sheet['sha256']}/1/tiles/1/0/0.png"
    first = client.get(url).data
    monkeypatch.setattr("curvebank_web.page_store.encode_png", lambda pixels: pytest.fail("encoded again"))
    assert client.get(url).data == first


@pytest.mark.parametrize("tile", ["3/0/0", "2/3/0", "2/0/3", "0/1/0"])
def test_a_tile_beyond_the_page_is_not_there(client, sheet, is_problem, tile):
    is_problem(client.get(f"/api/sheets/{sheet['sha256']}/1/tiles/{tile}.png"), 404, "no-such-tile")


def test_the_same_file_twice_is_one_sheet(upload, gradient):
    first, second = upload(png(gradient), "a.png").json, upload(png(gradient), "b.png").json
    assert first["sha256"] == second["sha256"]


@pytest.mark.parametrize(
    ("name", "kept"),
    [("C:\\scans\\pump 7.png", "pump 7.png"), ("../../etc/x.png", "x.png"), ("..", "sheet"), ("/", "sheet"), ("Ø 320.png", "Ø 320.png")],
)
def test_a_file_name_never_holds_a_folder(name, kept):
    assert bare_name(name) == kept


def test_the_file_name_of_an_upload_is_kept(upload, gradient):
    assert upload(png(gradient), "../Ø 320.png").json["file_name"] == "Ø 320.png"


def tiff(frames):
    out = io.BytesIO()
    images = [Image.fromarray(f) for f in frames]
    images[0].save(out, "TIFF", save_all=True, append_images=images[1:])
    return out.getvalue()


def test_every_page_of_a_file_can_be_seen(client, upload, gradient, is_problem):
    made = upload(tiff([gradient, 255 - gradient]), "two.tif").json
    assert made["pages"] == 2
    page = client.get(f"/api/sheets/{made['sha256']}/2").json
    assert np.array_equal(assemble(client, page, page["max_zoom"]), 255 - gradient)
    problem = is_problem(client.get(f"/api/sheets/{made['sha256']}/3"), 404, "no-such-page")
    assert "2 pages" in problem["detail"]


def pdf(encrypt=False):
    document = pypdfium2.PdfDocument.new()
    document.new_page(144, 72)
    out = io.BytesIO()
    document.save(out)
    document.close()
    return out.getvalue()


def test_a_pdf_page_is_drawn_at_the_resolution_asked_for(client, upload):
    made = upload(pdf(), "chart.pdf").json
    assert made["media"] == "application/pdf" and (made["page"]["width"], made["page"]["height"]) == (600, 300)
    page = client.get(f"/api/sheets/{made['sha256']}/1?dpi=150").json
    assert (page["width"], page["height"], page["dpi"], page["dpi_x"]) == (300, 150, 150, 150)


def bomb():
    """A PNG that claims 30 000 x 30 000 pixels in a few bytes."""

    def chunk(kind, body):
        return struct.pack(">I", len(body)) + kind + body + struct.pack(">I", zlib.crc32(kind + body))

    head = chunk(b"IHDR", struct.pack(">IIBBBBB", 30_000, 30_000, 1, 0, 0, 0, 0))
    return b"\x89PNG\r\n\x1a\n" + head + chunk(b"IDAT", zlib.compress(bytes(100_000))) + chunk(b"IEND", b"")


ENCRYPTED = (
    b"%PDF-1.4\n1 0 obj<</Type/Catalog/Pages 2 0 R>>endobj\n2 0 obj<</Type/Pages/Kids[3 0 R]/Count 1>>endobj\n"
    b"3 0 obj<</Type/Page/Parent 2 0 R/MediaBox[0 0 72 72]>>endobj\n"
    b"4 0 obj<</Filter/Standard/V 1/R 2/P -4/O<" + b"28" * 32 + b">/U<" + b"41" * 32 + b">>>endobj\n"
    b"trailer<</Size 5/Root 1 0 R/Encrypt 4 0 R/ID[<00><00>]>>\n%%EOF\n"
)


@pytest.mark.parametrize(
    ("data", "name", "status", "code"),
    [
        (b"hello, this is no image" * 50, "note.txt", 422, "not-an-image"),
        (b"", "empty.png", 422, "not-an-image"),
        (b"%PDF-1.7\n" + b"rubbish" * 40, "broken.pdf", 422, "truncated"),
        (ENCRYPTED, "locked.pdf", 422, "encrypted"),
    ],
    ids=["text", "empty", "broken-pdf", "encrypted-pdf"],
)
def test_what_is_no_sheet_is_refused_in_words(client, upload, is_problem, data, name, status, code):
    is_problem(upload(data, name), status, code)
    assert client.get("/api/drafts").status_code == 200


def test_a_truncated_scan_is_refused(upload, gradient, is_problem):
    is_problem(upload(png(gradient)[:-2000]), 422, "truncated")


def test_a_bomb_is_refused_before_it_is_decoded(upload, is_problem):
    problem = is_problem(upload(bomb(), "bomb.png"), 413, "too-large")
    assert "pixels" in problem["detail"] and "dpi" in problem["detail"]


def test_a_refused_file_leaves_nothing_on_the_desk(app, upload):
    upload(b"no image at all")
    db = sqlite3.connect(app.extensions["curvebank"].desk)
    assert db.execute("SELECT count(*) FROM sheet").fetchone() == (0,)
    db.close()


def test_a_sheet_survives_a_lost_cache(app, client, sheet, gradient):
    import shutil

    services = app.extensions["curvebank"]
    shutil.rmtree(services.cache)
    services.pages._open.clear()
    assert np.array_equal(assemble(client, sheet["page"], 2), gradient)


class TestForgotten:
    """Sheets that never became a draft leave the desk a week later, when the server starts."""

    @pytest.fixture
    def aged(self, app):
        """Make a sheet look as if it was added some days ago."""

        def age(sha256, days):
            with closing(sqlite3.connect(app.extensions["curvebank"].desk)) as db, db:
                moment = written(datetime.now(UTC) - timedelta(days=days))
                assert db.execute("UPDATE sheet SET added_at = ? WHERE sha256 = ?", (moment, sha256)).rowcount == 1

        return age

    @pytest.fixture
    def kept(self, app):
        """Start a server again on the same desk: the sheets that are still there."""

        def restart():
            s = app.extensions["curvebank"]
            create_app({"BANK": str(s.bank), "CACHE": str(s.cache)}).extensions["curvebank"].close()
            with closing(sqlite3.connect(s.desk)) as db:
                return {sha for (sha,) in db.execute("SELECT sha256 FROM sheet")}

        return restart

    @pytest.mark.parametrize(("days", "stays"), [(0, True), (6.9, True), (7.1, False), (400, False)])
    def test_only_the_old_go(self, sheet, aged, kept, days, stays):
        aged(sheet["sha256"], days)
        assert kept() == ({sheet["sha256"]} if stays else set())

    def test_a_sheet_of_a_draft_stays_however_old(self, client, draft, aged, kept):
        aged(draft["sheet_sha256"], 400)
        assert kept() == {draft["sheet_sha256"]}
        client.delete(f"/api/drafts/{draft['id']}")
        assert kept() == set()

    def test_a_sheet_that_only_an_earlier_step_names_stays(self, draft, put, aged, kept, upload, gradient):
        """Undo must be able to lead back to it."""
        other = upload(png(255 - gradient)).json["sha256"]
        doc = {**draft["doc"], "sheet": {**draft["doc"]["sheet"], "sha256": other}}
        assert put(draft["id"], doc, 1).status_code == 200
        for sha in (draft["sheet_sha256"], other):
            aged(sha, 400)
        assert kept() == {draft["sheet_sha256"], other}

    def test_adding_it_again_makes_it_new(self, sheet, upload, gradient, aged, kept):
        aged(sheet["sha256"], 400)
        out = io.BytesIO()
        Image.fromarray(gradient).save(out, "PNG", dpi=(300, 300))
        assert upload(out.getvalue()).json["sha256"] == sheet["sha256"]
        assert kept() == {sheet["sha256"]}

    def test_a_desk_that_is_held_is_no_reason_not_to_start(self, app, sheet, aged, kept, monkeypatch):
        aged(sheet["sha256"], 400)
        monkeypatch.setattr("curvebank_web.desk_file.BUSY_MS", 10)
        with closing(sqlite3.connect(app.extensions["curvebank"].desk, isolation_level=None)) as other:
            other.execute("BEGIN IMMEDIATE")
            assert kept() == {sheet["sha256"]}
            other.execute("ROLLBACK")
        assert kept() == set()


class TestPyramid:
    """The arithmetic of levels."""

    @pytest.mark.parametrize(
        ("size", "zoom"), [((1, 1), 0), ((256, 256), 0), ((257, 1), 1), ((512, 512), 1), ((513, 10), 2), ((32000, 5), 7)]
    )
    def test_zoom_levels(self, size, zoom):
        assert max_zoom(*size) == zoom

    def test_an_odd_edge_is_repeated(self):
        got = halve(np.array([[10, 20, 30], [10, 20, 31]], np.uint8))
        assert got.tolist() == [[15, 31]]

    def test_a_page_name_tells_pages_apart(self):
        names = {PageKey("a" * 64, p, d, t).name for p in (1, 2) for d in (150, 300.5) for t in (0, 90)}
        assert len(names) == 8
