"""Lines that two axes share, found from where the clicks fall.

On nearly every chart the flow axis stands on a tick of the value axis and the other way round, and a left and a right
scale share the printed frame. Two such lines found within click noise of each other are taken as one: a chance meeting is
unlikely (a few pixels in a thousand), and a wrong one moves the map by no more than those pixels.
"""

import numpy as np

from .layout import Layout, Term
from .solve import Solution, Tie

REACH_PX = 4.0
REACH_SIGMAS = 3.0
PROJECTIVE_REACH_SHARE = 0.02
"""On a photo the far scale is placed loosely at first: allow this share of the panel where the uncertainty asks for it."""


def find_ties(layout: Layout, solution: Solution) -> tuple[Tie, ...]:
    """Ties that the free solution supports."""
    covariance = solution.covariance
    ties: list[Tie] = []
    for d in (0, 1):
        ticks: dict[str, list[Term]] = {
            name: [(name, float(z)) for z in slot.z]
            for name, slot in layout.slots.items()
            if slot.marks.direction == d and slot.twin is None
        }
        opened: list[Term] = [("", float(k)) for k, e in enumerate(layout.open_direction) if e == d and layout.lined_up[k]]
        for i, line in enumerate(opened):
            for candidates in [*ticks.values(), opened[:i]]:
                near = _nearest(layout, solution, covariance, d, line, candidates)
                if near is not None:
                    ties.append(Tie(d, line, near))
        names = list(ticks)
        for i, name in enumerate(names):
            for other in names[:i]:
                pairs = [(t, _nearest(layout, solution, covariance, d, t, ticks[other])) for t in ticks[name]]
                found = [Tie(d, t, n) for t, n in pairs if n is not None]
                if len({tie.second for tie in found}) >= 2:
                    ties += found
    return tuple(ties)


def _nearest(layout: Layout, solution: Solution, covariance: np.ndarray, d: int, term: Term, candidates: list[Term]) -> Term | None:
    best, best_gap = None, np.inf
    p, size = solution.plane_size, len(solution.x)
    scale = np.hypot(*solution.x[2 + 2 * d : 4 + 2 * d]) * layout.size
    reach = max(REACH_PX, PROJECTIVE_REACH_SHARE * layout.size) if p == 8 else REACH_PX
    a, row_a = layout.term_row(term, p, size)
    for other in candidates:
        b, row_b = layout.term_row(other, p, size)
        row = row_a - row_b
        gap = abs(a - b + float(row @ solution.x)) * scale
        sigma = scale * np.sqrt(max(float(row @ covariance @ row), 0.0))
        if gap <= min(reach, REACH_SIGMAS * sigma) and gap < best_gap:
            best, best_gap = other, gap
    return best
