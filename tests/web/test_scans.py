"""A better scan of the same paper and the second half of a sheet over HTTP: asked for, worked on, looked at, taken as a step."""

import io

import numpy as np
import pytest
from PIL import Image

SCALE, TURN_DEG = 1.6, 0.7


def as_png(picture):
    out = io.BytesIO()
    picture.save(out, "PNG")
    return out.getvalue()


@pytest.fixture(scope="session")
def finer(chart):
    """The chart scanned again: finer, a little turned."""
    picture = Image.open(io.BytesIO(chart[0]))
    large = picture.resize((round(picture.width * SCALE), round(picture.height * SCALE)), Image.Resampling.BICUBIC)
    return as_png(large.rotate(TURN_DEG, Image.Resampling.BICUBIC, expand=True, fillcolor=245))


def sheet_of(upload, data, name="other.png"):
    return {"sha256": upload(data, name).json["sha256"]}


def outcome_of(client, finish, started):
    assert started.status_code == 202, started.get_data(as_text=True)
    job = finish(started.json)
    assert job["state"] == "done", job
    return client.get(job["result_url"]).json


class TestBetterScan:
    """The same paper scanned better."""

    def test_marks_and_clicks_are_carried_and_each_change_is_told(self, client, chart_draft, upload, finer, finish, put):
        choice = sheet_of(upload, finer)
        seen = outcome_of(client, finish, client.post(f"/api/drafts/{chart_draft['id']}/carry", json={"sheet": choice}))
        report, recipe = seen["report"], seen["recipe"]
        assert seen["step"] == 1 and seen["page"]["sha256"] == choice["sha256"] == recipe["sheet"]["sha256"]
        assert report["registration"]["scale"] == pytest.approx(SCALE, rel=0.002)
        assert abs(report["registration"]["turn_deg"]) == pytest.approx(TURN_DEG, abs=0.05)
        assert recipe["pump"] == chart_draft["doc"]["pump"]
        assert [c["id"] for c in report["curves"]] == [c["id"] for c in chart_draft["doc"]["curves"]]
        for curve in report["curves"]:
            assert curve["error_now"] is None and len(curve["now_pixels"]) > 300
            assert curve["largest_pct"] < 0.5
        kept = put(chart_draft["id"], recipe, seen["step"], "better scan taken")
        assert kept.status_code == 200
        draft = client.get(f"/api/drafts/{chart_draft['id']}").json
        assert draft["page"]["sha256"] == choice["sha256"]
        undone = client.post(f"/api/drafts/{chart_draft['id']}/head", json={"step": 1}).json
        assert undone["page"]["sha256"] == chart_draft["page"]["sha256"]

    def test_another_paper_is_refused_in_words(self, client, chart_draft, upload, finish):
        noise = Image.fromarray(np.random.default_rng(5).integers(0, 255, (700, 900)).astype(np.uint8))
        started = client.post(f"/api/drafts/{chart_draft['id']}/carry", json={"sheet": sheet_of(upload, as_png(noise))})
        job = finish(started.json)
        assert job["state"] == "failed" and job["problem"]["code"] == "not-the-same-paper", job
        assert client.get(f"/api/drafts/{chart_draft['id']}").json["step"] == 1

    def test_the_very_same_page_and_an_unknown_sheet_are_problems(self, client, chart_draft, is_problem):
        own = {"sha256": chart_draft["page"]["sha256"]}
        is_problem(client.post(f"/api/drafts/{chart_draft['id']}/carry", json={"sheet": own}), 422, "same-sheet")
        is_problem(client.post(f"/api/drafts/{chart_draft['id']}/carry", json={"sheet": {"sha256": "0" * 64}}), 404, "no-such-sheet")
        is_problem(client.get(f"/api/drafts/{chart_draft['id']}/outcomes/none"), 404, "no-such-outcome")


class TestTwoHalves:
    """A sheet in two scans."""

    def test_halves_that_overlap_become_one_sheet_and_marks_of_the_first_stay(self, client, chart, upload, finish):
        picture = Image.open(io.BytesIO(chart[0]))
        left, right = picture.crop((0, 0, 560, picture.height)), picture.crop((300, 0, picture.width, picture.height))
        first = upload(as_png(left), "left.png").json["sha256"]
        draft = client.post("/api/drafts", json={"sheet": {"sha256": first}}).json
        started = client.post(f"/api/drafts/{draft['id']}/join", json={"sheet": sheet_of(upload, as_png(right), "right.png")})
        seen = outcome_of(client, finish, started)
        assert seen["sheet"]["file"] == "left + right.png" and seen["page"]["sha256"] == seen["sheet"]["sha256"]
        assert seen["page"]["width"] == pytest.approx(picture.width, abs=2)
        tile = client.get(f"/api/sheets/{seen['sheet']['sha256']}/1/tiles/{seen['page']['max_zoom']}/0/0.png")
        assert np.array_equal(np.asarray(Image.open(io.BytesIO(tile.data)).convert("L")), np.asarray(left)[:256, :256])

    def test_a_narrow_strip_of_grid_fits_in_many_ways_until_two_points_are_tied(self, client, chart, upload, finish):
        picture = Image.open(io.BytesIO(chart[0]))
        first = upload(as_png(picture.crop((0, 0, 560, picture.height))), "left.png").json["sha256"]
        second = sheet_of(upload, as_png(picture.crop((420, 0, picture.width, picture.height))), "right.png")
        draft = client.post("/api/drafts", json={"sheet": {"sha256": first}}).json
        job = finish(client.post(f"/api/drafts/{draft['id']}/join", json={"sheet": second}).json)
        assert job["problem"]["code"] == "no-overlap" and "ties" in job["problem"]["detail"]
        ties = [[[450, 330], [30, 330]], [[520, 114], [100, 114]]]
        seen = outcome_of(client, finish, client.post(f"/api/drafts/{draft['id']}/join", json={"sheet": second, "ties": ties}))
        assert seen["report"]["found"] == "ties" and seen["page"]["width"] == picture.width

    def test_halves_that_share_nothing_ask_for_ties(self, client, chart, upload, finish):
        picture = Image.open(io.BytesIO(chart[0]))
        first = upload(as_png(picture.crop((0, 0, 430, picture.height))), "left.png").json["sha256"]
        draft = client.post("/api/drafts", json={"sheet": {"sha256": first}}).json
        blank = Image.fromarray(np.full((700, 400), 245, np.uint8))
        started = client.post(f"/api/drafts/{draft['id']}/join", json={"sheet": sheet_of(upload, as_png(blank), "blank.png")})
        job = finish(started.json)
        assert job["state"] == "failed" and job["problem"]["code"] == "no-overlap", job
