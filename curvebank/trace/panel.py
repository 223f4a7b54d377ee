"""The door of tracing: all wanted curves of a panel, one result each, in order."""

from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from ..errors import TraceError
from ..records import FloatArray, Trace
from ..sheet import Prepared
from .apart import Found, tell_apart
from .clicks import Clicks, PanelMap, checked, same_clicks
from .colour import own_ink
from .direction import one_way
from .ends import to_ink
from .follow import follow
from .hand import by_hand
from .judge import Doubt, as_trace, doubt_of, pair_test, settle
from .locked import trace_around
from .meet import end_on_others
from .profile import align, refine, runs_merged
from .spread import beside_traces, sigma_of
from .symbols import points_on_symbols

FAR_PX = 1.2
"""An axis that had to be moved by more than this is read once more from where it now lies."""
Progress = Callable[[float, str], Any]
LOST = 0.25
"""Share of readings that must show the line; with fewer there is no line to speak of between the clicks."""
STUB = 0.1
"""A trace cut back at the ends of its ink to less than this share of the way from click to click has found no line."""
NOTHING = "No line was found between the clicks. Check that they lie on one line, or add clicks along it."


def trace_panel(
    prepared: Prepared, panel_map: PanelMap, wanted: Sequence[Clicks], *, fixed: Sequence[Trace] = (), progress: Progress | None = None
) -> list[Trace | TraceError]:
    """Trace every wanted curve of a panel; a curve that cannot be followed gives its TraceError in its place.

    ``panel_map`` needs ``inside(xy)``; ``fixed`` are traces that stay as they are and are only looked at for shared ink.
    ``progress(share, text)`` may raise Cancelled, which ends the whole call.
    """
    tell = progress or (lambda share, text: None)
    traces: list[Trace | None] = []
    doubts: list[Doubt | None] = []
    faults: list[TraceError | None] = []
    as_clicked: list[Callable[[Trace], Trace]] = [lambda trace: trace] * len(wanted)
    ways: list[FloatArray] = []
    for i, clicks in enumerate(wanted):
        tell(i / len(wanted), f"Tracing {clicks.id}")
        trace, doubt, fault = None, None, None
        ways.append(np.zeros((0, 2)))
        try:
            points = checked(clicks, prepared, panel_map)
            if clicks.kind == "line":
                points, as_clicked[i] = one_way(points, clicks.closed)
            ways[i] = points
            trace, doubt = _one(prepared, panel_map, clicks, points)
        except TraceError as refused:
            fault = refused
        except (ValueError, ArithmeticError, IndexError) as broken:
            # Numbers that no check foresaw must not cost the other curves of the sheet.
            fault = TraceError(f"The line could not be followed ({broken}). Add clicks along it.", code="lost")
        traces.append(trace)
        doubts.append(doubt)
        faults.append(fault)

    def anew(i: int, page: Prepared) -> Found | None:
        tell(1.0 - 0.5 / len(wanted), f"Tracing {wanted[i].id} apart from its neighbours")
        trace, doubt = _one(prepared, panel_map, wanted[i], ways[i], page)
        return None if doubt is None else (trace, doubt)

    judged = [None if t is None or d is None else (t, d) for t, d in zip(traces, doubts, strict=True)]
    for i, better in enumerate(tell_apart(prepared, judged, [not c.locked for c in wanted], fixed, anew)):
        if better is not None:
            traces[i], doubts[i] = better
    on_ink = [c.kind == "line" and c.ends == "ink" and not c.closed for c in wanted]
    traced = list(traces)
    for i, trace in enumerate(traced):
        if trace is not None and on_ink[i]:
            others = [t for j, t in enumerate(traced) if j != i and t is not None and t.source == "ink"] + list(fixed)
            traces[i] = end_on_others(trace, others, np.asarray(wanted[i].points, dtype=np.float64).reshape(-1, 2))
    for i, trace in enumerate(traces):
        if trace is not None and trace.source == "ink":
            others = [t for j, t in enumerate(traced) if j != i and t is not None and t.source == "ink"] + list(fixed)
            traces[i] = beside_traces(trace, others)
    pair_test([c.id for c in wanted], traces, doubts, list(fixed), prepared.unit)
    for i, notices in enumerate(same_clicks(wanted, prepared.unit)):
        trace, doubt = traces[i], doubts[i]
        if notices and doubt is not None:
            doubt.notices.extend(notices)
        elif notices and trace is not None:
            traces[i] = replace(trace, warnings=trace.warnings + notices)
    tell(1.0, "Traced")
    out: list[Trace | TraceError] = []
    for trace, doubt, fault, turned in zip(traces, doubts, faults, as_clicked, strict=True):
        if trace is None:
            out.append(fault or TraceError("The line could not be followed. Add clicks along it.", code="lost"))
        else:
            out.append(turned(trace if doubt is None else settle(trace, doubt)))
    return out


def _one(
    prepared: Prepared, panel_map: PanelMap, clicks: Clicks, points: FloatArray, page: Prepared | None = None
) -> tuple[Trace, Doubt | None]:
    """One curve's trace; its path and ends are looked for on ``page`` (the sheet, or a copy with other lines hidden)."""
    page = page or prepared
    if clicks.kind == "hand":
        return by_hand(points, clicks.closed), None
    if clicks.kind == "points":
        return points_on_symbols(prepared, points), None
    if clicks.locked:
        span, fine, cost = trace_around(prepared, panel_map, clicks, points)
        trace = as_trace(fine.axis, span.sigma, clicks.closed, fine.shape.width)
        return trace, doubt_of(prepared, fine, points, clicks.closed, clicks.ends == "ink", cost)
    search, near = own_ink(page, points)
    found = follow(search, points, clicks.closed)
    axis, shape, far = align(near, found.axis, points)
    if far > FAR_PX * max(prepared.unit, 0.7):
        axis, shape, far = align(near, axis, points)
    if not clicks.closed and runs_merged(page, axis, shape):
        # The ends are looked for along a path that lies on its own line within the stroke.
        axis = refine(page, axis, shape, points).axis
    if not clicks.closed and clicks.ends == "ink":
        axis = to_ink(page, panel_map, axis, shape)
        if axis.length < STUB * np.hypot(*np.diff(points, axis=0).T).sum():
            raise TraceError(NOTHING, code="lost")
    fine = refine(prepared, axis, shape, points)
    if fine.blocks.good.mean() < LOST and found.cost > 0.5:
        raise TraceError(NOTHING, code="lost")
    doubt = doubt_of(prepared, fine, points, clicks.closed, clicks.ends == "ink", found.cost)
    sigma = sigma_of(fine, prepared.unit, doubt.evidence.seen)
    return as_trace(fine.axis, sigma, clicks.closed, fine.shape.width), doubt
