"""Traces that do not follow a line: a curve drawn by hand through clicks, and test points snapped to their symbols."""

import cv2
import numpy as np
import numpy.typing as npt

from ..errors import TraceError
from ..records import FloatArray, Trace, frozen
from ..sheet import Prepared
from .axis import through
from .clicks import ordinal

CLICK_SIGMA_PX = 1.5
"""Standard uncertainty of a careful click [px] at a 3 px line; common practice, no source."""


def by_hand(prepared: Prepared, points: FloatArray, closed: bool) -> Trace:
    """The clicks are the curve: a spline through them. Uncertainty is the click's own; between clicks, what leaving one out shows."""
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
    """Each click moved to the middle of the symbol it is on."""
    unit = max(prepared.unit, 0.6)
    out = np.array(points)
    for i, start in enumerate(points):
        at = _symbol_at(prepared, start, unit)
        if at is None:
            at = _ink_middle(prepared, start, 4.5 * unit)
        if at is None or np.hypot(*(at - start)) > 14 * unit:
            x, y = start
            raise TraceError(f"The {ordinal(i)} click ({x:.0f}, {y:.0f}) has no symbol near it; move it onto the symbol", code="off-ink")
        out[i] = at
    return Trace(pixels=frozen(out), sigma_px=frozen(np.full(len(out), 0.35 * unit)), confidence=0.95, source="points")


def _window(prepared: Prepared, at: FloatArray, reach: int) -> tuple[int, int, npt.NDArray[np.uint8]]:
    height, width = prepared.shape
    x0, x1 = max(int(round(at[0])) - reach, 0), min(int(round(at[0])) + reach + 1, width)
    y0, y1 = max(int(round(at[1])) - reach, 0), min(int(round(at[1])) + reach + 1, height)
    return x0, y0, prepared.clean[y0:y1, x0:x1]


def _symbol_at(prepared: Prepared, click: FloatArray, unit: float) -> FloatArray | None:
    """Middle of a symbol that stands by itself: its outline filled, so hollow and full ones count alike. None where there is none."""
    x0, y0, ink = _window(prepared, click, int(round(24 * unit)))
    outlines, _ = cv2.findContours((ink > 90).astype(np.uint8), cv2.RETR_EXTERNAL, cv2.CHAIN_APPROX_NONE)
    best: tuple[float, FloatArray] | None = None
    for outline in outlines:
        x, y, w, h = cv2.boundingRect(outline)
        touches = x == 0 or y == 0 or x + w == ink.shape[1] or y + h == ink.shape[0]
        if touches or max(w, h) > 30 * unit or min(w, h) < 2.5 * unit or max(w, h) > 2.5 * min(w, h):
            continue
        filled = np.zeros_like(ink)
        cv2.drawContours(filled, [outline], -1, 255, -1)
        # Grey edge pixels weigh by their ink, the inside fully.
        weight = np.where(
            cv2.erode(filled, np.ones((3, 3), np.uint8)) > 0, 255, np.where(cv2.dilate(filled, np.ones((3, 3), np.uint8)) > 0, ink, 0)
        )
        rows, columns = np.mgrid[0 : ink.shape[0], 0 : ink.shape[1]]
        total = float(weight.sum())
        middle = np.array([x0 + (weight * columns).sum() / total, y0 + (weight * rows).sum() / total])
        away = float(np.hypot(*(middle - click)))
        if best is None or away < best[0]:
            best = (away, middle)
    return None if best is None else best[1]


def _ink_middle(prepared: Prepared, click: FloatArray, spread: float) -> FloatArray | None:
    """Middle of the ink under a shrinking Gaussian window; a line drawn through the symbol pulls both ways alike."""
    at = np.array(click, dtype=np.float64)
    for width in np.r_[np.full(4, 1.8 * spread), np.full(6, 1.2 * spread)]:
        x0, y0, ink = _window(prepared, at, int(np.ceil(2.5 * width)))
        weight = np.where(ink > 64, ink, 0) / 255.0
        rows, columns = np.mgrid[y0 : y0 + ink.shape[0], x0 : x0 + ink.shape[1]]
        weight = weight * np.exp(-0.5 * ((columns - at[0]) ** 2 + (rows - at[1]) ** 2) / width**2)
        total = float(weight.sum())
        if total < 1.5:
            return None
        at = np.array([(weight * columns).sum(), (weight * rows).sum()]) / total
    return at
