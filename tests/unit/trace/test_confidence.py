"""A trace knows when it went wrong: what it says, where, and which click it asks for."""

import numpy as np
import pytest

from curvebank.trace import Clicks, trace_panel
from curvebank.trace.confidence import FLAG_BELOW, WEIGHTS, chance
from curvebank.trace.evidence import NAMES
from curvebank.trace.judge import overlap
from curvebank.trace.local import misfit, windows
from curvebank.trace.presence import EMPTY, INKED, Presence, style_change

X = np.linspace(0, 1, 300)
FALL = np.stack([60 + 560 * X, 90 + 280 * X**2], 1)
BELOW = FALL + [0, 55]
RISE = np.stack([60 + 560 * X, 380 - 300 * X**1.3], 1)


def on(line, *shares):
    return np.array([line[int(s * (len(line) - 1))] for s in shares])


def traced(tools, box, lines, points, **options):
    pixels, _ = tools["paint"](lines)
    (got,) = trace_panel(tools["prepared_of"](pixels), box, [Clicks(id="c", points=points, **options)])
    return got


def codes(trace):
    return [n.code for n in trace.warnings]


def test_weights_never_speak_for_a_fault():
    assert tuple(WEIGHTS) == NAMES and all(w >= 0 for w in WEIGHTS.values())
    clear = chance(np.zeros(len(NAMES)))
    assert clear > 0.97
    for k in range(len(NAMES)):
        worse = np.zeros(len(NAMES))
        worse[k] = 1.0
        assert chance(worse) <= clear


def test_a_good_trace_has_nothing_to_say(tools, box):
    got = traced(tools, box, [FALL, RISE], on(FALL, 0.02, 0.5, 0.98))
    assert not got.flagged and got.confidence > FLAG_BELOW and got.hint_click is None and codes(got) == []


@pytest.mark.parametrize(("first", "second"), [(FALL, BELOW), (BELOW, FALL)])
def test_clicks_on_two_neighbours_are_flagged_with_a_place(tools, box, first, second):
    got = traced(tools, box, [FALL, BELOW], np.vstack([on(first, 0.02, 0.3), on(second, 0.6, 0.98)]))
    assert got.flagged and codes(got) and got.hint_click is not None
    told = [n.stretch for n in got.warnings if n.stretch]
    assert any(a < 0.62 * len(got.pixels) and b > 0.28 * len(got.pixels) for a, b in told)


def test_a_corner_at_a_crossing_is_seen(tools, box):
    """From one curve on to another that crosses it: all is inked, only the lines that go straight on tell."""
    got = traced(tools, box, [FALL, RISE], np.vstack([on(FALL, 0.02), on(RISE, 0.98)]))
    off = np.hypot(*(got.pixels[:, None] - FALL[None]).T).min(axis=0)
    assert (off > 6).mean() > 0.2 and got.flagged
    assert {"straight-on", "turns-off"} & set(codes(got))


def test_a_click_that_is_passed_over_is_named(tools, box):
    wrong = on(FALL, 0.02, 0.5, 0.98)
    wrong[2] = BELOW[290]
    got = traced(tools, box, [FALL, BELOW], wrong)
    assert np.hypot(*(got.pixels - wrong[2]).T).min() > 20
    assert "click-off" in codes(got)
    assert any(f"({wrong[2][0]:.0f}, {wrong[2][1]:.0f})" in n.message for n in got.warnings)


def test_one_warning_a_curve_for_shared_ink_names_the_others(tools, box):
    pixels, _ = tools["paint"]([FALL])
    wanted = [Clicks(id=k, points=on(FALL, 0.02, 0.5 + 0.05 * j, 0.98)) for j, k in enumerate("abc")]
    got = trace_panel(tools["prepared_of"](pixels), box, wanted)
    for trace, own in zip(got, "abc", strict=True):
        said = [n for n in trace.warnings if n.code == "shared-ink"]
        assert len(said) == 1 and trace.flagged
        assert all(other in said[0].message for other in set("abc") - {own})


def test_a_line_that_changes_into_dashes_says_from_where(tools, box):
    solid, (line,) = tools["paint"]([FALL[:170]])
    dashed, _ = tools["paint"]([FALL[169:]], dash=(14.0, 9.0), seed=1)
    prepared = tools["prepared_of"](np.minimum(solid, dashed))
    (got,) = trace_panel(prepared, box, [Clicks(id="c", points=on(FALL, 0.02, 0.5, 0.97))])
    (said,) = [n for n in got.warnings if n.code == "style-change"]
    at = got.pixels[said.stretch[0]]
    assert "solid, then dashed" in said.message and np.hypot(*(at - FALL[169])) < 25


def test_style_change_on_rows():
    row = np.array([INKED] * 200 + ([EMPTY] * 8 + [INKED] * 14) * 6, np.int8)
    flat = np.zeros(len(row))
    seen = Presence(np.arange(len(row), dtype=float), row, flat, flat, flat, flat)
    assert style_change(seen, 1.0) == (200, True)
    turned = Presence(seen.s, row[::-1].copy(), flat, flat, flat, flat)
    assert style_change(turned, 1.0) == (len(row) - 200, False)
    even = np.array(([INKED] * 14 + [EMPTY] * 8) * 15, np.int8)
    flat = np.zeros(len(even))
    assert style_change(Presence(np.arange(len(even), dtype=float), even, flat, flat, flat, flat), 1.0) is None


def test_a_smooth_line_fits_its_windows_and_a_step_does_not():
    from curvebank.trace.axis import from_polyline

    smooth = from_polyline(FALL, False)
    step = from_polyline(FALL + np.stack([np.zeros(300), 12 / (1 + np.exp(-(X - 0.5) * 60))], 1), False)
    assert misfit(windows(smooth, 60.0, 8.0)).max() < 0.05
    assert misfit(windows(step, 60.0, 8.0)).max() > 0.8


def test_overlap_finds_the_runs():
    assert overlap(FALL, BELOW, 3.0) == []
    ((first, last),) = overlap(FALL, FALL[100:200], 0.5)
    assert first == 100 and last == 199
