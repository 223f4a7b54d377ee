"""Locked stretches: their pixels come back untouched, the rest is traced to their ends in their direction."""

import measures
import numpy as np
import pytest

from curvebank.errors import TraceError
from curvebank.trace import Clicks, Locked, trace_panel

X = np.linspace(0, 1, 300)
FALL = np.stack([60 + 560 * X, 90 + 280 * X**2], 1)
PHI = np.linspace(0, 2 * np.pi, 500)
LOOP = np.stack([350 + 190 * np.cos(PHI) * (1 + 0.1 * np.cos(PHI)), 250 + 110 * np.sin(PHI)], 1)


@pytest.fixture(scope="module")
def fall(tools):
    pixels, (line,) = tools["paint"]([FALL])
    return tools["prepared_of"](pixels), line


def on(line, shares, jitter=2.0, seed=3):
    rng = np.random.default_rng(seed)
    at = np.array([line[int(s * (len(line) - 1))] for s in shares])
    return at + rng.uniform(-jitter, jitter, at.shape)


def one(ready, box, points, **options):
    (got,) = trace_panel(ready, box, [Clicks(id="c", points=points, **options)])
    return got


def rows_of(got, stretch):
    """Index at which a stretch's pixels stand in a trace, to the bit and in a run."""
    at = np.flatnonzero((got.pixels == stretch[0]).all(axis=1))
    assert len(at) == 1 and np.array_equal(got.pixels[at[0] : at[0] + len(stretch)], stretch)
    return int(at[0])


def kink(got, row, reach=12):
    """Turn [rad] of the trace at a row, from chords before and behind it."""
    a, b = got.pixels[row] - got.pixels[row - reach], got.pixels[row + reach] - got.pixels[row]
    return abs(np.arctan2(a[0] * b[1] - a[1] * b[0], a @ b))


@pytest.mark.parametrize("turned", [1, -1])
def test_a_locked_stretch_comes_back_to_the_bit(fall, tools, box, turned):
    ready, line = fall
    points = on(line, (0.02, 0.5, 0.98))
    free = one(ready, box, points)
    stretch = free.pixels[200:320] + [0.0, 0.04]
    got = one(ready, box, points[::turned], locked=[Locked(pixels=stretch[::-1], sigma_px=0.03)])
    at = rows_of(got, stretch[::turned])
    assert (got.sigma_px[at : at + 120] == 0.03).all()
    found = tools["score"](line[::turned], False, got.pixels)
    assert not found["failed"] and found["rms"] < 0.04 and max(found["ends"]) < 3
    step = np.hypot(*np.diff(got.pixels, axis=0).T)
    assert 0.5 < step.min() and step.max() < 1.5
    assert len(got.sigma_px) == len(got.pixels)


def test_the_rest_leaves_a_hand_corrected_stretch_in_its_direction(fall, box):
    """A stretch that lies 0.8 px off the ink: no step and no kink at its ends, and back on the ink some way on."""
    ready, line = fall
    points = on(line, (0.02, 0.5, 0.98))
    free = one(ready, box, points)
    stretch = free.pixels[220:300] + [0.0, 0.8]
    got = one(ready, box, points, locked=[Locked(pixels=stretch)])
    at = rows_of(got, stretch)
    step = np.hypot(*np.diff(got.pixels, axis=0).T)
    assert step.max() < 1.5
    assert kink(got, at) < 0.1 and kink(got, at + 79) < 0.1
    far = np.r_[5 : at - 80, at + 160 : len(got.pixels) - 5]  # across the line: its ends are another matter
    gap = measures.distance(got.pixels[far], line)[0]
    assert gap.max() < 0.3 and np.median(gap) < 0.05


def test_two_stretches_one_of_them_before_the_first_click(fall, tools, box):
    ready, line = fall
    free = one(ready, box, on(line, (0.02, 0.5, 0.98)))
    first, second = free.pixels[20:80], free.pixels[400:450]
    got = one(ready, box, on(line, (0.3, 0.98)), locked=[Locked(pixels=second), Locked(pixels=first)])
    assert rows_of(got, first) == 0 and rows_of(got, second) > 100
    assert not tools["score"](line[30:], False, got.pixels)["switched"]
    assert np.hypot(*(got.pixels[-1] - line[-1])) < 3


def test_sparse_pixels_are_kept_and_filled_between(fall, box):
    ready, line = fall
    free = one(ready, box, on(line, (0.02, 0.5, 0.98)))
    stretch = free.pixels[200:320:17]
    got = one(ready, box, on(line, (0.02, 0.5, 0.98)), locked=[{"pixels": stretch.tolist(), "sigma_px": None}])
    for p in stretch:
        assert (got.pixels == p).all(axis=1).sum() == 1
    assert np.hypot(*np.diff(got.pixels, axis=0).T).max() < 1.6


def test_a_loop_around_its_locked_stretches(tools, box):
    pixels, (line,) = tools["paint"]([LOOP])
    ready = tools["prepared_of"](pixels)
    points = on(line, (0.05, 0.25, 0.45, 0.65, 0.85))
    free = one(ready, box, points, closed=True)
    n = len(free.pixels) - 1
    over_seam = free.pixels[np.arange(n - 40, n + 40) % n]
    for stretches in ([free.pixels[100:180]], [free.pixels[100:180], free.pixels[400:470]], [over_seam]):
        got = one(ready, box, points, closed=True, locked=[Locked(pixels=s) for s in stretches])
        assert got.closed and np.array_equal(got.pixels[0], got.pixels[-1])
        for s in stretches:
            kept = {tuple(p) for p in got.pixels}
            assert all(tuple(p) in kept for p in s)
        found = tools["score"](line, True, got.pixels)
        assert not found["failed"] and found["rms"] < 0.06


@pytest.mark.parametrize(
    ("stretch", "code", "says"),
    [
        (FALL[100:140] + [0, -400], "bad-locked", "off the page"),
        ([[300, 150], [300, 150]], "bad-locked", "first locked stretch"),
        ([[300, 150]], "bad-locked", "two or more"),
        ([[300, float("nan")], [310, 150]], "bad-locked", "two or more"),
        (np.stack([np.linspace(80, 560, 400), np.full(400, 480.0)], 1), "locked-elsewhere", "does not lie along the clicks"),
        (FALL[120:180] + [0, 60], "locked-elsewhere", "passes the click at"),
    ],
)
def test_a_stretch_that_does_not_fit_is_named(fall, box, stretch, code, says):
    ready, line = fall
    got = one(ready, box, on(line, (0.02, 0.5, 0.98)), locked=[Locked(pixels=stretch)])
    assert isinstance(got, TraceError) and got.code == code and says in got.message


def test_stretches_over_one_another_are_named(fall, box):
    ready, line = fall
    points = on(line, (0.02, 0.5, 0.98))
    free = one(ready, box, points)
    got = one(ready, box, points, locked=[Locked(pixels=free.pixels[100:200]), Locked(pixels=free.pixels[150:260])])
    assert isinstance(got, TraceError) and got.code == "locked-overlap"
