"""A curve drawn by hand: it passes its clicks and its uncertainty covers."""

import numpy as np
import pytest
from scipy.spatial import cKDTree

from curvebank.trace.hand import by_hand, click_sigma

T = np.linspace(0, 1, 4000)
LINES = [
    np.stack([100 + 900 * T, 200 + 350 * T**2.2], 1),
    np.stack([100 + 900 * T, 700 - 1500 * T * (1.05 - T)], 1),
    np.stack([100 + 700 * T, 600 - 120 * T - 90 * T**2 + 30 * np.sin(4 * T)], 1),
    np.stack([500 + 260 * np.cos(4.2 * T - 2.1), 400 + 170 * np.sin(4.2 * T - 2.1)], 1),
]


def clicked(line, count, rng, half):
    share = np.linspace(0, 1, count)
    share[1:-1] += rng.uniform(-0.3, 0.3, count - 2) / count
    return line[(share * (len(line) - 1)).astype(int)] + rng.uniform(-half, half, (count, 2))


def test_stated_uncertainty_covers_over_many_clickings():
    rng, within = np.random.default_rng(6), []
    for line in LINES:
        tree = cKDTree(line)
        for count in (6, 8, 12, 20):
            for _ in range(6):
                got = by_hand(clicked(line, count, rng, 1.5), False)
                within.append((tree.query(got.pixels)[0] / got.sigma_px)[4:-4])
    z = np.concatenate(within)
    assert 0.60 < (z < 1).mean() < 0.76 and 0.91 < (z < 2).mean() < 0.985


def test_it_passes_its_clicks_and_doubts_the_gaps_more():
    points = clicked(LINES[1], 7, np.random.default_rng(0), 0.5)
    got = by_hand(points, False)
    assert max(np.hypot(*(got.pixels - p).T).min() for p in points) < 0.8
    at = [int(np.hypot(*(got.pixels - p).T).argmin()) for p in points]
    wide = int(np.argmax(np.diff(at)))
    assert got.sigma_px.max() > got.sigma_px[at].max()
    assert got.sigma_px[(at[wide] + at[wide + 1]) // 2] > 0.4 and got.source == "hand"


def test_a_shaky_hand_shows():
    rng = np.random.default_rng(2)
    calm, shaky = (np.mean([click_sigma(clicked(LINES[0], 25, rng, half), False) for _ in range(10)]) for half in (1.0, 4.0))
    assert calm < 1.0 and shaky > 1.6


@pytest.mark.parametrize("count", [6, 9])
def test_a_loop_is_closed_and_smooth(count):
    phi = np.arange(count) / count * 2 * np.pi
    got = by_hand(np.stack([300 + 150 * np.cos(phi), 200 + 90 * np.sin(phi)], 1), True)
    assert got.closed and np.hypot(*(got.pixels[0] - got.pixels[-1])) < 1.5
    turn = np.diff(np.unwrap(np.arctan2(*np.diff(got.pixels, axis=0).T[::-1])))
    assert np.abs(turn).max() < 0.15
