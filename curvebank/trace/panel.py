"""The door of tracing: all wanted curves of a panel, one result each, in order."""

from collections.abc import Callable, Sequence
from typing import Any

from ..errors import TraceError
from ..records import Trace, frozen
from ..sheet import Prepared
from .clicks import Clicks, PanelMap, checked
from .ends import to_ink
from .follow import follow
from .profile import refine

Progress = Callable[[float, str], Any]


def trace_panel(
    prepared: Prepared, panel_map: PanelMap, wanted: Sequence[Clicks], *, fixed: Sequence[Trace] = (), progress: Progress | None = None
) -> list[Trace | TraceError]:
    """Trace every wanted curve of a panel; a curve that cannot be followed gives its TraceError in its place."""
    out: list[Trace | TraceError] = []
    for i, clicks in enumerate(wanted):
        if progress is not None:
            progress(i / len(wanted), f"Tracing {clicks.id}")
        try:
            out.append(_one(prepared, panel_map, clicks))
        except TraceError as fault:
            out.append(fault)
    return out


def _one(prepared: Prepared, panel_map: PanelMap, clicks: Clicks) -> Trace:
    points = checked(clicks, prepared, panel_map)
    found = follow(prepared, points, clicks.closed)
    fine = refine(prepared, found.axis, rounds=1)
    if not clicks.closed and clicks.ends == "ink":
        axis = to_ink(prepared, panel_map, fine.axis, fine.shape)
    else:
        axis = fine.axis
    fine = refine(prepared, axis, rounds=1, shape=fine.shape)
    return Trace(pixels=frozen(fine.axis.points), sigma_px=frozen(fine.sigma), closed=clicks.closed, line_width_px=fine.shape.width)
