"""Traces, fits and calibration: how far the reading itself can be trusted."""

from collections.abc import Iterator

import numpy as np

from ..records import Curve, Finding, PanelResult
from .context import Context
from .words import flows, name_of, number, sentence

MISTYPED = {"mistyped", "mistyped-mark", "swapped"}
"""Notices of the axes that say a typed value cannot stand."""
HARMLESS = {"direction"}
EXPLAINED = MISTYPED | {"scatter", "perspective"}
"""Notices that already speak of the residuals."""


def trace_failed(context: Context) -> Iterator[Finding]:
    """trace-failed: a curve of the recipe has no trace."""
    for c in context.digitised.curves:
        if c.error is None:
            continue
        yield Finding(
            rule="trace-failed",
            severity="error",
            subject=f"curve:{c.id}",
            message=f"{sentence(name_of(c))} was not read. {c.error.get('message', '')}".strip(),
            source="digitisation",
            action="Correct its clicks, or leave the curve out of the recipe.",
            where={"panel": c.panel, "curves": [c.id]},
        )


def _stretch(c: Curve, i0: int, i1: int) -> str:
    """Where a stretch of trace lies, in flow; contours answer in flow too."""
    q = c.points[max(0, i0) : i1 + 1, 0]
    return f" {flows(float(q.min()), float(q.max()))}" if q.size else ""


def _box(c: Curve, i0: int, i1: int) -> list[float] | None:
    if c.trace is None:
        return None
    p = c.trace.pixels[max(0, i0) : i1 + 1]
    return [float(x) for x in (p[:, 0].min(), p[:, 1].min(), p[:, 0].max(), p[:, 1].max())] if len(p) else None


def trace_flagged(context: Context) -> Iterator[Finding]:
    """trace-flagged: the trace doubts itself, where and why."""
    for c in context.digitised.curves:
        t = c.trace
        if t is None or c.error is not None or not t.flagged:
            continue
        action = "Look, then say it is right or draw a guide."
        if t.stretches:
            i0, i1, reason = t.stretches[0]
            place, box = _stretch(c, i0, i1), _box(c, i0, i1)
            said = f"{sentence(name_of(c))} is in doubt{place}: {reason.rstrip('.')}."
        else:
            box = None
            said = f"{sentence(name_of(c))} may not follow its line throughout (chance {number(t.confidence * 100, 2)} % that it does)."
        yield Finding(
            rule="trace-flagged",
            severity="warning",
            subject=f"curve:{c.id}",
            message=f"{said} {action}",
            measured=round(float(t.confidence), 4),
            source="trace",
            action=action,
            where={"panel": c.panel, "curves": [c.id], "box": box},
        )


def fit_miss(context: Context) -> Iterator[Finding]:
    """fit-miss: the polynomial leaves the trace by more than drawing and reading explain."""
    for c in context.digitised.curves:
        f = c.fit
        if f is None or c.error is not None or not len(c.sigma):
            continue
        typical = float(np.median(c.sigma))
        if f.max_miss_pct <= context.limits["fit_miss_pct"] or f.max_miss <= context.limits["fit_miss_sigmas"] * typical:
            continue
        inside = (c.points[:, 0] >= f.lo) & (c.points[:, 0] <= f.hi)
        q = c.points[inside, 0]
        miss = np.abs(f.value(q) - c.points[inside, 1])
        place = f" at {number(float(q[np.argmax(miss)]))} m³/h" if q.size else ""
        action = "Raise the order of the fit, or look whether the trace leaves its line there."
        yield Finding(
            rule="fit-miss",
            severity="warning",
            subject=f"curve:{c.id}",
            message=f"The fit of {name_of(c)} misses its trace by {number(f.max_miss_pct, 2)} % of the largest value{place}. {action}",
            measured=round(f.max_miss_pct, 4),
            limit=context.limits["fit_miss_pct"],
            unit="%",
            source="fit against trace",
            action=action,
            where={"panel": c.panel, "curves": [c.id]},
        )


def fit_missing(context: Context) -> Iterator[Finding]:
    """fit-missing: a traced line that should have a fit has none."""
    for c in context.digitised.curves:
        if c.fit is not None or c.error is not None or c.is_contour or not len(c.points):
            continue
        action = "Look whether the line turns back in flow, or is too short."
        yield Finding(
            rule="fit-missing",
            severity="warning",
            subject=f"curve:{c.id}",
            message=f"{sentence(name_of(c))} was traced but no polynomial stands for it. {action}",
            source="fit",
            action=action,
            where={"panel": c.panel, "curves": [c.id]},
        )


def calibration_failed(context: Context) -> Iterator[Finding]:
    """calibration-failed: a panel could not be placed, so none of its curves has values."""
    for p in context.digitised.panels:
        if p.error is None:
            continue
        yield Finding(
            rule="calibration-failed",
            severity="error",
            subject=f"panel:{p.id}",
            message=f"The axes of panel {p.id} could not be placed. {p.error.get('message', '')}".strip(),
            source="calibration",
            action="Correct the marks of this panel.",
            where={"panel": p.id, "curves": []},
        )


def calibration_notices(context: Context) -> Iterator[Finding]:
    """calibration-*: what the axes said while they were placed; a mistyped mark is an error, the rest warn."""
    for p in context.digitised.panels:
        for i, n in enumerate(p.warnings):
            twice = sum(other.code == n.code for other in p.warnings[:i])
            code = n.code.removeprefix("calibration-")
            error = code in MISTYPED
            yield Finding(
                rule=f"calibration-{code}",
                severity="error" if error else "note" if code in HARMLESS else "warning",
                subject=f"panel:{p.id}" if not twice else f"panel:{p.id}/{twice + 1}",
                message=n.message,
                source="marks against each other and the printed grid",
                action="Change the value, or move the mark." if error else "Look at the marks of this panel.",
                where={"panel": p.id, "curves": []},
            )


def calibration_residual(context: Context) -> Iterator[Finding]:
    """calibration-residual: marks do not lie on straight scales."""
    for p in context.digitised.panels:
        if p.error is not None or any(n.code.removeprefix("calibration-") in EXPLAINED for n in p.warnings):
            continue
        limit, worst = context.limits["calibration_rms_px"], context.limits["calibration_worst_px"]
        scale = max(1.0, _size(p) / 1500)
        if p.residual_px <= limit * scale and p.worst_px <= worst * scale:
            continue
        action = "Look at the mark with the longest residual and move it, or check its value."
        yield Finding(
            rule="calibration-residual",
            severity="warning",
            subject=f"panel:{p.id}",
            message=f"The marks of panel {p.id} miss their scales by {number(p.residual_px, 2)} px on average and "
            f"{number(p.worst_px, 2)} px at worst. {action}",
            measured=round(p.worst_px, 3),
            limit=round(worst * scale, 3),
            unit="px",
            source="residuals of the marks",
            action=action,
            where={"panel": p.id, "curves": []},
        )


def _size(p: PanelResult) -> float:
    """Diagonal of the panel [px]."""
    return float(np.hypot(*np.ptp(p.outline, axis=0))) if len(p.outline) > 1 else 0.0
