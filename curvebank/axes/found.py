"""The printed lines of one panel, as pixels: those the sheet found, and those looked for in the panel laid out straight."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..records import FloatArray
from . import lines as middles
from . import plane, search
from .layout import Layout

SHORTEST_SHARE = 0.5
"""A line counts where it covers this share of the panel across."""
BEYOND_SHARE = 0.3
"""Lines this far beyond the marks may still belong to the panel's scale."""
FIELDS, A_FIELD = 20, 2
"""More lines than so many in so many fields add nothing: on millimetre paper the strongest of each field are kept."""


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A line or tick: points ``at`` [n, 2] px with ``sigma_px`` [n], ``height`` of its ink; ``side`` of the axis a tick is on."""

    at: FloatArray
    sigma_px: FloatArray
    height: float
    tick: bool = False
    side: int = 0

    def meets(self, theta: FloatArray, layout: Layout, d: int, axis_at: float) -> float:
        """Own coordinate where the other one is ``axis_at``: straight on from the nearer half."""
        uv = plane.coordinates(theta, (self.at - layout.shift) / layout.size)
        e = uv[:, 1 - d]
        near = np.argsort(np.abs(e - axis_at), kind="stable")[: max(len(e) // 2, min(len(e), 4))]
        if self.tick or len(near) < 3 or np.ptp(e[near]) <= 0:
            return float(np.median(uv[near, d]))
        return float(np.polyfit(e[near] - axis_at, uv[near, d], 1)[1])


@dataclass(frozen=True, slots=True, eq=False)
class Area:
    """The marked area on a plane: ``centre`` and ``half`` [2] in its coordinates, ``px`` [2] pixels of one unit, ``axis_at`` [2]: for each
    direction the other coordinate of the place where its marks stand."""

    theta: FloatArray
    centre: FloatArray
    half: FloatArray
    px: FloatArray
    axis_at: tuple[float, float]


def area_of(theta: FloatArray, layout: Layout) -> Area:
    uv = plane.coordinates(theta, (layout.at - layout.shift) / layout.size)
    low, high = _reach(uv, layout)
    axis_at = []
    for d in (0, 1):
        rows = sorted(
            {
                r
                for s in layout.slots.values()
                if s.marks.direction == d and s.own is None and s.twin is None
                for r in layout.rows_of[s.marks.id]
            }
        )
        axis_at.append(float(np.median(uv[rows, 1 - d])))
    centre, half = (low + high) / 2, np.maximum((high - low) / 2, 1e-9)
    _, slopes = plane.pixel_derivatives(theta, centre[None])
    px = np.hypot(slopes[0, 0], slopes[0, 1]) * layout.size
    return Area(theta, centre, half, px, (axis_at[0], axis_at[1]))


def _reach(uv: FloatArray, layout: Layout) -> tuple[FloatArray, FloatArray]:
    """Range of each coordinate over the marks that say it: flow marks under a neighbouring panel do not make this one taller."""
    low, high = np.empty(2), np.empty(2)
    for d in (0, 1):
        rows = sorted({r for s in layout.slots.values() if s.marks.direction == d for r in layout.rows_of[s.marks.id]})
        low[d], high[d] = uv[rows, d].min(), uv[rows, d].max()
    return low, high


def from_sheet(area: Area, layout: Layout, prepared: Any) -> tuple[list[Found], list[Found]]:
    """Printed lines of the sheet inside the panel, by direction (constant flow, constant value)."""
    guides: list[FloatArray] = []
    widths: list[float] = []
    way: list[int] = []
    place: list[float] = []
    weight: list[float] = []
    for line in prepared.lines:
        points = line.points()
        uv = plane.coordinates(area.theta, (points - layout.shift) / layout.size)
        if not np.all(np.isfinite(uv)):
            continue
        d = int(np.ptp(uv[:, 0]) * area.px[0] > np.ptp(uv[:, 1]) * area.px[1])
        e = 1 - d
        if np.ptp(uv[:, d]) * area.px[d] > 0.25 * np.ptp(uv[:, e]) * area.px[e]:
            continue
        inside = (np.abs(uv[:, e] - area.centre[e]) <= area.half[e] - 2 / area.px[e]) & (
            np.abs(uv[:, d] - area.centre[d]) <= area.half[d] * (1 + 2 * BEYOND_SHARE) + 12 / area.px[d]
        )
        if inside.sum() < 3 or np.ptp(uv[inside, e]) < SHORTEST_SHARE * 2 * area.half[e]:
            continue
        guides.append(points[inside])
        widths.append(float(getattr(line, "width_px", 0.0) or 3.0))
        way.append(d)
        place.append(float(np.median(uv[inside, d])))
        weight.append(float(getattr(line, "weight", 1.0)))
    out: tuple[list[Found], list[Found]] = ([], [])
    for d in (0, 1):
        mine = _strongest([k for k, w in enumerate(way) if w == d], place, weight)
        measured = middles.measure([guides[k] for k in mine], [widths[k] for k in mine], prepared.ink, getattr(prepared, "masked", None))
        out[d].extend(Found(m.at, m.sigma, m.height) for m in measured if len(m.at))
    return out


def looked_for(
    d: int, area: Area, layout: Layout, prepared: Any, to_pixels: search.ToPixels, other: Sequence[Found], width_px: float, unit: float
) -> list[Found]:
    """Lines and ticks of direction d found in the panel laid out straight; ``other`` are the lines of the other direction."""
    e = 1 - d
    masked, ink = getattr(prepared, "masked", None), prepared.ink
    margin = 6 / area.px[d]
    c_range = (area.centre[d] - area.half[d] - margin, area.centre[d] + area.half[d] + margin)
    e_range = (area.centre[e] - area.half[e], area.centre[e] + area.half[e])
    px = np.array([area.px[d], area.px[e]])
    line_width = min(width_px, 3.0)
    guides, ticks, sides = [], [], []
    es = np.linspace(e_range[0] + 2 / px[1], e_range[1] - 2 / px[1], 40)
    for c, _ in search.find_lines(to_pixels, c_range, e_range, px, ink, masked, line_width):
        guides.append(to_pixels(np.full(len(es), c), es))
    measured = middles.measure(guides, [line_width] * len(guides), ink, masked, along_px=20)
    out = [Found(m.at, m.sigma, m.height) for m in measured if len(m.at)]
    axis_e = _axis_line(d, area, layout, other)
    for c, _, side in search.find_ticks(to_pixels, c_range, axis_e, px, ink, masked, width_px, unit):
        reach = np.array([width_px / 2 + 1.5, width_px / 2 + 1.5 + max(3.0, 4.0 * unit)]) / px[1] * side
        ticks.append(to_pixels(np.full(2, c), axis_e + reach))
        sides.append(int(side))
    short = middles.measure(ticks, [width_px] * len(ticks), ink, masked, places=1, along_px=max(1, round(1.5 * unit)), reach_px=2.0)
    out += [Found(m.at, m.sigma, m.height, True, side) for m, side in zip(short, sides, strict=True) if len(m.at)]
    return out


def _axis_line(d: int, area: Area, layout: Layout, other: Sequence[Found]) -> float:
    """The coordinate of the axis line that the marks of direction d stand on: a printed line near them, else their own middle."""
    at = area.axis_at[d]
    near = [f.meets(area.theta, layout, 1 - d, area.axis_at[1 - d]) for f in other if not f.tick]
    near = [c for c in near if abs(c - at) * area.px[1 - d] <= 5.0]
    return min(near, key=lambda c: abs(c - at)) if near else at


def _strongest(mine: list[int], place: list[float], weight: list[float]) -> list[int]:
    """The strongest lines of each field of the panel, all of them where they are few."""
    if len(mine) <= FIELDS * A_FIELD:
        return mine
    at = np.array([place[k] for k in mine])
    field = np.minimum((at - at.min()) / max(float(np.ptp(at)), 1e-12) * FIELDS, FIELDS - 1).astype(int)
    keep: list[int] = []
    for f in range(FIELDS):
        keep += sorted((k for k, own in zip(mine, field, strict=True) if own == f), key=lambda k: -weight[k])[:A_FIELD]
    return sorted(keep)
