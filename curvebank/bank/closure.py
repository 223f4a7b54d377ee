"""Power, head and efficiency tied together: P = rho g Q H / eta. Three traced curves never close exactly; how far they are off is said.

Traced power is what is read where it exists. Where only two of the three are traced, the third is computed from them, and says so.
"""

import math
from typing import Any

from ..errors import OutsideDomain
from ..units import GRAVITY_MS2
from .quantity import Power, Quantity

KW_PER = GRAVITY_MS2 / 3.6e6
"""rho [kg/m3] x Q [m3/h] x H [m] times this is the hydraulic power [kW]."""
LEAST_EFFICIENCY = 0.1
"""Below this a power computed from head and efficiency is mostly the error of the efficiency."""
SAMPLES = 200


class TiedPlan:
    """A reading computed from two others; the interface of `laws.family.Plan`."""

    def __init__(self, name: str, head: Any, other: Any, density_kgm3: float) -> None:
        self.name, self.head, self.other, self.k = name, head, other, KW_PER * density_kgm3
        self.rule = f"{head.rule}, {name} from head and {'efficiency' if name == 'power' else 'power'}"
        self.curves = head.curves + other.curves
        why = "Power is not on the paper" if name == "power" else "Efficiency is not on the paper"
        pair = "head and efficiency" if name == "power" else "head and power"
        self.notes = (f"{why}: it is computed from {pair} (P = ρ g Q H / η).", *head.notes, *other.notes)
        lo, hi = max(head.lo, other.lo, 0.0), min(head.hi, other.hi)
        if name == "power":
            lo, hi = self._where_efficient(lo, hi)
        if not lo < hi:
            raise OutsideDomain(f"{why}, and {pair} share no flow from which it could be computed.", code="no-curve")
        self.lo, self.hi = lo, hi

    def _where_efficient(self, lo: float, hi: float) -> tuple[float, float]:
        flows = [lo + (hi - lo) * i / SAMPLES for i in range(SAMPLES + 1)]
        good = [q for q in flows if self.other.value(q) >= LEAST_EFFICIENCY]
        return (good[0], good[-1]) if good else (hi, lo)

    def holds(self, flow: Any) -> Any:
        """True where the flow lies in the domain, but for rounding."""
        edge = 1e-9 * (self.hi - self.lo)
        return (self.lo - edge <= flow) & (flow <= self.hi + edge)

    def _tie(self, flow: Any, head: Any, other: Any) -> Any:
        return self.k * flow * head / other

    def value(self, flow: float) -> float:
        """The computed value at a flow."""
        return self._tie(flow, self.head.value(flow), self.other.value(flow))

    def values(self, flow: Any) -> Any:
        """The computed value over an array."""
        import numpy as np

        flows = np.asarray(flow, dtype=np.float64)
        return self._tie(flows, self.head.values(flows), self.other.values(flows))

    def slope(self, flow: Any) -> Any:
        """dv/dQ by the product rule."""
        h, o = self.head.value(flow), self.other.value(flow)
        rise = self.k * (h + flow * self.head.slope(flow)) / o
        return rise - self._tie(flow, h, o) * self.other.slope(flow) / o

    def uncertainty(self, flow: Any) -> Any:
        """Relative uncertainties of the two in quadrature (JCGM 100 eq. 12): they are read from different axes."""
        h, o = self.head.value(flow), self.other.value(flow)
        share = (self.head.uncertainty(flow) / h) ** 2 + (self.other.uncertainty(flow) / o) ** 2
        return abs(self._tie(flow, h, o)) * share**0.5

    def beyond(self, flow: float) -> tuple[float, float]:
        """A computed value is not continued beyond its domain.

        Raises
        ------
        OutsideDomain
            Always.
        """
        text = f"{flow:g} m³/h is outside {self.lo:.4g} to {self.hi:.4g} m³/h, and a computed {self.name} is not continued beyond that."
        raise OutsideDomain(text)


class TiedPower(Power):
    """Power computed from head and efficiency."""

    def _make(self, diameter_mm: float | None, speed_rpm: float | None) -> TiedPlan:
        return _tied(self, "power", "efficiency", diameter_mm, speed_rpm)


class TiedEfficiency(Quantity):
    """Efficiency computed from head and power."""

    def _make(self, diameter_mm: float | None, speed_rpm: float | None) -> TiedPlan:
        return _tied(self, "efficiency", "power", diameter_mm, speed_rpm)


def _tied(quantity: Any, name: str, other: str, diameter_mm: float | None, speed_rpm: float | None) -> TiedPlan:
    pump = quantity.pump
    return TiedPlan(name, pump.head.plan(diameter_mm, speed_rpm), getattr(pump, other).plan(diameter_mm, speed_rpm), pump.density_kgm3)


def derived(pump: Any, name: str) -> Quantity | None:
    """Power or efficiency computed from the other two, or None where they are not both traced."""
    other = {"power": "efficiency", "efficiency": "power"}[name]
    if "head" not in pump.quantities or other not in pump.quantities or not pump.head or not getattr(pump, other):
        return None
    made: Quantity = (TiedPower if name == "power" else TiedEfficiency)(pump, name, pump.head.lines, pump.head.basis)
    return made


def closure(pump: Any, flow_m3h: Any, diameter_mm: Any = None, speed_rpm: Any = None) -> Any:
    """Traced power over rho g Q H / efficiency, minus 1 (0 where the three agree). Plain in, float out; arrays in, array out.

    Raises
    ------
    OutsideDomain
        Not all three are traced, or the flow is outside one of them.
    """
    missing = [name for name in ("head", "efficiency", "power") if name not in pump.quantities]
    if missing:
        raise OutsideDomain(f"{pump.key} has no traced {' and no traced '.join(missing)}, so nothing can be compared.", code="no-curve")
    where = (flow_m3h, diameter_mm, speed_rpm)
    hydraulic = pump.head(*where) * flow_m3h * (KW_PER * pump.density_kgm3)
    return pump.power(*where) * pump.efficiency(*where) / hydraulic - 1.0


def computed_power(pump: Any, flow: float, diameter_mm: float | None, speed_rpm: float | None) -> float | None:
    """Power from head and efficiency [kW] beside a traced one, or None."""
    if "efficiency" not in pump.quantities or "head" not in pump.quantities:
        return None
    try:
        h, eta = (q(flow, diameter_mm, speed_rpm, outside="nan") for q in (pump.head, pump.efficiency))
    except OutsideDomain:
        return None
    value = KW_PER * pump.density_kgm3 * flow * h / eta if eta >= LEAST_EFFICIENCY else math.nan
    return value if math.isfinite(value) else None
