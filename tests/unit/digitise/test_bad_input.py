"""Marks, clicks and masks that contradict the paper: each is named where it stands, and the rest of the sheet is read as ever."""

import json

import chart
import contract_check
import numpy as np
import pytest
from click.testing import CliRunner

from curvebank import digitise, sheet
from curvebank.cli import main


@pytest.fixture(scope="module")
def prepared():
    loaded = sheet.load(chart.png())
    return {"prepared": sheet.prepare(loaded), "page": loaded.info}


def head_mark(doc, k=1):
    return doc["panels"][0]["axes"]["head"]["marks"][k]


def mistyped(doc):
    head_mark(doc)["value"] = 36


def on_the_next_line(doc):
    """The flow mark 100 set on the line of 120, among four marks."""
    marks = doc["panels"][0]["axes"]["flow"]["marks"]
    marks.append({"at": chart.to_px(160, 0).round(2).tolist(), "value": 160})
    marks[1]["at"][0] += (chart.X1 - chart.X0) / 10 - 0.3


def no_ink(doc):
    doc["curves"][0]["clicks"] = chart.to_px(np.array([40, 80, 120]), np.array([0.97, 0.95, 0.93])).round(1).tolist()


def ink_that_is_no_line(doc):
    """Clicks on three crossings of the grid: there is ink under each, and no curve through them."""
    doc["curves"][0]["clicks"] = chart.to_px(np.array([40, 100, 160]), np.array([0.9, 1.0, 0.9])).round(1).tolist()


def reversed_clicks(doc):
    doc["curves"][0]["clicks"].reverse()


def shuffled_guide(doc):
    first, middle, last = doc["curves"][0]["clicks"]
    doc["curves"][0] |= {"clicks": [first, last], "guides": [middle]}


def the_same_clicks(doc):
    doc["curves"][1]["clicks"] = doc["curves"][0]["clicks"]


def mask_over_a_mark(doc):
    doc["sheet"]["masks"] = [{"brush": [head_mark(doc)["at"]], "width_px": 30}]


def mask_over_a_click(doc):
    doc["sheet"]["masks"] = [{"brush": [doc["curves"][0]["clicks"][1]], "width_px": 50}]


def mask_off_the_page(doc):
    doc["sheet"]["masks"] = [{"outline": [[10, 10], [20, 10], [20, 5000]]}]


def guide_off_the_panel(doc):
    doc["curves"][0]["guides"] = [[5, 5]]


def locked_elsewhere(doc):
    doc["curves"][0]["locked"] = [{"pixels": [[-400, 300], [-390, 300], [-380, 301]]}]


PANEL = {
    "a mark mistyped": (mistyped, "calibration-mistyped", ("36", "30")),
    "a mark on the next line": (on_the_next_line, "calibration-mistyped", ("100", "120")),
    "a mask over a mark": (mask_over_a_mark, "mark-masked", ("30",)),
}
CURVE = {
    "the same clicks": (the_same_clicks, ("H-320", "H-290"), "same-clicks"),
    "a mask over a click": (mask_over_a_click, ("H-320",), "mask-over-click"),
}
FAILED = {
    "no ink": (no_ink, "off-ink", "$.curves[0].clicks"),
    "a guide off the panel": (guide_off_the_panel, "off-panel", "$.curves[0].clicks"),
    "a locked stretch elsewhere": (locked_elsewhere, None, "$.curves[0].clicks"),
}


def run(change, prepared):
    doc = chart.document()
    change(doc)
    made = digitise.run(doc, None, **prepared)
    assert contract_check.faults(digitise.result_json(made), doc) == []
    return made


def right(curve):
    """Read within 0.1 % of its axis."""
    if curve.quantity == "efficiency":
        return np.abs(curve.points[:, 1] - chart.efficiency(curve.points[:, 0])).max() < 1e-3
    return np.abs(curve.points[:, 1] - chart.head_m(curve.points[:, 0], curve.diameter_mm)).max() < 1e-3 * chart.TOP_HEAD_M


@pytest.mark.parametrize("name", PANEL)
def test_a_mark_that_contradicts_is_named_with_the_value_that_fits(name, prepared):
    change, code, words = PANEL[name]
    made = run(change, prepared)
    (said,) = [w for w in made.panels[0].warnings if w.code == code]
    assert all(word in said.message for word in words)
    assert all(c.error is None and right(c) for c in made.curves)


@pytest.mark.parametrize("name", CURVE)
def test_what_speaks_against_a_curve_stays_with_it(name, prepared):
    change, told, code = CURVE[name]
    made = run(change, prepared)
    assert [c.id for c in made.curves if code in [w.code for w in c.warnings]] == list(told)
    assert all(right(c) for c in made.curves if c.id not in told)


@pytest.mark.parametrize("name", FAILED)
def test_a_curve_that_cannot_be_read_costs_no_other(name, prepared):
    change, code, path = FAILED[name]
    made = run(change, prepared)
    bad, *good = made.curves
    assert made.error is None and bad.error is not None and bad.error["path"] == path
    assert code is None or bad.error["code"] == code
    assert all(c.error is None and right(c) for c in good)


def test_ink_that_is_no_line_is_never_passed_off_as_one(prepared):
    bad, *good = run(ink_that_is_no_line, prepared).curves
    assert bad.error is not None or bad.trace.flagged
    assert all(right(c) for c in good)


def test_one_line_for_two_curves_is_flagged_in_both(prepared):
    made = run(the_same_clicks, prepared)
    assert [c.trace.flagged for c in made.curves] == [True, True, False]


@pytest.mark.parametrize("change", [reversed_clicks, shuffled_guide])
def test_the_order_of_clicks_and_guides_changes_nothing_that_counts(change, prepared):
    plain, other = run(lambda doc: None, prepared).curves[0], run(change, prepared).curves[0]
    assert other.error is None and not other.trace.flagged and right(other)
    at = np.linspace(plain.fit.lo + 1, plain.fit.hi - 1, 50)
    assert np.abs(plain.fit.value(at) - other.fit.value(at)).max() < 2e-4 * chart.TOP_HEAD_M


def test_a_mask_off_the_page_spoils_the_whole_and_says_where(prepared):
    doc = chart.document()
    mask_off_the_page(doc)
    made = digitise.run(doc, None, **prepared)
    assert made.error["code"] == "mask" and made.error["path"] == "$.sheet.masks[0].outline[2]"
    assert len(made.curves) == 3 and all(c.error for c in made.curves)


def test_the_command_reads_what_can_be_read(tmp_path):
    """All of it at once at the command line: one result, no traceback, exit code 0 as the recipe itself ran."""
    doc = chart.document()
    for change in (mistyped, no_ink, mask_over_a_click):
        change(doc)
    doc["curves"][1]["clicks"].reverse()
    (tmp_path / "chart.png").write_bytes(chart.png())
    (tmp_path / "bad.recipe.json").write_text(json.dumps(doc))
    done = CliRunner().invoke(main, ["digitise", str(tmp_path / "bad.recipe.json"), "--out", str(tmp_path)])
    assert done.exit_code == 0 and "2 of 3 curves" in done.output and "Traceback" not in done.output
    result = json.loads((tmp_path / "bad.result.json").read_text())
    assert result["curves"][0]["error"]["code"] == "off-ink" and result["curves"][1]["error"] is None
    rules = {f["rule"] for f in result["findings"]}
    assert {"calibration-mistyped", "trace-failed"} <= rules
