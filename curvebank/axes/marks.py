"""Reading the marks of a panel: what is typed and clicked, refused where it cannot place an axis.

Physical limits never judge marks: an efficiency scale may be printed to 160 %. What is refused here is geometry and
arithmetic only, and every error names the JSON path of the axis or mark.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from .. import units
from ..errors import CalibrationError, UnitError
from ..records import FloatArray

SAME_PLACE_PX = 2.5
"""Two marks closer than this are one place: clicks scatter by about 1.5 px."""

ALONG_FLOW, ACROSS_FLOW = 0, 1
"""Direction of an axis on the panel: flow runs along the first panel coordinate, every other quantity along the second."""


def get(source: Any, name: str, default: Any = None) -> Any:
    """A named part of a mapping or of an object with attributes."""
    if isinstance(source, Mapping):
        return source.get(name, default)
    return getattr(source, name, default)


@dataclass(frozen=True, slots=True, eq=False)
class AxisMarks:
    """One axis as typed: ``at`` [k, 2] px, ``typed`` [k] printed values, ``level`` [k] those on the scale's own ruler, log10 or linear."""

    id: str
    path: str
    quantity: str
    unit: str
    log: bool
    factor: float
    at: FloatArray
    typed: FloatArray

    @property
    def direction(self) -> int:
        return ALONG_FLOW if self.quantity == "flow" else ACROSS_FLOW

    @property
    def level(self) -> FloatArray:
        return np.log10(self.typed) if self.log else self.typed

    def printed(self, level: Any) -> FloatArray:
        """From the scale's ruler back to printed numbers."""
        return np.power(10.0, level) if self.log else np.asarray(level, dtype=np.float64)

    def without(self, index: int) -> "AxisMarks":
        keep = np.arange(len(self.typed)) != index
        return AxisMarks(self.id, self.path, self.quantity, self.unit, self.log, self.factor, self.at[keep], self.typed[keep])

    def retyped(self, typed: FloatArray) -> "AxisMarks":
        return AxisMarks(self.id, self.path, self.quantity, self.unit, self.log, self.factor, self.at, typed)


def read_axes(panel: Any, path: str) -> dict[str, AxisMarks]:
    """All axes of a panel, checked one by one.

    Raises
    ------
    CalibrationError
        ``code`` is one of ``no-axis``, ``unknown-unit``, ``scale``, ``too-few-marks``, ``not-a-number``, ``same-place``,
        ``equal-values``, ``log-value``; ``path`` names the axis or the mark.
    """
    axes = get(panel, "axes") or {}
    out = {name: _read_axis(str(name), axis, f"{path}.axes.{name}") for name, axis in axes.items()}
    for direction, what in ((ALONG_FLOW, "a flow axis"), (ACROSS_FLOW, "a value axis (head, power, efficiency, NPSHr)")):
        if not any(a.direction == direction for a in out.values()):
            raise CalibrationError(
                f"The panel has no marks on {what}. Mark one with two or more values.", path=f"{path}.axes", code="no-axis"
            )
    return out


def _read_axis(name: str, axis: Any, path: str) -> AxisMarks:
    quantity, unit = str(get(axis, "quantity")), str(get(axis, "unit"))
    try:
        factor = units.factor(quantity, unit, density_kgm3=get(axis, "density_kgm3"))
    except UnitError as error:
        raise CalibrationError(error.message, path=f"{path}.unit", code="unknown-unit") from error
    factor *= float(get(axis, "multiplier", None) or 1.0)
    scale = get(axis, "scale", None) or "linear"
    if scale not in ("linear", "log10"):
        raise CalibrationError(
            f"The scale of the {name} axis is {scale!r}. It must be linear or log10.", path=f"{path}.scale", code="scale"
        )
    at, typed = [], []
    for i, mark in enumerate(get(axis, "marks") or []):
        place, value = get(mark, "at", None), get(mark, "value", None)
        if place is None:
            place, value = mark
        numbers = np.array([place[0], place[1], value], dtype=np.float64)
        if not np.all(np.isfinite(numbers)):
            raise CalibrationError(
                f"Mark {i + 1} of the {name} axis is not a finite number.", path=f"{path}.marks[{i}]", code="not-a-number"
            )
        if scale == "log10" and numbers[2] <= 0:
            raise CalibrationError(
                f"Mark {i + 1} of the {name} axis says {numbers[2]:g}, but a log10 scale has only values above 0. "
                "Correct the value, or set the scale to linear.",
                path=f"{path}.marks[{i}].value",
                code="log-value",
            )
        at.append(numbers[:2])
        typed.append(numbers[2])
    if len(at) < 2:
        have = "one mark" if at else "no marks"
        raise CalibrationError(f"The {name} axis has {have}. Give it at least two, far apart.", path=f"{path}.marks", code="too-few-marks")
    marks = AxisMarks(name, path, quantity, unit, scale == "log10", factor, np.array(at), np.array(typed))
    _check_places(marks)
    return marks


def _check_places(marks: AxisMarks) -> None:
    path, name, n = marks.path, marks.id, len(marks.typed)
    gap = np.hypot(*(marks.at[:, None] - marks.at[None]).transpose(2, 0, 1))
    close = np.argwhere(np.triu(gap < SAME_PLACE_PX, 1))
    for i, j in close:
        if marks.typed[i] != marks.typed[j] or n - len(close) < 2:
            raise CalibrationError(
                f"Marks {i + 1} and {j + 1} of the {name} axis are at one place ({marks.at[j, 0]:.0f}, {marks.at[j, 1]:.0f}). "
                "Move one to another tick.",
                path=f"{path}.marks[{j}].at",
                code="same-place",
            )
    if np.ptp(marks.typed) == 0:
        raise CalibrationError(
            f"All marks of the {name} axis say {marks.typed[0]:g}. Two different values are needed.",
            path=f"{path}.marks[1].value",
            code="equal-values",
        )
