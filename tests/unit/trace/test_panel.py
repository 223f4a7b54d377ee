"""Traces of drawn lines whose truth is exact: accuracy, ends, loops, crossings, kinds, refusals."""

from pathlib import Path

import numpy as np
import pytest

from curvebank.errors import Cancelled, TraceError
from curvebank.sheet import load, prepare
from curvebank.trace import Clicks, trace_panel
from curvebank.trace.profile import _good_near

SAMPLES = Path(__file__).parents[3] / "samples"

X = np.linspace(0, 1, 300)
ARCH = np.stack([60 + 560 * X, 400 - 900 * X * (1 - X) * 0.9], 1)
FALL = np.stack([60 + 560 * X, 90 + 280 * X**2], 1)


def clicks_on(line, shares, jitter=2.0, seed=3):
    rng = np.random.default_rng(seed)
    at = np.array([line[int(s * (len(line) - 1))] for s in shares])
    return at + rng.uniform(-jitter, jitter, at.shape)


def trace_one(tools, box, pixels, points, **options):
    (got,) = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="c", points=points, **options)])
    return got


@pytest.mark.parametrize("width", [1.2, 2.0, 3.0, 6.0])
@pytest.mark.parametrize("shape", [ARCH, FALL])
def test_a_drawn_line_is_found_to_a_few_hundredths_of_a_pixel(tools, box, width, shape):
    pixels, (line,) = tools["paint"]([shape], width=width)
    got = trace_one(tools, box, pixels, clicks_on(line, (0.02, 0.5, 0.98)))
    found = tools["score"](line, False, got.pixels)
    assert not found["failed"] and found["rms"] < 0.03
    assert max(found["ends"]) < 3
    assert got.confidence > 0.8 and not got.flagged


def test_pixels_are_about_one_apart_and_every_one_has_a_sigma(tools, box):
    pixels, (line,) = tools["paint"]([FALL])
    got = trace_one(tools, box, pixels, clicks_on(line, (0.02, 0.5, 0.98)))
    step = np.hypot(*np.diff(got.pixels, axis=0).T)
    assert 0.7 < step.min() and step.max() < 1.3
    assert got.sigma_px.shape == (len(got.pixels),) and (got.sigma_px > 0).all() and got.sigma_px.max() < 0.2


def test_a_short_first_click_still_reaches_the_end_of_the_ink(tools, box):
    pixels, (line,) = tools["paint"]([FALL])
    got = trace_one(tools, box, pixels, clicks_on(line, (0.08, 0.5, 0.9)))
    assert max(tools["score"](line, False, got.pixels)["ends"]) < 3


def test_ends_at_the_clicks_when_asked(tools, box):
    pixels, (line,) = tools["paint"]([FALL])
    points = clicks_on(line, (0.08, 0.5, 0.9), jitter=0)
    got = trace_one(tools, box, pixels, points, ends="click")
    assert np.hypot(*(got.pixels[0] - points[0])) < 2 and np.hypot(*(got.pixels[-1] - points[-1])) < 2


def test_a_click_beyond_the_ink_is_cut_back(tools, box):
    pixels, (line,) = tools["paint"]([FALL])
    points = clicks_on(line, (0.02, 0.5, 0.98))
    points[-1] = line[-1] + (line[-1] - line[-9]) / 8 * 9
    got = trace_one(tools, box, pixels, points)
    assert np.hypot(*(got.pixels[-1] - line[-1])) < 3


@pytest.mark.parametrize("dash", [(20.0, 10.0), (4.0, 5.0), (20.0, 8.0, 4.0, 8.0)])
def test_dashed_lines(tools, box, dash):
    pixels, (line,) = tools["paint"]([ARCH], dash=dash)
    found = tools["score"](line, False, trace_one(tools, box, pixels, clicks_on(line, (0.02, 0.5, 0.98))).pixels)
    assert not found["failed"] and found["rms"] < 0.06


def test_crossing_lines_keep_to_themselves(tools, box):
    a = np.stack([60 + 560 * X, 120 + 200 * X**1.5], 1)
    b = np.stack([60 + 560 * X, 330 - 210 * X + 40 * X * X], 1)
    pixels, lines = tools["paint"]([a, b])
    ready = tools["prepared_of"](pixels)
    got = trace_panel(ready, box, [Clicks(id=str(k), points=clicks_on(ln, (0.02, 0.5, 0.98))) for k, ln in enumerate(lines)])
    for line, trace in zip(lines, got, strict=True):
        found = tools["score"](line, False, trace.pixels)
        assert not found["failed"] and found["rms"] < 0.05 and not trace.flagged


def test_a_line_that_ends_on_another_line_ends_there(tools, box):
    base = np.stack([60 + 560 * X, 250 + 60 * X], 1)
    foot = base[150]
    side = np.stack([foot[0] - 160 * (1 - X) ** 1.2, foot[1] - 190 * (1 - X)], 1)
    pixels, lines = tools["paint"]([base, side])
    got = trace_one(tools, box, pixels, clicks_on(lines[1], (0.02, 0.5, 0.97)))
    assert max(tools["score"](lines[1], False, got.pixels)["ends"]) < 4


def test_a_loop_is_periodic(tools, box):
    phi = np.linspace(0, 2 * np.pi, 500)
    loop = np.stack([350 + 190 * np.cos(phi) * (1 + 0.1 * np.cos(phi)), 250 + 110 * np.sin(phi)], 1)
    pixels, (line,) = tools["paint"]([loop])
    points = clicks_on(line, (0.05, 0.25, 0.45, 0.65, 0.85))
    for given in (points, np.vstack([points, points[:1]])):
        got = trace_one(tools, box, pixels, given, closed=True)
        found = tools["score"](line, True, got.pixels)
        assert got.closed and not found["failed"] and found["rms"] < 0.05
        seam = got.pixels[1] - got.pixels[0], got.pixels[-1] - got.pixels[-2]
        assert np.hypot(*(got.pixels[0] - got.pixels[-1])) < 1.5
        assert np.dot(*seam) / np.prod([np.hypot(*v) for v in seam]) > 0.999


def test_traces_repeat_to_the_bit(tools, box):
    pixels, (line,) = tools["paint"]([FALL])
    a, b = (trace_one(tools, box, pixels, clicks_on(line, (0.02, 0.5, 0.98))) for _ in range(2))
    assert np.array_equal(a.pixels, b.pixels) and np.array_equal(a.sigma_px, b.sigma_px)


def test_two_curves_given_the_same_clicks_are_both_flagged(tools, box):
    pixels, (line, _) = tools["paint"]([FALL, ARCH])
    points = clicks_on(line, (0.02, 0.5, 0.98))
    got = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="a", points=points), Clicks(id="b", points=points + 0.5)])
    assert all(t.flagged for t in got)
    assert any(n.code == "shared-ink" and "b" in n.message for n in got[0].warnings)
    assert got[0].hint_click is not None and got[0].stretches


def test_a_hand_drawn_curve_is_its_clicks_with_honest_uncertainty(tools, box):
    pixels, _ = tools["paint"]([FALL])
    points = clicks_on(FALL, np.linspace(0, 1, 7), jitter=0) + [0, 60]
    got = trace_one(tools, box, pixels, points, kind="hand")
    gap = np.array([np.hypot(*(got.pixels - p).T).min() for p in points])
    assert gap.max() < 1.0 and 0.6 < got.sigma_px.min() < 1.5 and got.source == "hand"


def test_points_snap_to_their_symbols(tools, box):
    middles = np.array([[100.3, 120.6], [300.2, 200.1], [500.7, 330.4]])
    rings = [m + 6 * np.stack([np.cos(a), np.sin(a)], 1) for m in middles for a in [np.linspace(0, 2 * np.pi, 60)]]
    pixels, _ = tools["paint"](rings, width=2.0)
    got = trace_one(tools, box, pixels, middles + [[3, -2], [-3, 3], [2, 3]], kind="points")
    assert np.hypot(*(got.pixels - middles).T).max() < 0.3 and got.source == "points"


@pytest.mark.parametrize(
    ("points", "options", "code", "says"),
    [
        ([[100, 100]], {}, "too-few-clicks", "at least 2"),
        ([], {}, "too-few-clicks", "Add clicks"),
        ([[100, 100], [300, 200]], {"closed": True}, "too-few-clicks", "closed"),
        ([[100, 100], [300, 200], [400, 300]], {"kind": "hand"}, "too-few-clicks", "6"),
        ([[63, 91], [63, 91.5], [500, 250]], {}, "coincident-clicks", "first and second"),
        ([[63, 91], [900, 250]], {}, "off-panel", "second"),
        ([[63, 91], [340, 350], [610, 360]], {}, "off-ink", "second"),
        ([[63, float("nan")], [340, 350]], {}, "bad-click", "finite"),
        ([[200, 400], [300, 420]], {"kind": "points"}, "off-ink", "first"),
    ],
)
def test_wrong_clicks_are_named_and_cost_only_their_own_curve(tools, box, points, options, code, says):
    pixels, (line,) = tools["paint"]([FALL])
    good = Clicks(id="good", points=clicks_on(line, (0.02, 0.5, 0.98)))
    bad, fine = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="bad", points=points, **options), good])
    assert isinstance(bad, TraceError) and bad.code == code and says in bad.message
    assert not tools["score"](line, False, fine.pixels)["failed"]


def test_clicks_over_bare_paper_say_that_there_is_no_line(tools):
    """Between faint grid lines of a real page: words about the paper, never about arrays, and no crumb of a trace."""
    page = load((SAMPLES / "ebbrook-vl-200.pdf").read_bytes(), page=2)
    plot = tools["Box"](np.array([401, 614]), np.array([2078, 1747]))
    clicks = Clicks(id="c", points=np.array([[1700.0, 700.0], [1900.0, 720.0], [2000.0, 690.0]]))
    (got,) = trace_panel(prepare(page), plot, [clicks])
    assert isinstance(got, TraceError)
    assert got.code == "lost" and got.message.startswith("No line was found between the clicks")


def test_fewer_readings_than_the_window_that_looks_at_them():
    near = _good_near(np.array([1.0, 0.0, 1.0, 1.0]), 5)
    assert near.tolist() == [2, 3, 3, 2]


def test_progress_is_told_and_may_cancel(tools, box):
    pixels, (line,) = tools["paint"]([FALL])
    told = []
    wanted = [Clicks(id="c", points=clicks_on(line, (0.02, 0.5, 0.98)))]
    trace_panel(tools["prepared_of"](pixels), box, wanted, progress=lambda share, text: told.append((share, text)))
    assert told[0] == (0.0, "Tracing c") and told[-1][0] == 1.0

    def stop(share, text):
        raise Cancelled("stopped")

    with pytest.raises(Cancelled):
        trace_panel(tools["prepared_of"](pixels), box, wanted, progress=stop)


@pytest.mark.parametrize("kind", ["sameink", "labels", "warp", "coarse"])
def test_drawn_sheets(tools, kind):
    """Whole invented sheets, spoiled: none of their curves may fail at three clicks."""
    pixels, truth = tools["draw"](kind, 1)
    low, high = np.min(truth["panels"][0]["polygon"], axis=0) - 12, np.max(truth["panels"][0]["polygon"], axis=0) + 12
    wanted = [Clicks(id=c["id"], points=c["clicks"]["3"], closed=c["closed"]) for c in truth["curves"]]
    got = trace_panel(tools["prepared_of"](pixels), tools["Box"](low, high), wanted)
    rms = []
    for true, trace in zip(truth["curves"], got, strict=True):
        found = tools["score"](np.asarray(true["line"]), true["closed"], trace.pixels)
        assert not found["failed"], true["id"]
        rms.append(found["rms"])
    assert np.median(rms) < 0.05
