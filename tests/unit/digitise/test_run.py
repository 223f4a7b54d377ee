"""Whole digitisations of a small drawn chart whose geometry is known exactly."""

import hashlib
import json
import math

import chart
import numpy as np
import pytest

from curvebank import digitise, sheet
from curvebank.errors import Cancelled


@pytest.fixture(scope="module")
def made(chart_png):
    return digitise.run(chart.document(), chart_png)


def by_id(made):
    return {c.id: c for c in made.curves}


def test_values_are_those_of_the_drawing(made):
    """Against the curves as drawn: rms within 0.05 % of the axis, the line's ends within 3 px."""
    assert made.error is None and [c.error for c in made.curves] == [None] * 3
    for name, (q, _) in chart.LINES.items():
        c = by_id(made)[name]
        truth = chart.efficiency(c.points[:, 0]) if name[0] == "E" else chart.head_m(c.points[:, 0], float(name[2:]))
        span = 1.0 if name[0] == "E" else chart.TOP_HEAD_M
        inner = (c.points[:, 0] > q[0]) & (c.points[:, 0] < q[-1])
        assert np.sqrt(np.mean((c.points[inner, 1] - truth[inner]) ** 2)) < 5e-4 * span
        px_per_flow = (chart.X1 - chart.X0) / chart.TOP_FLOW
        assert abs(c.points[:, 0].min() - q[0]) * px_per_flow < 3
        assert abs(c.points[:, 0].max() - q[-1]) * px_per_flow < 3


def test_error_stays_within_the_stated_uncertainty(made):
    """The drawing is exact, so the miss must be well inside u, which holds a drawing term of half a line width."""
    c = by_id(made)["H-320"]
    miss = np.abs(c.points[:, 1] - chart.head_m(c.points[:, 0], 320))
    assert np.mean(miss < c.sigma) > 0.99
    assert set(c.spread) == {"calibration", "reading", "drawing", "fit"}
    half_line_m = 0.5 * 2.6 * chart.TOP_HEAD_M / (chart.Y0 - chart.Y1)
    assert c.spread["drawing"] == pytest.approx(half_line_m, rel=0.5)


def test_fit_stands_for_the_curve(made):
    fit = by_id(made)["H-320"].fit
    assert fit.order == 2
    assert fit.plain == pytest.approx([50, 0, -0.0012], rel=2e-2, abs=6e-3)
    assert fit.max_miss < 0.3


def test_an_exact_family_is_not_accused(made):
    assert [f.rule for f in made.findings if f.severity == "error"] == []


def test_result_document_is_strict_and_complete(made):
    text = digitise.dumps(made)
    doc = json.loads(text, parse_constant=lambda name: pytest.fail(f"{name} in the result"))
    assert {"result", "sheet", "recipe_sha256", "made_by", "error", "panels", "curves", "findings"} <= set(doc)
    assert [c["id"] for c in doc["curves"]] == list(chart.LINES)
    assert doc["sheet"]["sha256"] == hashlib.sha256(chart.png()).hexdigest()
    for c in doc["curves"]:
        assert len(c["pixels"]) == len(c["points"]) == len(c["sigma_px"]) == len(c["sigma"]) > 200
        step = np.hypot(*np.diff(np.array(c["pixels"]), axis=0).T)
        assert 0.5 < np.median(step) < 1.6
        q = np.linspace(*c["fit"]["domain"], 50)
        plain = np.polynomial.polynomial.polyval(q, c["fit"]["coefficients"])
        scaled = np.polynomial.polynomial.polyval((q - c["fit"]["mid"]) / c["fit"]["half"], c["fit"]["scaled"])
        assert plain == pytest.approx(scaled, rel=1e-6, abs=1e-9)
    panel = doc["panels"][0]
    assert len(panel["map"]["pixels"]) == 81 and set(panel["map"]["values"]) == {"flow", "head", "eta"}
    at, flow = np.array(panel["map"]["pixels"]), np.array(panel["map"]["values"]["flow"])
    marked = (at[:, 0] > chart.X0) & (at[:, 0] < chart.X1)
    miss_px = (flow / chart.TOP_FLOW * (chart.X1 - chart.X0) + chart.X0 - at[:, 0])[marked]
    assert np.sqrt(np.mean(miss_px**2)) < 0.1


def test_same_input_same_bytes(chart_png, made):
    assert digitise.dumps(digitise.run(chart.document(), chart_png)) == digitise.dumps(made)


def test_a_bad_curve_never_sinks_its_sheet(chart_png, chart_recipe):
    bad = chart_recipe["curves"]
    bad[0]["clicks"] = [[120, 550], [400, 570]]  # bare paper
    bad[1]["clicks"] = bad[1]["clicks"][:1]
    got = by_id(digitise.run(chart_recipe, chart_png))
    assert got["H-320"].error["path"] == "$.curves[0].clicks" and got["H-290"].error["path"] == "$.curves[1].clicks"
    assert got["H-320"].points.shape == (0, 2)
    assert got["E-320"].error is None and len(got["E-320"].points) > 200
    doc = digitise.curve_json(got["H-320"])
    assert doc["pixels"] == doc["points"] == doc["sigma"] == [] and doc["fit"] is None and doc["flagged"]


def test_clicks_off_the_panel_say_so(chart_png, chart_recipe):
    chart_recipe["curves"][0]["clicks"][1] = [5000, 5000]
    error = by_id(digitise.run(chart_recipe, chart_png))["H-320"].error
    assert "second click" in error["message"] and "panel" in error["message"]


@pytest.mark.parametrize(
    ("axis", "change", "words"),
    [
        ("flow", lambda marks: marks.__delitem__(slice(1, None)), "mark"),
        ("head", lambda marks: [m.update(value=40.0) for m in marks], "40"),
        ("head", lambda marks: [m.update(at=[100, 600]) for m in marks], "place"),
    ],
)
def test_marks_that_place_no_axis(chart_png, chart_recipe, axis, change, words):
    change(chart_recipe["panels"][0]["axes"][axis]["marks"])
    got = digitise.run(chart_recipe, chart_png)
    assert got.error["path"].startswith(f"$.panels[0].axes.{axis}") and words in got.error["message"]
    assert [c.id for c in got.curves] == list(chart.LINES) and all(c.error for c in got.curves)


def test_log_axis_refuses_zero(chart_png, chart_recipe):
    chart_recipe["panels"][0]["axes"]["flow"]["scale"] = "log10"
    got = digitise.run(chart_recipe, chart_png)
    assert "log" in got.error["message"] and "0" in got.error["message"]


def test_one_bad_panel_leaves_the_other(chart_png, chart_recipe):
    second = json.loads(json.dumps(chart_recipe["panels"][0]))
    second["id"] = "other"
    second["axes"]["head"]["marks"] = second["axes"]["head"]["marks"][:1]
    chart_recipe["panels"].append(second)
    chart_recipe["curves"][1]["panel"] = "other"
    got = digitise.run(chart_recipe, chart_png)
    assert got.error is None and [p.id for p in got.panels] == ["main"]
    assert by_id(got)["H-290"].error["path"].startswith("$.panels[1].axes.head")
    assert by_id(got)["H-320"].error is None


def test_a_mistyped_mark_is_named_with_the_value_that_fits(chart_png, chart_recipe):
    marks = chart_recipe["panels"][0]["axes"]["head"]["marks"]
    marks.insert(1, {"at": [float(v) for v in chart.to_px(0, 15 / 60)], "value": 25})
    got = digitise.run(chart_recipe, chart_png)
    said = [f.message for f in got.findings if f.rule.startswith("calibration-")]
    assert any("25" in m and "15" in m for m in said), said


@pytest.mark.parametrize(
    ("data", "code"),
    [(b"not an image at all", "not-an-image"), (b"", "not-an-image"), (None, "no-such-file")],
)
def test_a_sheet_that_is_none(data, code):
    got = digitise.run(chart.document(), data)
    assert got.error["code"] == code and len(got.curves) == 3 and all(c.error for c in got.curves)
    assert digitise.result_json(got)["error"]["path"]


def test_another_scan_than_the_recipe_names(chart_png, chart_recipe):
    chart_recipe["sheet"]["sha256"] = "0" * 64
    assert digitise.run(chart_recipe, chart_png).error["code"] == "sha256-mismatch"
    chart_recipe["sheet"]["sha256"] = hashlib.sha256(chart_png).hexdigest().upper()
    chart_recipe["curves"] = chart_recipe["curves"][:1]
    assert digitise.run(chart_recipe, chart_png).error is None


def test_a_recipe_that_is_none():
    got = digitise.run(b"{", None)
    assert got.error["code"] == "recipe-json" and got.curves == ()
    assert digitise.result_json(got)["curves"] == []


def test_cancelling_passes_through(chart_png):
    def stop(share, text):
        if share > 0.3:
            raise Cancelled("Stopped.")

    with pytest.raises(Cancelled):
        digitise.run(chart.document(), chart_png, progress=stop)


def test_progress_rises_to_one(chart_png, chart_recipe):
    seen = []
    digitise.run(chart_recipe, chart_png, progress=lambda share, text: seen.append(share))
    assert seen == sorted(seen) and seen[-1] == 1.0


def test_preview_is_the_run_of_one_curve(chart_png, made):
    loaded = sheet.load(chart_png)
    doc = chart.document()
    got = digitise.preview(doc["panels"][0], doc["curves"][0], sheet.prepare(loaded), loaded.info, doc["pump"])
    assert got["panel"]["map"] == digitise.panel_json(made.panels[0])["map"]
    assert set(got["panel"]["mark_residuals"]) == {"flow", "head", "eta"} and got["panel"]["suspects"] == []
    mine, theirs = np.array(got["curve"]["points"]), by_id(made)["H-320"].points
    assert mine == pytest.approx(theirs[: len(mine)], rel=1e-6)


def test_typed_table_needs_no_sheet():
    """Rows in US gal/min and ft become m3/h and m (factors of NIST SP 811)."""
    rows = [[0, 120], [200, 115], [400, 100], [600, 75]]
    table = {"id": "T", "quantity": "head", "kind": "table", "rows": rows, "x_unit": "gal/min(US)", "y_unit": "ft", "basis": "works test"}
    got = digitise.run({"recipe": 1, "pump": {"maker": "F", "model": "1"}, "curves": [table]}, None)
    c = got.curves[0]
    assert got.error is None and c.basis == "works test"
    assert c.points[:, 0] == pytest.approx([0, 45.424941408, 90.849882816, 136.274824224], rel=1e-12)
    assert c.points[:, 1] == pytest.approx(np.array([120, 115, 100, 75]) * 0.3048, rel=1e-12)
    doc = digitise.curve_json(c)
    assert np.array(doc["pixels"]) == pytest.approx(np.array(rows, float))
    assert len(doc["sigma"]) == 4 and all(s > 0 for s in doc["sigma"])


def test_factor_and_heads_per_stage(chart_png, chart_recipe):
    """A line drawn at twice its value reads half; a head per stage becomes the head of all stages."""
    chart_recipe["pump"]["stages"] = 3
    chart_recipe["curves"][0] |= {"factor": 2}
    chart_recipe["curves"][1] |= {"head_is": "per stage"}
    got = by_id(digitise.run(chart_recipe, chart_png))
    q = got["H-320"].points[:, 0]
    assert got["H-320"].points[:, 1] == pytest.approx(chart.head_m(q, 320) / 2, abs=0.1)
    q = got["H-290"].points[:, 0]
    assert got["H-290"].points[:, 1] == pytest.approx(chart.head_m(q, 290) * 3, abs=0.4)
    assert all(math.isfinite(s) for s in got["H-290"].sigma)


def test_power_drawn_on_the_efficiency_axis(chart_png, chart_recipe):
    """ "4 P" on a % axis: 78 printed is 19.5 kW; without a factor the line keeps its axis and says so."""
    chart_recipe["curves"][2] |= {"quantity": "power", "factor": 4}
    c = by_id(digitise.run(chart_recipe, chart_png))["E-320"]
    assert c.points[:, 1].max() == pytest.approx(78 / 4, rel=2e-3)
    chart_recipe["curves"][2]["factor"] = 1
    c = by_id(digitise.run(chart_recipe, chart_png))["E-320"]
    assert c.points[:, 1].max() == pytest.approx(0.78, rel=2e-3)
    assert "mixed-axis" in [n.code for n in c.warnings]


def test_preview_places_a_panel_once_while_its_marks_stay(chart_png, monkeypatch):
    from curvebank import axes

    loaded = sheet.load(chart_png)
    prepared = sheet.prepare(loaded)
    doc = chart.document()
    placed = []
    real = axes.calibrate
    monkeypatch.setattr(axes, "calibrate", lambda *a, **k: placed.append(1) or real(*a, **k))
    first = digitise.preview(doc["panels"][0], doc["curves"][0], prepared, loaded.info, doc["pump"])
    digitise.preview(doc["panels"][0], doc["curves"][1], prepared, loaded.info, doc["pump"])
    assert len(placed) == 1
    doc["panels"][0]["axes"]["head"]["marks"][1]["at"][1] += 0.5
    moved = digitise.preview(doc["panels"][0], None, prepared, loaded.info, doc["pump"])
    assert len(placed) == 2 and moved["panel"]["mark_residuals"] != first["panel"]["mark_residuals"]
