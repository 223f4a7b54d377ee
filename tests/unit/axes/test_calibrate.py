"""Marks to map: exact marks give the exact map on any flat sheet, whatever the marks' place and order."""

import math

import numpy as np
import pytest

from curvebank.axes import calibrate
from curvebank.errors import CalibrationError

BOTTOM = [(0.0, 0.0), (0.5, 0.0), (1.0, 0.0)]
LEFT = [(0.0, 0.0), (0.0, 0.4), (0.0, 1.0)]
RIGHT = [(1.0, 0.0), (1.0, 0.5), (1.0, 1.0)]
SHAPES = {
    "straight": {},
    "turned": {"turn_deg": 2.4},
    "fax": {"turn_deg": 0.8, "height": 410.0},
    "skewed": {"turn_deg": -1.0, "shear_deg": 3.0},
    "turned a lot": {"turn_deg": 31.0},
}


@pytest.mark.parametrize("shape", SHAPES)
def test_exact_marks_give_the_exact_map(chart, shape):
    c = chart(**SHAPES[shape])
    panel = {"id": "p", "axes": {"q": c.axis("flow", "m3/h", BOTTOM, 0, 200), "h": c.axis("head", "m", LEFT, 5, 65)}}
    m = calibrate(panel)
    u, v, at = c.grid()
    got = m.from_pixels(at, ("q", "h"))
    tolerance = 2e-3 if shape == "skewed" else 1e-6
    np.testing.assert_allclose(got[:, 0], 200 * u, atol=200 * tolerance)
    np.testing.assert_allclose(got[:, 1], 5 + 60 * v, atol=60 * tolerance)
    np.testing.assert_allclose(m.to_pixels(got, ("q", "h")), at, atol=1e-8)
    np.testing.assert_allclose(m.to_pixels(got[:, ::-1], ("h", "q")), at, atol=1e-8)
    assert m.residual_px < 0.1 and not m.projective and not m.suspects


def test_the_order_of_marks_does_not_matter(chart):
    c, rng = chart(turn_deg=1.0), np.random.default_rng(2)
    flow, head = c.axis("flow", "m3/h", BOTTOM, 0, 200, rng=rng), c.axis("head", "m", LEFT, 0, 60, rng=rng)
    a = calibrate({"axes": {"q": flow, "h": head}})
    mixed = {**flow, "marks": flow["marks"][::-1]}
    b = calibrate({"axes": {"h": {**head, "marks": head["marks"][1:] + head["marks"][:1]}, "q": mixed}})
    _, _, at = c.grid()
    np.testing.assert_allclose(a.from_pixels(at, ("q", "h")), b.from_pixels(at, ("q", "h")), rtol=1e-7, atol=1e-6)


def test_log_scales_are_straight_on_their_logarithm(chart):
    c = chart(turn_deg=0.5)
    panel = {"axes": {"q": c.axis("flow", "l/s", BOTTOM, 20, 500, log=True), "h": c.axis("head", "ft", LEFT, 5, 100, log=True)}}
    m = calibrate(panel)
    u, v, at = c.grid()
    got = m.from_pixels(at, ("q", "h"))
    np.testing.assert_allclose(got[:, 0], 3.6 * 20 * 25**u, rtol=1e-6)
    np.testing.assert_allclose(got[:, 1], 0.3048 * 5 * 20**v, rtol=1e-6)


def test_values_are_canonical_with_multiplier_and_density(chart):
    c = chart()
    axes = {
        "q": c.axis("flow", "gal/min(US)", BOTTOM, 0, 8, multiplier=100.0),
        "h": c.axis("head", "bar", LEFT, 0, 6, density_kgm3=850.0),
        "e": c.axis("efficiency", "%", RIGHT, 0, 120),
    }
    m = calibrate({"axes": axes})
    q, h = m.from_pixels(c.pixel(1.0, 1.0)[None], ("q", "h"))[0]
    assert q == pytest.approx(800 * 0.22712470704, rel=1e-6)
    assert h == pytest.approx(6e5 / (850.0 * 9.80665), rel=1e-6)
    assert m.from_pixels(c.pixel(1.0, 1.0)[None], ("q", "e"))[0, 1] == pytest.approx(1.2, rel=1e-6)


def test_marks_scattered_over_crossings_place_the_axes(chart):
    c = chart(turn_deg=1.5)
    crossings = [(0.1, 0.2), (0.5, 0.9), (0.9, 0.3), (0.3, 0.6)]
    others = [(0.2, 0.1), (0.8, 0.8), (0.4, 0.5), (0.9, 0.1)]
    m = calibrate({"axes": {"q": c.axis("flow", "m3/h", crossings, 0, 200), "h": c.axis("head", "m", others, 0, 60)}})
    u, v, at = c.grid()
    np.testing.assert_allclose(m.from_pixels(at, ("q", "h")), np.stack([200 * u, 60 * v], -1), atol=1e-3)


def test_two_marks_on_opposite_corners_do_not_lean_the_other_axis(chart):
    c = chart()
    m = calibrate({"axes": {"q": c.axis("flow", "m3/h", [(0, 0), (1, 1)], 0, 200), "h": c.axis("head", "m", LEFT, 0, 60)}})
    u, v, at = c.grid()
    np.testing.assert_allclose(m.from_pixels(at, ("q", "h")), np.stack([200 * u, 60 * v], -1), atol=1e-3)
    assert [n.code for n in m.notices] == ["calibration-direction"]


def test_one_click_may_serve_two_axes(chart):
    c = chart(turn_deg=-0.7)
    corners = [(0, 0), (1, 0), (1, 1), (0, 1)]
    m = calibrate({"axes": {"q": c.axis("flow", "m3/h", corners, 0, 200), "h": c.axis("head", "m", corners, 0, 60)}})
    u, v, at = c.grid()
    np.testing.assert_allclose(m.from_pixels(at, ("q", "h")), np.stack([200 * u, 60 * v], -1), atol=1e-6)


def test_two_scales_on_the_same_clicks_keep_their_exact_ratio(chart):
    c, rng = chart(), np.random.default_rng(4)
    power = c.axis("power", "kW", RIGHT, 0, 40, rng=rng)
    eta = {**power, "quantity": "efficiency", "unit": "%", "marks": [{"at": k["at"], "value": 2.5 * k["value"]} for k in power["marks"]]}
    axes = {"q": c.axis("flow", "m3/h", BOTTOM, 0, 200, rng=rng), "h": c.axis("head", "m", LEFT, 0, 60, rng=rng), "p": power, "e": eta}
    m = calibrate({"axes": axes})
    _, _, at = c.grid()
    p, e = m.from_pixels(at, ("q", "p"))[:, 1], m.from_pixels(at, ("q", "e"))[:, 1]
    np.testing.assert_allclose(e, 2.5 * p / 100, rtol=1e-9, atol=1e-9)


def test_derivatives_match_small_steps(chart):
    c, rng = chart(keystone=(0.12, 0.08)), np.random.default_rng(6)
    axes = {
        "q": c.axis("flow", "m3/h", BOTTOM, 1, 200, rng=rng, log=True),
        "h": c.axis("head", "m", LEFT, 0, 60, rng=rng),
        "e": c.axis("efficiency", "%", RIGHT, 0, 100, rng=rng),
    }
    m = calibrate({"axes": axes})
    assert m.projective
    at = c.pixel([0.2, 0.7], [0.3, 0.8])
    for k in range(2):
        step = np.zeros(2)
        step[k] = 1e-3
        slope = (m.from_pixels(at + step, ("q", "e")) - m.from_pixels(at - step, ("q", "e"))) / 2e-3
        np.testing.assert_allclose(m.pixel_size(at, ("q", "e"))[:, :, k], slope, rtol=1e-5, atol=1e-9)
    basis = m.shared_basis(at, ("q", "e"))
    for k in range(len(m.parameters)):
        moved = []
        for sign in (1, -1):
            parameters = m.parameters.copy()
            parameters[k] += sign * 1e-6
            twin = object.__new__(type(m))
            twin.__dict__.update(m.__dict__, parameters=parameters)
            moved.append(twin.from_pixels(at, ("q", "e")))
        np.testing.assert_allclose(basis[:, :, k], (moved[0] - moved[1]) / 2e-6, rtol=1e-4, atol=1e-6)


def test_the_outline_covers_the_marks_and_inside_knows_it(chart):
    c = chart()
    m = calibrate({"axes": {"q": c.axis("flow", "m3/h", BOTTOM, 0, 200), "h": c.axis("head", "m", LEFT, 0, 60)}}, page_size=(1240, 1754))
    _, _, at = c.grid()
    assert m.inside(at).all()
    assert not m.inside([[5.0, 5.0], [1235.0, 1700.0], [-40.0, 600.0]]).any()
    assert m.outline[:, 0].max() <= 1239.5
    result = m.panel_result()
    assert result.map_pixels.shape == (81, 2) and {k: v.shape for k, v in result.map_values.items()} == {"q": (81,), "h": (81,)}
    np.testing.assert_allclose(m.from_pixels(result.map_pixels, ("q", "h"))[:, 1], result.map_values["h"], atol=1e-9)


def test_a_given_outline_is_kept(chart):
    c = chart()
    polygon = [[150.0, 1200.0], [1100.0, 1200.0], [1100.0, 300.0], [150.0, 300.0]]
    panel = {"axes": {"q": c.axis("flow", "m3/h", BOTTOM, 0, 200), "h": c.axis("head", "m", LEFT, 0, 60)}, "outline": polygon}
    np.testing.assert_array_equal(calibrate(panel).outline, polygon)


def _panel(flow, head, **kwargs):
    def axis(quantity, unit, marks):
        return {
            "quantity": quantity,
            "unit": unit,
            "scale": "linear",
            "marks": [{"at": a, "value": x} for a, x in marks],
        }

    out = {"axes": {"q": axis("flow", "m3/h", flow), "h": axis("head", "m", head)}}
    for name, changes in kwargs.items():
        out["axes"][name].update(changes)
    return out


GOOD_Q = [([100, 900], 0), ([500, 900], 50), ([900, 900], 100)]
GOOD_H = [([100, 900], 0), ([100, 100], 60)]


@pytest.mark.parametrize(
    ("panel", "code", "path"),
    [
        (_panel(GOOD_Q[:1], GOOD_H), "too-few-marks", "$.panels[2].axes.q.marks"),
        (_panel(GOOD_Q, []), "too-few-marks", "$.panels[2].axes.h.marks"),
        (_panel(GOOD_Q, [([100, 900], 0), ([101, 900], 60)]), "same-place", "$.panels[2].axes.h.marks[1].at"),
        (_panel(GOOD_Q, [([100, 900], 60), ([100, 100], 60)]), "equal-values", "$.panels[2].axes.h.marks[1].value"),
        (_panel([*GOOD_Q, ([700, 900], 50)], GOOD_H), "equal-values", "$.panels[2].axes.q.marks[3].value"),
        (_panel(GOOD_Q, GOOD_H, h={"scale": "log10"}), "log-value", "$.panels[2].axes.h.marks[0].value"),
        (_panel(GOOD_Q, GOOD_H, h={"unit": "furlong"}), "unknown-unit", "$.panels[2].axes.h.unit"),
        (_panel(GOOD_Q, GOOD_H, h={"unit": "bar"}), "unknown-unit", "$.panels[2].axes.h.unit"),
        (_panel(GOOD_Q, GOOD_H, h={"scale": "sqrt"}), "scale", "$.panels[2].axes.h.scale"),
        (_panel(GOOD_Q, [([150, 900], 0), ([800, 900], 60)]), "collinear", "$.panels[2].axes.q.marks"),
        (_panel(GOOD_Q, [([100, 500], 0), ([800, 510], 60)]), "parallel", "$.panels[2].axes.h.marks"),
        (_panel(GOOD_Q, [([100, 900], 0), ([100, math.nan], 60)]), "not-a-number", "$.panels[2].axes.h.marks[1]"),
        ({"axes": {"q": _panel(GOOD_Q, GOOD_H)["axes"]["q"]}}, "no-axis", "$.panels[2].axes"),
        ({"axes": {"h": _panel(GOOD_Q, GOOD_H)["axes"]["h"]}}, "no-axis", "$.panels[2].axes"),
        ({**_panel(GOOD_Q, GOOD_H), "outline": [[0, 0], [10, 10]]}, "outline", "$.panels[2].outline"),
        ({**_panel(GOOD_Q, GOOD_H), "outline": [[0, 0], [10, 10], [20, 20]]}, "outline", "$.panels[2].outline"),
    ],
)
def test_marks_that_cannot_place_an_axis_are_refused_by_path(panel, code, path):
    with pytest.raises(CalibrationError) as caught:
        calibrate(panel, path="$.panels[2]")
    assert (caught.value.code, caught.value.path) == (code, path)


def test_physical_limits_do_not_judge_marks(chart):
    c = chart()
    m = calibrate({"axes": {"q": c.axis("flow", "m3/h", BOTTOM, -50, 200), "e": c.axis("efficiency", "%", LEFT, -10, 160)}})
    assert m.from_pixels(c.pixel(0.0, 1.0)[None], ("q", "e"))[0] == pytest.approx([-50.0, 1.6], abs=1e-6)
