"""Read rules: a value at any flow, diameter and speed from the traced lines of one quantity. Cold path: math and struct alone.

Rule ``blend-1``, between the traced diameters D1 < D < D2, with w = (D - D1)/(D2 - D1) and ri = D/Di:

    v(Q) = (1 - w) r1^b V1(Q / r1^a) + w r2^b V2(Q / r2^a)

with a, b = 1, 2 for head; 1, 3 for power; 1, 0 for efficiency; 0, 0 for NPSHr. The domain is where both carried domains overlap,
and a traced diameter returns its own line. The exponents are the simple trim law (common practice; published exponents spread around it).

Speed, from the nearest printed speed n0 with r = n/n0: Q ~ r, H ~ r^2, P ~ r^3, efficiency unchanged (White, Fluid Mechanics, ch. 11, from
memory); NPSHr ~ r^2 speeding up and r^1.3 slowing down, the higher end of the range 1.3 to 2 (ISO 9906:2012 clause 6, from memory).

Rules are never edited, only added: a revision stores the name of its rule, so a pinned number never changes.
"""

import math
import struct

from ..errors import LawError, OutsideDomain

DEFAULT_RULE = "blend-1"
RULES = {
    "blend-1": {
        "head": (1.0, 2.0),
        "power": (1.0, 3.0),
        "efficiency": (1.0, 0.0),
        "npshr": (0.0, 0.0),
        "suction_lift": (0.0, 0.0),
        "input_power": (1.0, 3.0),
        "overall_efficiency": (1.0, 0.0),
    }
}
"""Rule -> quantity -> (a, b): flow and value exponents of the diameter ratio."""

SPEED = {"head": 2.0, "power": 3.0, "efficiency": 0.0}
"""Quantity -> value exponent of the speed ratio; the flow exponent is 1. NPSHr has two, below."""
NPSHR_FASTER, NPSHR_SLOWER = 2.0, 1.3
SPEED_RANGE = (0.5, 1.2)
"""Speed ratios that ISO 9906:2012 allows between test and specified speed for flow, head and power (from memory)."""

BORROWED = ("efficiency", "power", "npshr")
EFFICIENCY_STEP = 0.2
"""Points of peak efficiency lost per per cent of trim where nothing is printed. Gülich: 0.15 to 0.25 for radial wheels (from memory)."""
POWER_EXPONENT_SPREAD = 0.7
"""Published trim exponents a + b of power reach from 3 to about 3.7: how far a borrowed power may be off."""
NPSHR_TRIM_SPREAD = 1.0
"""Relative change of NPSHr per relative trim that a borrowed value allows for (common practice, no source)."""
SPEED_SPREAD = 0.05
"""Extra relative doubt per unit of ln(speed ratio) beyond ``SPEED_RANGE`` (common practice, no source)."""

EDGE = 1e-9
"""Relative width of the domain by which a flow may miss its ends: rounding of carried ends, not extrapolation."""
EXTRAPOLATION_SHARE = 0.1
BLOCK = 16384


class Line:
    """One stored line: a polynomial in t = (flow - mid)/half over lo <= flow <= hi, at one diameter (or for all) and one speed."""

    __slots__ = ("_sums", "cov", "curve", "diameter_mm", "half", "hi", "lo", "mid", "scaled", "sigma", "speed_rpm")

    def __init__(self, curve, diameter_mm, speed_rpm, lo, hi, mid, half, scaled, sigma=0.0, cov=None):
        self.curve, self.diameter_mm, self.speed_rpm = curve, diameter_mm, speed_rpm
        self.lo, self.hi, self.mid, self.half = lo, hi, mid, half
        self.scaled, self.sigma, self.cov = tuple(scaled), sigma, cov
        self._sums = None

    def uncertainty(self, flow_m3h):
        """Standard uncertainty at a flow (float or array): sqrt(phi V phi'), JCGM 100 eq. 13; ``sigma`` where no covariance is stored."""
        if not self.cov:
            return self.sigma
        if self._sums is None:
            n = len(self.scaled)
            v = struct.unpack(f"<{n * n}d", self.cov)
            # phi V phi' is a polynomial in t: sum the covariance along its anti-diagonals once, highest power first
            self._sums = [math.fsum(v[i * n + m - i] for i in range(max(0, m - n + 1), min(n, m + 1))) for m in range(2 * n - 2, -1, -1)]
        t = (flow_m3h - self.mid) / self.half
        total = 0.0
        for s in self._sums:
            total = total * t + s
        if isinstance(total, float):
            return math.sqrt(max(total, 0.0))
        import numpy as np

        return np.sqrt(np.maximum(total, 0.0))


class Plan:
    """How one quantity is read at one diameter and speed: ``value(flow)`` within ``lo`` to ``hi``.

    ``terms`` are (weight, flow factor, line): v(Q) = sum of weight x V(Q x factor). ``notes`` are cautions that belong to the reading.
    """

    __slots__ = ("_doubt", "_slope", "hi", "lo", "notes", "rule", "terms", "value")

    def __init__(self, terms, lo, hi, rule, *, notes=()):
        self.terms, self.lo, self.hi, self.rule, self.notes = terms, lo, hi, rule, notes
        self._doubt = self._slope = None
        self.value = _evaluator(terms)

    @property
    def curves(self):
        """The ids of the lines behind the value."""
        return tuple(line.curve for _, _, line in self.terms)

    def holds(self, flow_m3h):
        """True where the flow lies in the domain, but for rounding."""
        edge = EDGE * (self.hi - self.lo)
        return (self.lo - edge <= flow_m3h) & (flow_m3h <= self.hi + edge)

    def slope(self, flow_m3h):
        """dv/dQ at a flow."""
        if self._slope is None:
            self._slope = _evaluator([(w * s / li.half, s, _Derived(li)) for w, s, li in self.terms])
        return self._slope(flow_m3h)

    def bend(self, flow_m3h):
        """d2v/dQ2 at a flow."""
        twice = [(w * (s / li.half) ** 2, s, _Derived(_Derived(li))) for w, s, li in self.terms]
        return _evaluator(twice)(flow_m3h)

    def values(self, flow_m3h, *, guarded=False):
        """The value over a float64 array, by Horner in place and in blocks that stay in cache.

        With ``guarded`` the answer is None where any flow lies outside the domain (the check shares the cache with the sum).
        """
        import numpy as np

        flow = np.asarray(flow_m3h, dtype=np.float64, order="C")
        out = np.empty(flow.shape)
        q, v = flow.reshape(-1), out.reshape(-1)
        t = np.empty(min(BLOCK, q.size))
        part = np.empty(min(BLOCK, q.size))
        for start in range(0, q.size, BLOCK):
            block, target = q[start : start + BLOCK], v[start : start + BLOCK]
            n = block.size
            if guarded and not (self.holds(block.min()) and self.holds(block.max())):
                return None
            for i, (weight, factor, line) in enumerate(self.terms):
                x = t[:n]
                np.multiply(block, factor / line.half, out=x)
                x -= line.mid / line.half
                y = part[:n] if i else target
                y[...] = line.scaled[-1]
                for c in line.scaled[-2::-1]:
                    y *= x
                    y += c
                if weight != 1.0:
                    y *= weight
                if i:
                    target += y
        return out

    def uncertainty(self, flow_m3h):
        """Standard uncertainty of the reading: the lines' own, fully correlated (they share axes), and the rule's in quadrature."""
        print_u = 0.0
        for weight, factor, line in self.terms:
            print_u = print_u + abs(weight) * line.uncertainty(flow_m3h * factor)
        if self._doubt is None:
            return print_u
        rule_u = self._doubt(flow_m3h)
        if isinstance(print_u, float) and isinstance(rule_u, float):
            return math.hypot(print_u, rule_u)
        import numpy as np

        return np.hypot(print_u, rule_u)

    def beyond(self, flow_m3h):
        """Value and uncertainty outside the domain: the end's tangent, at most 10 % of the domain away.

        Raises
        ------
        OutsideDomain
            Further away than that.
        """
        end = self.lo if flow_m3h < self.lo else self.hi
        reach = EXTRAPOLATION_SHARE * (self.hi - self.lo)
        step = flow_m3h - end
        if not abs(step) <= reach * (1 + EDGE):
            raise OutsideDomain(
                f"{flow_m3h:g} m³/h lies more than 10 % of the domain beyond what was traced, {self.lo:g} to {self.hi:g} m³/h. "
                "Nothing is continued that far."
            )
        slope = self.slope(end)
        # the continuation may be wrong by its own rise (rectangular) and by the curvature that the tangent leaves out
        grown = math.hypot(abs(slope * step) / math.sqrt(3), 0.5 * self.bend(end) * step * step)
        return self.value(end) + slope * step, math.hypot(self.uncertainty(end), grown)


class _Derived:
    """The derivative of a line with respect to t, as a line."""

    __slots__ = ("half", "mid", "scaled")

    def __init__(self, line):
        self.mid, self.half = line.mid, line.half
        self.scaled = tuple(k * c for k, c in enumerate(line.scaled))[1:] or (0.0,)


def _evaluator(terms):
    """A function of flow for plain floats: one closure per reading, so that a call costs well under a microsecond per coefficient."""
    parts = []
    for weight, factor, line in terms:
        tail = tuple(weight * c for c in reversed(line.scaled))
        parts.append((factor / line.half, line.mid / line.half, tail[0], tail[1:]))
    if len(parts) == 1:
        k, m, first, rest = parts[0]

        def one(q):
            t = q * k - m
            v = first
            for c in rest:
                v = v * t + c
            return v

        return one

    def several(q):
        total = 0.0
        for k, m, first, rest in parts:
            t = q * k - m
            v = first
            for c in rest:
                v = v * t + c
            total += v
        return total

    return several


def speed_exponent(quantity, ratio):
    """Value exponent of the speed ratio.

    Raises
    ------
    LawError
        Electrical input and permissible suction lift follow no law of speed.
    """
    if quantity == "npshr":
        return NPSHR_FASTER if ratio >= 1.0 else NPSHR_SLOWER
    if quantity not in SPEED:
        raise LawError(f"No law carries {quantity} to another speed. Read it at the printed speed.")
    return SPEED[quantity]


def carried(line, quantity, diameter_mm, speed_rpm, rule=DEFAULT_RULE):
    """(weight, flow factor) that carry a line to a diameter and a speed; either may be None for "as printed".

    Examples
    --------
    >>> line = Line("H", 350.0, 1450.0, 0.0, 100.0, 50.0, 50.0, (50.0,))
    >>> weight, factor = carried(line, "head", 300.0, 1450.0)
    >>> round(weight, 6), round(1 / factor, 6)
    (0.734694, 0.857143)
    """
    a, b = RULES[rule][quantity]
    weight = factor = 1.0
    if diameter_mm is not None and line.diameter_mm is not None and diameter_mm != line.diameter_mm:
        r = diameter_mm / line.diameter_mm
        weight, factor = r**b, r**-a
    if speed_rpm is not None and line.speed_rpm is not None and speed_rpm != line.speed_rpm:
        r = speed_rpm / line.speed_rpm
        weight, factor = weight * r ** speed_exponent(quantity, r), factor / r
    return weight, factor


def _speed_notes(quantity, line, speed_rpm):
    """Cautions and relative doubt of a speed change."""
    if speed_rpm is None or line.speed_rpm is None or speed_rpm == line.speed_rpm:
        return (), 0.0, 0.0
    r = speed_rpm / line.speed_rpm
    low, high = SPEED_RANGE
    notes, relative = (), 0.0
    if not low <= r <= high:
        notes = (
            f"{speed_rpm:g} 1/min is {100 * r:.0f} % of the printed {line.speed_rpm:g} 1/min. "
            "The speed laws are taken as good from 50 to 120 %; beyond that the band is wider and efficiency is not constant.",
        )
        relative = SPEED_SPREAD * (math.log(low / r) if r < low else math.log(r / high))
    # NPSHr is given at the higher end of its range: the other end is as likely
    other = abs(r**NPSHR_FASTER - r**NPSHR_SLOWER) / (r ** speed_exponent("npshr", r)) if quantity == "npshr" else 0.0
    return notes, relative, other


def _doubt(value, parts, relative):
    """Rule doubt as a function of flow: ``parts`` is None or w and the two carried lines of a blend."""
    if parts is None and not relative:
        return None

    def doubt(flow):
        total = (relative * value(flow)) ** 2 if relative else 0.0
        if parts is not None:
            w, one, two = parts
            first, second = _evaluator([one]), _evaluator([two])
            # between two traced diameters the answer lies between the carried neighbours: rectangular, none at the ends (JCGM 100, 4.3.7)
            total = total + (2 * w * (1 - w) * (first(flow) - second(flow))) ** 2 / 3
        return total**0.5

    return doubt


def plan(quantity, lines, diameter_mm, speed_rpm, *, rule=DEFAULT_RULE, span=None):
    """Decide how a quantity is read.

    Parameters
    ----------
    quantity : str
    lines : sequence of Line
        All readable lines of the quantity, of one casting and one basis.
    diameter_mm, speed_rpm : float or None
        What is asked; None only where that names one line (`pick_diameter`, `pick_speed`).
    rule : str
        Name of a rule in ``RULES``.
    span : (float, float), optional
        Smallest and largest traced diameter of the pump, for lines that hold for all diameters and for what is borrowed.

    Returns
    -------
    Plan

    Raises
    ------
    OutsideDomain
        The diameter lies outside what was traced, or two neighbours share no flow.
    """
    if rule not in RULES:
        raise LawError(f"The read rule {rule} is not known to this curvebank. Update curvebank.")
    for what, number, unit in (("diameter", diameter_mm, "mm"), ("speed", speed_rpm, "1/min")):
        if number is not None and not (math.isfinite(number) and number > 0):
            raise LawError(f"A {what} of {number:g} {unit} is not possible. Give a number above 0.")
    group = at_speed(lines, diameter_mm, speed_rpm)
    own = sorted((li for li in group if li.diameter_mm is not None), key=lambda li: (li.diameter_mm, li.sigma, li.curve))
    sized = {}
    for line in own:
        sized.setdefault(line.diameter_mm, line)  # of two lines at one diameter the one with the smaller doubt
    for_all = sorted((li for li in group if li.diameter_mm is None), key=lambda li: (li.sigma, li.curve))
    if diameter_mm is None:
        line = next(iter(sized.values())) if sized else for_all[0]
        return _single(quantity, line, None, speed_rpm, rule, ())
    if diameter_mm in sized:
        return _single(quantity, sized[diameter_mm], diameter_mm, speed_rpm, rule, ())
    below = max((d for d in sized if d < diameter_mm), default=None)
    above = min((d for d in sized if d > diameter_mm), default=None)
    if below is not None and above is not None:
        return _blend(quantity, sized[below], sized[above], diameter_mm, speed_rpm, rule)
    in_span = span is None or span[0] <= diameter_mm <= span[1]
    if for_all and in_span:
        return _single(quantity, for_all[0], None, speed_rpm, rule, ())
    if len(sized) == 1 and quantity in BORROWED and span is not None and in_span:
        return _borrow(quantity, next(iter(sized.values())), diameter_mm, speed_rpm, rule)
    reach = (min(sized), max(sized)) if sized else span
    told = f"{reach[0]:g} mm" if reach[0] == reach[1] else f"{reach[0]:g} to {reach[1]:g} mm"
    raise OutsideDomain(
        f"Ø {diameter_mm:g} mm lies outside the diameters traced for {quantity}, {told}. Ask within them, or trace that diameter."
    )


def at_speed(lines, diameter_mm, speed_rpm):
    """The lines printed at the speed nearest (by ratio) to the one asked, among the speeds whose diameters reach the one asked."""
    if speed_rpm is None:
        return list(lines)
    able = able_speeds(lines, diameter_mm)
    if not able:
        return list(lines)
    nearest = min(able, key=lambda n: (abs(math.log(speed_rpm / n)), -n))
    return [li for li in lines if li.speed_rpm == nearest or li.speed_rpm is None]


def able_speeds(lines, diameter_mm):
    """Printed speeds whose diameters reach the one asked, ascending; all printed speeds where none does."""
    speeds = sorted({li.speed_rpm for li in lines if li.speed_rpm is not None})
    if len(speeds) <= 1:
        return speeds
    groups = {n: [li for li in lines if li.speed_rpm == n or li.speed_rpm is None] for n in speeds}

    def reaches(group):
        known = [li.diameter_mm for li in group if li.diameter_mm is not None]
        return diameter_mm is None or len(known) < len(group) or min(known) <= diameter_mm <= max(known)

    return [n for n in speeds if reaches(groups[n])] or speeds


def _single(quantity, line, diameter_mm, speed_rpm, rule, notes):
    weight, factor = carried(line, quantity, diameter_mm, speed_rpm, rule)
    more, relative, other = _speed_notes(quantity, line, speed_rpm)
    out = Plan([(weight, factor, line)], line.lo / factor, line.hi / factor, rule, notes=notes + more)
    out._doubt = _doubt(out.value, None, math.hypot(relative, other / math.sqrt(3)))
    return out


def _blend(quantity, small, large, diameter_mm, speed_rpm, rule):
    w = (diameter_mm - small.diameter_mm) / (large.diameter_mm - small.diameter_mm)
    w1, f1 = carried(small, quantity, diameter_mm, speed_rpm, rule)
    w2, f2 = carried(large, quantity, diameter_mm, speed_rpm, rule)
    lo, hi = max(small.lo / f1, large.lo / f2), min(small.hi / f1, large.hi / f2)
    if not lo < hi:
        raise OutsideDomain(
            f"At Ø {diameter_mm:g} mm the lines of its neighbours, {small.diameter_mm:g} and {large.diameter_mm:g} mm, "
            f"share no flow for {quantity}. Ask at a traced diameter."
        )
    notes, relative, other = _speed_notes(quantity, large, speed_rpm)
    out = Plan([((1 - w) * w1, f1, small), (w * w2, f2, large)], lo, hi, rule, notes=notes)
    parts = (w, (w1, f1, small), (w2, f2, large))
    out._doubt = _doubt(out.value, parts, math.hypot(relative, other / math.sqrt(3)))
    return out


def _borrow(quantity, line, diameter_mm, speed_rpm, rule):
    """A quantity printed at one diameter only, read at another: by the rule's exponents, with a caution and a wider band."""
    weight, factor = carried(line, quantity, diameter_mm, speed_rpm, rule)
    notes, relative, other = _speed_notes(quantity, line, speed_rpm)
    trim = 1.0 - diameter_mm / line.diameter_mm
    named = {"efficiency": "Efficiency", "power": "Power", "npshr": "NPSH required"}[quantity]
    how = {
        "efficiency": f"carried to equal relative flow, its peak lowered by {EFFICIENCY_STEP:g} points per % of trim",
        "power": "carried by the trim law with exponents 1 and 3",
        "npshr": "taken at equal flow",
    }[quantity]
    note = f"{named} is printed for Ø {line.diameter_mm:g} alone. For Ø {diameter_mm:.4g} it is borrowed ({how}), with a wider band."
    note += " Confirm with the maker."
    if quantity == "efficiency":
        step = EFFICIENCY_STEP * abs(trim) / _peak(line)  # 0.2 points (0.002) per per cent: 0.2 x trim, as a share of the peak
        weight *= max(1.0 - step, 0.0) if trim > 0 else 1.0
        relative = math.hypot(relative, step / math.sqrt(3))
    elif quantity == "power":
        relative = math.hypot(relative, abs(1 - (1 - trim) ** POWER_EXPONENT_SPREAD) / math.sqrt(3))
    else:
        relative = math.hypot(relative, NPSHR_TRIM_SPREAD * abs(trim) / math.sqrt(3))
    out = Plan([(weight, factor, line)], line.lo / factor, line.hi / factor, rule, notes=(note, *notes))
    out._doubt = _doubt(out.value, None, math.hypot(relative, other / math.sqrt(3)))
    return out


def _peak(line, samples=64):
    """The largest value of a line over its domain, by the parabola through the largest sample and its neighbours."""
    value = _evaluator([(1.0, 1.0, line)])
    v = [value(line.lo + (line.hi - line.lo) * i / samples) for i in range(samples + 1)]
    i = max(range(samples + 1), key=v.__getitem__)
    if not 0 < i < samples:
        return v[i]
    bend = v[i - 1] - 2 * v[i] + v[i + 1]
    return v[i] - (v[i + 1] - v[i - 1]) ** 2 / (8 * bend) if bend < 0 else v[i]
