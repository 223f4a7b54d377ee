"""The nearest place a mark can mean: a crossing of printed lines, a tick on an axis, or the line itself, to a fraction of a pixel."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from ..records import FloatArray
from .lines import measure
from .search import peaks

PIECE_PX = 28.0
"""A line is measured over this much to either side of the place."""
TICK_PX = 7.0


@dataclass(frozen=True, slots=True)
class Snap:
    """Where a click belongs: ``at`` (x, y) px, ``kind`` "crossing", "tick" or "line", ``sigma_px`` how well the place is known."""

    at: tuple[float, float]
    kind: str
    sigma_px: float


@dataclass(frozen=True, slots=True, eq=False)
class _Piece:
    """A straight piece of line: x = point + t direction."""

    point: FloatArray
    direction: FloatArray
    sigma: float
    width: float

    def foot(self, xy: FloatArray) -> FloatArray:
        return self.point + self.direction * float((xy - self.point) @ self.direction)


def snap(prepared: Any, xy: Any, radius_px: float) -> Snap | None:
    """What is printed near a click, or None where there is nothing within ``radius_px``.

    Parameters
    ----------
    prepared : curvebank.sheet.Prepared
        Its ``lines`` and ``ink``; what lies under ``masked`` is not looked at.
    xy : (x, y)
        The click [px].
    """
    at = np.asarray(xy, dtype=np.float64).reshape(2)
    pieces: list[_Piece | None] = [_piece(prepared, at, radius_px, lying) for lying in (True, False)]
    level, upright = pieces
    if level is not None and upright is not None:
        matrix = np.stack([level.direction, -upright.direction], -1)
        t = np.linalg.solve(matrix, upright.point - level.point)
        place = level.point + t[0] * level.direction
        if np.hypot(*(place - at)) <= radius_px * np.sqrt(2):
            return Snap((float(place[0]), float(place[1])), "crossing", float(np.hypot(level.sigma, upright.sigma)))
    found = [p for p in pieces if p is not None]
    if not found:
        return None
    line = min(found, key=lambda p: float(np.hypot(*(p.foot(at) - at))))
    tick = _tick(prepared, line, at, radius_px)
    if tick is not None:
        return tick
    foot = line.foot(at)
    return Snap((float(foot[0]), float(foot[1])), "line", line.sigma)


def _piece(prepared: Any, at: FloatArray, radius_px: float, lying: bool) -> _Piece | None:
    """The nearest line of one direction as a straight piece around the place, measured anew."""
    a, c = (0, 1) if lying else (1, 0)
    best, gap = None, radius_px
    for line in prepared.lines:
        if bool(line.horizontal) != lying or not line.along[0] - radius_px <= at[a] <= line.along[-1] + radius_px:
            continue
        off = abs(float(np.interp(at[a], line.along, line.across)) - at[c])
        if off <= gap:
            best, gap = line, off
    if best is None:
        return None
    low, high = max(at[a] - PIECE_PX, best.along[0]), min(at[a] + PIECE_PX, best.along[-1])
    if high - low < 8:
        low, high = (best.along[0], best.along[0] + 12) if at[a] < best.along[0] + 12 else (best.along[-1] - 12, best.along[-1])
    t = np.linspace(low, high, 9)
    guide = np.stack([t, np.interp(t, best.along, best.across)] if lying else [np.interp(t, best.along, best.across), t], -1)
    found = measure([guide], [float(best.width_px) or 3.0], prepared.ink, getattr(prepared, "masked", None), places=6, along_px=4)[0]
    if len(found.at) < 2:
        return None
    slope, zero = np.polyfit(found.at[:, a] - at[a], found.at[:, c], 1) if np.ptp(found.at[:, a]) > 6 else (0.0, found.at[:, c].mean())
    point, direction = np.empty(2), np.empty(2)
    point[a], point[c] = at[a], zero
    direction[a], direction[c] = 1.0, slope
    sigma = float(np.hypot(np.median(found.sigma) / np.sqrt(len(found.at)), 0.02))
    return _Piece(point, direction / np.hypot(*direction), sigma, float(best.width_px) or 3.0)


def _tick(prepared: Any, line: _Piece, at: FloatArray, radius_px: float) -> Snap | None:
    """A tick that stands on the line near the click."""
    normal = np.array([-line.direction[1], line.direction[0]])
    foot = line.foot(at)
    t = np.arange(-radius_px - 6, radius_px + 6.01, 0.5)
    best: tuple[float, FloatArray, float] | None = None
    ink, masked = prepared.ink, getattr(prepared, "masked", None)
    for side in (-1.0, 1.0):
        offsets = side * (line.width / 2 + np.linspace(1.5, TICK_PX, 8))
        grid = foot + t[None, :, None] * line.direction + offsets[:, None, None] * normal
        x, y = (np.clip(np.rint(grid[..., k]).astype(int), 0, ink.shape[1 - k] - 1) for k in (0, 1))
        band = ink[y, x].astype(np.float64)
        if masked is not None:
            band[masked[y, x]] = 0.0
        # Ink all the way from the line outwards; a letter near it is not.
        strength = np.sort(band, axis=0)[1:3].mean(axis=0)
        strength = np.convolve(strength, np.ones(3) / 3, "same")
        for s, height in peaks(t, strength, 12):
            if abs(s) <= radius_px and height > 30 and (best is None or abs(s) < abs(best[0])):
                best = (s, offsets, height)
    if best is None:
        return None
    guide = foot + best[0] * line.direction + np.array([best[1][0], best[1][-1]])[:, None] * normal
    found = measure([guide], [line.width], ink, masked, places=1, along_px=2, reach_px=2.0)[0]
    if not len(found.at):
        return None
    place = line.foot(found.at[0])
    return Snap((float(place[0]), float(place[1])), "tick", float(np.hypot(found.sigma[0], 0.05)))
