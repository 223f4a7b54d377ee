"""From clicks to a path within about a pixel: a wide band along a spline through the clicks, then narrower bands along the path."""

from dataclasses import dataclass, replace

import cv2
import numpy as np

from ..records import FloatArray
from ..sheet import Prepared, under_mask
from . import smooth
from .axis import Axis, from_polyline, through
from .band import ridge, sample
from .route import best_path, click_pull, segment_costs
from .strokes import find_way

WIDE = {2: (0.42, 1.6), 3: (0.25, 1.1), 4: (0.2, 1.0)}
"""Half width of the first band in parts of the longest gap between clicks, and its steepest slope, by number of clicks."""
WIDE_MANY = (0.18, 0.9)
UNKNOWN = np.float32(0.3)
"""Likeness to a line [0..1] of a place that a mask hides."""
DOUBTFUL = 0.03
"""Mean cost of a band's best path from which it may not have held the line at all."""
BENT = 1.6
"""Turning [rad] of the spline through a few clicks from which a band along it may be too narrow."""
UNEVEN = 1e-4
"""Weight of a path's unevenness against its mean cost, where two ways were found."""
Path = tuple[FloatArray, FloatArray, FloatArray]
Try = tuple[float, Path, Axis, FloatArray]


@dataclass(frozen=True, slots=True, eq=False)
class Followed:
    """A path found: its axis, the mean cost of its segments (0 is a fully inked line) and the clicks' arc lengths."""

    axis: Axis
    cost: float
    clicks_s: FloatArray


@dataclass(frozen=True, slots=True)
class Pass:
    """One search: ``half`` width of the band [px], steps ``across`` and ``along`` [px], rows a segment, steepest slope, cost and
    limit of turning at a joint, and how far [px] a click may reasonably be off."""

    half: float
    across: float
    along: float
    rows: int
    slope: float
    bend: float
    turn: int
    spread: float


def follow(prepared: Prepared, clicks: FloatArray, closed: bool) -> Followed:
    """The path of the line through the clicks [n, 2]."""
    unit, width = prepared.unit, prepared.width_px
    cap = contrast_cap(prepared, clicks)
    grain = float(np.clip(width / 1.5, 1.0, 5.0))
    tries: list[Try] = []
    for axis, at in _first_axes(clicks, closed):
        gaps = np.diff(np.r_[at, axis.length]) if closed else np.diff(at)
        share, slope = WIDE.get(len(clicks), WIDE_MANY)
        half = float(np.clip(share * gaps.max(), 12 * unit, 320 * unit))
        if closed:
            half = max(min(half, 0.75 * axis.tightest_radius()), min(half, 40 * unit))
        rows = 16 if axis.length > 12 * 16 * grain and not closed else 8
        first = Pass(half, grain, grain, rows, slope, 0.04, 6, 4.0 * max(unit, 0.75))
        path, cost = _search(prepared, axis, at, clicks, first, grain, cap)
        tries.append((cost, path, axis, at))
    tries = [min(tries, key=lambda t: t[0])]
    if closed or tries[0][0] > DOUBTFUL or (len(clicks) < 5 and tries[0][2].turning() > BENT):
        tries += _along_strokes(prepared, clicks, closed, grain, cap)
    found = [_closer(prepared, clicks, path, axis, grain, cap) for _, path, axis, _ in tries]
    return found[0] if len(found) == 1 else min(found, key=lambda f: f.cost + UNEVEN * f.axis.unevenness(6.0 * grain))


def _closer(prepared: Prepared, clicks: FloatArray, path: Path, axis: Axis, grain: float, cap: float) -> Followed:
    """From a first path to one within about a pixel."""
    cost = 0.0
    for reach in (30.0, 14.0):
        axis, at = _smoothed(path, axis, clicks, grain)
        path, cost = _search(prepared, axis, at, clicks, _narrow(reach, axis, prepared.unit, grain), max(grain / 3, 1.0), cap)
    axis, at = _smoothed(path, axis, clicks, grain)
    return Followed(axis, cost, at)


def _narrow(reach: float, axis: Axis, unit: float, grain: float) -> Pass:
    """A search close to an axis that lies about right."""
    rows = 12 if axis.length > 300 * unit and not axis.closed else 6
    return Pass(reach * max(unit, 0.7), grain / 4, grain, rows, 0.35, 0.004, 7, 4.0 * max(unit, 0.75))


def _along_strokes(prepared: Prepared, clicks: FloatArray, closed: bool, grain: float, cap: float) -> list[Try]:
    """The way found over the graph of strokes, searched along once: none or one."""
    unit = prepared.unit
    way = find_way(prepared.clean, clicks, grain, cap, 4.0 * max(unit, 0.75), closed)
    if way is None or len(way) < 5:
        return []
    axis, at = _begun_at(_eased(way, closed, grain), clicks)
    if (np.diff(at) <= 2.0).any():
        return []
    # Short segments: the axis may wind between the nodes of long ones, which would not see it.
    how = replace(_narrow(30.0, axis, unit, grain), rows=6)
    path, cost = _search(prepared, axis, at, clicks, how, max(grain / 3, 1.0), cap)
    return [(cost, path, axis, at)]


def _eased(way: FloatArray, closed: bool, grain: float) -> Axis:
    """A smooth axis along the points of a way."""
    if closed:
        way[-1] = way[0]
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(way, axis=0).T))]
    keep = slice(None, -1 if closed else None)
    pieces = int(np.clip(min(s[-1] / (16 * grain), len(way) // 2), 5, 40))
    curve = smooth.fit((s / s[-1])[keep], way[keep], pieces=pieces, periodic=closed, floor=0.5 * grain, cut=6.0)
    return from_polyline(curve.value(np.linspace(0, 1, max(int(s[-1]), 8) + 1)), closed)


def _begun_at(axis: Axis, clicks: FloatArray) -> tuple[Axis, FloatArray]:
    """The axis beginning (and, open, ending) at its clicks, and where they fall on it."""
    at = axis.arc_of(clicks)
    if axis.closed:
        at = np.where(at > axis.length - 1.0, 0.0, at)
        shift = at[0]
        axis = from_polyline(axis.at(np.linspace(0, axis.length, len(axis.s)) + shift)[0], True)
        return axis, np.mod(at - shift, axis.length)
    at[0], at[-1] = 0.0, axis.length
    return axis, at


def _first_axes(clicks: FloatArray, closed: bool) -> list[tuple[Axis, FloatArray]]:
    """The spline through the clicks; for a loop of five or more clicks also the ellipse through them, which keeps its blunt ends."""
    out = [through(clicks, closed)]
    if closed and len(clicks) >= 5:
        middle, axes, turn = cv2.fitEllipseDirect(clicks.astype(np.float32))
        c, s = np.cos(np.radians(turn)), np.sin(np.radians(turn))
        if 4.0 < min(axes) and max(axes) < 4 * np.ptp(clicks, axis=0).max():
            phi = np.linspace(0, 2 * np.pi, 721)
            ring = np.array([0.5 * axes[0] * np.cos(phi), 0.5 * axes[1] * np.sin(phi)]).T @ np.array([[c, s], [-s, c]]) + np.array(middle)
            ring[-1] = ring[0]
            order = from_polyline(ring, True).arc_of(clicks)
            if np.count_nonzero(np.diff(np.r_[order, order[0]]) < 0) > 1:
                ring = ring[::-1]
            loop = from_polyline(ring, True)
            start = loop.arc_of(clicks[:1])[0]
            loop = from_polyline(loop.at(np.linspace(0, loop.length, 721) + start)[0], True)
            at = loop.arc_of(clicks)
            at[0] = 0.0
            if (np.diff(at) > 0).all():
                out.append((loop, at))
    return out


def contrast_cap(prepared: Prepared, clicks: FloatArray) -> float:
    """Contrast from which a spot counts as fully line-like: less for a faint curve than for a black one."""
    reach = int(round(4 * max(prepared.unit, 0.75)))
    tops = []
    for x, y in np.rint(clicks).astype(int):
        part = prepared.clean[max(y - reach, 0) : y + reach + 1, max(x - reach, 0) : x + reach + 1]
        tops.append(float(part.max(initial=0)) / 255.0)
    return float(np.clip(0.45 * np.median(tops), 0.06, 0.45))


def _search(prepared: Prepared, axis: Axis, at: FloatArray, clicks: FloatArray, how: Pass, shrink: float, cap: float) -> tuple[Path, float]:
    """Best path in one band: (arc lengths, offsets [px], weights) of its nodes, and the mean cost a segment."""
    lead = 0.25 * axis.length if axis.closed else 0.0
    marks = np.r_[at, axis.length] if axis.closed else at
    nodes = [0.0]
    pulls_at: list[tuple[int, int]] = [(0, 0)]
    for i in range(len(marks) - 1):
        count = max(int(round((marks[i + 1] - marks[i]) / (how.rows * how.along))), 1)
        nodes += list(np.linspace(marks[i], marks[i + 1], count + 1)[1:])
        pulls_at.append((len(nodes) - 1, (i + 1) % len(at) if axis.closed else i + 1))
    s_nodes = np.array(nodes)
    start = 0
    if axis.closed:
        before = s_nodes[(s_nodes > axis.length - lead) & (s_nodes < axis.length)] - axis.length
        after = s_nodes[(s_nodes > 0) & (s_nodes < lead)] + axis.length
        start = len(before)
        s_nodes = np.r_[before, s_nodes, after]
    segments = len(s_nodes) - 1
    inner = (np.arange(how.rows) + 0.5) / how.rows
    s_rows = (s_nodes[:-1, None] + np.diff(s_nodes)[:, None] * inner).ravel()
    offsets = np.arange(-how.half, how.half + how.across / 2, how.across)
    band = sample(prepared.clean, axis, s_rows, offsets, shrink)
    flank = max(2, int(round(6.0 * max(prepared.unit, 0.6) / how.across)))
    # Lines that merge make one broad stroke: a wider flank sees it too, at less weight.
    likeness = np.maximum(ridge(band, flank, cap), np.float32(0.6) * ridge(band, 2 * flank + flank // 2, cap))
    if prepared.masked is not None:
        # Under a mask the line may run anywhere: dearer than ink, cheaper than bare paper, so the path goes straight on.
        likeness = np.where(under_mask(prepared, _places(axis, s_rows, offsets)).reshape(likeness.shape), UNKNOWN, likeness)
    step = how.along * how.rows
    reach = max(int(np.ceil(how.slope * step / how.across)), 3)
    costs = segment_costs(likeness, segments, reach)
    pulls = {}
    points, normals = axis.at(marks[: len(at)])
    off = ((clicks - points) * normals).sum(axis=1)
    for node, click in pulls_at:
        pulls[node + start] = click_pull(offsets, off[click], how.spread)
    path, moves, _ = best_path(costs, how.bend, how.turn, pulls)
    chosen = costs[moves + reach, np.arange(segments), path[:-1]]
    columns = np.rint(path[:-1, None] + moves[:, None] * inner).astype(int).clip(0, len(offsets) - 1)
    seen = likeness[np.arange(segments * how.rows), columns.ravel()].reshape(segments, how.rows).mean(axis=1)
    trust = _trust(seen)
    whole = slice(start, start + int(pulls_at[-1][0]) + 1)
    return (s_nodes[whole], offsets[path[whole]], trust[whole]), float(chosen[whole.start : whole.stop - 1].mean())


def _places(axis: Axis, s_rows: FloatArray, offsets: FloatArray) -> FloatArray:
    """Pixels [rows * offsets, 2] of a band's cells."""
    points, normals = axis.at(s_rows)
    return (points[:, None] + normals[:, None] * offsets[:, None]).reshape(-1, 2)


def _trust(seen: FloatArray) -> FloatArray:
    """Weight of each node from the ink on its two segments, against what is usual on this line: letters in a label gap look half inked."""
    usual = max(float(np.percentile(seen, 70)), 0.05)
    share = np.clip((seen / usual - 0.45) / 0.35, 0.0, 1.0)
    return np.maximum(np.minimum(np.r_[share[:1], share], np.r_[share, share[-1:]]), 0.003)


def _smoothed(path: Path, axis: Axis, clicks: FloatArray, grain: float) -> tuple[Axis, FloatArray]:
    """A new axis: the old one moved by a robust penalised spline through the path's nodes, and where the clicks fall on it."""
    s, offset, trust = path
    t = s / axis.length
    if axis.closed:
        t, offset, trust = t[:-1], offset[:-1], trust[:-1]
    pieces = int(np.clip(len(t) // 2, 6 if axis.closed else 3, 40))
    # The blunt ends of a small loop rest on two or three nodes each: every node counts there.
    count = 1.0 if axis.closed and axis.length < 350 * grain else 2.0
    curve = smooth.fit(t, offset, trust, pieces=pieces, periodic=axis.closed, floor=0.25 * grain, correlation=count, cut=8.0)
    dense = axis.points + axis.normals * curve.value(axis.s / axis.length)
    if axis.closed:
        dense[-1] = dense[0]
    fresh = from_polyline(dense, axis.closed)
    fresh, at = _begun_at(fresh, clicks)
    return fresh, np.maximum.accumulate(at)
