"""What the user clicked, and the refusals that need no tracing: too few, coincident, off the panel, off the ink."""

from dataclasses import dataclass
from typing import Any, Literal, Protocol

import numpy as np
import numpy.typing as npt

from ..errors import TraceError
from ..records import FloatArray
from ..sheet import Prepared

Kind = Literal["line", "hand", "points"]
NUMBERS = ("first", "second", "third", "fourth", "fifth", "sixth", "seventh", "eighth", "ninth", "tenth")


class PanelMap(Protocol):
    """The part of a calibrated panel that tracing uses."""

    outline: Any

    def inside(self, xy: Any) -> npt.NDArray[np.bool_]:
        """Which of the pixels [n, 2] lie on the panel."""
        ...


@dataclass(frozen=True, kw_only=True, slots=True)
class Clicks:
    """One wanted curve: ``points`` are clicks [px] in order along the line.

    ``ends``: "ink" stops where the ink stops, "click" at the first and last click. ``kind``: "line", "hand" (the clicks are the
    curve) or "points" (clicks on test-point symbols).
    """

    id: str
    points: Any
    closed: bool = False
    ends: Literal["ink", "click"] = "ink"
    kind: Kind = "line"


def ordinal(index: int) -> str:
    """0 -> "first"; far ones as "click 12"."""
    return NUMBERS[index] if index < len(NUMBERS) else f"{index + 1}th"


def checked(clicks: Clicks, prepared: Prepared, panel: PanelMap) -> FloatArray:
    """The clicks as float64 [n, 2], with a repeated first click of a loop dropped. Raises TraceError that says which click is wrong."""
    points = np.array(clicks.points, dtype=np.float64).reshape(-1, 2)
    if clicks.closed and len(points) > 2 and np.hypot(*(points[0] - points[-1])) < 6 * prepared.unit:
        points = points[:-1]
    need = 3 if clicks.closed else 6 if clicks.kind == "hand" else 2
    if clicks.kind == "points":
        need = 1
    if len(points) < need:
        what = "A closed line" if clicks.closed else "A line drawn by hand" if clicks.kind == "hand" else "A line"
        raise TraceError(
            f"{what} needs at least {need} clicks along it, there {'is one' if len(points) == 1 else f'are {len(points)}'}; add clicks",
            code="too-few-clicks",
        )
    if not np.isfinite(points).all():
        raise TraceError("A click is not a finite pair of numbers; set it again", code="bad-click")
    gaps = np.hypot(*np.diff(points, axis=0).T)
    for i in np.flatnonzero(gaps < 2.0):
        raise TraceError(
            f"The {ordinal(int(i))} and {ordinal(int(i) + 1)} click are at one place; move one of them along the line",
            code="coincident-clicks",
        )
    height, width = prepared.shape
    on_page = (points >= -0.5).all(axis=1) & (points[:, 0] <= width - 0.5) & (points[:, 1] <= height - 0.5)
    # A click on the frame itself belongs to the panel: it is looked at a little towards the middle as well.
    middle = np.asarray(panel.outline, dtype=np.float64).mean(axis=0)
    toward = middle - points
    nudged = points + toward / np.maximum(np.hypot(*toward.T), 1e-9)[:, None] * 8.0 * max(prepared.unit, 0.75)
    inside = (np.asarray(panel.inside(points), dtype=bool) | np.asarray(panel.inside(nudged), dtype=bool)) & on_page
    for i in np.flatnonzero(~inside):
        x, y = points[i]
        raise TraceError(
            f"The {ordinal(int(i))} click ({x:.0f}, {y:.0f}) is off the panel; move it onto the curve or widen the panel's outline",
            code="off-panel",
        )
    if clicks.kind == "line":
        for k, (x, y) in enumerate(points):
            if not _has_ink(prepared, x, y):
                raise TraceError(f"The {ordinal(k)} click ({x:.0f}, {y:.0f}) is on blank paper; move it onto the line", code="off-ink")
    return points


def _has_ink(prepared: Prepared, x: float, y: float) -> bool:
    """A stroke within a few line widths: wide enough for a click in the gap of a dashed line."""
    reach = 16.0 * max(prepared.unit, 0.75)
    height, width = prepared.shape
    x0, x1 = max(int(x - reach), 0), min(int(x + reach) + 1, width)
    y0, y1 = max(int(y - reach), 0), min(int(y + reach) + 1, height)
    clean = prepared.clean[y0:y1, x0:x1]
    under = prepared.printed[y0:y1, x0:x1]
    dark = (clean > 64) | (under > 64)
    return int(dark.sum()) >= max(3, int(2 * prepared.unit**2))
