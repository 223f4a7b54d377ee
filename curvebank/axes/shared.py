"""Panels of one sheet that share a flow axis: stacked charts over one flow scale keep one flow map.

Where the flow marks of one panel fall on the flow lines of another, carried on to them, both have one flow scale. A panel whose own lines
place its flow keeps that; a panel that has only marks takes the flow lines of the one that has lines, and panels that all have marks only
put their marks together.
"""

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from ..errors import CurvebankError
from ..records import FloatArray
from .calibrate import calibrate
from .marks import get, read_axes
from .panelmap import PanelMap

ALIGNED_PX = 6.0
ALIGNED_SHARE = 0.006
"""Flow marks of two panels fall on each other's lines within this many pixels, or this share of the way between the panels."""
ON_THE_LINE_PX = 4.0


def calibrate_all(panels: Sequence[Any], prepared: Any = None, *, path: str = "$.panels") -> dict[str, PanelMap | CurvebankError]:
    """The map of every panel of a sheet, or the error that keeps it from one; panels over one flow scale are tied together.

    Parameters
    ----------
    panels : sequence
        As in `calibrate`.
    path : str
        JSON path of the panels; that of an error names the panel by its number.
    """
    out: dict[str, PanelMap | CurvebankError] = {}
    for i, panel in enumerate(panels):
        try:
            out[str(get(panel, "id", "panel"))] = calibrate(panel, prepared, path=f"{path}[{i}]")
        except CurvebankError as error:
            out[str(get(panel, "id", "panel"))] = error
    made = [(i, p, m) for i, p in enumerate(panels) if isinstance(m := out[str(get(p, "id", "panel"))], PanelMap)]
    for i, panel, mine in made:
        if 0 in mine.warps:
            continue
        partners = [(p, m) for k, p, m in made if k != i and _aligned(mine, m)]
        placed = [(p, m) for p, m in partners if 0 in m.warps]
        if not partners:
            continue
        try:
            tied = _on_lines(panel, mine, placed[0][1]) if placed else _with_marks(panel, mine, [p for p, _ in partners])
            if tied is None:
                continue
            again = calibrate(tied, prepared, path=f"{path}[{i}]")
        except CurvebankError:
            continue
        names = ", ".join(m.id for _, m in (placed[:1] or partners))
        what = "its flow lines place both" if placed else "the marks of all of them place it"
        again.grid = replace(again.grid, why=f"{again.grid.why} The flow axis is shared with {names}: {what}.")
        kept = {name: len(a.typed) for name, a in ((n, s.marks) for n, s in mine.scales.items())}
        again.mark_residuals = {name: r[: kept[name]] for name, r in again.mark_residuals.items()}
        out[mine.id] = again
    return out


def _flow(m: PanelMap) -> str | None:
    """The one flow axis of a panel; None where it has several."""
    names = [n for n, s in m.scales.items() if s.direction == 0]
    return names[0] if len(names) == 1 else None


def _value(m: PanelMap) -> str:
    return next(n for n, s in m.scales.items() if s.direction == 1)


def _misses(of: PanelMap, at: FloatArray, canonical: FloatArray) -> FloatArray:
    """How far [px] places lie from the lines of their flow on a panel's map, carried on beyond the panel."""
    name = _flow(of)
    assert name is not None
    pair = (name, _value(of))
    got = of.from_pixels(at, pair)[:, 0]
    slope = np.hypot(*of.pixel_size(at, pair)[:, 0].T)
    return np.abs(got - canonical) / slope


def _aligned(a: PanelMap, b: PanelMap) -> bool:
    """Whether the flow marks of each fall on the flow lines of the other."""
    if _flow(a) is None or _flow(b) is None:
        return False
    for one, other in ((a, b), (b, a)):
        scale = one.scales[str(_flow(one))]
        if scale.marks.log != other.scales[str(_flow(other))].marks.log:
            return False
        at = scale.marks.at
        away = np.abs(at.mean(0) - other.outline.mean(0)).max()
        off = _misses(other, at, scale.marks.factor * scale.marks.typed)
        if not np.all(np.isfinite(off)) or off.max() > max(ALIGNED_PX, ALIGNED_SHARE * away):
            return False
    return True


def _panel_with(panel: Any, name: str, marks: list[dict[str, Any]]) -> dict[str, Any]:
    """A panel as a mapping with other marks on one axis."""
    axes = {}
    for key, axis in (get(panel, "axes") or {}).items():
        parts = ("quantity", "unit", "scale", "marks", "multiplier", "density_kgm3")
        axes[key] = {part: get(axis, part, None) for part in parts}
    axes[name]["marks"] = marks
    return {"id": get(panel, "id", "panel"), "axes": axes, "grid": get(panel, "grid", None), "outline": get(panel, "outline", None)}


def _on_lines(panel: Any, mine: PanelMap, other: PanelMap) -> dict[str, Any] | None:
    """The panel with its flow marks moved onto the other panel's flow lines."""
    name = str(_flow(mine))
    marks = mine.scales[name].marks
    pair = (str(_flow(other)), _value(other))
    values = other.from_pixels(marks.at, pair)
    values[:, 0] = marks.factor * marks.typed
    at = other.to_pixels(values, pair)
    if np.hypot(*(at - marks.at).T).max() > max(ON_THE_LINE_PX, ALIGNED_PX):
        return None
    return _panel_with(panel, name, [{"at": p.tolist(), "value": float(v)} for p, v in zip(at, marks.typed, strict=True)])


def _with_marks(panel: Any, mine: PanelMap, others: list[Any]) -> dict[str, Any] | None:
    """The panel with the flow marks of the others beside its own."""
    name = str(_flow(mine))
    marks = mine.scales[name].marks
    out = [{"at": p.tolist(), "value": float(v)} for p, v in zip(marks.at, marks.typed, strict=True)]
    have = [tuple(np.round(m["at"], 1)) for m in out]
    for other in others:
        theirs = _flow_marks(other)
        if theirs is None:
            continue
        at, canonical = theirs
        for p, v in zip(at, canonical / marks.factor, strict=True):
            if tuple(np.round(p, 1)) not in have:
                out.append({"at": p.tolist(), "value": float(f"{v:.12g}")})
                have.append(tuple(np.round(p, 1)))
    return _panel_with(panel, name, out) if len(out) > len(marks.typed) else None


def _flow_marks(panel: Any) -> tuple[FloatArray, FloatArray] | None:
    """Places and canonical values of a panel's flow marks."""
    flow = [a for a in read_axes(panel, "$").values() if a.direction == 0]
    return (flow[0].at, flow[0].factor * flow[0].typed) if flow else None
