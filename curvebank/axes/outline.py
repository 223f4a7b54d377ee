"""The area a panel covers: the polygon given, or the rectangle of its marks on the panel plane with a margin."""

from typing import Any

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray
from . import plane
from .layout import Layout
from .solve import Solution

MARGIN_SHARE = 0.12
"""Curves may run beyond the outer marks, and the outer marks need not be the outer ticks."""


def derive(layout: Layout, solution: Solution, page_size: tuple[int, int] | None) -> FloatArray:
    """Corner polygon [4, 2] px around all marks, kept within the page where its size is known."""
    p = solution.plane_size
    uv = plane.coordinates(solution.theta, (layout.at - layout.shift) / layout.size)
    low, high = np.empty(2), np.empty(2)
    for d in (0, 1):
        # The marks that say a coordinate show how far the panel goes in it: flow marks may stand under a neighbouring panel.
        rows = sorted({r for s in layout.slots.values() if s.marks.direction == d for r in layout.rows_of[s.marks.id]})
        low[d], high[d] = uv[rows, d].min(), uv[rows, d].max()
    for name, slot in layout.slots.items():
        if slot.twin is None:
            d = slot.marks.direction
            for z in slot.z:
                fixed, row = layout.term_row((name, float(z)), p, len(solution.x))
                c = fixed + float(row @ solution.x)
                low[d], high[d] = min(low[d], c), max(high[d], c)
    margin = MARGIN_SHARE * (high - low)
    for _ in range(8):
        corners = np.array(
            [(low - margin), [high[0] + margin[0], low[1] - margin[1]], (high + margin), [low[0] - margin[0], high[1] + margin[1]]]
        )
        if p == 6 or np.all(1 + corners @ solution.theta[6:8] > 0.2):
            break
        margin = margin / 2
    at = plane.pixels(solution.theta, corners) * layout.size + layout.shift
    if page_size is not None:
        at = np.clip(at, -0.5, np.array(page_size, dtype=np.float64) - 0.5)
    return at


def given(points: Any, path: str) -> FloatArray:
    """The polygon of the recipe."""
    at = np.asarray(points, dtype=np.float64)
    if at.ndim != 2 or at.shape[1] != 2 or len(at) < 3 or not np.all(np.isfinite(at)):
        raise CalibrationError("An outline is a polygon of three or more points [x, y].", path=f"{path}.outline", code="outline")
    x, y = at.T
    if abs(float(x @ np.roll(y, -1) - y @ np.roll(x, -1))) < 2 * 100:
        raise CalibrationError("The outline encloses no area. Draw it around the plot.", path=f"{path}.outline", code="outline")
    return at
