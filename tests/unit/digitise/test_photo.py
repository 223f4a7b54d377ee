"""The drawn chart photographed at an angle: the printed grid places what three marks an axis cannot."""

import io

import chart
import cv2
import numpy as np
import pytest
from PIL import Image

from curvebank import digitise

CORNERS = np.float32([[0, 0], [chart.WIDTH, 0], [chart.WIDTH, chart.HEIGHT], [0, chart.HEIGHT]])
SEEN = CORNERS + np.float32([[45, 20], [-10, 4], [-25, -12], [6, -30]])


def photographed(png, doc):
    """The chart under a homography, and its recipe with marks and clicks carried along."""
    turn = cv2.getPerspectiveTransform(CORNERS, SEEN)
    page = np.asarray(Image.open(io.BytesIO(png)))
    out = io.BytesIO()
    Image.fromarray(cv2.warpPerspective(page, turn, (chart.WIDTH, chart.HEIGHT), flags=cv2.INTER_CUBIC, borderValue=240)).save(out, "PNG")

    def at(points):
        q = np.c_[np.asarray(points, float), np.ones(len(points))] @ turn.T
        return (q[:, :2] / q[:, 2:]).round(3).tolist()

    for axis in doc["panels"][0]["axes"].values():
        for mark in axis["marks"]:
            mark["at"] = at([mark["at"]])[0]
    for curve in doc["curves"]:
        curve["clicks"] = at(curve["clicks"])
    return out.getvalue(), doc


@pytest.mark.parametrize("left_only", [False, True])
def test_grid_undoes_the_angle(chart_png, chart_recipe, left_only):
    """With value marks at the left alone the photo's far side is known from the grid only."""
    png, doc = photographed(chart_png, chart_recipe)
    if left_only:
        del doc["panels"][0]["axes"]["eta"]
        doc["curves"] = doc["curves"][:2]
    errors = {}
    for grid in ("off", "auto"):
        doc["panels"][0]["grid"] = grid
        made = digitise.run(doc, png)
        assert made.panels[0].grid.used == (grid == "auto"), made.panels[0].grid
        c = next(c for c in made.curves if c.id == "H-290")
        errors[grid] = np.sqrt(np.mean((c.points[:, 1] - chart.head_m(c.points[:, 0], 290)) ** 2)) / chart.TOP_HEAD_M
    assert errors["auto"] < 1e-3
    if left_only:
        assert errors["off"] > 5 * errors["auto"]
