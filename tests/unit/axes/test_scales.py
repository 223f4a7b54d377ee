"""Several printed scales for one quantity: used together where they agree, named where they do not."""

import numpy as np
import pytest
from drawn_grid import BOTTOM, LEFT, panel, sheet

from curvebank import units
from curvebank.axes import calibrate

TOP = [(0.0, 1.0), (0.5, 1.0), (1.0, 1.0)]


def _axes(c, rng, unit, wrong=1.0):
    per = units.factor("flow", "m3/h") / units.factor("flow", unit) * wrong
    return {
        "q": c.axis("flow", "m3/h", BOTTOM, 0, 200, rng=rng),
        "g": c.axis("flow", unit, TOP, 0, 200 * per, rng=rng),
        "h": c.axis("head", "m", LEFT, 0, 60, rng=rng),
    }


@pytest.mark.parametrize("unit", ["l/s", "gal/min(US)", "l/min"])
def test_scales_that_agree_say_the_same_everywhere(chart, unit):
    c, rng = chart(turn_deg=0.5), np.random.default_rng(3)
    m = calibrate({"axes": _axes(c, rng, unit)})
    assert m.notices == ()
    u, v, at = c.grid(5)
    q, g = (m.from_pixels(at, (name, "h"))[:, 0] for name in ("q", "g"))
    # Marks 1.5 px apart would leave a pixel between the two scales; in canonical units they are one.
    assert np.abs(q - g).max() / 200 * 860 < 0.8
    assert np.abs(q - 200 * u).max() / 200 * 860 < 2.0


@pytest.mark.parametrize(
    ("unit", "wrong", "what"),
    [("gal/min(US)", 1 / 1.2009499, "imperial"), ("l/s", 3.6, "l/s taken for m3/h"), ("m3/min", 60.0, "minutes")],
)
def test_a_wrong_unit_is_named_by_its_ratio(chart, unit, wrong, what):
    c, rng = chart(), np.random.default_rng(4)
    m = calibrate({"axes": _axes(c, rng, unit, wrong)})
    told = [n for n in m.notices if n.code == "scales-disagree"]
    assert len(told) == 1 and what in told[0].message
    assert "1.20" in told[0].message or wrong > 3


def test_an_unknown_ratio_is_told_without_a_name(chart):
    c, rng = chart(), np.random.default_rng(5)
    told = [n for n in calibrate({"axes": _axes(c, rng, "l/s", 1.33)}).notices if n.code == "scales-disagree"]
    assert len(told) == 1 and "each scale stands by its own marks" in told[0].message


def test_a_second_scale_has_the_accuracy_of_the_grid(chart):
    c, rng = chart(), np.random.default_rng(6)
    doc = panel(c, rng)
    per = 1 / units.factor("flow", "gal/min(US)")
    doc["axes"]["g"] = c.axis("flow", "gal/min(US)", TOP, 0, 100 * per, rng=rng)
    m = calibrate(doc, sheet(c))
    u, _, at = c.grid(5)
    assert m.grid.used and np.abs(m.from_pixels(at, ("g", "h"))[:, 0] - 100 * u).max() / 100 * 860 < 0.1


def test_the_grid_may_belong_to_the_second_axis(chart):
    """Head lines every 12.5 % of the panel, no round value in feet but on the metre scale."""
    c, rng = chart(), np.random.default_rng(7)
    page = sheet(c, v_shares=np.arange(0, 1.01, 0.125))
    axes = {
        "q": c.axis("flow", "m3/h", BOTTOM, 0, 100, rng=rng),
        "ft": c.axis("head", "ft", [(1.0, 0.0), (1.0, 40 * 0.3048 / 40), (1.0, 120 * 0.3048 / 40)], 0, 40 / 0.3048, rng=rng),
        "m": c.axis("head", "m", [(0.0, 0.0), (0.0, 0.5), (0.0, 1.0)], 0, 40, rng=rng),
    }
    m = calibrate({"axes": axes}, page)
    assert list(m.axis_ids) == ["q", "ft", "m"] and m.grid.used and "value axis from the marks" not in m.grid.why
    _, v, at = c.grid(5)
    for name in ("ft", "m"):
        assert np.abs(m.from_pixels(at, ("q", name))[:, 1] - 40 * v).max() / 40 * 830 < 0.2
