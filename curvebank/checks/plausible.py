"""Plausibility of single curves: what a centrifugal pump can and cannot do."""

from collections.abc import Iterator

import numpy as np

from ..records import Finding
from .context import Context, Series
from .words import flows, name_of, number, sentence

PRACTICE = "common practice, no source"


def _where(*series: Series) -> dict[str, object]:
    panels = {s.curve.panel for s in series}
    return {"panel": panels.pop() if len(panels) == 1 else None, "curves": [s.curve.id for s in series]}


def rising_head(context: Context) -> Iterator[Finding]:
    """plausible-rising-head: head rises with flow near shut-off (drooping curve); one finding for all wheels, on the steepest."""
    rising: list[tuple[float, float, float, int, Series]] = []
    for s in context.of("head"):
        top = int(np.argmax(s.value))
        rise = float(s.value[top] - s.value[0])
        doubt = float(np.hypot(s.u[top], s.u[0]))
        share = rise / float(s.value[top]) if s.value[top] > 0 else 0.0
        # shared calibration error cancels in the difference, so the doubt is on the cautious side
        if top > 0 and share > context.limits["rising_note_pct"] / 100 and rise > doubt:
            rising.append((share, rise, doubt, top, s))
    if not rising:
        return
    share, rise, doubt, top, s = max(rising, key=lambda one: one[0])
    more = len(rising) - 1
    too = "" if not more else " Another wheel does so too." if more == 1 else f" So do {more} other wheels."
    action = "Look that the left end of the line is traced right; then keep the duty to the right of the highest point."
    yield Finding(
        rule="plausible-rising-head",
        severity="warning" if share > context.limits["rising_warning_pct"] / 100 else "note",
        subject=f"curve:{s.curve.id}",
        message=f"{sentence(name_of(s.curve))} rises by {number(rise, 2)} ± {number(doubt, 1)} m {flows(s.lo, float(s.flow[top]))}: "
        f"one head may have two flows there.{too} {action}",
        measured=round(share, 5),
        limit=context.limits["rising_note_pct"] / 100,
        unit="1",
        source=PRACTICE,
        action=action,
        where=_where(s, *(other[-1] for other in rising if other[-1] is not s)),
    )


def head_saddle(context: Context) -> Iterator[Finding]:
    """plausible-head-saddle: head falls and then rises again, where a trace on another line is the likelier cause."""
    for s in context.of("head"):
        yield from _dip(context, s)


def _dip(context: Context, s: Series) -> Iterator[Finding]:
    """A rise that follows a fall: saddle of a high specific speed wheel, or a trace on another line."""
    scale = float(np.abs(s.value).max())
    if scale == 0:
        return
    lowest = np.minimum.accumulate(s.value)
    climb = s.value - lowest
    at = int(np.argmax(climb))
    foot = int(np.argmin(s.value[: at + 1]))
    doubt = float(np.hypot(s.u[at], s.u[foot]))
    share = float(climb[at]) / scale
    if foot == 0 or share <= context.limits["rising_note_pct"] / 100 or climb[at] <= 2 * doubt:
        return
    action = "Look along this stretch: the trace may have taken another line."
    yield Finding(
        rule="plausible-head-saddle",
        severity="warning",
        subject=f"curve:{s.curve.id}",
        message=f"{sentence(name_of(s.curve))} falls and then rises again by {number(float(climb[at]), 2)} ± {number(doubt, 1)} m "
        f"{flows(float(s.flow[foot]), float(s.flow[at]))}. {action}",
        measured=round(share, 5),
        limit=context.limits["rising_note_pct"] / 100,
        unit="1",
        source=PRACTICE,
        action=action,
        where=_where(s),
    )


def efficiency(context: Context) -> Iterator[Finding]:
    """plausible-efficiency: above what a pump can reach, or below zero."""
    for quantity in ("efficiency", "overall_efficiency"):
        for s in context.of(quantity):
            top = int(np.argmax(s.value))
            peak, u = float(s.value[top]), float(s.u[top])
            limit = context.limits["efficiency_high"]
            action = "Look at the unit and the marks of the efficiency axis, and whether this line is efficiency at all."
            place = f"at {number(float(s.flow[top]))} m³/h"
            said = f"{sentence(name_of(s.curve))} reaches {number(peak * 100)} % ± {number(u * 100, 1)} % {place}"
            if peak - 2 * u > limit:
                cannot = "no pump can" if peak - 2 * u > 1 else f"above {number(limit * 100)} % no pump of ordinary size is known"
                yield Finding(
                    rule="plausible-efficiency",
                    severity="error",
                    subject=f"curve:{s.curve.id}",
                    message=f"{said}: {cannot}. {action}",
                    measured=round(peak, 5),
                    limit=limit,
                    unit="1",
                    source="efficiency is below 1; " + PRACTICE,
                    action=action,
                    where=_where(s),
                )
            elif peak < 0.1:
                yield Finding(
                    rule="plausible-efficiency",
                    severity="warning",
                    subject=f"curve:{s.curve.id}",
                    message=f"{said} and no more: its scale may be a fraction read as per cent. {action}",
                    measured=round(peak, 5),
                    limit=0.1,
                    unit="1",
                    source=PRACTICE,
                    action=action,
                    where=_where(s),
                )


def negative(context: Context) -> Iterator[Finding]:
    """plausible-negative: power, efficiency, head or NPSHr clearly below zero."""
    for s in (s for quantity in sorted({s.curve.quantity for s in context.series}) for s in context.of(quantity)):
        low = int(np.argmin(s.value))
        v, u = float(s.value[low]), float(s.u[low])
        scale = float(np.abs(s.value).max())
        if v >= -max(3 * u, 0.005 * scale):
            continue
        action = "Look at the marks of its axis and at the end of the line."
        yield Finding(
            rule="plausible-negative",
            severity="error",
            subject=f"curve:{s.curve.id}",
            message=f"{sentence(name_of(s.curve))} is below zero at {number(float(s.flow[low]))} m³/h. {action}",
            measured=round(v, 6),
            limit=0.0,
            unit={"head": "m", "power": "kW", "efficiency": "1"}.get(s.curve.quantity, ""),
            source=PRACTICE,
            action=action,
            where=_where(s),
        )


def npshr(context: Context) -> Iterator[Finding]:
    """plausible-npshr: NPSH required ends lower than it begins."""
    for s in context.of("npshr"):
        third = max(1, len(s.flow) // 3)
        fall = float(s.value[:third].mean() - s.value[-third:].mean())
        scale = float(np.abs(s.value).max())
        u = float(np.median(s.u))
        if fall > max(context.limits["npshr_fall_pct"] / 100 * scale, 2 * u):
            action = "Look whether this is NPSH required, and not NPSH available or suction lift."
            yield Finding(
                rule="plausible-npshr",
                severity="warning",
                subject=f"curve:{s.curve.id}",
                message=f"{sentence(name_of(s.curve))} falls by {number(fall, 2)} ± {number(u, 1)} m {flows(s.lo, s.hi)}. "
                f"NPSH required rises with flow. {action}",
                measured=round(-fall, 5),
                limit=0.0,
                unit="m",
                source=PRACTICE,
                action=action,
                where=_where(s),
            )


def power_still_rising(context: Context) -> Iterator[Finding]:
    """plausible-power-still-rising: power has not peaked where the largest wheel's line ends, so its largest value is not known."""
    power = context.of("power") + context.of("input_power")
    for s in power[:1]:
        tenth = s.hi - 0.1 * (s.hi - s.lo)
        end, before = float(s.value[-1]), float(s.at(np.array([tenth]))[0])
        if end <= 0 or (end - before) / end <= context.limits["power_rise_pct"] / 100:
            continue
        action = "Do not choose the motor from this curve without a stated run-out flow."
        yield Finding(
            rule="plausible-power-still-rising",
            severity="note",
            subject=f"curve:{s.curve.id}",
            message=f"Power still rises where the line ends, at {number(end)} ± {number(float(s.u[-1]), 1)} kW and "
            f"{number(s.hi)} m³/h. {action}",
            measured=round((end - before) / end, 5),
            limit=context.limits["power_rise_pct"] / 100,
            unit="1",
            source=PRACTICE,
            action=action,
            where=_where(s),
        )
