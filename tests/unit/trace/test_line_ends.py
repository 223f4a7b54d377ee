"""Ends: faded stretches near an end, ends on another line, clicks that vouch for what lies on another line."""

import numpy as np
import pytest

from curvebank import trace
from curvebank.trace.ends import walk
from curvebank.trace.presence import EMPTY, INKED, Presence, Rhythm

SOLID = Rhythm(False, 10.0, 14.0)


def seen_of(*runs):
    state = np.concatenate([np.full(count, kind, np.int8) for kind, count in runs])
    flat = np.zeros(len(state))
    return Presence(np.arange(len(state), dtype=float), state, flat, flat, flat, flat)


def test_a_short_gap_before_much_ink_is_a_faded_stretch():
    assert walk(seen_of((INKED, 40), (EMPTY, 13), (INKED, 40), (EMPTY, 40)), SOLID, 1.0, 30) == pytest.approx(92.5)
    assert walk(seen_of((INKED, 40), (EMPTY, 13), (INKED, 15), (EMPTY, 40)), SOLID, 1.0, 30) == pytest.approx(39.5)


def test_a_gap_that_holds_the_click_is_the_lines():
    seen = seen_of((INKED, 40), (EMPTY, 14), (INKED, 6), (EMPTY, 40))
    assert walk(seen, SOLID, 1.0, 50) == pytest.approx(59.5)
    assert walk(seen, SOLID, 1.0, 30) == pytest.approx(39.5)


@pytest.fixture(scope="module")
def meeting(tools):
    """A loop and a U outside it whose upper end runs into the loop at a small angle."""
    phi = np.linspace(0, 2 * np.pi, 500)
    ring = np.stack([300 + 150 * np.cos(phi), 250 + 100 * np.sin(phi)], axis=1)
    t = np.linspace(-np.pi / 2, np.pi * 0.45, 400)
    outer = np.stack([300 + 230 * np.cos(t), 250 + 100 * np.sin(t) + 50 * (t + np.pi / 2) / np.pi], axis=1)
    page, true = tools["paint"]([ring, outer])
    return tools["prepared_of"](page), true


def test_an_end_that_runs_into_a_loop_does_not_go_round_it(meeting, box):
    prepared, (ring, outer) = meeting
    at = np.rint(np.linspace(0.02, 0.98, 5) * (len(outer) - 1)).astype(int)
    loop = ring[np.rint(np.linspace(0, 0.8, 5) * (len(ring) - 1)).astype(int)]
    wanted = [trace.Clicks(id="ring", points=loop, closed=True), trace.Clicks(id="outer", points=outer[at])]
    _, got = trace.trace_panel(prepared, box, wanted)
    away = np.array([np.hypot(*(got.pixels[k] - outer[k])) for k in (0, -1)])
    assert away.min() < 1.0
    assert away.max() < 15.0
