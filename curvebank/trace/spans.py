"""A line traced around stretches that stay as they are: only what lies between them is searched for and read.

A stretch that stays lends the part beside it its last pixels: the search runs through them, and in the smoothing they stand as
readings of their own, so that the new part leaves them in their direction. What is left at a joint is taken out over a short way of
the new part; the stretch itself stays to the bit.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..records import FloatArray
from ..sheet import Prepared
from .axis import Axis, from_polyline
from .clicks import PanelMap
from .ends import to_ink
from .follow import follow
from .profile import Blocks, Refined, Shape, align, refine
from .spread import sigma_of

CONTEXT_PX = 60.0
"""How much of a stretch that stays (times the unit) the part beside it looks at."""
BLEND_PX = 40.0
"""Way of the new part (times the unit) over which what is left at a joint is taken out."""
FAR_PX = 1.2


@dataclass(frozen=True, slots=True, eq=False)
class Span:
    """Pixels [n, 2] of a line in order along it and their sigma [n]."""

    pixels: FloatArray
    sigma: FloatArray

    def turned(self) -> "Span":
        """The same the other way round."""
        return Span(self.pixels[::-1], self.sigma[::-1])


@dataclass(frozen=True, slots=True, eq=False)
class Part:
    """A newly traced part: its span, its share of unseen line, readings (arc lengths within the span), shape and scatter."""

    span: Span
    cost: float
    blocks: Blocks
    shape: Shape
    scatter: float


def between(
    prepared: Prepared,
    panel: PanelMap,
    head: Span | None,
    points: FloatArray,
    tail: Span | None,
    ends_on_ink: bool,
    near: FloatArray | None = None,
) -> Part:
    """The line from the end of ``head`` through ``points`` [n, 2] to the start of ``tail``, both excluded; without one of them, from
    the line's own end. ``near`` [n, 2] is a path known to lie on the line within a pixel or two, from head to tail."""
    unit = max(prepared.unit, 0.6)
    if head is not None and head is tail:
        # The whole of a loop but one stretch: each end of the new part looks at its own half of it.
        half = len(head.pixels) // 2
        head, tail = Span(head.pixels[half:], head.sigma[half:]), Span(head.pixels[: half + 1], head.sigma[: half + 1])
    before = _context(head.turned(), unit).turned() if head is not None else None
    after = _context(tail, unit) if tail is not None else None
    known = (None if before is None else before.pixels, None if after is None else after.pixels)
    given = [points]
    if before is not None:
        given.insert(0, before.pixels[[0, -1]] if len(before.pixels) > 8 * unit else before.pixels[-1:])
    if after is not None:
        given.append(after.pixels[[0, -1]] if len(after.pixels) > 8 * unit else after.pixels[:1])
    anchors = _apart(np.concatenate(given))
    if near is not None:
        path = [known[0]] if known[0] is not None else []
        path += [near] + ([known[1]] if known[1] is not None else [])
        axis, cost = from_polyline(np.concatenate(path), False), 0.0
    else:
        found = follow(prepared, anchors, False)
        axis, cost = found.axis, found.cost
    axis, shape, far = align(prepared, axis, anchors)
    if far > FAR_PX * max(prepared.unit, 0.7):
        axis, shape, far = align(prepared, axis, anchors)
    if ends_on_ink and (head is None or tail is None):
        axis = to_ink(prepared, panel, axis, shape, (head is not None, tail is not None))
    fine = refine(prepared, axis, shape, points, known)
    return _cut(fine, cost, before, after, sigma_of(fine, prepared.unit), unit)


def _context(span: Span, unit: float) -> Span:
    """The first pixels of a span."""
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(span.pixels, axis=0).T))]
    count = max(int(np.searchsorted(s, CONTEXT_PX * unit)), 1)
    return Span(span.pixels[:count], span.sigma[:count])


def _apart(points: FloatArray) -> FloatArray:
    """Points without those that repeat the one before."""
    keep = np.r_[True, np.hypot(*np.diff(points, axis=0).T) >= 2.0]
    return points[keep]


def _cut(fine: Refined, cost: float, before: Span | None, after: Span | None, sigma: FloatArray, unit: float) -> Part:
    """The new part alone, joined exactly to what stays."""
    axis = fine.axis
    first = _foot(axis, before.pixels[-1], 0.0, 0.5) if before is not None else 0.0
    last = _foot(axis, after.pixels[0], 0.5, 1.0) if after is not None else axis.length
    count = max(int(round(last - first)), 1)
    s = np.linspace(first, last, count + 1)[(before is not None) : count + (after is None)]
    xy = axis.at(s)[0]
    spread = np.interp(s, axis.s, sigma)
    way = min(BLEND_PX * unit, 0.5 * max(last - first, 1.0))
    for stays, at, joint in ((before, first, -1), (after, last, 0)):
        if stays is not None:
            gap = stays.pixels[joint] - axis.at(np.array([at]))[0][0]
            u = np.clip(np.abs(s - at) / way, 0.0, 1.0)
            share = (1.0 - u) ** 2 * (1.0 + 2.0 * u)
            xy = xy + share[:, None] * gap
            spread = np.hypot(spread, 0.5 * share * float(np.hypot(*gap)))
    inside = (fine.blocks.s > first) & (fine.blocks.s < last)
    kept = {name: getattr(fine.blocks, name)[inside] for name in ("shift", "sigma", "height", "good", "masked")}
    return Part(Span(xy, spread), cost, Blocks(s=fine.blocks.s[inside] - first, **kept), fine.shape, fine.scatter)


def _foot(axis: Axis, point: FloatArray, low: float, high: float) -> float:
    """Arc length of the place nearest to a point between two shares of an axis."""
    rows = np.flatnonzero((axis.s >= low * axis.length) & (axis.s <= high * axis.length))
    s = float(axis.s[rows[np.hypot(*(axis.points[rows] - point).T).argmin()]])
    for _ in range(2):
        base, normal = axis.at(np.array([s]))
        gap = point - base[0]
        s = min(max(s + float(gap[0] * normal[0, 1] - gap[1] * normal[0, 0]), 0.0), axis.length)
    return s


def whole(pieces: Sequence[Span | Part], closed: bool) -> tuple[Span, Refined, float]:
    """All of a line from its pieces in order: its pixels and sigma, what the judgement of a trace looks at, and the cost of its path.

    The axis judged has the very pixels as its samples, so that its rows are theirs.
    """
    parts = [p for p in pieces if isinstance(p, Part)]
    spans = [p.span if isinstance(p, Part) else p for p in pieces]
    starts = np.cumsum([0] + [len(s.pixels) for s in spans])
    pixels = np.concatenate([s.pixels for s in spans])
    sigma = np.concatenate([s.sigma for s in spans])
    if closed and not np.array_equal(pixels[0], pixels[-1]):
        pixels, sigma = np.vstack([pixels, pixels[:1]]), np.r_[sigma, sigma[:1]]
    last = len(pixels) - 1
    length = float(np.hypot(*np.diff(pixels, axis=0).T).sum())
    tangents = np.gradient(pixels, axis=0)
    if closed:
        tangents[[0, -1]] = pixels[1] - pixels[-2]
    tangents /= np.maximum(np.hypot(*tangents.T), 1e-12)[:, None]
    axis = Axis(pixels, np.linspace(0.0, length, last + 1), tangents, closed)
    at = [start for piece, start in zip(pieces, starts, strict=False) if isinstance(piece, Part)]
    blocks = Blocks(
        np.concatenate([(p.blocks.s + k) * (length / last) for p, k in zip(parts, at, strict=True)]),
        *(np.concatenate([getattr(p.blocks, name) for p in parts]) for name in ("shift", "sigma", "height", "good", "masked")),
    )
    total = max(sum(len(p.span.pixels) for p in parts), 1)
    cost = sum(p.cost * len(p.span.pixels) for p in parts) / total
    longest = max(parts, key=lambda p: len(p.span.pixels))
    return Span(pixels, sigma), Refined(axis, sigma, blocks, longest.shape, max(p.scatter for p in parts)), cost


def begun_at(span: Span, fine: Refined, row: int) -> tuple[Span, Refined]:
    """A closed line that begins at another of its pixels."""
    n = len(span.pixels) - 1
    order = (np.arange(n + 1) + row) % n
    axis = Axis(span.pixels[order], fine.axis.s, fine.axis.tangents[order], True)
    moved = replace(fine.blocks, s=np.mod(fine.blocks.s - fine.axis.s[row], fine.axis.length))
    return Span(span.pixels[order], span.sigma[order]), replace(fine, axis=axis, sigma=span.sigma[order], blocks=moved)
