"""What three clicks within +-1.5 px are worth, over many invented panels with known truth (Monte Carlo, fixed seeds)."""

import numpy as np
import pytest

from curvebank.axes import calibrate

PANELS = 60


def _trial(chart, rng, right, **shape):
    c = chart(width=rng.uniform(800, 1900), height=rng.uniform(700, 1700), turn_deg=rng.normal(0, 1), **shape)
    middle = [float(rng.choice([0.4, 0.5, 0.6, 0.7])) for _ in range(3)]
    axes = {
        "q": c.axis("flow", "m3/h", [(0, 0), (middle[0], 0), (1, 0)], 0, 100, rng=rng),
        "h": c.axis("head", "m", [(0, 0), (0, middle[1]), (0, 1)], 0, 100, rng=rng),
    }
    if right:
        axes["e"] = c.axis("efficiency", "1", [(1, 0), (1, middle[2]), (1, 1)], 0, 100, rng=rng)
    m = calibrate({"axes": axes})
    u, v, at = c.grid(7)
    miss = m.from_pixels(at, ("q", "h")) - 100 * np.stack([u, v], -1)
    return m, miss, m.covariance(at, ("q", "h"))


@pytest.mark.parametrize(("right", "median", "p90"), [(False, 0.055, 0.12), (True, 0.04, 0.08)])
def test_three_clicks_an_axis_on_a_flat_scan(chart, right, median, p90):
    rng = np.random.default_rng(20)
    errors, cover1, cover2 = [], [], []
    for _ in range(PANELS):
        m, miss, covariance = _trial(chart, rng, right)
        assert not m.projective and not m.suspects
        errors += list(np.sqrt(np.mean(miss**2, axis=0)))
        size = np.abs(miss) / np.sqrt(np.einsum("nkk->nk", covariance))
        cover1.append(np.mean(size < 1))
        cover2.append(np.mean(size < 2))
    assert np.median(errors) < median
    assert np.percentile(errors, 90) < p90
    assert 0.60 <= np.mean(cover1) <= 0.76
    assert 0.91 <= np.mean(cover2) <= 0.98


def test_a_photo_with_three_marked_sides_is_straightened(chart):
    rng = np.random.default_rng(21)
    errors = []
    for _ in range(25):
        m, miss, _ = _trial(chart, rng, True, keystone=tuple(rng.uniform(0.05, 0.18, 2)))
        assert m.projective
        errors += list(np.sqrt(np.mean(miss**2, axis=0)))
    assert np.median(errors) < 0.07


def test_a_photo_with_two_marked_sides_says_that_it_is_a_guess(chart):
    m, miss, _ = _trial(chart, np.random.default_rng(22), False, keystone=(0.13, 0.17))
    assert m.projective
    assert [n.code for n in m.notices] == ["calibration-perspective"]
    assert np.sqrt(np.mean(miss**2)) < 0.5
