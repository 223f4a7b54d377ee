"""Several printed scales for one quantity along one direction: they must say the same, and then all their marks count together.

Flow in m3/h, l/s and gal/min under one chart, or head in m and ft at its two sides: in canonical units every such pair has the ratio 1.
Where it has not, a unit is wrong as typed or as printed, and well-known ratios say which (gallons, feet, hours, horsepower).
"""

from dataclasses import dataclass

import numpy as np

from .. import units
from ..records import FloatArray, Notice
from .layout import Layout, Slot
from .marks import AxisMarks
from .solve import Solution, Tie

AGREE_PX = 5.0
AGREE_SHARE = 0.004
"""Scales agree where their values differ by no more than this many pixels, or this share of the axis, at both ends."""
NAMED_WITHIN = 0.006
SAME_PX = 0.3
RATIOS: tuple[tuple[float, str], ...] = (
    (1.2009499, "US gallons taken for imperial ones, or the other way round"),
    (3.785411784, "litres taken for US gallons"),
    (4.54609, "litres taken for imperial gallons"),
    (4.402867539, "gal/min(US) taken for m3/h"),
    (3.666153, "gal/min(imp) taken for m3/h"),
    (3.6, "l/s taken for m3/h"),
    (16.6666667, "l/min taken for m3/h"),
    (60.0, "minutes taken for hours or seconds for minutes"),
    (24.0, "days taken for hours"),
    (3600.0, "seconds taken for hours"),
    (3.280839895, "feet taken for metres"),
    (1.341022090, "hp taken for kW"),
    (1.359621617, "metric hp taken for kW"),
    (1.013869665, "hp taken for metric hp"),
    (10.19716213, "bar taken for metres of water"),
    (1.422334331, "psi taken for metres of water"),
    (2.306658726, "psi taken for feet of water"),
    (9.80665, "kPa taken for metres of water"),
    (100.0, "per cent taken for a fraction, or a printed x100"),
    (1000.0, "litres taken for cubic metres, or a printed x1000"),
    (10.0, "a printed x10"),
)
"""Factors that stand for one wrong unit (exact definitions of the units; water at 1000 kg/m3 for pressures)."""


@dataclass(frozen=True, slots=True, eq=False)
class Together:
    """Scales that say the same: ``ties`` for the solution, ``exact`` (alpha, beta) of an axis on the first one by units alone."""

    ties: tuple[Tie, ...]
    exact: dict[str, FloatArray]
    notices: tuple[Notice, ...]


def compare(layout: Layout, solution: Solution) -> Together:
    """Hold scales of one quantity in one direction against each other in canonical units."""
    ties: list[Tie] = []
    exact: dict[str, FloatArray] = {}
    notices: list[Notice] = []
    slots = [s for s in layout.slots.values() if s.twin is None]
    for i, second in enumerate(slots):
        first = next((s for s in slots[:i] if s.marks.quantity == second.marks.quantity and s.marks.log == second.marks.log), None)
        if first is None:
            continue
        ratio, off_px, px = _difference(first, second, layout, solution)
        if off_px > max(AGREE_PX, AGREE_SHARE * 2 * px):
            notices.append(_disagree(first.marks, second.marks, ratio, 3.0 / px))
            continue
        alpha, beta = _relation(first, second)
        ties += [
            Tie(first.marks.direction, (first.marks.id, alpha + beta * z), (second.marks.id, z), SAME_PX)
            for z in (float(second.z.min()), float(second.z.max()))
        ]
        if first.own is None:
            exact[second.marks.id] = np.array([alpha, beta])
    return Together(tuple(ties), exact, tuple(notices))


def _relation(first: Slot, second: Slot) -> tuple[float, float]:
    """z of the first axis = alpha + beta z of the second, by their units."""
    if first.marks.log:
        shift = float(np.log10(second.marks.factor / first.marks.factor))
        return (second.centre + shift - first.centre) / first.half, second.half / first.half
    ratio = second.marks.factor / first.marks.factor
    return (second.centre * ratio - first.centre) / first.half, second.half * ratio / first.half


def _difference(first: Slot, second: Slot, layout: Layout, solution: Solution) -> tuple[float, float, float]:
    """(canonical values of the second over those of the first, largest distance [px] over the marks, pixels of the first's half range)."""
    p, d = solution.plane_size, first.marks.direction

    def line(slot: Slot) -> tuple[float, float]:
        alpha, beta = (0.0, 1.0) if slot.own is None else solution.x[p + slot.own : p + slot.own + 2]
        return slot.centre - slot.half * alpha / beta, slot.half / beta

    (za, sa), (zb, sb) = line(first), line(second)
    c = np.array([-1.0, 1.0])
    px = float(np.hypot(*solution.theta[2 + 2 * d : 4 + 2 * d])) * layout.size * abs(first.half / sa)
    if first.marks.log:
        va = za + sa * c + np.log10(first.marks.factor)
        vb = zb + sb * c + np.log10(second.marks.factor)
        return float(10.0 ** np.mean(vb - va)), float(np.abs(vb - va).max() / abs(first.half) * px), px
    va, vb = (za + sa * c) * first.marks.factor, (zb + sb * c) * second.marks.factor
    ratio = float((vb[1] - vb[0]) / (va[1] - va[0]))
    return ratio, float(np.abs(vb - va).max() / abs(first.half * first.marks.factor) * px), px


def _disagree(a: AxisMarks, b: AxisMarks, ratio: float, doubt: float) -> Notice:
    within = max(NAMED_WITHIN, doubt)
    named = next((what for r, what in RATIOS if ratio > 0 and min(abs(ratio / r - 1), abs(ratio * r - 1)) <= within), None)
    more, less, times = (b.id, a.id, ratio) if ratio > 1 else (a.id, b.id, 1 / ratio if ratio > 0 else ratio)
    text = f"The scales {a.id} ({units.shown(a.unit)}) and {b.id} ({units.shown(b.unit)}) do not say the same: "
    text += f"{more} reads {times:.4f} times {less}. " if ratio > 0 else "they run opposite ways. "
    text += (
        f"That is the factor of {named}. Check both units against the print."
        if named
        else "Check the units and the values of their marks; each scale stands by its own marks until then."
    )
    return Notice(code="scales-disagree", message=text)
