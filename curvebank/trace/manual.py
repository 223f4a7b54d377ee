"""Traces that do not follow a line: a curve drawn by hand through clicks, and test points snapped to their symbols."""

import numpy as np

from ..errors import TraceError
from ..records import FloatArray, Trace, frozen
from ..sheet import Prepared
from .axis import through
from .clicks import ordinal

CLICK_SIGMA_PX = 1.5
"""Standard uncertainty of a careful click [px] at a 3 px line; common practice, no source."""


def by_hand(prepared: Prepared, points: FloatArray, closed: bool) -> Trace:
    """The clicks are the curve: a spline through them. Uncertainty is the click's own, and between clicks what leaving a click out shows."""
    unit = max(prepared.unit, 0.6)
    axis, at = through(points, closed)
    misses = []
    for i in range(0 if closed else 1, len(points) if closed else len(points) - 1):
        rest, _ = through(np.delete(points, i, axis=0), closed)
        misses.append(float(np.hypot(*(rest.points - points[i]).T).min()))
    left_out = float(np.sqrt(np.mean(np.square(misses)))) if misses else 0.0
    marks = np.r_[at, axis.length] if closed else at
    cell = np.clip(np.searchsorted(marks, axis.s, side="right") - 1, 0, len(marks) - 2)
    u = (axis.s - marks[cell]) / np.maximum(marks[cell + 1] - marks[cell], 1e-9)
    # Zero at a click, full in the middle of a gap; a left-out click doubles the gap, so half its miss is a cautious figure.
    between = 0.5 * left_out * 4 * u * (1 - u)
    sigma = np.sqrt((CLICK_SIGMA_PX * unit) ** 2 + between**2)
    return Trace(pixels=frozen(axis.points), sigma_px=frozen(sigma), closed=closed, confidence=0.9, source="hand")


def points_on_symbols(prepared: Prepared, points: FloatArray) -> Trace:
    """Each click moved to the middle of the ink around it; a line drawn through the symbol pulls both ways alike."""
    unit = max(prepared.unit, 0.6)
    spread = 4.5 * unit
    reach = int(np.ceil(2.5 * spread))
    height, width = prepared.shape
    out = np.array(points)
    sigma = np.empty(len(points))
    for i, start in enumerate(points):
        at = np.array(start)
        for _ in range(12):
            x0, x1 = max(int(round(at[0])) - reach, 0), min(int(round(at[0])) + reach + 1, width)
            y0, y1 = max(int(round(at[1])) - reach, 0), min(int(round(at[1])) + reach + 1, height)
            ink = prepared.clean[y0:y1, x0:x1].astype(float) / 255.0
            ink[ink < 0.25] = 0.0
            y, x = np.mgrid[y0:y1, x0:x1]
            weight = ink * np.exp(-0.5 * ((x - at[0]) ** 2 + (y - at[1]) ** 2) / spread**2)
            total = float(weight.sum())
            if total < 2.0 * unit:
                raise TraceError(
                    f"The {ordinal(i)} click ({start[0]:.0f}, {start[1]:.0f}) has no symbol near it; move it onto the symbol",
                    code="off-ink",
                )
            new = np.array([(weight * x).sum(), (weight * y).sum()]) / total
            step = float(np.hypot(*(new - at)))
            at = new
            if step < 0.01:
                break
        if np.hypot(*(at - start)) > 3 * spread:
            raise TraceError(f"The {ordinal(i)} click slid off to other ink; click nearer to the middle of the symbol", code="off-ink")
        out[i] = at
        sigma[i] = 0.35 * unit
    return Trace(pixels=frozen(out), sigma_px=frozen(sigma), confidence=0.95, source="points")
