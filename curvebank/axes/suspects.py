"""Mistyped values: a mark whose value contradicts the others is named with the value that would fit.

Each mark of a contradicting axis is left out in turn; where the rest then agree, the value at the left-out place is read.
With four marks only one mark qualifies. With three, any one can be left out, and what decides is that printed ticks
carry round numbers; where that does not decide, all are named. Values typed the wrong way round are tried as well.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from .layout import Layout
from .marks import AxisMarks
from .solve import Solution

WORST_PX = 8.0
WORST_SHARE = 0.008
"""A mark this far off (pixels, and share of its axis) is no click noise and no ordinary paper warp."""
CLEARLY_ROUNDER = 6.0


@dataclass(frozen=True, slots=True)
class Suspect:
    """A mark that may be mistyped: ``typed`` sits where ``fits`` belongs; ``sure`` when no other mark would explain it as well."""

    axis: str
    mark: int
    typed: float
    fits: float
    sure: bool
    swapped_with: int | None = None

    def as_dict(self) -> dict[str, object]:
        return {
            "axis": self.axis,
            "mark": self.mark,
            "typed": self.typed,
            "fits": self.fits,
            "sure": self.sure,
            "swapped_with": self.swapped_with,
        }


Solver = Callable[[dict[str, AxisMarks]], tuple[Layout, Solution]]
Reader = Callable[[Layout, Solution, str, np.ndarray], float]


def axis_misfit_px(layout: Layout, solution: Solution, name: str) -> float:
    """Largest residual of an axis's marks [px]."""
    return float(np.hypot(*solution.residuals_px[layout.marks_of[name]].T).max())


def limit_px(marks: AxisMarks) -> float:
    """How far a mark may be off before its value is doubted [px]."""
    extent = float(np.hypot(*np.ptp(marks.at, axis=0)))
    return max(WORST_PX, WORST_SHARE * extent)


def find_suspects(axes: dict[str, AxisMarks], solver: Solver, reader: Reader) -> tuple[list[Suspect], dict[str, AxisMarks]]:
    """Doubtful marks of all axes, and the axes as they should be used: a sure suspect left out, a sure swap put right.

    ``solver`` fits a set of axes; ``reader`` gives the level of an axis at a pixel from such a fit.
    """
    suspects: list[Suspect] = []
    for name, marks in list(axes.items()):
        if len(marks.typed) < 3:
            continue
        layout, solution = solver(axes)
        worst = axis_misfit_px(layout, solution, name)
        # Least squares spreads one wrong value over its neighbours: a third of the miss is what the worst mark shows.
        if worst < limit_px(marks) / 3:
            continue
        found = _examine(axes, name, solver, reader)
        suspects += found
        if len({s.mark for s in found if s.swapped_with is None}) == 1 and found[0].sure:
            axes = {**axes, name: marks.without(found[0].mark)}
        elif found and found[0].sure and found[0].swapped_with is not None:
            typed = marks.typed.copy()
            i, j = found[0].mark, found[0].swapped_with
            typed[[i, j]] = typed[[j, i]]
            axes = {**axes, name: marks.retyped(typed)}
    return suspects, axes


def _examine(axes: dict[str, AxisMarks], name: str, solver: Solver, reader: Reader) -> list[Suspect]:
    marks = axes[name]
    limit = limit_px(marks)
    candidates: list[tuple[float, Suspect]] = []
    for i in range(len(marks.typed)):
        rest = marks.without(i)
        if np.ptp(rest.typed) == 0:
            continue
        layout, solution = solver({**axes, name: rest})
        level = reader(layout, solution, name, marks.at[i])
        per_px = np.ptp(rest.level) / max(float(np.hypot(*np.ptp(rest.at, axis=0))), 1.0)
        miss_px = abs(level - marks.level[i]) / per_px
        lever = 1.0 + 2.0 * _outside(marks.at[i], rest.at)
        if axis_misfit_px(layout, solution, name) > limit / 3 or miss_px < limit * lever:
            continue
        tolerance = 2.5 * per_px * lever
        low, high = float(marks.printed(level - tolerance)), float(marks.printed(level + tolerance))
        value, step = roundest(low, high, float(marks.printed(level)))
        candidates.append((step / (high - low), Suspect(name, i, float(marks.typed[i]), value, False)))
    swaps: list[Suspect] = []
    for i in range(len(marks.typed)):
        for j in range(i):
            typed = marks.typed.copy()
            typed[[i, j]] = typed[[j, i]]
            if typed[i] == typed[j]:
                continue
            layout, solution = solver({**axes, name: marks.retyped(typed)})
            if axis_misfit_px(layout, solution, name) < limit / 3:
                swaps.append(Suspect(name, j, float(marks.typed[j]), float(marks.typed[i]), True, i))
    if len(swaps) == 1:
        return swaps
    candidates.sort(key=lambda c: -c[0])
    if not candidates:
        return []
    if len(candidates) == 1 or candidates[0][0] > CLEARLY_ROUNDER * candidates[1][0]:
        best = candidates[0][1]
        return [Suspect(best.axis, best.mark, best.typed, best.fits, True)]
    floor = candidates[0][0] / CLEARLY_ROUNDER
    return [s for score, s in candidates if score >= floor]


def _outside(place: np.ndarray, rest: np.ndarray) -> float:
    """How far a place lies beyond the others, in their extents: 0 between them."""
    reach = float(np.hypot(*np.ptp(rest, axis=0))) or 1.0
    far = float(np.hypot(*(rest - place).T).max())
    return max(far / reach - 1.0, 0.0)


def roundest(low: float, high: float, value: float) -> tuple[float, float]:
    """The number in [low, high] that is a multiple of the largest 1, 2, 2.5 or 5 x 10^k, and that step.

    Examples
    --------
    >>> roundest(19.7, 20.4, 20.1)
    (20.0, 20.0)
    >>> roundest(62.2, 62.8, 62.6)
    (62.5, 2.5)
    """
    if low <= 0 <= high:
        return 0.0, max(abs(low), abs(high)) * 10
    top = int(np.ceil(np.log10(max(abs(low), abs(high))))) + 1
    for power in range(top, top - 12, -1):
        for head in (5.0, 2.5, 2.0, 1.0):
            step = head * 10.0**power
            k = round(value / step)
            for multiple in (k, k - 1, k + 1):
                if low <= multiple * step <= high and multiple != 0:
                    return float(f"{multiple * step:.12g}"), step
    return value, high - low


def describe(suspects: list[Suspect], axes: dict[str, AxisMarks]) -> list[tuple[str, str]]:
    """One sentence (code, message) for each axis that has suspects."""
    out: list[tuple[str, str]] = []
    for name in dict.fromkeys(s.axis for s in suspects):
        mine = [s for s in suspects if s.axis == name]
        first = mine[0]
        unit = "" if axes[name].unit == "1" else f" {axes[name].unit}"
        if first.swapped_with is not None:
            code, text = (
                "calibration-swapped",
                (
                    f"The {name} marks typed {first.typed:g} and {first.fits:g} have each other's place. "
                    "The map reads them the other way round until you correct them."
                ),
            )
        elif first.sure:
            code, text = (
                "calibration-mistyped",
                (
                    f"The {name} mark typed {first.typed:g} sits where {_shown(first.fits)}{unit} belongs. "
                    "Correct it; the map leaves this mark out until then."
                ),
            )
        else:
            each = " or ".join(f"{s.typed:g} (would fit as {_shown(s.fits)}{unit})" for s in mine)
            code, text = (
                "calibration-mistyped",
                (f"The {name} marks contradict each other. One of these is mistyped: {each}. Check them, or add a fourth mark."),
            )
        out.append((code, text))
    return out


def _shown(value: float) -> str:
    text = f"{value:.6g}"
    return text if "." in text or "e" in text else text + ".0"
