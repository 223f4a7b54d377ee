"""Lines traced together: where two traces run on the same ink, the doubtful one is traced again with the other's ink hidden.

Hidden means not known, as under a mask: a path goes straight on through it at a crossing, and keeps to its own ink where it has some.
Whether the new trace is the better one, the evidence tells that judges every trace, together with what is still shared. Lines that truly
run into one stroke find no better way and stay as they were.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import partial

import cv2
import numpy as np

from ..errors import TraceError
from ..records import FloatArray, Trace
from ..sheet import Prepared
from .confidence import BIAS, doubts
from .evidence import NAMES
from .judge import Doubt, overlap

LONG_PX = 40.0
"""Two traces within a line width of each other for longer than this (times the unit) share more than a crossing."""
AROUND_PX = 60.0
"""The other's ink is hidden so far (times the unit) beyond what is shared."""
HALO_PX = 0.8
"""Hidden on each side of the other line's width (times the unit)."""
SURE = -4.0
"""Log-odds of failure below which a trace is not looked at again."""
GAIN = 0.3
"""Log-odds by which a new trace must be the better one, shared ink counted."""
SHARED = 5.0
"""Log-odds for a trace that lies wholly on another: between two ways, the one with ink of its own is the likelier."""
MOST_PARTNERS = 2
FRACTION_BITS = 4

Found = tuple[Trace, Doubt]
Again = Callable[[int, Prepared], Found | None]


@dataclass(frozen=True, slots=True, eq=False)
class Partner:
    """Another trace that one runs along: its runs of rows there, and how many rows of the one these are [px]."""

    trace: Trace
    runs: list[tuple[int, int]]
    length: int


def tell_apart(
    prepared: Prepared, found: Sequence[Found | None], free: Sequence[bool], fixed: Sequence[Trace], again: Again
) -> list[Found | None]:
    """The traces, those replaced that are better told apart from the others.

    ``free`` are those that may change, ``fixed`` further traces of the panel, and ``again(i, page)`` traces curve i along the lines of
    ``page``, a copy of the sheet with ink hidden, and judges it on the sheet itself.
    """
    out = list(found)
    unit = max(prepared.unit, 0.6)
    for i in sorted(range(len(out)), key=lambda k: -_odds(out[k])):
        one = out[i]
        if one is None or not free[i] or _odds(one) < SURE:
            continue
        others = [f[0] for j, f in enumerate(out) if j != i and f is not None and f[0].source == "ink"] + list(fixed)
        partners = _partners(one[0], others, unit)[:MOST_PARTNERS]
        sets = [[p] for p in partners] + ([partners] if len(partners) > 1 else [])
        out[i] = _best(one, sets, partial(_anew, prepared, again, i, unit), others, unit)
    return out


def _anew(prepared: Prepared, again: Again, i: int, unit: float, hidden: list[Partner]) -> Found | None:
    return again(i, _without(prepared, hidden, unit))


def _best(one: Found, sets: list[list[Partner]], again: Callable[[list[Partner]], Found | None], others: list[Trace], unit: float) -> Found:
    """The best of a trace and those found with each set of its partners hidden."""
    best, least = one, _odds(one) + _shared(one[0], others, unit) - GAIN
    for hidden in sets:
        try:
            new = again(hidden)
        except (TraceError, ValueError, ArithmeticError, IndexError):
            continue  # without the other's ink there is no line: the trace stays as it is
        if new is not None and (odds := _odds(new) + _shared(new[0], others, unit)) < least:
            best, least = new, odds
    return best


def _odds(found: Found | None) -> float:
    """Log-odds that a trace fails, by the evidence against it alone; that another line lies near is no choice between two ways."""
    if found is None:
        return -np.inf
    vector = found[1].evidence.vector()
    vector[NAMES.index("merged")] = 0.0
    return BIAS + float(doubts(vector).sum())


def _within(a: Trace, b: Trace, unit: float) -> float:
    return max(0.4 * ((a.line_width_px or 3.0) + (b.line_width_px or 3.0)), 2.5 * unit)


def _long(runs: list[tuple[int, int]], unit: float) -> list[tuple[int, int]]:
    return [r for r in runs if r[1] - r[0] > LONG_PX * unit]


def _partners(one: Trace, others: list[Trace], unit: float) -> list[Partner]:
    """The traces that one shares more than crossings with, the longest first."""
    out = []
    for other in others:
        mine = _long(overlap(one.pixels, other.pixels, _within(one, other, unit)), unit)
        theirs = _long(overlap(other.pixels, one.pixels, _within(one, other, unit)), unit)
        if mine and theirs:
            out.append(Partner(other, theirs, sum(b - a + 1 for a, b in mine)))
    return sorted(out, key=lambda p: -p.length)


def _shared(one: Trace, others: list[Trace], unit: float) -> float:
    """Log-odds for what a trace shares with the others."""
    share = [p.length / min(len(one.pixels), len(p.trace.pixels)) for p in _partners(one, others, unit)]
    return SHARED * sum(share)


def _without(prepared: Prepared, partners: list[Partner], unit: float) -> Prepared:
    """The sheet with the ink of other traces hidden where they are shared and a little beyond."""
    area = np.zeros(prepared.shape, np.uint8)
    margin = int(AROUND_PX * unit)
    for partner in partners:
        width = (partner.trace.line_width_px or 3.0) + 2 * HALO_PX * unit
        for first, last in partner.runs:
            part: FloatArray = partner.trace.pixels[max(first - margin, 0) : last + margin + 1]
            points = np.rint(part * 2**FRACTION_BITS).astype(np.int32)
            cv2.polylines(area, [points], False, 1, max(int(round(width)), 1), cv2.LINE_8, FRACTION_BITS)
    hidden = area.view(bool)
    clean = np.where(hidden, np.uint8(0), prepared.clean)
    return replace(prepared, clean=clean, masked=hidden if prepared.masked is None else hidden | prepared.masked)
