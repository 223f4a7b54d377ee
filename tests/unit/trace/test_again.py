"""A moved, added or removed click re-traces its own part; the rest stays to the bit and the whole agrees with a full trace."""

import numpy as np
import pytest

from curvebank.errors import TraceError
from curvebank.trace import Clicks, Locked, again, trace_panel

X = np.linspace(0, 1, 300)
FALL = np.stack([60 + 560 * X, 90 + 280 * X**2], 1)
OTHER = FALL + np.stack([0 * X, 18 * np.cos(3 * np.pi * X)], 1)
PHI = np.linspace(0, 2 * np.pi, 500)
LOOP = np.stack([350 + 190 * np.cos(PHI) * (1 + 0.1 * np.cos(PHI)), 250 + 110 * np.sin(PHI)], 1)


@pytest.fixture(scope="module")
def crossed(tools):
    pixels, (line, _) = tools["paint"]([FALL, OTHER])
    return tools["prepared_of"](pixels), line


@pytest.fixture(scope="module")
def fall(tools):
    pixels, (line,) = tools["paint"]([FALL])
    return tools["prepared_of"](pixels), line


@pytest.fixture(scope="module")
def loop(tools):
    pixels, (line,) = tools["paint"]([LOOP])
    return tools["prepared_of"](pixels), line


def on(line, shares, jitter=2.0, seed=3):
    rng = np.random.default_rng(seed)
    at = np.array([line[int(s * (len(line) - 1))] for s in shares])
    return at + rng.uniform(-jitter, jitter, at.shape)


def full(ready, box, asked):
    (got,) = trace_panel(ready, box, [asked])
    return got


def same_rows(a, b):
    """Share of the pixels of ``a`` that stand in ``b`` to the bit, with their sigma."""
    have = {(*p, s) for p, s in zip(b.pixels.tolist(), b.sigma_px.tolist(), strict=True)}
    return np.mean([(*p, s) in have for p, s in zip(a.pixels.tolist(), a.sigma_px.tolist(), strict=True)])


def off(got, ref, line):
    """Root mean square of the distance across between two traces over sigma, by their distances from the true line."""
    index = np.searchsorted(ref.pixels[:, 0], got.pixels[:, 0]).clip(1, len(ref.pixels) - 1)
    a, b = ref.pixels[index - 1], ref.pixels[index]
    edge = (b - a) / np.hypot(*(b - a).T)[:, None]
    gap = got.pixels - a
    across = gap[:, 0] * edge[:, 1] - gap[:, 1] * edge[:, 0]
    return float(np.sqrt(np.mean((across / got.sigma_px) ** 2)))


def test_nothing_changed_is_the_trace_itself(fall, box):
    ready, line = fall
    asked = Clicks(id="c", points=on(line, (0.02, 0.5, 0.98)))
    trace = full(ready, box, asked)
    assert again(ready, box, asked, asked, trace) is trace


@pytest.mark.parametrize("turned", [1, -1])
@pytest.mark.parametrize("shift", [3.0, -25.0])
def test_a_click_moved_along_the_line_reads_only_its_surroundings(fall, box, turned, shift):
    ready, line = fall
    points = on(line, (0.02, 0.3, 0.6, 0.98))[::turned]
    before = Clicks(id="c", points=points)
    trace = full(ready, box, before)
    moved = points.copy()
    k = 1 if turned == 1 else 2
    moved[k] = line[int(0.3 * (len(line) - 1) + shift)] + [0.5, -0.5]
    after = Clicks(id="c", points=moved)
    got = again(ready, box, after, before, trace)
    assert same_rows(trace, got) > 0.4
    assert np.array_equal(got.pixels[0], trace.pixels[0]) and np.array_equal(got.pixels[-1], trace.pixels[-1])
    ref = full(ready, box, after)
    assert off(got if turned == 1 else flip(got), ref if turned == 1 else flip(ref), line) < 1.0
    assert not got.flagged and got.confidence == pytest.approx(ref.confidence, abs=0.1)


def flip(trace):
    from curvebank.trace.direction import flipped

    return flipped(trace)


def test_a_click_moved_onto_the_right_line_mends_the_part_between_its_neighbours(crossed, tools, box):
    ready, line = crossed
    points = on(line, (0.02, 0.12, 0.32, 0.6, 0.98))
    wrong = points.copy()
    x = (points[2, 0] - 60) / 560
    wrong[2] = [points[2, 0], 90 + 280 * x**2 + 18 * np.cos(3 * np.pi * x)]
    before, after = Clicks(id="c", points=wrong), Clicks(id="c", points=points)
    trace = full(ready, box, before)
    assert tools["score"](line, False, trace.pixels)["switched"]
    got = again(ready, box, after, before, trace)
    found = tools["score"](line, False, got.pixels)
    assert not found["failed"] and found["rms"] < 0.2
    left = np.hypot(*(trace.pixels - points[1]).T).argmin()
    assert np.array_equal(got.pixels[: left + 1], trace.pixels[: left + 1])
    assert np.hypot(*np.diff(got.pixels, axis=0).T).max() < 1.6


@pytest.mark.parametrize("kind", ["guide", "added", "removed", "end"])
def test_other_changes(fall, tools, box, kind):
    ready, line = fall
    points = on(line, (0.02, 0.3, 0.6, 0.98))
    before = Clicks(id="c", points=points)
    after = {
        "guide": Clicks(id="c", points=points, guides=on(line, (0.8,))),
        "added": Clicks(id="c", points=np.insert(points, 2, on(line, (0.45,)), axis=0)),
        "removed": Clicks(id="c", points=np.delete(points, 1, axis=0)),
        "end": Clicks(id="c", points=np.vstack([on(line, (0.06,)), points[1:]])),
    }[kind]
    trace = full(ready, box, before)
    got = again(ready, box, after, before, trace)
    found = tools["score"](line, False, got.pixels)
    assert not found["failed"] and found["rms"] < 0.05 and max(found["ends"]) < 3
    assert same_rows(trace, got) > 0.3
    assert off(got, full(ready, box, after), line) < 1.0


def test_a_loop_is_mended_in_place(loop, tools, box):
    ready, line = loop
    points = on(line, (0.05, 0.25, 0.45, 0.65, 0.85))
    before = Clicks(id="c", points=points, closed=True)
    trace = full(ready, box, before)
    for k in range(5):
        moved = points.copy()
        moved[k] = on(line, (0.05 + 0.2 * k + 0.02,), seed=k)[0]
        got = again(ready, box, Clicks(id="c", points=moved, closed=True), before, trace)
        found = tools["score"](line, True, got.pixels)
        assert got.closed and np.array_equal(got.pixels[0], got.pixels[-1])
        assert not found["failed"] and found["rms"] < 0.06
        assert same_rows(trace, got) > 0.5
        assert np.hypot(*(got.pixels[0] - moved[0])) < 25


def test_a_locked_stretch_stays_through_an_edit(fall, box):
    ready, line = fall
    points = on(line, (0.02, 0.3, 0.6, 0.98))
    stretch = full(ready, box, Clicks(id="c", points=points)).pixels[400:460] + [0, 0.05]
    before = Clicks(id="c", points=points, locked=[Locked(pixels=stretch)])
    trace = full(ready, box, before)
    for share in (0.33, 0.62):
        moved = points.copy()
        moved[1 if share < 0.5 else 2] = on(line, (share,))[0]
        got = again(ready, box, Clicks(id="c", points=moved, locked=before.locked), before, trace)
        have = {tuple(p) for p in got.pixels}
        assert all(tuple(p) in have for p in stretch)


def test_a_wrong_click_is_named_and_another_question_is_traced_in_full(fall, box):
    ready, line = fall
    points = on(line, (0.02, 0.5, 0.98))
    before = Clicks(id="c", points=points)
    trace = full(ready, box, before)
    bad = points.copy()
    bad[1] = [300, 460]
    got = again(ready, box, Clicks(id="c", points=bad), before, trace)
    assert isinstance(got, TraceError) and got.code == "off-ink"
    cut = Clicks(id="c", points=points, ends="click")
    got, ref = again(ready, box, cut, before, trace), full(ready, box, cut)
    assert np.array_equal(got.pixels, ref.pixels)
    elsewhere = Clicks(id="c", points=on(line, (0.1, 0.9), seed=8))
    assert np.array_equal(again(ready, box, elsewhere, before, trace).pixels, full(ready, box, elsewhere).pixels)
