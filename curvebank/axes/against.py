"""Marks against the printed grid: values the lines refute, readings that lines and marks leave open, marks under a mask."""

from dataclasses import replace
from typing import Any

import numpy as np

from .. import units
from ..records import Notice
from . import suspects as doubts
from . import values
from .grid import Doubt, Placed
from .layout import Layout
from .marks import AxisMarks


def overruled(
    verdict: doubts.Verdict, placed: Placed | str, layout: Layout, axes: dict[str, AxisMarks], aspect: float
) -> doubts.Verdict | None:
    """The verdict the lines give in place of the marks' own; None where they agree or the lines say nothing.

    On an axis that the lines read clearly, exactly the marks the lines refute are wrong; elsewhere the marks' own verdict stands.
    """
    if isinstance(placed, str) or not placed.agreed:
        return None
    seen = {(w.axis, w.mark, w.fits) for w in placed.wrong}
    kept = [s for s in verdict.suspects if s.axis not in placed.agreed]
    own = {(s.axis, s.mark, s.fits) for s in verdict.suspects if s.axis in placed.agreed and s.swapped_with is None and s.sure}
    doubtful = any(s.axis in placed.agreed and not s.sure for s in verdict.suspects)
    swapped = _swaps(verdict, placed)
    if seen == own and not doubtful and not swapped:
        return None
    if swapped is not None and len(seen) == 2 * len(swapped):
        return None
    suspects = tuple(kept) + tuple(doubts.Suspect(w.axis, w.mark, w.typed, w.fits, True) for w in placed.wrong)
    changes = tuple((w.axis, w.mark, w.fits) for w in placed.wrong)
    changes += tuple(c for c in verdict.reading.changes if c[0] not in placed.agreed)
    changed = layout
    for name, mark, value in changes:
        changed = changed.with_value(name, mark, float(np.log10(value)) if axes[name].log else value)
    reading = doubts.read(changed, axes, changes, False, aspect)
    if len(placed.theta) == 8 or reading.solution.chi2 > 30 + 3 * max(reading.solution.dof, 0):
        reading = max(reading, doubts.read(changed, axes, changes, True, aspect), key=lambda r: r.score)
    return replace(verdict, reading=reading, suspects=suspects, photo_doubtful=False)


def _swaps(verdict: doubts.Verdict, placed: Placed) -> list[doubts.Suspect] | None:
    """Swapped marks that the lines find at each other's place as well."""
    out = []
    for s in verdict.suspects:
        if s.swapped_with is not None and s.axis in placed.agreed:
            mine = {w.mark for w in placed.wrong if w.axis == s.axis}
            if mine != {s.mark, s.swapped_with}:
                return None
            out.append(s)
    return out or None


def doubted(placed: Placed | str, axes: dict[str, AxisMarks]) -> list[Notice]:
    """One notice for each axis whose lines can be read in two ways."""
    if isinstance(placed, str):
        return []
    return [_doubt(d, axes[d.axis]) for d in placed.doubts]


def _doubt(d: Doubt, marks: AxisMarks) -> Notice:
    unit = "" if marks.unit == "1" else f" {units.shown(marks.unit)}"
    ways = []
    for reading in (d.best, d.rival):
        far = _fits(reading, d.far_c, d.per_px, marks)
        wrong = [
            f"the mark typed {marks.typed[i]:g} is on the line of {_fits(reading, d.marks_c[i], d.per_px, marks)}" for i in reading.wrong
        ]
        ways.append(f"{far}{unit} there ({' and '.join(wrong) or 'all marks are right'})")
    text = (
        f"The {d.axis} lines can be read in two ways. The line at ({d.at[0]:.0f}, {d.at[1]:.0f}) then is {ways[0]}, or {ways[1]}. "
        f"The marks alone place this axis until a mark on that line says which. Nothing is guessed."
    )
    return Notice(code="grid-one-off", message=text)


def _fits(reading: values.Reading, c: float, per_px: float, marks: AxisMarks) -> str:
    return f"{values.fitting(float(reading.level(c)), reading.step, per_px, marks.log):.6g}"


def hidden(axes: dict[str, AxisMarks], prepared: Any) -> list[Notice]:
    """Marks that lie under a mask: what they were clicked on is no longer to be seen."""
    masked = getattr(prepared, "masked", None)
    if masked is None:
        return []
    out = []
    for name, a in axes.items():
        at = np.rint(a.at).astype(int)
        inside = (at >= 0).all(axis=1) & (at[:, 0] < masked.shape[1]) & (at[:, 1] < masked.shape[0])
        under = [i for i in np.flatnonzero(inside) if masked[at[i, 1], at[i, 0]]]
        if under:
            which = " and ".join(f"{a.typed[i]:g}" for i in under)
            one = len(under) == 1
            text = (
                f"A mask lies over the {name} {'mark' if one else 'marks'} typed {which}. What is printed there is not used, so the "
                "click alone counts. Take the mask off the mark, or put the mark elsewhere on its line."
            )
            out.append(Notice(code="mark-masked", message=text))
    return out
