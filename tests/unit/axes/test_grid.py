"""The printed grid as calibration target: better than the marks where it fits them, left alone where it does not."""

from types import SimpleNamespace

import numpy as np
import pytest

from curvebank.axes import calibrate

BOTTOM, LEFT = [(0.0, 0.0), (0.5, 0.0), (1.0, 0.0)], [(0.0, 0.0), (0.0, 0.4), (0.0, 1.0)]
RIGHT = [(1.0, 0.0), (1.0, 0.5), (1.0, 1.0)]


class Guide:
    """What the sheet layer hands over for a printed line: a track good to a pixel."""

    def __init__(self, points):
        self._points = points

    def points(self):
        return self._points


def _paper(at, bend):
    x, y = at[..., 0], at[..., 1]
    return np.stack([x + bend * np.sin(y / 260.0), y + bend * np.cos(x / 300.0) * 0.8], -1)


def _sheet(c, bend=0.0, shift=0.0, rng=None, lines=6):
    """Ink of a printed grid at panel shares k / (lines - 1) (+ shift), bent like paper, and rough guides for its lines."""
    rng = rng or np.random.default_rng(0)
    ink, guides = np.zeros((1300, 1200), np.float32), []
    t = np.linspace(0, 1, 4000)
    for k in range(lines):
        share = k / (lines - 1) + shift
        for u, v in ((np.full_like(t, share), t), (t, np.full_like(t, share))):
            at = _paper(c.pixel(u, v), bend)
            upright = abs(at[-1, 0] - at[0, 0]) < abs(at[-1, 1] - at[0, 1])
            across, along = (0, 1) if upright else (1, 0)
            for whole in range(int(at[:, along].min()), int(at[:, along].max()) + 1):
                order = np.argsort(at[:, along])
                middle = np.interp(whole, at[order, along], at[order, across])
                near = np.arange(int(middle) - 4, int(middle) + 6)
                value = 200 * np.exp(-0.5 * ((near - middle) / 0.9) ** 2)
                if upright:
                    ink[whole, near] = np.maximum(ink[whole, near], value)
                else:
                    ink[near, whole] = np.maximum(ink[near, whole], value)
            guides.append(Guide(at[:: len(t) // 60] + rng.uniform(-0.7, 0.7)))
    return SimpleNamespace(ink=np.clip(ink, 0, 255).astype(np.uint8), lines=tuple(guides))


def _panel(c, rng, bend=0.0, right=False, grid="auto"):
    axes = {"q": c.axis("flow", "m3/h", BOTTOM, 0, 100), "h": c.axis("head", "m", LEFT, 0, 50)}
    if right:
        axes["e"] = c.axis("efficiency", "%", RIGHT, 0, 100)
    for axis in axes.values():
        for mark in axis["marks"]:
            mark["at"] = list(_paper(np.array(mark["at"]), bend) + rng.uniform(-1.5, 1.5, 2))
    return {"axes": axes, "grid": grid}


def _rms_px(c, m, bend, axis="h", high=50):
    u, v, at = c.grid(9)
    got = m.from_pixels(_paper(at, bend), ("q", axis))
    return np.sqrt(np.mean((got[:, 0] / 100 - u) ** 2)) * 860, np.sqrt(
        np.mean((got[:, 1] / (high * (0.01 if axis == "e" else 1)) - v) ** 2)
    ) * 830


@pytest.mark.parametrize(("bend", "limit"), [(0.0, 0.06), (4.0, 0.9)])
def test_the_grid_beats_the_marks(chart, bend, limit):
    c, rng = chart(turn_deg=0.7), np.random.default_rng(5)
    sheet, panel = _sheet(c, bend), _panel(c, rng, bend, right=True)
    with_grid, alone = calibrate(panel, sheet), calibrate({**panel, "grid": "off"}, sheet)
    assert with_grid.grid.used and with_grid.grid.lines == 12
    assert not alone.grid.used and "switched off" in alone.grid.why
    for axis, high in (("h", 50), ("e", 100)):
        assert max(_rms_px(c, with_grid, bend, axis, high)) < limit
    assert max(_rms_px(c, with_grid, bend)) < 0.5 * max(_rms_px(c, alone, bend))


def test_a_bent_map_has_an_inverse_and_true_derivatives(chart):
    c, rng = chart(), np.random.default_rng(6)
    m = calibrate(_panel(c, rng, 4.0, right=True), _sheet(c, 4.0))
    at = _paper(c.pixel([0.1, 0.5, 0.9], [0.2, 0.6, 0.8]), 4.0)
    values = m.from_pixels(at, ("q", "e"))
    np.testing.assert_allclose(m.to_pixels(values, ("q", "e")), at, atol=1e-7)
    for k in range(2):
        step = np.zeros(2)
        step[k] = 1e-3
        slope = (m.from_pixels(at + step, ("q", "e")) - m.from_pixels(at - step, ("q", "e"))) / 2e-3
        np.testing.assert_allclose(m.pixel_size(at, ("q", "e"))[:, :, k], slope, rtol=1e-4, atol=1e-8)
    assert m.shared_basis(at, ("q", "e")).shape == (3, 2, len(m.parameter_covariance))
    result = m.panel_result()
    np.testing.assert_allclose(m.from_pixels(result.map_pixels, ("q", "h"))[:, 1], result.map_values["h"], atol=1e-9)


def test_lines_off_round_values_are_not_used(chart):
    c, rng = chart(), np.random.default_rng(7)
    panel = _panel(c, rng)
    m, alone = calibrate(panel, _sheet(c, shift=0.037)), calibrate({**panel, "grid": "off"})
    assert not m.grid.used and "marks alone" in m.grid.why
    _, _, at = c.grid()
    np.testing.assert_array_equal(m.from_pixels(at, ("q", "h")), alone.from_pixels(at, ("q", "h")))


def test_the_frame_alone_helps_and_no_lines_leave_the_marks(chart):
    c, rng = chart(), np.random.default_rng(8)
    panel = _panel(c, rng)
    m, alone = calibrate(panel, _sheet(c, lines=2)), calibrate({**panel, "grid": "off"})
    assert m.grid.used and m.grid.lines == 4
    assert max(_rms_px(c, m, 0.0)) < 0.2 * max(_rms_px(c, alone, 0.0))
    assert calibrate(_panel(c, rng), SimpleNamespace(ink=None, lines=())).grid.why.startswith("No printed lines")


def test_a_mistyped_mark_does_not_turn_the_grid(chart):
    c, rng = chart(), np.random.default_rng(9)
    panel = _panel(c, rng)
    panel["axes"]["h"]["marks"][1]["value"] = 25.0
    m = calibrate(panel, _sheet(c))
    assert [(s["axis"], s["mark"], s["fits"]) for s in m.suspects] == [("h", 1, 20.0)]
    assert m.grid.used
    assert max(_rms_px(c, m, 0.0)) < 0.1
