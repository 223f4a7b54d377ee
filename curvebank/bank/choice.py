"""Choosing: the best-efficiency point, the diameter for a duty, and the pumps of a bank that can do it."""

import math
from collections import namedtuple
from collections.abc import Callable
from typing import Any

from ..errors import CurvebankError, LawError, OutsideDomain
from . import cautions
from .duty import Duty, bisect, known
from .quantity import number

Trim = namedtuple("Trim", "diameter_mm methods cautions")
"""``diameter_mm`` meets the duty by the bank's own read rule; ``methods`` holds each method's answer [mm], for its spread."""
Hit = namedtuple("Hit", "key diameter_mm speed_rpm flow_m3h head_m efficiency cautions")
"""One pump that can do a duty. ``diameter_mm`` is None where the sheet names none."""

STEPS = 8
SAMPLES = 100
THROTTLE = 1.1
"""A pump with one line, or none with a diameter, may give up to this much more head than the duty needs."""


def best_efficiency(pump: Any, diameter_mm: float | None = None, speed_rpm: float | None = None) -> Duty | None:
    """Best-efficiency point within what was traced, or None where head or efficiency is not known."""
    if not pump.efficiency or not pump.head:
        return None
    if diameter_mm is None:
        diameter_mm = cautions.largest(pump)
    try:
        eta, head = pump.efficiency.plan(diameter_mm, speed_rpm), pump.head.plan(diameter_mm, speed_rpm)
    except CurvebankError:
        return None
    lo, hi = max(eta.lo, head.lo), min(eta.hi, head.hi)
    if not lo < hi:
        return None
    flow, at_end = _peak(eta.value, eta.slope, lo, hi)
    notes = ("Efficiency still rises where the line ends: the best point lies beyond the curve.",) if at_end else ()
    where = (flow, diameter_mm, speed_rpm)
    return Duty(flow, head.value(flow), eta.value(flow), known(pump.power, *where), known(pump.npshr, *where), None, notes)


def _peak(f: Callable[[float], float], slope: Callable[[float], float], lo: float, hi: float) -> tuple[float, bool]:
    flows = [lo + (hi - lo) * i / SAMPLES for i in range(SAMPLES + 1)]
    i = max(range(len(flows)), key=lambda k: f(flows[k]))
    a, b = flows[max(i - 1, 0)], flows[min(i + 1, SAMPLES)]
    if slope(a) > 0 > slope(b):
        return bisect(slope, a, b), False
    return flows[i], i == SAMPLES


def _reaching(head: Any, small: float, large: float, flow: float, speed: float | None) -> list[float]:
    """Diameters from just above ``small`` to just below ``large`` whose domain holds the flow: the two ends of that range, or nothing.

    Both ends of a carried domain grow with the diameter, so the range is one piece.
    """
    first, last = math.nextafter(small, large), math.nextafter(large, small)

    def plan(d: float) -> Any:
        try:
            return head.plan(d, speed)
        except OutsideDomain:
            return None

    at = [first + (last - first) * i / STEPS for i in range(STEPS + 1)]
    at[-1] = last
    good = [d for d in at if (reading := plan(d)) is not None and reading.holds(flow)]
    if not good:
        return []

    def edge(inner: float, outer: float) -> float:
        while True:
            m = 0.5 * (inner + outer)
            if m in (inner, outer):
                return inner
            reading = plan(m)
            inner, outer = (m, outer) if reading is not None and reading.holds(flow) else (inner, m)

    low = good[0] if good[0] == first else edge(good[0], at[at.index(good[0]) - 1])
    high = good[-1] if good[-1] == last else edge(good[-1], at[at.index(good[-1]) + 1])
    return [low + (high - low) * i / STEPS for i in range(STEPS)] + [high]


def _diameters(head: Any, flow: float, speed: float | None) -> list[list[tuple[float, float]]]:
    """Runs of (diameter, head at the flow), ascending, over which the head is continuous in the diameter."""
    traced = head.diameters()
    runs: list[list[tuple[float, float]]] = []
    for i, d in enumerate(traced):
        reading = head.plan(d, speed)
        own = [(d, reading.value(flow))] if reading.holds(flow) else []
        if own:
            runs.append(own)
        if i + 1 < len(traced):
            between = [(m, head.plan(m, speed).value(flow)) for m in _reaching(head, d, traced[i + 1], flow, speed)]
            if between:
                runs.append(between)
    return runs


def diameter_for(head: Any, flow: float, wanted: float, speed: float | None) -> float | None:
    """The largest diameter in the traced range whose head at a flow is the wanted one, by the read rule; None where there is none."""
    near = 1e-9 * max(abs(wanted), 1.0)
    runs = _diameters(head, flow, speed)
    for run in reversed(runs):  # a traced diameter that meets it is the answer, not its neighbour by one rounding
        if len(run) == 1 and abs(run[0][1] - wanted) <= near:
            return run[0][0]
    for run in reversed(runs):
        if abs(run[-1][1] - wanted) <= near:
            return run[-1][0]
        for (d1, h1), (d2, h2) in reversed(list(zip(run, run[1:], strict=False))):
            if (h1 - wanted) * (h2 - wanted) < 0:
                return bisect(lambda d: head.plan(d, speed).value(flow) - wanted, d1, d2)
            if abs(h1 - wanted) <= near:
                return d1
    return None


def _law_from(head: Any, diameter: float, flow: float, wanted: float, speed: float | None) -> float | None:
    """The simple trim law from one traced diameter: wanted = r^2 H(Q/r), solved for r <= 1."""
    reading = head.plan(diameter, speed)
    low = max(flow / reading.hi, 0.3) if flow > 0 else 0.3
    high = min(1.0, flow / reading.lo) if reading.lo > 0 else 1.0

    def gap(r: float) -> float:
        return r * r * reading.value(flow / r) - wanted

    if low > high or gap(high) < -1e-9 * abs(wanted):
        return None
    steps = [high - (high - low) * i / SAMPLES for i in range(SAMPLES + 1)]
    if abs(gap(high)) <= 1e-9 * abs(wanted):
        return high * diameter
    for r2, r1 in zip(steps, steps[1:], strict=False):
        if gap(r1) <= 0 <= gap(r2):
            return bisect(gap, r1, r2) * diameter
    return None


def trim_for(pump: Any, flow_m3h: float, head_m: float, speed_rpm: float | None = None) -> Trim:
    """The impeller diameter that meets a duty.

    Methods: the bank's read rule between traced diameters; ``simple law`` from the largest diameter; ``next larger``, the simple law from
    the next traced diameter above. Where a single diameter is traced, the simple law is all there is.

    Raises
    ------
    OutsideDomain
        The duty is not within the traced diameters and flows.
    LawError
        A flow or head that cannot be.
    """
    flow, wanted = number(flow_m3h, "flow_m3h"), number(head_m, "head_m")
    if not (math.isfinite(flow) and flow >= 0 and math.isfinite(wanted) and wanted > 0):
        raise LawError(f"A duty of {flow_m3h} m³/h at {head_m} m is not possible. Flow is 0 or more, head above 0.")
    head = pump.head
    traced = head.diameters()
    if not traced:
        raise OutsideDomain(f"No head line of {pump.key} has a diameter, so no trim can be named.", code="diameter")
    top = traced[-1]
    methods: dict[str, float] = {}
    by_rule = diameter_for(head, flow, wanted, speed_rpm) if len(traced) > 1 else None
    if by_rule is not None:
        methods[pump.read_rule] = by_rule
    simple = _law_from(head, top, flow, wanted, speed_rpm)
    if simple is not None:
        methods["simple law"] = simple
    if by_rule is not None and len(traced) > 1:
        above = min((d for d in traced if d >= by_rule * (1 - 1e-12)), default=top)
        if above != top:
            nearer = _law_from(head, above, flow, wanted, speed_rpm)
            if nearer is not None:
                methods["next larger"] = nearer
    answer = by_rule if len(traced) > 1 else simple
    if answer is None:
        raise OutsideDomain(_no_trim(pump, head, flow, wanted, speed_rpm), code="no-trim")
    return Trim(answer, methods, _trim_cautions(pump, flow, answer, methods, traced, speed_rpm))


def _no_trim(pump: Any, head: Any, flow: float, wanted: float, speed: float | None) -> str:
    points = [point for run in _diameters(head, flow, speed) for point in run]
    traced = head.diameters()
    reach = f"Ø {traced[0]:g} to {traced[-1]:g} mm" if len(traced) > 1 else f"Ø {traced[0]:g} mm"
    if not points:
        return f"No traced diameter of {pump.key} ({reach}) reaches {flow:g} m³/h within its curve."
    least, most = min(points, key=lambda p: p[1]), max(points, key=lambda p: p[1])
    if wanted > most[1]:
        return f"At {flow:g} m³/h the largest head of {pump.key} is {most[1]:.4g} m (Ø {most[0]:g} mm): {wanted:g} m is not reached."
    return (
        f"At {flow:g} m³/h the smallest traced diameter of {pump.key} that reaches it, Ø {least[0]:g} mm, still gives {least[1]:.4g} m: "
        f"{wanted:g} m would need a smaller wheel than was traced ({reach})."
    )


def _trim_cautions(
    pump: Any, flow: float, answer: float, methods: dict[str, float], traced: list[float], speed: float | None
) -> tuple[str, ...]:
    out = []
    low, high = min(methods.values()), max(methods.values())
    if high - low >= 0.05:
        out.append(
            f"The methods give Ø {low:.1f} to {high:.1f} mm. Start from the largest, rounded up to {math.ceil(high - 1e-6):g} mm; "
            "cut in steps and test between."
        )
    else:
        out.append(f"Start from {math.ceil(high - 1e-6):g} mm; cut in steps and test between.")
    if len(traced) == 1 and answer < traced[0]:
        out.append(f"Only Ø {traced[0]:g} mm is printed: the trim rests on the simple law alone.")
    if answer < cautions.TRIM_FLOOR * traced[-1]:
        out.append(f"Ø {answer:.0f} mm is below 75 % of the largest, {traced[-1]:g} mm: too much to cut.")
    in_family = traced[0] <= answer <= traced[-1]
    more = cautions.at_duty(pump, flow, answer, speed) if in_family else (cautions.DEFER,)
    return tuple(dict.fromkeys([*out, *more]))


def find(bank: Any, flow: float, wanted: float, npsha_m: float | None, limit: int) -> list[Hit]:
    """Released pumps that meet a duty at a printed speed within what was traced, by efficiency; those of unknown efficiency come last."""
    if not (math.isfinite(flow) and flow > 0 and math.isfinite(wanted) and wanted > 0):
        raise LawError(f"A duty of {flow} m³/h at {wanted} m is not possible. Both are above 0.")
    from .pump import Pump
    from .reader import PUMP_SQL

    rows = bank.query(
        PUMP_SQL + " JOIN release_span AS span ON span.revision_id = revision.id WHERE span.valid_to IS NULL"
        " AND (SELECT min(q_lo) <= ?1 * 1.000001 AND max(q_hi) >= ?1 * 0.999999 FROM curve"
        "   WHERE curve.revision_id = revision.id AND quantity = 'head') ORDER BY pump.key",
        (flow,),
    )
    able = []
    for row in rows:
        pump = Pump(bank, row)
        for speed in pump.head.speeds() or [None]:
            found = _able(pump, flow, wanted, speed, npsha_m)
            if found is not None:
                able.append((found, pump))
    able.sort(key=lambda pair: (pair[0].efficiency is None, -(pair[0].efficiency or 0.0), pair[0].key))
    return [hit._replace(cautions=_hit_cautions(hit, pump, wanted, npsha_m)) for hit, pump in able[:limit]]


def _able(pump: Any, flow: float, wanted: float, speed: float | None, npsha_m: float | None) -> Hit | None:
    """The hit, still without its cautions, or None."""
    head = pump.head
    at_this = [li for li in head.lines if li.speed_rpm == speed]
    if not at_this:
        return None
    diameter = None
    if any(li.diameter_mm is not None for li in at_this):
        diameter = head.diameters()[0] if len(head.diameters()) == 1 else diameter_for(head, flow, wanted, speed)
        if diameter is None:
            return None
    given = known(head, flow, diameter, speed)
    if given is None or not wanted * (1 - 1e-6) <= given <= wanted * THROTTLE:
        return None
    if npsha_m is not None:
        npshr = known(pump.npshr, flow, diameter, speed)
        if npshr is not None and npshr > npsha_m:
            return None
    return Hit(pump.key, diameter, speed, flow, given, known(pump.efficiency, flow, diameter, speed), ())


def _hit_cautions(hit: Hit, pump: Any, wanted: float, npsha_m: float | None) -> tuple[str, ...]:
    out = []
    if hit.head_m > wanted * (1 + 1e-6):
        out.append(
            f"No smaller diameter is traced. The pump gives {hit.head_m:.4g} m here; throttle, trim or slow it down for {wanted:g} m."
        )
    if npsha_m is not None and known(pump.npshr, hit.flow_m3h, hit.diameter_mm, hit.speed_rpm) is None:
        out.append(f"NPSH required is not known here: whether {npsha_m:g} m is enough is not known either.")
    return tuple(dict.fromkeys([*out, *cautions.at_duty(pump, hit.flow_m3h, hit.diameter_mm, hit.speed_rpm)]))
