"""Where the numbers come from: speed, scan, basis."""

from collections.abc import Iterator

from ..records import Finding
from .context import Context
from .words import listed, name_of, number, panel_of

PRACTICE = "common practice, no source"


def speed_missing(context: Context) -> Iterator[Finding]:
    """provenance-speed-missing: no speed is known, so the curves cannot be carried to another one."""
    without = [c for c in context.digitised.curves if c.error is None and not context.speed_of(c)]
    if not without:
        return
    every = len(without) == sum(c.error is None for c in context.digitised.curves)
    names = "any curve" if every else listed([name_of(c) for c in without[:4]])
    action = "Look for it on the paper and state it; without it neither the head coefficient nor another speed can be worked out."
    yield Finding(
        rule="provenance-speed-missing",
        severity="warning",
        subject="pump",
        message=f"No speed is stated for {names}. {action}",
        measured=float(len(without)),
        limit=0.0,
        unit="curves",
        source=PRACTICE,
        action=action,
        where={"panel": panel_of(without), "curves": [c.id for c in without]},
    )


def speed_differs(context: Context) -> Iterator[Finding]:
    """provenance-speed-differs: every curve is at one speed and the pump is rated at another."""
    rated = context.pump.speed_rpm if context.pump else None
    speeds = {c.speed_rpm for c in context.digitised.curves if c.speed_rpm}
    if not rated or not speeds or any(abs(n / rated - 1) * 100 <= context.limits["speed_match_pct"] for n in speeds):
        return
    printed = listed([number(n, 4) for n in sorted(speeds)])
    action = "Look which speed the paper states, and correct the other."
    yield Finding(
        rule="provenance-speed-differs",
        severity="note",
        subject="pump",
        message=f"The pump is rated at {number(rated, 4)} 1/min and its curves are for {printed} 1/min. {action}",
        measured=float(min(speeds, key=lambda n: abs(n - rated))),
        limit=float(rated),
        unit="1/min",
        source=PRACTICE,
        action=action,
        where={"panel": None, "curves": [c.id for c in context.digitised.curves if c.speed_rpm]},
    )


def mixed_axis(context: Context) -> Iterator[Finding]:
    """provenance-mixed-axis: a line keeps the values of another quantity's axis, so its numbers have no unit of their own."""
    for c in context.digitised.curves:
        notice = next((n for n in c.warnings if n.code == "mixed-axis"), None)
        if notice is None or c.error is not None:
            continue
        action = "Look for a factor printed at the axis or on the line, and give the line its factor."
        yield Finding(
            rule="provenance-mixed-axis",
            severity="warning",
            subject=f"curve:{c.id}",
            message=notice.message,
            source="recipe",
            action=action,
            where={"panel": c.panel, "curves": [c.id], "axis": c.y_axis},
        )
