"""A line is traced in one direction whichever way it was clicked, so that clicks in reverse order give the same numbers, reversed."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from ..records import FloatArray, Notice, Trace, frozen


def one_way(points: FloatArray, closed: bool) -> tuple[FloatArray, Callable[[Trace], Trace]]:
    """The points of a line [n, 2] in the order it is traced in, and what gives a trace of them the order of the clicks again.

    An open line is traced from the end that lies further left (further up where both lie equally far left); a loop
    clockwise as seen, from its leftmost click.
    """
    first = points[0]
    if not closed:
        if tuple(points[-1]) >= tuple(first):
            return points, lambda trace: trace
        return points[::-1], flipped
    x, y = points[:, 0], points[:, 1]
    clockwise = float((x * np.roll(y, -1) - np.roll(x, -1) * y).sum()) >= 0
    order = points if clockwise else points[::-1]
    order = np.roll(order, -int(np.lexsort((order[:, 1], order[:, 0]))[0]), axis=0)
    return order, lambda trace: _begun_at(trace if clockwise else flipped(trace), first)


def flipped(trace: Trace) -> Trace:
    """The trace the other way round."""
    last = len(trace.pixels) - 1
    return replace(
        trace,
        pixels=frozen(trace.pixels[::-1]),
        sigma_px=frozen(trace.sigma_px[::-1]),
        stretches=tuple((last - b, last - a, why) for a, b, why in trace.stretches[::-1]),
        warnings=tuple(_moved(n, lambda a, b: (last - b, last - a)) for n in trace.warnings),
    )


def _moved(notice: Notice, to: Callable[[int, int], tuple[int, int]]) -> Notice:
    return notice if notice.stretch is None else replace(notice, stretch=to(*notice.stretch))


def _begun_at(trace: Trace, place: FloatArray) -> Trace:
    """A closed trace (its first point is repeated at its end) that begins at the sample nearest to ``place``."""
    ring = trace.pixels[:-1]
    n = len(ring)
    k = int(np.hypot(*(ring - place).T).argmin())
    order = (np.arange(n + 1) + k) % n

    def to(a: int, b: int) -> tuple[int, int]:
        # A stretch over the seam keeps its longer part.
        a, b = (a - k) % n, (b - k) % n
        return (a, b) if a <= b else (a, n) if n - a >= b else (0, b)

    return replace(
        trace,
        pixels=frozen(ring[order]),
        sigma_px=frozen(trace.sigma_px[order]),
        stretches=tuple((*to(a, b), why) for a, b, why in trace.stretches),
        warnings=tuple(_moved(n, to) for n in trace.warnings),
    )
