"""Standard uncertainty of a trace across its line, row by row: what the readings scatter, and what they cannot know.

Six variances are added. The spline's own covariance treats readings as noise that is independent beyond a few of them; print and
sampling also err together over long stretches (a 1-bit staircase, a nib, a copier's drum), by a share of the readings' scatter; a floor
stands for the print's shape. Beside another line the profile is pulled; in a gap the spline only bridges; at an end nothing holds it from
beyond. The factors are fitted to drawn sheets, half of them, and checked on the rest: ``tests/bench/flags.py --sigma``.
"""

import numpy as np

from ..records import FloatArray
from .presence import INKED, Presence
from .profile import Refined

OF_SPLINE = 1.1
OF_SCATTER = 0.18
FLOOR = 0.004
"""Floor [units]: a unit is 1 px where lines are 3 px wide."""
BESIDE = 0.02
"""With another line hard against it [units]."""
IN_GAP, GAP_PX = 0.02, 20.0
"""In the middle of a gap of this half length or more [units]."""
OF_SCATTER_AT_ENDS, END_PX = 0.7, 25.0
"""Share of the scatter at an end, and how far in it fades [px]."""


def sigma_of(fine: Refined, unit: float, seen: Presence | None = None) -> FloatArray:
    """Standard uncertainty [px] at each sample of the final axis; ``seen`` is the line's presence at the same samples."""
    unit = max(unit, 0.6)
    count = len(fine.sigma)
    variance = (OF_SPLINE * fine.sigma) ** 2 + (OF_SCATTER * fine.scatter) ** 2 + (FLOOR * unit) ** 2
    if not fine.axis.closed:
        row = np.arange(count)
        variance = variance + (OF_SCATTER_AT_ENDS * fine.scatter * np.exp(-np.minimum(row, count - 1 - row) / END_PX)) ** 2
    if seen is not None and len(seen.state) == count:
        beside = np.clip((np.maximum(seen.left, seen.right) - 0.2) / 0.4, 0.0, 1.0)
        away = _rows_from(seen.state == INKED)
        variance = variance + (BESIDE * unit * beside) ** 2 + (IN_GAP * unit * np.minimum(away / GAP_PX, 1.0)) ** 2
    return np.sqrt(variance)


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
