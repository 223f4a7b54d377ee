"""Marks against the printed grid: wrong values named, one-off readings asked about, masks told of."""

from types import SimpleNamespace

import numpy as np
import pytest
from drawn_grid import panel, sheet

from curvebank.axes import calibrate


def test_a_wrong_fourth_mark_is_named_not_absorbed_as_a_photo(chart):
    c, rng = chart(turn_deg=0.4), np.random.default_rng(11)
    left = [(0.0, 0.0), (0.0, 0.4), (0.0, 0.8), (0.0, 1.0)]
    doc = panel(c, rng, left=left)
    doc["axes"]["h"]["marks"][3]["value"] = 60.0
    m = calibrate(doc, sheet(c))
    assert [(s["axis"], s["mark"], s["fits"], s["sure"]) for s in m.suspects] == [("h", 3, 50.0, True)]
    assert m.grid.used and not m.projective
    u, v, at = c.grid(5)
    np.testing.assert_allclose(m.from_pixels(at, ("q", "h"))[:, 1], 50 * v, atol=0.02)


@pytest.mark.parametrize("seed", range(4))
def test_right_marks_are_not_accused(chart, seed):
    c, rng = chart(turn_deg=0.2 * seed), np.random.default_rng(seed)
    m = calibrate(panel(c, rng), sheet(c))
    assert m.suspects == [] and m.notices == () and m.grid.used


def test_two_marks_one_of_them_a_line_off_are_asked_about(chart):
    c, rng = chart(), np.random.default_rng(12)
    doc = panel(c, rng, left=[(0.0, 0.0), (0.0, 0.8)])
    doc["axes"]["h"]["marks"][1]["value"] = 50.0
    m = calibrate(doc, sheet(c))
    asked = [n for n in m.notices if n.code == "grid-one-off"]
    assert len(asked) == 1 and "read in two ways" in asked[0].message
    assert "is 0 m there (all marks are right), or 10 m there (the mark typed 0 is on the line of 10)" in asked[0].message
    assert "value axis from the marks" in m.grid.why
    u, v, at = c.grid(5)
    assert m.from_pixels(at, ("q", "h"))[:, 1] == pytest.approx(62.5 * v, abs=0.4)


def test_a_mask_over_a_mark_is_told_and_lines_under_it_count_no_more(chart):
    c, rng = chart(), np.random.default_rng(13)
    page, doc = sheet(c), panel(c, rng)
    masked = np.zeros(page.ink.shape, bool)
    x, y = (int(v) for v in doc["axes"]["h"]["marks"][1]["at"])
    masked[y - 30 : y + 30, x - 30 : x + 200] = True
    page.ink = np.where(masked, 0, page.ink)
    m = calibrate(doc, SimpleNamespace(ink=page.ink, lines=page.lines, masked=masked))
    told = [n for n in m.notices if n.code == "mark-masked"]
    assert len(told) == 1 and "typed 20" in told[0].message
    assert m.grid.used
    assert calibrate(doc, SimpleNamespace(ink=page.ink, lines=page.lines, masked=np.zeros_like(masked))).notices == ()


def test_an_axis_of_the_same_lines_shares_their_accuracy(chart):
    c, rng = chart(), np.random.default_rng(14)
    doc = panel(c, rng)
    doc["axes"]["e"] = c.axis("efficiency", "%", [(1.0, 0.0), (1.0, 0.4), (1.0, 1.0)], 0, 100, rng=rng)
    m = calibrate(doc, sheet(c))
    u, v, at = c.grid(5)
    assert np.abs(m.from_pixels(at, ("q", "e"))[:, 1] - v).max() * 830 < 0.1
