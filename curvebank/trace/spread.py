"""Standard uncertainty of a trace across its line, row by row: what the readings scatter, and what they cannot know.

Seven variances are added. The spline's own covariance treats readings as noise that is independent beyond a few of them; print and
sampling also err together over long stretches (a 1-bit staircase, a nib, a copier's drum), by a share of the readings' scatter; a floor
stands for the print's shape. Beside another line the profile is pulled, and on another traced line two strokes are one; in a gap the
spline only bridges; at an end nothing holds it from beyond. The factors are fitted to drawn sheets, half of them, and checked on the
rest: ``tests/bench/flags.py --sigma``.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from scipy.spatial import cKDTree

from ..records import FloatArray, Trace, frozen
from .presence import INKED, Presence
from .profile import Refined

OF_SPLINE = 0.85
OF_SCATTER = 0.068
FLOOR = 0.002
"""Floor [units]: a unit is 1 px where lines are 3 px wide."""
BESIDE = 0.04
"""With another line hard against it [units]."""
IN_GAP, GAP_PX = 0.04, 20.0
"""In the middle of a gap of this half length or more [units]."""
AT_END, END_PX = 0.03, 10.0
"""At an end [units], and how far in it fades [px]."""

ON_ANOTHER, FADES = 0.07, 0.9
"""Right on another traced line, in parts of the line width, and the distance in line widths over which it fades."""


def sigma_of(fine: Refined, unit: float, seen: Presence | None = None) -> FloatArray:
    """Standard uncertainty [px] at each sample of the final axis; ``seen`` is the line's presence at the same samples."""
    unit = max(unit, 0.6)
    count = len(fine.sigma)
    variance = (OF_SPLINE * fine.sigma) ** 2 + (OF_SCATTER * fine.scatter) ** 2 + (FLOOR * unit) ** 2
    if not fine.axis.closed:
        row = np.arange(count)
        variance = variance + (AT_END * unit * np.exp(-np.minimum(row, count - 1 - row) / END_PX)) ** 2
    if seen is not None and len(seen.state) == count:
        beside = np.clip((np.maximum(seen.left, seen.right) - 0.2) / 0.4, 0.0, 1.0)
        away = _rows_from(seen.state == INKED)
        variance = variance + (BESIDE * unit * beside) ** 2 + (IN_GAP * unit * np.minimum(away / GAP_PX, 1.0)) ** 2
    return np.sqrt(variance)


def beside_traces(trace: Trace, others: Sequence[Trace]) -> Trace:
    """The trace with what other traced lines add to its uncertainty: within a line width of each other two strokes are one to see."""
    added = np.zeros(len(trace.pixels))
    for other in others:
        width = 0.5 * ((trace.line_width_px or 3.0) + (other.line_width_px or 3.0))
        reach = 2.5 * width
        low, high = other.pixels.min(axis=0) - reach, other.pixels.max(axis=0) + reach
        near = np.flatnonzero(((trace.pixels >= low) & (trace.pixels <= high)).all(axis=1))
        if len(near):
            gap = cKDTree(other.pixels).query(trace.pixels[near], distance_upper_bound=reach)[0] / width
            added[near] = np.maximum(
                added[near], np.where(np.isfinite(gap), ON_ANOTHER * width * np.exp(-np.minimum(gap, 9.0) / FADES), 0.0)
            )
    return replace(trace, sigma_px=frozen(np.hypot(trace.sigma_px, added))) if added.any() else trace


def _rows_from(held: FloatArray) -> FloatArray:
    """Rows from each row to the nearest one that holds."""
    place = np.flatnonzero(held)
    row = np.arange(len(held))
    if not len(place):
        return np.full(len(held), 1e6)
    after = np.searchsorted(place, row)
    before = place[np.maximum(after - 1, 0)]
    behind = place[np.minimum(after, len(place) - 1)]
    return np.minimum(np.abs(row - before), np.abs(behind - row)).astype(np.float64)
