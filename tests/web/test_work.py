"""The main path over HTTP on a drawn chart with known curves: look, run, result, save, release, read back."""

import json

import numpy as np
import pytest

import curvebank


def by_id(items):
    return {item["id"]: item for item in items}


def head_of(flow, diameter_mm):
    """The heads the chart was drawn from (see the chart fixture)."""
    r = diameter_mm / 320.0
    return r**2 * (40.0 + 0.02 * (flow / r) - 0.0022 * (flow / r) ** 2)


class TestPreview:
    """A look while the user clicks."""

    def look(self, client, draft, curve, seq=1, **panel):
        body = {"panel": draft["doc"]["panels"][0] | panel, "curve": curve, "seq": seq}
        return client.post(f"/api/drafts/{draft['id']}/preview", json=body)

    @pytest.fixture
    def ready(self, client, chart_draft, finish):
        """The draft once its sheet is prepared."""
        first = self.look(client, chart_draft, None, seq=7)
        assert first.status_code == 202 and first.json["pending"] is True and first.json["seq"] == 7
        assert first.json["job"]["kind"] == "prepare"
        assert finish(first.json["job"])["state"] == "done"
        return chart_draft

    def test_axes_alone_then_a_curve(self, client, ready):
        seen = self.look(client, ready, None, seq=8)
        assert seen.status_code == 200 and seen.json["seq"] == 8 and seen.json["curve"] is None
        assert seen.json["panel"]["residual_px"] < 0.2
        assert set(seen.json["panel"]["mark_residuals"]) == {"flow", "head", "eta"}
        curve = self.look(client, ready, ready["doc"]["curves"][1], seq=9).json["curve"]
        flow, head = np.array(curve["points"]).T
        assert curve["id"] == "H-298" and curve["error"] is None and len(curve["pixels"]) == len(curve["points"]) > 300
        assert np.abs(head - head_of(flow, 298.0)).max() < 0.1  # 0.2 % of the 50 m axis, half a line width

    def test_a_mark_typed_wrong_is_named(self, client, ready):
        axes = json.loads(json.dumps(ready["doc"]["panels"][0]["axes"]))
        axes["head"]["marks"][1]["value"] = 52
        seen = self.look(client, ready, None, axes=axes).json
        assert any(s["axis"] == "head" for s in seen["panel"]["suspects"])

    def test_a_mask_hides_what_it_covers_and_says_so(self, client, ready):
        line = ready["doc"]["curves"][1]
        body = {"panel": ready["doc"]["panels"][0], "curve": line, "masks": [{"brush": [line["clicks"][1]], "width_px": 30}]}
        seen = client.post(f"/api/drafts/{ready['id']}/preview", json=body).json["curve"]
        assert seen["error"] is None and "mask-over-click" in [w["code"] for w in seen["warnings"]]

    def test_a_guide_under_the_hand_leaves_the_rest_of_the_trace_alone(self, client, ready):
        """Live: far from the guide the trace stays to the bit. Without it, the whole line is followed."""
        line = ready["doc"]["curves"][1]
        whole = np.array(self.look(client, ready, line).json["curve"]["pixels"])
        at = whole[len(whole) // 2]
        body = {"panel": ready["doc"]["panels"][0], "curve": line | {"guides": [[at[0], at[1] + 1.5]]}, "live": True}
        seen = client.post(f"/api/drafts/{ready['id']}/preview", json=body).json["curve"]
        assert seen["error"] is None
        live = np.array(seen["pixels"])
        far = np.abs(whole[:, 0] - at[0]) > 250
        assert far.sum() > 50 and np.isin(whole[far], live).all()
        again = client.post(f"/api/drafts/{ready['id']}/preview", json=body | {"live": False}).json["curve"]
        assert again["error"] is None and np.abs(len(again["pixels"]) - len(live)) < 5

    def test_a_mask_that_is_none_is_a_problem_with_its_path(self, client, ready, is_problem):
        body = {"panel": ready["doc"]["panels"][0], "masks": [{"brush": [], "width_px": 30}]}
        answer = client.post(f"/api/drafts/{ready['id']}/preview", json=body)
        assert is_problem(answer, 422, answer.json["code"])["path"].startswith("$.sheet.masks[0]")

    def test_the_printed_lines_found_stand_where_they_were_drawn(self, client, ready):
        """The chart's grid: eleven lines each way, 70 px and 54 px apart."""
        found = client.get(f"/api/drafts/{ready['id']}/lines").json
        heights = sorted(np.mean([p[1] for p in line["points"]]) for line in found["level"])
        places = sorted(np.mean([p[0] for p in line["points"]]) for line in found["upright"])
        assert len(heights) == 11 and np.allclose(heights, 60 + 54 * np.arange(11), atol=0.1)
        assert len(places) == 11 and np.allclose(places, 100 + 70 * np.arange(11), atol=0.1)
        assert all(line["sigma_px"] < 0.2 for line in found["level"] + found["upright"])

    def test_a_mark_snaps_to_the_crossing_it_means(self, client, ready, is_problem):
        """The crossing of flow 50 and head 25 was drawn at (450, 330)."""
        near = client.get(f"/api/drafts/{ready['id']}/snap?x=453.1&y=327.4&radius=8").json["snap"]
        assert near["kind"] == "crossing" and near["at"] == pytest.approx([450, 330], abs=0.15) and 0 < near["sigma_px"] < 0.2
        assert client.get(f"/api/drafts/{ready['id']}/snap?x=485&y=355&radius=5").json["snap"] is None
        is_problem(client.get(f"/api/drafts/{ready['id']}/snap?x=a&y=1"), 422, "validation")

    def test_what_cannot_be_calibrated_is_a_problem_with_its_path(self, client, ready, is_problem):
        axes = json.loads(json.dumps(ready["doc"]["panels"][0]["axes"]))
        axes["head"]["marks"] = axes["head"]["marks"][:1]
        answer = self.look(client, ready, None, axes=axes)
        problem = is_problem(answer, 422, answer.json["code"])
        assert problem["path"].endswith("axes.head.marks") and problem["path"].startswith("$.panel")

    def test_one_click_is_an_error_of_the_curve_only(self, client, ready):
        curve = ready["doc"]["curves"][0] | {"clicks": ready["doc"]["curves"][0]["clicks"][:1]}
        seen = self.look(client, ready, curve)
        assert seen.status_code == 200 and seen.json["curve"]["error"]["message"] and seen.json["panel"]["residual_px"] < 0.2

    def test_an_unfinished_pump_does_not_hinder(self, client, ready, put):
        put(ready["id"], ready["doc"] | {"pump": {"maker": "", "model": "", "stages": 0, "speed_rpm": "?"}}, 1)
        assert self.look(client, ready, ready["doc"]["curves"][0]).json["curve"]["error"] is None

    def test_a_damaged_cache_is_made_again(self, app, client, ran, finish):
        for path in (app.extensions["curvebank"].cache / "prepared").rglob("ink.npy"):
            path.write_bytes(path.read_bytes()[:1000])
        again = self.look(client, ran, None)
        assert again.status_code == 202 and finish(again.json["job"])["state"] == "done"
        assert self.look(client, ran, None).status_code == 200

    def test_without_a_sheet_there_is_nothing_to_look_at(self, client, is_problem):
        bare = client.post("/api/drafts", json={"doc": {}}).json
        is_problem(client.post(f"/api/drafts/{bare['id']}/preview", json={"panel": {}, "curve": None, "seq": 1}), 422, "no-sheet")


class TestResult:
    """What a run gives."""

    def test_curves_are_those_that_were_drawn(self, ran):
        result = ran["result"]["result"]
        assert result["error"] is None and [c["id"] for c in result["curves"]] == ["H-320", "H-298", "H-276", "E-320"]
        for curve in result["curves"][:3]:
            flow, head = np.array(curve["points"]).T
            assert curve["error"] is None
            assert np.abs(head - head_of(flow, curve["diameter_mm"])).max() < 0.1

    def test_ghosts_lie_on_their_neighbours_on_the_paper(self, ran):
        family = ran["result"]["family"]["head"]
        assert family["verdict"] == "sound"
        assert family["exponents"]["value"][0] == pytest.approx(2.0, abs=0.05)  # the chart was drawn by the simple trim law
        curves = by_id(ran["result"]["result"]["curves"])
        seen = [(c["id"], g["to_id"]) for c in family["curves"] for g in c["ghosts"]]
        assert seen == [("H-320", "H-298"), ("H-298", "H-320"), ("H-298", "H-276"), ("H-276", "H-298")]
        for row in family["curves"]:
            for ghost in row["ghosts"]:
                x, y = np.array(ghost["pixels"]).T
                on = np.array(curves[ghost["to_id"]]["pixels"])
                inside = (x > on[:, 0].min()) & (x < on[:, 0].max())
                assert inside.sum() > 30 and len(ghost["pixels"]) == len(ghost["points"])
                assert np.abs(y[inside] - np.interp(x[inside], on[:, 0], on[:, 1])).max() < 1.0

    def test_it_belongs_to_its_step(self, client, ran, put, is_problem):
        url = f"/api/drafts/{ran['id']}/result"
        put(ran["id"], ran["doc"] | {"x-note": "later"}, 1)
        problem = is_problem(client.get(url), 404, "not-run")
        assert problem["step"] == 2 and problem["nearest"] == 1
        assert client.get(f"{url}?step=1").json["result"] == ran["result"]["result"]
        is_problem(client.get(f"{url}?step=5"), 404, "no-such-step")

    def test_running_again_gives_the_same_to_the_bit(self, client, ran, finish):
        job = finish(client.post(f"/api/drafts/{ran['id']}/run").json)
        assert client.get(job["result_url"]).json["result"] == ran["result"]["result"]

    def test_it_equals_what_the_library_gives(self, ran, chart):
        from curvebank import digitise, recipe

        made = digitise.run(recipe.to_bytes(ran["doc"]), chart[0], {})
        assert digitise.result_json(made)["curves"] == ran["result"]["result"]["curves"]

    def test_a_document_that_is_no_recipe_gives_a_result_that_says_so(self, client, chart_draft, put, finish):
        put(chart_draft["id"], chart_draft["doc"] | {"curves": [{"id": "H"}]}, 1)
        job = finish(client.post(f"/api/drafts/{chart_draft['id']}/run").json)
        assert job["state"] == "done"
        result = client.get(job["result_url"]).json["result"]
        assert result["error"]["code"] == "recipe" and result["error"]["path"].startswith("$.curves[0]")

    def test_a_page_that_is_not_there_gives_a_result_that_says_so(self, client, chart_draft, put, finish):
        put(chart_draft["id"], chart_draft["doc"] | {"sheet": chart_draft["doc"]["sheet"] | {"page": 4}}, 1)
        job = finish(client.post(f"/api/drafts/{chart_draft['id']}/run").json)
        assert client.get(job["result_url"]).json["result"]["error"]["code"] == "no-such-page"

    def test_a_recipe_that_does_not_state_its_sheets_hash_is_read_on_the_sheet_it_lies_on(self, client, chart_draft, put, finish, save):
        sheet = {k: v for k, v in chart_draft["doc"]["sheet"].items() if k != "sha256"}
        put(chart_draft["id"], chart_draft["doc"] | {"sheet": sheet}, 1)
        assert client.get(f"/api/drafts/{chart_draft['id']}").json["page"] == chart_draft["page"]
        job = finish(client.post(f"/api/drafts/{chart_draft['id']}/run").json)
        assert client.get(job["result_url"]).json["result"]["sheet"]["sha256"] == chart_draft["sheet_sha256"]
        assert save(chart_draft["id"]).status_code == 201

    def test_a_typed_table_needs_no_sheet(self, client, finish):
        rows = [[0, 40], [20, 39.5], [40, 37.3], [60, 33.3], [80, 27.5]]
        curve = {"id": "T", "kind": "table", "quantity": "head", "diameter_mm": 320, "rows": rows, "x_unit": "m3/h", "y_unit": "m"}
        doc = {"recipe": 1, "pump": {"maker": "Lark", "model": "T 1", "speed_rpm": 1450}, "curves": [curve]}
        made = client.post("/api/drafts", json={"doc": doc}).json
        job = finish(client.post(f"/api/drafts/{made['id']}/run").json)
        result = client.get(job["result_url"]).json["result"]
        assert result["error"] is None and result["curves"][0]["points"][3] == [60, 33.3]


class TestSave:
    """From the desk into the bank."""

    def test_saved_and_released_numbers_reach_a_script(self, app, client, ran, save):
        answer = save(ran["id"], key="LARK-WM-320", release=True)
        assert answer.status_code == 201
        assert answer.json | {"step": 1} == answer.json and answer.json["url"] == "/pumps/LARK-WM-320" and answer.json["revision"] == 1
        bank = curvebank.open(app.extensions["curvebank"].bank)
        pump = bank.pump("LARK-WM-320")
        assert pump.head(flow_m3h=50.0, diameter_mm=298.0, speed_rpm=1450) == pytest.approx(head_of(50.0, 298.0), abs=0.05)
        bank.close()
        assert client.get(f"/api/drafts/{ran['id']}/result").json["saved"][0]["revision"] == 1

    def test_the_key_defaults_to_the_recipes(self, ran, save):
        assert save(ran["id"]).json["key"] == "LARK-WM-320"

    def test_the_same_save_again_makes_no_second_revision(self, client, ran, save, put):
        first = save(ran["id"], save_key="save-1", release=True)
        put(ran["id"], ran["doc"] | {"x-note": "gone on"}, 1)
        again = save(ran["id"], save_key="save-1", release=True)
        assert again.status_code == 201 and again.json == first.json
        assert len(client.get("/api/pumps/LARK-WM-320").json["revisions"]) == 1

    def test_a_save_key_of_another_draft_is_refused(self, client, ran, save, is_problem):
        save(ran["id"], save_key="save-1")
        other = client.post("/api/drafts", json={"doc": ran["doc"]}).json
        is_problem(save(other["id"], save_key="save-1"), 409, "save-key")

    def test_what_was_not_run_is_not_saved(self, client, chart_draft, save, is_problem):
        is_problem(save(chart_draft["id"]), 409, "not-run")
        assert client.get("/api/pumps").json["items"] == []

    def test_what_the_person_saw_is_saved_though_the_draft_went_on(self, client, ran, save, put):
        put(ran["id"], ran["doc"] | {"curves": []}, 1)
        assert save(ran["id"], step=1).json["step"] == 1
        assert len(client.get("/api/pumps/LARK-WM-320/revisions/1").json["curves"]) == 4

    def test_a_failed_run_is_not_saved(self, client, chart_draft, put, finish, save, is_problem):
        put(chart_draft["id"], chart_draft["doc"] | {"curves": [{"id": "H"}]}, 1)
        finish(client.post(f"/api/drafts/{chart_draft['id']}/run").json)
        is_problem(save(chart_draft["id"]), 422, "recipe")

    def test_a_held_bank_says_so_and_keeps_the_draft(self, app, client, ran, save, is_problem, monkeypatch):
        import sqlite3

        from curvebank.bank.store import Store

        monkeypatch.setattr(Store, "open", classmethod(lambda cls, path: cls(path, timeout_s=0.1)))
        holder = sqlite3.connect(app.extensions["curvebank"].bank, isolation_level=None)
        holder.execute("BEGIN IMMEDIATE")
        is_problem(save(ran["id"], save_key="save-1"), 503, "locked")
        holder.execute("ROLLBACK")
        holder.close()
        assert save(ran["id"], save_key="save-1").status_code == 201

    def test_nothing_fitting_the_bank_is_refused(self, ran, save, is_problem):
        is_problem(save(ran["id"], key="lower case"), 422, "validation")


def test_a_stored_revision_goes_back_to_the_desk_and_forward_again(client, ran, save, finish, put):
    save(ran["id"], release=True)
    client.delete(f"/api/drafts/{ran['id']}")
    back = client.post("/api/drafts", json={"from_pump": "LARK-WM-320", "revision": 1})
    assert back.status_code == 201
    back = back.json
    assert back["from_pump"] == {"key": "LARK-WM-320", "revision": 1} and back["page"]["width"] == 900
    assert back["doc"]["curves"] == ran["doc"]["curves"]
    doc = back["doc"] | {"curves": back["doc"]["curves"][:2]}
    assert put(back["id"], doc, 1).json == {"step": 2}
    finish(client.post(f"/api/drafts/{back['id']}/run").json)
    assert save(back["id"], release=True, why="Two lines only").json["revision"] == 2
    states = {r["number"]: r["state"] for r in client.get("/api/pumps/LARK-WM-320").json["revisions"]}
    assert states == {1: "superseded", 2: "released"}


def test_a_job_can_be_stopped_and_the_draft_is_none_the_worse(client, chart_draft, finish):
    job = client.post(f"/api/drafts/{chart_draft['id']}/run").json
    stopped = client.delete(f"/api/jobs/{job['id']}")
    assert stopped.status_code == 200
    assert finish(stopped.json)["state"] == "cancelled"
    again = finish(client.post(f"/api/drafts/{chart_draft['id']}/run").json)
    assert again["state"] == "done" and again["id"] != job["id"]


def test_asking_twice_for_a_run_starts_one(client, chart_draft, finish):
    first = client.post(f"/api/drafts/{chart_draft['id']}/run").json
    second = client.post(f"/api/drafts/{chart_draft['id']}/run").json
    assert first["id"] == second["id"]
    finish(first)


def test_a_new_draft_prepares_its_sheet_ahead(app, client, upload, chart, finish):
    services = app.extensions["curvebank"]
    services.prepare_ahead = True
    sha = upload(chart[0]).json["sha256"]
    made = client.post("/api/drafts", json={"sheet": {"sha256": sha}}).json
    look = client.post(f"/api/drafts/{made['id']}/preview", json={"panel": chart[1]["panels"][0], "seq": 1})
    if look.status_code == 202:
        assert look.json["job"]["kind"] == "prepare"
        finish(look.json["job"])
        look = client.post(f"/api/drafts/{made['id']}/preview", json={"panel": chart[1]["panels"][0], "seq": 2})
    assert look.status_code == 200 and look.json["panel"]["id"] == "main"
