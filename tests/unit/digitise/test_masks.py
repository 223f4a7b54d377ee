"""Masks in whole digitisations and previews: what is hidden is bridged, and what a mask costs is said."""

import chart
import numpy as np
import pytest

from curvebank import digitise, sheet


def run(doc, png=None):
    return digitise.run(doc, png or chart.png())


def scribbled():
    """The chart with black strokes of handwriting over the upper head curve, and a mask over them."""
    import io

    import cv2
    from PIL import Image

    page = np.array(Image.open(io.BytesIO(chart.png())))
    q = np.linspace(70, 84, 5)
    at = chart.to_px(q, chart.head_m(q, 320) / chart.TOP_HEAD_M)
    rough = at + np.array([[0, -14], [0, 16], [0, -12], [0, 15], [0, -13]])
    cv2.polylines(page, [np.rint(rough).astype(np.int32)[:, None]], False, 20, 5, cv2.LINE_AA)
    out = io.BytesIO()
    Image.fromarray(page).save(out, "PNG")
    return out.getvalue(), [{"brush": at.round(1).tolist(), "width_px": 52}]


def test_handwriting_under_a_mask_does_not_move_the_curve():
    png, masks = scribbled()
    doc = chart.document()
    doc["sheet"]["masks"] = masks
    made = run(doc, png)
    assert [c.error for c in made.curves] == [None] * 3
    c = next(c for c in made.curves if c.id == "H-320")
    miss = (c.points[:, 1] - chart.head_m(c.points[:, 0], 320)) / chart.TOP_HEAD_M
    assert np.abs(miss).max() < 2e-3
    assert "mask-hides-curve" not in [w.code for w in c.warnings]


def test_a_mask_over_a_mark_is_named_and_the_mark_still_counts():
    doc = chart.document()
    x, y = doc["panels"][0]["axes"]["head"]["marks"][1]["at"]
    plain = run(doc)
    doc["sheet"]["masks"] = [{"brush": [[x, y]], "width_px": 24}]
    made = run(doc)
    said = [w for w in made.panels[0].warnings if w.code == "mark-masked"]
    assert len(said) == 1 and "head mark typed 30" in said[0].message
    assert not [w for w in plain.panels[0].warnings if w.code == "mark-masked"]
    assert np.allclose(made.panels[0].map_values["head"], plain.panels[0].map_values["head"], atol=0.05)


def test_a_mask_over_a_click_is_said_and_no_refusal():
    doc = chart.document()
    x, y = doc["curves"][0]["clicks"][1]
    doc["sheet"]["masks"] = [{"brush": [[x, y]], "width_px": 60}]
    c = run(doc).curves[0]
    assert c.error is None
    assert any(w.code == "mask-over-click" and "click 2" in w.message for w in c.warnings)


def test_a_mask_over_most_of_a_curve_is_said_with_the_stretch():
    doc = chart.document()
    q = np.linspace(40, 120, 30)
    at = chart.to_px(q, chart.head_m(q, 320) / chart.TOP_HEAD_M)
    doc["sheet"]["masks"] = [{"brush": at.round(1).tolist(), "width_px": 14}]
    c = next(c for c in run(doc).curves if c.id == "H-320")
    (said,) = [w for w in c.warnings if w.code == "mask-hides-curve"]
    first, last = said.stretch
    assert "hide" in said.message and c.points[first, 0] == pytest.approx(40, abs=5) and c.points[last, 0] == pytest.approx(120, abs=5)


def test_a_preview_sees_the_masks():
    prepared = sheet.prepare(sheet.load(chart.png()))
    doc = chart.document()
    x, y = doc["panels"][0]["axes"]["head"]["marks"][1]["at"]
    masks = [{"brush": [[x, y]], "width_px": 24}]
    seen = digitise.preview(doc["panels"][0], doc["curves"][0], prepared, None, doc["pump"], masks=masks)
    bare = digitise.preview(doc["panels"][0], doc["curves"][0], prepared, None, doc["pump"])
    codes = [[w["code"] for w in s["panel"]["warnings"]] for s in (seen, bare)]
    assert "mark-masked" in codes[0] and "mark-masked" not in codes[1]
    assert seen["curve"]["error"] is None


def test_a_mask_off_the_page_is_an_error_of_the_whole_with_its_path():
    doc = chart.document()
    doc["sheet"]["masks"] = [{"brush": [[9000, 10]], "width_px": 24}]
    made = run(doc)
    assert made.error["path"] == "$.sheet.masks[0].brush[0]" and made.error["code"] == "mask"
