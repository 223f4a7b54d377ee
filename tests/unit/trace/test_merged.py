"""Lines that run into one stroke and leave it again: each keeps to its own line, read from the stroke's edges."""

import numpy as np
import pytest

from curvebank import trace
from curvebank.trace.merged import edges, half_width
from curvebank.trace.shape import Shape

X = np.linspace(60.0, 640.0, 400)


def test_edges_of_a_double_stroke_are_half_a_line_from_the_middles():
    shape = Shape(3.0, 0.7, 0.02, 1.0)
    across = np.arange(-10, 10.01, 0.5)
    ink = np.maximum(shape.value(across + 1.0), shape.value(across - 1.4))[None]
    top, bottom, above, below = edges(ink, across, shape)
    assert above[0] and below[0]
    assert top[0] + half_width(shape) == pytest.approx(-1.0, abs=0.08)
    assert bottom[0] - half_width(shape) == pytest.approx(1.4, abs=0.08)


@pytest.fixture(scope="module")
def pair(tools):
    """Two lines that lie within a line's width of each other for a third of their length, and cross there."""
    middle = 250 + 60 * ((X - 350) / 290) ** 2
    apart = 0.9 * ((X - 350) / 60) ** 3 / (1 + np.abs((X - 350) / 90) ** 1.5)
    page, true = tools["paint"]([np.stack([X, middle + sign * apart], axis=1) for sign in (-1, 1)])
    return tools["prepared_of"](page), true


def test_lines_that_merge_and_part_again_keep_their_own_way(pair, box, tools):
    prepared, true = pair
    wanted = [trace.Clicks(id=str(k), points=line[[15, len(line) // 6, -len(line) // 6, -16]]) for k, line in enumerate(true)]
    for line, got in zip(true, trace.trace_panel(prepared, box, wanted), strict=True):
        score = tools["score"](line, False, got.pixels)
        assert not score["failed"]
        assert score["rms"] < 0.15
        assert score["p95"] < 0.4


def test_lines_that_begin_as_one_are_traced_to_their_common_beginning(tools, box):
    u = np.linspace(0, 1, 300)
    fan = [np.stack([80 + 500 * u, 440 - 300 * u * (1 + 0.06 * k * u)], axis=1) for k in (-1, 1)]
    page, true = tools["paint"](fan)
    wanted = [trace.Clicks(id=str(k), points=line[[6, len(line) // 2, -7]]) for k, line in enumerate(true)]
    for line, got in zip(true, trace.trace_panel(tools["prepared_of"](page), box, wanted), strict=True):
        assert np.hypot(*(got.pixels[0] - line[0])) < 3.0
        assert tools["score"](line, False, got.pixels)["rms"] < 0.3
