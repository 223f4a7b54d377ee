"""Marks that contradict each other: a slip is named with the value that fits; a photo and warped paper are not called slips."""

import numpy as np
import pytest

from curvebank.axes import calibrate
from curvebank.axes.suspects import round_values, tick_cost

BOTTOM = [(0.0, 0.0), (0.5, 0.0), (1.0, 0.0)]


def _panel(c, rng, head=None, places=None, power=None):
    axes = {"flow": c.axis("flow", "m3/h", BOTTOM, 0, 200, rng=rng)}
    places = places or [(0.0, 0.0), (0.0, 0.4), (0.0, 1.0)]
    axes["head"] = c.axis("head", "m", places, 0, 50, rng=rng, typed=head)
    if power is not None:
        axes["power"] = c.axis("power", "kW", [(1.0, 0.0), (1.0, 0.4), (1.0, 1.0)], 0, 50, rng=rng, typed=power)
    return {"axes": axes}


@pytest.mark.parametrize("seed", range(5))
def test_a_mistyped_value_is_named_with_the_value_that_fits(chart, seed):
    rng = np.random.default_rng(seed)
    m = calibrate(_panel(chart(turn_deg=0.6), rng, power=[0, 25, 50]))
    assert m.suspects == [{"axis": "power", "mark": 1, "typed": 25.0, "fits": 20.0, "sure": True, "swapped_with": None}]
    assert [n.message for n in m.notices] == [
        "The power mark typed 25 sits where 20.0 kW belongs. Correct it; the map leaves this mark out until then."
    ]
    assert m.mark_residuals["power"][1] > 50
    at = chart(turn_deg=0.6).pixel(0.5, 0.7)
    assert m.from_pixels(at[None], ("flow", "power"))[0, 1] == pytest.approx(35.0, abs=0.3)


def test_three_marks_may_leave_two_answers_and_both_are_said(chart):
    # 0, 2, 18 with 180 typed: 18 at the end and 20 in the middle are equally good.
    places = [(0.0, 0.0), (0.0, 1 / 9), (0.0, 1.0)]
    m = calibrate(_panel(chart(), np.random.default_rng(3), head=[0, 2, 180], places=places))
    assert {(s["mark"], s["fits"]) for s in m.suspects} == {(1, 20.0), (2, 18.0)}
    assert not any(s["sure"] for s in m.suspects)
    assert "One of these is mistyped" in m.notices[0].message


def test_four_marks_decide(chart):
    places = [(0.0, 0.0), (0.0, 1 / 9), (0.0, 5 / 9), (0.0, 1.0)]
    m = calibrate(_panel(chart(), np.random.default_rng(3), head=[0, 2, 10, 180], places=places))
    assert [(s["mark"], s["fits"], s["sure"]) for s in m.suspects] == [(3, 18.0, True)]


def test_swapped_values_are_told_from_a_typing_slip(chart):
    m = calibrate(_panel(chart(), np.random.default_rng(1), head=[20, 0, 50]))
    assert [(s["mark"], s["typed"], s["fits"], s["swapped_with"]) for s in m.suspects] == [(0, 20.0, 0.0, 1)]
    assert m.notices[0].code == "calibration-swapped"


def test_a_slip_on_a_log_scale(chart):
    c, rng = chart(), np.random.default_rng(2)
    places = [(0.0, 0.0), (0.0, float(np.log(6) / np.log(20))), (0.0, 1.0)]
    head = c.axis("head", "m", places, 5, 100, rng=rng, log=True, typed=[5, 50, 100])
    m = calibrate({"axes": {"q": c.axis("flow", "m3/h", BOTTOM, 0, 200, rng=rng), "h": head}})
    assert [(s["mark"], s["fits"]) for s in m.suspects if s["sure"]] == [(1, 30.0)]


def test_two_slips_on_two_axes(chart):
    places = [(0.0, 0.0), (0.0, 0.2), (0.0, 0.6), (0.0, 1.0)]
    m = calibrate(_panel(chart(), np.random.default_rng(8), head=[0, 10, 20, 50], places=places, power=[0, 25, 50]))
    assert {(s["axis"], s["mark"], s["fits"]) for s in m.suspects} == {("head", 2, 30.0), ("power", 1, 20.0)}


@pytest.mark.parametrize("seed", range(12))
def test_click_noise_alone_raises_no_suspicion_and_no_perspective(chart, seed):
    m = calibrate(_panel(chart(turn_deg=1.2), np.random.default_rng(seed), power=[0, 20, 50]))
    assert not m.suspects and not m.notices and not m.projective


def test_warped_paper_is_not_called_a_slip(chart):
    c, rng = chart(width=1100.0, height=1300.0), np.random.default_rng(4)
    panel = _panel(c, rng, power=[0, 20, 50])
    for axis in panel["axes"].values():
        for mark in axis["marks"]:
            x, y = mark["at"]
            mark["at"] = [x + 6 * np.sin(y / 300), y + 6 * np.cos(x / 350)]
    m = calibrate(panel)
    assert not m.suspects


def test_round_values_and_tick_costs():
    assert round_values(19.7, 20.4, 20.1)[0] == 20.0
    assert round_values(-0.2, 0.3, 0.1)[0] == 0.0
    assert tick_cost([0, 20, 50], False) < tick_cost([0, 25, 62.5], False) < tick_cost([0, 21.37, 50], False)
    assert tick_cost([1, 10, 100], True) < tick_cost([1, 13, 100], True)
