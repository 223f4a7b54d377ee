"""Panels over one flow scale: tied where their marks say so, left alone where they do not."""

import numpy as np
from drawn_grid import panel, sheet

from curvebank.axes import PanelMap, calibrate, calibrate_all
from curvebank.errors import CalibrationError

UPPER, LOWER = (190.0, 600.0), (190.0, 1200.0)


def _charts(chart, shift=0.0):
    return chart(corner=UPPER, height=480), chart(corner=(LOWER[0] + shift, LOWER[1]), height=480)


def _docs(c, rng, **more):
    return [panel(one, rng, id=name, **more) for one, name in zip(c, ("head", "power"), strict=True)]


def _flow_px(c, m):
    u, _, at = c.grid(5)
    return float(np.sqrt(np.mean((m.from_pixels(at, ("q", "h"))[:, 0] / 100 - u) ** 2)) * 860)


def test_marks_of_stacked_panels_are_put_together(chart):
    c = _charts(chart)
    apart, tied = [], []
    for seed in range(12):
        docs = _docs(c, np.random.default_rng(seed))
        both = calibrate_all(docs)
        tied += [_flow_px(one, both[d["id"]]) for one, d in zip(c, docs, strict=True)]
        apart += [_flow_px(one, calibrate(d)) for one, d in zip(c, docs, strict=True)]
        assert "shared with power" in both["head"].grid.why
        assert [len(r) for r in both["head"].mark_residuals.values()] == [3, 3]
    assert np.mean(tied) < 0.9 * np.mean(apart)


def test_a_panel_with_lines_lends_them(chart):
    c, rng = _charts(chart), np.random.default_rng(1)
    docs = _docs(c, rng)
    docs[1]["grid"] = "off"
    got = calibrate_all(docs, sheet(c[0]))
    assert "its flow lines place both" in got["power"].grid.why
    assert _flow_px(c[1], got["power"]) < 0.3


def test_flow_marks_may_stand_under_the_neighbour_alone(chart):
    c, rng = _charts(chart), np.random.default_rng(2)
    docs = _docs(c, rng)
    docs[0]["axes"]["q"]["marks"] = [dict(m) for m in docs[1]["axes"]["q"]["marks"]]
    got = calibrate_all(docs, sheet(c[0]))
    assert isinstance(got["head"], PanelMap) and got["head"].grid.used
    assert _flow_px(c[0], got["head"]) < 0.1


def test_panels_that_do_not_line_up_keep_their_own(chart):
    c = _charts(chart, shift=25.0)
    docs = _docs(c, np.random.default_rng(3))
    got = calibrate_all(docs)
    for one, d in zip(c, docs, strict=True):
        assert "shared" not in got[d["id"]].grid.why
        np.testing.assert_array_equal(
            got[d["id"]].from_pixels(one.grid()[2], ("q", "h")), calibrate(d).from_pixels(one.grid()[2], ("q", "h"))
        )


def test_one_bad_panel_does_not_spoil_the_others(chart):
    c = _charts(chart)
    docs = _docs(c, np.random.default_rng(4))
    docs[0]["axes"]["h"]["marks"] = docs[0]["axes"]["h"]["marks"][:1]
    got = calibrate_all(docs)
    assert isinstance(got["head"], CalibrationError) and got["head"].path.startswith("$.panels[0]")
    assert isinstance(got["power"], PanelMap)
