"""Lines traced together: beside a line that crosses at a small angle each keeps to its own ink; a worse trace is not taken."""

import numpy as np
import pytest

from curvebank import trace
from curvebank.errors import TraceError
from curvebank.trace import apart
from curvebank.trace.axis import from_polyline
from curvebank.trace.evidence import NAMES, Evidence
from curvebank.trace.judge import Doubt, as_trace

ROWS = np.linspace(0.0, 1.0, 500)


def test_a_loop_leaves_a_line_that_runs_beside_it(tools):
    """The loop's search alone takes the line of another quantity for its upper side; traced with that line it does not."""
    picture, truth = tools["draw"]("loops", 0)
    curves = {c["id"]: c for c in truth["curves"]}
    wanted = [trace.Clicks(id=k, points=curves[k]["clicks"]["5"], closed=curves[k]["closed"]) for k in ("c00", "c07")]
    box = tools["Box"]((0, 0), (picture.shape[1] - 1, picture.shape[0] - 1))
    traces = trace.trace_panel(tools["prepared_of"](picture), box, wanted)
    for asked, got in zip(wanted, traces, strict=True):
        score = tools["score"](np.asarray(curves[asked.id]["line"]), asked.closed, got.pixels)
        assert not score["failed"]
        assert score["rms"] < 0.1


@pytest.fixture(scope="module")
def sheet_with_two(tools):
    """Two lines that cross, and traces of which the second runs along the first on its latter half."""
    lines = [np.stack([60 + 580 * ROWS, y + slope * ROWS], axis=1) for y, slope in ((200, 100), (300, -100))]
    page, true = tools["paint"](lines)
    strayed = true[1].copy()
    low = len(strayed) // 2
    strayed[low:] = true[0][-(len(strayed) - low) :]
    return tools["prepared_of"](page), true, strayed


def judged(pixels, **numbers):
    evidence = Evidence({**dict.fromkeys(NAMES, 0.0), **numbers}, {}, None, None)
    trace = as_trace(from_polyline(pixels, False), np.full(len(pixels), 0.05), False, 3.0)
    return trace, Doubt(evidence)


def test_the_doubtful_one_is_traced_again_without_the_others_ink(sheet_with_two):
    prepared, true, strayed = sheet_with_two
    first, second, better = judged(true[0]), judged(strayed, misfit=0.2), judged(true[1])
    asked = []

    def again(i, page):
        asked.append(i)
        x, y = np.rint(true[0][-100]).astype(int)
        assert page.masked[y, x] and page.clean[y, x] == 0
        x, y = np.rint(true[1][-100]).astype(int)
        assert not page.masked[y, x] and page.clean[y, x] == prepared.clean[y, x] > 150
        return better

    out = apart.tell_apart(prepared, [first, second], [True, True], [], again)
    assert out == [first, better]
    assert asked == [1]


@pytest.mark.parametrize("offer", ["none", "refused", "no better", "doubtful"])
def test_a_trace_stays_where_the_new_one_is_not_better(sheet_with_two, offer):
    prepared, true, strayed = sheet_with_two
    first, second = judged(true[0]), judged(strayed, misfit=0.2)

    def again(i, page):
        if offer == "refused":
            raise TraceError("No line was found.", code="lost")
        return {"none": None, "no better": judged(strayed, misfit=0.2), "doubtful": judged(true[1], goes_on=1.0)}[offer]

    assert apart.tell_apart(prepared, [first, second], [True, True], [], again) == [first, second]


def test_curves_that_only_cross_or_may_not_change_are_left_alone(sheet_with_two):
    prepared, true, strayed = sheet_with_two

    def again(i, page):
        raise AssertionError

    crossing = [judged(true[0], misfit=0.2), judged(np.stack([300 + 40 * ROWS, 100 + 300 * ROWS], axis=1), misfit=0.2)]
    assert apart.tell_apart(prepared, crossing, [True, True], [], again) == crossing
    kept = [judged(true[0], misfit=0.2), judged(strayed, misfit=0.2), None]
    assert apart.tell_apart(prepared, kept, [False, False, True], [], again) == kept


def test_a_trace_that_stays_is_told_apart_from_too(sheet_with_two):
    prepared, true, strayed = sheet_with_two
    better = judged(true[1])
    assert apart.tell_apart(prepared, [judged(strayed, misfit=0.2)], [True], [judged(true[0])[0]], lambda i, page: better) == [better]
