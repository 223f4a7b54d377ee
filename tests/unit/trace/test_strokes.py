"""The way along strokes: lines that leave the straight way between two clicks by far, over crossings, dashes and a label gap."""

import numpy as np
import pytest

from curvebank import trace
from curvebank.trace.strokes import find_way

PHI = np.linspace(-0.9 * np.pi, 0.1 * np.pi, 400)
U_SHAPE = np.stack([340 + 190 * np.cos(PHI), 330 + 260 * np.sin(PHI)], axis=1)
V = np.linspace(0, 1, 300)
S_SHAPE = np.stack([150 + 400 * V + 80 * np.sin(2 * np.pi * V), 420 - 340 * V], axis=1)
CROSSING = [np.array([[60.0, 180.0], [640.0, 260.0]]), np.array([[60.0, 300.0], [640.0, 200.0]])]


@pytest.mark.parametrize(("line", "dash"), [(U_SHAPE, ()), (U_SHAPE, (21.0, 12.0)), (S_SHAPE, ())], ids=["u", "dashed-u", "s"])
def test_two_clicks_find_a_line_that_bends_away(line, dash, tools, box):
    page, _ = tools["paint"](CROSSING)
    mine, (true,) = tools["paint"]([line], dash=dash, seed=1)
    prepared = tools["prepared_of"](np.minimum(page, mine))
    (got,) = trace.trace_panel(prepared, box, [trace.Clicks(id="a", points=true[[8, -9]] + (1.5, -1.0))])
    score = tools["score"](true, False, got.pixels)
    assert not score["failed"]
    assert score["rms"] < 0.1


def test_no_way_over_blank_paper():
    page = np.zeros((300, 300), np.uint8)
    page[100, 20:80] = page[200, 220:280] = 255
    assert find_way(page, np.array([[30.0, 100.0], [270.0, 200.0]]), 1.0, 0.45, 4.0) is None
