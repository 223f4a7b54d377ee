"""The colour of the ink tells curves apart where they run into one another, and a curve from what is printed in another ink."""

import cv2
import drawn
import numpy as np
import pytest

from curvebank import trace
from curvebank.errors import TraceError
from curvebank.trace.colour import own_ink

PAPER = np.array([244, 242, 236], float)
RED, BLUE, BLACK, PALE_RED = (200, 30, 40), (30, 60, 190), (25, 25, 28), (225, 120, 120)


def coloured(lines, size=(900, 600), width=3.0, noise=2.0, seed=0, quality=0):
    """A page [h, w, 3] of lines [(points, colour)], later ones over earlier ones; the true lines; saved as 4:2:0 JPEG by ``quality``."""
    rng = np.random.default_rng(seed)
    page, true = np.tile(PAPER, (size[1], size[0], 1)), []
    for points, colour in lines:
        layer = drawn.Page(rng, *size)
        true.append(layer.stroke(np.asarray(points, float), width, 1.0))
        page += (np.asarray(colour, float) - page) * np.clip(layer.ink, 0, 1)[..., None]
    page = np.clip(np.rint(page + rng.normal(0, noise, page.shape)), 0, 255).astype(np.uint8)
    if quality:
        how = [cv2.IMWRITE_JPEG_QUALITY, quality, cv2.IMWRITE_JPEG_SAMPLING_FACTOR, cv2.IMWRITE_JPEG_SAMPLING_FACTOR_420]
        packed = cv2.imencode(".jpg", page[..., ::-1], how)[1]
        page = np.ascontiguousarray(cv2.imdecode(packed, cv2.IMREAD_COLOR)[..., ::-1])
    return page, true


def woven(loops, gap):
    """Two curves ``gap`` px apart at most that cross at a shallow angle, ``loops`` half waves of one about the other each side."""
    x = np.arange(60.0, 841.0)
    u = (x - 450) / 390
    base = 300 - 90 * u**2
    return np.stack([x, base], 1), np.stack([x, base + 2 + gap * np.sin(loops * np.pi * u)], 1)


def ends(true, count=2):
    return tuple(map(tuple, true[np.linspace(8, len(true) - 9, count).astype(int)]))


def traced(tools, box, page, points):
    prepared = tools["prepared_of"](page)
    return trace.trace_panel(prepared, box, [trace.Clicks(id="A", points=points)])[0]


@pytest.fixture
def wide(tools):
    return tools["Box"]((0, 0), (899, 599))


def off(trace_, true):
    """Root mean square and greatest distance [px] of a trace from its true line."""
    assert not isinstance(trace_, TraceError), trace_
    rows = np.linspace(0, len(true) - 1, 10 * len(true))
    true = np.stack([np.interp(rows, np.arange(len(true)), true[:, k]) for k in (0, 1)], 1)
    gap = np.array([np.hypot(*(true - p).T).min() for p in np.asarray(trace_.pixels)])
    return float(np.sqrt((gap**2).mean())), float(gap.max())


@pytest.mark.parametrize("quality", [0, 80])
@pytest.mark.parametrize(("loops", "gap"), [(1.5, 18.0), (2.5, 20.0)])
@pytest.mark.parametrize("colours", [(RED, BLUE), (BLACK, RED)])
def test_curves_of_two_colours_that_run_into_one_another_are_told_apart(tools, wide, colours, loops, gap, quality):
    page, true = coloured(list(zip(woven(loops, gap), colours, strict=True)), quality=quality)
    for line in true:
        rms, most = off(traced(tools, wide, page, ends(line)), line)
        assert rms < 0.5
        assert most < 1.6


def test_the_same_curves_in_one_ink_are_not_told_apart_by_what_is_not_there(tools, wide):
    page, true = coloured([(line, BLACK) for line in woven(1.5, 18.0)])
    prepared = tools["prepared_of"](page)
    assert own_ink(prepared, np.array(ends(true[0]))) == (prepared, prepared)


@pytest.mark.parametrize(("curve", "grid"), [(BLACK, PALE_RED), (RED, (120, 120, 122))])
def test_a_curve_on_a_grid_of_another_colour_keeps_its_place(tools, wide, curve, grid):
    across = [(np.array([[40.0, y], [860.0, y]]), grid) for y in np.arange(60.0, 560.0, 60.0)]
    down = [(np.array([[x, 40.0], [x, 560.0]]), grid) for x in np.arange(60.0, 860.0, 60.0)]
    page, true = coloured([*across, *down, (woven(1.5, 18.0)[0], curve)], quality=80)
    rms, most = off(traced(tools, wide, page, ends(true[-1], 3)), true[-1])
    assert rms < 0.15
    assert most < 0.6


def test_only_ink_of_another_colour_fades(tools):
    red, blue = woven(1.5, 60.0)
    page, true = coloured([(red, RED), (blue, BLUE)], quality=80)
    prepared = tools["prepared_of"](page)
    search, read = own_ink(prepared, np.array(ends(true[0])))
    apart = np.abs(red[:, 1] - blue[:, 1]) > 30
    own, other = (tuple(np.rint(line[apart]).astype(int).T[::-1]) for line in (red, blue))
    assert np.array_equal(search.clean[own], prepared.clean[own])
    assert np.array_equal(read.clean[own], prepared.clean[own])
    assert search.clean[other].mean() < 0.35 * prepared.clean[other].mean()
    # Far from the curve nothing needs to go where its middle is read.
    assert np.array_equal(read.clean[other], prepared.clean[other])
    assert np.array_equal(search.ink, prepared.ink)


def test_a_grey_sheet_and_clicks_on_two_colours_leave_the_sheet_as_it_is(tools):
    red, blue = woven(1.5, 60.0)
    page, true = coloured([(red, RED), (blue, BLUE)])
    prepared = tools["prepared_of"](page)
    assert own_ink(prepared, np.array([true[0][8], true[1][200]])) == (prepared, prepared)
    grey, true = tools["paint"]([red])
    prepared = tools["prepared_of"](grey)
    assert own_ink(prepared, np.array(ends(true[0]))) == (prepared, prepared)
