"""What the user clicked, and the refusals that need no tracing: too few, coincident, off the panel, off the ink."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal, Protocol

import numpy as np
import numpy.typing as npt

from ..errors import TraceError
from ..records import FloatArray, Notice
from ..sheet import Prepared, under_mask
from .guides import in_order

Kind = Literal["line", "hand", "points"]
SAME_PLACE_PX = 2.0
"""Clicks nearer to each other than this say the same thing."""
NUMBERS = ("first", "second", "third", "fourth", "fifth", "sixth", "seventh", "eighth", "ninth", "tenth")


class PanelMap(Protocol):
    """The part of a calibrated panel that tracing uses."""

    outline: Any

    def inside(self, xy: Any) -> npt.NDArray[np.bool_]:
        """Which of the pixels [n, 2] lie on the panel."""
        ...


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Locked:
    """A stretch of a trace that stays as it is: ``pixels`` [n, 2] in order along it and their sigma [px], one for all or one each."""

    pixels: Any
    sigma_px: Any = None


@dataclass(frozen=True, kw_only=True, slots=True)
class Clicks:
    """One wanted curve: ``points`` are clicks [px] in order along the line.

    ``ends``: "ink" stops where the ink stops, "click" at the first and last click. ``kind``: "line", "hand" (the clicks are the
    curve) or "points" (clicks on test-point symbols). ``guides`` [k, 2] are further points that the line passes near, in any order:
    where they belong among the clicks is worked out. ``locked`` are stretches that stay as they are (`Locked`, or mappings with
    "pixels" and perhaps "sigma_px").
    """

    id: str
    points: Any
    closed: bool = False
    ends: Literal["ink", "click"] = "ink"
    kind: Kind = "line"
    guides: Any = ()
    locked: Sequence[Any] = ()


def ordinal(index: int) -> str:
    """0 -> "first"; far ones as "click 12"."""
    return NUMBERS[index] if index < len(NUMBERS) else f"{index + 1}th"


def checked(clicks: Clicks, prepared: Prepared, panel: PanelMap) -> FloatArray:
    """Clicks and guides in their order along the line, float64 [n, 2], with a repeated first click of a loop dropped.

    Raises TraceError that says which click or guide is wrong. A guide may lie on blank paper (a faded stretch), a click may not.
    """
    points = np.array(clicks.points, dtype=np.float64).reshape(-1, 2)
    guides = np.array(clicks.guides, dtype=np.float64).reshape(-1, 2)
    if clicks.closed and len(points) > 2 and np.hypot(*(points[0] - points[-1])) < 6 * prepared.unit:
        points = points[:-1]
    if clicks.kind == "points" and len(guides):
        raise TraceError("Guides belong to a line, these clicks are single points. Take the guides away.", code="guides-of-points")
    need = 3 if clicks.closed else 6 if clicks.kind == "hand" else 2
    if clicks.kind == "points":
        need = 1
    if len(points) < need:
        what = "A closed line" if clicks.closed else "A line drawn by hand" if clicks.kind == "hand" else "A line"
        what, where = ("A set of test points", "on its symbols") if clicks.kind == "points" else (what, "along it")
        raise TraceError(
            f"{what} needs at least {need} click{'s' if need != 1 else ''} {where}, there "
            f"{'is one' if len(points) == 1 else f'are {len(points)}'}. Add clicks.",
            code="too-few-clicks",
        )
    if not np.isfinite(points).all():
        raise TraceError("A click is not a finite pair of numbers. Set it again.", code="bad-click")
    if not np.isfinite(guides).all():
        raise TraceError("A guide is not a finite pair of numbers. Set it again.", code="bad-click")
    gaps = np.hypot(*np.diff(points, axis=0).T)
    for i in np.flatnonzero(gaps < SAME_PLACE_PX):
        raise TraceError(
            f"The {ordinal(int(i))} and {ordinal(int(i) + 1)} click are at one place. Move one of them along the line.",
            code="coincident-clicks",
        )
    _on_panel(points, "click", prepared, panel)
    _on_panel(guides, "guide", prepared, panel)
    if clicks.kind == "line":
        hidden = under_mask(prepared, points)
        for k, (x, y) in enumerate(points):
            if not hidden[k] and not _has_ink(prepared, x, y):
                raise TraceError(f"The {ordinal(k)} click ({x:.0f}, {y:.0f}) is on blank paper. Move it onto the line.", code="off-ink")
    return in_order(points, guides, clicks.closed, SAME_PLACE_PX)


def _on_panel(points: FloatArray, what: str, prepared: Prepared, panel: PanelMap) -> None:
    height, width = prepared.shape
    on_page = (points >= -0.5).all(axis=1) & (points[:, 0] <= width - 0.5) & (points[:, 1] <= height - 0.5)
    # A click on the frame itself belongs to the panel: it is looked at a little towards the middle as well.
    middle = np.asarray(panel.outline, dtype=np.float64).mean(axis=0)
    toward = middle - points
    nudged = points + toward / np.maximum(np.hypot(*toward.T), 1e-9)[:, None] * 8.0 * max(prepared.unit, 0.75)
    if not len(points):
        return
    inside = (np.asarray(panel.inside(points), dtype=bool) | np.asarray(panel.inside(nudged), dtype=bool)) & on_page
    for i in np.flatnonzero(~inside):
        x, y = points[i]
        raise TraceError(
            f"The {ordinal(int(i))} {what} ({x:.0f}, {y:.0f}) is off the panel. Move it onto the curve or widen the panel's outline.",
            code="off-panel",
        )


def same_clicks(wanted: Sequence[Clicks], unit: float) -> list[tuple[Notice, ...]]:
    """For each line, a notice for every other line of the panel that was given the same clicks, in either direction."""
    sets = [np.array(c.points, dtype=np.float64).reshape(-1, 2) for c in wanted]
    out: list[tuple[Notice, ...]] = []
    for i, mine in enumerate(sets):
        found = []
        for j, theirs in enumerate(sets):
            if i == j or len(mine) != len(theirs) or not len(mine) or "points" in (wanted[i].kind, wanted[j].kind):
                continue
            near = min(float(np.abs(mine - order).max()) for order in (theirs, theirs[::-1]))
            if near < SAME_PLACE_PX * max(unit, 0.75):
                text = f"Has the same clicks as {wanted[j].id}: one line cannot be two curves. Click one of them on its own line."
                found.append(Notice(code="same-clicks", message=text))
        out.append(tuple(found))
    return out


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
