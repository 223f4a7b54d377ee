"""A curve drawn by hand: the clicks are the curve. Its uncertainty comes from the scatter of the clicks and from the gaps between them."""

import numpy as np
from scipy.interpolate import Akima1DInterpolator

from ..records import FloatArray, Trace, frozen
from . import smooth
from .axis import from_polyline

CLICK_SIGMA_PX = 0.87
"""Standard uncertainty of a careful click in each direction [px]: evenly within +-1.5 px."""
CLICK_FREEDOM = 5.0
"""Weight of that figure against the clicks' own scatter, in degrees of freedom."""
ORDER = 3.0
"""Power of the gap with which the bridge between clicks goes wrong."""
BRIDGE = 1.6
"""Size of a bridge's error against what the left-out clicks foretell (from drawn lines clicked anew)."""


def by_hand(points: FloatArray, closed: bool) -> Trace:
    """A smooth curve through the clicks [n, 2] px over their chord length (H. Akima, J. ACM 17 (1970) 589, with modified weights).

    ``sigma_px``: at a click that of clicks, estimated from how far they scatter about a smooth curve and a prior; between clicks also
    what the bridge may be off, foretold by leaving out one click at a time, for the gap it would close is known.
    """
    dense, at = _through(points, closed)
    axis = from_polyline(dense, closed)
    at = at * axis.length / at[-1]
    scatter = click_sigma(points, closed)
    gaps = np.diff(at)
    off, span = _left_out(points, closed, gaps)
    # A left-out click is itself off by its own scatter, and so is the bridge it is measured from.
    foretold = np.maximum(off**2 - 1.6 * scatter**2, 0.0)
    common = float(np.mean(foretold / span ** (2 * ORDER))) if len(off) else 0.0
    rate = np.full(len(points), common)
    inner = slice(None) if closed else slice(1, -1)
    rate[inner] = 0.5 * (rate[inner] + foretold / span ** (2 * ORDER)) if len(off) else common
    if not closed:
        rate[0], rate[-1] = rate[1], rate[-2]
    ends = np.r_[rate, rate[:1]] if closed else rate
    size = BRIDGE * np.sqrt(0.5 * (ends[:-1] + ends[1:])) * gaps**ORDER
    cell = np.clip(np.searchsorted(at, axis.s, side="right") - 1, 0, len(gaps) - 1)
    u = (axis.s - at[cell]) / np.maximum(gaps[cell], 1e-9)
    # Half way between two clicks the curve is mostly their mean: 0.64 of a click's variance (weights 9/16 twice, -1/16 twice).
    sigma = np.sqrt(scatter**2 * (1 - 0.36 * 4 * u * (1 - u)) + (size[cell] * 4 * u * (1 - u)) ** 2)
    return Trace(pixels=frozen(axis.points), sigma_px=frozen(sigma), closed=closed, confidence=0.9, source="hand")


def click_sigma(points: FloatArray, closed: bool) -> float:
    """Standard uncertainty of a click [px] from the clicks' scatter about a smooth curve, drawn towards that of a careful hand."""
    knots = np.vstack([points, points[:1]]) if closed else points
    t = np.r_[0.0, np.cumsum(np.hypot(*np.diff(knots, axis=0).T))]
    t = t[: len(points)] / t[-1]
    pieces = int(np.clip(len(points) // 2, 6 if closed else 3, 40))
    curve = smooth.fit(t, points, pieces=pieces, periodic=closed, cut=0)
    miss = points - curve.value(t)
    # Scatter along the line is taken up by the chord length, so only that across it shows.
    spare = max(len(points) - curve.freedom, 0.0)
    return float(np.sqrt((CLICK_FREEDOM * CLICK_SIGMA_PX**2 + (miss**2).sum()) / (CLICK_FREEDOM + spare)))


def _through(points: FloatArray, closed: bool) -> tuple[FloatArray, FloatArray]:
    """Dense points of the curve and the clicks' arc lengths along it (for a loop also that of the first click come round again)."""
    n = len(points)
    wrap = 3 if closed else 0
    order = np.arange(-wrap, n + wrap + closed) % n
    knots = points[order]
    t = np.r_[0.0, np.cumsum(np.maximum(np.hypot(*np.diff(knots, axis=0).T), 1e-6))]
    spline = Akima1DInterpolator(t, knots, method="makima")
    marks = t[wrap : wrap + n + closed]
    fine = np.unique(np.concatenate([np.linspace(a, b, max(int(b - a), 4) + 1) for a, b in zip(marks[:-1], marks[1:], strict=True)]))
    dense = spline(fine)
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(dense, axis=0).T))]
    if closed:
        dense[-1] = dense[0]
    return dense, np.interp(marks, fine, s)


def _left_out(points: FloatArray, closed: bool, gaps: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Distance of each inner click from the curve through the others, and the gap [px] that leaving it out opens."""
    inner = range(len(points)) if closed else range(1, len(points) - 1)
    off = [float(np.hypot(*(_through(np.delete(points, i, axis=0), closed)[0] - points[i]).T).min()) for i in inner]
    before = np.roll(gaps, 1) if closed else gaps[:-1]
    after = gaps if closed else gaps[1:]
    return np.array(off), before + after
