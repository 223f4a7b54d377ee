"""The parts of a trace on arrays whose answer can be seen."""

import numpy as np
import pytest

from curvebank.trace import smooth
from curvebank.trace.axis import from_polyline, through
from curvebank.trace.band import ridge
from curvebank.trace.presence import EMPTY, INKED, Presence, Rhythm
from curvebank.trace.profile import Shape
from curvebank.trace.route import best_path, click_pull, segment_costs


def test_basis_sums_to_one_and_periodic_basis_wraps():
    t = np.linspace(0, 1, 50)
    assert np.allclose(smooth.basis(t, 7, False).sum(axis=1), 1)
    ring = smooth.basis(np.array([0.0, 1.0]), 7, True)
    assert np.allclose(ring[0], ring[1]) and ring.shape == (2, 7)


def test_a_parabola_passes_the_smoother_untouched():
    t = np.linspace(0, 1, 80)
    y = 3 - 2 * t + 5 * t**2
    got = smooth.fit(t, y + np.random.default_rng(0).normal(0, 1e-3, 80), pieces=20)
    assert np.abs(got.value(t)[:, 0] - y).max() < 1e-3
    assert got.freedom < 6


def test_outliers_do_not_bend_the_smoother():
    t = np.linspace(0, 1, 200)
    y = np.sin(5 * t)
    spoiled = y + np.random.default_rng(1).normal(0, 0.01, 200)
    spoiled[60:70] += 3
    got = smooth.fit(t, spoiled, pieces=20)
    assert np.abs(got.value(t)[:, 0] - y).max() < 0.03


def test_smoother_uncertainty_covers():
    """The Bayesian interval holds 68 % of errors within one sigma across the curve (Nychka 1988), here over 200 draws."""
    rng, t = np.random.default_rng(2), np.linspace(0, 1, 120)
    y = np.sin(6 * t) + 0.3 * np.cos(14 * t)
    hit = []
    for _ in range(200):
        got = smooth.fit(t, y + rng.normal(0, 0.2, 120), pieces=25, cut=0)
        hit.append((np.abs(got.value(t)[:, 0] - y) <= got.sigma(t)).mean())
    assert 0.60 < np.mean(hit) < 0.76


def test_axis_through_clicks_meets_them():
    points = np.array([[0.0, 0.0], [50.0, 30.0], [120.0, 20.0], [160.0, -40.0]])
    axis, at = through(points, False)
    assert np.abs(axis.at(at)[0] - points).max() < 0.1
    ring, at = through(points, True)
    assert np.abs(ring.at(at)[0] - points).max() < 0.15
    assert np.allclose(ring.points[0], ring.points[-1], atol=1e-6)


def test_axis_normals_and_radius_of_a_circle():
    a = np.linspace(0, 2 * np.pi, 400)
    ring = from_polyline(np.stack([80 * np.cos(a), 80 * np.sin(a)], 1), True)
    _, normal = ring.at(ring.s)
    assert np.abs((normal * ring.points).sum(axis=1) + 80).max() < 0.1
    assert ring.tightest_radius() == pytest.approx(80, rel=0.02)
    assert ring.length == pytest.approx(2 * np.pi * 80, rel=1e-3)


def test_ridge_sees_a_line_but_not_an_edge():
    band = np.zeros((1, 21), np.float32)
    band[0, 10] = 0.5
    assert ridge(band, 3, 0.25)[0, 10] == 1
    band[0, 10:] = 0.5
    assert ridge(band, 3, 0.25)[0, 10:17].max() == 0


def test_path_goes_straight_over_a_darker_crossing():
    """Two straight lines cross; the path that begins on one ends on it although the other is twice as dark."""
    rows, width = 160, 81
    field = np.zeros((rows, width), np.float32)
    for r in range(rows):
        field[r, 20 + r // 4] = 0.5
        field[r, 60 - r // 4] = 1.0
    offsets = np.arange(width) - 40.0
    costs = segment_costs(np.maximum(field, 0), rows // 8, 6)
    pulls = {0: click_pull(offsets, -20.0, 4.0), rows // 8: click_pull(offsets, 20.0, 4.0)}
    nodes, moves, _ = best_path(costs, 0.05, 4, pulls)
    assert np.abs(nodes - (20 + 2 * np.arange(rows // 8 + 1))).max() <= 1
    assert (np.diff(nodes) == moves).all()


def test_click_pull_forbids_what_is_far():
    pull = click_pull(np.array([0.0, 4.0, 13.0]), 0.0, 4.0)
    assert pull[0] == 0 and pull[1] == pytest.approx(0.25) and pull[2] > 1e5


def test_profile_slope_is_the_derivative():
    shape = Shape(3.0, 0.8, 0.02, 1.0)
    d = np.linspace(-4, 4, 81)
    numeric = (shape.value(d + 1e-5) - shape.value(d - 1e-5)) / 2e-5
    assert np.abs(numeric - shape.slope(d)).max() < 1e-6
    assert shape.value(np.zeros(1))[0] == pytest.approx(1)


def test_end_of_a_row_of_dashes():
    from curvebank.trace.ends import walk

    state = np.array([INKED] * 20 + [EMPTY] * 8 + [INKED] * 20 + [EMPTY] * 40, np.int8)
    flat = np.zeros(len(state))
    seen = Presence(np.arange(len(state), dtype=float), state, flat, flat, flat, flat)
    assert walk(seen, Rhythm(True, 12.0, 10.0), 1.0, 10) == pytest.approx(47.5)
    assert walk(seen, Rhythm(False, 4.0, 14.0), 1.0, 10) == pytest.approx(19.5)
