"""Locked stretches of a line: where they belong among the clicks, and the line traced around them."""

from collections.abc import Sequence
from typing import Any

import numpy as np
from scipy.interpolate import CubicSpline

from ..errors import TraceError
from ..records import FloatArray
from ..sheet import Prepared
from .axis import through
from .clicks import Clicks, PanelMap, ordinal
from .follow import follow
from .profile import Refined
from .spans import Part, Span, between, whole

NEAR_PX = 12.0
"""A click is on a locked stretch within this distance (times the unit)."""
WANDER = 0.45
"""How far a stretch may lie from the spline through the clicks, in parts of the longest gap between them: as far as a line is searched."""
EVERY_PX = 40.0
"""Way along a stretch (times the unit) between those of its pixels that the search runs through."""
TOUCHING_PX = 2.5
"""Stretches whose ends lie nearer than this leave nothing to trace between them."""
SIGMA_PX = 0.05
"""Sigma of a locked stretch that states none (times the unit)."""


def spans_of(locked: Sequence[Any], prepared: Prepared) -> list[Span]:
    """The stretches as spans, their pixels untouched; where they lie far apart, points are put between them."""
    height, width = prepared.shape
    out = []
    for k, one in enumerate(locked):
        pixels, sigma = (one["pixels"], one.get("sigma_px")) if isinstance(one, dict) else (one.pixels, one.sigma_px)
        xy = np.array(pixels, dtype=np.float64).reshape(-1, 2)
        name = f"The {ordinal(k)} locked stretch"
        if len(xy) < 2 or not np.isfinite(xy).all() or (np.hypot(*np.diff(xy, axis=0).T) <= 0).any():
            raise TraceError(f"{name} is not a run of two or more different pixels. Lock it again.", code="bad-locked")
        if (xy < -0.5).any() or (xy > np.array([width, height]) - 0.5).any():
            raise TraceError(f"{name} runs off the page. Lock it again.", code="bad-locked")
        usual = SIGMA_PX * max(prepared.unit, 0.7)
        spread = np.broadcast_to(np.asarray(usual if sigma is None else sigma, dtype=np.float64), len(xy)).copy()
        out.append(_filled(Span(xy, spread)))
    return out


def _filled(span: Span) -> Span:
    """The span with points put between pixels that lie more than 1.5 px apart, on a smooth curve through them."""
    gap = np.hypot(*np.diff(span.pixels, axis=0).T)
    if gap.max() <= 1.5:
        return span
    s = np.r_[0.0, np.cumsum(gap)]
    curve = CubicSpline(s, span.pixels) if len(s) > 2 else None
    at = np.concatenate(
        [np.linspace(a, b, max(int(round(b - a)), 1), endpoint=False) for a, b in zip(s[:-1], s[1:], strict=True)] + [s[-1:]]
    )
    xy = curve(at) if curve is not None else np.stack([np.interp(at, s, span.pixels[:, k]) for k in (0, 1)], axis=1)
    own = np.searchsorted(at, s)
    xy[own] = span.pixels
    return Span(xy, np.interp(at, s, span.sigma))


def trace_around(prepared: Prepared, panel: PanelMap, clicks: Clicks, points: FloatArray) -> tuple[Span, Refined, float]:
    """The line through ``points`` [n, 2] (in order) with its locked stretches in their places, untouched.

    Raises TraceError for a stretch that does not lie along the clicks or runs over another.
    """
    unit = max(prepared.unit, 0.6)
    spans = spans_of(clicks.locked, prepared)
    ordered, spans = _in_places(points, spans, clicks.closed, unit)
    # One search for the whole line, with the locked stretches as clicks, so that each free part is found in sight of all the rest.
    marks: list[FloatArray] = []
    ends: list[tuple[int, int]] = []
    for free, span in zip(ordered, spans, strict=False):
        marks += list(free)
        some = span.pixels[np.linspace(0, len(span.pixels) - 1, max(int(len(span.pixels) / (EVERY_PX * unit)), 1) + 1).round().astype(int)]
        ends.append((len(marks), len(marks) + len(some) - 1))
        marks += list(some)
    marks += list(ordered[-1]) if not clicks.closed else []
    found = follow(prepared, np.array(marks), clicks.closed)
    at = found.clicks_s - found.clicks_s[0] if clicks.closed else found.clicks_s
    on_ink = clicks.ends == "ink" and not clicks.closed
    last = len(spans) - 1
    pieces: list[Span | Part] = []
    for k, span in enumerate(spans):
        before = spans[k - 1] if k or clicks.closed else None
        stop = at[ends[k][0]]
        start = at[ends[k - 1][1]] if k else at[ends[last][1]] - found.axis.length if clicks.closed else 0.0
        if (before is None and len(ordered[k])) or (before is not None and stop - start > TOUCHING_PX):
            near = found.axis.at(np.linspace(start, stop, max(int(stop - start), 2) + 1)[1:-1])[0]
            pieces.append(between(prepared, panel, before, ordered[k], span, on_ink, near))
        pieces.append(span)
    if not clicks.closed and len(ordered[-1]):
        start = at[ends[last][1]]
        near = found.axis.at(np.linspace(start, found.axis.length, max(int(found.axis.length - start), 2) + 1)[1:])[0]
        pieces.append(between(prepared, panel, spans[-1], ordered[-1], None, on_ink, near))
    if not any(isinstance(p, Part) for p in pieces):
        raise TraceError("The locked stretches leave nothing to trace. Draw the line by hand, or unlock a part of it.", code="bad-locked")
    span, fine, _ = whole(pieces, clicks.closed)
    return span, fine, found.cost


def _in_places(points: FloatArray, spans: list[Span], closed: bool, unit: float) -> tuple[list[FloatArray], list[Span]]:
    """Spans in order along the line, each in its direction, and the free points before each of them and behind the last.

    On a loop the points before the first span are those between the last one and it.
    """
    axis, at = through(points, closed)
    gaps = np.diff(np.r_[at, axis.length]) if closed else np.diff(at)
    wander = max(WANDER * float(gaps.max()), 2 * NEAR_PX * unit)
    ring = np.vstack([points, points[:1]]) if closed else points
    placed: list[tuple[float, float, Span]] = []
    for k, span in enumerate(spans):
        thin = span.pixels[:: max(len(span.pixels) // 50, 1)]
        off = np.array([np.hypot(*(axis.points - p).T).min() for p in thin])
        if off.max() > wander:
            x, y = thin[int(off.argmax())]
            raise TraceError(
                f"The {ordinal(k)} locked stretch does not lie along the clicks (at ({x:.0f}, {y:.0f}) it is {off.max():.0f} px away)."
                " Unlock it, or add clicks along the line.",
                code="locked-elsewhere",
            )
        first, last = _place(ring, at, axis.length, closed, span.pixels[0]), _place(ring, at, axis.length, closed, span.pixels[-1])
        middle = _place(ring, at, axis.length, closed, span.pixels[len(span.pixels) // 2])
        forward = (middle - first) % axis.length < (last - first) % axis.length if closed else last > first
        if not forward:
            span, first, last = span.turned(), last, first
        placed.append((first, last, span))
    placed.sort(key=lambda p: p[0])
    if closed:
        # Round a loop, places are counted from the end of the last span.
        start = placed[-1][1]
        placed = [((a - start) % axis.length, (b - start - 1e-9) % axis.length, span) for a, b, span in placed]
        at = (at - start) % axis.length
    for (_, last, _), (first, _, _) in zip(placed[:-1], placed[1:], strict=True):
        if last > first + 2.0:
            raise TraceError("Two locked stretches lie on the same part of the line. Unlock one of them.", code="locked-overlap")
    free: list[list[FloatArray]] = [[] for _ in range(len(placed) + (not closed))]
    for k in np.argsort(at, kind="stable"):
        point = points[k]
        near = [float(np.hypot(*(span.pixels - point).T).min()) for _, _, span in placed]
        if min(near) < NEAR_PX * unit:
            continue
        passing = [gap for (a, b, _), gap in zip(placed, near, strict=True) if a <= at[k] <= b]
        if passing:
            x, y = point
            raise TraceError(
                f"A locked stretch passes the click at ({x:.0f}, {y:.0f}) by {passing[0]:.0f} px. Unlock it, or move the click.",
                code="locked-elsewhere",
            )
        free[int(np.searchsorted([a for a, _, _ in placed], at[k])) % len(free)].append(point)
    return [np.array(f, dtype=np.float64).reshape(-1, 2) for f in free], [span for _, _, span in placed]


def _place(ring: FloatArray, at: FloatArray, length: float, closed: bool, point: FloatArray) -> float:
    """Place along the line by the nearest spot of the polygon through the points: how far between which two of them."""
    marks = np.r_[at, length] if closed else at
    a, edge = ring[:-1], np.diff(ring, axis=0)
    raw = ((point - a) * edge).sum(axis=1) / np.maximum((edge**2).sum(axis=1), 1e-12)
    share = np.clip(raw, 0.0, 1.0)
    k = int(np.hypot(*(a + share[:, None] * edge - point).T).argmin())
    if not closed and ((k == 0 and raw[k] < 0) or (k == len(a) - 1 and raw[k] > 1)):
        share = raw  # beyond the first or last click, straight on
    return float(marks[k] + share[k] * (marks[k + 1] - marks[k]))
