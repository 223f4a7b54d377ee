"""Where guides belong among the clicks: each by its place along the spline through the points that are already in order."""

import numpy as np

from ..records import FloatArray
from .axis import through


def in_order(points: FloatArray, guides: FloatArray, closed: bool, same_px: float) -> FloatArray:
    """Clicks [n, 2] and guides [k, 2] as one list in order along the line.

    The guide nearest to the spline goes in first and then bends it, so that a far one finds its place on a truer line. One that lies
    beyond the first or last click of an open line extends it. A guide within ``same_px`` of a point says nothing new.
    """
    left = [g for g in guides if np.hypot(*(points - g).T).min() >= same_px]
    while left:
        axis, at = through(points, closed)
        gaps = [np.hypot(*(axis.points - g).T) for g in left]
        k = int(np.argmin([d.min() for d in gaps]))
        guide, s = left.pop(k), float(axis.s[gaps[k].argmin()])
        place = int(np.searchsorted(at, s, side="right"))
        if not closed:
            before = s <= axis.s[1] and (guide - axis.points[0]) @ axis.tangents[0] < 0
            after = s >= axis.s[-2] and (guide - axis.points[-1]) @ axis.tangents[-1] > 0
            place = 0 if before else len(points) if after else min(max(place, 1), len(points) - 1)
        points = np.insert(points, place, guide, axis=0)
        left = [g for g in left if np.hypot(*(g - guide)) >= same_px]
    return points
