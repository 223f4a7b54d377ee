"""Power balance: traced power against rho g Q H over traced efficiency, in absolute power."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from .. import units
from ..laws.affinity import SPEED, carry_quantity
from ..laws.power import closure
from ..records import Finding, FloatArray
from .context import Context, Series
from .words import flows, listed, number, panel_of, printed_mm, unit_word

SOURCE = "P = rho g Q H / eta"


@dataclass(frozen=True, slots=True, eq=False)
class Balance:
    """Balance of one diameter: ratio of traced to computed power, its doubt, and the flow it is quoted at [m3/h].

    ``uneven`` is the spread of the ratio over the range, 10th to 90th percentile over the median; ``flows`` [n] and ``ratios`` [n] are
    the whole of it.
    """

    head: Series
    power: Series
    efficiency: Series
    ratio: float
    doubt: float
    flow_m3h: float
    uneven: float
    flows: FloatArray
    ratios: FloatArray


def balances(context: Context) -> list[Balance]:
    """One balance for each diameter and speed that has head, power and efficiency."""
    out = []
    for p in context.of("power"):
        h = _partner(context, "head", p)
        e = _partner(context, "efficiency", p)
        if h is None or e is None:
            continue
        b = _balance(context, h, p, e)
        if b is not None:
            out.append(b)
    return out


def _partner(context: Context, quantity: str, to: Series) -> Series | None:
    """The curve of the same casting and diameter; one for all diameters only where no other exists."""
    same = [s for s in context.of(quantity) if s.curve.group == to.curve.group and s.diameter_mm == to.diameter_mm]
    if not same:
        return None
    return min(same, key=lambda s: abs((s.speed_rpm or 0) - (to.speed_rpm or 0)))


def _at_speed(s: Series, speed_rpm: float | None, q: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Value and uncertainty at flows q after carrying to ``speed_rpm``."""
    r = speed_rpm / s.speed_rpm if speed_rpm and s.speed_rpm else 1.0
    flow, value = carry_quantity(s.curve.quantity, s.flow, s.value, r, SPEED)
    _, u = carry_quantity(s.curve.quantity, s.flow, s.u, r, SPEED)
    return np.interp(q, flow, value), np.interp(q, flow, u)


def _balance(context: Context, h: Series, p: Series, e: Series) -> Balance | None:
    def faster(s: Series) -> float:
        return p.speed_rpm / s.speed_rpm if p.speed_rpm and s.speed_rpm else 1.0

    best = float(e.flow[np.argmax(e.value)]) * faster(e)
    lo = max(p.lo, h.lo * faster(h), e.lo * faster(e), context.limits["energy_low_share"] * best)
    hi = min(p.hi, h.hi * faster(h), e.hi * faster(e), context.limits["energy_high_share"] * best)
    if not hi > lo > 0:
        return None
    q = np.linspace(lo, hi, 41)
    head, uh = _at_speed(h, p.speed_rpm, q)
    power, up = _at_speed(p, p.speed_rpm, q)
    eff, ue = _at_speed(e, p.speed_rpm, q)
    ok = (head > 0) & (power > 0) & (eff > 0)
    if ok.sum() < 10:
        return None
    r = closure(q[ok], head[ok], power[ok], eff[ok], density_kgm3=context.density_kgm3)
    u = np.sqrt((uh[ok] / head[ok]) ** 2 + (up[ok] / power[ok]) ** 2 + (ue[ok] / eff[ok]) ** 2)
    ratio = float(np.median(r))
    even = float((np.percentile(r, 90) - np.percentile(r, 10)) / ratio)
    # quoted where the ratio is the median one, as near to best efficiency as such a flow lies
    typical = np.abs(r / ratio - 1) <= max(0.005, float(np.min(np.abs(r / ratio - 1))))
    at = float(q[ok][typical][np.argmin(np.abs(q[ok][typical] - best))])
    return Balance(h, p, e, ratio, float(np.median(u)), at, even, q[ok], r)


def explanations(context: Context, ratio: float, tolerance: float, head: Series, power: Series, efficiency: Series) -> list[str]:
    """Half sentences that name a unit, or the stage count, with which the balance would close."""
    out: list[tuple[float, str]] = []

    def offer(quantity: str, unit: str, power_of: int, axis: str) -> None:
        table = units.QUANTITIES[quantity]
        if unit not in table:
            return
        for other, size in table.items():
            if other == unit:
                continue
            miss = abs(np.log(ratio * (size / table[unit]) ** power_of))
            if miss < tolerance:
                out.append((float(miss), f"the {axis} axis in {unit_word(other)}"))

    offer("power", power.curve.printed_y_unit, 1, "power")
    offer("efficiency", efficiency.curve.printed_y_unit, 1, "efficiency")
    offer("head", head.curve.printed_y_unit, -1, "head")
    flow_units = {head.curve.printed_x_unit, power.curve.printed_x_unit, efficiency.curve.printed_x_unit}
    if len(flow_units) == 1:
        offer("flow", flow_units.pop(), -1, "flow")
    if context.stages > 1 and abs(np.log(ratio / context.stages)) < tolerance:
        out.append((0.0, f"head printed per stage ({context.stages} stages)"))
    if context.stages > 1 and abs(np.log(ratio * context.stages)) < tolerance:
        out.append((0.0, "power printed per stage"))
    # among units of one axis only the nearest is named: metric and imperial horsepower differ by 1.4 %
    nearest: dict[str, tuple[float, str]] = {}
    for miss, text in sorted(out):
        nearest.setdefault(text.split(" in ")[0], (miss, text))
    return [text for _, text in sorted(nearest.values())][:3]


def _drawn_at(ratio: float) -> float | None:
    """The round factor, 2 or more, at which one line may be drawn on another's scale; None where the ratio is near none."""
    size = max(ratio, 1 / ratio)
    near = [k for k in (2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0, 20.0, 25.0, 50.0, 100.0) if abs(size / k - 1) < 0.03]
    return near[0] if near else None


def balance(context: Context) -> Iterator[Finding]:
    """energy-balance: traced power, head and efficiency of one diameter do not agree."""
    limits = context.limits
    for b in balances(context):
        off = abs(np.log(b.ratio))
        warn = max(np.log1p(limits["energy_warning_pct"] / 100), 2 * b.doubt)
        fail = max(np.log1p(limits["energy_error_pct"] / 100), 3 * b.doubt)
        if off <= warn:
            yield from _stretch(b, float(fail))
            continue
        at = f"at {number(b.flow_m3h)} m³/h"
        computed = "more" if b.ratio > 1 else "less"
        pct = abs(b.ratio - 1) * 100
        if b.ratio > 2:
            size = f"power is {number(b.ratio)} times what head and efficiency give"
        elif b.ratio < 0.5:
            size = f"power is 1/{number(1 / b.ratio)} of what head and efficiency give"
        else:
            size = f"power is {number(pct, 2)} % {computed} than head and efficiency give"
        names = explanations(context, b.ratio, np.log1p(limits["energy_agree_pct"] / 100), b.head, b.power, b.efficiency)
        if names:
            cure = f"They would agree with {listed(names, 'or')}. "
            action = "Look at the paper, then say which unit it is."
        elif (times := _drawn_at(b.ratio)) is not None:
            drawn = f"{number(times)} times" if b.ratio > 1 else f"1/{number(times)} of"
            cure = f"They would agree if the power or the efficiency line were drawn at {drawn} its value. "
            action = "Look for a factor printed at the axis or on the line, and give the line its factor."
        elif 0.8 <= 1 / b.ratio <= 0.95 and b.uneven < 0.05:
            cure = "The ratio is nearly even, as where motor input power is filed as shaft power. "
            action = "Look whether the power axis is shaft power or motor input, and at the marks of all three axes."
        else:
            cure = ""
            action = "Look at the marks of the power, head and efficiency axes and at the lines traced."
        of = f" of Ø {printed_mm(b.power.diameter_mm)}" if b.power.diameter_mm else ""
        curves = [b.power.curve, b.head.curve, b.efficiency.curve]
        yield Finding(
            rule="energy-balance",
            severity="error" if off > fail else "warning",
            subject=f"curve:{b.power.curve.id}",
            message=f"Power, head and efficiency{of} do not agree: {at} {size}, with {number(b.doubt * 100, 2)} % of doubt. {cure}{action}",
            measured=round(b.ratio, 5),
            limit=round(float(np.exp(fail if off > fail else warn)), 5),
            unit="1",
            source=SOURCE,
            action=action,
            where={"panel": panel_of(curves), "curves": [c.id for c in curves]},
        )


def _stretch(b: Balance, limit: float) -> Iterator[Finding]:
    """A part of the range, a fifth of it or more, where the balance is off although the middle agrees."""
    miss = np.log(b.ratios)
    worst = int(np.argmax(np.abs(miss)))
    over = (np.abs(miss) > limit) & (np.sign(miss) == np.sign(miss[worst]))
    if over.mean() < 0.2:
        return
    pct = abs(float(np.expm1(miss[worst]))) * 100
    more = "more" if miss[worst] > 0 else "less"
    of = f" of Ø {printed_mm(b.power.diameter_mm)}" if b.power.diameter_mm else ""
    curves = [b.power.curve, b.head.curve, b.efficiency.curve]
    action = "Look along the three lines there: one trace may have taken another line."
    yield Finding(
        rule="energy-balance",
        severity="warning",
        subject=f"curve:{b.power.curve.id}",
        message=f"Power, head and efficiency{of} do not agree {flows(float(b.flows[over].min()), float(b.flows[over].max()))}: "
        f"power is up to {number(pct, 2)} % {more} than head and efficiency give, with {number(b.doubt * 100, 2)} % of doubt. {action}",
        measured=round(float(b.ratios[worst]), 5),
        limit=round(float(np.exp(limit)), 5),
        unit="1",
        source=SOURCE,
        action=action,
        where={"panel": panel_of(curves), "curves": [c.id for c in curves]},
    )
