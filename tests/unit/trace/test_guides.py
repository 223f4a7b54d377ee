"""Guides among the clicks, clicks in either direction, the same clicks twice, clicks over nothing."""

import numpy as np
import pytest

from curvebank.errors import TraceError
from curvebank.trace import Clicks, trace_panel
from curvebank.trace.guides import in_order

X = np.linspace(0, 1, 300)
FALL = np.stack([60 + 560 * X, 90 + 280 * X**2], 1)
PHI = np.linspace(0, 2 * np.pi, 500)
LOOP = np.stack([350 + 190 * np.cos(PHI) * (1 + 0.1 * np.cos(PHI)), 250 + 110 * np.sin(PHI)], 1)
BOWL = np.stack([80 + 500 * X, 60 + 380 * (1 - (2 * X - 1) ** 4)], 1)
HOOK = np.stack([100 + 500 * np.sin(2.6 * X), 60 + 350 * X**1.3], 1)


def on(line, shares, jitter=2.0, seed=3):
    rng = np.random.default_rng(seed)
    at = np.array([line[int(s * (len(line) - 1))] for s in shares])
    return at + rng.uniform(-jitter, jitter, at.shape)


@pytest.mark.parametrize("seed", range(8))
def test_guides_find_their_places_whatever_order_they_are_given_in(seed):
    rng = np.random.default_rng(seed)
    spots = on(FALL, np.linspace(0.02, 0.98, 9), 3.0, seed)
    clicked = np.sort(rng.choice(9, 3, replace=False))
    others = rng.permutation(np.setdiff1d(np.arange(9), clicked))
    assert np.array_equal(in_order(spots[clicked], spots[others], False, 2.0), spots)


@pytest.mark.parametrize("line", [BOWL, HOOK])
@pytest.mark.parametrize("seed", range(8))
def test_guides_between_the_ends_of_a_bent_line(line, seed):
    rng = np.random.default_rng(seed)
    spots = on(line, np.linspace(0.02, 0.98, 9), 3.0, seed)
    got = in_order(spots[[0, 4, 8]], spots[rng.permutation([1, 2, 3, 5, 6, 7])], False, 2.0)
    assert np.array_equal(got, spots)


def test_guides_of_a_loop_go_round_it():
    spots = on(LOOP, np.linspace(0, 0.9, 10))
    got = in_order(spots[[0, 3, 6]], spots[[8, 1, 5, 2, 9, 4, 7]], True, 2.0)
    assert np.array_equal(got, spots)


def test_a_guide_on_a_click_says_nothing_new():
    spots = on(FALL, (0.1, 0.9))
    assert np.array_equal(in_order(spots, spots[:1] + 0.5, False, 2.0), spots)


def test_a_guide_turns_a_line_that_two_clicks_cannot_hold(tools, box):
    """A deep U clicked at its two tips is found with two guides, given from right to left."""
    pixels, (line,) = tools["paint"]([BOWL])
    ready = tools["prepared_of"](pixels)
    tips = on(line, (0.02, 0.98))
    (got,) = trace_panel(ready, box, [Clicks(id="c", points=tips, guides=on(line, (0.8, 0.5, 0.2)))])
    found = tools["score"](line, False, got.pixels)
    assert not found["failed"] and found["rms"] < 0.05


def test_a_guide_beyond_the_last_click_carries_the_line_on(tools, box):
    pixels, (line,) = tools["paint"]([FALL])
    ready = tools["prepared_of"](pixels)
    short = Clicks(id="c", points=on(line, (0.1, 0.5), 0), ends="click")
    (got,) = trace_panel(ready, box, [short])
    further = on(line, (0.9,), 0)
    (more,) = trace_panel(ready, box, [Clicks(id="c", points=short.points, ends="click", guides=further)])
    assert np.hypot(*(got.pixels[-1] - short.points[-1])) < 3 and np.hypot(*(more.pixels[-1] - further[0])) < 3


@pytest.mark.parametrize(
    ("guide", "code", "says"), [([[900, 50]], "off-panel", "first guide"), ([[300, float("nan")]], "bad-click", "guide is not a finite")]
)
def test_a_bad_guide_is_named(tools, box, guide, code, says):
    pixels, (line,) = tools["paint"]([FALL])
    (got,) = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="c", points=on(line, (0.02, 0.98)), guides=guide)])
    assert isinstance(got, TraceError) and got.code == code and says in got.message


def test_guides_of_single_points_are_refused(tools, box):
    pixels, _ = tools["paint"]([FALL])
    (got,) = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="c", points=[[100, 90]], guides=[[200, 100]], kind="points")])
    assert isinstance(got, TraceError) and got.code == "guides-of-points"


def test_clicks_in_reverse_order_give_the_same_line_reversed(tools, box):
    pixels, (line,) = tools["paint"]([FALL], noise=12.0)
    ready = tools["prepared_of"](pixels)
    points = on(line, (0.02, 0.5, 0.98))
    (a,), (b,) = (trace_panel(ready, box, [Clicks(id="c", points=p)]) for p in (points, points[::-1]))
    assert np.abs(a.pixels - b.pixels[::-1]).max() < 0.01 and np.abs(a.sigma_px - b.sigma_px[::-1]).max() < 1e-3
    assert np.hypot(*(a.pixels[0] - points[0])) < 20 and np.hypot(*(b.pixels[0] - points[-1])) < 20


def test_a_loop_clicked_either_way_round_from_any_click(tools, box):
    pixels, (line,) = tools["paint"]([LOOP], noise=12.0)
    ready = tools["prepared_of"](pixels)
    points = on(line, (0.05, 0.25, 0.45, 0.65, 0.85))
    (a,) = trace_panel(ready, box, [Clicks(id="c", points=points, closed=True)])
    for order in (points[::-1], np.roll(points, 2, axis=0)):
        (b,) = trace_panel(ready, box, [Clicks(id="c", points=order, closed=True)])
        gap = np.array([np.hypot(*(b.pixels - p).T).min() for p in a.pixels])
        assert gap.max() < 0.01
        assert np.hypot(*(b.pixels[0] - order[0])) < 6 and np.array_equal(b.pixels[0], b.pixels[-1])
        step = b.pixels[len(b.pixels) // 50] - b.pixels[0]
        assert step @ (order[1] - order[0]) > 0


@pytest.mark.parametrize("turned", [1, -1])
def test_two_curves_with_the_same_clicks_name_each_other(tools, box, turned):
    pixels, (line,) = tools["paint"]([FALL])
    points = on(line, (0.02, 0.5, 0.98))
    got = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="a", points=points), Clicks(id="b", points=points[::turned])])
    for trace, other in zip(got, "ba", strict=True):
        (said,) = [n for n in trace.warnings if n.code == "same-clicks"]
        assert f"same clicks as {other}" in said.message and trace.flagged


def test_two_lines_clicked_near_each_other_are_not_the_same(tools, box):
    pixels, lines = tools["paint"]([FALL, FALL + [0, 12]])
    got = trace_panel(
        tools["prepared_of"](pixels), box, [Clicks(id=str(k), points=on(ln, (0.02, 0.5, 0.98))) for k, ln in enumerate(lines)]
    )
    assert not any(n.code == "same-clicks" for t in got for n in t.warnings)


def test_clicks_over_bare_paper_name_the_click(tools, box):
    pixels, _ = tools["paint"]([FALL])
    (got,) = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="c", points=[[80, 300], [200, 360], [300, 420]])])
    assert isinstance(got, TraceError) and got.code == "off-ink" and "first click (80, 300)" in got.message
