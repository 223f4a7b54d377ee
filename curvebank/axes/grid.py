"""Calibration from the printed grid: lines get their values from the marks, then the lines place the axes.

1. Lines inside the panel are measured (`found`). Two families of them give the shape of the plane without the marks (`shape`).
2. Along each direction the lines are read by the marks of each axis (`values`): which value each stands for, which mark contradicts.
3. Lines the sheet's own search missed, and ticks, are looked for in the panel laid out straight (`search`), and read again.
4. All lines of a direction place it by least squares (`bend`). A direction with too few lines, with lines that do not sit on round
   values, or with two readings that are nearly as good stays as the marks have it, and the report says why.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from ..records import FloatArray
from . import found as finds
from . import plane, shape, values
from .bend import Bend, Line, fit
from .found import Area, Found, area_of
from .layout import Layout, Slot
from .solve import Solution

ENOUGH_LINES, MANY_LINES = 6, 20
"""With so many lines of the sheet's own on round values, and few gaps between them, nothing more is looked for."""
SAME_LINE_PX = 3.0
CLEARLY_PX = 6.0
"""A mark nearer than this to its value's place, and not on another line, is a poor click and no wrong value."""
COVER_SHARE = 1.2
"""Lines must reach over this share of the half panel, else they say too little about the rest."""


@dataclass(frozen=True, slots=True)
class Doubt:
    """Two readings of one axis that lines and marks support about equally, the line on which they differ most, and the place of a mark
    that would settle it."""

    axis: str
    best: values.Reading
    rival: values.Reading
    far_c: float
    at: tuple[float, float]
    marks_c: FloatArray
    per_px: float


@dataclass(frozen=True, slots=True)
class Wrong:
    """A mark that the grid refutes, with the printed value that belongs where it stands."""

    axis: str
    mark: int
    typed: float
    fits: float


@dataclass(slots=True, eq=False)
class Placed:
    """What the grid says: the base plane to use, a bend or the reason why there is none for each direction, wrong marks and doubts.

    ``scales`` holds (alpha, beta) of further axes that read the same lines: their relation to the first is exact.
    """

    theta: FloatArray
    bends: dict[int, Bend] = field(default_factory=dict)
    reasons: dict[int, str] = field(default_factory=dict)
    read_by: dict[int, str] = field(default_factory=dict)
    wrong: list[Wrong] = field(default_factory=list)
    agreed: set[str] = field(default_factory=set)
    doubts: list[Doubt] = field(default_factory=list)
    scales: dict[str, FloatArray] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, eq=False)
class _Direction:
    """Lines of one direction in order of their coordinate on an area's plane, and how they are read."""

    found: list[Found]
    c: FloatArray
    readings: dict[str, values.Readings]
    axis: str | None

    @property
    def best(self) -> values.Reading | None:
        return None if self.axis is None else self.readings[self.axis].best


def place(layout: Layout, solution: Solution, prepared: Any, width_px: float, unit: float) -> Placed:
    """Read and measure the grid of a panel whose marks have given ``solution``."""
    start = area_of(solution.theta, layout)
    families = finds.from_sheet(start, layout, prepared)
    theta = _shape(families, layout, start)
    area = area_of(theta, layout)
    read = [_read(d, families[d], area, layout) for d in (0, 1)]
    placed = Placed(solution.theta)
    for turn in range(2):
        placed = Placed(_base(layout, solution, area, read))
        base = area_of(placed.theta, layout)
        for d in (0, 1):
            _place_direction(d, read[d], area, base, layout, placed)
        if len(placed.bends) < 2 and placed.theta is not solution.theta:
            # A direction left to the marks has the marks' plane.
            placed = Placed(solution.theta)
            base = area_of(placed.theta, layout)
            for d in (0, 1):
                _place_direction(d, read[d], area, base, layout, placed)
        if turn == 1:
            break
        fresh = False
        for d in (0, 1):
            bend = placed.bends.get(d)
            if bend is not None and _enough(bend, read[d], layout):
                continue
            more = finds.looked_for(d, base, layout, prepared, _to_pixels(d, base, layout, placed), read[1 - d].found, width_px, unit)
            union = _union(families[d], more, base, layout, d)
            if len(union) > len(families[d]):
                families[d][:] = union
                fresh = True
        if not fresh:
            break
        area = area_of(_shape(families, layout, start), layout)
        read = [_read(d, families[d], area, layout) for d in (0, 1)]
    _judge_marks(layout, read, area, placed)
    return placed


def _enough(bend: Bend, read: _Direction, layout: Layout) -> bool:
    """Whether the lines found leave few gaps between the outer marks."""
    whole = sum(not line.tick for line in bend.lines)
    if whole >= MANY_LINES or read.best is None:
        return True
    level = layout.slots[str(read.axis)].marks.level
    wanted = float(np.ptp(level)) / read.best.step + 1 if read.best.step else ENOUGH_LINES
    return whole >= ENOUGH_LINES and whole >= 0.8 * wanted


def _shape(families: tuple[list[Found], list[Found]], layout: Layout, start: Area) -> FloatArray:
    """The plane from lines alone, or the marks' where lines are few."""
    points = tuple([(f.at - layout.shift) / layout.size for f in family if not f.tick] for family in families)
    theta = shape.plane_of((points[0], points[1]))
    if theta is None:
        return start.theta
    # Both coordinates grow as on the marks' plane and have its size, so that pixels per unit stay comparable.
    at = (layout.at - layout.shift) / layout.size
    want, have = plane.coordinates(start.theta, at), plane.coordinates(theta, at)
    return _rescaled(theta, np.array([np.polyfit(have[:, d], want[:, d], 1) for d in (0, 1)]))


def _rescaled(theta: FloatArray, lines: FloatArray) -> FloatArray:
    """The same plane with coordinates c' = slope c + zero, (slope, zero) in the rows of ``lines``."""
    slope, zero = lines[:, 0], lines[:, 1]
    g = theta[6:8] if len(theta) == 8 else np.zeros(2)
    e = np.stack([theta[2:4], theta[4:6]])
    back, at_zero = 1 / slope, -zero / slope
    o = theta[0:2] + at_zero @ e
    depth = 1 + at_zero @ g
    out = np.concatenate([o, e[0] * back[0], e[1] * back[1], g * back]) / depth
    return out if len(theta) == 8 else out[:6]


def _read(d: int, family: list[Found], area: Area, layout: Layout) -> _Direction:
    """The best reading of lines with the ticks of one side of the axis, or of both: curves that end at the axis look like ticks inside."""
    sides = {f.side for f in family if f.tick}
    ways = [family] + [[f for f in family if f.side in (0, side)] for side in sorted(sides) if len(sides) > 1]
    return max((_read_all(d, way, area, layout) for way in ways), key=lambda r: -np.inf if r.best is None else r.best.score)


def _read_all(d: int, family: list[Found], area: Area, layout: Layout) -> _Direction:
    """Lines in order, read by each axis of the direction; the first axis on whose round values they sit is the one that counts."""
    c = np.array([f.meets(area.theta, layout, d, area.axis_at[d]) for f in family])
    order = np.argsort(c, kind="stable")
    family, c = [family[k] for k in order], c[order]
    near = np.abs(c - area.centre[d]) <= area.half[d] * 1.05 + 6 / area.px[d] if len(c) else np.zeros(0, dtype=bool)
    readings: dict[str, values.Readings] = {}
    for name, slot in layout.slots.items():
        if slot.marks.direction != d or slot.twin is not None:
            continue
        at = plane.coordinates(area.theta, (slot.marks.at - layout.shift) / layout.size)
        # Lines are read where the marks of the axis stand: on warped paper the other side of the panel is another matter.
        mine = c[near]
        if slot.own is not None:
            mine = np.array(
                [f.meets(area.theta, layout, d, float(np.median(at[:, 1 - d]))) for f, k in zip(family, near, strict=True) if k]
            )
        readings[name] = values.read(mine, at[:, d], slot.marks.level, slot.marks.log, float(area.px[d]))
    sure = [n for n, r in readings.items() if r.best is not None]
    # An axis whose marks all agree with the lines comes before one whose marks do not.
    sure.sort(key=lambda n: (readings[n].rival is not None, len(readings[n].best.wrong) > 0))  # type: ignore[union-attr]
    return _Direction([f for f, k in zip(family, near, strict=True) if k], c[near], readings, sure[0] if sure else None)


def _base(layout: Layout, solution: Solution, area: Area, read: list[_Direction]) -> FloatArray:
    """The lines' own plane, scaled to the values they were read to, where both directions are read; else the marks' plane."""
    if area.theta is solution.theta or any(r.best is None or r.readings[str(r.axis)].rival is not None for r in read):
        return solution.theta
    lines = np.empty((2, 2))
    for d, r in enumerate(read):
        assert r.best is not None
        slot = layout.slots[str(r.axis)]
        if slot.own is not None:
            return solution.theta
        ends = np.array([area.centre[d] - area.half[d], area.centre[d] + area.half[d]])
        target = (r.best.level(ends) - slot.centre) / slot.half
        lines[d] = np.polyfit(ends, target, 1)
    return _rescaled(area.theta, lines)


def _place_direction(d: int, read: _Direction, area: Area, base: Area, layout: Layout, placed: Placed) -> None:
    if read.axis is None or read.best is None:
        count = sum(not f.tick for f in read.found)
        few = ("no printed lines cross", "only 1 printed line crosses", "only 2 printed lines cross")[min(count, 2)] + " the panel"
        placed.reasons[d] = few if count < 3 else "the printed lines do not sit on round values of the marks"
        return
    slot, got = layout.slots[read.axis], read.readings[read.axis]
    if got.rival is not None:
        placed.reasons[d] = "the printed lines can be read in two ways"
        placed.doubts.append(_doubt(d, read, slot, got, layout, area))
        return
    if slot.own is not None:
        placed.reasons[d] = f"the printed lines belong to the {read.axis} axis"
        placed.read_by[d] = read.axis
        return
    lines = []
    for f, c, level in zip(read.found, read.c, read.best.levels, strict=True):
        if np.isfinite(level):
            uv = plane.coordinates(base.theta, (f.at - layout.shift) / layout.size)
            lines.append(Line(uv, f.sigma_px, float(c), float((level - slot.centre) / slot.half), f.tick, f.height))
    lines = _one_a_value(lines)
    at = plane.coordinates(base.theta, (slot.marks.at - layout.shift) / layout.size)
    keep = [i for i in range(len(at)) if i not in read.best.wrong]
    reach = [line.target for line in lines] + [float((slot.marks.level[i] - slot.centre) / slot.half) for i in keep]
    if len(lines) < 2 or np.ptp(reach) < COVER_SHARE * base.half[d]:
        placed.reasons[d] = "the printed lines cover only a part of the panel"
        return
    bend = fit(d, lines, (at[keep], slot.z[keep]), base.centre, base.half, float(base.px[d]))
    if bend is None:
        placed.reasons[d] = "the printed lines do not agree with each other"
        return
    placed.bends[d] = bend


def _one_a_value(lines: list[Line]) -> list[Line]:
    """The strongest whole line of each value, or the ticks where there is none."""
    best: dict[float, list[Line]] = {}
    for line in lines:
        best.setdefault(round(line.target, 9), []).append(line)
    out: list[Line] = []
    for group in best.values():
        whole = [line for line in group if not line.tick]
        out += [max(whole, key=lambda line: line.height)] if whole else group
    return out


def _to_pixels(d: int, base: Area, layout: Layout, placed: Placed) -> Any:
    """Pixels of own coordinate and the other one on the bent plane, by a few fixed-point steps."""

    def at(c: FloatArray, e: FloatArray) -> FloatArray:
        want = np.stack([c, e] if d == 0 else [e, c], -1)
        flat = want.copy()
        for _ in range(4 if placed.bends else 0):
            bent = flat.copy()
            for k, bend in placed.bends.items():
                bent[:, k] += bend.at(flat)
            flat += want - bent
        return plane.pixels(base.theta, flat) * layout.size + layout.shift

    return at


def _union(family: list[Found], more: Sequence[Found], area: Area, layout: Layout, d: int) -> list[Found]:
    """Lines with those found anew that are not among them."""
    out = list(family)
    have = [f.meets(area.theta, layout, d, area.axis_at[d]) for f in out]
    whole = [not f.tick for f in out]
    for f in sorted(more, key=lambda f: f.tick):
        c = f.meets(area.theta, layout, d, area.axis_at[d])
        if any(w and abs(c - h) * area.px[d] < SAME_LINE_PX for h, w in zip(have, whole, strict=True)):
            continue
        out.append(f)
        have.append(c)
        whole.append(not f.tick)
    return out


def _judge_marks(layout: Layout, read: list[_Direction], area: Area, placed: Placed) -> None:
    """Marks of every axis against the lines: the axis that reads them, and further ones on whose values lines sit as well."""
    for d, r in enumerate(read):
        for name, got in r.readings.items():
            if got.best is None or got.rival is not None or d not in placed.bends:
                continue
            slot = layout.slots[name]
            placed.agreed.add(name)
            if slot.own is not None and r.axis is not None:
                pair = _same_lines(r, name, layout)
                if pair is not None:
                    placed.scales[name] = pair
            at = plane.coordinates(area.theta, (slot.marks.at - layout.shift) / layout.size)[:, d]
            per_px = abs(got.best.slope(float(area.centre[d]))) / area.px[d]
            for i in got.best.wrong:
                fits = values.fitting(float(got.best.level(at[i])), got.best.step, per_px, slot.marks.log)
                if got.best.marks_px[i] < CLEARLY_PX and abs(fits - float(slot.marks.typed[i])) < 0.7 * got.best.step:
                    continue
                placed.wrong.append(Wrong(name, i, float(slot.marks.typed[i]), fits))


def _same_lines(r: _Direction, name: str, layout: Layout) -> FloatArray | None:
    """(alpha, beta) of an axis from lines that both it and the first axis give a round value; None where they share no two."""
    first, mine = r.readings[str(r.axis)].best, r.readings[name].best
    assert first is not None and mine is not None
    both = np.isfinite(first.levels) & np.isfinite(mine.levels)
    if both.sum() < 3:
        return None
    a, b = layout.slots[str(r.axis)], layout.slots[name]
    target = (first.levels[both] - a.centre) / a.half
    z = (mine.levels[both] - b.centre) / b.half
    if np.ptp(z) < 0.5:
        return None
    beta, alpha = np.polyfit(z, target, 1)
    return np.array([alpha, beta]) if np.abs(target - alpha - beta * z).max() < 1e-6 else None


def _doubt(d: int, read: _Direction, slot: Slot, got: values.Readings, layout: Layout, area: Area) -> Doubt:
    """The far end is the line on which both readings differ most; the mark that settles it is that line."""
    assert got.best is not None and got.rival is not None
    gap = np.abs(got.best.level(read.c) - got.rival.level(read.c))
    far = int(np.argmax(gap))
    line = read.found[far].at
    near = line[np.argmin(np.hypot(*(line - slot.marks.at.mean(0)).T))]
    marks_c = plane.coordinates(area.theta, (slot.marks.at - layout.shift) / layout.size)[:, d]
    per_px = abs(got.best.slope(float(area.centre[d]))) / float(area.px[d])
    return Doubt(slot.marks.id, got.best, got.rival, float(read.c[far]), (float(near[0]), float(near[1])), marks_c, per_px)
