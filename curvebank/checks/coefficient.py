"""Head coefficient at shut-off: sees a wrong head unit, speed or stage count, which no family check can."""

from collections.abc import Iterator

import numpy as np

from .. import units
from ..laws.specific import head_coefficient
from ..records import Finding
from .context import Context, Series
from .words import listed, number, panel_of, printed_mm, unit_word

SPEEDS = (2900.0, 1450.0, 960.0, 725.0, 3500.0, 1750.0, 1160.0)
"""Usual speeds of two- to eight-pole motors at 50 and 60 Hz under load [1/min] (synchronous speed less a usual slip, common practice)."""
OTHER_WHEELS = ("side channel", "side-channel", "regenerative", "peripheral", "axial", "propeller", "mixed flow", "positive displacement")


def shut_off_head(s: Series, reach: float) -> tuple[float, float] | None:
    """Head at zero flow [m] and its standard uncertainty, carried back from the lowest traced flow.

    None where the line begins above ``reach`` of its largest flow. A straight line plus half its own bend through the lowest two
    fifths of the curve; the distance it was carried counts as doubt.
    """
    if s.lo > reach * s.hi:
        return None
    part = s.flow <= max(s.lo + 0.4 * (s.hi - s.lo), float(s.flow[min(3, len(s.flow) - 1)]))
    t = s.flow[part] / s.hi
    degree = 2 if part.sum() >= 8 else 1
    c = np.polynomial.polynomial.polyfit(t, s.value[part], degree)
    h0 = float(c[0])
    carried = abs(h0 - float(s.value[0]))
    return h0, float(np.hypot(s.u[0], 0.3 * carried))


def head_coefficient_at_shut_off(context: Context) -> Iterator[Finding]:
    """plausible-head-coefficient: g H0 / (pi D n / 60)^2 per stage outside what centrifugal wheels show."""
    limits = context.limits
    kind = (context.pump.type or "").lower() if context.pump else ""
    if any(word in kind for word in OTHER_WHEELS):
        return
    doubted = {
        f.members[a.curve].curve.id
        for f in context.families
        if f.verdict is not None
        for a in f.verdict.alternatives
        if a.kind == "diameter"
    }
    seen: list[tuple[Series, float, float]] = []
    for s in context.of("head"):
        by = (s.curve.label or {}).get("by")
        if s.diameter_mm is None or not s.speed_rpm or by in ("stages", "pumps_running") or s.curve.id in doubted:
            continue
        h0 = shut_off_head(s, limits["shut_off_reach"])
        if h0 is None or h0[0] <= 0:
            continue
        size = float(head_coefficient(1.0, s.diameter_mm, s.speed_rpm, stages=context.stages))
        seen.append((s, h0[0] * size, h0[1] * size))
    if not seen:
        return
    seen.sort(key=lambda one: -(one[0].diameter_mm or 0))
    s, psi, u = seen[0]  # the full wheel: trimming moves the coefficient by a few per cent only
    low, high = limits["psi_low"], limits["psi_high"]
    if low - 2 * u <= psi <= high + 2 * u:
        return
    error = psi + 2 * u < limits["psi_error_low"] or psi - 2 * u > limits["psi_error_high"]
    names = explanations(context, s, psi)
    cure = f"It would be usual with {listed(names, 'or')}. " if names else ""
    action = "Look at the head unit, the speed, the diameter and the stage count on the paper."
    yield Finding(
        rule="plausible-head-coefficient",
        severity="error" if error else "warning",
        subject="family:head",
        message=f"At zero flow the wheel Ø {printed_mm(s.diameter_mm or 0)} at {number(s.speed_rpm or 0, 4)} 1/min has a head "
        f"coefficient of {number(psi)} ± {number(u, 1)} a stage; "
        f"centrifugal wheels lie between {number(low)} and {number(high)}. {cure}{action}",
        measured=round(psi, 5),
        limit=low if psi < low else high,
        unit="1",
        source="psi = g H0 / (pi D n / 60)^2 a stage; band by common practice, no source",
        action=action,
        where={"panel": panel_of([s.curve]), "curves": [s.curve.id]},
    )


def explanations(context: Context, s: Series, psi: float) -> list[str]:
    """Head unit, speed or stage count that brings the coefficient into the usual middle."""
    lo, hi = context.limits["psi_core_low"], context.limits["psi_core_high"]
    out: list[str] = []
    unit = s.curve.printed_y_unit
    density = context.density_kgm3
    if unit in units.HEAD or unit in units.PRESSURE_PA:
        typed = units.factor("head", unit, density_kgm3=density)
        for other in ("m", "ft", "bar", "kPa", "psi", "kgf/cm2"):
            if other != unit and lo <= psi * units.factor("head", other, density_kgm3=density) / typed <= hi:
                out.append(f"head in {unit_word(other)}")
    if s.diameter_mm:
        for other_length, ratio in (("in", units.INCH_MM), ("cm", 10.0)):
            if lo <= psi / ratio**2 <= hi:
                out.append(f"the diameter in {other_length}")
    speed = s.speed_rpm or 0.0
    for n in SPEEDS:
        if abs(n / speed - 1) > 0.05 and lo <= psi * (speed / n) ** 2 <= hi:
            out.append(f"{number(n, 4)} 1/min")
    per_wheel = psi * context.stages
    for stages in range(1, 13):
        if stages != context.stages and lo <= per_wheel / stages <= hi:
            out.append(f"{stages} stages" if stages > 1 else "one stage")
            break
    return out[:4]
