"""A trace brought up to date after a click or guide was moved, put in or taken away: only what the change touches is traced anew.

What changes lies between the neighbours of the changed points; if the line already passes the new place of a point, only a short way on
either side of it. That part is traced against the rest, which stays to the bit: pixels, sigma and ends.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..errors import TraceError
from ..records import FloatArray, Trace
from ..sheet import Prepared
from .clicks import Clicks, PanelMap, checked
from .judge import as_trace, doubt_of, pair_test, settle
from .locked import spans_of
from .meet import end_on_others
from .panel import trace_panel
from .spans import Span, begun_at, between, whole

PASSED_PX = 8.0
"""A trace passes a click that lies nearer to it than this (times the unit): a hand's error, not another line."""
TOUCHED_PX = 120.0
"""Way on either side of a moved point (times the unit) that is read anew where the line passes it anyway."""
WEAK = 0.05
"""Mean cost of a part's path from which the whole line is searched for instead."""


def again(
    prepared: Prepared, panel_map: PanelMap, clicks: Clicks, before: Clicks, trace: Trace, *, fixed: Sequence[Trace] = ()
) -> Trace | TraceError:
    """The trace of ``clicks``, given the ``trace`` of the clicks ``before``.

    ``fixed`` are the other traces of the panel, which are looked at for shared ink. The whole line is traced where nothing can stay:
    another kind, ends or locked stretches, a line opened or closed, nothing left of the old clicks.
    """
    done = None
    if not _other_question(clicks, before, trace):
        try:
            new, old = checked(clicks, prepared, panel_map), checked(before, prepared, panel_map)
            done = _renewed(prepared, panel_map, clicks, new, old, trace, list(fixed))
        except (TraceError, ValueError, ArithmeticError, IndexError):
            done = None  # wrong clicks are named, and numbers that no check foresaw are met, by the trace of the whole line
    return trace_panel(prepared, panel_map, [clicks], fixed=fixed)[0] if done is None else done


def _other_question(clicks: Clicks, before: Clicks, trace: Trace) -> bool:
    same = (clicks.kind, clicks.ends, clicks.closed, clicks.id) == (before.kind, before.ends, before.closed, before.id)
    if not same or clicks.kind != "line" or trace.source != "ink" or trace.closed != clicks.closed or len(trace.pixels) < 40:
        return True
    if len(clicks.locked) != len(before.locked):
        return True
    return any(
        not np.array_equal(np.asarray(_pixels(a), float), np.asarray(_pixels(b), float))
        for a, b in zip(clicks.locked, before.locked, strict=True)
    )


def _pixels(locked: object) -> object:
    return locked["pixels"] if isinstance(locked, dict) else locked.pixels  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True, eq=False)
class Window:
    """Where a trace changes: pixels ``ring`` [n, 2] with their sigma (a loop laid open), those up to row ``low`` and from row ``high`` on
    stay, ``came`` are the points between. ``near`` [k, 2] is the path between where it is known."""

    ring: FloatArray
    sigma: FloatArray
    low: int
    high: int
    came: FloatArray
    near: FloatArray | None

    def stays(self, closed: bool) -> tuple[Span | None, Span | None]:
        """What stays before and behind; the same span twice where a loop stays in one piece."""
        head = Span(self.ring[: self.low + 1], self.sigma[: self.low + 1]) if self.low >= 0 else None
        if self.high < len(self.ring):
            return head, Span(self.ring[self.high :], self.sigma[self.high :])
        return head, head if closed else None


def _window(new: FloatArray, old: FloatArray, trace: Trace, unit: float) -> Window | None:
    """Where the trace of the points ``old`` must change for the points ``new``; None where the whole line must be traced."""
    ahead = _common(new, old)
    behind = min(_common(new[::-1], old[::-1]), min(len(new), len(old)) - ahead)
    if ahead + behind == 0:
        return None
    came, went = new[ahead : len(new) - behind], old[ahead : len(old) - behind]
    ring, sigma = (trace.pixels[:-1], trace.sigma_px[:-1]) if trace.closed else (trace.pixels, trace.sigma_px)
    before = new[ahead - 1] if ahead or trace.closed else None
    after = new[len(new) - behind] if behind else new[0] if trace.closed else None
    if any(p is not None and np.hypot(*(ring[_row(ring, p)] - p)) > PASSED_PX * unit for p in (before, after)):
        return None  # the old trace has left the line further out than between these neighbours
    low = -1 if before is None else _row(ring, before)
    high = len(ring) if after is None else _row(ring, after)
    if trace.closed:
        # The loop is laid open at its right neighbour: what is traced anew lies at the end.
        order = (np.arange(len(ring)) + high) % len(ring)
        low, high = (low - high) % len(ring), len(ring)
        ring, sigma = ring[order], sigma[order]
    if low >= high or low == 0:
        return None  # it does not run along its clicks
    touched = [_row(ring, p) for p in np.concatenate([came, went])]
    passed = len(came) >= len(went) and all(np.hypot(*(ring - p).T).min() < PASSED_PX * unit for p in came)
    near = None
    if passed and low < min(touched) and max(touched) < high:
        # The line passes the new points as it is: only its nearest surroundings are read again.
        reach = int(TOUCHED_PX * unit)
        low, high = max(low, min(touched) - reach), min(high, max(touched) + reach)
        if low >= 0 and (high < len(ring) or trace.closed):
            near = ring[low + 1 : high]
    return Window(ring, sigma, low, high, came, near)


def _renewed(
    prepared: Prepared, panel: PanelMap, clicks: Clicks, new: FloatArray, old: FloatArray, trace: Trace, fixed: list[Trace]
) -> Trace | None:
    """The trace with its changed part traced anew, or None where the whole line must be."""
    if np.array_equal(new, old):
        return trace
    window = _window(new, old, trace, max(prepared.unit, 0.6))
    if window is None:
        return None
    part = window.ring[max(window.low, 0) + 1 : window.high]
    if clicks.locked and _reaches([s.pixels for s in spans_of(clicks.locked, prepared)], part):
        return None
    head, tail = window.stays(trace.closed)
    if (head is None and tail is None) or min(len(s.pixels) for s in (head, tail) if s is not None) < 2:
        return None
    on_ink = clicks.ends == "ink" and not clicks.closed
    found = between(prepared, panel, head, window.came, tail, on_ink, window.near)
    if found.cost > WEAK:
        return None
    span, fine, cost = whole([p for p in (head, found, None if tail is head else tail) if p is not None], trace.closed)
    if trace.closed:
        at = np.flatnonzero((span.pixels[:-1] == trace.pixels[0]).all(axis=1))
        span, fine = begun_at(span, fine, int(at[0]) if len(at) else _row(span.pixels[:-1], new[0]))
    made = as_trace(fine.axis, span.sigma, clicks.closed, trace.line_width_px)
    doubt = doubt_of(prepared, fine, new, clicks.closed, on_ink, cost)
    if on_ink and fixed and (head is None or tail is None):
        made = end_on_others(made, fixed, new)
    pair_test([clicks.id], [made], [doubt], fixed, prepared.unit)
    return settle(made, doubt)


def _common(a: FloatArray, b: FloatArray) -> int:
    """How many points two lists begin with alike."""
    n = min(len(a), len(b))
    differ = (a[:n] != b[:n]).any(axis=1)
    return int(differ.argmax()) if differ.any() else n


def _row(pixels: FloatArray, point: FloatArray) -> int:
    """The pixel nearest to a point."""
    return int(((pixels - point) ** 2).sum(axis=1).argmin())


def _reaches(stretches: Sequence[FloatArray], window: FloatArray) -> bool:
    """Whether a stretch has pixels in a part of the line."""
    return any(bool(((window[:, None] - s[None, ::3]) ** 2).sum(axis=2).min(initial=np.inf) < 1.0) for s in stretches)
