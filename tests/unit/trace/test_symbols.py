"""Test points: symbols drawn by another engine, alone, on a curve, touching; and clicks with nothing under them."""

import numpy as np
import pytest
from PIL import Image, ImageDraw

from curvebank.errors import TraceError
from curvebank.trace import Clicks, trace_panel

BIG = 12
MIDDLES = np.array([[120.3, 90.6], [260.7, 150.2], [410.4, 230.9], [560.1, 330.5]])
CORNERS = {
    "square": [(-1, -1), (1, -1), (1, 1), (-1, 1)],
    "diamond": [(0, -1), (1, 0), (0, 1), (-1, 0)],
    "triangle": [(0, -4 / 3), (2 / np.sqrt(3), 2 / 3), (-2 / np.sqrt(3), 2 / 3)],
}


def page(shape, full, middles=MIDDLES, size=7.0, line=False, stroke=2.0):
    """Symbols filled as polygons on a page twelve times too large and averaged down, with noise."""
    picture = Image.new("L", (700 * BIG, 420 * BIG), 240)
    pen = ImageDraw.Draw(picture)

    def fill(corners, at, grey):
        pen.polygon([tuple((np.asarray(at) + c + 0.5) * BIG - 0.5) for c in np.asarray(corners)], fill=grey)

    if line:
        for a, b in zip([(60, 60), *middles], [*middles, (640, 380)], strict=True):
            along = np.subtract(b, a) / np.hypot(*np.subtract(b, a))
            side = 0.5 * stroke * np.array([-along[1], along[0]])
            fill([a + side, b + side, b - side, a - side], (0, 0), 30)
    arm = np.array([(-size, -1), (size, -1), (size, 1), (-size, 1)])
    turn = np.array([[1, 1], [-1, 1]]) / np.sqrt(2)
    phi = np.linspace(0, 2 * np.pi, 181)[:-1]
    corners = np.stack([np.cos(phi), np.sin(phi)], 1) if shape == "circle" else np.array(CORNERS.get(shape, []), float)
    for at in middles:
        if shape in ("plus", "cross"):
            for bar in (arm, arm[:, ::-1]):
                fill(bar if shape == "plus" else bar @ turn, at, 30)
        else:
            fill(corners * (size + stroke / 2), at, 30)
            if not full:
                fill(corners * (size - stroke / 2), at, 240)
    small = np.asarray(picture.resize((700, 420), Image.BOX), float)
    return np.clip(np.rint(small + np.random.default_rng(4).normal(0, 4, small.shape)), 0, 255).astype(np.uint8)


def snapped(tools, pixels, middles=MIDDLES, seed=1):
    off = np.random.default_rng(seed).uniform(-3, 3, middles.shape)
    (got,) = trace_panel(
        tools["prepared_of"](pixels), tools["Box"]((0, 0), (699, 419)), [Clicks(id="p", points=middles + off, kind="points")]
    )
    return got


@pytest.mark.parametrize("full", [True, False])
@pytest.mark.parametrize("shape", ["circle", "square", "diamond", "triangle"])
def test_a_symbol_alone_is_found_to_a_tenth_of_a_pixel(tools, shape, full):
    got = snapped(tools, page(shape, full))
    assert np.hypot(*(got.pixels - MIDDLES).T).max() < 0.15
    assert got.source == "points" and (got.sigma_px > 0).all() and got.sigma_px.max() < 0.2 and not got.flagged


@pytest.mark.parametrize("shape", ["cross", "plus"])
def test_strokes_that_cross(tools, shape):
    assert np.hypot(*(snapped(tools, page(shape, True)).pixels - MIDDLES).T).max() < 0.15


@pytest.mark.parametrize(("shape", "full"), [("circle", True), ("circle", False), ("square", False), ("diamond", False)])
def test_a_curve_drawn_through_the_symbols_does_not_move_them(tools, shape, full):
    assert np.hypot(*(snapped(tools, page(shape, full, line=True)).pixels - MIDDLES).T).max() < 0.3


def test_symbols_that_touch(tools):
    middles = np.vstack([MIDDLES, MIDDLES + [13.0, 6.0]])
    assert np.hypot(*(snapped(tools, page("circle", False, middles), middles).pixels - middles).T).max() < 0.3


def test_a_click_beside_every_symbol_is_named(tools):
    wrong = np.array(MIDDLES)
    wrong[2] += [0, 90]
    got = snapped(tools, page("circle", False), wrong)
    assert isinstance(got, TraceError) and got.code == "off-ink" and "third click" in got.message


def test_a_bare_curve_is_no_symbol(tools):
    pixels = page("circle", True, np.zeros((0, 2)), line=True)
    t = np.array([0.3, 0.6])[:, None]
    got = snapped(tools, pixels, np.array([60.0, 60.0]) + t * np.array([580.0, 320.0]))
    assert isinstance(got, TraceError) and "no symbol" in got.message


def test_two_clicks_on_one_symbol_are_said(tools):
    twice = np.vstack([MIDDLES, MIDDLES[:1] + [2.0, 2.0]])
    got = snapped(tools, page("square", True), twice)
    assert [n.code for n in got.warnings] == ["same-symbol"] and got.flagged
