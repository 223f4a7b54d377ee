"""The catalogue over HTTP: lists, one pump, one revision, readings, duty points, exports, events, settings."""

import csv
import io
import json
import uuid

import numpy as np
import pytest

import curvebank


def head_of(flow, diameter_mm):
    """The heads the chart was drawn from (see the chart fixture)."""
    r = diameter_mm / 320.0
    return r**2 * (40.0 + 0.02 * (flow / r) - 0.0022 * (flow / r) ** 2)


@pytest.fixture
def pump(ran, save):
    """One released pump, LARK-WM-320."""
    assert save(ran["id"], release=True).status_code == 201
    return ran


@pytest.fixture
def more(app, pump, client):
    """Three further pumps under other keys, drafts: saved straight through the library from the same result."""
    import sqlite3

    from curvebank_web import record_pack

    services = app.extensions["curvebank"]
    db = sqlite3.connect(services.desk)
    recipe, packed = db.execute("SELECT recipe, digitised FROM result").fetchone()
    (data,) = db.execute("SELECT bytes FROM sheet").fetchone()
    db.close()
    with curvebank.open(services.bank, write=True) as store:
        for key in ("OWL-A-1", "OWL-B-2", "FINCH-100"):
            store.save(record_pack.unpack(packed), recipe, data, key=key, who="A. Reader", why="Copy", save_key=uuid.uuid4().hex)


URL = "/api/pumps/LARK-WM-320/revisions/1"


class TestListing:
    """The catalogue."""

    def test_an_empty_bank_lists_nothing(self, client):
        assert client.get("/api/pumps").json == {"items": [], "next": None}

    def test_a_pump_shows_what_a_map_and_a_table_need(self, client, pump):
        (item,) = client.get("/api/pumps").json["items"]
        bep = item.pop("bep")
        assert item == {
            "key": "LARK-WM-320",
            "maker": "Lark",
            "model": "WM 320",
            "state": "released",
            "revision": 1,
            "stages": 1,
            "rated_rpm": 1450,
            "diameters_mm": [276, 298, 320],
            "quantities": ["head", "efficiency"],
            "findings": item["findings"],
        }
        assert item["findings"]["error"] == 0 and item["findings"]["note"] + item["findings"]["warning"] > 0
        assert bep["flow_m3h"] == pytest.approx(62.0, abs=1.0)  # the chart's efficiency is a parabola about 62 m3/h
        assert bep["head_m"] == pytest.approx(head_of(bep["flow_m3h"], 320.0), abs=0.1)

    def test_pages_follow_each_other_without_gap_or_repeat(self, client, more):
        seen, cursor = [], ""
        while cursor is not None:
            page = client.get(f"/api/pumps?limit=3&cursor={cursor}").json
            seen += [i["key"] for i in page["items"]]
            cursor = page["next"]
        assert seen == ["FINCH-100", "LARK-WM-320", "OWL-A-1", "OWL-B-2"]

    @pytest.mark.parametrize(
        ("query", "keys"),
        [
            ("q=owl", ["OWL-A-1", "OWL-B-2"]),
            ("q=lark wm", ["FINCH-100", "LARK-WM-320", "OWL-A-1", "OWL-B-2"]),  # maker and model are Lark WM 320 throughout
            ("q=%25", []),
            ("q=_", []),
            ("state=released", ["LARK-WM-320"]),
            ("state=draft&q=FINCH", ["FINCH-100"]),
            ("state=withdrawn", []),
        ],
    )
    def test_words_and_states_narrow_it(self, client, more, query, keys):
        assert [i["key"] for i in client.get(f"/api/pumps?{query}").json["items"]] == keys

    @pytest.mark.parametrize("query", ["limit=0", "limit=100000", "state=lost", "limit=x"])
    def test_a_query_that_does_not_fit_is_refused(self, client, is_problem, query):
        is_problem(client.get(f"/api/pumps?{query}"), 422, "validation")


class TestOnePump:
    """History and one revision."""

    def test_history_is_told_in_order(self, client, pump, save):
        save(pump["id"], why="Second look", release=True)
        seen = client.get("/api/pumps/LARK-WM-320").json
        assert [(r["number"], r["state"], r["parent"], r["why"]) for r in seen["revisions"]] == [
            (1, "superseded", None, "First issue"),
            (2, "released", 1, "Second look"),
        ]
        assert seen["released"] == 2 and (seen["maker"], seen["model"], seen["stages"]) == ("Lark", "WM 320", 1)
        assert [(e["kind"], e["revision"]) for e in seen["events"]] == [
            ("saved", 1),
            ("released", 1),
            ("saved", 2),
            ("superseded", 1),
            ("released", 2),
        ]

    def test_a_revision_brings_its_curves_back_onto_the_scan(self, client, pump):
        seen = client.get(URL).json
        assert seen["state"] == "released" and seen["number"] == 1 and seen["who"] == "A. Reader"
        traced = {c["id"]: c for c in pump["result"]["result"]["curves"]}
        assert [c["id"] for c in seen["curves"]] == list(traced)
        for curve in seen["curves"]:
            whole = np.array(traced[curve["id"]]["pixels"])
            kept = np.array(curve["trace_pixels"])
            assert len(kept) == len(curve["points"]) == len(curve["sigma"]) == 200
            assert np.abs(kept[[0, -1]] - whole[[0, -1]]).max() < 0.01  # float32 keeps 1e-4 px here, two decimals are sent
            assert curve["fit"]["coefficients"] == pytest.approx(traced[curve["id"]]["fit"]["coefficients"], rel=1e-12)
            assert curve["fit"]["domain"] == traced[curve["id"]]["fit"]["domain"]
        (sheet,) = seen["sheets"]
        assert (sheet["sha256"], sheet["page"], sheet["width"], sheet["height"]) == (pump["sheet_sha256"], 1, 900, 700)
        assert seen["panels"][0]["id"] == "main" and len(seen["panels"][0]["map"]["pixels"]) == 81
        assert seen["cautions"] and seen["made_by"]["algorithm"] and seen["findings"] and seen["waivers"] == []

    def test_its_sheet_is_shown_from_the_bank_when_the_desk_is_cleared(self, app, client, pump):
        import shutil

        client.delete(f"/api/drafts/{pump['id']}")
        services = app.extensions["curvebank"]
        shutil.rmtree(services.cache)
        services.pages._open.clear()
        sheet = client.get(URL).json["sheets"][0]
        url = f"/api/sheets/{sheet['sha256']}/{sheet['page']}"
        assert client.get(url).json | {"pages": 1} == {**{k: sheet[k] for k in client.get(url).json if k != "pages"}, "pages": 1}
        assert client.get(f"{url}/tiles/0/0/0.png").status_code == 200

    @pytest.mark.parametrize(
        ("url", "words"),
        [
            ("/api/pumps/NOBODY-1", "NOBODY-1"),
            ("/api/pumps/NOBODY-1/revisions/1", "NOBODY-1"),
            ("/api/pumps/LARK-WM-320/revisions/9", "revision 9"),
            ("/api/pumps/LARK-WM-320/revisions/9/values?quantity=head&flow_m3h=1", "revision 9"),
        ],
    )
    def test_what_is_not_there_is_named(self, client, pump, is_problem, url, words):
        assert words in is_problem(client.get(url), 404, "not-found")["detail"]

    @pytest.mark.parametrize("url", ["/api/pumps/lower", "/api/pumps/LARK-WM-320/revisions/0"])
    def test_what_cannot_be_there_is_refused(self, client, is_problem, url):
        is_problem(client.get(url), 422, "validation")


class TestReadings:
    """Numbers over HTTP are the numbers a script reads."""

    def test_values_equal_the_library(self, app, client, pump):
        flows = [20.0, 50.0, 75.5, 500.0]
        seen = client.get(f"{URL}/values?quantity=head&diameter_mm=310&speed_rpm=1400&flow_m3h={','.join(map(str, flows))}").json
        with curvebank.open(app.extensions["curvebank"].bank) as bank:
            head = bank.pump("LARK-WM-320").head
            for k in range(3):
                assert seen["value"][k] == pytest.approx(head(flows[k], 310, 1400), rel=1e-12)
                assert seen["u_print"][k] == pytest.approx(head.uncertainty(flows[k], 310, 1400, of="print"), rel=1e-9)
                assert seen["u_machine"][k] == pytest.approx(head.uncertainty(flows[k], 310, 1400, of="machine"), rel=1e-9)
        assert seen["inside"] == [True, True, True, False]
        assert seen["value"][3] is None and seen["u_print"][3] is None
        assert seen["u_machine"][0] > seen["u_print"][0] > 0 and seen["domain"][1] < 500

    def test_beyond_the_trace_only_when_asked_for(self, client, pump):
        hi = client.get(f"{URL}/values?quantity=head&diameter_mm=320&flow_m3h=50").json["domain"][1]
        asked = f"{URL}/values?quantity=head&diameter_mm=320&flow_m3h={hi + 3}"
        assert client.get(asked).json["value"] == [None]
        seen = client.get(f"{asked}&outside=extrapolate").json
        assert seen["inside"] == [False] and seen["value"][0] == pytest.approx(head_of(hi + 3, 320.0), abs=0.3)

    @pytest.mark.parametrize(
        ("query", "status", "code"),
        [
            ("quantity=head&flow_m3h=50", 422, "diameter"),
            ("quantity=power_of_will&flow_m3h=50", 422, "validation"),
            ("quantity=head&diameter_mm=320&flow_m3h=fifty", 422, "validation"),
            ("quantity=head&diameter_mm=320&flow_m3h=nan", 422, "validation"),
            ("quantity=head&diameter_mm=-3&flow_m3h=50", 422, "validation"),
            ("quantity=npshr&diameter_mm=320&flow_m3h=50", 422, "no-curve"),
            ("quantity=head&diameter_mm=500&flow_m3h=50", 422, "outside-domain"),
        ],
    )
    def test_a_question_without_an_answer_is_a_problem(self, client, pump, is_problem, query, status, code):
        is_problem(client.get(f"{URL}/values?{query}"), status, code)

    def test_duty_lies_on_both_curves(self, client, pump):
        (duty,) = client.get(f"{URL}/duty?static_head_m=10&friction_m_per_m3h2=0.004&diameter_mm=320").json["duties"]
        q = duty["flow_m3h"]
        assert duty["head_m"] == pytest.approx(10 + 0.004 * q**2, abs=1e-6)
        assert duty["head_m"] == pytest.approx(head_of(q, 320.0), abs=0.1)
        assert duty["stable"] is True and isinstance(duty["cautions"], list) and 0.5 < duty["efficiency"] < 0.8

    def test_no_duty_says_on_which_side(self, client, pump, is_problem):
        is_problem(client.get(f"{URL}/duty?static_head_m=90&friction_m_per_m3h2=0&diameter_mm=320"), 422, "no-duty")


class TestExports:
    """A revision as a file."""

    def fetch(self, client, form):
        answer = client.get(f"{URL}/export?format={form}")
        assert answer.status_code == 200, answer.get_data(as_text=True)
        return answer

    @pytest.mark.parametrize(
        ("form", "name", "media"),
        [
            ("csv-points", "LARK-WM-320-1-points.csv", "text/csv"),
            ("csv-fits", "LARK-WM-320-1-fits.csv", "text/csv"),
            ("json", "LARK-WM-320-1.json", "application/json"),
        ],
    )
    def test_it_is_saved_under_a_name_that_tells_pump_and_revision(self, client, pump, form, name, media):
        answer = self.fetch(client, form)
        assert answer.headers["Content-Disposition"] == f'attachment; filename="{name}"' and answer.mimetype == media
        if media == "text/csv":  # RFC 4180 section 3: charset and header are the parameters of text/csv
            assert answer.mimetype_params == {"charset": "utf-8", "header": "present"}
        assert answer.headers["X-Content-Type-Options"] == "nosniff" and answer.headers["Cache-Control"] == "no-store"

    def test_points_are_the_revision_s_own(self, client, pump):
        rows = list(csv.DictReader(io.StringIO(self.fetch(client, "csv-points").get_data(as_text=True))))
        curves = client.get(URL).json["curves"]
        assert [r["curve"] for r in rows] == [c["id"] for c in curves for _ in c["points"]]
        read = [[float(r["flow_m3h"]), float(r["value"])] for r in rows]
        assert read == [point for c in curves for point in c["points"]]
        assert {(r["quantity"], r["unit"]) for r in rows} == {("head", "m"), ("efficiency", "1")}

    def test_the_fits_alone_give_the_curve_of_the_paper(self, client, pump):
        rows = {r["curve"]: r for r in csv.DictReader(io.StringIO(self.fetch(client, "csv-fits").get_data(as_text=True)))}
        assert set(rows) == {"H-320", "H-298", "H-276", "E-320"}
        for name, diameter in (("H-320", 320.0), ("H-276", 276.0)):
            row = rows[name]
            t, value = (50.0 - float(row["q_mid_m3h"])) / float(row["q_half_m3h"]), 0.0
            for k in reversed(range(int(row["order"]) + 1)):
                value = value * t + float(row[f"scaled_{k}"])
            assert value == pytest.approx(head_of(50.0, diameter), abs=0.1)

    def test_the_document_holds_all_of_it(self, client, pump):
        doc = json.loads(self.fetch(client, "json").get_data())
        seen = client.get(URL).json
        assert doc["export"] == 1 and {name: doc[name] for name in seen if name != "sheets"} == {k: seen[k] for k in seen if k != "sheets"}
        assert doc["sheets"][0]["sha256"] == pump["sheet_sha256"]

    @pytest.mark.parametrize("query", ["", "?format=xlsx", "?format=csv"])
    def test_a_form_that_is_not_known_is_refused(self, client, pump, is_problem, query):
        is_problem(client.get(f"{URL}/export{query}"), 422, "validation")

    def test_what_is_not_there_is_named(self, client, pump, is_problem):
        is_problem(client.get("/api/pumps/LARK-WM-320/revisions/9/export?format=json"), 404, "not-found")
        is_problem(client.get("/api/pumps/NOBODY-1/revisions/1/export?format=csv-fits"), 404, "not-found")


class TestEvents:
    """What happens to a revision."""

    def tell(self, client, kind, number=1, **more):
        body = {"kind": kind, "who": "L. Ibrary", "why": "Checked against the paper"} | more
        return client.post(f"/api/pumps/LARK-WM-320/revisions/{number}/events", json=body)

    def test_submitted_then_released_then_withdrawn(self, client, ran, save):
        save(ran["id"])
        for kind in ("submitted", "released", "withdrawn"):
            answer = self.tell(client, kind)
            assert answer.status_code == 201 and answer.json["state"] == kind
        assert client.get(URL).json["state"] == "withdrawn"
        assert client.get("/api/pumps?state=withdrawn").json["items"][0]["key"] == "LARK-WM-320"

    def test_what_the_state_does_not_allow_is_a_conflict(self, client, pump, is_problem):
        problem = is_problem(self.tell(client, "submitted"), 409, "state")
        assert "released" in problem["detail"]

    def test_a_finding_is_waived_with_a_reason(self, client, pump, is_problem):
        finding = client.get(URL).json["findings"][0]
        assert self.tell(client, "waived", finding=finding["key"]).status_code == 201
        (waiver,) = client.get(URL).json["waivers"]
        assert waiver["finding"] == finding["key"] and waiver["who"] == "L. Ibrary" and waiver["why"] == "Checked against the paper"
        is_problem(self.tell(client, "waived", finding="0" * 16), 404, "not-found")
        is_problem(self.tell(client, "waived"), 422, "validation")
        is_problem(self.tell(client, "commented", finding="0" * 16), 422, "validation")

    @pytest.mark.parametrize("more", [{"who": "  "}, {"why": ""}, {"kind": "deleted"}, {"at": "2020-01-01"}])
    def test_an_event_without_a_person_or_reason_is_refused(self, client, pump, is_problem, more):
        is_problem(self.tell(client, **({"kind": "commented"} | more)), 422, "validation")


class TestSettings:
    """Settings of the bank."""

    def test_every_limit_is_listed_with_its_source(self, client):
        seen = client.get("/api/settings").json
        assert seen["settings"] == {}
        assert all(limit["source"] and limit["meaning"] for limit in seen["limits"].values()) and "psi_high" in seen["limits"]

    def test_a_change_decides_later_findings_and_is_kept_with_them(self, app, client, chart_draft, finish, save):
        answer = client.put("/api/settings", json={"settings": {"psi_high": 0.41, "psi_error_high": 2}, "who": "L. Ibrary"})
        assert answer.json["settings"] == {"psi_high": 0.41, "psi_error_high": 2}
        job = finish(client.post(f"/api/drafts/{chart_draft['id']}/run").json)
        rules = [f["rule"] for f in client.get(job["result_url"]).json["result"]["findings"]]
        assert "plausible-head-coefficient" in rules
        save(chart_draft["id"], release=True)
        with curvebank.open(app.extensions["curvebank"].bank) as bank:
            assert bank.pump("LARK-WM-320").settings["psi_high"] == 0.41

    @pytest.mark.parametrize(
        ("body", "code"),
        [
            ({"settings": {"psi_high": "much"}, "who": "L."}, "settings"),
            ({"settings": {"psi_high": 1}, "who": ""}, "validation"),
            ({"settings": {"bad name": 1}, "who": "L."}, "validation"),
            ({"settings": {"psi_high": [1]}, "who": "L."}, "validation"),
        ],
    )
    def test_what_is_no_setting_is_refused(self, client, is_problem, body, code):
        is_problem(client.put("/api/settings", json=body), 422, code)
        assert client.get("/api/settings").json["settings"] == {}
