"""Clicks go to the crossing, tick or line they mean."""

import time
from types import SimpleNamespace

import numpy as np
from drawn_grid import draw

from curvebank.axes import snap
from curvebank.sheet.lines import PrintedLine


def _page(seed=0):
    """A frame corner, two grid lines each way, and ticks below the lower line."""
    ink = np.zeros((500, 600), np.float32)
    t = np.linspace(0, 1, 1200)
    lines = []
    for y in (400.3, 300.7):
        draw(ink, np.stack([60 + 480 * t, np.full_like(t, y)], -1))
        lines.append(PrintedLine(True, np.linspace(60, 540, 20), np.full(20, round(y) + 0.0), 0.8, 2.1, 0.1))
    for x in (100.4, 250.2):
        draw(ink, np.stack([np.full_like(t, x), 60 + 341 * t], -1))
        lines.append(PrintedLine(False, np.linspace(60, 401, 20), np.full(20, round(x) + 0.0), 0.8, 2.1, 0.1))
    for x in (175.6, 400.1):
        draw(ink, np.stack([np.full_like(t, x), 400 + 10 * t], -1))
    noise = np.random.default_rng(seed).normal(0, 4, ink.shape)
    return SimpleNamespace(ink=np.clip(ink + noise, 0, 255).astype(np.uint8), lines=tuple(lines))


def test_a_click_goes_to_the_crossing():
    for xy in ((103.0, 398.0), (98.5, 402.5), (252.0, 303.0)):
        got = snap(_page(), xy, 6)
        want = (100.4 if xy[0] < 200 else 250.2, 400.3 if xy[1] > 350 else 300.7)
        assert got.kind == "crossing" and np.hypot(got.at[0] - want[0], got.at[1] - want[1]) < 0.1
        assert 0 < got.sigma_px < 0.2


def test_a_click_goes_to_the_tick_and_else_to_the_line():
    tick = snap(_page(), (178.0, 403.0), 6)
    assert tick.kind == "tick" and np.hypot(tick.at[0] - 175.6, tick.at[1] - 400.3) < 0.2
    line = snap(_page(), (330.0, 297.5), 6)
    assert line.kind == "line" and abs(line.at[1] - 300.7) < 0.1 and abs(line.at[0] - 330) < 0.5


def test_nothing_near_is_nothing():
    assert snap(_page(), (330.0, 200.0), 6) is None


def test_what_is_masked_is_not_looked_at():
    page = _page()
    masked = np.zeros(page.ink.shape, bool)
    masked[370:430, 60:140] = True
    assert snap(SimpleNamespace(ink=np.where(masked, 0, page.ink), lines=page.lines, masked=masked), (101.0, 401.0), 5) is None


def test_snapping_is_quick():
    page = _page()
    snap(page, (103.0, 398.0), 6)
    start = time.process_time()
    for _ in range(20):
        snap(page, (103.0, 398.0), 6)
    assert (time.process_time() - start) / 20 < 0.02
