"""Where a pump and a system meet: all intersections within what was traced, each with what is known there."""

import math
from collections import namedtuple
from collections.abc import Callable
from typing import Any

from ..errors import CurvebankError, LawError, OutsideDomain
from .quantity import number

Duty = namedtuple("Duty", "flow_m3h head_m efficiency power_kw npshr_m stable cautions")
"""One duty point. What is not known is None; ``stable``: the system rises faster than the pump there (None where no system is meant)."""

GRID = 256
TOUCH = 1e-10
"""Relative height at which the two curves count as touching."""


def bisect(f: Callable[[float], float], a: float, b: float) -> float:
    """The root of a continuous function between two points where it differs in sign, to the last bits.

    Regula falsi in its Illinois form (the end that stays has its value halved), with a plain halving every third step so that it
    never stalls.
    """
    fa, fb = f(a), f(b)
    if fa == 0.0 or fb == 0.0:
        return a if fa == 0.0 else b
    last = math.inf
    for k in range(300):
        m = 0.5 * (a + b) if k % 3 == 2 else (a * fb - b * fa) / (fb - fa)
        if not min(a, b) < m < max(a, b):
            m = 0.5 * (a + b)
        if abs(m - last) <= 2 * math.ulp(m) or not min(a, b) < m < max(a, b):
            return m
        fm, last = f(m), m
        if fm == 0.0:
            return m
        if (fm > 0) == (fb > 0):
            b, fb, fa = m, fm, fa / 2
        else:
            a, fa, b, fb = b, fb, m, fm
    return 0.5 * (a + b)


def all_roots(f: Callable[[float], float], slope: Callable[[float], float], lo: float, hi: float, scale: float) -> list[float]:
    """Every root of a smooth function on [lo, hi]: split where the slope changes sign, then at most one root a piece.

    Two curves that only touch count once. ``scale`` is the size that makes a value small.
    """
    at = [lo + (hi - lo) * i / GRID for i in range(GRID + 1)]
    at[-1] = hi
    slopes = [slope(q) for q in at]
    turns = [bisect(slope, p, q) for p, q, s, t in zip(at, at[1:], slopes, slopes[1:], strict=False) if (s > 0) != (t > 0)]
    ends = [lo, *turns, hi]
    heights = [f(q) for q in ends]
    roots = []
    for i, (q, v) in enumerate(zip(ends, heights, strict=True)):
        if abs(v) <= TOUCH * scale:
            roots.append(q)
        elif i + 1 < len(ends) and v * heights[i + 1] < 0 and abs(heights[i + 1]) > TOUCH * scale:
            roots.append(bisect(f, q, ends[i + 1]))
    apart = 1e-9 * (hi - lo)
    return [q for i, q in enumerate(roots) if i == 0 or q - roots[i - 1] > apart]


def known(quantity: Any, flow: float, diameter_mm: float | None, speed_rpm: float | None, **more: Any) -> float | None:
    """A reading, or None where it is not known there."""
    try:
        value = quantity(flow, diameter_mm, speed_rpm, outside="nan", **more)
    except CurvebankError:
        return None
    return value if math.isfinite(value) else None


def duties(
    pump: Any,
    static_head_m: float,
    friction_m_per_m3h2: float,
    diameter_mm: float | None = None,
    speed_rpm: float | None = None,
    exponent: float = 2.0,
    density_kgm3: float | None = None,
) -> list[Duty]:
    """All intersections of the head curve with H = static + friction x Q^exponent, by flow.

    Parameters
    ----------
    static_head_m : float
        Static head of the system [m]; may be negative.
    friction_m_per_m3h2 : float
        Friction factor [m/(m3/h)^exponent], 0 or more.
    exponent : float
        2 for fully rough pipes, 1.852 for Hazen-Williams.

    Returns
    -------
    list of Duty
        At least one.

    Raises
    ------
    OutsideDomain
        No intersection within the traced range (code ``no-duty``).
    LawError
        A number that cannot be.
    """
    from .cautions import at_duty

    static, friction = number(static_head_m, "static_head_m"), number(friction_m_per_m3h2, "friction_m_per_m3h2")
    power = number(exponent, "exponent")
    if not (math.isfinite(static) and math.isfinite(friction) and friction >= 0):
        raise LawError(
            f"A system of {static_head_m} m static head and friction {friction_m_per_m3h2} is not possible: friction is 0 or more."
        )
    if not 0 < power <= 10:
        raise LawError(f"A friction exponent of {exponent} is not possible. Use 2, or 1.852 for Hazen-Williams.")
    reading = pump.head.plan(diameter_mm, speed_rpm)
    lo, hi = max(reading.lo, 0.0), reading.hi

    def gap(q: float) -> float:
        return reading.value(q) - static - friction * q**power

    def gap_slope(q: float) -> float:
        return reading.slope(q) - (friction * power * q ** (power - 1) if q > 0 or power >= 1 else 0.0)

    scale = max(abs(reading.value(lo)), abs(reading.value(hi)), abs(static), 1e-6)
    flows = all_roots(gap, gap_slope, lo, hi, scale)
    if not flows:
        raise OutsideDomain(_no_duty(gap, lo, hi), code="no-duty")
    out = []
    for q in flows:
        where = (q, diameter_mm, speed_rpm)
        more = {} if density_kgm3 is None else {"density_kgm3": density_kgm3}
        values = known(pump.efficiency, *where), known(pump.power, *where, **more), known(pump.npshr, *where)
        stable = gap_slope(q) < -1e-9 * scale / (hi - lo)
        cautions = at_duty(pump, q, diameter_mm, speed_rpm, stable=stable, crossings=len(flows), density_kgm3=density_kgm3)
        out.append(Duty(q, reading.value(q), *values, stable, cautions))
    return out


def _no_duty(gap: Callable[[float], float], lo: float, hi: float) -> str:
    first, last = gap(lo), gap(hi)
    if last > 0:
        return (
            f"The pump and the system do not meet within what was traced, {lo:.4g} to {hi:.4g} m³/h: at {hi:.4g} m³/h the pump still gives "
            f"{last:.3g} m more than the system needs. The duty lies beyond the curve; nothing is extrapolated."
        )
    below = f"at {lo:.4g} m³/h the pump is {-first:.3g} m short" if first < 0 else "the curves do not cross"
    return (
        f"The pump and the system do not meet within what was traced, {lo:.4g} to {hi:.4g} m³/h: {below}. "
        "Take a larger diameter, a higher speed, or less static head."
    )
