"""A recipe carried to a better scan of the same paper: every place moves over, and the change is told in figures."""

import json

import chart
import cv2
import numpy as np
import pytest
from click.testing import CliRunner

from curvebank import recipe
from curvebank.cli import main
from curvebank.desk import rescan
from curvebank.errors import RecipeError, SheetError

PLANE = np.eye(3)
PLANE[:2] = cv2.getRotationMatrix2D((449.5, 349.5), 1.2, 1.6)
PLANE[:2, 2] += [750 - 450, 590 - 350]
SIZE = (1500, 1180)


def at(points):
    q = np.c_[np.asarray(points, float), np.ones(len(points))] @ PLANE.T
    return q[:, :2] / q[:, 2:]


def poor_and_better():
    """A noisy, blurred scan and a larger, turned one of the same drawing."""
    page = chart.labelled()
    poor = cv2.GaussianBlur(page, (0, 0), 0.8) + np.random.default_rng(4).normal(0, 9, page.shape)
    better = cv2.warpPerspective(page, PLANE, SIZE, flags=cv2.INTER_CUBIC, borderValue=244)
    return chart.png_of(np.clip(poor, 0, 255).astype(np.uint8)), chart.png_of(better)


def document():
    doc = chart.document()
    doc["x-note"] = "kept"
    doc["sheet"] |= {"masks": [{"brush": [[450, 120]], "width_px": 30}], "document": "Catalogue 7"}
    doc["curves"][0] |= {"guides": [[300.0, 215.0]], "locked": []}
    return doc


@pytest.fixture(scope="module")
def carried():
    return rescan.carry(document(), *poor_and_better(), file="better.png")


def test_every_place_is_where_the_new_scan_shows_it(carried):
    old, new = document(), carried.recipe
    marks = lambda d: [m["at"] for a in d["panels"][0]["axes"].values() for m in a["marks"]]  # noqa: E731
    assert np.abs(np.array(marks(new)) - at(marks(old))).max() < 0.3
    for a, b in zip(old["curves"], new["curves"], strict=True):
        assert np.abs(np.array(b["clicks"]) - at(a["clicks"])).max() < 0.3
    assert np.abs(np.array(new["curves"][0]["guides"]) - at([[300, 215]])).max() < 0.3
    assert new["sheet"]["masks"][0]["width_px"] == pytest.approx(48, rel=0.02)
    assert np.abs(np.array(new["sheet"]["masks"][0]["brush"]) - at([[450, 120]])).max() < 0.3
    assert new["sheet"]["file"] == "better.png" and new["sheet"]["document"] == "Catalogue 7" and new["x-note"] == "kept"
    assert recipe.parse(new).sheet.sha256 == carried.made.page.sha256


def test_the_change_is_told_curve_by_curve(carried):
    report = carried.report()
    json.dumps(report, allow_nan=False)
    assert [c["id"] for c in report["curves"]] == [c["id"] for c in document()["curves"]]
    for c, made in zip(report["curves"], carried.made.curves, strict=True):
        assert c["error_before"] is None and c["error_now"] is None and not c["elsewhere"]
        assert 0 <= c["mean"] <= c["largest"] and c["largest_pct"] < 0.3 and c["largest_u"] < 3
        assert c["apart_px"] < 0.5 and len(c["now_pixels"]) == len(made.points)
    h = report["curves"][0]
    assert h["largest_pct"] == pytest.approx(100 * h["largest"] / chart.TOP_HEAD_M, rel=0.35) and h["unit"] == "m"
    assert "3 of 3 curves compared" in report["message"] and report["registration"]["scale"] == pytest.approx(1.6, rel=0.01)


def test_the_better_scan_is_read_right(carried):
    c = next(c for c in carried.made.curves if c.id == "H-320")
    assert np.abs(c.points[:, 1] - chart.head_m(c.points[:, 0], 320)).max() < 2e-3 * chart.TOP_HEAD_M


def test_locked_pixels_move_and_their_sigma_grows():
    doc = chart.document()
    pixels = chart.to_px(np.linspace(60, 80, 60), chart.head_m(np.linspace(60, 80, 60), 320) / chart.TOP_HEAD_M).round(3).tolist()
    doc["curves"][0]["locked"] = [{"pixels": pixels, "sigma_px": 0.05}]
    done = rescan.carry(doc, *poor_and_better(), file="better.png")
    part = done.recipe["curves"][0]["locked"][0]
    assert np.abs(np.array(part["pixels"]) - at(pixels)).max() < 0.3
    assert part["sigma_px"] > 0.05 * 1.6 and part["sigma_px"] == pytest.approx(0.08, abs=0.05)


def test_another_issue_with_other_curves_is_noticed():
    """The same form with the curves of another wheel: it registers on grid and labels, and the curves tell."""
    old, _ = poor_and_better()
    lines = dict(chart.LINES)
    try:
        chart.LINES["H-320"] = (lines["H-320"][0], lambda q: chart.head_m(q, 320) / chart.TOP_HEAD_M * 0.9)
        other = chart.png_of(chart.labelled(chart.png(seed=8)))
    finally:
        chart.LINES["H-320"] = lines["H-320"]
    report = rescan.carry(chart.document(), old, other, file="other.png").report()
    by_id = {c["id"]: c for c in report["curves"]}
    assert by_id["H-320"]["elsewhere"] or by_id["H-320"]["error_now"]
    assert not by_id["E-320"]["elsewhere"] and by_id["E-320"]["error_now"] is None
    assert "H-320" in report["message"]


def test_what_cannot_be_carried_is_refused():
    poor, better = poor_and_better()
    with pytest.raises(SheetError) as refused:
        rescan.carry(chart.document(), poor, chart.png_of(np.full((700, 900), 240, np.uint8)), file="blank.png")
    assert refused.value.code == "not-the-same-paper"
    doc = chart.document()
    doc["sheet"]["sha256"] = "0" * 64
    with pytest.raises(SheetError) as refused:
        rescan.carry(doc, poor, better, file="better.png")
    assert refused.value.code == "sha256-mismatch"
    rows = {"id": "t", "quantity": "head", "kind": "table", "rows": [[0, 5], [1, 4]], "x_unit": "m3/h", "y_unit": "m"}
    with pytest.raises(RecipeError):
        rescan.carry({"recipe": 1, "pump": {"maker": "F", "model": "T"}, "curves": [rows]}, None, better, file="better.png")


def test_the_command_writes_recipe_scan_and_result(tmp_path):
    poor, better = poor_and_better()
    (tmp_path / "chart.png").write_bytes(poor)
    (tmp_path / "old.recipe.json").write_text(json.dumps(chart.document()))
    (tmp_path / "better.png").write_bytes(better)
    out = tmp_path / "out"
    arguments = ["carry", str(tmp_path / "old.recipe.json"), str(tmp_path / "better.png"), "--out", str(out)]
    done = CliRunner().invoke(main, arguments)
    assert done.exit_code == 0, done.output
    assert "% of the old scan's print" in done.output and "H-320" in done.output and "largest % of axis" in done.output
    assert sorted(p.name for p in out.iterdir()) == ["better.png", "better.recipe.json", "better.result.json"]
    again = CliRunner().invoke(main, [*arguments, "--json"])
    assert json.loads(again.output)["carry"] == 1
    gone = CliRunner().invoke(main, ["carry", str(tmp_path / "old.recipe.json"), str(tmp_path / "none.png"), "--out", str(out)])
    assert gone.exit_code == 1 and "none.png cannot be read" in gone.output
    (out / "better.png").write_bytes(poor)
    taken = CliRunner().invoke(main, arguments)
    assert taken.exit_code == 1 and "is another file" in taken.output
