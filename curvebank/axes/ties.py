"""Lines that two axes share, found from where the clicks fall.

On nearly every chart the flow axis stands on a tick of the value axis and the other way round, and a left and a right
scale share the printed frame. Two such lines found within click noise of each other are taken as one: a chance meeting is
unlikely (a few pixels in a thousand), and a wrong one moves the map by no more than those pixels.
"""

import numpy as np

from .layout import Layout
from .solve import Solution, Tie, coordinate

REACH_PX = 4.0
REACH_SIGMAS = 3.0
PROJECTIVE_REACH_SHARE = 0.02
"""On a photo the far scale is placed loosely at first: allow this share of the panel where the uncertainty asks for it."""


def find_ties(layout: Layout, solution: Solution) -> tuple[Tie, ...]:
    """Ties that the free solution supports."""
    ties: list[Tie] = []
    for d in (0, 1):
        ticks = {
            name: [(name, float(z)) for z in slot.z]
            for name, slot in layout.slots.items()
            if slot.marks.direction == d and slot.twin is None
        }
        opened = [("open", float(k)) for k, e in enumerate(layout.open_direction) if e == d and layout.lined_up[k]]
        for i, line in enumerate(opened):
            for candidates in [*ticks.values(), opened[:i]]:
                near = _nearest(layout, solution, d, line, candidates)
                if near is not None:
                    ties.append(Tie(d, line, near))
        names = list(ticks)
        for i, name in enumerate(names):
            for other in names[:i]:
                pairs = [(t, _nearest(layout, solution, d, t, ticks[other])) for t in ticks[name]]
                found = [Tie(d, t, n) for t, n in pairs if n is not None]
                if len({tie.second for tie in found}) >= 2:
                    ties += found
    return tuple(ties)


def _nearest(
    layout: Layout, solution: Solution, d: int, term: tuple[str, float], candidates: list[tuple[str, float]]
) -> tuple[str, float] | None:
    best, best_gap = None, np.inf
    p = solution.plane_size
    for other in candidates:
        a, da = coordinate(layout, solution.x, p, term)
        b, db = coordinate(layout, solution.x, p, other)
        row = np.zeros(len(solution.x))
        for slopes, sign in ((da, 1.0), (db, -1.0)):
            for k, s in slopes.items():
                row[k] += sign * s
        scale = np.hypot(*solution.x[2 + 2 * d : 4 + 2 * d]) * layout.size
        gap = abs(a - b) * scale
        sigma = scale * np.sqrt(max(float(row @ solution.covariance @ row), 0.0))
        reach = max(REACH_PX, PROJECTIVE_REACH_SHARE * layout.size) if p == 8 else REACH_PX
        if gap <= min(reach, REACH_SIGMAS * sigma) and gap < best_gap:
            best, best_gap = other, gap
    return best
